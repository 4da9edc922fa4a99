"""Times in netCDF: a number of units since a moment (CF, section 4.4)."""

from __future__ import annotations

import re
from datetime import UTC, datetime
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

from .cast import NO_TIME

if TYPE_CHECKING:
    from numpy.typing import NDArray

_SECONDS = {
    "microsecond": 1e-6,
    "us": 1e-6,
    "millisecond": 1e-3,
    "msec": 1e-3,
    "ms": 1e-3,
    "second": 1.0,
    "sec": 1.0,
    "s": 1.0,
    "minute": 60.0,
    "min": 60.0,
    "hour": 3600.0,
    "hr": 3600.0,
    "h": 3600.0,
    "day": 86400.0,
    "d": 86400.0,
    "week": 604800.0,
}
_UNITS = re.compile(r"^\s*([A-Za-z]+?)s?\s+since\s+(.+?)\s*$")
_MOMENT = re.compile(
    r"^(\d{1,4})-(\d{1,2})-(\d{1,2})(?:[T\s]+(\d{1,2})(?::(\d{1,2}))?(?::(\d{1,2}(?:\.\d*)?))?)?\s*(Z|UTC|GMT|[-+]\d.*)?$",
    re.IGNORECASE,
)
_OFFSET = re.compile(r"^([-+])(\d{1,2})(?::?(\d{2}))?$")
# Before the Gregorian reform the standard calendar is the Julian one, and the days differ.
_REFORM = np.datetime64("1582-10-15", "s")
_EARLIEST, _LATEST = -9.2e9, 9.2e9  # seconds from 1970 that nanoseconds can tell


class NoTimeError(ValueError):
    """The units of a time say nothing that could be turned into one; the text says why."""


def times_since(values: NDArray[np.float64], units: str, calendar: str) -> NDArray[np.datetime64]:
    """Times from numbers; NaT where there is no number, or one beyond all times that nanoseconds can tell.

    Parameters
    ----------
    values : ndarray
        NaN where missing.
    units : str
        As ``days since 1950-01-01 00:00:00 UTC``; an offset from UTC is obeyed.
    calendar : str
        As CF names it; empty for the standard one.

    Returns
    -------
    ndarray of datetime64[ns]
        UTC, rounded to the microsecond, or to the millisecond where days are counted: finer is not in the number.

    Raises
    ------
    NoTimeError
        No such units, or a calendar without real days.

    Examples
    --------
    >>> times_since(np.array([1.5, np.nan]), "days since 1950-01-01 00:00:00 UTC", "")
    array(['1950-01-02T12:00:00.000000000', 'NaT'], dtype='datetime64[ns]')
    """
    counted = _counted(units, calendar)
    if isinstance(counted, str):
        return _by_calendar(values, units, counted)
    step, epoch, base = counted
    seconds = values * step
    with np.errstate(invalid="ignore"):
        sane = (seconds + base > _EARLIEST) & (seconds + base < _LATEST)
    found = np.full(values.shape, NO_TIME)
    parts = 1e3 if step >= 3600.0 else 1e6
    unit = "ms" if step >= 3600.0 else "us"
    found[sane] = epoch + np.rint(seconds[sane] * parts).astype("int64").astype(f"timedelta64[{unit}]")
    return found


@lru_cache(maxsize=256)
def _counted(units: str, calendar: str) -> tuple[float, np.datetime64, float] | str:
    """Seconds in a unit, since when it counts, seconds from 1970 to then; or the calendar, where numpy has it not."""
    match = _UNITS.match(units)
    step = _SECONDS.get(match[1].lower()) if match else None
    if match is None or step is None:
        raise NoTimeError(f"the units of the time are {units[:60]!r}, not a number of days or seconds since a date")
    kind = calendar.strip().lower() or "standard"
    if kind not in {"standard", "gregorian", "proleptic_gregorian", "julian"}:
        raise NoTimeError(f"the calendar of the time, {calendar[:40]!r}, is not that of real days")
    epoch = _moment(match[2])
    if kind == "julian" or (kind in {"standard", "gregorian"} and epoch < _REFORM):
        return kind
    return step, epoch, float((epoch - np.datetime64("1970-01-01", "us")) / np.timedelta64(1, "s"))


def _moment(text: str) -> np.datetime64:
    match = _MOMENT.match(text)
    if match is None:
        raise NoTimeError(f"the time is counted since {text[:40]!r}, which is not a date")
    year, month, day, hour, minute = (int(match[index] or 0) for index in range(1, 6))
    try:
        datetime(max(year, 1), month, day, hour, minute, tzinfo=UTC)
        date = np.datetime64(f"{max(year, 1):04d}-{month:02d}-{day:02d}", "us")
    except ValueError:
        raise NoTimeError(f"the time is counted since {text[:40]!r}, which is not a date") from None
    microseconds = round(float(match[6] or 0) * 1e6) + (hour * 60 + minute) * 60_000_000
    zone = (match[7] or "Z").strip().upper()
    if zone not in {"Z", "UTC", "GMT"}:
        offset = _OFFSET.match(zone)
        if offset is None:
            raise NoTimeError(f"the time is counted since {text[:40]!r}, whose time zone can't be read")
        shift = (int(offset[2]) * 60 + int(offset[3] or 0)) * 60_000_000
        microseconds -= shift if offset[1] == "+" else -shift
    return date + np.timedelta64(microseconds, "us")


def _by_calendar(values: NDArray[np.float64], units: str, calendar: str) -> NDArray[np.datetime64]:
    """Through cftime, where the calendar is not that of numpy."""
    import cftime  # type: ignore[import-untyped]

    found = np.full(values.shape, NO_TIME)
    flat = found.reshape(-1)
    for index, value in enumerate(values.ravel().tolist()):
        if np.isfinite(value):
            try:
                moment = cftime.num2date(value, units, calendar, only_use_cftime_datetimes=True)
                moment = moment.change_calendar("proleptic_gregorian")
                flat[index] = np.datetime64(moment.isoformat(), "us")
            except (ValueError, OverflowError):
                continue
    early = flat < np.datetime64("1678-01-01")
    late = flat > np.datetime64("2262-01-01")
    flat[early | late] = NO_TIME
    return found
