"""From positions back to what was measured: of corrected soundings, of recorded depths, of a transducer that moves."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from . import _kernels
from .beams import BAD, BEYOND, HIT, TURNED, below_transducer
from .directions import NO_DIRECTION, USABLE, Directions, numbers, third

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from ..profile import Profile
    from ..rays.medium import Medium

    Floats = NDArray[np.float64]

NOMINAL_SPEEDS = {"1500 m/s": 1500.0, "4800 ft/s": 4800.0 * 0.3048}
"""Speeds at which echo sounders have recorded depths, m/s (common practice); 4800 ft/s is 800 fathoms a second."""

_EXACT = 1e-12  # of the distance: the search for an angle ends here
_MISSED = 1e-6  # m: a search that ends farther away has found no beam
_STEEPENS = 1e6  # tangent of a beam's angle in the fastest water on its way, beyond which it counts as turned
_TRIES = 100
_SMALL = 1e-6  # relative step of a derivative
_NADIR = 1e-4  # sine below which derivatives are those of this sine: they are even functions of it


@dataclass(frozen=True, eq=False)
class TakenBack:
    """What an echo sounder measured of soundings that were corrected; all arrays of one shape.

    Parameters
    ----------
    time : numpy.ndarray
        One-way travel time, s; half the two-way time.
    directions : Directions
        In the water of the old profile at the transducer.
    speed : numpy.ndarray
        Speed of sound at the transducer by the old profile, m/s: what a level flat array's angles are to be taken as
        steered with when they are corrected anew.
    status : numpy.ndarray of int8
        By `beams.STATUSES`: 0 hit; 1 no beam gets so far across without turning; 2 below the deepest level; 3 a
        position that can't be. All but 0 have NaN for time and direction.
    """

    time: Floats
    directions: Directions
    speed: Floats
    status: NDArray[np.int8]


def taken_back(
    profile: Profile,
    depth: ArrayLike,
    across: ArrayLike = 0.0,
    along: ArrayLike = 0.0,
    *,
    transducer_depth: ArrayLike = 0.0,
) -> TakenBack:
    """Travel time and direction of soundings that were corrected with one profile, for correcting them with another.

    Parameters
    ----------
    profile : Profile
        The profile that they were corrected with; one that starts below the surface is extended to it.
    depth : array_like
        Depths below the water surface as corrected, m.
    across, along : array_like
        Horizontal distances from the transducer as corrected, m, positive to starboard and forward.
    transducer_depth : array_like
        Depths of the transducer below the water surface, m; beams of one depth are worked together.

    Returns
    -------
    TakenBack
        In the broadcast shape of the arguments.

    Raises
    ------
    InputError
        If a transducer is not between the surface and the deepest level, or the arguments do not broadcast.

    Notes
    -----
    Of the beams that go down all the way, one at most reaches a point. With s the tangent of its angle in the fastest
    water on its way, the distance across is the integral of r s/sqrt(1 + s² (1 - r²)) over depth, r being the speed
    over the fastest: increasing and concave in s, and at most s times the depth. So secants from s = 0 and from the
    straight line approach the solution from one side, without safeguards, faster each time. Each try is traced exactly.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> before = taken_back(Profile([0, 100], [1500, 1500]), 75.0, -75.0)
    >>> round(float(before.time), 9), float(before.directions.azimuth), round(float(before.directions.sine), 9)
    (0.070710678, -90.0, 0.707106781)
    """
    z, x, y, source = (
        np.asarray(v) for v in np.broadcast_arrays(*numbers(depth=depth, across=across, along=along,
                                                              transducer_depth=transducer_depth))
    )  # fmt: skip
    distance = np.hypot(x, y)
    sine, time, speed = np.full(z.shape, np.nan), np.full(z.shape, np.nan), np.full(z.shape, np.nan)
    status = np.full(z.shape, BAD, dtype=np.int8)
    sines, times, speeds, statuses = (column.reshape(-1) for column in (sine, time, speed, status))
    depths, distances = z.ravel(), distance.ravel()
    for one, at in _groups(source.ravel()):
        water = below_transducer(profile, one)
        sines[at], times[at], statuses[at] = _aimed(water, depths[at] - water.source_depth, distances[at])
        speeds[at] = water.source_speed
    scale = sine / np.where(distance == 0.0, 1.0, distance)
    no_direction = np.where(status == HIT, USABLE, NO_DIRECTION).astype(np.int8)
    return TakenBack(time, Directions(scale * y, scale * x, no_direction), speed, status)


def recorded_time(depth: ArrayLike, *, speed: float = 1500.0, added: ArrayLike = 0.0) -> Floats:
    """One-way travel time of depths that an echo sounder recorded at a nominal speed.

    Parameters
    ----------
    depth : array_like
        Depths as recorded, m.
    speed : float
        The nominal speed, m/s; see `NOMINAL_SPEEDS`.
    added : array_like
        What the recorder had added for the depth of the transducer, m.

    Returns
    -------
    numpy.ndarray
        Seconds; NaN where the recorded depth is above the transducer.

    Raises
    ------
    InputError
        If the speed is no speed of sound in water.

    Examples
    --------
    >>> float(recorded_time(1463.04, speed=NOMINAL_SPEEDS["4800 ft/s"]))
    1.0
    """
    if not 1000.0 <= speed <= 3000.0:
        raise InputError(f"nominal speed is {speed:g} m/s: between 1000 and 3000 would be right (4800 ft/s is 1463.04)")
    down, offset = numbers(depth=depth, added=added)
    below = down - offset
    return np.where(below >= 0.0, below, np.nan) / speed


def seen_from_midpoint(
    profile: Profile,
    beams: Directions,
    times: ArrayLike,
    moved_across: ArrayLike,
    moved_along: ArrayLike,
    *,
    transducer_depth: float = 0.0,
) -> tuple[Directions, Floats]:
    """Directions and one-way times that lead from the point midway between transmission and reception to the soundings.

    The along-track cone is that of the array that sent, where it sent; the across-track cone that of the array that
    heard, where it heard. A fan sent straight down ends abeam of where it was sent.

    Parameters
    ----------
    profile : Profile
        The water.
    beams : Directions
        As measured, in the water at the transducer by `profile`.
    times : array_like
        Half the two-way times, s.
    moved_across, moved_along : array_like
        How far the transducer moved from transmission to reception, m, to starboard and forward; see
        `positions.offsets`.
    transducer_depth : float
        Depth of the transducer below the water surface, m, at both.

    Returns
    -------
    Directions, numpy.ndarray
        To be traced from the midpoint as any others. Beams that don't arrive are handed back as they are.

    Raises
    ------
    InputError
        If the transducer is not between the surface and the deepest level, or the arguments do not broadcast.

    Notes
    -----
    With T(w, z) the time to a point w across (a vector) and z down, q its derivative over w (the horizontal slowness)
    and Q its second, and v half the way moved: transmission is at -v and so has q + Q v, reception q - Q v, and both
    times together are 2 T + v·Q v. Q has dq/d|w| at constant depth along the beam and q/|w| across it. Left out are
    terms of the order of v² over the slant range: at 5 m/s no more than 2e-5 of it (plain positions are off by 3e-3).

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.soundings.directions import beam_directions
    >>> still = Profile([0, 4000], [1500, 1500])
    >>> beam, time = seen_from_midpoint(still, beam_directions(0.0), 2.0, 0.0, 20.0)
    >>> round(3000.0 * float(beam.forward), 3)
    -10.0
    """
    given = numbers(
        directions=beams.forward, times=times, moved_across=moved_across, moved_along=moved_along, other=beams.starboard
    )
    measured_f, tau, x, y, measured_s = np.broadcast_arrays(*given)
    x, y = 0.5 * x, 0.5 * y
    water = below_transducer(profile, transducer_depth)
    forward, starboard, time = measured_f, measured_s, tau
    for _ in range(2):  # the second time with Q where the beam goes
        along_beam, across_beam = _curvature(water, np.hypot(forward, starboard), time)
        azimuth = np.arctan2(starboard, forward)
        f, s = np.cos(azimuth), np.sin(azimuth)
        radial, sideways = along_beam * (y * f + x * s), across_beam * (x * f - y * s)
        q_forward, q_starboard = radial * f - sideways * s, radial * s + sideways * f
        forward, starboard = measured_f - q_forward, measured_s + q_starboard
        time = tau - 0.5 * (y * q_forward + x * q_starboard) / water.source_speed
    gone = ~np.isfinite(forward + starboard + time)
    found = Directions(
        np.where(gone, measured_f, forward),
        np.where(gone, measured_s, starboard),
        np.array(np.broadcast_to(beams.status, gone.shape)),
        beams.notes,
    )
    return found, np.where(gone, tau, time)


def _groups(values: Floats) -> list[tuple[float, Any]]:
    """Each value that occurs, and where; those that are no numbers nowhere."""
    unique, inverse = np.unique(values, return_inverse=True)
    if unique.size == 1 and np.isfinite(unique[0]):
        return [(float(unique[0]), slice(None))]
    order = np.argsort(inverse.ravel(), kind="stable")
    ends = np.cumsum(np.bincount(inverse.ravel(), minlength=unique.size))[:-1]
    parts = np.split(order, ends)
    return [(float(one), at) for one, at in zip(unique, parts, strict=True) if np.isfinite(one)]


def _aimed(water: Medium, down: Floats, distance: Floats) -> tuple[Floats, Floats, NDArray[np.int8]]:
    """Sine and one-way time of the beams that get so far across at so far below the transducer, and their status."""
    sine, time = np.full(down.shape, np.nan), np.full(down.shape, np.nan)
    status = np.full(down.shape, BAD, dtype=np.int8)
    status[down > water.down[0][-1]] = BEYOND
    at = np.flatnonzero((down > 0.0) & (down <= water.down[0][-1]) & np.isfinite(distance))
    status[at] = TURNED
    z, target, excess = down[at], distance[at], _largest_excess(water, down[at])
    before, x_before = np.zeros(at.size), np.zeros(at.size)
    tangent = target / z
    for _ in range(_TRIES):
        u, t, x = _traced(water, z, tangent, excess)
        short = target - x
        good = np.abs(short) <= _MISSED
        sine[at[good]], time[at[good]], status[at[good]] = u[good], t[good], HIT
        rise, run = x - x_before, tangent - before
        going = (np.abs(short) > _EXACT * target) & (rise > 0.0) & (run > 0.0) & (tangent < _STEEPENS)
        if not going.any():
            break
        at, z, target, excess = at[going], z[going], target[going], excess[going]
        before, x_before = tangent[going], x[going]
        tangent = before + short[going] * run[going] / rise[going]
    return sine, time, status


def _largest_excess(water: Medium, down: Floats) -> Floats:
    """By how much, in terms of `rays._kernels`, the fastest water down to a depth is faster than at the transducer."""
    away, _, gradient, _, excess, ratio, peak, _ = water.down
    layer = np.clip(np.searchsorted(away, down, side="right") - 1, 0, gradient.size - 1)
    rise = gradient[layer] * (down - away[layer]) / water.source_speed
    here = excess[layer] + rise * (2.0 * ratio[layer] + rise)
    return np.maximum(np.maximum(here, peak[layer]), 0.0)


def _traced(water: Medium, down: Floats, tangent: Floats, excess: Floats) -> tuple[Floats, Floats, Floats]:
    """Sine at the transducer, time and distance across of beams of a tangent in the fastest water on their way."""
    s2 = tangent * tangent
    u = tangent / np.sqrt((1.0 + s2) * (1.0 + excess))
    k = np.sqrt((1.0 + s2 * excess / (1.0 + excess)) / (1.0 + s2))
    return u, *_times(water, u, k, down)


def _times(water: Medium, u: Floats, k: Floats, down: Floats) -> tuple[Floats, Floats]:
    time, x, status = (np.empty(down.size) for _ in range(3))
    u, k, down = (kernel_array(values) for values in (u, k, down))
    _kernels.times_down(u, k, down, water.source_speed, water.down, time, x, status)
    return time, x


def _curvature(water: Medium, sine: Floats, times: Floats) -> tuple[Floats, Floats]:
    """How fast a beam's sine at the transducer changes with the end point, 1/m: outward, and sideways."""
    u = kernel_array(np.maximum(sine, _NADIR).ravel())
    k = third(u, np.zeros(1))
    down, x, status = (np.empty(u.size) for _ in range(3))
    _kernels.trace_beams(u, k, kernel_array(times.ravel()), water.source_speed, water.down, down, x, status)
    down[status != HIT] = np.nan
    less = u * (1.0 - _SMALL)
    _, nearer = _times(water, less, third(less, np.zeros(1)), down)
    gone = x > nearer  # not so where a beam is lost or has not left the transducer
    x, nearer = np.where(gone, x, np.nan), np.where(gone, nearer, 0.0)
    outward, sideways = (u - less) / (x - nearer), u / x
    return outward.reshape(sine.shape), sideways.reshape(sine.shape)
