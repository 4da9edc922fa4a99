"""Several casts in one CSV, and what its columns and preamble say of each."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts.plain_csv import read_plain
from ocean_sound.casts.settings import Settings
from ocean_sound.errors import CastFileError


def parse(text, **said):
    return read_plain(text.encode(), "f.csv", source="f.csv", name="f", settings=Settings(**said))


SEVERAL = """cast,lat,lon,time,depth,temp
A,54.5,-8,2026-01-31T12:00Z,0,1
A,54.5,-8,2026-01-31T12:00Z,1,2
B,55.5,-9,2026-02-01T06:00Z,0,3
C,56.5,-10,2026-02-02,0,4
C,56.5,-10,2026-02-02,1,5
C,56.5,-10,2026-02-02,2,6
"""


def test_casts_by_a_column_of_ids():
    block = parse(SEVERAL)
    assert block.id == ("A", "B", "C")
    assert block.row_size.tolist() == [2, 1, 3]
    assert block.values["temperature"].tolist() == [1, 2, 3, 4, 5, 6]
    assert block.latitude.tolist() == [54.5, 55.5, 56.5]
    assert block.longitude.tolist() == [-8, -9, -10]
    assert block.time[1] == np.datetime64("2026-02-01T06:00")
    assert block.left_out == ()


@given(st.permutations(range(6)))
def test_rows_of_a_cast_need_not_stand_together(order):
    head, *rows = SEVERAL.splitlines()
    block = parse("\n".join([head, *(rows[i] for i in order)]) + "\n")
    assert list(block.id) == list(dict.fromkeys(rows[i][0] for i in order))
    for cast in block:
        expected = [float(rows[i].split(",")[-1]) for i in order if rows[i][0] == cast.id]
        assert cast.temperature.tolist() == expected  # in the order of the file
        assert cast.latitude == {"A": 54.5, "B": 55.5, "C": 56.5}[cast.id]


def test_the_first_good_position_of_a_cast_counts():
    block = parse("cast,lat,lon,depth,temp\nA,,,0,1\nA,54,8 W,1,2\nB,,7,0,3\n")
    assert block.latitude.tolist()[0] == 54.0
    assert np.isnan(block.latitude[1])
    assert block.longitude.tolist() == [-8.0, 7.0]


def test_rows_without_an_id_belong_to_the_cast_above():
    block = parse("cast,depth,temp\nA,0,1\n,1,2\nB,0,3\n,1,4\n")
    assert block.row_size.tolist() == [2, 2]
    assert "2 rows without a cast id belong to the cast above them" in block.notes[0]
    assert parse("cast,depth,temp\n,0,1\n,1,2\n").id == ("f",)


def test_ids_may_stand_in_any_column():
    text = "station,depth,temp\n7,0,1\n8,0,2\n"
    assert parse(text, columns={"id": "station"}).id == ("7", "8")
    assert len(parse(text)) == 1  # nothing says that stations are casts


def test_a_cast_that_holds_nothing_is_left_out_and_named():
    block = parse("cast,depth,temp\nA,0,1\nB,0,\nB,,2\nC,0,5\n")
    assert block.id == ("A", "C")
    assert block.left_out == (
        ("f.csv: cast 'B'", "no usable level: no level holds both a depth or pressure and a measured value"),
    )
    with pytest.raises(CastFileError, match=r"f\.csv: cast 'A': no usable level"):
        parse("cast,depth,temp\nA,0,\nB,0,\n")


def test_a_cast_with_the_wrong_sign_is_left_out_and_named():
    block = parse("cast,depth,temp\nA,0,1\nA,1,2\nB,-1,3\nB,-2,4\n")
    assert block.id == ("A",)
    assert block.left_out[0][0] == "f.csv: cast 'B'"
    assert block.left_out[0][1].startswith("column 'depth' has depths from -1 to -2, none below the surface")


def test_an_error_names_the_cast_or_the_line():
    with pytest.raises(CastFileError, match=r"^f\.csv: line 3: latitude is '95'"):
        parse("cast,lat,depth,temp\nA,5,0,1\nB,95,0,1\n")
    with pytest.raises(CastFileError, match=r"^f\.csv: line 3, column 'temp': 'x'"):
        parse("cast,depth,temp\nA,0,1\nB,0,x\n")


def test_a_drifting_ship_is_noted_and_several_places_are_refused():
    (cast,) = parse("lat,depth,temp\n54.5,0,1\n54.501,1,2\n")
    assert "latitude differs between rows (54.5, 54.501, ...); the first is taken" in cast.notes
    with pytest.raises(CastFileError, match=r"longitude runs from 5 to 6: the rows are of several casts"):
        parse("lon,depth,temp\n5,0,1\n6,1,2\n")


def test_gaps_of_one_cast_do_not_touch_another():
    first, second = parse("cast,depth,temp,sal\nA,0,1,\nA,1,2,\nB,0,3,35\n")
    assert first.salinity is None
    assert second.salinity.tolist() == [35.0]


# --- what stands above the table -----------------------------------------------------------------------------------


def test_a_preamble_without_comment_marks():
    (cast,) = parse("cast_id: c0\nlatitude: 0.5\nlongitude: 12.5\ntime: 2026-01-01T03:00Z\ndepth,temp\n0,1\n")
    assert (cast.id, cast.latitude, cast.longitude) == ("c0", 0.5, 12.5)
    assert cast.time == np.datetime64("2026-01-01T03:00")


XBT = "Date/Time:,13/08/2015 06:38\nXBT Probe Type Fallrate Equation:,52,See it\n{more}\nDepth,Temperature\n4,18\n"


def test_the_fall_rate_equation_of_an_xbt_is_kept():
    (cast,) = parse(XBT.format(more=""))
    assert cast.attributes["fall_rate_equation"].startswith("52")
    assert cast.attributes["depth_uncertainty"] == "2 % of depth or 5 m, whichever is greater (common practice)"
    assert any("fall-rate equation '52,See it'" in note for note in cast.notes)
    (cast,) = parse(XBT.format(more="Depth uncertainty: 3 m"))
    assert cast.attributes["depth_uncertainty"] == "3 m"


def test_a_ctd_is_no_xbt():
    (cast,) = parse(XBT.format(more="").replace("Depth,Temperature\n4,18", "Depth,Temperature,Salinity\n4,18,35"))
    assert "depth_uncertainty" not in cast.attributes


@pytest.mark.parametrize(
    ("text", "time"),
    [
        ("13 Aug 2015", "2015-08-13"),
        ("13-AUG-2015 6:38", "2015-08-13T06:38"),
        ("Aug 13, 2015 06:38:05", "2015-08-13T06:38:05"),
        ("Thursday, 13 August 2015", "2015-08-13"),
        ("2015-8-3", "2015-08-03"),
        ("2015/8/3 6:38", "2015-08-03T06:38"),
        ("13/08/2015 6:38 PM", "2015-08-13T18:38"),
        ("13/08/2015 12:05 am", "2015-08-13T00:05"),
        ("20150813T063800Z", "2015-08-13T06:38"),
        ("2015-08-13T06:38:00.25+02:00", "2015-08-13T04:38:00.25"),
    ],
)
def test_dates_that_can_be_read_one_way_only(text, time):
    (cast,) = parse(f"time: {text}\ndepth,temp\n0,1\n")
    assert cast.time == np.datetime64(time)


@pytest.mark.parametrize("text", ["13 Foo 2015", "13/08/15", "31/02/2015", "13/08/2015 13:05 PM", "2015-13-45"])
def test_what_is_no_date(text):
    with pytest.raises(CastFileError, match="is not a time"):
        parse(f"time: {text}\ndepth,temp\n0,1\n")


def test_a_row_of_ones_is_no_row_of_units():
    (cast,) = parse("depth [m],temp [degC],sal\n0,10,1\n1,10,2\n")
    assert cast.salinity.tolist() == [1.0, 2.0]
    (cast,) = parse("depth,temp,sal\nm,degC,1\n0,10,1\n")
    assert cast.salinity.tolist() == [1.0]


def test_large_tables_are_read_in_parts(monkeypatch):
    from ocean_sound.casts import table

    rows = [f"{number % 7},{number},{number / 8}" for number in range(500)]
    text = "cast,depth,temp\n" + "\n".join(rows) + "\n\n"
    whole = parse(text)
    monkeypatch.setattr(table, "_PART_SIZE", 64)
    parts = parse(text)
    assert parts.id == whole.id
    assert parts.values["temperature"].tobytes() == whole.values["temperature"].tobytes()
    with pytest.raises(CastFileError, match=r"line 401, column 'depth': 'x'"):
        parse(text.replace("\n0,399,", "\n0,x,"))
    with pytest.raises(CastFileError, match=r"line 452 has 2 cells"):
        parse(text.replace("\n2,450,56.25", "\n2,450"))
