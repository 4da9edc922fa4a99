"""A range test of one's own: how many signals were heard at each distance, and what that says of the receiver."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

_LEAST = 3  # distances


@dataclass(frozen=True, eq=False)
class RangeTest:
    """What a range test says: probability = Phi((allowed loss - loss)/fluctuation).

    Parameters
    ----------
    allowed_loss : float
        Loss at which half of the signals are heard, dB: source level less noise and threshold, as they were.
    fluctuation : float
        Standard deviation from one signal to the next, dB.
    allowed_loss_uncertainty, fluctuation_uncertainty : float
        Standard uncertainties (k = 1), dB, widened by `overdispersion` where that is above 1.
    correlation : float
        Between the errors of the two.
    overdispersion : float
        Pearson's chi squared over its degrees of freedom: well above 1, the signals of one distance were not
        independent, or the loss is not as computed.
    """

    allowed_loss: float
    fluctuation: float
    allowed_loss_uncertainty: float
    fluctuation_uncertainty: float
    correlation: float
    overdispersion: float


def fit_range_test(loss: ArrayLike, heard: ArrayLike, trials: ArrayLike) -> RangeTest:
    """Fit the threshold and the spread of a receiver to a range test.

    Parameters
    ----------
    loss : array_like, shape (n,)
        Transmission loss at each distance of the test, dB, as computed for its water and depths.
    heard, trials : array_like, shape (n,)
        Signals heard and sent at each.

    Returns
    -------
    RangeTest

    Raises
    ------
    InputError
        Fewer than three distances, counts that can't be, or a test that does not tell: all heard or none, or a clean
        cut between the two.

    Notes
    -----
    Maximum likelihood of the probit model (Bliss 1935, Annals of Applied Biology 22:134) in the loss; uncertainties
    from Fisher's information.

    Examples
    --------
    >>> test = fit_range_test([60.0, 66.0, 72.0, 78.0], [97, 84, 50, 16], [100, 100, 100, 100])
    >>> round(test.allowed_loss, 1), round(test.fluctuation, 1)
    (72.0, 6.2)
    """
    from scipy.optimize import minimize
    from scipy.special import log_ndtr, ndtr

    x, k, n = (np.asarray(values, dtype=np.float64) for values in (loss, heard, trials))
    _check(x, k, n)
    middle, scale = float(np.average(x, weights=n)), max(float(np.std(x)), 1.0)
    z = (x - middle) / scale

    def cost(beta: Floats) -> tuple[float, Floats]:
        eta = beta[0] - beta[1] * z
        up, down = log_ndtr(eta), log_ndtr(-eta)
        density = -0.5 * eta**2 - 0.5 * np.log(2.0 * np.pi)
        slope = k * np.exp(density - up) - (n - k) * np.exp(density - down)
        return -float(np.sum(k * up + (n - k) * down)), np.array([-np.sum(slope), np.sum(slope * z)])

    share = np.clip(np.sum(k) / np.sum(n), 0.01, 0.99)
    found = minimize(cost, np.array([2.0 * share - 1.0, 1.0]), jac=True, method="BFGS", options={"gtol": 1e-8})
    a, b = found.x
    if not b > 1e-6:
        raise InputError(
            "signals were not heard less often where the loss is larger: the test does not tell a threshold"
        )
    eta = a - b * z
    p = np.clip(ndtr(eta), 1e-12, 1.0 - 1e-12)
    weight = n * np.exp(-(eta**2)) / (2.0 * np.pi) / (p * (1.0 - p))
    information = np.array([[weight.sum(), -(weight * z).sum()], [-(weight * z).sum(), (weight * z * z).sum()]])
    spread = max(float(np.sum((k - n * p) ** 2 / (n * p * (1.0 - p)))) / max(x.size - 2, 1), 0.0)
    covariance = np.linalg.inv(information) * max(spread, 1.0)
    # allowed loss = middle + scale a/b, fluctuation = scale/b
    to_results = scale * np.array([[1.0 / b, -a / b**2], [0.0, -1.0 / b**2]])
    both = to_results @ covariance @ to_results.T
    sigma = np.sqrt(np.diag(both))
    return RangeTest(
        allowed_loss=float(middle + scale * a / b),
        fluctuation=float(scale / b),
        allowed_loss_uncertainty=float(sigma[0]),
        fluctuation_uncertainty=float(sigma[1]),
        correlation=float(both[0, 1] / (sigma[0] * sigma[1])),
        overdispersion=spread,
    )


def _check(x: Floats, k: Floats, n: Floats) -> None:
    if not (x.ndim == 1 and x.shape == k.shape == n.shape and x.size >= _LEAST):
        raise InputError(f"a range test of {x.size} distances: {_LEAST} or more, with counts for each, would be right")
    for at in np.flatnonzero(~(np.isfinite(x) & (n >= 1.0) & (k >= 0.0) & (k <= n))):
        raise InputError(
            f"range test, place {at + 1}: loss {x[at]:g} dB, {k[at]:g} heard of {n[at]:g}: none up to all is right"
        )
    total, all_heard = k.sum(), n.sum()
    if total in {0.0, all_heard}:
        raise InputError(
            f"{total:g} of {all_heard:g} signals were heard: a range test tells a threshold only by both kinds"
        )
    partly = (k > 0.0) & (k < n)
    if not partly.any():
        raise InputError(
            "at each distance of the range test all signals were heard or none: it tells no spread; test between them"
        )
