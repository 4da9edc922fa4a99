"""What a profile will do to sound, in a few numbers: layers, ducts, the deep channel, gradients and mean speeds.

A maximum or minimum counts only if the speed swings by at least the *prominence* on its way to the next one: the noise
of a cast, a few cm/s from level to level, then makes no layers. The default of 0.1 m/s is several times that noise, and
is what an isothermal layer of 6 m builds up by pressure alone (0.016 /s): smaller layers carry no sound of interest.
"""

from __future__ import annotations

from dataclasses import asdict, dataclass, field, fields
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError

if TYPE_CHECKING:
    import xarray
    from numpy.typing import NDArray

    from .profile import Profile

DEFAULT_PROMINENCE = 0.1  # m/s; see above
SURFACE_REACH = 50.0  # m: water this near to the surface is taken to say what the surface is like
BELOW_LAYER_THICKNESS = 100.0  # m below the sonic layer over which its lower gradient is taken (common practice)
STEEPEST_WINDOW = 5.0  # m over which the steepest gradient is taken, so that it is not that of two noisy levels


def _measured(units: str, long_name: str) -> Any:
    """A number that every profile has."""
    return field(metadata={"units": units, "long_name": long_name})


def _number(units: str, long_name: str) -> Any:
    """A number that is None where the feature does not exist."""
    return field(default=None, metadata={"units": units, "long_name": long_name})


@dataclass(frozen=True)
class Duct:
    """A depth range that can hold sound: a speed minimum between faster water, or under the surface.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> Profile([0, 500, 1000], [1510, 1490, 1505]).features().ducts[0]
    Duct(axis_depth=500.0, axis_speed=1490.0, top=125.0, bottom=1000.0, edge_speed=1505.0)
    """

    axis_depth: float = _measured("m", "depth of the slowest water in the duct")
    axis_speed: float = _measured("m s-1", "sound speed on the axis of the duct")
    top: float = _measured("m", "depth of the upper edge of the duct")
    bottom: float = _measured("m", "depth of the lower edge of the duct")
    edge_speed: float = _measured("m s-1", "sound speed at the edge of the duct")

    @property
    def strength(self) -> float:
        """How much faster than the axis the water at the edge is, m/s."""
        return self.edge_speed - self.axis_speed


@dataclass(frozen=True, kw_only=True)
class Features:
    """The features of a sound-speed profile; a number is None where the feature does not exist, and `notes` says why.

    Parameters
    ----------
    profile_id : str
        The name of the cast.
    prominence : float
        The least swing of speed, m/s, that made a maximum or minimum count.
    deepest_depth, deepest_speed : float
        Depth, m, and speed, m/s, at the deepest level.
    surface_speed : float or None
        Speed at the surface, m/s.
    mean_speed, harmonic_mean_speed : float
        From the surface (or the first level, if it lies too deep to speak for the surface) to the deepest level, m/s.
    sonic_layer_depth, sonic_layer_speed : float or None
        The first maximum of speed from the surface down: depth, m, and speed, m/s. Depth 0 where the surface itself is
        the maximum; None where the speed grows all the way down.
    in_layer_gradient : float or None
        Mean gradient from the surface to the sonic layer depth, 1/s.
    below_layer_gradient : float or None
        Mean gradient over the 100 m below the sonic layer depth, or down to the deepest level, 1/s.
    duct_cutoff_frequency : float or None
        The lowest frequency that the surface duct (there is one if the sonic layer depth is above 0) traps, Hz.
    axis_depth, axis_speed : float or None
        The axis of the deep sound channel: depth, m, and speed, m/s. Of all minima the one whose duct traps most sound;
        at depth 0 where the speed grows downward from the surface (the polar half-channel).
    conjugate_depth : float or None
        The depth above the axis that has the speed of the deepest level, m.
    critical_depth : float or None
        The depth below the axis where the greatest speed above the axis is reached again, m.
    depth_excess : float or None
        Seabed depth less critical depth, m; needs `seabed_depth`.
    steepest_gradient, steepest_gradient_depth : float
        The largest gradient by size over 5 m, 1/s, positive where speed grows downward, and its middle depth, m: the
        thermocline, where there is one.
    ducts : tuple of Duct
        Every duct, from the surface down.
    notes : tuple of str
        Why a feature does not exist, and what was assumed; one line each.

    Notes
    -----
    The cutoff is that of the first mode in a layer of thickness H and constant gradient g under a pressure-release
    surface, by the phase integral (n - 1/4) pi with n = 1: f = (9/16) c sqrt(c / (2 g)) H^(-3/2), with the gradient and
    speed of this layer. It is the textbook form (Urick, Principles of Underwater Sound; from memory), 1 % below the
    exact root of the Airy function. A few times this frequency is needed for good trapping (common practice).

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> profile = Profile([0, 100, 200, 1000, 4500], [1500, 1501.5, 1490, 1480, 1523])
    >>> features = profile.features(seabed_depth=4600)
    >>> features.sonic_layer_depth, features.axis_depth, features.critical_depth, features.depth_excess
    (100.0, 1000.0, 2750.0, 1850.0)
    >>> round(features.duct_cutoff_frequency)
    189
    """

    profile_id: str
    prominence: float
    surface_speed: float | None = _number("m s-1", "sound speed at the surface")
    sonic_layer_depth: float | None = _number("m", "sonic layer depth")
    sonic_layer_speed: float | None = _number("m s-1", "sound speed at the sonic layer depth")
    in_layer_gradient: float | None = _number("s-1", "sound-speed gradient in the sonic layer")
    below_layer_gradient: float | None = _number("s-1", "sound-speed gradient below the sonic layer")
    duct_cutoff_frequency: float | None = _number("Hz", "low-frequency cutoff of the surface duct")
    steepest_gradient: float = _measured("s-1", "steepest sound-speed gradient")
    steepest_gradient_depth: float = _measured("m", "depth of the steepest gradient")
    axis_depth: float | None = _number("m", "depth of the deep-channel axis")
    axis_speed: float | None = _number("m s-1", "sound speed on the deep-channel axis")
    conjugate_depth: float | None = _number("m", "conjugate depth of the deepest level")
    critical_depth: float | None = _number("m", "critical depth")
    depth_excess: float | None = _number("m", "depth excess")
    deepest_depth: float = _measured("m", "depth of the deepest level")
    deepest_speed: float = _measured("m s-1", "sound speed at the deepest level")
    mean_speed: float = _measured("m s-1", "depth-averaged sound speed")
    harmonic_mean_speed: float = _measured("m s-1", "harmonic mean sound speed")
    ducts: tuple[Duct, ...] = ()
    notes: tuple[str, ...] = ()

    def to_dict(self) -> dict[str, Any]:
        """The features as plain Python values, ready for JSON; None where a feature does not exist.

        Examples
        --------
        >>> from ocean_sound.profile import Profile
        >>> Profile([0, 100], [1500, 1490]).features().to_dict()["sonic_layer_depth"]
        0.0
        """
        plain = asdict(self)
        plain["ducts"] = [{**asdict(duct), "strength": duct.strength} for duct in self.ducts]
        plain["notes"] = list(self.notes)
        return plain

    def lines(self) -> list[str]:
        """The features in lines for people, from the surface down; then the notes.

        Examples
        --------
        >>> from ocean_sound.profile import Profile
        >>> print(Profile([0, 100], [1500, 1490]).features().lines()[0])
        sound speed at the surface                   1500.00 m/s
        """
        rows = [
            (entry.metadata["long_name"], _written(getattr(self, entry.name), entry.metadata["units"]))
            for entry in fields(self)
            if entry.metadata and getattr(self, entry.name) is not None
        ]
        found = [f"{name:<44} {value}" for name, value in rows]
        found += [
            f"duct {number:<39} {duct.top:.0f} to {duct.bottom:.0f} m, {duct.strength:.2f} m/s slower on its axis at "
            f"{duct.axis_depth:.0f} m"
            for number, duct in enumerate(self.ducts, 1)
        ]
        return [*found, *self.notes]

    def to_dataset(self) -> xarray.Dataset:
        """The features as a dataset of scalars, and the ducts on a dimension `duct`; NaN where one does not exist.

        Examples
        --------
        >>> from ocean_sound.profile import Profile
        >>> dataset = Profile([0, 100], [1500, 1490]).features().to_dataset()
        >>> float(dataset["deepest_depth"]), dataset["deepest_depth"].attrs["units"]
        (100.0, 'm')
        """
        import xarray as xr

        variables: dict[str, Any] = {}
        for entry in fields(self):
            if entry.metadata:
                value = getattr(self, entry.name)
                variables[entry.name] = ((), np.nan if value is None else value, dict(entry.metadata))
        for entry in fields(Duct):
            column = np.array([getattr(duct, entry.name) for duct in self.ducts], dtype=np.float64)
            variables[f"duct_{entry.name}"] = ("duct", column, dict(entry.metadata))
        attributes: dict[str, Any] = {"cast_id": self.profile_id, "prominence": self.prominence}
        if self.notes:
            attributes["notes"] = "\n".join(self.notes)
        return xr.Dataset(variables, attrs=attributes)


def _written(value: float, units: str) -> str:
    """A number with as many digits as make sense in its unit."""
    forms = {"m": "{:.1f} m", "m s-1": "{:.2f} m/s", "s-1": "{:.4f} 1/s", "Hz": "{:.0f} Hz"}
    return forms[units].format(value)


def features_of(profile: Profile, *, seabed_depth: float | None, prominence: float) -> Features:
    """The work of `Profile.features`, where it is described."""
    _check_options(seabed_depth, prominence)
    carried = _carried(profile)
    notes = list(carried.notes[len(profile.notes) :])
    profile = carried
    near_surface = bool(profile.depth[0] == 0.0)
    if not near_surface:
        notes.append(f"the first level lies at {profile.depth[0]:g} m: too deep to tell of the surface and its layer")
    extremes = _extremes(profile.speed, prominence)
    if not extremes:
        notes.append(f"the speed varies by less than {prominence:g} m/s: no layer, duct or channel")
    if profile.surface_assumed and extremes[:2] == [(0, -1), (1, 1)]:
        extremes = extremes[1:]  # a layer that was assumed, not measured
    ducts = _ducts(profile, extremes, near_surface=near_surface)
    layer = _sonic_layer(profile, extremes, prominence, notes) if near_surface else {}
    channel = _deep_channel(profile, ducts, seabed_depth, notes)
    gradient, gradient_depth = _steepest(profile)
    return Features(
        profile_id=profile.id,
        prominence=prominence,
        deepest_depth=float(profile.depth[-1]),
        deepest_speed=float(profile.speed[-1]),
        mean_speed=profile.mean_speed(),
        harmonic_mean_speed=profile.harmonic_mean_speed(),
        steepest_gradient=gradient,
        steepest_gradient_depth=gradient_depth,
        surface_speed=float(profile.speed[0]) if near_surface else None,
        ducts=ducts,
        notes=tuple(notes),
        **layer,
        **channel,
    )


def conjugate_depth_of(profile: Profile, depth: float, *, prominence: float) -> float | None:
    """The work of `Profile.conjugate_depth`, where it is described."""
    axis = features_of(profile, seabed_depth=None, prominence=prominence).axis_depth
    profile = _carried(profile)
    speed = profile.at(depth)
    if axis is None or depth == axis:
        return axis
    return _crossing(profile, axis, speed, up=depth > axis)


def _carried(profile: Profile) -> Profile:
    """The profile carried up to the surface, if its first level is near enough to tell of it."""
    return profile.to_surface() if profile.depth[0] <= SURFACE_REACH else profile


def _check_options(seabed_depth: float | None, prominence: float) -> None:
    if seabed_depth is not None and not (np.isfinite(seabed_depth) and seabed_depth > 0.0):
        raise InputError(f"seabed_depth is {seabed_depth:g} m; a finite depth above 0 m would be right")
    if not (np.isfinite(prominence) and prominence > 0.0):
        raise InputError(f"prominence is {prominence:g} m/s; a finite number above 0 m/s, such as 0.1, would be right")


def _extremes(speed: NDArray[np.float64], prominence: float) -> list[tuple[int, int]]:
    """Alternating maxima (+1) and minima (-1), as (level, sign), each at least `prominence` from its neighbours.

    The first stands for the surface and the last for the deepest level: beyond them the speed swings by less.
    """
    # Only turning points, and the two ends, can be extremes: the walk over them is short even for noisy casts.
    slope = np.sign(np.diff(speed))
    turning = np.flatnonzero(slope[1:] != slope[:-1]) + 1
    found: list[tuple[int, int]] = []
    high = low = direction = 0
    for level in (0, *turning.tolist(), speed.size - 1):
        if direction >= 0 and speed[level] > speed[high]:
            high = level
        if direction <= 0 and speed[level] < speed[low]:
            low = level
        if direction >= 0 and speed[high] - speed[level] >= prominence:
            found.append((high, 1))
            direction, low = -1, level
        elif direction <= 0 and speed[level] - speed[low] >= prominence:
            found.append((low, -1))
            direction, high = 1, level
    if direction:
        found.append((high, 1) if direction > 0 else (low, -1))
    return found


def _sonic_layer(
    profile: Profile, extremes: list[tuple[int, int]], prominence: float, notes: list[str]
) -> dict[str, float]:
    """The near-surface maximum and what hangs on it; empty where the speed grows all the way down."""
    surface_speed = float(profile.speed[0])
    level = 0
    if extremes and extremes[0][1] < 0:
        if len(extremes) == 2:
            notes.append("no sonic layer: the speed grows from the surface to the deepest level")
            return {}
        level = extremes[1][0]
    elif profile.surface_assumed and extremes and extremes[0][0] == 1:
        notes.append(
            f"sonic layer depth 0: the fastest water is that of the first level measured ({profile.depth[1]:g} m), "
            "and nothing tells of a layer above it"
        )
    elif extremes and extremes[0][0] > 0:
        first = extremes[0][0]
        notes.append(
            f"sonic layer depth 0: the maximum at {profile.depth[first]:g} m exceeds the surface speed by only "
            f"{profile.speed[first] - surface_speed:.3f} m/s (less than {prominence:g} m/s)"
        )
    depth, speed = float(profile.depth[level]), float(profile.speed[level])
    layer = {"sonic_layer_depth": depth, "sonic_layer_speed": speed}
    if level:
        gradient = (speed - surface_speed) / depth
        layer["in_layer_gradient"] = gradient
        layer["duct_cutoff_frequency"] = (
            9.0 / 16.0 * surface_speed * float(np.sqrt(surface_speed / (2.0 * gradient)) * depth**-1.5)
        )
    else:
        notes.append("no surface duct: the speed does not grow downward from the surface")
    bottom = min(depth + BELOW_LAYER_THICKNESS, float(profile.depth[-1]))
    layer["below_layer_gradient"] = (profile.at(bottom) - speed) / (bottom - depth)
    if bottom < depth + BELOW_LAYER_THICKNESS:
        notes.append(f"below-layer gradient over {bottom - depth:g} m only: the cast ends there")
    return layer


def _ducts(profile: Profile, extremes: list[tuple[int, int]], *, near_surface: bool) -> tuple[Duct, ...]:
    """A duct for each minimum with faster water below it, and above it unless it is at the surface."""
    ducts = []
    for number, (level, sign) in enumerate(extremes[:-1]):
        below = float(profile.speed[extremes[number + 1][0]])
        if sign > 0 or (number == 0 and not near_surface):
            continue
        if number == 0:
            axis, edge = 0.0, below
            top: float | None = 0.0
        else:
            axis, edge = float(profile.depth[level]), min(float(profile.speed[extremes[number - 1][0]]), below)
            top = _crossing(profile, axis, edge, up=True)
        bottom = _crossing(profile, axis, edge, up=False)
        if top is not None and bottom is not None:  # the maxima on both sides are at least as fast: always so
            ducts.append(Duct(axis, profile.at(axis), top, bottom, edge))
    return tuple(ducts)


def _trapping(profile: Profile, duct: Duct) -> float:
    """How much sound is held around a minimum: the integral of sqrt(1 - (c / edge)²), m; its modes are as many.

    A minimum below the surface has all water around it that is slower than the barriers above and below, lesser maxima
    within it being no hindrance: so a deep channel is one, however ragged.
    """
    top, bottom, edge = duct.top, duct.bottom, duct.edge_speed
    if duct.axis_depth > 0.0:
        above, below = profile.depth <= duct.axis_depth, profile.depth >= duct.axis_depth
        edge = min(float(profile.speed[above].max()), float(profile.speed[below].max()))
        top = _crossing(profile, duct.axis_depth, edge, up=True) or 0.0
        bottom = _crossing(profile, duct.axis_depth, edge, up=False) or float(profile.depth[-1])
    inside = (profile.depth > top) & (profile.depth < bottom)
    depth = np.concatenate(([top], profile.depth[inside], [bottom]))
    share = np.sqrt(np.maximum(0.0, 1.0 - (profile.at(depth) / edge) ** 2))
    return float(np.sum(np.diff(depth) * (share[1:] + share[:-1]))) / 2.0


def _deep_channel(
    profile: Profile, ducts: tuple[Duct, ...], seabed_depth: float | None, notes: list[str]
) -> dict[str, float]:
    """Axis, conjugate depth, critical depth and depth excess, as far as they exist."""
    deepest, deepest_speed = float(profile.depth[-1]), float(profile.speed[-1])
    if seabed_depth is not None and seabed_depth < deepest:
        notes.append(f"the deepest level ({deepest:g} m) lies below the seabed depth given ({seabed_depth:g} m)")
    # No slower water lies below a channel's axis; and a layer under the surface is the channel of the whole water only
    # if the deepest water is faster than its edge.
    candidates = [
        duct
        for duct in ducts
        if duct.axis_speed <= profile.speed[profile.depth >= duct.axis_depth].min()
        and (duct.axis_depth > 0.0 or deepest_speed >= duct.edge_speed)
    ]
    if not candidates:
        notes.append("no deep channel: no minimum of speed with only faster water below it")
        return {}
    # Minima of one channel hold the same sound, to a millimetre: the slowest is its axis.
    axis = max(candidates, key=lambda duct: (round(_trapping(profile, duct), 3), -duct.axis_speed))
    channel = {"axis_depth": axis.axis_depth, "axis_speed": axis.axis_speed}
    if axis.axis_depth == 0.0:
        notes.append("the channel's axis is at the surface: no conjugate depth and no critical depth")
        return channel
    conjugate = _crossing(profile, axis.axis_depth, deepest_speed, up=True)
    if conjugate is None:
        notes.append("no conjugate depth: the deepest level is faster than all water above the axis")
    else:
        channel["conjugate_depth"] = conjugate
    greatest = float(profile.speed[profile.depth <= axis.axis_depth].max())
    critical = _crossing(profile, axis.axis_depth, greatest, up=False)
    if critical is None:
        notes.append(
            f"no critical depth down to {deepest:g} m: the deepest level ({deepest_speed:.1f} m/s) is slower than "
            f"the fastest water above the axis ({greatest:.1f} m/s)"
        )
        return channel
    channel["critical_depth"] = critical
    if seabed_depth is None:
        notes.append("no depth excess: the seabed depth was not given")
    else:
        channel["depth_excess"] = seabed_depth - critical
    return channel


def _crossing(profile: Profile, start: float, speed: float, *, up: bool) -> float | None:
    """The first depth from `start` up (or down) where the sound speed reaches `speed`; None if it never does."""
    beyond = profile.depth < start if up else profile.depth > start
    depth = np.concatenate(([start], profile.depth[beyond][:: -1 if up else 1]))
    path = np.concatenate(([profile.at(start)], profile.speed[beyond][:: -1 if up else 1]))
    reached = np.flatnonzero(path >= speed)
    if not reached.size:
        return None
    level = int(reached[0])
    if level == 0 or path[level] == speed:
        return float(depth[level])
    fraction = (speed - path[level - 1]) / (path[level] - path[level - 1])
    return float(depth[level - 1] + fraction * (depth[level] - depth[level - 1]))


def _steepest(profile: Profile) -> tuple[float, float]:
    """The largest gradient by size over a window, 1/s, and the depth of its middle, m."""
    depth = profile.depth
    window = min(STEEPEST_WINDOW, float(depth[-1] - depth[0]))
    # The mean gradient over a sliding window has its extremes where an end of the window passes a level.
    tops = np.concatenate((depth[depth <= depth[-1] - window], depth[depth >= depth[0] + window] - window))
    tops = np.clip(tops, depth[0], depth[-1] - window)
    gradients = (profile.at(np.minimum(tops + window, depth[-1])) - profile.at(tops)) / window
    best = int(np.argmax(np.abs(gradients)))
    middle = float(tops[best]) + window / 2.0
    layer = min(int(np.searchsorted(depth, middle, "right")) - 1, len(profile) - 2)
    if depth[layer] <= tops[best] and tops[best] + window <= depth[layer + 1]:
        middle = float(depth[layer] + depth[layer + 1]) / 2.0  # wholly within one layer: all of it is as steep
    return float(gradients[best]), middle
