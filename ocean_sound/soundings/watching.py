"""Watch the surface: the surface sound speed against the casts along the line; absorption for the sounder's settings.

The speed that steers the beams is measured all the time, the cast only now and then: where the two part at the depth
of the transducer, the water has changed since the cast, or one of the two instruments is wrong. Where they agree, the
water below may still have changed: agreement at the surface proves nothing of the thermocline.
"""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..water import OutOfRangeWarning, absorption, depth_from_pressure

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import ArrayLike, NDArray

    from ..casts import Cast
    from ..profile import Profile
    from .columns import PingBlock

    Floats = NDArray[np.float64]

LARGEST_DIFFERENCE = 2.0
"""m/s between surface sound speed and cast, beyond which a new cast is due (common practice)."""

AGREEMENT_NOTE = "a surface sound speed that agrees with the cast says nothing of the water below the transducer"


@dataclass(frozen=True)
class Parting:
    """A run of pings at which surface sound speed and cast part.

    Parameters
    ----------
    first, last : int
        Positions of the first and last ping.
    start, end : numpy.datetime64
        Their times; NaT where there are none.
    cast : str
        Id of the cast that serves the first of them.
    largest : float
        The difference of largest size, m/s: surface sound speed less that of the cast.
    """

    first: int
    last: int
    start: np.datetime64
    end: np.datetime64
    cast: str
    largest: float

    def __str__(self) -> str:
        when = "" if np.isnat(self.start) else f", {str(self.start)[:19]} to {str(self.end)[:19]}"
        return f"pings {self.first} to {self.last}{when}: {self.largest:+.1f} m/s against cast {self.cast}"


class SurfaceWatch:
    """Surface sound speed against the casts, block by block, in order.

    Parameters
    ----------
    profiles : sequence of Profile
        The casts, as `cast_used` counts them.
    largest : float
        Difference beyond which pings are flagged, m/s.

    Raises
    ------
    InputError
        If the difference is not positive.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.soundings.columns import PingBlock
    >>> watch = SurfaceWatch([Profile([0, 50], [1500, 1500], id="A")])
    >>> pings = {"surface_sound_speed": np.array([1500.5, 1503, 1504, 1501]), "transducer_depth": np.full(4, 3.0)}
    >>> watch.add(PingBlock(pings, {"two_way_travel_time": np.ones((4, 1))}), np.zeros((4, 1), int))
    >>> print(*watch.partings())
    pings 1 to 2: +4.0 m/s against cast A
    >>> watch.summary()["pings_beyond"], watch.summary()["mean_difference"]
    (2, 2.125)
    """

    def __init__(self, profiles: Sequence[Profile], *, largest: float = LARGEST_DIFFERENCE) -> None:
        if not (np.isfinite(largest) and largest > 0.0):
            raise InputError(
                f"largest difference of the surface sound speed is {largest:g} m/s: above 0 would be right"
            )
        self._profiles = [profile.to_surface() for profile in profiles]
        self.largest = largest
        self._done: list[Parting] = []
        self._open: Parting | None = None
        self._pings = self._beyond = 0
        self._sum = self._squares = 0.0
        self._extreme = np.nan

    def add(self, block: PingBlock, cast_used: NDArray[Any]) -> None:
        """Take in the next block, and which cast served each beam of it (-1 for none), shape (n, m)."""
        given, depth = block.of("surface_sound_speed"), block.of("transducer_depth")
        if given is None or depth is None or not self._profiles:
            return
        used = cast_used.max(axis=1)  # one cast serves a ping, but for beams that have none
        measured, at = (np.fmin.reduce(values, axis=1) for values in (given, depth))
        expected = np.full(measured.shape, np.nan)
        for index in np.unique(used[used >= 0]).tolist():
            here = (used == index) & np.isfinite(at)
            expected[here] = self._at(index, at[here])
        difference = measured - expected
        known = np.isfinite(difference)
        if not known.any():
            return
        self._pings += int(np.count_nonzero(known))
        self._sum += float(difference[known].sum())
        self._squares += float((difference[known] ** 2).sum())
        extreme = float(difference[known][np.argmax(np.abs(difference[known]))])
        if not abs(self._extreme) >= abs(extreme):
            self._extreme = extreme
        times = block.pings.get("time", np.full(measured.shape, np.datetime64("NaT", "ns")))
        self._runs(block.start, difference, times, used)

    def partings(self) -> tuple[Parting, ...]:
        """The runs of pings beyond the difference so far."""
        return (*self._done, *([] if self._open is None else [self._open]))

    def summary(self) -> dict[str, Any]:
        """Counts and differences, m/s, for a summary; empty where there was nothing to compare."""
        if not self._pings:
            return {}
        return {
            "pings_compared": self._pings,
            "pings_beyond": self._beyond,
            "largest_allowed": self.largest,
            "mean_difference": self._sum / self._pings,
            "rms_difference": float(np.sqrt(self._squares / self._pings)),
            "largest_difference": self._extreme,
            "partings": [
                {
                    "first_ping": run.first,
                    "last_ping": run.last,
                    "start": None if np.isnat(run.start) else str(run.start),
                    "end": None if np.isnat(run.end) else str(run.end),
                    "cast_id": run.cast,
                    "largest_difference": run.largest,
                }
                for run in self.partings()
            ],
            "note": AGREEMENT_NOTE,
        }

    def _at(self, index: int, depth: Floats) -> Floats:
        profile = self._profiles[index]
        inside = np.clip(depth, profile.depth[0], profile.depth[-1])
        return np.asarray(np.interp(inside, profile.depth, profile.speed))

    def _runs(self, start: int, difference: Floats, times: NDArray[Any], used: NDArray[Any]) -> None:
        """Go on with the run of the block before, and find those of this one; a ping without a value ends none."""
        known = np.flatnonzero(np.isfinite(difference))
        beyond = np.abs(difference[known]) > self.largest
        self._beyond += int(np.count_nonzero(beyond))
        edges = np.flatnonzero(np.diff(np.concatenate(([False], beyond, [False])).astype(np.int8)))
        for begin, end in zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True):
            places = known[begin:end]
            values = difference[places]
            found = Parting(
                start + int(places[0]),
                start + int(places[-1]),
                times[places[0]],
                times[places[-1]],
                self._profiles[int(used[places[0]])].id,
                float(values[np.argmax(np.abs(values))]),
            )
            if begin == 0 and self._open is not None:
                found = _joined(self._open, found)
            elif self._open is not None:
                self._done.append(self._open)
            self._open = found
        if self._open is not None and not beyond[-1]:
            self._done.append(self._open)
            self._open = None


def _joined(one: Parting, other: Parting) -> Parting:
    largest = max(one.largest, other.largest, key=abs)
    return Parting(one.first, other.last, one.start, other.end, one.cast, largest)


def mean_absorption(
    cast: Cast, frequency: ArrayLike, *, transducer_depth: float = 0.0, to_depth: float | None = None, ph: float = 8.0
) -> Floats:
    """Mean absorption of sound from the transducer to a depth, dB/km, for the settings of an echo sounder.

    Parameters
    ----------
    cast : Cast
        With depth (or pressure), temperature and salinity.
    frequency : array_like
        Of the sonar, Hz.
    transducer_depth : float
        m below the water surface.
    to_depth : float, optional
        Depth of the seabed, m; by default the deepest level with values.
    ph : float
        Acidity; 8 is common in the upper ocean (common practice).

    Returns
    -------
    numpy.ndarray
        In the shape of `frequency`: the absorption of the way straight down, over its length. That of an oblique beam
        is the same per kilometre of its path, but for refraction. By Francois and Garrison (1982).

    Raises
    ------
    InputError
        The cast has not two levels with temperature and salinity, or does not reach that deep, or the depths are in
        the wrong order.

    Examples
    --------
    Uniform water has all the way what its formula says of one place, but for the small effect of pressure:

    >>> from ocean_sound.casts import Cast
    >>> water = Cast(id="A", values={"depth": [0.0, 10.0], "temperature": [10.0, 10.0], "salinity": [35.0, 35.0]})
    >>> mean_absorption(water, [100e3]).round(1)
    array([33.6])
    """
    depth, temperature, salinity = _levels(cast)
    bottom = float(depth[-1]) if to_depth is None else to_depth
    if not 0.0 <= transducer_depth < bottom:
        raise InputError(f"absorption from {transducer_depth:g} to {bottom:g} m: a deeper second depth would be right")
    if bottom > depth[-1]:
        raise InputError(
            f"cast {cast.id!r}: has temperature and salinity down to {depth[-1]:g} m, not to {bottom:g}: complete it"
        )
    between = depth[(depth > transducer_depth) & (depth < bottom)]
    z = np.concatenate(([transducer_depth], between, [bottom]))
    water = {"temperature": np.interp(z, depth, temperature), "salinity": np.interp(z, depth, salinity)}
    hertz = np.asarray(frequency, dtype=np.float64)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", OutOfRangeWarning)  # the range of the formula is wider than that of sonars
        local = np.asarray(absorption(hertz[..., None], water["temperature"], water["salinity"], depth=z, ph=ph))
    found: Floats = 0.5 * (local[..., 1:] + local[..., :-1]) @ np.diff(z) / (bottom - transducer_depth)
    return found


def _levels(cast: Cast) -> tuple[Floats, Floats, Floats]:
    """Depth, temperature and salinity of the levels that have all of them, downward."""
    if cast.temperature is None or cast.salinity is None:
        raise InputError(
            f"cast {cast.id!r}: absorption needs temperature and salinity; it has {', '.join(cast.values)}"
        )
    good = cast.good("temperature") & cast.good("salinity")
    if cast.depth is not None:
        good &= cast.good("depth")
        depth = cast.depth
    else:
        good &= cast.good("pressure")
        latitude = 45.0 if np.isnan(cast.latitude) else cast.latitude
        depth = np.asarray(depth_from_pressure(np.where(good, cast.values["pressure"], 0.0), latitude=latitude))
    if np.count_nonzero(good) < 2:
        raise InputError(f"cast {cast.id!r}: absorption needs two levels with temperature and salinity")
    z, first = np.unique(depth[good], return_index=True)
    return z, cast.temperature[good][first], cast.salinity[good][first]
