"""Profiles averaged over bins of depth or smoothed, with what that does to a beam."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from ..profile import Profile
from .shift import Shift, largest_shift
from .thinning import DEFAULT_ANGLE, rebuilt

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from ..casts import Cast

    Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Averaged:
    """A profile of averages, and what averaging does to a beam.

    Parameters
    ----------
    profile : Profile
        The averages.
    shift : Shift
        The farthest that a beam moves by it: a bound, from exact tracing.
    """

    profile: Profile
    shift: Shift


def bin_levels(
    water: Profile | Cast,
    thickness: float,
    *,
    max_angle: float = DEFAULT_ANGLE,
    transducer_depth: float = 0.0,
) -> Averaged:
    """Average a profile over bins of depth.

    Parameters
    ----------
    water : Profile or Cast
        A cast is first made a profile by `Profile.from_cast`. Never changed.
    thickness : float
        Thickness of a bin, m. Bins begin at multiples of it.
    max_angle, transducer_depth : float
        Of the beams by which the change is judged; as for `largest_shift`.

    Returns
    -------
    Averaged
        One level in the middle of each bin, with the mean over depth of the speed there (of the part of the bin that
        the profile covers, in the middle of that), between the first and the last level, which stay as they are.

    Raises
    ------
    InputError
        If the thickness is not positive or an argument of the beams is out of range.

    Notes
    -----
    The mean is the exact one of a speed linear between levels, not that of the samples in the bin, so levels crowded
    together weigh no more than others, and a bin without a level has a mean too.

    Examples
    --------
    >>> averaged = bin_levels(Profile([0.0, 1.0, 4.0], [1500.0, 1502.0, 1496.0]), 2.0)
    >>> averaged.profile.depth, averaged.profile.speed
    (array([0., 1., 3., 4.]), array([1500., 1501., 1498., 1496.]))
    """
    profile = water if isinstance(water, Profile) else Profile.from_cast(water)
    _need_length(thickness, "thickness")
    top, bottom = profile.depth[0], profile.depth[-1]
    edges = thickness * np.arange(np.floor(top / thickness), np.ceil(bottom / thickness) + 1.0)
    edges = np.unique(np.clip(edges, top, bottom))
    integral = _integral(profile, edges)
    depth = np.concatenate(([top], 0.5 * (edges[1:] + edges[:-1]), [bottom]))
    speed = np.concatenate(
        (profile.speed[:1], profile.speed[0] + np.diff(integral) / np.diff(edges), profile.speed[-1:])
    )
    binned = rebuilt(profile, depth, speed, f"averaged over bins of {thickness:g} m")
    return Averaged(binned, largest_shift(profile, binned, max_angle=max_angle, transducer_depth=transducer_depth))


def smooth(
    water: Profile | Cast,
    scale: float,
    *,
    max_angle: float = DEFAULT_ANGLE,
    transducer_depth: float = 0.0,
) -> Averaged:
    """Smooth a profile by a running mean over depth.

    Parameters
    ----------
    water : Profile or Cast
        A cast is first made a profile by `Profile.from_cast`. Never changed.
    scale : float
        Length of the stretch of depth that is averaged around each level, m. Towards the first and the last level it
        shrinks, so as to stay centred; these two keep their speed.
    max_angle, transducer_depth : float
        Of the beams by which the change is judged; as for `largest_shift`.

    Returns
    -------
    Averaged
        The same levels, with the mean speed around each.

    Raises
    ------
    InputError
        If the scale is not positive or an argument of the beams is out of range.

    Examples
    --------
    >>> smoothed = smooth(Profile([0, 10, 20, 30], [1500, 1500, 1510, 1510]), 10.0)
    >>> smoothed.profile.speed
    array([1500.  , 1501.25, 1508.75, 1510.  ])
    """
    profile = water if isinstance(water, Profile) else Profile.from_cast(water)
    _need_length(scale, "scale")
    depth = profile.depth
    half = np.minimum(0.5 * scale, np.minimum(depth - depth[0], depth[-1] - depth))
    inner = half > 0.0
    speed = profile.speed.copy()
    upper, lower = _integral(profile, (depth - half)[inner]), _integral(profile, (depth + half)[inner])
    speed[inner] = profile.speed[0] + (lower - upper) / (2.0 * half[inner])
    smoothed = rebuilt(profile, depth, speed, f"smoothed by a running mean over {scale:g} m")
    return Averaged(smoothed, largest_shift(profile, smoothed, max_angle=max_angle, transducer_depth=transducer_depth))


def _integral(profile: Profile, depth: Floats) -> Floats:
    """The integral of speed less the first speed, from the first level to each depth; exact between levels.

    That of the whole speed would lose the digits that a thin bin lives on.
    """
    relative = profile.speed - profile.speed[0]
    until = np.concatenate(([0.0], np.cumsum(0.5 * np.diff(profile.depth) * (relative[1:] + relative[:-1]))))
    layer = np.clip(np.searchsorted(profile.depth, depth, side="right") - 1, 0, len(profile) - 2)
    down = depth - profile.depth[layer]
    inside = down * (relative[layer] + 0.5 * profile.gradient[layer] * down)
    result: Floats = until[layer] + inside
    return result


def _need_length(value: float, name: str) -> None:
    if not (np.isfinite(value) and value > 0.0):
        raise InputError(f"{name} is {value:g} m: a finite number above 0 would be right")
