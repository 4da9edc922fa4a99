"""Plain decimal numbers turned from text into floats all at once.

A number such as ``-12.345`` is the integer 12345 over 10**3. With at most fifteen digits both are exact as float64,
so their quotient, rounded once by the hardware, is the float nearest to the number: bit for bit what `float` gives,
at a fraction of its cost (Clinger 1990, 'How to read floating point numbers accurately', gives the argument).
Whatever is not so plain is left to `float`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

_MOST_DIGITS = 15
_POWERS = 10.0 ** np.arange(_MOST_DIGITS + 1)
_PLACES = np.outer(np.arange(10), _POWERS).ravel()  # what a digit is worth in its place; all exact: 9e15 < 2**53
_NEWLINE, _SPACE, _MINUS, _POINT, _ZERO = b"\n -.0"


def plain_numbers(text: str, delimiter: str, width: int) -> NDArray[np.float64] | None:
    r"""A table of plain decimal numbers.

    Parameters
    ----------
    text : str
        Rows parted by line ends, none at the end.
    delimiter : str
        One character between cells.
    width : int
        Cells in a row.

    Returns
    -------
    ndarray of shape (rows, width) or None
        None if any cell is anything but digits with at most one point, a minus before them and blanks around, if it
        has no digit or more than fifteen, or if a row has another number of cells.

    Examples
    --------
    >>> plain_numbers("1,-2.5\n3,.125", ",", 2)
    array([[ 1.   , -2.5  ],
           [ 3.   ,  0.125]])
    >>> plain_numbers("1,2\n3", ",", 2) is None
    True
    """
    if not text or not text.isascii():
        return None
    marks = np.frombuffer(f"{text}\n".encode("ascii"), np.uint8)
    part = marks == ord(delimiter)
    part |= marks == _NEWLINE
    ends = np.flatnonzero(part)
    line_ends = marks[ends] == _NEWLINE
    rows, rest = divmod(ends.size, width)
    if rest or np.count_nonzero(line_ends) != rows or not line_ends[width - 1 :: width].all():
        return None
    values = marks - np.uint8(_ZERO)  # wraps round: only digits end up below ten
    digit = values < 10
    points, minuses = np.flatnonzero(marks == _POINT), np.flatnonzero(marks == _MINUS)
    blanks = np.count_nonzero(marks == _SPACE)
    if np.count_nonzero(digit) + ends.size + points.size + minuses.size + blanks != marks.size:
        return None
    before = np.cumsum(digit, dtype=np.int32)
    digits_to_end = before[ends]
    digits = np.diff(digits_to_end, prepend=np.int32(0))
    if digits.min() < 1 or digits.max() > _MOST_DIGITS:
        return None
    if not _in_place(marks, part, minuses, ends.size, blanks=bool(blanks)):
        return None
    powers = np.repeat(digits_to_end, digits) - np.arange(1, before[-1] + 1, dtype=np.int32)
    powers += np.compress(digit, values) * np.int32(_POWERS.size)
    whole = np.add.reduceat(_PLACES.take(powers), digits_to_end - digits)
    if points.size:
        cells = np.searchsorted(ends, points)
        if points.size > 1 and not np.diff(cells).all():
            return None  # two points in one cell
        whole[cells] /= _POWERS[digits_to_end[cells] - before[points]]
    if minuses.size:
        cells = np.searchsorted(ends, minuses)
        whole[cells] = -whole[cells]
    return whole.reshape(rows, width)


def _in_place(
    marks: NDArray[np.uint8], part: NDArray[np.bool_], minuses: NDArray[np.int64], cells: int, *, blanks: bool
) -> bool:
    """Whether each minus begins its cell, and no blank stands inside a number (so that '1 2' is not taken for 12)."""
    outside = part | (marks == _SPACE) if blanks else part
    begins = ~outside
    begins[1:] &= outside[:-1]
    return bool(begins[minuses].all()) and (not blanks or np.count_nonzero(begins) == cells)
