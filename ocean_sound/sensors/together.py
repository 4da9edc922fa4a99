"""How likely at least so many of several things happen: sensors that hear one sound, pulses of a code that arrive.

Levels at several sensors do not vary on their own: the source is louder or the sea calmer for all. Here each departs
from its mean by one normal factor that all share and one of its own, which makes any two of them correlate by the same
number. Given the shared factor they are independent, so counts follow from one recursion, and the mean over the factor
from Gauss's and Hermite's quadrature.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .hearing import check_fluctuation, detection_probability

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

_NODES = 64


def at_least(
    excess: ArrayLike,
    *,
    most: int = 4,
    fluctuation: float,
    correlation: float = 0.0,
    chance: Callable[[Any, float], Any] | None = None,
) -> Floats:
    """Probability that at least 1, 2, ... of several hear one signal.

    Parameters
    ----------
    excess : array_like, shape (sensors, ...)
        Signal excess of each, dB; NaN counts as deaf.
    most : int
        Up to how many at once.
    fluctuation : float
        Standard deviation, dB, of each.
    correlation : float
        Between any two, 0 to below 1; 1 for all as one.
    chance : callable, optional
        Another function of excess and standard deviation to the probability of one sensor, growing with excess; a code
        of several pulses, say. `detection_probability` where not given.

    Returns
    -------
    numpy.ndarray, shape (most, ...)
        The first is that of at least one. Integration errs by less than 1e-6 up to a correlation of 0.8; nearer to 1
        by up to 1 %.

    Raises
    ------
    InputError
        If a number makes no sense.

    Examples
    --------
    >>> at_least([0.0, 0.0], most=2, fluctuation=6.0).round(3)
    array([0.75, 0.25])

    Two normal variables that correlate by r are both above their means with a probability of 1/4 + asin(r)/(2 pi):

    >>> at_least([0.0, 0.0], most=2, fluctuation=6.0, correlation=0.5).round(4)
    array([0.6667, 0.3333])
    """
    levels = np.asarray(excess, dtype=np.float64)
    check_fluctuation(fluctuation)
    if levels.ndim == 0 or levels.shape[0] == 0:
        raise InputError("no sensor is given: the first dimension of excess runs over one or more")
    if most < 1:
        raise InputError(f"most is {most}: 1 or more would be right")
    if not 0.0 <= correlation <= 1.0:
        raise InputError(f"correlation is {correlation:g}: 0 to 1 would be right")
    levels = np.where(np.isnan(levels), -np.inf, levels)
    hear = _one if chance is None else chance
    if fluctuation == 0.0 or correlation == 0.0:
        return counted(hear(levels, fluctuation), most)
    if correlation == 1.0 and chance is None:
        ordered = -np.sort(-levels, axis=0)[:most]
        found = np.zeros((most, *levels.shape[1:]))
        found[: len(ordered)] = detection_probability(ordered, fluctuation=fluctuation)
        return found
    places, weights = np.polynomial.hermite_e.hermegauss(_NODES)
    own = fluctuation * np.sqrt(1.0 - correlation)
    total = np.zeros((most, *levels.shape[1:]))
    for place, weight in zip(places, weights / weights.sum(), strict=True):
        shared = fluctuation * np.sqrt(correlation) * place
        total += weight * counted(hear(levels + shared, own), most)
    return np.clip(total, 0.0, 1.0)


def _one(excess: Floats, fluctuation: float) -> Floats:
    return detection_probability(excess, fluctuation=fluctuation)


def counted(probability: Floats, most: int) -> Floats:
    """At least 1, 2, ... of independent events of given probabilities."""
    # exactly[k]: that k have happened so far; the last one gathers `most` and more
    exactly = np.zeros((most + 1, *probability.shape[1:]))
    exactly[0] = 1.0
    for p in probability:
        exactly[most] += p * exactly[most - 1]
        for k in range(most - 1, 0, -1):
            exactly[k] = (1.0 - p) * exactly[k] + p * exactly[k - 1]
        exactly[0] *= 1.0 - p
    return np.cumsum(exactly[:0:-1], axis=0)[::-1]
