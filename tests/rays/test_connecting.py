"""Rays between a source and receivers: against images, denser fans, reciprocity and finite differences."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.rays import connect, find_arrivals, trace_fan
from ocean_sound.section import Seabed, Section, Sediment, SpeedField, Surface

pytestmark = pytest.mark.kernels


def munk_speed(depth, axis=1300.0):
    eta = 2.0 * (depth - axis) / 1300.0
    return 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta)))


def munk_section(max_range=100_000.0, kind="sand"):
    depths = np.linspace(0.0, 5100.0, 103)
    return Section(
        SpeedField.from_speeds(depths, munk_speed(depths)), Seabed.flat(5000.0, kind=kind), max_range=max_range
    )


def hilly_section(max_range=30_000.0):
    """Water that changes with range over hills."""
    ranges, depths = np.linspace(0.0, max_range, 16), np.linspace(0.0, 2100.0, 43)
    x, z = np.meshgrid(ranges, depths, indexing="ij")
    speeds = 1490.0 + 20.0 * np.exp(-z / 300.0) + 0.012 * z - 4.0 * np.sin(2.5 * x / max_range) * np.exp(-z / 500.0)
    nodes = np.arange(0.0, max_range + 1.0, 1500.0)
    hills = 1900.0 + 60.0 * np.sin(nodes / 3100.0) + 25.0 * np.sin(nodes / 1300.0 + 1.0)
    return Section(SpeedField.from_speeds(depths, speeds, ranges), Seabed(nodes, hills), max_range=max_range)


def mirrored(section):
    field, reach = section.field, section.max_range
    speeds = field.speed_at(field.ranges[:, None], field.depths[None, :])
    turned = SpeedField.from_speeds(field.depths, speeds[::-1], reach - field.ranges[::-1])
    seabed = Seabed(reach - section.seabed.ranges[::-1], section.seabed.depths[::-1])
    return Section(turned, seabed, max_range=reach)


def level_water(form, kind="sand", **options):
    """100 m of water of 1500 m/s over a level seabed, as a profile or a section."""
    if form == "profile":
        return Profile([0.0, 100.0], [1500.0, 1500.0])
    field = SpeedField.from_speeds([0.0, 60.0, 120.0], [1500.0] * 3)
    return Section(field, Seabed.flat(100.0, kind=kind), max_range=50_000.0, **options)


def images(source, receiver, distance, depth, bounces):
    """(path length, surface bounces, seabed bounces, downward at launch) of all images with so many bounces at most."""
    found = []
    for m in range(bounces + 1):
        for mirrored_depth, surface, seabed in (
            (2 * m * depth + receiver, m, m),  # down first, and even
            (2 * (m + 1) * depth - receiver, m, m + 1),
            (-2 * m * depth - receiver, m + 1, m),
            (-2 * m * depth + receiver, m, m),
        ):
            if m == 0 and surface == seabed == 0 and found and (found[0][1], found[0][2]) == (0, 0):
                continue
            if surface + seabed <= bounces:
                found.append((math.hypot(distance, mirrored_depth - source), surface, seabed))
    return sorted(found)


# --- closed forms


@pytest.mark.parametrize("kind", ["profile", "section"])
@pytest.mark.parametrize("distance", [150.0, 2000.0])
def test_all_images_of_an_isovelocity_guide_are_found_with_exact_times(kind, distance):
    source, receiver, bounces = 36.0, 71.0, 9
    arrivals = find_arrivals(
        level_water(kind), source_depth=source, receiver_depth=receiver, receiver_range=distance, max_bounces=bounces
    )
    expected = images(source, receiver, distance, 100.0, bounces)
    assert len(arrivals) == len(expected) == 2 * bounces + 1
    for i, (length, surface, seabed) in enumerate(expected):
        assert arrivals.travel_time[i] == pytest.approx(length / 1500.0, abs=1e-11)
        assert arrivals.path_length[i] == pytest.approx(length, abs=1e-8)
        assert (arrivals.surface_bounces[i], arrivals.seabed_bounces[i]) == (surface, seabed)
        assert abs(arrivals.launch_angle[i]) == pytest.approx(math.degrees(math.acos(distance / length)), abs=1e-7)
        assert abs(arrivals.spreading[i]) == pytest.approx(length, rel=1e-6)
    assert not arrivals.caustics.any()
    assert arrivals.unresolved == 0
    # spherical spreading: the rays of a point source fill a circle of radius r and, across, their own length
    if kind == "profile":
        lengths = np.array([entry[0] for entry in expected])
        np.testing.assert_allclose(arrivals.amplitude, 1.0 / lengths, rtol=1e-6)
        np.testing.assert_allclose(np.cos(np.radians(arrivals.phase)), (-1.0) ** arrivals.surface_bounces, atol=1e-9)


def test_reflection_from_the_seabed_and_a_windy_surface_is_in_amplitude_and_phase():
    """Rayleigh's coefficient and Eckart's by hand, at the grazing angles of the images."""
    source, receiver, distance, frequency, wind = 36.0, 71.0, 500.0, 1000.0, 6.0
    mud = Sediment(1480.0, 1400.0, 0.0)
    water = level_water("section", kind=mud, surface=Surface(wind))
    arrivals = find_arrivals(
        water, source_depth=source, receiver_depth=receiver, receiver_range=distance, max_bounces=3, frequency=frequency
    )
    roughness = math.sqrt(0.0081 / (4 * 0.74)) * wind**2 / 9.81
    for i in range(len(arrivals)):
        length, sine = arrivals.path_length[i], math.sqrt(1 - (distance / arrivals.path_length[i]) ** 2)
        below = math.sqrt(1 - (distance / length * 1480.0 / 1500.0) ** 2)
        rayleigh = (1400.0 * 1480.0 / below - 1000.0 * 1500.0 / sine) / (
            1400.0 * 1480.0 / below + 1000.0 * 1500.0 / sine
        )
        mean = -math.exp(-2 * (2 * math.pi * frequency / 1500.0 * roughness * sine) ** 2)
        factor = rayleigh ** arrivals.seabed_bounces[i] * mean ** arrivals.surface_bounces[i]
        assert arrivals.amplitude[i] == pytest.approx(abs(factor) / length, rel=1e-6)
        assert math.cos(math.radians(arrivals.phase[i])) == pytest.approx(math.copysign(1.0, factor), abs=1e-9)


def test_the_surface_is_calm_without_a_frequency_and_says_so():
    water = level_water("section", surface=Surface(8.0))
    rays = connect(water, source_depth=30.0, receiver_depth=50.0, receiver_range=700.0, max_bounces=1)
    assert "taken to be calm" in rays.attrs["comment"]
    bounced = rays.isel(arrival=rays.surface_bounces.values == 1)
    assert float(bounced.amplitude[0]) == pytest.approx(1.0 / float(bounced.path_length[0]), rel=1e-9)


def test_a_constant_gradient_has_the_time_between_two_points():
    """t = acosh(1 + g² (dx² + dz²)/(2 c1 c2))/|g|, for the ray that goes straight there or by its turning point."""
    c1, g = 1500.0, 0.05
    water = Profile([0.0, 900.0], [c1, c1 + g * 900.0])
    for dx, dz in ((1000.0, 500.0), (8000.0, 20.0)):
        arrivals = find_arrivals(water, source_depth=0.0, receiver_depth=dz, receiver_range=dx, max_bounces=0)
        time = math.acosh(1 + g * g * (dx * dx + dz * dz) / (2 * c1 * (c1 + g * dz))) / g
        assert len(arrivals) == 1
        assert arrivals.travel_time[0] == pytest.approx(time, abs=1e-11)
        # with times for lengths this is the hyperbolic half-plane of curvature -g²
        here = c1 + g * dz
        assert abs(arrivals.spreading[0]) == pytest.approx(here * math.sinh(g * time) / g, rel=1e-6)
    assert arrivals.turns.tolist() == [1]


# --- all rays, each once


@pytest.mark.long
@pytest.mark.parametrize("kind", ["profile", "section", "hills"])
def test_a_fan_twice_as_fine_finds_no_more(kind):
    if kind == "hills":
        water, receivers = hilly_section(), {"receiver_depth": [200.0, 700.0, 1500.0], "receiver_range": 30_000.0}
    else:
        depth = np.linspace(0.0, 5000.0, 101)
        water = munk_section() if kind == "section" else Profile(depth, munk_speed(depth))
        receivers = {"receiver_depth": [300.0, 1000.0, 3000.0], "receiver_range": 90_000.0}
    found = [
        find_arrivals(
            water, source_depth=800.0, max_bounces=7, launch_angles=np.linspace(-40.0, 40.0, rays), **receivers
        )
        for rays in (401, 801, 1601)
    ]
    assert len(found[0]) >= 20
    for finer in found[1:]:
        np.testing.assert_allclose(finer.launch_angle, found[0].launch_angle, atol=1e-6)
        np.testing.assert_allclose(finer.travel_time, found[0].travel_time, atol=1e-10)
        assert finer.turns.tolist() == found[0].turns.tolist()
    same = found[0]
    for receiver in range(3):
        angles = np.sort(same.launch_angle[same.receiver == receiver])
        assert np.all(np.diff(angles) > 1e-9)
    # each sign change of a plain fan, taken twice as fine, is an arrival
    angles = np.linspace(-40.0, 40.0, 1601)
    fan = trace_fan(
        water, source_depth=800.0, launch_angles=angles, max_range=receivers["receiver_range"],
        max_surface_bounces=7, max_seabed_bounces=7,
    )  # fmt: skip
    alike = np.ones(angles.size - 1, dtype=bool)
    for name in ("turns", "surface_bounces", "seabed_bounces", "status"):
        alike &= np.diff(getattr(fan, name)) == 0
    alike &= (fan.status[1:] == 0) & ((fan.surface_bounces + fan.seabed_bounces)[1:] <= 7)
    for receiver, depth in enumerate(receivers["receiver_depth"]):
        crossing = np.flatnonzero(alike & (np.diff(np.sign(fan.depth - depth)) != 0))
        mine = np.sort(same.launch_angle[same.receiver == receiver])
        for cell in crossing:
            inside = (mine >= angles[cell] - 1e-6) & (mine <= angles[cell + 1] + 1e-6)
            assert inside.sum() % 2 == 1, (depth, angles[cell])


@pytest.mark.long
@pytest.mark.parametrize("kind", ["profile", "section"])
def test_rays_arrive_where_they_should(kind):
    depth = np.linspace(0.0, 5000.0, 51)
    water = munk_section() if kind == "section" else Profile(depth, munk_speed(depth))
    arrivals = find_arrivals(
        water, source_depth=1000.0, receiver_depth=[400.0, 2000.0], receiver_range=[50_000.0, 61_000.0], max_bounces=2
    )
    assert set(arrivals.receiver.tolist()) == {0, 1}
    for i in range(len(arrivals)):
        fan = trace_fan(
            water, source_depth=1000.0, launch_angles=arrivals.launch_angle[i], max_range=arrivals.receiver_range[i],
            depth_tolerance=1e-6, time_tolerance=1e-11,
        )  # fmt: skip
        assert fan.depth[0] == pytest.approx(arrivals.receiver_depth[i], abs=0.01)
        assert fan.travel_time[0] == pytest.approx(arrivals.travel_time[i], abs=1e-9)
        assert fan.arrival_angle[0] == pytest.approx(arrivals.arrival_angle[i], abs=1e-6)
        for name in ("turns", "surface_bounces", "seabed_bounces"):
            assert getattr(fan, name)[0] == getattr(arrivals, name)[i]
    for receiver in (0, 1):
        assert np.all(np.diff(arrivals.travel_time[arrivals.receiver == receiver]) >= 0.0)


def test_both_sides_of_a_caustic_are_found():
    """n²-linear water over its own shadow: rays z = x tan θ - g0 x²/(2 c0 cos² θ) touch the envelope of parabolas.

    With u = tan θ depth at a range is x u - a (1 + u²), a = g0 x²/(2 c0): two rays for each depth less than that of the
    caustic, x²/(4 a) - a.
    """
    c0, g0, x = 1500.0, 0.3, 4000.0
    depths = np.linspace(0.0, 1750.0, 9)
    section = Section(
        SpeedField.from_speeds(depths, c0 / np.sqrt(1 - 2 * g0 * depths / c0)), Seabed.flat(1740.0, kind=None),
        max_range=5000.0,
    )  # fmt: skip
    a = g0 * x * x / (2 * c0)
    caustic = x * x / (4 * a) - a
    for short in (100.0, 1.0, 1e-3):
        depth = caustic - short
        arrivals = find_arrivals(section, source_depth=0.0, receiver_depth=depth, receiver_range=x, max_bounces=0)
        u = (x + np.array([-1.0, 1.0]) * math.sqrt(x * x - 4 * a * (a + depth))) / (2 * a)
        expected = np.degrees(np.arctan(u))
        np.testing.assert_allclose(np.sort(arrivals.launch_angle), expected, atol=1e-6)
        assert sorted(arrivals.caustics.tolist()) == [0, 1]
        # the steep one has touched the caustic
        assert arrivals.caustics[np.argmax(arrivals.launch_angle)] == 1
        np.testing.assert_allclose(np.cos(np.radians(arrivals.phase)), arrivals.caustics == 0, atol=1e-9)
    none = find_arrivals(section, source_depth=0.0, receiver_depth=caustic + 0.02, receiver_range=x, max_bounces=0)
    assert len(none) == 0


# --- layers and sections agree


@pytest.mark.long
def test_arrivals_of_a_section_are_those_of_its_finest_layers():
    section = munk_section(120_000.0, kind=None)
    arguments = {
        "source_depth": 900.0,
        "receiver_depth": [700.0, 1700.0, 2500.0],
        "receiver_range": 110_000.0,
        "max_bounces": 2,
    }
    ours = find_arrivals(section, **arguments)
    layered = find_arrivals(section.profile_at(0.0, 4000), seabed_depth=5000.0, **arguments)
    ours_free, layered_free = (found.seabed_bounces == 0 for found in (ours, layered))
    assert ours_free.sum() == layered_free.sum() >= 8
    np.testing.assert_allclose(ours.travel_time[ours_free], layered.travel_time[layered_free], atol=2e-5)
    np.testing.assert_allclose(ours.launch_angle[ours_free], layered.launch_angle[layered_free], atol=2e-3)
    assert ours.turns[ours_free].tolist() == layered.turns[layered_free].tolist()
    assert ours.caustics[ours_free].tolist() == layered.caustics[layered_free].tolist()


@settings(max_examples=25)
@given(angle=st.floats(-40.0, 40.0), seed=st.integers(0, 500))
def test_spreading_through_layers_is_what_neighbouring_rays_do(angle, seed):
    rng = np.random.default_rng(seed)
    depth = np.concatenate(([0.0], np.cumsum(rng.uniform(20.0, 90.0, 8))))
    water = Profile(depth, 1500.0 + np.cumsum(rng.normal(0.0, 3.0, 9)))
    source = 0.4 * depth[-1]
    step = 1e-6
    fan = trace_fan(water, source_depth=source, launch_angles=[angle - step, angle, angle + step], max_range=2500.0)
    if fan.status.any() or any(np.ptp(getattr(fan, name)) for name in ("turns", "surface_bounces", "seabed_bounces")):
        return
    arrivals = find_arrivals(
        water, source_depth=source, receiver_depth=fan.depth[1], receiver_range=2500.0, max_bounces=60,
        launch_angles=[angle - 1e-4, angle + 1e-4],
    )  # fmt: skip
    mine = np.flatnonzero(np.abs(arrivals.launch_angle - angle) < 1e-7)
    across = (fan.depth[2] - fan.depth[0]) / math.radians(2 * step) * math.cos(math.radians(fan.arrival_angle[1]))
    if abs(across) < 100.0 or not mine.size:
        return
    bounces = fan.surface_bounces[1] + fan.seabed_bounces[1]
    assert arrivals.spreading[mine[0]] == pytest.approx(across * (-1.0) ** bounces, rel=1e-3)


# --- invariants


@pytest.mark.long
@pytest.mark.parametrize("kind", ["profile", "section", "hills"])
def test_travel_times_are_reciprocal(kind):
    source, receiver = 500.0, 1100.0
    if kind == "hills":
        water, reach = hilly_section(), 30_000.0
        back = mirrored(water)
    else:
        depth = np.linspace(0.0, 5000.0, 101)
        water = munk_section() if kind == "section" else Profile(depth, munk_speed(depth))
        back, reach = water, 70_000.0
    options = {"receiver_range": reach, "max_bounces": 7, "launch_angles": np.linspace(-60.0, 60.0, 1201)}
    there = find_arrivals(water, source_depth=source, receiver_depth=receiver, **options)
    again = find_arrivals(back, source_depth=receiver, receiver_depth=source, **options)
    assert len(there) == len(again) > 8
    np.testing.assert_allclose(again.travel_time, there.travel_time, atol=1e-9, rtol=0)
    np.testing.assert_allclose(again.launch_angle, -there.arrival_angle, atol=1e-5)
    np.testing.assert_allclose(again.path_length, there.path_length, atol=1e-4)
    assert again.caustics.tolist() == there.caustics.tolist()
    if kind == "section":
        # where water changes with range a circle about the source is no circle about the receiver
        np.testing.assert_allclose(again.amplitude, there.amplitude, rtol=1e-5)


@pytest.mark.long
def test_the_uncertainty_of_a_time_is_that_of_one_shift_of_speed():
    depth = np.linspace(0.0, 400.0, 41)
    speed = 1500.0 - 0.02 * depth
    water = Profile(depth, speed, uncertainty=speed * 1e-6)
    arrivals = find_arrivals(water, source_depth=50.0, receiver_depth=90.0, receiver_range=3000.0, max_bounces=2)
    np.testing.assert_allclose(arrivals.travel_time_uncertainty, 1e-6 * arrivals.travel_time, rtol=1e-9)
    section = Section.from_profile(water, seabed=390.0, max_range=5000.0)
    ours = find_arrivals(section, source_depth=50.0, receiver_depth=90.0, receiver_range=3000.0, max_bounces=2)
    np.testing.assert_allclose(ours.travel_time_uncertainty, 1e-6 * ours.travel_time, rtol=1e-5)


def test_the_table_is_labelled_also_where_nothing_arrives():
    water = level_water("section", kind=None)
    for options in ({"max_bounces": 0}, {"max_bounces": 0, "launch_angles": [50.0, 60.0]}):
        rays = connect(water, source_depth=30.0, receiver_depth=[50.0, 60.0], receiver_range=700.0, **options)
        assert rays.sizes["arrival"] == (0 if "launch_angles" in options else 2)
        assert {"receiver", "travel_time", "amplitude", "phase", "caustics"} <= set(rays)
        assert all("long_name" in rays[name].attrs for name in rays)
        assert rays.receiver.dtype.kind == rays.turns.dtype.kind == "i"


def test_bad_arguments_get_one_clear_line():
    water, profile = level_water("section"), level_water("profile")
    good = {"source_depth": 30.0, "receiver_depth": 50.0, "receiver_range": 700.0}
    for wrong, changed, message in (
        (water, {"receiver_depth": 150.0}, "receiver 0: depth 150 m, where 0 to 100 m would be right"),
        (profile, {"receiver_depth": [10.0, -1.0]}, "receiver 1: depth -1 m"),
        (water, {"receiver_range": 0.0}, "receiver 0: range 0 m"),
        (water, {"receiver_range": 60_000.0}, "beyond the section, which reaches 50000 m"),
        (water, {"receiver_depth": [1.0, 2.0], "receiver_range": [1.0, 2.0, 3.0]}, "as many of each would be right"),
        (water, {"max_bounces": -1}, "max_bounces is -1"),
        (water, {"frequency": 0.0}, "frequency is 0 Hz"),
        (water, {"launch_angles": 5.0}, "between at least two angles"),
        (water, {"seabed_depth": 90.0}, "a section has a seabed of its own"),
        (water, {"source_depth": 101.0}, "source depth 101 m is below the seabed"),
    ):
        with pytest.raises(InputError, match=message):
            connect(wrong, **(good | changed))


@pytest.mark.parametrize("sloping", [None, False, True])
@pytest.mark.parametrize("surface", [True, False])
def test_receivers_on_the_surface_and_on_the_seabed(surface, sloping):
    """In even water: the images of the source (above the surface, and by a level seabed) give each path once."""
    water = Profile([0.0, 100.0], [1500.0, 1500.0])
    end = 100.0
    if sloping is not None:
        end = 60.0 if sloping else 100.0
        seabed = Seabed([0.0, 1000.0], [100.0, end], kind="sand")
        water = Section.from_profile(water, seabed=seabed, max_range=1000.0)
    depth = 0.0 if surface else end
    direct = find_arrivals(water, source_depth=30.0, receiver_depth=depth, receiver_range=1000.0, max_bounces=0)
    assert len(direct.launch_angle) == 1
    length = np.hypot(1000.0, depth - 30.0)
    np.testing.assert_allclose(direct.launch_angle, np.degrees(np.arctan2(depth - 30.0, 1000.0)), atol=1e-5)
    np.testing.assert_allclose(direct.travel_time, length / 1500.0, rtol=0, atol=1e-9)
    if not sloping:
        once = find_arrivals(water, source_depth=30.0, receiver_depth=depth, receiver_range=1000.0, max_bounces=1)
        other = 170.0 if surface else -30.0  # the source in the mirror of the other boundary
        np.testing.assert_allclose(
            np.sort(once.travel_time), [length / 1500.0, np.hypot(1000.0, depth - other) / 1500.0], rtol=0, atol=1e-9
        )
