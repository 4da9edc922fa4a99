"""How far a change of the profile moves a beam: the one measure of thinning, binning and smoothing."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from . import _kernels
from .beams import below_transducer

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from ..profile import Profile
    from ..rays.medium import Medium

    Floats = NDArray[np.float64]

STEEPEST_ANGLE = 85.0  # degrees from the vertical: no echo sounder forms beams beyond
FLATTEST_ANGLE = (
    87.0  # degrees from the vertical: a beam that bends so far gives no sounding and is followed no further
)
_LEAST_COSINE = float(np.cos(np.radians(FLATTEST_ANGLE)))
_RATIO = 5  # the place among a side's arrays of speed over that at the transducer
_FIRST_ANGLES = 17
_NARROWEST = 0.02  # degrees; where beams begin to turn, a jump stays a jump however fine the angles
_ALLOWANCE = 1e-5  # m: what the bound may add to what was found
_SHARE = 0.25  # of the allowance for the bound between two times, the rest for that between two angles


@dataclass(frozen=True)
class Shift:
    """The farthest that any beam moves, at equal angle and travel time, from one profile to another.

    Parameters
    ----------
    distance : float
        m; a bound from above, of the distance in the plane of the beam.
    angle, depth : float
        Where it is that large: angle from the vertical at the transducer, degrees, and depth, m.
    max_angle : float
        The largest angle considered, degrees.
    transducer_depth, to_depth : float
        The part of the water column considered, m.
    turning_angle : float or None
        The angle, degrees, from which on beams bend to within 3 degrees of the horizontal before `to_depth`, by Snell's
        law; such a beam gives no sounding beyond and is followed until there. None where no beam does.
    """

    distance: float
    angle: float
    depth: float
    max_angle: float
    transducer_depth: float
    to_depth: float
    turning_angle: float | None = None

    def __str__(self) -> str:
        said = (
            f"no beam within {self.max_angle:g} degrees of the vertical moves by more than "
            f"{_millimetres(self.distance)} at equal angle and travel time, between {self.transducer_depth:g} m (the "
            f"transducer) and {self.to_depth:g} m"
        )
        if self.turning_angle is None:
            return said
        return (
            f"{said}; beams from {self.turning_angle:.1f} degrees on bend to within 3 of the horizontal and end there"
        )


def largest_shift(
    profile: Profile,
    other: Profile,
    *,
    max_angle: float = 65.0,
    transducer_depth: float = 0.0,
    allowance: float = _ALLOWANCE,
) -> Shift:
    """The farthest that a beam moves when another profile takes the place of this one.

    Parameters
    ----------
    profile : Profile
        The water that the beams are followed in, to the deepest level that both profiles reach.
    other : Profile
        What takes its place.
    max_angle : float
        The largest angle from the vertical at the transducer, degrees, above 0 and at most 85.
    transducer_depth : float
        Depth of the transducer below the water surface, m.
    allowance : float
        How much the bound may exceed the largest shift found, m.

    Returns
    -------
    Shift
        The distance is a bound from above: see the notes.

    Raises
    ------
    InputError
        If an angle or depth is out of range.

    Notes
    -----
    Both profiles are marched exactly and at once. In time the bound is a proof: between two samples the beams can't
    come farther apart than the difference of their accelerations allows (`_kernels.apart`). In angle it is a measured
    one: angles are bisected where the largest shift lies until the value midway departs from the mean of its
    neighbours by less than the allowance, and the departure is added, which for a smooth function is four times what
    remains between the angles. A beam is followed until it comes within 3 degrees of the horizontal in `profile`,
    beyond which the least change of the water decides whether it turns; where beams begin to do so the shift may jump
    with the angle, and angles are 0.02 degrees apart at the closest.

    Examples
    --------
    An error of e in the speed of a layer of thickness h on top moves a beam by sec²(angle) e h / c to first order:

    >>> from ocean_sound.profile import Profile
    >>> true = Profile([0, 10, 10.001, 50], [1500, 1500, 1500, 1500])
    >>> wrong = Profile([0, 0.001, 10, 10.001, 50], [1500, 1501, 1501, 1500, 1500])
    >>> shift = largest_shift(true, wrong, max_angle=60.0)
    >>> round(1000 * shift.distance), shift.angle
    (27, 60.0)
    """
    check_angle(max_angle)
    if not allowance > 0.0:
        raise InputError(f"allowance is {allowance:g} m: it must be above 0")
    to_depth = min(float(profile.depth[-1]), float(other.depth[-1]))
    water = below_transducer(profile, transducer_depth, to_depth=to_depth)
    return shift_between(water, below_transducer(other, transducer_depth), max_angle=max_angle, allowance=allowance)


def shift_between(water: Medium, other: Medium, *, max_angle: float, allowance: float) -> Shift:
    """As `largest_shift`, of waters seen from the transducer."""
    angles = _first_angles(max_angle)
    found = shifts_at(angles, water, other, allowance=_SHARE * allowance)
    beside = (1.0 - _SHARE) * allowance
    largest, bound = float(found[0].max()), 0.0
    left, right = (angles[:-1], found[:, :-1]), (angles[1:], found[:, 1:])
    while left[0].size and np.isfinite(found[0]).all():
        middle = 0.5 * (left[0] + right[0])
        here = shifts_at(middle, water, other, allowance=_SHARE * allowance)
        angles, found = np.concatenate((angles, middle)), np.concatenate((found, here), axis=1)
        highest = np.maximum(np.maximum(left[1][0], right[1][0]), here[0])
        if not np.isfinite(here[0]).all():
            break
        departure = np.abs(here[0] - 0.5 * (left[1][0] + right[1][0]))
        largest = max(largest, float(here[0].max()))
        # Only what could exceed the largest by more than the allowance is worth a closer look.
        open_ = (highest + departure > largest + beside) & (right[0] - left[0] > _NARROWEST)
        bound = max(bound, float((highest + departure)[~open_].max(initial=0.0)))
        lower, upper = (left[0][open_], left[1][:, open_]), (right[0][open_], right[1][:, open_])
        centre = (middle[open_], here[:, open_])
        left = (np.concatenate((lower[0], centre[0])), np.concatenate((lower[1], centre[1]), axis=1))
        right = (np.concatenate((centre[0], upper[0])), np.concatenate((centre[1], upper[1]), axis=1))
    worst = int(np.argmax(found[0]))
    flattens = float(np.degrees(np.arcsin(np.sin(np.radians(FLATTEST_ANGLE)) / water.down[_RATIO].max())))
    return Shift(
        distance=max(bound, float(found[0].max())),
        angle=float(angles[worst]),
        depth=water.source_depth + float(found[1, worst]),
        max_angle=float(max_angle),
        transducer_depth=water.source_depth,
        to_depth=water.seabed_depth,
        turning_angle=flattens if flattens < max_angle else None,
    )


def shifts_at(angles: Floats, water: Medium, other: Medium, *, allowance: float) -> Floats:
    """Bound, and distance below the transducer and time at which it is found, in rows, for each angle (degrees)."""
    radians = np.radians(angles)
    found = np.empty((3, angles.size))
    _kernels.apart_at(
        kernel_array(np.sin(radians)),
        kernel_array(np.cos(radians)),
        water.source_speed,
        water.down,
        other.source_speed,
        other.down,
        _LEAST_COSINE,
        allowance,
        found,
    )
    return found


def check_angle(max_angle: float) -> None:
    """Refuse a largest angle that no beam has.

    Raises
    ------
    InputError
        If it is not above 0 and at most 85 degrees.

    """
    if not 0.0 < max_angle <= STEEPEST_ANGLE:
        raise InputError(
            f"max_angle is {max_angle:g} degrees from the vertical: above 0 and at most {STEEPEST_ANGLE:g} would be "
            "right"
        )


def _first_angles(max_angle: float) -> Floats:
    """From the vertical to the largest angle, closer where the shift grows faster."""
    angles = np.degrees(np.arctan(np.linspace(0.0, np.tan(np.radians(max_angle)), _FIRST_ANGLES)))
    angles[-1] = max_angle
    return angles


def _millimetres(distance: float) -> str:
    return f"{1000.0 * distance:.2f} mm" if distance < 1.0 else f"{distance:.2f} m"
