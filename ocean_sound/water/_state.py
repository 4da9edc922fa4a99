"""The state of water as the equations need it: temperature, salinity, vertical, position; plain float64 arrays."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ._arrays import LIMITS, Array, elementwise
from .vertical import depth_of_columns, known_latitude, pressure_of_columns

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence


@dataclass(frozen=True, eq=False, slots=True)
class State:
    """Arrays that broadcast together; pressure and depth may both be missing only where nothing needs them."""

    temperature: Array
    salinity: Array
    pressure: Array | None = None
    depth: Array | None = None
    latitude: Array | None = None
    longitude: Array | None = None

    def vertical(self, kind: str) -> Any:
        """The pressure (dbar) or the depth (m), by TEOS-10 from the other where only that is given."""
        if kind == "pressure":
            if self.pressure is None and self.depth is not None:
                return pressure_of_columns(self.depth, self.latitude)
            return self.pressure
        if self.depth is None and self.pressure is not None:
            return depth_of_columns(self.pressure, self.latitude)
        return self.depth

    def completed(self, kind: str) -> State:
        """The state with this kind of vertical filled in, so that it is converted once."""
        if kind == "none" or (self.pressure is None and self.depth is None):
            return self
        values = {name: getattr(self, name) for name in self.__slots__}
        return State(**{**values, kind: self.vertical(kind)})

    def shape(self) -> tuple[int, ...]:
        """The shape to which all columns broadcast."""
        values = (getattr(self, name) for name in self.__slots__)
        return np.broadcast_shapes(*(np.shape(value) for value in values if value is not None))

    def gravity_latitude(self) -> Any:
        """The latitude, 45 degrees where it is unknown."""
        return known_latitude(self.latitude)

    def possible(self) -> State:
        """The state with impossible values turned into NaN; up to 5 dbar or m above the surface is noise and stays."""
        values: dict[str, Any] = {}
        for name in self.__slots__:
            value = getattr(self, name)
            if value is not None:
                slack = 5.0 if name in ("pressure", "depth") else 0.0
                bad = ~((value >= LIMITS[name].low - slack) & (value <= LIMITS[name].high) & np.isfinite(value))
                value = np.where(bad, np.nan, value) if bad.any() else value
            values[name] = value
        return State(**values)


def need_one_vertical(pressure: Any, depth: Any, *, required: bool, who: str) -> None:
    """Refuse both of pressure and depth, and neither where one is required."""
    if pressure is not None and depth is not None:
        raise InputError(f"{who}: pressure and depth are both given; give exactly one of them")
    if required and pressure is None and depth is None:
        raise InputError(f"{who}: neither pressure (dbar) nor depth (m) is given; give exactly one of them")


def on_state(
    core: Callable[..., Array],
    columns: Sequence[Any],
    *,
    vertical: str,
    who: str,
    name: str,
    attributes: Mapping[str, Any],
    others: Mapping[str, Any] | None = None,
) -> Any:
    """Call `core(state, **others)` element by element on scalars, arrays or xarray objects; see `elementwise`.

    Parameters
    ----------
    core
        Takes a `State` whose vertical of the kind asked for is filled in, and the others by name.
    columns
        Temperature, salinity, pressure, depth, latitude, longitude; None where not given.
    vertical
        What the core needs: "pressure", "depth" or "none".
    who
        Who asks, for the error about pressure and depth.
    name, attributes
        For xarray.
    others
        Further arguments by name.
    """
    given = dict(zip(State.__slots__, columns, strict=True))
    for needed in ("temperature", "salinity"):
        if given[needed] is None:
            raise InputError(f"{needed}: is None; give numbers, NaN where a value is missing")
    need_one_vertical(given["pressure"], given["depth"], required=vertical != "none", who=who)
    further = dict(others or {})

    def unpacked(**arrays: Array) -> Array:
        rest = {key: arrays.pop(key) for key in further}
        return core(State(**arrays).completed(vertical), **rest)

    return elementwise(unpacked, {**given, **further}, name=name, attributes=attributes)
