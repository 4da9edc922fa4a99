"""A profile made ready for many soundings: completed, flattened, tabulated; and soundings taken back through it."""

from __future__ import annotations

from collections import OrderedDict
from dataclasses import dataclass, replace
from threading import Lock
from typing import TYPE_CHECKING, Any

import numpy as np

from .._numba import kernel_array
from ..casts import Cast, complete_cast
from . import _kernels_carry as kernels
from .positions import earth_radius, flat_depth, flattened
from .table import BeamTable, beam_table

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from numpy.typing import NDArray

    from ..profile import Profile
    from .sensitivity import PathUncertainty

    Floats = NDArray[np.float64]

DEEPEST = 11_000.0
"""Depth, m, to which casts are completed if nothing says how deep the soundings are; and the most in any case."""
_COMPLETION = "completion_"
_SHAPE = "completion_sound_speed"
_BELOW = 1.0  # m that water is completed beyond the depth asked for


def measured_range(profile: Profile) -> tuple[float, float]:
    """First and last depth, m, that a profile was measured at; levels that were added do not count.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> measured_range(Profile([2.0, 10.0], [1500.0, 1490.0]).to_surface())
    (2.0, 10.0)
    """
    own = np.ones(len(profile), dtype=np.bool_)
    for name, shape in profile.shapes.items():
        if name.startswith(_COMPLETION):
            own &= shape == 0.0
    own[0] &= not profile.surface_assumed
    if not own.any():
        return float("inf"), float("-inf")
    return float(profile.depth[own][0]), float(profile.depth[own][-1])


def completed(profile: Profile, deepest: float) -> Profile:
    """A profile carried up to the surface and down to a depth, as `complete_cast` does with a cast of sound speed.

    Parameters
    ----------
    profile : Profile
        Never changed.
    deepest : float
        m. A profile that reaches deeper stays as it is below.

    Returns
    -------
    Profile
        The measured levels as they were. Above them the first speed, below them that of water of constant temperature
        and salinity under growing pressure; the uncertainty of that is the shape ``completion_sound_speed``, beside the
        profile's own carried on.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> whole = completed(Profile([2.0, 400.0], [1520.0, 1490.0], [0.2, 0.2]), 600.0)
    >>> whole.depth.tolist()
    [0.0, 2.0, 400.0, 600.0]
    >>> bool(whole.speed[-1] > 1493.0), bool(whole.uncertainty[-1] > 0.8)
    (True, True)
    """
    top, end = bool(profile.depth[0] > 0.0), float(profile.depth[-1])
    if not top and end >= deepest:
        return profile
    cast = Cast(
        id=profile.id or "cast",
        values={"depth": profile.depth, "sound_speed": profile.speed},
        latitude=profile.latitude if np.isfinite(profile.latitude) else 45.0,
        longitude=profile.longitude if np.isfinite(profile.longitude) else 0.0,
    )
    whole = complete_cast(
        cast,
        above="first" if top else None,
        below="constant" if end < deepest else None,
        to_depth=deepest if end < deepest else None,
    )
    depth = whole.values["depth"]
    doubt = np.nan_to_num(whole.uncertainties["sound_speed"])

    def carried(column: Floats) -> Floats:
        values: Floats = np.interp(depth, profile.depth, column)
        return values

    added = np.where((depth < profile.depth[0]) | (depth > end), doubt, 0.0)
    shapes = {name: carried(shape) for name, shape in profile.shapes.items()}
    if profile.uncertainty is not None:
        shapes[_SHAPE] = np.hypot(shapes.get(_SHAPE, 0.0), added)
    return replace(
        profile,
        depth=depth,
        speed=whole.values["sound_speed"],
        uncertainty=None,
        shapes=shapes,
        noise=None if profile.noise is None else carried(profile.noise),
        notes=(*profile.notes, *whole.notes),
    )


@dataclass(frozen=True, eq=False)
class Carrier:
    """One cast ready to carry soundings; made by `carrier`.

    Attributes
    ----------
    profile : Profile
        Completed, not flattened.
    water : Profile
        What beams are traced in: flattened if the Earth's curvature counts.
    table : BeamTable
        Of that water, from the least depth of the transducer down.
    uncertainty : PathUncertainty
    radius : float
        Of the Earth, m; infinite if curvature does not count.
    highest, lowest : float
        First and last depth that the cast describes, m.
    """

    profile: Profile
    water: Profile
    table: BeamTable
    uncertainty: PathUncertainty
    radius: float
    highest: float
    lowest: float

    @property
    def nbytes(self) -> int:
        """Memory that it takes, bytes."""
        return self.table.nbytes + self.uncertainty.nbytes

    def at(self, transducer_depth: Floats) -> tuple[Floats, Floats]:
        """Speed of sound at depths, m/s, and their distances below the table's top, m; of the water traced in."""
        flat = self.flat(transducer_depth)
        return np.interp(flat, self.water.depth, self.water.speed), np.maximum(
            flat - self.table.water.source_depth, 0.0
        )

    def flat(self, depth: Floats) -> Floats:
        """Depths in the water traced in."""
        return depth if np.isinf(self.radius) else flat_depth(depth, self.radius)


def carrier(
    profile: Profile,
    *,
    top: float,
    deepest: float,
    tolerance: float,
    max_angle: float,
    curvature: bool | float,
    change: Mapping[str, Any] | None,
) -> Carrier:
    """Make a cast ready for soundings from transducers at a depth `top` and below.

    Raises
    ------
    InputError
        As `beam_table` and `path_uncertainty`.
    """
    from .sensitivity import path_uncertainty

    whole = completed(profile, min(max(deepest, top + _BELOW), DEEPEST))
    radius = float("inf")
    if curvature is True:
        radius = float(earth_radius(profile.latitude if np.isfinite(profile.latitude) else 45.0))
    elif curvature:
        radius = float(curvature)
    water = whole if np.isinf(radius) else flattened(whole, radius)
    flat_top = top if np.isinf(radius) else float(flat_depth(top, radius))
    return Carrier(
        profile=whole,
        water=water,
        table=beam_table(water, transducer_depth=flat_top, tolerance=tolerance, max_angle=max_angle),
        uncertainty=path_uncertainty(whole, transducer_depth=top, change=change, max_angle=max_angle),
        radius=radius,
        highest=measured_range(profile)[0],
        lowest=measured_range(profile)[1],
    )


def taken_back_by(
    made: Carrier, depth: Floats, across: Floats, along: Floats, transducer_depth: Floats
) -> tuple[Floats, Floats, Floats, NDArray[np.int8]]:
    """One-way times and cosines to starboard and forward, at the transducer, of soundings corrected with a cast.

    All arrays of one shape; statuses as `geometry.TakenBack` has them. By the table: times and directions lead back to
    the soundings within twice its tolerance.
    """
    table = made.table
    down = kernel_array(made.flat(depth).ravel() - table.water.source_depth)
    speed, away = (kernel_array(np.broadcast_to(values, depth.shape).ravel()) for values in made.at(transducer_depth))
    distance = kernel_array(np.hypot(across, along).ravel())
    sine2, time, status = np.empty(down.size), np.empty(down.size), np.empty(down.size, dtype=np.int8)
    kernels.aim(
        distance, down, away, table.water.source_speed, table.water.down, table.arrays, sine2, time, status
    )  # fmt: skip
    # the sine at the transducer, by the length across
    scale = np.sqrt(sine2) * speed / table.water.source_speed / np.where(distance > 0.0, distance, 1.0)
    scale = scale.reshape(depth.shape)
    return time.reshape(depth.shape), scale * across, scale * along, status.reshape(depth.shape)


class Store:
    """Carriers made when they are first wanted, by any thread, and the least used given up beyond a size."""

    def __init__(self, make: Callable[[int], Carrier], most: int) -> None:
        self._make, self._most = make, most
        self._kept: OrderedDict[int, Carrier] = OrderedDict()
        self._lock = Lock()
        self._locks: dict[int, Lock] = {}
        self.worst = 0.0
        self.worst_share = 0.0

    def get(self, which: int) -> Carrier:
        """The carrier of a cast."""
        with self._lock:
            if which in self._kept:
                self._kept.move_to_end(which)
                return self._kept[which]
            lock = self._locks.setdefault(which, Lock())
        with lock:
            with self._lock:
                if which in self._kept:
                    return self._kept[which]
            made = self._make(which)
            with self._lock:
                self._kept[which] = made
                self.worst = max(self.worst, made.table.error)
                self.worst_share = max(self.worst_share, made.uncertainty.error)
                while len(self._kept) > 1 and sum(each.nbytes for each in self._kept.values()) > self._most:
                    self._kept.popitem(last=False)
        return made
