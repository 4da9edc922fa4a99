"""Depth from pressure and pressure from depth: all ways in one place.

Depth is in metres, positive down from the surface; pressure is sea pressure in dbar (zero at the surface).
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Literal, TypeAlias

import gsw
import numpy as np

from ..errors import InputError
from ..files.cf import attributes as cf_attributes
from . import _leroy_parthiot
from ._arrays import Array, elementwise
from .salinity import absolute_salinity_of

if TYPE_CHECKING:
    from collections.abc import Callable

Method: TypeAlias = Literal["teos10", "unesco", "saunders", "leroy-parthiot"]

#: Assumed where no latitude is known: gravity is then within 0.26 % of the true one, and depth with it.
DEFAULT_LATITUDE = 45.0

_DBAR_PER_MPA = 100.0
_PASCAL_PER_DBAR = 1.0e4

# Fofonoff and Millard (1983), UNESCO Technical Papers in Marine Science 44: powers 1 to 4 of pressure (dbar).
_UNESCO = (9.72659, -2.2512e-5, 2.279e-10, -1.82e-15)
_UNESCO_GRAVITY_SLOPE = 1.092e-6


def known_latitude(latitude: Any | None) -> Any:
    """The latitude, with 45 degrees where none is known (None or NaN)."""
    if latitude is None:
        return DEFAULT_LATITUDE
    return np.where(np.isnan(latitude), DEFAULT_LATITUDE, latitude) if np.isnan(latitude).any() else latitude


def gravity_unesco(latitude: Any) -> Any:
    """Gravity at the surface, m/s2, as in the UNESCO report; a minus before the last coefficient is a misprint."""
    sine = np.sin(np.deg2rad(latitude)) ** 2
    return 9.780318 * (1.0 + sine * (5.2788e-3 + 2.36e-5 * sine))


def _depth_teos10(pressure: Any, latitude: Any) -> Any:
    return 0.0 - gsw.z_from_p(pressure, latitude)


def _pressure_teos10(depth: Any, latitude: Any) -> Any:
    return gsw.p_from_z(-depth, latitude) + 0.0


def _depth_unesco(pressure: Any, latitude: Any) -> Any:
    a, b, c, d = _UNESCO
    column = pressure * (a + pressure * (b + pressure * (c + pressure * d)))
    return column / (gravity_unesco(latitude) + _UNESCO_GRAVITY_SLOPE * pressure)


def _pressure_unesco(depth: Any, latitude: Any) -> Any:
    a, b, c, d = _UNESCO
    gravity = gravity_unesco(latitude)
    pressure = depth * (gravity / a)
    # Newton on column(p) - z g(p) = 0; the column is nearly a straight line, so four steps leave rounding only.
    for _ in range(4):
        column = pressure * (a + pressure * (b + pressure * (c + pressure * d))) - depth * (
            gravity + _UNESCO_GRAVITY_SLOPE * pressure
        )
        slope = a + pressure * (2.0 * b + pressure * (3.0 * c + pressure * 4.0 * d)) - depth * _UNESCO_GRAVITY_SLOPE
        pressure = pressure - column / slope
    return pressure


def _saunders(latitude: Any) -> tuple[Any, float]:
    return 1.0 - (5.92 + 5.25 * np.sin(np.deg2rad(latitude)) ** 2) * 1e-3, 2.21e-6


def _depth_saunders(pressure: Any, latitude: Any) -> Any:
    linear, square = _saunders(latitude)
    return pressure * (linear - square * pressure)


def _pressure_saunders(depth: Any, latitude: Any) -> Any:
    linear, square = _saunders(latitude)
    return 2.0 * depth / (linear + np.sqrt(linear * linear - 4.0 * square * depth))


_METHODS: dict[str, tuple[Callable[[Any, Any], Any], Callable[[Any, Any], Any]]] = {
    "teos10": (_depth_teos10, _pressure_teos10),
    "unesco": (_depth_unesco, _pressure_unesco),
    "saunders": (_depth_saunders, _pressure_saunders),
}


def depth_of_columns(pressure: Any, latitude: Any | None = None) -> Any:
    """Depth (m) of plain float64 arrays by TEOS-10, without checks; latitude 45 where it is None or NaN."""
    return _depth_teos10(pressure, known_latitude(latitude))


def pressure_of_columns(depth: Any, latitude: Any | None = None) -> Any:
    """Sea pressure (dbar) of plain float64 arrays by TEOS-10, without checks; latitude 45 where it is None or NaN."""
    return _pressure_teos10(depth, known_latitude(latitude))


def _chosen(method: str, area: str | None, direction: int) -> Callable[[Any, Any], Any]:
    if method == "leroy-parthiot":
        correction = _leroy_parthiot.correction(area or "standard", ("depth", "pressure")[direction])
        if direction == 0:
            return lambda pressure, latitude: _leroy_parthiot.depth(
                pressure / _DBAR_PER_MPA, gravity_unesco(latitude), correction
            )
        return lambda depth, latitude: _DBAR_PER_MPA * _leroy_parthiot.pressure(depth, latitude, correction)
    if method not in _METHODS:
        known = ", ".join([*_METHODS, "leroy-parthiot"])
        raise InputError(f"method: {method!r} is unknown; known are {known}")
    if area is not None:
        raise InputError(f"area: {area!r} goes with method 'leroy-parthiot' only, not with {method!r}; leave it out")
    return _METHODS[method][direction]


def depth_areas() -> dict[str, str]:
    """The seas for which Leroy and Parthiot give corrections, and what is known of each correction.

    Returns
    -------
    dict of str to str
        Name to note. For "mediterranean" and "sea-of-japan" only pressure from depth is offered: the depth
        corrections that circulate do not close with it.

    Examples
    --------
    >>> depth_areas()["standard"]
    'ocean of 0 degC and salinity 35'
    """
    return {name: area.note for name, area in _leroy_parthiot.AREAS.items()}


def depth_from_pressure(
    pressure: Any, latitude: Any | None = None, *, method: Method = "teos10", area: str | None = None
) -> Any:
    """Depth from sea pressure, for a standard water column.

    Parameters
    ----------
    pressure
        Sea pressure, dbar, from 0 to 12000; scalar, array or xarray object.
    latitude
        Degrees; 45 is assumed where it is None or NaN.
    method
        "teos10" (gsw; salinity 35.16504 g/kg, 0 degC), "unesco" (Fofonoff and Millard 1983), "saunders" (Saunders
        1981) or "leroy-parthiot" (Leroy and Parthiot 1998).
    area
        For "leroy-parthiot" only: the sea whose correction is added (see `depth_areas`); the standard ocean if None.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Depth, metres, positive down, of the broadcast shape.

    Raises
    ------
    InputError
        If a value is impossible, or the method or area is unknown.

    Notes
    -----
    All of these assume a water column. Where temperature and salinity were measured,
    `depth_from_density` integrates the water's own density; fresh and brackish water differ by metres.

    Examples
    --------
    >>> round(depth_from_pressure(10000.0, 30.0, method="unesco"), 3)
    9712.653
    """
    convert = _chosen(method, area, 0)

    def core(*, pressure: Any, latitude: Any = None) -> Any:
        return convert(pressure, known_latitude(latitude))

    return elementwise(
        core,
        {"pressure": pressure, "latitude": latitude},
        name="depth",
        attributes={
            **cf_attributes("depth"),
            "method": method if area is None else f"{method} ({area})",
        },
    )


def pressure_from_depth(
    depth: Any, latitude: Any | None = None, *, method: Method = "teos10", area: str | None = None
) -> Any:
    """Sea pressure from depth, for a standard water column.

    Parameters
    ----------
    depth
        Metres, positive down, from 0 to 12000; scalar, array or xarray object.
    latitude
        Degrees; 45 is assumed where it is None or NaN.
    method, area
        As for `depth_from_pressure`. "teos10", "unesco" and "saunders" are the exact inverses of the way down;
        "leroy-parthiot" is the authors' own second formula, which closes within 0.06 m for the standard ocean.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Sea pressure, dbar, of the broadcast shape.

    Raises
    ------
    InputError
        If a value is impossible, or the method or area is unknown.

    Examples
    --------
    >>> round(pressure_from_depth(1000.0, 45.0, method="leroy-parthiot"), 4)
    1010.6426
    """
    convert = _chosen(method, area, 1)

    def core(*, depth: Any, latitude: Any = None) -> Any:
        return convert(depth, known_latitude(latitude))

    return elementwise(
        core,
        {"depth": depth, "latitude": latitude},
        name="pressure",
        attributes={
            **cf_attributes("pressure"),
            "method": method if area is None else f"{method} ({area})",
        },
    )


def depth_from_density(
    pressure: Any,
    temperature: Any,
    salinity: Any,
    *,
    latitude: Any | None = None,
    longitude: Any | None = None,
    row_size: Any | None = None,
) -> Array:
    """Depth of each level of a cast by integrating the cast's own density from the surface down.

    Parameters
    ----------
    pressure
        Sea pressure, dbar, one value per level in the order of the cast; shape (levels,).
    temperature
        Degrees Celsius on ITS-90, shape (levels,).
    salinity
        Practical salinity, shape (levels,).
    latitude, longitude
        Degrees; one number, or one per level. 45 degrees of latitude are assumed, and the Reference Salinity, where
        they are unknown.
    row_size
        Counts of levels, one per cast, if the columns hold many casts one after another; None for one cast.

    Returns
    -------
    numpy.ndarray
        Depth, metres, positive down, shape (levels,); NaN where the pressure is NaN.

    Raises
    ------
    InputError
        If the columns have different lengths or more than one dimension, or the rows do not add up.

    Notes
    -----
    Specific volume of TEOS-10 (75 terms); its anomaly from the standard ocean is integrated by the
    trapezium rule. The water above the first level is taken to be like it. A level without temperature or salinity
    takes the anomaly of the level before it (or of the first one that has it); a cast without any is taken for the
    standard ocean. Gravity grows with depth as in TEOS-10. Values are not checked: flag and mask a cast first.

    Examples
    --------
    >>> import numpy as np
    >>> p = np.array([0.0, 50.0, 100.0])
    >>> sea, lake = (depth_from_density(p, np.full(3, 10.0), np.full(3, s), latitude=47.0) for s in (35.0, 0.2))
    >>> bool(lake[-1] - sea[-1] > 2.5)
    True
    """
    p, t, s = (np.asarray(column, dtype=np.float64) for column in (pressure, temperature, salinity))
    if p.ndim != 1 or not p.shape == t.shape == s.shape:
        raise InputError(
            f"pressure {p.shape}, temperature {t.shape}, salinity {s.shape}: columns of one length are needed; "
            "give one value of each per level"
        )
    rows = np.array([p.size]) if row_size is None else np.asarray(row_size, dtype=np.int64)
    if rows.ndim != 1 or (rows < 0).any() or rows.sum() != p.size:
        raise InputError(
            f"row_size: the rows add up to {rows.sum()}, the columns have {p.size} levels; they must agree"
        )
    if p.size == 0:
        return np.empty(0)
    sa = absolute_salinity_of(s, p, latitude, longitude)
    return _integrated(p, sa, gsw.CT_from_t(sa, t, p), known_latitude(latitude), rows)


def _integrated(p: Array, sa: Any, ct: Any, latitude: Any, rows: Any) -> Array:
    """Depth from the specific-volume anomaly summed along each row."""
    starts = (np.cumsum(rows) - rows)[rows > 0]
    cast = np.repeat(np.arange(starts.size), rows[rows > 0])
    anomaly = _filled(gsw.specvol(sa, ct, p) - gsw.specvol_SSO_0(p), cast, starts, 0.0)
    level = _filled(p, cast, starts, 0.0)
    step = np.diff(level, prepend=0.0)
    step[starts] = level[starts]
    before = np.concatenate([anomaly[:1], anomaly[:-1]])
    before[starts] = anomaly[starts]
    slab = 0.5 * (anomaly + before) * step * _PASCAL_PER_DBAR
    total = np.empty_like(slab)
    # cast by cast, so that no depth depends on which casts come before
    for first, end in zip(starts.tolist(), [*starts[1:].tolist(), p.size], strict=True):
        np.cumsum(slab[first:end], out=total[first:end])
    # gsw wants the dynamic height anomaly: minus the integral of the anomaly of specific volume over pressure.
    depth: Array = 0.0 - gsw.z_from_p(p, latitude, geo_strf_dyn_height=0.0 - total)
    return depth


def _filled(values: Array, cast: Any, starts: Any, default: float) -> Array:
    """The values, gaps filled inside each cast by the value before, else by the cast's first, else by the default."""
    good = np.isfinite(values)
    if good.all():
        return values
    index = np.arange(values.size)
    last = np.maximum.accumulate(np.where(good, index, -1))
    following = np.minimum.accumulate(np.where(good, index, values.size)[::-1])[::-1]
    ends = np.append(starts[1:], values.size)[cast]
    choice = np.where(last >= starts[cast], last, np.where(following < ends, following, -1))
    return np.where(choice >= 0, values[choice], default)
