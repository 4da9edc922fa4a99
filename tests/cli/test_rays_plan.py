"""Plans of `ocean-sound rays` for sections, arrivals, zones and ensembles: results, messages, files."""

from __future__ import annotations

import json

import numpy as np
import pytest
import xarray

from ocean_sound.cli import run

PLAN = """
title = "A slope"
[water]
files = ["a.csv", "b.csv"]
ranges = [0.0, 9000.0]
[seabed]
points = [[0.0, 195.0], [5000.0, 150.0], [9000.0, 120.0]]
kind = "silt"
[surface]
wind_speed = 4
[source]
depth = 30.0
[rays]
max_range = 6000
number = 7
[arrivals]
receiver_depths = [20.0, 60.0]
receiver_ranges = [4000.0]
max_bounces = 3
lowest_angle = -12.0
highest_angle = 12.0
[shadow]
wanted = true
depths = 21
ranges = 31
at_depths = [33.0]
"""


def table(warm, deepest):
    """A cast with a smooth thermocline."""
    depth = np.linspace(0.0, deepest, 41)
    speed = 1490.0 + (20.0 + warm) * 0.5 * (1.0 - np.tanh((depth - 45.0) / 20.0)) + 0.016 * depth
    rows = "".join(f"{z:.2f},{c:.4f}\n" for z, c in zip(depth, speed, strict=True))
    return f"depth [m],sound_speed [m/s]\n{rows}"


A, B = table(0.0, 200.0), table(4.0, 130.0)


@pytest.fixture
def folder(tmp_path):
    (tmp_path / "a.csv").write_text(A)
    (tmp_path / "b.csv").write_text(B)
    return tmp_path


@pytest.fixture
def ask(capsys):
    def asked(*arguments):
        capsys.readouterr()
        status = run([str(argument) for argument in arguments])
        told = capsys.readouterr()
        return status, told.out, told.err

    return asked


def written(folder, text, name="plan.toml"):
    path = folder / name
    path.write_text(text)
    return path


def test_all_results_of_a_plan_are_in_one_file_and_in_one_json_object(ask, folder):
    output, figure = folder / "out.nc", folder / "out.png"
    status, out, err = ask("rays", written(folder, PLAN), "-o", output, "--figure", figure, "--json")
    assert status == 0, err
    told = json.loads(out)
    assert told["title"] == "A slope"
    assert "2 casts, " in told["section"]
    assert "silt" in told["section"]
    with xarray.open_dataset(output) as rays:
        assert rays.sizes["ray"] == 7 == told["rays"]
        assert rays.launch_angle.values.tolist() == told["per_ray"]["launch_angle"]
        assert set(np.unique(rays.shadow_no_bounce)) <= {0, 1, 2}
        assert 33.0 in rays.grid_depth
        assert rays.attrs["Conventions"] == "CF-1.11 ACDD-1.3"
    with xarray.open_dataset(output, group="arrivals") as arrivals:
        assert arrivals.sizes["arrival"] == told["arrivals"]["number"] > 0
        assert arrivals.travel_time.values.tolist() == told["arrivals"]["travel_time"]
        assert set(arrivals.receiver_depth.values.tolist()) == {20.0, 60.0}
    assert set(told["shadow"]) == {"no_bounce", "surface_bounces", "any_bounces"}
    assert all(zone["depth"] == 33.0 for zone in told["convergence_zones"])
    names = {path.name for path in folder.glob("*.png")}
    assert names == {"out.png", "out-shadow.png", "out-arrivals.png"}
    # nothing is written over unasked, the further files neither
    output.unlink()
    figure.unlink()
    status, _, err = ask("rays", folder / "plan.toml", "-o", output, "--figure", figure)
    assert status == 2
    assert "out-arrivals.png: exists already" in err
    assert not output.exists()


def test_a_person_reads_the_same_and_tables_are_csv(ask, folder):
    output = folder / "out.csv"
    status, out, err = ask("rays", written(folder, PLAN), "-o", output)
    assert status == 0, err
    assert out.startswith("A slope\n")
    assert "Convergence zones at 33 m: " in out
    assert "for any ray" in out
    assert "Shadow is not silence" in out
    assert "note: " in err
    rows = [line for line in (folder / "out-arrivals.csv").read_text().splitlines() if not line.startswith("#")]
    assert rows[0].startswith("receiver,receiver_depth [m],receiver_range [m],launch_angle [degrees]")
    count = int(next(line for line in out.splitlines() if line.endswith(" arrivals")).split()[0])
    assert len(rows) == count + 1


def test_an_ensemble_over_casts_or_sources(ask, folder):
    plan = (
        'water.file = "a.csv"\nsource.depth = 30.0\nrays.max_range = 4000.0\nrays.number = 3\nshadow.wanted = true\n'
        "[ensemble]\nranges = 11\ndepths = 9\nworkers = 0\n"
    )
    output = folder / "many.nc"
    path = written(folder, plan + 'files = ["a.csv", "b.csv"]\n')
    status, out, err = ask("rays", path, "-o", output, "--figure", folder / "many.png", "--json")
    assert status == 0, err
    assert json.loads(out)["ensemble"]["members"] == 2
    with xarray.open_dataset(output, group="ensemble") as found:
        assert found.member_name.values.tolist() == ["a", "b"]
        assert found.water_members.values[[0, -1], 0].tolist() == [2, 1]
    assert {path.name for path in folder.glob("*.png")} == {"many.png", "many-ensemble.png"}
    status, out, err = ask("rays", written(folder, plan + "source_depths = [10.0, 30.0, 50.0]\n"), "--json")
    assert status == 0, err
    assert json.loads(out)["ensemble"]["members"] == 3
    status, _, err = ask("rays", written(folder, plan + "source_depths = [10.0, 300.0]\n"))
    assert status == 2
    assert "member 2, source at 300 m: source depth 300 m is below the seabed" in err


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ('"b.csv"]', '"gone.csv"]', "gone.csv"),
        ("ranges = [0.0, 9000.0]", "ranges = [0.0, 9000.0, 1.0]", "plan.toml: section: ranges are no list of 2"),
        ("ranges = [0.0, 9000.0]", "", "plan.toml: section: cast 'a' has no position"),
        ("ranges = [0", 'casts = ["a", "c"]\nranges = [0', "plan.toml: field 'water.casts' has 'c'"),
        ("max_range = 6000", "max_range = 60000", "range 60000 m is beyond the section"),
        ("depth = 30.0", "depth = 199.0", "source depth 199 m is below the seabed"),
        ("number = 7", "number = 0", "field 'rays.number' is 0"),
    ],
)  # fmt: skip
def test_what_does_not_fit_is_told_and_nothing_is_written(ask, folder, old, new, message):
    output = folder / "out.nc"
    assert old in PLAN
    status, out, err = ask("rays", written(folder, PLAN.replace(old, new)), "-o", output)
    assert (status, out) == (2, "")
    assert message in err
    assert not output.exists()


def test_zones_need_a_place_and_are_geojson(ask, folder):
    path = written(folder, PLAN)
    zones = folder / "zones.geojson"
    status, _, err = ask("rays", path, "--zones", zones)
    assert status == 2
    assert "--zones: needs a plan with shadow.wanted = true for a section with a place on the Earth" in err
    status, _, err = ask("rays", path, "--zones", folder / "zones.shp")
    assert "the ending must be .geojson or .json" in err
    (folder / "a.csv").write_text("# latitude: 10.0\n# longitude: 179.96\n" + A)
    (folder / "b.csv").write_text("# latitude: 10.0\n# longitude: -179.96\n" + B)
    without_arrivals = PLAN.split("[arrivals]", maxsplit=1)[0] + PLAN[PLAN.index("[shadow]") :]
    path = written(folder, without_arrivals.replace("ranges = [0.0, 9000.0]\n", ""))
    status, _, err = ask("rays", path, "--zones", zones)
    assert status == 0, err
    features = json.loads(zones.read_text())["features"]
    assert {feature["properties"]["kind"] for feature in features} >= {"shadow_zone", "shadow"}
    assert any(feature["geometry"]["type"] == "MultiLineString" for feature in features)


def test_casts_over_real_bathymetry(ask, real_data, tmp_path):
    """Off Bermuda: the first convergence zone of a source at 150 m lies where rays of the section come back up."""
    plan = f"""
[water]
files = ["{real_data / "exchange" / "BIOS20160414_ct1.zip"}"]
casts = ["BIOS20160414_10323_12", "BIOS20160414_10323_5", "BIOS20160414_61288_1", "BIOS20160414_10323_18"]
along = [[30.796, -63.491], [32.3, -64.573]]
smooth = 40.0
tolerance = 0.05
[seabed]
bathymetry = "{real_data / "bathymetry" / "gebco2025_6min_bermuda.nc"}"
[source]
depth = 150.0
[rays]
max_range = 100000.0
lowest_angle = -5.0
highest_angle = 5.0
number = 11
[shadow]
wanted = true
depths = 41
ranges = 101
at_depths = [150.0]
"""
    path = written(tmp_path, plan)
    output, zones = tmp_path / "b.nc", tmp_path / "b.geojson"
    status, out, err = ask(
        "rays", path, "-o", output, "--zones", zones, "--figure", tmp_path / "b.png", "--json", "--replace"
    )
    assert status == 0, err
    told = json.loads(out)
    assert any("seabed from gebco2025_6min_bermuda.nc" in note for note in told["notes"])
    first = told["convergence_zones"][0]
    assert 45e3 < first["start"] < first["end"] < 95e3
    assert 0.2 < told["shadow"]["no_bounce"] < 0.8
    with xarray.open_dataset(output) as rays:
        assert rays.seabed_depth.max() < 5000.0
        assert rays.latitude.values[0] == pytest.approx(30.796)
    lines = json.loads(zones.read_text())["features"]
    convergence = [feature for feature in lines if feature["properties"]["kind"] == "convergence_zone"]
    assert convergence[0]["properties"]["range_start"] == pytest.approx(first["start"], abs=0.001)


def test_loss_is_a_group_and_a_figure_of_its_own(ask, folder):
    plan = (
        'water.file = "a.csv"\nsource.depth = 30.0\nrays.max_range = 3000.0\nrays.number = 3\n'
        'seabed = {depth = 150.0, kind = "sand"}\n[loss]\nfrequency = 80.0\nranges = 12\nat_depths = [20.0, 100.0]\n'
    )
    output = folder / "loss.nc"
    status, out, err = ask("rays", written(folder, plan), "-o", output, "--figure", folder / "loss.png", "--json")
    assert status == 0, err
    told = json.loads(out)["loss"]
    assert (told["frequency"], told["method"], told["phases"]) == (80.0, "modes", "kept")
    with xarray.open_dataset(output, group="loss") as loss:
        assert loss.range.values.tolist() == pytest.approx(np.arange(1, 13) * 250.0)
        assert loss.depth.values.tolist() == [20.0, 100.0]
        assert float(loss.transmission_loss.median()) == pytest.approx(told["median_transmission_loss"])
    assert (folder / "loss-loss.png").is_file()
    status, _, err = ask("rays", written(folder, plan.replace("80.0", "80.0\nmethod = 'best'")))
    assert status == 2
    assert "field 'loss.method' is 'best': give 'auto' or 'beams' or 'modes'" in err
    low = PLAN.replace("[arrivals]", "[loss]\nfrequency = 20.0\n[arrivals]")
    status, _, err = ask("rays", written(folder, low))
    assert status == 2
    assert "too few for beams" in err
