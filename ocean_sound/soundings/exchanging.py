"""Casts exchanged: beams of the water of each cast, followed through each cast."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from .beams import HIT, beam_times, below_transducer, nearly_within

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import ArrayLike, NDArray

    from ..profile import Profile

    Floats = NDArray[np.float64]

DEFAULT_ANGLE = 65.0
"""Of the outer beam from the vertical, degrees."""


@dataclass(frozen=True, eq=False)
class Exchanged:
    """Where beams to the seabed end if a cast is used in the water of another.

    Parameters
    ----------
    depth, across : numpy.ndarray, shape (casts used, casts of the water, depths)
        Found at the time and with the steering of the beam in its own water, m; NaN where the beam turned in one of the
        two waters, or a cast does not reach the depth (the one used may end a tenth above and is carried on).
    true_depth : numpy.ndarray, shape (depths,)
    true_across, time : numpy.ndarray, shape (casts of the water, depths)
        Distance across, m, and one-way time, s, in the water itself; NaN likewise.
    speed : numpy.ndarray, shape (casts,)
        At the transducer, m/s.
    """

    depth: Floats
    across: Floats
    true_depth: Floats
    true_across: Floats
    time: Floats
    speed: Floats


def exchanged(
    profiles: Sequence[Profile],
    *,
    depths: ArrayLike,
    angle: float = DEFAULT_ANGLE,
    transducer_depth: float = 0.0,
    flat_array: bool = True,
) -> Exchanged:
    """Follow the beam in the water of each cast through each cast.

    Parameters
    ----------
    profiles : sequence of Profile
        Casts.
    depths : array_like
        True depths of the seabed, m.
    angle : float
        Of the beam from the vertical at the transducer, degrees, between -90 and 90.
    transducer_depth : float
        Below the water surface, m.
    flat_array : bool
        Whether the beam comes from a level flat array steered with the true speed at the transducer, and so keeps
        sin(angle)/speed; otherwise it keeps its angle.

    Returns
    -------
    Exchanged
        By exact tracing.

    Raises
    ------
    InputError
        If the transducer does not lie above the deepest level of each cast, or the angle is impossible.
    """
    if not abs(angle) < 90.0:
        raise InputError(f"angle is {angle:g} degrees: between -90 and 90 would be right")
    below = np.atleast_1d(np.asarray(depths, dtype=np.float64))
    speed = np.array([below_transducer(profile, transducer_depth).source_speed for profile in profiles])
    truth = [beam_times(profile, angle, below, transducer_depth=transducer_depth) for profile in profiles]
    times, across = (
        np.array([np.where(beam.status == HIT, getattr(beam, name), np.nan) for beam in truth])
        for name in ("time", "across")
    )
    steering = speed[:, np.newaxis] if flat_array else None
    found = [
        nearly_within(profile, angle, times, transducer_depth=transducer_depth, surface_speed=steering)
        for profile in profiles
    ]
    return Exchanged(
        np.array([beam.depth for beam in found]), np.array([beam.across for beam in found]), below, across, times, speed
    )


def depth_errors(
    profiles: Sequence[Profile],
    *,
    depths: ArrayLike,
    angle: float = DEFAULT_ANGLE,
    transducer_depth: float = 0.0,
    flat_array: bool = True,
) -> Floats:
    """What each cast does to the depth of a beam in the water of each other.

    Parameters
    ----------
    profiles, depths, angle, transducer_depth, flat_array
        As for `exchanged`.

    Returns
    -------
    numpy.ndarray, shape (casts used, casts of the water, depths)
        Depth found minus true depth, m; NaN where `exchanged` has it.

    Raises
    ------
    InputError
        As `exchanged`.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> casts = [Profile([0, 100], [speed, speed]) for speed in (1500.0, 1515.0)]
    >>> depth_errors(casts, depths=[50.0], angle=0.0)[:, :, 0].round(2) + 0.0
    array([[ 0. , -0.5],
           [ 0.5,  0. ]])
    """
    found = exchanged(
        profiles, depths=depths, angle=angle, transducer_depth=transducer_depth, flat_array=flat_array
    )  # fmt: skip
    errors: Floats = found.depth - found.true_depth
    return errors


def differ_most(errors: Floats) -> tuple[int, int]:
    """The cast used and that of the water which make the largest depth error, by `depth_errors` at one or more depths.

    Raises
    ------
    InputError
        If no pair of casts can be judged.
    """
    size = np.abs(errors)
    size[np.arange(len(size)), np.arange(len(size))] = np.nan
    if np.isnan(size).all():
        raise InputError("no two casts can be compared: give a depth that the beams of two of them reach")
    used, true, _ = np.unravel_index(np.nanargmax(size), size.shape)
    return int(used), int(true)
