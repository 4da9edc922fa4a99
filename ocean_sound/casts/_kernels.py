"""The kernel that turns the rows of a CSV into columns of numbers.

A decimal number of at most eighteen digits is an integer times a power of ten, and both are exact as numbers of the
machine where the integer is below 2**53 and the power at most 22: their product or quotient, rounded once, is the
nearest float64 (Clinger 1990, 'How to read floating point numbers accurately'). Longer integers are kept as a sum of
two floats, the product or quotient is reckoned to about twice the precision (Dekker 1971), and where adding its error
either way would round to another float64 the number is left to Python. So each is the float64 nearest to the text.
"""

# mypy: ignore-errors

from __future__ import annotations

import numpy as np

from .._numba import kernel

FINE, NOT_PLAIN, TOO_MANY = 0, 1, 2
"""What `parse_rows` says: all read; something that this kernel does not read; an output is too small."""
SKIP = -1
"""A column that is not read, among the kinds of columns."""
FIRST, GROUPS, CONSTANT = 0, 1, 2
"""What is done with a column of text: the cell of the first row is wanted; its changes part the casts; it must not
change within a cast."""

_LF, _CR, _BLANK, _HASH, _PERCENT, _PLUS, _MINUS = 10, 13, 32, 35, 37, 43, 45
_ZERO, _NINE, _UPPER_E, _LOWER_E = 48, 57, 69, 101
_POWERS = 10.0 ** np.arange(23)
_SHORT = 15  # characters of digits and point, so that the integer is exact
_MOST_MISSES = 8  # rows of something else, after which rows of plain numbers are no longer hoped for
_MOST_DIGITS, _EXACT, _LARGEST_POWER = 18, 2**53, 22
_SPLIT = 134217729.0  # 2**27 + 1, which parts a float64 into two halves
_ERROR = 2.0**-95  # relative; the arithmetic of two floats errs by less than 2**-100


@kernel
def _two_product(a, b):
    """A product and its rounding error, exactly (Dekker 1971)."""
    product = a * b
    wide = _SPLIT * a
    a_high = wide - (wide - a)
    a_low = a - a_high
    wide = _SPLIT * b
    b_high = wide - (wide - b)
    b_low = b - b_high
    return product, ((a_high * b_high - product) + a_high * b_low + a_low * b_high) + a_low * b_low


@kernel
def scaled(whole, power):
    """An integer times a power of ten, rounded to the nearest float64; NaN where that can't be told.

    The integer is at least 0 and below 10**18, the power within 22 of zero.
    """
    high = float(whole)
    if whole <= _EXACT:
        return high * _POWERS[power] if power >= 0 else high / _POWERS[-power]
    low = float(whole - np.int64(high))
    if power >= 0:
        scale = _POWERS[power]
        first, rest = _two_product(high, scale)
        rest += low * scale
    else:
        scale = _POWERS[-power]
        first = high / scale
        product, error = _two_product(first, scale)
        rest = (((high - product) - error) + low) / scale
    margin = first * _ERROR
    result = first + rest
    return result if first + (rest - margin) == result and first + (rest + margin) == result else np.nan


@kernel
def number(data, begin, end, point):
    """The number between two places of a text, blanks around it taken off already; NaN where it is not so plain."""
    at, negative = begin, False
    if data[at] == _MINUS or data[at] == _PLUS:
        negative = data[at] == _MINUS
        at += 1
    whole, digits, places, seen, any_digit = np.int64(0), 0, 0, False, False
    while at < end:
        mark = data[at]
        if _ZERO <= mark <= _NINE:
            if digits >= _MOST_DIGITS:
                return np.nan
            whole = whole * 10 + np.int64(mark - _ZERO)
            digits += whole != 0
            places += seen
            any_digit = True
        elif mark == point and not seen:
            seen = True
        else:
            break
        at += 1
    if not any_digit:
        return np.nan
    power = -places
    if at < end:
        if data[at] != _UPPER_E and data[at] != _LOWER_E:
            return np.nan
        at += 1
        sign = 1
        if at < end and (data[at] == _MINUS or data[at] == _PLUS):
            sign = -1 if data[at] == _MINUS else 1
            at += 1
        if at == end or end - at > 3:
            return np.nan
        exponent = 0
        while at < end:
            if not _ZERO <= data[at] <= _NINE:
                return np.nan
            exponent = exponent * 10 + np.int64(data[at] - _ZERO)
            at += 1
        power += sign * exponent
    if whole == 0:
        return -0.0 if negative else 0.0
    if not -_LARGEST_POWER <= power <= _LARGEST_POWER:
        return np.nan
    value = scaled(whole, power)
    return -value if negative else value


@kernel
def _ends_line(data, at, size):
    """Whether a line ends by a carriage return and a line feed here."""
    return data[at] == _CR and at + 1 < size and data[at + 1] == _LF


@kernel
def _short_number(data, begin, size, delimiter, point):
    """A number of at most fifteen digits and the end of its cell; -1 for the end where the cell is anything else."""
    at, negative = begin, data[begin] == _MINUS
    at += negative
    first, stop = at, min(size, at + _SHORT)
    whole = np.int64(0)
    while at < stop:
        digit = np.int64(data[at]) - _ZERO
        if digit < 0 or digit > 9:
            break
        whole = whole * 10 + digit
        at += 1
    places = 0
    if at < stop and data[at] == point:
        at += 1
        places = at
        while at < stop:
            digit = np.int64(data[at]) - _ZERO
            if digit < 0 or digit > 9:
                break
            whole = whole * 10 + digit
            at += 1
        places = at - places
        first += 1
    if at <= first:
        return np.nan, -1
    if at < size and data[at] != delimiter and data[at] != _LF and not _ends_line(data, at, size):
        return np.nan, -1
    value = float(whole) / _POWERS[places]
    return -value if negative else value, at


@kernel
def _plain_rows(data, begin, delimiter, point, kinds, numbers, row):
    """Read rows of short numbers and nothing else, one mark after another.

    Returned are the place behind the last such row and the place for the next level; the arguments are as for
    `parse_rows`.
    """
    size, width, capacity = data.size, kinds.size, numbers.shape[1]
    after, start, dot, column, negative, whole = begin, begin, -1, 0, False, np.int64(0)
    for at in range(begin, size):
        mark = np.int64(data[at])
        digit = mark - _ZERO
        if 0 <= digit <= 9:
            whole = whole * 10 + digit
        elif mark == point and dot < 0:
            dot = at
        elif mark in (delimiter, _LF):
            length, places = at - start, 0
            if dot >= 0:
                length, places = length - 1, at - dot - 1
            ended = mark == _LF
            if length < 1 or length > _SHORT or column >= width or row >= capacity or ended != (column == width - 1):
                break
            if kinds[column] >= 0:
                value = float(whole) / _POWERS[places]
                numbers[kinds[column], row] = -value if negative else value
            column, start, dot, negative, whole = column + 1, at + 1, -1, False, np.int64(0)
            if ended:
                column, after, row = 0, start, row + 1
        elif mark == _MINUS and at == start and not negative:
            negative = True
            start += 1
        elif mark == _BLANK and at == start and not negative:
            start += 1
        elif mark == _CR and at + 1 < size and data[at + 1] == _LF:
            start += 1  # so that it does not count
            dot += dot >= 0
        else:
            break
    return after, row


@kernel
def _same(data, begin, end, other, other_end):
    if end - begin != other_end - other:
        return False
    for step in range(end - begin):  # noqa: SIM110  # no generators in kernels
        if data[begin + step] != data[other + step]:
            return False
    return True


@kernel
def parse_rows(data, begin, delimiter, point, kinds, label_kinds, numbers, row, odd, group_rows, cells, previous):
    """Read rows of cells.

    Parameters
    ----------
    data : uint8, shape (bytes,)
        The text, ASCII from `begin` on and without quotes.
    begin : int
        Where the rows begin.
    delimiter, point : int
        The marks between cells and before decimals.
    kinds : int64, shape (columns,)
        `SKIP`; from 0 the row of `numbers` that takes the column; from -2 downward the label that it is.
    label_kinds : int64, shape (labels,)
        What is done with each label.
    numbers : float64, shape (columns of numbers, capacity)
        Filled from `row` on; NaN where a cell is empty.
    row : int
        The first free place.
    odd : int64, shape (any, 4)
        Takes the place, the row of `numbers`, the begin and the end of each cell that is no plain number.
    group_rows : int64, shape (any,)
        Takes the place of the first level of each cast.
    cells : int64, shape (any, labels, 2)
        Takes the begin and end of each label on that level.
    previous : int64, shape (labels, 2)
        For use in here.

    Returns
    -------
    status, end, odd cells, casts : int
        `end` is the place behind the last level.
    """
    size, width = data.size, kinds.size
    capacity, most_odd, most_groups = numbers.shape[1], odd.shape[0], group_rows.size
    odds, groups, at = 0, 0, begin
    misses = _MOST_MISSES if label_kinds.size else 0
    while at < size:
        if misses < _MOST_MISSES:
            first = row
            at, row = _plain_rows(data, at, delimiter, point, kinds, numbers, row)
            misses = 0 if row > first else misses + 1
            if row > first and groups == 0:
                group_rows[0], groups = first, 1
            if at >= size:
                break
        while at < size and data[at] == _BLANK:
            at += 1
        if at < size and (data[at] == _HASH or data[at] == _PERCENT):
            while at < size and data[at] != _LF:
                if data[at] < _BLANK and not _ends_line(data, at, size):
                    return NOT_PLAIN, row, odds, groups
                at += 1
            at += 1
            continue
        if row >= capacity:
            return TOO_MANY, row, odds, groups
        column, anything, changed, ended, first_odd = 0, False, groups == 0, False, odds
        while not ended:
            while at < size and data[at] == _BLANK:
                at += 1
            cell, last = at, at  # the cell without the blanks around it
            if at < size and column < width and kinds[column] >= 0:
                value, end = _short_number(data, at, size, delimiter, point)
                if end >= 0:
                    numbers[kinds[column], row] = value
                    anything = True
                    ended = end >= size or data[end] != delimiter
                    column += 1
                    at = end + 2 if ended and end < size and data[end] == _CR else end + 1
                    continue
            while at < size and data[at] != delimiter and data[at] != _LF:
                mark = data[at]
                if _ends_line(data, at, size):
                    break
                if mark < _BLANK:
                    return NOT_PLAIN, row, odds, groups
                at += 1
                if mark != _BLANK:
                    last = at
            ended = at >= size or data[at] != delimiter
            anything |= last > cell
            if column >= width:
                if last > cell:
                    return NOT_PLAIN, row, odds, groups
            elif kinds[column] >= 0:
                value = np.nan
                if last > cell:
                    value = number(data, cell, last, point)
                    if np.isnan(value):
                        if odds >= most_odd:
                            return NOT_PLAIN, row, odds, groups
                        odd[odds, 0], odd[odds, 1], odd[odds, 2], odd[odds, 3] = row, kinds[column], cell, last
                        odds += 1
                numbers[kinds[column], row] = value
            elif kinds[column] != SKIP:
                label = -2 - kinds[column]
                if label_kinds[label] == GROUPS and not changed:
                    changed = not _same(data, cell, last, previous[label, 0], previous[label, 1])
                previous[label, 0], previous[label, 1] = cell, last
            column += 1
            if at < size and data[at] == _CR:
                at += 1
            at += 1
        if not anything:
            odds = first_odd
            continue
        if column < width:
            return NOT_PLAIN, row, odds, groups
        if changed:
            if groups >= most_groups:
                return NOT_PLAIN, row, odds, groups
            group_rows[groups] = row
            for label in range(label_kinds.size):
                cells[groups, label, 0], cells[groups, label, 1] = previous[label, 0], previous[label, 1]
            groups += 1
        else:
            for label in range(label_kinds.size):
                if label_kinds[label] == CONSTANT and not _same(
                    data,
                    previous[label, 0],
                    previous[label, 1],
                    cells[groups - 1, label, 0],
                    cells[groups - 1, label, 1],
                ):
                    return NOT_PLAIN, row, odds, groups
        row += 1
    return FINE, row, odds, groups
