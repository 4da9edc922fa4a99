"""The cast: what was measured at one place and time, with flags, and nothing that was not."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from datetime import datetime
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..files.cf import ORIGIN_VALUES
from ..files.cf import attributes as cf_attributes

if TYPE_CHECKING:
    from collections.abc import Mapping

    import xarray as xr
    from numpy.typing import NDArray

PASS, NOT_EVALUATED, SUSPECT, FAIL, MISSING = 1, 2, 3, 4, 9
"""Flags of QARTOD (IOOS, Manual for Real-Time Quality Control of In-situ Temperature and Salinity Data)."""
FLAGS = (PASS, NOT_EVALUATED, SUSPECT, FAIL, MISSING)
_KNOWN_FLAG = np.zeros(256, bool)
_KNOWN_FLAG[list(FLAGS)] = True

VERTICAL = ("pressure", "depth")
MEASURED = ("temperature", "salinity", "conductivity", "sound_speed")
VARIABLES = (*VERTICAL, *MEASURED)
"""Sea pressure (dbar), depth (m, positive down), temperature (degC, ITS-90), practical salinity (PSS-78),
conductivity (S/m), sound speed (m/s)."""

AS_MEASURED, CARRIED_UP, CARRIED_DOWN, NEIGHBOUR, CLIMATOLOGY, ASSUMED = ORIGIN_VALUES
"""Where a value comes from: measured here; carried up from the first level to the surface; carried down from the last
level; a neighbouring cast; a climatology; a constant that was assumed."""

NO_TIME = np.datetime64("NaT", "ns")
_EARLIEST_YEAR, _LATEST_YEAR = 1678, 2262
_EARLIEST, _LATEST = (np.datetime64(f"{year}-01-01", "s") for year in (_EARLIEST_YEAR, _LATEST_YEAR))


def read_only(values: Any, dtype: Any) -> NDArray[Any]:
    """A read-only view of the values, copied only where the type must change; the caller's own array stays writable."""
    view = np.asarray(values, dtype).view()
    view.flags.writeable = False
    return view


def normalised_longitude(longitude: float) -> float:
    """The longitude in [-180, 180), unchanged to the last bit where it lies there already."""
    return longitude if -180.0 <= longitude < 180.0 else (longitude + 180.0) % 360.0 - 180.0


def utc(time: Any) -> np.datetime64:
    """A time to the nanosecond type; NaT stays NaT.

    Raises
    ------
    ValueError
        It is no time, or one that nanoseconds since 1970 can't tell (numpy would wrap it round in silence).
    """
    # numpy knows no time zones: a text that says UTC by its Z says what we take it for anyway
    given = time.removesuffix("Z") if isinstance(time, str) else time
    coarse = np.datetime64(given, "s")
    moment = coarse.item()  # None, or a number where the year has five digits; compared as numpy's it takes 4 us
    plain = isinstance(moment, datetime) and _EARLIEST_YEAR < moment.year < _LATEST_YEAR
    if not plain and not np.isnat(coarse) and not _EARLIEST < coarse < _LATEST:
        raise ValueError(f"{time!r} does not lie between {_EARLIEST} and {_LATEST}")
    return np.datetime64(given, "ns")


@dataclass(frozen=True, eq=False, repr=False, kw_only=True)
class Cast:
    """What was measured at one place and time.

    Values flagged 4 (fail) or 9 (missing) stay in their column beside their flag; `good` is the mask of what may be
    used.

    Parameters
    ----------
    id : str
        A name for the cast, unique within its file.
    values : mapping of str to array_like, each of shape (levels,)
        By the names in `VARIABLES`: ``pressure`` (dbar of sea pressure), ``depth`` (m, positive down),
        ``temperature`` (degC on ITS-90), ``salinity`` (PSS-78), ``conductivity`` (S/m), ``sound_speed`` (m/s).
        Pressure or depth must be among them.
    time : datetime64 or str, optional
        UTC; NaT where unknown.
    latitude, longitude : float, optional
        Degrees north and east; NaN where unknown. Longitudes from -360 to 360 are accepted and kept in [-180, 180).
    flags : mapping of str to array_like of int, each of shape (levels,), optional
        QARTOD flags of any of the values: 1 pass, 2 not evaluated, 3 suspect, 4 fail, 9 missing.
    uncertainties : mapping of str to array_like, each of shape (levels,), optional
        Standard uncertainties (k = 1) of any of the values, in their units; NaN where that of the instrument holds.
    origins : mapping of str to array_like of int, each of shape (levels,), optional
        Where the values of a variable come from: 0 measured, 1 the first level's, carried up to the surface, 2 the last
        level's, carried down, 3 a neighbouring cast, 4 a climatology, 5 a constant assumed. All 0 where not given.
    source : str, optional
        The file the cast came from, and the member within it.
    attributes : mapping of str to str, optional
        What else is known: platform, station, probe and the like.
    notes : tuple of str, optional
        One line for each thing that a reader assumed or converted.

    Raises
    ------
    InputError
        No pressure and no depth, an unknown variable, columns of unequal length or not one-dimensional, no level at
        all, a flag that is not one of QARTOD's, an uncertainty below 0, an unknown origin, a position that is not on
        the Earth.

    Examples
    --------
    >>> cast = Cast(id="A1", values={"depth": [0.0, 10.0], "temperature": [12.5, 11.0]}, latitude=54.0, longitude=352.0)
    >>> cast
    <Cast A1: 2 levels, depth 0 to 10 m, temperature; 54.0000 N 8.0000 W, time unknown>
    >>> cast.longitude, cast.salinity is None
    (-8.0, True)
    """

    id: str
    values: Mapping[str, NDArray[np.float64]]
    time: np.datetime64 = NO_TIME
    latitude: float = math.nan
    longitude: float = math.nan
    flags: Mapping[str, NDArray[np.int8]] = field(default_factory=dict)
    uncertainties: Mapping[str, NDArray[np.float64]] = field(default_factory=dict)
    origins: Mapping[str, NDArray[np.int8]] = field(default_factory=dict)
    source: str = ""
    attributes: Mapping[str, str] = field(default_factory=dict)
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        where = f"cast {self.id!r}"
        try:
            values = {name: read_only(column, np.float64) for name, column in self.values.items()}
        except (TypeError, ValueError) as error:
            raise InputError(f"{where}: its values must be columns of numbers: {error}") from error
        _check_columns(values, where)
        latitude, longitude = float(self.latitude), float(self.longitude)
        if abs(latitude) > 90.0:
            raise InputError(f"{where}: latitude is {latitude}; it must lie in -90 to 90 degrees")
        if abs(longitude) > 360.0:
            raise InputError(f"{where}: longitude is {longitude}; it must lie in -180 to 360 degrees")
        try:
            time = utc(self.time)
        except ValueError as error:
            raise InputError(
                f"{where}: time is {self.time!r}; it must be a date, best as 2026-01-31T12:00:00"
            ) from error
        for name, value in (
            ("id", str(self.id)),
            ("values", MappingProxyType(values)),
            ("time", time),
            ("latitude", latitude),
            ("longitude", normalised_longitude(longitude)),
            ("flags", MappingProxyType(_checked_flags(self.flags, values, where))),
            ("uncertainties", MappingProxyType(_checked_uncertainties(self.uncertainties, values, where))),
            ("origins", MappingProxyType(_checked_origins(self.origins, values, where))),
            ("attributes", MappingProxyType(dict(self.attributes))),
            ("notes", tuple(self.notes)),
        ):
            object.__setattr__(self, name, value)

    def __reduce__(self) -> tuple[Any, ...]:
        return _rebuilt, (plain_fields(self),)  # read-only mappings can't be pickled, so they travel as dicts

    def __len__(self) -> int:
        return next(iter(self.values.values())).size

    @property
    def pressure(self) -> NDArray[np.float64] | None:
        """Sea pressure, dbar; None if absent."""
        return self.values.get("pressure")

    @property
    def depth(self) -> NDArray[np.float64] | None:
        """Depth below the surface, m, positive down; None if absent."""
        return self.values.get("depth")

    @property
    def temperature(self) -> NDArray[np.float64] | None:
        """Temperature in situ, degC on ITS-90; None if absent."""
        return self.values.get("temperature")

    @property
    def salinity(self) -> NDArray[np.float64] | None:
        """Practical salinity, PSS-78; None if absent."""
        return self.values.get("salinity")

    @property
    def conductivity(self) -> NDArray[np.float64] | None:
        """Electrical conductivity, S/m; None if absent."""
        return self.values.get("conductivity")

    @property
    def sound_speed(self) -> NDArray[np.float64] | None:
        """Speed of sound, m/s; None if absent."""
        return self.values.get("sound_speed")

    def good(self, name: str) -> NDArray[np.bool_]:
        """Which values of a variable may be used: finite, and flagged 1 or 2 or not at all.

        Parameters
        ----------
        name : str
            One of the cast's variables.

        Returns
        -------
        ndarray of bool, shape (levels,)

        Raises
        ------
        InputError
            The cast has no such variable.

        Examples
        --------
        >>> cast = Cast(id="A1", values={"depth": [0.0, 5.0, 9.0], "temperature": [12.5, 99.9, float("nan")]},
        ...             flags={"temperature": [1, 4, 9]})
        >>> cast.good("temperature").tolist()
        [True, False, False]
        """
        if name not in self.values:
            raise InputError(f"cast {self.id!r} has no {name}; it has {', '.join(self.values)}")
        finite = np.isfinite(self.values[name])
        flag = self.flags.get(name)
        return finite if flag is None else finite & ((flag == PASS) | (flag == NOT_EVALUATED))

    @property
    def added(self) -> NDArray[np.bool_]:
        """Which levels were added, not measured: nothing but their depth or pressure is of this cast.

        Examples
        --------
        >>> cast = Cast(id="A1", values={"depth": [0.0, 5.0], "temperature": [12.5, 12.5]},
        ...             origins={"temperature": [1, 0]})
        >>> cast.added.tolist()
        [True, False]
        """
        measured = np.zeros(len(self), dtype=bool)
        lent = np.zeros(len(self), dtype=bool)
        for name in MEASURED:
            if name in self.values:
                origin = self.origins.get(name, np.zeros(len(self), np.int8))
                measured |= np.isfinite(self.values[name]) & (origin == AS_MEASURED)
                lent |= origin != AS_MEASURED
        return lent & ~measured

    def to_dataset(self) -> xr.Dataset:
        """The cast as an `xarray.Dataset` by the CF conventions.

        Returns
        -------
        xarray.Dataset
            Dimension ``level``; scalar coordinates ``time``, ``latitude``, ``longitude``, ``cast_id``; pressure and
            depth as coordinates; each other value as a variable. Flags, uncertainties and origins stand in
            ``<name>_flag``, ``<name>_uncertainty`` and ``<name>_origin``, tied by ``ancillary_variables``. Attributes
            of the cast become global attributes ``cast_<key>``, its notes and source ``notes`` and ``source_file``.
        """
        import xarray as xr

        columns: dict[str, Any] = {}
        companions = {"flag": self.flags, "uncertainty": self.uncertainties, "origin": self.origins}
        for name, column in self.values.items():
            beside = " ".join(f"{name}_{kind}" for kind, of in companions.items() if name in of)
            extra = {"ancillary_variables": beside} if beside else {}
            columns[name] = ("level", column, {**cf_attributes(name), **extra})
        for kind, of in companions.items():
            columns |= {
                f"{name}_{kind}": ("level", column, cf_attributes(f"{name}_{kind}")) for name, column in of.items()
            }
        scalars = {"time": self.time, "latitude": self.latitude, "longitude": self.longitude, "cast_id": self.id}
        coordinates = {name: ((), value, cf_attributes(name)) for name, value in scalars.items()}
        coordinates |= {name: columns.pop(name) for name in VERTICAL if name in columns}
        globals_ = {f"cast_{key}": value for key, value in self.attributes.items()}
        globals_ |= {"featureType": "profile", "source_file": self.source, "notes": "\n".join(self.notes)}
        return xr.Dataset(columns, coordinates, globals_)

    def __repr__(self) -> str:
        count = len(self)
        measured = ", ".join(name.replace("_", " ") for name in MEASURED if name in self.values) or "nothing measured"
        where = position_text(self.latitude, self.longitude)
        when = "time unknown" if np.isnat(self.time) else f"{np.datetime_as_string(self.time, 's')}Z"
        levels = f"{count} level{'' if count == 1 else 's'}"
        return f"<Cast {self.id}: {levels}, {_reach(self)}, {measured}; {where}, {when}>"


def _rebuilt(fields: dict[str, Any]) -> Cast:
    return Cast(**fields)


def plain_fields(cast: Cast) -> dict[str, Any]:
    """The fields of a cast with plain dicts for its mappings."""
    return {
        "id": cast.id,
        "values": dict(cast.values),
        "time": cast.time,
        "latitude": cast.latitude,
        "longitude": cast.longitude,
        "flags": dict(cast.flags),
        "uncertainties": dict(cast.uncertainties),
        "origins": dict(cast.origins),
        "source": cast.source,
        "attributes": dict(cast.attributes),
        "notes": cast.notes,
    }


def _check_columns(values: Mapping[str, NDArray[np.float64]], where: str) -> None:
    unknown = [name for name in values if name not in VARIABLES]
    if unknown:
        raise InputError(f"{where}: no variable is named {unknown[0]!r}; known: {', '.join(VARIABLES)}")
    if not any(name in values for name in VERTICAL):
        raise InputError(f"{where}: has neither pressure nor depth; it has {', '.join(values) or 'nothing'}")
    shapes = {name: column.shape for name, column in values.items()}
    if len(set(shapes.values())) != 1 or any(len(shape) != 1 for shape in shapes.values()):
        found = ", ".join(f"{name} {shape}" for name, shape in shapes.items())
        raise InputError(f"{where}: the columns must be one-dimensional and equally long; found {found}")
    if next(iter(shapes.values())) == (0,):
        raise InputError(f"{where}: has no level")


def _checked_flags(
    flags: Mapping[str, Any], values: Mapping[str, NDArray[np.float64]], where: str
) -> dict[str, NDArray[np.int8]]:
    checked = {}
    for name, column in flags.items():
        flag = _companion(name, column, "flags", values, where)
        # As unsigned bytes the flags index a table of 256: several times faster than isin for the columns of a cast.
        if flag.dtype != np.int8 or not _KNOWN_FLAG[flag.view(np.uint8)].all():
            bad = flag[~np.isin(flag, FLAGS)]
            if bad.size:
                raise InputError(f"{where}: flag {bad[0]} of {name}; QARTOD flags are {', '.join(map(str, FLAGS))}")
        checked[name] = read_only(flag, np.int8)
    return checked


def _companion(
    name: str, column: Any, kind: str, values: Mapping[str, NDArray[np.float64]], where: str
) -> NDArray[Any]:
    """A column that stands beside the values of a variable, as long as they are."""
    if name not in values:
        raise InputError(f"{where}: {kind} of {name!r}, of which there are no values; it has {', '.join(values)}")
    beside = np.asarray(column)
    if beside.shape != values[name].shape:
        raise InputError(f"{where}: {name} has {values[name].size} levels but {kind} of shape {beside.shape}")
    return beside


def _checked_uncertainties(
    uncertainties: Mapping[str, Any], values: Mapping[str, NDArray[np.float64]], where: str
) -> dict[str, NDArray[np.float64]]:
    checked = {}
    for name, column in uncertainties.items():
        beside = read_only(_companion(name, column, "uncertainties", values, where), np.float64)
        bad = (beside < 0.0) | np.isinf(beside)
        if bad.any():
            raise InputError(f"{where}: uncertainty {beside[bad][0]:g} of {name}; it must be 0 or more, NaN if unknown")
        checked[name] = beside
    return checked


def _checked_origins(
    origins: Mapping[str, Any], values: Mapping[str, NDArray[np.float64]], where: str
) -> dict[str, NDArray[np.int8]]:
    checked = {}
    for name, column in origins.items():
        beside = _companion(name, column, "origins", values, where)
        bad = ~np.isin(beside, ORIGIN_VALUES)
        if bad.any():
            raise InputError(
                f"{where}: origin {beside[bad][0]} of {name}; origins are {', '.join(map(str, ORIGIN_VALUES))}"
            )
        checked[name] = read_only(beside, np.int8)
    return checked


def position_text(latitude: float, longitude: float) -> str:
    """A position in words a navigator reads.

    >>> position_text(-34.12, 151.5), position_text(float("nan"), 0.0)
    ('34.1200 S 151.5000 E', 'position unknown')
    """
    if math.isnan(latitude) or math.isnan(longitude):
        return "position unknown"
    north, east = "N" if latitude >= 0 else "S", "E" if longitude >= 0 else "W"
    return f"{abs(latitude):.4f} {north} {abs(longitude):.4f} {east}"


def _reach(cast: Cast) -> str:
    for name, unit in (("depth", "m"), ("pressure", "dbar")):
        column = cast.values.get(name)
        if column is not None and np.isfinite(column).any():
            return f"{name} {np.nanmin(column):g} to {np.nanmax(column):g} {unit}"
    return "no depth"
