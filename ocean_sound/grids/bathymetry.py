"""Bathymetry from CF grids on disk: how deep the sea is at a point and along a track."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from ..errors import InputError
from .axes import METRES, text
from .window import Grid, opened

if TYPE_CHECKING:
    from os import PathLike

    from numpy.typing import ArrayLike

Kind = Literal["height", "depth"]

_HEIGHTS = {
    "height",
    "altitude",
    "surface_altitude",
    "height_above_mean_sea_level",
    "height_above_reference_ellipsoid",
    "height_above_geopotential_datum",
    "bedrock_altitude",
    "ground_level_altitude",
}
_DEPTHS = {
    "depth",
    "sea_floor_depth",
    "sea_floor_depth_below_geoid",
    "sea_floor_depth_below_mean_sea_level",
    "sea_floor_depth_below_reference_ellipsoid",
    "sea_floor_depth_below_sea_surface",
}


@dataclass(frozen=True, eq=False)
class Bathymetry:
    """A grid of the seabed on disk; nothing of it is in memory. Made by `open_bathymetry`.

    Parameters
    ----------
    grid : Grid
        The variable and its axes.
    kind : {"height", "depth"}
        Whether its numbers count upward or downward.
    """

    grid: Grid
    kind: Kind

    def depth_at(self, latitude: ArrayLike, longitude: ArrayLike) -> Any:
        """Depth of the seabed, bilinear between the grid's points.

        Parameters
        ----------
        latitude, longitude : float or array_like
            Degrees, of one shape: a point, or the points of a track in any order, across the date line too.

        Returns
        -------
        float or numpy.ndarray
            Depth, m, positive down, negative on land; NaN where the grid has no value.

        Raises
        ------
        InputError
            A point lies outside the grid or is no position.

        Notes
        -----
        Only the smallest window of the grid that holds all points is read. The depth refers to the datum of the grid,
        mean sea level for most.
        """
        wanted = np.broadcast_arrays(np.asarray(latitude, np.float64), np.asarray(longitude, np.float64))
        found = self.grid.at(wanted[0].ravel(), wanted[1].ravel()).reshape(wanted[0].shape)
        depth = found if self.kind == "depth" else 0.0 - found
        return float(depth) if depth.ndim == 0 else depth


def open_bathymetry(path: str | PathLike[str], *, kind: Kind | None = None, variable: str | None = None) -> Bathymetry:
    """Open a CF grid of the seabed.

    Parameters
    ----------
    path : path-like
        A netCDF file with heights or depths in metres on latitude and longitude, of any convention for longitude.
    kind : {"height", "depth"}, optional
        Whether the numbers count upward (the seabed is negative) or downward. Needed only where neither the standard
        name nor `positive` of the variable says so.
    variable : str, optional
        Its name, needed only where the file holds several on latitude and longitude.

    Returns
    -------
    Bathymetry
        It holds the axes; values are read when they are asked for.

    Raises
    ------
    InputError
        The file can't be read, holds no such variable or several, its unit is not metres, or nothing says whether it
        holds heights or depths.

    Examples
    --------
    >>> import tempfile, xarray
    >>> folder = tempfile.TemporaryDirectory()
    >>> grid = xarray.Dataset(
    ...     {"z": (("lat", "lon"), [[-100.0, -200.0]], {"units": "m"})}, {"lat": [54.0], "lon": [-20.0, -19.0]}
    ... )
    >>> grid.to_netcdf(f"{folder.name}/small.nc")
    >>> open_bathymetry(f"{folder.name}/small.nc", kind="height").depth_at(54.0, -19.75)
    125.0
    >>> folder.cleanup()
    """
    where = str(path)
    if kind is not None and kind not in ("height", "depth"):
        raise InputError(f"kind is {kind!r}; 'height' or 'depth' would be right")
    with opened(path) as dataset:
        found = _variable(dataset, variable, where)
        units = text(found, "units").lower()
        if units not in METRES:
            raise InputError(f"{where}: {found.name} is in {units or 'no unit'}; metres would be right")
        told = _told(found)
        if told is None and kind is None:
            raise InputError(
                f"{where}: nothing says whether {found.name} holds heights (the seabed is negative) or depths; "
                "give kind='height' or kind='depth'"
            )
        if told is not None and kind is not None and told != kind:
            raise InputError(f"{where}: {found.name} holds {told}s by its attributes, not {kind}s; leave out kind")
        return Bathymetry(Grid.of(dataset, found, where), told or kind or "height")


def _told(variable: Any) -> Kind | None:
    """Whether a variable says by itself that it holds heights or depths."""
    standard, positive = text(variable, "standard_name"), text(variable, "positive").lower()
    if standard in _HEIGHTS or positive == "up":
        return "height"
    return "depth" if standard in _DEPTHS or positive == "down" else None


def _variable(dataset: Any, name: str | None, where: str) -> Any:
    gridded = [key for key, of in dataset.variables.items() if of.ndim >= 2 and of.dtype.kind in "iuf"]
    if name is not None:
        if name not in gridded:
            raise InputError(f"{where}: has no gridded variable {name!r}; it has {', '.join(gridded) or 'none'}")
        return dataset.variables[name]
    told = [key for key in gridded if _told(dataset.variables[key])]
    choice = told or gridded
    if len(choice) != 1:
        what = f"several gridded variables ({', '.join(choice)}); say which by variable=" if choice else "no grid"
        raise InputError(f"{where}: holds {what}")
    return dataset.variables[choice[0]]
