"""An independent way through a section: DOP853 over the textbook ray equations, stopped at each boundary."""

from __future__ import annotations

import math

import numba
import numpy as np
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from ocean_sound.section._kernels_field import field
from ocean_sound.section._kernels_seabed import seabed as seabed_at


@numba.njit
def ray_equations(_, y, water, reference):
    """Over the path length s: dx/ds = c ξ, dz/ds = c ζ, dξ/ds = -c_x/c², dζ/ds = -c_z/c², dt/ds = 1/c.

    Jensen, Kuperman, Porter and Schmidt, Computational Ocean Acoustics, eq. 3.23-3.24, from memory; c = c_ref/sqrt(w).
    """
    w, w_x, w_z, _, _, _ = field(y[0], y[1], water)
    c = reference / math.sqrt(w)
    half = 0.5 / (reference * math.sqrt(w))  # -c_x/c² = w_x/(2 c_ref sqrt(w))
    return np.array([c * y[2], c * y[3], half * w_x, half * w_z, 1.0 / c])


def integrate(section, source_depth, launch_angle, max_range, *, rtol=1e-11, right_hand_side=None):
    """Depth, time, path length, arrival angle, surface and seabed bounces of a ray where it reaches a range.

    Dense output finds where it leaves the water; the integration starts anew there.
    """
    water, reference = section.field.kernel_arrays(), section.field.reference_speed
    slope = right_hand_side or (lambda s, y: ray_equations(s, y, water, reference))
    theta = math.radians(launch_angle)
    c0 = float(section.speed_at(0.0, source_depth))
    state = np.array([0.0, source_depth, math.cos(theta) / c0, math.sin(theta) / c0, 0.0])
    scale = np.array([1e5, 1e3, 1e-3, 1e-4, 100.0])
    length, bounces = 0.0, [0, 0]
    bottom = section.seabed.kernel_arrays()

    def surface(_, y):
        return y[1]

    def floor(_, y):
        return seabed_at(y[0], bottom)[0] - y[1]

    def arrives(_, y):
        return y[0] - max_range

    surface.direction, floor.direction, arrives.direction = -1, -1, 1
    for event in (surface, floor, arrives):
        event.terminal = True
    for _ in range(1000):
        run = solve_ivp(
            slope, (0.0, 1e7), state, method="DOP853", rtol=rtol, atol=rtol * scale,
            events=(surface, floor, arrives), max_step=1500.0,
        )  # fmt: skip
        state = run.y[:, -1].copy()
        length += run.t[-1]
        if run.t_events[2].size:
            angle = math.degrees(math.atan2(state[3], state[2]))
            return state[1], state[4], length, angle, *bounces
        hit = 0 if run.t_events[0].size else 1
        bounces[hit] += 1
        tilt = 0.0 if hit == 0 else seabed_at(state[0], bottom)[1]
        normal = np.array([-tilt, 1.0]) / math.hypot(tilt, 1.0)
        state[2:4] -= 2.0 * (state[2:4] @ normal) * normal
    raise RuntimeError("the ray never arrived")


def wedge_point(source, angle, slope_depth, distance):
    """Where a ray is after a distance in a wedge of water: surface z = 0, seabed z = depth0 + slope x; by images.

    Mirrored again and again in its sides, the wedge fills the plane and the ray is a straight line; the polar angle
    about the apex, folded back, gives the point.
    """
    depth0, slope = slope_depth
    apex, opening = -depth0 / slope, math.atan(slope)
    theta = math.radians(angle)
    x = -apex + distance * math.cos(theta)
    z = source + distance * math.sin(theta)
    radius, polar = math.hypot(x, z), math.atan2(z, x)
    folded = polar % (2.0 * opening)
    folded = min(folded, 2.0 * opening - folded)
    return apex + radius * math.cos(folded), radius * math.sin(folded)


def wedge_end(source, angle, slope_depth, max_range):
    """The path length at which the folded ray first reaches a range, and its depth there; for rays down the slope."""
    far = brentq(lambda s: wedge_point(source, angle, slope_depth, s)[0] - max_range, 0.0, 3.0 * max_range, xtol=1e-10)
    return far, wedge_point(source, angle, slope_depth, far)[1]
