"""`ocean-sound soundings`: what it prints, what it writes, and how it ends."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from click.testing import CliRunner

from ocean_sound.cli import run
from ocean_sound.files import checksum

sys.path.insert(0, str(Path(__file__).parents[1] / "soundings"))
from straight import as_sounding, survey

SCALES = ("--time-scale", "4", "--length-scale", "20")


def write_cast(path, hour, warm=0.0, deepest=80):
    """A cast of invented water: warmer above, nearly uniform below."""
    rows = "".join(
        f"{z},{9.0 + (2.0 + warm) * np.exp(-z / 15.0):.4f},{34.0 + 0.01 * z:.3f}\n" for z in range(0, deepest, 2)
    )
    path.write_text(
        f"# time: 2026-05-04T{hour:02d}:00:00Z\n# latitude: 60.0\n# longitude: 5.0\n"
        f"depth [m],temperature [degC],salinity [PSS-78]\n{rows}"
    )
    return path


@pytest.fixture
def folder(tmp_path, monkeypatch):
    """Three casts and two lines."""
    (tmp_path / "casts").mkdir()
    for hour, warm in ((9, 0.0), (11, 0.5), (13, 1.0)):
        write_cast(tmp_path / "casts" / f"c{hour}.csv", hour, warm)
    dataset = survey(pings=30, beams=7)
    dataset["surface_sound_speed"] = ("ping", np.full(30, 1492.0), {"units": "m s-1"})
    dataset.to_netcdf(tmp_path / "line.nc")
    dataset.isel(ping=slice(0, 10)).to_netcdf(tmp_path / "short.nc")
    monkeypatch.chdir(tmp_path)
    return tmp_path


def invoke(capsys, *arguments):
    """Exit status, standard output, standard error."""
    status = run(["soundings", *map(str, arguments)])
    said = capsys.readouterr()
    return status, said.out, said.err


def told(capsys, *arguments):
    status, out, _ = invoke(capsys, *arguments, "--json")
    return status, json.loads(out)


def test_a_line_is_corrected(folder, capsys):
    status, summary = told(capsys, "line.nc", "--casts", "casts", *SCALES, "-o", "out.nc")
    assert status == summary["exit_status"] == 0
    (one,) = summary["files"]
    assert one["soundings"] == 210
    assert sum(one["flags"].values()) == sum(one["reasons"].values()) == 210
    assert one["flags"]["pass"] == 210
    assert [cast["cast_id"] for cast in summary["casts"]["used"]] == ["c9", "c11", "c13"]
    assert sum(each["soundings"] for each in one["soundings_by_cast"]) == 210
    assert 0.0 < one["arithmetic_error_of_tables"] <= 0.001
    assert one["tvu_95"]["median"] <= one["tvu_95"]["95_percent"] <= one["tvu_95"]["largest"]
    assert set(one["orders_held_by_sound_speed"]) == {"2", "1b", "1a", "Special", "Exclusive"}
    assert "does not average out" in one["note_on_orders"]
    with xr.open_dataset("out.nc") as back:
        assert back["depth"].dims == ("ping", "beam")
        # the beams were made over a flat bottom at 39 m with 1500 m/s; this water is some 0.6 % slower
        assert (np.abs(back["depth"].values - 39.0 * 1492.0 / 1500.0) < 0.5).all()
        assert back.attrs["source_checksum"] == checksum("line.nc")
        assert back["cast_checksum"].values.tolist() == [checksum(f"casts/c{hour}.csv") for hour in (9, 11, 13)]
        settings = json.loads(back.attrs["settings"])
        assert settings["decorrelation_time"] == 4 * 3600.0
        assert settings["array"] == "flat"
        assert one["deepest_depth"] == back["depth"].values.max()


def test_for_a_person(folder, capsys):
    status, out, err = invoke(
        capsys, "line.nc", "--casts", "casts", *SCALES, "-o", "out.nc", "--order", "1a", "--frequency", "200"
    )
    assert status == 0
    assert "210 soundings" in out
    assert "that is arithmetic, not the accuracy of soundings" in out
    assert "by sound speed alone: 1a 100.0 %" in out
    assert "does not average out" in out
    assert "Mean absorption" in out
    assert "A cast stands for the water within 4 h and 20 km (as given)" in out
    assert "pressure from depth" in err
    assert "steered" not in err  # the file has the speed
    with xr.open_dataset("line.nc") as line:
        assert f"Mean absorption from {line['transducer_depth'].values.min():.3g} m down" in out


def test_csv_equals_netcdf(folder, capsys):
    as_sounding(xr.open_dataset("line.nc", decode_timedelta=False).load()).to_netcdf("rows.nc")
    for source, goal in (("line.nc", "a.nc"), ("rows.nc", "b.nc"), ("rows.nc", "c.csv"), ("c.csv", "d.nc")):
        assert invoke(capsys, source, "--casts", "casts", *SCALES, "-o", goal)[0] == 0
    table = pd.read_csv("c.csv", comment="#")
    with xr.open_dataset("a.nc") as a, xr.open_dataset("b.nc") as b, xr.open_dataset("d.nc") as d:
        for name in ("depth", "across_track_distance", "sounding_latitude", "sounding_longitude"):
            for other in (b, d):
                np.testing.assert_allclose(other[name].values, a[name].values.ravel(), rtol=0.0, atol=2e-9)
        np.testing.assert_allclose(table["depth [m]"], b["depth"].values, rtol=0.0, atol=0.0)


def test_several_files_go_to_a_folder(folder, capsys):
    (folder / "broken.nc").write_bytes(b"CDF\x01nothing")
    (folder / "out").mkdir()
    status, summary = told(capsys, "line.nc", "broken.nc", "short.nc", "--casts", "casts", *SCALES, "-o", "out")
    assert status == 3
    assert [one["soundings"] for one in summary["files"]] == [210, 70]
    assert summary["left_out"] == [{"file": "broken.nc", "reason": summary["left_out"][0]["reason"]}]
    assert "cut short or damaged" in summary["left_out"][0]["reason"]
    assert sorted(path.name for path in (folder / "out").iterdir()) == ["line.nc", "short.nc"]
    with xr.open_dataset("out/line.nc") as whole, xr.open_dataset("out/short.nc") as part:
        # tables of another job may begin elsewhere, so their arithmetic differs
        assert (np.abs(whole["depth"].values[:10] - part["depth"].values) < 0.001).all()


def test_a_cast_that_gives_no_profile_is_named(folder, capsys):
    (folder / "casts" / "bad.csv").write_text("hello\n")
    status, out, err = invoke(capsys, "line.nc", "--casts", "casts", *SCALES, "-o", "out.nc")
    assert status == 3
    assert "left out: casts/bad.csv: no table found" in err
    assert "1 left out" in out


def test_one_cast_serves_all(folder, capsys):
    status, summary = told(capsys, "line.nc", "--casts", "casts/c9.csv", "-o", "out.nc")
    assert status == 0
    assert summary["scales"]["how"] == "one cast serves all"
    assert summary["files"][0]["flags"]["pass"] == 210


def test_soundings_corrected_before_are_corrected_anew(folder, capsys):
    assert invoke(capsys, "line.nc", "--casts", "casts/c9.csv", "-o", "first.nc")[0] == 0
    again = ("first.nc", "--corrected-with", "casts/c9.csv")
    assert invoke(capsys, *again, "--casts", "casts/c13.csv", "-o", "second.nc")[0] == 0
    assert invoke(capsys, "line.nc", "--casts", "casts/c13.csv", "-o", "direct.nc")[0] == 0
    with (
        xr.open_dataset("second.nc") as one,
        xr.open_dataset("direct.nc") as other,
        xr.open_dataset("first.nc") as first,
    ):
        assert np.abs(one["depth"].values - other["depth"].values).max() < 0.002  # two tables of 1 mm
        assert np.abs(first["depth"].values - other["depth"].values).max() > 0.01
        np.testing.assert_array_equal(one["depth_before"].values, first["depth"].values)


def test_depths_recorded_at_a_nominal_speed(folder, capsys):
    dataset = survey(pings=5).drop_dims("beam")
    dataset["recorded_depth"] = ("ping", np.full(5, 40.0), {"units": "m"})
    dataset["transducer_depth"] = ("ping", np.zeros(5), {"units": "m"})
    dataset.to_netcdf("single.nc")
    options = ("--casts", "casts/c9.csv", "-o", "out.nc")
    assert invoke(capsys, "single.nc", "--recorded-speed", "1500", *options)[0] == 0
    with xr.open_dataset("out.nc") as back:
        speed = back["harmonic_mean_speed"].values
        np.testing.assert_allclose(back["depth"].values, 40.0 * speed / 1500.0, rtol=1e-4)
    more = ("--recorded-added", "2", "--replace")
    assert invoke(capsys, "single.nc", "--recorded-speed", "1500", *more, *options)[0] == 0
    with xr.open_dataset("out.nc") as back:
        np.testing.assert_allclose(back["depth"].values, 38.0 * speed / 1500.0, rtol=1e-4)
    status, _, err = invoke(capsys, "single.nc", "--vertical", *options, "--replace")
    assert (status, "two_way_travel_time [s] is missing" in err) == (2, True)


def test_the_surface_is_watched(folder, capsys):
    dataset = xr.open_dataset("line.nc", decode_timedelta=False).load()
    dataset["surface_sound_speed"].values[5:9] += 6.0
    dataset.to_netcdf("watched.nc")
    status, summary = told(capsys, "watched.nc", "--casts", "casts/c9.csv", "-o", "out.nc")
    surface = summary["files"][0]["surface_sound_speed"]
    assert status == 0
    assert surface["pings_beyond"] == 4
    assert [(run["first_ping"], run["last_ping"]) for run in surface["partings"]] == [(5, 8)]
    _, more = told(
        capsys, "watched.nc", "--casts", "casts/c9.csv", "-o", "out.nc", "--replace", "--surface-difference", "50"
    )
    assert more["files"][0]["surface_sound_speed"]["pings_beyond"] == 0


def test_next_cast_and_what_each_is_worth(folder, capsys):
    for hour in range(14, 22):
        write_cast(folder / "casts" / f"c{hour}.csv", hour, np.sin(hour))
    asked = ("--casts", "casts", "--length-scale", "1000", "--time-scale", "2", "--next-cast", "--leave-one-out")
    status, summary = told(capsys, *asked, "--order", "Special", "--seabed-depth", "50", "--figure", "interval.png")
    assert status == 0
    assert summary["next_cast"]["depth"] == [50.0]
    assert "Special" in summary["next_cast"]["limited_by"]
    assert len(summary["leave_one_out"]["casts"]) == 11
    assert (folder / "interval.png").read_bytes()[1:4] == b"PNG"
    _, out, _ = invoke(capsys, *asked, "--order", "Special")
    assert "Next cast, for" in out
    assert "casts left out one by one" in out


def test_how_far_out_each_order_holds(folder, capsys):
    asked = ("--casts", "casts", *SCALES, "--by-angle", "--seabed-depth", "60", "--transducer-depth", "4")
    status, summary = told(capsys, *asked, "--figure", "orders.png")
    assert status == 0
    assert (folder / "orders.png").read_bytes()[1:4] == b"PNG"
    rows = {(row["case"], row["order"]): row for row in summary["by_angle"]}
    assert {case for case, _ in rows} == {"at a cast", "where a cast only just serves"}
    now, late = (rows[case, "Exclusive"] for case in ("at a cast", "where a cast only just serves"))
    assert (now["depth"][0], now["depth"][-1], len(now["depth"])) == (6.8, 60.0, 20)
    assert all(a >= b > 30.0 for a, b in zip(now["largest_angle"], late["largest_angle"], strict=True))
    assert now["largest_angle"] != late["largest_angle"]
    _, out, _ = invoke(capsys, *asked, "--order", "1a")
    assert "Largest beam angle up to which all beams hold the order by sound speed alone, degrees, at a cast:" in out
    assert "to m" in out
    wider = told(capsys, *asked, "--water-change", "5")[1]["by_angle"]
    assert min(
        next(row for row in wider if row["case"] != "at a cast" and row["order"] == "Exclusive")["largest_angle"]
    ) < min(late["largest_angle"])
    one = told(capsys, "--casts", "casts/c9.csv", "--by-angle")[1]["by_angle"]
    assert {row["case"] for row in one} == {"at a cast"}


def test_the_two_casts_that_differ_most(folder, capsys):
    asked = ("--casts", "casts", *SCALES, "--differ-most", "--seabed-depth", "50", "--figure", "apart.png")
    status, summary = told(capsys, *asked)
    assert status == 0
    assert {summary["differ_most"]["used"], summary["differ_most"]["water"]} == {"c9", "c13"}
    assert (folder / "apart.png").read_bytes()[1:4] == b"PNG"
    assert "Most apart: c" in invoke(capsys, *asked, "--replace")[1]


def test_soundings_without_a_cast_near_enough_are_warned_of(folder, capsys):
    short = ("line.nc", "--casts", "casts", "--time-scale", "0.5", "--length-scale", "20")
    status, out, err = invoke(capsys, *short)
    assert status == 0
    assert (
        "warning: line.nc: 100.0% of the soundings have no cast within 0.5 h and 20 km (as given): take more casts, or "
        "give --time-scale (hours) and --length-scale (km)" in err
    )
    assert "no cast near enough" in out or "near enough" in out
    assert "warning" not in invoke(capsys, "line.nc", "--casts", "casts", *SCALES)[2]


def test_the_nearest_cast_alone(folder, capsys):
    plain = ("line.nc", "--casts", "casts", *SCALES)
    assert invoke(capsys, *plain, "-o", "blend.nc")[0] == invoke(capsys, *plain, "--nearest", "-o", "one.nc")[0] == 0
    with xr.open_dataset("blend.nc") as blend, xr.open_dataset("one.nc") as one:
        assert (one["cast_weight"].values == 1.0).all()
        assert (blend["cast_weight"].values < 1.0).any()


def test_the_passport_of_a_sounding(folder, capsys):
    given = ("line.nc", "--casts", "casts", *SCALES, "--order", "1a")
    _, summary = told(capsys, *given, "-o", "out.nc", "--passport", "12,6", "--figure", "passport.png")
    found = summary["passport"]
    with xr.open_dataset("out.nc") as back:
        assert found["results"]["depth"] == pytest.approx(float(back["depth"][12, 6]), abs=1e-9)
        # exact derivatives here, a table there, within 2 % for a transducer at the least depth of the line
        assert found["tvu_95"] == pytest.approx(float(back["tvu_95"][12, 6]), rel=0.02)
    assert sum(cast["weight"] for cast in found["casts"]) == pytest.approx(1.0)
    assert Path("passport.png").read_bytes()[1:4] == b"PNG"
    words = found["command"].split()
    assert words[:2] == ["ocean-sound", "soundings"]
    assert "out.nc" not in words
    _, again = told(capsys, *words[2:])
    assert again["passport"]["results"] == found["results"]


def test_a_swath_before_and_after(folder, capsys):
    assert invoke(capsys, "line.nc", "--casts", "casts", *SCALES, "--figure", "swath.svg")[0] == 0
    text = Path("swath.svg").read_text()
    assert "<svg" in text
    assert sorted(path.name for path in folder.glob("*.nc")) == ["line.nc", "short.nc"]


def test_other_components_are_added(folder, capsys):
    Path("boat.toml").write_text(
        '[tide]\nkind = "vertical"\nfixed = 0.2\nk = 1\n\n[position]\nkind = "horizontal"\nfixed = 1.0\nk = 1\n'
    )
    options = ("line.nc", "--casts", "casts", *SCALES, "-o", "out.nc", "--components", "boat.toml")
    _, summary = told(capsys, *options)
    (one,) = summary["files"]
    # 1.96 times the root of the sum of squares, IHO S-44 edition 6.0.0, section 2.6
    assert one["total_tvu_95"]["largest"] == pytest.approx(np.hypot(1.96 * 0.2, one["tvu_95"]["largest"]), rel=1e-3)
    assert one["orders_held"]["Special"] == 0.0  # at 39 m its TVU is sqrt(0.25² + (0.0075 39)²) = 0.385 m
    assert one["orders_held_by_sound_speed"]["Special"] == 1.0
    with xr.open_dataset("out.nc") as back:
        assert back["orders_held"].attrs["flag_meanings"] == "2 1b 1a Special Exclusive"
        held = back["orders_held"].values
        assert ((held & 4) > 0).all()
        assert ((held & 8) == 0).all()


def test_help_loads_nothing_heavy():
    code = (
        "import sys; from ocean_sound.cli import run; assert run(['soundings', '--help']) == 0; "
        "sys.exit(','.join(name for name in ('numpy', 'numba', 'xarray', 'pandas', 'netCDF4', 'scipy', 'matplotlib') "
        "if name in sys.modules) or 0)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    assert "Examples:" in done.stdout


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["line.nc"], "Missing option '--casts'"),
        (["--casts", "casts"], "BEAMS are missing: name the files to correct"),
        (["--casts", "casts", "--next-cast", "-o", "x.nc"], "-o names the corrected soundings"),
        (["--casts", "casts", "--frequency", "200", "--figure", "x.png"], "--figure has nothing to draw"),
        (["line.nc", "short.nc", "--casts", "casts", "--passport", "1,1"], "are of one file of BEAMS"),
        (["--casts", "casts", "--next-cast", "--passport", "1,1"], "--passport is of a sounding"),
        (["line.nc", "--casts", "casts", *SCALES, "--passport", "1-1"], "is not PING,BEAM; such as 120,3"),
        (["line.nc", "--casts", "casts", *SCALES, "--passport", "30,1"], "line.nc: there is no ping 30, beam 1"),
        (["line.nc", "--casts", "casts", "--vertical", "--recorded-speed", "1500"], "exclude each other"),
        (["line.nc", "--casts", "casts", "--scheduler", "tcp://localhost:1"], "--scheduler works a file a task"),
        (["--casts", "casts", "--next-cast"], "--next-cast needs one order"),
        (["--casts", "casts", "--leave-one-out"], "--leave-one-out needs one order"),
        (
            ["--casts", "casts", "--next-cast", "--by-angle", "--order", "1a", "--figure", "x.png"],
            "--figure draws one thing: give one of --by-angle and --next-cast",
        ),
        (
            ["--casts", "casts", *SCALES, "--by-angle", "--transducer-depth", "90"],
            "the transducer is at 90 m, and the seabed at 78 m: the first above the second",
        ),
        (["line.nc", "short.nc", "--casts", "casts", "-o", "none"], "several BEAMS need an existing folder"),
        (["line.nc", "--casts", "casts", "-o", "x.txt"], "the ending must be .nc (netCDF) or .csv"),
        (["line.nc", "--casts", "casts", "-o", "line.nc"], "exists already"),
        (["line.nc", "--casts", "none.csv"], "none.csv: can't be read"),
        (["line.nc", "--casts", "casts"], "give --time-scale (hours) and --length-scale (km)"),
        (["line.nc", "--casts", "casts", *SCALES, "--order", "7"], "order '7' is unknown: 2, 1b, 1a"),
        (["none.nc", "--casts", "casts", *SCALES], "none.nc: can't be read: No such file"),
        (["line.nc", "--casts", "casts", "--time-scale", "0", "--length-scale", "1"], "scale of time is 0"),
    ],
)
def test_what_can_not_be_is_refused(folder, capsys, arguments, message):
    before = sorted(path.name for path in folder.rglob("*"))
    status, out, err = invoke(capsys, *arguments)
    assert status == 2
    assert message in err
    assert out == ""
    assert "Traceback" not in err
    assert sorted(path.name for path in folder.rglob("*")) == before


def test_with_json_an_error_is_an_object(folder, capsys):
    status, summary = told(capsys, "none.nc", "--casts", "casts/c9.csv")
    assert status == summary["exit_status"] == 2
    assert "none.nc" in summary["error"]


def test_help_begins_with_an_example():
    from ocean_sound.cli.soundings import command

    text = CliRunner().invoke(command, ["--help"]).output
    assert "ocean-sound soundings line.nc --casts casts/ -o corrected.nc" in text
    assert "responsible authority" in " ".join(text.split())
