"""Directions of beams in the water at the transducer, from measured angles and back.

The frame is the vessel's, levelled: forward along the heading, starboard, down. A direction is kept as its cosines
along forward and starboard; the sine from the vertical and the azimuth follow, and, going down, so does the third.

A flat array measures slowness along its own face. In the frame of the face, of roll r (positive: starboard down) and
pitch q (positive: bow up), the axes along and across it and its normal are, in (forward, starboard, down),

    (cos q, 0, -sin q),   (sin r sin q, cos r, sin r cos q),   (cos r sin q, -sin r, cos r cos q),

that is, the vessel turned by heading, then pitch, then roll. Steered with a speed cs where the water has c, the cosines
along the face become c/cs times what they were thought to be, and what is left goes along the normal. For a level face
that keeps sin(angle from the vertical)/speed, so the water at the transducer does not matter: an error e of the speed
in a top layer of thickness h shifts the sounding by (1 - tan² θ) h e/c down and 2 tan θ h e/c across, to first order.
For a face whose normal points τ to starboard (τ = -r), a beam γ = θ - τ from the normal turns by e/c tan γ. If the
speed is wrong all the way down to h, the shifts are (1 - tan θ tan γ) h e/c and (tan θ + tan γ) h e/c. If it is wrong
in the top layer only, the slowness below is off by -e sin τ/(c² cos γ), which turns the whole way down.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from . import _kernels_directions as kernels

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

ANGLES = ("cones", "tilted-fan")
"""What the along-track angle means."""
ARRAYS = ("flat", "curved")
"""What shape of array was steered."""

DIRECTION_STATUSES = (
    "usable",
    "an angle is missing, or 90 degrees and more",
    "the two angles make no direction",
    "a speed is missing or impossible",
    "the attitude of the face is missing",
    "the face can't send or hear it",
    "not downward",
)
"""What became of a direction, by the value of its status."""
USABLE, NO_ANGLE, NO_DIRECTION = kernels.USABLE, kernels.NO_ANGLE, kernels.NO_DIRECTION
NO_SPEED, NO_ATTITUDE = kernels.NO_SPEED, kernels.NO_ATTITUDE
NOT_AT_FACE, NOT_DOWNWARD = kernels.NOT_AT_FACE, kernels.NOT_DOWNWARD


@dataclass(frozen=True, eq=False)
class Directions:
    """Directions of beams in the water at the transducer; all arrays of one shape.

    Parameters
    ----------
    forward, starboard : numpy.ndarray
        Cosines along the heading and to starboard of it, both horizontal; NaN where there is no direction.
    status : numpy.ndarray of int8
        By `DIRECTION_STATUSES`: 0 usable, else the reason why not.
    notes : tuple of str
        One line for each thing that was assumed of the array.
    """

    forward: Floats
    starboard: Floats
    status: NDArray[np.int8]
    notes: tuple[str, ...] = ()

    @property
    def sine(self) -> Floats:
        """Sine of the angle from the vertical, 0 or more."""
        return np.hypot(self.forward, self.starboard)

    @property
    def azimuth(self) -> Floats:
        """Azimuth relative to the heading, degrees: 0 forward, 90 to starboard, -90 to port; 0 for a vertical beam."""
        return np.degrees(np.arctan2(self.starboard, self.forward))

    def spread(self, distance: ArrayLike) -> tuple[Floats, Floats]:
        """Across-track (positive to starboard) and along-track (positive forward) parts of horizontal distances.

        Examples
        --------
        >>> across, along = beam_directions([-30.0, 45.0], speed=1500.0).spread([100.0, 200.0])
        >>> across, along
        (array([-100.,  200.]), array([0., 0.]))
        """
        sine = self.sine
        scale = np.asarray(distance, dtype=np.float64) / np.where(sine == 0.0, 1.0, sine)
        return scale * self.starboard, scale * self.forward


def beam_directions(
    across_track_angle: ArrayLike,
    along_track_angle: ArrayLike = 0.0,
    *,
    angles: str = "cones",
    array: str = "flat",
    speed: ArrayLike | None = None,
    surface_speed: ArrayLike | None = None,
    face_roll: ArrayLike | None = None,
    face_pitch: ArrayLike | None = None,
) -> Directions:
    """Directions of beams in the water at the transducer, from measured angles.

    Parameters
    ----------
    across_track_angle, along_track_angle : array_like
        Degrees, positive to starboard and forward, both after motion compensation.
    angles : str
        ``cones``: the sine of each angle is the cosine along its axis, and the vertical one follows. ``tilted-fan``:
        the across-track angle is such a cone, the along-track angle b is that by which the plane of the fan is tilted
        forward; the direction is (cos a sin b, sin a, cos a cos b) in forward, starboard, down.
    array : str
        ``flat``: the slowness along the face is kept, see the head of this file. ``curved``: angles are taken as they
        are, whatever the speeds.
    speed : array_like, optional
        Speed of sound at the transducer, m/s, by the profile that corrects the beam. Needed with `surface_speed`.
    surface_speed : array_like, optional
        Speed of sound with which a flat array was steered, m/s.
    face_roll, face_pitch : array_like, optional
        Attitude of a flat face at reception, degrees, mounting included: roll positive with starboard down, pitch
        positive with the bow up; transmission is taken to have had the same. Where not given the face is level.

    Returns
    -------
    Directions
        In the broadcast shape of the arguments.

    Raises
    ------
    InputError
        For unknown words, a surface speed without a speed, or arguments that do not broadcast. Single bad values
        don't raise: they have NaN and a status.

    Examples
    --------
    A level face, steered with a speed 1 % too low, keeps sin/speed; one rolled to face the beam is not turned at all:

    >>> level = beam_directions(40.0, speed=1500.0, surface_speed=1485.0)
    >>> rolled = beam_directions(40.0, speed=1500.0, surface_speed=1485.0, face_roll=-40.0)
    >>> [round(float(np.degrees(np.arcsin(found.sine))), 3) for found in (level, rolled)]
    [40.487, 40.0]
    >>> level.notes
    ('no attitude of the face is given: it is taken as level',)
    """
    _known(angles, ANGLES, "angles")
    _known(array, ARRAYS, "array")
    across, along, c, steering, roll, pitch = numbers(
        across_track_angle=across_track_angle,
        along_track_angle=along_track_angle,
        speed=speed,
        surface_speed=surface_speed,
        face_roll=face_roll,
        face_pitch=face_pitch,
    )
    forward, starboard, status = _measured(across, along, angles)
    turns = array == "flat" and steering is not None
    notes = _notes(array, turns=turns, attitude=(roll, pitch))
    if turns:
        forward, starboard, status = _turned(forward, starboard, status, _ratio(c, steering), roll, pitch)
    lost = status != USABLE
    return Directions(np.where(lost, np.nan, forward), np.where(lost, np.nan, starboard), status, notes)


def beam_angles(
    beams: Directions,
    *,
    angles: str = "cones",
    array: str = "flat",
    speed: ArrayLike | None = None,
    surface_speed: ArrayLike | None = None,
    face_roll: ArrayLike | None = None,
    face_pitch: ArrayLike | None = None,
) -> tuple[Floats, Floats]:
    """Across- and along-track angles at which an array would have measured beams: `beam_directions` undone.

    Parameters
    ----------
    beams : Directions
        In the water at the transducer.
    angles, array, speed, surface_speed, face_roll, face_pitch
        As for `beam_directions`; `speed` is that of the water the directions are in.

    Returns
    -------
    tuple of numpy.ndarray
        Across-track and along-track angles, degrees; NaN where there are none.

    Raises
    ------
    InputError
        As for `beam_directions`.

    Examples
    --------
    >>> steered = {"speed": 1500.0, "surface_speed": 1485.0, "face_roll": 10.0}
    >>> across, along = beam_angles(beam_directions([20.0, -60.0], 3.0, **steered), **steered)
    >>> across.round(9), along.round(9)
    (array([ 20., -60.]), array([3., 3.]))
    """
    _known(angles, ANGLES, "angles")
    _known(array, ARRAYS, "array")
    forward, starboard, c, steering, roll, pitch = numbers(
        forward=beams.forward,
        starboard=beams.starboard,
        speed=speed,
        surface_speed=surface_speed,
        face_roll=face_roll,
        face_pitch=face_pitch,
    )
    status: NDArray[Any] = beams.status
    if array == "flat" and steering is not None:
        ratio = 1.0 / _ratio(c, steering)
        forward, starboard, status = _turned(forward, starboard, status, ratio, roll, pitch)
    lost = status != USABLE
    forward, starboard = np.where(lost, np.nan, forward), np.where(lost, np.nan, starboard)
    across = np.degrees(np.arcsin(starboard))
    if angles == "cones":
        return across, np.degrees(np.arcsin(forward))
    return across, np.degrees(np.arctan2(forward, third(forward, starboard)))


def numbers(**values: Any) -> tuple[Any, ...]:
    """Each as an array, None as None; refused if they do not broadcast."""
    given = {name: np.asarray(value, dtype=np.float64) for name, value in values.items() if value is not None}
    try:
        np.broadcast_shapes(*(value.shape for value in given.values()))
    except ValueError:
        shapes = ", ".join(f"{name} {value.shape}" for name, value in given.items())
        raise InputError(
            f"the arguments do not broadcast: {shapes}; equal shapes or single numbers would be right"
        ) from None
    return tuple(given.get(name) for name in values)


def third(first: Floats, second: Floats) -> Floats:
    """The third cosine of a direction; 0 where the two leave none."""
    return np.sqrt(np.maximum(1.0 - first * first - second * second, 0.0))


def _known(word: str, words: tuple[str, ...], name: str) -> None:
    if word not in words:
        raise InputError(f"{name} is {word!r}: {' or '.join(words)} would be right")


def _notes(array: str, *, turns: bool, attitude: tuple[Any, Any]) -> tuple[str, ...]:
    """What is assumed of an array."""
    if array == "curved":
        return ()
    if not turns:
        return ("no speed of steering is given: angles are taken as they are",)
    names = [name for name, value in zip(("roll", "pitch"), attitude, strict=True) if value is None]
    if len(names) == 2:
        return ("no attitude of the face is given: it is taken as level",)
    return tuple(f"no {name} of the face is given: it is taken as 0" for name in names)


def _measured(across: Floats, along: Floats, angles: str) -> tuple[Floats, Floats, NDArray[np.int8]]:
    """Cosines forward and to starboard by the two angles, and the status."""
    shape, (a, b) = _flat(across, along)
    forward, starboard, status = np.empty(a.size), np.empty(a.size), np.empty(a.size, dtype=np.int8)
    kernels.measure(a, b, angles != "cones", forward, starboard, status)
    return forward.reshape(shape), starboard.reshape(shape), status.reshape(shape)


def _ratio(speed: Floats | None, steering: Floats) -> Floats:
    """The speed over that of steering; NaN where one can't be."""
    if speed is None:
        raise InputError("surface_speed is given without speed: the speed of sound at the transducer would be right")
    good = (speed > 0.0) & (steering > 0.0) & np.isfinite(speed) & np.isfinite(steering)
    return np.where(good, speed, np.nan) / np.where(good, steering, 1.0)


def _turned(
    forward: Floats,
    starboard: Floats,
    status: NDArray[np.int8],
    ratio: Floats,
    roll: Floats | None,
    pitch: Floats | None,
) -> tuple[Floats, Floats, NDArray[np.int8]]:
    """Directions after their cosines along the face have grown by a ratio, and the status."""
    r, q = (np.radians(np.zeros(()) if angle is None else angle) for angle in (roll, pitch))
    attitude = (np.sin(r), np.cos(r), np.sin(q), np.cos(q))
    shape, columns = _flat(forward, starboard, status, ratio, *attitude)
    found = columns[2].astype(np.int8)
    f, s = columns[0].copy(), columns[1].copy()
    kernels.turn(f, s, found, *columns[3:])
    return f.reshape(shape), s.reshape(shape), found.reshape(shape)


def _flat(*values: Any) -> tuple[tuple[int, ...], list[Floats]]:
    """Their common shape, and each as a column of that size."""
    whole = np.broadcast_arrays(*values)
    return whole[0].shape, [kernel_array(each.ravel()) for each in whole]
