"""NetCDF-4, which is HDF5 by a convention, through the low level of h5py: a fraction of what the netCDF library costs.

Source: 'NetCDF-4 file format' (Unidata, NetCDF format specifications): dimensions are HDF5 dimension scales, and each
variable names its own through the attribute DIMENSION_LIST. Groups other than the root are not looked into.
"""

from __future__ import annotations

import os
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np
from h5py import h5, h5a, h5d, h5f, h5g, h5o, h5p, h5r, h5s, h5t

from .classic import decoded
from .store import Budget, Owner, Store, UnfitError, Variable

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

_ONLY_A_DIMENSION = "This is a netCDF dimension but not a netCDF variable"
_HIDDEN = {"CLASS", "NAME", "DIMENSION_LIST", "REFERENCE_LIST", "_NCProperties", "_nc3_strict"}


@lru_cache(maxsize=256)
def _number_type(kind: bytes) -> tuple[np.dtype[Any], h5t.TypeID]:
    """How numbers of a type, as HDF5 encodes it, are held in memory: for numpy, and for HDF5."""
    found = h5t.decode(kind).dtype
    return found, h5t.py_create(found)


def _held_as(kind: Any) -> tuple[np.dtype[Any], Any]:
    """The same of any type; h5py finds out itself what HDF5 wants to know where None stands."""
    if isinstance(kind, h5t.TypeIntegerID | h5t.TypeFloatID):
        return _number_type(kind.encode())
    return kind.dtype, None


class _Once:
    """A property that is found out once; that of functools takes a lock each time, thirty times a file."""

    def __init__(self, found: Callable[[Any], Any]) -> None:
        self._found = found
        self._name = found.__name__
        self.__doc__ = found.__doc__

    def __get__(self, owner: Any, kind: type | None = None) -> Any:
        value = self._found(owner)
        vars(owner)[self._name] = value  # from now on this is found first
        return value


class _Attributes(Owner):
    """Attributes are looked up again and again: what is there is listed once, what is asked for read once."""

    def __init__(self, place: Any) -> None:
        self._place = place
        self._read: dict[str, Any] = {}
        self._texts: dict[str, str] = {}

    @_Once
    def _there(self) -> dict[str, None]:
        found: list[bytes] = []

        def note(name: bytes) -> None:
            found.append(name)

        h5a.iterate(self._place, note)
        return dict.fromkeys(name.decode(errors="replace") for name in found)

    def get(self, name: str) -> Any:
        if name not in self._there:  # as most that are asked for
            return None
        try:
            return self._read[name]
        except KeyError:
            self._read[name] = found = self._value(name)
        return found

    def text(self, name: str) -> str:
        if name not in self._there:
            return ""
        try:
            return self._texts[name]
        except KeyError:
            self._texts[name] = found = super().text(name)
        return found

    def _value(self, name: str) -> Any:
        held = h5a.open(self._place, name.encode())
        kind = held.get_type()
        try:
            alone = held.get_storage_size() == kind.get_size()
        except RuntimeError:  # nothing is stored
            alone = False
        if alone and isinstance(kind, h5t.TypeStringID) and not kind.is_variable_str():
            text = np.empty((), f"S{kind.get_size()}")  # one text, as the netCDF library writes them: the short way
            held.read(text, kind)
            return decoded(text.tobytes()).rstrip("\x00")
        dtype, memory = _held_as(kind)
        if alone and memory is not None:
            one = np.empty(1, dtype)
            held.read(one, memory)
            return one
        if held.get_space().get_simple_extent_type() == h5s.NULL:
            return ""
        values = np.empty(held.shape, dtype)
        held.read(values, memory)
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
        shape = space.get_simple_extent_dims()
        self.sizes[name] = int(shape[0]) if shape else 0
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


class _Variable(_Attributes, Variable):
    def __init__(self, name: str, place: Any, dimensions: _Dimensions, budget: Budget) -> None:
        super().__init__(place)
        self.name = name
        self._all, self._budget = dimensions, budget

    @_Once
    def _held(self) -> tuple[int, ...]:
        return tuple(self._place.shape)

    @_Once
    def dimensions(self) -> tuple[str, ...]:
        return self._all.of(self.name, self._place, self._held)

    @_Once
    def shape(self) -> tuple[int, ...]:
        sizes = self._all.sizes
        return tuple(max(sizes.get(name, size), size) for name, size in zip(self.dimensions, self._held, strict=True))

    @_Once
    def _types(self) -> tuple[np.dtype[Any], Any]:
        return _held_as(self._place.get_type())

    @_Once
    def dtype(self) -> np.dtype[Any]:
        found: np.dtype[Any] = self._types[0]
        return found

    @_Once
    def ndim(self) -> int:
        return len(self._held)

    @_Once
    def is_text(self) -> bool:
        return self.dtype.kind in "SUO"

    def read(self) -> NDArray[Any]:
        self._budget.take(self.size)
        strings = self.dtype.kind == "O" and h5t.check_string_dtype(self.dtype) is not None
        if self.dtype.kind not in "biufS" and not strings:
            raise UnfitError(f"variable {self.name} is neither numbers nor text")
        values = np.empty(self._held, self.dtype)
        self._place.read(h5s.ALL, h5s.ALL, values, self._types[1])
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


def _access() -> Any:
    access = h5p.create(h5p.FILE_ACCESS)
    access.set_fclose_degree(h5f.CLOSE_STRONG)
    return access


_access_by_path = lru_cache(_access)  # the same for all files


def open_hdf5(path: str | None, data: bytes) -> Store:
    """The netCDF-4 file at a path or, without one, in these bytes.

    Raises
    ------
    OSError, RuntimeError, KeyError, ValueError
        As h5py does where a file is damaged.
    """
    if path is None:
        access = _access()
        access.set_fapl_core(backing_store=False)
        access.set_file_image(data)
        file = h5f.open(b"memory.nc", h5f.ACC_RDONLY, access)
    else:
        file = h5f.open(os.fsencode(path), h5f.ACC_RDONLY, _access_by_path())
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
