"""The area in which something is to be heard: a grid of cells over a box or a polygon, at one depth or several."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import ArrayLike, NDArray

    from ..grids import Bathymetry

    Floats = NDArray[np.float64]
    Booleans = NDArray[np.bool_]
    Indices = NDArray[np.intp]

MOST_CELLS = 1_000_000
_DEGREE = 111_195.0  # m, of a sphere of the Earth's mean radius; only for how many cells there are
# WGS84: half axis (m) and the square of the eccentricity (published constants).
_AXIS, _ECCENTRICITY2 = 6_378_137.0, 0.00669437999014


@dataclass(frozen=True, eq=False)
class Area:
    """Cells in which something swims or sails, and what each is worth. Made by `box` or `polygon`.

    Parameters
    ----------
    latitude : array_like, shape (rows,)
        Centres of the cells, degrees, increasing and equally far apart.
    longitude : array_like, shape (columns,)
        Likewise; it runs on beyond 180 where the area lies across the date line.
    step : tuple of float
        Height and width of a cell, degrees.
    depths : array_like, shape (layers,)
        Where in the water it is, m, increasing.
    shares : array_like, shape (layers,)
        How much of its time it is at each depth. Where the sea is too shallow for some depths, it is at the others.
    inside : array_like of bool, shape (rows, columns)
    seabed : array_like, shape (rows, columns)
        m, positive down.
    corners : array_like, shape (n, 2), optional
        Latitude and longitude of the polygon's.

    Notes
    -----
    A cell is one depth at one place. Cells run first over depth, then north, then east; those on land, outside, or
    below the seabed are left out.
    """

    latitude: Floats
    longitude: Floats
    step: tuple[float, float]
    depths: Floats
    shares: Floats
    inside: Booleans
    seabed: Floats
    corners: Floats | None = None

    @classmethod
    def box(
        cls,
        south: float,
        north: float,
        west: float,
        east: float,
        *,
        spacing: float,
        depths: ArrayLike,
        shares: ArrayLike | None = None,
        bathymetry: Bathymetry | float,
    ) -> Area:
        """The area between two parallels and two meridians, eastward from `west` to `east`.

        Parameters
        ----------
        south, north, west, east : float
            Degrees; where east is not beyond west the box lies across the date line.
        spacing : float
            Size of a cell, about, m.
        depths : array_like, shape (layers,)
            m.
        shares : array_like, shape (layers,), optional
            Of the time at each; equal where not given.
        bathymetry : Bathymetry or float
            A grid, or the depth of a level seabed, m.

        Raises
        ------
        InputError
            If the box is none, the cells are too many, a depth is none, or no cell lies in water.

        Examples
        --------
        >>> area = Area.box(-1.0, 1.0, 179.0, -179.0, spacing=50e3, depths=[20.0, 60.0], bathymetry=100.0)
        >>> area.longitude, area.size
        (array([179.25, 179.75, 180.25, 180.75]), 32)
        >>> round(area.weight.sum() / 1e6)  # of the box, km2
        49234
        """
        if not -90.0 <= south < north <= 90.0:
            raise InputError(
                f"area: south is {south:g}, north {north:g}: a south below the north, from -90 to 90, would be right"
            )
        for name, value in (("west", west), ("east", east)):
            if not -180.0 <= value <= 360.0:
                raise InputError(f"area: {name} is {value:g}: degrees from -180 to 360 would be right")
        width = (east - west) % 360.0 or 360.0
        return cls._over(south, north, west, west + width, None, spacing, depths, shares, bathymetry)

    @classmethod
    def polygon(
        cls,
        corners: Sequence[tuple[float, float]],
        *,
        spacing: float,
        depths: ArrayLike,
        shares: ArrayLike | None = None,
        bathymetry: Bathymetry | float,
    ) -> Area:
        """The area within a polygon; cells are in if their centre is.

        Parameters
        ----------
        corners : sequence of (latitude, longitude)
            Degrees, three or more; each side goes the shorter way round the Earth, straight on a plain map.
        spacing, depths, shares, bathymetry
            As for `box`.

        Raises
        ------
        InputError
            As for `box`, and if the polygon goes round a pole.

        Examples
        --------
        >>> area = Area.polygon(
        ...     [(0.0, 179.0), (2.0, 179.0), (0.0, -179.0)], spacing=25e3, depths=[10.0], bathymetry=50.0
        ... )
        >>> int(area.inside.sum()), area.inside.size
        (36, 81)
        """
        points = np.asarray(corners, dtype=np.float64)
        if points.ndim != 2 or points.shape[1] != 2 or len(points) < 3:
            raise InputError(
                f"area: {len(points)} corners: three or more, each as (latitude, longitude), would be right"
            )
        bad = ~((np.abs(points[:, 0]) <= 90.0) & (np.abs(points[:, 1]) <= 360.0))
        if bad.any():
            lat, lon = points[bad][0]
            raise InputError(f"area: corner {lat:g}, {lon:g} is no position: latitude and longitude would be right")
        turn = np.diff(points[:, 1], append=points[0, 1])
        turn = (turn + 180.0) % 360.0 - 180.0
        if abs(turn.sum()) > 1.0:
            raise InputError("area: the polygon goes round a pole: a box from -180 to 180 would be right")
        points[:, 1] = points[0, 1] + np.concatenate(([0.0], np.cumsum(turn[:-1])))
        (south, west), (north, east) = points.min(axis=0), points.max(axis=0)
        if not (north > south and east > west):
            raise InputError("area: the corners lie on one line: a polygon with an inside would be right")
        return cls._over(south, north, west, east, points, spacing, depths, shares, bathymetry)

    @classmethod
    def _over(
        cls,
        south: float,
        north: float,
        west: float,
        east: float,
        corners: Floats | None,
        spacing: float,
        depths: ArrayLike,
        shares: ArrayLike | None,
        bathymetry: Bathymetry | float,
    ) -> Area:
        z, share = _layers(depths, shares)
        if not (np.isfinite(spacing) and spacing > 0.0):
            raise InputError(f"area: spacing is {spacing:g} m: a distance above 0 would be right")
        widest = np.cos(np.radians(np.clip(0.0, south, north)))
        rows = max(round((north - south) * _DEGREE / spacing), 1)
        columns = max(round((east - west) * _DEGREE * widest / spacing), 1)
        if rows * columns * z.size > MOST_CELLS:
            raise InputError(
                f"area: a spacing of {spacing:g} m makes {rows * columns * z.size} cells, more than {MOST_CELLS}: "
                f"{spacing * np.sqrt(rows * columns * z.size / MOST_CELLS):.0f} m or more would be right"
            )
        step = ((north - south) / rows, (east - west) / columns)
        latitude = np.asarray(south + (np.arange(rows) + 0.5) * step[0], dtype=np.float64)
        longitude = np.asarray(west + (np.arange(columns) + 0.5) * step[1], dtype=np.float64)
        lat, lon = np.meshgrid(latitude, longitude, indexing="ij")
        inside = np.ones(lat.shape, dtype=bool) if corners is None else within(lat, lon, corners)
        seabed = np.full(lat.shape, np.nan)
        if isinstance(bathymetry, int | float):
            seabed[:] = float(bathymetry)
        elif inside.any():
            seabed[inside] = bathymetry.depth_at(lat[inside], (lon[inside] + 180.0) % 360.0 - 180.0)
        area = cls(latitude, longitude, step, z, share, inside, seabed, corners)
        if not area.size:
            raise InputError(f"area: no cell lies in water of {z[0]:g} m or more: another area or depth would be right")
        return area

    @cached_property
    def wet(self) -> Booleans:
        """Which (layer, row, column) are cells."""
        deep = np.where(np.isnan(self.seabed), -np.inf, self.seabed)
        return self.inside[None] & (self.depths[:, None, None] < deep[None])

    @property
    def size(self) -> int:
        """How many cells."""
        return int(self.wet.sum())

    @cached_property
    def places(self) -> tuple[Indices, Indices, Indices]:
        """Layer, row and column of each cell."""
        layer, row, column = np.nonzero(self.wet)
        return layer, row, column

    @property
    def cell_latitude(self) -> Floats:
        """Degrees, of each cell."""
        return self.latitude[self.places[1]]

    @property
    def cell_longitude(self) -> Floats:
        """Degrees from -180 to 180, of each cell."""
        return (self.longitude[self.places[2]] + 180.0) % 360.0 - 180.0

    @property
    def cell_depth(self) -> Floats:
        """m, of each cell."""
        return self.depths[self.places[0]]

    @cached_property
    def weight(self) -> Floats:
        """What each cell is worth: its area (m2, on WGS84) times its share of the time at that place."""
        edges = np.append(self.latitude - 0.5 * self.step[0], self.latitude[-1] + 0.5 * self.step[0])
        bands = np.diff(_area_from_equator(edges)) * np.radians(self.step[1])
        share = self.wet * self.shares[:, None, None]
        total = share.sum(axis=0)
        share = np.divide(share, total[None], out=np.zeros(share.shape), where=total[None] > 0.0)
        weight: Floats = (share * bands[None, :, None])[self.wet]
        return weight

    def on_map(self, values: ArrayLike) -> Floats:
        """Values of cells as a map: (..., cells) to (..., layers, rows, columns), NaN where there is no cell."""
        v = np.asarray(values, dtype=np.float64)
        full = np.full((*v.shape[:-1], *self.wet.shape), np.nan)
        full[..., self.wet] = v
        return full

    def cells_at(self, latitude: float, longitude: float) -> Indices:
        """The cells, at all depths, of the place that holds a point, degrees.

        Raises
        ------
        InputError
            If the point lies in no cell.
        """
        row = int(np.floor((latitude - self.latitude[0]) / self.step[0] + 0.5))
        east = (longitude - self.longitude[0] + 0.5 * self.step[1]) % 360.0
        column = int(np.floor(east / self.step[1]))
        found = np.flatnonzero((self.places[1] == row) & (self.places[2] == column))
        if not found.size:
            raise InputError(
                f"area: no cell in water holds latitude {latitude:g}, longitude {longitude:g}: a place within the area "
                "would be right"
            )
        return found


def within(latitude: Floats, longitude: Floats, corners: Floats) -> Booleans:
    """Whether points lie in a polygon: a line to the east crosses its sides an odd number of times.

    Parameters
    ----------
    latitude, longitude : numpy.ndarray
        Degrees, of one shape; longitudes as the corners count them.
    corners : numpy.ndarray, shape (n, 2)

    Examples
    --------
    >>> triangle = np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]])
    >>> within(np.array([0.2, 0.8]), np.array([0.2, 0.8]), triangle)
    array([ True, False])
    """
    found = np.zeros(latitude.shape, dtype=bool)
    for (lat, lon), (next_lat, next_lon) in zip(corners, np.roll(corners, -1, axis=0), strict=True):
        spans = (lat > latitude) != (next_lat > latitude)
        rise = next_lat - lat
        meets = lon + (next_lon - lon) * (latitude - lat) / (rise or 1.0)
        found ^= spans & (longitude < meets)
    return found


def places_in(area: Area, spacing: float) -> list[tuple[float, float]]:
    """Places on a grid over an area, latitude and longitude from -180 to 180 degrees each.

    Parameters
    ----------
    area : Area
    spacing : float
        About how far apart, m.

    Raises
    ------
    InputError
        If they would be too many.

    Examples
    --------
    >>> area = Area.box(0.0, 1.0, 179.5, -179.5, spacing=20e3, depths=[10.0], bathymetry=50.0)
    >>> places_in(area, 60e3)
    [(0.25, 179.75), (0.25, -179.75), (0.75, 179.75), (0.75, -179.75)]
    """
    (height, width), lat, lon = area.step, area.latitude, area.longitude
    south, west = lat[0] - 0.5 * height, lon[0] - 0.5 * width
    tall, wide = height * lat.size, width * lon.size
    narrow = np.cos(np.radians(np.clip(0.0, south, south + tall)))
    rows = max(round(tall * _DEGREE / spacing), 1)
    columns = max(round(wide * _DEGREE * narrow / spacing), 1)
    if rows * columns > MOST_CELLS:
        raise InputError(f"sites: a spacing of {spacing:g} m makes {rows * columns} sites: a wider one would be right")
    y, x = np.meshgrid(
        south + (np.arange(rows) + 0.5) * tall / rows, west + (np.arange(columns) + 0.5) * wide / columns, indexing="ij"
    )
    kept = np.ones(y.shape, dtype=bool) if area.corners is None else within(y, x, area.corners)
    around = (x[kept] + 180.0) % 360.0 - 180.0
    return list(zip(y[kept].tolist(), around.tolist(), strict=True))


def _layers(depths: ArrayLike, shares: ArrayLike | None) -> tuple[Floats, Floats]:
    z = np.atleast_1d(np.asarray(depths, dtype=np.float64))
    if z.ndim != 1 or not z.size or not (np.all(np.isfinite(z)) and z[0] >= 0.0 and np.all(np.diff(z) > 0.0)):
        raise InputError(
            "area: depths are no list of metres, positive down and increasing: [10.0, 50.0] would be right"
        )
    share = np.ones(z.size) if shares is None else np.asarray(shares, dtype=np.float64)
    if share.shape != z.shape or not (np.all(share >= 0.0) and np.isfinite(share).all() and share.sum() > 0.0):
        raise InputError(f"area: {share.size} shares for {z.size} depths: one of 0 or more for each would be right")
    return z, share / share.sum()


def _area_from_equator(latitude: Floats) -> Floats:
    """Area of the ellipsoid from the equator to a parallel, m2 for one radian of longitude (closed form)."""
    e = np.sqrt(_ECCENTRICITY2)
    s = np.sin(np.radians(latitude))
    b2 = _AXIS**2 * (1.0 - _ECCENTRICITY2)
    area: Floats = 0.5 * b2 * (s / (1.0 - _ECCENTRICITY2 * s**2) + np.arctanh(e * s) / e)
    return area
