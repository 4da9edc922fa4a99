"""Lines on the Earth as GeoJSON (RFC 7946), split where they cross 180 degrees."""

from __future__ import annotations

import json
from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np

from .writing import write_text

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence
    from os import PathLike

    from numpy.typing import ArrayLike

_DIGITS = 7  # of a degree: about a centimetre
_MOST = 1e-9  # degrees by which a place lies off the meridian that it is taken to be on


def line(latitude: ArrayLike, longitude: ArrayLike, properties: Mapping[str, Any]) -> dict[str, Any]:
    """A line as a feature.

    Parameters
    ----------
    latitude, longitude : array_like, shape (points,)
        Degrees, at least two points; any turn of longitude. From each point to the next the shorter way round is meant.
    properties : mapping
        What is known of it.

    Returns
    -------
    dict
        A Feature with a LineString; with a MultiLineString, cut at 180 degrees, where it crosses it (RFC 7946, section
        3.1.9). Longitudes lie from -180 to 180 degrees.

    Examples
    --------
    >>> line([0.0, 2.0], [179.0, -179.0], {})["geometry"]["coordinates"]
    [[[179.0, 0.0], [180.0, 1.0]], [[-180.0, 1.0], [-179.0, 2.0]]]
    """
    lat, lon = np.asarray(latitude, dtype=np.float64), _unwound(np.asarray(longitude, dtype=np.float64))
    pieces = [_coordinates(a, b) for a, b in _cut(lat, lon)]
    single = len(pieces) == 1
    geometry = {
        "type": "LineString" if single else "MultiLineString",
        "coordinates": pieces[0] if single else pieces,
    }
    return {"type": "Feature", "geometry": geometry, "properties": dict(properties)}


def collection(features: Sequence[dict[str, Any]]) -> dict[str, Any]:
    """Features as a FeatureCollection.

    Examples
    --------
    >>> collection([])
    {'type': 'FeatureCollection', 'features': []}
    """
    return {"type": "FeatureCollection", "features": list(features)}


def write_geojson(path: str | PathLike[str], content: Mapping[str, Any], *, replace: bool = False) -> None:
    """Write a GeoJSON object, whole or not at all.

    Raises
    ------
    OutputError
        As for `replacing`.
    """
    write_text(path, json.dumps(content, allow_nan=False, ensure_ascii=False) + "\n", replace=replace)


def _unwound(longitude: np.ndarray) -> np.ndarray:
    """Longitudes without jumps, the first one from -180 up to 180."""
    steps = (np.diff(longitude) + 180.0) % 360.0 - 180.0
    first = (longitude[0] + 180.0) % 360.0 - 180.0
    return np.concatenate(([first], first + np.cumsum(steps)))


def _cut(lat: np.ndarray, lon: np.ndarray) -> list[tuple[np.ndarray, np.ndarray]]:
    """The pieces between crossings of 180 degrees, each within its own turn."""
    along = np.arange(lat.size, dtype=np.float64)
    low, high = float(lon.min()), float(lon.max())
    cuts: list[float] = []
    for turn in range(int(np.floor((low + 180.0) / 360.0)), int(np.ceil((high + 180.0) / 360.0)) + 1):
        off = lon - (turn * 360.0 - 180.0)
        off = np.where(np.abs(off) < _MOST, 0.0, off)
        steps = np.flatnonzero(off[1:] * off[:-1] < 0.0)
        cuts += (along[steps] + off[steps] / (off[steps] - off[steps + 1])).tolist()
        # a point on the meridian itself parts the line if it goes on to the other side
        cuts += [float(j) for j in range(1, lat.size - 1) if off[j] == 0.0 and off[j - 1] * off[j + 1] < 0.0]
    ends = [0.0, *sorted(cuts), along[-1]]
    pieces = []
    for start, end in pairwise(ends):
        at = np.concatenate(([start], along[(along > start) & (along < end)], [end]))
        a, b = np.interp(at, along, lat), np.interp(at, along, lon)
        middle = float(np.interp(0.5 * (start + end), along, lon))
        pieces.append((a, b - 360.0 * np.floor((middle + 180.0) / 360.0)))
    return pieces


def _coordinates(lat: np.ndarray, lon: np.ndarray) -> list[list[float]]:
    return [[round(float(b), _DIGITS), round(float(a), _DIGITS)] for a, b in zip(lat, lon, strict=True)]
