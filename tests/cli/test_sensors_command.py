"""`ocean-sound sensors`: plans told field by field, results written, nothing computed twice."""

from __future__ import annotations

import json
import re

import numpy as np
import pytest
import xarray as xr

from ocean_sound.cli import run
from ocean_sound.errors import PlanError
from ocean_sound.plans import read_sensors_plan
from ocean_sound.sensors import losses as losses_module

PLAN = """
title = "Receivers in Ostray Sound (invented)"
[water]
files = ["cast.csv"]
[seabed]
depth = 100.0
kind = "absorbs all"
[area]
south = 30.0
north = 30.15
west = 179.9
east = -179.95
spacing = 1500
[target]
source_level = 150.0
frequency = 12000
depths = [20.0, 60.0]
[receiver]
detection_threshold = 8.0
bandwidth = 500.0
depths = [40.0]
[noise]
wind_speeds = [4.0, 9.0]
wind_shares = [0.7, 0.3]
[sites]
spacing = 5000
[choice]
number = 3
[run]
max_range = 8000
bearings = 12
ranges = 60
depths = 5
workers = 1
folder = "kept"
"""


def closed_form(section, *, source_depth, frequency, ranges, depths, method, phases, absorption, beams, insist):
    slant = np.hypot(np.asarray(ranges)[:, None], np.asarray(depths)[None, :] - source_depth)
    return 20.0 * np.log10(slant) + 1e-3 * slant


@pytest.fixture
def write(tmp_path, monkeypatch):
    monkeypatch.setattr(losses_module, "_engine", closed_form)
    (tmp_path / "cast.csv").write_text(
        "depth [m],temperature [degC],salinity [PSS-78]\n0,10,35\n50,10,35\n100,10,35\n", encoding="utf-8"
    )

    def plan(*changes):
        text = PLAN
        for old, new in changes:
            assert old in text
            text = text.replace(old, new, 1)
        path = tmp_path / "plan.toml"
        path.write_text(text, encoding="utf-8")
        return path

    return plan


def summary(capsys, arguments, status=0):
    capsys.readouterr()
    assert run([*map(str, arguments), "--json"]) == status
    return json.loads(capsys.readouterr().out)


def test_a_plan_is_worked_and_written(write, tmp_path, capsys):
    output, places = tmp_path / "found.nc", tmp_path / "found.geojson"
    path = write()
    told = summary(capsys, ["sensors", path, "-o", output, "--geojson", places])
    assert told["title"].startswith("Receivers in Ostray")
    assert len(told["sensors"]) == 3
    assert told["choice"]["method"] == "exact"
    assert 0.0 < told["covered"]["1"] <= 1.0
    assert told["covered"]["1"] >= told["covered"]["2"] >= told["covered"]["3"]
    assert "marine mammals" in told["caution"]
    with xr.open_dataset(output) as found:
        assert dict(found.sizes)["site"] == 3
        heard = found["heard_probability"]
        weight = found["weight"]
        covered = float(weight.where(heard.sel(at_once=1) >= 0.5).sum() / weight.sum())
        assert covered == pytest.approx(told["covered"]["1"])
        parts = found["missing_by_cause"].sum("cause", skipna=False)
        assert np.allclose(parts, found["missing_excess"], equal_nan=True)
        assert found["longitude"].values[-1] > 180.0
        assert all("units" in found[name].attrs or "flag_values" in found[name].attrs or found[name].dtype.kind in "OU"
                   for name in found.variables)  # fmt: skip
    features = json.loads(places.read_text())["features"]
    kinds = {feature["properties"]["what"] for feature in features}
    assert kinds == {"sensor", "median detection range", "covered"}
    for feature in features:
        for x in re.findall(r"\[(-?[\d.]+), -?[\d.]+\]", json.dumps(feature["geometry"])):
            assert abs(float(x)) <= 180.0


def test_a_change_of_threshold_noise_or_number_computes_nothing(write, capsys):
    first = summary(capsys, ["sensors", write()])
    assert first["sections"]["kept"] == 0
    for change in (
        ("detection_threshold = 8.0", "detection_threshold = 14.0"),
        ("source_level = 150.0", "source_level = 170.0"),
        ("number = 3", "number = 1"),
        ("depths = [20.0, 60.0]", "depths = [20.0, 35.0, 60.0]"),
        ("[noise]", "[noise]\nshipping = 1.0"),
    ):
        again = summary(capsys, ["sensors", write(change)])
        assert again["sections"]["computed"] == 0
    other = summary(capsys, ["sensors", write(("max_range = 8000", "max_range = 9000"))])
    assert other["sections"]["kept"] == 0


def test_the_lines_say_what_was_found(write, capsys):
    assert run(["sensors", str(write())]) == 0
    told = capsys.readouterr()
    assert "Choice: exact; proved best" in told.out
    assert "At least 1 hears one with 50% or more over" in told.out
    assert "licensed practice" in told.out
    assert "note:" in told.err


def test_existing_sensors_stay_and_must_cover_is_kept(write, capsys):
    path = write(
        ("[choice]\nnumber = 3", "[choice]\nnumber = 2\nspacing = 3000\nmust_cover = [[30.03, 179.93]]"),
        ("[run]", '[existing]\nplaces = [[30.07, 179.99]]\ndepths = [50.0]\nnames = ["old"]\n[run]'),
    )
    told = summary(capsys, ["sensors", path])
    assert [sensor["existing"] for sensor in told["sensors"]] == [False, False, True]
    assert told["sensors"][-1]["name"] == "old"


def test_knocked_down_moorings_and_depth_choices(write, capsys):
    path = write(
        ("depths = [40.0]", "depths = [20.0, 60.0]\nknock_down = 15.0\nknock_down_share = 0.2\ncorrelation = 0.3"),
        ("depths = [20.0, 60.0]\n[receiver]", "depths = [20.0, 60.0]\ncalls = 3\ncode = {pulses = 4}\n[receiver]"),
    )
    told = summary(capsys, ["sensors", path])
    # never two at one place
    places = [(sensor["latitude"], sensor["longitude"]) for sensor in told["sensors"]]
    assert len(set(places)) == len(places)


def test_all_places_are_taken_without_a_choice(write, capsys):
    path = write(
        ("spacing = 5000\n[choice]\nnumber = 3", "places = [[30.05, 179.95], [30.1, -179.98]]\nnames = ['W', 'E']")
    )
    told = summary(capsys, ["sensors", path])
    assert [sensor["name"] for sensor in told["sensors"]] == ["W", "E"]
    assert "choice" not in told


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("bandwidth = 500.0\n", "", "'receiver.bandwidth' is missing: a threshold means nothing without its bandwidth"),
        ("detection_threshold = 8.0\n", "", "'receiver.detection_threshold' is missing"),
        ("frequency = 12000", "band = [14e3, 11e3]", "'target.band' is [14000.0, 11000.0], upside down: give"),
        ("frequency = 12000\n", "", "'target.frequency' is missing: give frequency or band"),
        ("frequency = 12000", "frequency = 12000\nband = [1e3, 2e3]", "'target.band' stands beside"),
        ("depths = [20.0, 60.0]", "depths = [60.0, 20.0]", "'target.depths[1]' is 20, not beyond the one before it"),
        ("depths = [20.0, 60.0]", "depths = [20.0, 60.0]\ndepth_shares = [1.0]", "'target.depth_shares' has 1 entries"),
        ("title = ", 'credits = [""]\ntitle = ', "'credits' is '': give a list, each a text"),
        ("source_level", "source_levl", "'target.source_levl' is unknown: did you mean 'source_level'?"),
        ("south = 30.0", "south = 31.0", "'area.south' is 31, not below 'area.north' (30.15)"),
        ("south = 30.0\n", "", "'area.south' is missing"),
        ("south = 30.0", "corners = [[1, 1], [1, 2], [2, 2]]", "'area.north' stands beside 'area.corners'"),
        ('kind = "absorbs all"', 'kind = "mud"', "'seabed.kind' is 'mud': give clay, silt"),
        ("depth = 100.0", "", "'seabed.bathymetry' is missing"),
        ("wind_shares = [0.7, 0.3]", "wind_shares = [0.7]", "'noise.wind_shares' has 1 entries for 2 wind speeds"),
        ("wind_shares = [0.7, 0.3]", "frequencies = [1.0, 10.0]", "'noise.levels' is missing"),
        (
            "wind_shares = [0.7, 0.3]",
            "frequencies = [1.0, 10.0]\nlevels = [60.0, 50.0]",
            "'noise.frequencies' reach from 1 to 10 Hz: the target needs 12000 to 12000",
        ),
        ("spacing = 5000\n[choice]", "[choice]", "'sites.places' is missing"),
        ("[sites]\nspacing = 5000\n", "", "'sites' is missing: give a table [sites]"),
        ("spacing = 5000\n[choice]", "places = [[95.0, 3.0]]\n[choice]", "'sites.places[0]' is [95.0, 3.0]: give"),
        ("depths = [40.0]", "", "'receiver.depths' is missing"),
        ("depths = [40.0]", "depths = [40.0]\nknock_down = 5.0", "'receiver.knock_down_share' is missing"),
        ('files = ["cast.csv"]', "", "'water.files' is missing: give files (casts) or grid"),
        ('files = ["cast.csv"]', 'files = ["cast.csv"]\ntimes = ["2016-01-01"]', "'water.times' makes no sense with"),
        ('files = ["cast.csv"]', 'grid = "g.nc"\nmembers = "cast"', "'water.members' is 'cast': a grid has"),
        ("number = 3", 'number = 3\nat_once = 2\nmethod = "exact"', "'choice.method' is 'exact', which is for one"),
        ("number = 3", "number = 0", "'choice.number' is 0: give a whole number at least 1"),
        (
            "depths = [20.0, 60.0]",
            "depths = [20.0, 60.0]\ncode = {pulses = 8, transmitters = 3, duration = 3.0, interval = 5.0}",
            "'target.code.interval' is 5: give twice the duration, 6 s, or more",
        ),
    ],
)  # fmt: skip
def test_each_fault_is_told_with_its_field(write, old, new, message):
    path = write((old, new))
    with pytest.raises(PlanError, match=re.escape(message)) as caught:
        read_sensors_plan(path)
    assert all(line.startswith(f"{path}: field '") for line in str(caught.value).splitlines())


def test_all_faults_are_told_at_once(write):
    path = write(("bandwidth = 500.0\n", ""), ("frequency = 12000", "band = [2e3, 1e3]"), ("depth = 100.0\n", ""))
    with pytest.raises(PlanError, match="bandwidth") as caught:
        read_sensors_plan(path)
    assert len(str(caught.value).splitlines()) == 3


@pytest.fixture
def coast(tmp_path):
    """A coast along the meridian of 180 degrees: land in the east, 100 m of water in the west."""
    latitude, longitude = np.linspace(29.8, 30.4, 61), np.linspace(179.6, 180.4, 81)
    height = np.where(longitude[None, :] > 180.0, 35.0, -100.0) + 0.0 * latitude[:, None]
    xr.Dataset(
        {"z": (("lat", "lon"), height, {"units": "m", "positive": "up"})},
        {"lat": ("lat", latitude, {"units": "degrees_north"}), "lon": ("lon", longitude, {"units": "degrees_east"})},
    ).to_netcdf(tmp_path / "coast.nc")
    return ("depth = 100.0", 'bathymetry = "coast.nc"')


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("spacing = 5000", "places = [[30.1, 179.95], [30.1, -179.98]]",
         "field 'sites.places[1]' (30.1, -179.98): is on land, 35 m high"),
        ("spacing = 5000", "places = [[30.1, 179.95], [30.1, 189.0]]", "field 'sites.places[1]': "),
        ("depths = [40.0]", "depths = [40.0, 140.0]", ""),
        ("[run]", "[existing]\nplaces = [[30.1, 179.95]]\ndepths = [120.0]\n[run]",
         "field 'existing.places[0]' (30.1, 179.95): a sensor at 120 m is below the seabed at 100 m"),
        ("spacing = 5000", "spacing = 5000\nshallowest = 500.0", "field 'sites.spacing' is 5000.0: no site of"),
        ("number = 3", "number = 3\nmust_cover = [[30.1, -179.98]]", "field 'choice.must_cover[0]': area: no cell in"),
        ("south = 30.0\nnorth = 30.15", "south = 30.0\nnorth = 35.0", "field 'area': "),
        ("bathymetry = \"coast.nc\"", 'bathymetry = "none.nc"', "field 'seabed.bathymetry': "),
    ],
)  # fmt: skip
def test_what_the_data_speak_against_is_told_with_its_field(write, coast, capsys, old, new, message):
    told = summary(capsys, ["sensors", write(coast, (old, new))], status=2 if message else 0)
    if message:
        assert message in told["error"]
    else:
        assert {sensor["depth"] for sensor in told["sensors"]} == {40.0}


def test_a_listed_sensor_below_the_seabed_is_told(write, coast, capsys):
    path = write(coast, ("spacing = 5000", "places = [[30.1, 179.95]]"), ("depths = [40.0]", "depths = [140.0]"))
    told = summary(capsys, ["sensors", path], status=2)
    assert "field 'sites.places[0]' (30.1, 179.95): a sensor at 140 m is below the seabed at 100 m" in told["error"]


def test_a_grid_without_water_there_is_told(write, tmp_path, capsys):
    depth, latitude, longitude = [0.0, 100.0], np.arange(29.0, 33.0), np.array([178.0, 179.0, 180.0, 181.0])
    field = np.full((2, 4, 4), 10.0)
    field[:, :2] = np.nan
    xr.Dataset(
        {
            "temp": (("depth", "lat", "lon"), field, {"units": "degC", "standard_name": "sea_water_temperature"}),
            "salt": (
                ("depth", "lat", "lon"),
                field + 25.0,
                {"units": "1", "standard_name": "sea_water_practical_salinity"},
            ),
        },
        {
            "depth": ("depth", depth, {"units": "m", "positive": "down"}),
            "lat": ("lat", latitude, {"units": "degrees_north"}),
            "lon": ("lon", longitude, {"units": "degrees_east"}),
        },
    ).to_netcdf(tmp_path / "grid.nc")
    change = ('files = ["cast.csv"]', 'grid = "grid.nc"')
    told = summary(capsys, ["sensors", write(change)])
    assert told["waters"] == 1
    dry = write(change, ("south = 30.0\nnorth = 30.15", "south = 29.0\nnorth = 29.15"))
    told = summary(capsys, ["sensors", dry], status=2)
    assert "field 'water.grid': " in told["error"]
    assert "there is no water in it at latitude 29" in told["error"]


def test_outputs_are_refused_before_work(write, tmp_path, capsys):
    (tmp_path / "there.nc").write_text("")
    told = summary(capsys, ["sensors", write(), "-o", tmp_path / "there.nc"], status=2)
    assert "exists already" in told["error"]
    told = summary(capsys, ["sensors", write(), "-o", tmp_path / "there.csv"], status=2)
    assert "the ending must be .nc" in told["error"]
    told = summary(capsys, ["sensors", write(), "--geojson", tmp_path / "there.txt"], status=2)
    assert "the ending must be .geojson" in told["error"]
    assert not (tmp_path / "kept").exists()
