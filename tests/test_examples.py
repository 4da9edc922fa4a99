"""The examples run, from anywhere, and say what they are about."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest
import xarray as xr

from ocean_sound.cli import run
from ocean_sound.soundings.components import read_components

TOP = Path(__file__).parents[1]
FOLDER = TOP / "examples"


@pytest.mark.parametrize("script", sorted(FOLDER.glob("*.py")), ids=lambda path: path.stem)
def test_scripts(script, tmp_path):
    done = subprocess.run([sys.executable, script], capture_output=True, text=True, cwd=tmp_path, check=False)
    assert done.returncode == 0, done.stderr
    assert len(done.stdout.splitlines()) >= 3
    assert done.stderr == ""


def test_the_template(tmp_path):
    cast = TOP / "profiles" / "invented" / "ostray_edge.csv"
    output = tmp_path / "levels.txt"
    arguments = ["cast", cast, "--thin", 0.02, "--template", FOLDER / "sounder.toml", "-o", output]
    assert run([str(argument) for argument in arguments]) == 0
    assert output.read_bytes().count(b"\r\n") > 3


def test_the_components():
    components = read_components(FOLDER / "boat.toml")
    assert {part.kind for part in components} == {"vertical", "horizontal"}


@pytest.mark.parametrize("plan", sorted(FOLDER.glob("ostray*.toml")), ids=lambda path: path.stem)
def test_plans(plan, capsys):
    assert run(["rays", str(plan)]) == 0
    assert "rays to" in capsys.readouterr().out


def test_the_python_face_of_the_readme(tmp_path, monkeypatch):
    code = (TOP / "README.md").read_text(encoding="utf-8").split("```python\n")[1].split("```")[0]
    (tmp_path / "cast.csv").write_text("depth [m],temperature [degC],salinity [PSS-78]\n0,15,35\n200,9,35.2\n")
    monkeypatch.chdir(tmp_path)
    names: dict = {}
    exec(code, names)  # noqa: S102
    assert names["rays"].sizes["ray"] == 3


def test_the_plan_of_sensors(tmp_path, capsys):
    page, output = tmp_path / "plan.html", tmp_path / "plan.nc"
    arguments = ["sensors", FOLDER / "edge_receivers.toml", "--report", page, "-o", output]
    assert run([str(argument) for argument in arguments]) == 0
    assert "proved best" in capsys.readouterr().out
    credit = "Casts: invented, they come with ocean_sound"
    assert credit in page.read_text(encoding="utf-8")
    with xr.open_dataset(output) as result:
        assert result.attrs["acknowledgement"] == credit
        assert result.sizes["site"] == 3
