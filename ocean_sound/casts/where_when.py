"""Positions and times as people write them. What can be read two ways is an error, never a guess."""

from __future__ import annotations

import math
import re
from contextlib import suppress
from datetime import UTC, datetime

import numpy as np

from ..errors import InputError
from .cast import NO_TIME, utc

_LIMITS = {"latitude": 90.0, "longitude": 360.0}
_HEMISPHERES = {"latitude": {"N": 1, "S": -1}, "longitude": {"E": 1, "W": -1}}
_WORDS = {"NORTH": "N", "SOUTH": "S", "EAST": "E", "WEST": "W"}
_BLANK = {"", "NAN", "NA", "N/A", "NONE", "NULL", "UNKNOWN", "-", "NAT"}
_DAY_MONTH = re.compile(r"^(\d{1,2})[/.-](\d{1,2})[/.-](\d{4})(?:[ T,]+(.*))?$")
_YEAR_FIRST = re.compile(r"^(\d{4})[/.-](\d{1,2})[/.-](\d{1,2})(?:[ T,]+(.*))?$")
_MONTH_NAMES = ("jan", "feb", "mar", "apr", "may", "jun", "jul", "aug", "sep", "oct", "nov", "dec")
_MONTHS = {name: number for number, name in enumerate(_MONTH_NAMES, 1)}
_NAMED_MONTH = re.compile(
    r"^(?:[a-z]{3,9}\.?,? )?(?:(\d{1,2})[ -]([a-z]{3,9})\.?|([a-z]{3,9})\.? (\d{1,2}),?)[ ,-]+(\d{4})(?:[ T,]+(.*))?$",
    re.IGNORECASE,
)
_CLOCK = re.compile(r"^(\d{1,2}):(\d{2})(:\d{2}(?:\.\d+)?)? ?(?:([AP])\.?M\.?)?(.*)$", re.IGNORECASE)
_LONGEST = 100  # characters of a position or a time
_NUMBER = re.compile(r"^\d+(?:\.\d*)?$|^\.\d+$")
# What nearly all files have, and what need not be looked at any closer.
_DECIMAL = re.compile(r"[-+]?\d+(?:\.\d*)?", re.ASCII)
_ISO = re.compile(r"(\d{4}-\d\d-\d\dT\d\d:\d\d(?::\d\d)?)Z?", re.ASCII)


def read_position(text: str, kind: str, *, where: str) -> float:
    """A latitude or longitude in decimal degrees, from decimal or sexagesimal text; NaN where blank.

    Parameters
    ----------
    text : str
        As ``-34.12``, ``34.12 S``, ``34 07.24 S``, ``34°07'14.4"S``.
    kind : str
        ``latitude`` or ``longitude``.
    where : str
        File and line, for the message.

    Returns
    -------
    float
        Degrees, positive north and east.

    Raises
    ------
    InputError
        Not a position, or not on the Earth.

    Examples
    --------
    >>> read_position("34 07.5 S", "latitude", where="demo")
    -34.125
    """
    if len(text) <= _LONGEST and _DECIMAL.fullmatch(text) and abs(value := float(text)) <= _LIMITS[kind]:
        return value
    upper = text.strip().upper()
    if upper in _BLANK:
        return math.nan
    shown = text.strip() if len(text) <= _LONGEST else f"{text.strip()[:_LONGEST]}..."
    problem = InputError(
        f"{where}: {kind} is {shown!r}; write it as decimal degrees, or as degrees, minutes and N, S, E or W"
    )
    if len(upper) > _LONGEST:
        raise problem
    for word, letter in _WORDS.items():
        upper = upper.replace(word, letter)
    letters = re.findall(r"[A-Z]", upper)
    if "E" in letters and re.fullmatch(r"[-+]?[\d.]+E[-+]?\d+", upper):
        letters = []  # the E of a power of ten
        parts = [upper]
    else:
        parts = re.sub(r"[A-Z°º'′’\"″”:,_]", " ", upper).split()
    signs = _HEMISPHERES[kind]
    if len(letters) > 1 or any(letter not in signs for letter in letters) or not 1 <= len(parts) <= 3:
        raise problem
    negative = parts[0].startswith("-")
    if letters and (negative or parts[0].startswith("+")):
        raise problem  # a sign and a letter may contradict each other
    try:
        numbers = [abs(float(parts[0])), *(float(part) for part in parts[1:] if _NUMBER.match(part))]
    except ValueError:
        raise problem from None
    whole = all(number.is_integer() for number in numbers[:-1])
    if len(numbers) != len(parts) or not whole or any(number >= 60.0 for number in numbers[1:]):
        raise problem
    degrees = sum(number / 60.0**power for power, number in enumerate(numbers))
    if not degrees <= _LIMITS[kind]:
        raise InputError(f"{where}: {kind} is {text.strip()!r}; it must lie within {_LIMITS[kind]:g} degrees of zero")
    return -degrees if negative or (letters and signs[letters[0]] < 0) else degrees


def _clock(text: str | None) -> str:
    """A time of day as ISO 8601 has it, behind its T; nothing where nothing is said."""
    match = _CLOCK.match(text or "")
    if match is None:
        return f"T{text}" if text else ""
    hour = int(match[1])
    if match[4]:
        if not 1 <= hour <= 12:
            return f"T{text}"  # refused as no time
        hour = hour % 12 + 12 * (match[4].upper() == "P")
    return f"T{hour:02d}:{match[2]}{match[3] or ''}{match[5]}"


def _day_and_month(match: re.Match[str], plain: str, date_order: str | None, where: str) -> tuple[int, int]:
    """Day and month of a date that has both as numbers."""
    first, second = int(match[1]), int(match[2])
    if date_order is not None:
        return (first, second) if date_order == "day-first" else (second, first)
    if first <= 12 and second <= 12 and first != second:
        raise InputError(
            f"{where}: the date {plain!r} may be {match[3]}-{second:02d}-{first:02d} or "
            f"{match[3]}-{first:02d}-{second:02d}; write it year first, or say date_order = 'day-first' or "
            "'month-first' in a TOML file beside this one"
        )
    return (first, second) if second <= 12 else (second, first)


def read_time(text: str, *, where: str, date_order: str | None = None) -> np.datetime64:
    """A time in UTC from text; NaT where blank.

    Parameters
    ----------
    text : str
        ISO 8601 (``2026-01-31T12:00Z``; an offset is turned into UTC), ``2026/01/31 12:00``, ``20260131``, or day,
        month and year in either order where only one order is possible (``31/01/2026``), or with the month's English
        name (``31 Jan 2026``).
    where : str
        File and line, for the message.
    date_order : str, optional
        ``day-first`` or ``month-first``, where a person has said so.

    Returns
    -------
    numpy.datetime64
        To the nanosecond type, UTC.

    Raises
    ------
    InputError
        Not a time, or one that may be read in two ways.

    Examples
    --------
    >>> read_time("13/08/2015 06:38", where="demo")
    np.datetime64('2015-08-13T06:38:00.000000000')
    """
    if match := _ISO.fullmatch(text):
        with suppress(ValueError):  # said below
            return utc(match[1])
    plain = " ".join(text.split())
    if plain.upper() in _BLANK:
        return NO_TIME
    if len(plain) > _LONGEST:
        raise InputError(f"{where}: {plain[:_LONGEST]!r}... is not a time; write it as 2026-01-31T12:00:00Z")
    iso = re.sub(r"\s*(?:UTC|GMT)$", "Z", plain, flags=re.IGNORECASE)
    if match := _YEAR_FIRST.match(iso):
        iso = f"{match[1]}-{int(match[2]):02d}-{int(match[3]):02d}{_clock(match[4])}"
    elif match := _DAY_MONTH.match(iso):
        day, month = _day_and_month(match, plain, date_order, where)
        iso = f"{match[3]}-{month:02d}-{day:02d}{_clock(match[4])}"
    elif (match := _NAMED_MONTH.match(iso)) and (month := _MONTHS.get((match[2] or match[3])[:3].lower(), 0)):
        iso = f"{match[5]}-{month:02d}-{int(match[1] or match[4]):02d}{_clock(match[6])}"
    try:
        moment = datetime.fromisoformat(re.sub(r"\s+(?=Z$|[+-]\d)", "", iso))
    except ValueError:
        raise InputError(f"{where}: {plain!r} is not a time; write it as 2026-01-31T12:00:00Z") from None
    if moment.tzinfo is not None:
        moment = moment.astimezone(UTC).replace(tzinfo=None)
    fraction = re.search(r"\.(\d{7,9})", iso)  # datetime holds microseconds only
    try:
        time = utc(moment)
    except ValueError:
        raise InputError(f"{where}: {plain!r} is not a time of our days") from None
    return time + np.timedelta64(int(fraction[1][6:].ljust(3, "0")), "ns") if fraction else time
