"""Direct rays between two depths of one profile: time, and how it changes with place and with the sound speed.

A ray that refraction alone has bent, without surface or seabed, and of several the one that comes first. By Fermat's
principle small changes of the path do not change its time: with both ends fixed, an error dc of the sound speed changes
it by the integral of -dc/c over the time along the unchanged path.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from ..profile import Profile
from ..rays import find_arrivals, trace_fan

if TYPE_CHECKING:
    from collections.abc import Iterable

    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

_INSIDE = 1e-3  # m: so far within the water an end is sought that lies on the surface or the seabed
_NEAREST = 1e-3  # m: a shorter range is taken as this
_STEEP = 1e-3  # share of the height: at a shorter range the ray is so steep that its first terms are enough
# Degrees: all that leave; finer near the horizontal, where rays turn and cross.
_HALF = np.concatenate((
    np.arange(0.1, 20.0, 0.1), np.arange(20.0, 60.0, 0.5), np.arange(60.0, 90.0, 2.0), [89.9, 89.99],
))  # fmt: skip
_ALL = np.concatenate((-_HALF[::-1], [0.0], _HALF))
_AROUND = np.linspace(-2.0, 2.0, 9)  # degrees about a ray that is nearly known
_FIRST_NODES, _HALVINGS, _EDGE = 17, 7, 3  # of a table, and of the edge of a shadow in it
_ALIKE = 20.0  # degrees
_POINTS = 513  # along a path, evenly in time, over which sound speed is averaged


@dataclass(frozen=True, eq=False)
class DirectRays:
    """Direct rays to several ranges; NaN where none comes. Angles as everywhere, from the source on.

    Parameters
    ----------
    range : numpy.ndarray, shape (n,)
        m.
    time : numpy.ndarray
        s, one way.
    along : numpy.ndarray
        Change of the time with the range, s/m.
    down : numpy.ndarray
        Change of the time with the depth of the receiver, s/m.
    launch_angle, arrival_angle : numpy.ndarray
        Degrees.
    by_level : numpy.ndarray, shape (n, levels)
        Change of the time with the sound speed at each level of the profile carried up to the surface, s per m/s.
    """

    range: Floats
    time: Floats
    along: Floats
    down: Floats
    launch_angle: Floats
    arrival_angle: Floats
    by_level: Floats

    def __getitem__(self, chosen: NDArray[np.intp]) -> DirectRays:
        return DirectRays(*(getattr(self, f.name)[chosen] for f in fields(self)))


def joined(rays: Iterable[DirectRays]) -> DirectRays:
    """Rays one after the other."""
    every = list(rays)
    return DirectRays(*(np.concatenate([getattr(ray, f.name) for ray in every]) for f in fields(DirectRays)))


@dataclass(frozen=True, eq=False)
class Direct:
    """What finds direct rays from one depth to another.

    Parameters
    ----------
    water : Profile
    source_depth, receiver_depth : float
        m.

    Raises
    ------
    InputError
        If the water is no profile or a depth is not in it.
    """

    water: Profile
    source_depth: float
    receiver_depth: float

    def __post_init__(self) -> None:
        if not isinstance(self.water, Profile):
            raise InputError(f"water is a {type(self.water).__name__}: ranging takes one profile, such as a cast's")
        deepest = float(self.column.depth[-1])
        for name, depth in (("source", self.source_depth), ("receiver", self.receiver_depth)):
            if not 0.0 <= depth <= deepest:
                raise InputError(f"{name} depth is {depth:g} m: 0 to {deepest:g} m, within the profile, would be right")

    @cached_property
    def column(self) -> Profile:
        """The profile from the surface down."""
        return self.water.to_surface()

    @cached_property
    def height(self) -> float:
        """Between the two depths, m."""
        return abs(self.receiver_depth - self.source_depth)

    @cached_property
    def mean_speed(self) -> float:
        """Harmonic mean between the two depths, m/s; at one depth the speed there."""
        return float(self.column.harmonic_mean_speed(self.source_depth, self.receiver_depth))

    @cached_property
    def shortest(self) -> float:
        """Time straight up or down, s."""
        return float(self.column.travel_time(self.source_depth, self.receiver_depth))

    @cached_property
    def _ends(self) -> tuple[float, float]:
        """Both depths off surface and seabed, where each ray about would be a reflected one."""
        deepest = float(self.column.depth[-1])
        inside = np.clip((self.source_depth, self.receiver_depth), _INSIDE, deepest - _INSIDE)
        return float(inside[0]), float(inside[1])

    def at(self, ranges: ArrayLike, *, near: ArrayLike = np.nan) -> DirectRays:
        """The rays to these ranges.

        Parameters
        ----------
        ranges : array_like, shape (n,)
            m, 0 or more.
        near : array_like
            Launch angles near which to look first, degrees, NaN for none. All are looked through where none is there.
        """
        x = np.maximum(np.atleast_1d(np.asarray(ranges, dtype=np.float64)), _NEAREST)
        # A ray that turns leaves within some 25 degrees of the horizontal (the sea's speeds differ by less than 10 %):
        # at a range below the height there is one ray, about as steep as a straight line.
        straight = np.degrees(np.arctan2(self.receiver_depth - self.source_depth, x))
        guesses = np.where(np.isnan(near) & (x < self.height), straight, near)
        parts = np.full((5, x.size), np.nan)
        by_level = np.full((x.size, self.column.depth.size), np.nan)
        speeds = [float(self.column.at(depth)) for depth in (self.source_depth, self.receiver_depth)]
        for i, (distance, guess) in enumerate(zip(x.tolist(), guesses.tolist(), strict=True)):
            if distance < _STEEP * self.height:
                found = self._steep(distance, speeds)
            else:
                first = self._first(distance, guess)
                if first is None:
                    continue
                found = first
            angle = np.radians(found[2])
            parts[:, i] = found[0], np.cos(angle) / speeds[1], np.sin(angle) / speeds[1], *found[1:]
            by_level[i] = self._by_level(distance, *found[:2])
        time, along, down, launched, arrived = parts
        return DirectRays(x, time, along, down, launched, arrived, by_level)

    def _steep(self, distance: float, speeds: list[float]) -> tuple[float, float, float]:
        """A ray nearly straight up or down: range = p times the integral of c, time = shortest + p range/2."""
        slowness = distance / (self.column.mean_speed(self.source_depth, self.receiver_depth) * self.height)
        sign = np.sign(self.receiver_depth - self.source_depth)
        launch, arrival = (float(sign * np.degrees(np.arccos(slowness * speed))) for speed in speeds)
        return self.shortest + 0.5 * slowness * distance, launch, arrival

    def _first(self, distance: float, near: float) -> tuple[float, float, float] | None:
        """Time, launch and arrival angle of the ray that comes first."""
        fans = [] if np.isnan(near) else [np.clip(near + _AROUND, _ALL[0], _ALL[-1])]
        for angles in [*fans, _ALL]:
            found = find_arrivals(
                self.water, source_depth=self._ends[0], receiver_depth=self._ends[1], receiver_range=distance,
                max_bounces=0, launch_angles=angles,
            )  # fmt: skip
            if len(found):
                time, launch, arrival = (
                    float(values[0]) for values in (found.travel_time, found.launch_angle, found.arrival_angle)
                )
                # from where ends were put to where they are
                for angle, end in ((launch, 0), (arrival, 1)):
                    depth = (self.source_depth, self.receiver_depth)[end]
                    moved = (2 * end - 1) * (depth - self._ends[end])
                    time += float(np.sin(np.radians(angle)) / self.column.at(depth)) * moved
                return time, launch, arrival
        return None

    def _by_level(self, distance: float, time: float, launch: float) -> Floats:
        """Minus the integral of each level's share in 1/c over the time."""
        steep = distance < _STEEP * self.height
        z = np.linspace(*self._ends, _POINTS) if steep else self._path(distance, launch)
        depth = self.column.depth
        level = np.clip(np.searchsorted(depth, z, side="right") - 1, 0, depth.size - 2)
        lower = (z - depth[level]) / (depth[level + 1] - depth[level])
        speed = np.interp(z, depth, self.column.speed)
        # evenly in depth the time goes by the slowness
        each = 1.0 / speed if steep else np.ones(z.size)
        each[[0, -1]] *= 0.5
        each *= time / each.sum() / speed
        upper, under = (1.0 - lower) * each, lower * each
        found: Floats = np.zeros(depth.size)
        np.subtract.at(found, level, upper)
        np.subtract.at(found, level + 1, under)
        return found

    def _path(self, distance: float, launch: float) -> Floats:
        """Depths along the ray, evenly in time."""
        fan = trace_fan(
            self.water, source_depth=self._ends[0], launch_angles=launch, max_range=distance, points=_POINTS
        )
        depths: Floats = fan.path_depth[0]
        return depths


class Tabulated:
    """Direct rays over range from a table: cubics by time and slowness, halved until they hold.

    Parameters
    ----------
    direct : Direct
    max_range : float
        m.
    tolerance : float
        s, of the time midway between the nodes.

    Notes
    -----
    Where no ray comes to one of two neighbouring nodes, or cubics do not hold on the narrowest step (where one ray is
    overtaken by another), each range is found by itself.
    """

    def __init__(self, direct: Direct, max_range: float, *, tolerance: float = 1e-7) -> None:
        self.direct = direct
        nodes = direct.at(np.linspace(0.0, max_range, _FIRST_NODES))
        held = np.zeros(_FIRST_NODES - 1, dtype=bool)
        for step in range(_HALVINGS):
            ask = np.flatnonzero(~held)
            if not ask.size:
                break
            middle = 0.5 * (nodes.range[ask] + nodes.range[ask + 1])
            exact = direct.at(middle, near=_launch_between(direct, nodes, ask, middle))
            guess = _cubic(nodes, ask, middle)
            lit = np.isfinite(nodes.time[ask]) & np.isfinite(nodes.time[ask + 1])
            good = lit & (np.abs(guess - exact.time) <= tolerance)
            # where all is dark nothing is to be held
            dark = np.isnan(nodes.time[ask]) & np.isnan(nodes.time[ask + 1]) & np.isnan(exact.time)
            # nor is the edge of a shadow sought beyond need
            held[ask] = good | dark | (~lit & (step >= _EDGE))
            nodes, held = _halved(nodes, exact, held, ask)
        self.nodes, self.held = nodes, held & np.isfinite(nodes.time[1:]) & np.isfinite(nodes.time[:-1])

    def at(self, ranges: ArrayLike, *, near: ArrayLike = np.nan) -> DirectRays:
        """The rays to these ranges, as `Direct.at` gives them."""
        x = np.maximum(np.atleast_1d(np.asarray(ranges, dtype=np.float64)), _NEAREST)
        nodes = self.nodes
        cell = np.clip(np.searchsorted(nodes.range, x, side="right") - 1, 0, nodes.range.size - 2)
        part = (x - nodes.range[cell]) / (nodes.range[cell + 1] - nodes.range[cell])

        def between(values: Floats) -> Floats:
            share = part if values.ndim == 1 else part[:, None]
            mixed: Floats = values[cell] * (1.0 - share) + values[cell + 1] * share
            return mixed

        time, along = _cubic(nodes, cell, x), _slope(nodes, cell, x)
        rest = [between(getattr(nodes, f.name)) for f in fields(DirectRays)[3:]]
        found = [x, time, along, *rest]
        alone = np.flatnonzero(~self.held[cell] | (x > nodes.range[-1]))
        if alone.size:
            exact = self.direct.at(x[alone], near=np.broadcast_to(near, x.shape)[alone])
            for values, f in zip(found, fields(DirectRays), strict=True):
                values[alone] = getattr(exact, f.name)
        return DirectRays(*found)


def _shape(nodes: DirectRays, cell: NDArray[np.intp], x: Floats) -> tuple[Floats, ...]:
    a, b = nodes.range[cell], nodes.range[cell + 1]
    step = b - a
    return (x - a) / step, step, nodes.time[cell], nodes.time[cell + 1], nodes.along[cell], nodes.along[cell + 1]


def _cubic(nodes: DirectRays, cell: NDArray[np.intp], x: Floats) -> Floats:
    """Hermite's cubic through times and their slopes."""
    s, step, left, right, rise, fall = _shape(nodes, cell, x)
    found: Floats = (
        (1.0 + 2.0 * s) * (1.0 - s) ** 2 * left + s * s * (3.0 - 2.0 * s) * right
        + step * (s * (1.0 - s) ** 2 * rise - s * s * (1.0 - s) * fall)
    )  # fmt: skip
    return found


def _slope(nodes: DirectRays, cell: NDArray[np.intp], x: Floats) -> Floats:
    """Its slope."""
    s, step, left, right, rise, fall = _shape(nodes, cell, x)
    found: Floats = (
        6.0 * s * (1.0 - s) * (right - left) / step + (1.0 - s) * (1.0 - 3.0 * s) * rise + s * (3.0 * s - 2.0) * fall
    )
    return found


def _launch_between(direct: Direct, nodes: DirectRays, cell: NDArray[np.intp], x: Floats) -> Floats:
    """About how the ray leaves between two that are alike; NaN between others."""
    ends = nodes.launch_angle[cell], nodes.launch_angle[cell + 1]
    alike = np.abs(ends[1] - ends[0]) < _ALIKE
    speed = float(direct.column.at(direct.source_depth))
    with np.errstate(invalid="ignore"):
        angle = np.degrees(np.arccos(np.clip(_slope(nodes, cell, x) * speed, -1.0, 1.0)))
    # near the horizontal the cosine says too little
    flat = np.abs(ends[1] - ends[0]) < _AROUND[-1]
    guess = np.where(flat, 0.5 * (ends[0] + ends[1]), np.sign(ends[0]) * angle)
    return np.where(alike, guess, np.nan)


def _halved(
    nodes: DirectRays, more: DirectRays, held: NDArray[np.bool_], ask: NDArray[np.intp]
) -> tuple[DirectRays, NDArray[np.bool_]]:
    """Nodes with those in between, and which of the steps hold now."""
    both = DirectRays(*(np.concatenate((getattr(nodes, f.name), getattr(more, f.name))) for f in fields(DirectRays)))
    ordered = both[np.argsort(both.range, kind="stable")]
    halves = np.ones(held.size, dtype=np.intp)
    halves[ask] = 2
    return ordered, np.repeat(held, halves)
