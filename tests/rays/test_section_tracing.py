"""Rays through a section against closed forms, an independent integrator, the layered tracer and invariants."""

from __future__ import annotations

import json
import math
import sys
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.rays import STATUSES, _kernels_step, trace, trace_fan
from ocean_sound.rays.section_tracing import trace_to
from ocean_sound.section import Seabed, Section, SpeedField

sys.path.insert(0, str(Path(__file__).parent))
from section_oracles import integrate, wedge_end, wedge_point

pytestmark = pytest.mark.kernels

NO_LIMITS = (10_000, 10_000, 20_000)
TIGHT = {"depth_tolerance": 1e-7, "time_tolerance": 1e-12}


def munk_speed(depth, axis=1300.0):
    eta = 2.0 * (depth - axis) / 1300.0
    return 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta)))


def munk_section(cells=200, *, seabed=None, max_range=100_000.0, deepest=5100.0):
    depths = np.linspace(0.0, deepest, cells + 1)
    return Section(
        SpeedField.from_speeds(depths, munk_speed(depths)),
        seabed or Seabed.flat(5000.0),
        max_range=max_range,
    )


def rough_seabed(max_range=100_000.0, seed=5):
    """Hills of some tens of metres over some kilometres, with a point each kilometre."""
    rng = np.random.default_rng(seed)
    ranges = np.arange(0.0, max_range + 1.0, 1000.0)
    waves = rng.uniform(6000.0, 20000.0, 5)
    hills = sum(10.0 * np.sin(2 * np.pi * ranges / wave + rng.uniform(0, 6)) for wave in waves)
    return Seabed(ranges, 4800.0 + hills)


def moving_section(max_range=100_000.0, cells=(40, 80), seabed=None):
    """A Munk profile whose axis rises by 300 m along the track, a warm eddy, a rough seabed."""
    ranges, depths = np.linspace(0.0, max_range, cells[0] + 1), np.linspace(0.0, 5100.0, cells[1] + 1)
    x, z = np.meshgrid(ranges, depths, indexing="ij")
    eddy = 4.0 * np.exp(-(((x / max_range - 0.4) / 0.15) ** 2) - ((z - 500.0) / 400.0) ** 2)
    field = SpeedField.from_speeds(depths, munk_speed(z, 1300.0 - 300.0 * x / max_range) + eddy, ranges)
    return Section(field, seabed or rough_seabed(max_range), max_range=max_range)


def mirrored(section):
    """The same section seen from its other end."""
    field, reach = section.field, section.max_range
    speeds = field.speed_at(field.ranges[:, None], field.depths[None, :])
    turned = SpeedField.from_speeds(field.depths, speeds[::-1], reach - field.ranges[::-1])
    seabed = Seabed(reach - section.seabed.ranges[::-1], section.seabed.depths[::-1])
    return Section(turned, seabed, max_range=reach)


# --- the method


def test_the_coefficients_of_a_step_meet_the_conditions_of_their_order():
    """Of methods for y'' = f(y), as in Hairer, Noersett and Wanner, Solving Ordinary Differential Equations I, II.14.

    With row sums of c²/2, order p asks for sum b' c^j = 1/(j+1) to j = p - 1, sum b c^j = 1/((j+1)(j+2)) to j = p - 2,
    and sum b' c^m A c^n = 1/((n+1)(n+2)(m+n+3)) to m + n + 3 = p, with b one more order in the same way.
    """
    c = _kernels_step.NODES
    a = np.hstack((_kernels_step.COUPLING, np.zeros((6, 1))))
    np.testing.assert_allclose(a.sum(axis=1), c**2 / 2, atol=1e-14)
    position, slope = a[5], _kernels_step.SLOPES
    for order, b, s in ((6, position, slope), (4, _kernels_step.POSITION_CHECK, _kernels_step.SLOPE_CHECK)):
        for j in range(order):
            assert s @ c**j == pytest.approx(1 / (j + 1), abs=1e-14)
        for j in range(order - 1):
            assert b @ c**j == pytest.approx(1 / ((j + 1) * (j + 2)), abs=1e-14)
        for m in range(order):
            for n in range(order):
                inner = c**m * (a @ c**n)
                exact = 1 / ((n + 1) * (n + 2) * (m + n + 3))
                if m + n + 3 <= order:
                    assert s @ inner == pytest.approx(exact, abs=1e-14)
                if m + n + 4 <= order:
                    assert b @ inner == pytest.approx(exact / (m + n + 4), abs=1e-14)


# --- an independent integrator


@pytest.mark.long
def test_a_fan_over_changing_water_and_a_rough_seabed_agrees_with_dop853():
    section, reach = moving_section(), 100_000.0
    angles = np.linspace(-17.0, 18.0, 9)
    fan = trace_fan(section, source_depth=1000.0, launch_angles=angles, max_range=reach)
    # elsewhere neighbouring rays part faster than straight ones would by far, and errors with them
    calm = np.abs(fan.spreading) < 2.0 * reach
    # and an integrator that looks for events at the ends of its steps may pass over a grazing bounce
    ends = trace_to(section, 1000.0, angles, reach, limits=NO_LIMITS, bounces=12)
    calm &= ~(ends.bounces[:, :, 2] < 2.0).any(axis=1)
    assert calm.mean() > 0.8
    assert fan.seabed_bounces.max() >= 2
    off = []
    for i in np.flatnonzero(calm):
        depth, time, length, angle, surface, seabed = integrate(section, 1000.0, angles[i], reach)
        assert (fan.surface_bounces[i], fan.seabed_bounces[i]) == (surface, seabed)
        off.append((depth - fan.depth[i], time - fan.travel_time[i], length - fan.path_length[i]))
        assert fan.arrival_angle[i] == pytest.approx(angle, abs=1e-4)
    depth, time, length = np.percentile(np.abs(off), 99, axis=0)
    assert depth < 0.1
    assert time < 1e-6
    assert length < 0.01


def test_a_few_rays_agree_with_dop853():
    section = moving_section(20_000.0, (12, 30))
    angles = [-17.0, -4.0, 0.0, 25.0]
    fan = trace_fan(section, source_depth=1000.0, launch_angles=angles, max_range=20_000.0)
    for i, angle in enumerate(angles):
        depth, time, _, _, surface, seabed = integrate(section, 1000.0, angle, 20_000.0)
        assert fan.depth[i] == pytest.approx(depth, abs=0.02)
        assert fan.travel_time[i] == pytest.approx(time, abs=1e-6)
        assert (fan.surface_bounces[i], fan.seabed_bounces[i]) == (surface, seabed)


# --- closed forms


def test_rays_of_an_n2_linear_medium_are_parabolas():
    """Pedersen and Gordon (1972, JASA 51, 323), as for the layered tracer; here w = (c_ref/c)² is linear, so exact."""
    c0, g0, theta = 1500.0, 0.016, math.radians(10.0)
    depths = np.linspace(0.0, 2000.0, 5)
    section = Section(
        SpeedField.from_speeds(depths, c0 / np.sqrt(1 - 2 * g0 * depths / c0)), Seabed.flat(1990.0), max_range=80_000.0
    )
    vertex = c0 * math.sin(2 * theta) / (2 * g0)
    q = math.sin(theta) / c0
    s = q * c0**3 / g0
    time = s / c0**2 - (2 * g0 / c0**3) * (q * s**2 / 2 - g0 * s**3 / (6 * c0**3))
    fan = trace_fan(section, source_depth=0.0, launch_angles=10.0, max_range=vertex)
    assert fan.depth[0] == pytest.approx(c0 * math.sin(theta) ** 2 / (2 * g0), abs=1e-9)
    assert fan.travel_time[0] == pytest.approx(time, abs=1e-12)
    assert fan.arrival_angle[0] == pytest.approx(0.0, abs=1e-10)
    # z(x) = x tan(theta) - g0 x²/(2 c0 cos²(theta)), so that dz/dtheta at the vertex is X
    assert fan.spreading[0] == pytest.approx(vertex, rel=1e-9)
    # from the surface a ray sent up bounces at once; half an arc before the third vertex
    whole = trace_fan(section, source_depth=0.0, launch_angles=[10.0, -10.0], max_range=4.5 * vertex)
    assert whole.surface_bounces.tolist() == [2, 3]
    assert whole.turns.tolist() == [2, 2]
    np.testing.assert_allclose(whole.depth, 0.75 * c0 * math.sin(theta) ** 2 / (2 * g0), atol=1e-8)


def munk_cycles():
    with (Path(__file__).parents[1] / "published" / "values.json").open(encoding="utf-8") as file:
        checks = {check["id"]: check for check in json.load(file)["checks"]}
    return [
        (check["inputs"]["theta_axis"]["value"], check["expected"], checks.get(name.replace(".X.", ".T."), check))
        for name, check in checks.items()
        if name.startswith("munk.cycle.X.")
    ]


@pytest.mark.parametrize(("angle", "cycle", "time"), munk_cycles())
def test_cycles_of_the_munk_profile(angle, cycle, time):
    """Cycle distances and times by quadrature in 50 digits: see values.json."""
    section = munk_section(1000)
    fan = trace_fan(section, source_depth=1300.0, launch_angles=[angle, -angle], max_range=cycle, **TIGHT)
    np.testing.assert_allclose(fan.depth, 1300.0, atol=2e-4)
    np.testing.assert_allclose(fan.arrival_angle, [angle, -angle], atol=2e-5)
    assert fan.turns.tolist() == [2, 2]
    if ".T." in time["id"]:
        np.testing.assert_allclose(fan.travel_time, time["expected"], atol=5e-8)


@pytest.mark.parametrize("slope", [0.02, 0.1])
def test_a_wedge_mirrors_rays_as_its_images_do(slope):
    depth0, reach, source = 200.0, 4000.0, 80.0
    depths = np.linspace(0.0, depth0 + slope * reach + 50.0, 4)
    seabed = Seabed([-1000.0, reach], [depth0 - 1000.0 * slope, depth0 + slope * reach])
    section = Section(SpeedField.from_speeds(depths, np.full(4, 1500.0)), seabed, max_range=reach)
    angles = np.array([-35.0, -20.0, -7.0, 3.0, 12.0, 33.0])
    fan = trace_fan(section, source_depth=source, launch_angles=angles, max_range=reach, points=101)
    assert fan.seabed_bounces.max() >= 2
    for i, angle in enumerate(angles):
        length, depth = wedge_end(source, angle, (depth0, slope), reach)
        assert fan.path_length[i] == pytest.approx(length, abs=1e-6)
        assert fan.travel_time[i] == pytest.approx(length / 1500.0, abs=1e-9)
        assert fan.depth[i] == pytest.approx(depth, abs=1e-6)
        # a plane mirror leaves the wavefront round
        assert abs(fan.spreading[i]) == pytest.approx(length, rel=1e-9)
        for x, z, part in zip(fan.path_range[i], fan.path_depth[i], np.linspace(0.0, 1.0, 101), strict=True):
            assert (x, z) == pytest.approx(wedge_point(source, angle, (depth0, slope), part * length), abs=1e-6)
    assert not fan.caustics.any()


def test_straight_rays_round_a_round_earth():
    """A chord of the sphere: after a length s the distance from the centre is that of a plane triangle."""
    radius, source, angle = 6.371e6, 3000.0, 2.0
    flat = np.linspace(0.0, 6000.0, 121)
    depths = radius * (1.0 - np.exp(-flat / radius))
    field = SpeedField.from_speeds(flat, 1500.0 * radius / (radius - depths))
    section = Section(field, Seabed.flat(5500.0), max_range=60_000.0, radius=radius)
    fan = trace_fan(section, source_depth=source, launch_angles=[angle, -angle], max_range=50_000.0, points=11, **TIGHT)
    for i, sign in enumerate((1.0, -1.0)):
        start, theta, arc = radius - source, math.radians(sign * angle), 50_000.0 / radius
        # the side opposite to the angle between the radii, by the law of sines
        end = start * math.cos(theta) / math.cos(theta - arc)
        length = start * math.sin(arc) / math.cos(theta - arc)
        assert fan.depth[i] == pytest.approx(radius - end, abs=1e-4)
        assert fan.path_length[i] == pytest.approx(length, abs=1e-5)
        assert fan.travel_time[i] == pytest.approx(length / 1500.0, abs=1e-8)
        assert fan.arrival_angle[i] == pytest.approx(math.degrees(theta - arc), abs=1e-6)
        assert fan.path_depth[i, -1] == fan.depth[i]
        assert abs(fan.spreading[i]) == pytest.approx(length, rel=1e-4)


# --- the layered tracer, and convergence


@pytest.mark.long
def test_the_layered_tracer_closes_in_as_the_square_of_its_layers():
    """For rays that bounce; about a turning point a ray sees one layer only, and the power is 1.5."""
    section = munk_section(400, seabed=Seabed.flat(5000.0))
    angles = np.concatenate((np.linspace(-24.0, -16.0, 12), np.linspace(16.0, 24.0, 12)))
    exact = trace_fan(section, source_depth=1000.0, launch_angles=angles, max_range=60_000.0, **TIGHT)
    errors = []
    for layers in (500, 1000, 2000):
        water = section.profile_at(0.0, layers)
        fan = trace_fan(water, source_depth=1000.0, launch_angles=angles, max_range=60_000.0)
        assert fan.turns.tolist() == exact.turns.tolist()
        errors.append(
            [
                np.sqrt(np.mean((fan.depth - exact.depth) ** 2)),
                np.sqrt(np.mean((fan.travel_time - exact.travel_time) ** 2)),
            ]
        )
    ratios = np.array(errors[:-1]) / np.array(errors[1:])
    np.testing.assert_allclose(ratios, 4.0, rtol=0.02)
    assert errors[-1][0] < 0.01
    assert errors[-1][1] < 1e-6


@pytest.mark.long
def test_a_tighter_tolerance_helps():
    section = moving_section()
    angles = np.linspace(-15.0, 15.0, 41)
    reference = trace_fan(section, source_depth=1000.0, launch_angles=angles, max_range=100_000.0, **TIGHT)
    errors = []
    for factor in (10.0, 1.0, 0.1):
        fan = trace_fan(
            section, source_depth=1000.0, launch_angles=angles, max_range=100_000.0,
            depth_tolerance=0.01 * factor, time_tolerance=1e-6 * factor,
        )  # fmt: skip
        off = np.abs([fan.depth - reference.depth, fan.travel_time - reference.travel_time])
        errors.append(np.median(off, axis=1))
    assert np.all(np.array(errors[1:]) < 0.5 * np.array(errors[:-1]))
    assert errors[1][0] < 0.01
    assert errors[1][1] < 1e-6


# --- invariants


@settings(max_examples=20)
@given(angle=st.floats(-60.0, 60.0), source=st.floats(0.0, 5000.0))
def test_snells_invariant_is_kept(angle, source):
    section = munk_section(60)
    fan = trace_fan(section, source_depth=source, launch_angles=angle, max_range=20_000.0)
    assert STATUSES[fan.status[0]] == "reached_maximum_range"
    before = math.cos(math.radians(angle)) / section.speed_at(0.0, source)
    after = math.cos(math.radians(fan.arrival_angle[0])) / section.speed_at(0.0, fan.depth[0])
    assert after == pytest.approx(before, rel=1e-6)


@pytest.mark.parametrize("angle", [-19.3, -14.2, -8.0, -3.0, 2.0, 7.7, 13.3, 18.1])
def test_spreading_is_what_neighbouring_rays_do(angle):
    """Through changing water, and off a seabed with slope and curvature."""
    section, step = moving_section(60_000.0, (20, 60)), 1e-4
    fan = trace_fan(
        section, source_depth=900.0, launch_angles=[angle - step, angle, angle + step], max_range=60_000.0, **TIGHT
    )
    assert np.ptp(fan.seabed_bounces) == np.ptp(fan.surface_bounces) == 0
    by_depth = (fan.depth[2] - fan.depth[0]) / math.radians(2 * step)
    # bounces turn the frame of a ray over; caustics are what is left of its sign
    across = (
        by_depth
        * math.cos(math.radians(fan.arrival_angle[1]))
        * (-1.0) ** (fan.seabed_bounces[1] + fan.surface_bounces[1])
    )
    assert fan.spreading[1] == pytest.approx(across, rel=2e-4, abs=1.0)
    assert (-1) ** fan.caustics[1] == np.sign(fan.spreading[1])


@settings(max_examples=12)
@given(angle=st.floats(-18.0, 18.0), source=st.floats(200.0, 4500.0))
def test_a_ray_sent_back_takes_the_same_time(angle, source):
    section = moving_section(30_000.0, (10, 30))
    back = mirrored(section)
    there = trace_fan(section, source_depth=source, launch_angles=angle, max_range=30_000.0, **TIGHT)
    if STATUSES[there.status[0]] != "reached_maximum_range" or not 1.0 < there.depth[0] < 4700.0:
        return
    again = trace_fan(
        back, source_depth=there.depth[0], launch_angles=-there.arrival_angle[0], max_range=30_000.0, **TIGHT
    )
    give = 1e-9 * max(abs(again.spreading[0]), 1.0)
    assert again.depth[0] == pytest.approx(source, abs=1e-6 + give)
    assert again.travel_time[0] == pytest.approx(there.travel_time[0], abs=1e-9)
    assert abs(again.spreading[0]) == pytest.approx(
        abs(there.spreading[0]) * section.speed_at(0.0, source) / back.speed_at(0.0, there.depth[0]), rel=1e-4, abs=1.0
    )


def test_targets_on_the_way_are_ends_of_shorter_rays():
    section = moving_section(40_000.0, (16, 40))
    angles = np.array([-17.0, -3.0, 8.0, 16.0])
    targets = [1.0, 12_345.0, 25_000.0, 40_000.0]
    ends = trace_to(section, 1000.0, angles, targets, limits=NO_LIMITS, tolerances=(1e-6, 1e-11), bounces=6)
    for j, target in enumerate(targets):
        fan = trace_fan(section, source_depth=1000.0, launch_angles=angles, max_range=target, **TIGHT)
        np.testing.assert_allclose(ends.depth[:, j], fan.depth, atol=1e-4)
        np.testing.assert_allclose(ends.travel_time[:, j], fan.travel_time, atol=1e-9)
        for name in ("turns", "surface_bounces", "seabed_bounces", "caustics"):
            assert getattr(ends, name)[:, j].tolist() == getattr(fan, name).tolist()
    for i in range(angles.size):
        kinds = ends.bounces[i, :, 0]
        assert np.nansum(kinds == 1) == ends.surface_bounces[i, -1]
        assert np.nansum(kinds == 2) == ends.seabed_bounces[i, -1]


def test_bounces_lie_on_the_seabed_and_obey_the_mirror():
    section = moving_section(40_000.0, (16, 40))
    angles = np.array([18.0, 22.0, 30.0])
    ends = trace_to(section, 1000.0, angles, 40_000.0, limits=NO_LIMITS, tolerances=(1e-7, 1e-12), bounces=1)
    for i, angle in enumerate(angles):
        kind, x, grazing = ends.bounces[i, 0]
        assert kind == 2
        options = {"max_range": x + 1.0, "max_seabed_bounces": 0, **TIGHT}
        short = trace_fan(section, source_depth=1000.0, launch_angles=angle, **options)
        assert short.range[0] == pytest.approx(x, abs=1e-4)
        depth, slope, _ = section.seabed.shape_at(x)
        assert short.depth[0] == pytest.approx(depth, abs=1e-4)
        assert grazing == pytest.approx(abs(short.arrival_angle[0]) - math.degrees(math.atan(slope)), abs=1e-5)


def test_paths_are_even_in_time_and_end_where_the_ray_does():
    section = munk_section(100)
    fan = trace_fan(section, source_depth=1000.0, launch_angles=[4.0, -13.0], max_range=50_000.0, points=401)
    assert fan.path_depth.shape == (2, 401)
    assert fan.path_depth[:, -1].tolist() == fan.depth.tolist()
    assert fan.path_range[:, 0].tolist() == [0.0, 0.0]
    steps = np.hypot(np.diff(fan.path_range), np.diff(fan.path_depth))
    middle = section.speed_at(0.0, 0.5 * (fan.path_depth[:, 1:] + fan.path_depth[:, :-1]))
    np.testing.assert_allclose(steps / middle, fan.travel_time[:, None] / 400 * np.ones(400), rtol=2e-5)


# --- how rays end


def test_rays_end_as_their_status_says():
    flat = SpeedField.from_speeds([0.0, 150.0, 300.0], [1500.0, 1500.0, 1500.0])
    hill = Seabed([0.0, 1000.0, 1300.0, 3000.0], [250.0, 250.0, 20.0, 20.0], kind=[(0.0, "sand"), (2000.0, None)])
    section = Section(flat, hill, max_range=3000.0)
    fan = trace_fan(section, source_depth=100.0, launch_angles=[8.0, -3.96], max_range=3000.0)
    assert [STATUSES[code] for code in fan.status] == ["turned_back", "absorbed_by_seabed"]
    assert 1000.0 < fan.range[0] < 1300.0
    assert fan.range[1] >= 2000.0
    assert fan.depth[1] == pytest.approx(20.0, abs=1e-6)
    level = Section(flat, Seabed.flat(250.0), max_range=9000.0)
    limited = trace_fan(
        level, source_depth=100.0, launch_angles=[20.0, -20.0, 0.0], max_range=9000.0,
        max_surface_bounces=1, max_seabed_bounces=0,
    )  # fmt: skip
    assert [STATUSES[code] for code in limited.status] == ["stopped_at_seabed"] * 2 + ["reached_maximum_range"]
    assert limited.range[0] == pytest.approx(150.0 / math.tan(math.radians(20.0)), abs=1e-6)
    assert limited.surface_bounces.tolist() == [0, 1, 0]
    creeping = trace_fan(level, source_depth=250.0, launch_angles=[0.0, -30.0], max_range=9000.0)
    assert STATUSES[creeping.status[0]] == "stuck"
    assert STATUSES[creeping.status[1]] == "reached_maximum_range"


def test_a_vertical_ray_ends_within_bounded_work():
    level = Section(
        SpeedField.from_speeds([0.0, 150.0, 300.0], [1500.0, 1490.0, 1500.0]), Seabed.flat(250.0), max_range=9000.0
    )
    fan = trace_fan(level, source_depth=100.0, launch_angles=90.0, max_range=9000.0, max_seabed_bounces=40)
    assert STATUSES[fan.status[0]] in {"stopped_at_seabed", "stuck"}


def test_the_dataset_says_what_was_traced():
    section = munk_section(60)
    rays = trace(section, source_depth=100.0, launch_angles=[-5, 5], max_range=9000.0, points=11)
    assert dict(rays.sizes) == {"ray": 2, "point": 11}
    assert rays.spreading.attrs["units"] == "m"
    assert "0.01 m" in rays.attrs["comment"]
    assert all("long_name" in rays[name].attrs or "standard_name" in rays[name].attrs for name in rays.variables)


def test_the_uncertainty_of_times_is_that_of_one_shift_of_speed():
    depth = np.linspace(0.0, 5000.0, 101)
    speed = munk_speed(depth)
    options = {"seabed": 4900.0, "max_range": 40_000.0, "flatten": False}
    section = Section.from_profile(Profile(depth, speed, uncertainty=speed * 1e-6), **options)
    moved = Section.from_profile(Profile(depth, speed * (1 + 1e-6)), **options)
    arguments = {"source_depth": 1000.0, "launch_angles": [-10.0, 2.0, 14.0], "max_range": 40_000.0}
    fan, shifted = trace_fan(section, **arguments, **TIGHT), trace_fan(moved, **arguments, **TIGHT)
    np.testing.assert_allclose(fan.travel_time_uncertainty, fan.travel_time - shifted.travel_time, rtol=1e-3)


def test_bad_arguments_get_one_clear_line():
    section = munk_section(20)
    good = {"source_depth": 100.0, "launch_angles": 1.0, "max_range": 1000.0}
    for changed, message in (
        ({"source_depth": 6000.0}, "source depth 6000 m is below the seabed"),
        ({"source_depth": -1.0}, "source depth -1 m is above the surface"),
        ({"max_range": 200_000.0}, "beyond the section, which reaches 100000 m"),
        ({"seabed_depth": 100.0}, "a section has a seabed of its own"),
        ({"depth_tolerance": 0.0}, "depth_tolerance is 0 m"),
        ({"time_tolerance": float("nan")}, "time_tolerance is nan s"),
        ({"launch_angles": 95.0}, "launch angle 0 is 95 degrees"),
    ):
        with pytest.raises(InputError, match=message):
            trace(section, **(good | changed))


def test_water_with_sharp_corners_keeps_to_the_tolerance():
    """Casts of four levels: the speed field bends within a metre of each, which no step may leap over."""
    casts = [
        Profile([0, 20, 60, 200], [1510, 1509, 1495, 1490]),
        Profile([0, 20, 60, 130], [1514, 1512, 1497, 1493]),
    ]
    water = Section.from_casts(
        casts, ranges=[0, 9000], seabed=Seabed([0, 9000], [200, 130], kind="sand"), flatten=False
    )
    asked = {"source_depth": 30.0, "launch_angles": np.linspace(-20, 20, 101), "max_range": 4000.0}
    found = trace_fan(water, **asked)
    finer = trace_fan(water, **asked, depth_tolerance=1e-5, time_tolerance=1e-9)
    error = np.abs(found.depth - finer.depth)
    assert np.quantile(error, 0.95) < 0.01
    assert np.quantile(np.abs(found.travel_time - finer.travel_time), 0.95) < 1e-6
