"""Plain CSV: casts as a table with names at the head of its columns, and perhaps lines of 'key: value' above it."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ..errors import CastFileError, InputError
from .building import NoUsableLevelError
from .cast import NOT_EVALUATED
from .columns import make_recipe, plain_flag
from .layout import SEARCHED_LINES, find_table
from .levels import About, Raw, make_block
from .names import METADATA
from .preamble import is_dated, note_fall_rate, place_and_time, read_preamble
from .settings import Settings
from .table import Table, listed, shortened

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from .block import CastBlock
    from .columns import FlagColumn, Recipe
    from .preamble import Found

# Positions farther apart than this belong to several casts: ships drift some kilometres while a cast is taken.
_ONE_PLACE = 0.1  # degrees; common practice
_NO_SETTINGS = Settings()


def decode(data: bytes, encoding: str | None = None) -> tuple[str, str | None]:
    """The text of a file with plain line ends, and a note where its encoding is not Unicode."""
    note = None
    if encoding is not None:
        text = data.decode(encoding, errors="replace").removeprefix("\ufeff")
    elif data.startswith((b"\xff\xfe", b"\xfe\xff")):
        text = data.decode("utf-16", errors="replace")
    else:
        try:
            text = data.decode("ascii" if data.isascii() else "utf-8-sig")
        except UnicodeDecodeError:
            text, note = data.decode("latin-1"), "text is not UTF-8; read as Latin-1"
    return (text.replace("\r\n", "\n").replace("\r", "\n") if "\r" in text else text), note


def read_plain(data: bytes, where: str, *, source: str, name: str, settings: Settings = _NO_SETTINGS) -> CastBlock:
    """Read the casts of a plain CSV.

    Parameters
    ----------
    data : bytes
        The file's content.
    where : str
        The file, for messages.
    source : str
        What the casts say they came from.
    name : str
        The cast's id where the file gives none.
    settings : Settings, optional
        What a person said of the file.

    Returns
    -------
    CastBlock
        One cast, or one for each name in a column of ids, in the order in which they come first; their rows need not
        stand together. Casts that hold nothing are in `left_out`.

    Raises
    ------
    CastFileError
        There is no table, a column that a cast needs is missing, a cell is not a number, or what is said can be read
        two ways.
    InputError
        What a person said does not fit the file.
    """
    text, note = decode(data, settings.encoding)
    lines = text.split("\n", SEARCHED_LINES + 50)
    layout = find_table(lines, settings, where)
    found = read_preamble(lines[: layout.head_line], where)
    recipe = make_recipe(layout, found.units, settings, where)
    finish_found(found, recipe, note, settings)
    first = layout.first_row
    rows = text[sum(len(line) + 1 for line in lines[:first]) :]
    del text, lines
    table = Table(
        where, layout.texts, [rows], first + 1, layout.delimiter, settings.decimal, missing=settings.missing_words
    )
    block = _read_table(table, recipe, found, settings, source=source, name=name)
    if not len(block):
        place, why = block.left_out[0]
        raise NoUsableLevelError(f"{place}: {why}")
    return block


def finish_found(found: Found, recipe: Recipe, note: str | None, settings: Settings) -> None:
    """Put the notes that hold for the whole file in their order."""
    before = [note] if note else []
    if settings.source:
        before.append(f"settings taken from {settings.source}")
    if {column.name for column in recipe.columns} in ({"depth", "temperature"}, {"height", "temperature"}):
        note_fall_rate(found)
    found.notes[:0] = before


def _read_table(table: Table, recipe: Recipe, found: Found, settings: Settings, *, source: str, name: str) -> CastBlock:
    columns = {column.index for column in recipe.columns}
    labels = set(recipe.labels.values())
    numbers, texts = table.columns(columns, labels | {column.index for column in recipe.flags})
    if not len(table):
        raise CastFileError(f"{table.where}: no level below the heads on line {table.first_line - 1}")
    flags = {column.index: _flags(texts[column.index], column, table) for column in recipe.flags}
    order, row_size, ids, notes = _casts(texts, recipe, table, settings)
    starts = np.concatenate([[0], np.cumsum(row_size)])
    about = []
    for number, ident in enumerate(ids):
        rows: Sequence[int] = (
            range(len(table)) if order is None else order[starts[number] : starts[number + 1]].tolist()
        )
        place = table.where if len(ids) == 1 else f"{table.where}: cast {shortened(ident)!r}"
        said, more = _labels(texts, rows, recipe, table, place)
        about.append(
            cast_about(
                {**found.metadata, **said},
                found,
                settings,
                where=place,
                source=source,
                id=ident,
                default=name,
                notes=[*found.notes, *notes, *more],
            )
        )
    if order is not None:
        numbers = {index: column[order] for index, column in numbers.items()}
        flags = {index: column[order] for index, column in flags.items()}
    return make_block(Raw(numbers, flags, row_size), recipe, settings, about)


def cast_about(
    texts: Mapping[str, tuple[str, str]],
    found: Found,
    settings: Settings,
    *,
    where: str,
    source: str,
    id: str,  # noqa: A002  # the name of the field
    default: str,
    notes: Sequence[str],
) -> About:
    """What is known of a cast, from the texts that say it.

    Raises
    ------
    CastFileError
        A position or time can't be read, or can be read two ways.
    """
    try:
        latitude, longitude, time = place_and_time(texts, settings)
    except InputError as error:
        text = str(error)
        raise CastFileError(
            text if text.startswith(where.split(": cast ", maxsplit=1)[0]) else f"{where}: {text}"
        ) from error
    named = settings.id or id or texts.get("id", ("", ""))[0] or default
    return About(where, named, source, latitude, longitude, time, found.attributes, tuple(notes))


def _flags(texts: list[str], column: FlagColumn, table: Table) -> NDArray[np.int8]:
    known: dict[str, int] = {}
    for text in dict.fromkeys(texts):
        plain = plain_flag(text)
        if plain in column.codes:
            known[text] = column.codes[plain]
        elif plain in {"", "NAN"}:
            known[text] = NOT_EVALUATED
        else:
            row = texts.index(text)
            raise CastFileError(
                f"{table.where}: line {table.line_of(row)}, column {shortened(table.heads[column.index])!r}: flag "
                f"{shortened(text)}; {'QARTOD flags' if '9' in column.codes else 'the flags of its code'} are "
                f"{', '.join(column.codes)}"
            )
    return np.array([known[text] for text in texts], np.int8)


def _casts(
    texts: Mapping[int, list[str]], recipe: Recipe, table: Table, settings: Settings
) -> tuple[NDArray[np.intp] | None, NDArray[np.int64], list[str], list[str]]:
    """The order that brings the rows of each cast together, the size of each, their ids, and a note.

    The order is None where there is one cast, whose id is empty if the file gives none.
    """
    rows = len(table)
    if "id" not in recipe.labels or settings.id is not None:
        return None, np.array([rows]), [""], []
    cells = [text.strip() for text in texts[recipe.labels["id"]]]
    numbers: dict[str, int] = {}
    group = np.empty(rows, np.intp)
    current, blanks = 0, 0
    for row, cell in enumerate(cells):
        if cell:
            current = numbers.setdefault(cell, len(numbers))
        else:
            blanks += 1
        group[row] = current
    if not numbers:
        return None, np.array([rows]), [""], []
    note = [f"{blanks} rows without a cast id belong to the cast above them"] if blanks and len(numbers) > 1 else []
    if len(numbers) == 1:
        return None, np.array([rows]), list(numbers), note
    return np.argsort(group, kind="stable"), np.bincount(group, minlength=len(numbers)), list(numbers), note


def _labels(
    texts: Mapping[int, list[str]], rows: Sequence[int], recipe: Recipe, table: Table, place: str
) -> tuple[dict[str, tuple[str, str]], list[str]]:
    """What columns say of where and when a cast was taken: the first cell that is not empty; and notes on others."""
    said: dict[str, tuple[str, str]] = {}
    notes: list[str] = []
    for name in METADATA:
        if name not in recipe.labels or name == "id":
            continue
        cells = texts[recipe.labels[name]]
        row = next((row for row in rows if cells[row].strip()), None)
        if row is None or (name in {"time", "date"} and not says_when(cells[row].strip(), name, recipe)):
            continue  # a time column without dates counts seconds, or the like
        said[name] = cells[row].strip(), f"{table.where}: line {table.line_of(row)}"
        if name in {"latitude", "longitude"}:
            others = {cells[row].strip() for row in rows} - {""}
            if len(others) > 1:
                notes.append(_drift(name, others, place, told="id" in recipe.labels))
    return said, notes


def says_when(text: str, name: str, recipe: Recipe) -> bool:
    """Whether a cell of a column of times or dates tells the time of the cast, alone or beside a date."""
    return is_dated(text) or (name == "time" and "date" in recipe.labels)


def _drift(name: str, cells: set[str], place: str, *, told: bool) -> str:
    """A note on a position that differs from row to row; an error where it can't be of one cast."""
    try:
        numbers = [float(cell) for cell in cells]
    except ValueError:
        numbers = []
    if numbers and not told and max(numbers) - min(numbers) > _ONE_PLACE:
        raise CastFileError(
            f"{place}: {name} runs from {min(numbers):g} to {max(numbers):g}: the rows are of several casts, or the "
            "ship did not stay; name the column that tells the casts apart with --map id=COLUMN"
        )
    return f"{name} differs between rows ({listed(sorted(cells)[:2])}, ...); the first is taken"
