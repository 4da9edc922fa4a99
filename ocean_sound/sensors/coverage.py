"""What sensors hear over an area: by cell, by water, by noise, by how many at once; and how far on each bearing."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .hearing import DEFAULT_FLUCTUATION, Receiver, check_fluctuation, detection_probability, detection_range
from .losses import MOST
from .noise import NoiseSpectrum, ambient_noise, band_level
from .telemetry import no_collision
from .together import at_least

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray
    from numpy.typing import ArrayLike, NDArray

    from .area import Area
    from .losses import Losses

    Floats = NDArray[np.floating[Any]]

# Points at which the probability of a whole code is computed, in standard deviations; between them it is interpolated.
_CODE_REACH, _CODE_POINTS = 8.0, 641


@dataclass(frozen=True)
class Target:
    """What is to be heard.

    Parameters
    ----------
    source_level : float
        Of one call or pulse in the receiver's band, dB re 1 uPa at 1 m.
    calls : int
        How many calls (or codes) count as chances: heard once is heard.
    pulses : int
        In one code, each of which must be heard; 1 for a call.
    pulse_correlation : float
        Between the pulses of one code at one sensor, beyond what all sensors share.
    duration, interval : float, optional
        Of a code and from one to the next of the same transmitter, s: for collisions.
    transmitters : int
        In hearing at once, this one included.

    Raises
    ------
    InputError
        If a number makes no sense, or several transmitters come without duration and interval.
    """

    source_level: float
    calls: int = 1
    pulses: int = 1
    pulse_correlation: float = 0.0
    duration: float | None = None
    interval: float | None = None
    transmitters: int = 1

    def __post_init__(self) -> None:
        if not np.isfinite(self.source_level):
            raise InputError(f"target: source_level is {self.source_level:g} dB: a finite number would be right")
        for name in ("calls", "pulses", "transmitters"):
            if getattr(self, name) < 1:
                raise InputError(f"target: {name} is {getattr(self, name)}: 1 or more would be right")
        if not 0.0 <= self.pulse_correlation <= 1.0:
            raise InputError(f"target: pulse_correlation is {self.pulse_correlation:g}: 0 to 1 would be right")
        if self.transmitters > 1 and (self.duration is None or self.interval is None):
            raise InputError("target: several transmitters collide: give the duration of a code and their interval")

    @property
    def clear(self) -> float:
        """How likely a code collides with none of the others."""
        if self.transmitters == 1 or self.duration is None or self.interval is None:
            return 1.0
        return no_collision(self.transmitters, duration=self.duration, interval=self.interval)

    def chance(self, excess: Floats, fluctuation: float) -> Floats:
        """How likely one sensor hears one call or whole code, by signal excess (dB)."""
        if self.pulses == 1 or fluctuation == 0.0 or self.pulse_correlation == 1.0:
            return detection_probability(excess, fluctuation=fluctuation)
        at = np.linspace(-_CODE_REACH, _CODE_REACH + 4.0, _CODE_POINTS)
        pulses = np.broadcast_to(at, (self.pulses, at.size))
        whole = at_least(pulses, most=self.pulses, fluctuation=1.0, correlation=self.pulse_correlation)
        found: Floats = np.interp(excess / fluctuation, at, whole[self.pulses - 1])
        return found


@dataclass(frozen=True, eq=False)
class Noise:
    """Noise of the sea in one state or several, such as winds of different strength.

    Parameters
    ----------
    levels : array_like, shape (states,)
        Spectrum level in the receiver's band, dB re 1 uPa²/Hz.
    shares : array_like, shape (states,), optional
        Of the time; equal where not given.
    calm : float, optional
        That of a calm sea without ships, dB; the least of the levels where not given.

    Raises
    ------
    InputError
        If a level is missing or shares do not fit.
    """

    levels: Any
    shares: Any = None
    calm: Any = None

    def __post_init__(self) -> None:
        put = object.__setattr__
        level = np.atleast_1d(np.array(self.levels, dtype=np.float64))
        share = np.ones(level.size) if self.shares is None else np.array(self.shares, dtype=np.float64)
        if level.ndim != 1 or not level.size or not np.isfinite(level).all():
            raise InputError("noise: a level is missing or not finite: one in dB for each state would be right")
        if share.shape != level.shape or not (np.all(share >= 0.0) and np.isfinite(share).all() and share.sum() > 0.0):
            raise InputError(f"noise: {share.size} shares for {level.size} levels: one of 0 or more for each is right")
        put(self, "levels", level)
        put(self, "shares", share / share.sum())
        put(self, "calm", float(level.min() if self.calm is None else self.calm))

    @classmethod
    def of(
        cls,
        low: float,
        high: float,
        *,
        wind_speeds: ArrayLike = 5.0,
        shares: ArrayLike | None = None,
        shipping: float = 0.5,
        spectrum: NoiseSpectrum | None = None,
    ) -> Noise:
        """Noise in a band (Hz; one frequency where both edges are it), averaged over the band.

        Parameters
        ----------
        low, high : float
        wind_speeds : array_like, shape (states,)
            m/s.
        shares : array_like, shape (states,), optional
            Of the time.
        shipping : float
            As for `ambient_noise`.
        spectrum : NoiseSpectrum, optional
            A measured one in place of winds and shipping; it is then its own calm.

        Examples
        --------
        >>> noise = Noise.of(12e3, 12e3, wind_speeds=[2.0, 10.0], shares=[1.0, 3.0])
        >>> noise.levels.round(1), noise.shares
        (array([38.5, 51.6]), array([0.25, 0.75]))
        """

        def level(wind: float, ships: float) -> float:
            if low == high:
                one = ambient_noise(low, wind_speed=wind, shipping=ships) if spectrum is None else spectrum.at(low)
                return float(one)
            whole = band_level(low, high, wind_speed=wind, shipping=ships, spectrum=spectrum)
            return float(whole - 10.0 * np.log10(high - low))

        if spectrum is not None:
            return cls(np.array([level(0.0, 0.0)]))
        winds = np.atleast_1d(np.asarray(wind_speeds, dtype=np.float64))
        levels = np.array([level(float(wind), shipping) for wind in winds])
        return cls(levels, None if shares is None else np.asarray(shares, np.float64), level(0.0, 0.0))

    @property
    def middle(self) -> float:
        """The median level, dB: half of the time it is no louder."""
        order = np.argsort(self.levels)
        at = np.searchsorted(np.cumsum(self.shares[order]), 0.5 - 1e-12)
        return float(self.levels[order][min(int(at), order.size - 1)])


@dataclass(frozen=True)
class Hearing:
    """How signals are heard: target, receiver, noise, and how levels vary.

    Parameters
    ----------
    target : Target
    receiver : Receiver
    noise : Noise
    fluctuation : float
        Standard deviation of one signal's level, dB.
    correlation : float
        Between sensors, of that.

    Raises
    ------
    InputError
        If a number makes no sense.
    """

    target: Target
    receiver: Receiver
    noise: Noise
    fluctuation: float = DEFAULT_FLUCTUATION
    correlation: float = 0.0

    def __post_init__(self) -> None:
        check_fluctuation(self.fluctuation)
        if not 0.0 <= self.correlation <= 1.0:
            raise InputError(f"correlation is {self.correlation:g}: 0 to 1 would be right")

    def allowed(self, noise_level: float) -> float:
        """The loss at which half of all signals are heard at a spectrum level of noise, dB."""
        return self.receiver.allowed_loss(self.target.source_level, noise_level)

    def heard(self, loss: ArrayLike, most: int = 4) -> Floats:
        """Probability that at least 1, 2, ... sensors hear one (of the target's calls, if several).

        Parameters
        ----------
        loss : array_like, shape (sensors, ...)
            Transmission loss from each, dB; NaN and infinity count as deaf.
        most : int
            Up to how many at once.

        Returns
        -------
        numpy.ndarray, shape (most, ...)
            The mean over the states of the noise, in each of which all sensors are at once. Collisions strike at all
            sensors together. Calls are independent of each other within one state.
        """
        lost = np.asarray(loss, dtype=np.float64)
        lost = np.where(lost >= MOST, np.inf, lost)
        total = np.zeros((most, *lost.shape[1:]))
        for level, share in zip(self.noise.levels.tolist(), self.noise.shares.tolist(), strict=True):
            one = self.target.clear * at_least(
                self.allowed(level) - lost, most=most, fluctuation=self.fluctuation, correlation=self.correlation,
                chance=self.target.chance if self.target.pulses > 1 else None,
            )  # fmt: skip
            total += share * (one if self.target.calls == 1 else 1.0 - (1.0 - one) ** self.target.calls)
        return total

    def heard_alone(self, loss: ArrayLike) -> Floats:
        """Likewise for each sensor by itself: the shape of `loss`."""
        # what sensors share is, for one of them, what its own pulses share too
        shared = self.correlation + (1.0 - self.correlation) * self.target.pulse_correlation
        one = replace(self, target=replace(self.target, pulse_correlation=shared), correlation=0.0)
        found: Floats = one.heard(np.asarray(loss, dtype=np.float64)[None], most=1)[0]
        return found


def losses_at(losses: Losses, area: Area, *, sites: Sequence[int] | None = None) -> NDArray[np.float32]:
    """Loss from each site to each cell of an area, dB.

    Parameters
    ----------
    losses : Losses
    area : Area
    sites : sequence of int, optional
        Which; all where not given.

    Returns
    -------
    numpy.ndarray, shape (members, sites, cells), float32
        Infinite beyond the range that was computed.

    Notes
    -----
    Loss less spherical spreading is straight between bearings, ranges and depths; nearer than the first range it is
    that of the first.
    """
    from pyproj import Geod

    chosen = range(len(losses.sites)) if sites is None else sites
    layer, row, column = area.places
    # distance and bearing are those of the place, one for all depths
    place, inverse = np.unique(row * area.longitude.size + column, return_inverse=True)
    lat = area.latitude[place // area.longitude.size]
    lon = area.longitude[place % area.longitude.size]
    geod = Geod(ellps="WGS84")
    found = np.empty((len(losses.members), len(chosen), area.size), dtype=np.float32)
    for j, s in enumerate(chosen):
        site = losses.sites[s]
        azimuth, _, distance = geod.inv(np.full(lat.size, site.longitude), np.full(lat.size, site.latitude), lon, lat)
        corners = _corners(losses, np.asarray(azimuth), np.asarray(distance))
        for m in range(len(losses.members)):
            reduced = _reduced(losses, m, s, area.depths)
            found[m, j] = _spread(reduced, corners, layer, inverse.ravel(), area.depths - site.depth)
    return found


@dataclass(frozen=True, eq=False)
class _Corners:
    """Where places lie between the bearings and ranges of a table."""

    bearings: tuple[Any, Any]
    ranges: tuple[Any, Any]
    across: Floats  # weight of the second bearing
    along: Floats  # weight of the second range
    distance: Floats
    beyond: Any


def _corners(losses: Losses, azimuth: Floats, distance: Floats) -> _Corners:
    grid = losses.settings
    turn = (azimuth % 360.0) / 360.0 * grid.bearings
    left = np.floor(turn).astype(np.intp) % grid.bearings
    step = grid.max_range / grid.ranges
    position = np.clip(distance / step - 1.0, 0.0, grid.ranges - 1.0)
    near = np.minimum(position.astype(np.intp), grid.ranges - 2)
    return _Corners(
        (left, (left + 1) % grid.bearings), (near, near + 1), turn - np.floor(turn), position - near, distance,
        distance > grid.max_range * (1.0 + 1e-9),
    )  # fmt: skip


def _reduced(losses: Losses, member: int, site: int, depths: Floats) -> Floats:
    """Loss less spherical spreading at depths of an area: (bearings, ranges, layers)."""
    grid = losses.settings
    table = losses.of(member, site)
    if depths[0] < grid.depths[0] - 1e-6 or depths[-1] > grid.depths[-1] + 1e-6:
        raise InputError(
            f"losses were computed from {grid.depths[0]:g} to {grid.depths[-1]:g} m of depth, and the area asks for "
            f"{depths[0]:g} to {depths[-1]:g} m: compute them again"
        )
    slant = _slant(grid.distances[:, None], grid.depths[None, :] - losses.sites[site].depth)
    table = table - 20.0 * np.log10(slant)
    position = np.interp(depths, grid.depths, np.arange(grid.depths.size))
    upper = np.minimum(position.astype(np.intp), max(grid.depths.size - 2, 0))
    lower = np.minimum(upper + 1, grid.depths.size - 1)
    return _mean([(table[..., upper], 1.0 - (position - upper)), (table[..., lower], position - upper)])


def _spread(reduced: Floats, corners: _Corners, layer: Any, inverse: Any, height: Floats) -> Floats:
    """The loss at cells, from that at the corners around their places."""
    parts = []
    for bearing, across in zip(corners.bearings, (1.0 - corners.across, corners.across), strict=True):
        for near, along in zip(corners.ranges, (1.0 - corners.along, corners.along), strict=True):
            parts.append((reduced[bearing[inverse], near[inverse], layer], (across * along)[inverse]))
    slant = _slant(corners.distance[inverse], height[layer])
    loss = np.minimum(_mean(parts) + 20.0 * np.log10(slant), MOST)
    # below the seabed of all corners, though the cell itself is wet: no sound is known to come
    loss = np.where(np.isnan(loss), MOST, loss)
    return np.where(corners.beyond[inverse], np.inf, loss)


def _slant(distance: Floats, height: Floats) -> Floats:
    slant: Floats = np.maximum(np.hypot(distance, height), 1.0)
    return slant


def _mean(parts: list[tuple[Floats, Any]]) -> Floats:
    """Weighted mean of those that are numbers."""
    total = weights = 0.0
    for values, weight in parts:
        there = np.isfinite(values)
        total = total + np.where(there, values, 0.0) * weight
        weights = weights + there * weight
    # where only corners of no weight are numbers, nothing is
    found: Floats = np.divide(total, weights, out=np.full(np.shape(total), np.nan), where=np.asarray(weights) > 1e-12)
    return found


def joint(states: Sequence[tuple[Floats, float]], hearing: Hearing, *, most: int = 4) -> Floats:
    """Probability that at least 1, 2, ... sensors hear one in each cell, by member.

    Parameters
    ----------
    states : sequence of (loss, share)
        Loss, shape (members, sensors, cells), in each state of the moorings (upright, pushed down by a current), and
        its share of the time. All moorings are in one state at once.
    hearing : Hearing
    most : int

    Returns
    -------
    numpy.ndarray, shape (most, members, cells)
    """
    total = sum(share for _, share in states)
    shape = states[0][0].shape
    found = np.zeros((most, shape[0], shape[2]))
    for loss, share in states:
        for m in range(shape[0]):
            found[:, m] += share / total * hearing.heard(loss[m], most=most)
    return found


def alone(states: Sequence[tuple[Floats, float]], shares: Floats, hearing: Hearing) -> Floats:
    """Probability that each sensor alone hears one in each cell, mean over members: (sensors, cells)."""
    total = sum(share for _, share in states)
    _, sensors, cells = states[0][0].shape
    found = np.zeros((sensors, cells))
    for loss, share in states:
        for m, part in enumerate(shares / shares.sum()):
            found += share / total * part * hearing.heard_alone(loss[m])
    return np.clip(found, 0.0, 1.0)


def detection_ranges(
    losses: Losses,
    hearing: Hearing,
    *,
    depths: ArrayLike,
    shares: ArrayLike | None = None,
    sites: Sequence[int] | None = None,
    level: float = 0.5,
    percentiles: Sequence[float] = (10.0, 50.0, 90.0),
) -> xarray.Dataset:
    """How far each site hears on each bearing, with percentiles over waters and noise.

    Parameters
    ----------
    losses : Losses
    hearing : Hearing
    depths : array_like, shape (layers,)
        Of what is to be heard, m; the probability is the mean over them.
    shares : array_like, shape (layers,), optional
        Of the time at each.
    sites : sequence of int, optional
    level : float
        Probability that is to be reached.
    percentiles : sequence of float

    Returns
    -------
    xarray.Dataset
        `detection_range` (unbroken) and `farthest_detection` on (site, bearing, percentile), and whether the reach
        ends only with the computation (`cut`).
    """
    import xarray as xr

    from ..files import attributes

    chosen = list(range(len(losses.sites))) if sites is None else list(sites)
    z = np.atleast_1d(np.asarray(depths, dtype=np.float64))
    share = np.ones(z.size) if shares is None else np.asarray(shares, dtype=np.float64)
    r = losses.settings.distances
    members = np.array([member.share for member in losses.members])
    noise = hearing.noise
    weights = np.outer(members, noise.shares).ravel()
    shape = (len(chosen), losses.settings.bearings, len(percentiles))
    unbroken, farthest, cut = np.empty(shape), np.empty(shape), np.zeros(shape[:2], dtype=np.int8)
    states = [replace(hearing, noise=Noise([level])) for level in noise.levels.tolist()]
    for j, s in enumerate(chosen):
        slant = 20.0 * np.log10(_slant(r[:, None], z[None, :] - losses.sites[s].depth))
        near, far = [], []
        for m in range(len(losses.members)):
            loss = _reduced(losses, m, s, z) + slant
            here = np.isfinite(loss) * share
            here = here / np.maximum(here.sum(axis=-1, keepdims=True), 1e-300)
            for state in states:
                heard = np.sum(state.heard_alone(loss) * here, axis=-1)
                reach = [detection_range(r, along, level=level) for along in heard]
                near.append([one.unbroken for one in reach])
                far.append([one.farthest for one in reach])
                cut[j] |= np.array([one.cut for one in reach], dtype=np.int8)
        unbroken[j] = weighted_percentiles(np.array(near), weights, percentiles).T
        farthest[j] = weighted_percentiles(np.array(far), weights, percentiles).T
    dims = ("site", "bearing", "percentile")
    return xr.Dataset(
        {
            "detection_range": (dims, unbroken, {**attributes("detection_range"), "probability": level}),
            "farthest_detection": (dims, farthest, {**attributes("farthest_detection"), "probability": level}),
            "cut": (
                dims[:2],
                cut,
                {
                    "long_name": "whether hearing goes on where the computation ends",
                    "flag_values": np.array((0, 1), np.int8),
                    "flag_meanings": "no yes",
                },
            ),
        },
        {
            "site_id": ("site", [losses.sites[s].name for s in chosen], attributes("site_id")),
            "bearing": ("bearing", losses.settings.azimuths, attributes("bearing")),
            "percentile": (
                "percentile",
                np.asarray(percentiles, float),
                {"long_name": "percentile", "units": "percent"},
            ),
        },
    )


def weighted_percentiles(values: Floats, weights: Floats, percentiles: Sequence[float]) -> Floats:
    """Percentiles over the first axis of values that count differently.

    Parameters
    ----------
    values : numpy.ndarray, shape (n, ...)
    weights : numpy.ndarray, shape (n,)
        0 or more.
    percentiles : sequence of float

    Returns
    -------
    numpy.ndarray, shape (percentiles, ...)
        The least value up to which that part of the weight lies.

    Examples
    --------
    >>> weighted_percentiles(np.array([3.0, 1.0, 2.0]), np.array([1.0, 1.0, 2.0]), [25.0, 50.0, 100.0])
    array([1., 2., 3.])
    """
    order = np.argsort(values, axis=0, kind="stable")
    ranked = np.take_along_axis(values, order, axis=0)
    reached = np.cumsum(weights[order], axis=0) / weights.sum()
    picks = []
    for p in percentiles:
        at = np.argmax(reached >= p / 100.0 - 1e-12, axis=0)
        picks.append(np.take_along_axis(ranked, np.expand_dims(at, 0), axis=0)[0])
    return np.array(picks)
