"""A gridded variable on disk, read by windows: no more than the cells around the points that are asked for."""

from __future__ import annotations

from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError, OceanSoundError
from ..files import HDF5_LOCK
from .axes import Axis, axes_of

if TYPE_CHECKING:
    from collections.abc import Iterator
    from os import PathLike

    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Indices = NDArray[np.int64]

_TURN = 360.0
# Beyond this a number is a fill value that nobody declared.
_BEYOND = 1e30


@contextmanager
def opened(path: str | PathLike[str]) -> Iterator[Any]:
    """The grid's file, open for reading under the one lock; whatever the libraries raise comes out as `InputError`."""
    import netCDF4

    with HDF5_LOCK:
        try:
            dataset: Any = netCDF4.Dataset(str(path), "r")
        except (OSError, RuntimeError) as error:
            raise InputError(f"{path}: can't be opened as netCDF ({error})") from error
        try:
            yield dataset
        except OceanSoundError:
            raise
        except (OSError, RuntimeError, ValueError, IndexError, AttributeError) as error:
            raise InputError(f"{path}: its contents can't be read ({type(error).__name__}: {error})") from error
        finally:
            dataset.close()


@dataclass(frozen=True, eq=False)
class Grid:
    """Where a variable lies and on which axes; its values stay on disk.

    Parameters
    ----------
    path : str
        The file.
    variable : str
        Name of the variable.
    order : tuple of Axis or None
        The axis of each dimension.
    """

    path: str
    variable: str
    order: tuple[Axis | None, ...]

    @classmethod
    def of(cls, dataset: Any, variable: Any, path: str) -> Grid:
        """The grid of a variable of an open dataset."""
        return cls(path, variable.name, tuple(axes_of(dataset, variable, path)))

    def axis(self, kind: str) -> Axis | None:
        """The axis of a kind, or None."""
        return next((axis for axis in self.order if axis is not None and axis.kind == kind), None)

    def at(self, latitude: Floats, longitude: Floats, times: Indices | None = None) -> Floats:
        """Values at points, bilinear over the neighbours that have one.

        Parameters
        ----------
        latitude, longitude : ndarray, shape (points,)
            Degrees; any longitude from -360 to 360.
        times : ndarray of int, optional
            Which times to read, all if not given.

        Returns
        -------
        ndarray, shape (points, times, levels)
            NaN where no neighbour has a value; one time and one level where the variable has no such dimension.

        Raises
        ------
        InputError
            A point is no position on the Earth, or lies more than half a cell outside the grid.
        """
        rows, row_weight = self._along("latitude", latitude)
        columns, column_weight = self._along("longitude", longitude)
        values = self._window(rows, columns, times)  # (times, levels, points, 2 rows, 2 columns)
        weight = row_weight[:, :, None] * column_weight[:, None, :]
        there = np.where(np.isfinite(values), weight, 0.0)
        total = there.sum(axis=(-2, -1))
        summed = (np.where(np.isfinite(values), values, 0.0) * there).sum(axis=(-2, -1))
        mean = np.divide(summed, total, out=np.full(total.shape, np.nan), where=total > 0.0)
        return np.moveaxis(mean, -1, 0)

    def _along(self, kind: str, wanted: Floats) -> tuple[Indices, Floats]:
        """The two neighbours of each point along an axis, as indices in the file, and their weights."""
        axis = self.axis(kind)
        if axis is None:
            raise InputError(f"{self.path}: {self.variable} has no {kind}")
        limit = 90.0 if kind == "latitude" else _TURN
        bad = ~(np.abs(wanted) <= limit)
        if bad.any():
            raise InputError(f"{kind} is {wanted[bad][0]:g}; a number from {-limit:g} to {limit:g} would be right")
        downward = axis.values.size > 1 and axis.values[1] < axis.values[0]
        nodes = axis.values[::-1] if downward else axis.values
        count = nodes.size
        edge = 0.5 * (nodes[1] - nodes[0]) if count > 1 else 0.5
        position, ring = wanted, False
        if kind == "longitude":
            position = nodes[0] + (wanted - nodes[0]) % _TURN
            ring = count > 1 and nodes[-1] - nodes[0] + 2.001 * edge >= _TURN
            if ring:
                nodes = np.append(nodes, nodes[0] + _TURN)
            else:
                # just west of the first meridian is, counted eastward, nearly a full turn away
                position = np.where(position >= nodes[0] + _TURN - edge, position - _TURN, position)
        outside = (position < nodes[0] - edge * 1.001) | (position > nodes[-1] + edge * 1.001)
        if outside.any():
            raise InputError(
                f"{self.path}: {kind} {wanted[outside][0]:g} lies outside the grid of {self.variable}, which reaches "
                f"from {nodes[0]:g} to {nodes[-1]:g}: take a grid that covers the place"
            )
        if count == 1:
            return np.zeros((wanted.size, 2), dtype=np.int64), np.tile([1.0, 0.0], (wanted.size, 1))
        low = np.clip(np.searchsorted(nodes, position, side="right") - 1, 0, nodes.size - 2)
        part = np.clip((position - nodes[low]) / (nodes[low + 1] - nodes[low]), 0.0, 1.0)
        index = np.stack([low, (low + 1) % count if ring else low + 1], axis=1)
        return (count - 1 - index if downward else index), np.stack([1.0 - part, part], axis=1)

    def _window(self, rows: Indices, columns: Indices, times: Indices | None) -> Floats:
        """The values at the neighbours of each point: (times, levels, points, 2, 2)."""
        top, bottom = int(rows.min()), int(rows.max()) + 1
        pieces, place = _pieces(columns, self._size("longitude"))
        kinds = ["" if axis is None else axis.kind for axis in self.order]
        chosen: dict[str, Any] = {"": 0, "latitude": slice(top, bottom)}
        if times is not None:
            chosen["time"] = times
        with opened(self.path) as dataset:
            variable = dataset.variables[self.variable]
            parts = [
                np.ma.filled(
                    np.ma.asarray(
                        variable[tuple(chosen.get(k, slice(None)) if k != "longitude" else piece for k in kinds)],
                        dtype=np.float64,
                    ),
                    np.nan,
                )
                for piece in pieces
            ]
        kept = [kind for kind in kinds if kind]
        values = np.concatenate(parts, axis=kept.index("longitude"))
        values = np.where(np.abs(values) > _BEYOND, np.nan, values)
        wanted = ("time", "vertical", "latitude", "longitude")
        values = np.transpose(values, [kept.index(kind) for kind in wanted if kind in kept])
        for position, kind in enumerate(wanted[:2]):
            if kind not in kept:
                values = np.expand_dims(values, position)
        return values[:, :, (rows - top)[:, :, None], place[:, None, :]]

    def _size(self, kind: str) -> int:
        axis = self.axis(kind)
        return 1 if axis is None else axis.values.size


def _pieces(columns: Indices, count: int) -> tuple[list[slice], Indices]:
    """The slices of meridians to read (two where the window goes over the seam), and each column's place in them.

    The window is the ring less its widest stretch that nobody asked for.
    """
    used = np.unique(columns)
    gaps = np.diff(np.append(used, used[0] + count))
    widest = int(np.argmax(gaps))
    if widest == used.size - 1:
        return [slice(int(used[0]), int(used[-1]) + 1)], columns - used[0]
    start, stop = int(used[widest + 1]), int(used[widest]) + 1
    return [slice(start, count), slice(0, stop)], (columns - start) % count
