"""What a person wants to know of millions of soundings, counted block by block; counts of parts add up."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from .columns import FAIL, MISSING, NOT_EVALUATED, PASS, REASONS, SUSPECT
from .positions import midpoint_error, offsets

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from .columns import PingBlock

    Counts = NDArray[np.int64]

_FINEST, _BINS, _PER_E = 1e-4, 960, 50  # m; bins of 2 % each, up to 20 km
_FASTEST = 30.0  # m/s: what goes faster from ping to ping is a jump of the positioning
_LONGEST_GAP = 60.0  # s between pings of one line
_SPREAD = ("tvu_95", "thu_95", "total_tvu_95", "total_thu_95")
_HELD = ("orders_held_by_sound_speed", "orders_held")
_FLAGS = {PASS: "pass", NOT_EVALUATED: "not_evaluated", SUSPECT: "suspect", FAIL: "fail", MISSING: "missing"}


@dataclass(frozen=True, eq=False)
class Tally:
    """Counts over soundings. Those of two parts add up (``+``).

    Parameters
    ----------
    soundings : int
    reasons : numpy.ndarray of int
        How many have each of `columns.REASONS`.
    shallowest, deepest : float
        Depth below the water surface, m; NaN for none.
    spread : mapping of str to numpy.ndarray of int
        For each uncertainty (95 %) counts in bins of 2 %.
    largest : mapping of str to float
        The largest of each uncertainty, m.
    held : mapping of str to numpy.ndarray of int
        Counts of each combination of orders held, by the bits of the combination.
    casts : numpy.ndarray of int
        How many soundings each cast serves with the largest weight.
    judged : int
        Soundings with a depth and an uncertainty.
    midpoint : float
        Largest shift along the track, m, by which one position may be wrong that stands for transmission and
        reception; NaN where both are given or the speed of the vessel is not known.
    """

    soundings: int = 0
    reasons: Counts = field(default_factory=lambda: np.zeros(len(REASONS), np.int64))
    shallowest: float = np.nan
    deepest: float = np.nan
    spread: Mapping[str, Counts] = field(default_factory=dict)
    largest: Mapping[str, float] = field(default_factory=dict)
    held: Mapping[str, Counts] = field(default_factory=dict)
    casts: Counts = field(default_factory=lambda: np.zeros(0, np.int64))
    judged: int = 0
    midpoint: float = np.nan

    def __add__(self, other: Tally) -> Tally:
        keys = {**self.largest, **other.largest}
        return Tally(
            soundings=self.soundings + other.soundings,
            reasons=self.reasons + other.reasons,
            shallowest=float(np.fmin(self.shallowest, other.shallowest)),
            deepest=_larger(self.deepest, other.deepest),
            spread=_each_together(self.spread, other.spread),
            largest={key: _larger(self.largest.get(key, np.nan), other.largest.get(key, np.nan)) for key in keys},
            held=_each_together(self.held, other.held),
            casts=_together(self.casts, other.casts),
            judged=self.judged + other.judged,
            midpoint=_larger(self.midpoint, other.midpoint),
        )

    def flags(self) -> dict[str, int]:
        """How many soundings have each QARTOD flag, by its meaning."""
        found = dict.fromkeys(_FLAGS.values(), 0)
        for reason, count in zip(REASONS, self.reasons.tolist(), strict=True):
            found[_FLAGS[reason.flag]] += count
        return found

    def reached_by(self, share: float, name: str) -> float:
        """The uncertainty that a share of the soundings stays within, m, up to 2 % too large; NaN for none."""
        counts = self.spread.get(name)
        if counts is None or not counts.any():
            return np.nan
        at = int(np.searchsorted(np.cumsum(counts), share * counts.sum()))
        return float(min(_FINEST * np.exp((at + 1) / _PER_E), self.largest[name]))

    def shares_held(self, name: str, orders: Sequence[str]) -> dict[str, float]:
        """The share of the judged soundings that hold each order; NaN where none is judged."""
        counts = self.held.get(name)
        if counts is None:
            return {}
        combination = np.arange(counts.size)
        return {
            order: float(counts[(combination >> bit & 1) == 1].sum() / self.judged) if self.judged else np.nan
            for bit, order in enumerate(orders)
        }

    def to_dict(self, *, orders: Sequence[str] = (), casts: Sequence[str] = ()) -> dict[str, Any]:
        """All of it by name, for a summary; `orders` and `casts` by their places in the outputs."""
        counts = np.pad(self.casts, (0, max(len(casts) - self.casts.size, 0)))
        found: dict[str, Any] = {
            "soundings": self.soundings,
            "flags": self.flags(),
            "reasons": {
                reason.name: count for reason, count in zip(REASONS, self.reasons.tolist(), strict=True) if count
            },
            "shallowest_depth": self.shallowest,
            "deepest_depth": self.deepest,
            "soundings_by_cast": [
                {"cast_id": cast, "soundings": count} for cast, count in zip(casts, counts.tolist(), strict=False)
            ],
            "midpoint_error": self.midpoint,
        }
        for name in self.spread:
            found[name] = {
                "median": self.reached_by(0.5, name),
                "95_percent": self.reached_by(0.95, name),
                "largest": self.largest[name],
            }
        for name in self.held:
            found[name] = self.shares_held(name, orders)
        return found


def tally(block: PingBlock, found: Mapping[str, NDArray[Any]]) -> Tally:
    """The counts of one block: what was read, and what was found of it."""
    n, m = block.shape
    depth = found["depth"]
    known = np.isfinite(depth)
    spread, largest, held = {}, {}, {}
    for name in (name for name in _SPREAD if name in found):
        values = found[name][np.isfinite(found[name])].astype(np.float64)
        places = np.log(np.maximum(values, _FINEST) / _FINEST) * _PER_E
        spread[name] = np.bincount(np.minimum(places.astype(np.int64), _BINS - 1), minlength=_BINS)
        largest[name] = float(np.fmax.reduce(values, initial=np.nan))
    judged = known & np.isfinite(found["tvu_95"]) if "tvu_95" in found else known
    for name in (name for name in _HELD if name in found):
        held[name] = np.bincount(found[name][judged].astype(np.int64).ravel())
    used = found["cast_used"].astype(np.int64).ravel() if "cast_used" in found else np.zeros(0, np.int64)
    return Tally(
        soundings=n * m,
        reasons=np.bincount(found["sounding_reason"].astype(np.int64).ravel(), minlength=len(REASONS)),
        shallowest=float(np.fmin.reduce(depth, axis=None, initial=np.nan)),
        deepest=float(np.fmax.reduce(depth, axis=None, initial=np.nan)),
        spread=spread,
        largest=largest,
        held=held,
        casts=np.bincount(used[used >= 0]),
        judged=int(np.count_nonzero(judged)),
        midpoint=_midpoint(block),
    )


def _larger(one: float, other: float) -> float:
    return float(np.fmax(one, other))


def _each_together(one: Mapping[str, Counts], other: Mapping[str, Counts]) -> dict[str, Counts]:
    none = np.zeros(0, np.int64)
    return {key: _together(one.get(key, none), other.get(key, none)) for key in {**one, **other}}


def _together(one: Counts, other: Counts) -> Counts:
    long, short = (one, other) if one.size >= other.size else (other, one)
    summed: Counts = long + np.pad(short, (0, long.size - short.size))
    return summed


def _midpoint(block: PingBlock) -> float:
    """The largest error of a position midway, m."""
    time = block.of("two_way_travel_time")
    if time is None or block.of("reception_latitude") is not None:
        return np.nan
    longest = np.fmax.reduce(time, axis=1)
    speed = _speed(block)
    return float(np.fmax.reduce(midpoint_error(longest, speed), initial=np.nan))


def _speed(block: PingBlock) -> NDArray[np.float64]:
    """Of the vessel at each ping, m/s; NaN where it is not known."""
    if "speed_over_ground" in block.pings:
        return block.pings["speed_over_ground"]
    n = block.shape[0]
    if n < 2 or not {"time", "latitude", "longitude"} <= set(block.pings):
        return np.full(n, np.nan)
    latitude, longitude = block.pings["latitude"], block.pings["longitude"]
    step = np.diff(block.pings["time"]) / np.timedelta64(1, "s")
    good = (step > 0.0) & (step <= _LONGEST_GAP)
    moved = np.hypot(*offsets(latitude[:-1], longitude[:-1], latitude[1:], longitude[1:], 0.0))
    speed = np.where(good, moved / np.where(good, step, 1.0), np.nan)
    speed[~(speed <= _FASTEST)] = np.nan
    if not np.isfinite(speed).any():
        return np.full(n, np.nan)
    # rows of one ping have no step between them: they take that of the ping's last row before, or the first one known
    place = np.where(np.isfinite(speed), np.arange(n - 1), -1)
    place = np.maximum.accumulate(place)
    place[place < 0] = int(np.argmax(np.isfinite(speed)))
    return np.append(speed[place], speed[place[-1]])
