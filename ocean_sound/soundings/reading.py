"""Soundings read from netCDF, CSV or an xarray dataset of any size, in blocks of pings."""

from __future__ import annotations

import mmap
from abc import ABC, abstractmethod
from dataclasses import dataclass, field
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from ..casts.classic import CutShortError, open_classic
from ..errors import InputError
from ..files import HDF5_LOCK
from .columns import CASES, INPUTS, OUTPUTS, Column, PingBlock, missing_line
from .decoding import Decoder, unpacked

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping
    from typing import Self

    import xarray
    from numpy.typing import NDArray

BLOCK = 100_000
"""Beams in a block, about."""

_LONGEST_CHUNK = 8  # times a block: chunks of more pings than that are read in parts
_CACHE = 64 * 2**20  # bytes of a variable's chunks that may be kept while blocks pass through them
ASIDE = {"speed_over_ground", "time"}  # a value of these that can't be does not spoil the sounding
_REJECTED = (4, 9)


@dataclass(frozen=True, eq=False)
class Slab:
    """A block of pings, and what else the file has of them, to be kept as it is.

    Parameters
    ----------
    block : PingBlock
    kept : mapping of str to numpy.ndarray, each of shape (n,) or (n, m)
        Only where it was asked for: every column of the input but those in the block, decoded.
    """

    block: PingBlock
    kept: Mapping[str, NDArray[Any]] = field(default_factory=dict)


class Soundings(ABC):
    """Soundings of one source, read in blocks.

    Attributes
    ----------
    where : str
        The file, for messages.
    dimensions : tuple of str
        Of one name or two: pings (or soundings), and beams.
    shape : tuple of int
        Pings and beams of each; one beam where the file has a single dimension.
    case : str
        Of `CASES`.
    """

    where: str
    dimensions: tuple[str, ...]
    shape: tuple[int, int]
    case: str
    path: Path | None = None
    comments: tuple[str, ...] = ()

    @property
    @abstractmethod
    def names(self) -> tuple[str, ...]:
        """Columns that were recognised."""

    @property
    @abstractmethod
    def kept_names(self) -> tuple[str, ...]:
        """Columns that are not recognised but kept where a table is written."""

    def is_number(self, kept: str) -> bool:  # noqa: ARG002
        """Of a table without types: whether a column that is not recognised holds numbers only."""
        return True

    @abstractmethod
    def unit_of(self, kept: str) -> str:
        """The unit of a column that is not recognised, as it stands there; empty for none."""

    @abstractmethod
    def slabs(self, *, keep: bool = False) -> Iterator[Slab]:
        """All of it, in order; `keep`: with the columns that are not recognised."""

    @abstractmethod
    def extent(self, name: str) -> tuple[float, float]:
        """Least and largest value of a column of numbers over the whole; NaN where it has none."""

    @property
    @abstractmethod
    def notes(self) -> tuple[str, ...]:
        """One line for each thing that was assumed or converted, or was found to be impossible so far."""

    @abstractmethod
    def close(self) -> None:
        """Let go of the file."""

    def blocks(self) -> Iterator[PingBlock]:
        """All of it, in order."""
        for slab in self.slabs():
            yield slab.block

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()


def open_soundings(
    source: str | PathLike[str] | xarray.Dataset, *, case: str = "beams", beams: int = BLOCK
) -> Soundings:
    """Soundings of a netCDF or CSV file, or of a dataset in memory, ready to be read in blocks.

    Parameters
    ----------
    source : path-like or xarray.Dataset
        NetCDF of any format (dimension ``sounding``, or ``ping`` and ``beam``, by whatever names), variables by the
        names of `columns.INPUTS` or by their CF standard names; CSV with such names as heads, units in brackets, ``#``
        before comments and times as ISO 8601. A dataset is never changed.
    case : str
        What it must have: a key of `columns.CASES`.
    beams : int
        About how many beams a block is to have.

    Returns
    -------
    Soundings
        To be closed, or used in a ``with`` statement.

    Raises
    ------
    InputError
        It can't be read, lacks variables (all are named), or one has a unit or dimension that can't be.

    Examples
    --------
    >>> import xarray as xr
    >>> made = {"two_way_travel_time": [0.1, 0.2], "across_track_angle": [-30.0, 30.0], "transducer_depth": [4.0, 4.0]}
    >>> with open_soundings(xr.Dataset({name: ("sounding", values) for name, values in made.items()})) as soundings:
    ...     [(block.start, block.shape) for block in soundings.blocks()]
    [(0, (2, 1))]
    """
    if case not in CASES:
        raise InputError(f"case is {case!r}: one of {', '.join(CASES)} would be right")
    if beams < 1:
        raise InputError(f"{beams} beams in a block: at least one is needed")
    if not isinstance(source, (str, PathLike)):
        return _Gridded(_of_dataset(source), "the dataset", case, beams)
    path = Path(source)
    try:
        with path.open("rb") as file:
            head = file.read(8)
    except OSError as error:
        raise InputError(f"{path}: can't be read: {error.strerror or error}") from error
    if head[:3] == b"CDF" or head[1:4] == b"HDF":
        return _Gridded(_of_file(path, classic=head[:3] == b"CDF"), str(path), case, beams, path)
    from .reading_csv import CsvSoundings

    return CsvSoundings(path, case, beams)


@dataclass(frozen=True, eq=False)
class _Stored:
    """A variable, not read before it is asked for: from a row to before another of its first dimension."""

    dimensions: tuple[str, ...]
    shape: tuple[int, ...]
    dtype: np.dtype[Any]
    attributes: Mapping[str, Any]
    read: Callable[[int, int], NDArray[Any]]
    chunk: int = 1
    """Rows in a chunk."""


@dataclass(frozen=True, eq=False)
class _Opened:
    variables: Mapping[str, _Stored]
    close: Callable[[], None]


def _of_dataset(dataset: xarray.Dataset) -> _Opened:
    def stored(name: Any) -> _Stored:
        variable = dataset.variables[name]

        def read(first: int, last: int) -> NDArray[Any]:
            part = variable[first:last] if variable.ndim else variable
            return np.asarray(part.values)

        return _Stored(tuple(map(str, variable.dims)), variable.shape, variable.dtype, dict(variable.attrs), read)

    return _Opened({str(name): stored(name) for name in dataset.variables}, lambda: None)


def _of_file(path: Path, *, classic: bool) -> _Opened:
    import netCDF4

    if classic:
        _check_whole(path)
    with HDF5_LOCK:
        try:
            file = netCDF4.Dataset(path)
            file.set_auto_maskandscale(False)
            variables = {name: _stored(path, variable) for name, variable in file.variables.items()}
        except (OSError, RuntimeError) as error:
            raise InputError(
                f"{path}: can't be opened as netCDF, it is cut short or damaged ({error}); fetch it again"
            ) from error

    def close() -> None:
        with HDF5_LOCK:
            if file.isopen():
                file.close()

    return _Opened(variables, close)


def _check_whole(path: Path) -> None:
    """The netCDF library fills up a classic file that is cut short with zeros, and says nothing."""
    with path.open("rb") as file, mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ) as data:
        try:
            store = open_classic(data)
        except CutShortError as error:
            raise InputError(f"{path}: is cut short or damaged, {error}; fetch it again") from error
        del store


def _stored(path: Path, variable: Any) -> _Stored:
    def read(first: int, last: int) -> NDArray[Any]:
        with HDF5_LOCK:
            try:
                return np.asarray(variable[first:last] if variable.ndim else variable[...])
            except (OSError, RuntimeError, IndexError) as error:
                raise InputError(
                    f"{path}: {variable.name} can't be read, the file is damaged ({error}); fetch it again"
                ) from error

    chunks = variable.chunking() if variable.ndim else None
    rows = 1
    if isinstance(chunks, list):
        rows = int(chunks[0])
        across = int(
            np.prod([-(-size // chunk) * chunk for size, chunk in zip(variable.shape[1:], chunks[1:], strict=True)])
        )
        size = rows * across * variable.dtype.itemsize if variable.dtype is not str else 0
        if 0 < size <= _CACHE:
            variable.set_var_chunk_cache(size=max(2 * size, 2**20))
    kind = np.dtype(object) if variable.dtype is str else np.dtype(variable.dtype)
    attributes = {name: variable.getncattr(name) for name in variable.ncattrs()}
    return _Stored(variable.dimensions, variable.shape, kind, attributes, read, rows)


class _Gridded(Soundings):
    """Of netCDF or a dataset: variables on pings, beams or both."""

    def __init__(self, opened: _Opened, where: str, case: str, beams: int, path: Path | None = None) -> None:
        self.where, self.case, self.path = where, case, path
        self._opened = opened
        self._extents: dict[str, tuple[float, float]] = {}
        try:
            self._found = self._recognised()
            line = missing_line(case, self._found, where)
            if line is not None:
                raise InputError(line)
            self.dimensions = self._dimensions()
            self._decoders = {name: self._decoder(name, key) for name, key in self._found.items()}
        except BaseException:
            opened.close()
            raise
        sizes = self._sizes()
        self.shape = (sizes[self.dimensions[0]], sizes[self.dimensions[1]] if len(self.dimensions) == 2 else 1)
        self._rows = self._rows_of_block(beams)

    def close(self) -> None:
        self._opened.close()

    @property
    def names(self) -> tuple[str, ...]:
        return tuple(self._found)

    @property
    def kept_names(self) -> tuple[str, ...]:
        rows, taken = self.dimensions[0], set(self._found.values())
        return tuple(
            name
            for name, variable in self._opened.variables.items()
            if name not in taken and rows in variable.dimensions and set(variable.dimensions) <= set(self.dimensions)
        )

    @property
    def notes(self) -> tuple[str, ...]:
        lines = [f"{name} is read from {key}" for name, key in self._found.items() if name != key]
        for name, decoder in self._decoders.items():
            lines += decoder.notes
            if decoder.impossible:
                lines.append(
                    f"{name}: {decoder.impossible} values are impossible; {decoder.column.range_text} would be right"
                )
        return tuple(lines)

    def unit_of(self, kept: str) -> str:
        units = self._opened.variables[kept].attributes.get("units", "")
        return units if isinstance(units, str) else ""

    def _recognised(self) -> dict[str, str]:
        """Our names, and those of the file: the same, or one that has the CF standard name."""
        variables = self._opened.variables
        wanted: dict[str, Column] = {**INPUTS, **{name: OUTPUTS[name] for name in corrected_columns(self.case)}}
        found = {name: name for name in wanted if name in variables}
        for name, column in wanted.items():
            if name in found or not column.standard_name:
                continue
            having = [
                key for key, one in variables.items() if one.attributes.get("standard_name") == column.standard_name
            ]
            having = [key for key in having if key not in OUTPUTS]
            if len(having) == 1:
                found[name] = having[0]
        return found

    def _dimensions(self) -> tuple[str, ...]:
        variables = self._opened.variables
        main = next(name for name in CASES[self.case] if {**INPUTS, **OUTPUTS}[name].per == "beam")
        dimensions = variables[self._found[main]].dimensions
        if len(dimensions) not in (1, 2):
            raise InputError(
                f"{self.where}: {main} has the dimensions ({', '.join(dimensions)}); (sounding) or (ping, beam) would "
                "be right"
            )
        for name, key in self._found.items():
            own = variables[key].dimensions
            column = INPUTS.get(name)
            if len(dimensions) == 2 and column is not None and column.per == "ping" and own == dimensions[1:]:
                other = [n for n, k in self._found.items() if variables[k].dimensions == dimensions[:1] and n in INPUTS]
                if not any(INPUTS[n].per == "ping" for n in other):
                    raise InputError(
                        f"{self.where}: {main} has the dimensions ({', '.join(dimensions)}) and {name} has ({own[0]}); "
                        f"({dimensions[1]}, {dimensions[0]}) would be right for {main}"
                    )
            if own not in ((), dimensions[:1], dimensions[1:], dimensions):
                raise InputError(
                    f"{self.where}: {name} has the dimensions ({', '.join(own)}); those of {main}, "
                    f"({', '.join(dimensions)}), or one of them would be right"
                )
        return dimensions

    def _sizes(self) -> dict[str, int]:
        return {
            dimension: size
            for variable in self._opened.variables.values()
            for dimension, size in zip(variable.dimensions, variable.shape, strict=True)
        }

    def _rows_of_block(self, beams: int) -> int:
        rows = max(beams // max(self.shape[1], 1), 1)
        chunk = max((self._opened.variables[key].chunk for key in self._found.values()), default=1)
        if 1 < chunk <= _LONGEST_CHUNK * rows:
            rows = max(rows // chunk, 1) * chunk
        return rows

    def _decoder(self, name: str, key: str) -> Decoder:
        variable = self._opened.variables[key]
        column = INPUTS[name] if name in INPUTS else OUTPUTS[name]
        return Decoder(column, variable.attributes, variable.dtype, f"{self.where}: {key}")

    def _read(self, name: str, first: int, last: int) -> tuple[NDArray[Any], NDArray[np.bool_] | None]:
        """A column as it stands, decoded, of some pings; of beams or of nothing where it has no pings."""
        key = self._found[name]
        variable = self._opened.variables[key]
        if variable.dimensions[:1] != self.dimensions[:1]:
            first, last = 0, self.shape[1]
        values, bad = self._decoders[name](variable.read(first, last))
        flags = self._opened.variables.get(f"{key}_flag")
        if flags is not None and flags.dimensions == variable.dimensions and flags.dtype.kind in "iu":
            reject(values, flags.read(first, last))
        return values, bad

    def slabs(self, *, keep: bool = False) -> Iterator[Slab]:
        kept = self.kept_names if keep else ()
        for decoder in self._decoders.values():
            decoder.impossible = 0
        for first in range(0, self.shape[0], self._rows):
            last = min(first + self._rows, self.shape[0])
            yield Slab(self._block(first, last), {name: self._kept(name, first, last) for name in kept})

    def _block(self, first: int, last: int) -> PingBlock:
        n, m = last - first, self.shape[1]
        pings: dict[str, NDArray[Any]] = {}
        beams: dict[str, NDArray[Any]] = {}
        impossible: NDArray[np.bool_] | None = None
        for name, decoder in self._decoders.items():
            values, bad = self._read(name, first, last)
            own = self._opened.variables[self._found[name]].dimensions
            single = len(self.dimensions) == 1
            by_beam = decoder.column.per == "beam" or own == self.dimensions[1:] != () or len(own) == 2
            if by_beam:
                beams[name] = _spread(values, own, self.dimensions, (n, m))
            else:
                pings[name] = np.full(n, values) if not own else values
            if bad is not None and name not in ASIDE:
                over = _spread(bad, own, self.dimensions, (n, m)) if not single else np.broadcast_to(bad, (n,))[:, None]
                impossible = over | (False if impossible is None else impossible)
        return PingBlock(pings, beams, first, impossible)

    def _kept(self, name: str, first: int, last: int) -> NDArray[Any]:
        variable = self._opened.variables[name]
        swapped = variable.dimensions == self.dimensions[::-1] and len(self.dimensions) == 2
        raw = variable.read(0, self.shape[1]) if swapped else variable.read(first, last)
        values = plain_values(raw, variable.attributes)
        return values[:, first:last].T if swapped else values

    def extent(self, name: str) -> tuple[float, float]:
        if name not in self._extents:
            found, long = (np.nan, np.nan), 10 * self._rows
            for first in range(0, self.shape[0], long):
                found = wider(found, self._read(name, first, min(first + long, self.shape[0]))[0])
            self._extents[name] = float(found[0]), float(found[1])
        return self._extents[name]


def wider(extent: tuple[float, float], values: NDArray[Any]) -> tuple[float, float]:
    """An extent, and the values, together."""
    low, high = (edge.reduce(values, axis=None, initial=np.nan) for edge in (np.fmin, np.fmax))
    return np.fmin(extent[0], low), np.fmax(extent[1], high)


def corrected_columns(case: str) -> tuple[str, ...]:
    """What is read of soundings that were corrected before, in that case only."""
    return ("depth", "across_track_distance", "along_track_distance") if case == "corrected" else ()


def _spread(
    values: NDArray[Any], own: tuple[str, ...], dimensions: tuple[str, ...], shape: tuple[int, int]
) -> NDArray[Any]:
    """Values on some of the dimensions of beams, on both."""
    if own == dimensions and len(dimensions) == 2:
        return values
    if own == dimensions[:1]:
        values = values[:, None]
    return np.array(np.broadcast_to(values, shape))


def reject(values: NDArray[Any], flags: NDArray[Any]) -> None:
    """Take out, in place, what a companion of QARTOD flags calls failed or missing."""
    values[np.isin(flags, _REJECTED)] = np.datetime64("NaT") if values.dtype.kind == "M" else np.nan


def plain_values(raw: NDArray[Any], attributes: Mapping[str, Any]) -> NDArray[Any]:
    """Values of a variable that is not one of ours, for a table: packing undone, missing ones NaN, text as text."""
    if raw.dtype.kind in "iu" and not {"scale_factor", "add_offset", "_FillValue", "missing_value"} & set(attributes):
        return raw
    if raw.dtype.kind in "fiu":
        return unpacked(raw, attributes)
    return raw
