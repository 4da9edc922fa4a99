"""Extending a cast up to the surface or down: which water, where its levels go, how uncertain it is."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, Literal, TypeAlias

import numpy as np

from ..errors import InputError
from ..water import conductivity_from_salinity, depth_from_density, pressure_of_columns, speed_of_columns
from .cast import AS_MEASURED, CARRIED_DOWN, CARRIED_UP, MISSING, NOT_EVALUATED, VERTICAL, Cast, plain_fields
from .donors import Donor, Source, donor_of, usable_water

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

Above: TypeAlias = Literal["first"] | Source
Below: TypeAlias = Literal["constant"] | Source

# How far a difference between the cast and the water lent to it lives on, m: an e-folding scale. Anomalies of the upper
# ocean reach over tens of metres, those of the thermocline and below over hundreds (common practice, no published
# number).
SCALE_ABOVE = 50.0
SCALE_BELOW = 300.0
# How far the water of a place lies from what a climatology or a neighbour says (k = 1): at the surface, and far down,
# with the depth over which the first dies away (common practice, no published number; who knows better says so).
_SPREAD = {"temperature": (2.0, 0.05), "salinity": (0.3, 0.01)}
_SPREAD_DEPTH = 400.0  # m
# Water carried up from the first level: a calm, sunny day warms the top metres by a degree, rain freshens them.
_CARRIED_UP = {"temperature": (0.05, 1.0), "salinity": (0.01, 0.3)}  # per metre, at most
# Water carried down from the last level: as if the mean gradient of the cast's deepest quarter went on, at least so
# much for each metre, and at most so much in all.
_CARRIED_DOWN = {"temperature": (1e-3, 3.0), "salinity": (1e-4, 1.0)}
# m/s per degC and per unit of salinity, for spreads of a cast that measured the speed itself: 4.6 to 3.0 and 1.4 to 1.0
# over 0 to 25 degC (any equation); the larger half.
_SLOPES = {"temperature": 4.0, "salinity": 1.3}
# With constant temperature and salinity the speed bends by 2.5e-7 1/(s m): layers of 200 m are straight to 1.3 mm/s.
_CONSTANT_STEP = 200.0
# Where to put levels so that the offset's decay is followed, in units of its scale.
_DECAY_STEPS = np.array([0.1, 0.2, 0.35, 0.5, 0.75, 1.0, 1.4, 1.8, 2.4, 3.0, 4.0])
_NEAREST = 0.01  # m between two levels
_MARGIN = 1e-3  # m by which the deepest level reaches beyond the depth asked for


def carried_up_uncertainty(distance: Floats) -> tuple[Floats, Floats]:
    """Standard uncertainty of temperature (degC) and salinity carried up by a distance, m.

    >>> [float(u) for u in carried_up_uncertainty(np.float64(4.0))]
    [0.2, 0.04]
    """
    return tuple(np.minimum(slope * distance, most) for slope, most in _CARRIED_UP.values())  # type: ignore[return-value]


def spread_of_lent(name: str, depth: Floats) -> Floats:
    """How far lent water may lie from the truth at a depth, far from the cast."""
    top, deep = _SPREAD[name]
    spread: Floats = deep + top * np.exp(-depth / _SPREAD_DEPTH)
    return spread


@dataclass(frozen=True, eq=False)
class _Water:
    """Added levels, from the join outward: their depth, values by name, uncertainties by name, origin."""

    depth: Floats
    values: dict[str, Floats]
    spread: dict[str, Floats]
    origin: int


class Extension:
    """One cast on its way to be extended at one end."""

    def __init__(self, cast: Cast, scale: float, spread: dict[str, float | None]) -> None:
        self.cast, self.scale, self.given = cast, scale, spread
        rows, depth, temperature, salinity = usable_water(cast)
        self.direct = (
            "sound_speed" in cast.values and cast.good("sound_speed").any() and not np.isfinite(salinity).any()
        )
        if self.direct:
            rows, depth, speed, _ = usable_water(_speed_as_temperature(cast))
            own = {"sound_speed": speed}
        else:
            own = {"temperature": temperature}
            if np.isfinite(salinity).any():
                whole = np.isfinite(salinity)
                rows, depth = rows[whole], depth[whole]
                own = {"temperature": temperature[whole], "salinity": salinity[whole]}
        if rows.size == 0:
            raise InputError(f"cast {cast.id!r}: has no usable level, so there is nothing to extend")
        # As the profile does: of a cast that goes down and up again the longer way counts.
        last = int(np.argmax(depth))
        self.downward = last >= rows.size - 1 - last
        way = np.arange(last + 1) if self.downward else np.arange(last, rows.size)[::-1]
        keep = np.concatenate(([True], depth[way][1:] > np.maximum.accumulate(depth[way])[:-1]))
        way = way[keep]
        self.ends = (int(rows[0]), int(rows[last])) if self.downward else (int(rows[-1]), int(rows[last]))
        self.rows, self.depth = rows[way], depth[way]
        self.own = {name: column[way] for name, column in own.items()}
        self.by_pressure = "pressure" in cast.values and bool(cast.good("pressure")[self.rows].all())
        if self.by_pressure and "salinity" in self.own:
            self.depth = self._own_depth(cast.values["pressure"][self.rows], self.own)

    @property
    def deepest(self) -> float:
        """Depth of the last usable level, m."""
        return float(self.depth[-1])

    def up(self, source: Above) -> Cast:
        """The cast carried up to the surface."""
        top = float(self.depth[0])
        if top <= 0.0:
            return self.cast
        if isinstance(source, str):
            depth = np.zeros(1)
            values = {name: column[:1] for name, column in self.own.items()}
            if self.direct:
                values = {"sound_speed": self._pressure_only(0, depth)}
            away = carried_up_uncertainty(np.array([top]))
            spread = self._carried(dict(zip(_SPREAD, away, strict=True)), 0)
            water = _Water(depth, values, spread, CARRIED_UP)
            note = f"water of the first level ({top:.2f} m) carried up to the surface"
        else:
            water = self._lent(source, 0, 0.0)
            note = f"{water.depth.size} levels above {top:.2f} m from {self.words}, joined over {self.scale:g} m"
        return self._joined(water, note, top=True)

    def down(self, source: Below, to_depth: float | None) -> Cast:
        """The cast carried down, as far as asked or as the source reaches."""
        last = self.deepest
        if to_depth is not None and last >= to_depth:
            return self.cast
        if isinstance(source, str):
            count = int(np.ceil((float(to_depth or last) - last) / _CONSTANT_STEP))
            depth = np.linspace(last, float(to_depth or last), count + 1)[1:]
            values = {name: np.full(depth.size, column[-1]) for name, column in self.own.items()}
            if self.direct:
                values = {"sound_speed": self._pressure_only(-1, depth)}
            spread = {name: self._drift(name) * (depth - last) for name in _SPREAD}
            spread = {name: np.minimum(column, _CARRIED_DOWN[name][1]) for name, column in spread.items()}
            water = _Water(depth, values, self._carried(spread, -1), CARRIED_DOWN)
            note = f"temperature and salinity of the last level ({last:.2f} m) carried down to {depth[-1]:g} m"
        else:
            water = self._lent(source, -1, np.inf if to_depth is None else to_depth)
            if water.depth.size == 0:
                return self.cast
            note = f"{water.depth.size} levels below {last:.2f} m from {self.words}, joined over {self.scale:g} m"
        return self._joined(water, note, top=False)

    def _lent(self, source: Source, end: int, goal: float) -> _Water:
        """Lent water from the join outward, with the difference at the join dying away."""
        donor = donor_of(source, self.cast)
        self.words = donor.words
        if donor.salinity is None and ("salinity" in self.own or self.direct):
            raise InputError(f"cast {self.cast.id!r}: {donor.words} has no salinity to lend with its temperature")
        join = float(self.depth[end])
        doubt = {name: self._doubt_at(name, end) for name in self.own}
        goal = min(goal, float(donor.depth[-1])) if end else goal
        depth = self._levels(donor, join, goal)
        if depth.size == 0:
            return _Water(depth, {}, {}, donor.origin)
        here, there = self._water_of(donor, np.array([join])), self._water_of(donor, depth)
        away = np.abs(depth - join) / self.scale
        values, spread = {}, {}
        for name, column in there.items():
            offset = float(self.own[name][end] - here[name][0])
            values[name] = column + offset * np.exp(-away)
            far, near = self._far(name, depth), float(self._far(name, np.array([join]))[0])
            larger = max(1.0, abs(offset) / near) if near > 0.0 else 1.0
            spread[name] = np.hypot(larger * far * np.sqrt(-np.expm1(-2.0 * away)), doubt[name] * np.exp(-away))
        return _Water(depth, values, spread, donor.origin)

    def _levels(self, donor: Donor, join: float, goal: float) -> Floats:
        """The donor's own levels, some more where the offset dies away, and the goal; from the join outward."""
        low, high = min(join, goal), max(join, goal)
        steps = join + np.sign(goal - join) * self.scale * _DECAY_STEPS
        levels = np.unique(np.concatenate((donor.depth, steps, [goal])))
        levels = levels[(levels >= low) & (levels <= high) & (np.abs(levels - join) > _NEAREST)]
        levels = levels if goal > join else levels[::-1]
        if levels.size:
            # of two that nearly coincide the one nearer to the goal stays
            levels = levels[np.append(np.abs(np.diff(levels)) > _NEAREST, True)]
        return levels

    def _water_of(self, donor: Donor, depth: Floats) -> dict[str, Floats]:
        """The donor's values of what the cast has."""
        temperature, salinity = donor.at(depth)
        if not self.direct:
            return {name: {"temperature": temperature, "salinity": salinity}[name] for name in self.own}
        return {"sound_speed": self._speed(temperature, salinity, depth)}

    def _speed(self, temperature: Floats, salinity: Floats, depth: Floats) -> Floats:
        cast = self.cast
        return speed_of_columns(
            temperature,
            salinity,
            pressure=pressure_of_columns(depth, cast.latitude),
            latitude=cast.latitude,
            longitude=cast.longitude,
        )

    def _pressure_only(self, end: int, depth: Floats) -> Floats:
        """Speed in water of constant temperature and salinity, of which only the speed at one end is known.

        Taken for sea water of salinity 35 as warm as that speed asks for; from fresh water and from brine the effect of
        pressure differs by a few per cent.
        """
        join, speed = self.depth[end : end + 1 or None], float(self.own["sound_speed"][end])
        salt, warm = np.full(1, 35.0), np.full(1, 10.0)
        for _ in range(30):
            found = self._speed(warm, salt, join)
            warm = np.clip(warm + (speed - found) / _SLOPES["temperature"], -2.0, 40.0)
        rise = self._speed(np.full(depth.size, warm[0]), np.full(depth.size, salt[0]), depth) - found
        return speed + rise

    def _far(self, name: str, depth: Floats) -> Floats:
        """Uncertainty of lent water far from the cast, of one variable of the cast."""
        return self._spread_of({of: spread_of_lent(of, depth) for of in _SPREAD})[name]

    def _spread_of(self, spread: dict[str, Floats]) -> dict[str, Floats]:
        """Uncertainties of the cast's own variables from those of temperature and salinity."""
        stated = {of: self.given.get(of) for of in spread}
        given = {
            of: column if stated[of] is None else np.full(column.shape, stated[of]) for of, column in spread.items()
        }
        return {"sound_speed": self._of_speed(given)} if self.direct else {name: given[name] for name in self.own}

    def _carried(self, spread: dict[str, Floats], end: int) -> dict[str, Floats]:
        """Uncertainties of carried water: of the way, and of the level that it was carried from."""
        return {name: np.hypot(column, self._doubt_at(name, end)) for name, column in self._spread_of(spread).items()}

    def _doubt_at(self, name: str, end: int) -> float:
        """Uncertainty of a value at the join that was itself filled in; 0 where it was measured."""
        row = self.rows[end]
        if name not in self.cast.origins or self.cast.origins[name][row] == AS_MEASURED:
            return 0.0
        return float(np.nan_to_num(self.cast.uncertainties.get(name, np.zeros(len(self.cast)))[row]))

    @staticmethod
    def _of_speed(spread: dict[str, Floats]) -> Floats:
        return np.hypot(*(_SLOPES[of] * column for of, column in spread.items()))

    def _drift(self, name: str) -> float:
        """Mean gradient of a variable over the deepest quarter of the cast (two levels or more), or the stated one."""
        least = _CARRIED_DOWN[name][0]
        if name not in self.own:
            return least
        deep = self.depth >= 0.75 * self.deepest
        deep[-2:] = True
        reach = float(np.ptp(self.depth[deep]))
        change = float(np.abs(self.own[name][deep][-1] - self.own[name][deep][0]))
        return max(least, change / reach) if reach > 0.0 else least

    def _own_depth(self, pressure: Floats, water: dict[str, Floats]) -> Floats:
        cast = self.cast
        return depth_from_density(
            pressure, water["temperature"], water["salinity"], latitude=cast.latitude, longitude=cast.longitude
        )

    def _pressures(self, water: _Water, *, top: bool) -> Floats:
        """Pressure at which the added levels have their depth, by the cast's own density where that is known."""
        own = self.cast.values["pressure"][self.rows]
        latitude = self.cast.latitude
        if top:
            found: Floats = own[0] * water.depth / self.depth[0]
            return found
        join = own[-1] - pressure_of_columns(self.depth[-1:], latitude)
        pressure: Floats = pressure_of_columns(water.depth, latitude) + join
        if "salinity" not in self.own:
            return pressure
        goal = water.depth + _MARGIN
        both = {name: np.concatenate((column, water.values[name])) for name, column in self.own.items()}
        for _ in range(4):
            depth = self._own_depth(np.concatenate((own, pressure)), both)[own.size :]
            pressure = pressure + (goal - depth)
        return pressure

    def _joined(self, water: _Water, note: str, *, top: bool) -> Cast:
        """The cast with the added levels in their place."""
        cast = self.cast
        values = dict(water.values)
        values["depth"] = water.depth
        if self.by_pressure:
            values["pressure"] = self._pressures(water, top=top)
        elif "pressure" in cast.values:
            values["pressure"] = pressure_of_columns(water.depth, cast.latitude)
        if "salinity" in values and not ("salinity" in cast.values and cast.good("salinity").any()):
            pressure = values.get("pressure", pressure_of_columns(water.depth, cast.latitude))
            values["conductivity"] = conductivity_from_salinity(values["salinity"], values["temperature"], pressure)
        # Before or after which level, and in which direction, so that the cast still goes one way.
        before = top == self.downward
        at = self.ends[0 if top else 1] + (0 if before else 1)
        turn = slice(None, None, -1) if before else slice(None)
        turned = _Water(
            water.depth[turn],
            {name: column[turn] for name, column in values.items()},
            {name: column[turn] for name, column in water.spread.items()},
            water.origin,
        )
        return _inserted(cast, at, turned, note)


def _speed_as_temperature(cast: Cast) -> Cast:
    """The cast with its speed in the place of the temperature; as in a profile, its depth goes before its pressure."""
    by_pressure = "depth" not in cast.values or ("pressure" in cast.values and not cast.good("depth").any())
    vertical = "pressure" if by_pressure else "depth"
    names = {vertical: vertical, "sound_speed": "temperature"}
    return replace(
        cast,
        values={to: cast.values[name] for name, to in names.items()},
        flags={to: cast.flags[name] for name, to in names.items() if name in cast.flags},
        uncertainties={},
        origins={},
    )


def _inserted(cast: Cast, at: int, water: _Water, note: str) -> Cast:
    """The cast with levels put in before a row; what is not known there is missing."""
    count = water.depth.size
    fields = plain_fields(cast)

    def put(column: Any, added: Any) -> Any:
        return np.insert(column, at, np.broadcast_to(added, count))

    for name, column in cast.values.items():
        added = water.values.get(name, np.full(count, np.nan))
        fields["values"][name] = put(column, added)
        own = cast.flags.get(name, np.where(np.isfinite(column), NOT_EVALUATED, MISSING))
        fields["flags"][name] = put(own, np.where(np.isfinite(added), NOT_EVALUATED, MISSING)).astype(np.int8)
        origins = cast.origins.get(name, np.zeros(column.size, np.int8))
        if name in water.values and name not in VERTICAL:
            fields["origins"][name] = put(origins, water.origin).astype(np.int8)
        elif name in cast.origins:
            fields["origins"][name] = put(origins, AS_MEASURED).astype(np.int8)
        spread = cast.uncertainties.get(name, np.full(column.size, np.nan))
        # The depth of an added level is chosen, not measured.
        fields["uncertainties"][name] = put(spread, 0.0 if name in VERTICAL else water.spread.get(name, np.nan))
    fields["uncertainties"] = {k: v for k, v in fields["uncertainties"].items() if np.isfinite(v).any()}
    return Cast(**(fields | {"notes": (*cast.notes, note)}))
