"""Ranges from travel times along rays, for transponders and moored sources, and how far a straight line would err."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .direct import Direct, joined
from .timing import Timing

if TYPE_CHECKING:
    import xarray
    from numpy.typing import ArrayLike, NDArray

    from ..profile import Profile
    from .direct import DirectRays

    Floats = NDArray[np.float64]

_ARRIVED = 1e-10  # s: as near as the range is sought
_STEPS = 60
_EARLIER = 1e-9  # s: by which another ray must be ahead to be taken instead


def speed_errors(direct: Direct, rays: DirectRays) -> Floats:
    """Errors of the time from one standard error of each cause in the sound speed, s: (causes, n)."""
    shapes = list(direct.column.shapes.values())
    return np.array([_weighed(rays, shape).sum(axis=-1) for shape in shapes]).reshape(len(shapes), rays.time.size)


def speed_noise(direct: Direct, rays: DirectRays) -> Floats:
    """Errors of the time from one standard error of the noise at each level, s: (n, levels)."""
    noise = direct.column.noise
    return np.zeros(rays.by_level.shape) if noise is None else _weighed(rays, noise)


def _weighed(rays: DirectRays, errors: Floats) -> Floats:
    # an error that is not known does not matter where the ray does not go
    found: Floats = np.where(rays.by_level == 0.0, 0.0, rays.by_level * errors)
    return found


def _speed_uncertainty(direct: Direct, rays: DirectRays) -> Floats:
    """Standard uncertainty of the time from the sound speed, s; 0 where the profile gives none."""
    squares = np.sum(speed_errors(direct, rays) ** 2, axis=0) + np.sum(speed_noise(direct, rays) ** 2, axis=-1)
    return np.asarray(np.sqrt(squares))


def travel_times(
    water: Profile,
    *,
    source_depth: float,
    receiver_depth: float,
    ranges: ArrayLike,
    mean_speed: float | None = None,
) -> xarray.Dataset:
    """Travel times of direct rays over range, and the range that a straight line would make of them.

    Parameters
    ----------
    water : Profile
    source_depth, receiver_depth : float
        m.
    ranges : array_like, shape (n,)
        Horizontal, m, 0 or more.
    mean_speed : float, optional
        Of the straight line, m/s; where not given the harmonic mean between the two depths.

    Returns
    -------
    xarray.Dataset
        On `range`: `travel_time` with `travel_time_uncertainty` (k = 1, from the sound speed), `launch_angle`,
        `arrival_angle`, and `straight_range` with its error, positive where it is too long. NaN where surface and
        seabed alone could send sound.

    Raises
    ------
    InputError
        If a depth, range or speed makes no sense.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> water = Profile([0, 600], [1500, 1530])
    >>> found = travel_times(water, source_depth=0.0, receiver_depth=500.0, ranges=[1000.0, 4000.0])
    >>> found["travel_time"].values.round(7), found["straight_range_error"].values.round(2)
    (array([0.7391792, 2.6633319]), array([-0.06, -2.95]))
    """
    import xarray as xr

    from ..files import attributes

    x = np.atleast_1d(np.asarray(ranges, dtype=np.float64))
    if x.ndim != 1 or not x.size or not np.all(np.isfinite(x) & (x >= 0.0)):
        raise InputError("ranges: one or more distances of 0 m or more would be right")
    direct = Direct(water, source_depth, receiver_depth)
    speed = _mean_speed(direct, mean_speed)
    rays = direct.at(x)
    straight = _straight(rays.time, speed, direct.height)
    known = direct.column.uncertainty is not None
    columns = {
        "travel_time": rays.time,
        "travel_time_uncertainty": _speed_uncertainty(direct, rays) if known else np.full(x.size, np.nan),
        "launch_angle": rays.launch_angle,
        "arrival_angle": rays.arrival_angle,
        "straight_range": straight,
        "straight_range_error": straight - x,
    }
    return xr.Dataset(
        {name: ("range", values, attributes(name)) for name, values in columns.items()},
        {"range": ("range", x, attributes("range"))},
        {"title": "direct rays over range", **_about(direct), "mean_speed": speed},
    )


def ranges_from_times(
    water: Profile,
    times: ArrayLike,
    *,
    source_depth: float,
    receiver_depth: float,
    timing: Timing | None = None,
    elapsed: ArrayLike = 0.0,
    depth_uncertainty: float = 0.0,
    mean_speed: float | None = None,
) -> xarray.Dataset:
    """Horizontal and slant ranges from measured times.

    Parameters
    ----------
    water : Profile
    times : array_like, shape (n,)
        As the clock shows them, s.
    source_depth, receiver_depth : float
        m.
    timing : Timing, optional
        How they were measured; two ways without delay where not given.
    elapsed : array_like, optional
        s, of each since the clock's offset was found.
    depth_uncertainty : float
        Of the difference of the two depths, m (k = 1).
    mean_speed : float, optional
        As for `travel_times`.

    Returns
    -------
    xarray.Dataset
        On `measurement`: `travel_time` (one way), `horizontal_range` with its uncertainty (k = 1) and the parts of it
        by timing, sound speed and depth; `slant_range` (the straight distance, not the length of the path) with its
        own; `launch_angle`, `arrival_angle`, `straight_range` and its error.

    Raises
    ------
    InputError
        If a time is less than straight up and down, or no direct ray takes it; the message names it.

    Notes
    -----
    Newton's method on the squares of time and range, with the slowness of the ray for the slope; the direct ray found
    takes the time asked for within 1e-10 s, and none comes there earlier. Sound speed that the profile gives no
    uncertainty for counts as known.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> water = Profile([0, 200], [1500, 1500], [0.3, 0.3])
    >>> one = Timing(turn_around=0.2, timing_uncertainty=1e-4)
    >>> found = ranges_from_times(water, 0.2 + 2.0, source_depth=20.0, receiver_depth=140.0, timing=one)
    >>> [round(float(found[name][0]), 3) for name in ("slant_range", "horizontal_range", "slant_range_uncertainty")]
    [1500.0, 1495.192, 0.309]
    """
    import xarray as xr

    from ..files import attributes

    clock = Timing() if timing is None else timing
    if not (np.isfinite(depth_uncertainty) and depth_uncertainty >= 0.0):
        raise InputError(f"depth_uncertainty is {depth_uncertainty:g} m: 0 or more would be right")
    shown = np.atleast_1d(np.asarray(times, dtype=np.float64))
    if shown.ndim != 1 or not shown.size:
        raise InputError(f"times have the shape {shown.shape}: a list of seconds would be right")
    try:
        since = np.broadcast_to(np.asarray(elapsed, dtype=np.float64), shown.shape)
    except ValueError:
        raise InputError(f"elapsed: {np.size(elapsed)} for {shown.size} times: one, or as many, is right") from None
    direct = Direct(water, source_depth, receiver_depth)
    speed = _mean_speed(direct, mean_speed)
    time = clock.one_way(shown, elapsed=since)
    rays = joined(_ray_of(direct, t, i) for i, t in enumerate(time.tolist()))
    parts = {
        "timing": np.hypot(clock.own, np.sqrt(np.sum(clock.shared(time, elapsed=since) ** 2, axis=0))),
        "sound_speed": _speed_uncertainty(direct, rays),
        "depth": np.abs(rays.down) * depth_uncertainty,
    }
    of_time = np.hypot(parts["timing"], parts["sound_speed"])
    slant = np.hypot(rays.range, direct.height)
    # the error of the depth acts on the straight distance itself too, against what it does through the time
    signed = np.sign(receiver_depth - source_depth)
    leaning = signed * direct.height / slant - rays.down / rays.along * rays.range / slant
    straight = _straight(time, speed, direct.height)
    columns = {
        "travel_time": time,
        "horizontal_range": rays.range,
        "horizontal_range_uncertainty": np.hypot(of_time, parts["depth"]) / rays.along,
        **{f"horizontal_range_uncertainty_by_{name}": part / rays.along for name, part in parts.items()},
        "slant_range": slant,
        "slant_range_uncertainty": np.hypot(of_time / rays.along * rays.range / slant, leaning * depth_uncertainty),
        "launch_angle": rays.launch_angle,
        "arrival_angle": rays.arrival_angle,
        "straight_range": straight,
        "straight_range_error": straight - rays.range,
    }
    return xr.Dataset(
        {name: ("measurement", values, attributes(name)) for name, values in columns.items()},
        attrs={"title": "ranges from travel times", **_about(direct), "mean_speed": speed,
               "comment": _comment(direct)},
    )  # fmt: skip


def _ray_of(direct: Direct, time: float, number: int) -> DirectRays:
    """The direct ray that takes a time."""
    what = f"time {number}, {time:.6g} s one way"
    if not (np.isfinite(time) and time > 0.0):
        raise InputError(f"{what}: a time above 0 would be right; check delays and offsets")
    if time < direct.shortest - _ARRIVED:
        raise InputError(
            f"{what}: is less than straight from {direct.source_depth:g} m to {direct.receiver_depth:g} m, "
            f"{direct.shortest:.6g} s; check depths, delays and offsets"
        )
    distance = float(_straight(np.array([time]), direct.mean_speed, direct.height)[0])
    guess = np.degrees(np.arctan2(direct.receiver_depth - direct.source_depth, max(distance, 1e-3)))
    near, overtaken = float(guess), False
    while True:
        ray = _newton(direct, time, distance, near)
        if ray is None:
            raise InputError(
                f"{what}: no direct ray takes so long, sound comes by surface or seabed alone; about {distance:.0f} m "
                "away by a straight line"
            )
        if overtaken:
            return ray
        first = direct.at(ray.range)
        if not first.time[0] < ray.time[0] - _EARLIER:
            return ray
        distance, near, overtaken = float(ray.range[0]), float(first.launch_angle[0]), True


def _newton(direct: Direct, time: float, start: float, near: float) -> DirectRays | None:
    square, lit = max(start, 1e-3) ** 2, 0.0
    for _ in range(_STEPS):
        ray = direct.at(np.sqrt(square), near=near)
        if np.isnan(ray.time[0]):
            # beyond the last direct ray: back towards one that was there
            square = (0.5 * (np.sqrt(square) + lit)) ** 2 if lit else 0.98 * square
            continue
        x, t = float(ray.range[0]), float(ray.time[0])
        near = float(ray.launch_angle[0])
        if abs(t - time) <= _ARRIVED:
            return ray
        lit = x
        step = (t * t - time * time) * x / (t * float(ray.along[0]))
        if x <= 1e-3 and step >= 0.0:  # straight up or down, as near as it is known
            return ray
        square = max(x * x - step, 0.0625 * x * x, 1e-6)
    return None


def _straight(time: Floats, speed: float, height: float) -> Floats:
    found: Floats = np.sqrt(np.maximum((speed * time) ** 2 - height**2, 0.0))
    return found


def _mean_speed(direct: Direct, given: float | None) -> float:
    if given is None:
        return direct.mean_speed
    if not (np.isfinite(given) and 1000.0 <= given <= 3000.0):
        raise InputError(f"mean_speed is {given:g} m/s: 1000 to 3000 would be right")
    return float(given)


def _about(direct: Direct) -> dict[str, Any]:
    return {"cast_id": direct.water.id, "source_depth": direct.source_depth, "receiver_depth": direct.receiver_depth}


def _comment(direct: Direct) -> str:
    if direct.water.uncertainty is None:
        return "The profile gives no uncertainty of sound speed: it counts as known."
    return "Uncertainties are standard uncertainties (k=1)."
