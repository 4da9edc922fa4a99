"""NetCDF-4, which is HDF5 by a convention, through the low level of h5py: a fraction of what the netCDF library costs.

Source: 'NetCDF-4 file format' (Unidata, NetCDF format specifications): dimensions are HDF5 dimension scales, and each
variable names its own through the attribute DIMENSION_LIST. Groups other than the root are not looked into.
"""

from __future__ import annotations

import os
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np
from h5py import h5, h5a, h5d, h5f, h5g, h5o, h5p, h5r, h5s, h5t

from .classic import decoded
from .store import Budget, Owner, Store, UnfitError, Variable

if TYPE_CHECKING:
    from numpy.typing import NDArray

_ONLY_A_DIMENSION = "This is a netCDF dimension but not a netCDF variable"
_HIDDEN = {"CLASS", "NAME", "DIMENSION_LIST", "REFERENCE_LIST", "_NCProperties", "_nc3_strict"}


class _Attributes(Owner):
    """Attributes are looked up again and again: what is there is listed once, what is asked for read once."""

    def __init__(self, place: Any) -> None:
        self._place = place
        self._read: dict[str, Any] = {}

    @cached_property
    def _there(self) -> list[str]:
        found: list[str] = []

        def note(name: bytes) -> None:
            found.append(name.decode(errors="replace"))

        h5a.iterate(self._place, note)
        return found

    def get(self, name: str) -> Any:
        if name not in self._there:
            return None
        if name not in self._read:
            self._read[name] = self._value(name)
        return self._read[name]

    def _value(self, name: str) -> Any:
        held = h5a.open(self._place, name.encode())
        kind = held.get_type()
        if isinstance(kind, h5t.TypeStringID) and not kind.is_variable_str():
            try:
                size = held.get_storage_size()
            except RuntimeError:  # a null text has none
                return ""
            if size == kind.get_size():  # one text, as the netCDF library writes them: the short way
                one = np.empty((), f"S{size}")
                held.read(one, kind)
                return decoded(one.tobytes()).rstrip("\x00")
        if held.get_space().get_simple_extent_type() == h5s.NULL:
            return ""
        values = np.empty(held.shape, kind.dtype)
        held.read(values)
        if values.dtype.kind in "SO":
            texts = [item if isinstance(item, str) else decoded(bytes(item or b"")) for item in values.ravel().tolist()]
            return " ".join(text.rstrip("\x00") for text in texts)
        return np.atleast_1d(values)

    def names(self) -> tuple[str, ...]:
        return tuple(name for name in self._there if name not in _HIDDEN and not name.startswith("_Netcdf4"))


class _Dimensions:
    """The dimensions of a file, and which of them a variable lies along."""

    def __init__(self, file: Any) -> None:
        self.sizes: dict[str, int] = {}
        self._file = file
        self._scales: dict[str, Any] = {}
        self._unlimited = False

    def add(self, name: str, place: Any) -> None:
        space = place.get_space()
        self.sizes[name] = int(place.shape[0]) if place.rank else 0
        self._scales[name] = place
        self._unlimited |= h5s.UNLIMITED in space.get_simple_extent_dims(maxdims=True)

    def of(self, name: str, place: Any, shape: tuple[int, ...]) -> tuple[str, ...]:
        """By their lengths, where no two have the same and none can grow; else as the variable's own list says."""
        if not shape:
            return ()
        if len(shape) == 1 and name in self.sizes:
            return (name,)  # a coordinate variable is its own dimension
        if not self._unlimited:
            known = list(self.sizes.values())
            if all(known.count(size) == 1 for size in shape):
                names = list(self.sizes)
                return tuple(names[known.index(size)] for size in shape)
        if name in self.sizes:
            return self._by_number(place)
        if h5a.exists(place, b"DIMENSION_LIST"):
            held = h5a.open(place, b"DIMENSION_LIST")
            values = np.empty(held.shape, held.dtype)
            held.read(values)
            return tuple(h5r.get_name(scales[0], self._file).decode().rsplit("/", 1)[-1] for scales in values)
        return tuple(f"of length {size}" for size in shape)

    def _by_number(self, place: Any) -> tuple[str, ...]:
        """For a variable of several dimensions that is itself the scale of its first, and so has no list of scales."""
        names = {int(_Attributes(scale).get("_Netcdf4Dimid")[0]): name for name, scale in self._scales.items()}
        return tuple(names[number] for number in _Attributes(place).get("_Netcdf4Coordinates").tolist())


class _Variable(Variable):
    def __init__(self, name: str, place: Any, dimensions: _Dimensions, budget: Budget) -> None:
        self.name = name
        self._place, self._all, self._budget = place, dimensions, budget
        self._attributes = _Attributes(place)

    def get(self, name: str) -> Any:
        return self._attributes.get(name)

    def names(self) -> tuple[str, ...]:
        return self._attributes.names()

    @cached_property
    def _held(self) -> tuple[int, ...]:
        return tuple(self._place.shape)

    @cached_property
    def dimensions(self) -> tuple[str, ...]:  # type: ignore[override]
        return self._all.of(self.name, self._place, self._held)

    @cached_property
    def shape(self) -> tuple[int, ...]:  # type: ignore[override]
        sizes = self._all.sizes
        return tuple(max(sizes.get(name, size), size) for name, size in zip(self.dimensions, self._held, strict=True))

    @cached_property
    def dtype(self) -> np.dtype[Any]:  # type: ignore[override]
        kind: np.dtype[Any] = self._place.dtype
        return kind

    def read(self) -> NDArray[Any]:
        self._budget.take(self.size)
        strings = self.dtype.kind == "O" and h5t.check_string_dtype(self.dtype) is not None
        if self.dtype.kind not in "biufS" and not strings:
            raise UnfitError(f"variable {self.name} is neither numbers nor text")
        values = np.empty(self._held, self.dtype)
        self._place.read(h5s.ALL, h5s.ALL, values)
        if strings:
            texts = [item if isinstance(item, str) else decoded(bytes(item or b"")) for item in values.ravel().tolist()]
            values = np.array(texts, object).reshape(self._held)
        return self._filled_up(values)

    def _filled_up(self, values: NDArray[Any]) -> NDArray[Any]:
        """To the length that an unlimited dimension has by now: another variable may have been written further."""
        if values.shape == self.shape:
            return values
        fill = self.get("_FillValue")
        full = np.zeros(self.shape, values.dtype)
        if fill is not None and not isinstance(fill, str):
            full[...] = fill.ravel()[0]
        elif values.dtype.kind == "f":
            full[...] = np.nan
        full[tuple(slice(size) for size in values.shape)] = values
        return full


def open_hdf5(path: str | None, data: bytes) -> Store:
    """The netCDF-4 file at a path or, without one, in these bytes.

    Raises
    ------
    OSError, RuntimeError, KeyError, ValueError
        As h5py does where a file is damaged.
    """
    access = h5p.create(h5p.FILE_ACCESS)
    access.set_fclose_degree(h5f.CLOSE_STRONG)
    if path is None:
        access.set_fapl_core(backing_store=False)
        access.set_file_image(data)
    file = h5f.open(b"memory.nc" if path is None else os.fsencode(path), h5f.ACC_RDONLY, access)
    try:
        root = h5g.open(file, b"/")
        budget = Budget()
        dimensions = _Dimensions(file)
        variables: dict[str, Variable] = {}
        groups: list[str] = []
        for key in _in_order(root):
            place = h5o.open(root, key)
            name = key.decode(errors="replace")
            if not isinstance(place, h5d.DatasetID):
                groups.append(name)
                continue
            found = _Variable(name, place, dimensions, budget)
            if found.get("CLASS") == "DIMENSION_SCALE":
                dimensions.add(name, place)
                if str(found.get("NAME")).startswith(_ONLY_A_DIMENSION):
                    continue
            variables[name] = found
    except BaseException:
        file.close()
        raise
    return Store(dimensions.sizes, variables, _Attributes(root), file.close, tuple(groups))


def _in_order(root: Any) -> list[bytes]:
    """Names as they were written, where the file has kept their order, else by the alphabet."""
    found: list[bytes] = []

    def note(name: bytes) -> None:
        found.append(name)

    tracked = root.get_create_plist().get_link_creation_order() & h5p.CRT_ORDER_TRACKED
    root.links.iterate(note, idx_type=h5.INDEX_CRT_ORDER if tracked else h5.INDEX_NAME)
    return found
