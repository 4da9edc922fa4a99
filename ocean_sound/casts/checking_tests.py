"""The tests of levels, over flat columns: values in, the rows that do not pass out.

Most levels pass most tests. So each test first finds, in few and cheap passes, the rows that might not, and works out
the published value for those alone.

Sources: IOOS, Manual for Real-Time Quality Control of In-situ Temperature and Salinity Data (QARTOD); Argo quality
control manual for CTD and trajectory data, real-time tests; both with the numbers and pitfalls noted in the thresholds.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Rows = NDArray[np.int64]
    Bools = NDArray[np.bool_]

UP_OR_DOWN, SOAK, LOOP, SPIKE_OF_PRESSURE = range(1, 5)
"""Why a level is not of the way that is used; 0 where it is."""
# Bounds of the slopes of density, kg/m3 per degC and per unit of salinity: beyond what water of 0 to 40 degC and
# salinity 0 to 50 has at any pressure (by gsw; the tests compare).
_WARMTH, _COLD, _SALT = 0.45, 0.09, 0.9
# A way down that reaches so much of all there is counts as the cast; else the longer way does.
_NEARLY_ALL = 0.9


@dataclass(frozen=True)
class Levels:
    """The levels of a column that neighbour tests look at, and which of them are neighbours.

    Parameters
    ----------
    rows : numpy.ndarray of int or None
        Rows of the flat columns, ascending; None for all.
    last : numpy.ndarray of int
        Positions among those rows after which another cast begins.
    size : int
        How many rows there are.
    """

    rows: Rows | None
    last: Rows
    size: int

    @classmethod
    def of(cls, used: Bools | None, starts: Rows) -> Levels:
        """The rows that are used, all where None."""
        if used is None or used.all():
            return cls(None, starts[1:-1] - 1, int(starts[-1]))
        rows = np.flatnonzero(used)
        last = np.searchsorted(rows, starts[1:-1]) - 1
        return cls(rows, last[(last >= 0) & (last < rows.size - 1)], rows.size)

    def take(self, column: Floats) -> Floats:
        """The values of a column on these levels."""
        return column if self.rows is None else column[self.rows]

    def steps(self, values: Floats) -> Floats:
        """From each level to the next, NaN from one cast to the next; one fewer than there are levels."""
        steps = np.diff(values)
        steps[self.last] = np.nan
        return steps

    def row(self, positions: Rows) -> Rows:
        """Rows of the flat columns of positions among these levels."""
        return positions if self.rows is None else self.rows[positions]

    def between_near(self, depth_steps: Floats, reach: float) -> Bools:
        """Which levels have a neighbour on both sides, neither farther away than the reach."""
        near = np.ones(self.size, dtype=bool)
        near[:1] = near[-1:] = near[self.last] = near[self.last + 1] = False
        far = np.flatnonzero(np.abs(depth_steps) > reach)
        near[far] = near[far + 1] = False
        return near


def spike_value(before: Any, here: Any, after: Any) -> Any:
    """How far a value lies beyond both its neighbours: Argo's and GTSPP's spike value.

    Parameters
    ----------
    before, here, after : array_like
        A value and its neighbours above and below, in one unit. The sign of the values does not matter.

    Returns
    -------
    float or ndarray
        ``|here - (before + after) / 2| - |(before - after) / 2|``; negative where the value lies between its
        neighbours, so that the steepest thermocline, or levels far apart, are no spike.

    References
    ----------
    Argo quality control manual for CTD and trajectory data, test 9. QARTOD's spike test (6) has the same reference,
    the mean of the neighbours, but subtracts nothing.

    Examples
    --------
    >>> float(spike_value(5.0, 11.0, 5.0)), float(spike_value(2.0, 5.0, 8.0))
    (6.0, -3.0)
    """
    return np.abs(here - (before + after) / 2.0) - np.abs((before - after) / 2.0)


def gradient_value(before: Any, here: Any, after: Any) -> Any:
    """How far a value lies from the mean of its neighbours: Argo's gradient value.

    Parameters
    ----------
    before, here, after : array_like
        A value and its neighbours above and below, in one unit.

    Returns
    -------
    float or ndarray
        ``|here - (before + after) / 2|``.

    References
    ----------
    Argo quality control manual for CTD and trajectory data, test 11, retired in October 2019.

    Examples
    --------
    >>> float(gradient_value(2.0, 11.0, 2.0))
    9.0
    """
    return np.abs(here - (before + after) / 2.0)


def outside(values: Floats, limits: Sequence[float]) -> tuple[Rows, Rows]:
    """Rows outside the inner and outside the outer pair of four ascending numbers: suspect, fail. NaN is in neither."""
    fail_below, suspect_below, suspect_above, fail_above = limits
    nothing = np.empty(0, np.int64)
    if values.size == 0 or (values.min() >= suspect_below and values.max() <= suspect_above):
        return nothing, nothing  # a NaN among them fails this, and is looked at below
    rows = np.flatnonzero((values < suspect_below) | (values > suspect_above))
    beyond = (values[rows] < fail_below) | (values[rows] > fail_above)
    return rows[~beyond], rows[beyond]


def spikes(values: Floats, sizes: Floats, deep: Bools, above: Sequence[float], below: Sequence[float]) -> Any:
    """Positions of spikes, and whether each fails; `sizes` are the absolute steps from level to level."""
    large = sizes > min(above[0], below[0])
    at = np.flatnonzero(large[:-1] & large[1:]) + 1  # a value beyond both neighbours is a step away from both
    value = spike_value(values[at - 1], values[at], values[at + 1])
    suspect, fail = (np.where(deep[at], below[i], above[i]) for i in (0, 1))
    found = value > suspect
    return at[found], (value > fail)[found]


def steep(values: Floats, sizes: Floats, deep: Bools, above: float, below: float) -> Rows:
    """Positions whose gradient value is beyond the limit."""
    at = np.flatnonzero(sizes[:-1] + sizes[1:] > 2.0 * min(above, below)) + 1
    value = gradient_value(values[at - 1], values[at], values[at + 1])
    found: Rows = at[value > np.where(deep[at], below, above)]
    return found


def flat_runs(sizes: Floats, fewest: int) -> list[tuple[int, int]]:
    """First and last position of each run of at least so many levels of one value."""
    still = np.flatnonzero(sizes == 0.0)
    if still.size < fewest - 1:
        return []
    breaks = np.flatnonzero(np.diff(still) != 1)
    first = still[np.concatenate(([0], breaks + 1))]
    last = still[np.concatenate((breaks, [still.size - 1]))] + 1
    long = last - first + 1 >= fewest
    return list(zip(first[long].tolist(), last[long].tolist(), strict=True))


def inversions(depth: Floats, temperature: Floats, salinity: Floats, levels: Levels, least: float) -> Any:
    """Positions of levels above lighter water, and by how many kg/m3 they are denser than the next level below.

    Densities are compared at the pressure midway, so that compression does not count. The printed rule of QARTOD,
    'fail if sigma(n-1) + DT > sigma(n)', would fail every mixed layer; what is meant, and what Argo does, is that the
    deeper water is lighter by more than DT.

    Returns
    -------
    positions : ndarray of int
        Of the first of the two levels, in the order of the column.
    excess : ndarray
        How much denser the upper of the two is; more than `least`.
    """
    down, warmer, saltier = levels.steps(depth), np.diff(temperature), np.diff(salinity)
    if (down > 0.0).sum() != down.size - levels.last.size:
        sign = np.sign(down)
        warmer, saltier = warmer * sign, saltier * sign
        down = np.abs(down)
    # in place: what is looked at is a matter of passes over the column
    np.maximum(warmer, warmer * (-_COLD / _WARMTH), out=warmer)
    np.minimum(saltier, 0.0, out=saltier)
    warmer *= _WARMTH
    saltier *= _SALT
    warmer -= saltier
    at = np.flatnonzero(warmer > least)
    at = at[down[at] > 0.0]
    if not at.size:
        return at, np.empty(0)
    ahead = at + 1
    upper, lower = np.where(depth[at] < depth[ahead], (at, ahead), (ahead, at))
    excess = _denser(depth, temperature, salinity, upper, lower)
    found = excess > least
    return at[found], excess[found]


def _denser(depth: Floats, temperature: Floats, salinity: Floats, upper: Rows, lower: Rows) -> Floats:
    """By how much the upper water is denser than the lower, both brought to the pressure midway.

    Metres stand for decibars, and the salinity of the reference composition for the absolute: both change the
    difference of neighbours by a few percent at most.
    """
    import gsw

    pressure = np.maximum(depth, 0.0)
    midway = (pressure[upper] + pressure[lower]) / 2.0
    densities = []
    for level in (upper, lower):
        absolute = gsw.SR_from_SP(np.maximum(salinity[level], 0.0))
        conservative = gsw.CT_from_t(absolute, temperature[level], pressure[level])
        densities.append(gsw.rho(absolute, conservative, midway))
    excess: Floats = densities[0] - densities[1]
    return excess


def way_of_cast(
    vertical: Floats, *, spike: float, soak_depth: float, soak_return: float
) -> tuple[NDArray[np.int8], bool]:
    """Which levels of one cast lie on the way that is used.

    The way down is used where it reaches nearly as far as all there is, else the longer one; levels that are not below
    all before them are loops, and what comes before the cast came up from a stop near the surface is the soak.

    Parameters
    ----------
    vertical : ndarray
        Pressure or depth, finite, in the order of the file.
    spike, soak_depth, soak_return
        As in the thresholds.

    Returns
    -------
    code : ndarray of int8
        0 used, else `UP_OR_DOWN`, `SOAK`, `LOOP` or `SPIKE_OF_PRESSURE`.
    ordered : bool
        False where the levels are in no order: then none has a code but spikes.
    """
    code = np.zeros(vertical.size, np.int8)
    code[_lone(vertical, spike)] = SPIKE_OF_PRESSURE
    kept = np.flatnonzero(code == 0)
    depth = vertical[kept]
    deepest = int(np.argmax(depth))
    down, up = (float(depth[deepest] - part.min()) for part in (depth[: deepest + 1], depth[deepest:]))
    goes_down = down >= _NEARLY_ALL * max(down, up)
    way, other = (kept[: deepest + 1], kept[deepest + 1 :]) if goes_down else (kept[deepest:][::-1], kept[:deepest])
    begin = _end_of_soak(vertical[way], soak_depth, soak_return) if goes_down else 0
    on_way = vertical[way[begin:]]
    below = np.concatenate(([True], on_way[1:] > np.maximum.accumulate(on_way)[:-1]))
    if 2 * below.sum() < below.size:
        return code, False
    code[other], code[way[:begin]], code[way[begin:][~below]] = UP_OR_DOWN, SOAK, LOOP
    return code, True


def _lone(vertical: Floats, spike: float) -> Rows:
    """Single levels far beyond both their neighbours: by the threshold, and by ten steps of this cast."""
    if vertical.size < 3:
        return np.empty(0, np.int64)
    sizes = np.abs(np.diff(vertical))
    limit = max(spike, 10.0 * float(np.median(sizes)))
    at = np.flatnonzero((sizes[:-1] > limit) & (sizes[1:] > limit)) + 1
    found: Rows = at[spike_value(vertical[at - 1], vertical[at], vertical[at + 1]) > limit]
    return found


def _end_of_soak(depth: Floats, deepest: float, back: float) -> int:
    """Where the cast begins in earnest: the highest level after the last stop near the surface, 0 without a stop."""
    reached = np.maximum.accumulate(depth)
    risen = np.flatnonzero((reached - depth >= back) & (reached <= deepest))
    if not risen.size:
        return 0
    same_stop = np.flatnonzero(reached == reached[risen[-1]])
    top = int(same_stop[0] + np.argmin(depth[same_stop[0] : same_stop[-1] + 1]))
    return top if depth[top] <= depth[: top + 1].min() + back else 0
