"""Columns of water along a track, made to reach one depth, and the smooth field through them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..casts.extending import SCALE_BELOW
from ..profile.flattening import flat_depth
from ..water.mackenzie import mackenzie
from .field import SpeedField

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from numpy.typing import NDArray

    from ..profile import Profile

    Floats = NDArray[np.float64]

FINEST = 0.5
"""Thickness of the thinnest cell, m: no cast resolves more."""
TOLERANCE = 0.01
"""How closely the spline follows the shape-preserving curves, m/s: a fifth of what an equation errs by."""
# Cells at the start, before any is split; a cell next to one over twice as thin is split, or the spline would swing.
_FIRST_CELLS, _STEEPEST = 16, 2.01
_ROUNDS = 40
_FIRST_ACROSS, _MOST_CELLS = 16, 400_000
# Where so many cells (50 MB) do not suffice the tolerance is doubled, this often at most.
_COARSEST = 10
# Where the spline is compared with the curves: at so many levels at most, and at so many places inside each cell.
_MOST_LEVELS, _PARTS, _PARTS_OF_FIT = 6000, 6, 8
# Where to follow the decay of a difference, in units of its scale.
_DECAY = np.array([0.1, 0.2, 0.35, 0.5, 0.75, 1.0, 1.4, 1.8, 2.4, 3.0, 4.0])
_DEEPER = 1.2  # how much deeper a cast is to reach to lend water to another, where there is such a one
_LAYER = 200.0  # m between the levels of water that pressure alone speeds up; straight to a millimetre per second
_GRADIENT = 0.05  # 1/s; steeper ones of the last layer are noise
_NEAREST = 1e-3  # m between two levels


@dataclass(frozen=True, eq=False)
class Column:
    """The speed at one place of the track: levels from 0 down, and down to which depth they are of its own cast."""

    place: float
    name: str
    depth: Floats
    speed: Floats
    reach: float


@dataclass(frozen=True)
class Fit:
    """How the field lies to the data, m/s.

    Parameters
    ----------
    overshoot : float
        The farthest that a speed of the field leaves the span of the data around it: those of the levels above and
        below, and between two casts those of both.
    departure : float
        The farthest that the field lies from the monotone curves through the levels, where the data are.
    between : float
        The farthest that it lies from the monotone curves along the track, between the data. Those bend sharply in
        depth where casts change their order, which no smooth field follows.
    """

    overshoot: float
    departure: float
    between: float


def column_of(profile: Profile, place: float) -> Column:
    """The column of a profile, carried up to the surface."""
    water = profile.to_surface()
    return Column(place, profile.id or f"at {place / 1000.0:g} km", water.depth, water.speed, float(water.depth[-1]))


def smoothed(column: Column, window: float) -> tuple[Column, float]:
    """The column averaged over a window of depth, m, and the root mean square of what that changes, m/s.

    Near the surface and the last level the window shrinks, so that both stay as they are. What is constant, linear or
    monotone stays so.
    """
    if window <= 0.0:
        return column, 0.0
    z, c = column.depth, column.speed
    levels = np.linspace(0.0, column.reach, int(np.ceil(2.0 * column.reach / window)) + 1)
    half = np.minimum(0.5 * window, np.minimum(levels, column.reach - levels))
    total = np.concatenate(([0.0], np.cumsum(0.5 * np.diff(z) * (c[1:] + c[:-1]))))
    gradient = np.diff(c) / np.diff(z)

    def integral(depth: Floats) -> Floats:
        layer = np.clip(np.searchsorted(z, depth, side="right") - 1, 0, z.size - 2)
        down = depth - z[layer]
        return np.asarray(total[layer] + down * (c[layer] + 0.5 * gradient[layer] * down))

    inside = half > 0.0
    mean = np.interp(levels, z, c)
    span = integral(levels[inside] + half[inside]) - integral(levels[inside] - half[inside])
    mean[inside] = span / (2.0 * half[inside])
    change = float(np.sqrt(np.mean((np.interp(z, levels, mean) - c) ** 2)))
    return Column(column.place, column.name, levels, mean, column.reach), change


def completed(columns: Sequence[Column], needed: float, bottom: float) -> tuple[list[Column], list[str]]:
    """The columns, each down to the bottom (m), and a note for each that was lent water.

    Where the deepest ends above the depth that is needed (m) it goes on as pressure alone would have it. Each of the
    others is lent the water of the nearest deeper ones, before and after it, in proportion to how near they are; the
    difference at the join dies away over 300 m. Below what is needed there is no water: there a gradient goes on.
    """
    deepest = max(column.reach for column in columns)
    done: dict[int, Column] = {}
    notes = []
    for j in sorted(range(len(columns)), key=lambda index: -columns[index].reach):
        column = columns[j]
        if column.reach >= min(deepest, needed):
            done[j] = _extended(column, needed, bottom)
            continue
        deeper = {i for i in done if done[i].reach >= min(_DEEPER * column.reach, needed)} or set(done)
        before = max((i for i in deeper if i < j), default=None)
        after = min((i for i in deeper if i > j), default=None)
        lenders = [done[i] for i in (before, after) if i is not None]
        done[j] = _lent(column, lenders, bottom)
        names = " and ".join(f"{one.name} ({abs(one.place - column.place) / 1000.0:.3g} km away)" for one in lenders)
        notes.append(f"{column.name} reaches {column.reach:.0f} m: below by {names}")
    return [done[j] for j in range(len(columns))], notes


def _extended(column: Column, needed: float, bottom: float) -> Column:
    """The column down to the bottom: sped up by pressure alone (the terms in depth of Mackenzie's equation).

    Where no water is needed below it, its last gradient goes on, so that a straight profile stays straight.
    """
    if column.reach >= bottom:
        return column
    if column.reach >= needed:
        gradient = np.clip(np.diff(column.speed[-2:]) / np.diff(column.depth[-2:]), -_GRADIENT, _GRADIENT)
        below, faster = np.array([bottom]), gradient * (bottom - column.reach)
    else:
        below = np.linspace(column.reach, bottom, int(np.ceil((bottom - column.reach) / _LAYER)) + 1)[1:]
        faster = mackenzie(2.0, 35.0, below) - mackenzie(2.0, 35.0, column.reach)
    depth, speed = np.append(column.depth, below), np.append(column.speed, column.speed[-1] + faster)
    return Column(column.place, column.name, depth, speed, column.reach)


def _lent(column: Column, lenders: Sequence[Column], bottom: float) -> Column:
    places = np.array([lender.place for lender in lenders])
    levels = np.concatenate([*(lender.depth for lender in lenders), column.reach + SCALE_BELOW * _DECAY, [bottom]])
    levels = np.unique(levels[(levels > column.reach + _NEAREST) & (levels <= bottom)])
    levels = levels[np.append(np.diff(levels) > _NEAREST, True)]

    def speed(depth: Floats) -> Floats:
        of_each = np.array([np.interp(depth, lender.depth, lender.speed) for lender in lenders])
        if places.size == 1 or places[0] == places[1]:
            return np.asarray(of_each.mean(axis=0))
        part = (column.place - places[0]) / (places[1] - places[0])
        return np.asarray(of_each[0] + part * (of_each[1] - of_each[0]))

    step = column.speed[-1] - speed(np.array([column.reach]))[0]
    below = speed(levels) + step * np.exp(-(levels - column.reach) / SCALE_BELOW)
    return Column(
        column.place, column.name, np.append(column.depth, levels), np.append(column.speed, below), column.reach
    )


def field_through(
    columns: Sequence[Column], bottom: float, *, tolerance: float, finest: float, radius: float | None
) -> tuple[SpeedField, Fit]:
    """The smooth field through columns that reach the bottom, and how it lies to them.

    Down each column and along the track at each depth the speed follows a monotone piecewise cubic (Fritsch and
    Butland 1984, SIAM J. Sci. Stat. Comput. 5:300); through its values on a fine grid goes the tensor spline. Cells
    are split until the spline keeps within the tolerance of those curves, or of twice, four times ... as much where
    that would take too many.
    """
    from scipy.interpolate import PchipInterpolator

    curves = [PchipInterpolator(column.depth, column.speed) for column in columns]

    def down(depth: Floats) -> Floats:
        return np.array([curve(depth) for curve in curves])

    places = np.array([column.place for column in columns])
    levels = _levels(columns, bottom)
    for allowed in tolerance * 2.0 ** np.arange(_COARSEST):
        depths = _edges(down, levels, bottom, float(allowed), finest)
        speeds = down(depths)
        ranges = None
        if places.size == 1:
            speeds = speeds[0]
            break
        across = PchipInterpolator(places, speeds, axis=0)
        ranges, near = _across(across, places, depths.size - 1, float(allowed))
        speeds = across(ranges)
        if near:
            break
    field = SpeedField.from_speeds(depths, speeds, ranges)
    fit = _fit(field, columns, down, _probes(depths, levels, _PARTS_OF_FIT))
    if radius is not None:
        scale = radius / (radius - depths)
        field = SpeedField.from_speeds(flat_depth(depths, radius), speeds * scale, ranges)
    return field, fit


def _levels(columns: Sequence[Column], bottom: float) -> Floats:
    """The levels of all columns above the bottom, thinned evenly where there are too many."""
    levels = np.unique(np.concatenate([column.depth for column in columns]))
    levels = levels[levels < bottom]
    if levels.size > _MOST_LEVELS:
        levels = levels[np.linspace(0, levels.size - 1, _MOST_LEVELS).astype(np.int64)]
    return levels


def _probes(edges: Floats, levels: Floats, parts: int) -> Floats:
    """Depths at which to compare: the levels, and so many places inside each cell."""
    inside = (np.arange(parts) + 0.5) / parts
    return np.unique(np.concatenate((levels, (edges[:-1, None] + np.diff(edges)[:, None] * inside).ravel())))


def _edges(down: Callable[[Floats], Floats], levels: Floats, bottom: float, tolerance: float, finest: float) -> Floats:
    """Edges of the cells in depth."""
    from scipy.interpolate import CubicSpline

    edges = np.linspace(0.0, bottom, _FIRST_CELLS + 1)
    for _ in range(_ROUNDS):
        probes = _probes(edges, levels, _PARTS)
        error = np.abs(CubicSpline(edges, down(edges), axis=-1)(probes) - down(probes)).max(axis=0)
        cell = np.clip(np.searchsorted(edges, probes, side="right") - 1, 0, edges.size - 2)
        worst = np.zeros(edges.size - 1)
        np.maximum.at(worst, cell, error)
        split = (worst > tolerance) & (np.diff(edges) >= 2.0 * finest)
        if not split.any():
            break
        edges = _graded(_split(edges, split))
    return edges


def _split(edges: Floats, which: NDArray[np.bool_]) -> Floats:
    middles = 0.5 * (edges[1:] + edges[:-1])
    return np.sort(np.concatenate((edges, middles[which])))


def _graded(edges: Floats) -> Floats:
    """Cells split until none is much thicker than its neighbour."""
    while True:
        heights = np.diff(edges)
        steep = np.zeros(heights.size, dtype=bool)
        steep[:-1] |= heights[:-1] > _STEEPEST * heights[1:]
        steep[1:] |= heights[1:] > _STEEPEST * heights[:-1]
        if not steep.any():
            return edges
        edges = _split(edges, steep)


def _across(curve: Any, places: Floats, cells_down: int, tolerance: float) -> tuple[Floats, bool]:
    """Edges of the cells in range, equally far apart, and whether they are close enough; memory sets a limit."""
    from scipy.interpolate import CubicSpline

    count = _FIRST_ACROSS
    while True:
        ranges = np.linspace(places[0], places[-1], count + 1)
        probes = np.linspace(places[0], places[-1], 4 * count + 1)
        if np.abs(CubicSpline(ranges, curve(ranges), axis=0)(probes) - curve(probes)).max() <= tolerance:
            return ranges, True
        if 2 * count * cells_down > _MOST_CELLS:
            return ranges, False
        count *= 2


def _fit(field: SpeedField, columns: Sequence[Column], down: Callable[[Floats], Floats], probes: Floats) -> Fit:
    """Compare the field with the data, at the places of the columns and at seven between any two."""
    from scipy.interpolate import PchipInterpolator

    low, high = [], []
    for column in columns:
        inside = np.clip(np.searchsorted(column.depth, probes, side="left"), 1, column.depth.size - 1)
        around = column.speed[inside - 1], column.speed[inside]
        low.append(np.minimum(*around))
        high.append(np.maximum(*around))
    curves = down(probes)
    if len(columns) == 1:
        speed = field.speed_at(0.0, probes)
        return Fit(_overshoot(speed, low[0], high[0]), float(np.abs(speed - curves[0]).max()), 0.0)
    places = np.array([column.place for column in columns])
    across = PchipInterpolator(places, curves, axis=0)
    overshoot, departure, between = [], [], []
    for j in range(len(columns) - 1):
        x = np.linspace(places[j], places[j + 1], 9)
        speed = field.speed_at(x[:, None], probes[None, :])
        away = np.abs(speed - across(x)).max(axis=1)
        overshoot.append(_overshoot(speed, np.minimum(low[j], low[j + 1]), np.maximum(high[j], high[j + 1])))
        departure.append(float(away[[0, -1]].max()))
        between.append(float(away[1:-1].max()))
    return Fit(max(overshoot), max(departure), max(between))


def _overshoot(speed: Floats, least: Floats, most: Floats) -> float:
    return max(float((speed - most).max()), float((least - speed).max()), 0.0)
