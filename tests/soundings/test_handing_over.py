"""Files for echo sounders: what is printed is what is promised, in the user's own format."""

from __future__ import annotations

import importlib.util
from pathlib import Path

import numpy as np
import pytest

from ocean_sound.casts import read_casts
from ocean_sound.errors import InputError, OceanSoundError, OutputError, PlanError
from ocean_sound.profile import Profile
from ocean_sound.soundings import Template, hand_over, read_template, to_exactly

_spec = importlib.util.spec_from_file_location("random_beams", Path(__file__).with_name("random_beams.py"))
random_beams = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(random_beams)

SYNTHETIC = random_beams.synthetic()
REAL = (
    "argo/D4902252_001.nc",
    "argo/D4902252_030.nc",
    "argo/D6901929_001D.nc",
    "exchange/BIOS20160414_ct1.zip",
    "exchange/BIOS20160721_ct1.zip",
)
FINE = Template("{depth:.2f} {speed:.4f}")
SHALLOW = Profile(np.arange(2.0, 41.0), 1500.0 - 8.0 * np.tanh((np.arange(2.0, 41.0) - 20.0) / 4.0), id="K7",
                  time="2026-05-04T03:02:01")  # fmt: skip


def read(path, separator=None):
    """The levels of a file, by numpy alone."""
    depth, speed = np.loadtxt(path, delimiter=separator).T
    assert depth[0] == 0.0
    assert (np.diff(depth) > 0.0).all()
    return Profile(depth, speed)


@pytest.mark.long
@pytest.mark.parametrize("name", SYNTHETIC)
def test_ten_thousand_beams_through_the_printed_file(name, tmp_path):
    water = SYNTHETIC[name]
    thinned = hand_over(water, tmp_path / "levels.txt", template=FINE)
    printed = read(tmp_path / "levels.txt")
    assert (printed.depth == thinned.profile.depth).all()
    assert (printed.speed == thinned.profile.speed).all()
    largest, beams = random_beams.moved(water, printed)
    assert beams >= 9_990  # the last printed depth may be a few millimetres above the last level
    assert largest - 1e-9 <= thinned.guarantee.distance <= 0.005


@pytest.mark.long
def test_real_casts_through_the_printed_file(real_data, tmp_path):
    kept = []
    for file in REAL:
        for cast in read_casts(real_data / file):
            try:
                water = Profile.from_cast(cast)
            except OceanSoundError:
                continue  # the cast of a single level
            if len(water) < 200:
                continue
            thinned = hand_over(water, tmp_path / "levels.txt", template=FINE, overwrite=True)
            printed = read(tmp_path / "levels.txt")
            largest, beams = random_beams.moved(water.to_surface(), printed)
            assert beams > 9_900
            assert largest - 1e-9 <= thinned.guarantee.distance <= 0.005
            kept.append(len(printed))
    assert len(kept) >= 20
    assert np.median(kept) <= 45


def test_the_format_is_the_users_own(tmp_path):
    (tmp_path / "own.toml").write_text(
        'header = ["# {id} {time:%d.%m.%Y %H:%M}", "{levels:03d} {deepest:.0f}"]\n'
        'level = "{number:d};{depth:6.1f};{speed:.2f}"\nfooter = ["end"]\nline_ending = "crlf"\ndecimal = ","\n'
    )
    done = hand_over(SHALLOW, tmp_path / "out.txt", template=tmp_path / "own.toml", tolerance=0.02)
    raw = (tmp_path / "out.txt").read_bytes().decode("ascii")
    lines = raw.split("\r\n")
    assert lines[0] == "# K7 04.05.2026 03:02"
    assert lines[1] == f"{len(done.profile):03d} 40"
    assert lines[2] == "1;   0,0;1508,00"
    assert lines[-2:] == ["end", ""]
    assert "\n" not in raw.replace("\r\n", "")
    assert len(lines) == len(done.profile) + 4
    assert done.levels[0] == -1


def test_at_most_so_many_levels_or_nothing(tmp_path):
    path = tmp_path / "out.txt"
    with pytest.raises(
        InputError, match=r"out.txt: not written, for as printed by .* and at most 3 levels beams within 65"
    ):
        hand_over(SHALLOW, path, template=FINE, max_levels=3)
    assert not path.exists()
    with pytest.raises(InputError, match="allow more decimals, more levels or a larger tolerance"):
        hand_over(SYNTHETIC["thermocline"], path, template=Template("{depth:.0f} {speed:.0f}"))
    assert not path.exists()
    done = hand_over(SHALLOW, path, template=FINE, max_levels=3, tolerance=0.5)
    assert len(read(path)) <= 3
    assert random_beams.moved(SHALLOW.to_surface(), read(path))[0] <= done.guarantee.distance <= 0.5
    with pytest.raises(OutputError, match="exists already"):
        hand_over(SHALLOW, path, template=FINE)


def test_to_a_given_depth(tmp_path):
    cut = hand_over(SHALLOW, tmp_path / "cut.txt", template=FINE, to_depth=25.5)
    assert read(tmp_path / "cut.txt").depth[-1] == 25.5
    assert cut.guarantee.to_depth == 25.5
    down = hand_over(SHALLOW, tmp_path / "down.txt", template=FINE, to_depth=12000.0, tolerance=0.5)
    printed = read(tmp_path / "down.txt")
    # Mackenzie (1981), JASA 70, 807-812: the terms in depth alone, 1.630e-2 D + 1.675e-7 D².
    grown = 1.630e-2 * (12000.0 - 40.0) + 1.675e-7 * (12000.0**2 - 40.0**2)
    assert printed.speed[-1] == pytest.approx(SHALLOW.speed[-1] + grown, abs=0.2)
    assert any(
        "carried from 40 m down to 12000 m with the water of the last level" in note for note in down.profile.notes
    )
    known = to_exactly(Profile([0, 10], [1500, 1500], [0.1, 0.1]), 20.0)
    assert known.uncertainty[:2].tolist() == [0.1, 0.1]
    assert np.isnan(known.uncertainty[2])
    with pytest.raises(InputError, match="to_depth is 13000 m: a depth below 2 m"):
        to_exactly(SHALLOW, 13000.0)


def test_depths_that_print_alike_are_one_level(tmp_path):
    depth = np.arange(0.0, 30.0, 0.25)
    water = Profile(depth, 1500.0 + np.sin(depth))
    done = hand_over(water, tmp_path / "out.txt", template=Template("{depth:.0f} {speed:.3f}"), tolerance=0.05)
    assert len(read(tmp_path / "out.txt")) == len(done.profile) <= 31
    assert random_beams.moved(water, read(tmp_path / "out.txt"))[0] <= done.guarantee.distance


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("level = 3", r"field 'level' is 3: give a text"),
        ('header = "one"\nlevel = ""', r"field 'header' is 'one': give a list of texts"),
        ('lvel = "{depth}"', r"field 'lvel' is unknown: did you mean 'level'\?"),
        ("header = []", r"field 'level' is missing"),
        ('level = "{depth:.1f}"', r"it must have \{speed\}, such as \{speed:.2f\}"),
        (
            'level = "{depth:.1f} {speed:.1f} {pressure}"',
            r"\{pressure\} is unknown there; known are number, depth, speed",
        ),
        ('level = "{depth.__class__} {speed}"', r"\{depth.__class__\} is unknown there"),
        ('level = "{depth:{speed}} {speed}"', r"\{depth\} is unknown there"),
        ('level = "{depth:.1f} {speed:.1f} {depth}"', r"\{depth\} stands there twice"),
        ('level = "{depth:d} {speed}"', r"\{depth:d\} can't be: Unknown format code 'd'"),
        ('level = "{depth:,.1f} {speed}"', r"\{depth:,.1f\} prints no plain number"),
        ('level = "{depth} {speed"', r"field 'level' is .*: expected '}'"),
        ('level = "{depth} {speed}\\n"', r"it must be one line"),
        ('level = "{depth} {speed}"\nline_ending = "cr"', r"field 'line_ending' is 'cr': give 'lf' or 'crlf'"),
        ('level = "{depth} {speed}"\ndecimal = ";"', r"field 'decimal' is ';': give '.' or ','"),
        ("level = ", r"own.toml: is not TOML"),
    ],
)
def test_a_template_at_fault_is_told_by_field_and_value(text, said, tmp_path):
    (tmp_path / "own.toml").write_text(text)
    with pytest.raises(PlanError, match=said):
        read_template(tmp_path / "own.toml")


def test_what_is_not_known_is_not_printed(tmp_path):
    for name in ("latitude", "longitude", "time"):
        template = Template("{depth:.1f} {speed:.2f}", header=(f"at {{{name}}}",))
        water = Profile([0, 10], [1500, 1500])
        with pytest.raises(InputError, match=f"asks for {{{name}}} in .*, which is not known of this profile"):
            hand_over(water, tmp_path / "out.txt", template=template)
        assert not (tmp_path / "out.txt").exists()


def test_a_template_that_is_not_there(tmp_path):
    with pytest.raises(PlanError, match=r"none.toml: can't be read: No such file"):
        read_template(tmp_path / "none.toml")
