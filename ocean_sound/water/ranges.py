"""Where an equation holds: which values lie outside, and one line about each kind of them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import gsw
import numpy as np

from .salinity import absolute_salinity_of

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping

    from numpy.typing import NDArray

    from ._arrays import Array
    from ._state import State
    from .equation import Bounds, Equation


#: Degrees below the freezing point that count as being at it.
_SUPERCOOLED = 0.1


class OutOfRangeWarning(UserWarning):
    """A value was computed outside the range of its equation; the stated standard error does not hold there."""


@dataclass(frozen=True, eq=False)
class RangeReport:
    """What lies outside the range of an equation.

    Attributes
    ----------
    outside
        True where at least one variable lies outside; boolean, of the broadcast shape. NaN is not outside.
    notes
        One line for each variable with values outside: equation, count, variable, worst value, range.
    """

    outside: NDArray[np.bool_]
    notes: tuple[str, ...]

    @property
    def count(self) -> int:
        """How many values lie outside."""
        return int(self.outside.sum())


def report_on(equation: Equation, state: State) -> RangeReport:
    """The report on plain arrays; the vertical of the equation must be filled in (`State.completed`)."""
    outside = np.zeros(state.shape(), dtype=bool)
    notes = []
    for mask, note in _findings(equation, state):
        outside |= mask
        notes.append(counted(note, np.broadcast_to(mask, outside.shape)))
    outside.flags.writeable = False
    return RangeReport(outside, tuple(notes))


#: Where a line says how many values it is about.
COUNT = "<count>"


def counted(note: str, mask: NDArray[np.bool_]) -> str:
    """The line with the count of values filled in, which is left out for a single value."""
    return note.replace(COUNT, f" ({int(mask.sum())} of {mask.size} values)" if mask.size > 1 else "")


def box_findings(
    who: str, ranges: Mapping[str, Bounds], values_of: Callable[[str], Any]
) -> Iterator[tuple[NDArray[np.bool_], str]]:
    """For each variable with values outside its bounds, a mask and a line for `counted`."""
    for name, bounds in ranges.items():
        values = values_of(name)
        if values is None or np.size(values) == 0:
            continue
        low, high = np.fmin.reduce(values, axis=None), np.fmax.reduce(values, axis=None)
        if not (low < bounds.low or high > bounds.high):
            continue
        worst = high if high - bounds.high > bounds.low - low else low
        unit = "" if name in ("salinity", "ph") else f" {bounds.unit}"
        span = f"{bounds.low:g} to {bounds.high:g}{unit}" if bounds.low < bounds.high else f"{bounds.low:g}{unit} only"
        reason = "; it holds at atmospheric pressure only" if name == "pressure" and bounds.high == 0.0 else ""
        note = (
            f"{who}: {name} {worst:g}{unit} is outside its range {span}"
            f"{COUNT}{reason}; its standard error does not hold there"
        )
        yield (values < bounds.low) | (values > bounds.high), note


def _findings(equation: Equation, state: State) -> Iterator[tuple[NDArray[np.bool_], str]]:
    def values_of(name: str) -> Any:
        return state.vertical(name) if name in ("pressure", "depth") else getattr(state, name)

    yield from box_findings(equation.name, equation.range, values_of)
    if equation.funnel:
        mask = _outside_funnel(state)
        if mask.any():
            index = np.unravel_index(int(np.argmax(mask)), mask.shape)
            columns = (state.temperature, state.salinity, state.vertical("pressure"))
            t, s, p = (np.broadcast_to(column, mask.shape)[index] for column in columns)
            note = (
                f"{equation.name}: temperature {t:g} degC with salinity {s:g} at pressure {p:g} dbar is outside the "
                f"oceanographic funnel{COUNT}; its standard error does not hold there"
            )
            yield mask, note


def _outside_funnel(state: State) -> NDArray[np.bool_]:
    """Outside the funnel of McDougall et al. (2003) as gsw has it; only doubtful values, with a margin, are tried."""
    shape = state.shape()
    columns = (state.temperature, state.salinity, state.vertical("pressure"))
    t, s, p = (np.broadcast_to(column, shape) for column in columns)
    inside_box = (s >= 0.0) & (s <= 41.8) & (p <= 8000.0) & (t <= 40.0)
    doubtful = (t < -1.5) | ((p > 480.0) & ((s < 5e-3 * p - 2.0) | (t > 30.0 - p / 300.0))) | (p > 6500.0)
    doubtful &= inside_box
    mask = np.zeros(shape, dtype=bool)
    if doubtful.any():
        mask[doubtful] = ~_in_funnel(t[doubtful], s[doubtful], p[doubtful])
    return mask


def _in_funnel(t: Array, s: Array, p: Array) -> Any:
    # The Reference Salinity is near enough for a mark.
    sa = absolute_salinity_of(s, p, None, None)
    ct = gsw.CT_from_t(sa, t, p)
    freezing = gsw.CT_freezing(sa, np.minimum(p, 500.0), 0.0)
    # Water at its freezing point is measured a few hundredths below it, by noise or under ice shelves: no mark for
    # that.
    inside = gsw.infunnel(sa, np.maximum(ct, freezing + 1e-9), p) == 1
    return inside & (ct > freezing - _SUPERCOOLED)
