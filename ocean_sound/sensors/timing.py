"""From what a clock shows to the one-way travel time, and how uncertain that is."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

_NOT_NEGATIVE = ("turn_around", "timing_uncertainty", "turn_around_uncertainty", "offset_uncertainty",
                 "drift_uncertainty")  # fmt: skip


@dataclass(frozen=True)
class Timing:
    """How travel times are measured.

    Two ways, one clock measures from the question to the answer:
    ``measured = (2 time + turn_around) (1 + drift)``.
    One way, the clock of the receiver is ahead of that of the source:
    ``measured = time + offset + drift * elapsed``, elapsed since the offset was found.

    Parameters
    ----------
    two_way : bool
    turn_around : float
        s, from the arrival of the question to the answer, two ways only.
    offset : float
        s, one way only.
    drift : float
        s/s, by which the clock runs fast.
    timing_uncertainty : float
        Of each measured time, s (k = 1), independent of the others.
    turn_around_uncertainty : float
        s (k = 1), of each transponder, independent of the others.
    offset_uncertainty : float
        s (k = 1), the same error in all measured times.
    drift_uncertainty : float
        s/s (k = 1), likewise.

    Raises
    ------
    InputError
        If a number makes no sense, or not with the kind of timing.

    Examples
    --------
    >>> Timing(turn_around=0.5).one_way(2.5)
    array(1.)
    >>> Timing(two_way=False, offset=0.001, drift=1e-8).one_way(1.0015, elapsed=50_000.0)
    array(1.)
    """

    two_way: bool = True
    turn_around: float = 0.0
    offset: float = 0.0
    drift: float = 0.0
    timing_uncertainty: float = 1e-4
    turn_around_uncertainty: float = 0.0
    offset_uncertainty: float = 0.0
    drift_uncertainty: float = 0.0

    def __post_init__(self) -> None:
        for name in (f.name for f in fields(self)[1:]):
            value = getattr(self, name)
            least = 0.0 if name in _NOT_NEGATIVE else -np.inf
            if not (np.isfinite(value) and value >= least):
                raise InputError(f"timing: {name} is {value:g}: a finite number, 0 or more, would be right")
        other = ("offset", "offset_uncertainty") if self.two_way else ("turn_around", "turn_around_uncertainty")
        for name in other:
            if getattr(self, name) != 0.0:
                ways = "two ways" if self.two_way else "one way"
                raise InputError(f"timing: {name} is {getattr(self, name):g}, which means nothing {ways}: leave it out")
        if abs(self.drift) >= 0.1:
            raise InputError(f"timing: drift is {self.drift:g}: seconds in a second, such as 1e-7, would be right")

    def one_way(self, measured: ArrayLike, *, elapsed: ArrayLike = 0.0) -> Floats:
        """The one-way travel time, s, of measured times (s), so many seconds after the offset was found."""
        m = np.asarray(measured, dtype=np.float64)
        if self.two_way:
            return np.asarray(0.5 * (m / (1.0 + self.drift) - self.turn_around))
        return np.asarray(m - self.offset - self.drift * np.asarray(elapsed, dtype=np.float64))

    def measured(self, time: ArrayLike, *, elapsed: ArrayLike = 0.0) -> Floats:
        """What the clock shows for one-way travel times, s."""
        t = np.asarray(time, dtype=np.float64)
        if self.two_way:
            return np.asarray((2.0 * t + self.turn_around) * (1.0 + self.drift))
        return np.asarray(t + self.offset + self.drift * np.asarray(elapsed, dtype=np.float64))

    @property
    def own(self) -> float:
        """Standard uncertainty of a one-way time that is independent of the others, s."""
        if self.two_way:
            return 0.5 * float(np.hypot(self.timing_uncertainty, self.turn_around_uncertainty))
        return self.timing_uncertainty

    def shared(self, time: ArrayLike, *, elapsed: ArrayLike = 0.0) -> Floats:
        """Errors of one-way times (s) from one standard error of the clock, the same clock in all: (kinds, ...)."""
        t = np.asarray(time, dtype=np.float64)
        if self.two_way:
            return np.asarray([0.5 * (2.0 * t + self.turn_around) * self.drift_uncertainty])
        e = np.broadcast_to(np.asarray(elapsed, dtype=np.float64), t.shape)
        return np.asarray([np.full(t.shape, self.offset_uncertainty), e * self.drift_uncertainty])
