"""The best few of many sites for sensors: exactly where that can be computed, else greedily, and how far from the best.

A place counts as covered if at least one sensor hears there (single coverage), and the sum of the weights of covered
places is what is to be made large. With limits on number and cost, distances to keep and places that must be covered
this is an integer program, which `scipy.optimize.milp` (HiGHS) solves, to a gap that is stated. Where each place is
heard with a probability, or by several at once, sites are taken one after the other, each the best that still can be
added. For single coverage under a limit on the number alone the sum never falls and gains only shrink as sites are
added, so that this is never below 1 - 1/e of the best (Nemhauser, Wolsey and Fisher 1978, Mathematical Programming
14:265); elsewhere no such promise is made.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]
    Booleans = NDArray[np.bool_]

METHODS = ("auto", "exact", "greedy")
# Beyond so many entries of (sites, different places) the exact way is not tried unasked.
_EXACT_SIZE = 20_000_000


@dataclass(frozen=True, eq=False)
class SiteChoice:
    """The sites chosen.

    Parameters
    ----------
    sites : tuple of int
        Indices of the candidates, in the order in which each adds most to those before it.
    value : float
        Covered weight, existing sensors included.
    gains : numpy.ndarray, shape (sites,)
        What each site adds, in that order.
    existing_value : float
        Covered weight without any of them.
    bound : float
        No choice can cover more; infinite where nothing is known.
    gap : float
        (bound - value)/bound: 0 where the choice is proved best; NaN where nothing is known.
    method : str
        ``exact`` or ``greedy``.
    notes : tuple of str
        What was promised and what not.
    """

    sites: tuple[int, ...]
    value: float
    gains: Floats
    existing_value: float
    bound: float
    gap: float
    method: str
    notes: tuple[str, ...] = ()


def choose_sites(
    heard: ArrayLike,
    *,
    number: int,
    weight: ArrayLike | None = None,
    cost: ArrayLike | None = None,
    budget: float | None = None,
    places: ArrayLike | None = None,
    spacing: float = 0.0,
    must_cover: Sequence[int] = (),
    existing: ArrayLike | None = None,
    existing_places: ArrayLike | None = None,
    at_once: int = 1,
    method: str = "auto",
    time_limit: float = 60.0,
) -> SiteChoice:
    """Choose the sites that cover most.

    Parameters
    ----------
    heard : array_like, shape (sites, cells)
        Whether a sensor at a site hears a source in a cell; or, as numbers from 0 to 1, how likely: then the expected
        weight is made large, sensors being independent.
    number : int
        How many sites at most.
    weight : array_like, shape (cells,), optional
        What each cell is worth, 0 or more; 1 where not given.
    cost : array_like, shape (sites,), optional
        Of each site, above 0; needs `budget`.
    budget : float, optional
        What all chosen may cost together.
    places : array_like, shape (sites, 2), optional
        x and y of each site, m, for `spacing`.
    spacing : float
        No two sensors nearer than this, m.
    must_cover : sequence of int
        Cells that must be heard by a chosen or existing sensor.
    existing : array_like, shape (sensors, cells), optional
        What sensors that are there already hear; they stay and cost nothing.
    existing_places : array_like, shape (sensors, 2), optional
        Theirs, for `spacing`.
    at_once : int
        Count a cell only if so many sensors hear it.
    method : str
        ``exact`` (single coverage, heard or not), ``greedy``, or ``auto``: exact where it holds.
    time_limit : float
        Seconds for the exact search; what it has found by then is handed out with its gap.

    Returns
    -------
    SiteChoice

    Raises
    ------
    InputError
        If arguments do not fit each other, the exact method is asked for what it can't do, or no choice covers the
        cells that must be covered within the limits.

    Examples
    --------
    The greedy first choice is the middle site; the best two are the others:

    >>> heard = [[1, 1, 1, 0, 0, 0], [0, 0, 1, 1, 1, 1], [0, 0, 0, 1, 1, 1], [1, 0, 0, 0, 0, 0]]
    >>> choose_sites(np.array(heard, dtype=bool), number=2).sites
    (1, 0)
    """
    task = _Task.of(
        heard, number, weight, cost, budget, places, spacing, must_cover, existing, existing_places, at_once
    )
    if method not in METHODS:
        raise InputError(f"method is {method!r}: {', '.join(METHODS)} would be right")
    single = task.sharp and at_once == 1
    if method == "exact" and not single:
        raise InputError("the exact choice is for cells heard or not, by one sensor: use method='greedy'")
    if method != "greedy" and single and (method == "exact" or task.heard.size <= _EXACT_SIZE):
        return _exact(task, time_limit)
    return _greedy(task)


@dataclass(frozen=True, eq=False)
class _Task:
    heard: Floats  # (sites, cells)
    number: int
    weight: Floats
    cost: Floats
    budget: float
    too_near: Booleans  # (sites, sites)
    usable: Booleans  # far enough from existing sensors
    must: NDArray[np.intp]
    existing: Floats  # (sensors, cells)
    at_once: int
    sharp: bool

    @classmethod
    def of(
        cls,
        heard: ArrayLike,
        number: int,
        weight: ArrayLike | None,
        cost: ArrayLike | None,
        budget: float | None,
        places: ArrayLike | None,
        spacing: float,
        must_cover: Sequence[int],
        existing: ArrayLike | None,
        existing_places: ArrayLike | None,
        at_once: int,
    ) -> _Task:
        h = _table(heard, None, "heard")
        sites, cells = h.shape
        there = np.zeros((0, cells)) if existing is None else _table(existing, cells, "existing")
        w = np.ones(cells) if weight is None else np.asarray(weight, dtype=np.float64)
        if w.shape != (cells,) or not (np.all(np.isfinite(w)) and np.all(w >= 0.0)):
            raise InputError(f"weight has shape {w.shape}: {cells} numbers of 0 or more, one a cell, would be right")
        price = np.ones(sites) if cost is None else np.asarray(cost, dtype=np.float64)
        if price.shape != (sites,) or not np.all(price > 0.0):
            raise InputError(f"cost has shape {price.shape}: {sites} numbers above 0, one a site, would be right")
        if (cost is None) != (budget is None):
            raise InputError("cost and budget go together: give both or neither")
        if number < 1 or at_once < 1:
            raise InputError(f"number is {number}, at_once {at_once}: 1 or more would be right")
        must = np.asarray(must_cover, dtype=np.intp)
        if must.size and not (must.min() >= 0 and must.max() < cells):
            raise InputError(f"must_cover names cell {must.max()}: 0 to {cells - 1} would be right")
        near, usable = _spaced(places, existing_places, sites, len(there), spacing)
        sharp = bool(np.all((h == 0.0) | (h == 1.0)) and np.all((there == 0.0) | (there == 1.0)))
        limit = np.inf if budget is None else float(budget)
        return cls(h, number, w, price, limit, near, usable, must, there, at_once, sharp)

    def worth(self, sensors: Floats) -> Floats:
        """Of each cell, how likely it is heard by as many as are asked; sensors: (n, cells)."""
        from .together import counted

        if not len(sensors):
            return np.zeros(self.weight.size)
        likely: Floats = counted(sensors, self.at_once)[self.at_once - 1]
        return likely

    def value(self, sites: Sequence[int]) -> float:
        """Covered weight of sites and existing sensors."""
        return float(self.weight @ self.worth(np.concatenate((self.existing, self.heard[list(sites)]))))


def _exact(task: _Task, time_limit: float) -> SiteChoice:
    from scipy.optimize import Bounds, LinearConstraint, milp
    from scipy.sparse import coo_array, eye_array, hstack

    sites = len(task.heard)
    covered_already = task.existing.max(axis=0, initial=0.0) > 0.0
    open_cells = ~covered_already & (task.weight > 0.0) & task.heard.any(axis=0)
    # cells that the same sites hear are one
    patterns, group = np.unique(task.heard[:, open_cells].astype(bool), axis=1, return_inverse=True)
    groups = patterns.shape[1]
    weight = np.bincount(group.ravel(), weights=task.weight[open_cells], minlength=groups)
    rows: list[Any] = []
    low: list[Floats] = []
    high: list[Floats] = []

    def add(matrix: Any, lower: float, upper: float) -> None:
        rows.append(matrix)
        low.append(np.full(matrix.shape[0], lower))
        high.append(np.full(matrix.shape[0], upper))

    add(hstack([coo_array(patterns.T.astype(float)), -eye_array(groups)]), 0.0, np.inf)
    wide = coo_array((1, groups))
    add(hstack([coo_array(np.ones((1, sites))), wide]), 0.0, task.number)
    if np.isfinite(task.budget):
        add(hstack([coo_array(task.cost[None, :]), wide]), 0.0, task.budget)
    first, second = np.nonzero(np.triu(task.too_near, 1))
    if first.size:
        pairs = np.arange(first.size)
        both = coo_array(
            (np.ones(2 * first.size), (np.tile(pairs, 2), np.concatenate((first, second)))),
            shape=(first.size, sites + groups),
        )
        add(both, 0.0, 1.0)
    must = task.must[~covered_already[task.must]]
    if must.size:
        add(hstack([coo_array(task.heard[:, must].T), coo_array((must.size, groups))]), 1.0, np.inf)
    found = milp(
        c=np.concatenate((np.zeros(sites), -weight)),
        # what is covered follows from the sites, so it need not be asked to be whole
        integrality=np.concatenate((np.ones(sites), np.zeros(groups))),
        bounds=Bounds(0.0, np.concatenate((task.usable.astype(float), np.ones(groups)))),
        constraints=[LinearConstraint(row, a, b) for row, a, b in zip(rows, low, high, strict=True)],
        options={"time_limit": time_limit, "mip_rel_gap": 1e-9},
    )
    if found.x is None:
        raise InputError(
            f"no choice within the limits: {found.message} Allow more sites or a larger budget, less spacing, or fewer "
            "cells that must be covered"
        )
    chosen = np.flatnonzero(found.x[:sites] > 0.5)
    base = float(task.weight[covered_already].sum())
    bound = base - float(found.mip_dual_bound)
    value = task.value(list(chosen))
    gap = max(bound - value, 0.0) / bound if bound > 0.0 else 0.0
    note = "proved best" if gap < 1e-6 else f"the best can be no more than {100 * gap:.2g} % better: time ran out"
    return _ordered(task, list(chosen), max(bound, value), 0.0 if gap < 1e-6 else gap, "exact", (note,))


def _greedy(task: _Task) -> SiteChoice:
    chosen: list[int] = []
    value = task.value(chosen)
    unheard = [cell for cell in task.must.tolist() if not task.existing[:, cell].any()]
    while len(chosen) < task.number:
        free = _allowed(task, chosen)
        wanted = [cell for cell in unheard if not task.heard[chosen, cell].any()]
        if wanted:
            free &= task.heard[:, wanted].any(axis=1)
        candidates = np.flatnonzero(free)
        if not candidates.size:
            break
        gains = np.array([task.value([*chosen, site]) for site in candidates.tolist()]) - value
        best = int(np.argmax(gains / task.cost[candidates]))
        if gains[best] <= 0.0 and not wanted and task.at_once == 1:
            break
        chosen.append(int(candidates[best]))
        value += gains[best]
    left = [cell for cell in unheard if not task.heard[chosen, cell].any()]
    if left:
        raise InputError(
            f"cells {', '.join(map(str, left[:5]))} must be covered and no site found within the limits does: "
            "allow more sites, or fewer cells that must be covered"
        )
    return _with_bound(task, chosen)


def _allowed(task: _Task, chosen: list[int]) -> Booleans:
    """Sites that may still be added."""
    free = task.usable & (task.cost <= task.budget - task.cost[chosen].sum() + 1e-12)
    free[chosen] = False
    allowed: Booleans = free & ~np.any(task.too_near[:, chosen], axis=1)
    return allowed


def _with_bound(task: _Task, chosen: list[int]) -> SiteChoice:
    """How good a greedy choice is known to be."""
    plain = not np.isfinite(task.budget) and not task.too_near.any() and not task.must.size
    if task.at_once > 1 or not plain:
        why = "several sensors at once" if task.at_once > 1 else "costs, spacing or cells that must be covered"
        note = f"taken one after the other; with {why} nothing is promised of the best"
        return _ordered(task, chosen, np.inf, np.nan, "greedy", (note,))
    value, base = task.value(chosen), task.value([])
    # gains only shrink as sites are added: the best gains now, added up, are more than any others can bring
    candidates = np.flatnonzero(_allowed(task, chosen)).tolist()
    left = np.sort([task.value([*chosen, site]) - value for site in candidates])
    by_gains = value + float(left[::-1][: task.number].sum())
    bound = min(by_gains, base + (value - base) / (1.0 - np.exp(-1.0)), float(task.weight.sum()))
    gap = max(bound - value, 0.0) / bound if bound > 0.0 else 0.0
    note = "taken one after the other: what is added is never below 1 - 1/e (63 %) of the best"
    return _ordered(task, chosen, bound, gap, "greedy", (note,))


def _ordered(
    task: _Task, chosen: list[int], bound: float, gap: float, method: str, notes: tuple[str, ...]
) -> SiteChoice:
    """The chosen sites by what each adds."""
    order: list[int] = []
    gains: list[float] = []
    value = task.value([])
    base = value
    left = list(chosen)
    while left:
        values = [task.value([*order, site]) for site in left]
        best = int(np.argmax(values))
        gains.append(values[best] - value)
        value = values[best]
        order.append(int(left.pop(best)))
    return SiteChoice(tuple(order), value, np.array(gains), base, float(bound), float(gap), method, notes)


def _table(values: ArrayLike, cells: int | None, name: str) -> Floats:
    table = np.asarray(values, dtype=np.float64)
    if table.ndim != 2 or table.size == 0 or (cells is not None and table.shape[1] != cells):
        raise InputError(f"{name} has shape {table.shape}: (sensors, cells), as many cells everywhere, would be right")
    if not np.all((table >= 0.0) & (table <= 1.0)):
        raise InputError(f"{name} holds a number outside 0 to 1: heard or not, or a probability, would be right")
    return table


def _spaced(
    places: ArrayLike | None, existing_places: ArrayLike | None, sites: int, sensors: int, spacing: float
) -> tuple[Booleans, Booleans]:
    """Which sites are too near each other, and which are far enough from sensors that are there."""
    if not spacing >= 0.0:
        raise InputError(f"spacing is {spacing:g} m: 0 or more would be right")
    near, usable = np.zeros((sites, sites), dtype=bool), np.ones(sites, dtype=bool)
    if spacing == 0.0:
        return near, usable
    if places is None:
        raise InputError("spacing needs the places of the sites")
    here = np.asarray(places, dtype=np.float64)
    if here.shape != (sites, 2) or not np.all(np.isfinite(here)):
        raise InputError(f"places has shape {here.shape}: x and y of each of {sites} sites would be right")
    from scipy.spatial.distance import cdist

    near = cdist(here, here) < spacing
    np.fill_diagonal(near, val=False)
    if sensors and existing_places is not None:
        there = np.asarray(existing_places, dtype=np.float64)
        if there.shape != (sensors, 2):
            raise InputError(f"existing_places has shape {there.shape}: x and y of {sensors} sensors would be right")
        usable = ~np.any(cdist(here, there) < spacing, axis=1)
    return near, usable
