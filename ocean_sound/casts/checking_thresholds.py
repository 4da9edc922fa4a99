"""The numbers by which casts are judged: sets that come with the package, or a person's own file."""

from __future__ import annotations

import datetime as dt
import difflib
import math
import tomllib
from dataclasses import dataclass
from functools import lru_cache
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ..errors import InputError
from .cast import MEASURED, VARIABLES

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping
    from os import PathLike

_PACKAGED = "thresholds.toml"
_BASE = "based_on"


@dataclass(frozen=True)
class Thresholds:
    """What each test of a cast asks.

    Parameters
    ----------
    name : str
        The set, or the file that it was read from.
    tests : mapping of str to mapping
        By the name of a test its numbers, as they stand in the file.
    """

    name: str
    tests: Mapping[str, Mapping[str, Any]]

    def __getitem__(self, test: str) -> Mapping[str, Any]:
        return self.tests[test]

    def of(self, test: str, variable: str) -> Any:
        """What a test asks of a variable; None if it does not judge it."""
        return self.tests[test].get(variable) or None


def _is_number(value: Any) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)


def _number(value: Any) -> bool:
    return _is_number(value) and value >= 0


def _whole(value: Any) -> bool:
    return isinstance(value, int) and not isinstance(value, bool) and value >= 1


def _ascending(value: Any, count: int) -> bool:
    return isinstance(value, list) and len(value) == count and all(map(_is_number, value)) and sorted(value) == value


def _day(value: Any) -> bool:
    return isinstance(value, dt.date) and not isinstance(value, dt.datetime)


# What a field may hold: the words for the message, and whether a value will do.
_NUMBER = ("a number of 0 or more", _number)
_WHOLE = ("a whole number of 1 or more", _whole)
_DAY = ("a date such as 1900-01-31", _day)
_RANGE = (
    "four ascending numbers [fail below, suspect below, suspect above, fail above], or false",
    lambda value: value is False or _ascending(value, 4),
)
_LIMITS = (
    "two ascending numbers of 0 or more [suspect above, fail above], or false",
    lambda value: value is False or (_ascending(value, 2) and value[0] >= 0),
)
_LIMIT = ("a number of 0 or more, or false", lambda value: value is False or _number(value))
_COUNTS = (
    "two ascending whole numbers of 3 or more [suspect, fail], or false",
    lambda value: value is False or (_ascending(value, 2) and all(map(_whole, value)) and value[0] >= 3),
)
_Kind = tuple[str, "Callable[[Any], bool]"]
_FIELDS: dict[str, dict[str, _Kind]] = {
    "date": {"earliest": _DAY, "ahead": _NUMBER},
    "truncated": {"levels": _WHOLE, "span": _NUMBER},
    "pressure_increasing": {"spike": _NUMBER, "soak_depth": _NUMBER, "soak_return": _NUMBER},
    "gross_range": {**dict.fromkeys(VARIABLES, _RANGE), "speed_by_depth": _NUMBER},
    "climatology": {"deviations": _NUMBER},
    "spike": {"deep": _NUMBER, "reach": _NUMBER},
    "spike.above": dict.fromkeys(MEASURED, _LIMITS),
    "spike.below": dict.fromkeys(MEASURED, _LIMITS),
    "rate_of_change": {"deep": _NUMBER, "reach": _NUMBER},
    "rate_of_change.above": dict.fromkeys(MEASURED, _LIMIT),
    "rate_of_change.below": dict.fromkeys(MEASURED, _LIMIT),
    "flat_line": {"span": _NUMBER, **dict.fromkeys(MEASURED, _COUNTS)},
    "stuck": {"levels": _WHOLE, "span": _NUMBER},
    "density_inversion": {"suspect": _NUMBER, "fail": _NUMBER},
}


@lru_cache(maxsize=1)
def _packaged() -> dict[str, Thresholds]:
    with (files(__package__) / _PACKAGED).open("rb") as file:
        sets = tomllib.load(file)
    return {name: Thresholds(name, _checked(tables, f"{_PACKAGED}: {name}")) for name, tables in sets.items()}


def threshold_sets() -> tuple[str, ...]:
    """Names of the sets of thresholds that come with the package.

    Returns
    -------
    tuple of str

    Examples
    --------
    >>> threshold_sets()
    ('ocean', 'coast', 'estuary', 'lake')
    """
    return tuple(_packaged())


def read_thresholds(which: str | PathLike[str] = "ocean") -> Thresholds:
    """The thresholds of a set that comes with the package, or of a person's own file.

    Parameters
    ----------
    which : str or path-like
        A name from `threshold_sets`, or a TOML file laid out like the packaged one but for one set: a table for each
        test, and at the top ``based_on`` with the name of the set from which all that it does not name is taken
        ('ocean' if that is missing).

    Returns
    -------
    Thresholds

    Raises
    ------
    InputError
        No set and no file is called so, the file can't be read or is not TOML, or a field in it is unknown or
        impossible; one line for each such field.

    Examples
    --------
    >>> read_thresholds("ocean").of("gross_range", "salinity")
    [2.0, 2.0, 41.0, 41.0]
    """
    packaged = _packaged()
    if str(which) in packaged:
        return packaged[str(which)]
    path = Path(which)
    try:
        with path.open("rb") as file:
            tables = tomllib.load(file)
    except FileNotFoundError:
        raise InputError(
            f"thresholds {str(which)!r}: no set and no file is called so; sets are {', '.join(packaged)}"
        ) from None
    except OSError as error:
        raise InputError(f"{path}: can't be read: {error.strerror or error}") from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise InputError(f"{path}: is not TOML: {error}") from error
    base = tables.pop(_BASE, "ocean")
    if base not in packaged:
        raise InputError(f"{path}: field '{_BASE}' is {base!r}: give one of {', '.join(packaged)}")
    own = _checked(tables, str(path))
    return Thresholds(str(path), {test: {**packaged[base][test], **own.get(test, {})} for test in _FIELDS})


def _checked(tables: Mapping[str, Any], where: str) -> dict[str, dict[str, Any]]:
    """The fields of each test; the tables within a test as tests of their own, such as 'spike.above'."""
    found: dict[str, dict[str, Any]] = {}
    faults: list[str] = []
    for test, fields in tables.items():
        if test not in _FIELDS:
            faults.append(f"{where}: field '{test}' is unknown: {_near(test, list(_FIELDS))}")
        elif not isinstance(fields, dict):
            faults.append(f"{where}: field '{test}' is {fields!r}: give a table [{test}]")
        else:
            inner = {f"{test}.{key}": value for key, value in fields.items() if f"{test}.{key}" in _FIELDS}
            outer = {key: value for key, value in fields.items() if f"{test}.{key}" not in _FIELDS}
            for name, group in ((test, outer), *inner.items()):
                found[name] = group
                faults += _faults(name, group, where)
    if faults:
        raise InputError("\n".join(faults))
    return found


def _faults(test: str, fields: Any, where: str) -> list[str]:
    if not isinstance(fields, dict):
        return [f"{where}: field '{test}' is {fields!r}: give a table [{test}]"]
    known, lines = _FIELDS[test], []
    for key, value in fields.items():
        if key not in known:
            lines.append(f"{where}: field '{test}.{key}' is unknown: {_near(key, list(known))}")
        elif not known[key][1](value):
            lines.append(f"{where}: field '{test}.{key}' is {value!r}: give {known[key][0]}")
    return lines


def _near(name: str, known: list[str]) -> str:
    near = difflib.get_close_matches(name, known, n=1)
    return f"did you mean '{near[0]}'?" if near else f"known here: {', '.join(known)}"
