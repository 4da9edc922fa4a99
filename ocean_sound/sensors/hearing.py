"""Whether a receiver hears a source: the sonar equation, its probability, and how far it reaches.

All levels are in decibels: source levels re 1 uPa at 1 m, noise spectra re 1 uPa²/Hz, losses re 1 m and positive. One
signal in a band against noise in the same band:

    excess = source level - loss - (noise spectrum + 10 log bandwidth) + directivity - threshold

The threshold is the ratio of signal to noise in that band at which half of all signals are detected, so an excess of 0
is a probability of 50 %. What the water and the sea do from one signal to the next is one standard deviation in dB.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from .noise import power_sum

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

DEFAULT_FLUCTUATION = 6.0
"""dB: a little more than the 5.6 of many paths of random phase (common practice)."""


@dataclass(frozen=True)
class Receiver:
    """What hears.

    Parameters
    ----------
    detection_threshold : float
        Ratio of signal to noise in the band, dB, at which half of all signals are detected.
    bandwidth : float
        Of that band, Hz: a threshold means nothing without it.
    integration_time : float, optional
        For how long a signal is listened to, s; said, not used: the threshold holds for it.
    directivity_index : float
        dB by which the noise is less than that of a receiver that hears all around.
    self_noise : float, optional
        Spectrum level of what the receiver and its mooring make, dB re 1 uPa²/Hz.

    Raises
    ------
    InputError
        If a number is not finite, or bandwidth or time is not above 0.

    Examples
    --------
    >>> Receiver(detection_threshold=8.0, bandwidth=500.0).noise_level(50.0)
    76.98970004336019
    """

    detection_threshold: float
    bandwidth: float
    integration_time: float | None = None
    directivity_index: float = 0.0
    self_noise: float | None = None

    def __post_init__(self) -> None:
        for name in ("detection_threshold", "directivity_index", "self_noise"):
            value = getattr(self, name)
            if value is not None and not np.isfinite(value):
                raise InputError(f"{name} of the receiver is {value:g} dB: a finite number would be right")
        for name, unit in (("bandwidth", "Hz"), ("integration_time", "s")):
            value = getattr(self, name)
            if value is not None and not (np.isfinite(value) and value > 0.0):
                raise InputError(f"{name} of the receiver is {value:g} {unit}: above 0 would be right")

    def noise_level(self, spectrum_level: float) -> float:
        """Noise in the band, the receiver's own included, less its directivity, dB re 1 uPa.

        spectrum_level: of the sea, dB re 1 uPa²/Hz. Own noise is not reduced by directivity.
        """
        sea = spectrum_level - self.directivity_index
        both = sea if self.self_noise is None else float(power_sum(sea, self.self_noise))
        return float(both + 10.0 * np.log10(self.bandwidth))

    def allowed_loss(self, source_level: float, spectrum_level: float) -> float:
        """The loss, dB, at which half of all signals are heard (the figure of merit).

        Examples
        --------
        >>> round(Receiver(8.0, 500.0).allowed_loss(150.0, 50.0), 2)
        65.01
        """
        return source_level - self.noise_level(spectrum_level) - self.detection_threshold


def signal_excess(
    transmission_loss: ArrayLike, *, source_level: float, noise_spectrum_level: float, receiver: Receiver
) -> Floats:
    """By how much a signal exceeds what half of all signals need, dB.

    Parameters
    ----------
    transmission_loss : array_like
        dB re 1 m, positive; infinite where no sound comes.
    source_level : float
        Of the signal within the receiver's band, dB re 1 uPa at 1 m.
    noise_spectrum_level : float
        Of the sea, dB re 1 uPa²/Hz.
    receiver : Receiver

    Raises
    ------
    InputError
        If a level is not finite.

    Examples
    --------
    >>> signal_excess(
    ...     [60.0, 70.0], source_level=150.0, noise_spectrum_level=50.0, receiver=Receiver(8.0, 500.0)
    ... ).round(2)
    array([ 5.01, -4.99])
    """
    if not (np.isfinite(source_level) and np.isfinite(noise_spectrum_level)):
        raise InputError(
            f"source level {source_level:g} dB, noise {noise_spectrum_level:g} dB: finite numbers would be right"
        )
    allowed = receiver.allowed_loss(source_level, noise_spectrum_level)
    return allowed - np.asarray(transmission_loss, dtype=np.float64)


def detection_probability(excess: ArrayLike, *, fluctuation: float = DEFAULT_FLUCTUATION) -> Floats:
    """How likely one signal is detected, for fluctuations that are normal in dB.

    Parameters
    ----------
    excess : array_like
        Signal excess, dB.
    fluctuation : float
        Standard deviation from one signal to the next, dB, 0 or more: with 0 it is heard or not.

    Raises
    ------
    InputError
        If the fluctuation is negative or not finite.

    Examples
    --------
    >>> detection_probability([-6.0, 0.0, 6.0], fluctuation=6.0).round(3)
    array([0.159, 0.5  , 0.841])
    """
    from scipy.special import ndtr

    e = np.asarray(excess, dtype=np.float64)
    check_fluctuation(fluctuation)
    if fluctuation == 0.0:
        return np.where(np.isnan(e), np.nan, (e >= 0.0).astype(np.float64))
    found: Floats = ndtr(e / fluctuation)
    return found


@dataclass(frozen=True)
class Reach:
    """How far a receiver hears along one bearing.

    Parameters
    ----------
    unbroken : float
        m, to where the probability first falls below the level asked; 0 if it is below it from the start.
    farthest : float
        m, the last distance at which it is still reached: beyond `unbroken` where sound comes back (convergence zones).
    share : float
        Of the distance to `farthest` at which it is reached.
    cut : bool
        Whether it is still reached where the computation ends: the true reach is longer.
    """

    unbroken: float
    farthest: float
    share: float
    cut: bool


def detection_range(ranges: ArrayLike, probability: ArrayLike, *, level: float = 0.5) -> Reach:
    """How far a probability of detection is reached along a bearing.

    Parameters
    ----------
    ranges : array_like, shape (n,)
        m, increasing.
    probability : array_like, shape (n,)
        Straight between the ranges; before the first it is taken as there. NaN counts as not heard.
    level : float
        Above 0 and below 1.

    Raises
    ------
    InputError
        If ranges do not increase, the columns differ in length, or the level makes no sense.

    Examples
    --------
    >>> detection_range([1000.0, 2000.0, 3000.0, 4000.0], [0.9, 0.6, 0.4, 0.55])
    Reach(unbroken=2500.0, farthest=4000.0, share=0.708..., cut=True)
    """
    r, p = np.asarray(ranges, dtype=np.float64), np.asarray(probability, dtype=np.float64)
    if not 0.0 < level < 1.0:
        raise InputError(f"level is {level:g}: a probability above 0 and below 1 would be right")
    if r.ndim != 1 or r.shape != p.shape or r.size < 2 or not np.all(np.diff(r) > 0.0) or r[0] < 0.0:
        raise InputError(
            f"{r.size} ranges and {p.size} probabilities: two or more of each, ranges increasing from 0 on, are right"
        )
    over = np.where(np.isnan(p), 0.0, p) - level
    # where the straight pieces cross the level
    left, right = over[:-1], over[1:]
    crosses = (left >= 0.0) != (right >= 0.0)
    gap = np.where(crosses, left - right, 1.0)
    places = r[:-1] + np.where(crosses, left / gap, 0.0) * np.diff(r)
    crossings = places[crosses]
    heard_at_start, cut = bool(over[0] >= 0.0), bool(over[-1] >= 0.0)
    edges = np.concatenate(([0.0] if heard_at_start else [], crossings, [r[-1]] if cut else []))
    if edges.size == 0:
        return Reach(0.0, 0.0, 0.0, cut=False)
    spans = edges.reshape(-1, 2)
    farthest = float(spans[-1, 1])
    unbroken = float(spans[0, 1]) if heard_at_start else 0.0
    share = float(np.sum(spans[:, 1] - spans[:, 0]) / farthest) if farthest > 0.0 else 0.0
    return Reach(unbroken, farthest, share, cut)


def check_fluctuation(fluctuation: float) -> None:
    """Refuse what no standard deviation is."""
    if not (np.isfinite(fluctuation) and fluctuation >= 0.0):
        raise InputError(f"fluctuation is {fluctuation:g} dB: a standard deviation of 0 or more would be right")
