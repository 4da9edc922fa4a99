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
    depth_from_density,
    find_equation,
    pressure_of_columns,
    range_report,
    salinity_from_conductivity,
    speed_of_columns,
)
from ..water.batch import Batch
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

_PASS, _NOT_EVALUATED, _SUSPECT = 1, 2, 3
_LEVELS_NEEDED = 2
# From so many casts on TEOS-10 is computed by compiled kernels, which take longer to load than a few casts by gsw.
_MANY = 16
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
    compiled: bool | None = None,
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
    compiled : bool, optional
        Whether the speed by `teos10` is computed by compiled kernels, which takes a sixth of the time but 0.3 s to
        load; by default from 16 casts on. The numbers are the same.

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
    if chosen.name == "teos10" and (len(block) >= _MANY if compiled is None else compiled):
        levels.batch = Batch(block.latitude, block.longitude)
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
        self.columns: dict[str, Floats] = {}
        self.has: dict[str, NDArray[np.bool_]] = {}
        for name in _VARIABLES:
            self._take_usable(name, _SUSPECT if use_suspect else _NOT_EVALUATED)
        has = self.has
        # A speed that was measured is used where it can't be computed from what was measured with it.
        wet = has["salinity"] | has["conductivity"]
        self.direct = has["sound_speed"] & ~(has["temperature"] & wet)
        self.by_pressure = has["pressure"] & ~(self.direct & has["depth"])
        self.from_conductivity = has["conductivity"] & ~has["salinity"] & ~self.direct
        self.batch: Batch | None = None

    def _take_usable(self, name: str, worst: int) -> None:
        """A column with NaN for every value that may not be used, and which casts have any."""
        column = self.block.values.get(name)
        if column is None:
            self.columns[name] = _nothing(int(self.block.starts[-1]))
            self.has[name] = np.zeros(len(self.block), dtype=bool)
            return
        low, high = _POSSIBLE[name]
        usable = (column >= low) & (column <= high)
        flag = self.block.flags.get(name)
        if flag is not None:
            if worst < _SUSPECT:
                suspect = usable & (flag == _SUSPECT)
                if suspect.any():
                    self.suspects += np.add.reduceat(suspect.astype(int), self.block.starts[:-1])
            usable &= (flag >= _PASS) & (flag <= worst)
        self.columns[name] = column if usable.all() else np.where(usable, column, np.nan)
        self.has[name] = np.logical_or.reduceat(usable, self.block.starts[:-1])

    def spread(self, per_cast: NDArray[Any]) -> NDArray[Any]:
        """One value for each level of what is one value for each cast."""
        return np.repeat(per_cast, self.row_size)

    def either(self, per_cast: NDArray[np.bool_], yes: Any, no: Any) -> Any:
        """On each level one of two columns, by what holds for its cast."""
        if per_cast.all():
            return yes
        return np.where(self.spread(per_cast), yes, no) if per_cast.any() else no

    def cast_of(self, rows: NDArray[np.int64]) -> NDArray[np.int64]:
        """The cast to which each of some levels belongs."""
        return np.searchsorted(np.cumsum(self.row_size), rows, side="right")

    def choose(self) -> None:
        """What stands for the vertical and the salinity of each cast; a reason where there can be no profile."""
        columns, has = self.columns, self.has
        depth, pressure = columns["depth"], columns["pressure"]
        self.vertical = self.either(self.by_pressure, pressure, depth)
        if not self.by_pressure.all():
            converted = pressure_of_columns(depth, self.spread(self.block.latitude))
            columns["pressure"] = self.either(self.by_pressure, pressure, converted)
        if self.from_conductivity.any():
            columns["salinity"] = self.either(self.from_conductivity, self._salinity(slice(None)), columns["salinity"])
        self.dry = ~has["salinity"] & ~has["conductivity"] & ~self.direct
        assumed = self.salinity
        if assumed is None and "salinity" not in self.equation.arguments:
            assumed = 0.0
        if assumed is not None and self.dry.any():
            columns["salinity"] = np.where(self.spread(self.dry), assumed, columns["salinity"])
        place = np.isfinite(self.block.latitude), np.isfinite(self.block.longitude)
        kinds = (*has.values(), self.direct, self.by_pressure, self.from_conductivity, self.dry, *place, self.suspects)
        said: dict[tuple[Any, ...], tuple[str, list[str]]] = {}  # thousands of casts are of a few kinds
        for index, kind in enumerate(zip(*(column.tolist() for column in kinds), strict=True)):
            if kind not in said:
                reason = self._reason(index, assumed)
                said[kind] = reason, [] if reason else self._choices(index, assumed)
            self.reasons[index], lines = said[kind]
            self.notes[index] += lines

    def _salinity(
        self,
        rows: NDArray[np.int64] | slice,
        *,
        temperature: float = 0.0,
        conductivity: float = 0.0,
        vertical: float = 0.0,
    ) -> Floats:
        """Salinity from conductivity on some levels, with the inputs moved by so much."""
        columns = self.columns
        # In air and in fresh water the scale gives slightly negative salinities: pressure and result are held at 0.
        found: Floats = np.maximum(
            salinity_from_conductivity(
                columns["conductivity"][rows] + conductivity,
                columns["temperature"][rows] + temperature,
                np.maximum(columns["pressure"][rows] + vertical, 0.0),
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

    def _choices(self, index: int, assumed: float | None) -> list[str]:
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
        if self.from_conductivity[index]:
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
        columns, starts = self.columns, self.block.starts
        finite = {name: np.isfinite(columns[name]) for name in ("sound_speed", "temperature", "salinity")}
        good = self.either(self.direct, finite["sound_speed"], finite["temperature"] & finite["salinity"])
        further = good & (self.vertical >= 0.0)
        further[1:] &= self.vertical[1:] > self.vertical[:-1]
        further[starts[:-1]] = (good & (self.vertical >= 0.0))[starts[:-1]]
        whole = np.logical_and.reduceat(further, starts[:-1]) & (self.row_size >= _LEVELS_NEEDED)
        whole &= [not reason for reason in self.reasons]
        if whole.all():  # as most casts are
            self.level = np.arange(starts[-1])
            return
        direct = self.spread(self.direct)
        # The first of these that holds is why a level is left out.
        lacking = {
            "without usable pressure or depth": ~np.isfinite(self.vertical),
            "above the surface": self.vertical < 0.0,
            "without usable sound speed": direct & ~finite["sound_speed"],
            "without usable temperature": ~direct & ~finite["temperature"],
            "without usable salinity": ~direct & ~finite["salinity"],
        }
        why = np.select(list(lacking.values()), list(range(len(lacking))), default=len(lacking))
        kept = [
            np.arange(start, stop) if all_of_it else self._kept(index, start, why[start:stop], list(lacking))
            for index, (start, stop, all_of_it) in enumerate(
                zip(starts[:-1].tolist(), starts[1:].tolist(), whole.tolist(), strict=True)
            )
        ]
        self.level = np.concatenate(kept)
        self.columns = {name: _picked(column, self.level) for name, column in columns.items()}
        self.row_size = np.array([rows.size for rows in kept], dtype=np.int64)

    def _kept(self, index: int, start: int, why: NDArray[Any], lacking: list[str]) -> NDArray[np.int64]:
        """The usable levels of a cast that isn't usable as it is; it is told why not."""
        usable = np.flatnonzero(why == len(lacking)) + start
        order, sorted_ = downward(self.vertical[usable])
        counts = np.bincount(why, minlength=len(lacking)).tolist()[: len(lacking)]
        lost = {name: count for name, count in zip(lacking, counts, strict=True) if count}
        if usable.size > order.size:
            lost["not below the levels before"] = usable.size - order.size
        self._account(index, why.size, order.size, lost, sorted_=sorted_)
        return usable[order] if not self.reasons[index] else usable[:0]

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
        if self.batch is not None and self.by_pressure.all() and not self.direct.any():
            # The usual case, in which depth and speed share what costs most.
            columns["depth"], columns["teos10"] = self.batch.depth_and_speed(
                columns["temperature"], columns["salinity"], columns["pressure"], self.row_size
            )
        elif self.by_pressure.any():
            columns["depth"] = self._depth()
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
        if not raised.any():
            return
        at = first[raised]
        lent = np.insert(np.arange(self.level.size), at, at)  # an added level has what the one below it has
        self.columns = {name: _picked(column, lent) for name, column in columns.items()}
        self.level = self.level[lent]
        added = at + np.arange(at.size)
        self.level[added] = -1
        self.columns["depth"][added] = self.columns["pressure"][added] = 0.0
        self.row_size = self.row_size.copy()
        self.row_size[filled[raised]] += 1

    def _depth(self) -> Floats:
        """Depth from pressure for the casts that go by it, as it was read for the others."""
        rows, direct = self.spread(self.by_pressure), self.spread(self.direct)
        depth = self.columns["depth"].copy()
        depth[rows] = depth_from_density(
            self.columns["pressure"][rows],
            np.where(direct, np.nan, self.columns["temperature"])[rows],
            np.where(direct, np.nan, self.columns["salinity"])[rows],
            latitude=self.spread(self.block.latitude)[rows],
            longitude=self.spread(self.block.longitude)[rows],
            row_size=self.row_size[self.by_pressure],
        )
        return depth

    def moved(
        self,
        rows: NDArray[np.int64],
        *,
        temperature: float = 0.0,
        salinity: float = 0.0,
        conductivity: float = 0.0,
        vertical: float = 0.0,
    ) -> Floats:
        """Speed by the equation on some levels, in their order, with what was measured moved by so much.

        Salinity follows where it was computed.
        """
        columns, cast = self.columns, self.cast_of(rows)
        salt = columns["salinity"][rows] + salinity
        if self.from_conductivity.any() and (temperature or conductivity or vertical):
            change = self._salinity(
                rows, temperature=temperature, conductivity=conductivity, vertical=vertical
            ) - self._salinity(rows)
            salt = np.where(self.from_conductivity[cast], salt + change, salt)
        name = "depth" if self.equation.vertical == "depth" else "pressure"
        warmth, place = columns["temperature"][rows] + temperature, columns[name][rows] + vertical
        if self.batch is not None:
            return self.batch.speed(warmth, salt, place, np.bincount(cast, minlength=self.row_size.size))
        return speed_of_columns(
            warmth,
            salt,
            latitude=self.block.latitude[cast],
            longitude=self.block.longitude[cast],
            equation=self.equation,
            **{name: place},
        )

    def speeds(self) -> Floats:
        """Speed on every level."""
        known = self.columns.pop("teos10", None)
        if known is not None:
            added = np.flatnonzero(self.level < 0)
            known[added] = self.moved(added)
            return known
        if self.direct.all():
            return self.columns["sound_speed"]
        return np.asarray(self.either(self.direct, self.columns["sound_speed"], self.moved(np.arange(self.level.size))))

    def outside(self) -> NDArray[np.bool_]:
        """Which levels lie outside the range of the equation; a line to each cast that has some."""
        name = "depth" if self.equation.vertical == "depth" else "pressure"
        inputs = {key: self.either(self.direct, np.nan, self.columns[key]) for key in ("temperature", "salinity", name)}
        outside: NDArray[np.bool_] = range_report(self.equation, **inputs).outside
        if self.direct.any():
            outside = outside & ~self.spread(self.direct)
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
        stated = self.block.uncertainties
        lines: dict[tuple[Any, ...], str] = {}
        kinds = (self.direct, self.dry, self.from_conductivity, self.by_pressure)
        for index, kind in enumerate(zip(*(column.tolist() for column in kinds), strict=True)):
            if not self.row_size[index]:
                continue
            if self.direct[index]:
                rows = slice(self.block.starts[index], self.block.starts[index + 1])
                own = "sound_speed" in stated and np.isfinite(stated["sound_speed"][rows]).any()
                if accuracies[index].sound_speed is None and not own:
                    self.notes[index].append("no uncertainty: that of the measured sound speed was not given")
                continue
            key = (id(accuracies[index]), *kind)
            if key not in lines:
                lines[key] = self._basis(index, accuracies[index])
            self.notes[index].append(lines[key])

    def _basis(self, index: int, accuracy: Accuracy) -> str:
        """What the uncertainty of a computed speed is made of, in words."""
        equation = self.equation
        if equation.standard_error is None:
            return f"no uncertainty: no standard error of {equation.name} is known"
        usual = ASSUMED_SALINITY_UNCERTAINTY if self.dry[index] else SALINITY_UNCERTAINTY
        salinity = usual if accuracy.salinity is None else accuracy.salinity
        salt = f"{salinity:g} of salinity"
        if self.from_conductivity[index] and accuracy.conductivity is not None:
            salt = f"{accuracy.conductivity:g} S/m"
        vertical = PRESSURE_UNCERTAINTY if accuracy.pressure is None else accuracy.pressure
        unit = "dbar" if self.by_pressure[index] else "m"
        share = f" or {100.0 * accuracy.pressure_fraction:g} % if greater" if accuracy.pressure_fraction else ""
        return (
            f"uncertainty (k = 1) from {equation.standard_error:g} m/s of {equation.name}, "
            f"{accuracy.temperature:g} degC, {salt} and {vertical:g} {unit}{share}"
        )


def _nothing(size: int) -> Floats:
    """A column without any value, which takes no room."""
    return np.broadcast_to(np.float64(np.nan), size)


def _picked(column: Floats, rows: NDArray[np.int64]) -> Floats:
    """Some levels of a column."""
    return _nothing(rows.size) if column.strides == (0,) else column.take(rows)
