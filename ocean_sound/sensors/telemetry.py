"""Coded transmitters: a whole code must arrive, and codes that overlap are lost."""

from __future__ import annotations

import numpy as np

from ..errors import InputError
from .together import at_least


def code_probability(excess: float, *, pulses: int, fluctuation: float, correlation: float = 0.0) -> float:
    """How likely all pulses of a code are heard.

    Parameters
    ----------
    excess : float
        Signal excess of one pulse, dB.
    pulses : int
        In a code; each must be heard.
    fluctuation : float
        Standard deviation of each, dB.
    correlation : float
        Between the pulses of one code, 0 to 1: they follow each other within seconds, so often near 1.

    Raises
    ------
    InputError
        If a number makes no sense.

    Examples
    --------
    >>> round(code_probability(6.0, pulses=8, fluctuation=6.0), 4), round(0.841345**8, 4)
    (0.2511, 0.2511)
    """
    if pulses < 1:
        raise InputError(f"{pulses} pulses in a code: 1 or more would be right")
    heard = at_least(np.full(pulses, float(excess)), most=pulses, fluctuation=fluctuation, correlation=correlation)
    return float(heard[pulses - 1])


def no_collision(transmitters: int, *, duration: float, interval: float) -> float:
    """How likely a code overlaps none of the other transmitters' that are heard at the same receiver.

    Parameters
    ----------
    transmitters : int
        Within hearing at once, the one in question included.
    duration : float
        Of a code, s.
    interval : float
        Mean time from the beginning of one code to that of the next of the same transmitter, s, random enough that
        two transmitters don't keep step.

    Returns
    -------
    float
        (1 - 2 duration/interval) to the power of the number of others: another code must begin within neither the
        duration before nor the duration after (Abramson 1970, AFIPS Fall Joint Computer Conference 37:281, for one
        channel without listening first).

    Raises
    ------
    InputError
        If a number makes no sense, or codes are so long that two transmitters always collide.

    Examples
    --------
    >>> round(no_collision(11, duration=3.0, interval=120.0), 3)
    0.599
    """
    if transmitters < 1:
        raise InputError(f"{transmitters} transmitters: 1 or more would be right")
    if not (duration > 0.0 and np.isfinite(interval) and interval >= 2.0 * duration):
        raise InputError(
            f"codes of {duration:g} s every {interval:g} s: an interval of twice the duration or more would be right"
        )
    return float((1.0 - 2.0 * duration / interval) ** (transmitters - 1))


def codes_needed(probability: float, *, confidence: float = 0.95) -> int:
    """How many codes must be sent in hearing so that at least one arrives with a confidence.

    Examples
    --------
    >>> codes_needed(0.25), codes_needed(1.0)
    (11, 1)

    Raises
    ------
    InputError
        If the probability is not above 0 and at most 1, or the confidence not between 0 and 1.
    """
    if not (0.0 < probability <= 1.0 and 0.0 < confidence < 1.0):
        raise InputError(f"probability {probability:g}, confidence {confidence:g}: both between 0 and 1 would be right")
    if probability == 1.0:
        return 1
    return int(np.ceil(np.log1p(-confidence) / np.log1p(-probability) - 1e-9))
