"""Values of a file turned into ours: packing and missing values undone, units converted, what can't be taken out."""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from functools import partial
from typing import TYPE_CHECKING, Any

import numpy as np

from ..casts.cf_time import NoTimeError, times_since
from ..casts.netcdf import BEYOND, DEFAULT_FILLS
from ..casts.units import to_ours
from ..errors import InputError

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from numpy.typing import NDArray

    from .columns import Column

    Floats = NDArray[np.float64]
    Way = Callable[[Floats], Floats] | None  # None: ours already

_TIME_SPANS = (
    ("s", "s sec secs second seconds", None),
    ("ms", "ms msec millisecond milliseconds", 1e-3),
    ("us", "us usec µs μs microsecond microseconds", 1e-6),
)
_DEGREES = (
    "degree degrees deg degs ° degree_north degrees_north degree_n degrees_n degreen degreesn "
    "degree_east degrees_east degree_e degrees_e degreee degreese degree_true degrees_true"
)
_RADIANS = "rad rads radian radians"
_AS_CAST = {"length": "depth", "speed": "sound_speed"}  # kinds whose units `casts.units` knows, and under which name
_NANOSECONDS = re.compile(r"^\s*(nanoseconds?|ns)\s+since\b", re.IGNORECASE)
_ENOUGH = 16  # values that tell a fan in radians from one in degrees
_HALF_TURN = 1.5708  # rad


def way_to_ours(column: Column, unit: str | None, where: str) -> Way:
    """How values in a unit become ours; None where nothing is to be done.

    Raises
    ------
    InputError
        The unit is none of those in which that variable may be given.

    Examples
    --------
    >>> from .columns import INPUTS
    >>> float(way_to_ours(INPUTS["two_way_travel_time"], "ms", "a.nc")(np.array(250.0)))
    0.25
    """
    if unit is None:
        return None
    plain = unit.strip().lower()
    if column.kind in _AS_CAST:
        quantity = _AS_CAST[column.kind]
        probe = np.ones(1)
        try:
            same = to_ours(quantity, probe, unit, where=where)[0] is probe
        except InputError:
            raise _unknown(
                column, unit, where, "m, ft, fathom, km" if quantity == "depth" else "m/s, ft/s, km/s"
            ) from None
        return None if same else lambda values: to_ours(quantity, values, unit, where=where)[0]
    if column.kind == "time span":
        for _, spellings, factor in _TIME_SPANS:
            if plain in spellings.split():
                return None if factor is None else partial(np.multiply, factor)
        raise _unknown(column, unit, where, "s, ms, us")
    if plain in _DEGREES.split():
        return None
    if plain in _RADIANS.split():
        return np.degrees
    raise _unknown(column, unit, where, "degrees, radians")


def _unknown(column: Column, unit: str, where: str, choices: str) -> InputError:
    return InputError(f"{where}: unit {unit[:40]!r} is not known for {column.name}; use one of {choices}")


@dataclass(eq=False)
class Decoder:
    """Values of one variable as they stand in a file, turned into ours; block by block.

    Parameters
    ----------
    column : Column
    attributes : mapping
        Of the variable: units, positive, packing, missing values, as CF has them.
    dtype : numpy.dtype
        Of the values in the file.
    where : str
        File and variable, for messages.

    Raises
    ------
    InputError
        Text where numbers should be, an unknown unit, no units of a time, a direction other than ours.
    """

    column: Column
    attributes: Mapping[str, Any]
    dtype: np.dtype[Any]
    where: str
    notes: list[str] = field(default_factory=list)
    impossible: int = 0
    _way: Way = None
    _begun: bool = False

    def __post_init__(self) -> None:
        name, units = self.column.name, self._units
        if self.dtype.kind not in "fiubMm":
            raise InputError(f"{self.where}: holds text where numbers should be")
        ours, theirs = self.column.attributes().get("positive"), str(self.attributes.get("positive", "")).lower()
        if ours is not None and theirs in {"up", "down"} and theirs != ours:
            raise InputError(f"{self.where}: is positive {theirs}; {name} positive {ours} would be right")
        if self.column.kind == "time":
            if self.dtype.kind != "M" and units is None:
                raise InputError(f"{self.where}: has no units; such as 'seconds since 1970-01-01' would be right")
        elif self.dtype.kind != "m":
            self._way = way_to_ours(self.column, units, self.where)
            if units is None and self.column.kind != "code":
                self.notes.append(f"{name} has no unit; taken as {self.column.units.replace('m s-1', 'm/s')}")
            elif self._way is not None:
                self.notes.append(f"{name} converted from {units}")

    @property
    def _units(self) -> str | None:
        units = self.attributes.get("units")
        return units if isinstance(units, str) and units.strip() else None

    def __call__(self, raw: NDArray[Any]) -> tuple[NDArray[Any], NDArray[np.bool_] | None]:
        """Values in our unit, missing ones NaN (NaT), and where they were outside what can be (None: nowhere)."""
        if raw.dtype.kind == "m":
            return self._checked(np.where(np.isnat(raw), np.nan, raw / np.timedelta64(1, "s")))
        if self.column.kind == "time":
            return self._times(raw), None
        values = unpacked(raw, self.attributes)
        return self._checked(values if self._way is None else self._way(values))

    def _times(self, raw: NDArray[Any]) -> NDArray[np.datetime64]:
        if raw.dtype.kind == "M":
            return raw.astype("datetime64[ns]")
        values, units = unpacked(raw, self.attributes), str(self._units)
        if _NANOSECONDS.match(units):
            values, units = values * 1e-3, _NANOSECONDS.sub("microseconds since", units)
        try:
            return times_since(values, units, str(self.attributes.get("calendar", "")))
        except NoTimeError as error:
            raise InputError(f"{self.where}: {error}; such as 'seconds since 1970-01-01' would be right") from None

    def _checked(self, values: Floats) -> tuple[Floats, NDArray[np.bool_] | None]:
        column = self.column
        low, high = np.fmin.reduce(values, axis=None), np.fmax.reduce(values, axis=None)
        self._begin(values, low, high)
        below = low <= column.lowest if column.above_lowest else low < column.lowest
        if not (below or high > column.highest):
            return values, None
        bad = (values <= column.lowest) if column.above_lowest else (values < column.lowest)
        bad |= values > column.highest
        self.impossible += int(np.count_nonzero(bad))
        return np.where(bad, np.nan, values), bad

    def _begin(self, values: Floats, low: float, high: float) -> None:
        """Whether the first block is in the unit that it should be in."""
        if self._begun or not np.isfinite(low):
            return
        self._begun = True
        column = self.column
        if low > column.highest or high < column.lowest:
            raise InputError(
                f"{self.where}: {column.name} is {low:g} to {high:g} where it begins; {column.range_text} would be "
                f"right: is it in another unit?"
            )
        fan = column.name == "across_track_angle" and low < high and np.count_nonzero(np.isfinite(values)) >= _ENOUGH
        if fan and self._units is None and max(abs(low), abs(high)) <= _HALF_TURN:
            raise InputError(
                f"{self.where}: has no unit, and {low:.3g} to {high:.3g} look like radians; say which: units "
                "'degrees' or 'radians'"
            )


def unpacked(raw: NDArray[Any], attributes: Mapping[str, Any]) -> Floats:
    """Numbers as float64, in a new array, by the CF attributes of packing; NaN for whatever is declared missing.

    References
    ----------
    CF Conventions 1.11, sections 2.5.1 and 8.1.

    Examples
    --------
    >>> unpacked(np.array([100, -1], np.int16), {"scale_factor": 0.5, "_FillValue": np.int16(-1)})
    array([50., nan])
    """
    if str(attributes.get("_Unsigned", "")).lower() == "true" and raw.dtype.kind == "i":
        raw = raw.view(f"u{raw.dtype.itemsize}")
    values = np.array(raw, dtype=np.float64)
    gone = _declared_missing(raw, attributes)
    if raw.dtype.kind == "f":
        with np.errstate(invalid="ignore"):
            if np.fmax.reduce(np.abs(values), axis=None, initial=0.0) > BEYOND:
                gone = (np.abs(values) > BEYOND) | (False if gone is None else gone)
    if gone is not None:
        values[gone] = np.nan
    if "scale_factor" in attributes:
        values *= float(np.asarray(attributes["scale_factor"]))
    if "add_offset" in attributes:
        values += float(np.asarray(attributes["add_offset"]))
    return values


def _declared_missing(raw: NDArray[Any], attributes: Mapping[str, Any]) -> NDArray[np.bool_] | None:
    gone: NDArray[np.bool_] | None = None
    fills = [
        fill
        for name in ("_FillValue", "missing_value")
        if name in attributes
        for fill in np.atleast_1d(np.asarray(attributes[name])).tolist()
    ]
    default = DEFAULT_FILLS.get(raw.dtype.str[1:])
    if default is not None and "_FillValue" not in attributes:
        fills.append(default)
    low, high = (attributes.get(name) for name in ("valid_min", "valid_max"))
    if "valid_range" in attributes:
        low, high = np.asarray(attributes["valid_range"]).ravel()[:2]
    numbers = [float(fill) for fill in fills if isinstance(fill, (int, float)) and not np.isnan(fill)]
    tests = [raw == np.asarray(fill).astype(raw.dtype) for fill in numbers]
    tests += [] if low is None else [raw < np.asarray(low)]
    tests += [] if high is None else [raw > np.asarray(high)]
    for test in tests:
        gone = test if gone is None else gone | test
    return gone
