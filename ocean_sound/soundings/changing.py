"""How the water changes from cast to cast: what that does to an outer beam, over which scales, and in which shapes."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from ..errors import InputError
from .choosing import Scales, as_hours, as_kilometres, distances, placed
from .exchanging import DEFAULT_ANGLE, depth_errors

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from ..profile import Profile

    Floats = NDArray[np.float64]

GIVE_SCALES = "give decorrelation time and length"
"""The remedy in each message that says why the scales can't be estimated."""
_FEWEST = 5  # casts, ten pairs: fewer tell nothing of two scales
_GROUPS = 10  # of the jackknife
# The mean square root of |x| for x normal with a variance of 1: 2^(1/4) Gamma(3/4)/sqrt(pi).
_ROOT_MEAN = 2.0**0.25 * math.gamma(0.75) / math.sqrt(math.pi)
_WIDEST = 3.0  # of the largest separation seen: a scale beyond that can't be told from none
_TOGETHER = 0.9  # rank correlation of time and distance beyond which the two can't be told apart
_ALIKE = 1e-3  # square root of m: errors under 1e-6 m are those of arithmetic
_NODES = 201
_FINE = 4001
_SHARE = 0.95
_LEAST_PAIRS = 0.5  # decorrelated pairs below which a level says nothing


@dataclass(frozen=True, eq=False)
class Pairs:
    """Each two casts that both know their time: the earlier used for a beam in the water of the later.

    Parameters
    ----------
    first, second : numpy.ndarray of int, shape (pairs,)
        The earlier and the later cast.
    time : numpy.ndarray, shape (pairs,)
        Between them, s, 0 or more.
    distance : numpy.ndarray, shape (pairs,)
        Between them, m; 0 where no cast has a position.
    error : numpy.ndarray, shape (pairs, depths)
        Depth found with the earlier minus the depth in the water of the later, m; NaN where a beam turned or a cast
        does not reach.
    """

    first: NDArray[np.intp]
    second: NDArray[np.intp]
    time: Floats
    distance: Floats
    error: Floats


def pairs_of(profiles: Sequence[Profile], errors: Floats) -> Pairs:
    """All pairs of casts, by `errors` of `depth_errors`; of two at one time the first in the list counts as earlier.

    Raises
    ------
    InputError
        If a cast has no time, or some but not all have a position.
    """
    times = np.array([profile.time for profile in profiles], dtype="datetime64[ns]")
    latitude, longitude = (np.array([getattr(each, name) for each in profiles]) for name in ("latitude", "longitude"))
    known = placed(latitude, longitude)
    wrong = np.isnat(times) | (~known & known.any())
    if wrong.any():
        at = int(np.argmax(wrong))
        lacks = "time" if np.isnat(times[at]) else "position, though others have one"
        raise InputError(
            f"cast {at + 1} of {len(profiles)} ({profiles[at].id or 'without a name'}) has no {lacks}: give it, or "
            "leave the cast out"
        )
    order = np.argsort(times, kind="stable")
    one, other = np.triu_indices(len(profiles), k=1)
    first, second = order[one], order[other]
    elapsed = (times[second] - times[first]).astype(np.int64) / 1e9
    apart = np.zeros(first.size)
    if known.any():
        apart = distances(latitude[first], longitude[first], latitude[second], longitude[second])
    return Pairs(first, second, elapsed, apart, errors[first, second])


@dataclass(frozen=True, eq=False)
class EstimatedScales:
    """Decorrelation time and length as a series of casts shows them.

    Parameters
    ----------
    scales : Scales
    time_range, length_range : tuple of float
        95 % interval of each scale, s and m (a delete-a-group jackknife over casts in their order of time; held in 93
        to 98 % of series drawn with known scales); NaN for a scale that was given.
    spread : float
        Standard deviation of the depth at the outer beam from the water as a whole, m: the difference of two casts far
        apart has sqrt(2) of it.
    noise : float
        The same from what differs between casts at one time and place, m: their own uncertainty, and changes faster
        than the casts see.
    casts, pairs : int
        What it comes from.
    notes : tuple of str
        One line for each thing that makes it doubtful.
    """

    scales: Scales
    time_range: tuple[float, float]
    length_range: tuple[float, float]
    spread: float
    noise: float
    casts: int
    pairs: int
    notes: tuple[str, ...]


def estimate_scales(
    profiles: Sequence[Profile],
    *,
    time: float | None = None,
    length: float | None = None,
    angle: float = DEFAULT_ANGLE,
    depth: float | None = None,
    transducer_depth: float = 0.0,
    flat_array: bool = True,
) -> EstimatedScales:
    """Estimate decorrelation time and length from the pairs of casts.

    Parameters
    ----------
    profiles : sequence of Profile
        Casts with times; and with positions, unless `length` is given.
    time, length : float, optional
        A scale that is known, s or m, and is kept (infinite: not to count).
    angle, transducer_depth, flat_array
        Of the outer beam; as for `depth_errors`.
    depth : float, optional
        Depth of the seabed, m; where the shallowest cast ends if not given.

    Returns
    -------
    EstimatedScales

    Raises
    ------
    InputError
        With fewer than five casts whose beams reach the depth; if all casts are of one time or place and that scale is
        not given; as `depth_errors`.

    Notes
    -----
    The difference that two casts make to the depth of the outer beam is taken as normal with the variance
    2 (noise^2 + spread^2 (1 - exp(-r))), r as in `Scales.apart`. Its square root has a mean proportional to the fourth
    root of the variance and a few wild casts move it little (N. Cressie and D. M. Hawkins 1980, Mathematical Geology
    12:115; from memory); scales, spread and noise are those by which the mean fits best when all pairs have the same
    relative scatter. Where no loss of likeness is seen as far as the casts are apart, the scale is that distance or
    time, and a note says so.

    Examples
    --------
    >>> import numpy as np
    >>> from ocean_sound.profile import Profile
    >>> rng, hour, speed = np.random.default_rng(1), np.timedelta64(1, "h"), [0.0]
    >>> for _ in range(99):  # hourly casts in water that forgets in 5 hours
    ...     speed.append(speed[-1] * np.exp(-1 / 5) + rng.normal(0, np.sqrt(1 - np.exp(-2 / 5))))
    >>> casts = [Profile([0, 10, 11, 50], [1500 + s, 1500 + s, 1490, 1490], time=np.datetime64("2026-05-01") + i * hour)
    ...          for i, s in enumerate(speed)]
    >>> found = estimate_scales(casts, length=np.inf)
    >>> found.pairs, found.time_range[0] < 5 * 3600 < found.time_range[1]
    (4950, True)
    """
    casts = list(profiles)
    if len(casts) < _FEWEST:
        raise InputError(_too_few(len(casts)))
    below = least_reach(casts) if depth is None else float(depth)
    pairs = pairs_of(
        casts,
        depth_errors(casts, depths=[below], angle=angle, transducer_depth=transducer_depth, flat_array=flat_array),
    )
    good = np.isfinite(pairs.error[:, 0])
    usable = np.unique(np.append(pairs.first[good], pairs.second[good])).size
    if usable < _FEWEST:
        raise InputError(_too_few(usable, f", of those whose beam of {angle:g} degrees reaches {below:g} m,"))
    _need_spread(pairs.time, time, "time")
    _need_spread(pairs.distance, length, "length")
    fixed = (time, length)
    root = np.sqrt(np.abs(pairs.error[:, 0]))
    if not (root[good] > _ALIKE).any():
        raise InputError(f"the casts do not differ at all, which says nothing of the scales: {GIVE_SCALES}")
    apart = np.stack((pairs.time, pairs.distance))
    found = _fit(apart[:, good], root[good], fixed)
    notes = _doubts(apart[:, good], found, fixed)
    if usable < len(casts):
        notes.append(f"{len(casts) - usable} of {len(casts)} casts left out: no beam of {below:g} m depth in them")
    ranges = _ranges(pairs, good, apart, root, fixed, found)
    kept = list(found[:2])
    for which, given in enumerate(fixed):
        seen = apart[which, good & (apart[which] > 0.0)]
        if given is None and _drowned(apart[:, good], found):
            kept[which], ranges[which] = float(seen.min()), (0.0, math.inf)
        elif given is None and kept[which] >= seen.max():
            kept[which], ranges[which] = float(seen.max()), (min(ranges[which][0], float(seen.max())), math.inf)
    return EstimatedScales(
        Scales(*kept), ranges[0], ranges[1], found.spread, found.noise, usable, int(good.sum()), tuple(notes)
    )  # fmt: skip


def scales_of_pairs(pairs: Pairs, *, time: float | None = None, length: float | None = None) -> Scales:
    """The scales alone, from pairs at hand and their first depth; infinite where no loss of likeness is seen.

    Raises
    ------
    InputError
        If all are of one time or place and that scale is not given.
    """
    _need_spread(pairs.time, time, "time")
    _need_spread(pairs.distance, length, "length")
    good = np.isfinite(pairs.error[:, 0])
    root = np.sqrt(np.abs(pairs.error[good, 0]))
    if not (root > _ALIKE).any():
        return Scales(math.inf, math.inf)
    apart = np.stack((pairs.time, pairs.distance))[:, good]
    found = _fit(apart, root, (time, length))
    far = apart.max(axis=1)
    return Scales(*(math.inf if scale >= most else scale for scale, most in zip(found[:2], far, strict=True)))


class _Fitted(NamedTuple):
    time: float
    length: float
    spread: float
    noise: float


def _too_few(casts: int, which: str = "") -> str:
    return (
        f"{casts} casts{which} are too few to tell over which time and distance one stands for the water "
        f"(at least {_FEWEST} are needed): {GIVE_SCALES}"
    )


def _need_spread(apart: Floats, given: float | None, name: str) -> None:
    if given is None and not apart.max() > 0.0:
        where = "taken at one time" if name == "time" else "from one place"
        raise InputError(f"all casts are {where}, which says nothing of the scale of {name}: {GIVE_SCALES}")


def least_reach(profiles: Sequence[Profile]) -> float:
    """The depth that all casts reach, m."""
    return min(float(profile.depth[-1]) for profile in profiles)


def _fit(
    apart: Floats, root: Floats, fixed: tuple[float | None, float | None], start: _Fitted | None = None
) -> _Fitted:
    """Scales, spread and noise by which the square root of |error| fits best."""
    from scipy.optimize import minimize

    free = [which for which in range(2) if fixed[which] is None]
    seen = [row[row > 0.0] for row in apart]
    limits = [(math.log(seen[which].min() / _WIDEST), math.log(seen[which].max() * _WIDEST)) for which in free]

    def parts(parameters: Floats) -> tuple[list[float], Floats, Floats]:
        """Scales, r, and the variance of the error as a part of that of casts far apart."""
        scale = [math.inf if given is None else float(given) for given in fixed]
        for which, value in zip(free, parameters, strict=False):
            scale[which] = math.exp(value)
        noisy, r = parameters[-1], np.hypot(apart[0] / scale[0], apart[1] / scale[1])
        return scale, r, noisy - (1.0 - noisy) * np.expm1(-r)

    # Sums, not dot products: for a few thousand pairs threads cost more than they save.
    def misfit(parameters: Floats, weight: Floats) -> tuple[float, Floats]:
        """The likelihood of exponential scatter about the mean (only the mean has to be right), and its slopes."""
        scale, r, variance = parts(parameters)
        shape = np.sqrt(np.sqrt(variance))
        whole = float(np.sum(weight * root / shape))
        pull = 0.25 * weight * (1.0 - root / (shape * whole)) / variance
        faster = pull * (1.0 - parameters[-1]) * np.exp(-r) / np.where(r > 0.0, r, 1.0)
        slopes = [-np.sum(faster * (apart[which] / scale[which]) ** 2) for which in free]
        return math.log(whole) + float(np.sum(weight * np.log(shape))), np.array([*slopes, np.sum(pull * np.exp(-r))])

    if start is None:
        middle = [math.inf if not row.size else float(np.median(row)) for row in seen]
        scale = [value if given is None else given for value, given in zip(middle, fixed, strict=True)]
        starts = [(*scale, 0.05), (*(0.2 * value for value in scale), 0.3)]
    else:
        noise2 = start.noise**2 / (start.noise**2 + start.spread**2)
        scale, starts = [start.time, start.length], [(start.time, start.length, noise2)]
    for _ in range(1 if start else 2):
        weight = _by_nearness(np.hypot(apart[0] / scale[0], apart[1] / scale[1]))
        best = min(
            (
                minimize(
                    misfit,
                    [math.log(at[which]) for which in free] + [at[2]],
                    args=(weight,),
                    jac=True,
                    bounds=[*limits, (1e-6, 0.999)],
                    method="L-BFGS-B",
                )
                for at in starts
            ),
            key=lambda run: float(run.fun),
        )
        scale, noisy = parts(best.x)[0], float(best.x[-1])
        starts = [(scale[0], scale[1], noisy)]
    whole = (float(np.sum(weight * root / parts(best.x)[2] ** 0.25)) / _ROOT_MEAN) ** 2 / math.sqrt(2.0)
    return _Fitted(scale[0], scale[1], whole * math.sqrt(1.0 - noisy), whole * math.sqrt(noisy))


def _by_nearness(apart: Floats) -> Floats:
    """Weights of pairs: those far apart are the most, and one as good as the other, so the nearer weigh more.

    By one over the rank: of the ways tried on drawn series it came nearest to the scatter of the best estimate, that by
    the likelihood of the whole series.
    """
    casts = math.sqrt(2.0 * apart.size)
    rank = np.argsort(np.argsort(apart, kind="stable"), kind="stable") + 1.0
    weight = 1.0 / (rank + casts)
    return np.asarray(weight / weight.sum(), dtype=np.float64)


def _drowned(apart: Floats, found: _Fitted) -> bool:
    """Whether noise is more than what the difference of casts grows by as far as they are apart."""
    farthest = float(np.hypot(apart[0] / found.time, apart[1] / found.length).max())
    return found.noise**2 > found.spread**2 * -math.expm1(-farthest)


def _doubts(apart: Floats, found: _Fitted, fixed: tuple[float | None, float | None]) -> list[str]:
    notes = []
    if _drowned(apart, found):
        cause = "most of what casts differ by is there between the nearest of them already"
        return [f"{cause} (noise, or quick change): scales are not resolved, and taken as the shortest between casts"]
    for which, (name, said) in enumerate((("time", as_hours), ("length", as_kilometres))):
        if fixed[which] is not None:
            continue
        seen = apart[which][apart[which] > 0.0]
        if found[which] >= seen.max():
            notes.append(
                f"{name}: casts up to {said(float(seen.max()))} apart are still alike; the scale may be longer, and is "
                "taken as that"
            )
        elif found[which] <= seen.min():
            notes.append(
                f"{name}: casts {said(float(seen.min()))} apart, the nearest, are no longer alike; the scale is not "
                "resolved, and may be shorter"
            )
    if fixed == (None, None):
        from scipy.stats import spearmanr

        if spearmanr(*apart).statistic > _TOGETHER:
            notes.append("time and distance grow together from cast to cast: what is due to which can't be told")
    return notes


def _ranges(
    pairs: Pairs,
    good: NDArray[np.bool_],
    apart: Floats,
    root: Floats,
    fixed: tuple[float | None, float | None],
    found: _Fitted,
) -> list[tuple[float, float]]:
    """Intervals (95 %) of the two scales: each in turn without a tenth of the casts."""
    from scipy.stats import t

    rank = np.empty(max(int(pairs.second.max()), int(pairs.first.max())) + 1, dtype=np.intp)
    order = np.append(pairs.first[0], pairs.second[: rank.size - 1])  # pairs begin with the first cast and each other
    rank[order] = np.arange(rank.size)
    groups = min(_GROUPS, rank.size)
    group = rank * groups // rank.size
    logs = []
    for out in range(groups):
        kept = good & (group[pairs.first] != out) & (group[pairs.second] != out)
        if not kept.any() or any(
            given is None and not row[kept].any() for given, row in zip(fixed, apart, strict=True)
        ):
            return [(math.nan, math.nan)] * 2
        logs.append(np.log(_fit(apart[:, kept], root[kept], fixed, found)[:2]))
    ranges = []
    for which in range(2):
        if fixed[which] is not None:
            ranges.append((math.nan, math.nan))
            continue
        values = np.array([log[which] for log in logs], dtype=np.float64)
        half = float(t.ppf(0.975, groups - 1) * math.sqrt((groups - 1) ** 2 / groups * values.var(ddof=1)))
        ranges.append((found[which] * math.exp(-half), found[which] * math.exp(min(half, 500.0))))
    return ranges


@dataclass(frozen=True, eq=False)
class WaterChange(Mapping[str, tuple["Floats", "Floats"]]):
    """Shapes of the water's change: by name depths, m, and speeds, m/s, of one standard deviation.

    Parameters
    ----------
    shapes : mapping of str to a pair of numpy.ndarray
        Independent of each other. Above the first depth and below the last nothing is known; the nearest is the best
        guess.
    share : float
        Part of the variance that they carried before they were scaled up to all of it.
    casts : int
    notes : tuple of str
    """

    shapes: Mapping[str, tuple[Floats, Floats]]
    share: float
    casts: int
    notes: tuple[str, ...] = ()

    def __getitem__(self, name: str) -> tuple[Floats, Floats]:
        return self.shapes[name]

    def __iter__(self) -> Iterator[str]:
        return iter(self.shapes)

    def __len__(self) -> int:
        return len(self.shapes)


def water_change(profiles: Sequence[Profile], *, scales: Scales | None = None) -> WaterChange:
    """The shapes in which the speed of sound changes over depth from cast to cast.

    Parameters
    ----------
    profiles : sequence of Profile
        Casts; with `scales` each with a time (and all or none with a position).
    scales : Scales, optional
        By which casts near each other are known to be alike. Without them the casts are taken as independent, and if
        they are not the change comes out too small.

    Returns
    -------
    WaterChange
        The leading empirical orthogonal functions of the differences between casts, as many as carry 95 % of their
        variance over depth, named change_1, change_2, ...: each one standard deviation of the water, so that the
        difference of two casts far apart has twice the variance. They are scaled up together to the whole variance.
        Empty for a single cast, or where the casts tell nothing; a note says so.

    Raises
    ------
    InputError
        If there is no cast; with `scales` if a cast lacks a time, or some but not all a position.

    Notes
    -----
    The covariance over depth is the sum over pairs of the products of their differences, divided by the sum of
    2 (1 - correlation) over the same pairs; a pair counts as deep as both casts reach, and the shapes end where fewer
    than two casts, or only such as are nearly alike, are left. Levels lie closer where the casts differ in gradient.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> casts = [Profile([0, 10, 20, 50], [1500 + s, 1500 + s, 1490, 1490]) for s in (-1.0, 0.0, 1.0)]
    >>> change = water_change(casts)
    >>> list(change), change["change_1"][1][0].round(6)
    (['change_1'], np.float64(1.0))
    """
    casts = list(profiles)
    if not casts:
        raise InputError("there is no cast: give at least one")
    if len(casts) == 1:
        return WaterChange({}, 0.0, 1, ("a single cast does not tell how the water changes",))
    unlike = np.ones((len(casts),) * 2) - np.eye(len(casts))
    if scales is not None:
        pairs = pairs_of(casts, np.zeros((len(casts), len(casts), 1)))
        unlike[pairs.first, pairs.second] = 1.0 - np.asarray(scales.correlation(pairs.time, pairs.distance))
        unlike[pairs.second, pairs.first] = unlike[pairs.first, pairs.second]
    depth, speed, reached = _on_nodes(casts)
    count = np.einsum("iz,ij,jz->z", reached, unlike, reached)
    told = int(np.argmin(np.append(count >= _LEAST_PAIRS, False)))
    if told < 2:
        return WaterChange({}, 0.0, len(casts), ("the casts are too near each other to tell how the water changes",))
    depth, speed, reached, count = depth[:told], speed[:, :told], reached[:, :told], count[:told]
    product = (reached.T @ reached) * (speed.T @ speed) - (speed.T @ reached) * (reached.T @ speed)
    covariance = product / np.minimum.outer(count, count)
    thickness = np.sqrt(np.gradient(depth) / (depth[-1] - depth[0]))
    variance, vectors = np.linalg.eigh(thickness[:, None] * covariance * thickness)
    variance, vectors = np.maximum(variance[::-1], 0.0), vectors[:, ::-1]
    whole = float(variance.sum())
    if not whole > 1e-12:
        return WaterChange({}, 0.0, len(casts), ("the casts do not differ",))
    parts = np.cumsum(variance) / whole
    kept = int(np.searchsorted(parts, _SHARE)) + 1
    share = float(parts[kept - 1])
    shapes = {}
    for which in range(kept):
        shape = vectors[:, which] / thickness * math.sqrt(variance[which] / share)
        shape *= np.sign(shape[np.argmax(np.abs(shape))])
        for column in (shape, depth):
            column.setflags(write=False)
        shapes[f"change_{which + 1}"] = (depth, shape)
    notes = () if len(casts) > 2 else ("two casts only: their difference stands for all change of the water",)
    return WaterChange(shapes, share, len(casts), notes)


def _on_nodes(casts: Sequence[Profile]) -> tuple[Floats, Floats, Floats]:
    """Depths where to look, the casts' speeds there less their mean (0 below a cast), and 1 where a cast reaches."""
    reach = np.array([profile.depth[-1] for profile in casts])

    def at(depth: Floats) -> tuple[Floats, Floats]:
        speed = np.array([np.interp(depth, profile.depth, profile.speed) for profile in casts])
        reached = (depth <= reach[:, None]).astype(np.float64)
        mean = (speed * reached).sum(axis=0) / reached.sum(axis=0)
        return (speed - mean) * reached, reached

    fine = np.linspace(0.0, np.sort(reach)[-2], _FINE)
    speed, reached = at(fine)
    both = reached[:, 1:] * reached[:, :-1]
    bent = np.cumsum((np.abs(np.diff(speed, axis=1)) * both).sum(axis=0))
    measure = fine / fine[-1]
    if bent[-1] > 0.0:
        measure = measure + np.append(0.0, bent / bent[-1])
    depth = np.interp(np.linspace(0.0, measure[-1], _NODES), measure, fine)
    return depth, *at(depth)
