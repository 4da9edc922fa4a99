"""Shadow of refraction: the ranges and depths at which no ray arrives."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING, Any, ClassVar

import numpy as np

from ..errors import InputError
from ..profile import Profile
from . import _kernels, _kernels_shadow
from .medium import Medium, medium

if TYPE_CHECKING:
    import xarray

    from ..section import Section

# The classes of paths in a profile, in the order of the kernels.
CLASSES = ("no_bounce", "surface_bounces")

_MEANING = {
    "no_bounce": "no ray arrives without touching surface or seabed",
    "surface_bounces": "no ray arrives without touching the seabed, surface bounces being allowed",
    "any_bounces": "no ray arrives by any way",
}

CAUTION = (
    "Shadow is not silence: sound still arrives by the seabed, by diffraction and leakage at low frequency, and by "
    "scattering. A shadow zone says only that these rays do not arrive."
)

# Launch angles, degrees, besides all those at which a family of rays ends or a grid depth is just touched: dense where
# rays turn, fold and go far.
FAN = np.concatenate((np.linspace(0.0, 20.0, 4001)[1:], np.linspace(20.0, 90.0, 1401)[1:-1]))
# Relative offset in tan² by which the last ray of a family misses the tangent one.
NEAR_TANGENT = 1e-13
MOST_CYCLES = 5000
# Depths and ranges of the grid where none is given.
GRID = (201, 501)
# Families of rays meet at their common tangent ray but for the offset above: narrower gaps than this, m, are seams, not
# shadow.
SEAM = 0.01


@dataclass(frozen=True, eq=False)
class Shadow:
    """Where no ray arrives: masks over a grid, and intervals of range at each depth of it.

    `masks[class]` is (depths, ranges), True in shadow; `intervals[class]` one array (n, 3) of depth, from, to in
    metres.
    """

    profile: Profile
    source_depth: float
    seabed_depth: float
    max_range: float
    depth: np.ndarray
    range: np.ndarray
    masks: dict[str, np.ndarray]
    intervals: dict[str, np.ndarray]

    CLASSES: ClassVar[tuple[str, ...]] = CLASSES
    TITLE: ClassVar[str] = "Shadow of refraction in one profile"

    def row(self, depth: float) -> int:
        """The place of a depth in the grid.

        Raises
        ------
        InputError
            If it is not a depth of the grid.

        """
        at = np.flatnonzero(np.isclose(self.depth, depth, rtol=0.0, atol=1e-6))
        if not at.size:
            raise InputError(f"depth {depth:g} m is not one of the grid: give it among depths=")
        return int(at[0])

    def reached(self, name: str, depth: float) -> np.ndarray:
        """Ranges, from and to, m, that a class of paths reaches at a depth of the grid: (n, 2)."""
        rows = self.intervals[name]
        dark = rows[rows[:, 0] == self.depth[self.row(depth)], 1:]
        return _complement(depth, dark, self.max_range)[:, 1:]

    def convergence_zones(self, depth: float) -> np.ndarray:
        """Where rays that have not touched the seabed come back to a depth of the grid beyond a shadow.

        Parameters
        ----------
        depth : float
            m.

        Returns
        -------
        numpy.ndarray, shape (n, 3)
            Number of the zone from 1 on, its start and end, m. What is reached directly, before the first shadow, is no
            zone; one that the grid's last range cuts off ends there.

        """
        again = self.reached("surface_bounces", depth)
        again = again[again[:, 0] > 0.0]
        return np.column_stack((np.arange(1.0, len(again) + 1.0), again))

    def summary(self) -> dict[str, float]:
        """The part of the grid that lies in shadow, for each class of paths."""
        return {name: float(mask.mean()) for name, mask in self.masks.items()}

    def to_dataset(self) -> xarray.Dataset:
        """Masks on (`depth`, `range`), and the intervals of both classes in a row on `interval`."""
        import xarray

        from ..files import attributes

        variables: dict[str, Any] = {
            f"shadow_{name}": (
                ("depth", "range"),
                mask.astype(np.int8),
                {
                    "long_name": f"shadow of refraction: {_MEANING[name]}",
                    "flag_values": np.array([0, 1], dtype=np.int8),
                    "flag_meanings": "reached in_shadow",
                },
            )
            for name, mask in self.masks.items()
        }
        names = self.CLASSES
        rows = np.concatenate([self.intervals[name] for name in names])
        kinds = np.repeat(np.arange(len(names), dtype=np.int8), [len(self.intervals[name]) for name in names])
        paths = {
            "long_name": "paths that do not arrive in this interval",
            "flag_values": np.arange(len(names), dtype=np.int8),
            "flag_meanings": " ".join(names),
        }
        variables["interval_paths"] = ("interval", kinds, paths)
        for column, name in enumerate(("depth", "start", "end")):
            about = {"long_name": f"{name} of the shadow interval", "units": "m"}
            variables[f"interval_{name}"] = ("interval", rows[:, column], about)
        zones = [np.insert(self.convergence_zones(depth), 0, depth, axis=1) for depth in self.depth.tolist()]
        for column, (name, unit) in enumerate((("depth", "m"), ("number", "1"), ("start", "m"), ("end", "m"))):
            about = {"long_name": f"{name} of the convergence zone", "units": unit}
            variables[f"convergence_{name}"] = ("zone", np.concatenate(zones)[:, column], about)
        return xarray.Dataset(
            variables,
            coords={
                "depth": ("depth", self.depth, attributes("depth")),
                "range": ("range", self.range, attributes("range")),
            },
            attrs={
                "title": self.TITLE,
                "cast_id": self.profile.id,
                "source_depth_m": self.source_depth,
                "seabed_depth_m": self.seabed_depth,
                "comment": CAUTION,
            },
        )


def find_shadow(
    water: Profile | Section,
    *,
    source_depth: float,
    max_range: float,
    depths: Any = None,
    ranges: Any = None,
    grid: tuple[int, int] = GRID,
    seabed_depth: float | None = None,
    widest: float | None = None,
) -> Shadow:
    """Find shadow zones as `shadow_zones` does, into plain arrays; in a section, into a `SectionShadow`."""
    checked_max_range(max_range)
    if isinstance(water, Profile):
        if widest is not None:
            raise InputError(f"widest is {widest:g}, but goes with a section only: leave it out")
        return _in_profile(water, source_depth, seabed_depth, max_range, (depths, ranges, grid))
    if seabed_depth is not None:
        raise InputError(f"seabed_depth is {seabed_depth:g} m, but a section has a seabed of its own: leave it out")
    from .section_shadow import find_section_shadow

    return find_section_shadow(
        water, source_depth=source_depth, max_range=max_range, depths=depths, ranges=ranges, grid=grid, widest=widest
    )


def checked_max_range(max_range: float) -> None:
    """Raise InputError for a range that is no positive number."""
    if not (np.isfinite(max_range) and max_range > 0.0):
        raise InputError(f"max_range is {max_range:g} m: it must be a positive number of metres")


def _in_profile(
    profile: Profile,
    source_depth: float,
    seabed_depth: float | None,
    max_range: float,
    points: tuple[Any, Any, tuple[int, int]],
) -> Shadow:
    plain = medium(profile, source_depth, seabed_depth=seabed_depth)
    depths, ranges, grid = points
    down = checked_grid("depths", depths, np.linspace(0.0, plain.seabed_depth, grid[0]), plain.seabed_depth)
    across = checked_grid("ranges", ranges, np.linspace(0.0, max_range, grid[1]), max_range)
    water = medium(profile, source_depth, seabed_depth=seabed_depth, levels=down)
    lit = _merge(_intervals(water, down, float(max_range)), down.size, float(max_range))
    masks, intervals = {}, {}
    for name, by_depth in zip(CLASSES, lit, strict=True):
        masks[name] = ~np.array([_covered(across, rows) for rows in by_depth])
        intervals[name] = np.concatenate(
            [_complement(depth, rows, float(max_range)) for depth, rows in zip(down, by_depth, strict=True)]
        )
    return Shadow(
        profile=profile,
        source_depth=water.source_depth,
        seabed_depth=water.seabed_depth,
        max_range=float(max_range),
        depth=down,
        range=across,
        masks=masks,
        intervals=intervals,
    )


def checked_grid(name: str, values: Any, default: np.ndarray, largest: float) -> np.ndarray:
    """The depths or ranges asked for, or the default.

    Raises
    ------
    InputError
        If they do not increase, or leave 0 to the largest.

    """
    grid = default if values is None else np.atleast_1d(np.asarray(values, dtype=float))
    if grid.ndim != 1 or grid.size == 0 or not np.all(np.diff(grid) > 0.0):
        raise InputError(f"{name} must be a list of increasing numbers of metres")
    if not (grid[0] >= 0.0 and grid[-1] <= largest):
        raise InputError(f"{name} go from {grid[0]:g} to {grid[-1]:g} m: they must lie between 0 and {largest:g} m")
    return grid


def _split_counts(side: tuple[np.ndarray, ...]) -> np.ndarray:
    """How many nodes 1..j of a side are speed maxima at which a tangent ray splits."""
    _, _, gradient, _, excess, _, peak, _ = side
    split = np.zeros(excess.size, dtype=np.int64)
    split[1:-1] = (excess[1:-1] >= peak[1:-1]) & (gradient[1:] <= 0.0)
    return np.cumsum(split)


def _launches(water: Medium) -> np.ndarray:
    """tan² of all launch angles: evenly spread, nearly level, and where a ray turns at a node or a family ends."""
    even = np.tan(np.radians(FAN)) ** 2
    parts = [even, np.logspace(-14, np.log10(even[0]), 60)]
    for side in water.sides:
        excess, peak = side[4], side[6]
        record = np.flatnonzero((excess >= peak) & (excess > 0.0))
        counts = _split_counts(side)
        ends = (record == excess.size - 1) | (np.diff(counts, prepend=0)[record] > 0)
        parts += [excess[record[~ends]]]
        parts += [excess[record[ends]] * (1.0 + sign * NEAR_TANGENT) for sign in (-1.0, 1.0)]
    return np.unique(np.concatenate(parts))


def _intervals(water: Medium, grid: np.ndarray, max_range: float) -> np.ndarray:
    """Rows of (class, depth index, from, to) reached, not yet merged."""
    launches = _launches(water)
    below = (grid > water.source_depth) | ((grid == water.source_depth) & (water.seabed_depth > water.source_depth))
    nodes = []
    for which, side in enumerate(water.sides):
        node = np.searchsorted(side[0], np.abs(grid - water.source_depth))
        nodes.append(np.where(below == (which == _kernels.DOWN), node, -1).astype(np.int64))
    crossings = np.full((grid.size, launches.size), np.nan)
    extents = np.empty((2, launches.size))
    families = np.empty((2, launches.size), dtype=np.int64)
    splits = tuple(_split_counts(side) for side in water.sides)
    _kernels_shadow.lay_out(
        launches, water.source_speed, water.sides, water.tables, tuple(nodes), splits, crossings, extents, families
    )
    side_of_depth = np.where(below, _kernels.DOWN, _kernels.UP).astype(np.int64)
    room = 4096
    while True:
        rows = np.empty((room, 4))
        count = _kernels_shadow.reached(crossings, extents, families, side_of_depth, max_range, MOST_CYCLES, rows)
        if count <= room:
            break
        room = count
    # The steepest ray of the fan is not quite vertical: between it and the vertical one all is reached directly.
    steepest = [[kind, d, 0.0, crossings[d, -1]] for kind in range(len(CLASSES)) for d in range(grid.size)]
    found = [rows[:count], np.array(steepest)]
    level = np.flatnonzero(grid == water.source_depth)
    if level.size and all(side[2].size == 0 or side[2][0] >= 0.0 for side in water.sides):
        # A level ray that bends nowhere runs straight ahead at its own depth.
        found.append(np.array([[kind, level[0], 0.0, max_range] for kind in range(len(CLASSES))]))
    return np.concatenate(found)


def _merge(rows: np.ndarray, depths: int, max_range: float) -> list[list[np.ndarray]]:
    """For each class and depth the intervals reached, merged where they overlap, in order, within 0 to max_range."""
    rows = rows[np.lexsort((rows[:, 2], rows[:, 1], rows[:, 0]))]
    merged: list[list[np.ndarray]] = []
    for kind in range(len(CLASSES)):
        of_class = rows[rows[:, 0] == kind]
        cuts = np.searchsorted(of_class[:, 1], np.arange(depths + 1))
        merged.append([_union(of_class[a:b, 2:], max_range) for a, b in pairwise(cuts)])
    return merged


def _union(intervals: np.ndarray, max_range: float) -> np.ndarray:
    """The union of intervals sorted by their start."""
    if not len(intervals):
        return np.empty((0, 2))
    start, end = intervals[:, 0], np.maximum.accumulate(np.minimum(intervals[:, 1], max_range))
    fresh = np.concatenate(([True], start[1:] > end[:-1] + SEAM))
    return np.column_stack((start[fresh], end[np.concatenate((np.flatnonzero(fresh)[1:] - 1, [len(end) - 1]))]))


def _covered(points: np.ndarray, intervals: np.ndarray) -> np.ndarray:
    """Which points lie in one of the disjoint, sorted intervals."""
    which = np.searchsorted(intervals[:, 0], points, side="right") - 1
    inside = which >= 0
    inside[inside] = points[inside] <= intervals[which[inside], 1]
    return inside


def _complement(depth: float, intervals: np.ndarray, max_range: float) -> np.ndarray:
    """Rows of depth, from, to that the intervals leave out."""
    starts = np.concatenate(([0.0], intervals[:, 1]))
    ends = np.concatenate((intervals[:, 0], [max_range]))
    keep = ends > starts
    return np.column_stack((np.full(int(keep.sum()), depth), starts[keep], ends[keep]))


def shadow_zones(
    water: Profile | Section,
    *,
    source_depth: float,
    max_range: float,
    depths: Any = None,
    ranges: Any = None,
    seabed_depth: float | None = None,
    widest: float | None = None,
) -> xarray.Dataset:
    """Find where refraction lets no ray of a source arrive, over range and depth.

    Classes of paths are told apart: rays that touch neither surface nor seabed; rays that may bounce off the surface
    but not off the seabed; and, in a section, any rays. Shadow is not silence: sound also arrives by the seabed, by
    diffraction and by scattering.

    Parameters
    ----------
    water : Profile or Section
        A profile that starts below the surface is extended to it at its first speed. In a section the source is at its
        start.
    source_depth : float
        Depth of the source, m.
    max_range : float
        Farthest range looked at, m.
    depths, ranges : array_like, optional
        The grid, m, increasing; by default 201 depths from surface to seabed and 501 ranges from 0 to `max_range`.
    seabed_depth : float, optional
        Depth of a flat seabed within a profile, m; by default the deepest level is the bottom. A section has its own.
    widest : float, optional
        In a section, how many times as wide as straight rays would have those may have spread that count; 100 where not
        given.

    Returns
    -------
    xarray.Dataset
        `shadow_no_bounce` and `shadow_surface_bounces` on (`depth`, `range`): 1 in shadow, 0 where a ray arrives; and
        the shadow as intervals, dimension `interval`: `interval_paths` (0 no bounce, 1 surface bounces allowed),
        `interval_depth`, `interval_start`, `interval_end` in m. Convergence zones, dimension `zone`: for each depth of
        the grid where rays without seabed bounces come back beyond a shadow, `convergence_depth`,
        `convergence_number` from 1 on, `convergence_start`, `convergence_end`. In a section also `shadow_any_bounces`,
        the value 2 in masks below the seabed, `seabed_depth`, and `latitude` and `longitude` where it has a place.

    Raises
    ------
    InputError
        If an argument is out of its range; the message names it.

    Notes
    -----
    Edges that belong to a ray tangent at a speed maximum, surface or seabed, or turning at a grid depth, are exact for
    the layered profile; edges at a caustic between such rays are as good as a fan with a step of 0.005 degrees finds
    them, second order in the step.

    In a section rays are added to a fan until neighbouring ones leave nothing open between them to a 200th of the
    deepest seabed or the spacing of the depths asked for; intervals end half-way between ranges of the grid. Rays that
    have spread more than `widest` times as wide as straight ones would have (100: 20 dB below spherical spreading)
    count as none, where they have not met the seabed: in smooth water a few rays creep along a maximum of speed and
    leave it anywhere, where a layered profile parts them at once. Rays are followed up to a hundred bounces off
    the seabed, those steeper than 20 degrees up to five.

    Examples
    --------
    Sound speed that falls with depth bends rays down, and a shadow begins where the ray tangent to the surface has
    passed:

    >>> import ocean_sound as sound
    >>> warm = sound.Profile(depth=[0, 100], speed=[1520, 1500])
    >>> zones = sound.shadow_zones(warm, source_depth=20.0, max_range=5000.0, depths=[0.0, 10.0, 20.0])
    >>> [int(zones.shadow_no_bounce.sel(depth=10.0, range=distance)) for distance in (800.0, 5000.0)]
    [0, 1]

    """
    shadow = find_shadow(
        water,
        source_depth=source_depth,
        max_range=max_range,
        depths=depths,
        ranges=ranges,
        seabed_depth=seabed_depth,
        widest=widest,
    )
    return shadow.to_dataset()
