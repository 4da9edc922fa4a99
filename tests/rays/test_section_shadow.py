"""Shadow in a section against exact layers, lines of sight, circles and rays traced one by one."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from pyproj import Geod

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.rays import find_shadow, shadow_zones, trace_fan
from ocean_sound.rays.section_shadow import SectionShadow, find_section_shadow
from ocean_sound.section import Seabed, Section

pytestmark = [pytest.mark.kernels, pytest.mark.long]

MUNK_DEPTH = np.linspace(0.0, 5000.0, 501)
ETA = 2.0 * (MUNK_DEPTH - 1300.0) / 1300.0
MUNK = Profile(MUNK_DEPTH, 1500.0 * (1.0 + 0.00737 * (ETA - 1.0 + np.exp(-ETA))))


def edges_of(mask):
    """The points that have a neighbour of the other kind."""
    wide = np.pad(mask, 1, mode="edge")
    rows, columns = mask.shape
    shifted = [wide[1 + i : 1 + i + rows, 1 + j : 1 + j + columns] for i in (-1, 0, 1) for j in (-1, 0, 1)]
    return np.any([part != mask for part in shifted], axis=0)


@pytest.fixture(scope="module")
def munk():
    section = Section.from_profile(MUNK, seabed=5000.0, max_range=80e3, flatten=False)
    return section, find_shadow(section, source_depth=100.0, max_range=80e3, grid=(81, 161))


def test_the_shadow_in_water_that_does_not_change_is_that_of_exact_layers(munk):
    section, found = munk
    layered = section.profile_at(0.0, levels=2000)
    exact = find_shadow(layered, source_depth=100.0, max_range=80e3, depths=found.depth, ranges=found.range)
    for name in ("no_bounce", "surface_bounces"):
        differ = found.masks[name] != exact.masks[name]
        assert not np.any(differ & ~edges_of(exact.masks[name]))
        assert differ.sum() <= 0.02 * edges_of(exact.masks[name]).sum()  # measured: 0 to 2 of 900
    assert not found.masks["any_bounces"][1:-1].any()
    assert found.unsettled == 0


def test_rays_that_creep_along_a_maximum_of_speed_count_only_if_asked_to():
    """Below the mixed layer no ray has a fair part of the sound; with any spreading allowed the exact layers agree."""
    water = Profile([0.0, 20.0, 60.0, 100.0, 200.0], [1520.0, 1519.0, 1500.0, 1495.0, 1497.0])
    section = Section.from_profile(water, seabed=200.0, max_range=4000.0, flatten=False)
    grid = {"source_depth": 40.0, "max_range": 4000.0, "grid": (41, 81)}
    all_of_them = find_section_shadow(section, widest=1e8, **grid)
    exact = find_shadow(section.profile_at(0.0, levels=2000), **grid)
    differ = all_of_them.masks["no_bounce"] != exact.masks["no_bounce"]
    assert not np.any(differ & ~edges_of(exact.masks["no_bounce"]))
    share = find_section_shadow(section, **grid).summary()["no_bounce"]
    assert all_of_them.summary()["no_bounce"] < 0.01
    assert share > 0.05
    assert share < find_shadow(water, **grid).summary()["no_bounce"]  # sharp layers part rays at once


def ridge():
    x = np.linspace(0.0, 4000.0, 81)
    return Seabed(x, 300.0 - 190.0 * np.exp(-(((x - 1500.0) / 300.0) ** 2)), kind=None)


def sees(source, x, z, seabed):
    """Whether the straight line from (0, source) to a point stays above the seabed."""
    part = np.linspace(0.0, 1.0, 4001)[1:]
    depth = source + (z - source) * part
    return bool(np.all(depth < seabed.depth_at(x * part) + 1e-9))


def test_in_even_water_shadow_is_what_a_ridge_hides_from_the_source_and_from_its_image():
    seabed, source = ridge(), 120.0
    still = Profile([0.0, 300.0], [1500.0, 1500.0])
    section = Section.from_profile(still, seabed=seabed, max_range=4000.0, flatten=False)
    found = find_shadow(
        section, source_depth=source, max_range=4000.0, depths=np.arange(2.0, 300.0, 12.0),
        ranges=np.arange(0.0, 4001.0, 80.0),
    )  # fmt: skip
    direct, mirrored = (
        np.array([[not sees(depth, x, z, seabed) for x in found.range] for z in found.depth])
        for depth in (source, -source)
    )
    # an image behind the surface sees the water below it, and nothing of it is above
    for name, hidden in (("no_bounce", direct), ("surface_bounces", direct & mirrored)):
        expected = hidden & found.water
        differ = found.masks[name] != expected
        assert expected.sum() > 50
        assert not np.any(differ & ~edges_of(expected))
        assert differ.mean() < 0.005
    # a seabed that absorbs all adds no path
    assert np.array_equal(found.masks["any_bounces"], found.masks["surface_bounces"])


def test_the_shadow_behind_the_ray_tangent_to_the_surface_begins_where_circles_have_it():
    """Rays are circles of radius c0/|g|, as for the profile in test_shadow.py."""
    levels = np.linspace(0.0, 210.0, 106)  # curves through few levels are not straight
    water = Profile(levels, 1530.0 - 0.15 * levels)
    radius, source = 1530.0 / 0.15, 40.0
    section = Section.from_profile(water, seabed=200.0, max_range=5000.0, flatten=False)
    depths = np.array([10.0, 75.0, 150.0])
    found = find_shadow(section, source_depth=source, max_range=5000.0, depths=depths, grid=(0, 251))
    edge = np.sqrt(source * (2 * radius - source)) + np.sqrt(depths * (2 * radius - depths))
    for depth, expected in zip(depths, edge, strict=True):
        rows = found.intervals["no_bounce"][found.intervals["no_bounce"][:, 0] == depth]
        assert rows.shape == (1, 3)
        assert rows[0, 1] == pytest.approx(expected, abs=10.0 + 1.0)  # half of a step of 20 m
        assert rows[0, 2] == 5000.0


def slope():
    casts = [
        Profile([0, 60, 400, 900], [1510 + warm, 1490, 1484, 1492], id=name, latitude=lat, longitude=179.9)
        for name, lat, warm in (("a", -10.0, 0.0), ("b", -10.06, 6.0), ("c", -10.14, 2.0))
    ]
    seabed = Seabed([0.0, 4e3, 9e3, 16e3], [880.0, 700.0, 720.0, 400.0], kind="silt")
    return Section.from_casts(casts, seabed=seabed, flatten=False)


def test_no_ray_arrives_in_a_shadow_and_some_ray_where_there_is_none():
    section, source = slope(), 200.0
    depths, ranges = np.linspace(0.0, 880.0, 89), np.linspace(0.0, 15e3, 101)
    found = find_shadow(section, source_depth=source, max_range=15e3, depths=depths, ranges=ranges)
    # a fan finds no rays that spread much faster than the others
    bright = find_shadow(section, source_depth=source, max_range=15e3, depths=depths, ranges=ranges, widest=3.0)
    assert not np.any(found.masks["any_bounces"] & ~found.masks["surface_bounces"])
    assert not np.any(found.masks["surface_bounces"] & ~found.masks["no_bounce"])
    rng = np.random.default_rng(3)
    for j in (30, 60, 80):
        limits = {"no_bounce": (0, 0), "surface_bounces": (10_000, 0)}
        for name, (surface, floor) in limits.items():
            fan = trace_fan(
                section, source_depth=source, launch_angles=np.sort(rng.uniform(-40.0, 40.0, 6000)),
                max_range=float(ranges[j]), max_surface_bounces=surface, max_seabed_bounces=floor,
            )  # fmt: skip
            arrived = fan.status == 0
            dark, wet = found.masks[name][:, j], found.water[:, j]
            inside = dark & np.roll(dark, 1) & np.roll(dark, -1)  # not next to an edge
            nearest = np.argmin(np.abs(fan.depth[arrived][:, None] - depths[None, :]), axis=1)
            assert not inside[nearest].any()
            spans = [
                sorted((a, b)) for (a, b), (p, q) in zip(pairwise(fan.depth), pairwise(arrived), strict=True) if p and q
            ]
            near = 25.0  # m; the fan is coarse where rays turn, and between the last ray and a boundary there is none
            lit = depths[wet & ~bright.masks[name][:, j]]
            missed = [z for z in lit if not any(a - near <= z <= b + near for a, b in spans)]
            assert [z for z in missed if near < z < depths[wet].max() - near] == []
    assert found.masks["no_bounce"][:, 100].any()


def test_convergence_zones_are_where_rays_come_back(munk):
    section, _ = munk
    found = find_shadow(section, source_depth=200.0, max_range=80e3, depths=[200.0, 1000.0], grid=(0, 401))
    zones = found.convergence_zones(200.0)
    assert zones[0, 0] == 1.0
    fan = trace_fan(section, source_depth=200.0, launch_angles=np.linspace(-9.0, 9.0, 25), max_range=80e3, points=8001,
                    max_seabed_bounces=0)  # fmt: skip
    for path, depth in zip(fan.path_range, fan.path_depth, strict=True):
        beyond = path > 30e3
        for at in np.flatnonzero((np.diff(np.sign(depth - 200.0)) != 0) & beyond[1:]):
            assert np.any((zones[:, 1] - 200.0 <= path[at]) & (path[at] <= zones[:, 2] + 200.0))
    starts = zones[:, 1]
    assert 40e3 < starts[0] < 60e3
    with pytest.raises(InputError, match="depth 333 m is not one of the grid"):
        found.convergence_zones(333.0)


def test_zones_go_onto_the_map_along_the_track_and_are_split_at_180_degrees():
    casts = [
        Profile([0, 60, 400, 900], [1510 + warm, 1490, 1484, 1492], id=name, latitude=10.0, longitude=lon)
        for name, warm, lon in (("a", 0.0, 179.97), ("b", 6.0, -179.97))
    ]
    section = Section.from_casts(casts, seabed=880.0)
    found = find_shadow(section, source_depth=30.0, max_range=6000.0, grid=(23, 31), depths=[20.0, 100.0, 500.0])
    zones = found.to_geojson([100.0])
    geod = Geod(ellps="WGS84")
    kinds = {feature["properties"]["kind"] for feature in zones["features"]}
    assert {"shadow_zone", "shadow"} <= kinds
    split = 0
    for feature in zones["features"]:
        about, geometry = feature["properties"], feature["geometry"]
        parts = geometry["coordinates"] if geometry["type"] == "MultiLineString" else [geometry["coordinates"]]
        split += len(parts) - 1
        for place, distance in ((parts[0][0], about["range_start"]), (parts[-1][-1], about["range_end"])):
            away = geod.inv(casts[0].longitude, casts[0].latitude, *place)[2]
            assert away == pytest.approx(distance, abs=0.1)
        assert (about["range_start"] < 3288.0 < about["range_end"]) == (len(parts) == 2)
        if about["kind"] == "shadow":
            assert about["depth"] == 100.0
        else:
            assert about["shallowest"] <= about["deepest"]
    assert split > 0
    flat = Section.from_profile(MUNK, max_range=1000.0)
    nowhere = find_shadow(flat, source_depth=30.0, max_range=500.0, grid=(5, 5))
    with pytest.raises(InputError, match="the section has no place on the Earth"):
        nowhere.to_geojson()


def test_the_dataset_knows_the_seabed_and_the_place():
    section = slope()
    zones = shadow_zones(section, source_depth=30.0, max_range=9e3, depths=[0.0, 300.0, 800.0], ranges=[0.0, 2e3, 9e3])
    assert zones.shadow_no_bounce.values[2].tolist() == [0, 1 - 1 if section.seabed.depth_at(2e3) > 800 else 2, 2]
    assert zones.shadow_any_bounces.attrs["flag_meanings"] == "reached in_shadow below_seabed"
    assert zones.seabed_depth.values == pytest.approx(section.seabed.depth_at([0.0, 2e3, 9e3]))
    assert zones.latitude.values == pytest.approx(section.track.at([0.0, 2e3, 9e3])[0])
    assert {"zone", "interval"} <= set(zones.dims)


def test_what_does_not_fit_is_told():
    section = slope()
    with pytest.raises(InputError, match=r"source depth 890 m is below the seabed"):
        find_shadow(section, source_depth=890.0, max_range=1000.0)
    with pytest.raises(InputError, match="range 50000 m is beyond the section"):
        find_shadow(section, source_depth=10.0, max_range=50e3)
    with pytest.raises(InputError, match="but a section has a seabed of its own"):
        find_shadow(section, source_depth=10.0, max_range=1e3, seabed_depth=100.0)
    with pytest.raises(InputError, match=r"widest is 0\.5: a number from 1 on"):
        find_shadow(section, source_depth=10.0, max_range=1e3, widest=0.5)
    with pytest.raises(InputError, match="goes with a section only"):
        find_shadow(MUNK, source_depth=10.0, max_range=1e3, widest=10.0)
    with pytest.raises(InputError, match="max_seabed_bounces is -1"):
        find_section_shadow(section, source_depth=10.0, max_range=1e3, max_seabed_bounces=-1)
    assert issubclass(SectionShadow, type(find_shadow(MUNK, source_depth=10.0, max_range=1e3, grid=(3, 3))))
