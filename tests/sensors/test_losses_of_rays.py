"""Losses around sites by beams: reach by closed form, exchange of source and receiver, workers, real water."""

from __future__ import annotations

import json
from itertools import combinations

import numpy as np
import pytest
import xarray as xr
from pyproj import Geod
from scipy.optimize import brentq

from ocean_sound.cli import run
from ocean_sound.profile import Profile
from ocean_sound.section import Seabed, Section
from ocean_sound.sensors.area import Area
from ocean_sound.sensors.coverage import Hearing, Noise, Target, detection_ranges, losses_at
from ocean_sound.sensors.hearing import Receiver
from ocean_sound.sensors.losses import LossSettings, _engine, compute_losses
from ocean_sound.sensors.sites import Site
from ocean_sound.sensors.waters import Member

STILL = Member("still", (Profile([0.0, 100.0], [1500.0, 1500.0]),))


@pytest.mark.parametrize("sensor", [12.0, 55.0])
def test_reach_equals_the_closed_form(sensor):
    """One speed, a level seabed that absorbs all, no reflection by the surface: 20 log r + a r = allowed loss."""
    settings = LossSettings(
        frequency=12e3, max_range=8e3, depths=np.linspace(5.0, 95.0, 19), bearings=3, ranges=160, kind=None,
        absorption=1.3, boundaries=False,
    )  # fmt: skip
    losses = compute_losses([Site("A", 30.0, 179.99, sensor)], [STILL], settings=settings, bathymetry=100.0)
    hearing = Hearing(Target(150.0), Receiver(8.0, 500.0), Noise([50.0]))
    reach = detection_ranges(losses, hearing, depths=[sensor])
    allowed = 150.0 - (50.0 + 10.0 * np.log10(500.0)) - 8.0
    expected = brentq(lambda r: 20.0 * np.log10(r) + 1.3e-3 * r - allowed, 10.0, 1e5)
    assert reach["detection_range"].values == pytest.approx(expected, rel=0.01)
    area = Area.box(29.95, 30.05, 179.94, -179.96, spacing=900.0, depths=[20.0, 70.0], bathymetry=100.0)
    found = losses_at(losses, area)[0, 0]
    lat, lon = np.full(area.size, 30.0), np.full(area.size, 179.99)
    away = np.asarray(Geod(ellps="WGS84").inv(lon, lat, area.cell_longitude, area.cell_latitude)[2])
    slant = np.hypot(away, area.cell_depth - sensor)
    far = (away > 500.0) & (away < 8e3)
    assert far.sum() > 200
    error = np.abs(found - 20.0 * np.log10(slant) - 1.3e-3 * slant)[far]
    assert np.median(error) < 0.2
    assert error.max() < 0.5


def test_source_and_receiver_may_be_exchanged():
    """Loss averaged over 1 km differs by less than 0.2 dB in the median; by 3000 beams."""
    water = Profile([0.0, 20.0, 45.0, 120.0], [1512.0, 1511.5, 1498.0, 1494.0])
    section = Section.from_profile(water, seabed=Seabed.flat(110.0, "sand"), max_range=5e3)
    ranges, depths = np.linspace(50.0, 5e3, 100), np.array([15.0, 40.0, 95.0])
    of = {
        z: _engine(
            section, source_depth=z, frequency=12e3, ranges=ranges, depths=depths, method="beams", phases="dropped",
            absorption=1.3, beams=3000,
        )
        for z in depths.tolist()
    }  # fmt: skip

    def averaged(loss):
        return -10.0 * np.log10((10.0 ** (-loss / 10.0)).reshape(5, 20).mean(axis=1))

    differences = np.array([
        averaged(of[depths[i]][:, j]) - averaged(of[depths[j]][:, i]) for i, j in combinations(range(3), 2)
    ])  # fmt: skip
    assert np.median(np.abs(differences)) < 0.2
    assert abs(np.median(differences)) < 0.2


def test_worker_processes_find_the_same(tmp_path):
    settings = LossSettings(
        frequency=3e3, max_range=2e3, depths=np.array([20.0, 40.0]), bearings=13, ranges=9, beams=40
    )
    sites = [Site("A", 30.0, -60.0, 40.0), Site("B", 30.0, -60.0, 60.0)]
    common = {"settings": settings, "bathymetry": 100.0}
    told = []
    by_two = compute_losses(
        sites, [STILL], folder=tmp_path, number=2, progress=lambda *done: told.append(done), **common
    )
    alone = compute_losses(sites, [STILL], **common)
    assert by_two.computed == alone.computed == 26
    assert told[-1] == (26, 26)
    for site in range(2):
        assert np.array_equal(by_two.of(0, site), alone.of(0, site))


@pytest.fixture(scope="module")
def bermuda(real_data, tmp_path_factory):
    """Receivers around Bermuda: casts of April and July 2016, GEBCO's seabed."""
    folder = tmp_path_factory.mktemp("bermuda")
    casts = [str(real_data / "exchange" / f"BIOS2016{day}_ct1.zip") for day in ("0414", "0721")]
    (folder / "plan.toml").write_text(
        f"""
        [water]
        files = {json.dumps(casts)}
        casts = ["BIOS20160414_10323_5", "BIOS20160721_61294_1"]
        members = "season"
        extend_down = true
        [seabed]
        bathymetry = {json.dumps(str(real_data / "bathymetry" / "gebco2025_6min_bermuda.nc"))}
        [area]
        corners = [[31.9, -65.2], [31.9, -64.4], [32.7, -64.4], [32.7, -65.2]]
        spacing = 4000
        [target]
        source_level = 185.0
        frequency = 2000
        depths = [60.0, 300.0]
        [receiver]
        detection_threshold = 10.0
        bandwidth = 100.0
        depths = [100.0, 400.0]
        [noise]
        wind_speeds = [4.0, 9.0]
        [sites]
        places = [[32.0, -64.9], [32.55, -64.4]]
        [choice]
        number = 2
        [run]
        max_range = 20000
        bearings = 4
        ranges = 40
        depths = 7
        beams = 100
        workers = 1
        folder = "kept"
        """,
        encoding="utf-8",
    )
    return folder


def test_receivers_around_bermuda(bermuda, capsys):
    assert run(["sensors", str(bermuda / "plan.toml"), "-o", str(bermuda / "found.nc"), "--json"]) == 0
    told = json.loads(capsys.readouterr().out)
    assert told["waters"] == 2
    assert len(told["sensors"]) == 2
    assert 0.02 < told["covered"]["1"] < 1.0
    assert set(told["mean_probability_by_group"]) == {"March to May", "June to August"}
    assert told["spread_over_waters"] > 0.0
    assert sum(told["why_deaf"].values()) <= 1.0

    with xr.open_dataset(bermuda / "found.nc") as found:
        # the island is land, and the slope around it deep
        assert float(found["seabed_depth"].min()) < 200.0
        assert float(found["seabed_depth"].max()) > 3000.0
        parts = found["missing_by_cause"].sum("cause", skipna=False)
        assert np.allclose(parts, found["missing_excess"], equal_nan=True, atol=1e-6)
        # no farther than spherical spreading and absorption would carry it by far
        assert float(found["detection_range"].max()) <= 20e3
    assert run(["sensors", str(bermuda / "plan.toml"), "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["sections"]["computed"] == 0
