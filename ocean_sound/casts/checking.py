"""Checking casts: the tests of QARTOD and Argo that fit a single cast, over flat columns of many at once."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .block import CastBlock
from .cast import FAIL, MEASURED, MISSING, NOT_EVALUATED, PASS, SUSPECT, VERTICAL, Cast
from .checking_report import CheckReport, levels_in_words
from .checking_tests import (
    LOOP,
    SOAK,
    SPIKE_OF_PRESSURE,
    UP_OR_DOWN,
    Levels,
    flat_runs,
    inversions,
    outside,
    spikes,
    steep,
    way_of_cast,
)
from .checking_thresholds import Thresholds, read_thresholds

if TYPE_CHECKING:
    from os import PathLike

    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Flags = NDArray[np.int8]
    Rows = NDArray[np.int64]
    Bools = NDArray[np.bool_]

Climatology = Callable[[str, Any, Any, Any, Any], tuple[Any, Any]] | Mapping[str, tuple[Any, Any, Any]]
"""Mean and standard deviation: a function of (variable, depth, latitude, longitude, time) over flat columns, or for
each variable the arrays depth, mean and standard deviation."""

# What a clock says that was never set: the zeros of the clocks of Unix, of Argo and of netCDF's makers, of spreadsheets
# and of GPS, and the default of many loggers (common practice).
_CLOCK_ZEROS = np.array(
    ["1970-01-01", "1950-01-01", "1900-01-01", "1899-12-30", "1980-01-01", "1980-01-06", "2000-01-01"], "datetime64[ns]"
)
_SALTIEST = 42.0  # beyond this the equation of state (TEOS-10) does not hold
_PIECE = 65536  # levels checked at a time
_WAY_WORDS = {
    UP_OR_DOWN: "of the way that is not used (up or down)",
    SOAK: "of the soak",
    LOOP: "not below all before them",
}
_BESIDE = ("spike", "rate_of_change")
_WORST = {SUSPECT: "suspect", FAIL: "fail"}


def check_block(
    block: CastBlock,
    *,
    thresholds: str | PathLike[str] | Thresholds = "ocean",
    climatology: Climatology | None = None,
    now: np.datetime64 | None = None,
) -> tuple[CastBlock, CheckReport]:
    """Check casts by the tests of QARTOD and Argo that fit a single cast.

    The tests are ``location``, ``date``, ``truncated`` (of the cast as a whole: reported and noted, no level is
    flagged for them) and of the levels ``gross_range``, ``climatology`` (when given), ``pressure_increasing``,
    ``spike``, ``rate_of_change``, ``flat_line``, ``stuck`` and ``density_inversion``. On casts of sound speed the
    same tests judge the speed.

    Parameters
    ----------
    block : CastBlock
        The casts; never changed.
    thresholds : str, path-like or Thresholds
        A set that comes with the package (``ocean``, ``coast``, ``estuary``, ``lake``), or a TOML file: see
        `read_thresholds`.
    climatology : callable or mapping, optional
        Mean and standard deviation of what is to be expected: ``climatology(variable, depth, latitude, longitude,
        time)`` over flat columns returns both, NaN where it knows none; or ``{variable: (depth, mean, deviation)}``,
        between whose depths is interpolated. Depth in m; where the cast has only pressure, dbar are taken for m.
    now : datetime64, optional
        What the time is, for dates in the future; the clock's where not given.

    Returns
    -------
    block : CastBlock
        The same casts. Each flag is the worst of the source's and the tests': a source's 4 or 9 stays, a 2 becomes 1
        where the value passed. Levels of the way that is not used (up, if the cast went down and up), of the soak and
        of loops are kept with pressure and depth flagged 3. Notes say which test flagged which levels, counted from 1.
    report : CheckReport
        The flags of each test.

    Raises
    ------
    InputError
        Unknown thresholds, or a climatology that does not fit the columns.

    Notes
    -----
    A value is compared with its neighbours among the levels that are used: with pressure, not flagged 4 or 9, and not
    failed by the gross range. Spike and rate of change are not judged at the ends and where a neighbour is far. The
    spike value is Argo's, which is 0 or less for whatever lies between its neighbours. Rate of change is suspect at
    most, since Argo retired that test in 2019. An inversion flags temperature and salinity of both levels.

    References
    ----------
    IOOS (2020), Manual for Real-Time Quality Control of In-situ Temperature and Salinity Data, version 2.1. Argo
    quality control manual for CTD and trajectory data, doi:10.13155/33951. The thresholds name their own sources.

    Examples
    --------
    >>> cast = Cast(id="A1", values={"depth": [0.0, 5.0, 10.0, 15.0], "temperature": [12.0, 12.1, 24.0, 11.9]})
    >>> block, report = check_block(CastBlock.from_casts([cast]))
    >>> block.flags["temperature"].tolist(), report.levels["spike"]["temperature"].tolist()
    ([1, 1, 4, 1], [2, 1, 4, 2])
    >>> block.notes[0][1]
    'spike test: temperature fail on level 3'
    """
    limits = thresholds if isinstance(thresholds, Thresholds) else read_thresholds(thresholds)
    when = np.datetime64("now", "ns") if now is None else now
    # comparisons with NaN, and the huge numbers of files that are broken
    with np.errstate(invalid="ignore", over="ignore"):
        runs = [_checked(piece, limits, climatology, when) for piece in _pieces(block)]
        flags = _joined([run.flags() for run in runs])
    notes = tuple(lines for run in runs for lines in run.notes())
    report = CheckReport(
        limits.name,
        block.id,
        block.row_size,
        {test: _joined([run.levels[test] for run in runs]) for test in runs[0].levels},
        _joined([run.of_casts for run in runs]),
        notes,
    )
    together = tuple((*old, *new) for old, new in zip(block.notes, notes, strict=True))
    return replace(block, flags=flags, notes=together), report


def _pieces(block: CastBlock) -> Iterator[CastBlock]:
    """The casts in pieces whose columns stay in the cache, which makes a pass over them twice as fast."""
    count, first = len(block), 0
    while first < count:
        after = int(np.searchsorted(block.starts, block.starts[first] + _PIECE, side="right")) - 1
        after = min(max(after, first + 1), count)
        if after - first == count:
            yield block
            return
        casts, rows = slice(first, after), slice(block.starts[first], block.starts[after])
        yield CastBlock(
            row_size=block.row_size[casts],
            values={name: column[rows] for name, column in block.values.items()},
            flags={name: column[rows] for name, column in block.flags.items()},
            id=block.id[casts],
            time=block.time[casts],
            latitude=block.latitude[casts],
            longitude=block.longitude[casts],
        )
        first = after


def _joined(parts: Sequence[Mapping[str, Flags]]) -> dict[str, Flags]:
    """Columns of the same names laid end to end."""
    return {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}


def _checked(block: CastBlock, limits: Thresholds, climatology: Climatology | None, now: np.datetime64) -> _Run:
    run = _Run(block, limits)
    run.casts_as_a_whole(now)
    run.vertical()
    run.ranges()
    if climatology is not None:
        run.climatology(climatology)
    run.neighbours()
    run.densities()
    run.truncated()
    return run


def check_cast(
    cast: Cast,
    *,
    thresholds: str | PathLike[str] | Thresholds = "ocean",
    climatology: Climatology | None = None,
    now: np.datetime64 | None = None,
) -> Cast:
    """Check a cast: the same cast with flags, and notes that say which test flagged which levels.

    Parameters
    ----------
    cast : Cast
        The cast; never changed.
    thresholds, climatology, now
        As for `check_block`, which does this for many casts at once and returns the flags of each test as well.

    Returns
    -------
    Cast

    Raises
    ------
    InputError
        Unknown thresholds, or a climatology that does not fit the cast.

    Examples
    --------
    >>> cast = Cast(id="A1", values={"depth": [0.0, 5.0, 10.0, 7.0], "temperature": [12.0, 99.9, 11.0, 11.5]})
    >>> checked = check_cast(cast)
    >>> checked.flags["temperature"].tolist(), checked.flags["depth"].tolist()
    ([1, 4, 1, 1], [1, 1, 1, 3])
    """
    block, _ = check_block(CastBlock.from_casts([cast]), thresholds=thresholds, climatology=climatology, now=now)
    return replace(cast, flags={name: block.flags[name] for name in cast.values}, notes=block.notes[0])


@dataclass(frozen=True)
class _Surroundings:
    """The levels of a column that are compared; by test which have neighbours near, which are deep, which are judged.

    The first two are masks of those levels, the last of the rows of the flat columns.
    """

    levels: Levels
    depth: Floats
    near: dict[str, Bools]
    deep: dict[str, Bools]
    judged: dict[str, Bools]


class _Run:
    """The tests of one block, one after the other; each leaves its flags and what it found."""

    def __init__(self, block: CastBlock, thresholds: Thresholds) -> None:
        self.block = block
        self.thresholds = thresholds
        self.size = int(block.starts[-1])
        self.levels: dict[str, dict[str, Flags]] = defaultdict(dict)
        self.of_casts: dict[str, Flags] = {}
        self.found: list[tuple[str, str, int, Rows]] = []
        self.remarks: dict[int, list[str]] = defaultdict(list)
        self.used: dict[str, Bools | None] = {}  # of each variable the levels to compare with; None for all

    # ---- keeping account

    def _mark(self, test: str, name: str, judged: Bools | None, suspect: Rows, fail: Rows) -> None:
        """The flags of one test; judged is None for all levels."""
        passed = np.ones(self.size, np.int8) if judged is None else judged.view(np.int8)
        flags = NOT_EVALUATED - passed  # 1 where judged, 2 elsewhere
        for flag, rows in ((SUSPECT, suspect), (FAIL, fail)):
            if rows.size:
                flags[rows] = flag
                self.found.append((test, name, flag, rows))
        self.levels[test][name] = flags

    def _remark(self, cast: int, line: str) -> None:
        self.remarks[cast].append(line)

    def _bad_at_source(self, name: str) -> Bools | None:
        flag = self.block.flags.get(name)
        if flag is None or flag.size == 0 or flag.max() < FAIL:
            return None
        return flag >= FAIL

    def _within(self, name: str) -> Bools | None:
        """Judge the gross range of a column; which levels remain to be compared with others, None for all."""
        values = self.block.values[name]
        finite = None if np.isfinite(values.sum()) else np.isfinite(values)
        limits = self.thresholds.of("gross_range", name)
        fail = np.empty(0, np.int64)
        if limits is not None:
            suspect, fail = outside(self._at_the_surface(name, values), limits)
            self._mark("gross_range", name, finite, suspect, fail)
            if finite is not None:
                self.levels["gross_range"][name][~finite] = MISSING
        bad = self._bad_at_source(name)
        if finite is None and bad is None and not fail.size:
            return None
        used = np.ones(self.size, dtype=bool) if finite is None else finite.copy()
        if bad is not None:
            used &= ~bad
        used[fail] = False
        return used

    def _at_the_surface(self, name: str, values: Floats) -> Floats:
        """A speed less what its depth adds; everything else as it is."""
        if name != "sound_speed":
            return values
        slope = self.thresholds["gross_range"].get("speed_by_depth", 0.0)
        at_the_surface: Floats = values - slope * np.nan_to_num(np.clip(self.depth, 0.0, 12000.0))
        return at_the_surface

    # ---- the cast as a whole

    def casts_as_a_whole(self, now: np.datetime64) -> None:
        """Location and date."""
        latitude, longitude, time = self.block.latitude, self.block.longitude, self.block.time
        location = np.full(len(self.block), PASS, np.int8)
        location[(latitude == 0.0) & (longitude == 0.0)] = SUSPECT  # what a receiver without a fix writes
        location[(np.abs(latitude) > 90.0) | (np.abs(longitude) > 360.0)] = FAIL
        location[np.isnan(latitude) | np.isnan(longitude)] = MISSING
        date = np.full(len(self.block), PASS, np.int8)
        limits = self.thresholds["date"]
        date[np.isin(time, _CLOCK_ZEROS)] = SUSPECT
        ahead = np.timedelta64(round(limits["ahead"] * 86400), "s")
        date[(time < np.datetime64(limits["earliest"], "ns")) | (time > now + ahead)] = FAIL
        date[np.isnat(time)] = MISSING
        self.of_casts = {"location": location, "date": date}
        for cast in np.flatnonzero((location == SUSPECT) | (location == FAIL)).tolist():
            where = f"latitude {latitude[cast]:g}, longitude {longitude[cast]:g}"
            self._remark(cast, f"location test: {_WORST[int(location[cast])]}: {where}")
        for cast in np.flatnonzero((date == SUSPECT) | (date == FAIL)).tolist():
            self._remark(cast, f"date test: {_WORST[int(date[cast])]}: {np.datetime_as_string(time[cast], 's')}")

    def truncated(self) -> None:
        """Casts of which too little is left."""
        limits, starts = self.thresholds["truncated"], self.block.starts
        masks = [used for used in self.used.values() if used is not None]
        used = np.ones(self.size, dtype=bool)
        if masks and len(masks) == len(self.used):
            used = np.logical_or.reduce(masks)
        depth = self.depth
        if not used.all():
            high, low = np.where(used, depth, np.inf), np.where(used, depth, -np.inf)
        else:
            high, low = depth, depth
        count = np.add.reduceat(used, starts[:-1], dtype=np.int64)
        span = np.maximum.reduceat(low, starts[:-1]) - np.minimum.reduceat(high, starts[:-1])
        short = (count < limits["levels"]) | ~(span > limits["span"])
        self.of_casts["truncated"] = np.where(short, SUSPECT, PASS).astype(np.int8)
        for cast in np.flatnonzero(short).tolist():
            over = f" over {span[cast]:.1f} m" if count[cast] > 1 else ""
            self._remark(cast, f"truncated cast: suspect: {count[cast]} usable levels{over}")

    # ---- pressure and depth

    def vertical(self) -> None:
        """Which column says how deep, its range, and which levels lie on the way that is used."""
        values = self.block.values
        names = [name for name in VERTICAL if name in values]
        self.depth: Floats = values[names[0]]
        usable: dict[str, Bools | None] = {name: self._within(name) for name in names}
        first = usable[names[0]]
        if len(names) > 1 and first is not None:
            by_cast = np.logical_or.reduceat(first, self.block.starts[:-1])
            by_first = np.repeat(by_cast, self.block.row_size)
            other = usable[names[1]]
            self.depth = np.where(by_first, values[names[0]], values[names[1]])
            first = np.where(by_first, first, True if other is None else other)
        self.placed = first if first is None or not first.all() else None
        self._ways(names)

    def _ways(self, names: list[str]) -> None:
        """The test of pressure increasing, for the casts whose levels do not simply go down."""
        starts = self.block.starts
        levels = Levels.of(self.placed, starts)
        depth = levels.take(self.depth)
        rises = np.flatnonzero(levels.steps(depth) <= 0.0)
        judged = self.placed
        suspect: list[Rows] = []
        fail: list[Rows] = []
        unordered = np.zeros(self.size, dtype=bool)
        for cast in np.unique(np.searchsorted(starts, levels.row(rises), side="right") - 1).tolist():
            rows = np.arange(starts[cast], starts[cast + 1])
            rows = rows if self.placed is None else rows[self.placed[rows]]
            code, ordered = way_of_cast(self.depth[rows], **self.thresholds["pressure_increasing"])
            fail.append(rows[code == SPIKE_OF_PRESSURE])
            suspect.append(rows[(code != 0) & (code != SPIKE_OF_PRESSURE)])
            self._tell_way(cast, code, ordered=ordered)
            if not ordered:
                unordered[rows] = True
        none = np.empty(0, np.int64)
        off, lone = (np.concatenate(parts) if parts else none for parts in (suspect, fail))
        if unordered.any():
            judged = ~unordered if judged is None else judged & ~unordered
        for name in names:
            finite = np.isfinite(self.block.values[name])
            self._mark("pressure_increasing", name, judged, off[finite[off]], lone[finite[lone]])
        if off.size or lone.size or unordered.any():
            placed = np.ones(self.size, dtype=bool) if self.placed is None else self.placed.copy()
            placed[off] = placed[lone] = False
            self.placed = placed & ~unordered

    def _tell_way(self, cast: int, code: Flags, *, ordered: bool) -> None:
        if not ordered:
            self._remark(cast, "pressure increasing test: the levels are in no order; not judged")
        counts = [f"{(code == kind).sum()} {words}" for kind, words in _WAY_WORDS.items() if (code == kind).any()]
        if counts:
            self._remark(cast, f"pressure increasing test: suspect are {', '.join(counts)}, of {code.size} levels")
        lone = int((code == SPIKE_OF_PRESSURE).sum())
        if lone:
            self._remark(cast, f"pressure increasing test: fail are {lone} far from both their neighbours")

    # ---- the measured values

    def ranges(self) -> None:
        """Gross range of each column, and which of its levels the next tests compare."""
        for name in MEASURED:
            if name in self.block.values:
                used = self._within(name)
                if self.placed is not None:
                    used = self.placed if used is None else used & self.placed
                self.used[name] = used

    def climatology(self, climatology: Climatology) -> None:
        """Suspect is what lies too many standard deviations from the mean; nothing fails."""
        block = self.block
        places = [np.repeat(column, block.row_size) for column in (block.latitude, block.longitude, block.time)]
        for name in MEASURED:
            if name not in block.values or (not callable(climatology) and name not in climatology):
                continue
            if callable(climatology):
                pair: Any = climatology(name, self.depth, *places)
            else:
                at, *columns = climatology[name]
                pair = [np.interp(self.depth, at, column, left=np.nan, right=np.nan) for column in columns]
            mean, deviation = (np.asarray(part, np.float64) for part in pair)
            if mean.shape != (self.size,) or deviation.shape != (self.size,):
                raise InputError(
                    f"climatology of {name}: mean has shape {mean.shape} and deviation {deviation.shape}; "
                    f"both must be ({self.size},), one for each level"
                )
            away = np.abs(block.values[name] - mean)
            judged = np.isfinite(away) & np.isfinite(deviation)
            far = np.flatnonzero(judged & (away > self.thresholds["climatology"]["deviations"] * deviation))
            self._mark("climatology", name, judged, far, np.empty(0, np.int64))

    def neighbours(self) -> None:
        """Spike, rate of change, flat line and stuck: what a level is beside the next ones."""
        everywhere: _Surroundings | None = None  # most columns have all their levels: the same for each
        for name, used in self.used.items():
            if used is None:
                around = everywhere = everywhere or self._surroundings(None)
            else:
                around = self._surroundings(used)
            values = around.levels.take(self.block.values[name])
            sizes = np.abs(around.levels.steps(values))
            self._beyond_neighbours(name, around, values, sizes)
            self._flat(name, around.levels, sizes, around.depth)

    def _surroundings(self, used: Bools | None) -> _Surroundings:
        levels = Levels.of(used, self.block.starts)
        depth = levels.take(self.depth)
        down = levels.steps(depth)
        near, deep, judged = {}, {}, {}
        for test in _BESIDE:
            limits = self.thresholds[test]
            near[test] = levels.between_near(down, limits["reach"])
            deep[test] = depth > limits["deep"]
            judged[test] = near[test]
            if levels.rows is not None:
                judged[test] = np.zeros(self.size, dtype=bool)
                judged[test][levels.rows[near[test]]] = True
        return _Surroundings(levels, depth, near, deep, judged)

    def _beyond_neighbours(self, name: str, around: _Surroundings, values: Floats, sizes: Floats) -> None:
        for test in _BESIDE:
            above, below = (self.thresholds.of(f"{test}.{part}", name) for part in ("above", "below"))
            if above is None or below is None:
                continue
            if test == "spike":
                at, worst = spikes(values, sizes, around.deep[test], above, below)
            else:
                at = steep(values, sizes, around.deep[test], above, below)
                worst = np.zeros(at.size, dtype=bool)
            near = around.near[test][at]
            suspect, fail = (around.levels.row(at[near & which]) for which in (~worst, worst))
            self._mark(test, name, around.judged[test], suspect, fail)

    def _flat(self, name: str, levels: Levels, sizes: Floats, depth: Floats) -> None:
        """Runs of one value: a flat line where they are many levels and long, stuck where they are the whole cast."""
        line, stuck, counts = self.thresholds["flat_line"], self.thresholds["stuck"], None
        limits = self.thresholds.of("flat_line", name)
        fewest = stuck["levels"] if limits is None else min(stuck["levels"], limits[0])
        found: dict[str, dict[int, list[Rows]]] = {test: {SUSPECT: [], FAIL: []} for test in ("flat_line", "stuck")}
        for first, last in flat_runs(sizes, fewest):
            rows = levels.row(np.arange(first, last + 1))
            length, span = rows.size, float(np.ptp(depth[first : last + 1]))
            cast = int(np.searchsorted(self.block.starts, rows[0], side="right")) - 1
            if counts is None:
                used = self.used[name]
                counts = (
                    self.block.row_size if used is None else np.add.reduceat(used, self.block.starts[:-1], dtype=int)
                )
            if length == counts[cast] and length >= stuck["levels"] and span >= stuck["span"]:
                found["stuck"][FAIL].append(rows)
            elif limits is not None and length >= limits[0] and span >= line["span"]:
                found["flat_line"][FAIL if length >= limits[1] else SUSPECT].append(rows)
        judged = self.used[name]
        for test, parts in found.items():
            if test == "stuck" or limits is not None:
                suspect, fail = (np.concatenate([np.empty(0, np.int64), *parts[flag]]) for flag in (SUSPECT, FAIL))
                self._mark(test, name, judged, suspect, fail)

    def densities(self) -> None:
        """Density inversion, among the levels that have temperature and salinity and no spike in either."""
        pair = ("temperature", "salinity")
        if not all(name in self.used for name in pair):
            return
        used: Bools | None = None
        for name in pair:
            own = self.used[name]
            spiky = [rows for test, of, _, rows in self.found if test == "spike" and of == name]
            if spiky:
                own = np.ones(self.size, dtype=bool) if own is None else own.copy()
                own[np.concatenate(spiky)] = False
            used = own if used is None else used if own is None else used & own
        brine = self.block.values["salinity"] > _SALTIEST
        if brine.any():
            used = ~brine if used is None else used & ~brine
        levels = Levels.of(used, self.block.starts)
        limits = self.thresholds["density_inversion"]
        temperature, salinity = (levels.take(self.block.values[name]) for name in pair)
        at, excess = inversions(levels.take(self.depth), temperature, salinity, levels, limits["suspect"])
        fails = excess > limits["fail"]
        suspect, fail = (np.unique(levels.row(np.concatenate((some, some + 1)))) for some in (at[~fails], at[fails]))
        suspect = np.setdiff1d(suspect, fail)
        for name in pair:
            self._mark("density_inversion", name, used, suspect, fail)

    # ---- all together

    def flags(self) -> dict[str, Flags]:
        """The worst of the source's flag and the tests', for each column."""
        together = {}
        for name, values in self.block.values.items():
            source = self.block.flags.get(name)
            flags = np.full(self.size, NOT_EVALUATED, np.int8) if source is None else source.copy()
            passed = flags == NOT_EVALUATED
            judged = [of[name] == PASS for of in self.levels.values() if name in of]
            passed &= np.logical_or.reduce(judged) if judged else False
            flags[passed] = PASS
            for _, of, flag, rows in self.found:
                if of == name:
                    flags[rows] = np.where(flags[rows] == NOT_EVALUATED, flag, np.maximum(flags[rows], flag))
            if not np.isfinite(values.sum()):
                flags[~np.isfinite(values)] = MISSING
            together[name] = flags
        return together

    def notes(self) -> tuple[tuple[str, ...], ...]:
        """For each cast what was found in it, the count before the particulars."""
        starts = self.block.starts
        said: dict[int, list[str]] = defaultdict(list)
        worst = np.zeros((2, len(self.block)), np.int64)
        for test, name, flag, rows in self.found:
            cast = np.searchsorted(starts, rows, side="right") - 1
            worst[flag - SUSPECT] += np.bincount(cast, minlength=len(self.block))
            if test == "pressure_increasing":
                continue  # told by counts already
            for index in np.unique(cast).tolist():
                levels = np.sort(rows[cast == index] - starts[index]).tolist()
                words = f"{name.replace('_', ' ')} {_WORST[flag]} on {levels_in_words(levels)}"
                said[index].append(f"{test.replace('_', ' ')} test: {words}")
        by = f"checked with the thresholds {self.thresholds.name!r}"
        clean = (f"{by}: nothing found",)
        return tuple(
            clean
            if index not in said and index not in self.remarks
            else (
                f"{by}: {worst[0, index]} times suspect, {worst[1, index]} times fail",
                *self.remarks.get(index, ()),
                *said.get(index, ()),
            )
            for index in range(len(self.block))
        )
