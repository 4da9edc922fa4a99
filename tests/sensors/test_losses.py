"""Losses around sites: what is kept and what is computed again, shores, reach by closed form, and bad sites."""

from __future__ import annotations

import dataclasses
import subprocess
import sys

import numpy as np
import pytest
from scipy.optimize import brentq

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.sensors.area import Area
from ocean_sound.sensors.coverage import Hearing, Noise, Target, detection_ranges, losses_at
from ocean_sound.sensors.hearing import Receiver
from ocean_sound.sensors.losses import MOST, depth_grid
from ocean_sound.sensors.sites import Site
from ocean_sound.sensors.waters import Member, members_of

from .conftest import ALPHA, spherical

HERE = Site("A", 30.0, -60.0, 40.0)


def test_what_is_kept_is_not_computed_again(losses_of, tmp_path):
    first = losses_of([HERE], folder=tmp_path)
    again = losses_of([HERE], folder=tmp_path)
    assert (first.computed, first.kept) == (24, 0)
    assert (again.computed, again.kept) == (0, 24)
    assert np.array_equal(first.of(0, 0), again.of(0, 0), equal_nan=True)
    more = losses_of([HERE, Site("B", 30.1, -60.0, 60.0)], folder=tmp_path)
    assert (more.computed, more.kept) == (24, 24)


def test_a_dask_cluster_by_its_address_gives_the_same(losses_of, tmp_path):
    distributed = pytest.importorskip("distributed")
    sites = [HERE, Site("B", 30.1, -60.0, 60.0)]
    alone = losses_of(sites, folder=tmp_path / "alone")
    with distributed.LocalCluster(
        n_workers=1, threads_per_worker=2, processes=False, protocol="tcp", dashboard_address=None
    ) as cluster:
        assert cluster.scheduler_address.startswith("tcp://")
        found = losses_of(sites, folder=tmp_path / "cluster", scheduler=cluster.scheduler_address)
    assert found.computed == alone.computed == 48
    for site in (0, 1):
        assert np.array_equal(found.of(0, site), alone.of(0, site), equal_nan=True)


@pytest.mark.parametrize(
    "change",
    [{"frequency": 13e3}, {"max_range": 11e3}, {"ranges": 99}, {"bearings": 25}, {"wind_speed": 3.0}, {"kind": "sand"},
     {"phases": "kept"}, {"beams": 99}, {"absorption": 2.0}, {"method": "beams"}, {"bathymetry": 101.0},
     {"depths": np.linspace(0.0, 90.0, 11)}, {"boundaries": False}, {"tolerance": 0.2}, {"insist": True},
     {"members": [Member("w", (Profile([0.0, 100.0], [1500.0, 1500.1]),))]}],
)  # fmt: skip
def test_all_that_a_loss_depends_on_is_in_its_name(losses_of, tmp_path, change):
    losses_of([HERE], folder=tmp_path)
    assert losses_of([HERE], folder=tmp_path, **change).kept == 0


def test_a_run_that_stopped_goes_on_where_it_was(losses_of, tmp_path):
    there = []

    def dying(section, *, source_depth, **rest):
        there.append(source_depth)
        if source_depth > 40.0:
            raise KeyboardInterrupt
        return spherical(section, source_depth=source_depth, **rest)

    sites = [HERE, Site("B", 30.1, -60.0, 50.0), Site("C", 30.2, -60.0, 60.0)]
    dying.__module__, dying.__qualname__ = spherical.__module__, spherical.__qualname__
    with pytest.raises(KeyboardInterrupt):
        losses_of(sites, folder=tmp_path, engine=dying)
    after = losses_of(sites, folder=tmp_path)
    assert (after.computed, after.kept) == (48, 24)
    assert not list(tmp_path.glob(".*"))


_KILLED = """
import os, signal, sys
import numpy as np
from ocean_sound.profile import Profile
from ocean_sound.sensors import losses
from ocean_sound.sensors.sites import Site
from ocean_sound.sensors.waters import Member

def engine(section, *, source_depth, ranges, depths, **_):
    if source_depth > 50.0:
        os.kill(os.getpid(), signal.SIGKILL)
    return np.full((len(ranges), len(depths)), 60.0)

losses._engine = engine
still = Member("still", (Profile([0.0, 100.0], [1500.0, 1500.0], id="still"),))
settings = losses.LossSettings(frequency=12e3, max_range=5e3, depths=np.array([20.0, 40.0]), bearings=12, ranges=5)
sites = [Site(str(z), 30.0, -60.0, z) for z in (40.0, 45.0, 60.0, 70.0)]
found = losses.compute_losses(sites, [still], settings=settings, bathymetry=100.0, folder=sys.argv[1])
print(found.computed, found.kept)
"""


@pytest.mark.skipif(sys.platform == "win32", reason="no such signal there")
def test_a_run_that_was_killed_goes_on_where_it_was(tmp_path):
    command = [sys.executable, "-c", _KILLED, str(tmp_path)]
    assert subprocess.run(command, check=False, capture_output=True).returncode == -9
    calm = [sys.executable, "-c", _KILLED.replace("> 50.0", "> 500.0"), str(tmp_path)]
    done = subprocess.run(calm, check=True, capture_output=True, text=True)
    assert done.stdout.split() == ["24", "24"]


def test_a_harmed_file_is_told(losses_of, tmp_path):
    losses = losses_of([HERE], folder=tmp_path)
    path = losses.files[0, 0][0]
    path.write_bytes(b"no netCDF")
    with pytest.raises(InputError, match="remove the file and run again"):
        losses.of(0, 0)


def test_equal_bearings_are_computed_once(losses_of):
    calls = []

    def counting(section, **rest):
        calls.append(1)
        return spherical(section, **rest)

    losses = losses_of([HERE], engine=counting)
    assert len(calls) == 2  # one for each file of twelve bearings
    assert np.array_equal(losses.of(0, 0)[0], losses.of(0, 0)[17])


def test_a_bearing_ends_at_the_shore(losses_of, bathymetry_file):
    axis = np.linspace(-0.2, 0.2, 161)
    # a coast along a meridian, 0.05 degrees east of the site
    grid = bathymetry_file(lambda lat, lon: np.where(lon > 0.05, 20.0, -100.0) + 0.0 * lat, axis, axis)
    losses = losses_of([Site("A", 0.0, 0.0, 40.0)], bathymetry=grid, bearings=4)
    loss, reach = losses.of(0, 0), losses.reaches(0, 0)
    assert reach[[0, 2, 3]] == pytest.approx(10e3)
    assert reach[1] == pytest.approx(0.05 * 111_319.5, rel=0.06)
    assert np.all(loss[1][losses.settings.distances > reach[1]] == MOST)
    assert np.nanmax(loss[1][losses.settings.distances < reach[1]]) < 100.0


def test_bearings_that_end_in_water_too_shallow_for_beams_are_told_and_insisted_on(losses_of, bathymetry_file):
    axis = np.linspace(-0.2, 0.2, 161)
    grid = bathymetry_file(lambda lat, lon: -150.0 + 700.0 * np.maximum(lon, 0.0) + 0.0 * lat, axis, axis)
    asked = []

    def engine(section, *, insist, **rest):
        asked.append(insist)
        return spherical(section, **rest)

    deep = [Member("deep", (Profile([0.0, 200.0], [1500.0, 1500.0]),))]
    common = {"bathymetry": grid, "bearings": 4, "members": deep, "engine": engine}
    losses = losses_of([Site("A", 0.0, 0.0, 40.0)], frequency=170.0, **common)  # 10 wavelengths are 88 m
    assert losses.notes == (
        "site A: 1 of 4 bearings reach water less than 10 wavelengths deep, where beams may be off by several dB",
    )
    assert True in asked
    assert False in asked
    assert not losses_of([Site("A", 0.0, 0.0, 40.0)], frequency=1500.0, **common).notes


def test_below_the_seabed_there_is_no_loss(losses_of, bathymetry_file):
    axis = np.linspace(-0.2, 0.2, 161)
    grid = bathymetry_file(lambda lat, lon: -50.0 - 400.0 * (lon + 0.1) + 0.0 * lat, axis, axis)
    losses = losses_of(
        [Site("A", 0.0, 0.0, 40.0)], bathymetry=grid, bearings=4,
        members=[Member("deep", (Profile([0.0, 200.0], [1500.0, 1500.0]),))],
    )  # fmt: skip
    west, depths = losses.of(0, 0)[3], losses.settings.depths
    seabed = 50.0 + 400.0 * (0.1 - losses.settings.distances / 111_319.5)
    assert np.array_equal(np.isnan(west), depths[None, :] > seabed[:, None])


def test_without_boundaries_bearings_are_computed_once_but_end_at_their_own_seabed(losses_of, bathymetry_file):
    axis = np.linspace(-0.2, 0.2, 161)
    grid = bathymetry_file(lambda lat, lon: -50.0 - 400.0 * (lon + 0.1) + 0.0 * lat, axis, axis)
    calls = []

    def counting(section, **rest):
        calls.append(1)
        return spherical(section, **rest)

    common = {"bathymetry": grid, "bearings": 4, "engine": counting,
              "members": [Member("deep", (Profile([0.0, 200.0], [1500.0, 1500.0]),))]}  # fmt: skip
    site = [Site("A", 0.0, 0.0, 40.0)]
    whole = losses_of(site, **common).of(0, 0)
    assert len(calls) == 4
    assert np.array_equal(losses_of(site, boundaries=False, **common).of(0, 0), whole, equal_nan=True)
    assert len(calls) == 5


@pytest.mark.parametrize(
    ("latitude", "longitude", "depth", "message"),
    [
        (0.0, 0.1, 40.0, "site A .*: is on land, 20 m high"),
        (0.0, -0.05, 120.0, "the sensor at 120 m is below the seabed at 100 m"),
        (0.0, 3.0, 40.0, "site A, 10 km around it: .* lies outside the grid"),
    ],
)
def test_bad_sites_are_told(losses_of, bathymetry_file, latitude, longitude, depth, message):
    axis = np.linspace(-0.3, 0.3, 61)
    grid = bathymetry_file(lambda lat, lon: np.where(lon > 0.05, 20.0, -100.0) + 0.0 * lat, axis, axis)
    with pytest.raises(InputError, match=message):
        losses_of([Site("A", latitude, longitude, depth)], bathymetry=grid)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"frequency": 0.0}, "frequency is 0 Hz"),
        ({"max_range": -1.0}, "max_range is -1 m"),
        ({"bearings": 0}, "0 bearings"),
        ({"depths": [5.0, 1.0]}, "depths do not increase"),
    ],
)
def test_impossible_settings_are_refused(losses_of, settings, message):
    with pytest.raises(InputError, match=message):
        losses_of([HERE], **settings)


def test_water_that_ends_above_the_seabed_is_told_with_the_site(losses_of):
    with pytest.raises(InputError, match="the water is known down to 100 m"):
        losses_of([HERE], bathymetry=500.0)


def test_reach_equals_the_closed_form(losses_of):
    """20 log r + a r = allowed loss, solved apart; target at the receiver's depth."""
    losses = losses_of([HERE])
    hearing = Hearing(Target(150.0), Receiver(8.0, 500.0), Noise([50.0]))
    reach = detection_ranges(losses, hearing, depths=[40.0])
    allowed = 150.0 - (50.0 + 10.0 * np.log10(500.0)) - 8.0
    expected = brentq(lambda r: 20.0 * np.log10(r) + ALPHA * r - allowed, 10.0, 1e5)
    assert reach["detection_range"].values == pytest.approx(expected, rel=0.01)
    assert not reach["cut"].values.any()


def test_loss_at_cells_equals_the_closed_form_across_the_date_line(losses_of):
    from pyproj import Geod

    site = Site("A", 10.0, 179.98, 40.0)
    area = Area.box(9.95, 10.05, 179.93, -179.97, spacing=700.0, depths=[12.0, 47.0], bathymetry=100.0)
    found = losses_at(losses_of([site]), area)[0, 0]
    away = Geod(ellps="WGS84").inv(
        np.full(area.size, site.longitude), np.full(area.size, site.latitude), area.cell_longitude, area.cell_latitude
    )[2]
    slant = np.hypot(away, area.cell_depth - 40.0)
    expected = 20.0 * np.log10(slant) + ALPHA * slant
    near = away > 150.0  # nearer than the first range the angle is not known
    assert found[near] == pytest.approx(expected[near], abs=0.02)
    assert np.abs(found - expected).max() < 0.2
    assert {True, False} == set((area.cell_longitude > 0.0).tolist())


def test_beyond_the_range_nothing_is_known(losses_of):
    area = Area.box(30.0, 30.3, -60.1, -59.9, spacing=4e3, depths=[12.0], bathymetry=100.0)
    found = losses_at(losses_of([HERE]), area)[0, 0]
    assert np.isinf(found).any()
    assert np.isfinite(found).any()


def test_depths_that_were_not_computed_are_told(losses_of):
    area = Area.box(30.0, 30.1, -60.1, -59.9, spacing=4e3, depths=[95.0], bathymetry=100.0)
    with pytest.raises(InputError, match="computed from 0 to 90 m of depth, and the area asks for 95"):
        losses_at(losses_of([HERE]), area)


def test_depth_grid_holds_first_and_last():
    assert depth_grid([5.0, 7.0, 50.0], 4).tolist() == [5.0, 20.0, 35.0, 50.0]


def test_each_site_takes_the_nearest_cast_that_reaches():
    deep = [Profile([0.0, z], [1500.0, 1510.0], id=i, latitude=y, longitude=0.0)
            for i, y, z in (("near", 0.1, 500.0), ("far", 1.0, 4000.0), ("farther", 2.0, 4000.0))]  # fmt: skip
    member = Member("all", tuple(deep))
    assert member.at(Site("A", 0.0, 0.0, 10.0), 450.0)[0].id == "near"
    profile, notes = member.at(Site("A", 0.0, 0.0, 10.0), 3900.0)
    assert profile.id == "far"
    assert "near, does not reach the seabed" in notes[0]


def test_members_by_season_count_the_same():
    times = ["2016-01-10", "2015-12-20", "2016-02-01", "2016-07-01"]
    casts = [Profile([0, 10], [1500, 1500], id=t, time=np.datetime64(t), latitude=0.0, longitude=k)
             for k, t in enumerate(times)]  # fmt: skip
    seasons = members_of(casts, "season")
    assert [(m.name, len(m.profiles), m.share) for m in seasons] == [
        ("December to February", 3, 0.5), ("June to August", 1, 0.5),
    ]  # fmt: skip
    assert [m.name for m in members_of(casts, "month")] == ["January", "December", "February", "July"]
    by_cast = members_of(casts, "cast")
    assert [m.share for m in by_cast] == pytest.approx([1 / 6, 1 / 6, 1 / 6, 1 / 2])
    with pytest.raises(InputError, match="has no time, so no season"):
        members_of([dataclasses.replace(casts[0], time=np.datetime64("NaT"))], "season")
