"""Where the table is in the text of a CSV: its line of heads, its delimiter, its units, its first row."""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import lru_cache
from itertools import islice
from typing import TYPE_CHECKING

from ..errors import CastFileError
from .cast import MEASURED, VERTICAL
from .names import VALUES, Head, may_name_values, read_head, split_unit
from .table import is_number, listed, split_cells
from .units import is_unit

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from .settings import Settings

SEARCHED_LINES = 500
"""A preamble longer than this is not one."""
COMMENTS = "#%"
MOST_COLUMNS = 4096
_LONGEST_HEADS = 2**18  # characters
_WORDS_AND_BRACKETS = re.compile(r"[^\s\[(]+(?:\s*(?:\[[^\]]*\]|\([^)]*\)))?")
_EXAMPLE = "depth [m],temperature [degC],salinity [PSS-78]"


@dataclass(frozen=True)
class Layout:
    """Where the table is: its heads and units, the delimiter below them, the lines (from zero) of heads and first row.

    Units are those that stand in a row of their own below the heads, by column.
    """

    heads: tuple[Head, ...]
    delimiter: str | None
    head_line: int
    first_row: int
    units: tuple[str | None, ...] | None = None

    @property
    def texts(self) -> list[str]:
        """The heads as they stand in the file."""
        return [head.text for head in self.heads]


def find_table(lines: list[str], settings: Settings, where: str) -> Layout:
    """The line of heads: the one with most names known to us that has a row of numbers of its width below it.

    Raises
    ------
    CastFileError
        There is no table.
    """
    best: tuple[int, Layout] | None = None
    wanted = tuple(settings.columns.values())
    for number, line in enumerate(lines[:SEARCHED_LINES]):
        if best is not None and _is_row(line, best[1]):
            break
        for delimiter, heads, known in _candidates(line, settings.delimiter, wanted):
            if best is not None and known < best[0]:
                continue
            layout = Layout(heads, delimiter, number, number + 1)
            if (best is None or known > best[0] or number > best[1].head_line) and _has_row(lines, layout):
                best = known, layout
            if known == len(heads):
                break
    if best is None:
        raise _no_heads(lines, settings, where)
    return _with_units(lines, best[1])


@lru_cache(maxsize=256)
def _candidates(
    line: str, delimiter: str | None, wanted: tuple[str, ...]
) -> tuple[tuple[str | None, tuple[Head, ...], int], ...]:
    """The ways to read a line as heads: delimiter, heads, how many are known. Kept, for files come by the thousand."""
    bare = line.strip().lstrip(COMMENTS).strip()
    found = []
    if bare and len(bare) <= _LONGEST_HEADS and (wanted or may_name_values(bare)):
        for mark, cells in _head_splits(bare, delimiter):
            if not cells or len(cells) > MOST_COLUMNS or any(is_number(cell) for cell in cells):
                continue
            if cells[0].endswith((":", "=")):
                continue  # a key of the preamble
            heads = tuple(read_head(cell) for cell in cells)
            told = [_mapped(head.text, wanted) for head in heads]
            known = sum(head.name is not None or said for head, said in zip(heads, told, strict=True))
            if any(told) or any(head.name in VALUES for head in heads):
                found.append((mark, heads, known))
    return tuple(found)


def _head_splits(line: str, delimiter: str | None) -> Iterator[tuple[str | None, list[str]]]:
    """The ways to part a line into heads of columns, with the delimiter that the rows below it would have."""
    for mark in "\t;,":
        if mark in line and delimiter in {None, mark}:
            yield mark, split_cells(line, mark)
    if delimiter in {None, "space"}:
        yield None, re.split(r"\s{2,}", line.strip())
        yield None, _WORDS_AND_BRACKETS.findall(line)
        yield None, line.split()


def _mapped(cell: str, wanted: Sequence[str]) -> bool:
    return any(meant(one, [cell]) for one in wanted)


def meant(wanted: str, texts: Sequence[str]) -> list[int]:
    """The columns that a person may mean: by the whole head, else by the head without its unit.

    >>> meant("Z", ["T [K]", "Z [m]"]), meant("Z [ft]", ["T", "Z"])
    ([1], [1])
    """
    for heads in (texts, [split_unit(text)[0] for text in texts]):
        for name in (wanted, split_unit(wanted)[0]):
            found = [index for index, head in enumerate(heads) if head == name]
            if found:
                return found
    return []


def _is_row(line: str, layout: Layout) -> bool:
    if line.lstrip()[:1] in COMMENTS:
        return False
    cells = split_cells(line[:_LONGEST_HEADS], layout.delimiter)
    while len(cells) > len(layout.heads) and not cells[-1]:
        cells.pop()
    return len(cells) == len(layout.heads) and any(map(is_number, cells))


def _has_row(lines: list[str], layout: Layout) -> bool:
    """Whether the next line of text below the heads, or below a row of units, looks like a row of the table."""
    below = (line.strip() for line in lines[layout.first_row : layout.first_row + 20])
    near = list(islice((line for line in below if line and line[0] not in COMMENTS), 2))
    if not near or any(_is_row(line, layout) for line in near):
        return True
    return len(layout.heads) > 1 and _same_width(near[0], layout)


def _same_width(line: str, layout: Layout) -> bool:
    known = {head.name for head in layout.heads}
    return len(split_cells(line, layout.delimiter)) == len(layout.heads) and bool(
        known & {*VERTICAL, *MEASURED, "height"}
    )


def _with_units(lines: list[str], layout: Layout) -> Layout:
    """The layout with the units of a row of their own below the heads, where there is one."""
    if layout.first_row >= len(lines):
        return layout
    cells = [cell.strip("[]() ") for cell in split_cells(lines[layout.first_row][:_LONGEST_HEADS], layout.delimiter)]
    if len(cells) != len(layout.heads):
        return layout
    pairs = zip(layout.heads, cells, strict=True)
    wanted = [(head.name, cell) for head, cell in pairs if head.name in VALUES and head.unit is None]
    if not all(is_unit(name, cell) for name, cell in wanted if name) or all(is_number(cell) for _, cell in wanted):
        return layout  # '1' is a unit of salinity, but a row of nothing else is a row of numbers
    units = tuple(cell or None for cell in cells)
    return Layout(layout.heads, layout.delimiter, layout.head_line, layout.first_row + 1, units)


def _no_heads(lines: list[str], settings: Settings, where: str) -> CastFileError:
    """The true reason why no table was found: names that we don't know, or none at all."""
    before = ""
    for number, line in enumerate(lines[:SEARCHED_LINES], 1):
        bare = line.strip().lstrip(COMMENTS).strip()
        if len(bare) > _LONGEST_HEADS:
            return CastFileError(
                f"{where}: line {number} has {len(bare)} characters; no line of column names or numbers is so long "
                f"(at most {MOST_COLUMNS} columns are read)"
            )
        marks = ("\t", ";", ",", None) if settings.delimiter is None else (settings.delimiter.replace("space", ""),)
        for delimiter in marks:
            mark = delimiter or None
            cells = split_cells(bare, mark) if bare and (mark is None or mark in bare) else []
            if len(cells) > MOST_COLUMNS:
                return CastFileError(
                    f"{where}: line {number} has {len(cells)} columns; at most {MOST_COLUMNS} are read"
                )
            if len(cells) >= 2 and sum(map(is_number, cells)) >= 2:
                return _numbers_without_heads(cells, split_cells(before, mark) if before else [], number, where)
        before = bare or before
    if before:
        return CastFileError(
            f"{where}: no table found; a cast needs a line of column names such as '{_EXAMPLE}' "
            "with rows of numbers below it"
        )
    return CastFileError(f"{where}: the file is empty")


def _numbers_without_heads(cells: list[str], heads: list[str], number: int, where: str) -> CastFileError:
    if len(heads) == len(cells) and not any(map(is_number, heads)):
        return missing_column("depth or pressure", "depth", heads, where)
    place = f"{where}: line {number}"
    if {read_head(head).name for head in heads} & {*VALUES}:
        return CastFileError(f"{place} has {len(cells)} cells where the heads above it name {len(heads)} columns")
    return CastFileError(
        f"{place} has numbers but no line of column names stands above it; add one such as '{_EXAMPLE}'"
    )


def missing_column(what: str, name: str, heads: Sequence[str], where: str) -> CastFileError:
    """The error of a column that a cast needs."""
    return CastFileError(
        f"{where}: no column of {what}; the columns are: {listed(heads)}; say which is which with --map {name}=COLUMN"
    )
