"""From checked casts to depth and speed: one batch over flat columns, of which a single cast is the smallest case."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from ..casts.cast import CARRIED_UP
from ..casts.completing import ASSUMED_SALINITY_UNCERTAINTY
from ..errors import InputError
from ..water import (
    DEFAULT_EQUATION,
    Equation,
    assumptions,
    depth_and_speed_of_columns,
    depth_from_density,
    find_equation,
    pressure_of_columns,
    range_report,
    salinity_from_conductivity,
    speed_of_columns,
)
from .accuracy import PRESSURE_UNCERTAINTY, SALINITY_UNCERTAINTY, Accuracy, accuracy_by_name, columns_of
from .adding import total
from .features import SURFACE_REACH
from .ordering import downward
from .profile import Profile
from .shapes import Doubt

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from ..casts import CastBlock

    Floats = NDArray[np.float64]

_USABLE_FLAGS = (1, 2)
_SUSPECT = 3
_LEVELS_NEEDED = 2
_ALL = slice(None)
_VARIABLES = ("pressure", "depth", "temperature", "salinity", "conductivity", "sound_speed")
# What sea or lake water can be at all; beyond it a value is a fault of the instrument, whatever its flag says.
_POSSIBLE = {
    "pressure": (-np.inf, 12000.0),
    "depth": (-np.inf, 12000.0),
    "temperature": (-5.0, 100.0),
    "salinity": (0.0, 500.0),
    "conductivity": (0.0, 20.0),
    "sound_speed": (1000.0, 3000.0),
}


@dataclass(frozen=True, eq=False)
class SpeedColumns:
    """Depth and speed of the usable levels of many casts, one cast after another.

    Parameters
    ----------
    block : CastBlock
        The casts.
    equation : str
        Name of the equation.
    row_size : numpy.ndarray of int, shape (casts,)
        Levels of each cast; 0 where the cast gave no profile.
    depth, speed, uncertainty : numpy.ndarray, shape (levels,)
        m, m/s, m/s (k = 1; NaN where unknown). Depth strictly increases within a cast.
    shapes : mapping of str to numpy.ndarray, each of shape (levels,)
        What the uncertainty is made of, m/s: see `Profile`; zero for casts that have no such share.
    noise : numpy.ndarray, shape (levels,)
        The share that is independent on each level, m/s.
    level : numpy.ndarray of int, shape (levels,)
        Index into the columns of the block, -1 for a level added at the surface.
    direct : numpy.ndarray of bool, shape (casts,)
        Whether the speed was measured, not computed.
    notes : tuple of tuple of str
        For each cast what was assumed, left out or added.
    reasons : tuple of str
        For each cast why there is no profile; empty where there is one.
    """

    block: CastBlock
    equation: str
    row_size: NDArray[np.int64]
    depth: Floats
    speed: Floats
    uncertainty: Floats
    shapes: Mapping[str, Floats]
    noise: Floats
    level: NDArray[np.int64]
    direct: NDArray[np.bool_]
    notes: tuple[tuple[str, ...], ...]
    reasons: tuple[str, ...]
    starts: NDArray[np.int64] = field(init=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "starts", np.concatenate(([0], np.cumsum(self.row_size))))

    def profile(self, index: int) -> Profile:
        """The profile of one cast.

        Parameters
        ----------
        index : int
            Which cast of the block.

        Returns
        -------
        Profile

        Raises
        ------
        InputError
            If the cast gave none; the message names the cast and the reason.
        """
        block = self.block
        if self.reasons[index]:
            raise InputError(f"cast {block.id[index]!r}: {self.reasons[index]}")
        rows = slice(self.starts[index], self.starts[index + 1])
        shapes: dict[str, Floats] = {}
        noise = None
        if not np.isnan(self.uncertainty[rows]).all():
            own = {name: shape[rows] for name, shape in self.shapes.items()}
            shapes = {name: shape for name, shape in own.items() if np.any(shape != 0.0)}
            noise = self.noise[rows] if self.noise[rows].any() else None
        return Profile(
            self.depth[rows],
            self.speed[rows],
            shapes=shapes,
            noise=noise,
            id=block.id[index],
            time=block.time[index],
            latitude=block.latitude[index],
            longitude=block.longitude[index],
            equation="" if self.direct[index] else self.equation,
            notes=(*block.notes[index], *self.notes[index]),
            surface_assumed=self._surface_assumed(int(self.level[rows][0])),
        )

    def _surface_assumed(self, level: int) -> bool:
        """Whether a cast's first level was carried up to the surface, here or before."""
        origins = [self.block.origins[name] for name in ("temperature", "sound_speed") if name in self.block.origins]
        return level < 0 or any(column[level] == CARRIED_UP for column in origins)


def speeds_of_block(
    block: CastBlock,
    *,
    equation: str | Equation = DEFAULT_EQUATION,
    salinity: float | None = None,
    use_suspect: bool = False,
    accuracy: Accuracy | str | None = None,
) -> SpeedColumns:
    """Depth, sound speed and its uncertainty for every usable level of many casts at once.

    Parameters
    ----------
    block : CastBlock
        The casts; never changed.
    equation, salinity, use_suspect
        As for `Profile.from_cast`.
    accuracy : Accuracy or str, optional
        Uncertainties of the measurements, or the kind of instrument; where not given, for each cast by what it says of
        itself: those of an expendable probe, else those of the Argo programme.

    Returns
    -------
    SpeedColumns
        Casts that give no profile have no levels there, and a reason.

    Raises
    ------
    InputError
        For an unknown equation, or an impossible `salinity`.

    Examples
    --------
    >>> from ocean_sound.casts import Cast, CastBlock
    >>> cast = Cast(id="A", values={"depth": [0.0, 10.0], "temperature": [12.0, 11.0], "salinity": [35.0, 35.0]})
    >>> columns = speeds_of_block(CastBlock.from_casts([cast]), equation="mackenzie")
    >>> columns.speed.round(2), columns.reasons
    (array([1496.83, 1493.53]), ('',))
    """
    chosen = find_equation(equation)
    low, high = _POSSIBLE["salinity"]
    if salinity is not None and not low <= salinity <= high:
        raise InputError(f"salinity is {salinity:g}; a practical salinity from {low:g} to {high:g} would be right")
    accuracies = [accuracy_by_name(accuracy, attributes) for attributes in block.attributes]
    levels = Levels(block, chosen, salinity, use_suspect=use_suspect)
    levels.choose()
    levels.arrange()
    levels.place()
    speed = levels.speeds()
    shapes, noise = Doubt(levels, columns_of(accuracies), speed).shapes()
    levels.tell_basis(accuracies)
    return SpeedColumns(
        block=block,
        equation=chosen.name,
        row_size=levels.row_size,
        depth=levels.columns["depth"],
        speed=speed,
        uncertainty=total(shapes, noise),
        shapes=shapes,
        noise=noise,
        level=levels.level,
        direct=levels.direct,
        notes=tuple(map(tuple, levels.notes)),
        reasons=tuple(levels.reasons),
    )


class Levels:
    """The columns on their way: choose what each cast is made of, arrange its levels, place them in depth, compute.

    Before `arrange` the columns are as long as those of the block; afterwards they hold usable levels only.
    """

    def __init__(self, block: CastBlock, equation: Equation, salinity: float | None, *, use_suspect: bool) -> None:
        self.block, self.equation, self.salinity = block, equation, salinity
        self.row_size: NDArray[np.int64] = block.row_size
        self.notes: list[list[str]] = [[] for _ in block.id]
        self.reasons = [""] * len(block)
        self.suspects = np.zeros(len(block), dtype=int)
        flags = (*_USABLE_FLAGS, _SUSPECT) if use_suspect else _USABLE_FLAGS
        self.columns = {name: self._usable(name, flags) for name in _VARIABLES}
        self.has = {name: self._any(np.isfinite(column)) for name, column in self.columns.items()}
        # A speed that was measured is used where it can't be computed from what was measured with it.
        wet = self.has["salinity"] | self.has["conductivity"]
        self.direct = self.has["sound_speed"] & ~(self.has["temperature"] & wet)
        self.by_pressure = self.has["pressure"] & ~(self.direct & self.has["depth"])
        self.from_conductivity = self.has["conductivity"] & ~self.has["salinity"] & ~self.direct

    def _usable(self, name: str, flags: tuple[int, ...]) -> Floats:
        """A copy of a column with NaN for every value that may not be used."""
        column = self.block.values.get(name)
        if column is None:
            return np.full(int(self.block.starts[-1]), np.nan)
        low, high = _POSSIBLE[name]
        usable = (column >= low) & (column <= high)
        flag = self.block.flags.get(name)
        if flag is not None:
            if _SUSPECT not in flags:
                suspect = (usable & (flag == _SUSPECT)).astype(int)
                self.suspects += np.add.reduceat(suspect, self.block.starts[:-1])
            usable &= np.isin(flag, flags)
        return np.where(usable, column, np.nan)

    def _any(self, mask: NDArray[np.bool_]) -> NDArray[np.bool_]:
        return np.logical_or.reduceat(mask, self.block.starts[:-1])

    def spread(self, per_cast: NDArray[Any]) -> NDArray[Any]:
        """One value for each level of what is one value for each cast."""
        return np.repeat(per_cast, self.row_size)

    def choose(self) -> None:
        """What stands for the vertical and the salinity of each cast; a reason where there can be no profile."""
        columns, has = self.columns, self.has
        latitude = self.spread(self.block.latitude)
        depth, pressure = columns["depth"], columns["pressure"]
        self.vertical = np.where(self.spread(self.by_pressure), pressure, depth)
        columns["pressure"] = np.where(self.spread(self.by_pressure), pressure, pressure_of_columns(depth, latitude))
        if self.from_conductivity.any():
            columns["salinity"] = np.where(self.spread(self.from_conductivity), self._salinity(), columns["salinity"])
        self.dry = ~has["salinity"] & ~has["conductivity"] & ~self.direct
        assumed = self.salinity
        if assumed is None and "salinity" not in self.equation.arguments:
            assumed = 0.0
        if assumed is not None:
            columns["salinity"] = np.where(self.spread(self.dry), assumed, columns["salinity"])
        for index in range(len(self.block)):
            self.reasons[index] = self._reason(index, assumed)
            if not self.reasons[index]:
                self.notes[index] += self._choices(index, assumed, conductivity=bool(self.from_conductivity[index]))

    def _salinity(self, *, temperature: float = 0.0, conductivity: float = 0.0, vertical: float = 0.0) -> Floats:
        """Salinity from conductivity, with the inputs moved by so much."""
        columns = self.columns
        # In air and in fresh water the scale gives slightly negative salinities: pressure and result are held at 0.
        found: Floats = np.maximum(
            salinity_from_conductivity(
                columns["conductivity"] + conductivity,
                columns["temperature"] + temperature,
                np.maximum(columns["pressure"] + vertical, 0.0),
            ),
            0.0,
        )
        return found

    def _reason(self, index: int, assumed: float | None) -> str:
        """Why a cast can't give a profile for want of a variable."""
        has = {name: bool(mask[index]) for name, mask in self.has.items()}
        found = ", ".join(name.replace("_", " ") for name in has if has[name]) or "nothing"
        suspects = int(self.suspects[index])
        hint = f" ({suspects} suspect values are not used: use_suspect takes them)" if suspects else ""
        if not (has["pressure"] or has["depth"]):
            return f"no usable pressure and no usable depth; usable is {found}{hint}"
        if self.direct[index]:
            return ""
        if not has["temperature"]:
            return f"neither usable temperature nor usable sound speed; usable is {found}{hint}"
        if self.dry[index] and assumed is None:
            return (
                f"temperature but neither usable salinity nor usable conductivity; give the salinity to assume, "
                f"as salinity=35 (--salinity 35 on the command line){hint}"
            )
        return ""

    def _choices(self, index: int, assumed: float | None, *, conductivity: bool) -> list[str]:
        """What was chosen for a cast, in words."""
        has = {name: bool(mask[index]) for name, mask in self.has.items()}
        by_pressure, direct = bool(self.by_pressure[index]), bool(self.direct[index])
        latitude = bool(np.isfinite(self.block.latitude[index]))
        longitude = bool(np.isfinite(self.block.longitude[index]))
        at = "" if latitude else ", at latitude 45 degrees (none is given)"
        lines = []
        if direct:
            lines.append("sound speed as measured")
        elif has["sound_speed"]:
            lines.append(f"sound speed computed by {self.equation.name}; the sound speed in the file is not used")
        if by_pressure:
            density = "for the standard ocean" if direct else "by integrating the cast's own density"
            lines.append(f"depth from pressure {density}{at}")
            if has["depth"]:
                lines[-1] += "; the depth in the file is not used"
        elif not direct and self.equation.vertical == "pressure":
            lines.append(f"pressure from depth for the standard ocean{at}")
        if direct:
            return lines
        if conductivity:
            lines.append("salinity from conductivity (PSS-78)")
        elif self.dry[index]:
            lines.append(f"salinity assumed: {assumed:g}")
        kind = self.equation.vertical
        lines += assumptions(
            self.equation, vertical=None if kind == "none" else kind, latitude=latitude, longitude=longitude
        )
        return lines

    def arrange(self) -> None:
        """Keep the usable levels of each cast, in an order that goes strictly down."""
        columns = self.columns
        direct = self.spread(self.direct)
        # The first of these that holds is why a level is left out.
        lacking = {
            "without usable pressure or depth": ~np.isfinite(self.vertical),
            "above the surface": self.vertical < 0.0,
            "without usable sound speed": direct & ~np.isfinite(columns["sound_speed"]),
            "without usable temperature": ~direct & ~np.isfinite(columns["temperature"]),
            "without usable salinity": ~direct & ~np.isfinite(columns["salinity"]),
        }
        why = np.select(list(lacking.values()), list(range(len(lacking))), default=len(lacking))
        names = [*lacking, "not below the levels before"]
        kept: list[NDArray[np.int64]] = []
        for index, (start, stop) in enumerate(zip(self.block.starts[:-1], self.block.starts[1:], strict=True)):
            usable = np.flatnonzero(why[start:stop] == len(lacking)) + start
            order, sorted_ = downward(self.vertical[usable])
            counts = np.bincount(why[start:stop], minlength=len(names)).tolist()[: len(lacking)]
            lost = {name: count for name, count in zip(lacking, counts, strict=True) if count}
            if usable.size > order.size:
                lost[names[-1]] = usable.size - order.size
            self._account(index, int(stop - start), order.size, lost, sorted_=sorted_)
            kept.append(usable[order] if not self.reasons[index] else usable[:0])
        self.level = np.concatenate(kept) if kept else np.empty(0, dtype=np.int64)
        self.columns = {name: column[self.level] for name, column in columns.items()}
        self.row_size = np.array([rows.size for rows in kept], dtype=np.int64)

    def _account(self, index: int, total: int, kept: int, lost: dict[str, int], *, sorted_: bool) -> None:
        """Say which levels were left out, or that too few remain."""
        if self.reasons[index]:
            return
        counts = ", ".join(f"{count} {name}" for name, count in lost.items())
        suspects = int(self.suspects[index])
        hint = f"; {suspects} suspect values (flag 3) were not used" if suspects else ""
        if kept < _LEVELS_NEEDED:
            of = f" ({counts}{hint})" if counts else ""
            plural = "" if kept == 1 else "s"
            self.reasons[index] = f"{kept} usable level{plural} of {total}; a profile needs {_LEVELS_NEEDED}{of}"
            return
        if sorted_:
            self.notes[index].append("the levels were in no order: sorted by depth")
        if counts:
            self.notes[index].append(f"{kept} of {total} levels used; left out: {counts}{hint}")

    def place(self) -> None:
        """Give every level its depth, and each cast that begins near the surface a level at the surface."""
        columns = self.columns
        from_pressure = self.spread(self.by_pressure)
        if self.equation.name == "teos10" and from_pressure.all() and not self.direct.any():
            # The usual case, in which depth and speed share what costs most.
            columns["depth"], columns["teos10"] = depth_and_speed_of_columns(
                columns["pressure"],
                columns["temperature"],
                columns["salinity"],
                latitude=self.spread(self.block.latitude),
                longitude=self.spread(self.block.longitude),
                row_size=self.row_size,
            )
        elif from_pressure.any():
            direct = self.spread(self.direct)
            columns["depth"][from_pressure] = depth_from_density(
                columns["pressure"][from_pressure],
                np.where(direct, np.nan, columns["temperature"])[from_pressure],
                np.where(direct, np.nan, columns["salinity"])[from_pressure],
                latitude=self.spread(self.block.latitude)[from_pressure],
                longitude=self.spread(self.block.longitude)[from_pressure],
                row_size=self.row_size[self.by_pressure],
            )
        filled = np.flatnonzero(self.row_size)
        first = (np.cumsum(self.row_size) - self.row_size)[filled]
        depth = columns["depth"][first]
        for index, top in zip(filled.tolist(), depth.tolist(), strict=True):
            if top > SURFACE_REACH:
                self.notes[index].append(
                    f"the profile starts at {top:.1f} m: the first level is too deep to tell of the surface"
                )
            elif top > 0.0:
                what = "sound speed" if self.direct[index] else "temperature and salinity"
                self.notes[index].append(f"a level added at 0 m with the {what} of the first level ({top:.2f} m)")
        raised = (depth > 0.0) & (depth <= SURFACE_REACH)
        at = first[raised]
        for name, column in columns.items():
            value = 0.0 if name in ("depth", "pressure") else column[at]
            columns[name] = np.insert(column, at, value)
        self.level = np.insert(self.level, at, -1)
        self.row_size = self.row_size.copy()
        self.row_size[filled[raised]] += 1

    def moved(
        self,
        *,
        temperature: float = 0.0,
        salinity: float = 0.0,
        conductivity: float = 0.0,
        vertical: float = 0.0,
        rows: NDArray[np.int64] | slice = _ALL,
    ) -> Floats:
        """Speed by the equation with what was measured moved by so much; salinity follows where it was computed."""
        name = "depth" if self.equation.vertical == "depth" else "pressure"
        columns = self.columns
        salt = columns["salinity"] + salinity
        if self.from_conductivity.any() and (temperature or conductivity or vertical):
            change = (
                self._salinity(temperature=temperature, conductivity=conductivity, vertical=vertical) - self._salinity()
            )
            salt = np.where(self.spread(self.from_conductivity), salt + change, salt)
        return speed_of_columns(
            columns["temperature"][rows] + temperature,
            salt[rows],
            latitude=self.spread(self.block.latitude)[rows],
            longitude=self.spread(self.block.longitude)[rows],
            equation=self.equation,
            **{name: columns[name][rows] + vertical},
        )

    def speeds(self) -> Floats:
        """Speed on every level."""
        known = self.columns.pop("teos10", None)
        if known is not None:
            added = np.flatnonzero(self.level < 0)
            known[added] = self.moved(rows=added)
            return known
        direct = self.spread(self.direct)
        if direct.all():
            return self.columns["sound_speed"]
        return np.where(direct, self.columns["sound_speed"], self.moved())

    def outside(self) -> NDArray[np.bool_]:
        """Which levels lie outside the range of the equation; a line to each cast that has some."""
        name = "depth" if self.equation.vertical == "depth" else "pressure"
        computed = ~self.spread(self.direct)
        inputs = {key: np.where(computed, self.columns[key], np.nan) for key in ("temperature", "salinity", name)}
        outside: NDArray[np.bool_] = range_report(self.equation, **inputs).outside & computed
        if outside.any():
            starts = np.concatenate(([0], np.cumsum(self.row_size)))
            cast = np.repeat(np.arange(self.row_size.size), self.row_size)
            for index in np.unique(cast[outside]).tolist():
                rows = slice(starts[index], starts[index + 1])
                self.notes[index] += range_report(
                    self.equation, **{key: column[rows] for key, column in inputs.items()}
                ).notes
        return outside

    def tell_basis(self, accuracies: Sequence[Accuracy]) -> None:
        """Say to each cast what its uncertainty is made of."""
        equation, stated = self.equation, self.block.uncertainties
        for index in np.flatnonzero(self.row_size > 0).tolist():
            accuracy, notes = accuracies[index], self.notes[index]
            if self.direct[index]:
                rows = slice(self.block.starts[index], self.block.starts[index + 1])
                own = "sound_speed" in stated and np.isfinite(stated["sound_speed"][rows]).any()
                if accuracy.sound_speed is None and not own:
                    notes.append("no uncertainty: that of the measured sound speed was not given")
                continue
            if equation.standard_error is None:
                notes.append(f"no uncertainty: no standard error of {equation.name} is known")
                continue
            usual = ASSUMED_SALINITY_UNCERTAINTY if self.dry[index] else SALINITY_UNCERTAINTY
            salinity = usual if accuracy.salinity is None else accuracy.salinity
            salt = f"{salinity:g} of salinity"
            if self.from_conductivity[index] and accuracy.conductivity is not None:
                salt = f"{accuracy.conductivity:g} S/m"
            vertical = PRESSURE_UNCERTAINTY if accuracy.pressure is None else accuracy.pressure
            unit = "dbar" if self.by_pressure[index] else "m"
            share = f" or {100.0 * accuracy.pressure_fraction:g} % if greater" if accuracy.pressure_fraction else ""
            notes.append(
                f"uncertainty (k = 1) from {equation.standard_error:g} m/s of {equation.name}, "
                f"{accuracy.temperature:g} degC, {salt} and {vertical:g} {unit}{share}"
            )
