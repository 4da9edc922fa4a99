"""Words that stand at the head of columns and in preambles, and what we take each to mean; here and nowhere else."""

from __future__ import annotations

import re
from dataclasses import dataclass

from .units import is_unit

# Compared after `plain_words`: lower case, words parted by single blanks. CF standard names and the parameter codes
# of the open community formats are among them.
_WORDS = {
    "depth": "depth|depths|dep|depth below surface|depth below sea surface|depth below water surface",
    "height": "height|elevation",
    "pressure": "pressure|press|pres|prs|water pressure",
    "sea_pressure": "sea pressure|gauge pressure|pressure sea|sea water pressure due to sea water|pres rel",
    "absolute_pressure": "absolute pressure|abs pressure|pressure absolute|pressure abs",
    "temperature": (
        "temperature|temp|water temperature|water temp|sea temperature|sea water temperature|seawater temperature"
        "|in situ temperature|temperature in situ|t90|temperature its 90"
    ),
    "salinity": "salinity|sal|practical salinity|sea water practical salinity|sea water salinity|psal",
    "conductivity": "conductivity|cond|cndc|electrical conductivity|sea water electrical conductivity",
    "sound_speed": (
        "sound speed|soundspeed|speed of sound|sound velocity|sound vel|velocity of sound|sv"
        "|speed of sound in sea water|speed of sound in water"
    ),
    "latitude": "latitude|lat|start latitude|station latitude",
    "longitude": "longitude|lon|long|start longitude|station longitude",
    "time": "time|date time|datetime|timestamp|start time|start date time|time utc|date time utc|utc|start date",
    "date": "date|date utc",
    "id": "cast id|cast|profile id|id|cast name",
}
_MEANING = {word: name for name, words in _WORDS.items() for word in words.split("|")}
METADATA = ("latitude", "longitude", "time", "date", "id")
VALUES = tuple(name for name in _WORDS if name not in METADATA)
MAPPABLE = tuple(_WORDS)
"""What a person may say a column is."""

_BRACKETED = re.compile(r"^(.*?)\s*[\[(]\s*([^\[\]()]*(?:\([^()]*\))?[^\[\]()]*?)\s*[\])]\s*$")
# What stands in brackets behind a name and says that the column holds something about the value, not the value.
_ABOUT = {"qc", "flag", "qc flag", "quality", "quality flag", "error", "uncertainty", "std", "sd"}
_SEPARATOR = re.compile(r"[\s_/,:-]+")


@dataclass(frozen=True)
class Head:
    """The head of a column: its text, what it means (None if nothing we know), and its unit (None if it has none)."""

    text: str
    name: str | None
    unit: str | None


def plain_words(text: str) -> str:
    """Lower case, words parted by single blanks: underscores, hyphens, slashes and points fall away.

    >>> plain_words("Sound_Speed"), plain_words("Date/Time")
    ('sound speed', 'date time')
    """
    return " ".join(re.sub(r"[\s_\-/.:]+", " ", text).lower().split())


def meaning(text: str) -> str | None:
    """What a word at the head of a column or in a preamble stands for.

    >>> meaning("Sea Water Temperature"), meaning("oxygen") is None
    ('temperature', True)
    """
    return _MEANING.get(plain_words(text))


def split_unit(text: str) -> tuple[str, str | None]:
    """A head parted into its name and the unit in brackets behind it, if there is one.

    >>> split_unit("Depth [m]"), split_unit("Depth")
    (('Depth', 'm'), ('Depth', None))
    """
    match = _BRACKETED.match(text)
    return (match[1], match[2]) if match and match[1] else (text, None)


def read_head(cell: str) -> Head:
    """What the head of a column says.

    A unit may stand in brackets, or behind the name if it is one we know for that variable.

    >>> read_head("temp_degC").name, read_head("temp_degC").unit
    ('temperature', 'degC')
    >>> read_head("temperature_flag").name is None
    True
    """
    text = cell.strip().strip("\"'").strip()
    base, unit = split_unit(text)
    if unit is not None:
        name = meaning(base)
        # a bracket may hold a word of the name instead: 'Pressure (absolute)'
        whole = meaning(f"{base} {unit}")
        if whole is not None:
            return Head(text, whole, None)
        return Head(text, None if plain_words(unit) in _ABOUT else name, unit or None)
    name = meaning(text)
    if name is not None:
        return Head(text, name, None)
    for match in _SEPARATOR.finditer(text):
        before, after = text[: match.start()], text[match.end() :]
        name = meaning(before)
        if name is not None and is_unit(name, after):
            return Head(text, name, after)
    return Head(text, None, None)
