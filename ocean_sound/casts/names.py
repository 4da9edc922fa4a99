"""Words that stand at the head of columns and in preambles, and what we take each to mean; here and nowhere else."""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import lru_cache

from .cast import VARIABLES
from .units import is_unit, quantity_of

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
    "absolute_salinity": "absolute salinity|sea water absolute salinity",
    "conductivity": "conductivity|cond|cndc|electrical conductivity|sea water electrical conductivity",
    "specific_conductance": (
        "specific conductance|specific conductivity|spec cond|sp cond|spcond|ec25|conductance at 25 °c"
        "|conductivity at 25 °c|conductivity at 25 degc|conductivity at 25c|conductivity 25 °c|conductivity 25c"
    ),
    "sound_speed": (
        "sound speed|soundspeed|speed of sound|sound velocity|sound vel|velocity of sound|sv"
        "|speed of sound in sea water|speed of sound in water"
    ),
    "latitude": "latitude|lat|start latitude|station latitude",
    "longitude": "longitude|lon|long|start longitude|station longitude",
    "time": "time|date time|datetime|timestamp|start time|start date time|time utc|date time utc|utc|start date",
    "date": "date|date utc",
    "id": "cast id|cast|profile id|id|cast name|cast number|profile number",
}
_MEANING = {word: name for name, words in _WORDS.items() for word in words.split("|")}
METADATA = ("latitude", "longitude", "time", "date", "id")
VALUES = tuple(name for name in _WORDS if name not in METADATA)
_VALUE_WORDS = {word for word, name in _MEANING.items() if name in VALUES}
# Without a word that holds another: whatever names a value holds one of these.
_SHORTEST = re.compile(
    "|".join(
        sorted(re.escape(word) for word in _VALUE_WORDS if not any(other in word for other in _VALUE_WORDS - {word}))
    )
)
ALL_FLAGS = "flag"
"""The name of flags that hold for a whole level."""
FLAGGED = {f"{variable}_flag": (variable,) for variable in VARIABLES} | {ALL_FLAGS: VARIABLES}
"""By the name of a column of flags, the variables that it is about."""
MAPPABLE = (*_WORDS, *FLAGGED)
"""What a person may say a column is."""

_BRACKETED = re.compile(r"^(.*?)\s*[\[(]\s*([^\[\]()]*(?:\([^()]*\))?[^\[\]()]*?)\s*[\])]\s*$")
# What stands in brackets behind a name and says that the column holds something about the value, not the value.
_ABOUT = {"qc", "flag", "qc flag", "quality", "quality flag", "error", "uncertainty", "std", "sd"}
_FLAG_WORDS = r"(?:qc flag|quality flag|quality code|quality control|qcflag|flag|qc|qf|quality)"
_ABOUT_QUALITY = re.compile(rf"^(?:{_FLAG_WORDS}|(.*?) {_FLAG_WORDS}|{_FLAG_WORDS} (?:of )?(.*))$")
_LONGEST = 200  # characters of a head that means anything
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


@lru_cache(maxsize=4096)
def meaning(text: str) -> str | None:
    """What a word at the head of a column or in a preamble stands for.

    >>> meaning("Sea Water Temperature"), meaning("oxygen") is None
    ('temperature', True)
    """
    return _MEANING.get(plain_words(text))


def may_name_values(line: str) -> bool:
    """Whether a line may hold the head of a column of values; a quick look that never says no where it should not.

    >>> may_name_values("Depth [m];Temp"), may_name_values("Latitude: 34 S")
    (True, False)
    """
    return _SHORTEST.search(plain_words(line)) is not None


def split_unit(text: str) -> tuple[str, str | None]:
    """A head parted into its name and the unit in brackets behind it, if there is one.

    >>> split_unit("Depth [m]"), split_unit("Depth")
    (('Depth', 'm'), ('Depth', None))
    """
    match = _BRACKETED.match(text) if len(text) <= _LONGEST else None
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
    if len(text) > _LONGEST:
        return Head(text, None, None)
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


def flags_of(text: str) -> str | None:
    """The name of the flags that a column seems to hold by its head; None if it does not look like flags.

    >>> flags_of("temp QC"), flags_of("QC_Salinity [1]"), flags_of("quality flag"), flags_of("oxygen qc")
    ('temperature_flag', 'salinity_flag', 'flag', None)
    """
    if len(text) > _LONGEST:
        return None
    match = _ABOUT_QUALITY.match(plain_words(re.sub(r"[\[\](){}]", " ", re.sub(r"[\[(]\s*1?\s*[\])]", "", text))))
    if match is None:
        return None
    about = match[1] or match[2]
    if not about:
        return ALL_FLAGS
    name = meaning(about)
    return f"{quantity_of(name)}_flag" if name in VALUES else None
