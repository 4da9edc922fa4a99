"""A part of an archive: casts in flat columns, kept in one file until all parts are there.

Parts are the journal of a build. Each is written whole or not at all, so that whatever part file exists is finished
work. A part file is a line of JSON, which says what is in it and holds all text, and then the numbers of its columns
one after another as they stand in memory: a column, or the rows of one cast, is read without the rest.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import OutputError
from ..files import replacing

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence
    from pathlib import Path

    from numpy.typing import NDArray

    Columns = Mapping[str, NDArray[Any]]
    LeftOut = tuple[tuple[str, str, str], ...]

TEXT = "text"
# How the depth of a cast came about: the values of `depth_source`.
AS_READ, FROM_DENSITY, FROM_STANDARD_OCEAN = 0, 1, 2


@dataclass(frozen=True)
class Outline:
    """What a part holds, without its columns.

    Parameters
    ----------
    casts, levels : int
        How many.
    files : int
        How many input files are accounted for by it.
    cast, obs : dict
        Columns for each cast and for each level: name and type of numbers, or "text".
    left_out : tuple of (file, cast, reason)
        Inputs that are not in it; cast is empty where it is the whole file.
    """

    casts: int
    levels: int
    files: int
    cast: dict[str, str]
    obs: dict[str, str]
    left_out: LeftOut


@dataclass(frozen=True, eq=False)
class Part:
    """Casts with their levels, and what was left out.

    Parameters
    ----------
    cast : mapping of str to numpy.ndarray, shape (casts,)
        What is known of each cast, `row_size` among it; text as arrays of objects.
    obs : mapping of str to numpy.ndarray, shape (levels of all casts,)
        What is known of each level, casts one after another.
    left_out, files
        As in `Outline`.
    """

    cast: Columns
    obs: Columns
    left_out: LeftOut = ()
    files: int = 0

    @property
    def outline(self) -> Outline:
        """Counts and types of the part."""
        row_size = self.cast["row_size"]
        return Outline(
            casts=row_size.size,
            levels=int(row_size.sum()),
            files=self.files,
            cast={name: _kind(values) for name, values in self.cast.items()},
            obs={name: _kind(values) for name, values in self.obs.items()},
            left_out=self.left_out,
        )

    def write(self, path: Path) -> Outline:
        """Write the part, whole or not at all; what was there is replaced."""
        outline = self.outline
        texts = {name: values.tolist() for name, values in self.cast.items() if values.dtype.kind == "O"}
        head = json.dumps({**vars(outline), "texts": texts}).encode()
        numbers = [values for values in (*self.cast.values(), *self.obs.values()) if values.dtype.kind != "O"]
        with replacing(path, replace=True) as temporary, temporary.open("wb") as file:
            file.write(head + b"\n")
            for values in numbers:
                file.write(np.ascontiguousarray(values).view(np.uint8).data)
        return outline


def empty_part(left_out: LeftOut = (), *, files: int = 0) -> Part:
    """A part without casts."""
    return Part({"row_size": np.zeros(0, dtype=np.int32)}, {}, left_out, files)


def text_column(texts: Sequence[str]) -> NDArray[Any]:
    """Texts as a column."""
    column = np.empty(len(texts), dtype=object)
    column[:] = texts
    return column


def _kind(values: NDArray[Any]) -> str:
    return TEXT if values.dtype.kind == "O" else values.dtype.str


class PartFile:
    """A part file, of which columns are read when they are asked for.

    Raises
    ------
    OutputError
        If the file is missing or not as long as it says.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        try:
            with path.open("rb") as file:
                known = json.loads(file.readline())
                position = file.tell()
            size = path.stat().st_size
        except (OSError, ValueError) as error:
            raise OutputError(f"{path}: a finished part can't be read back: {error}") from error
        self._texts = known.pop("texts")
        self.outline = Outline(**{**known, "left_out": tuple(tuple(entry) for entry in known["left_out"])})
        self._places: dict[str, dict[str, tuple[int, np.dtype[Any], int]]] = {"cast": {}, "obs": {}}
        for group, count in (("cast", self.outline.casts), ("obs", self.outline.levels)):
            for name, kind in getattr(self.outline, group).items():
                if kind != TEXT:
                    dtype = np.dtype(kind)
                    self._places[group][name] = (position, dtype, count)
                    position += count * dtype.itemsize
        if size != position:
            raise OutputError(f"{path}: a finished part has {size} bytes instead of {position}: it was damaged")

    def cast(self, name: str) -> NDArray[Any]:
        """A column with one value for each cast."""
        if name in self._texts:
            return text_column(self._texts[name])
        return self._read("cast", name, 0, self.outline.casts)

    def obs(self, name: str, first: int = 0, last: int | None = None) -> NDArray[Any]:
        """A column with one value for each level, or some rows of it."""
        return self._read("obs", name, first, self.outline.levels if last is None else last)

    def _read(self, group: str, name: str, first: int, last: int) -> NDArray[Any]:
        position, dtype, _ = self._places[group][name]
        offset = position + first * dtype.itemsize
        try:
            return np.fromfile(self.path, dtype=dtype, count=last - first, offset=offset)
        except OSError as error:
            raise OutputError(f"{self.path}: a finished part can't be read back: {error}") from error

    def whole(self) -> Part:
        """All columns."""
        outline = self.outline
        return Part(
            {name: self.cast(name) for name in outline.cast},
            {name: self.obs(name) for name in outline.obs},
            outline.left_out,
            outline.files,
        )
