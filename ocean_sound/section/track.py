"""A track over the Earth: geodesics from point to point, and what lies where along it."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, TypeAlias

import numpy as np

from ..errors import InputError

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import ArrayLike, NDArray

    from ..grids.window import Grid

    Floats = NDArray[np.float64]

Place: TypeAlias = "tuple[float, float]"
"""Latitude and longitude, degrees."""

# Points per leg among which the one nearest to a cast is first sought.
_SEARCH = 257
_METRES_PER_DEGREE = 111195.0  # of a sphere of the Earth's mean radius; here only for how fine to sample


@dataclass(frozen=True, eq=False)
class Track:
    """Points joined by geodesics of WGS84.

    Parameters
    ----------
    latitude, longitude : array_like, shape (points,)
        Degrees, at least two points; any turn of longitude.

    Raises
    ------
    InputError
        Fewer than two points, one that is no position, or two at one place in a row.

    Examples
    --------
    >>> track = Track([0.0, 0.0], [179.5, -179.5])
    >>> round(track.length)
    111319
    >>> [a.round(3) for a in track.at([0.0, 55659.745])]
    [array([0., 0.]), array([179.5, 180. ])]
    """

    latitude: Floats
    longitude: Floats
    ranges: Floats = field(init=False)
    _azimuths: Floats = field(init=False)

    def __post_init__(self) -> None:
        from pyproj import Geod

        put = object.__setattr__
        lat, lon = np.array(self.latitude, dtype=np.float64), np.array(self.longitude, dtype=np.float64)
        if lat.ndim != 1 or lat.shape != lon.shape or lat.size < 2:
            raise InputError(f"track: {lat.size} latitudes and {lon.size} longitudes; two or more of each are needed")
        bad = ~((np.abs(lat) <= 90.0) & (np.abs(lon) <= 540.0))
        if bad.any():
            raise InputError(
                f"track: latitude {lat[bad][0]:g}, longitude {lon[bad][0]:g} is no position; degrees would be right"
            )
        azimuth, _, legs = Geod(ellps="WGS84").inv(lon[:-1], lat[:-1], lon[1:], lat[1:])
        if not (np.asarray(legs) > 0.0).all():
            j = int(np.argmin(legs))
            raise InputError(
                f"track: points {j} and {j + 1} (counted from 0) are both at {lat[j]:g}, {lon[j]:g}: "
                "distances that increase along the track would be right"
            )
        put(self, "ranges", np.concatenate(([0.0], np.cumsum(legs))))
        put(self, "_azimuths", np.asarray(azimuth))
        for name, values in (("latitude", lat), ("longitude", lon)):
            put(self, name, values)
        for values in (self.latitude, self.longitude, self.ranges, self._azimuths):
            values.flags.writeable = False

    @classmethod
    def between(cls, start: Place, end: Place) -> Track:
        """The geodesic from one place to another, each latitude and longitude in degrees.

        Examples
        --------
        >>> round(Track.between((0.0, 0.0), (1.0, 0.0)).length)
        110574
        """
        for name, place in (("start", start), ("end", end)):
            if np.shape(place) != (2,):
                raise InputError(
                    f"track: {name} is {place!r}; latitude and longitude, as (31.5, -64.2), would be right"
                )
        return cls(np.array([start[0], end[0]]), np.array([start[1], end[1]]))

    @classmethod
    def of(cls, places: Track | Sequence[Place]) -> Track:
        """A track as it is, or through places, each latitude and longitude in degrees.

        Examples
        --------
        >>> round(Track.of([(0.0, 0.0), (0.0, 1.0), (0.0, 2.0)]).length)
        222639
        """
        if isinstance(places, Track):
            return places
        points = np.asarray(places, dtype=np.float64)
        if points.ndim != 2 or points.shape[1] != 2:
            raise InputError(
                "track: its places are no list of (latitude, longitude); [(31.5, -64.2), ...] would be right"
            )
        return cls(points[:, 0], points[:, 1])

    @property
    def length(self) -> float:
        """Its length, m."""
        return float(self.ranges[-1])

    def at(self, ranges: ArrayLike) -> tuple[Floats, Floats]:
        """Latitude and longitude at distances along the track, m; beyond its ends the last leg goes on."""
        from pyproj import Geod

        x = np.asarray(ranges, dtype=np.float64)
        leg = np.clip(np.searchsorted(self.ranges, x, side="right") - 1, 0, self.ranges.size - 2)
        away = x - self.ranges[leg]
        lon, lat, _ = Geod(ellps="WGS84").fwd(self.longitude[leg], self.latitude[leg], self._azimuths[leg], away)
        return np.asarray(lat), np.asarray(lon)

    def azimuth_at(self, distance: float) -> float:
        """True azimuth of the leg that holds a distance, at the leg's start, degrees."""
        leg = np.clip(np.searchsorted(self.ranges, distance, side="right") - 1, 0, self.ranges.size - 2)
        return float(self._azimuths[leg])

    def nearest(self, latitude: ArrayLike, longitude: ArrayLike) -> tuple[Floats, Floats]:
        """Where along the track it comes nearest to points, and how far they are off it there.

        Parameters
        ----------
        latitude, longitude : array_like, shape (points,)
            Degrees.

        Returns
        -------
        tuple of numpy.ndarray
            Range along the track and distance off it, m.

        Examples
        --------
        >>> across, off = Track([0.0, 0.0], [0.0, 2.0]).nearest([0.1], [1.0])
        >>> round(float(across[0]) / 1000.0, 2), round(float(off[0]) / 1000.0, 2)
        (111.32, 11.06)
        """
        from pyproj import Geod

        geod = Geod(ellps="WGS84")
        lat, lon = np.atleast_1d(np.asarray(latitude, np.float64)), np.atleast_1d(np.asarray(longitude, np.float64))

        def away(x: Floats) -> Floats:
            there = self.at(x)
            shape = np.broadcast_shapes(x.shape, (lat.size, 1))
            ends = [np.broadcast_to(v, shape) for v in (lon[:, None], lat[:, None], there[1], there[0])]
            return np.asarray(geod.inv(ends[0], ends[1], ends[2], ends[3])[2])

        fill = [np.linspace(a, b, _SEARCH) for a, b in zip(self.ranges[:-1], self.ranges[1:], strict=True)]
        x = np.unique(np.concatenate(fill))
        found = x[np.argmin(away(x[None, :]), axis=1)][:, None]
        width = float(np.diff(x).max())
        # Each round looks at 33 points over two widths around the best so far.
        while width > 0.01:
            tried = np.clip(found + np.linspace(-width, width, 33)[None, :], 0.0, self.length)
            best = np.argmin(away(tried), axis=1)
            found = np.take_along_axis(tried, best[:, None], axis=1)
            width /= 16.0
        return found[:, 0], away(found)[:, 0]


def spacing_of(grid: Grid, track: Track) -> float:
    """How far apart the points of a grid are, m, by its finer axis at the middle of a track."""
    found = []
    for kind in ("latitude", "longitude"):
        axis = grid.axis(kind)
        if axis is not None and axis.values.size > 1:
            step = float(np.abs(np.diff(axis.values)).min()) * _METRES_PER_DEGREE
            middle = float(track.at(0.5 * track.length)[0])
            found.append(step * (1.0 if kind == "latitude" else max(np.cos(np.radians(middle)), 0.01)))
    return min(found, default=track.length)
