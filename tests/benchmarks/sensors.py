"""Sensors: losses around 50 sites on 36 bearings of 20 km at 12 kHz, and what is asked of them again, in one run.

Run as `python tests/benchmarks/sensors.py [workers [sites]]`. The seabed is invented: hills between 120 and 330 m.
Losses are on 200 ranges x 50 depths. On the way the loss of still water without boundaries is compared with its closed
form, and few beams with as many as are wanted for phases.
"""

from __future__ import annotations

import sys
import tempfile
from dataclasses import replace
from pathlib import Path
from time import perf_counter

import numpy as np
import xarray as xr

from ocean_sound.grids import Bathymetry, open_bathymetry
from ocean_sound.profile import Profile
from ocean_sound.sensors.area import Area
from ocean_sound.sensors.coverage import Hearing, Noise, Target, losses_at
from ocean_sound.sensors.hearing import Receiver
from ocean_sound.sensors.losses import LossSettings, compute_losses
from ocean_sound.sensors.planning import Task, Wanted, place_sensors
from ocean_sound.sensors.sites import Site
from ocean_sound.sensors.waters import Member

SITES, BEARINGS, RANGE, FREQUENCY = 50, 36, 20e3, 12e3
WATER = Member(
    "invented",
    (Profile([0.0, 20.0, 45.0, 120.0, 400.0], [1512.0, 1511.5, 1498.0, 1494.0, 1497.0], id="invented"),),
)


def hills(folder: Path) -> Path:
    """A grid of the invented seabed, a point each 450 m."""
    latitude, longitude = np.linspace(29.5, 31.0, 371), np.linspace(-61.0, -59.0, 429)
    y, x = np.meshgrid(latitude, longitude, indexing="ij")
    depth = 220.0 + 60.0 * np.sin(40.0 * x) * np.cos(37.0 * y) + 40.0 * np.sin(9.0 * x + 5.0 * y)
    path = folder / "hills.nc"
    xr.Dataset(
        {"z": (("lat", "lon"), -depth, {"units": "m", "positive": "up"})},
        {"lat": ("lat", latitude, {"units": "degrees_north"}), "lon": ("lon", longitude, {"units": "degrees_east"})},
    ).to_netcdf(path)
    return path


def main(workers: int, number: int) -> None:
    settings = LossSettings(
        frequency=FREQUENCY, max_range=RANGE, depths=np.linspace(5.0, 100.0, 50), bearings=BEARINGS, ranges=200,
        absorption=1.3, wind_speed=5.0,
    )  # fmt: skip
    rng = np.random.default_rng(1)
    sites = [Site(f"site {k}", 29.8 + 0.9 * rng.random(), -60.6 + 1.2 * rng.random(), 60.0) for k in range(number)]
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        bathymetry = open_bathymetry(hills(folder))
        run = {"settings": settings, "bathymetry": bathymetry, "number": workers}
        compute_losses(sites[:1], [WATER], **run)  # compiles
        start = perf_counter()
        losses = compute_losses(sites, [WATER], folder=folder / "kept", **run)
        first = perf_counter() - start
        print(
            f"{losses.computed} sections, {workers} workers: {first:.1f} s, {1e3 * first / losses.computed:.1f} ms each"
        )
        size = sum(path.stat().st_size for path in (folder / "kept").iterdir()) / 1e6
        start = perf_counter()
        again = compute_losses(sites, [WATER], folder=folder / "kept", **run)
        assert again.computed == 0
        assert again.kept == losses.computed
        for site in range(number):
            again.of(0, site)
        second = perf_counter() - start
        print(f"again, from disk ({size:.0f} MB): {second:.2f} s, {first / second:.0f} times as fast")
        area = Area.box(29.8, 30.7, -60.6, -59.4, spacing=2000.0, depths=[10.0, 40.0, 80.0], bathymetry=bathymetry)
        start = perf_counter()
        losses_at(again, area)
        print(f"loss from each site at {area.size} cells: {perf_counter() - start:.2f} s")
        hearing = Hearing(Target(155.0), Receiver(10.0, 500.0), Noise.of(FREQUENCY, FREQUENCY, wind_speeds=[3.0, 8.0]))
        task = Task(area, [WATER], bathymetry, hearing, settings, sites, wanted=Wanted(4), why=False)
        start = perf_counter()
        found = place_sensors(task, folder=folder / "kept")
        assert found.computed == 0
        print(f"a whole plan, 4 of {number} sites: {perf_counter() - start:.2f} s; {found.covered():.1%} covered")
        trade(sites[0], bathymetry, settings)
    still = Member("still", (Profile([0.0, 400.0], [1500.0, 1500.0]),))
    bare = replace(settings, bearings=1, boundaries=False)
    loss = compute_losses(sites[:1], [still], settings=bare, bathymetry=300.0).of(0, 0)[0]
    slant = np.hypot(bare.distances[:, None], bare.depths[None, :] - 60.0)
    error = np.abs(loss - 20.0 * np.log10(slant) - 1.3e-3 * slant)
    middle, most = np.percentile(error, [50, 99])
    assert middle < 0.2
    assert most < 1.0
    print(f"still water without boundaries: within {middle:.2f} dB (median), {most:.2f} dB (99 %) of the closed form")


def trade(site: Site, bathymetry: Bathymetry, settings: LossSettings) -> None:
    """What fewer beams cost in decibels, on a few bearings, beside as many as `loss` takes by itself."""
    few = replace(settings, bearings=3)
    whole = None
    for beams in (20_000, 1600, None, 100):
        start = perf_counter()
        losses = compute_losses([site], [WATER], settings=replace(few, beams=beams), bathymetry=bathymetry)
        each = 1e3 * (perf_counter() - start) / 3
        loss = losses.of(0, 0)
        whole = loss if whole is None else whole
        middle, most = np.nanpercentile(np.abs(loss - whole), [50, 90])
        name, apart = beams or "few wide", f"{middle:.2f} dB apart (median), 90 % {most:.1f} dB"
        print(f"  {name} beams: {each:.0f} ms a section; {apart}")


if __name__ == "__main__":
    given = [int(text) for text in sys.argv[1:]]
    main(*given, *(1, SITES)[len(given) :])
