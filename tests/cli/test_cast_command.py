"""`ocean-sound cast` beyond reading: check, complete, compare, thin, hand over."""

from __future__ import annotations

import json

import numpy as np
import pytest
import xarray

from ocean_sound.cli import run
from ocean_sound.files import packaged_profile

EDGE, DEEP = packaged_profile("invented/ostray_edge.csv"), packaged_profile("invented/ostray_deep.csv")


@pytest.fixture
def cast(capsys):
    """Run `ocean-sound cast`; returns status, standard output, standard error."""

    def asked(*arguments):
        capsys.readouterr()
        status = run(["cast", *map(str, arguments)])
        told = capsys.readouterr()
        return status, told.out, told.err

    return asked


@pytest.fixture
def spiked(tmp_path):
    """Good water with one wild temperature at level 4."""
    depth = np.arange(0.0, 100.0, 5.0)
    temperature = 15.0 - 0.02 * depth
    temperature[3] += 12.0
    path = tmp_path / "spiked.csv"
    rows = [f"{z},{t},{35 + 0.001 * z}" for z, t in zip(depth, temperature, strict=True)]
    path.write_text("\n".join(["depth [m],temperature [degC],salinity [PSS-78]", *rows, ""]))
    return path


def test_check_tells_each_test_and_keeps_a_bad_value_out_of_the_profile(cast, spiked):
    status, out, err = cast(spiked, "--check", "--json")
    told = json.loads(out)
    assert status == 0
    assert told["checks"]["spike"]["temperature"]["fail"] == 1
    assert told["profile_levels"] == 19
    assert "spike test: temperature fail on level 4" in err
    assert json.loads(cast(spiked, "--json")[1])["profile_levels"] == 20
    assert "Checked by the thresholds 'lake'" in cast(spiked, "--thresholds", "lake")[1]


def test_a_person_overrides_the_tests(cast, spiked, tmp_path):
    verdicts = tmp_path / "verdicts.csv"
    verdicts.write_text("level,variable,flag,reason,who\n4,temperature,1,seen again on the way up,A. Nyone\n")
    told = json.loads(cast(spiked, "--check", "--flags", verdicts, "--json")[1])
    assert told["profile_levels"] == 20
    assert any("A. Nyone" in note for note in told["notes"])


def test_a_cast_is_carried_down_with_a_neighbours_water(cast):
    told = json.loads(cast(EDGE, "--neighbour", DEEP, "--to-depth", 1000, "--json")[1])
    assert told["features"]["deepest_depth"] == pytest.approx(1000.0, abs=0.5)
    assert any("ostray_deep" in note for note in told["notes"])


def test_comparison_in_words_as_data_and_as_a_figure(cast, tmp_path):
    output, figure = tmp_path / "comparison.nc", tmp_path / "comparison.png"
    status, out, _ = cast(EDGE, "--compare", DEEP, "-o", output, "--figure", figure)
    assert status == 0
    assert "corrected with ostray_edge" in out
    assert "across-track error" in out
    assert figure.read_bytes().startswith(b"\x89PNG")
    with xarray.open_dataset(output) as found:
        parts = sum(found[f"speed_difference_by_{name}"] for name in ("temperature", "salinity", "pressure"))
        np.testing.assert_allclose(parts, found.speed_difference, atol=0.01)
    assert cast(EDGE, "--compare", DEEP, "-o", tmp_path / "comparison.csv")[0] == 0


def test_thinning_states_its_guarantee(cast, tmp_path):
    output = tmp_path / "thin.csv"
    status, out, _ = cast(EDGE, "--thin", 0.05, "-o", output)
    assert status == 0
    assert "no beam within 65 degrees of the vertical moves by more than" in out
    lines = [line for line in output.read_text().splitlines() if not line.startswith("#")]
    assert 3 < len(lines) < 60
    assert cast(output)[0] == 0


def test_averages_say_what_they_do_to_a_beam(cast):
    _, out, _ = cast(EDGE, "--bin", 5, "--smooth", 10)
    assert "bins of 5 m: no beam" in out
    assert "smoothing of 10 m: no beam" in out


def test_hand_over_writes_as_the_template_says(cast, tmp_path):
    template, output = tmp_path / "template.toml", tmp_path / "levels.txt"
    template.write_text('level = "{depth:8.2f} {speed:8.3f}"\n')
    status, out, _ = cast(EDGE, "--thin", 0.05, "--template", template, "-o", output)
    assert status == 0
    assert "as printed" in out
    levels = np.loadtxt(output)
    assert levels[0, 0] == 0.0
    assert np.all(np.diff(levels[:, 0]) > 0.0)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--template", "t.toml"], "name the file with -o"),
        (["--thresholds", "pond"], "pond"),
        (["--flags", "no.csv"], "no.csv"),
        (["--climatology", "no.nc"], "no.nc"),
        (["--thin", -1], "tolerance is -1"),
        (["--compare", "no.csv"], "no.csv"),
        (["--to-depth", -5], "to_depth is -5"),
        (["--grid-salinity", "salty"], "'salty' is not one of"),
    ],
    ids=lambda item: " ".join(map(str, item)) if isinstance(item, list) else "",
)
def test_bad_options_are_told(cast, tmp_path, monkeypatch, arguments, message):
    monkeypatch.chdir(tmp_path)
    status, out, err = cast(EDGE, *arguments)
    assert (status, out) == (2, "")
    assert err.splitlines()[-1].startswith("ocean-sound: ")
    assert message in err
    assert list(tmp_path.iterdir()) == []
