"""Outlines of what is heard, as polygons of GeoJSON (RFC 7946), cut where they cross 180 degrees."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from .area import Area
    from .sites import Site

    Floats = NDArray[np.float64]
    Booleans = NDArray[np.bool_]
    Ring = list[list[float]]

_DIGITS = 7  # of a degree: about a centimetre


def point(latitude: float, longitude: float, properties: Mapping[str, Any]) -> dict[str, Any]:
    """A place as a feature.

    Examples
    --------
    >>> point(10.0, 190.0, {})["geometry"]
    {'type': 'Point', 'coordinates': [-170.0, 10.0]}
    """
    place = [round((longitude + 180.0) % 360.0 - 180.0, _DIGITS), round(float(latitude), _DIGITS)]
    return {"type": "Feature", "geometry": {"type": "Point", "coordinates": place}, "properties": dict(properties)}


def cells_outline(area: Area, chosen: Booleans, properties: Mapping[str, Any]) -> dict[str, Any]:
    """The outline of some places of an area, with its holes, as a feature.

    Parameters
    ----------
    area : Area
    chosen : numpy.ndarray of bool, shape (rows, columns)
    properties : mapping

    Returns
    -------
    dict
        A Feature with a MultiPolygon; exterior rings run counter-clockwise, holes clockwise (RFC 7946, section 3.1.6).
        Cells that touch at a corner alone are polygons of their own.

    Examples
    --------
    >>> from ocean_sound.sensors.area import Area
    >>> area = Area.box(0.0, 1.0, 179.0, -178.0, spacing=111e3, depths=[5.0], bathymetry=50.0)
    >>> for polygon in cells_outline(area, np.array([[False, True, True]]), {})["geometry"]["coordinates"]:
    ...     print(polygon[0])
    [[-180.0, 0.0], [-178.0, 0.0], [-178.0, 1.0], [-180.0, 1.0], [-180.0, 0.0]]
    """
    height, width = area.step
    south = np.append(area.latitude - 0.5 * height, area.latitude[-1] + 0.5 * height)
    west = np.append(area.longitude - 0.5 * width, area.longitude[-1] + 0.5 * width)
    polygons: list[list[Ring]] = []
    turns = range(int(np.floor((west[0] + 180.0) / 360.0)), int(np.floor((west[-1] + 180.0) / 360.0)) + 1)
    for turn in turns:
        low, high = turn * 360.0 - 180.0, turn * 360.0 + 180.0
        columns = np.flatnonzero((west[1:] > low + 1e-9) & (west[:-1] < high - 1e-9))
        if columns.size:
            edges = np.clip(west[columns[0] : columns[-1] + 2], low, high) - turn * 360.0
            polygons += _traced(chosen[:, columns], south, edges)
    return _feature(polygons, properties)


def reach_outline(site: Site, bearings: Floats, reach: Floats, properties: Mapping[str, Any]) -> dict[str, Any]:
    """How far a site hears, as a polygon through the ends of its bearings.

    Parameters
    ----------
    site : Site
    bearings : numpy.ndarray, shape (n,)
        Degrees, three or more.
    reach : numpy.ndarray, shape (n,)
        m.
    properties : mapping

    Returns
    -------
    dict
        A Feature with a MultiPolygon of one polygon, or of one on each side of 180 degrees.

    Examples
    --------
    >>> from ocean_sound.sensors.sites import Site
    >>> here = Site("A", 0.0, 180.0, 10.0)
    >>> found = reach_outline(here, np.array([0.0, 90.0, 180.0, 270.0]), np.full(4, 5e3), {})
    >>> len(found["geometry"]["coordinates"])
    2
    """
    from pyproj import Geod

    lon, lat, _ = Geod(ellps="WGS84").fwd(
        np.full(bearings.size, site.longitude), np.full(bearings.size, site.latitude), bearings, np.maximum(reach, 1.0)
    )
    away = (np.asarray(lon) - site.longitude + 180.0) % 360.0 - 180.0
    middle = (site.longitude + 180.0) % 360.0 - 180.0
    # bearings run clockwise, rings the other way
    corners = np.stack([middle + away, np.asarray(lat)], axis=1)[::-1]
    polygons: list[list[Ring]] = []
    for turn in (-1, 0, 1):
        part = _clipped(corners, turn * 360.0 - 180.0, turn * 360.0 + 180.0)
        if len(part) > 2:
            polygons.append([_ring(part[:, 0] - turn * 360.0, part[:, 1])])
    return _feature(polygons, properties)


def _feature(polygons: list[list[Ring]], properties: Mapping[str, Any]) -> dict[str, Any]:
    geometry = {"type": "MultiPolygon", "coordinates": polygons}
    return {"type": "Feature", "geometry": geometry, "properties": dict(properties)}


def _clipped(corners: Floats, low: float, high: float) -> Floats:
    """The part of a polygon between two meridians (Sutherland and Hodgman 1974, CACM 17:32)."""
    part = corners
    for sign, limit in ((1.0, low), (-1.0, high)):
        if not len(part):
            return part
        off = sign * (part[:, 0] - limit)
        kept: list[Any] = []
        for k in range(len(part)):
            after = (k + 1) % len(part)
            if off[k] >= 0.0:
                kept.append(part[k])
            if off[k] * off[after] < 0.0:
                share = off[k] / (off[k] - off[after])
                kept.append([limit, part[k, 1] + share * (part[after, 1] - part[k, 1])])
        part = np.array(kept).reshape(-1, 2)
    width = np.ptp(part[:, 0]) if len(part) else 0.0
    return part if width > 1e-9 else part[:0]


def _traced(chosen: Booleans, south: Floats, west: Floats) -> list[list[Ring]]:
    """Polygons of the chosen cells of a grid with these edges."""
    from scipy.ndimage import label

    names, count = label(chosen)
    rings: list[list[Ring]] = [[] for _ in range(count)]
    holes: list[list[Ring]] = [[] for _ in range(count)]
    # each side of a cell towards one that is not chosen, with the cell on its left: from corner to corner
    padded = np.pad(chosen, 1)
    out: dict[tuple[int, int], list[tuple[tuple[int, int], int]]] = {}
    sides = (((-1, 0), (0, 0), (0, 1)), ((0, 1), (0, 1), (1, 1)), ((1, 0), (1, 1), (1, 0)), ((0, -1), (1, 0), (0, 0)))
    for (down, right), begin, end in sides:
        beside = padded[1 + down : 1 + down + chosen.shape[0], 1 + right : 1 + right + chosen.shape[1]]
        for r, c in np.argwhere(chosen & ~beside).tolist():
            start = (r + begin[0], c + begin[1])
            out.setdefault(start, []).append(((r + end[0], c + end[1]), int(names[r, c]) - 1))
    while out:
        first = next(iter(out))
        path, name = [first], out[first][0][1]
        heading = (0, 0)
        at = first
        while True:
            ways = out[at]
            # where two cells meet at a corner alone, a left turn stays with the cell
            left = (heading[1], -heading[0])
            pick = next((w for w in ways if (w[0][0] - at[0], w[0][1] - at[1]) == left), ways[0])
            ways.remove(pick)
            if not ways:
                del out[at]
            heading = (pick[0][0] - at[0], pick[0][1] - at[1])
            at = pick[0]
            if at == first:
                break
            path.append(at)
        corners = _straightened(np.array(path))
        ring = _ring(west[corners[:, 1]], south[corners[:, 0]])
        (rings if _turns_left(corners) else holes)[name].append(ring)
    return [[*rings[k], *holes[k]] for k in range(count)]


def _straightened(path: NDArray[np.int64]) -> NDArray[np.int64]:
    """A path along grid lines without the points between its corners."""
    before, after = path - np.roll(path, 1, axis=0), np.roll(path, -1, axis=0) - path
    return path[np.any(before != after, axis=1)]


def _turns_left(corners: NDArray[np.int64]) -> bool:
    y, x = corners[:, 0], corners[:, 1]
    return bool(np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y) > 0)


def _ring(longitude: Floats, latitude: Floats) -> Ring:
    ring = [[round(float(x), _DIGITS), round(float(y), _DIGITS)] for x, y in zip(longitude, latitude, strict=True)]
    return [*ring, ring[0]]
