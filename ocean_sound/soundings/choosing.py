"""Which casts serve a sounding, with what weight, and how far the water may have changed since them.

One rule with two scales. A cast is apart from a ping by r = hypot(time/scale of time, distance/scale of length). At
r = 1 the correlation of the water, taken as exp(-r), has fallen to 1/e, and the cast is no longer used; nearer casts
weigh (1 - r)/r, so that a ping at a cast is that cast's alone, casts come and go with no weight, and half-way between
two casts of a series each has a half.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ._arguments import given_back

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import ArrayLike, NDArray

    from ..profile import Profile

    Floats = NDArray[np.float64]
    Booleans = NDArray[np.bool_]

DEFAULT_MOST = 4
LAST_CHANGE = 2.0 - 2.0 * math.exp(-1.0)
"""Variance of the water's change, as a part of its own variance, where a single cast only just serves."""
_HOUR, _KILOMETRE = 3600.0, 1000.0
_CHUNK = 4096  # pings looked at together: successive ones have the same casts near them
_HERE = 1e-12  # of the scales: nearer than that a ping is at the cast
# The least radius of curvature of WGS84 (along the meridian at the equator), m: normals turn by no more than the
# distance over it, so their chord times it is never more than the distance.
_LEAST_RADIUS = 6_335_439.0


def as_hours(time: float) -> str:
    """A time, s, for a person.

    >>> as_hours(5400.0)
    '1.5 h'
    """
    return f"{time / _HOUR:.3g} h"


def as_kilometres(distance: float) -> str:
    """A distance, m, for a person."""
    return f"{distance / _KILOMETRE:.3g} km"


@dataclass(frozen=True)
class Scales:
    """How far a cast may stand for the water: decorrelation time and length.

    Parameters
    ----------
    time : float
        s; infinite if time is not to count.
    length : float
        m; infinite if distance is not to count.

    Raises
    ------
    InputError
        If one is not above 0.

    Examples
    --------
    >>> Scales(time=6 * 3600.0, length=20e3).apart(3 * 3600.0, 0.0)
    0.5
    """

    time: float
    length: float

    def __post_init__(self) -> None:
        for name, unit in (("time", "seconds"), ("length", "metres")):
            value = getattr(self, name)
            if not value > 0.0:
                raise InputError(f"scale of {name} is {value:g}: a number of {unit} above 0 would be right")

    def apart(self, time: ArrayLike, distance: ArrayLike) -> Any:
        """How far two are apart by a time, s, and a distance, m, in units of the scales."""
        return given_back(np.hypot(np.asarray(time, float) / self.time, np.asarray(distance, float) / self.length))

    def __str__(self) -> str:
        """Within what a cast stands for the water.

        >>> str(Scales(time=6 * 3600.0, length=float("inf")))
        '6 h and any distance'
        """
        time = "any time" if math.isinf(self.time) else as_hours(self.time)
        return f"{time} and {'any distance' if math.isinf(self.length) else as_kilometres(self.length)}"

    def correlation(self, time: ArrayLike, distance: ArrayLike) -> Any:
        """The correlation of the water at such a time and distance: exp(-apart)."""
        return given_back(np.exp(-self.apart(time, distance)))


@dataclass(frozen=True, eq=False)
class Choice:
    """The casts that serve each ping.

    Parameters
    ----------
    index : numpy.ndarray of int32, shape (pings, most)
        Into the list of casts, the heaviest first; -1 where there is no further one.
    weight : numpy.ndarray, shape (pings, most)
        Their weights, which sum to 1; all 0 where every cast is too far.
    change : numpy.ndarray, shape (pings,)
        Variance of the difference between the water and the blend of the casts, as a part of the water's own variance:
        1 - 2 sum w_k rho_k + sum w_k w_l rho_kl. 0 at a cast, 2 where a single cast has nothing to do with the water
        any more, NaN where no cast serves.
    nearest_time, nearest_distance : numpy.ndarray, shape (pings,)
        From the heaviest cast: s and m, 0 or more; NaN where unknown or where no cast serves.
    notes : tuple of str
        One line for each thing that was not known.
    """

    index: NDArray[np.int32]
    weight: Floats
    change: Floats
    nearest_time: Floats
    nearest_distance: Floats
    notes: tuple[str, ...] = ()


def choose_casts(
    profiles: Sequence[Profile],
    time: ArrayLike | None,
    latitude: ArrayLike | None,
    longitude: ArrayLike | None,
    *,
    scales: Scales,
    as_it_was: bool = False,
    most: int = DEFAULT_MOST,
) -> Choice:
    """Choose the casts for pings, and weigh them.

    Parameters
    ----------
    profiles : sequence of Profile
        The casts. Each needs a time if there are several, and a position if distance is to count.
    time : array_like of numpy.datetime64, shape (pings,), or None
        UTC. A ping without one is served only by a single cast.
    latitude, longitude : array_like, shape (pings,), or None
        On WGS84, degrees, any turn of longitude. For a ping without a position only time counts.
    scales : Scales
    as_it_was : bool
        Whether only casts are used that were there when the ping was: each new cast then makes a step.
    most : int
        The largest number of casts for a ping. With 1 it is the nearest alone, which makes a step between casts.

    Returns
    -------
    Choice

    Raises
    ------
    InputError
        If there is no cast; if there are several and one has no time, or neither scale is finite; if the arrays differ
        in length.

    Notes
    -----
    Where more than `most` casts are near, the weight of the first that is left out is taken from all others before they
    are made to sum to 1: where two casts change places at the end of the list neither weighs anything. So all weights
    are continuous in time and place, except where more than `most` casts are exactly as far as each other and none is
    nearer (no rule could be: each of them would have to weigh nothing).

    If a cast has no position, only time counts for all. A single cast without a time, and pings without one, are taken
    together whatever their age, and `change` is then that of water that has nothing to do with the cast.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> casts = [Profile([0, 9], [1500, 1500], time=f"2026-05-01T{hour}:00", latitude=60.0, longitude=5.0)
    ...          for hour in ("06", "12")]
    >>> pings = ["2026-05-01T06:00", "2026-05-01T09:00", "2026-05-02T09:00"]
    >>> choice = choose_casts(casts, pings, [60.0] * 3, [5.0] * 3, scales=Scales(8 * 3600.0, 20e3))
    >>> choice.weight[:, :2].round(3), choice.index[:, :2]
    (array([[1. , 0. ], [0.5, 0.5], [0. , 0. ]]), array([[ 0,  1], [ 0,  1], [-1, -1]], dtype=int32))
    """
    return Chooser(profiles, scales=scales, as_it_was=as_it_was, most=most).choose(time, latitude, longitude)


class Chooser:
    """`choose_casts` for many blocks of pings: what depends on the casts alone is worked out once.

    Never changed once made, so threads may share it. Parameters and errors are those of `choose_casts`; `notes` has one
    line for each thing not known of the casts.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> chooser = Chooser([Profile([0, 9], [1500, 1500])], scales=Scales(3600.0, 1e4))
    >>> chooser.choose(None, [60.0], [5.0]).change
    array([2.])
    """

    def __init__(
        self, profiles: Sequence[Profile], *, scales: Scales, as_it_was: bool = False, most: int = DEFAULT_MOST
    ) -> None:
        if not profiles:
            raise InputError("there is no cast: give at least one")
        if most < 1:
            raise InputError(f"most is {most}: 1 or more casts for a ping would be right")
        self.scales, self.as_it_was, self.most = scales, as_it_was, most
        self._single = len(profiles) == 1
        if not self._single and np.isinf(scales.time) and np.isinf(scales.length):
            raise InputError("neither scale is finite, which leaves nothing to choose by: give one at least")
        times = np.array([profile.time for profile in profiles], dtype="datetime64[ns]")
        self._need_times(profiles, times)
        self._epoch = times[0] if np.isnat(times).all() else np.min(times[~np.isnat(times)])
        self._time = _seconds(times, self._epoch)
        self._latitude = np.array([profile.latitude for profile in profiles])
        self._longitude = np.array([profile.longitude for profile in profiles])
        known = placed(self._latitude, self._longitude)
        self._placed = bool(known.all())
        notes = []
        if self._single and np.isnan(self._time[0]) and np.isfinite(scales.time):
            notes.append("the cast has no time: it is used whatever its age, which is not known")
        if not self._placed and np.isfinite(scales.length):
            which = profiles[int(np.argmin(known))].id
            notes.append(
                f"{np.count_nonzero(~known)} of {known.size} casts ({which or 'without a name'} first) have no "
                "position: only time counts"
            )
        self.notes = tuple(notes)
        self._normal = _normals(self._latitude, self._longitude)
        self._correlation = self._among_casts()

    def _need_times(self, profiles: Sequence[Profile], times: NDArray[np.datetime64]) -> None:
        missing = np.isnat(times)
        needed = self.as_it_was or (not self._single and np.isfinite(self.scales.time))
        if needed and missing.any():
            first = int(np.argmax(missing))
            why = "past casts only" if self.as_it_was else "choosing among several casts"
            raise InputError(
                f"cast {first + 1} of {len(profiles)} ({profiles[first].id or 'without a name'}) has no time, which "
                f"{why} needs: give each cast its time"
            )

    def _among_casts(self) -> Floats:
        """Correlations of the water between casts; one lacks a time only where it is alone or time does not count."""
        time, distance = np.nan_to_num(self._time[:, None] - self._time), np.zeros((self._time.size,) * 2)
        if self._placed:
            distance = distances(self._latitude[:, None], self._longitude[:, None], self._latitude, self._longitude)
        correlation: Floats = np.exp(-np.asarray(self.scales.apart(time, distance)))
        return correlation

    def choose(self, time: ArrayLike | None, latitude: ArrayLike | None, longitude: ArrayLike | None) -> Choice:
        """Choose the casts for pings; as `choose_casts`."""
        seconds, lat, lon = self._pings(time, latitude, longitude)
        size = seconds.size
        choice = Choice(
            np.full((size, self.most), -1, dtype=np.int32),
            np.zeros((size, self.most)),
            np.full(size, np.nan),
            np.full(size, np.nan),
            np.full(size, np.nan),
            (*self.notes, *self._ping_notes(seconds, lat)),
        )
        for start in range(0, size, _CHUNK):
            part = slice(start, start + _CHUNK)
            self._choose(seconds[part], lat[part], lon[part], choice, part)
        return choice

    def _pings(
        self, time: ArrayLike | None, latitude: ArrayLike | None, longitude: ArrayLike | None
    ) -> tuple[Floats, Floats, Floats]:
        given = [np.asarray(values) for values in (time, latitude, longitude) if values is not None]
        sizes = sorted({values.size for values in given if values.ndim == 1})
        if len(sizes) != 1 or any(values.ndim != 1 for values in given):
            shapes = ", ".join(str(values.shape) for values in given) or "none"
            raise InputError(f"time, latitude and longitude of the pings have the shapes {shapes}: one row each, alike")
        nothing = np.full(sizes[0], np.nan)
        seconds = nothing if time is None else _seconds(np.asarray(time, dtype="datetime64[ns]"), self._epoch)
        if latitude is None or longitude is None:
            return seconds, nothing, nothing
        lat, lon = np.asarray(latitude, dtype=np.float64), np.asarray(longitude, dtype=np.float64)
        known = placed(lat, lon)
        return seconds, np.where(known, lat, np.nan), np.where(known, lon, np.nan)

    def _ping_notes(self, seconds: Floats, latitude: Floats) -> list[str]:
        notes = []
        timeless, placeless = int(np.isnan(seconds).sum()), int(np.isnan(latitude).sum())
        if timeless and (np.isfinite(self.scales.time) or self.as_it_was):
            served = self._single and not self.as_it_was
            notes.append(
                f"{timeless} of {seconds.size} pings have no time: "
                + ("the cast is used for them whatever its age" if served else "no cast can be chosen for them")
            )
        if placeless and np.isfinite(self.scales.length) and self._placed:
            notes.append(f"{placeless} of {seconds.size} pings have no position: only time counts for them")
        return notes

    def _choose(self, seconds: Floats, latitude: Floats, longitude: Floats, choice: Choice, part: slice) -> None:
        """Fill in a part of the choice."""
        normals = _normals(latitude, longitude)
        near = self._candidates(seconds, normals)
        if not near.size:
            return
        ages = seconds[:, None] - self._time[near]
        apart, distance, ageless = self._apart(ages, latitude, longitude, normals, near)
        raw = (1.0 - np.minimum(apart, 1.0)) / np.maximum(apart, _HERE)
        order = np.argsort(-raw, axis=1, kind="stable")[:, : self.most + 1]
        weight = _weights(np.take_along_axis(raw, order, axis=1), self.most)
        order = order[:, : self.most]
        used = weight > 0.0
        index = np.where(used, near[order], -1)
        count = order.shape[1]
        choice.index[part, :count], choice.weight[part, :count] = index, weight
        # Unused places point at the last cast here, with a weight of nothing.
        among = self._correlation[index[:, :, None], index[:, None, :]]
        alike = np.where(
            np.take_along_axis(ageless, order, axis=1), 0.0, np.exp(-np.take_along_axis(apart, order, axis=1))
        )
        change = 1.0 - 2.0 * (weight * alike).sum(axis=1) + np.einsum("nk,nkl,nl->n", weight, among, weight)
        served = used[:, 0]
        choice.change[part] = np.where(served, np.maximum(change, 0.0), np.nan)
        first = order[:, :1]
        for column, values in ((choice.nearest_time, np.abs(ages)), (choice.nearest_distance, distance)):
            column[part] = np.where(served, np.take_along_axis(values, first, axis=1)[:, 0], np.nan)

    def _candidates(self, seconds: Floats, normals: Floats) -> NDArray[np.intp]:
        """The casts that may be near enough to any of these pings; surely all that are."""
        every = np.arange(self._time.size)
        if self._single:
            return every
        may = np.ones(every.size, dtype=np.bool_)
        known = seconds[np.isfinite(seconds)]
        if np.isfinite(self.scales.time):
            if not known.size:
                return every[:0]
            may &= (self._time > known.min() - self.scales.time) & (self._time < known.max() + self.scales.time)
        if self._placed and not np.isnan(normals).any():
            middle = normals.mean(axis=0)
            reach = np.sqrt(((normals - middle) ** 2).sum(axis=1).max())
            chord = np.sqrt(((self._normal - middle) ** 2).sum(axis=1)) - reach
            may &= chord * _LEAST_RADIUS < self.scales.length
        return every[may]

    def _apart(
        self, ages: Floats, latitude: Floats, longitude: Floats, normals: Floats, near: NDArray[np.intp]
    ) -> tuple[Floats, Floats, Booleans]:
        """How far each ping and cast are apart, infinite where that is too far; distances; where the age is unknown."""
        ageless = np.isnan(ages) & np.isfinite(self.scales.time)
        may = ~(np.abs(ages) >= self.scales.time)
        if not self._single:
            may &= ~ageless
        if self.as_it_was:
            may &= ages >= 0.0
        distance = np.full(ages.shape, np.nan)
        if self._placed:
            chord = np.sqrt(np.maximum(2.0 - 2.0 * np.einsum("nd,kd->nk", normals, self._normal[near]), 0.0))
            # The chord has lost digits where it is small, so a little is let through.
            may &= ~(chord * _LEAST_RADIUS > self.scales.length + 1.0)
            row, column = np.nonzero(may & np.isfinite(chord))
            cast = near[column]
            distance[row, column] = distances(
                latitude[row], longitude[row], self._latitude[cast], self._longitude[cast]
            )
        apart = self.scales.apart(np.nan_to_num(ages), np.nan_to_num(distance))
        return np.where(may, apart, np.inf), distance, ageless


def _weights(raw: Floats, most: int) -> Floats:
    """Weights of the heaviest casts (in falling order, with one more if there is one) that sum to 1 or are all 0."""
    kept = raw[:, :most]
    if raw.shape[1] > most:
        # Where even the heaviest is as light as the one left out there is no telling them apart.
        alike = raw[:, :1] <= raw[:, most:]
        kept = np.where(alike, kept, kept - raw[:, most:])
    whole = kept.sum(axis=1, keepdims=True)
    weights: Floats = kept / np.where(whole > 0.0, whole, 1.0)
    return weights


def _seconds(times: NDArray[np.datetime64], epoch: np.datetime64) -> Floats:
    seconds: Floats = np.where(np.isnat(times), np.nan, (times - epoch).astype(np.int64) / 1e9)
    return seconds


def placed(latitude: Floats, longitude: Floats) -> Booleans:
    """Where a position is known."""
    known: Booleans = (np.abs(latitude) <= 90.0) & np.isfinite(longitude)
    return known


def _normals(latitude: Floats, longitude: Floats) -> Floats:
    """Unit vectors along the ellipsoid's normal, shape (n, 3)."""
    lat, lon = np.radians(latitude), np.radians(longitude)
    return np.stack((np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)), axis=-1)


def distances(latitude: Floats, longitude: Floats, to_latitude: Floats, to_longitude: Floats) -> Floats:
    """Lengths of geodesics on WGS84, m, of what broadcasts."""
    from pyproj import Geod

    whole = np.broadcast_arrays(longitude, latitude, to_longitude, to_latitude)
    lon, lat, to_lon, to_lat = (np.ascontiguousarray(values, dtype=np.float64).ravel() for values in whole)
    return np.asarray(Geod(ellps="WGS84").inv(lon, lat, to_lon, to_lat)[2], dtype=np.float64).reshape(whole[0].shape)
