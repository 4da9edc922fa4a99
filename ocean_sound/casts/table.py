"""Rows of text turned into columns of numbers: fast where a table is well made, exact about the place where it is not.

This is the one place where text becomes numbers. Python's own `float` rounds correctly, so the numbers agree bit for
bit with any other parser that does.
"""

from __future__ import annotations

import contextlib
import csv
import re
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from ..errors import CastFileError
from .digits import plain_numbers

if TYPE_CHECKING:
    from collections.abc import Collection, Iterator, Sequence

    from numpy.typing import NDArray

# Numbers that stand for 'no value' in the files of this trade; none of them can be a value of a variable we read.
FILL_VALUES = np.array(
    [
        *(
            -99.0,
            -99.9,
            -99.99,
            -99.999,
            -999.0,
            -999.9,
            -999.99,
            -999.999,
            -9999.0,
            -9999.9,
            -9999.99,
            -99999.0,
            -999999.0,
        ),
        *(99999.0, 999999.0, 9999999.0, 99999.99, 999999.99, -1e10, -1e34, 1e34, -1e35, 1e35, 1e36, -1e36, 1e37, -1e37),
        *(9.969209968386869e36, 9.96921e36),  # netCDF's own, in full and as often printed
    ]
)
# Heights below the surface are negative: down there these are depths like any other.
_DEEP_FILLS = FILL_VALUES[(FILL_VALUES > 0) | (FILL_VALUES <= -9999.0)]
_FIRST_FILL = 98.0
_FIRST_POSITIVE_FILL = 99998.0
_PART_SIZE = 2**22  # characters read at a time
_LONGEST_ROW = 2**20  # characters
_LONGEST_NUMBER = 1000
_LISTED = 20  # heads that a message shows
_MISSING_WORDS = {"", "nan", "na", "n/a", "n.a.", "null", "none", "nil", "-", "--", "---", "missing", "*", "nat"}
_PLAIN_NUMBER = re.compile(r"[-+]?(?:\d+\.?\d*|\.\d+)(?:[eEdD][-+]?\d+)?", re.ASCII)


def without_fills(values: NDArray[np.float64], *, negative: bool = False) -> NDArray[np.float64]:
    """The values with NaN for every number that stands for 'no value'; the same array where there is none.

    `negative` says that the values may well be large and negative (heights).
    """
    fills = _DEEP_FILLS if negative else FILL_VALUES
    with np.errstate(invalid="ignore"):
        suspect = values > _FIRST_POSITIVE_FILL
        suspect |= values < -_FIRST_FILL
    if not suspect.any():
        return values
    gone = suspect & np.isin(values, fills)
    return np.where(gone, np.nan, values) if gone.any() else values


def split_cells(line: str, delimiter: str | None) -> list[str]:
    """The cells of one line; None for a delimiter means white space. Quotes are obeyed."""
    if delimiter is None:
        return line.split()
    if '"' in line:
        with contextlib.suppress(csv.Error):  # a cell beyond the reader's limit: not a table of numbers anyway
            return [cell.strip() for cell in next(csv.reader([line], delimiter=delimiter, skipinitialspace=True))]
    return [cell.strip() for cell in line.split(delimiter)]


def is_number(cell: str) -> bool:
    """Whether a cell holds a number, with a point or a comma for its decimals."""
    return _PLAIN_NUMBER.fullmatch(cell.strip().replace(",", ".").replace("−", "-")) is not None


def number_of(text: str, *, comma: bool, missing: Collection[str] = ()) -> float | None:
    """The number in a cell, NaN for a word that says there is none, None for anything else.

    A typesetter's minus (U+2212) is a minus; D serves for the E of a power of ten.

    >>> number_of("−1,5", comma=True), number_of("n/a", comma=False), number_of("cold", comma=False) is None
    (-1.5, nan, True)
    """
    if len(text) > _LONGEST_NUMBER:
        return None
    word = text.strip().lower()
    if word in _MISSING_WORDS or word in missing:
        return np.nan
    plain = word.replace("−", "-")
    if comma:
        if "." in plain:
            return None
        plain = plain.replace(",", ".", 1)
    return float(plain.replace("d", "e")) if _PLAIN_NUMBER.fullmatch(plain) else None


def listed(texts: Sequence[str]) -> str:
    """Heads of columns in a message, however many and long they are.

    >>> listed(["a", "b"]), listed(["x"] * 30)[-21:]
    ('a, b', 'x, x, ... (30 in all)')
    """
    shown = ", ".join(shortened(text) for text in texts[:_LISTED])
    return shown if len(texts) <= _LISTED else f"{shown}, ... ({len(texts)} in all)"


def shortened(text: str) -> str:
    """A text that fits into a message of one line."""
    text = " ".join(text.split())
    return text if len(text) <= 40 else text[:37] + "..."


@dataclass(frozen=True)
class Table:
    """Rows of cells below a line of heads.

    Parameters
    ----------
    where : str
        The file, for messages.
    heads : sequence of str
        Names of the columns as they stand in the file.
    lines : sequence of str
        What stands below the heads, without line ends: each a line, or several with line ends between them. Blank
        and comment lines, and rows of empty cells, are passed over.
    first_line : int
        Number of the first of them in the file, counted from one.
    delimiter : str or None
        Between cells; None for white space.
    decimal : str, optional
        The point or comma of decimals, where a person has said so; else it is told column by column.
    missing : collection of str, optional
        Words in lower case, beside the usual ones, that say that there is no value.
    """

    where: str
    heads: Sequence[str]
    lines: Sequence[str]
    first_line: int
    delimiter: str | None
    decimal: str | None = None
    missing: Collection[str] = ()

    def _parts(self) -> Iterator[_Rows]:
        """The rows in parts of some megabytes, so that a large file needs no memory beyond its numbers."""
        text = "\n".join(self.lines).rstrip(" \n")  # not tabs: they may part empty cells
        begin, line = 0, self.first_line
        while len(text) - begin > _PART_SIZE:
            end = text.find("\n", begin + _PART_SIZE)
            if end < 0:
                break
            part = text[begin:end]
            self._refuse_long(part, line)
            yield _Rows(self, part, line)
            line += part.count("\n") + 1
            begin = end + 1
        part = text[begin:] if begin else text
        self._refuse_long(part, line)
        yield _Rows(self, part, line)

    def _refuse_long(self, part: str, line: int) -> None:
        if len(part) > _PART_SIZE + _LONGEST_ROW:
            ends = part.rfind("\n", 0, _PART_SIZE + 1)
            raise CastFileError(
                f"{self.where}: line {line + part.count(chr(10), 0, ends + 1)} has {len(part) - ends - 1} characters; "
                f"no row is so long (at most {_LONGEST_ROW} are read)"
            )

    @cached_property
    def _rows(self) -> tuple[_Rows, ...]:
        return tuple(self._parts())

    @cached_property
    def _places(self) -> list[tuple[int, int, list[int] | None]]:
        """By part: number of rows, first line, and the line of each row (None: one after the other)."""
        return [rows.places() for rows in self._rows]

    def columns(
        self, numbers: Collection[int], texts: Collection[int]
    ) -> tuple[dict[int, NDArray[np.float64]], dict[int, list[str]]]:
        """Some columns as numbers and some as text, in one walk that keeps nothing else.

        Raises
        ------
        CastFileError
            As for `numbers`.
        """
        found: dict[int, list[NDArray[np.float64]]] = {column: [] for column in numbers}
        words: dict[int, list[str]] = {column: [] for column in texts}
        once: dict[str, str] = {}
        places = []
        for rows in self._parts():
            for column, parts in found.items():
                parts.append(rows.numbers(column))
            for column, cells in words.items():
                cells += [once.setdefault(text, text) for text in rows.texts(column)]
            places.append(rows.places())
        self.__dict__["_places"] = places
        return {column: np.concatenate(parts) for column, parts in found.items()}, words

    def __len__(self) -> int:
        return sum(count for count, _, _ in self._places)

    def line_of(self, row: int) -> int:
        """The line of the file on which a row stands."""
        for count, first, lines in self._places:
            if row < count:
                return first + row if lines is None else lines[row]
            row -= count
        raise IndexError(row)

    def texts(self, column: int) -> list[str]:
        """A column as text."""
        return [text for rows in self._rows for text in rows.texts(column)]

    def numbers(self, column: int) -> NDArray[np.float64]:
        """A column as numbers, NaN where a cell is empty or says so; fill values are left as they are.

        A typesetter's minus (U+2212) is a minus.

        Raises
        ------
        CastFileError
            A cell holds anything else.
        """
        return np.concatenate([rows.numbers(column) for rows in self._rows])


@dataclass(frozen=True)
class _Rows:
    """A part of a table: some of its lines."""

    table: Table
    text: str
    first_line: int

    @cached_property
    def _numbers(self) -> NDArray[np.float64] | None:
        """All cells as numbers, where they are plain enough to be read at one go."""
        table = self.table
        return None if table.delimiter is None else plain_numbers(self.text, table.delimiter, len(table.heads))

    @cached_property
    def _cells(self) -> tuple[list[str], int, list[int] | None]:
        """All cells row after row, the step from a row to the next, and the line of each row.

        The lines are None where row i stands on line first_line + i.
        """
        text, width, delimiter = self.text, len(self.table.heads), self.table.delimiter
        if text and not any(mark in text for mark in ('"', "#", "%")) and not _may_be_empty(text, delimiter):
            # Each line end becomes a cell of its own: the rows are all of one width if every such cell is in its place.
            if delimiter is None:
                cells = text.replace("\n", " | ").split()
                ends = "|"
            else:
                cells = text.replace("\n", f"{delimiter}\n{delimiter}").split(delimiter)
                ends = "\n"
            rows = text.count("\n") + 1
            if len(cells) == rows * (width + 1) - 1 and cells[width :: width + 1].count(ends) == rows - 1:
                return cells, width + 1, None
        cells, lines = self._checked_cells(text.split("\n") if text else [])
        return cells, width, lines

    def _checked_cells(self, lines: list[str]) -> tuple[list[str], list[int]]:
        table, width = self.table, len(self.table.heads)
        cells: list[str] = []
        numbers: list[int] = []
        for number, line in enumerate(lines, self.first_line):
            stripped = line.strip()
            if not stripped or stripped[0] in "#%":
                continue
            row = split_cells(line, table.delimiter)
            while len(row) > width and not row[-1]:
                row.pop()  # a delimiter at the end of the line
            if not any(row):
                continue
            if len(row) != width:
                raise CastFileError(
                    f"{table.where}: line {number} has {len(row)} cells where the heads name {width} columns; "
                    "give every line one cell per column (empty where a value is missing)"
                )
            cells += row
            numbers.append(number)
        return cells, numbers

    def places(self) -> tuple[int, int, list[int] | None]:
        if self._numbers is not None:
            return len(self._numbers), self.first_line, None
        cells, step, lines = self._cells
        return (len(cells) + step - len(self.table.heads)) // step, self.first_line, lines

    def texts(self, column: int) -> list[str]:
        cells, step, _ = self._cells
        return cells[column::step]

    def numbers(self, column: int) -> NDArray[np.float64]:
        if self._numbers is not None:
            return np.ascontiguousarray(self._numbers[:, column])
        texts, table = self.texts(column), self.table
        if "_" not in self.text and table.decimal != ",":  # an underscore float takes for part of a number: 1_000
            try:
                return np.fromiter(map(float, texts), np.float64, len(texts))
            except ValueError:
                pass  # gaps, decimal commas, or text: cell by cell
        texts = [text.strip() for text in texts]
        comma = table.decimal == "," or (
            table.decimal is None and table.delimiter != "," and any("," in text for text in texts)
        )
        return np.array([self._number(text, row, column, comma=comma) for row, text in enumerate(texts)], np.float64)

    def _number(self, text: str, row: int, column: int, *, comma: bool) -> float:
        value = number_of(text, comma=comma, missing=self.table.missing)
        if value is not None:
            return value
        trouble = "it is not a number; correct it, or leave the cell empty if there is no value"
        if comma and "." in text and is_number(text):
            trouble = "the column has decimal commas and points; use one of them"
        elif text == self.table.heads[column].strip():
            trouble = "the heads stand here again; part files that were joined, or name the casts in an id column"
        raise self._error(row, column, text, trouble)

    def _error(self, row: int, column: int, text: str, trouble: str) -> CastFileError:
        _, first, lines = self.places()
        line = first + row if lines is None else lines[row]
        place = f"{self.table.where}: line {line}, column {shortened(self.table.heads[column])!r}"
        return CastFileError(f"{place}: {shortened(text)!r}: {trouble}")


def _may_be_empty(text: str, delimiter: str | None) -> bool:
    """Whether a row may consist of empty cells: then the lines are looked at one by one."""
    return delimiter is not None and (text.startswith(delimiter) or f"\n{delimiter}" in text)
