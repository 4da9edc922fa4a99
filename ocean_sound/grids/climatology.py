"""Climatologies of temperature and salinity from CF grids on disk, as temperature in situ and practical salinity."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal, NamedTuple

import gsw
import numpy as np

from ..errors import InputError
from ..water import depth_of_columns, pressure_of_columns, t90_from_t68
from . import seasons
from .axes import DECIBARS, METRES, text
from .window import Grid, opened

if TYPE_CHECKING:
    from os import PathLike

    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

TemperatureKind = Literal["in-situ", "potential", "conservative"]
SalinityKind = Literal["practical", "absolute"]
Scale = Literal["ITS-90", "IPTS-68"]

# What each standard name of CF says; names not here leave it open.
_KINDS: dict[str, dict[str, str]] = {
    "temperature": {
        "sea_water_temperature": "in-situ",
        "sea_water_potential_temperature": "potential",
        "sea_water_conservative_temperature": "conservative",
    },
    "salinity": {"sea_water_practical_salinity": "practical", "sea_water_absolute_salinity": "absolute"},
}
_CHOICES = {"temperature": ("in-situ", "potential", "conservative"), "salinity": ("practical", "absolute")}
_OPEN_NAMES = {"sea_water_salinity"}
_NAMES = {
    "temperature": {"temp", "temperature", "t_an", "thetao", "theta", "potential_temperature", "t"},
    "salinity": {"salt", "salinity", "sal", "s_an", "so", "psal", "s"},
}
_CELSIUS = {"degc", "c", "celsius", "degree_celsius", "degrees_celsius", "degree_c", "degrees_c", "deg_c", "deg c",
            "degrees celsius", "degree celsius", "\N{DEGREE SIGN}c"}  # fmt: skip
_KELVIN = {"k", "kelvin", "degk", "degrees_k"}
_ZERO_CELSIUS = 273.15
# Practical salinity has no unit and often says so oddly; grams per kilogram are told by what is asked for, not by this.
_SALINITY_UNITS = {
    "",
    "1",
    "1e-3",
    "0.001",
    "psu",
    "pss-78",
    "pss",
    "ppt",
    "g/kg",
    "g kg-1",
    "g kg^-1",
    "per mil",
    "psal",
}


class WaterColumn(NamedTuple):
    """The water at one place: depth (m), temperature in situ (degC, ITS-90), practical salinity (None if not held)."""

    depth: Floats
    temperature: Floats
    salinity: Floats | None


@dataclass(frozen=True, eq=False)
class _Field:
    """One of the two variables: where it lies, what kind of number it is, what to add to come to degrees Celsius."""

    grid: Grid
    kind: str
    offset: float


@dataclass(frozen=True, eq=False)
class Climatology:
    """Temperature and salinity on a grid on disk; nothing of it is in memory. Made by `open_climatology`."""

    temperature: _Field
    salinity: _Field | None
    scale: Scale
    name: str

    def at(self, latitude: float, longitude: float, time: Any = None) -> WaterColumn:
        """The water at a place and time.

        Parameters
        ----------
        latitude, longitude : float
            Degrees; any longitude from -360 to 360.
        time : datetime64 or str, optional
            UTC. Needed only where the grid changes over the year.

        Returns
        -------
        WaterColumn
            The levels that hold a temperature, from the shallowest down.

        Raises
        ------
        InputError
            The place lies outside the grid or on its land, or a time is needed.
        """
        times = None if time is None else np.array([time], dtype="datetime64[s]")
        depth, temperature, salinity = self.along([latitude], [longitude], times)
        there = np.isfinite(temperature[0])
        if not there.any():
            raise InputError(
                f"{self.name}: has no water at latitude {latitude:g}, longitude {longitude:g}: it is land there"
            )
        return WaterColumn(depth[0, there], temperature[0, there], None if salinity is None else salinity[0, there])

    def along(self, latitude: ArrayLike, longitude: ArrayLike, time: Any = None) -> WaterColumn:
        """The water at the points of a track.

        Parameters
        ----------
        latitude, longitude : array_like, shape (points,)
            Degrees.
        time : array_like of datetime64, shape (points,) or one for all, optional
            UTC. Needed only where the grid changes over the year.

        Returns
        -------
        WaterColumn
            Each of shape (points, levels); NaN where the grid has no water.

        Raises
        ------
        InputError
            A point lies outside the grid or is no position, or a time is needed.

        Notes
        -----
        Bilinear over those of the four neighbours that hold a value; linear in time between the two fields around it,
        over the turn of the year too. Half a cell beyond the outermost points counts as the grid's.
        """
        one, other = (np.atleast_1d(np.asarray(values, dtype=np.float64)) for values in (latitude, longitude))
        lat, lon = np.broadcast_arrays(one, other)
        times = np.datetime64("NaT", "s") if time is None else np.asarray(time, dtype="datetime64[s]")
        times = np.broadcast_to(times, lat.shape)
        raw = _values(self.temperature, lat, lon, times)
        depth = _depths(self.temperature.grid, lat)
        salt = None
        if self.salinity is not None:
            salt = _values(self.salinity, lat, lon, times)
            own = _depths(self.salinity.grid, lat)
            if own.shape != depth.shape or not np.array_equal(own, depth):
                salt = np.array([np.interp(d, o, s, np.nan, np.nan) for d, o, s in zip(depth, own, salt, strict=True)])
        return self._in_situ(depth, raw, salt, lat, lon)

    def _in_situ(
        self, depth: Floats, raw: Floats, salt: Floats | None, latitude: Floats, longitude: Floats
    ) -> WaterColumn:
        """Temperature in situ on ITS-90, practical salinity."""
        kind = self.temperature.kind
        given = t90_from_t68(raw) if self.scale == "IPTS-68" else raw
        if salt is None or self.salinity is None:
            return WaterColumn(depth, given, None)
        where = {"lat": latitude[:, None], "lon": longitude[:, None]}
        pressure = pressure_of_columns(depth, latitude[:, None])
        if self.salinity.kind == "absolute":
            absolute, practical = salt, gsw.SP_from_SA(salt, pressure, **where)
        else:
            absolute, practical = gsw.SA_from_SP(salt, pressure, **where), salt
        if kind == "in-situ":
            return WaterColumn(depth, given, practical)
        conservative = given if kind == "conservative" else gsw.CT_from_pt(absolute, given)
        return WaterColumn(depth, gsw.t_from_CT(absolute, conservative, pressure), practical)


def open_climatology(
    path: str | PathLike[str],
    *,
    temperature: TemperatureKind | None = None,
    salinity: SalinityKind | None = None,
    temperature_scale: Scale = "ITS-90",
    temperature_unit: Literal["degC", "K"] | None = None,
    salinity_path: str | PathLike[str] | None = None,
    temperature_variable: str | None = None,
    salinity_variable: str | None = None,
) -> Climatology:
    """Open a CF grid of temperature and salinity.

    Parameters
    ----------
    path : path-like
        A netCDF file with temperature, and mostly salinity, on latitude, longitude, depth (or pressure), maybe time.
    temperature : {"in-situ", "potential", "conservative"}, optional
        What the temperature is. Needed only where its standard name does not say.
    salinity : {"practical", "absolute"}, optional
        What the salinity is. Needed only where its standard name does not say.
    temperature_scale : {"ITS-90", "IPTS-68"}
        Scale of the temperature; that of climatologies made before 1990 is IPTS-68.
    temperature_unit : {"degC", "K"}, optional
        Unit of a temperature that says none.
    salinity_path : path-like, optional
        The file of the salinity where that is another one; it may have other levels and times.
    temperature_variable, salinity_variable : str, optional
        Names of the variables, needed only where more than one could be meant.

    Returns
    -------
    Climatology
        It holds the axes; values are read when they are asked for.

    Raises
    ------
    InputError
        A file can't be read, a variable is not found or more than one could be, its unit is unknown, what kind of
        temperature or salinity it is is not said, or potential or conservative temperature comes without salinity.

    Notes
    -----
    Potential temperature taken for temperature in situ makes sound too slow by about 1.9 m/s at 5000 dbar. Conversions
    are those of TEOS-10 (gsw).

    Examples
    --------
    >>> import tempfile, xarray
    >>> folder = tempfile.TemporaryDirectory()
    >>> grid = xarray.Dataset(
    ...     {"temp": (("depth", "lat", "lon"), [[[10.0, 12.0]], [[4.0, 4.0]]], {"units": "degC"})},
    ...     {"depth": ("depth", [0.0, 500.0], {"units": "m"}), "lat": [54.0], "lon": [-20.0, -19.0]},
    ... )
    >>> grid.to_netcdf(f"{folder.name}/small.nc")
    >>> open_climatology(f"{folder.name}/small.nc", temperature="in-situ").at(54.0, -19.5).temperature
    array([11.,  4.])
    >>> folder.cleanup()
    """
    for name, given in (("temperature", temperature), ("salinity", salinity)):
        if given is not None and given not in _CHOICES[name]:
            raise InputError(f"{name} is {given!r}; {_either(name)} would be right")
    if temperature_scale not in ("ITS-90", "IPTS-68"):
        raise InputError(f"temperature_scale is {temperature_scale!r}; 'ITS-90' or 'IPTS-68' would be right")
    warm = _field(path, "temperature", temperature, temperature_variable, needed=True, unit=temperature_unit)
    other = salinity_path or salinity_variable
    salt = _field(salinity_path or path, "salinity", salinity, salinity_variable, needed=bool(other))
    if warm is None or (salt is None and warm.kind != "in-situ"):
        raise InputError(
            f"{path}: its temperature is {'' if warm is None else warm.kind} and it holds no salinity, without which "
            "that can't be turned into temperature in situ; give the file of the salinity as salinity_path="
        )
    return Climatology(warm, salt, temperature_scale, str(path))


def _either(name: str) -> str:
    *first, last = (repr(choice) for choice in _CHOICES[name])
    return f"{', '.join(first)} or {last}"


def _field(
    path: str | PathLike[str],
    name: str,
    kind: str | None,
    variable: str | None,
    *,
    needed: bool,
    unit: str | None = None,
) -> _Field | None:
    """Find a variable and what it is; None where the file has none and none is needed."""
    where = str(path)
    with opened(path) as dataset:
        key = _find(dataset, name, variable, where)
        if key is None:
            if needed:
                gridded = [held for held, of in dataset.variables.items() if of.ndim >= 2]
                raise InputError(
                    f"{where}: no variable is a {name} by its standard name or its own; it holds "
                    f"{', '.join(gridded) or 'no grid'}: say which by {name}_variable="
                )
            return None
        found = dataset.variables[key]
        return _Field(
            Grid.of(dataset, found, where), _kind(found, name, kind, where), _offset(found, name, unit, where)
        )


def _find(dataset: Any, name: str, variable: str | None, where: str) -> str | None:
    if variable is not None:
        if variable not in dataset.variables:
            raise InputError(f"{where}: has no variable {variable!r}; it has {', '.join(dataset.variables)}")
        return variable
    gridded = {key: of for key, of in dataset.variables.items() if of.ndim >= 2}
    told = [
        key
        for key, of in gridded.items()
        if text(of, "standard_name") in _KINDS[name]
        or (name == "salinity" and text(of, "standard_name") in _OPEN_NAMES)
    ]
    choice = told or [key for key in gridded if key.lower() in _NAMES[name]]
    if len(choice) > 1:
        raise InputError(f"{where}: {', '.join(choice)} could each be the {name}; say which by {name}_variable=")
    return choice[0] if choice else None


def _kind(variable: Any, name: str, given: str | None, where: str) -> str:
    standard = text(variable, "standard_name")
    told = _KINDS[name].get(standard)
    if told is None and given is None:
        says = f"the standard name {standard!r} leaves" if standard else "it has no standard name, which leaves"
        raise InputError(
            f"{where}: the {name} {variable.name}: {says} open what it is; give {name}= as {_either(name)}"
        )
    if told is not None and given is not None and told != given:
        raise InputError(
            f"{where}: the {name} {variable.name} is {told} by its standard name, not {given}; leave it out"
        )
    return told or str(given)


def _offset(variable: Any, name: str, given: str | None, where: str) -> float:
    """What to add to the values to come to our unit."""
    units = " ".join((text(variable, "units") or given or "").lower().split())
    if name == "salinity":
        if units in _SALINITY_UNITS:
            return 0.0
        raise InputError(f"{where}: the salinity {variable.name} is in {units!r}; 1, PSU or g/kg would be right")
    if units in _CELSIUS:
        return 0.0
    if units in _KELVIN:
        return -_ZERO_CELSIUS
    if not units:
        raise InputError(
            f"{where}: the temperature {variable.name} has no unit; give temperature_unit= as 'degC' or 'K'"
        )
    raise InputError(f"{where}: the temperature {variable.name} is in {units!r}; degC or K would be right")


def _values(field: _Field, latitude: Floats, longitude: Floats, times: NDArray[np.datetime64]) -> Floats:
    """Values of shape (points, levels), from the top down."""
    grid = field.grid
    axis = grid.axis("time")
    if axis is None or axis.values.size == 1:
        values = grid.at(latitude, longitude)[:, 0]
    else:
        index, weight = seasons.neighbours(axis, times, grid.path)
        read, back = np.unique(index, return_inverse=True)
        fields = grid.at(latitude, longitude, read)
        both = np.take_along_axis(fields, back.reshape(index.shape)[:, :, None], axis=1)
        # a field that counts for nothing may hold no value
        values = np.where(weight[:, :, None] > 0.0, both * weight[:, :, None], 0.0).sum(axis=1)
    down = _down(grid)
    return (values if down is None else values[:, down]) + field.offset


def _down(grid: Grid) -> slice | None:
    """How to turn the levels so that they go down."""
    axis = grid.axis("vertical")
    if axis is None or axis.values.size == 1:
        return None
    sign = -1.0 if axis.attributes["positive"].lower() == "up" else 1.0
    return slice(None) if sign * (axis.values[1] - axis.values[0]) > 0.0 else slice(None, None, -1)


def _depths(grid: Grid, latitude: Floats) -> Floats:
    """Depth of each level below each point, from the top down."""
    axis = grid.axis("vertical")
    if axis is None:
        return np.zeros((latitude.size, 1))
    levels = axis.values[_down(grid) or slice(None)]
    if axis.attributes["positive"].lower() == "up":
        levels = 0.0 - levels
    units = axis.attributes["units"].lower()
    if units in DECIBARS:
        depth: Floats = depth_of_columns(levels[None, :], latitude[:, None])
        return depth
    if units not in METRES:
        raise InputError(f"{grid.path}: the axis {axis.name} is in {units or 'no unit'}; m or dbar would be right")
    return np.broadcast_to(levels, (latitude.size, levels.size))
