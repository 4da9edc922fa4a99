"""What each cast of a survey is worth: left out, corrected from the rest, and what that would have done.

A beam to the seabed through the omitted cast is the truth; at the same time and steering it is followed through each of
the casts that would then have served, and these positions are blended by their weights, as soundings are. What comes
out wrong is the damage. Whether the uncertainty foresaw it says whether the scales and the model of the water's change
can be believed. And some casts could have been spared: the cheapest schedule is the fewest of them with which each of
the others would still have been met within an order or a tolerance.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations
from math import comb
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .changing import water_change
from .choosing import DEFAULT_MOST, Chooser, distances, placed
from .exchanging import DEFAULT_ANGLE, Exchanged, exchanged
from .orders import error_limits
from .sensitivity import beam_moves

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    import xarray
    from numpy.typing import NDArray

    from ..profile import Profile
    from .choosing import Scales
    from .orders import Order

    Floats = NDArray[np.float64]
    Booleans = NDArray[np.bool_]
    Indices = Sequence[int] | NDArray[np.intp]

_MOST_TRIED = 4000  # sets of casts tried for the cheapest schedule; beyond, casts are taken away one by one
_MANY = 30  # casts: one in more has little share in how they say the water changes, and is not taken out of that
_K95 = 1.96
_LEAST_CASTS = 3
_PLACE = ("latitude", "longitude")
_SHARED = "equation"  # the shape of an error that all casts share, so that no cast can show it in another


@dataclass(frozen=True, eq=False)
class LeftOut:
    """Casts left out one by one; arrays of shape (casts,), in the order of time where that is known.

    Parameters
    ----------
    ids : tuple of str
        Names of the casts.
    time, latitude, longitude : numpy.ndarray
        When and where they were taken.
    angle, depth, transducer_depth : float
        Of the beam: degrees from the vertical at the transducer, and m below the water surface.
    served : numpy.ndarray of bool
        Whether another cast is near enough to serve in its place.
    depth_error, across_error : numpy.ndarray
        Found from the other casts minus truth, m: positive too deep, and too far out. NaN where none serves, or a cast
        does not reach the depth.
    depth_uncertainty, across_uncertainty : numpy.ndarray
        Standard uncertainty (k = 1), m, that would have been stated for this difference, the omitted cast's own
        included; NaN where it is not known.
    largest_depth_error, largest_across_error : float
        m that may be; infinite without such a limit.
    kept : tuple of int
        The cheapest schedule: positions of the casts that are needed.
    spared_error : numpy.ndarray
        Depth error, m, at each cast that the schedule leaves out; 0 at those it keeps.
    fewest : bool
        Whether every smaller set was tried, so that there is no cheaper one.
    notes : tuple of str
        One line for each thing to know.
    """

    ids: tuple[str, ...]
    time: NDArray[np.datetime64]
    latitude: Floats
    longitude: Floats
    angle: float
    depth: float
    transducer_depth: float
    served: Booleans
    depth_error: Floats
    across_error: Floats
    depth_uncertainty: Floats
    across_uncertainty: Floats
    largest_depth_error: float
    largest_across_error: float
    kept: tuple[int, ...]
    spared_error: Floats
    fewest: bool
    notes: tuple[str, ...] = ()

    @property
    def foreseen(self) -> Booleans:
        """Whether the depth error lies within the 95 % interval of its uncertainty; False where either is unknown."""
        return np.abs(self.depth_error) <= _K95 * self.depth_uncertainty

    @property
    def holds(self) -> Booleans:
        """Whether both errors would have stayed within their limits."""
        return _within(self.depth_error, self.across_error, self.largest_depth_error, self.largest_across_error)

    def lines(self) -> list[str]:
        """What a person should read first."""
        judged = np.isfinite(self.depth_error)
        known = judged & np.isfinite(self.depth_uncertainty)
        found = [f"{len(self.ids)} casts left out one by one: beam of {self.angle:g} degrees to {self.depth:g} m"]
        if judged.any():
            worst = int(np.nanargmax(np.abs(self.depth_error)))
            rms = float(np.sqrt(np.mean(self.depth_error[judged] ** 2)))
            found.append(
                f"depth error {rms:.3f} m rms, largest {self.depth_error[worst]:+.3f} m without {self.ids[worst]}"
            )
            found.append(
                f"within the 95 % interval of its uncertainty at {int(self.foreseen.sum())} of {int(known.sum())} casts"
            )
        limits = [
            f"{name} within {limit:.3f} m"
            for name, limit in (("depth", self.largest_depth_error), ("across-track", self.largest_across_error))
            if np.isfinite(limit)
        ]
        how = "the fewest that do" if self.fewest else "found by taking away one by one; there may be fewer"
        found.append(f"{len(self.kept)} of {len(self.ids)} casts hold {' and '.join(limits)} at the others: {how}")
        return [*found, *self.notes]

    def to_dataset(self) -> xarray.Dataset:
        """All of it on the dimension `cast`."""
        import xarray as xr

        def column(values: Any, words: str, units: str = "m") -> tuple[Any, ...]:
            return "cast", values, {"long_name": words, **({"units": units} if units else {})}

        def flags(values: Booleans, words: str, meanings: str) -> tuple[Any, ...]:
            about = {"long_name": words, "flag_values": np.array([0, 1], np.int8), "flag_meanings": meanings}
            return "cast", values.astype(np.int8), about

        kept = np.zeros(len(self.ids), dtype=np.bool_)
        kept[list(self.kept)] = True
        return xr.Dataset(
            {
                "cast_id": ("cast", np.array(self.ids, dtype=str), {"long_name": "identifier of the cast"}),
                "depth_error": column(self.depth_error, "depth from the other casts minus that through the cast"),
                "across_track_error": column(
                    self.across_error, "distance from the other casts minus that through the cast, positive outward"
                ),
                "depth_uncertainty": column(self.depth_uncertainty, "standard uncertainty (k=1) of the depth error"),
                "across_track_uncertainty": column(
                    self.across_uncertainty, "standard uncertainty (k=1) of the across-track error"
                ),
                "foreseen": flags(self.foreseen, "whether the uncertainty foresaw the depth error", "no yes"),
                "kept": flags(kept, "whether the cheapest schedule needs the cast", "spared needed"),
                "spared_depth_error": column(self.spared_error, "depth error at the cast under the cheapest schedule"),
            },
            {
                "time": ("cast", self.time, {"standard_name": "time", "long_name": "time of the cast"}),
                "latitude": column(self.latitude, "latitude of the cast", "degrees_north"),
                "longitude": column(self.longitude, "longitude of the cast", "degrees_east"),
            },
            {
                "angle": self.angle,
                "sounding_depth": self.depth,
                "transducer_depth": self.transducer_depth,
                "largest_depth_error": self.largest_depth_error,
                "largest_across_track_error": self.largest_across_error,
                "fewest": int(self.fewest),
                "notes": "\n".join(self.notes),
            },
        )


def leave_one_out(
    profiles: Iterable[Profile],
    *,
    scales: Scales,
    angle: float = DEFAULT_ANGLE,
    depth: float | None = None,
    transducer_depth: float = 0.0,
    order: Order | str | None = None,
    tolerance: float | None = None,
    as_it_was: bool = False,
    most: int = DEFAULT_MOST,
    flat_array: bool = True,
) -> LeftOut:
    """Leave out each cast, correct its beam from the others, and find the casts that could have been spared.

    Parameters
    ----------
    profiles : iterable of Profile
        Three casts or more, with time (and position, if distance is to count).
    scales : Scales
        Decorrelation time and length.
    angle : float
        Of the beam, degrees from the vertical at the transducer.
    depth : float, optional
        To which the beam goes, m; where not given the greatest that all casts reach.
    transducer_depth : float
        m below the water surface.
    order : Order or str, optional
        Or the name of one of IHO S-44: the errors may be as large as its TVU and THU there.
    tolerance : float, optional
        Instead of an order: the largest depth error, m.
    as_it_was : bool
        Whether only casts before the omitted one serve.
    most : int
        The largest number of casts that serve.
    flat_array : bool
        Whether the beam comes from a level flat array steered with the true speed at the transducer, and so keeps
        sin(angle)/speed; otherwise it keeps its angle.

    Returns
    -------
    LeftOut

    Raises
    ------
    InputError
        There are fewer than three casts, a number makes no sense, or order and tolerance are both given or neither.

    Notes
    -----
    The cheapest schedule is judged by what the
    casts themselves tell: between them the water may have done more. An order limits uncertainty (95 %); here one known
    error is held against the same number. An error that all casts share, that of the sound-speed equation, shows in no
    difference between them, and is left out of the uncertainty as well.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.soundings.choosing import Scales
    >>> day = [Profile([0, 10, 60], [1500 + warm, 1500, 1490], [0.1] * 3, id=f"K{hour}",
    ...                time=f"2026-07-01T{hour:02d}:00") for hour, warm in ((6, 0), (8, 1), (10, 2), (12, 5))]
    >>> left = leave_one_out(day, scales=Scales(5 * 3600.0, 1e4), depth=50.0, tolerance=0.02)
    >>> [day[kept].id for kept in left.kept]
    ['K8', 'K12']
    """
    casts = _in_time(profiles)
    down = _checked(casts, angle, depth, transducer_depth)
    allowed = error_limits(order, tolerance, down)
    vertical, horizontal = float(allowed.depth), float(allowed.across)
    found = exchanged(casts, depths=[down], angle=angle, transducer_depth=transducer_depth, flat_array=flat_array)
    rule = _Rule(casts, found, scales, as_it_was, most, (vertical, horizontal))
    errors = np.array([rule.without(_others(len(casts), [each]), [each]) for each in range(len(casts))])
    depth_error, across_error = errors[:, 0, 0], errors[:, 1, 0]
    doubts = _doubts(casts, rule, found, angle, transducer_depth, flat_array=flat_array)
    kept, fewest = _cheapest(rule, len(casts))
    spared = np.zeros(len(casts))
    others = _others(len(casts), kept)
    if others:
        spared[others] = rule.without(kept, others)[0]
    served = np.array([rule.served(_others(len(casts), [each]), each) for each in range(len(casts))])
    return LeftOut(
        ids=tuple(cast.id or f"cast {number}" for number, cast in enumerate(casts, start=1)),
        time=np.array([cast.time for cast in casts]),
        latitude=np.array([cast.latitude for cast in casts]),
        longitude=np.array([cast.longitude for cast in casts]),
        angle=float(angle),
        depth=down,
        transducer_depth=float(transducer_depth),
        served=served,
        depth_error=depth_error,
        across_error=across_error,
        depth_uncertainty=doubts[0],
        across_uncertainty=doubts[1],
        largest_depth_error=vertical,
        largest_across_error=horizontal,
        kept=kept,
        spared_error=spared,
        fewest=fewest,
        notes=(*rule.notes, *_remarks(served, depth_error)),
    )


def _in_time(profiles: Iterable[Profile]) -> list[Profile]:
    casts = list(profiles)
    if len(casts) < _LEAST_CASTS:
        raise InputError(f"{len(casts)} casts: {_LEAST_CASTS} or more would be right to leave out one by one")
    return sorted(casts, key=lambda cast: (np.isnat(cast.time), cast.time))


def _checked(casts: Sequence[Profile], angle: float, depth: float | None, transducer_depth: float) -> float:
    if not 0.0 <= angle < 90.0:
        raise InputError(f"angle is {angle:g} degrees: from 0 to less than 90 would be right")
    reach = [float(cast.depth[-1]) for cast in casts]
    down = min(reach) if depth is None else float(depth)
    if not 0.0 <= transducer_depth < down:
        shallowest = casts[int(np.argmin(reach))].id
        raise InputError(
            f"the beam would go from {transducer_depth:g} m, the transducer, to {down:g} m"
            + (f", the end of cast {shallowest}" if depth is None else "")
            + ": a depth below the transducer would be right"
        )
    if down > max(reach):
        raise InputError(f"depth is {down:g} m: no cast reaches it; up to {min(reach):g} m all of them do")
    return down


class _Rule:
    """What a set of casts makes of the beams of others, by the rule that chooses casts."""

    def __init__(
        self,
        casts: Sequence[Profile],
        found: Exchanged,
        scales: Scales,
        as_it_was: bool,  # noqa: FBT001
        most: int,
        limits: tuple[float, float],
    ) -> None:
        self.casts, self.scales, self.as_it_was, self.most = casts, scales, as_it_was, most
        self.vertical, self.horizontal = limits
        # of the beam of each cast (row) through each (column)
        self.depth_errors = found.depth[:, :, 0].T - found.true_depth
        self.across_errors = found.across[:, :, 0].T - found.true_across
        self.notes = Chooser(casts, scales=scales, as_it_was=as_it_was, most=most).notes

    def chosen(self, kept: Indices, others: Indices) -> tuple[Floats, Floats]:
        """Weights of all casts for each of the others, if only some are kept, and the change of the water since."""
        chooser = Chooser([self.casts[i] for i in kept], scales=self.scales, as_it_was=self.as_it_was, most=self.most)
        places = [self.casts[i] for i in others]
        choice = chooser.choose(
            np.array([cast.time for cast in places], dtype="datetime64[ns]"),
            np.array([cast.latitude for cast in places]),
            np.array([cast.longitude for cast in places]),
        )
        weights = np.zeros((len(others), len(self.casts)))
        row, column = np.nonzero(choice.weight > 0.0)
        weights[row, np.asarray(kept)[choice.index[row, column]]] = choice.weight[row, column]
        return weights, choice.change

    def without(self, kept: Indices, others: Indices) -> tuple[Floats, Floats]:
        """Errors of depth and across-track distance of the others' beams, corrected with those kept."""
        weights, _ = self.chosen(kept, others)
        none = ~(weights > 0.0).any(axis=1)
        depth, across = (
            np.where(none, np.nan, np.where(weights > 0.0, weights * table[others], 0.0).sum(axis=1))
            for table in (self.depth_errors, self.across_errors)
        )
        return depth, across

    def served(self, kept: Indices, other: int) -> bool:
        """Whether any of those kept is near enough."""
        return bool((self.chosen(kept, [other])[0] > 0.0).any())

    def share(self, kept: Indices, others: Indices) -> float:
        """The largest error of the others as a share of its limit; infinite where one can't be judged."""
        depth, across = self.without(kept, others)
        shares = np.maximum(np.abs(depth) / self.vertical, np.abs(across) / self.horizontal)
        return float(np.max(np.where(np.isnan(shares), np.inf, shares)))

    def near(self) -> Booleans:
        """Which casts can serve for which; at least these."""
        times = np.array([cast.time for cast in self.casts], dtype="datetime64[ns]")
        latitude, longitude = (np.array([getattr(each, name) for each in self.casts]) for name in _PLACE)
        elapsed = np.where(
            np.isnat(times[:, None] - times), 0.0, (times[:, None] - times).astype(np.int64).astype(float) / 1e9
        )
        apart = np.zeros(elapsed.shape)
        if placed(latitude, longitude).all():
            apart = distances(latitude[:, None], longitude[:, None], latitude, longitude)
        return np.asarray(self.scales.apart(elapsed, apart)) < 1.0


def _within(depth: Floats, across: Floats, vertical: float, horizontal: float) -> Booleans:
    return (np.abs(depth) <= vertical) & (np.abs(across) <= horizontal)


def _doubts(
    casts: Sequence[Profile],
    rule: _Rule,
    beams: Exchanged,
    angle: float,
    transducer_depth: float,
    *,
    flat_array: bool,
) -> tuple[Floats, Floats]:
    """Standard uncertainties of the errors of depth and distance of each cast left out, as would have been stated.

    As soundings have it: variances through each cast that serves, its own and that of the water's change, by weight.
    To these comes the variance of the omitted cast itself.
    """
    count = len(casts)
    found = np.full((2, count), np.nan)

    def moved(through: int, of: int) -> tuple[Floats, Floats, Floats]:
        """Levels, and derivatives of the end of a cast's beam by the speeds of another cast (or its own)."""
        speed = beams.speed
        sine = np.sin(np.radians(angle)) * (speed[through] / speed[of] if flat_array else 1.0)
        deep = min(float(beams.true_depth[0]), float(casts[through].depth[-1]))
        moves = beam_moves(casts[through], sine, deep, transducer_depth=transducer_depth)
        if flat_array:
            return moves.levels, moves.depth[0], moves.across[0]
        # a beam that keeps its angle changes its ray parameter with the speed at the transducer
        upper = int(np.searchsorted(moves.levels, transducer_depth, side="right")) - 1
        share = (transducer_depth - moves.levels[upper]) / (moves.levels[upper + 1] - moves.levels[upper])
        by_level = np.zeros(moves.levels.size)
        by_level[upper : upper + 2] = -sine / speed[through] ** 2 * np.array([1.0 - share, share])
        depth, across = moves.depth_by_slowness[0], moves.across_by_slowness[0]
        return moves.levels, moves.depth[0] + depth * by_level, moves.across[0] + across * by_level

    everything = water_change(casts, scales=rule.scales) if count > _MANY else None
    for each in range(count):
        others = _others(count, [each])
        weights, change = rule.chosen(others, [each])
        serving = np.flatnonzero(weights[0] > 0.0).tolist()
        if not serving or np.isnan(beams.time[each, 0]):
            continue
        variance = _of_cast(casts[each], moved(each, each))
        shapes = everything or water_change([casts[i] for i in others], scales=rule.scales)
        for through in serving:
            levels, *moves = moved(through, each)
            turned = [[move @ np.interp(levels, *shape) for move in moves] for shape in shapes.values()]
            changed = change[0] * (np.reshape(turned, (-1, 2)) ** 2).sum(axis=0)
            variance = variance + weights[0, through] * (_of_cast(casts[through], moved(through, each)) + changed)
        found[:, each] = np.sqrt(variance)
    return found[0], found[1]


def _of_cast(cast: Profile, moves: tuple[Floats, ...]) -> Floats:
    """Variances of depth and distance from the shapes and the noise of a cast; NaN where it knows none."""
    water = cast.to_surface()
    if water.uncertainty is None:
        return np.full(2, np.nan)
    variance = np.zeros(2)
    for axis, move in enumerate(moves[1:]):
        used = move != 0.0  # an uncertainty that is unknown below the end of the beam does not matter
        for name, shape in water.shapes.items():
            if name != _SHARED:
                variance[axis] += (move[used] @ shape[used]) ** 2
        if water.noise is not None:
            variance[axis] += ((move[used] * water.noise[used]) ** 2).sum()
    return variance


def _cheapest(rule: _Rule, count: int) -> tuple[tuple[int, ...], bool]:
    """The fewest casts, and whether that is sure: one by one the least missed is taken away, then all smaller sets."""
    kept = _one_by_one(rule, count)
    if sum(comb(count, size) for size in range(1, len(kept))) > _MOST_TRIED:
        return kept, False
    for size in range(1, len(kept)):
        shares = {rest: rule.share(rest, _others(count, rest)) for rest in combinations(range(count), size)}
        best = min(shares, key=shares.__getitem__)
        if shares[best] <= 1.0:
            return best, True
    return kept, True


def _one_by_one(rule: _Rule, count: int) -> tuple[int, ...]:
    """Casts that are left when one after the other is taken away whose loss does least, as long as all is held.

    A loss is felt only by those near the cast that were taken away before, and by itself; they are served only by those
    near them. So it has to be worked out anew only when a cast within two steps of nearness is taken away.
    """
    near, kept = rule.near(), np.ones(count, dtype=np.bool_)
    two_steps = (near.astype(np.int64) @ near.astype(np.int64)) > 0
    shares: dict[int, float] = {}
    while np.count_nonzero(kept) > 1:
        for each in np.flatnonzero(kept).tolist():
            if each not in shares:
                felt = near[each] & ~kept
                felt[each] = True
                serving = kept & near[felt].any(axis=0)
                serving[each] = False
                shares[each] = rule.share(np.flatnonzero(serving), np.flatnonzero(felt)) if serving.any() else np.inf
        least = min(shares, key=shares.__getitem__)
        if not shares[least] <= 1.0:
            break
        kept[least] = False
        shares = {each: share for each, share in shares.items() if each != least and not two_steps[each, least]}
    return tuple(np.flatnonzero(kept).tolist())


def _others(count: int, kept: Sequence[int]) -> list[int]:
    return [i for i in range(count) if i not in kept]


def _remarks(served: Booleans, error: Floats) -> list[str]:
    notes = []
    alone = int(np.count_nonzero(~served))
    if alone:
        notes.append(f"{alone} casts have no other near enough in time and place: their loss can't be judged")
    short = int(np.count_nonzero(served & np.isnan(error)))
    if short:
        notes.append(f"{short} casts can't be judged: they or those near them do not reach the depth")
    return notes
