"""Soundings corrected for refraction: a block of pings through the casts of its time and place."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from . import _kernels_correct as through
from . import _kernels_finish as finish
from .carrying import DEEPEST, Carrier, Store, carrier, taken_back_by
from .choosing import DEFAULT_MOST, Choice, Chooser, Scales
from .columns import FLAG_OF_REASON, REASON, PingBlock
from .components import KINDS, Component, Components
from .directions import ANGLES, ARRAYS
from .geometry import recorded_time
from .orders import limit_rows
from .positions import offsets, place_frame
from .radius import radius_table
from .table import DEFAULT_ANGLE, DEFAULT_TOLERANCE

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from ..profile import Profile
    from .orders import Order

    Floats = NDArray[np.float64]

BEYOND_CAST = ("complete", "flag")
"""What is done with water that a cast does not describe."""
SURFACE_SPEED_LIMIT = 2.0
"""Surface sound speed and cast may differ by so much, m/s, before a sounding is suspect (common practice)."""
_MEMORY = 512 * 2**20  # bytes of tables kept
_BITS = 15  # orders that fit a code
_EARLIER = 1e-6  # m: a transducer may be so far above the depth that was said to be the least

# The reason for each code of `_kernels_correct`.
_REASONS = np.array(
    [
        REASON[name]
        for name in (
            "none", "no_angle", "no_direction", "no_speed", "no_attitude", "not_at_face", "not_downward", "turned",
            "beyond_the_cast", "no_travel_time", "no_cast_near_enough", "no_time_or_position", "no_transducer_depth",
            "impossible_value", "completed_below_the_cast", "completed_above_the_cast", "served_in_part",
            "surface_speed_differs", "position_missing", "uncertainty_unknown",
        )
    ],
    dtype=np.int16,
)  # fmt: skip
_NO_CAST, _NO_TIME, _NO_SOURCE, _IMPOSSIBLE = 10, 11, 12, 13
_OF_BACK = np.array([0, 7, 8, 9], dtype=np.int8)  # the codes of `geometry.TakenBack.status`
_ABSENT = np.zeros((1, 1))


@dataclass(frozen=True)
class Options:
    """How soundings are corrected.

    Parameters
    ----------
    angles : str
        ``cones`` or ``tilted-fan``: what the along-track angle means, see `beam_directions`.
    array : str
        ``flat`` or ``curved``, see there. A flat array is one steered with the surface sound speed, if that is given;
        else the speed of the cast at the transducer stands for it.
    tolerance : float
        Largest error of the table of travel times against exact tracing, m: arithmetic, not accuracy.
    max_angle : float
        Beams farther from the vertical, degrees, are traced without the table.
    beyond_cast : str
        ``complete``: a seabed below the cast or a transducer above its first level is corrected with water carried on
        from it, with larger uncertainty, and suspect. ``flag``: it fails.
    curvature : bool or float
        Whether the Earth's curvature counts; a number is its radius, m. By default that of the cast's latitude.
    steering_speed_uncertainty : float, optional
        Standard uncertainty (k = 1), m/s, of the speed that a flat array was steered with, where that is not exactly
        the surface sound speed of the soundings, or none is there. None is 0.
    surface_speed_limit : float
        Surface sound speed and cast at the transducer may differ by so much, m/s, before a sounding is suspect.
    recorded_speed : float, optional
        For depths recorded at a nominal speed (column `recorded_depth`): that speed, m/s; see `NOMINAL_SPEEDS`.
    recorded_added : float
        What the recorder had added for the depth of the transducer, m.

    Raises
    ------
    InputError
        If an option is none.

    Notes
    -----
    How accurate the sensor at the array is does not enter. A flat array that was steered with a wrong speed sends its
    beams to other angles than those it states; but the sine it states over the speed it used is the slowness along its
    face that the beam truly has, and keeps into the water whatever the speed of sound is there. The number that was
    used has to be known, not how right it was.
    """

    angles: str = "cones"
    array: str = "flat"
    tolerance: float = DEFAULT_TOLERANCE
    max_angle: float = DEFAULT_ANGLE
    beyond_cast: str = "complete"
    curvature: bool | float = True
    steering_speed_uncertainty: float | None = None
    surface_speed_limit: float = SURFACE_SPEED_LIMIT
    recorded_speed: float | None = None
    recorded_added: float = 0.0

    def __post_init__(self) -> None:
        words = (("angles", ANGLES), ("array", ARRAYS), ("beyond_cast", BEYOND_CAST))
        for name, known in words:
            if getattr(self, name) not in known:
                raise InputError(f"{name} is {getattr(self, name)!r}: {' or '.join(known)} would be right")
        for name in ("steering_speed_uncertainty", "surface_speed_limit", "recorded_speed"):
            value = getattr(self, name)
            if value is not None and not value >= 0.0:
                raise InputError(f"{name} is {value:g}: 0 or more would be right")
        if self.recorded_speed is not None:
            recorded_time(0.0, speed=self.recorded_speed)


class Through(NamedTuple):
    """Soundings of a block through one cast alone, one row each, pings first.

    Parameters
    ----------
    depth, across, along : numpy.ndarray
        Where they lie, m; NaN where a beam does not get there.
    transducer_depth, time : numpy.ndarray
        m, and one way, s.
    sine : numpy.ndarray
        Of the angle from the vertical at the transducer.
    below : numpy.ndarray
        Depth below the transducer, m.
    slowness_per_speed : numpy.ndarray
        Change of the ray parameter with the speed at the transducer, s2/m2.
    slowness_uncertainty : numpy.ndarray
        Standard uncertainty of the ray parameter by the speed of steering, s/m.
    """

    depth: Floats
    across: Floats
    along: Floats
    transducer_depth: Floats
    time: Floats
    sine: Floats
    below: Floats
    slowness_per_speed: Floats
    slowness_uncertainty: Floats


class Corrector:
    """Corrects blocks of pings; threads may share one.

    Parameters
    ----------
    profiles : sequence of Profile
        The casts, as the soundings count them.
    options : Options
    transducer_depth_range : tuple of float
        Least and greatest depth of the transducer in all blocks, m: tables begin at the least.
    scales : Scales, optional
        Decorrelation time and length. Estimated where there are several casts; a single one without them serves all
        soundings, whatever their time and place.
    as_it_was : bool
        Whether only casts are used that were there when the ping was.
    orders : mapping of str to Order, optional
        At most 15.
    components : Components or sequence of Component
        The other components of the survey's uncertainty.
    change : mapping of str to (depths, amplitudes), or float, optional
        Shapes of the water's change, see `path_uncertainty`; a number is one standard deviation, m/s, alike at all
        depths. Taken from the casts where there are several.
    corrected_with : Profile, optional
        The profile with which the soundings of the blocks were corrected before.
    deepest : float, optional
        How deep soundings may be, m.
    most : int
        The largest number of casts blended for a sounding; 1 is the nearest alone.
    steered : bool
        Whether the blocks have the surface sound speed; if not, a note says what stands for it.

    Attributes
    ----------
    notes : tuple of str
        One line for each thing that was assumed or is not known.

    Raises
    ------
    InputError
        If there is no cast, or an argument makes no sense.
    """

    def __init__(
        self,
        profiles: Sequence[Profile],
        options: Options | None = None,
        *,
        transducer_depth_range: tuple[float, float],
        scales: Scales | None = None,
        as_it_was: bool = False,
        orders: Mapping[str, Order] | None = None,
        components: Components | Sequence[Component] = (),
        change: Mapping[str, Any] | float | None = None,
        corrected_with: Profile | None = None,
        deepest: float | None = None,
        most: int = DEFAULT_MOST,
        steered: bool = True,
    ) -> None:
        if not profiles:
            raise InputError("there is no cast: give at least one")
        self.options = Options() if options is None else options
        self.profiles = tuple(profiles)
        self.orders = dict(orders or {})
        if len(self.orders) > _BITS:
            raise InputError(f"{len(self.orders)} orders are given: {_BITS} at most would be right")
        self.top = float(transducer_depth_range[0])
        if not 0.0 <= self.top <= transducer_depth_range[1] < DEEPEST:
            raise InputError(
                f"transducer_depth_range is {transducer_depth_range}: two metres, 0 or more, would be right"
            )
        self.deepest = max(DEEPEST if deepest is None else deepest, float(transducer_depth_range[1]) + 1.0)
        notes: list[str] = []
        self.scales = self._settle_scales(scales, as_it_was=as_it_was, notes=notes)
        self.change = self._settle_change(change, notes)
        self._chooser = None
        if self.scales is not None:
            self._chooser = Chooser(self.profiles, scales=self.scales, as_it_was=as_it_was, most=most)
            notes += self._chooser.notes
        others = components if isinstance(components, Components) else Components(tuple(components))
        self.components = others.parts
        self.parts = tuple(kernel_array(others.coefficients(kind)) for kind in KINDS) if self.components else None
        self.limits = kernel_array(limit_rows(self.orders))
        self._store = Store(self._made, _MEMORY)
        self.before = None if corrected_with is None else self._made_of(corrected_with)
        self.notes = (*notes, *self._notes(steered=steered))

    def _settle_scales(self, scales: Scales | None, *, as_it_was: bool, notes: list[str]) -> Scales | None:
        if scales is not None or (len(self.profiles) == 1 and not as_it_was):
            return scales
        from .changing import estimate_scales

        found = estimate_scales(self.profiles)
        notes += [f"scales estimated from {found.casts} casts: {found.scales}", *found.notes]
        return found.scales

    def _settle_change(self, change: Mapping[str, Any] | float | None, notes: list[str]) -> Mapping[str, Any]:
        if isinstance(change, int | float):
            if not change >= 0.0:
                raise InputError(f"change is {change:g} m/s: 0 or more would be right")
            return {"change": ([0.0], [float(change)])}
        if change is not None:
            return change
        from .changing import water_change

        found = water_change(self.profiles, scales=self.scales)
        notes += found.notes
        return found

    def _notes(self, *, steered: bool) -> list[str]:
        notes = []
        if self.options.array == "flat" and not steered:
            left_out = ", without uncertainty" if self.options.steering_speed_uncertainty is None else ""
            notes.append(
                "the speed that the beams were steered with is not given: that of the cast at the transducer stands "
                f"for it{left_out}"
            )
        without = sum(profile.uncertainty is None for profile in self.profiles)
        if without:
            notes.append(f"{without} of {len(self.profiles)} casts say nothing of their uncertainty")
        if self.scales is None:
            notes.append(
                "one cast and no scales: it serves all soundings, and their uncertainty does not grow with time"
            )
        return notes

    @property
    def table_error(self) -> float:
        """The largest error of the tables made so far against exact tracing, m: arithmetic, not accuracy."""
        return self._store.worst

    @property
    def uncertainty_error(self) -> float:
        """The largest error of the tabulated standard uncertainties so far, as a share."""
        return self._store.worst_share

    def _made(self, which: int) -> Carrier:
        return self._made_of(self.profiles[which])

    def _made_of(self, profile: Profile) -> Carrier:
        return carrier(
            profile,
            top=self.top,
            deepest=self.deepest,
            tolerance=self.options.tolerance,
            max_angle=self.options.max_angle,
            curvature=self.options.curvature,
            change=self.change,
        )

    def correct(self, block: PingBlock) -> dict[str, NDArray[Any]]:
        """The columns of `columns.OUTPUTS` that the block allows, each of shape (pings, beams).

        Parameters
        ----------
        block : PingBlock
            With `two_way_travel_time` (or `recorded_depth`; or, corrected before, depth and distances), angles unless
            every ping has one vertical beam, `transducer_depth`, and what else `columns.INPUTS` names. Never changed.

        Returns
        -------
        dict of str to numpy.ndarray

        Raises
        ------
        InputError
            If a column is missing, or a transducer is above the least depth that was said.
        """
        work = _Work(self, block)
        choice = self.choose(block)
        for which in np.unique(choice.index[choice.weight > 0.0]):
            weight = np.where(choice.index == which, choice.weight, 0.0).sum(axis=1)
            work.add(self._store.get(int(which)), weight, choice.change)
        return work.finished(choice)

    def carrier(self, which: int) -> Carrier:
        """A cast made ready, by its place among the profiles."""
        return self._store.get(which)

    def through(self, block: PingBlock, which: int) -> Through:
        """The soundings of a block through one cast alone; as `correct` in all else."""
        work = _Work(self, block)
        made = self.carrier(which)
        sine, below, by_speed, by_steering = work.followed(made, np.ones(work.n), (0, work.n))
        sine *= np.broadcast_to(made.at(work.source)[0] / made.table.water.source_speed, (work.n, work.m)).ravel()
        lost = ~(work.sums[0] > 0.0)
        shape = (work.n, work.m)
        source, two_way = (np.broadcast_to(column, shape).ravel() for column in (work.source, work.columns[0]))
        depth, across, along, below = (np.where(lost, np.nan, column) for column in (*work.sums[1:4], below))
        return Through(depth, across, along, source, 0.5 * two_way, sine, below, by_speed, by_steering)

    def choose(self, block: PingBlock) -> Choice:
        """The casts that serve each ping of a block."""
        n = block.shape[0]
        if self._chooser is None:
            one, none = np.ones((n, 1)), np.zeros(n)
            return Choice(np.zeros((n, 1), dtype=np.int32), one, none, none, none)
        given = [_of_pings(block, name) for name in ("time", "latitude", "longitude")]
        if all(column is None for column in given):
            given[0] = np.full(n, np.datetime64("NaT", "ns"))
        new = np.ones(n, dtype=np.bool_)
        new[1:] = np.any([column[1:] != column[:-1] for column in given if column is not None], axis=0)
        found = self._chooser.choose(*(None if column is None else column[new] for column in given))
        if new.all():
            return found
        rows = np.cumsum(new) - 1  # of rows alike one is looked at
        return Choice(
            found.index[rows], found.weight[rows], found.change[rows], found.nearest_time[rows],
            found.nearest_distance[rows], found.notes,
        )  # fmt: skip


class _Work:
    """One block on its way."""

    def __init__(self, corrector: Corrector, block: PingBlock) -> None:
        self.corrector, self.options, self.block = corrector, corrector.options, block
        self.n, self.m = block.shape
        self.base = np.zeros((self.n, self.m), dtype=np.int8)
        source = self._given("transducer_depth")
        if source is None:
            raise InputError("transducer_depth is missing: metres below the water surface are needed")
        known = np.isfinite(source)
        self.base[np.broadcast_to(~known, self.base.shape)] = _NO_SOURCE
        self.source = np.where(known, source, corrector.top)
        if self.source.size and self.source.min() < corrector.top - _EARLIER:
            raise InputError(
                f"transducer_depth: {self.source.min():g} m is above {corrector.top:g} m, which transducer_depth_range "
                "says is the least"
            )
        flat = self.options.array == "flat"
        self.steering = self._given("surface_sound_speed") if flat else None
        self.steering_doubt = (self.options.steering_speed_uncertainty or 0.0) if flat else 0.0
        self.direct = corrector.before is not None
        two_way, across, along = self._taken_back() if self.direct else self._measured()
        roll, pitch = self._given("face_roll"), self._given("face_pitch")
        level = roll is None and pitch is None
        r, q = (_ABSENT if angle is None else np.radians(angle) for angle in (roll, pitch))
        moved = self._moved()
        self.columns = tuple(
            kernel_array(column)
            for column in (
                two_way, across, along, _ABSENT if self.steering is None else self.steering, np.sin(r), np.cos(r),
                np.sin(q), np.cos(q), self._sum(r, q), *moved, self.source,
            )
        )  # fmt: skip
        self.switches = np.array(
            [
                self.options.angles == "tilted-fan", self.steering is not None, level, self.direct,
                moved[0] is not _ABSENT, self.options.beyond_cast == "flag",
            ],
            dtype=np.int64,
        )  # fmt: skip
        size = self.n * self.m
        sums = np.zeros((5, size))
        self.sums = (*sums, np.zeros(size, dtype=np.int8), np.zeros(size, dtype=np.int8))
        self.covariances = np.zeros((2, size))
        self.speed = np.zeros(self.source.shape)

    def _given(self, name: str) -> Floats | None:
        return self.block.of(name)

    def _sum(self, roll: Floats, pitch: Floats) -> Floats:
        # by ping, or by beam where either is
        return np.asarray(roll + pitch)

    def _measured(self) -> tuple[Floats, Floats, Floats]:
        block = self.block
        if self.options.recorded_speed is not None:
            depth = block.of("recorded_depth")
            if depth is None:
                raise InputError("recorded_depth is missing: a recorded speed is given, so recorded depths are needed")
            two_way = 2.0 * recorded_time(depth, speed=self.options.recorded_speed, added=self.options.recorded_added)
        else:
            given = block.of("two_way_travel_time")
            if given is None:
                raise InputError("two_way_travel_time is missing: seconds are needed")
            two_way = given
        across, along = block.of("across_track_angle"), block.of("along_track_angle")
        if across is None:
            if self.m > 1:
                raise InputError(f"across_track_angle is missing, and pings have {self.m} beams: degrees are needed")
            across = _ABSENT
        return two_way, across, _ABSENT if along is None else along

    @property
    def vertical(self) -> bool:
        """Whether it is of a single-beam echo sounder."""
        return not self.direct and self.block.of("across_track_angle") is None

    def _taken_back(self) -> tuple[Floats, Floats, Floats]:
        """Two-way times and cosines by the cast that the soundings were corrected with."""
        made = self.corrector.before
        block = self.block
        depth, across, along = (
            block.of(f"{name}") for name in ("depth", "across_track_distance", "along_track_distance")
        )
        if made is None or depth is None or across is None:
            raise InputError("depth and across_track_distance are missing: corrected soundings are to be taken back")
        shape = (self.n, self.m)
        depth, across, along = (
            np.broadcast_to(column, shape) for column in (depth, across, _ABSENT if along is None else along)
        )
        time, starboard, forward, status = taken_back_by(
            made, depth, across, along, np.broadcast_to(self.source, shape)
        )
        lost = (status != 0) & (self.base == 0)
        self.base[lost] = _OF_BACK[status[lost]]
        if self.options.array == "flat":
            # Whatever it was steered with, the slowness was kept with the old profile, and is kept with the new one.
            self.steering = made.at(self.source)[0]
        return 2.0 * time, starboard, forward

    def _moved(self) -> tuple[Floats, Floats]:
        """How far the transducer moved to reception, m, to starboard and forward; nothing where that is not known."""
        names = ("latitude", "longitude", "reception_latitude", "reception_longitude", "heading")
        given = [self.block.of(name) for name in names]
        if any(column is None for column in given) or self.direct:
            return _ABSENT, _ABSENT
        across, along = offsets(*given)  # type: ignore[arg-type]
        return np.nan_to_num(across), np.nan_to_num(along)

    def add(self, made: Carrier, weight: Floats, change: Floats) -> None:
        """Add what one cast finds, by its weight for each ping."""
        there = np.flatnonzero(weight > 0.0)
        pings = (int(there[0]), int(there[-1]) + 1)
        sine, below, by_speed, by_steering = self.followed(made, weight, pings)
        found = tuple(np.empty((3, sine.size)))
        changes = np.repeat(change[pings[0] : pings[1]], self.m)
        heave = np.broadcast_to(self.source - self.corrector.top, (self.n, self.m))[pings[0] : pings[1]].ravel()
        made.uncertainty.fill(sine, below, by_speed, by_steering, changes, heave, found)
        column = kernel_array(weight[:, None])
        through.add_covariances(pings, self.m, column, below, (found[0], found[2]), tuple(self.covariances))

    def followed(self, made: Carrier, weight: Floats, pings: tuple[int, int]) -> tuple[Floats, ...]:
        """Add where one cast puts the soundings of some pings, by its weight; and what their uncertainty hangs on.

        That is for each sounding of these pings the sine at the top of the tables, the depth below the transducer, the
        change of the ray parameter with the speed at it, and its uncertainty by the speed of steering.
        """
        size = (pings[1] - pings[0]) * self.m
        speed, away = made.at(self.source)
        column = kernel_array(weight[:, None])
        self.speed = self.speed + column * speed
        doubts = tuple(np.empty((4, size)))
        radius = made.radius
        through.through_cast(
            pings, self.m, self.columns, (kernel_array(speed), kernel_array(away)), self.switches,
            np.array([made.table.water.source_depth, 1.0 / radius, made.highest, made.lowest]), column,
            made.table.water.source_speed, made.table.water.down, made.table.arrays, self.sums, doubts,
        )  # fmt: skip
        doubts[3][:] *= self.steering_doubt
        return doubts

    def finished(self, choice: Choice) -> dict[str, NDArray[Any]]:
        """All columns."""
        self._judge_pings(choice)
        n, m, size = self.n, self.m, self.n * self.m
        out: dict[str, NDArray[Any]] = {}

        def new(name: str, dtype: Any = np.float64) -> NDArray[Any]:
            out[name] = np.empty((n, m), dtype=dtype)
            return out[name].ravel()

        through.reasons(m, self.columns, self.switches, kernel_array(self.speed), self.sums[5])
        depth, across, along = (new(name) for name in ("depth", "across_track_distance", "along_track_distance"))
        codes = np.empty(size, dtype=np.int8)
        finish.blend(self.base.ravel(), self.sums, depth, across, along, codes)
        self._mark_surface_speed(codes)
        self._place(new, across, along, codes)
        height, level = self._given("transducer_height"), self._given("water_level")
        empty = np.empty(0)
        finish.levels(
            m, kernel_array(self.source), kernel_array(_ABSENT if height is None else height),
            kernel_array(_ABSENT if level is None else level), depth,
            empty if height is None else new("sounding_height"), empty if level is None else new("reduced_depth"),
        )  # fmt: skip
        held = new("orders_held_by_sound_speed", np.int16) if self.corrector.orders else np.empty(0, np.int16)
        total, limits = self.sums[0], self.corrector.limits
        finish.doubt(
            tuple(self.covariances), total, depth, limits, codes,
            *(new(name, np.float32) for name in ("depth_uncertainty", "tvu_95", "thu_95")), held,
        )  # fmt: skip
        parts = self.corrector.parts
        if parts is not None:
            held = new("orders_held", np.int16) if self.corrector.orders else np.empty(0, np.int16)
            finish.all_doubt(
                m, kernel_array(self.source), tuple(self.covariances), total, depth, across, along, parts,
                radius_table(), limits, new("total_tvu_95", np.float32), new("total_thu_95", np.float32), held,
            )  # fmt: skip
        if self.vertical:
            out["harmonic_mean_speed"] = (out["depth"] - self.source) / (0.5 * self.columns[0])
        out["cast_used"] = np.repeat(choice.index[:, :1].astype(np.int16), m, axis=1)
        out["cast_weight"] = np.repeat(choice.weight[:, :1].astype(np.float32), m, axis=1)
        reason = np.take(_REASONS, codes).reshape(n, m)
        return out | {"sounding_reason": reason, "sounding_flag": np.take(FLAG_OF_REASON, reason)}

    def _judge_pings(self, choice: Choice) -> None:
        """What fails before any cast is looked at."""
        unserved = choice.weight[:, 0] <= 0.0
        if unserved.any():
            time = _of_pings(self.block, "time")
            timeless = np.ones(self.n, dtype=np.bool_) if time is None else np.isnat(time)
            code = np.where(timeless, _NO_TIME, _NO_CAST)[:, None]
            self.base = np.where(unserved[:, None] & (self.base == 0), code, self.base).astype(np.int8)
        if self.block.impossible is not None:
            self.base[self.block.impossible] = _IMPOSSIBLE

    def _mark_surface_speed(self, codes: NDArray[np.int8]) -> None:
        measured = self._given("surface_sound_speed")
        if measured is not None and not self.direct:
            finish.differ(self.m, kernel_array(measured - self.speed), self.options.surface_speed_limit, codes)

    def _place(self, new: Any, across: Floats, along: Floats, codes: NDArray[np.int8]) -> None:
        """Positions of soundings, and distances from where the transducer was at transmission."""
        if self.switches[4]:
            moved_across, moved_along = (np.broadcast_to(way, (self.n, self.m)).ravel() for way in self.columns[9:11])
            across += 0.5 * moved_across
            along += 0.5 * moved_along
        latitude, longitude, heading = (self._given(name) for name in ("latitude", "longitude", "heading"))
        if latitude is None or longitude is None or heading is None:
            return
        height = self._given("transducer_height")
        surface = 0.0 if height is None else np.nan_to_num(height + self.source)
        frame, shape = place_frame(latitude, longitude, heading, height=surface)
        columns = tuple(kernel_array(np.atleast_2d(column)) for column in frame)
        finish.place(
            self.m, columns, shape, across, along, codes, new("sounding_latitude"), new("sounding_longitude")
        )  # fmt: skip


def _of_pings(block: PingBlock, name: str) -> NDArray[Any] | None:
    """A column of pings; of one given by beam the first of each ping."""
    column = block.of(name)
    return None if column is None else column[:, 0]
