"""Search launch angles for rays that end at given depths: cells between neighbouring rays, halved where need be."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Callable

    Land = Callable[[np.ndarray], "Landing"]

NARROWEST = 1e-8  # degrees: a cell is not halved any further
AGREES = 0.05  # of the span of a cell: how well its cubic must foretell its middle
MOST_RAYS = 400_000  # over all rounds of one search
ROUNDS = 60
CLOSE, ARRIVED = 1e-7, 0.01  # m: a miss not worth another step, and the largest of an arrival
SAME = 1e-9  # degrees: two rays nearer than this are one


@dataclass(frozen=True, eq=False)
class Landing:
    """Where rays pass a range: depth (m), its change with launch angle (m per degree), and their history.

    Rays with the same history have bounced and turned alike; a negative one says that the range was not reached.
    """

    angle: np.ndarray
    depth: np.ndarray
    slope: np.ndarray
    history: np.ndarray

    def __getitem__(self, chosen: np.ndarray) -> Landing:
        return Landing(self.angle[chosen], self.depth[chosen], self.slope[chosen], self.history[chosen])

    def joined(self, other: Landing) -> Landing:
        """These rays, then the others."""
        return Landing(
            *(
                np.concatenate((getattr(self, name), getattr(other, name)))
                for name in ("angle", "depth", "slope", "history")
            )
        )


@dataclass(frozen=True, eq=False)
class Brackets:
    """Pairs of launch angles, degrees, between which the ray's depth passes that of a receiver."""

    low: np.ndarray
    high: np.ndarray
    receiver: np.ndarray


def brackets(land: Land, angles: np.ndarray, depths: np.ndarray) -> tuple[Brackets, int]:
    """Find launch angles around each ray that ends at one of the depths; and how many cells were left unresolved.

    A fan at the given angles is refined between neighbours. Where two have the same history, the cubic through their
    depths and slopes is checked against the ray midway; it is trusted where it foretold that one, and it then tells
    whether a depth is met, also twice, on both sides of a caustic. Between rays of different history cells are halved
    until they are narrow.
    """
    rays = land(np.unique(angles))
    left, right = rays[np.arange(rays.angle.size - 1)], rays[np.arange(1, rays.angle.size)]
    lows: list[np.ndarray] = []
    highs: list[np.ndarray] = []
    receivers: list[np.ndarray] = []
    spent, unresolved = rays.angle.size, 0
    while left.angle.size:
        live = (left.history >= 0) | (right.history >= 0)
        left, right = left[live], right[live]
        width = right.angle - left.angle
        narrow = width <= NARROWEST
        if spent + int((~narrow).sum()) > MOST_RAYS:
            unresolved += int((~narrow).sum())
            narrow[:] = True
        # What can't be halved any more is taken as it is: a miss too large throws it out later.
        ends = narrow & (left.history >= 0) & (right.history >= 0)
        _note(left[ends], right[ends], depths, lows, highs, receivers)
        left, right = left[~narrow], right[~narrow]
        if not left.angle.size:
            break
        middle = land(_cut(left, right))
        spent += middle.angle.size
        keep_left, keep_right = _judge(left, middle, right, depths, lows, highs, receivers)
        left, right = left[keep_left].joined(middle[keep_right]), middle[keep_left].joined(right[keep_right])
    return Brackets(_all(lows), _all(highs), _all(receivers).astype(int)), unresolved


def _all(parts: list[np.ndarray]) -> np.ndarray:
    return np.concatenate(parts) if parts else np.empty(0)


def _note(
    left: Landing,
    right: Landing,
    depths: np.ndarray,
    lows: list[np.ndarray],
    highs: list[np.ndarray],
    receivers: list[np.ndarray],
) -> None:
    """Take down the cells whose ends lie on either side of a depth."""
    cell, receiver = np.nonzero((left.depth[:, None] < depths) != (right.depth[:, None] < depths))
    lows.append(left.angle[cell])
    highs.append(right.angle[cell])
    receivers.append(receiver)


def _cut(left: Landing, right: Landing) -> np.ndarray:
    """Where to cut cells: at the extremum of their cubic if it has one well inside, else midway."""
    width = right.angle - left.angle
    # the slope of the cubic over t from 0 to 1 is s0 + t (b + t a)
    s0, s1 = left.slope * width, right.slope * width
    rise = right.depth - left.depth
    a, b = 3.0 * (s0 + s1 - 2.0 * rise), 6.0 * rise - 4.0 * s0 - 2.0 * s1
    with np.errstate(all="ignore"):
        root = np.sqrt(b * b - 4.0 * a * s0)
        t = 2.0 * s0 / np.where(b > 0.0, -b - root, root - b)
    same = (left.history == right.history) & (s0 * s1 < 0.0) & np.isfinite(t) & (t > 0.1) & (t < 0.9)
    return np.asarray(left.angle + width * np.where(same, t, 0.5))


def _judge(
    left: Landing,
    middle: Landing,
    right: Landing,
    depths: np.ndarray,
    lows: list[np.ndarray],
    highs: list[np.ndarray],
    receivers: list[np.ndarray],
) -> tuple[np.ndarray, np.ndarray]:
    """Note what cells cut in two hold, and say which of their halves must be cut again."""
    same = (left.history == middle.history) & (middle.history == right.history) & (middle.history >= 0)
    width = right.angle - left.angle
    t = (middle.angle - left.angle) / width
    foretold = (
        left.depth * (1 - t) ** 2 * (1 + 2 * t)
        + right.depth * t**2 * (3 - 2 * t)
        + width * (left.slope * t * (1 - t) ** 2 - right.slope * t**2 * (1 - t))
    )
    off = np.abs(foretold - middle.depth)
    again = []
    for a, b in ((left, middle), (middle, right)):
        hull = _hull(a, b)
        low, high = hull.min(axis=0), hull.max(axis=0)
        span = high - low
        trusted = same & (off <= AGREES * span + CLOSE)
        # A cubic over half the cell errs by a sixteenth of what that over the whole did at its middle.
        margin = np.where(trusted, 0.25 * off, 4.0 * off)[:, None]
        near = (low[:, None] - margin <= depths) & (depths <= high[:, None] + margin)
        near |= ~np.isfinite(span + off)[:, None]
        crossed = (a.depth[:, None] < depths) != (b.depth[:, None] < depths)
        monotone = trusted & ((hull[1:] >= hull[:-1]).all(axis=0) | (hull[1:] <= hull[:-1]).all(axis=0))
        cell, receiver = np.nonzero(monotone[:, None] & crossed)
        lows.append(a.angle[cell])
        highs.append(b.angle[cell])
        receivers.append(receiver)
        again.append(~same | (~monotone & near.any(axis=1)))
    return again[0], again[1]


def _hull(a: Landing, b: Landing) -> np.ndarray:
    """The four Bernstein points of the cubic between two rays, shape (4, cells)."""
    third = (b.angle - a.angle) / 3.0
    with np.errstate(invalid="ignore"):
        return np.array([a.depth, a.depth + third * a.slope, b.depth - third * b.slope, b.depth])


def refine(land: Land, found: Brackets, depths: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Launch angle, miss (m) and receiver of each ray bracketed, none twice; those that miss are left out.

    Newton's method, kept within the bracket; by halves where it would leave it. `land` should be exact.
    """
    if not found.low.size:
        return np.empty(0), np.empty(0), np.empty(0, dtype=int)
    target = depths[found.receiver]
    low, high = land(found.low), land(found.high)
    a, b = low.angle.copy(), high.angle.copy()
    below = low.depth < target  # whether the low end lies above the receiver
    best = np.where(np.abs(low.depth - target) < np.abs(high.depth - target), a, b)
    miss = np.minimum(np.abs(low.depth - target), np.abs(high.depth - target))
    with np.errstate(invalid="ignore", divide="ignore"):
        at = a + (b - a) * (target - low.depth) / (high.depth - low.depth)
    at = np.where((at >= a) & (at <= b), at, 0.5 * (a + b))
    for turn in range(ROUNDS):
        open_ = miss > CLOSE
        if not open_.any():
            break
        here = land(at[open_])
        off = here.depth - target[open_]
        bad = here.history < 0
        off[bad] = np.nan
        better = np.abs(off) < miss[open_]
        best[open_] = np.where(better, here.angle, best[open_])
        miss[open_] = np.where(better, np.abs(off), miss[open_])
        left = (off < 0.0) == below[open_]
        a[open_] = np.where(left, here.angle, a[open_])
        b[open_] = np.where(left, b[open_], here.angle)
        with np.errstate(invalid="ignore", divide="ignore"):
            newton = here.angle - off / here.slope
        middle = 0.5 * (a[open_] + b[open_])
        inside = (newton >= a[open_]) & (newton <= b[open_])
        # every fourth time by halves, or a flat place could hold Newton's steps up
        at[open_] = np.where(inside & (turn % 4 != 3), newton, middle)
    arrived = np.flatnonzero(miss <= ARRIVED)
    order = arrived[np.lexsort((best[arrived], found.receiver[arrived]))]
    fresh = np.ones(order.size, dtype=bool)
    fresh[1:] = (np.diff(best[order]) > SAME) | (np.diff(found.receiver[order]) != 0)
    order = order[fresh]
    return best[order], miss[order], found.receiver[order]
