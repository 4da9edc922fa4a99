"""A person's verdicts: read with messages that name line and field, applied upwards and downwards, recorded."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.casts import Cast, apply_verdicts, check_cast, read_verdicts
from ocean_sound.errors import InputError
from ocean_sound.profile import Profile

HEAD = "level,variable,flag,reason,who\n"


@pytest.fixture
def written(tmp_path):
    def write(text, encoding="utf-8"):
        path = tmp_path / "verdicts.csv"
        path.write_bytes(text.encode(encoding))
        return path

    return write


@pytest.fixture
def cast():
    return Cast(
        id="A1",
        values={
            "depth": [0.0, 10.0, 20.0, 30.0, 40.0],
            "temperature": [12.0, 11.0, 99.0, 9.0, np.nan],
            "salinity": [35.0, 35.0, 35.1, 35.1, 35.2],
        },
        flags={"temperature": [1, 3, 4, 1, 9]},
        attributes={"station": "7"},
        notes=("read",),
    )


def test_reading_spans_columns_in_any_order_and_quotes(written):
    path = written(
        "# our verdicts\nwho,reason,flag,variable,level,cast\n\n"
        'B. Person,"bubbles, seen",4,Sound Speed,2 - 5,A1\nC. Person,good,1,temperature,all,\n'
    )
    first, second = read_verdicts(path)
    assert (first.first, first.last, first.variable, first.flag) == (2, 5, "sound_speed", 4)
    assert (first.reason, first.who, first.cast) == ("bubbles, seen", "B. Person", "A1")
    assert first.where.endswith("verdicts.csv: line 4")
    assert (second.first, second.last, second.cast) == (1, 0, "")


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", r"is empty; its first line must name level, variable, flag, reason, who"),
        ("level,variable,flag,reason\n", r"line 1 names no column 'who'"),
        ("level,variable,flag,reason,who,colour\n", r"line 1: the column 'colour' is not known"),
        ("level,level,variable,flag,reason,who\n", r"line 1: the column 'level' stands there twice"),
        (HEAD + "1,temperature,4,why\n", r"line 2 has 4 cells where the heads name 5"),
        (HEAD + "0,temperature,4,why,me\n", r"line 2, field 'level': '0'; give a number counted from 1"),
        (HEAD + "5-3,temperature,4,why,me\n", r"line 2, field 'level': '5-3'"),
        (HEAD + "-1,temperature,4,why,me\n", r"line 2, field 'level': '-1'"),
        (HEAD + "1.0,temperature,4,why,me\n", r"line 2, field 'level': '1.0'"),
        (HEAD + "1,oxygen,4,why,me\n", r"line 2, field 'variable': 'oxygen'; give one of pressure, depth"),
        (HEAD + "1,temperature,5,why,me\n", r"line 2, field 'flag': '5'; give 1 \(pass\)"),
        (HEAD + "1,temperature,9,why,me\n", r"line 2, field 'flag': '9'"),
        (HEAD + "\n1,temperature,4,,me\n", r"line 3, field 'reason' is empty"),
        (HEAD + "1,temperature,4,why, \n", r"line 2, field 'who' is empty"),
        (HEAD + '1,temperature,4,"why,me\n', r"line 2: .*double quotes"),
    ],
)
def test_what_is_wrong_is_named(written, text, message):
    with pytest.raises(InputError, match=message):
        read_verdicts(written(text))


def test_files_that_are_none(written, tmp_path):
    with pytest.raises(InputError, match=r"can't be read"):
        read_verdicts(tmp_path / "none.csv")
    with pytest.raises(InputError, match=r"is not UTF-8 text: byte"):
        read_verdicts(written(HEAD + "1,temperature,4,Blasen in der Röhre,me\n", "latin-1"))


def test_verdicts_override_in_both_directions_and_are_recorded(written, cast):
    path = written(HEAD + "2-3,temperature,1,a real intrusion,A. Person\n4,temperature,4,touched bottom,B. Person\n")
    seen = apply_verdicts(cast, read_verdicts(path))
    assert seen.flags["temperature"].tolist() == [1, 1, 1, 4, 9]
    assert cast.flags["temperature"].tolist() == [1, 3, 4, 1, 9]
    assert seen.notes == (
        "read",
        "verdict of A. Person: temperature on levels 2-3 flagged 1 (was 3, 4): a real intrusion",
        "verdict of B. Person: temperature on level 4 flagged 4 (was 1): touched bottom",
    )
    assert dict(seen.attributes) == {"station": "7", "verdicts": "1 by A. Person, 1 by B. Person"}


def test_later_verdicts_hold_and_add_up(written, cast):
    first = apply_verdicts(cast, read_verdicts(written(HEAD + "1,salinity,4,rinsing,A\n1,salinity,3,perhaps,B\n")))
    assert first.flags["salinity"].tolist() == [3, 2, 2, 2, 2]
    second = apply_verdicts(first, read_verdicts(written(HEAD + "all,salinity,1,bottles agree,C\n")))
    assert second.flags["salinity"].tolist() == [1] * 5
    assert second.attributes["verdicts"] == "1 by A, 1 by B, 1 by C"


def test_missing_values_stay_missing(written, cast):
    seen = apply_verdicts(cast, read_verdicts(written(HEAD + "all,temperature,1,looked at,A\n")))
    assert seen.flags["temperature"].tolist() == [1, 1, 1, 1, 9]


def test_verdicts_on_another_cast_are_passed_over(written, cast):
    text = "cast,level,variable,flag,reason,who\nB2,1,temperature,4,why,me\n"
    assert apply_verdicts(cast, read_verdicts(written(text))) is cast


@pytest.mark.parametrize(
    ("line", "message"),
    [
        ("6,temperature,4,why,me", r"line 2: field 'level': 6 of cast 'A1', which has levels 1 to 5"),
        ("2-9,temperature,4,why,me", r"line 2: field 'level': 9 of cast 'A1'"),
        ("1,sound_speed,4,why,me", r"line 2: field 'variable': cast 'A1' has no sound_speed; it has depth"),
        ("5,temperature,1,why,me", r"line 2: field 'level': temperature of cast 'A1' has no value on level 5"),
    ],
)
def test_verdicts_that_do_not_fit_the_cast(written, cast, line, message):
    with pytest.raises(InputError, match=message):
        apply_verdicts(cast, read_verdicts(written(HEAD + line + "\n")))


def test_a_verdict_decides_what_the_profile_uses(written, cast):
    checked = check_cast(cast)
    without = Profile.from_cast(checked, salinity=35.0)
    given = apply_verdicts(checked, read_verdicts(written(HEAD + "2,temperature,1,a real step,A\n")))
    assert without.depth.tolist() == [0.0, 30.0]
    assert Profile.from_cast(given, salinity=35.0).depth.tolist() == [0.0, 10.0, 30.0]
