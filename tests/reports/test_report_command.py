"""`ocean-sound sensors --report`: the page and the map are written, or refused before any work."""

from __future__ import annotations

import hashlib
import json

import numpy as np
import pytest

from ocean_sound.cli import run
from ocean_sound.sensors import losses as losses_module

PLAN = """
title = "Receivers <in> Ostray Sound (invented)"
water.files = ["cast.csv"]
seabed = { depth = 100.0, kind = "absorbs all" }
area = { south = 30.0, north = 30.1, west = 179.95, east = -179.95, spacing = 2500 }
target = { source_level = 150.0, frequency = 12000, depths = [20.0] }
receiver = { detection_threshold = 8.0, bandwidth = 500.0, depths = [40.0] }
sites.spacing = 6000
choice.number = 1
run = { max_range = 6000, bearings = 4, ranges = 20, depths = 3, workers = 1 }
"""


def spherical(section, *, source_depth, ranges, depths, **_):
    return 20.0 * np.log10(np.hypot(np.asarray(ranges)[:, None], np.asarray(depths)[None, :] - source_depth))


@pytest.fixture
def plan(tmp_path, monkeypatch):
    monkeypatch.setattr(losses_module, "_engine", spherical)
    (tmp_path / "cast.csv").write_text(
        "depth [m],temperature [degC],salinity [PSS-78]\n0,10,35\n50,10,35\n100,10,35\n", encoding="utf-8"
    )
    path = tmp_path / "plan.toml"
    path.write_text(PLAN, encoding="utf-8")
    return path


def test_page_and_map(plan, tmp_path, capsys):
    page, picture = tmp_path / "plan.html", tmp_path / "map.png"
    assert run(["sensors", str(plan), "--report", str(page), "--figure", str(picture), "--json"]) == 0
    json.loads(capsys.readouterr().out)
    text = page.read_text(encoding="utf-8")
    assert "<h1>Receivers &lt;in&gt; Ostray Sound (invented)</h1>" in text
    for name in ("plan.toml", "cast.csv"):
        assert name in text
        assert hashlib.sha256((tmp_path / name).read_bytes()).hexdigest() in text
    assert picture.read_bytes().startswith(b"\x89PNG")


def test_outputs_are_refused_before_work(plan, tmp_path, capsys, monkeypatch):
    monkeypatch.setattr(losses_module, "_engine", None)
    (tmp_path / "plan.html").write_text("")
    for option, name, message in (
        ("--report", "plan.html", "exists already"),
        ("--report", "plan.pdf", "a report is a page of HTML; name it .html"),
        ("--figure", "map.gif", "name it .png, .svg or .pdf"),
    ):
        assert run(["sensors", str(plan), option, str(tmp_path / name), "--json"]) == 2
        assert message in json.loads(capsys.readouterr().out)["error"]
