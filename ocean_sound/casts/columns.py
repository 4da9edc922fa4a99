"""Which column of a CSV is what: decided once for a line of heads, then used for every file that has it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..errors import CastFileError, InputError
from .cast import MEASURED, NOT_EVALUATED, SUSPECT, VARIABLES, VERTICAL
from .flag_codes import ARGO, QARTOD, WOCE_CTD, WOCE_SAMPLE
from .layout import Layout, meant, missing_column
from .names import FLAGGED, METADATA, flags_of, plain_words, split_unit
from .settings import SIDECAR
from .table import listed, shortened
from .units import quantity_of, to_ours

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from .settings import Settings

    Choice = tuple[int, str | None, bool]  # column, unit, whether a person said so

_OWN, _IGNORED = "own", "ignored"
_SEADATANET = {6: SUSPECT, 7: SUSPECT, 8: NOT_EVALUATED}
_LETTERS = {"A": SUSPECT, "B": SUSPECT, "Q": SUSPECT}


def _by_text(codes: Mapping[int, int]) -> dict[str, int]:
    return {str(code): flag for code, flag in codes.items()}


FLAG_CODES: Mapping[str, Mapping[str, int]] = {
    "qartod": _by_text(QARTOD),
    "argo": _by_text(ARGO),
    "seadatanet": _by_text({**ARGO, **_SEADATANET}) | _LETTERS,
    "whp-ctd": _by_text(WOCE_CTD),
    "whp-bottle": _by_text(WOCE_SAMPLE),
}
"""By name, codes that flags may be told to have, each flag with what it is as a flag of QARTOD.

Sources in `flag_codes`; SeaDataNet's vocabulary L20 (from memory) adds to Argo's: 6 below detection, 7 in excess, 8
interpolated, A uncertain, B nominal, Q below quantification."""


@dataclass(frozen=True)
class Column:
    """A column of values: its recognised name, its place, its unit, and whether a person settled what it is."""

    name: str
    index: int
    unit: str | None
    settled: bool


@dataclass(frozen=True)
class FlagColumn:
    """A column of flags: the variables that it is about, its place, and what its flags mean."""

    variables: tuple[str, ...]
    index: int
    codes: Mapping[str, int]


@dataclass(frozen=True)
class Recipe:
    """Which column is what, for one line of heads.

    Parameters
    ----------
    heads : sequence of str
        As they stand in the file.
    columns : tuple of Column
        In the order of `VARIABLES`.
    flags : tuple of FlagColumn
    labels : mapping of str to int
        By the names of `METADATA`, the column.
    notes : tuple of str
        What every cast read so has to say.
    """

    heads: Sequence[str]
    columns: tuple[Column, ...]
    flags: tuple[FlagColumn, ...]
    labels: Mapping[str, int]
    notes: tuple[str, ...]

    def place(self, index: int, where: str) -> str:
        """A column as messages name it."""
        return f"{where}: column {shortened(self.heads[index])!r}"


def make_recipe(layout: Layout, units: Mapping[str, str], settings: Settings, where: str) -> Recipe:
    """Decide which column is what.

    Parameters
    ----------
    layout : Layout
        The heads.
    units : mapping of str to str
        By the plain words of a head, the unit that the preamble gives.
    settings : Settings
        What a person said.
    where : str
        The file, for messages.

    Returns
    -------
    Recipe

    Raises
    ------
    InputError
        A column that a person named is not there.
    CastFileError
        A column that a cast needs is missing, or what the heads say can be read two ways.
    """
    texts = layout.texts
    told = {name: wanted for name, wanted in settings.columns.items() if name not in FLAGGED}
    chosen = _choose(layout, units, told, where)
    _require(chosen, texts, where)
    values = [Column(name, *choice) for name, choice in chosen.items() if name not in METADATA]
    values.sort(key=lambda column: VARIABLES.index(quantity_of(column.name)))
    flags, ignored = _flag_columns(texts, {quantity_of(column.name) for column in values}, settings, where)
    try:
        for column in values:  # a unit that is not known is told before any number is read
            to_ours(
                pressure_name(column.name, settings),
                np.empty(0),
                column.unit,
                where=f"{where}: column {shortened(texts[column.index])!r}",
                settled=column.settled,
            )
    except InputError as error:
        raise CastFileError(str(error)) from None
    used = {index for index, _, _ in chosen.values()} | {flag.index for flag in flags} | ignored
    rest = [text for index, text in enumerate(texts) if index not in used]
    notes = [f"columns not read: {listed(rest)}"] if rest else []
    if ignored:
        notes.append(f"flags ignored as told: {listed([texts[index] for index in sorted(ignored)])}")
    labels = {name: index for name, (index, _, _) in chosen.items() if name in METADATA}
    return Recipe(tuple(texts), tuple(values), tuple(flags), labels, tuple(notes))


def pressure_name(name: str, settings: Settings) -> str:
    """The name of a pressure column, with what a person said of its kind; other names as they are."""
    if name != "pressure" or settings.pressure_kind is None:
        return name
    return "absolute_pressure" if settings.pressure_kind == "absolute" else "sea_pressure"


def _column_of(name: str, wanted: str, texts: Sequence[str], where: str) -> int:
    found = meant(wanted, texts)
    if len(found) == 1:
        return found[0]
    raise InputError(
        f"{where}: {'several columns are' if found else 'no column is'} named {wanted!r} "
        f"(--map {name}={wanted}); the columns are: {listed(texts)}"
    )


def _choose(layout: Layout, units: Mapping[str, str], told: Mapping[str, str], where: str) -> dict[str, Choice]:
    chosen: dict[str, Choice] = {}
    texts = layout.texts

    def unit_below(index: int) -> str | None:
        return layout.units[index] if layout.units else None

    for name, wanted in told.items():
        index = _column_of(name, wanted, texts, where)
        unit = None if wanted == texts[index] else split_unit(wanted)[1]
        chosen[name] = index, unit or layout.heads[index].unit or split_unit(texts[index])[1] or unit_below(index), True
    _refuse_twice(chosen, where)
    settled = {quantity_of(name) for name in told}
    taken = {index for index, _, _ in chosen.values()}
    for index, head in enumerate(layout.heads):
        if head.name is None or index in taken or quantity_of(head.name) in settled:
            continue
        rival = next((name for name in chosen if quantity_of(name) == quantity_of(head.name)), None)
        if rival is not None:
            one, other = shortened(texts[chosen[rival][0]]), shortened(head.text)
            raise CastFileError(
                f"{where}: columns {one!r} and {other!r} both look like {rival}; choose with --map {rival}=COLUMN"
            )
        chosen[head.name] = index, head.unit or unit_below(index) or units.get(plain_words(head.text)), False
    return chosen


def _refuse_twice(chosen: Mapping[str, Choice], where: str) -> None:
    quantities: dict[str, str] = {}
    for name in chosen:
        other = quantities.setdefault(quantity_of(name), name)
        if other != name:
            raise InputError(f"{where}: --map names both {other} and {name}, which are one variable; give one of them")


def _require(chosen: Mapping[str, object], heads: Sequence[str], where: str) -> None:
    quantities = {quantity_of(name) for name in chosen}
    if not quantities & set(VERTICAL):
        raise missing_column("depth or pressure", "depth", heads, where)
    if not quantities & set(MEASURED):
        raise missing_column("temperature, salinity, conductivity or sound speed", "temperature", heads, where)
    if "specific_conductance" in chosen and "temperature" not in chosen:
        raise CastFileError(
            f"{where}: specific conductance says what the conductivity in situ was only beside a temperature, of which "
            "there is no column; name it with --map temperature=COLUMN"
        )


# --- flags ---------------------------------------------------------------------------------------------------------


def _flag_columns(
    texts: Sequence[str], quantities: set[str], settings: Settings, where: str
) -> tuple[list[FlagColumn], set[int]]:
    """The columns of flags with their codes, and the columns that a person said to ignore."""
    columns: list[FlagColumn] = []
    ignored: set[int] = set()
    named = {name: wanted for name, wanted in settings.columns.items() if name in FLAGGED}
    for name, wanted in named.items():
        index = _column_of(name, wanted, texts, where)
        code = None if wanted == texts[index] else split_unit(wanted)[1]
        variables = tuple(variable for variable in FLAGGED[name] if variable in quantities)
        if code == _IGNORED:
            ignored.add(index)
        elif not variables:
            raise InputError(f"{where}: --map {name}={wanted}: there is no column of {name.removesuffix('_flag')}")
        else:
            columns.append(FlagColumn(variables, index, _codes(code, name, settings, where)))
    taken = {column.index for column in columns} | ignored
    for index, text in enumerate(texts):
        name = flags_of(text) or ""
        about = FLAGGED.get(name, ())
        if index in taken or name in named or not quantities.intersection(about):
            continue
        codes: Mapping[str, int]
        if settings.flag_codes:
            codes = _own(settings)
        elif text in FLAGGED and len(about) == 1:
            codes = FLAG_CODES["qartod"]  # named as we name them
        else:
            raise CastFileError(
                f"{where}: column {shortened(text)!r} looks like flags, of a code that is not told; say which with "
                f'--map "{name}={shortened(text)} [CODE]", where CODE is {", ".join(FLAG_CODES)} or {_IGNORED}, '
                f"or give flag_codes in a TOML file beside it ({where.rpartition('/')[2]}{SIDECAR})"
            )
        columns.append(FlagColumn(tuple(variable for variable in about if variable in quantities), index, codes))
    return columns, ignored


def _own(settings: Settings) -> dict[str, int]:
    return {plain_flag(text): flag for text, flag in settings.flag_codes.items()}


def _codes(code: str | None, name: str, settings: Settings, where: str) -> Mapping[str, int]:
    if code == _OWN or (code is None and settings.flag_codes):
        return _own(settings)
    found = FLAG_CODES.get((code or "qartod").lower())
    if found is None:
        raise InputError(
            f"{where}: --map {name}: no code of flags is named {code!r}; use one of {', '.join(FLAG_CODES)}, {_OWN}, "
            f"{_IGNORED}"
        )
    return found


def plain_flag(text: str) -> str:
    """A flag as codes list it: '1.0' is '1'.

    >>> plain_flag(" 1.0"), plain_flag("a")
    ('1', 'A')
    """
    text = text.strip().upper()
    try:
        number = float(text)
    except ValueError:
        return text
    return str(int(number)) if number.is_integer() else text
