"""Directions of beams: scalars and loops of what the head of `directions` derives."""

# mypy: ignore-errors

from __future__ import annotations

from math import nan, sqrt

from .._numba import kernel

# In the order of `directions.DIRECTION_STATUSES`.
USABLE, NO_ANGLE, NO_DIRECTION, NO_SPEED, NO_ATTITUDE, NOT_AT_FACE, NOT_DOWNWARD = 0, 1, 2, 3, 4, 5, 6

RADIANS = 0.017453292519943295


@kernel
def sine_of(degrees):
    """The sine of an angle of up to 90 degrees, to 5e-14, without a branch; NaN at 90 degrees and beyond.

    Its Taylor series to the 17th power.
    """
    x = degrees * RADIANS if abs(degrees) < 90.0 else nan
    a = x * x
    s = 1 / 6227020800 - a * (1 / 1307674368000 - a / 355687428096000)
    s = 1 / 5040 - a * (1 / 362880 - a * (1 / 39916800 - a * s))
    return x * (1.0 - a * (1 / 6 - a * (1 / 120 - a * s)))


@kernel
def third(first, second):
    """The third cosine of a direction; 0 where the two leave none."""
    return sqrt(max(1.0 - first * first - second * second, 0.0))


@kernel
def measured(across, along, fan):
    """Cosines forward and to starboard by the two angles; `fan`: the along-track angle tilts the fan."""
    starboard, forward = sine_of(across), sine_of(along)
    if fan:
        forward *= sqrt(max(1.0 - starboard * starboard, 0.0))
    return forward, starboard


@kernel
def turned(forward, starboard, ratio, sin_r, cos_r, sin_q, cos_q):
    """A direction after its cosines along the face have grown by a ratio; and the status."""
    down = third(forward, starboard)
    a = ratio * (cos_q * forward - sin_q * down)
    b = ratio * (sin_r * sin_q * forward + cos_r * starboard + sin_r * cos_q * down)
    normal = cos_r * sin_q * forward - sin_r * starboard + cos_r * cos_q * down
    n = third(a, b)
    f = cos_q * a + sin_r * sin_q * b + cos_r * sin_q * n
    s = cos_r * b - sin_r * n
    d = -sin_q * a + sin_r * cos_q * b + cos_r * cos_q * n
    if normal <= 0.0 or n <= 0.0:
        return f, s, NOT_AT_FACE
    return f, s, USABLE if d > 0.0 else NOT_DOWNWARD


@kernel
def why_none(across, along, fan, turns, ratio, attitude):
    """Why two angles give no direction; attitude: the sum of what is needed of it, NaN if one is missing."""
    forward, starboard = measured(across, along, fan)
    if not (abs(forward) <= 1.0 and abs(starboard) <= 1.0):
        return NO_ANGLE
    if not fan and forward * forward + starboard * starboard >= 1.0:
        return NO_DIRECTION
    if turns and not ratio > 0.0:
        return NO_SPEED
    if turns and not abs(attitude) >= 0.0:
        return NO_ATTITUDE
    return NOT_AT_FACE if turns else NO_DIRECTION


@kernel
def measure(across, along, fan, forward, starboard, statuses):
    """Directions by two angles each, and whether they are any."""
    for i in range(across.size):
        forward[i], starboard[i] = measured(across[i], along[i], fan)
        statuses[i] = USABLE
        if not abs(forward[i] + starboard[i]) >= 0.0:
            statuses[i] = NO_ANGLE
        elif not fan and forward[i] * forward[i] + starboard[i] * starboard[i] >= 1.0:
            statuses[i] = NO_DIRECTION


@kernel
def turn(forward, starboard, statuses, ratio, sin_r, cos_r, sin_q, cos_q):
    """As `turned`, for many that are usable so far, in place."""
    for i in range(forward.size):
        if statuses[i] != USABLE:
            continue
        if not ratio[i] > 0.0:
            statuses[i] = NO_SPEED
        elif not abs(sin_r[i] + sin_q[i]) >= 0.0:
            statuses[i] = NO_ATTITUDE
        else:
            forward[i], starboard[i], statuses[i] = turned(
                forward[i], starboard[i], ratio[i], sin_r[i], cos_r[i], sin_q[i], cos_q[i]
            )
