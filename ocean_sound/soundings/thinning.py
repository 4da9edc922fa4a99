"""Fewer levels, such that no beam moves by more than a given distance anywhere in the water column."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from . import _kernels_thin
from .beams import below_transducer
from .fitting import dispensable, fitted, rounded_in_turn
from .shift import Shift, check_angle, shift_between, shifts_at

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from ..profile import Profile
    from ..rays.medium import Medium

    Floats = NDArray[np.float64]
    Levels = NDArray[np.int64]
    Printed = Callable[[Floats, Floats], tuple[Floats, Floats]]

DEFAULT_TOLERANCE = 0.005  # m
DEFAULT_ANGLE = 65.0  # degrees from the vertical
ADDED = -1  # the index of a level that the profile does not have

_BINS = 41  # of the error of the integral, for each level
_MOST_CANDIDATES = 1600  # more levels than that are not all weighed as ones to keep
_TRIES = 9  # of limits of the integral
_MOST_PRUNED = 120  # levels; of more, leaving out one is not tried
_TRIED_TO_LEAVE_OUT = 4
_FITTING_GAINS = 20.0  # so much wider a limit is tried first where speeds are fitted
_MOST_FITTED = 250  # levels; of more, speeds are kept as measured
_GAIN = 0.9  # of the shift, that a much narrower limit must bring for narrower ones to be worth a try
_HALVINGS = 6  # of the factor of 8 within which lies the limit for a number of levels
_CLOSE = 1.03  # two limits nearer to each other than by this factor give the same levels, or nearly
_COARSE_ANGLES = np.array([0.25, 0.5, 0.7, 0.82, 0.9, 0.96, 1.0])  # of the largest, for a first look
_SHALLOWEST = 0.05  # cosine from the vertical: beams that are about to turn weigh no more than this one
_ALLOWANCE = 0.002  # of the tolerance: what the bound of the shift may add
_LEAST, _MOST = 1e-6, 1e6  # m: tolerances that make sense at all


@dataclass(frozen=True, eq=False)
class Thinned:
    """A profile with fewer levels, and what that does to a beam.

    Parameters
    ----------
    profile : Profile
        The levels kept.
    levels : numpy.ndarray of int, shape (levels kept,)
        Index of each among the levels of the profile that was thinned; -1 for one that was added, at the surface or at
        the transducer.
    guarantee : Shift
        The farthest that a beam moves: a bound, from exact tracing of what is kept.
    tolerance : float
        The distance that was allowed, m.
    """

    profile: Profile
    levels: Levels
    guarantee: Shift
    tolerance: float

    @property
    def holds(self) -> bool:
        """Whether no beam moves by more than the tolerance; only a limit on the number of levels can prevent it."""
        return self.guarantee.distance <= self.tolerance


@dataclass(frozen=True, eq=False)
class _Candidates:
    """The levels that may be kept, and the running integrals of the true profile between them."""

    depth: Floats
    speed: Floats
    running: tuple[Floats, Floats, Floats]


def thin(
    profile: Profile,
    *,
    max_levels: int | None = None,
    tolerance: float = DEFAULT_TOLERANCE,
    max_angle: float = DEFAULT_ANGLE,
    transducer_depth: float = 0.0,
    measured: bool = False,
) -> Thinned:
    """Keep few levels of a profile, such that no beam moves by more than a distance anywhere in the water column.

    Parameters
    ----------
    profile : Profile
        The water; never changed. One that starts below the surface is first extended to it at its first speed.
    max_levels : int, optional
        Keep at most so many levels. If these can't hold the tolerance, they are chosen to move beams as little as they
        can, `holds` is false and the guarantee says how far beams move.
    tolerance : float
        The distance, m, that a beam may move at equal angle at the transducer and equal travel time.
    max_angle : float
        The largest angle of a beam from the vertical at the transducer, degrees, above 0 and at most 85.
    transducer_depth : float
        Depth of the transducer below the water surface, m. It becomes a level, so that the speed there stays exact; of
        the levels above it only the first is kept.
    measured : bool
        Whether the levels kept must keep their measured speeds. Otherwise these are fitted, but for the one at the
        transducer, so that errors cancel and fewer levels do: by some hundredths of a metre per second as a rule.

    Returns
    -------
    Thinned
        The profile of the levels kept, which ones these are, and the guarantee.

    Raises
    ------
    InputError
        If an argument is out of range.

    Notes
    -----
    Levels keep their depths. They are the fewest that keep a running integral of the error of speed within a limit
    (`_kernels_thin`), and the limit is the widest for which exact tracing (`largest_shift`) finds every beam within the
    tolerance. Speeds are fitted to the same integral (`fitting`), and then one level after the other is left out while
    the tolerance lasts. The guarantee is traced at the end, for what is kept. Not proven is that no other choice of
    levels is smaller. Of a profile of more than 1600 levels those are weighed that stand out most, and others at even
    steps.

    Examples
    --------
    >>> import numpy as np
    >>> from ocean_sound.profile import Profile
    >>> depth = np.arange(0.0, 501.0)
    >>> thinned = thin(Profile(depth, 1480.0 + 25.0 / (1.0 + np.exp((depth - 60.0) / 10.0))))
    >>> thinned.holds, len(thinned.profile) < 30
    (True, True)
    """
    check_thinning(max_levels=max_levels, tolerance=tolerance, max_angle=max_angle)
    water = with_transducer(profile.to_surface(), transducer_depth)
    depth, speed, guarantee = fewest_levels(
        water,
        max_levels=max_levels,
        tolerance=tolerance,
        max_angle=max_angle,
        transducer_depth=transducer_depth,
        fit=not measured,
    )
    levels = np.searchsorted(profile.depth, depth)
    levels = np.where(profile.depth[np.minimum(levels, len(profile) - 1)] == depth, levels, ADDED)
    note = f"thinned from {len(profile)} to {depth.size} levels: {guarantee}"
    return Thinned(rebuilt(water, depth, speed, note), levels, guarantee, float(tolerance))


def check_thinning(*, max_levels: int | None, tolerance: float, max_angle: float) -> None:
    """Refuse what no thinning can keep to.

    Raises
    ------
    InputError
        For a tolerance that is not positive, fewer than two levels, or an impossible angle.

    """
    check_angle(max_angle)
    if not _LEAST <= tolerance <= _MOST:
        raise InputError(f"tolerance is {tolerance:g} m: from {_LEAST:g} to {_MOST:g} m would be right")
    if max_levels is not None and max_levels < 2:
        raise InputError(f"max_levels is {max_levels}: a profile needs at least 2")


def fewest_levels(
    water: Profile,
    *,
    tolerance: float,
    max_angle: float,
    transducer_depth: float,
    max_levels: int | None = None,
    fit: bool = True,
    printed: Printed | None = None,
) -> tuple[Floats, Floats, Shift]:
    """Depth and speed of the levels to keep, and the guarantee for them.

    Parameters
    ----------
    water : Profile
        From the surface on, with a level at the transducer.
    tolerance, max_angle, transducer_depth, max_levels
        As for `thin`.
    printed : callable, optional
        Depths and speeds as they will be printed; the guarantee is for these. Without it levels are kept as they are.

    Returns
    -------
    tuple
        Depths, speeds and the guarantee; where nothing holds the tolerance, the levels that come nearest to it.

    """
    # Rounding may spoil what fitting has gained, and fitting may gain nothing: both ways are tried.
    found = [
        _Search(
            water,
            tolerance=tolerance,
            max_angle=max_angle,
            transducer_depth=transducer_depth,
            fit=way,
            printed=printed,
        ).best(max_levels)
        for way in ((True, False) if fit else (False,))
    ]
    return min(found, key=lambda way: (0, way[0].size) if way[2].distance <= tolerance else (1, way[2].distance))


def with_transducer(water: Profile, transducer_depth: float) -> Profile:
    """The profile with a level at the transducer's depth, where it has none."""
    if transducer_depth in water.depth or not water.depth[0] < transducer_depth < water.depth[-1]:
        return water
    depth = np.insert(water.depth, np.searchsorted(water.depth, transducer_depth), transducer_depth)
    return rebuilt(water, depth, np.interp(depth, water.depth, water.speed))


def rebuilt(water: Profile, depth: Floats, speed: Floats, *notes: str) -> Profile:
    """The profile of the same cast with other levels; what else is known of a level is interpolated."""

    def at_levels(column: Floats) -> Floats:
        return np.interp(depth, water.depth, column)

    return replace(
        water,
        depth=depth,
        speed=speed,
        uncertainty=None,  # it follows from the shapes and the noise
        shapes={name: at_levels(shape) for name, shape in water.shapes.items()},
        noise=None if water.noise is None else at_levels(water.noise),
        notes=(*water.notes, *notes),
    )


class _Search:
    """The search for the widest limit of the integral with which every beam stays within the tolerance."""

    def __init__(
        self,
        water: Profile,
        *,
        tolerance: float,
        max_angle: float,
        transducer_depth: float,
        fit: bool,
        printed: Printed | None,
    ) -> None:
        self.water, self.tolerance, self.max_angle, self.transducer_depth = (
            water, tolerance, max_angle, transducer_depth,
        )  # fmt: skip
        self.seen = below_transducer(water, transducer_depth)
        self.fit, self.printed = fit, printed
        self.candidates = _candidates(water, transducer_depth, max_angle, printed, fit=fit)
        self.first = (water.depth[:1], water.speed[:1])

    def best(self, max_levels: int | None) -> tuple[Floats, Floats, Shift]:
        """The levels and their guarantee."""
        kept, limit, holds = self._within_tolerance()
        depth, speed, shift = self._verified(self._pruned(kept) if holds else kept)
        # The guarantee is computed at more angles than the search looks at: rarely must the limit shrink for it.
        for _ in range(_TRIES if holds else 0):
            if shift.distance <= self.tolerance:
                break
            limit *= 0.995 * min(self.tolerance / shift.distance, 1.0)
            again = self._kept(limit)
            if again is None:
                break
            found = self._verified(again)
            if found[2].distance < shift.distance:
                depth, speed, shift = found
        if shift.distance > self.tolerance and self.printed is None:
            # Nothing less than the whole will do; that does.
            depth, speed, shift = self._whole()
        if max_levels is not None and depth.size > max_levels:
            depth, speed, shift = self._verified(self._at_most(max_levels, limit))
        return depth, speed, shift

    def _within_tolerance(self) -> tuple[Levels, float, bool]:
        """The fewest levels with which the beams of a few angles stay within the tolerance, their limit, and true.

        Where none do (too few digits are printed), those whose beams move least, and false.
        """
        good, bad, limit = 0.0, np.inf, (_FITTING_GAINS if self.fit else 1.0) * self.tolerance
        found: tuple[Levels, float] | None = None
        nearest: tuple[float, Levels, float] | None = None
        for _ in range(_TRIES):
            kept = self._kept(limit)
            if kept is None:
                # Too few digits for this limit: it can only be wider.
                if nearest is not None:
                    break
                limit *= 2.0
                continue
            moved = self._coarse(kept)
            stuck = nearest is not None and limit < 0.7 * nearest[2] and moved > _GAIN * nearest[0]
            if nearest is None or moved < nearest[0]:
                nearest = (moved, kept, limit)
            if moved <= self.tolerance:
                good = max(good, limit)
                if found is None or kept.size <= found[0].size:
                    found = (kept, limit)
            else:
                bad = min(bad, limit)
            if bad < _CLOSE * good or (stuck and found is None) or (found is not None and found[0].size == 2):
                break
            aim = limit * 0.98 * self.tolerance / max(moved, 1e-12)
            between = np.sqrt(good * bad) if good > 0.0 and np.isfinite(bad) else aim
            limit = aim if good < aim < bad else between
        if found is not None:
            return *found, True
        while nearest is None:
            limit *= 2.0
            kept = self._kept(limit)
            nearest = None if kept is None else (0.0, kept, limit)
        return nearest[1], nearest[2], False

    def _pruned(self, kept: Levels) -> Levels:
        """Leave out one level after the other as long as fitting the speeds of the rest makes up for it."""
        if not self.fit or kept.size > _MOST_PRUNED:
            return kept
        at = self.candidates
        while kept.size > 2:
            for level in dispensable(at.depth, at.speed, at.running, kept)[:_TRIED_TO_LEAVE_OUT]:
                fewer = np.delete(kept, level)
                if self._coarse(fewer) <= self.tolerance:
                    kept = fewer
                    break
            else:
                break
        return kept

    def _at_most(self, max_levels: int, limit: float) -> Levels:
        """The levels of the narrowest limit that needs no more than so many."""
        most = max_levels - (self.first[0][0] < self.candidates.depth[0])
        if most < 2:
            raise InputError(
                f"max_levels is {max_levels}: surface, transducer and deepest level are kept, so at least 3 are needed"
            )
        narrow, wide = limit, limit
        found = None
        while found is None:
            narrow, wide = wide, 8.0 * wide
            kept = self._kept(wide)
            found = kept if kept is not None and kept.size <= most else None
        for _ in range(_HALVINGS):
            middle = np.sqrt(narrow * wide)
            kept = self._kept(middle)
            if kept is not None and kept.size <= most:
                found, wide = kept, middle
            else:
                narrow = middle
        return found

    def _kept(self, limit: float) -> Levels | None:
        """The fewest candidates that keep the integral within a limit; None if none do."""
        depth = self.candidates.depth
        shape = (depth.size, _BINS)
        count, error = np.empty(shape, dtype=np.int64), np.empty(shape)
        from_level, from_bin = np.empty(shape, dtype=np.int64), np.empty(shape, dtype=np.int64)
        at = _kernels_thin.fewest(
            depth, self.candidates.speed, self.candidates.running, limit, count, error, from_level, from_bin
        )
        if at < 0:
            return None
        level, path = depth.size - 1, [depth.size - 1]
        while level > 0:
            level, at = from_level[level, at], from_bin[level, at]
            path.append(level)
        return np.array(path[::-1], dtype=np.int64)

    def _levels(self, kept: Levels) -> tuple[Floats, Floats]:
        """Depth and speed of the levels kept, with the first of the profile where the transducer is below it."""
        depth, speed = self.candidates.depth[kept], self.candidates.speed[kept]
        if self.fit and kept.size <= _MOST_FITTED:
            found = fitted(self.candidates.depth, self.candidates.speed, self.candidates.running, kept)
            speed = found.speed if self.printed is None else rounded_in_turn(found.speed, found.weight, self._rounding)
        if self.first[0][0] < depth[0]:
            depth, speed = np.concatenate((self.first[0], depth)), np.concatenate((self.first[1], speed))
        return (depth, speed) if self.printed is None else self.printed(depth, speed)

    def _rounding(self, speed: Floats) -> Floats:
        """Speeds as printed."""
        return speed if self.printed is None else self.printed(np.zeros(speed.size), speed)[1]

    def _seen(self, depth: Floats, speed: Floats) -> Medium:
        return below_transducer(replace_levels(self.water, depth, speed), self.transducer_depth)

    def _coarse(self, kept: Levels) -> float:
        """The farthest that beams of a few angles move, m."""
        found = shifts_at(
            self.max_angle * _COARSE_ANGLES, self.seen, self._seen(*self._levels(kept)),
            allowance=_ALLOWANCE * self.tolerance,
        )  # fmt: skip
        return float(found[0].max())

    def _whole(self) -> tuple[Floats, Floats, Shift]:
        """All levels as they are, and the guarantee, nothing but the arithmetic."""
        depth, speed = self.water.depth, self.water.speed
        return depth, speed, self._shift(depth, speed)

    def _verified(self, kept: Levels) -> tuple[Floats, Floats, Shift]:
        depth, speed = self._levels(kept)
        return depth, speed, self._shift(depth, speed)

    def _shift(self, depth: Floats, speed: Floats) -> Shift:
        allowance = _ALLOWANCE * self.tolerance
        return shift_between(self.seen, self._seen(depth, speed), max_angle=self.max_angle, allowance=allowance)


def replace_levels(water: Profile, depth: Floats, speed: Floats) -> Profile:
    """A profile of nothing but these levels, for tracing."""
    return type(water)(depth, speed, id=water.id)


def _candidates(
    water: Profile,
    transducer_depth: float,
    max_angle: float,
    printed: Printed | None,
    *,
    fit: bool,
) -> _Candidates:
    """The levels from the transducer on that may be kept: depths as printed, speeds too unless fitted later."""
    depth = _standing_out(water, transducer_depth)
    speed = np.interp(depth, water.depth, water.speed)
    if printed is not None:
        depth = np.unique(printed(depth, speed)[0])
        speed = np.interp(depth, water.depth, water.speed)
        speed = speed if fit else printed(depth, speed)[1]
    if depth.size < 2:
        raise InputError(
            f"only {depth.size} depth of {water.depth.size} is left as printed: more decimals of depth would be right"
        )
    return _Candidates(kernel_array(depth), kernel_array(speed), _running(water, depth, max_angle))


def _running(water: Profile, depth: Floats, max_angle: float) -> tuple[Floats, Floats, Floats]:
    """The integrals of w, w z and w c from the first of the depths to each, w = sec²(angle)/c of the outermost beam."""
    inner = water.depth[(water.depth > depth[0]) & (water.depth < depth[-1])]
    z = np.union1d(depth, inner)
    c = np.interp(z, water.depth, water.speed)
    middle, mean, thickness = 0.5 * (z[1:] + z[:-1]), 0.5 * (c[1:] + c[:-1]), np.diff(z)
    # A beam of the largest angle may turn above; what is deeper is reached by steeper ones, just not turning.
    sine = np.minimum(np.sin(np.radians(max_angle)) * mean / c[0], 1.0)
    cosine2 = np.maximum(1.0 - sine * sine, _SHALLOWEST**2)
    share = thickness / (cosine2 * mean)
    at = np.searchsorted(z, depth)

    def sums(values: Floats) -> Floats:
        return kernel_array(np.concatenate(([0.0], np.cumsum(values)))[at])

    return sums(share), sums(share * middle), sums(share * mean)


def _standing_out(water: Profile, transducer_depth: float) -> Floats:
    """The depths from the transducer on; of very many those with the largest kinks, and others at even steps."""
    depth = water.depth[water.depth >= transducer_depth]
    if depth.size <= _MOST_CANDIDATES:
        return depth
    speed = np.interp(depth, water.depth, water.speed)
    kink = np.zeros(depth.size)
    line = speed[:-2] + (speed[2:] - speed[:-2]) * (depth[1:-1] - depth[:-2]) / (depth[2:] - depth[:-2])
    kink[1:-1] = np.abs(speed[1:-1] - line) * (depth[2:] - depth[:-2])
    half = _MOST_CANDIDATES // 2
    even = np.linspace(0, depth.size - 1, half).round().astype(np.int64)
    return depth[np.unique(np.concatenate((even, np.argsort(kink)[-half:])))]
