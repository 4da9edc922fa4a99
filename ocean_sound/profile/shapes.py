"""How sure a computed speed is: signed errors, each alike in cause over the whole depth, and noise level by level.

An error of the temperature sensor lifts or lowers the whole profile, by dc/dT times one unknown number: that is a
shape. A thousand levels don't average it away; noise they do. Each shape is the error of the speed at each level when
its cause is one standard uncertainty above the truth.
"""

from __future__ import annotations

from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from ..casts.cast import AS_MEASURED, CARRIED_DOWN, CARRIED_UP
from ..casts.completing import ASSUMED_SALINITY_UNCERTAINTY
from ..casts.extending import carried_up_uncertainty
from .accuracy import PRESSURE_UNCERTAINTY, SALINITY_UNCERTAINTY

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from .speeds import Levels

    Floats = NDArray[np.float64]

# Steps over which slopes are taken: small beside the curvature of any equation, large beside its rounding.
_STEPS = {"temperature": 0.01, "salinity": 0.01, "conductivity": 1e-3, "vertical": 1.0}
# Slopes change slowly with temperature (dc/dT by 2 % a degree), and an uncertainty needs no third digit: in longer
# casts they are taken at so many levels.
SLOPE_LEVELS = 48
# How fast speed may change with temperature or salinity where a speed was carried up: see `casts.extending`.
_SLOPES = (4.0, 1.3)


class Doubt:
    """The shapes and the noise of the levels of a block, one step after another."""

    def __init__(self, levels: Levels, accuracy: Mapping[str, Floats], speed: Floats) -> None:
        self.levels, self.speed = levels, speed
        self._accuracy = accuracy
        self.added = np.flatnonzero(levels.level < 0)  # levels at the surface

    def shapes(self) -> tuple[dict[str, Floats], Floats]:
        """Every shape that any of the casts has, and the noise."""
        levels, nothing = self.levels, np.zeros(self.speed.size)
        if not nothing.size:
            return {}, nothing
        shapes: dict[str, Floats] = {}
        squares = nothing
        if levels.direct.any():
            shapes |= self._of_direct()
            own = self._noise("sound_speed", np.ones(self.speed.size))
            squares = levels.either(levels.direct, own**2, nothing)
        if not levels.direct.all():
            computed, noise = self._of_computed()
            shapes |= computed
            squares = squares + noise**2
        moved, noise = self._of_vertical()
        shapes["pressure"] = levels.either(levels.by_pressure, moved, nothing)
        shapes["depth"] = levels.either(levels.by_pressure, nothing, moved)
        return {name: shape for name, shape in shapes.items() if shape.any()}, np.sqrt(squares + noise**2)

    def accuracy(self, name: str) -> Floats:
        """An accuracy on each level; a single number where it is the same for all casts."""
        column = self._accuracy[name]
        if (column == column[:1]).all() or np.isnan(column).all():
            return column[:1]
        return self.levels.spread(column)

    def _stated(self, name: str, usual: Floats) -> Floats:
        """Uncertainty of a variable as the cast states it on a level, else the usual one."""
        column = self.levels.block.uncertainties.get(name)
        if column is None:
            return usual
        level = self.levels.level
        own = np.where(level >= 0, column[np.maximum(level, 0)], np.nan)
        return np.where(np.isfinite(own), own, usual)

    def _origin(self, name: str) -> NDArray[np.int8]:
        level = self.levels.level
        column = self.levels.block.origins.get(name)
        own = np.zeros(level.size, np.int8) if column is None else column[np.maximum(level, 0)]
        return np.where(level >= 0, own, CARRIED_UP).astype(np.int8)

    def _split(self, name: str, usual: Floats, carried: Floats) -> tuple[Floats, Floats]:
        """Uncertainty of a variable from calibration, and from having been filled in.

        `usual` is that of the sensor; `carried` that of the way up, for the levels added at the surface.
        """
        block, top = self.levels.block, self.added
        if name not in block.origins and name not in block.uncertainties:
            filled = np.zeros(self.speed.size)
            filled[top] = carried
            return usual, filled
        origin = self._origin(name)
        own = origin == AS_MEASURED
        stated = self._stated(name, np.where(own, usual, np.nan))
        # water carried up or down was measured by the same sensor
        sensor = np.where(own, stated, np.where((origin == CARRIED_UP) | (origin == CARRIED_DOWN), usual, 0.0))
        filled = np.where(own | np.isnan(stated), 0.0, stated)
        # a level added at the surface has all doubts of the level below it, and that of the way up
        sensor[top], filled[top] = sensor[top + 1], np.hypot(filled[top + 1], carried)
        return sensor, filled

    def _noise(self, name: str, slope: Floats) -> Floats:
        """Noise of a variable on the levels where it was measured, as speed."""
        noise: Floats = self.accuracy(f"{name}_noise") * np.abs(slope)
        if name in self.levels.block.origins:
            return np.where(self._origin(name) == AS_MEASURED, noise, 0.0)
        noise[self.added] = 0.0
        return noise

    def _carried_up(self) -> tuple[Floats, Floats]:
        """Uncertainty of temperature and salinity of levels added at the surface: that of the way up."""
        return carried_up_uncertainty(self.levels.columns["depth"][self.added + 1])

    def _of_direct(self) -> dict[str, Floats]:
        levels, nothing = self.levels, np.zeros(self.speed.size)
        carried = np.hypot(*(slope * up for slope, up in zip(_SLOPES, self._carried_up(), strict=True)))
        sensor, filled = self._split("sound_speed", self.accuracy("sound_speed"), carried)
        return {
            "sound_speed": levels.either(levels.direct, sensor + nothing, nothing),
            "completion_sound_speed": levels.either(levels.direct, filled, nothing),
        }

    def _of_computed(self) -> tuple[dict[str, Floats], Floats]:
        levels, nothing = self.levels, np.zeros(self.speed.size)
        error = levels.equation.standard_error
        equation = np.full(self.speed.size, np.nan if error is None else error)
        equation[levels.outside()] = np.nan
        warm, salty = self._slope("temperature"), self._slope("salinity")
        carried = self._carried_up()
        temperature, warmer = self._split("temperature", self.accuracy("temperature"), carried[0])
        own, assumed = self._of_salt(SALINITY_UNCERTAINTY), self._of_salt(ASSUMED_SALINITY_UNCERTAINTY)
        salinity, saltier = self._split("salinity", own, carried[1])
        dry, cells = levels.dry, levels.from_conductivity
        conductivity = levels.either(cells, salty * own, nothing)
        known = cells & np.isfinite(self._accuracy["conductivity"])
        if known.any():
            moved = self._slope("conductivity") * self.accuracy("conductivity")
            conductivity = levels.either(known, moved, conductivity)
        if dry.any():
            lacking = assumed + nothing
            lacking[self.added] = np.hypot(lacking[self.added], carried[1])
            saltier = levels.either(dry, lacking, saltier)
        shapes = {
            "equation": equation,
            "temperature": warm * temperature,
            "salinity": levels.either(dry | cells, nothing, salty * salinity),
            "conductivity": conductivity,
            "completion_temperature": warm * warmer,
            "completion_salinity": salty * saltier,
        }
        noise = np.hypot(self._noise("temperature", warm), levels.either(dry, nothing, self._noise("salinity", salty)))
        return {name: levels.either(levels.direct, nothing, shape) for name, shape in shapes.items()}, levels.either(
            levels.direct, nothing, noise
        )

    def _of_salt(self, usual: float) -> Floats:
        stated = self.accuracy("salinity")
        return np.where(np.isnan(stated), usual, stated)

    def _slope(self, name: str) -> Floats:
        """Derivative of the speed as the cast gives it: by temperature or pressure at constant conductivity, say."""
        step, rows = _STEPS[name], self._some
        slope = (self.levels.moved(rows, **{name: step}) - self.speed[rows]) / step
        return np.interp(np.arange(self.speed.size), rows, slope)

    @cached_property
    def _some(self) -> NDArray[np.int64]:
        """Levels at which slopes are taken, the first and last of each cast among them; between, slopes are linear."""
        sizes = self.levels.row_size
        within = {
            size: np.unique(np.linspace(0, size - 1, min(size, SLOPE_LEVELS)).astype(np.int64))
            for size in set(sizes.tolist())
            if size
        }
        starts = np.cumsum(sizes) - sizes
        rows = [start + within[size] for start, size in zip(starts.tolist(), sizes.tolist(), strict=True) if size]
        return np.concatenate(rows) if rows else np.empty(0, dtype=np.int64)

    def _of_vertical(self) -> tuple[Floats, Floats]:
        """The error of the speed from that of pressure or depth, and its noise.

        A pressure that reads too much by d puts the water of each level d too deep, and computes its speed for the
        pressure where it is put: what is wrong is the water, by its change over d, and not the effect of pressure.
        Where the speed itself was measured, that effect is displaced with it. The change is taken d upward and d
        downward: over a layer thinner than d, the gradient at the level would say nothing of it.
        """
        levels = self.levels
        columns, by_pressure, nothing = levels.columns, levels.by_pressure, np.zeros(self.speed.size)
        vertical = levels.either(by_pressure, columns["pressure"], columns["depth"])
        stated = self.accuracy("pressure")
        if np.isnan(stated).any():
            usual = levels.either(levels.direct, 0.0, PRESSURE_UNCERTAINTY)
            stated = np.where(np.isnan(stated), usual, stated)
        fraction = self.accuracy("pressure_fraction")
        stated = np.maximum(stated, fraction * vertical) if fraction.any() else stated + nothing
        move = levels.either(by_pressure, *(self._stated(name, stated) for name in ("pressure", "depth")))
        # The surface is where it is; what was put there is uncertain by other means.
        move[self.added] = 0.0
        if not move.any():
            return nothing, nothing
        down, up = self._changes(vertical, np.maximum(move, 1e-9))
        size = np.sqrt(0.5 * (down**2 + up**2))
        shape = np.where(down > up, -size, size)
        noise = np.divide(size * self.accuracy("pressure_noise"), move, out=np.zeros(move.size), where=move > 0.0)
        shape[move <= 0.0] = 0.0
        return shape, levels.either(levels.direct, nothing, noise)

    def _changes(self, vertical: Floats, move: Floats) -> tuple[Floats, Floats]:
        """Change of the water's share in the speed from each level to `move` below it and `move` above it."""
        sizes = self.levels.row_size
        water, deeper, higher = self._pressure_effect(), vertical + move, vertical - move
        np.subtract(self.speed, water, out=water)
        below, above = np.empty(self.speed.size), np.empty(self.speed.size)
        ends = np.cumsum(sizes)
        # Cast by cast, so that no number depends on which other casts are in the block.
        for first, end in zip((ends - sizes).tolist(), ends.tolist(), strict=True):
            if first < end:
                own = slice(first, end)
                below[own] = np.interp(deeper[own], vertical[own], water[own])
                above[own] = np.interp(higher[own], vertical[own], water[own])
        below -= water
        above -= water
        # where the cast ends, the change on its other side must serve for both
        filled = sizes > 0
        top, bottom = vertical[(ends - sizes)[filled]], vertical[ends[filled] - 1]
        over_top = higher < np.repeat(top, sizes[filled])
        over_bottom = deeper > np.repeat(bottom, sizes[filled])
        down = np.where(over_bottom & ~over_top, -above, below)
        return down, np.where(over_top & ~over_bottom, -below, above)

    def _pressure_effect(self) -> Floats:
        """How much of the change of speed from the first level of a cast pressure alone has made."""
        levels = self.levels
        kind, effect = levels.equation.vertical, np.zeros(self.speed.size)
        if kind == "none" or levels.direct.all():
            return effect
        slope = self._slope("vertical")
        step = 0.5 * (slope[1:] + slope[:-1]) * np.diff(levels.columns[kind])
        ends = np.cumsum(levels.row_size)
        for first, end, direct in zip((ends - levels.row_size).tolist(), ends.tolist(), levels.direct, strict=True):
            if not direct:
                np.cumsum(step[first : end - 1], out=effect[first + 1 : end])
        return effect
