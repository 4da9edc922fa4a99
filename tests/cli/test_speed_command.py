"""`ocean-sound speed`: one state, a table of states, what it refuses, what it writes."""

from __future__ import annotations

import json
import subprocess
import sys

import numpy as np
import pytest
import xarray as xr

from ocean_sound.cli import run
from ocean_sound.water import absorption, density, equations, sound_speed, speed_derivative

STATE = ["--temperature", "10", "--salinity", "35", "--depth", "100", "--latitude", "45"]


@pytest.fixture
def speed(capsys):
    def call(*arguments):
        status = run(["speed", *map(str, arguments)])
        out, err = capsys.readouterr()
        return status, out, err

    return call


@pytest.fixture
def states(tmp_path):
    path = tmp_path / "states.csv"
    path.write_text(
        "# invented\ntemp [degF],sal [PSS-78],depth [m],lat,lon\n50,35,0,45,-30\n60,,100,45,-30\n41,20,900,,\n"
    )
    return path


def test_all_equations_side_by_side(speed):
    status, out, err = speed(*STATE, "--json")
    assert status == 0
    found = json.loads(out)["equations"]
    assert list(found) == list(equations())
    assert found["mackenzie"]["sound_speed"] == sound_speed(10.0, 35.0, depth=100.0, equation="mackenzie")
    assert found["mackenzie"]["outside_range"] is False
    assert found["marczak"]["outside_range"] is True
    assert "atmospheric pressure only" in found["marczak"]["range_notes"][1]
    assert "Reference Salinity" in err


def test_for_a_person(speed):
    status, out, _ = speed(*STATE, "--equation", "unesco", "--equation", "belogolskii")
    assert status == 0
    assert "temperature 10 degC, salinity 35, depth 100 m, latitude 45 degrees" in out
    unesco, belogolskii = (line for line in out.splitlines() if line.startswith(("unesco", "belogolskii")))
    assert unesco.split() == ["unesco", "1491.49", "0.19", "inside"]
    assert belogolskii.endswith("outside")
    assert "outside: belogolskii: salinity 35 is outside its range 0 only" in out


def test_properties_and_frequency(speed):
    status, out, _ = speed(
        *STATE, "--properties", "--frequency", "200e3", "--ph", "7.9", "--json", "--equation", "leroy"
    )
    assert status == 0
    found = json.loads(out)
    assert found["properties"]["density"] == density(10.0, 35.0, depth=100.0, latitude=45.0)
    leroy = found["equations"]["leroy"]
    slope = speed_derivative(10.0, 35.0, by="depth", depth=100.0, latitude=45.0, equation="leroy")
    assert leroy["by_depth"] == slope
    assert leroy["wavelength"] * 200e3 == pytest.approx(leroy["sound_speed"], rel=1e-14)
    expected = absorption(200e3, 10.0, 35.0, depth=100.0, ph=7.9)
    assert found["absorption"]["francois-garrison"] == expected
    assert found["period"] == 1 / 200e3
    _, out, _ = speed(*STATE, "--properties", "--frequency", "200e3")
    assert "absorption at 200000 Hz, dB/km (per kilometre):" in out
    assert "density, kg/m3: 1027.41" in out


def test_fresh_water_needs_no_depth(speed):
    status, out, err = speed("--temperature", "18", "--salinity", "0", "--json")
    assert status == 0
    assert list(json.loads(out)["equations"]) == ["bilaniuk-wong", "marczak"]
    assert "neither depth nor pressure is given" in err


def test_sea_water_needs_a_depth(speed):
    status, out, err = speed("--temperature", "18", "--salinity", "35")
    assert (status, out) == (2, "")
    assert "--depth or --pressure is missing" in err


def test_a_table_of_states(speed, states):
    status, out, err = speed(states)
    assert status == 0
    assert "1489.82" in out
    assert "*" in out
    assert "temperature converted from degF" in err
    assert "Reference Salinity" in err
    assert "in 1 of 3 values" in err
    _, out, _ = speed(states, "--json", "--equation", "unesco")
    found = json.loads(out)
    assert found["state"]["temperature"] == [10.0, pytest.approx(15.5555556), 5.0]
    assert found["equations"]["unesco"]["sound_speed"][1] is None


def test_a_long_table_is_cut_for_a_person_only(speed, tmp_path):
    path = tmp_path / "long.csv"
    path.write_text("temperature [degC],pressure [dbar]\n" + "10,5\n" * 100)
    status, out, _ = speed(path, "--salinity", "35", "--equation", "unesco", "-o", tmp_path / "all.csv")
    assert status == 0
    assert "... 60 more; -o writes all 100" in out
    lines = [line for line in (tmp_path / "all.csv").read_text().splitlines() if not line.startswith("#")]
    assert len(lines) == 101


def test_outputs(speed, states, tmp_path):
    csv, nc = tmp_path / "out.csv", tmp_path / "out.nc"
    options = ("--properties", "--frequency", "38000", "--equation", "teos10-exact", "--equation", "leroy")
    assert speed(states, *options, "-o", csv)[0] == 0
    assert speed(states, *options, "-o", nc)[0] == 0
    head = next(line for line in csv.read_text().splitlines() if not line.startswith("#"))
    assert head.startswith("temperature [degC],salinity [PSS-78],depth [m]")
    with xr.open_dataset(nc) as dataset:
        assert set(dataset.data_vars) == {column.split(" [")[0] for column in head.split(",")}
        assert dataset.sound_speed_leroy.attrs["standard_name"] == "speed_of_sound_in_sea_water"
        assert dataset.sound_speed_leroy.attrs["equation"] == "leroy"
        assert dataset.sound_speed_teos10_exact.attrs["equation"] == "teos10-exact"
        assert dataset.absorption_francois_garrison.attrs["units"] == "dB km-1"
        assert all("long_name" in variable.attrs for variable in dataset.data_vars.values())
        assert np.isnan(dataset.sound_speed_leroy[1])
    before = csv.read_bytes()
    status, _, err = speed(states, "-o", csv)
    assert (status, "exists already" in err) == (2, True)
    assert csv.read_bytes() == before
    assert speed(states, "-o", csv, "--replace")[0] == 0


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ([], "no temperature: give --temperature"),
        (["--temperature", "10"], "no salinity: give --salinity; 0 for fresh water"),
        ([*STATE, "--pressure", "3"], "pressure and depth are both given"),
        ([*STATE, "--temperature", "283"], "temperature: 283 is impossible"),
        ([*STATE, "--equation", "mackensie"], "did you mean 'mackenzie'?"),
        ([*STATE, "--frequency", "-1"], "frequency: -1 is impossible"),
        ([*STATE, "--map", "depth=Z"], "--map goes with a CSV of states"),
        (["--temperature", "10", "--salinity", "35", "--equation", "unesco"], "equation unesco: neither pressure"),
        (["--temperature", "10", "--salinity", "0", "--properties"], "--properties needs --pressure or --depth"),
        ([*STATE, "-o", "out.txt"], "the ending must be .nc (netCDF) or .csv"),
        (["nowhere.csv"], "nowhere.csv: no such file"),
        (["."], ".: is a folder"),
    ],
)
def test_refusals(speed, arguments, message):
    status, out, err = speed(*arguments)
    assert status == 2
    assert out == ""
    assert message in err
    assert len([line for line in err.splitlines() if not line.startswith("note:")]) == 1


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "holds no line of column names"),
        ("temperature,salinity,depth\n", "no state below the column names on line 1"),
        ("temperature,salinity,depth\n10,35,5\nx,35,5\n", "line 3, column 'temperature': 'x'"),
        ("temperature,salinity,depth\n10,35,5\n-40,35,5\n", "line 3, column 'temperature': -40 is impossible"),
        ("temperature,salinity,depth\n10,35\n", "line 2 has 2 cells where the heads name 3 columns"),
        ("temperature,depth\n10,35\n", "no salinity: "),
        ("temperature,temp,salinity\n1,2,3\n", "two columns look like temperature; choose with --map"),
        ("temperature [K2],salinity,depth\n10,35,5\n", "unit 'K2' is not known for temperature"),
        ("\0\1\2", "is not text"),
    ],
)
def test_refused_files(speed, tmp_path, text, message):
    path = tmp_path / "states.csv"
    path.write_text(text)
    status, out, err = speed(path, "-o", tmp_path / "out.csv")
    assert (status, out) == (2, "")
    assert message in err
    assert str(path) in err
    assert not (tmp_path / "out.csv").exists()


def test_an_option_beside_its_column(speed, states):
    status, _, err = speed(states, "--salinity", "35")
    assert status == 2
    assert "--salinity: " in err
    assert "leave one of the two out" in err


def test_mapping(speed, tmp_path):
    path = tmp_path / "states.csv"
    path.write_text("T,S,Z\n10,35,-5\n")
    arguments = (path, "--map", "temperature=T [degC]", "--map", "salinity=S", "--map", "height=Z", "--json")
    status, out, _ = speed(*arguments)
    assert status == 0
    assert json.loads(out)["state"]["depth"] == [5.0]
    status, _, err = speed(path, "--map", "temperature=X")
    assert (status, "no column is named 'X'" in err) == (2, True)
    status, _, err = speed(path, "--map", "colour=T")
    assert (status, "nothing is named 'colour' here" in err) == (2, True)


def test_speed_imports_little():
    code = (
        "import sys; from ocean_sound.cli import run; status = run(sys.argv[1:]);"
        "print(status, [m for m in ('xarray', 'pandas', 'scipy', 'matplotlib', 'numba', 'netCDF4', 'h5py')"
        " if m in sys.modules], file=sys.stderr)"
    )
    command = [sys.executable, "-c", code, "speed", *STATE, "--properties", "--frequency", "12000"]
    result = subprocess.run(command, capture_output=True, text=True, check=True)
    assert result.stderr.splitlines()[-1] == "0 []"


def test_help_shows_examples_line_by_line_and_every_equation(speed):
    status, out, _ = speed("--help")
    assert status == 0
    assert "  ocean-sound speed --temperature 18 --salinity 0 --equation marczak\n" in out
    assert "\\b" not in out
    words = out.replace(",", " ").split()
    assert all(name in words or f"{name};" in words or f"{name}." in words for name in equations())
