"""What the dimensions of a gridded variable are, told by their attributes, else by well-known names."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

METRES = {"m", "meter", "meters", "metre", "metres"}
DECIBARS = {"dbar", "decibar", "decibars", "db"}
_EAST = {"degrees_east", "degree_east", "degrees_e", "degree_e", "degreese", "degreee"}
_NORTH = {"degrees_north", "degree_north", "degrees_n", "degree_n", "degreesn", "degreen"}
_BY_LETTER = {"X": "longitude", "Y": "latitude", "Z": "vertical", "T": "time"}
_BY_NAME = {
    "longitude": ("lon", "longitude", "x"),
    "latitude": ("lat", "latitude", "y"),
    "vertical": ("depth", "lev", "level", "z", "pressure"),
    "time": ("time", "month"),
}


@dataclass(frozen=True, eq=False)
class Axis:
    """One dimension of a grid: what it counts, its values as float64, strictly monotonic, and its attributes."""

    kind: str
    name: str
    values: Floats
    attributes: dict[str, str]


def text(variable: Any, name: str) -> str:
    """A text attribute; empty where absent or not text."""
    value = getattr(variable, name, "")
    return value.strip() if isinstance(value, str) else ""


def kind_of(variable: Any) -> str:
    """What a coordinate variable counts: longitude, latitude, vertical, time; empty if that can't be told."""
    units, standard = text(variable, "units").lower(), text(variable, "standard_name")
    if units in _EAST or standard == "longitude":
        return "longitude"
    if units in _NORTH or standard == "latitude":
        return "latitude"
    if " since " in units or standard == "time":
        return "time"
    if text(variable, "positive") or standard in {"depth", "sea_water_pressure", "sea_water_pressure_due_to_sea_water"}:
        return "vertical"
    if text(variable, "axis").upper() in _BY_LETTER:
        return _BY_LETTER[text(variable, "axis").upper()]
    return next((kind for kind, names in _BY_NAME.items() if variable.name.lower() in names), "")


def axes_of(dataset: Any, variable: Any, where: str) -> list[Axis | None]:
    """The axis of each dimension of a variable, None for one of length one that counts nothing we use.

    Raises
    ------
    InputError
        A dimension that no coordinate variable explains, one that appears twice, or no latitude and longitude.
    """
    found: list[Axis | None] = []
    for name, size in zip(variable.dimensions, variable.shape, strict=True):
        coordinate = dataset.variables.get(name)
        kind = "" if coordinate is None or coordinate.ndim != 1 else kind_of(coordinate)
        if not kind and size == 1:
            found.append(None)
            continue
        if not kind:
            raise InputError(
                f"{where}: what the dimension {name} of {variable.name} counts can't be told: a coordinate variable of "
                "that name with units (degrees_east, degrees_north, m, days since ...) would be right"
            )
        found.append(_axis(coordinate, kind, where))
    kinds = [axis.kind for axis in found if axis is not None]
    if sorted(set(kinds)) != sorted(kinds) or not {"latitude", "longitude"} <= set(kinds):
        dimensions = ", ".join(variable.dimensions)
        raise InputError(
            f"{where}: {variable.name} lies on ({dimensions}), taken as {', '.join(kinds) or 'nothing'}: one latitude "
            "and one longitude, and at most one depth and one time, would be right (a grid of parallels and meridians)"
        )
    return found


def _axis(coordinate: Any, kind: str, where: str) -> Axis:
    attributes = {name: text(coordinate, name) for name in ("units", "standard_name", "positive", "calendar")}
    # these say by being there that a time is one of a repeated year
    attributes |= {name: "yes" for name in ("modulo", "climatology") if name in coordinate.ncattrs()}
    values = np.ma.filled(np.ma.asarray(coordinate[:], dtype=np.float64), np.nan)
    if kind == "longitude":
        values = np.unwrap(values, period=360.0)
    steps = np.diff(values)
    if not np.isfinite(values).all() or not ((steps > 0.0).all() or (steps < 0.0).all()):
        raise InputError(
            f"{where}: the axis {coordinate.name} does not go steadily up or down; its values are no grid's"
        )
    return Axis(kind, coordinate.name, values, attributes)
