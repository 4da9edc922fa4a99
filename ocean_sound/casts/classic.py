"""The classic netCDF formats, read from their bytes.

One walk over the header finds every variable and tells whether the file is whole: the netCDF library fills what is
missing at the end of a file with zeros and says nothing, so the walk would be needed anyway, and it costs less than
the library's own.

Source: NetCDF Classic Format Specification (Unidata), formats CDF-1, CDF-2 and CDF-5.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from struct import Struct
from typing import TYPE_CHECKING, Any

import numpy as np

from .store import Budget, Owner, Store, Variable

if TYPE_CHECKING:
    from mmap import mmap

    from numpy.typing import NDArray

_TYPES = {
    1: np.dtype("i1"),
    2: np.dtype("S1"),
    3: np.dtype(">i2"),
    4: np.dtype(">i4"),
    5: np.dtype(">f4"),
    6: np.dtype(">f8"),
    7: np.dtype("u1"),
    8: np.dtype(">u2"),
    9: np.dtype(">u4"),
    10: np.dtype(">i8"),
    11: np.dtype(">u8"),
}
_DIMENSION, _VARIABLE, _ATTRIBUTE = 10, 11, 12
_FOUR, _EIGHT = Struct(">I"), Struct(">Q")


class CutShortError(ValueError):
    """The header itself ends early, or is none, or promises more than there is."""


@dataclass
class _Header:
    """Reads the parts of a header one after the other; all integers are big-endian."""

    data: bytes | mmap
    version: int
    at: int = 4
    wide: Struct = field(init=False)

    def __post_init__(self) -> None:
        self.wide = _EIGHT if self.version == 5 else _FOUR

    def _number(self, kind: Struct) -> int:
        begin = self.at
        self.at = begin + kind.size
        if self.at > len(self.data):
            raise CutShortError("its header ends early")
        number: int = kind.unpack_from(self.data, begin)[0]
        return number

    def count(self) -> int:
        return self._number(self.wide)

    def offset(self) -> int:
        return self._number(_FOUR if self.version == 1 else _EIGHT)

    def skip(self, size: int) -> int:
        """Past so many bytes and their padding; where they begin."""
        begin = self.at
        self.at = begin + size + -size % 4
        if self.at > len(self.data):
            raise CutShortError("its header ends early")
        return begin

    def name(self) -> str:
        size = self.count()
        begin = self.skip(size)
        return decoded(self.data[begin : begin + size])

    def type(self) -> np.dtype[Any]:
        kind = self._number(_FOUR)
        if kind not in _TYPES:
            raise CutShortError(f"its header names a type {kind}")
        return _TYPES[kind]

    def list_length(self, tag: int) -> int:
        found, length = self._number(_FOUR), self.count()
        if found != tag and (found or length):
            raise CutShortError("its header is damaged")
        return length

    def attributes(self) -> _Attributes:
        found = {}
        for _ in range(self.list_length(_ATTRIBUTE)):
            name, kind, count = self.name(), self.type(), self.count()
            found[name] = (kind, count, self.skip(kind.itemsize * count))
        return _Attributes(self.data, found)


def decoded(data: bytes) -> str:
    """Text from bytes: UTF-8, else Latin-1, in which every byte is a letter."""
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError:
        return data.decode("latin-1")


@dataclass(eq=False)
class _Attributes(Owner):
    """Where the attributes lie; they are decoded when asked for."""

    data: bytes | mmap
    places: dict[str, tuple[np.dtype[Any], int, int]]

    def get(self, name: str) -> Any:
        place = self.places.get(name)
        if place is None:
            return None
        kind, count, begin = place
        if kind.kind == "S":
            return decoded(self.data[begin : begin + count])
        return np.frombuffer(self.data, kind, count, begin)

    def names(self) -> tuple[str, ...]:
        return tuple(self.places)


@dataclass(eq=False)
class _Variable(Variable):
    name: str
    dimensions: tuple[str, ...]
    shape: tuple[int, ...]
    dtype: np.dtype[Any]
    attributes: _Attributes
    data: bytes | mmap
    begin: int
    budget: Budget
    step: int | None = None  # bytes from one record to the next; None where it has no record dimension

    def get(self, name: str) -> Any:
        return self.attributes.get(name)

    def names(self) -> tuple[str, ...]:
        return self.attributes.names()

    def read(self) -> NDArray[Any]:
        self.budget.take(self.size)
        if self.step is None or not self.size:
            return np.frombuffer(self.data, self.dtype, self.size, self.begin if self.size else 0).reshape(self.shape)
        inner = np.empty(self.shape[1:], self.dtype).strides
        return np.ndarray(self.shape, self.dtype, self.data, self.begin, (self.step, *inner))

    def end(self) -> int:
        """One past the last byte it needs."""
        if not self.size:
            return 0
        if self.step is None:
            return self.begin + self.size * self.dtype.itemsize
        return self.begin + (self.shape[0] - 1) * self.step + math.prod(self.shape[1:]) * self.dtype.itemsize


def open_classic(data: bytes | mmap) -> Store:
    """The file in these bytes.

    Parameters
    ----------
    data : bytes or mmap
        The whole file.

    Returns
    -------
    Store

    Raises
    ------
    CutShortError
        The header is cut short or damaged, or the file is shorter than its header promises.
    """
    header = _Header(data, data[3])
    records = header.count()
    streamed = records == 256**header.wide.size - 1  # being written as a stream: the header does not say
    dimensions = {}
    for _ in range(header.list_length(_DIMENSION)):
        name = header.name()
        dimensions[name] = header.count()
    names = list(dimensions)
    attributes = header.attributes()
    budget = Budget()
    variables: dict[str, _Variable] = {}
    for _ in range(header.list_length(_VARIABLE)):
        name = header.name()
        along = [header.count() for _ in range(header.count())]
        own = header.attributes()
        kind = header.type()
        header.count()  # the size stated here is clipped for large variables
        begin = header.offset()
        if any(index >= len(names) for index in along):
            raise CutShortError("its header is damaged")
        places = tuple(names[index] for index in along)
        shape = tuple(dimensions[place] for place in places)
        variables[name] = _Variable(name, places, shape, kind, own, data, begin, budget)
    _lay_records(variables, 0 if streamed else records, len(data) if streamed else None)
    for name in [name for name, size in dimensions.items() if size == 0]:
        dimensions[name] = next((v.shape[0] for v in variables.values() if v.step is not None), 0)
    needed = max([header.at, *(variable.end() for variable in variables.values())])
    if len(data) < needed:
        raise CutShortError(f"{len(data)} bytes where its header promises {needed}")
    return Store(dimensions, variables, attributes)


def _lay_records(variables: dict[str, _Variable], records: int, size: int | None) -> None:
    """Give the variables with the unlimited dimension (of length zero in the header) their true shape and step.

    Each record holds one part of every such variable, padded to four bytes unless it is alone.
    """
    by_record = [variable for variable in variables.values() if variable.shape[:1] == (0,)]
    if any(0 in variable.shape[1:] for variable in variables.values()):
        raise CutShortError("its header is damaged")
    sizes = [math.prod(variable.shape[1:]) * variable.dtype.itemsize for variable in by_record]
    step = sum(part + -part % 4 for part in sizes) if len(sizes) > 1 else sum(sizes)
    if size is not None and step:
        records = max(size - min(variable.begin for variable in by_record), 0) // step
    for variable in by_record:
        variable.shape = (records, *variable.shape[1:])
        variable.step = step
