"""Connect a source with receivers: all rays between them, refined on the receiver."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, Any

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from ..profile import Profile
from . import _kernels, _kernels_connecting
from ._kernels_section import SEABED, SURFACE
from .medium import medium
from .searching import Landing, brackets, refine
from .section_tracing import (
    DEPTH_TOLERANCE,
    TIME_TOLERANCE,
    checked_range,
    checked_source,
    checked_tolerances,
    floor_of,
    path_uncertainty,
    trace_to,
)
from .tracing import checked_angles, trace_fan

if TYPE_CHECKING:
    import xarray

    from ..section import Section
    from .section_tracing import Ends

MAX_BOUNCES = 4
MOST_BOUNCES = 1000
STEEPEST, STEP = 89.9, 0.1  # degrees: the fan that is searched where the caller gives none
_EXACT = 1e-6, 1e-11  # tolerances, m and s, of the rays that are handed out
_INSIDE = 1e-4  # m
_FIRST_COLUMN = 5  # of the fields of Arrivals
_TURNS = 1 << 20  # more than any ray has


@dataclass(frozen=True, eq=False)
class Arrivals:
    """Rays between a source and receivers; each array has one value for each arrival, by receiver and then by time.

    Angles are degrees from the horizontal, positive downward, in the direction of travel. `spreading` is m per radian,
    its sign changing at each caustic. `amplitude` is that of pressure, relative to the one 1 m from the source, by
    spreading and reflection, without absorption; `phase`, degrees, of exp(-i omega t), is that of caustics (-90 each)
    and reflections. `unresolved` counts narrow ranges of launch angle that were given up.
    """

    water: Profile | Section
    source_depth: float
    max_bounces: int
    frequency: float | None
    unresolved: int
    receiver: np.ndarray
    receiver_depth: np.ndarray
    receiver_range: np.ndarray
    launch_angle: np.ndarray
    arrival_angle: np.ndarray
    travel_time: np.ndarray
    travel_time_uncertainty: np.ndarray | None
    path_length: np.ndarray
    turns: np.ndarray
    surface_bounces: np.ndarray
    seabed_bounces: np.ndarray
    caustics: np.ndarray
    spreading: np.ndarray
    amplitude: np.ndarray
    phase: np.ndarray

    def __len__(self) -> int:
        return self.launch_angle.size

    def columns(self) -> dict[str, np.ndarray]:
        """One column for each thing known of an arrival."""
        found = {f.name: getattr(self, f.name) for f in fields(self)}
        return {name: values for name, values in found.items() if isinstance(values, np.ndarray)}

    def to_dataset(self) -> xarray.Dataset:
        """The arrivals as a labelled dataset with the dimension `arrival`."""
        import xarray

        from ..files import attributes

        about: dict[str, Any] = {
            "title": "Rays between a source and receivers",
            "water": repr(self.water).strip("<>"),
            "source_depth": self.source_depth,
            "max_bounces": self.max_bounces,
            "unresolved": self.unresolved,
            "comment": _comment(self.water, self.frequency),
        }
        if self.frequency is not None:
            about["frequency"] = self.frequency
        dataset = xarray.Dataset(
            {name: ("arrival", values, attributes(name)) for name, values in self.columns().items()}, attrs=about
        )
        if self.travel_time_uncertainty is None:
            dataset.travel_time.attrs["comment"] = "no uncertainty given, since the water carries none"
        return dataset


def _comment(water: Profile | Section, frequency: float | None) -> str:
    text = "Amplitude by spreading and reflection, relative to 1 m, without absorption. "
    if isinstance(water, Profile):
        return text + (
            "The seabed is taken to send all back unchanged. In layers of constant gradient spreading jumps from ray "
            "to ray: amplitudes are better taken from a section."
        )
    calm = water.surface.wind_speed == 0.0
    if not calm and frequency is None:
        return text + "The surface is taken to be calm, since no frequency is given."
    return text + ("The surface is calm." if calm else "The surface scatters under the wind.")


class _Layers:
    """Rays through a profile to one range."""

    def __init__(self, water: Profile, source_depth: float, seabed_depth: float | None, max_bounces: int) -> None:
        self.water, self.seabed_depth, self.limit = water, seabed_depth, max_bounces
        self.medium = medium(water, source_depth, seabed_depth=seabed_depth)
        self.source = self.medium.source_depth
        self.range = 0.0

    def depth_at(self, distance: float) -> float:  # noqa: ARG002  # the same at all ranges
        return self.medium.seabed_depth

    def slope_at(self, distance: float) -> float:  # noqa: ARG002
        return 0.0

    def _fan(self, angles: np.ndarray) -> Any:
        return trace_fan(
            self.water,
            source_depth=self.source,
            launch_angles=angles,
            max_range=self.range,
            seabed_depth=self.seabed_depth,
            max_surface_bounces=self.limit,
            max_seabed_bounces=self.limit,
        )

    def _spread(self, angles: np.ndarray, live: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        out, caustics = np.full((2, angles.size), np.nan), np.zeros(angles.size, dtype=np.int64)
        inner, touched = np.empty((2, int(live.sum()))), np.empty(int(live.sum()), dtype=np.int64)
        _kernels_connecting.spread(
            kernel_array(angles[live]),
            self.medium.source_speed,
            self.medium.sides,
            self.medium.tables,
            self.range,
            inner,
            touched,
        )
        out[:, live], caustics[live] = inner, touched
        return out, caustics

    def land(self, angles: np.ndarray) -> Landing:
        fan = self._fan(angles)
        bounces = fan.surface_bounces + fan.seabed_bounces
        live = (fan.status == _kernels.REACHED) & (bounces <= self.limit)
        slope = np.radians(1.0) * self._spread(angles, live)[0][0]
        return Landing(angles, fan.depth, slope, _history(fan.surface_bounces, fan.seabed_bounces, fan.turns, live))

    exact = land

    def columns(self, angles: np.ndarray, frequency: float | None) -> dict[str, Any]:  # noqa: ARG002
        fan = self._fan(angles)
        spread, caustics = self._spread(angles, np.ones(angles.size, dtype=bool))
        names = ("depth", "arrival_angle", "travel_time", "travel_time_uncertainty", "path_length", "turns")
        return {name: getattr(fan, name) for name in (*names, "surface_bounces", "seabed_bounces")} | {
            "caustics": caustics.astype(np.int32),
            "spreading": spread[1],
            "reflection": (-1.0 + 0.0j) ** fan.surface_bounces,
        }

    def speed_at(self, distance: float, depth: np.ndarray | float) -> Any:  # noqa: ARG002
        return self.water.to_surface().at(depth)


class _Water:
    """Rays through a section to one range."""

    def __init__(
        self, section: Section, source_depth: float, max_bounces: int, tolerances: tuple[float, float]
    ) -> None:
        self.section, self.limits, self.tolerances = section, (max_bounces,) * 3, tolerances
        self.tight = min(tolerances[0], _EXACT[0]), min(tolerances[1], _EXACT[1])
        self.source, self.floor = checked_source(section, source_depth), floor_of(section)
        self.range = 0.0

    def depth_at(self, distance: float) -> float:
        checked_range(self.section, distance)
        return float(self.section.seabed.depth_at(distance))

    def slope_at(self, distance: float) -> float:
        """Of the seabed, degrees, positive where it falls."""
        return float(np.degrees(np.arctan(self.section.seabed.shape_at(np.array([distance]))[0, 1])))

    def _ends(self, angles: np.ndarray, tolerances: tuple[float, float], bounces: int = 0) -> Ends:
        return trace_to(
            self.section,
            self.source,
            angles,
            self.range,
            limits=self.limits,
            tolerances=tolerances,
            bounces=bounces,
            floor=self.floor,
        )

    def _land(self, angles: np.ndarray, tolerances: tuple[float, float]) -> Landing:
        ends = self._ends(angles, tolerances)
        surface, seabed = ends.surface_bounces[:, 0], ends.seabed_bounces[:, 0]
        # each bounce turns the frame over in which spreading is counted
        turned = np.where((surface + seabed) % 2 == 0, 1.0, -1.0)
        with np.errstate(divide="ignore"):
            slope = np.radians(1.0) * turned * ends.spreading[:, 0] / np.cos(np.radians(ends.angle[:, 0]))
        live = ends.status[:, 0] == _kernels.REACHED
        return Landing(angles, ends.depth[:, 0], slope, _history(surface, seabed, ends.turns[:, 0], live))

    def land(self, angles: np.ndarray) -> Landing:
        return self._land(angles, self.tolerances)

    def exact(self, angles: np.ndarray) -> Landing:
        return self._land(angles, self.tight)

    def columns(self, angles: np.ndarray, frequency: float | None) -> dict[str, Any]:
        ends = self._ends(angles, self.tight, self.limits[2])
        names = ("depth", "travel_time", "path_length", "turns", "surface_bounces", "seabed_bounces", "caustics")
        return {name: getattr(ends, name)[:, 0] for name in (*names, "spreading")} | {
            "arrival_angle": ends.angle[:, 0],
            "travel_time_uncertainty": path_uncertainty(self.section, self.source, angles, ends, self.limits),
            "reflection": _reflection(self.section, ends.bounces, frequency),
        }

    def speed_at(self, distance: float, depth: np.ndarray | float) -> Any:
        inside = np.clip(depth, 0.0, self.section.deepest)
        return self.section.speed_at(np.full(inside.shape, distance), inside)


def _history(surface: np.ndarray, seabed: np.ndarray, turns: np.ndarray, live: np.ndarray) -> np.ndarray:
    whole = (surface.astype(np.int64) * (MOST_BOUNCES + 1) + seabed) * _TURNS + turns
    return np.where(live, whole, -1)


def _reflection(section: Section, bounces: np.ndarray, frequency: float | None) -> np.ndarray:
    """The product of the reflection coefficients of each ray's bounces, of exp(-i omega t)."""
    from ..section.reflection import seabed_reflection, surface_reflection

    found = np.ones(bounces.shape[0], dtype=complex)
    wind = section.surface.wind_speed
    for i, ray in enumerate(bounces):
        for kind, x, grazing in ray[np.isfinite(ray[:, 0])]:
            if kind == SURFACE and (frequency is None or wind == 0.0):
                found[i] *= -1.0
            elif kind == SURFACE and frequency is not None:
                speed = float(section.speed_at(x, 0.0))
                found[i] *= complex(
                    surface_reflection(grazing, frequency=frequency, wind_speed=wind, water_speed=speed)
                )
            elif kind == SEABED:
                speed = float(section.speed_at(x, section.seabed.depth_at(x)))
                found[i] *= complex(seabed_reflection(grazing, section.sediment_at(x), water_speed=speed))
    return found


def find_arrivals(
    water: Profile | Section,
    *,
    source_depth: float,
    receiver_depth: Any,
    receiver_range: Any,
    max_bounces: int = MAX_BOUNCES,
    launch_angles: Any = None,
    frequency: float | None = None,
    seabed_depth: float | None = None,
    depth_tolerance: float = DEPTH_TOLERANCE,
    time_tolerance: float = TIME_TOLERANCE,
) -> Arrivals:
    """Connect a source with receivers as `connect` does, into plain arrays."""
    if not 0 <= max_bounces <= MOST_BOUNCES:
        raise InputError(f"max_bounces is {max_bounces}: it must lie between 0 and {MOST_BOUNCES}")
    if frequency is not None and not (np.isfinite(frequency) and frequency > 0.0):
        raise InputError(f"frequency is {frequency:g} Hz: it must be a positive number")
    if launch_angles is None:
        angles = np.linspace(-STEEPEST, STEEPEST, 2 * round(STEEPEST / STEP) + 1)
    else:
        angles = np.unique(checked_angles(launch_angles))
        if angles.size < 2:
            raise InputError("launch_angles: rays are sought between at least two angles")
    side: _Layers | _Water
    if isinstance(water, Profile):
        side = _Layers(water, source_depth, seabed_depth, max_bounces)
    elif seabed_depth is not None:
        raise InputError(f"seabed_depth is {seabed_depth:g} m, but a section has a seabed of its own: leave it out")
    else:
        side = _Water(water, source_depth, max_bounces, checked_tolerances(depth_tolerance, time_tolerance))
    depths, ranges = _receivers(side, receiver_depth, receiver_range)
    parts: list[dict[str, Any]] = []
    unresolved = 0
    for distance in np.unique(ranges):
        here = np.flatnonzero(ranges == distance)
        side.range = float(distance)
        seabed = side.depth_at(side.range)
        # at a boundary no ray passes a depth: it is sought a little inside
        inside = np.where(
            depths[here] <= 0.0, _INSIDE, np.where(depths[here] >= seabed, seabed - _INSIDE, depths[here])
        )
        found, left = brackets(side.land, angles, inside)
        unresolved += left
        launched, _, receiver = refine(side.exact, found, inside)
        if launched.size:
            columns = _columns(side, launched, here[receiver], depths, frequency)
            onward = _leaves(columns["arrival_angle"], depths[here[receiver]], seabed, side.slope_at(side.range))
            parts.append({name: None if values is None else values[~onward] for name, values in columns.items()})
    joined = _joined(parts)
    return Arrivals(
        water=water,
        source_depth=side.source,
        max_bounces=max_bounces,
        frequency=frequency,
        unresolved=unresolved,
        receiver_depth=depths[joined["receiver"]],
        receiver_range=ranges[joined["receiver"]],
        **joined,
    )


def _receivers(side: _Layers | _Water, depth: Any, distance: Any) -> tuple[np.ndarray, np.ndarray]:
    """Depths and ranges of the receivers, one of each for each."""
    try:
        depths, ranges = np.broadcast_arrays(
            np.atleast_1d(np.asarray(depth, dtype=float)), np.atleast_1d(np.asarray(distance, dtype=float))
        )
    except ValueError as error:
        raise InputError(f"receiver_depth and receiver_range: {error}; as many of each would be right") from None
    if depths.ndim != 1 or depths.size == 0:
        raise InputError(f"receivers have the shape {depths.shape}: give one receiver or a list of them")
    for i, (z, x) in enumerate(zip(depths, ranges, strict=True)):
        if not (np.isfinite(x) and x > 0.0):
            raise InputError(f"receiver {i}: range {x:g} m, where a positive number of metres would be right")
        seabed = side.depth_at(float(x))
        if not 0.0 <= z <= seabed:
            raise InputError(f"receiver {i}: depth {z:g} m, where 0 to {seabed:g} m would be right")
    return depths, ranges


def _columns(
    side: _Layers | _Water, angles: np.ndarray, receiver: np.ndarray, depths: np.ndarray, frequency: float | None
) -> dict[str, Any]:
    """All that is known of the rays at these angles, brought from where they end to the receiver."""
    found = side.columns(angles, frequency)
    depth, reflection = found.pop("depth"), found.pop("reflection")
    sine = np.sin(np.radians(found["arrival_angle"]))
    speed = side.speed_at(side.range, depth)
    # what is left to go, at most ARRIVED: along the ray in time, since a wavefront lies across it
    found["travel_time"] = found["travel_time"] + sine * (depths[receiver] - depth) / speed
    found["path_length"] = found["path_length"] + sine * (depths[receiver] - depth)
    # Jensen, Kuperman, Porter and Schmidt, Computational Ocean Acoustics, eq. 3.65 (from memory), relative to 1 m
    with np.errstate(divide="ignore"):
        area = side.range * np.abs(found["spreading"]) * side.speed_at(0.0, side.source)
        spherical = np.sqrt(speed * np.cos(np.radians(angles)) / area)
    phase = np.degrees(np.angle(reflection)) - 90.0 * found["caustics"]
    return found | {
        "receiver": receiver,
        "launch_angle": angles,
        "amplitude": spherical * np.abs(reflection),
        "phase": 180.0 - (180.0 - phase) % 360.0,
    }


def _leaves(arrival_angle: np.ndarray, receiver: np.ndarray, seabed: float, slope: float) -> np.ndarray:
    """Whether rays come back from the boundary at which their receiver lies: the same as those that go there."""
    return np.asarray(((receiver <= 0.0) & (arrival_angle > 0.0)) | ((receiver >= seabed) & (arrival_angle < slope)))


def _joined(parts: list[dict[str, Any]]) -> dict[str, Any]:
    """The columns of all ranges together, by receiver and then by time."""
    if not parts:
        kinds = {f.name: np.empty(0) for f in fields(Arrivals)[_FIRST_COLUMN:] if not f.name.startswith("receiver_")}
        whole = ("receiver", "turns", "surface_bounces", "seabed_bounces", "caustics")
        return kinds | {name: np.empty(0, dtype=np.int32) for name in whole} | {"travel_time_uncertainty": None}
    joined: dict[str, Any] = {
        name: None if parts[0][name] is None else np.concatenate([part[name] for part in parts]) for name in parts[0]
    }
    order = np.lexsort((joined["travel_time"], joined["receiver"]))
    return {name: None if values is None else values[order] for name, values in joined.items()}


def connect(
    water: Profile | Section,
    *,
    source_depth: float,
    receiver_depth: Any,
    receiver_range: Any,
    max_bounces: int = MAX_BOUNCES,
    launch_angles: Any = None,
    frequency: float | None = None,
    seabed_depth: float | None = None,
    depth_tolerance: float = DEPTH_TOLERANCE,
    time_tolerance: float = TIME_TOLERANCE,
) -> xarray.Dataset:
    """Find the rays that connect a source with receivers (eigenrays), and what arrives by them.

    Parameters
    ----------
    water : Profile or Section
        A profile that starts below the surface is extended to it at its first speed. In a section the source is at its
        start.
    source_depth : float
        m.
    receiver_depth, receiver_range : float or array_like
        Depth and horizontal distance of each receiver, m; one of them may be the same for all.
    max_bounces : int
        Rays with more bounces, off surface and seabed together, are left out. Where a ray meets a receiver on the
        surface or the seabed counts as none.
    launch_angles : array_like, optional
        The fan, degrees, that the search begins with; by default each 0.1 degree from -89.9 to 89.9. Rays are sought
        between its first and last angle.
    frequency : float, optional
        Hz; where the surface of a section has a wind, what it scatters depends on it.
    seabed_depth : float, optional
        Depth of a flat seabed within a profile, m; by default the deepest level is the bottom. A section has its own.
    depth_tolerance, time_tolerance : float
        Errors, m and s, to aim at in the search through a section. The rays found are traced to 1e-6 m and 1e-11 s.

    Returns
    -------
    xarray.Dataset
        For each `arrival`, by receiver and then by time: `receiver` (its place in the list), `receiver_depth`,
        `receiver_range`, `launch_angle`, `arrival_angle`, `travel_time` (with `travel_time_uncertainty`, k = 1, where
        the water has one), `path_length`, `turns`, `surface_bounces`, `seabed_bounces`, `caustics`, `spreading` (m per
        radian), `amplitude` (of pressure, relative to 1 m from the source) and `phase` (degrees).

    Raises
    ------
    InputError
        If an argument is out of its range; the message names it.

    Notes
    -----
    Neighbours in the fan that bounced and turned alike are taken to bracket a ray where the receiver's depth lies
    between theirs, or beyond an extremum between them, on both sides of a caustic; neighbours that did not are parted
    further, to 1e-8 degrees. Rays end within 0.01 m of the receiver, mostly within 1e-6 m; time and length are then
    those to the receiver itself. Amplitude is infinite on a caustic itself, and too high close to one.

    Examples
    --------
    Straight rays between surface and seabed: one direct, one by each of the two, and those by both.

    >>> import ocean_sound as sound
    >>> water = sound.Profile(depth=[0, 100], speed=[1500, 1500])
    >>> arrivals = sound.connect(water, source_depth=30, receiver_depth=50, receiver_range=1000, max_bounces=1)
    >>> [round(1500 * float(time), 3) for time in arrivals.travel_time]
    [1000.2, 1003.195, 1007.174]

    """
    return find_arrivals(
        water,
        source_depth=source_depth,
        receiver_depth=receiver_depth,
        receiver_range=receiver_range,
        max_bounces=max_bounces,
        launch_angles=launch_angles,
        frequency=frequency,
        seabed_depth=seabed_depth,
        depth_tolerance=depth_tolerance,
        time_tolerance=time_tolerance,
    ).to_dataset()
