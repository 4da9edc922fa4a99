"""The water as the ray kernels want it: a profile seen from a source, below it and above it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from .._numba import kernel_array
from ..errors import InputError

if TYPE_CHECKING:
    from ..profile import Profile

    Side = tuple[np.ndarray, ...]


@dataclass(frozen=True, eq=False)
class Medium:
    """A profile from the surface to the seabed, split at a source depth: two sides for the kernels (see `_kernels`)."""

    source_depth: float
    source_speed: float
    seabed_depth: float
    up: Side
    down: Side

    @property
    def sides(self) -> tuple[Side, Side]:
        """Both sides, in the order of the kernels' UP and DOWN."""
        return self.up, self.down

    @property
    def tables(self) -> tuple[Side, Side]:
        """New work arrays for one thread."""
        return tuple(tuple(np.empty(side[0].size) for _ in range(5)) for side in self.sides)  # type: ignore[return-value]


def medium(profile: Profile, source_depth: float, *, seabed_depth: float | None = None, levels: Any = ()) -> Medium:
    """Split a profile at the source.

    Parameters
    ----------
    profile
        The water; one that starts below the surface is extended to it at its first speed.
    source_depth
        Depth of the source, m.
    seabed_depth
        Depth of the seabed, m; by default the profile's deepest level.
    levels
        Further depths at which the layers are split, m; this changes no ray.

    Raises
    ------
    InputError
        If the seabed lies below the profile or the source is not between surface and seabed.

    """
    water = profile.to_surface()
    deepest = float(water.depth[-1])
    seabed = deepest if seabed_depth is None else float(seabed_depth)
    if not 0.0 < seabed <= deepest:
        raise InputError(
            f"seabed depth {seabed:g} m is outside the profile, which reaches from 0 to {deepest:g} m: "
            "give a seabed within it, or a deeper profile"
        )
    source = float(source_depth)
    if not 0.0 <= source <= seabed:
        where = "above the surface" if source < 0.0 else "below the seabed"
        raise InputError(f"source depth {source:g} m is {where}: it must lie between 0 and {seabed:g} m")
    extra = np.asarray(levels, dtype=float)
    depth = np.unique(np.concatenate((water.depth, extra[(extra >= 0.0) & (extra <= seabed)], [seabed])))
    depth = depth[depth <= seabed]
    layer = np.clip(np.searchsorted(water.depth, depth, side="right") - 1, 0, water.depth.size - 2)
    speed = water.speed[layer] + water.gradient[layer] * (depth - water.depth[layer])
    speed = np.where(depth == water.depth[layer + 1], water.speed[layer + 1], speed)
    at = int(np.clip(np.searchsorted(water.depth, source, side="right") - 1, 0, water.depth.size - 2))
    # Differences of speed are taken within the source's own layer and then from its upper node on: rounding the
    # source's speed first would lose the digits that a grazing ray lives on.
    rise = water.gradient[at] * (source - water.depth[at])
    source_speed = float(water.speed[at] + rise)
    inside = (depth >= water.depth[at]) & (depth <= water.depth[at + 1])
    difference = np.where(inside, water.gradient[at] * (depth - source), (speed - water.speed[at]) - rise)
    doubt = np.zeros(water.depth.size) if water.uncertainty is None else water.uncertainty / water.speed
    layers = (depth, difference, water.gradient, 0.5 * (doubt[1:] + doubt[:-1]), water.depth)
    return Medium(
        source_depth=source,
        source_speed=source_speed,
        seabed_depth=seabed,
        up=_side(source, source_speed, layers, downward=False),
        down=_side(source, source_speed, layers, downward=True),
    )


def _side(source: float, source_speed: float, layers: tuple[np.ndarray, ...], *, downward: bool) -> Side:
    """The arrays of one side, as `_kernels` describes them."""
    depth, difference, gradient, doubt, nodes = layers
    beyond = depth > source if downward else depth < source
    order = slice(None) if downward else slice(None, None, -1)
    z = np.concatenate(([source], depth[beyond][order]))
    d = np.concatenate(([0.0], difference[beyond][order]))
    middle = 0.5 * (z[1:] + z[:-1])
    of = np.clip(np.searchsorted(nodes, middle, side="right") - 1, 0, nodes.size - 2)
    ratio = 1.0 + d / source_speed
    excess = d * (2.0 * source_speed + d) / source_speed**2
    speed = source_speed * ratio
    peak = np.maximum.accumulate(np.concatenate(([-np.inf], excess[1:])))
    side = (
        np.abs(z - source),
        np.abs(np.diff(z)),
        gradient[of] * (1.0 if downward else -1.0),
        0.5 / np.sqrt(speed[1:] * speed[:-1]),
        excess,
        ratio,
        peak,
        doubt[of],
    )
    return tuple(kernel_array(values) for values in side)
