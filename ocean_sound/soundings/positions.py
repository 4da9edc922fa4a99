"""Where soundings are on the Earth: positions, curvature, water level and height.

A sounding's distances are carried to the ellipsoid WGS84 along the normal section of its azimuth, a circle of Euler's
radius for as far as a sounding goes; a point of that section is on the ellipsoid, so its latitude follows in closed
form. Constants: NIMA TR8350.2 (2000), table 3.1 (from memory).

The Earth's curvature and the transform that flattens it are in `profile.flattening`; its names are handed on here.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from .._numba import kernel_array
from ..profile.flattening import FLATTENING, SEMI_MAJOR_AXIS, earth_radius, flat_depth, flattened, true_depth
from ..profile.flattening import known_latitude as _latitude
from ..profile.flattening import radii_of_curvature as _radii
from . import _kernels_positions as kernels

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

__all__ = [
    "FLATTENING",
    "SEMI_MAJOR_AXIS",
    "earth_radius",
    "flat_depth",
    "flattened",
    "midpoint_error",
    "offsets",
    "reduced_depth",
    "sounding_height",
    "sounding_positions",
    "true_depth",
]

_E2 = FLATTENING * (2.0 - FLATTENING)


def sounding_positions(
    latitude: ArrayLike,
    longitude: ArrayLike,
    heading: ArrayLike,
    across: ArrayLike,
    along: ArrayLike = 0.0,
    *,
    height: ArrayLike = 0.0,
) -> tuple[Floats, Floats]:
    """Latitude and longitude of soundings, from the transducer's and their distances from it.

    Parameters
    ----------
    latitude, longitude : array_like
        Of the transducer on WGS84, degrees; any turn of longitude.
    heading : array_like
        True, degrees.
    across, along : array_like
        Distances along the water surface, m, positive to starboard and forward; those in water flattened by
        `flattened` are such.
    height : array_like
        Height of that surface above the ellipsoid, m.

    Returns
    -------
    tuple of numpy.ndarray
        Latitude, and longitude from -180 to 180; NaN where a number is missing or the latitude impossible.

    Notes
    -----
    Within 1 mm of the geodesic up to 10 km at any latitude (the tests find less than 0.1 mm). Sines and cosines are
    taken of the transducer's values alone, so columns of pings against rows of beams are cheap.

    Examples
    --------
    >>> latitude, longitude = sounding_positions(0.0, 179.99, 0.0, [0.0, 2226.3898], [1105.7427, 0.0])
    >>> latitude.round(6), longitude.round(6)
    (array([0.01, 0.  ]), array([ 179.99, -179.99]))
    """
    frame, one_minus_e2 = place_frame(latitude, longitude, heading, height=height)
    x, y = np.asarray(across, dtype=np.float64), np.asarray(along, dtype=np.float64)
    whole = np.broadcast_arrays(x, y, *frame)
    columns = [kernel_array(column.ravel()) for column in whole]
    size = columns[0].size
    found = np.empty((2, size))
    kernels.places(*columns[:2], tuple(columns[2:]), one_minus_e2, np.empty((2, size)), *found)
    return found[0].reshape(whole[0].shape)[()], found[1].reshape(whole[0].shape)[()]


def place_frame(
    latitude: ArrayLike, longitude: ArrayLike, heading: ArrayLike, *, height: ArrayLike = 0.0
) -> tuple[tuple[Floats, ...], float]:
    """What the kernels want of transducers, each in the shape of what it comes from, and 1 less the excentricity².

    The columns are those of `_kernels_positions.place_chunk`, as float64 arrays.
    """
    degrees = _latitude(latitude)
    lat, course = np.radians(degrees), np.radians(np.asarray(heading, dtype=np.float64))
    sine = np.sin(lat)
    columns = (np.cos(course), np.sin(course), sine, np.cos(lat), *_radii(sine), height, degrees, longitude)
    return tuple(np.asarray(column, dtype=np.float64) for column in columns), 1.0 - _E2


def offsets(
    latitude: ArrayLike,
    longitude: ArrayLike,
    to_latitude: ArrayLike,
    to_longitude: ArrayLike,
    heading: ArrayLike,
) -> tuple[Floats, Floats]:
    """How far across- and along-track a point is from another, m; from transmission to reception, say.

    Parameters
    ----------
    latitude, longitude, to_latitude, to_longitude : array_like
        On WGS84, degrees; any turn of longitude.
    heading : array_like
        True, degrees, at the first point.

    Returns
    -------
    tuple of numpy.ndarray
        Distances, positive to starboard and forward: in the plane that touches the ellipsoid at the first point,
        shorter than on the ellipsoid by 4 parts in 10^9 at 1 km and 4 in 10^7 at 10 km.

    Examples
    --------
    >>> across, along = offsets(60.0, 179.9999, 60.0, -179.9999, 90.0)
    >>> float(along.round(3)), float(abs(across).round(3))
    (11.16, 0.0)
    """
    a, b = np.radians(_latitude(latitude)), np.radians(_latitude(to_latitude))
    turn = np.radians(np.asarray(to_longitude, dtype=np.float64) - np.asarray(longitude, dtype=np.float64))
    (_, from_prime), (_, to_prime) = _radii(np.sin(a)), _radii(np.sin(b))
    axis_a, axis_b = from_prime * np.cos(a), to_prime * np.cos(b)
    east = axis_b * np.sin(turn)
    outward = axis_b - axis_a - 2.0 * axis_b * np.sin(0.5 * turn) ** 2
    upward = (1.0 - _E2) * (to_prime * np.sin(b) - from_prime * np.sin(a))
    north = np.cos(a) * upward - np.sin(a) * outward
    course = np.radians(np.asarray(heading, dtype=np.float64))
    return np.cos(course) * east - np.sin(course) * north, np.sin(course) * east + np.cos(course) * north


def midpoint_error(two_way_time: ArrayLike, speed_over_ground: ArrayLike) -> Floats:
    """How far a sounding may be off along the track, m, when one position stands for transmission and reception.

    Half the way made in between: a fan sent straight down ends abeam of where it was sent, and the one position is
    taken to be midway. Where both positions are known, `geometry.seen_from_midpoint` leaves 2e-5 of the
    slant range.

    Parameters
    ----------
    two_way_time : array_like
        Seconds.
    speed_over_ground : array_like
        Of the vessel, m/s.

    Examples
    --------
    >>> float(midpoint_error(4.0, 5.0))
    10.0
    """
    return 0.5 * np.asarray(two_way_time, dtype=np.float64) * np.abs(np.asarray(speed_over_ground, dtype=np.float64))


def reduced_depth(depth: ArrayLike, water_level: ArrayLike) -> Floats:
    """Depth below the datum, m: that below the water surface less the water level (positive up, above the datum).

    Negative where it dries.

    Examples
    --------
    >>> reduced_depth([12.0, 1.5], 2.0)
    array([10. , -0.5])
    """
    return np.asarray(depth, dtype=np.float64) - np.asarray(water_level, dtype=np.float64)


def sounding_height(depth: ArrayLike, transducer_depth: ArrayLike, transducer_height: ArrayLike) -> Floats:
    """Height of soundings above the ellipsoid, m, from that of the transducer; depths are below the water surface.

    Heave and draught drop out: only the distance below the transducer counts.

    Examples
    --------
    >>> float(sounding_height(30.0, 4.0, 41.5))
    15.5
    """
    below = np.asarray(depth, dtype=np.float64) - np.asarray(transducer_depth, dtype=np.float64)
    return np.asarray(transducer_height, dtype=np.float64) - below
