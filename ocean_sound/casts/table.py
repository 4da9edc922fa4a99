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
    from collections.abc import Sequence

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
        and comment lines are passed over.
    first_line : int
        Number of the first of them in the file, counted from one.
    delimiter : str or None
        Between cells; None for white space.
    """

    where: str
    heads: Sequence[str]
    lines: Sequence[str]
    first_line: int
    delimiter: str | None

    @cached_property
    def _text(self) -> str:
        return "\n".join(self.lines).rstrip(" \n")  # not tabs: they may part empty cells

    @cached_property
    def _numbers(self) -> NDArray[np.float64] | None:
        """The whole table as numbers, where it is plain enough to be read at one go."""
        return None if self.delimiter is None else plain_numbers(self._text, self.delimiter, len(self.heads))

    @cached_property
    def _cells(self) -> tuple[list[str], int, list[int] | None]:
        """All cells row after row, the step from a row to the next, and the line of each row.

        The lines are None where row i stands on line first_line + i.
        """
        text, width = self._text, len(self.heads)
        if text and '"' not in text and "#" not in text and "%" not in text:
            # Each line end becomes a cell of its own: the rows are all of one width if every such cell is in its place.
            if self.delimiter is None:
                cells = text.replace("\n", " | ").split()
                ends = "|"
            else:
                cells = text.replace("\n", f"{self.delimiter}\n{self.delimiter}").split(self.delimiter)
                ends = "\n"
            rows = text.count("\n") + 1
            if len(cells) == rows * (width + 1) - 1 and cells[width :: width + 1].count(ends) == rows - 1:
                return cells, width + 1, None
        cells, lines = self._checked_cells(text.split("\n") if text else [])
        return cells, width, lines

    def _checked_cells(self, lines: list[str]) -> tuple[list[str], list[int]]:
        width = len(self.heads)
        cells: list[str] = []
        numbers: list[int] = []
        for number, line in enumerate(lines, self.first_line):
            stripped = line.strip()
            if not stripped or stripped[0] in "#%":
                continue
            row = split_cells(line, self.delimiter)
            while len(row) > width and not row[-1]:
                row.pop()  # a delimiter at the end of the line
            if not any(row):
                continue
            if len(row) != width:
                raise CastFileError(
                    f"{self.where}: line {number} has {len(row)} cells where the heads name {width} columns; "
                    "give every line one cell per column (empty where a value is missing)"
                )
            cells += row
            numbers.append(number)
        return cells, numbers

    def __len__(self) -> int:
        if self._numbers is not None:
            return len(self._numbers)
        cells, step, _ = self._cells
        return (len(cells) + step - len(self.heads)) // step

    def line_of(self, row: int) -> int:
        """The line of the file on which a row stands."""
        numbers = self._cells[2]
        return self.first_line + row if numbers is None else numbers[row]

    def texts(self, column: int) -> list[str]:
        """A column as text."""
        cells, step, _ = self._cells
        return cells[column::step]

    def numbers(self, column: int) -> NDArray[np.float64]:
        """A column as numbers, NaN where a cell is empty or says so; fill values are left as they are.

        Raises
        ------
        CastFileError
            A cell holds anything else.
        """
        if self._numbers is not None:
            return np.ascontiguousarray(self._numbers[:, column])
        texts = self.texts(column)
        if "_" not in self._text:  # which float takes for a number: 1_000
            try:
                return np.fromiter(map(float, texts), np.float64, len(texts))
            except ValueError:
                pass  # gaps, decimal commas, or text: cell by cell
        texts = [text.strip() for text in texts]
        comma = self.delimiter != "," and any("," in text for text in texts)
        return np.array([self._number(text, row, column, comma=comma) for row, text in enumerate(texts)], np.float64)

    def _number(self, text: str, row: int, column: int, *, comma: bool) -> float:
        if text.lower() in _MISSING_WORDS:
            return np.nan
        plain = text.replace("−", "-")  # the minus sign of typesetters
        if comma:
            if "." in plain:
                raise self._error(row, column, text, "the column has decimal commas and points; use one of them")
            plain = plain.replace(",", ".", 1)
        if not _PLAIN_NUMBER.fullmatch(plain):
            trouble = "it is not a number; correct it, or leave the cell empty if there is no value"
            raise self._error(row, column, text, trouble)
        return float(plain.replace("D", "e").replace("d", "e"))

    def _error(self, row: int, column: int, text: str, trouble: str) -> CastFileError:
        shown = text if len(text) <= 40 else text[:37] + "..."
        place = f"{self.where}: line {self.line_of(row)}, column {self.heads[column]!r}"
        return CastFileError(f"{place}: {shown!r}: {trouble}")
