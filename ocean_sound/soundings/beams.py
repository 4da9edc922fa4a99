"""Beams of an echo sounder, traced exactly through one profile."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from ..rays.medium import medium
from . import _kernels

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from ..profile import Profile
    from ..rays.medium import Medium

    Floats = NDArray[np.float64]

STATUSES = ("hit", "turned", "beyond the profile", "bad input")
"""What became of a beam, by the value of its status."""
HIT, TURNED, BEYOND, BAD = range(4)
_OVERSHOOT = 0.1  # of the depth: so far below the deepest level the last gradient may stand for the water


@dataclass(frozen=True, eq=False)
class Beams:
    """Where beams are at a one-way travel time; all arrays of one shape.

    Parameters
    ----------
    time : numpy.ndarray
        One-way travel time, s.
    depth : numpy.ndarray
        Depth below the water surface, m.
    across : numpy.ndarray
        Horizontal distance from the transducer, m, with the sign of the angle.
    status : numpy.ndarray of int8
        By `STATUSES`: 0 hit, 1 turned before, 2 beyond the deepest level, 3 an angle, time or depth that can't be. All
        but 0 have NaN for what was asked.
    """

    time: Floats
    depth: Floats
    across: Floats
    status: NDArray[np.int8]


def beam_positions(
    profile: Profile,
    angles: ArrayLike,
    times: ArrayLike,
    *,
    transducer_depth: float = 0.0,
    surface_speed: ArrayLike | None = None,
) -> Beams:
    """Depth and across-track distance of beams after a one-way travel time.

    Parameters
    ----------
    profile : Profile
        The water; one that starts below the surface is extended to it at its first speed.
    angles : array_like
        Angles from the vertical at the transducer, degrees, positive to starboard, between -90 and 90.
    times : array_like
        One-way travel times, s, 0 or more; half the two-way time that an echo sounder gives.
    transducer_depth : float
        Depth of the transducer below the water surface, m.
    surface_speed : array_like, optional
        The speed of sound, m/s, with which a level flat array was steered: the beam then keeps sin(angle) over this
        speed. Where not given the angle is taken as it is, as for a curved array.

    Returns
    -------
    Beams
        In the broadcast shape of the arguments.

    Raises
    ------
    InputError
        If the transducer is not between the surface and the deepest level, or the arguments do not broadcast.

    Notes
    -----
    Exact for speeds linear between levels, to about 1e-9 m; the forms are derived in `_kernels`.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> beams = beam_positions(Profile([0, 100], [1500, 1500]), [0.0, -60.0], 0.05)
    >>> beams.depth.round(6), beams.across.round(6)
    (array([75. , 37.5]), array([  0.      , -64.951905]))
    """
    beams = carried_on(below_transducer(profile, transducer_depth), angles, times, surface_speed)
    lost = beams.status != HIT
    return Beams(beams.time, np.where(lost, np.nan, beams.depth), np.where(lost, np.nan, beams.across), beams.status)


def beam_times(
    profile: Profile,
    angles: ArrayLike,
    depths: ArrayLike,
    *,
    transducer_depth: float = 0.0,
    surface_speed: ArrayLike | None = None,
) -> Beams:
    """One-way travel time and across-track distance of beams that reach a depth.

    Parameters
    ----------
    profile, angles, transducer_depth, surface_speed
        As for `beam_positions`.
    depths : array_like
        Depths below the water surface, m, from the transducer's to the deepest level's.

    Returns
    -------
    Beams
        In the broadcast shape of the arguments.

    Raises
    ------
    InputError
        As for `beam_positions`.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> beams = beam_times(Profile([0, 1000], [1500, 1517]), 0.0, 1000.0)
    >>> round(float(beams.time), 12)
    0.662917191661
    """
    water = below_transducer(profile, transducer_depth)
    theta, depth, steering = _broadcast(angles, depths, surface_speed, names=("angles", "depths", "surface_speed"))
    sine, cosine = _launched(theta, steering, water.source_speed)
    times, across, status = (np.empty(depth.size) for _ in range(3))
    _kernels.times_down(
        sine, cosine, kernel_array((depth - water.source_depth).ravel()), water.source_speed, water.down,
        times, across, status,
    )  # fmt: skip
    shape = depth.shape
    return Beams(times.reshape(shape), depth, across.reshape(shape), status.reshape(shape).astype(np.int8))


def below_transducer(profile: Profile, transducer_depth: float, *, to_depth: float | None = None) -> Medium:
    """The water seen from the transducer.

    Raises
    ------
    InputError
        If the transducer is not above the deepest level and at or below the surface.

    """
    deepest = float(profile.depth[-1]) if to_depth is None else to_depth
    if not 0.0 <= transducer_depth < deepest:
        raise InputError(
            f"transducer depth is {transducer_depth:g} m: it must be 0 or more, and above the deepest level at "
            f"{deepest:g} m"
        )
    return medium(profile, transducer_depth, seabed_depth=to_depth)


def carried_on(water: Medium, angles: ArrayLike, times: ArrayLike, surface_speed: ArrayLike | None = None) -> Beams:
    """Positions by `beam_positions`, but those beyond the profile as if it went on at its last gradient."""
    return _carried_on(water, *_broadcast(angles, times, surface_speed, names=("angles", "times", "surface_speed")))


def nearly_within(
    profile: Profile,
    angles: ArrayLike,
    times: ArrayLike,
    *,
    transducer_depth: float = 0.0,
    surface_speed: ArrayLike | None = None,
) -> Beams:
    """Positions by `beam_positions`; up to a tenth of the depth below the profile it goes on at its last gradient.

    For beams of other water, which an error of speed alone may have put below the deepest level: they count as hit.
    """
    found = carried_on(below_transducer(profile, transducer_depth), angles, times, surface_speed)
    deepest = float(profile.depth[-1])
    near = found.depth <= deepest + _OVERSHOOT * (deepest - transducer_depth)
    good = (found.status == HIT) | ((found.status == BEYOND) & near)
    depth, across = (np.where(good, values, np.nan) for values in (found.depth, found.across))
    return Beams(found.time, depth, across, np.where(good, HIT, found.status).astype(np.int8))


def _carried_on(water: Medium, theta: Floats, times: Floats, steering: Floats | None) -> Beams:
    sine, cosine = _launched(theta, steering, water.source_speed)
    down, across, status = (np.empty(times.size) for _ in range(3))
    _kernels.trace_beams(
        sine, cosine, kernel_array(times.ravel()), water.source_speed, water.down, down, across, status
    )
    shape = times.shape
    return Beams(
        times, water.source_depth + down.reshape(shape), across.reshape(shape), status.reshape(shape).astype(np.int8)
    )


def _broadcast(*values: Any, names: tuple[str, ...]) -> tuple[Any, ...]:
    given = [np.asarray(value, dtype=np.float64) for value in values if value is not None]
    try:
        shaped = iter(np.broadcast_arrays(*given))
    except ValueError:
        shapes = ", ".join(f"{name} {value.shape}" for name, value in zip(names, given, strict=False))
        raise InputError(
            f"the arguments do not broadcast: {shapes}; equal shapes or single numbers would be right"
        ) from None
    return tuple(None if value is None else next(shaped) for value in values)


def _launched(theta: Floats, steering: Floats | None, speed: float) -> tuple[Floats, Floats]:
    """Sine and cosine from the vertical of each beam as it leaves the transducer; NaN where the angle can't be."""
    radians = np.radians(np.where(np.abs(theta) < 90.0, theta, np.nan)).ravel()
    sine, cosine = np.sin(radians), np.cos(radians)
    if steering is not None:
        sine = sine * (speed / np.where(steering.ravel() > 0.0, steering.ravel(), np.nan))
        cosine = np.sqrt(np.maximum((1.0 - sine) * (1.0 + sine), 0.0))
    return kernel_array(sine), kernel_array(cosine)
