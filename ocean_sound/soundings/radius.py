"""95 % of an uncertainty: of a depth, and of a position whose covariance is an ellipse."""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ._arguments import checked_array, given_back, together

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

#: 95 % of a normal error in one dimension, in standard deviations; IHO S-44 edition 6.0.0, section 2.6.
TVU_FACTOR = 1.96

_RADIUS_NODES = 4097  # over the squared ratio of the axes, from 0 to 1: straight lines between err by less than 1e-8
_RADIUS_ANGLES = 64  # of the mean over a quarter turn, exact to rounding from 48 on
_ROUNDING = 1e-9  # share of the larger variance by which rounding may make the smaller one negative


def tvu_95_from_sigma(sigma: ArrayLike) -> Any:
    """TVU (95 %) from the standard uncertainty of depth: 1.96 times that.

    Parameters
    ----------
    sigma : array_like
        Standard uncertainty (k = 1), m.

    Returns
    -------
    float or numpy.ndarray
        m, in the same shape; NaN stays NaN.

    Raises
    ------
    InputError
        If one is negative.

    References
    ----------
    IHO S-44, edition 6.0.0 (2020), section 2.6. Valid for normal errors.

    Examples
    --------
    >>> tvu_95_from_sigma(0.5)
    0.98
    """
    return given_back(TVU_FACTOR * checked_array("sigma", sigma))


def thu_95_from_covariance(xx: ArrayLike, yy: ArrayLike, xy: ArrayLike = 0.0) -> Any:
    """THU (95 %) from a horizontal covariance: the radius around the sounding that holds 95 % of normal errors.

    Parameters
    ----------
    xx, yy : array_like
        Variances (k = 1) along two axes at right angles, m2.
    xy : array_like
        Their covariance, m2.

    Returns
    -------
    float or numpy.ndarray
        m, in the broadcast shape; NaN where a value is NaN.

    Raises
    ------
    InputError
        If a variance is negative or infinite, the three are no covariance, or they do not broadcast.

    Notes
    -----
    In polar coordinates of the principal errors, each divided by its standard deviation, the chance to be farther out
    than K times the larger standard deviation is, with q the smaller one over the larger,

        2/π ∫ exp(-K² / (2 (cos²t + q² sin²t))) dt  for t from 0 to π/2

    (along a line, q = 0, the form of the normal integral by Craig, 1991, from memory; round, q = 1, exp(-K²/2)). The
    integrand is smooth and periodic, so its mean over equal steps is exact to rounding. K for the chance 0.05, from
    1.95996 to 2.44775, is tabulated over q², in which it is smooth, with straight lines between: the error of the
    radius is below 1e-8 of the larger standard deviation.

    Examples
    --------
    >>> round(thu_95_from_covariance(1.0, 1.0), 4), round(thu_95_from_covariance(1.0, 0.0), 4)
    (2.4477, 1.96)
    """
    a, b, c = together(xx=checked_array("xx", xx), yy=checked_array("yy", yy), xy=checked_array("xy", xy))
    middle, half = 0.5 * (a + b), np.sqrt(0.25 * (a - b) ** 2 + c * c)
    larger, smaller = middle + half, middle - half
    bad = smaller < -_ROUNDING * larger
    if bad.any():
        x, y, both = (float(each[bad][0]) for each in (a, b, c))
        raise InputError(
            f"xy: {both:g} is no covariance of variances {x:g} and {y:g} ({int(bad.sum())} such of {bad.size}): "
            "it must not be beyond the root of their product; check units"
        )
    squared = np.maximum(smaller, 0.0) / np.where(larger > 0.0, larger, 1.0)
    return given_back(np.sqrt(larger) * _radius_factor(squared))


def _radius_factor(squared: Floats) -> Floats:
    """The radius in larger standard deviations, by the squared ratio of the smaller to the larger one."""
    radius, steps = radius_table()
    at = squared * (_RADIUS_NODES - 1)
    with np.errstate(invalid="ignore"):  # NaN has no place in the table, and stays NaN in the last line
        node = at.astype(np.intp)
    factor: Floats = radius.take(node, mode="clip") + (at - node) * steps.take(node, mode="clip")
    return factor


@lru_cache(maxsize=1)
def radius_table() -> tuple[Floats, Floats]:
    """The radius of 95 %, in larger standard deviations, at even steps of the squared ratio; and its steps."""
    turn = (np.arange(_RADIUS_ANGLES) + 0.5) * (0.5 * np.pi / _RADIUS_ANGLES)
    spread = np.cos(turn) ** 2 + np.linspace(0.0, 1.0, _RADIUS_NODES)[:, np.newaxis] * np.sin(turn) ** 2
    radius = np.full((_RADIUS_NODES, 1), TVU_FACTOR)
    for _ in range(8):  # from the foot of the table Newton's method reaches rounding in six steps
        outside = np.exp(-0.5 * radius * radius / spread)
        slope = np.mean(radius / spread * outside, axis=1, keepdims=True)
        radius += (np.mean(outside, axis=1, keepdims=True) - 0.05) / slope
    return radius[:, 0], np.append(np.diff(radius[:, 0]), 0.0)
