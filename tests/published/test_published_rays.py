"""Section 7: rays in one profile. Sources and how each value was confirmed stand with it in values.json."""

from __future__ import annotations

import math
from functools import cache

import mpmath
import numpy as np
import pytest
from scipy.optimize import brentq

from ocean_sound.profile import Profile
from ocean_sound.rays import trace_fan


def munk_speed(depth):
    eta = 2.0 * (depth - 1300.0) / 1300.0
    return 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta)))


def turning_depths(angle):
    """Where the speed is that of the axis over the cosine of the angle, above and below."""
    turning = 1500.0 / math.cos(math.radians(angle))
    below = 1300.0 + np.array([1e-6, 5000.0])
    above = 1300.0 - np.array([1e-6, 2000.0])
    return [brentq(lambda z: munk_speed(z) - turning, *bounds, xtol=1e-12) for bounds in (above, below)]


@cache
def munk(angle):
    """The Munk profile in layers of 1 cm, and ever thinner ones towards the turning depths of a ray.

    The arc about a turning point sees the gradient of one layer only: there the error falls as thickness to the power
    1.5, elsewhere as its square.
    """
    near = np.outer(np.geomspace(1e-7, 10.0, 8000), [-1.0, 1.0]).ravel()
    depth = np.unique(
        np.concatenate((np.linspace(0.0, 6500.0, 650_001), *(turning + near for turning in turning_depths(angle))))
    )
    depth = depth[(depth >= 0.0) & (np.diff(depth, prepend=-1.0) > 1e-9)]
    return Profile(depth, munk_speed(depth))


def one_ray(water, angle, distance, *, source=0.0, **options):
    return trace_fan(water, source_depth=source, launch_angles=angle, max_range=distance, **options)


def gradient_water(check, deepest=4000.0):
    return Profile([0.0, deepest], [check["c0"], check["c0"] + check["g"] * deepest])


def turning_ray(check):
    """A ray in a constant gradient, ended where its path is lowest: where it arrives level."""
    distance = check["c0"] / check["g"] * math.tan(math.radians(check["theta0"]))
    fan = one_ray(gradient_water(check), check["theta0"], distance)
    assert abs(fan.arrival_angle[0]) < 1e-11
    return fan


@pytest.mark.published("ray.cg.zt")
def test_turning_depth(check):
    check.agrees(turning_ray(check).depth[0])


@pytest.mark.published("ray.cg.xt")
def test_range_to_the_turning_point(check):
    fan = one_ray(gradient_water(check), check["theta0"], check.expected)
    # how far from level the ray still is, times the radius, is how far the turning point still is
    radius = check["c0"] / (check["g"] * math.cos(math.radians(check["theta0"])))
    check.agrees(check.expected + math.radians(fan.arrival_angle[0]) * radius)


@pytest.mark.published("ray.cg.tt")
def test_time_to_the_turning_point(check):
    check.agrees(turning_ray(check).travel_time[0])


@pytest.mark.published("ray.cg.R")
def test_radius_of_curvature(check):
    check.agrees(turning_ray(check).path_length[0] / math.radians(check["theta0"]))


@pytest.mark.published("ray.cg.twopoint")
def test_time_between_two_points(check):
    """The angle that connects them is found by bisection on the traced end point."""
    water = Profile([0.0, 600.0], [check["c1"], check["c1"] + check["g"] * 600.0])
    low, high = 0.0, 60.0
    for _ in range(60):
        middle = 0.5 * (low + high)
        fan = one_ray(water, middle, check["dx"])
        low, high = (middle, high) if fan.depth[0] < check["dz"] else (low, middle)
    check.agrees(fan.travel_time[0])


@pytest.mark.published("echo.lin")
def test_vertical_time_through_a_linear_gradient(check):
    water = Profile([0.0, check["z"]], [check["c0"], check["c0"] + check["g"] * check["z"]])
    check.agrees(water.travel_time())
    check.agrees(one_ray(water, 90.0, 1.0, max_seabed_bounces=0).travel_time[0])


@pytest.mark.published("echo.oblique")
def test_offset_of_an_oblique_ray(check):
    water = Profile([0.0, check["dz"]], [check["c0"], check["c0"] + check["g"] * check["dz"]])
    check.agrees(one_ray(water, check["theta0"], 5000.0, max_seabed_bounces=0).range[0])


@pytest.mark.published("echo.twolayer")
def test_offset_through_a_step_of_speed(check):
    """20 m at 1500 m/s, 30 m at 1480 m/s, 60 degrees from the vertical; the step is a layer of 1e-10 m."""
    water = Profile([0.0, 20.0, 20.0 + 1e-10, 50.0], [1500.0, 1500.0, 1480.0, 1480.0])
    check.agrees(one_ray(water, 30.0, 500.0, max_seabed_bounces=0).range[0])


def n2_linear(check, quantity):
    """A ray of the n²-linear medium to its vertex through 200 000 layers: within 1e-6 of what the layers leave."""
    c0, g0, theta = check["c0"], check["g0"], math.radians(check["theta0"])
    depth = np.linspace(0.0, 1.2 * c0 * math.sin(theta) ** 2 / (2 * g0), 200_001)
    water = Profile(depth, c0 / np.sqrt(1 - 2 * g0 * depth / c0))
    fan = one_ray(water, check["theta0"], c0 * math.sin(2 * theta) / (2 * g0))
    assert fan.turns[0] in (0, 1)
    assert abs(fan.arrival_angle[0]) < 1e-4
    assert getattr(fan, quantity)[0] == pytest.approx(check.expected, abs=1e-6)


@pytest.mark.published("ray.n2.z")
def test_vertex_depth_of_an_n2_linear_ray(check):
    n2_linear(check, "depth")


@pytest.mark.published("ray.n2.x")
def test_vertex_range_of_an_n2_linear_ray(check):
    n2_linear(check, "range")


@pytest.mark.published("ray.n2.t")
def test_vertex_time_of_an_n2_linear_ray(check):
    n2_linear(check, "travel_time")


@pytest.mark.published("munk.c.")
def test_munk_profile(check):
    check.agrees(munk(5.0).at(check["z"]))


@cache
def munk_cycle(angle):
    """Range and time after one cycle from the axis, where the ray has come back to it: found by Newton's method."""
    distance = 47_573.0 + 83.0 * angle**2
    for _ in range(6):
        fan = one_ray(munk(angle), angle, distance, source=1300.0)
        distance -= (fan.depth[0] - 1300.0) / math.tan(math.radians(fan.arrival_angle[0]))
    assert fan.depth[0] == pytest.approx(1300.0, abs=1e-8)
    assert fan.turns[0] == 2
    return distance, fan.travel_time[0]


@pytest.mark.published("munk.cycle.X")
def test_munk_cycle_range(check):
    check.agrees(munk_cycle(check["theta_axis"])[0])


@pytest.mark.published("munk.cycle.T")
def test_munk_cycle_time(check):
    """To first order a small change of the profile changes range and time of a ray of given angle by dT = p dX, so the
    layers' 0.1 mm of range is taken out of the time; the range is by quadrature here, with k² = 1 - (p c)² about the
    axis as -expm1 of what keeps its digits.
    """
    angle, (distance, time) = check["theta_axis"], munk_cycle(check["theta_axis"])
    check.agrees(time + math.cos(math.radians(angle)) / 1500.0 * (quadrature_range(angle) - distance))


def quadrature_range(angle):
    """Twice the integral of dz cot θ between the turning depths, made smooth by z = m + a sin φ."""
    cosine = mpmath.cos(mpmath.radians(angle))

    def ratio(z):
        eta = 2 * (z - 1300) / mpmath.mpf(1300)
        return cosine * (1 + mpmath.mpf("0.00737") * (eta - 1 + mpmath.exp(-eta)))

    with mpmath.workdps(25):
        upper, lower = (mpmath.findroot(lambda z: ratio(z) - 1, depth) for depth in turning_depths(angle))
        middle, half = (upper + lower) / 2, (lower - upper) / 2

        def slope(phi):
            u = ratio(middle + half * mpmath.sin(phi))
            return u / mpmath.sqrt(abs((1 - u) * (1 + u))) * half * mpmath.cos(phi)

        return float(2 * mpmath.quad(slope, [-mpmath.pi / 2, 0, mpmath.pi / 2]))


@pytest.mark.published("munk.zu")
def test_munk_upper_turning_depth(check):
    fan = one_ray(munk(check["theta_axis"]), -check["theta_axis"], 40_000.0, source=1300.0, points=400_001)
    check.agrees(fan.path_depth.min())


@pytest.mark.published("munk.zl")
def test_munk_lower_turning_depth(check):
    fan = one_ray(munk(check["theta_axis"]), check["theta_axis"], 45_000.0, source=1300.0, points=400_001)
    check.agrees(fan.path_depth.max())


@pytest.mark.published("munk.smallangle")
def test_munk_cycle_of_small_angles(check):
    """Cycle ranges go as the square of the angle: two of them give the limit, to what is left of the fourth power."""
    near, far = munk_cycle(0.2)[0], munk_cycle(0.4)[0]
    assert (4 * near - far) / 3 == pytest.approx(check.expected, abs=0.01)


@pytest.mark.published("duct")
def test_surface_duct_cutoff(check):
    """The handbook constant stands for one gradient, 0.0172 /s, and holds within 3 % for that of isothermal water."""
    height = check["H"]
    features = Profile([0.0, height, 1000.0], [1500.0, 1500.0 + 0.0172 * height, 1480.0]).features()
    assert features.duct_cutoff_frequency == pytest.approx(check.expected, rel=0.005)
    isothermal = Profile([0.0, height, 1000.0], [1500.0, 1500.0 + 0.0163 * height, 1480.0]).features()
    assert isothermal.duct_cutoff_frequency == pytest.approx(check.expected, rel=0.03)
