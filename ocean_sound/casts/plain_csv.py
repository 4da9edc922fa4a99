"""Plain CSV: one cast as a table with names at the head of its columns, and perhaps lines of 'key: value' above it."""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from itertools import islice
from typing import TYPE_CHECKING

import numpy as np

from ..errors import CastFileError, InputError
from .building import build_cast
from .cast import FLAGS, MEASURED, NO_TIME, VARIABLES, VERTICAL, Cast
from .names import METADATA, VALUES, Head, meaning, plain_words, read_head, split_unit
from .table import Table, is_number, split_cells, without_fills
from .units import from_name, is_unit, quantity_of, to_ours
from .where_when import read_position, read_time

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from numpy.typing import NDArray

_SEARCHED_LINES = 500  # a preamble longer than this is not one
_COMMENTS = "#%"
_KEY_VALUE = re.compile(r"^\s*([^:=,;\t]+?)\s*[:=,;\t][\s,;:=]*(.*?)[\s,;]*$")
_WORDS_AND_BRACKETS = re.compile(r"[^\s\[(]+(?:\s*(?:\[[^\]]*\]|\([^)]*\)))?")
_DATED = re.compile(r"\d{4}[-/.]\d|\d[-/.]\d{4}|\b\d{8}(?:T|\b)")
_EXAMPLE = "depth [m],temperature [degC],salinity [PSS-78]"


@dataclass(frozen=True)
class _Layout:
    """Where the table is: its heads, the delimiter below them, the lines (from zero) of heads and first row."""

    heads: list[Head]
    delimiter: str | None
    head_line: int
    first_row: int


@dataclass
class _Found:
    """What is known of the cast apart from its levels."""

    attributes: dict[str, str] = field(default_factory=dict)
    metadata: dict[str, tuple[str, str]] = field(default_factory=dict)  # our name -> (text, where it stood)
    units: dict[str, str] = field(default_factory=dict)  # of columns, by plain words


def decode(data: bytes) -> tuple[str, str | None]:
    """The text of a file with plain line ends, and a note where its encoding is not Unicode."""
    note = None
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        text = data.decode("utf-16", errors="replace")
    else:
        try:
            text = data.decode("utf-8-sig")
        except UnicodeDecodeError:
            text, note = data.decode("latin-1"), "text is not UTF-8; read as Latin-1"
    return (text.replace("\r\n", "\n").replace("\r", "\n") if "\r" in text else text), note


def read_plain(data: bytes, where: str, *, source: str, name: str, mapping: Mapping[str, str]) -> Cast:
    """Read one cast from plain CSV.

    Parameters
    ----------
    data : bytes
        The file's content.
    where : str
        The file, for messages.
    source : str
        What the cast says it came from.
    name : str
        The cast's id where the file gives none.
    mapping : mapping of str to str
        By our name, the column that holds it, with a unit in square brackets behind where the head says none or the
        wrong one.

    Returns
    -------
    Cast

    Raises
    ------
    CastFileError
        There is no table, a column that a cast needs is missing, a cell is not a number, or what is said can be read
        two ways.
    """
    text, note = decode(data)
    lines = text.split("\n", _SEARCHED_LINES + 50)
    layout = _find_table(lines, mapping, where)
    found = _read_preamble(lines[: layout.head_line], where)
    first = layout.first_row
    units = _units_row(lines[first], layout) if first < len(lines) else None
    first += units is not None
    rows = [text[sum(len(line) + 1 for line in lines[:first]) :]]
    table = Table(where, [head.text for head in layout.heads], rows, first + 1, layout.delimiter)
    chosen = _choose(layout.heads, units, mapping, found, where)
    _require(chosen, table.heads, where)
    if not len(table):
        raise CastFileError(f"{where}: no level below the heads on line {layout.head_line + 1}")
    try:
        values, flags, notes = _columns(table, chosen, where)
        fields = _position_and_time(table, chosen, found, where)
    except InputError as error:
        raise CastFileError(str(error)) from error
    used = {index for index, _, _ in chosen.values()}
    rest = [head for index, head in enumerate(table.heads) if index not in used and _flagged(head) not in values]
    if rest:
        notes.append(f"columns not read: {', '.join(rest)}")
    return build_cast(
        where,
        values=values,
        flags=flags,
        id=fields.pop("id") or name,
        source=source,
        attributes=found.attributes,
        notes=tuple(filter(None, [note, *notes])),
        **fields,
    )


# --- finding the table ---------------------------------------------------------------------------------------------


def _head_splits(line: str) -> Iterator[tuple[str | None, list[str]]]:
    """The ways to part a line into heads of columns, with the delimiter that the rows below it would have."""
    for delimiter in "\t;,":
        if delimiter in line:
            yield delimiter, split_cells(line, delimiter)
    yield None, re.split(r"\s{2,}", line.strip())
    yield None, _WORDS_AND_BRACKETS.findall(line)
    yield None, line.split()


def _mapped(cell: str, mapping: Mapping[str, str]) -> bool:
    return any(_meant(wanted, [cell]) for wanted in mapping.values())


def _meant(wanted: str, texts: Sequence[str]) -> list[int]:
    """The columns that a person may mean: by the whole head, else by the head without its unit.

    >>> _meant("Z", ["T [K]", "Z [m]"]), _meant("Z [ft]", ["T", "Z"])
    ([1], [1])
    """
    for heads in (texts, [split_unit(text)[0] for text in texts]):
        for name in (wanted, split_unit(wanted)[0]):
            found = [index for index, head in enumerate(heads) if head == name]
            if found:
                return found
    return []


def _find_table(lines: list[str], mapping: Mapping[str, str], where: str) -> _Layout:
    """The line of heads: the one with most names known to us that has a row of numbers of its width below it."""
    best: tuple[int, _Layout] | None = None
    for number, line in enumerate(lines[:_SEARCHED_LINES]):
        bare = line.strip().lstrip(_COMMENTS).strip()
        if not bare:
            continue
        if best is not None and _is_row(line, best[1]):
            break
        for delimiter, cells in _head_splits(bare):
            if any(is_number(cell) for cell in cells):
                continue
            heads = [read_head(cell) for cell in cells]
            known = sum(head.name is not None or _mapped(head.text, mapping) for head in heads)
            if not known or (best is not None and known < best[0]):
                continue
            layout = _Layout(heads, delimiter, number, number + 1)
            if (best is None or known > best[0] or number > best[1].head_line) and _has_row(lines, layout):
                best = known, layout
            if known == len(cells):
                break
    if best is None:
        raise _no_heads(lines, where)
    return best[1]


def _is_row(line: str, layout: _Layout) -> bool:
    if line.lstrip()[:1] in _COMMENTS:
        return False
    cells = split_cells(line, layout.delimiter)
    while len(cells) > len(layout.heads) and not cells[-1]:
        cells.pop()
    return len(cells) == len(layout.heads) and any(map(is_number, cells))


def _has_row(lines: list[str], layout: _Layout) -> bool:
    """Whether the next line of text below the heads, or below a row of units, looks like a row of the table."""
    below = (line.strip() for line in lines[layout.first_row : layout.first_row + 20])
    near = list(islice((line for line in below if line and line[0] not in _COMMENTS), 2))
    if not near or any(_is_row(line, layout) for line in near):
        return True
    return len(layout.heads) > 1 and _same_width(near[0], layout)


def _same_width(line: str, layout: _Layout) -> bool:
    known = {head.name for head in layout.heads}
    return len(split_cells(line, layout.delimiter)) == len(layout.heads) and bool(
        known & {*VERTICAL, *MEASURED, "height"}
    )


def _no_heads(lines: list[str], where: str) -> CastFileError:
    """The true reason why no table was found: names that we don't know, or none at all."""
    before: list[str] = []
    for number, line in enumerate(lines[:_SEARCHED_LINES], 1):
        bare = line.strip().lstrip(_COMMENTS).strip()
        for delimiter in ("\t", ";", ",", None):
            cells = split_cells(bare, delimiter) if bare and (delimiter is None or delimiter in bare) else []
            if len(cells) >= 2 and sum(map(is_number, cells)) >= 2:
                heads = split_cells(before[-1], delimiter) if before else []
                if len(heads) == len(cells) and not any(map(is_number, heads)):
                    return _missing_column("depth or pressure", "depth", heads, where)
                place = f"{where}: line {number}"
                if {read_head(head).name for head in heads} & {*VALUES}:
                    return CastFileError(
                        f"{place} has {len(cells)} cells where the heads above it name {len(heads)} columns"
                    )
                return CastFileError(
                    f"{place} has numbers but no line of column names stands above it; add one such as '{_EXAMPLE}'"
                )
        if bare:
            before.append(bare)
    if before:
        return CastFileError(
            f"{where}: no table found; a cast needs a line of column names such as '{_EXAMPLE}' "
            "with rows of numbers below it"
        )
    return CastFileError(f"{where}: the file is empty")


def _missing_column(what: str, name: str, heads: Sequence[str], where: str) -> CastFileError:
    return CastFileError(
        f"{where}: no column of {what}; the columns are: {', '.join(heads)}; "
        f"say which is which with --map {name}=COLUMN"
    )


def _units_row(line: str, layout: _Layout) -> list[str | None] | None:
    """Units that stand in a row of their own below the heads."""
    cells = [cell.strip("[]() ") for cell in split_cells(line, layout.delimiter)]
    if len(cells) != len(layout.heads):
        return None
    pairs = zip(layout.heads, cells, strict=True)
    wanted = [(head.name, cell) for head, cell in pairs if head.name in VALUES and head.unit is None]
    if not wanted or not all(is_unit(name, cell) for name, cell in wanted):
        return None
    return [cell or None for cell in cells]


# --- which column is what ------------------------------------------------------------------------------------------


def _choose(
    heads: list[Head], units: list[str | None] | None, mapping: Mapping[str, str], found: _Found, where: str
) -> dict[str, tuple[int, str | None, bool]]:
    """By name: column, unit, and whether a person said so."""
    chosen: dict[str, tuple[int, str | None, bool]] = {}
    texts = [head.text for head in heads]
    for name, wanted in mapping.items():
        meant = _meant(wanted, texts)
        if len(meant) != 1:
            raise InputError(
                f"{where}: {'several columns are' if meant else 'no column is'} named {wanted!r} "
                f"(--map {name}={wanted}); the columns are: {', '.join(texts)}"
            )
        index = meant[0]
        unit = None if wanted == texts[index] else split_unit(wanted)[1]
        unit = unit or heads[index].unit or split_unit(texts[index])[1] or (units[index] if units else None)
        chosen[name] = index, unit, True
    settled = {quantity_of(name) for name in mapping}
    taken = {index for index, _, _ in chosen.values()}
    for index, head in enumerate(heads):
        if head.name is None or index in taken or quantity_of(head.name) in settled:
            continue
        rival = next((name for name in chosen if quantity_of(name) == quantity_of(head.name)), None)
        if rival is not None:
            one, other = texts[chosen[rival][0]], head.text
            raise CastFileError(
                f"{where}: columns {one!r} and {other!r} both look like {rival}; choose with --map {rival}=COLUMN"
            )
        unit = head.unit or (units[index] if units else None) or found.units.get(plain_words(head.text))
        chosen[head.name] = index, unit, False
    return chosen


def _require(chosen: Mapping[str, object], heads: Sequence[str], where: str) -> None:
    quantities = {quantity_of(name) for name in chosen}
    if not quantities & set(VERTICAL):
        raise _missing_column("depth or pressure", "depth", heads, where)
    if not quantities & set(MEASURED):
        raise _missing_column("temperature, salinity, conductivity or sound speed", "temperature", heads, where)


def _flagged(head: str) -> str | None:
    """The name of the variable whose flags a column holds, by our own way of naming it."""
    base = head.removesuffix("_flag")
    return base if base != head else None


def _columns(
    table: Table, chosen: Mapping[str, tuple[int, str | None, bool]], where: str
) -> tuple[dict[str, NDArray[np.float64]], dict[str, NDArray[np.int8]], list[str]]:
    values: dict[str, NDArray[np.float64]] = {}
    notes: list[str] = []
    for name, (index, unit, settled) in sorted(chosen.items(), key=lambda item: _order(item[0])):
        if name in METADATA:
            continue
        column = without_fills(table.numbers(index), negative=name == "height")
        label = f"{where}: column {table.heads[index]!r}"
        column, converted = to_ours(name, column, unit, where=label, settled=settled)
        _check_sign(name, column, table.heads[index], where)
        values[quantity_of(name)], turned = from_name(name, column)
        notes += filter(None, [converted, turned])
    flags = {}
    for index, head in enumerate(table.heads):
        name = _flagged(head) or ""
        if name in values:
            flags[name] = _flags(table, index, where)
    return values, flags, notes


def _order(name: str) -> int:
    quantity = quantity_of(name)
    return VARIABLES.index(quantity) if quantity in VARIABLES else len(VARIABLES)


def _check_sign(name: str, column: NDArray[np.float64], head: str, where: str) -> None:
    if name == "depth" and np.nanmax(column, initial=-np.inf) <= 0.0 and np.nanmin(column, initial=0.0) < 0.0:
        raise CastFileError(
            f"{where}: column {head!r} has depths from {np.nanmax(column):g} to {np.nanmin(column):g}, none below the "
            f'surface; if it is negative downward, say --map "height={head}"'
        )


def _flags(table: Table, index: int, where: str) -> NDArray[np.int8]:
    numbers = table.numbers(index)
    numbers = np.where(np.isnan(numbers), 9.0, numbers)
    known = np.isin(numbers, FLAGS)
    if not known.all():
        row = int(np.argmin(known))
        raise CastFileError(
            f"{where}: line {table.line_of(row)}, column {table.heads[index]!r}: flag {numbers[row]:g}; "
            f"QARTOD flags are {', '.join(map(str, FLAGS))}"
        )
    return numbers.astype(np.int8)


# --- what stands around the table ----------------------------------------------------------------------------------


def _read_preamble(lines: list[str], where: str) -> _Found:
    found = _Found()
    for number, line in enumerate(lines, 1):
        match = _KEY_VALUE.match(line.strip().lstrip(_COMMENTS))
        if match is None or not match[2]:
            continue
        key, value = plain_words(match[1]), match[2].strip().strip('"')
        if key.endswith((" unit", " units")):
            found.units[key.rsplit(" ", 1)[0]] = value
            continue
        name = meaning(key)
        if name in METADATA:
            found.metadata.setdefault(name, (value, f"{where}: line {number}"))
        else:
            found.attributes.setdefault(re.sub(r"\W+", "_", key).strip("_"), value)
    found.attributes.pop("", None)
    return found


def _position_and_time(
    table: Table, chosen: Mapping[str, tuple[int, str | None, bool]], found: _Found, where: str
) -> dict[str, object]:
    """Position, time and id from columns of the table where it has them, else from the lines above it."""
    texts = dict(found.metadata)
    for name in METADATA:
        if name in chosen:
            column = chosen[name][0]
            rows = [(text.strip(), row) for row, text in enumerate(table.texts(column)) if text.strip()]
            if not rows or (name in {"time", "date"} and not _DATED.search(rows[0][0])):
                continue  # a time column without dates counts seconds, or the like
            if name == "id" and len({text for text, _ in rows}) > 1:
                names = list(dict.fromkeys(text for text, _ in rows))
                raise CastFileError(
                    f"{where}: column {table.heads[column]!r} names {len(names)} casts ({', '.join(names[:3])}, ...); "
                    "put each cast in a file of its own"
                )
            texts[name] = rows[0][0], f"{where}: line {table.line_of(rows[0][1])}"
    fields: dict[str, object] = {"id": texts.get("id", ("", ""))[0]}
    for kind in ("latitude", "longitude"):
        if kind in texts:
            fields[kind] = read_position(texts[kind][0], kind, where=texts[kind][1])
    fields["time"] = _time(texts)
    return fields


def _time(texts: Mapping[str, tuple[str, str]]) -> np.datetime64:
    """The time; a date may stand in one place and the time of day in another."""
    time, date = texts.get("time"), texts.get("date")
    if time is not None and date is not None and re.match(r"^\d{1,2}:?\d{2}(:|\b)", time[0]) and "-" not in time[0]:
        return read_time(f"{date[0]} {time[0]}", where=date[1])
    stated = time or date
    return NO_TIME if stated is None else read_time(stated[0], where=stated[1])
