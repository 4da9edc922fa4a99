"""The Earth's curvature, and the transform that makes flat layers of spherical ones, exactly.

With R the Earth's radius at the water surface, a depth z becomes z_f = R ln(R/(R - z)) and a speed c becomes
c_f = c R/(R - z). Angles and times stay; a horizontal distance in flat water is R times the angle at the Earth's
centre, that is the distance along the water surface. (The transform is that of Gerver and Markushevich 1966, Geophys.
J. R. astr. Soc. 11:165; from memory.) Constants of the ellipsoid WGS84: NIMA TR8350.2 (2000), table 3.1 (from memory).
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from .profile import Profile

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
    lat = np.radians(known_latitude(latitude))
    meridian, prime = radii_of_curvature(np.sin(lat))
    if azimuth is None:
        return np.sqrt(meridian * prime)
    cos2 = np.cos(np.radians(np.asarray(azimuth, dtype=np.float64))) ** 2
    return 1.0 / (cos2 / meridian + (1.0 - cos2) / prime)


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


def known_latitude(latitude: ArrayLike) -> Floats:
    """A latitude, degrees; NaN where it is none."""
    values = np.asarray(latitude, dtype=np.float64)
    return np.where(np.abs(values) <= 90.0, values, np.nan)


def radii_of_curvature(sine: Floats) -> tuple[Floats, Floats]:
    """Radii of curvature of the ellipsoid along the meridian and across it, by the sine of the latitude."""
    w2 = 1.0 - _E2 * sine * sine
    prime = SEMI_MAJOR_AXIS / np.sqrt(w2)
    return prime * (1.0 - _E2) / w2, prime
