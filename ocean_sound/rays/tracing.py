"""Trace rays through a profile or a section."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from ..profile import Profile
from . import _kernels
from .fan import Fan
from .medium import medium
from .section_tracing import DEPTH_TOLERANCE, TIME_TOLERANCE, trace_section

if TYPE_CHECKING:
    import xarray

    from ..section import Section

# Nothing is heard of a ray that has bounced so often; without an end to it a vertical ray would go on for ever.
MOST_BOUNCES = 10_000
MOST_POINTS = 1_000_000


def even_angles(lowest: float, highest: float, number: int) -> np.ndarray:
    """Launch angles spread evenly from the lowest to the highest, degrees; a single one lies midway.

    Raises
    ------
    InputError
        If the angles are out of order or there is not at least one.

    """
    if number < 1:
        raise InputError(f"{number} rays: at least one is needed")
    if not lowest <= highest:
        raise InputError(f"launch angles from {lowest:g} to {highest:g} degrees: the lowest comes first")
    return np.linspace(lowest, highest, number) if number > 1 else np.array([0.5 * (lowest + highest)])


def trace_fan(
    water: Profile | Section,
    *,
    source_depth: float,
    launch_angles: Any,
    max_range: float,
    points: int = 0,
    seabed_depth: float | None = None,
    max_surface_bounces: int = MOST_BOUNCES,
    max_seabed_bounces: int = MOST_BOUNCES,
    depth_tolerance: float = DEPTH_TOLERANCE,
    time_tolerance: float = TIME_TOLERANCE,
) -> Fan:
    """Trace rays as `trace` does, into plain arrays; through a section, into a `SectionFan`."""
    angles = checked_angles(launch_angles)
    if not (np.isfinite(max_range) and max_range > 0.0):
        raise InputError(f"max_range is {max_range:g} m: it must be a positive number of metres")
    if points != 0 and not 2 <= points <= MOST_POINTS:
        raise InputError(f"points is {points}: it must be 0 (no path) or from 2 to {MOST_POINTS}")
    limits = max_surface_bounces, max_seabed_bounces
    for name, limit in zip(("max_surface_bounces", "max_seabed_bounces"), limits, strict=True):
        if not 0 <= limit <= MOST_BOUNCES:
            raise InputError(f"{name} is {limit}: it must lie between 0 and {MOST_BOUNCES}")
    if isinstance(water, Profile):
        return _trace_profile(water, source_depth, seabed_depth, angles, max_range, points, limits)
    if seabed_depth is not None:
        raise InputError(f"seabed_depth is {seabed_depth:g} m, but a section has a seabed of its own: leave it out")
    return trace_section(
        water,
        source_depth=source_depth,
        angles=angles,
        max_range=max_range,
        points=points,
        limits=limits,
        tolerances=(depth_tolerance, time_tolerance),
    )


def _trace_profile(
    profile: Profile,
    source_depth: float,
    seabed_depth: float | None,
    angles: np.ndarray,
    max_range: float,
    points: int,
    limits: tuple[int, int],
) -> Fan:
    water = medium(profile, source_depth, seabed_depth=seabed_depth)
    values = np.empty((6, angles.size))
    counts = np.empty((4, angles.size), dtype=np.int64)
    paths = np.empty((2, angles.size, points))
    _kernels.trace_fan(
        kernel_array(angles),
        water.source_speed,
        water.source_depth,
        water.sides,
        water.tables,
        float(max_range),
        (float(limits[0]), float(limits[1])),
        values,
        counts,
        paths[0],
        paths[1],
    )
    return Fan(
        profile=profile,
        source_depth=water.source_depth,
        seabed_depth=water.seabed_depth,
        max_range=float(max_range),
        launch_angle=angles,
        range=values[0],
        depth=values[1],
        travel_time=values[2],
        path_length=values[3],
        arrival_angle=values[4],
        travel_time_uncertainty=None if profile.uncertainty is None else values[5],
        turns=counts[0].astype(np.int32),
        surface_bounces=counts[1].astype(np.int32),
        seabed_bounces=counts[2].astype(np.int32),
        status=counts[3].astype(np.int8),
        path_range=paths[0],
        path_depth=paths[1],
    )


def checked_angles(launch_angles: Any) -> np.ndarray:
    """Launch angles as an array.

    Raises
    ------
    InputError
        If one is not between -90 and 90 degrees, or there is none.

    """
    angles = np.atleast_1d(np.asarray(launch_angles, dtype=float))
    if angles.ndim != 1 or angles.size == 0:
        raise InputError(f"launch_angles has the shape {angles.shape}: give one angle or a list of them")
    wrong = np.flatnonzero(~(np.abs(angles) <= 90.0))
    if wrong.size:
        raise InputError(
            f"launch angle {wrong[0]} is {angles[wrong[0]]:g} degrees: "
            "angles are from the horizontal, positive downward, from -90 to 90"
        )
    return angles


def trace(
    water: Profile | Section,
    *,
    source_depth: float,
    launch_angles: Any,
    max_range: float,
    points: int = 0,
    seabed_depth: float | None = None,
    max_surface_bounces: int = MOST_BOUNCES,
    max_seabed_bounces: int = MOST_BOUNCES,
    depth_tolerance: float = DEPTH_TOLERANCE,
    time_tolerance: float = TIME_TOLERANCE,
) -> xarray.Dataset:
    """Trace rays of sound: through a profile by exact arcs of circles, through a section in controlled steps.

    Parameters
    ----------
    water : Profile or Section
        A profile that starts below the surface is extended to it at its first speed. A section is traced from its
        start.
    source_depth : float
        Depth of the source, m.
    launch_angles : float or array_like, shape (rays,)
        Degrees from the horizontal, positive downward, -90 to 90.
    max_range : float
        Horizontal distance at which rays end, m.
    points : int
        Sample each path at so many points, evenly spaced in travel time, both ends among them; 0 for no paths.
    seabed_depth : float, optional
        Depth of a flat seabed within a profile, m; by default the deepest level is the bottom. A section has its own.
    max_surface_bounces, max_seabed_bounces : int
        A ray that would bounce more often ends there instead; 0 ends it at its first touch. At most 10 000.
    depth_tolerance, time_tolerance : float
        Errors, m and s, to aim at where a ray of a section ends; a profile needs none.

    Returns
    -------
    xarray.Dataset
        For each `ray`: `launch_angle` and `arrival_angle` (degrees, positive downward, in the direction of travel),
        `range`, `depth` and `path_length` (m), `travel_time` (s) with `travel_time_uncertainty` (k = 1, where the
        profile has one), `turns` (turning points), `surface_bounces`, `seabed_bounces`, and `status`; with `points`,
        `path_range` and `path_depth` on (`ray`, `point`). Through a section also `caustics` (how often neighbouring
        rays crossed) and `spreading` (m per radian). Status 0: reached the range asked for; 1: tangent at a maximum of
        speed, where a ray splits and has no one path; 2 and 3: stopped at surface or seabed by the limit of bounces;
        4: turned back by a steep seabed; 5: absorbed by the seabed; 6: stuck, touching a boundary along its length or
        in a corner that it does not get out of.

    Raises
    ------
    InputError
        If an argument is out of its range; the message names it.

    Notes
    -----
    End points of the layered model are good to about 1e-9 m and 1e-12 s, also for grazing and vertical rays (backward
    error in launch angle under 1e-14 rad). That is arithmetic, not accuracy: between the levels of a cast the sea is
    not linear. The geometry of rays in constant gradient is in any text; the forms used are derived in `_kernels`.

    Through a section the ray equations and those of a neighbouring ray are integrated in adaptive steps of order 6
    (`_kernels_section`); reflections are located to 1e-9 m, with slope and curvature of the seabed. Where neighbouring
    rays part quickly, as they do after several bounces from a rough seabed, the error grows with `spreading`.

    Examples
    --------
    A ray in a gradient of 0.016 /s turns where the closed form says, at (c0/g)(1/cos - 1):

    >>> import ocean_sound as sound
    >>> deep = sound.Profile(depth=[0, 2000], speed=[1500, 1532])
    >>> rays = sound.trace(deep, source_depth=0, launch_angles=5.0, max_range=8202.062205555)
    >>> round(float(rays.depth[0]), 4), round(float(rays.travel_time[0]), 6)
    (358.1098, 5.46109)

    """
    fan = trace_fan(
        water,
        source_depth=source_depth,
        launch_angles=launch_angles,
        max_range=max_range,
        points=points,
        seabed_depth=seabed_depth,
        max_surface_bounces=max_surface_bounces,
        max_seabed_bounces=max_seabed_bounces,
        depth_tolerance=depth_tolerance,
        time_tolerance=time_tolerance,
    )
    return fan.to_dataset()
