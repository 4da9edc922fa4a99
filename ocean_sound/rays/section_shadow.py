"""Shadow in a section: where no ray arrives, with the water and the seabed that change along the track."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, ClassVar

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from . import _kernels_section_shadow as kernels
from .section_tracing import checked_range, checked_source, trace_to
from .shadow import GRID, Shadow, checked_grid, checked_max_range

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray

    from ..section import Section
    from .section_tracing import Ends

# Launch angles to begin with, degrees; further ones are put in between where they are needed.
STEEPEST, STEEP = 89.9, 20.0
_FLAT_RAYS, _STEEP_RAYS = 161, 40
# Rays that have spread more than so many times as wide as straight ones (20 dB below spherical spreading) count as
# none: in smooth water a few of the rays that creep along a maximum of speed leave it at any range.
WIDEST = 100.0
# The detail of depth wanted, as a part of the deepest seabed, where the grid itself is coarser.
_DETAIL = 1.0 / 200.0
MOST_RAYS = 20_000
# How often rays may meet the seabed: steep ones soon have been everywhere, and cost the most.
SEABED_BOUNCES, STEEP_BOUNCES = 100, 5
_BLOCK = 400  # rays traced at once
# What errors of depth and time to aim at, m and s: closely, since in water with sharp corners the aim may be missed.
_TOLERANCES = 1e-4, 1e-8
_NEVER = 1_000_000_000


@dataclass(frozen=True, eq=False)
class SectionShadow(Shadow):
    """Where no ray arrives in a section; see `Shadow`. The profile is the water at range 0.

    Masks are of the points of the grid and False below the seabed, where `water` is False; intervals end half-way
    between points of the grid. `rays` were traced; `unsettled` pairs of them would have needed more in between.
    """

    section: Section
    water: np.ndarray
    rays: int
    unsettled: int

    CLASSES: ClassVar[tuple[str, ...]] = ("no_bounce", "surface_bounces", "any_bounces")
    TITLE: ClassVar[str] = "Shadow of refraction in a section"

    def summary(self) -> dict[str, float]:
        """The part of the water on the grid that lies in shadow, for each class of paths."""
        return {name: float(mask[self.water].mean()) for name, mask in self.masks.items()}

    def reached(self, name: str, depth: float) -> np.ndarray:
        """Ranges, from and to, m, that a class of paths reaches at a depth of the grid: (n, 2)."""
        row = self.row(depth)
        return _runs(self.range, self.water[row] & ~self.masks[name][row])

    def to_dataset(self) -> xarray.Dataset:
        """As `Shadow.to_dataset`; masks have the value 2 below the seabed, and `seabed_depth` stands on `range`."""
        from ..files import attributes

        zones = super().to_dataset()
        for name in self.CLASSES:
            mask = zones[f"shadow_{name}"]
            mask.values[~self.water] = 2
            mask.attrs.update(
                flag_values=np.array([0, 1, 2], dtype=np.int8), flag_meanings="reached in_shadow below_seabed"
            )
        depths = np.asarray(self.section.seabed.depth_at(self.range))
        zones["seabed_depth"] = ("range", depths, attributes("seabed_depth"))
        if self.section.track is not None:
            for name, values in zip(("latitude", "longitude"), self.section.track.at(self.range), strict=True):
                zones[name] = ("range", values, attributes(name))
        del zones.attrs["seabed_depth_m"]
        return zones.assign_attrs(section=repr(self.section).strip("<>"), rays=self.rays)

    def to_geojson(self, depths: Sequence[float] | None = None) -> dict[str, Any]:
        """Shadow and convergence zones as GeoJSON (RFC 7946): lines along the track, for a section with a place.

        Parameters
        ----------
        depths : sequence of float, optional
            Depths of the grid, m, for each of which the stretches of the track in shadow and the convergence zones are
            given; none where not given.

        Returns
        -------
        dict
            A FeatureCollection. First each connected zone of shadow, as the line above it with the depths that it
            spans; then for each depth asked for its intervals. Lines that cross 180 degrees are split there.

        Raises
        ------
        InputError
            If the section has no place on the Earth, or a depth is not of the grid.

        """
        from scipy.ndimage import label

        from ..files.geojson import collection

        if self.section.track is None:
            raise InputError("the section has no place on the Earth: one of casts with positions, or along a line of a "
                             "grid, can be drawn on a map")  # fmt: skip
        features = []
        for name in self.CLASSES:
            zones, count = label(self.masks[name], structure=np.ones((3, 3)))
            for number in range(1, count + 1):
                rows, columns = np.nonzero(zones == number)
                start, end = _edges(self.range)[[columns.min(), columns.max() + 1]]
                if end > start:
                    features.append(
                        self._feature("shadow_zone", name, start, end,
                                      shallowest=self.depth[rows.min()], deepest=self.depth[rows.max()])
                    )  # fmt: skip
        for depth in [] if depths is None else depths:
            row = self.row(depth)
            for name in self.CLASSES:
                for start, end in _runs(self.range, self.masks[name][row]):
                    features.append(self._feature("shadow", name, start, end, depth=self.depth[row]))
            for number, start, end in self.convergence_zones(depth):
                features.append(
                    self._feature("convergence_zone", "surface_bounces", start, end, depth=self.depth[row],
                                  number=int(number))
                )  # fmt: skip
        return collection(features)

    def _feature(self, kind: str, paths: str, start: float, end: float, **more: float) -> dict[str, Any]:
        from ..files.geojson import line

        track = self.section.track
        if track is None:
            raise InputError("the section has no place on the Earth")
        inner = track.ranges[(track.ranges > start) & (track.ranges < end)]
        # Geodesics bend on a map: a point every 10 km at least.
        even = np.linspace(start, end, max(2, int(np.ceil((end - start) / 10_000.0)) + 1))
        latitude, longitude = track.at(np.unique(np.concatenate((even, inner))))
        about = {"kind": kind, "paths": paths, "range_start": start, "range_end": end, **more}
        return line(latitude, longitude, {key: _plain(value) for key, value in about.items()})


def find_section_shadow(
    section: Section,
    *,
    source_depth: float,
    max_range: float,
    depths: Any = None,
    ranges: Any = None,
    grid: tuple[int, int] = GRID,
    max_seabed_bounces: int = SEABED_BOUNCES,
    widest: float | None = None,
) -> SectionShadow:
    """Find the shadow in a section, as `shadow_zones` does, into plain arrays."""
    checked_max_range(max_range)
    checked_range(section, max_range)
    source = checked_source(section, source_depth)
    widest = WIDEST if widest is None else float(widest)
    if not 1.0 <= widest < np.inf:
        raise InputError(f"widest is {widest:g}: a number from 1 on would be right, by default {WIDEST:g}")
    if not 0 <= max_seabed_bounces <= MOST_RAYS:
        raise InputError(f"max_seabed_bounces is {max_seabed_bounces}: it must lie between 0 and {MOST_RAYS}")
    deepest = float(np.max(section.seabed.depth_at(np.linspace(0.0, max_range, 1001))))
    down = checked_grid("depths", depths, np.linspace(0.0, deepest, grid[0]), section.seabed.deepest)
    across = checked_grid("ranges", ranges, np.linspace(0.0, max_range, grid[1]), max_range)
    bottoms = np.asarray(section.seabed.depth_at(across), dtype=float).reshape(across.shape)
    water = down[:, None] <= bottoms + 1e-6
    ahead = across > 0.0
    fan = _Bundle(section, source, across[ahead], down, (max_seabed_bounces, widest))
    lit = np.ones((len(SectionShadow.CLASSES), down.size, across.size), dtype=bool)  # the vertical rays, at range 0
    if ahead.any():
        fan.refine()
        lit[:, :, ahead] = fan.lit(down, bottoms[ahead])
    masks = {name: water & ~reached for name, reached in zip(SectionShadow.CLASSES, lit, strict=True)}
    intervals = {
        name: np.concatenate(
            [np.insert(_runs(across, row), 0, depth, axis=1) for depth, row in zip(down, mask, strict=True)]
        )
        for name, mask in masks.items()
    }
    return SectionShadow(
        profile=section.profile_at(0.0),
        source_depth=source,
        seabed_depth=section.seabed.deepest,
        max_range=float(max_range),
        depth=down,
        range=across,
        masks=masks,
        intervals=intervals,
        section=section,
        water=water,
        rays=fan.angle.size,
        unsettled=fan.unsettled,
    )


class _Bundle:
    """Rays sorted by launch angle, with what is known of each at each range of the grid."""

    def __init__(
        self, section: Section, source: float, targets: np.ndarray, grid: np.ndarray, limits: tuple[int, float]
    ) -> None:
        self.section, self.source = section, source
        self.most_bounces, self.widest = limits
        self.targets = kernel_array(targets)
        spacing = np.diff(grid).min() if grid.size > 1 else np.inf
        self.cell = float(min(spacing, section.seabed.deepest * _DETAIL))
        self.finest = self.cell / (self.widest * float(targets[-1])) if targets.size else 1.0
        self.unsettled = 0
        self.angle = np.empty(0)  # rad
        self.depth, self.slope = np.empty((0, targets.size)), np.empty((0, targets.size))
        self.bounced = np.empty((2, 0, targets.size), dtype=np.int32)
        self.until = np.empty((3, 0), dtype=np.int64)
        self.why = np.empty((3, 0), dtype=np.int64)

    def refine(self) -> None:
        """Trace the first fan, and further rays where neighbours leave anything open."""
        steep = np.linspace(STEEP, STEEPEST, _STEEP_RAYS + 1)[1:]
        self._add(np.radians(np.concatenate((-steep[::-1], np.linspace(-STEEP, STEEP, _FLAT_RAYS), steep))))
        open_pairs = np.arange(self.angle.size - 1)
        while True:
            open_pairs = open_pairs[self._judged(open_pairs)]
            room = MOST_RAYS - self.angle.size
            self.unsettled = max(0, open_pairs.size - room)
            # Where there is no room for all the widest gaps come first.
            width = self.angle[open_pairs + 1] - self.angle[open_pairs]
            open_pairs = np.sort(open_pairs[np.argsort(-width, kind="stable")[:room]])
            if not open_pairs.size:
                return
            middle = 0.5 * (self.angle[open_pairs] + self.angle[open_pairs + 1])
            self._add(middle)
            at = np.searchsorted(self.angle, middle)
            open_pairs = np.unique(np.concatenate((at - 1, at)))

    def lit(self, grid: np.ndarray, bottoms: np.ndarray) -> np.ndarray:
        """What each class of paths reaches: (classes, depths, ranges)."""
        change = np.zeros((3, self.targets.size, grid.size + 1), dtype=np.int64)
        kernels.fill(
            self.angle, self.depth, self.bounced, self.until, self.why, self.targets, kernel_array(bottoms),
            kernel_array(grid), self.cell, self.widest, change,
        )  # fmt: skip
        return np.cumsum(change, axis=2)[:, :, :-1].transpose(0, 2, 1) > 0

    def _judged(self, pairs: np.ndarray) -> np.ndarray:
        """Which of the pairs (i, i + 1) need a ray in between."""
        found = np.empty(pairs.size, dtype=np.bool_)
        kernels.judge(
            pairs, self.angle, self.depth, self.slope, self.until, self.why, self.targets, self.cell, self.widest,
            self.finest, found,
        )  # fmt: skip
        return found

    def _add(self, angles: np.ndarray) -> None:
        parts = [self._traced(angles[start : start + _BLOCK]) for start in range(0, angles.size, _BLOCK)]
        order = np.argsort(np.concatenate((self.angle, angles)), kind="stable")
        self.angle = np.concatenate((self.angle, angles))[order]
        names = ("depth", 0), ("slope", 0), ("bounced", 1), ("until", 1), ("why", 1)
        for (name, axis), pieces in zip(names, zip(*parts, strict=True), strict=True):
            joined = np.concatenate((getattr(self, name), *pieces), axis=axis)
            setattr(self, name, np.ascontiguousarray(np.take(joined, order, axis=axis)))

    def _traced(self, angles: np.ndarray) -> tuple[np.ndarray, ...]:
        """What is kept of rays of increasing angles; the steep ones have a limit of their own."""
        cuts = [0, *np.searchsorted(angles, np.radians([-STEEP, STEEP])).tolist(), angles.size]
        limits = STEEP_BOUNCES, self.most_bounces, STEEP_BOUNCES
        parts = [
            self._kept(angles[first:last], min(limit, self.most_bounces))
            for first, last, limit in zip(cuts[:-1], cuts[1:], limits, strict=True)
            if last > first
        ]
        axes = 0, 0, 1, 1, 1
        return tuple(
            np.concatenate(pieces, axis=axis) for pieces, axis in zip(zip(*parts, strict=True), axes, strict=True)
        )

    def _kept(self, angles: np.ndarray, bounces: int) -> tuple[np.ndarray, ...]:
        ends = trace_to(
            self.section, self.source, np.degrees(angles), self.targets, limits=(_NEVER, bounces, _NEVER),
            tolerances=_TOLERANCES,
        )  # fmt: skip
        odd = (ends.surface_bounces + ends.seabed_bounces) % 2
        cosine = np.maximum(np.abs(np.cos(np.radians(ends.angle))), 1e-6)
        slope = np.where(odd, -1.0, 1.0) * ends.spreading / cosine
        until, why = np.empty((3, angles.size), dtype=np.int64), np.empty((3, angles.size), dtype=np.int64)
        for c, kind in enumerate(_kinds(ends)):
            until[c] = np.where((kind >= 0).any(axis=1), np.argmax(kind >= 0, axis=1), self.targets.size)
            at = np.minimum(until[c], self.targets.size - 1)
            why[c] = np.where(until[c] < self.targets.size, kind[np.arange(angles.size), at], kernels.UNKNOWN)
        return ends.depth, slope, np.stack((ends.surface_bounces, ends.seabed_bounces)), until, why


def _kinds(ends: Ends) -> list[np.ndarray]:
    """For each class of paths, -1 where a ray belongs to it, else what it touched that the class forbids."""
    from ._kernels_section import ABSORBED, TURNED_BACK

    over = ends.status != 0
    at_seabed = (ends.status == ABSORBED) | (ends.status == TURNED_BACK)
    touched_surface, touched_seabed = ends.surface_bounces > 0, (ends.seabed_bounces > 0) | at_seabed
    by_limit = np.where(np.isin(ends.status, (ABSORBED, TURNED_BACK)), kernels.SEABED, kernels.LIMIT)
    ended = np.where(over, by_limit, -1)
    seabed = np.where(touched_seabed, kernels.SEABED, ended)
    either = np.where(touched_surface & touched_seabed, kernels.UNKNOWN, np.where(touched_surface, 1, seabed))
    return [either, seabed, ended]


def _edges(points: np.ndarray) -> np.ndarray:
    """Half-way between points, and the points at both ends."""
    return np.concatenate((points[:1], 0.5 * (points[1:] + points[:-1]), points[-1:]))


def _runs(points: np.ndarray, mask: np.ndarray) -> np.ndarray:
    """From and to of each run of True over points, ending half-way to the next one: (n, 2)."""
    change = np.diff(np.concatenate(([0], mask.astype(np.int8), [0])))
    edges = _edges(points)
    return np.column_stack((edges[np.flatnonzero(change == 1)], edges[np.flatnonzero(change == -1)]))


def _plain(value: Any) -> Any:
    return round(float(value), 3) if isinstance(value, float | np.floating) else value
