"""The speeds at given levels with which the integral of a profile's error is least."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Levels = NDArray[np.int64]

_ROUNDS = 8  # of reweighting; the largest error falls little after
_MOST_ROWS = 600  # depths at which the error is looked at
_STIFFNESS = 1e-3  # what holds a speed to the measured one, where the integral hardly feels it


@dataclass(frozen=True, eq=False)
class Fit:
    """Speeds at the kept levels, the integral of the hat function of each, to round them by, and the largest error."""

    speed: Floats
    weight: Floats
    error: float


def fitted(depth: Floats, speed: Floats, running: tuple[Floats, Floats, Floats], kept: Levels) -> Fit:
    """Move the speeds at the kept levels, but for the first, so that the largest error of the integral falls.

    Parameters
    ----------
    depth, speed : numpy.ndarray, shape (levels,)
        The measured levels, m and m/s.
    running : tuple of numpy.ndarray, each of shape (levels,)
        The integrals of w, w z and w c to each, as in `_kernels_thin`.
    kept : numpy.ndarray of int, shape (kept,)
        Which levels are kept; the first and the last among them.

    Returns
    -------
    Fit
        The speed of the first level is as measured.

    Notes
    -----
    The integral of the error is linear in the speeds. Least squares, weighted anew in each round by the size of the
    errors of the round before, come near the least largest error (Lawson's algorithm; from memory: C. L. Lawson, 1961).
    """
    rows = _rows(depth.size, kept)
    matrix, weight = _integrals(depth, running, kept, rows)
    measured = speed[kept]
    # In differences from the measured speeds, so that no digits are lost.
    start = matrix @ (measured - measured[0]) - (running[2][rows] - measured[0] * running[0][rows])
    free = matrix[:, 1:]
    stiff = _STIFFNESS * np.mean(weight**2) * np.eye(free.shape[1])
    omega = np.full(rows.size, 1.0 / rows.size)
    best, change = np.abs(start).max(), np.zeros(free.shape[1])
    for _ in range(_ROUNDS):
        normal = free.T @ (omega[:, None] * free) + stiff
        trial = np.linalg.solve(normal, -free.T @ (omega * start))
        error = np.abs(start + free @ trial)
        largest = error.max()
        if largest < best:
            best, change = largest, trial
        if largest == 0.0:
            break
        omega *= error / largest + 1e-3
        omega /= omega.sum()
    return Fit(measured + np.concatenate(([0.0], change)), weight, float(best))


def dispensable(depth: Floats, speed: Floats, running: tuple[Floats, Floats, Floats], kept: Levels) -> Levels:
    """The places in `kept` of the inner levels, that first without which the speeds of the others fit best.

    Without a level its speed lies on the line between its neighbours: one linear constraint a·s = 0 on the speeds, by
    which the least sum of squares grows by (a·s)²/(a·H⁻¹a), H being its matrix of second derivatives.
    """
    rows = _rows(depth.size, kept)
    matrix, weight = _integrals(depth, running, kept, rows)
    measured = speed[kept]
    start = matrix @ (measured - measured[0]) - (running[2][rows] - measured[0] * running[0][rows])
    free = matrix[:, 1:]
    inverse = np.linalg.inv(free.T @ free / rows.size + _STIFFNESS * np.mean(weight**2) * np.eye(free.shape[1]))
    best = measured - measured[0]
    best[1:] -= inverse @ (free.T @ start) / rows.size
    z = depth[kept]
    share = (z[1:-1] - z[:-2]) / (z[2:] - z[:-2])
    kink = best[1:-1] - (1.0 - share) * best[:-2] - share * best[2:]
    level = np.arange(kept.size - 2)
    constraint = np.zeros((level.size, kept.size))
    constraint[level, level + 1] = 1.0
    constraint[level, level] = share - 1.0
    constraint[level, level + 2] = -share
    constraint = constraint[:, 1:]
    growth = kink**2 / np.einsum("ij,jk,ik->i", constraint, inverse, constraint, optimize=True)
    return np.argsort(growth) + 1


def rounded_in_turn(speed: Floats, weight: Floats, rounding: Callable[[Floats], Floats]) -> Floats:
    """Round each speed such that its error and those of all before it cancel in the integral.

    Parameters
    ----------
    speed, weight : numpy.ndarray, shape (kept,)
        From `fitted`.
    rounding : callable
        From speeds to these as they are printed.

    Returns
    -------
    numpy.ndarray
        Speeds as they are printed; the first is the nearest to its speed.
    """
    result = rounding(speed)
    # No more than a digit away from the nearest, or a thin layer would be made to pay for a thick one.
    most = 2.0 * float(np.abs(result - speed).max())
    owed = (result[0] - speed[0]) * weight[0]
    for level in range(1, speed.size):
        wanted = speed[level] - np.clip(owed / weight[level], -most, most)
        result[level] = rounding(np.array([wanted]))[0]
        owed += (result[level] - speed[level]) * weight[level]
    return result


def _rows(levels: int, kept: Levels) -> Levels:
    """The levels at which the error is looked at."""
    if levels <= _MOST_ROWS:
        return np.arange(levels)
    return np.union1d(np.linspace(0, levels - 1, _MOST_ROWS).round().astype(np.int64), kept)


def _integrals(
    depth: Floats, running: tuple[Floats, Floats, Floats], kept: Levels, rows: Levels
) -> tuple[Floats, Floats]:
    """The integral of w times the hat function of each kept level to each row's depth, and over all depths."""
    w, wz, _ = running
    z = depth[kept]
    thickness = np.diff(z)
    layer = np.clip(np.searchsorted(kept, rows, side="right") - 1, 0, thickness.size - 1)
    index = np.arange(rows.size)

    def shares(begin: Levels, end: Levels, of: Levels) -> tuple[Floats, Floats]:
        """What a stretch of a layer gives to the hat functions of its upper and its lower level."""
        across, moment = w[end] - w[begin], wz[end] - wz[begin]
        return (z[of + 1] * across - moment) / thickness[of], (moment - z[of] * across) / thickness[of]

    every = np.arange(thickness.size)
    upper, lower = shares(kept[:-1], kept[1:], every)
    passed = every[None, :] < layer[:, None]
    matrix = np.zeros((rows.size, kept.size))
    matrix[:, :-1] += passed * upper
    matrix[:, 1:] += passed * lower
    part_upper, part_lower = shares(kept[layer], rows, layer)
    matrix[index, layer] += part_upper
    matrix[index, layer + 1] += part_lower
    weight = np.zeros(kept.size)
    weight[:-1] += upper
    weight[1:] += lower
    return matrix, weight
