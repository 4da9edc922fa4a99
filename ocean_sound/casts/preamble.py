"""What stands around the table of a CSV: lines of 'key: value', and where and when a cast was taken."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, field
from functools import lru_cache
from typing import TYPE_CHECKING

from .cast import NO_TIME, normalised_longitude
from .layout import COMMENTS
from .names import METADATA, meaning, plain_words
from .table import shortened
from .where_when import read_position, read_time

if TYPE_CHECKING:
    from collections.abc import Mapping

    import numpy as np

    from .settings import Settings

    Texts = Mapping[str, tuple[str, str]]  # our name -> (text, where it stood)

_PARTED = re.compile(r"[:=,;\t]")
_DATED = re.compile(r"\d{4}[-/.]\d|\d[-/. ]\d{4}|\b\d{8}(?:T|\b)|[A-Za-z]{3,}\.?[- ,]+\d{4}")
_TIME_OF_DAY = re.compile(r"^\d{1,2}:?\d{2}(:|\b)")
_LONGEST_DATE = 100
_LONGEST = 4096  # characters of a line that says something

# XBTs measure temperature against time; depth comes from an equation of how fast the probe falls.
_FALL_RATE = re.compile(r"fall ?rate|probe type", re.IGNORECASE)
_XBT = re.compile(r"\bxbt\b|expendable bathythermograph", re.IGNORECASE)
_DEPTH_UNCERTAINTY = {"depth uncertainty", "depth accuracy", "depth error", "uncertainty of depth"}
USUAL_XBT = "2 % of depth or 5 m, whichever is greater (common practice)"


@dataclass
class Found:
    """What is known of a file's casts apart from their levels."""

    attributes: dict[str, str] = field(default_factory=dict)
    metadata: dict[str, tuple[str, str]] = field(default_factory=dict)
    units: dict[str, str] = field(default_factory=dict)  # of columns, by plain words
    notes: list[str] = field(default_factory=list)


def _key_and_value(line: str) -> tuple[str, str]:
    bare = line.strip().lstrip(COMMENTS)
    match = _PARTED.search(bare) if len(bare) <= _LONGEST else None
    if match is None:
        return "", ""
    key, value = bare[: match.start()].strip(), bare[match.end() :].lstrip(" \t,;:=").rstrip(" \t,;")
    return (key, value.strip('"')) if value else ("", "")


@dataclass(frozen=True)
class _Key:
    """What a key of a preamble is about: a column's unit, where and when, or an attribute; empty where it is not."""

    column: str = ""
    metadata: str = ""
    attribute: str = ""


@lru_cache(maxsize=1024)
def _known(key: str) -> _Key:
    plain = plain_words(key)
    if plain.endswith((" unit", " units")):
        return _Key(column=plain.rsplit(" ", 1)[0])
    name = meaning(plain)
    if name in METADATA:
        return _Key(metadata=name)
    return _Key(attribute=re.sub(r"\W+", "_", plain).strip("_"))


def read_preamble(lines: list[str], where: str) -> Found:
    """Keys and values above the table: where and when, units of columns, and attributes for the rest."""
    found = Found()
    for number, line in enumerate(lines, 1):
        text, value = _key_and_value(line)
        key = _known(text)
        if key.column:
            found.units[key.column] = value
        elif key.metadata:
            found.metadata.setdefault(key.metadata, (value, f"{where}: line {number}"))
        elif key.attribute:
            found.attributes.setdefault(key.attribute, value)
    return found


def note_fall_rate(found: Found) -> None:
    """For what may be an XBT (depth and temperature alone): which equation its depth comes from, and how sure it is."""
    spoken = {key.replace("_", " "): value for key, value in found.attributes.items()}
    equation = next((value for key, value in spoken.items() if _FALL_RATE.search(key)), None)
    if equation is None and not any(_XBT.search(f"{key} {value}") for key, value in spoken.items()):
        return
    found.attributes.setdefault("fall_rate_equation", equation or "not stated")
    given = next((value for key, value in spoken.items() if key in _DEPTH_UNCERTAINTY), None)
    found.attributes.setdefault("depth_uncertainty", given or USUAL_XBT)
    stated = f"fall-rate equation {shortened(equation)!r}" if equation else "fall-rate equation that is not stated"
    found.notes.append(f"depth comes from an XBT's {stated}; its uncertainty: {given or USUAL_XBT}")


def is_dated(text: str) -> bool:
    """Whether a cell of a time column holds a date; if not, the column counts seconds, or the like."""
    return _DATED.search(text[:_LONGEST_DATE]) is not None


def place_and_time(texts: Texts, settings: Settings) -> tuple[float, float, np.datetime64]:
    """Latitude, longitude in [-180, 180) and time from text; what a person said goes before.

    Raises
    ------
    InputError
        A text is no position or time, or may be read in two ways.
    """
    latitude, longitude = (_coordinate(kind, texts, settings) for kind in ("latitude", "longitude"))
    return latitude, normalised_longitude(longitude), _time(texts, settings)


def _coordinate(kind: str, texts: Texts, settings: Settings) -> float:
    said = getattr(settings, kind)
    if said is not None:
        return read_position(str(said), kind, where=f"field '{kind}'")
    if kind not in texts:
        return math.nan
    text, where = texts[kind]
    return read_position(text, kind, where=where)


def _time(texts: Texts, settings: Settings) -> np.datetime64:
    """The time; a date may stand in one place and the time of day in another."""
    order = settings.date_order
    if settings.time is not None:
        return read_time(settings.time, where="field 'time'", date_order=order)
    time, date = texts.get("time"), texts.get("date")
    if time is not None and date is not None and _TIME_OF_DAY.match(time[0]) and "-" not in time[0]:
        return read_time(f"{date[0]} {time[0]}", where=date[1], date_order=order)
    stated = time or date
    return NO_TIME if stated is None else read_time(stated[0], where=stated[1], date_order=order)
