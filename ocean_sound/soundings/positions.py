"""Where soundings are on the Earth: positions, curvature, water level and height.

A sounding's distances are carried to the ellipsoid WGS84 along the normal section of its azimuth, a circle of Euler's
radius for as far as a sounding goes; a point of that section is on the ellipsoid, so its latitude follows in closed
form. Constants: NIMA TR8350.2 (2000), table 3.1 (from memory).

The flattening transform makes flat layers of spherical ones, exactly: with R the Earth's radius at the water surface,
a depth z becomes z_f = R ln(R/(R - z)) and a speed c becomes c_f = c R/(R - z). Angles and times stay; a horizontal
distance in flat water is R times the angle at the Earth's centre, that is the distance along the water surface. (The
transform is that of Gerver and Markushevich 1966, Geophys. J. R. astr. Soc. 11:165; from memory.)
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from . import _kernels_positions as kernels

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from ..profile import Profile

    Floats = NDArray[np.float64]

SEMI_MAJOR_AXIS = 6378137.0
"""Of WGS84, m."""
FLATTENING = 1.0 / 298.257223563
"""Of WGS84."""
_E2 = FLATTENING * (2.0 - FLATTENING)
# A layer of constant gradient is not quite one when flattened: its speed bends by c h²/(8 R²), over 500 m 8e-10 of it.
_THICKEST = 500.0


def earth_radius(latitude: ArrayLike, azimuth: ArrayLike | None = None) -> Floats:
    """Radius of curvature of the ellipsoid WGS84, m.

    Parameters
    ----------
    latitude : array_like
        Degrees, -90 to 90.
    azimuth : array_like, optional
        True azimuth of the section, degrees: for a swath the heading and a right angle. Where not given the radius is
        Gauss's mean over all azimuths.

    Returns
    -------
    numpy.ndarray
        NaN where the latitude is impossible.

    Examples
    --------
    >>> earth_radius(0.0, [0.0, 90.0]).round(1), float(earth_radius(45.0).round(1))
    (array([6335439.3, 6378137. ]), 6378101.0)
    """
    lat = np.radians(_latitude(latitude))
    meridian, prime = _radii(np.sin(lat))
    if azimuth is None:
        return np.sqrt(meridian * prime)
    cos2 = np.cos(np.radians(np.asarray(azimuth, dtype=np.float64))) ** 2
    return 1.0 / (cos2 / meridian + (1.0 - cos2) / prime)


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


def flattened(profile: Profile, radius: float) -> Profile:
    """A profile of flat water in which beams go as in the spherical water of the one given.

    Parameters
    ----------
    profile : Profile
        One that starts below the surface is first extended to it. Never changed.
    radius : float
        Of the Earth at the water surface, m; see `earth_radius`.

    Returns
    -------
    Profile
        Of depth z_f and speed c_f (see the head of this file), uncertainties scaled as speeds. Layers thicker than
        500 m are split. A transducer's depth is to be flattened too, by `flat_depth`; depths found are taken back by
        `true_depth`; distances found are those along the water surface.

    Raises
    ------
    InputError
        If the radius is not that of a planet around this profile.

    Notes
    -----
    Exact but for the bend of speed within a layer: less than 0.1 mm at 6000 m and 75 degrees.

    Examples
    --------
    Curvature makes a beam at 65 degrees 0.36 m shallower at 1000 m:

    >>> import numpy as np
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.soundings.beams import beam_positions
    >>> water, time = Profile([0, 2000], [1500, 1500]), 1000.0 / 1500.0 / np.cos(np.radians(65.0))
    >>> found = beam_positions(flattened(water, 6371000.0), 65.0, time)
    >>> round(float(true_depth(found.depth, 6371000.0)), 2)
    999.64
    """
    water = profile.to_surface()
    if not (np.isfinite(radius) and radius > 2.0 * water.depth[-1]):
        raise InputError(f"radius of the Earth is {radius:g} m: about 6371000 would be right")
    thickness = np.diff(water.depth)
    parts = np.ceil(thickness / _THICKEST).astype(np.int64)
    before = np.arange(parts.sum()) - np.repeat(np.cumsum(parts) - parts, parts)  # parts of the layer above each
    inside = before * np.repeat(thickness / parts, parts)
    depth = np.append(np.repeat(water.depth[:-1], parts) + inside, water.depth[-1])
    factor = radius / (radius - depth)

    def scaled(column: Floats) -> Floats:
        values: Floats = np.interp(depth, water.depth, column) * factor
        return values

    return replace(
        water,
        depth=flat_depth(depth, radius),
        speed=scaled(water.speed),
        uncertainty=None,  # it follows from the shapes and the noise
        shapes={name: scaled(shape) for name, shape in water.shapes.items()},
        noise=None if water.noise is None else scaled(water.noise),
        notes=(*water.notes, f"flattened: the Earth's radius is {radius:.0f} m"),
    )


def flat_depth(depth: ArrayLike, radius: ArrayLike) -> Floats:
    """The depth in flattened water of a depth: R ln(R/(R - z)), m.

    Examples
    --------
    >>> float(flat_depth(1000.0, 6371000.0).round(4))
    1000.0785
    """
    r = np.asarray(radius, dtype=np.float64)
    return -r * np.log1p(-np.asarray(depth, dtype=np.float64) / r)


def true_depth(depth: ArrayLike, radius: ArrayLike) -> Floats:
    """The depth of a depth in flattened water: R (1 - exp(-z_f/R)), m.

    Examples
    --------
    >>> float(true_depth(flat_depth(6000.0, 6371000.0), 6371000.0).round(9))
    6000.0
    """
    r = np.asarray(radius, dtype=np.float64)
    return -r * np.expm1(-np.asarray(depth, dtype=np.float64) / r)


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


def _latitude(latitude: ArrayLike) -> Floats:
    """NaN where it is none."""
    values = np.asarray(latitude, dtype=np.float64)
    return np.where(np.abs(values) <= 90.0, values, np.nan)


def _radii(sine: Floats) -> tuple[Floats, Floats]:
    """Radii of curvature of the ellipsoid along the meridian and across it, by the sine of the latitude."""
    w2 = 1.0 - _E2 * sine * sine
    prime = SEMI_MAJOR_AXIS / np.sqrt(w2)
    return prime * (1.0 - _E2) / w2, prime
