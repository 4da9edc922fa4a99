"""Trace rays through a section: what surrounds the kernels of `_kernels_section`."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, ClassVar

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from . import _kernels_section as kernels
from .fan import Fan

if TYPE_CHECKING:
    from ..section import Section, SpeedField

DEPTH_TOLERANCE, TIME_TOLERANCE = 0.01, 1e-6
"""What the errors of a ray, m and s, are aimed at where the caller does not say."""

_FINEST_TOLERANCE = 1e-9, 1e-13  # below these rounding takes over
_BINS = 512  # of range, with the shallowest seabed in each
_BLOCK = 2000  # rays whose paths are held at once for the uncertainty of their times
_POINTS = 201  # of such a path


@dataclass(frozen=True, eq=False)
class SectionFan(Fan):
    """Rays from one source through a section; see `Fan`. The profile is the water at range 0.

    `caustics` counts where neighbouring rays crossed. `spreading` is how far, across the ray, its end moves with its
    launch angle, m per radian; it changes sign at each caustic. Both are of the vertical plane.
    """

    section: Section
    caustics: np.ndarray
    spreading: np.ndarray
    tolerances: tuple[float, float]

    TITLE: ClassVar[str] = "Rays of sound through a section"

    @property
    def comment(self) -> str:
        """How the numbers came about."""
        return (
            "Ray equations in adaptive steps, aiming at errors of "
            f"{self.tolerances[0]:g} m and {self.tolerances[1]:g} s at the rays' ends."
        )

    def about(self) -> dict[str, Any]:
        """What was traced: the section and the geometry."""
        return {
            "section": repr(self.section).strip("<>"),
            "source_depth": self.source_depth,
            "max_range": self.max_range,
        }

    def columns(self) -> dict[str, np.ndarray]:
        """One column for each thing known of a ray, the status in words."""
        return super().columns() | {"caustics": self.caustics, "spreading": self.spreading}


@dataclass(frozen=True, eq=False)
class Ends:
    """Where rays pass target ranges: arrays (rays, targets); depths and lengths are true ones.

    Status 0 means that the target was reached; else the numbers are those of where the ray ended. `bounces` has for
    each ray and bounce: 1 surface or 2 seabed, range (m), grazing angle (degrees); NaN beyond the last.
    """

    depth: np.ndarray
    range: np.ndarray
    travel_time: np.ndarray
    path_length: np.ndarray
    angle: np.ndarray
    spreading: np.ndarray
    turns: np.ndarray
    surface_bounces: np.ndarray
    seabed_bounces: np.ndarray
    caustics: np.ndarray
    status: np.ndarray
    bounces: np.ndarray
    path_range: np.ndarray
    path_depth: np.ndarray


def floor_of(section: Section) -> tuple[Any, ...]:
    """The seabed as the tracing kernels take it; see `_kernels_section.trace_fan`."""
    seabed = section.flat_seabed
    nodes, depths = seabed.ranges, seabed.depths
    edges = np.linspace(nodes[0], nodes[-1], _BINS + 1)
    at = np.asarray(seabed.depth_at(edges))
    # The curve is monotone between its nodes, so it is shallowest at a node or at an edge of the bin.
    shallowest = np.minimum(at[1:], at[:-1])
    bins = np.clip(np.searchsorted(edges, nodes, side="right") - 1, 0, _BINS - 1)
    for of_node in (bins, np.maximum(bins - (edges[bins] == nodes), 0)):
        np.minimum.at(shallowest, of_node, depths)
    starts = [-np.inf, *(start for start, _ in seabed.kinds[1:]), np.inf]
    absorbing = [starts[i : i + 2] for i, (_, kind) in enumerate(seabed.kinds) if kind is None]
    return (
        kernel_array(nodes),
        seabed.kernel_arrays(),
        kernel_array([nodes[0], _BINS / (nodes[-1] - nodes[0])]),
        kernel_array(shallowest),
        kernel_array(np.array(absorbing, dtype=float).reshape(-1, 2)),
        0.0 if section.radius is None else 1.0 / section.radius,
        kinks_of(section.field),
    )


def kinks_of(field: SpeedField) -> tuple[np.ndarray, np.ndarray]:
    """The greatest jump, 1/m3, of second derivatives of P' at each edge of a field's cells, in depth and in range."""
    powers = field.coefficients.reshape(*field.coefficients.shape[:2], 4, 4)  # of xi, of zeta
    along = np.array([0.0, 0.5, 1.0])[:, None] ** np.arange(4)
    third = 3.0 * np.einsum("ikm,pm->ikp", powers[..., 3], along) / np.diff(field.depths)[:, None] ** 3
    down = np.zeros(field.depths.size)
    down[1:-1] = np.abs(np.diff(third, axis=1)).max(axis=(0, 2))
    across = np.zeros(field.ranges.size)
    if field.varies:
        width = field.ranges[1] - field.ranges[0]
        third = 3.0 * np.einsum("ikn,pn->ikp", powers[:, :, 3, :], along) / width**3
        across[1:-1] = np.abs(np.diff(third, axis=0)).max(axis=(1, 2))
    return kernel_array(down), kernel_array(across)


def checked_source(section: Section, source_depth: float) -> float:
    """The source's depth, m.

    Raises
    ------
    InputError
        If it is not between surface and seabed.

    """
    source, seabed = float(source_depth), float(section.seabed.depth_at(0.0))
    if not 0.0 <= source <= seabed:
        where = "above the surface" if source < 0.0 else "below the seabed"
        where = where if np.isfinite(source) else "no depth"
        raise InputError(f"source depth {source:g} m is {where}: at range 0 it must lie between 0 and {seabed:g} m")
    return source


def checked_tolerances(depth_tolerance: float, time_tolerance: float) -> tuple[float, float]:
    """The tolerances, m and s.

    Raises
    ------
    InputError
        If one is none that arithmetic can keep.

    """
    found = float(depth_tolerance), float(time_tolerance)
    for name, unit, value, least in zip(
        ("depth_tolerance", "time_tolerance"), ("m", "s"), found, _FINEST_TOLERANCE, strict=True
    ):
        if not (least <= value < np.inf):
            raise InputError(f"{name} is {value:g} {unit}: {least:g} {unit} or more would be right")
    return found


def trace_to(
    section: Section,
    source: float,
    angles: np.ndarray,
    targets: Any,
    *,
    limits: tuple[int, int, int],
    tolerances: tuple[float, float] = (DEPTH_TOLERANCE, TIME_TOLERANCE),
    bounces: int = 0,
    points: int = 0,
    floor: tuple[Any, ...] | None = None,
) -> Ends:
    """Trace rays past each of the target ranges (m, increasing); all arguments must have been checked.

    limits: of surface bounces, seabed bounces, and both together. bounces: how many to record of each ray. points: of
    the path to the last target or to where the ray ends, evenly spaced in time; they need one target. floor: that of
    `floor_of`, if it is at hand.
    """
    floor = floor_of(section) if floor is None else floor
    targets = kernel_array(np.atleast_1d(targets))
    angles = kernel_array(angles)
    values = np.empty((angles.size, targets.size, 6))
    numbers = np.empty((angles.size, targets.size, 5), dtype=np.int64)
    record = np.full((angles.size, bounces, 3), np.nan)
    reference = section.field.reference_speed
    for paths in (np.empty((angles.size, 2, count)) for count in ((0, points) if points else (0,))):
        kernels.trace_fan(
            angles,
            kernel_array([0.0, float(section.flat_depth(source))]),
            targets,
            section.field.kernel_arrays(),
            floor,
            (tolerances[0], tolerances[1] * reference),
            tuple(int(limit) for limit in limits),
            values,
            numbers,
            record,
            paths,
        )
    spreading = values[..., 5]
    if section.radius is not None:
        spreading = spreading * np.exp(-values[..., 1] / section.radius)
    return Ends(
        range=values[..., 0],
        depth=np.asarray(section.true_depth(values[..., 1])),
        travel_time=values[..., 2] / reference,
        path_length=values[..., 3],
        angle=values[..., 4],
        spreading=spreading,
        turns=numbers[..., 0].astype(np.int32),
        surface_bounces=numbers[..., 1].astype(np.int32),
        seabed_bounces=numbers[..., 2].astype(np.int32),
        caustics=numbers[..., 3].astype(np.int32),
        status=numbers[..., 4].astype(np.int8),
        bounces=record,
        path_range=paths[:, 0, :],
        path_depth=np.asarray(section.true_depth(paths[:, 1, :])),
    )


def trace_section(
    section: Section,
    *,
    source_depth: float,
    angles: np.ndarray,
    max_range: float,
    points: int,
    limits: tuple[int, int],
    tolerances: tuple[float, float],
) -> SectionFan:
    """Trace a fan through a section, as `trace` does; angles, range, points and limits must have been checked."""
    source = checked_source(section, source_depth)
    checked_range(section, max_range)
    ends = trace_to(
        section,
        source,
        angles,
        max_range,
        limits=(*limits, sum(limits)),
        tolerances=checked_tolerances(*tolerances),
        points=points,
    )
    return SectionFan(
        profile=section.profile_at(0.0),
        section=section,
        source_depth=source,
        seabed_depth=section.seabed.deepest,
        max_range=float(max_range),
        launch_angle=angles,
        range=ends.range[:, 0],
        depth=ends.depth[:, 0],
        travel_time=ends.travel_time[:, 0],
        path_length=ends.path_length[:, 0],
        arrival_angle=ends.angle[:, 0],
        travel_time_uncertainty=path_uncertainty(section, source, angles, ends, (*limits, sum(limits))),
        turns=ends.turns[:, 0],
        surface_bounces=ends.surface_bounces[:, 0],
        seabed_bounces=ends.seabed_bounces[:, 0],
        caustics=ends.caustics[:, 0],
        spreading=ends.spreading[:, 0],
        status=ends.status[:, 0],
        path_range=ends.path_range,
        path_depth=ends.path_depth,
        tolerances=tolerances,
    )


def checked_range(section: Section, max_range: float) -> None:
    """Raise InputError for a range that the section does not reach."""
    if max_range > section.max_range * (1.0 + 1e-12):
        raise InputError(
            f"range {max_range:g} m is beyond the section, which reaches {section.max_range:g} m: "
            "a range within it, or a longer section, would be right"
        )


def path_uncertainty(
    section: Section, source: float, angles: np.ndarray, ends: Ends, limits: tuple[int, int, int]
) -> np.ndarray | None:
    """Standard uncertainty of the travel times, s: that of speed as one shape, along paths to their ends."""
    if not any(profile.uncertainty is not None for profile in section.profiles):
        return None
    found = np.empty(angles.size)
    for start in range(0, angles.size, _BLOCK):
        rays = slice(start, start + _BLOCK)
        paths = trace_to(section, source, angles[rays], ends.range[:, 0].max(), limits=limits, points=_POINTS)
        x, z = paths.path_range, np.clip(paths.path_depth, 0.0, section.deepest)
        relative = section.uncertainty_at(x, z) / section.speed_at(x, z)
        found[rays] = paths.travel_time[:, 0] * 0.5 * (relative[:, 1:] + relative[:, :-1]).mean(axis=1)
    return found
