"""Reading soundings from netCDF, CSV and memory, and writing what was found beside what was there."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import netCDF4
import numpy as np
import pandas as pd
import pytest
import xarray as xr

from ocean_sound.errors import InputError, OutputError
from ocean_sound.files import checksum, write_csv
from ocean_sound.profile import Profile
from ocean_sound.soundings.columns import OUTPUTS, REASON, REASONS
from ocean_sound.soundings.reading import open_soundings
from ocean_sound.soundings.streaming import stream
from ocean_sound.soundings.writing import About, write_soundings

sys.path.insert(0, str(Path(__file__).parent))
from straight import Straight, as_sounding, survey


@pytest.fixture
def netcdf(tmp_path):
    survey().to_netcdf(tmp_path / "beams.nc")
    return tmp_path / "beams.nc"


def whole(source, **options):
    """All blocks of a source, joined."""
    with open_soundings(source, **options) as soundings:
        blocks = list(soundings.blocks())
        assert [block.start for block in blocks] == np.cumsum([0, *(b.shape[0] for b in blocks[:-1])]).tolist()
        return {
            name: np.concatenate([np.broadcast_to(b.of(name), b.shape) for b in blocks]) for name in blocks[0].names
        }


def written(source, goal, **options):
    """The result of the stand-in, opened."""
    with open_soundings(source, **{k: options.pop(k) for k in ("beams", "case") if k in options}) as soundings:
        stream(soundings, Straight(), goal, options.pop("about", None), workers=2, **options)
    return goal


def assert_alike(found, expected):
    """Columns are the same, times to a microsecond, in whatever shape."""
    assert set(found) == set(expected)
    for name, values in found.items():
        if name == "time":
            assert (np.abs(values.ravel() - expected[name].ravel()) <= np.timedelta64(1, "us")).all()
        else:
            np.testing.assert_array_equal(values.ravel(), expected[name].ravel())


def change(path, **attributes):
    """Set attributes ``variable__attribute`` of a file."""
    with netCDF4.Dataset(path, "a") as file:
        for name, value in attributes.items():
            variable, attribute = name.split("__")
            file[variable].setncattr(attribute, value)


# --- reading ---------------------------------------------------------------------------------------------------------


def test_memory_file_and_rows_of_any_block_size_give_the_same(tmp_path, netcdf):
    dataset = survey()
    expected = {
        name: np.broadcast_to(one.values if one.ndim == 2 else one.values[:, None], (40, 9))
        for name, one in dataset.data_vars.items()
        if name not in ("backscatter", "line", "mean_square")
    }
    rows = as_sounding(dataset)
    rows.to_netcdf(tmp_path / "rows.nc")
    for source in (dataset, netcdf, dataset.chunk({"ping": 7}), rows, tmp_path / "rows.nc"):
        for beams in (1, 100, 10**6):
            found = whole(source, beams=beams)
            assert_alike(found, expected)


def test_a_dataset_is_not_changed():
    dataset = survey()
    dataset["two_way_travel_time"].values[3, 2] = -5.0
    before = dataset.copy(deep=True)
    whole(dataset)
    xr.testing.assert_identical(dataset, before)


def test_packing_and_missing_values_are_undone(netcdf):
    with netCDF4.Dataset(netcdf, "a") as file:
        packed = file.createVariable("along_track_angle", "i2", ("ping", "beam"), fill_value=-999)
        packed.setncatts({"scale_factor": 0.01, "add_offset": 1.0, "units": "degrees", "valid_min": np.int16(-500)})
        packed.set_auto_maskandscale(False)
        packed[:] = 150
        packed[0, 0], packed[0, 1] = -999, -501
        plain = file.createVariable("water_level", "f4", ("ping",))
        plain.setncatts({"units": "cm" if False else "m", "missing_value": np.float32(-1.1)})
        plain[:] = 0.5
        plain[1] = -1.1
        unset = file.createVariable("face_roll", "f8", ("ping",))
        unset.units = "degrees"
        unset[0] = 1.0  # the others stay at netCDF's own fill value
    found = whole(netcdf)
    assert found["along_track_angle"][0, :3] == pytest.approx([np.nan, np.nan, 2.5], nan_ok=True)
    assert found["water_level"][:3, 0] == pytest.approx([0.5, np.nan, 0.5], nan_ok=True)
    assert found["face_roll"][:2, 0] == pytest.approx([1.0, np.nan], nan_ok=True)


def test_values_flagged_failed_or_missing_are_not_used(netcdf):
    with netCDF4.Dataset(netcdf, "a") as file:
        flag = file.createVariable("two_way_travel_time_flag", "i1", ("ping", "beam"))
        flag[:] = 1
        flag[2, :5] = [1, 2, 3, 4, 9]
    found = whole(netcdf)["two_way_travel_time"][2]
    assert np.isnan(found).tolist() == [False] * 3 + [True] * 2 + [False] * 4


def test_standard_names_are_understood(tmp_path):
    dataset = survey().rename({"two_way_travel_time": "twtt", "surface_sound_speed": "c0"})
    dataset["twtt"].attrs["standard_name"] = "acoustic_signal_roundtrip_travel_time_in_sea_water"
    dataset["c0"].attrs["standard_name"] = "speed_of_sound_in_sea_water"
    with open_soundings(dataset) as soundings:
        assert {"two_way_travel_time", "surface_sound_speed"} <= set(soundings.names)
        assert "two_way_travel_time is read from twtt" in soundings.notes
    dataset["c1"] = dataset["c0"]  # now two have it, so neither is taken
    with open_soundings(dataset) as soundings:
        assert "surface_sound_speed" not in soundings.names


@pytest.mark.parametrize(
    ("name", "unit", "factor"),
    [
        ("two_way_travel_time", "ms", 1e3),
        ("two_way_travel_time", "microseconds", 1e6),
        ("across_track_angle", "rad", np.pi / 180.0),
        ("across_track_angle", "degree", 1.0),
        ("transducer_depth", "ft", 1.0 / 0.3048),
        ("surface_sound_speed", "ft/s", 1.0 / 0.3048),
        ("surface_sound_speed", "m/s", 1.0),
    ],
)
def test_units_are_converted(name, unit, factor):
    dataset = survey()
    expected = whole(dataset)[name]
    dataset[name] = dataset[name] * factor
    dataset[name].attrs["units"] = unit
    np.testing.assert_allclose(whole(dataset)[name], expected, rtol=1e-14)


@pytest.mark.parametrize(
    ("name", "unit", "match"),
    [
        (
            "two_way_travel_time",
            "m",
            r"two_way_travel_time: unit 'm' is not known for two_way_travel_time; use one of s",
        ),
        ("across_track_angle", "grad", r"unit 'grad' is not known for across_track_angle; use one of degrees, radians"),
        ("transducer_depth", "dbar", r"unit 'dbar' is not known for transducer_depth; use one of m, ft, fathom, km"),
        ("surface_sound_speed", "kn", r"unit 'kn' is not known for surface_sound_speed; use one of m/s, ft/s, km/s"),
        ("time", "days", r"units of the time are 'days'.*seconds since 1970-01-01"),
    ],
)
def test_units_that_can_not_be_are_refused(netcdf, name, unit, match):
    change(netcdf, **{f"{name}__units": unit})
    with pytest.raises(InputError, match=match):
        whole(netcdf)


def test_radians_without_a_unit_are_noticed():
    dataset = survey()
    dataset["across_track_angle"] = (("ping", "beam"), np.radians(dataset["across_track_angle"].values))
    with pytest.raises(InputError, match=r"has no unit, and .* look like radians; say which"):
        whole(dataset)
    dataset["across_track_angle"].attrs["units"] = "degrees"  # a narrow fan, if they say so
    whole(dataset)


def test_a_whole_column_outside_what_can_be_is_another_unit():
    dataset = survey()
    dataset["two_way_travel_time"] = (("ping", "beam"), dataset["two_way_travel_time"].values * 1e6)
    with pytest.raises(
        InputError, match=r"two_way_travel_time is .* where it begins; above 0 and at most 60 s would be"
    ):
        whole(dataset)


def test_single_impossible_values_are_taken_out_and_told():
    dataset = survey()
    dataset["two_way_travel_time"].values[3, 2] = -1.0
    dataset["two_way_travel_time"].values[5, 0] = 60.5
    dataset["two_way_travel_time"].values[6, 0] = np.inf  # no value at all: missing
    dataset["transducer_depth"].values[7] = -2.0
    dataset["latitude"].values[9] = 95.0
    with open_soundings(dataset, beams=20) as soundings:
        blocks = list(soundings.blocks())
        notes = soundings.notes
    masks = [np.zeros(b.shape, bool) if b.impossible is None else b.impossible for b in blocks]
    impossible = np.concatenate(masks)
    assert np.argwhere(impossible).tolist() == [
        [3, 2], [5, 0], *([7, beam] for beam in range(9)), *([9, beam] for beam in range(9))
    ]  # fmt: skip
    assert "two_way_travel_time: 2 values are impossible; above 0 and at most 60 s would be right" in notes
    assert "transducer_depth: 1 values are impossible; 0 to 12000 m would be right" in notes


def test_the_direction_of_a_depth_is_checked(netcdf):
    change(netcdf, transducer_depth__positive="up")
    with pytest.raises(InputError, match="is positive up; transducer_depth positive down would be right"):
        whole(netcdf)


@pytest.mark.parametrize(
    "units", ["nanoseconds since 2026-05-04T10:00:00", "days since 1950-01-01", "seconds since 1970-01-01"]
)
def test_times_of_any_count(tmp_path, units):
    dataset = survey()
    dataset.to_netcdf(tmp_path / "a.nc", encoding={"time": {"units": units, "dtype": "f8"}})
    found = whole(tmp_path / "a.nc")["time"][:, 0]
    assert (np.abs(found - dataset["time"].values) <= np.timedelta64(1, "ms")).all()


def test_values_on_fewer_dimensions_are_spread():
    dataset = survey(pings=6)
    dataset["across_track_angle"] = ("beam", np.linspace(-60.0, 60.0, 9), {"units": "degrees"})
    dataset["transducer_depth"] = ((), 3.5, {"units": "m"})
    dataset["surface_sound_speed"] = (("ping", "beam"), np.full((6, 9), 1490.0), {"units": "m s-1"})
    with open_soundings(dataset, beams=18) as soundings:
        first = next(soundings.blocks())
        assert soundings.extent("transducer_depth") == (3.5, 3.5)
    assert first.beams["across_track_angle"].shape == (2, 9)
    assert first.beams["surface_sound_speed"].shape == (2, 9)
    assert first.pings["transducer_depth"].tolist() == [3.5, 3.5]


def test_all_missing_variables_are_named_in_one_line():
    with pytest.raises(
        InputError, match=r"two_way_travel_time \[s\], transducer_depth \[m\] are missing; optional are"
    ):
        whole(survey().drop_vars(["two_way_travel_time", "transducer_depth"]))


def test_other_cases_need_other_variables():
    dataset = survey().drop_vars(["two_way_travel_time", "across_track_angle"])
    dataset["recorded_depth"] = ("ping", np.full(40, 30.0), {"units": "m"})
    assert set(whole(dataset.drop_dims("beam"), case="recorded")) >= {"recorded_depth", "transducer_depth"}
    with pytest.raises(InputError, match=r"depth .*, across_track_distance .* are missing"):
        whole(dataset, case="corrected")
    with pytest.raises(InputError, match="case is 'deep': one of beams, vertical, recorded, corrected"):
        open_soundings(dataset, case="deep")
    with pytest.raises(InputError, match="0 beams in a block: at least one"):
        open_soundings(dataset, beams=0)


def test_dimensions_must_be_those_of_pings_and_beams():
    dataset = survey()
    with pytest.raises(InputError, match=r"has the dimensions \(beam, ping\) and .* \(ping, beam\) would be right"):
        whole(dataset.transpose("beam", "ping"))
    dataset["heading"] = ("other", np.zeros(3), {"units": "degrees"})
    with pytest.raises(InputError, match=r"heading has the dimensions \(other\); those of two_way_travel_time"):
        whole(dataset)
    with pytest.raises(InputError, match=r"dimensions \(a, ping, beam\); \(sounding\) or \(ping, beam\)"):
        whole(survey().expand_dims("a"))


def test_text_for_numbers_is_refused():
    dataset = survey()
    dataset["heading"] = ("ping", np.full(40, "north"))
    with pytest.raises(InputError, match="heading: holds text where numbers should be"):
        whole(dataset)


# --- files that are none, or are broken ----------------------------------------------------------------------------


def test_files_that_can_not_be_read(tmp_path, netcdf):
    with pytest.raises(InputError, match=r"none\.nc: can't be read: No such file"):
        whole(tmp_path / "none.nc")
    data = netcdf.read_bytes()
    for size in (9, 300, len(data) // 2):
        (tmp_path / "cut.nc").write_bytes(data[:size])
        with pytest.raises(InputError, match=r"cut\.nc: can't be opened as netCDF, it is cut short or damaged"):
            whole(tmp_path / "cut.nc")
    (tmp_path / "empty.csv").write_text("")
    with pytest.raises(InputError, match="is empty; a CSV with a head"):
        whole(tmp_path / "empty.csv")
    (tmp_path / "picture.png").write_bytes(b"\x89PNG\r\n\x1a\n\xff\xfe\x00")
    with pytest.raises(InputError, match="is neither netCDF nor text in UTF-8"):
        whole(tmp_path / "picture.png")
    (tmp_path / "foreign.csv").write_text("a,b\n1,2\n")
    with pytest.raises(
        InputError, match=r"two_way_travel_time \[s\], across_track_angle \[degree\], transducer_depth \[m\]"
    ):
        whole(tmp_path / "foreign.csv")


def test_damage_within_a_file_is_an_error_and_leaves_no_output(tmp_path):
    dataset = survey(pings=400)
    dataset.to_netcdf(tmp_path / "a.nc", encoding={"two_way_travel_time": {"zlib": True, "chunksizes": (50, 9)}})
    data = bytearray((tmp_path / "a.nc").read_bytes())
    with netCDF4.Dataset(tmp_path / "a.nc") as file:
        packed = file["two_way_travel_time"]
        assert packed.chunking() == [50, 9]
    marks = [at for at in range(len(data) - 2) if data[at : at + 2] in (b"\x78\x5e", b"\x78\x9c")]
    for at in marks[2:]:
        data[at + 20 : at + 60] = b"\xff" * 40
    (tmp_path / "a.nc").write_bytes(data)
    with pytest.raises(InputError, match="two_way_travel_time can't be read, the file is damaged"):
        written(tmp_path / "a.nc", tmp_path / "out.nc", beams=450)
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.nc"]


@pytest.mark.parametrize("format_", ["NETCDF3_CLASSIC", "NETCDF3_64BIT"])
def test_classic_files(tmp_path, format_):
    dataset = survey()
    dataset.to_netcdf(tmp_path / "a.nc", format=format_)
    dataset.to_netcdf(tmp_path / "b.nc")
    ours, other = whole(tmp_path / "a.nc"), whole(tmp_path / "b.nc")
    for name, values in ours.items():
        np.testing.assert_array_equal(values, other[name])
    with xr.open_dataset(written(tmp_path / "a.nc", tmp_path / "out.nc")) as back:
        for name, one in dataset.variables.items():
            np.testing.assert_array_equal(back[name].values, one.values)
            if name != "time":
                assert back[name].attrs == one.attrs
    data = (tmp_path / "a.nc").read_bytes()
    (tmp_path / "a.nc").write_bytes(data[:-200])
    with pytest.raises(InputError, match=r"a\.nc: is cut short or damaged"):
        whole(tmp_path / "a.nc")


# --- CSV ------------------------------------------------------------------------------------------------------------


def test_csv_equals_netcdf(tmp_path, netcdf):
    rows = as_sounding(survey())
    write_csv(
        tmp_path / "a.csv",
        {
            ("two_way_travel_time [s]" if name == "two_way_travel_time" else name): one.values
            for name, one in rows.items()
        },
        preamble={"vessel": "invented"},
    )
    expected = whole(netcdf)
    for beams in (7, 10**6):
        found = whole(tmp_path / "a.csv", beams=beams)
        assert_alike(found, expected)
    out = written(tmp_path / "a.csv", tmp_path / "from_csv.nc", beams=50)
    with xr.open_dataset(out) as one, xr.open_dataset(written(netcdf, tmp_path / "from_nc.nc")) as other:
        assert one.sizes["sounding"] == 360
        for name in OUTPUTS:
            if name in other:
                np.testing.assert_array_equal(one[name].values, other[name].values.ravel())
        np.testing.assert_array_equal(one["backscatter"].values, other["backscatter"].values.ravel())
        assert one["two_way_travel_time"].attrs["units"] == "s"


def text(rows, head="two_way_travel_time [s],across_track_angle [deg],transducer_depth [m],time,remark"):
    return "\n".join([head, *rows]) + "\n"


def test_csv_of_another_kind(tmp_path):
    (tmp_path / "a.csv").write_text(
        "\ufeff# invented\n\n"
        + text(
            [
                "0.1,-30,4,2026-05-04T10:00:00.250Z,a # sign",
                "# a comment",
                ",30,4,2026-05-04T12:00:00+02:00,",
                "0.1,NaN,,,x",
            ],
            head="Two-way travel time [s]".replace("-", " ")
            + ",Across Track Angle [deg],transducer_depth [m],time,remark",
        ),
        encoding="utf-8",
    )
    (tmp_path / "b.csv").write_text(
        (tmp_path / "a.csv").read_text(encoding="utf-8").replace(",", ";"), encoding="utf-8"
    )
    for name in ("a.csv", "b.csv"):
        found = whole(tmp_path / name)
        assert found["two_way_travel_time"].ravel() == pytest.approx([0.1, np.nan, 0.1], nan_ok=True)
        assert found["transducer_depth"].ravel() == pytest.approx([4, 4, np.nan], nan_ok=True)
        assert found["time"].ravel().astype(str).tolist() == [
            "2026-05-04T10:00:00.250000000", "2026-05-04T10:00:00.000000000", "NaT"
        ]  # fmt: skip
        with open_soundings(tmp_path / name) as soundings:
            kept = [slab.kept["remark"].tolist() for slab in soundings.slabs(keep=True)]
        assert kept == [["a # sign", "", "x"]]


@pytest.mark.parametrize(
    ("rows", "match"),
    [
        (
            ["0.1,30,4,2026-05-04,x", "0.1,thirty,4,2026-05-04,x"],
            r"row 2, column across_track_angle: 'thirty' is no number",
        ),
        (["0.1,30,4,04.05.2026,x"], r"row 1, column time: '04\.05\.2026' is no time; ISO 8601"),
        (["0.1,30,4,2026-05-04,x", "0.1,30,4,2026-05-04,x,y"], r"row 2 has more columns than the head, 5"),
        (["0.1,30,4,2026-05-04,x", "0.1,30,4,2026-05-04,x,y,z"], r"row 2 has more columns than the head, 5"),
    ],
)
def test_rows_that_can_not_be(tmp_path, rows, match):
    (tmp_path / "a.csv").write_text(text(rows))
    with pytest.raises(InputError, match=match):
        whole(tmp_path / "a.csv")


def test_a_table_cut_short_is_noticed(tmp_path):
    content = text(["0.1,30,4,2026-05-04,x"] * 3)
    (tmp_path / "a.csv").write_text(content[: content.rindex("2026")])
    with pytest.raises(InputError, match="is cut short: its last row has 4 of 5 columns"):
        whole(tmp_path / "a.csv")


def test_a_column_twice_is_refused(tmp_path):
    (tmp_path / "a.csv").write_text(
        text(["0.1,30,4,5"], head="two_way_travel_time,across_track_angle,transducer_depth,transducer depth [m]")
    )
    with pytest.raises(InputError, match="the column transducer_depth is there twice"):
        whole(tmp_path / "a.csv")


def test_times_without_a_zone_are_noted(tmp_path):
    (tmp_path / "a.csv").write_text(text(["0.1,30,4,2026-05-04T10:00,x"]))
    with open_soundings(tmp_path / "a.csv") as soundings:
        list(soundings.blocks())
        assert "times without a zone are taken as UTC" in soundings.notes


# --- writing --------------------------------------------------------------------------------------------------------

CASTS = [
    Profile([0, 100], [1500, 1500], id="A", time=np.datetime64("2026-05-04T09:00"), latitude=60.0, longitude=5.0),
    Profile([0, 100], [1490, 1500], id="B"),
]
ABOUT = About(CASTS, [("a.csv", "00"), ("b.csv", "11")], ("1a", "Very special"), {"angles": "cones"})


def test_everything_of_the_input_is_kept(tmp_path, netcdf):
    with netCDF4.Dataset(netcdf, "a") as file:
        group = file.createGroup("platform")
        group.vessel = "invented"
        packed = file.createVariable("quality", "i2", ("ping", "beam"), fill_value=-9, zlib=True)
        packed.scale_factor = 0.1
        packed[:] = 1.5
    before = netcdf.read_bytes()
    out = written(netcdf, tmp_path / "out.nc", about=ABOUT)
    assert netcdf.read_bytes() == before
    with netCDF4.Dataset(netcdf) as first, netCDF4.Dataset(out) as second:
        for file in (first, second):
            file.set_auto_maskandscale(False)
        for name, variable in first.variables.items():
            twin = second[name]
            assert (twin.dtype, twin.dimensions, twin.filters()) == (
                variable.dtype,
                variable.dimensions,
                variable.filters(),
            )
            assert {k: str(twin.getncattr(k)) for k in twin.ncattrs()} == {
                k: str(variable.getncattr(k)) for k in variable.ncattrs()
            }
            np.testing.assert_array_equal(twin[...], variable[...])
        assert second["platform"].vessel == "invented"
        assert second.title == "invented"
        assert second.history.startswith("made by hand\n")
        assert "soundings corrected for refraction by ocean_sound" in second.history
        assert second.source_file == "beams.nc"
        assert second.source_checksum == checksum(netcdf)
        assert json.loads(second.settings) == {"angles": "cones"}
        assert second.Conventions == "CF-1.11 ACDD-1.3"
        assert "does not average out" in second.comment


def test_what_was_found_is_written_with_its_attributes(tmp_path, netcdf):
    out = written(netcdf, tmp_path / "out.nc", about=ABOUT)
    expected = Straight().correct(next(open_soundings(survey()).blocks()))
    with xr.open_dataset(out, decode_timedelta=False) as back:
        for name, values in expected.items():
            assert back[name].dims == ("ping", "beam")
            assert back[name].dtype == OUTPUTS[name].dtype
            np.testing.assert_array_equal(back[name].values, values.astype(OUTPUTS[name].dtype))
            assert back[name].attrs["long_name"] == OUTPUTS[name].title
        assert back["depth"].attrs["ancillary_variables"] == "depth_uncertainty sounding_flag sounding_reason"
        assert back["cast_id"].values.tolist() == ["A", "B"]
        assert back["cast_checksum"].values.tolist() == ["00", "11"]
        assert str(back["cast_time"].values[0]).startswith("2026-05-04T09:00")
        assert np.isnat(back["cast_time"].values[1])
        held = back["orders_held_by_sound_speed"].attrs
        assert held["flag_masks"].tolist() == [1, 2]
        assert held["flag_meanings"] == "1a Very_special"


def test_block_size_threads_and_compression_change_nothing(tmp_path, netcdf):
    first = xr.open_dataset(written(netcdf, tmp_path / "a.nc"), decode_timedelta=False).load()
    for beams, compression in ((9, 0), (100, 4), (10**6, 1)):
        goal = tmp_path / f"{beams}.nc"
        with open_soundings(netcdf, beams=beams) as soundings:
            stream(soundings, Straight(), goal, workers=3, compression=compression)
        with xr.open_dataset(goal, decode_timedelta=False) as second:
            xr.testing.assert_equal(first, second)
            assert second["depth"].encoding["complevel"] == compression
    first.close()


def test_a_growing_dimension_is_kept(tmp_path):
    survey().to_netcdf(tmp_path / "a.nc", unlimited_dims=["ping"])
    out = written(tmp_path / "a.nc", tmp_path / "out.nc", beams=90)
    with netCDF4.Dataset(out) as back:
        assert back.dimensions["ping"].isunlimited()
        assert back["depth"].shape == (40, 9)
        assert np.isfinite(back["depth"][:]).all()


def test_what_bears_a_name_of_ours_is_kept_under_another(tmp_path, netcdf):
    once = written(netcdf, tmp_path / "once.nc", about=ABOUT)
    change(once, depth__note="the first")
    twice = written(once, tmp_path / "twice.nc", about=ABOUT)
    with xr.open_dataset(twice, decode_timedelta=False) as back:
        assert back["depth_before"].attrs["note"] == "the first"
        np.testing.assert_array_equal(back["depth_before"].values, back["depth"].values)
        assert back["cast_id_before"].dims == ("cast_before",)
        assert back.attrs["history"].count("corrected for refraction") == 2


def test_an_existing_output_needs_to_be_replaced(tmp_path, netcdf):
    goal = tmp_path / "out.nc"
    goal.write_text("mine")
    with pytest.raises(OutputError, match="exists already"):
        written(netcdf, goal)
    assert goal.read_text() == "mine"
    written(netcdf, goal, replace=True)
    with pytest.raises(InputError, match=r"the ending must be \.nc \(netCDF\) or \.csv"):
        written(netcdf, tmp_path / "out.txt")
    with pytest.raises(InputError, match="compression is 10: a zlib level from 0 to 9"):
        written(netcdf, tmp_path / "b.nc", compression=10)


def test_pings_that_do_not_arrive_are_noticed(tmp_path, netcdf):
    with open_soundings(netcdf, beams=90) as soundings:
        results = [(slab, Straight().correct(slab.block)) for slab in soundings.slabs()][:-1]
        with pytest.raises(OutputError, match="30 of 40 pings were written; a fault of ocean_sound"):
            write_soundings(tmp_path / "out.nc", soundings, results)
    assert not (tmp_path / "out.nc").exists()


def test_csv_out(tmp_path, netcdf):
    dataset = survey()
    dataset["two_way_travel_time"].values[1, 1] = np.nan
    dataset.to_netcdf(netcdf)
    out = written(netcdf, tmp_path / "out.csv", about=ABOUT, beams=50)
    lines = out.read_text().splitlines()
    comments = [line for line in lines if line.startswith("#")]
    assert any(line.startswith("# cast 0: A, 2026-05-04T09:00") and line.endswith("a.csv 00") for line in comments)
    assert f"# source_checksum: {checksum(netcdf)}" in comments
    table = pd.read_csv(out, comment="#")
    with xr.open_dataset(written(netcdf, tmp_path / "out.nc", about=ABOUT), decode_timedelta=False) as back:
        assert table["ping"].tolist() == np.repeat(np.arange(40), 9).tolist()
        for name, label in (
            ("depth", "depth [m]"), ("heading", "heading [degrees]"), ("backscatter", "backscatter [dB]"),
            ("line", "line"), ("tvu_95", "tvu_95 [m]"), ("two_way_travel_time", "two_way_travel_time [s]"),
        ):  # fmt: skip
            values = back[name].values
            full = np.broadcast_to(values if values.ndim == 2 else values[:, None], (40, 9)).ravel()
            np.testing.assert_allclose(table[label], full, rtol=0.0, atol=0.0 if name != "tvu_95" else 5.1e-6)
    assert table["sounding_reason"].unique().tolist() == ["none", "no_travel_time"]
    assert set(table["orders_held_by_sound_speed"]) == {"1a", "1a Very special"}
    again = whole(out)  # what we write we read
    np.testing.assert_array_equal(again["across_track_angle"].ravel(), dataset["across_track_angle"].values.ravel())


def test_csv_to_csv_keeps_all_columns(tmp_path):
    (tmp_path / "a.csv").write_text("# who: me\n" + text(['0.1,-30,4,2026-05-04T10:00:00Z,"a, b"', "0.1,30,4,,"]))
    out = written(tmp_path / "a.csv", tmp_path / "out.csv")
    table = pd.read_csv(out, comment="#", keep_default_na=False)
    assert table["remark"].tolist() == ["a, b", ""]
    assert table["time"].tolist() == ["2026-05-04T10:00:00.000000000Z", ""]
    assert "# input 0: who: me" in out.read_text()


def test_foreign_columns_keep_their_names_and_units(tmp_path):
    """None is given a unit for being called like a variable of ours."""
    head = (
        "two_way_travel_time [s],across_track_angle [deg],transducer_depth [m],salinity,Echo level [dB],depth,beam_flag"
    )
    (tmp_path / "a.csv").write_text(text(["0.1,-30,4,5,-20.5,7,1", "0.1,30,4,6,,8,4"], head=head))
    table = pd.read_csv(written(tmp_path / "a.csv", tmp_path / "out.csv"), comment="#")
    assert list(table)[3:7] == ["salinity", "Echo level [dB]", "depth_before", "beam_flag"]
    assert table["depth_before"].tolist() == [7.0, 8.0]
    with xr.open_dataset(written(tmp_path / "a.csv", tmp_path / "out.nc")) as back:
        assert back["Echo_level"].attrs == {"long_name": "Echo level", "units": "dB"}
        assert back["Echo_level"].values == pytest.approx([-20.5, np.nan], nan_ok=True)
        assert "units" not in back["salinity"].attrs
        assert back["depth_before"].values.tolist() == [7.0, 8.0]


def test_flags_of_a_table_are_obeyed(tmp_path):
    head = "two_way_travel_time [s],two_way_travel_time_flag,across_track_angle [deg],transducer_depth [m]"
    (tmp_path / "a.csv").write_text(text([f"0.1,{flag},30,4" for flag in (1, 2, 3, 4, 9)], head=head))
    assert np.isnan(whole(tmp_path / "a.csv")["two_way_travel_time"].ravel()).tolist() == [False] * 3 + [True] * 2


def test_a_full_disk_leaves_nothing(tmp_path, netcdf):
    """A limit on the size of files stands for the disk's."""
    code = """
import resource, signal, sys
sys.path.insert(0, '.')
from ocean_sound.errors import OutputError
from ocean_sound.soundings.reading import open_soundings
from ocean_sound.soundings.streaming import stream
from straight import Straight
signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
source = open_soundings(sys.argv[1])
limit = int(sys.argv[3])
resource.setrlimit(resource.RLIMIT_FSIZE, (limit, limit))
try:
    stream(source, Straight(), sys.argv[2])
except OutputError as error:
    print("refused", "can't be written" in str(error))
"""
    size = netcdf.stat().st_size
    for limit in (size // 2, size + 4000):
        done = subprocess.run(
            [sys.executable, "-c", code, str(netcdf), str(tmp_path / "out.nc"), str(limit)],
            capture_output=True, text=True, check=False, cwd=Path(__file__).parent,
        )  # fmt: skip
        assert done.stdout.split() == ["refused", "True"], done.stderr
        assert sorted(path.name for path in tmp_path.iterdir()) == ["beams.nc"]


def test_reasons_reach_the_file(tmp_path):
    dataset = survey()
    dataset["two_way_travel_time"].values[0, 0] = -3.0
    dataset["across_track_angle"].values[0, 1] = np.nan
    dataset.to_netcdf(tmp_path / "a.nc")
    with xr.open_dataset(written(tmp_path / "a.nc", tmp_path / "out.nc")) as back:
        meanings = back["sounding_reason"].attrs["flag_meanings"].split()
        codes = back["sounding_reason"].values[0, :3].astype(int)
        assert [meanings[code] for code in codes] == ["impossible_value", "no_angle", "none"]
        assert [REASONS[code].name for code in codes] == ["impossible_value", "no_angle", "none"]
        assert back["sounding_flag"].values[0, :3].tolist() == [4, 9, 1]
        assert codes[0] == REASON["impossible_value"]
