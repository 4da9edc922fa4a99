"""Times of a grid: a year that repeats itself, or real dates; and how much of which to take for a time."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from .axes import Axis

    Floats = NDArray[np.float64]
    Indices = NDArray[np.int64]

_UNITS = re.compile(r"^\s*(\w+?)s?\s+since\s+(\d+)-(\d+)-(\d+)", re.IGNORECASE)
_DAYS = {"day": 1.0, "d": 1.0, "hour": 1.0 / 24.0, "hr": 1.0 / 24.0, "h": 1.0 / 24.0, "minute": 1.0 / 1440.0,
         "min": 1.0 / 1440.0, "second": 1.0 / 86400.0, "sec": 1.0 / 86400.0, "s": 1.0 / 86400.0}  # fmt: skip
_YEAR = 365.2425  # days, Gregorian mean
_MONTHS = 12.0
# No instrument measured in the first years of the calendar: such a date stands for a year that repeats itself.
_NO_REAL_YEAR = 1


def repeats(axis: Axis) -> bool:
    """Whether the times are those of a year that repeats itself, as the axis says or its units imply."""
    unit, year, *_ = _reference(axis)
    return bool({"modulo", "climatology"} & set(axis.attributes)) or year <= _NO_REAL_YEAR or unit == "month"


def neighbours(axis: Axis, times: NDArray[np.datetime64], where: str) -> tuple[Indices, Floats]:
    """The two times of the grid around each time, and their weights, each of shape (times, 2).

    Raises
    ------
    InputError
        A time is unknown, or lies outside the dates of a grid that does not repeat itself.
    """
    if np.isnat(times).any():
        raise InputError(
            f"{where}: changes with the time of year, and no time is given: give one, as time='2026-01-31'"
        )
    if repeats(axis):
        nodes, wanted = _phases(axis), _phase_of(times)
        order = np.argsort(nodes, kind="stable")
        ring = np.append(nodes[order], nodes[order[0]] + 1.0)
        position = ring[0] + (wanted - ring[0]) % 1.0
        low = np.clip(np.searchsorted(ring, position, side="right") - 1, 0, nodes.size - 1)
        index = order[np.stack([low, (low + 1) % nodes.size], axis=1)]
    else:
        dates = _dates(axis, where)
        ring, position = dates.astype(np.float64), times.astype("datetime64[s]").astype(np.float64)
        if (position < ring[0]).any() or (position > ring[-1]).any():
            raise InputError(f"{where}: holds dates from {dates[0]} to {dates[-1]}; a time between them would be right")
        low = np.clip(np.searchsorted(ring, position, side="right") - 1, 0, ring.size - 2)
        index = np.stack([low, low + 1], axis=1)
    part = (position - ring[low]) / (ring[low + 1] - ring[low])
    return index, np.stack([1.0 - part, part], axis=1)


def _reference(axis: Axis) -> tuple[str, int, int, int]:
    match = _UNITS.match(axis.attributes["units"])
    if match is None:
        return "", 9999, 1, 1
    return match[1].lower(), int(match[2]), int(match[3]), int(match[4])


def _phases(axis: Axis) -> Floats:
    """Where in the year each time lies, 0 to 1."""
    unit, _, month, day = _reference(axis)
    start = (month - 1.0 + (day - 1.0) * _MONTHS / _YEAR) / _MONTHS
    if unit == "month":
        return (start + axis.values / _MONTHS) % 1.0
    if unit not in _DAYS:
        # twelve numbers with no unit that says more are the months, each at its middle
        return ((axis.values - 0.5) / _MONTHS) % 1.0
    return (start + axis.values * _DAYS[unit] / _YEAR) % 1.0


def _phase_of(times: NDArray[np.datetime64]) -> Floats:
    year = times.astype("datetime64[Y]")
    start, end = year.astype("datetime64[s]"), (year + 1).astype("datetime64[s]")
    phase: Floats = (times.astype("datetime64[s]") - start) / (end - start)
    return phase


def _dates(axis: Axis, where: str) -> NDArray[np.datetime64]:
    import netCDF4

    try:
        dates: Any = netCDF4.num2date(
            axis.values, axis.attributes["units"], axis.attributes["calendar"] or "standard",
            only_use_cftime_datetimes=True,
        )  # fmt: skip
        return np.array([date.isoformat() for date in dates], dtype="datetime64[s]")
    except (ValueError, TypeError) as error:
        raise InputError(
            f"{where}: the times of axis {axis.name} can't be told (units {axis.attributes['units']!r}): {error}"
        ) from error
