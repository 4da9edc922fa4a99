"""Water lent to a cast where it measured none: from a neighbouring cast or a climatology, as plain columns."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, TypeAlias

import numpy as np

from ..errors import InputError
from ..grids import Climatology
from ..water import depth_of_columns, pressure_of_columns, salinity_from_conductivity
from .cast import CLIMATOLOGY, NEIGHBOUR, Cast

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

Source: TypeAlias = Cast | Climatology

_EARTH_RADIUS = 6371.0  # km, mean
# Levels looked at in one go when a temperature is sought in the donor: bounds the memory, changes nothing.
_CHUNK = 256


@dataclass(frozen=True, eq=False)
class Donor:
    """A column of water: depth (m, strictly increasing), temperature (degC), salinity (None if unknown), its words."""

    depth: Floats
    temperature: Floats
    salinity: Floats | None
    origin: int
    words: str

    def at(self, depth: Floats) -> tuple[Floats, Floats]:
        """Temperature and salinity at depths, those of the ends beyond them; NaN for a salinity that is unknown."""
        temperature = np.interp(depth, self.depth, self.temperature)
        if self.salinity is None:
            return temperature, np.full(depth.shape, np.nan)
        return temperature, np.interp(depth, self.depth, self.salinity)

    def salinity_of(self, temperature: Floats, depth: Floats) -> tuple[Floats, NDArray[np.bool_]]:
        """Salinity by the donor's T-S relation, and where the temperature lies outside it.

        Where the donor takes a temperature at several depths, the one nearest to the level's own depth counts; beyond
        its temperatures, the salinity of its coldest or warmest level.
        """
        t, s, z = self.temperature, np.asarray(self.salinity), self.depth
        found, outside = np.empty(temperature.size), np.zeros(temperature.size, dtype=bool)
        step = np.diff(t)
        for start in range(0, temperature.size, _CHUNK):
            rows = slice(start, start + _CHUNK)
            wanted, place = temperature[rows, None], depth[rows, None]
            part = np.divide(wanted - t[:-1], step, out=np.zeros((wanted.size, step.size)), where=step != 0.0)
            # in a layer of one temperature every depth will do
            still = (step == 0.0) & (wanted == t[:-1])
            part = np.where(still, np.clip((place - z[:-1]) / np.diff(z), 0.0, 1.0), part)
            crosses = still | ((step != 0.0) & (part >= 0.0) & (part <= 1.0))
            away = np.where(crosses, np.abs(z[:-1] + part * np.diff(z) - place), np.inf)
            layer = np.argmin(away, axis=1)
            each = np.arange(wanted.size)
            missed = (wanted[:, 0] < t.min()) | (wanted[:, 0] > t.max())
            end = np.where(wanted[:, 0] > t.max(), np.argmax(t), np.argmin(t))
            inside = s[layer] + part[each, layer] * (s[layer + 1] - s[layer])
            found[rows], outside[rows] = np.where(missed, s[end], inside), missed
        return found, outside


def usable_water(cast: Cast) -> tuple[NDArray[np.int64], Floats, Floats, Floats]:
    """The levels with a usable depth and temperature: their rows, depth (m), temperature, and salinity (NaN if none).

    As in a profile, depth is that of the pressure where there is any (here in the standard ocean), else the file's;
    salinity may come from conductivity.
    """
    nothing = np.full(len(cast), np.nan)

    def of(name: str) -> Floats:
        return np.where(cast.good(name), cast.values[name], np.nan) if name in cast.values else nothing

    pressure, temperature, salinity = of("pressure"), of("temperature"), of("salinity")
    depth = depth_of_columns(pressure, cast.latitude) if np.isfinite(pressure).any() else of("depth")
    if "conductivity" in cast.values and np.isnan(salinity).all():
        pressure = np.where(np.isnan(pressure), pressure_of_columns(depth, cast.latitude), pressure)
        salinity = np.maximum(
            salinity_from_conductivity(of("conductivity"), temperature, np.maximum(pressure, 0.0)), 0.0
        )
    rows = np.flatnonzero(np.isfinite(depth) & (depth >= 0.0) & np.isfinite(temperature))
    return rows, depth[rows], temperature[rows], salinity[rows]


def donor_of(source: Source, cast: Cast) -> Donor:
    """The water that a source lends to a cast.

    Raises
    ------
    InputError
        A neighbour with fewer than two usable levels, a climatology where the cast has no position or lies off it.
    """
    if isinstance(source, Climatology):
        if math.isnan(cast.latitude) or math.isnan(cast.longitude):
            raise InputError(f"cast {cast.id!r}: has no position, so no climatology can lend it water")
        time = None if np.isnat(cast.time) else cast.time
        try:
            depth, temperature, salinity = source.at(cast.latitude, cast.longitude, time)
        except InputError as error:
            raise InputError(f"cast {cast.id!r}: {error}") from error
        name = source.name.replace("\\", "/").rsplit("/", 1)[-1]
        if salinity is not None and not np.isfinite(salinity).all():
            whole = np.isfinite(salinity)
            depth, temperature, salinity = depth[whole], temperature[whole], salinity[whole]
        return Donor(depth, temperature, salinity, CLIMATOLOGY, f"climatology {name}")
    _, depth, temperature, salinity = usable_water(source)
    whole = np.isfinite(salinity)
    known = whole.any()
    if known:
        depth, temperature, salinity = depth[whole], temperature[whole], salinity[whole]
    depth, first = np.unique(depth, return_index=True)
    if depth.size < 2:
        raise InputError(f"cast {source.id!r}: {depth.size} usable levels; to lend water it needs two at least")
    salt = salinity[first] if known else None
    return Donor(depth, temperature[first], salt, NEIGHBOUR, f"cast {source.id}{_away(source, cast)}")


def _away(one: Cast, other: Cast) -> str:
    """How far apart two casts are, in words; empty where nothing is known."""
    lat, lon = np.deg2rad([one.latitude, other.latitude]), np.deg2rad([one.longitude, other.longitude])
    half = np.sin(np.diff(lat) / 2.0) ** 2 + np.cos(lat[0]) * np.cos(lat[1]) * np.sin(np.diff(lon) / 2.0) ** 2
    distance = 2.0 * _EARTH_RADIUS * float(np.arcsin(np.sqrt(half))[0])
    words = [] if math.isnan(distance) else [f"{distance:.3g} km"]
    if not (np.isnat(one.time) or np.isnat(other.time)):
        words.append(f"{abs((one.time - other.time) / np.timedelta64(1, 'D')):.2g} days")
    return f" ({' and '.join(words)} away)" if words else ""
