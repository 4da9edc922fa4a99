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
        self.direct = levels.spread(levels.direct)
        self.accuracy = {name: levels.spread(column) for name, column in accuracy.items()}

    def shapes(self) -> tuple[dict[str, Floats], Floats]:
        """Every shape that any of the casts has, and the noise."""
        shapes = self._of_direct() if self.direct.any() else {}
        squares = np.where(self.direct, self._noise("sound_speed", np.ones(self.speed.size)) ** 2, 0.0)
        if not self.direct.all():
            computed, noise = self._of_computed()
            shapes |= computed
            squares = squares + noise**2
        by_pressure = self.levels.spread(self.levels.by_pressure)
        moved, noise = self._of_vertical()
        shapes["pressure"] = np.where(by_pressure, moved, 0.0)
        shapes["depth"] = np.where(by_pressure, 0.0, moved)
        return {name: shape for name, shape in shapes.items() if np.any(shape != 0.0)}, np.sqrt(squares + noise**2)

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
        """Uncertainty of a variable from calibration, and from having been filled in."""
        origin = self._origin(name)
        own = origin == AS_MEASURED
        stated = self._stated(name, np.where(own, usual, np.nan))
        # water carried up or down was measured by the same sensor
        sensor = np.where(own, stated, np.where((origin == CARRIED_UP) | (origin == CARRIED_DOWN), usual, 0.0))
        filled = np.where(own | np.isnan(stated), 0.0, stated)
        # a level added at the surface has all doubts of the level below it, and that of the way up
        top = np.flatnonzero(self.levels.level < 0)
        sensor[top], filled[top] = sensor[top + 1], np.hypot(filled[top + 1], carried[top])
        return sensor, filled

    def _noise(self, name: str, slope: Floats) -> Floats:
        """Noise of a variable on the levels where it was measured, as speed."""
        measured = self._origin(name) == AS_MEASURED
        noise: Floats = np.where(measured, self.accuracy[f"{name}_noise"] * np.abs(slope), 0.0)
        return noise

    def _carried_up(self) -> tuple[Floats, Floats]:
        """Uncertainty of temperature and salinity of levels added at the surface: that of the way up."""
        level = self.levels.level
        distance = np.zeros(level.size)
        top = np.flatnonzero(level < 0)
        distance[top] = self.levels.columns["depth"][top + 1]
        return carried_up_uncertainty(distance)

    def _of_direct(self) -> dict[str, Floats]:
        carried = np.hypot(*(slope * up for slope, up in zip(_SLOPES, self._carried_up(), strict=True)))
        sensor, filled = self._split("sound_speed", self.accuracy["sound_speed"], carried)
        return {
            "sound_speed": np.where(self.direct, sensor, 0.0),
            "completion_sound_speed": np.where(self.direct, filled, 0.0),
        }

    def _of_computed(self) -> tuple[dict[str, Floats], Floats]:
        levels, computed = self.levels, ~self.direct
        error = levels.equation.standard_error
        equation = np.where(levels.outside(), np.nan, np.nan if error is None else error)
        warm, salty = self._slope("temperature"), self._slope("salinity")
        carried = self._carried_up()
        temperature, warmer = self._split("temperature", self.accuracy["temperature"], carried[0])
        own = np.where(np.isnan(self.accuracy["salinity"]), SALINITY_UNCERTAINTY, self.accuracy["salinity"])
        assumed = np.where(np.isnan(self.accuracy["salinity"]), ASSUMED_SALINITY_UNCERTAINTY, self.accuracy["salinity"])
        salinity, saltier = self._split("salinity", own, carried[1])
        dry, cells = levels.spread(levels.dry), levels.spread(levels.from_conductivity)
        conductivity = salty * np.where(cells, own, 0.0)
        known = cells & np.isfinite(self.accuracy["conductivity"])
        if known.any():
            conductivity = np.where(known, self._slope("conductivity") * self.accuracy["conductivity"], conductivity)
        shapes = {
            "equation": equation,
            "temperature": warm * temperature,
            "salinity": np.where(dry | cells, 0.0, salty * salinity),
            "conductivity": conductivity,
            "completion_temperature": warm * warmer,
            "completion_salinity": salty * np.where(dry, np.hypot(assumed, carried[1]), saltier),
        }
        noise = np.hypot(self._noise("temperature", warm), np.where(dry, 0.0, self._noise("salinity", salty)))
        return {name: np.where(computed, shape, 0.0) for name, shape in shapes.items()}, np.where(computed, noise, 0.0)

    def _slope(self, name: str) -> Floats:
        """Derivative of the speed as the cast gives it: by temperature or pressure at constant conductivity, say."""
        step, rows = _STEPS[name], self._some
        slope = (self.levels.moved(rows=rows, **{name: step}) - self.speed[rows]) / step
        return np.interp(np.arange(self.speed.size), rows, slope)

    @cached_property
    def _some(self) -> NDArray[np.int64]:
        """Levels at which slopes are taken, the first and last of each cast among them; between, slopes are linear."""
        sizes = self.levels.row_size
        rows = [
            start + np.unique(np.linspace(0, size - 1, min(size, SLOPE_LEVELS)).astype(np.int64))
            for start, size in zip((np.cumsum(sizes) - sizes).tolist(), sizes.tolist(), strict=True)
            if size
        ]
        return np.concatenate(rows) if rows else np.empty(0, dtype=np.int64)

    def _of_vertical(self) -> tuple[Floats, Floats]:
        """The error of the speed from that of pressure or depth, and its noise.

        A pressure that reads too much by d puts the water of each level d too deep, and computes its speed for the
        pressure where it is put: what is wrong is the water, by its change over d, and not the effect of pressure.
        Where the speed itself was measured, that effect is displaced with it. The change is taken d upward and d
        downward: over a layer thinner than d, the gradient at the level would say nothing of it.
        """
        levels = self.levels
        vertical = np.where(levels.spread(levels.by_pressure), levels.columns["pressure"], levels.columns["depth"])
        usual = np.where(self.direct, 0.0, PRESSURE_UNCERTAINTY)
        stated = np.where(np.isnan(self.accuracy["pressure"]), usual, self.accuracy["pressure"])
        stated = np.maximum(stated, self.accuracy["pressure_fraction"] * vertical)
        by_name = {name: self._stated(name, stated) for name in ("pressure", "depth")}
        move = np.where(levels.spread(levels.by_pressure), by_name["pressure"], by_name["depth"])
        # The surface is where it is; what was put there is uncertain by other means.
        move = np.where(levels.level < 0, 0.0, move)
        if not move.any():
            return np.zeros(move.size), np.zeros(move.size)
        down, up = self._changes(vertical, np.maximum(move, 1e-9))
        size = np.sqrt(0.5 * (down**2 + up**2))
        sign = np.where(down - up > 0.0, -1.0, 1.0)
        noise = np.divide(size * self.accuracy["pressure_noise"], move, out=np.zeros(move.size), where=move > 0.0)
        measured = move > 0.0
        return np.where(measured, sign * size, 0.0), np.where(measured & ~self.direct, noise, 0.0)

    def _changes(self, vertical: Floats, move: Floats) -> tuple[Floats, Floats]:
        """Change of the water's share in the speed from each level to `move` below it and `move` above it."""
        levels = self.levels
        step = self._pressure_steps()
        down, up = np.zeros(self.speed.size), np.zeros(self.speed.size)
        stop = 0
        # Cast by cast, so that no number depends on which other casts are in the block.
        for size in levels.row_size.tolist():
            rows, stop = slice(stop, stop + size), stop + size
            if not size:
                continue
            place, d = vertical[rows], move[rows]
            water = self.speed[rows] - np.concatenate(([0.0], np.cumsum(step[rows][1:])))
            below = np.interp(place + d, place, water) - water
            above = np.interp(place - d, place, water) - water
            # where the cast ends, the change on its other side must serve for both
            over_top, over_bottom = place - d < place[0], place + d > place[-1]
            down[rows] = np.where(over_bottom & ~over_top, -above, below)
            up[rows] = np.where(over_top & ~over_bottom, -below, above)
        return down, up

    def _pressure_steps(self) -> Floats:
        """How much of the change of speed from the level before pressure alone has made; of no use on a first level."""
        kind = self.levels.equation.vertical
        if kind == "none" or self.direct.all():
            return np.zeros(self.speed.size)
        slope = self._slope("vertical")
        step = 0.5 * (slope[1:] + slope[:-1]) * np.diff(self.levels.columns[kind])
        return np.where(self.direct, 0.0, np.concatenate(([0.0], step)))
