"""The command line as a person meets it: results, messages, exit statuses, and nothing half-written."""

from __future__ import annotations

import json
import subprocess
import sys

import numpy as np
import pytest
import xarray

from ocean_sound.cli import run
from ocean_sound.files import packaged_profile

CAST = "depth [m],temperature [degC],salinity [PSS-78]\n0,15,35\n20,15,35\n40,10,35.1\n200,9,35.2\n"


@pytest.fixture
def cast(tmp_path):
    path = tmp_path / "station.csv"
    path.write_text(CAST)
    return path


@pytest.fixture
def ask(capsys):
    """Run a command line in this process; returns status, standard output, standard error."""

    def asked(*arguments):
        capsys.readouterr()
        status = run([str(argument) for argument in arguments])
        told = capsys.readouterr()
        return status, told.out, told.err

    return asked


def rays(path, *more):
    return ["rays", path, "--source-depth", 10, "--max-range", 3000, *more]


# --- results


@pytest.mark.parametrize("command", [[], ["speed"], ["cast"], ["rays"], ["sensors"], ["demo"]])
def test_each_command_has_help_with_an_example(ask, command):
    status, out, err = ask(*command, "--help")
    assert (status, err) == (0, "")
    assert "ocean-sound " in out
    assert ("Example" in out) or not command


def test_version(ask):
    assert ask("--version")[1].startswith("ocean-sound ")


def test_cast_summarises_and_writes_its_profile(ask, cast, tmp_path):
    output, figure = tmp_path / "profile.nc", tmp_path / "profile.png"
    status, out, _ = ask("cast", cast, "-o", output, "--figure", figure, "--seabed-depth", 210)
    assert status == 0
    assert "station: 4 levels" in out
    assert "sonic layer depth" in out
    assert figure.read_bytes().startswith(b"\x89PNG")
    with xarray.open_dataset(output) as profile:
        assert profile.sound_speed.attrs["standard_name"] == "speed_of_sound_in_sea_water"
        assert profile.sizes == {"level": 4}
    # what the tool writes it reads back
    status, out, _ = ask("cast", output, "--json")
    again = json.loads(out)
    assert (status, again["levels"]) == (0, 4)
    assert again["features"]["sonic_layer_depth"] == 20.0


@pytest.mark.parametrize("ending", ["nc", "csv"])
def test_a_written_profile_gives_the_same_rays_as_its_cast(ask, cast, tmp_path, ending):
    profile = tmp_path / f"profile.{ending}"
    assert ask("cast", cast, "-o", profile)[0] == 0
    direct = json.loads(ask(*rays(cast, "--json"))[1])
    again = json.loads(ask(*rays(profile, "--json"))[1])
    assert again["per_ray"]["depth"] == direct["per_ray"]["depth"]
    assert again["per_ray"]["travel_time"] == direct["per_ray"]["travel_time"]


def test_a_file_of_several_casts_is_listed_and_one_is_chosen(ask):
    path = packaged_profile("observed/33RR20080204_mini_hy1.csv")
    status, out, _ = ask("cast", path)
    assert status == 0
    assert "choose one with --cast" in out
    listed = json.loads(ask("cast", path, "--json")[1])["casts"]
    assert len(listed) > 1
    by_number = json.loads(ask("cast", path, "--cast", 1, "--json")[1])
    by_id = json.loads(ask("cast", path, "--cast", listed[0]["cast_id"], "--json")[1])
    assert by_number == by_id


def test_rays_print_one_json_object_and_nothing_else(ask, cast):
    status, out, _ = ask(*rays(cast, "--shadow", "--rays", 5, "--angles", -10, 10, "--json"))
    told = json.loads(out)
    assert status == 0
    assert told["rays"] == 5
    assert told["per_ray"]["launch_angle"] == [-10, -5, 0, 5, 10]
    assert set(told["shadow"]) == {"no_bounce", "surface_bounces"}


def test_rays_write_netcdf_csv_and_figure(ask, cast, tmp_path):
    outputs = [tmp_path / "rays.nc", tmp_path / "rays.csv"]
    for output in outputs:
        assert ask(*rays(cast, "--shadow", "--points", 50, "-o", output))[0] == 0
    figure = tmp_path / "rays.svg"
    assert ask(*rays(cast, "--shadow", "--figure", figure))[0] == 0
    assert figure.read_text().lstrip().startswith("<?xml")
    with xarray.open_dataset(outputs[0]) as dataset:
        assert dict(dataset.sizes) | {"interval": 0, "zone": 0} == {
            "ray": 41,
            "point": 50,
            "grid_depth": 201,
            "grid_range": 501,
            "interval": 0,
            "zone": 0,
        }
        assert dataset.attrs["Conventions"] == "CF-1.11 ACDD-1.3"
    lines = [line for line in outputs[1].read_text().splitlines() if not line.startswith("#")]
    assert len(lines) == 42
    assert lines[0].startswith("launch_angle [degrees],")


def test_a_plan_does_what_its_options_would(ask, cast, tmp_path):
    plan = tmp_path / "plan.toml"
    plan.write_text(
        'water.file = "station.csv"\nsource.depth = 10\n'
        "[rays]\nmax_range = 3000\nlowest_angle = -8\nhighest_angle = 8\nnumber = 9\n[shadow]\nwanted = true\n"
    )
    planned = json.loads(ask("rays", plan, "--json")[1])
    asked = json.loads(ask(*rays(cast, "--shadow", "--angles", -8, 8, "--rays", 9, "--json"))[1])
    assert planned == asked


def test_the_mapping_names_columns(ask, tmp_path):
    path = tmp_path / "odd.csv"
    path.write_text("a [m],b [m/s]\n0,1500\n100,1490\n")
    arguments = ["--map", "depth=a", "--map", "sound_speed=b"]
    told = json.loads(ask("cast", path, *arguments, "--json")[1])
    assert told["features"]["surface_speed"] == 1500.0


def test_demo_runs_twice_in_a_row(ask, tmp_path):
    folder = tmp_path / "results"
    for _ in range(2):
        status, out, _ = ask("demo", "-o", folder)
        assert status == 0
        assert "invented" in out
        assert "not a navigational product" in out
    names = {path.name for path in folder.iterdir()}
    assert {"SUMMARY.txt", "deep-water-rays.nc", "deep-water-rays.png", "real-cast-equations.csv"} <= names
    assert {"receivers.html", "receivers.png"} <= names
    table = np.genfromtxt(folder / "real-cast-equations.csv", delimiter=",", names=True)
    assert np.nanmax(np.abs(table["delgrosso_ms"] - table["teos10_ms"])) < 0.2


def test_demo_refuses_a_folder_of_other_things(ask, tmp_path):
    (tmp_path / "letters.txt").write_text("dear ...")
    status, _, err = ask("demo", "-o", tmp_path)
    assert status == 2
    assert "holds other things" in err
    assert [path.name for path in tmp_path.iterdir()] == ["letters.txt"]


# --- bad input: one clear line, status 2, nothing written


def bad_casts(folder):
    """Files that can't be used, each with what must be said of it."""
    files = {
        "missing.csv": (None, "no such file"),
        "empty.csv": (b"", "empty"),
        "junk.bin": (bytes(range(256)) * 20, "junk.bin"),
        "no_depth.csv": (b"temperature [degC],salinity\n10,35\n9,35\n", "--map"),
        "text.csv": (b"depth [m],temperature [degC],salinity\n0,10,35\n5,cold,35\n9,8,35\n", "cold"),
        "one_level.csv": (
            b"depth [m],temperature [degC],salinity\n5,10,35\n",
            "at least|needs 2|two|2 levels|needs two",
        ),
        "all_nan.csv": (b"depth [m],temperature [degC],salinity\n0,nan,35\n5,nan,35\n", "usable"),
        "cut.nc": (b"\x89HDF\r\n\x1a\n" + bytes(100), "cut.nc"),
    }
    for name, (content, _) in files.items():
        if content is not None:
            (folder / name).write_bytes(content)
    return {name: message for name, (_, message) in files.items()}


@pytest.mark.parametrize(
    "name",
    ["missing.csv", "empty.csv", "junk.bin", "no_depth.csv", "text.csv", "one_level.csv", "all_nan.csv", "cut.nc", "."],
)
@pytest.mark.parametrize("command", ["cast", "rays"])
def test_bad_files_are_told_in_one_line_and_nothing_is_written(ask, tmp_path, command, name):
    messages = bad_casts(tmp_path) | {".": "is a folder"}
    path, output = tmp_path / name, tmp_path / "out.nc"
    before = sorted(tmp_path.iterdir())
    arguments = rays(path) if command == "rays" else ["cast", path]
    status, out, err = ask(*arguments, "-o", output)
    assert (status, out) == (2, "")
    assert err.startswith("ocean-sound: ")
    assert len(err.splitlines()) == 1, err
    assert str(tmp_path) in err
    assert any(part in err for part in messages[name].split("|")), err
    assert sorted(tmp_path.iterdir()) == before


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--source-depth", 900], "source depth 900 m is below the seabed: it must lie between 0 and 200 m"),
        (["--source-depth", -1], "source depth -1 m is above the surface"),
        (["--max-range", -5], "max_range is -5 m: it must be a positive number"),
        (["--equation", "teos11"], "teos10"),
        (["--rays", 0], "0 rays: at least one"),
        (["--angles", 10, -10], "the lowest comes first"),
        (["--angles", -100, 10], "launch angle 0 is -100 degrees"),
        (["--seabed-depth", 999], "seabed depth 999 m is outside the profile"),
        (["--figure", "rays.doc"], "rays.doc"),
        (["-o", "rays.xls"], "must be .nc (netCDF) or .csv"),
        (["-o", "nowhere/rays.nc"], "nowhere"),
        (["--max-rang", 3], "--max-range"),
        (["--max-range", "far"], "'far' is not a valid float"),
        (["--cast", "9"], "holds 1 casts"),
        (["--map", "depth"], "is not NAME=COLUMN"),
    ],
    ids=lambda item: " ".join(map(str, item)) if isinstance(item, list) else "",
)
def test_bad_options_are_told(ask, cast, tmp_path, monkeypatch, arguments, message):
    monkeypatch.chdir(tmp_path)
    status, out, err = ask(*rays(cast, *arguments))
    assert (status, out) == (2, "")
    assert len(err.splitlines()) == 1, err
    assert message in err
    assert [path.name for path in tmp_path.iterdir()] == ["station.csv"]


def test_missing_options_a_wrong_command_and_a_broken_plan_are_told(ask, cast, tmp_path):
    assert "--source-depth is missing" in ask("rays", cast)[2]
    status, _, err = ask("ray", cast)
    assert status == 2
    assert "did you mean 'rays'?" in err
    plan = tmp_path / "plan.toml"
    plan.write_text("[water\n")
    status, _, err = ask("rays", plan)
    assert status == 2
    assert "is not TOML" in err
    plan.write_text('water.file = "gone.csv"\nsource.depth = 10\nrays.max_range = 3000\n')
    status, _, err = ask("rays", plan)
    assert status == 2
    assert "gone.csv: no such file" in err
    status, _, err = ask("rays", plan, "--source-depth", 3)
    assert status == 2
    assert "--source-depth goes with a cast file" in err


def test_an_error_is_an_object_when_json_was_asked_for(ask, tmp_path):
    status, out, err = ask(*rays(tmp_path / "gone.csv", "--json"))
    told = json.loads(out)
    assert status == told["exit_status"] == 2
    assert told["error"] in err


def test_an_existing_output_is_kept_unless_replacing_was_asked_for(ask, cast, tmp_path):
    output = tmp_path / "rays.nc"
    output.write_text("precious")
    status, _, err = ask(*rays(cast, "-o", output))
    assert status == 2
    assert "--replace" in err
    assert output.read_text() == "precious"
    assert ask(*rays(cast, "-o", output, "--replace"))[0] == 0
    assert output.read_bytes() != b"precious"


def test_a_fault_of_our_own_shows_no_traceback_unless_asked(ask, cast, monkeypatch):
    def breaks(*_, **__):
        raise ZeroDivisionError("oops")

    monkeypatch.setattr("ocean_sound.rays.trace_fan", breaks)
    status, _, err = ask(*rays(cast))
    assert status == 1
    assert len(err.splitlines()) == 1
    assert "ZeroDivisionError: oops" in err
    assert "Traceback" in ask(*rays(cast, "--debug"))[2]


def test_an_interruption_has_its_own_status(ask, cast, monkeypatch):
    def interrupts(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr("ocean_sound.rays.trace_fan", interrupts)
    assert ask(*rays(cast))[0] == 130


def test_a_reader_that_goes_away_is_no_fault(cast):
    """As `ocean-sound rays ... | head -1` does."""
    command = [sys.executable, "-m", "ocean_sound", *map(str, rays(cast, "--rays", "45"))]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as process:
        process.stdout.readline()
        process.stdout.close()
        err = process.stderr.read()
        assert process.wait() == 0, err
    assert "Traceback" not in err
