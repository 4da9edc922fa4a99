"""How long a classic netCDF file must be: the library fills what is missing at its end with zeros and says nothing.

Source: NetCDF Classic Format Specification (Unidata), formats CDF-1, CDF-2 and CDF-5.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import BinaryIO

_TYPE_SIZES = {1: 1, 2: 1, 3: 2, 4: 4, 5: 4, 6: 8, 7: 1, 8: 2, 9: 4, 10: 8, 11: 8}
_DIMENSION, _VARIABLE, _ATTRIBUTE = 10, 11, 12


class CutShortError(ValueError):
    """The header itself ends early, or is none."""


@dataclass
class _Header:
    """Reads the parts of a header one after the other; all integers are big-endian."""

    file: BinaryIO
    version: int

    def number(self, size: int) -> int:
        data = self.file.read(size)
        if len(data) != size:
            raise CutShortError("its header ends early")
        return int.from_bytes(data, "big")

    def count(self) -> int:
        return self.number(8 if self.version == 5 else 4)

    def offset(self) -> int:
        return self.number(4 if self.version == 1 else 8)

    def skip(self, size: int) -> None:
        padded = size + -size % 4
        if len(self.file.read(min(padded, 2**31))) != padded:
            raise CutShortError("its header ends early")

    def size_of_type(self) -> int:
        kind = self.number(4)
        if kind not in _TYPE_SIZES:
            raise CutShortError(f"its header names a type {kind}")
        return _TYPE_SIZES[kind]

    def list_length(self, tag: int) -> int:
        found, length = self.number(4), self.count()
        if found != tag and (found or length):
            raise CutShortError("its header is damaged")
        return length

    def skip_attributes(self) -> None:
        for _ in range(self.list_length(_ATTRIBUTE)):
            self.skip(self.count())
            size = self.size_of_type()
            self.skip(size * self.count())


def needed_size(file: BinaryIO) -> int:
    """The least number of bytes that a classic netCDF file must have to hold all that its header promises.

    Parameters
    ----------
    file : binary file
        At its beginning.

    Returns
    -------
    int
        Bytes; padding behind the last value is not counted.

    Raises
    ------
    CutShortError
        The header is cut short or damaged.
    """
    magic = file.read(4)
    header = _Header(file, magic[3])
    records = header.count()
    if records == 256 ** (8 if header.version == 5 else 4) - 1:
        records = 0  # being written as a stream: the header does not say
    lengths = []
    for _ in range(header.list_length(_DIMENSION)):
        header.skip(header.count())
        lengths.append(header.count())
    header.skip_attributes()
    fixed, by_record = [file.tell()], []
    for _ in range(header.list_length(_VARIABLE)):
        header.skip(header.count())
        dimensions = [header.count() for _ in range(header.count())]
        header.skip_attributes()
        value = header.size_of_type()
        header.count()  # the size stated here is clipped for large variables
        begin = header.offset()
        if any(index >= len(lengths) for index in dimensions):
            raise CutShortError("its header is damaged")
        shape = [lengths[index] for index in dimensions]
        if shape and shape[0] == 0:
            by_record.append((begin, value * math.prod(shape[1:])))
        else:
            fixed.append(begin + value * math.prod(shape))
    fixed.append(file.tell())
    # each record holds one part of every such variable, padded to four bytes unless it is alone
    step = sum(size + -size % 4 for _, size in by_record) if len(by_record) > 1 else sum(size for _, size in by_record)
    if records:
        fixed += [begin + (records - 1) * step + size for begin, size in by_record]
    return max(fixed)
