"""A few numbers for each cast of thousands, from flat columns: the lean counterpart of `Profile.features`."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ..profile.features import DEFAULT_PROMINENCE

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from ..profile.speeds import SpeedColumns

    Floats = NDArray[np.float64]


def summaries(speeds: SpeedColumns) -> dict[str, Floats]:
    """What `Profile.features` says of each cast under the same names; NaN where a cast has none of it.

    Parameters
    ----------
    speeds : SpeedColumns
        The casts.

    Returns
    -------
    dict
        ``deepest_depth``, ``surface_speed``, ``harmonic_mean_speed``, ``sonic_layer_depth``, each of shape (casts,).
    """
    from .._numba import kernel_array
    from . import _kernels

    count = speeds.row_size.size
    found = {
        name: np.full(count, np.nan)
        for name in ("deepest_depth", "surface_speed", "harmonic_mean_speed", "sonic_layer_depth")
    }
    filled = np.flatnonzero(speeds.row_size)
    if not filled.size:
        return found
    first, last = speeds.starts[:-1][filled], speeds.starts[1:][filled] - 1
    surface = speeds.depth[first] == 0.0
    found["deepest_depth"][filled] = speeds.depth[last]
    found["surface_speed"][filled[surface]] = speeds.speed[first[surface]]
    found["harmonic_mean_speed"][filled] = (speeds.depth[last] - speeds.depth[first]) / _travel_times(speeds)[filled]
    assumed = np.zeros(count, np.bool_)
    assumed[filled] = speeds.level[first] < 0
    layers = _kernels.sonic_layer_depths(
        speeds.starts.astype(np.int64), kernel_array(speeds.depth), kernel_array(speeds.speed), assumed,
        DEFAULT_PROMINENCE,
    )  # fmt: skip
    found["sonic_layer_depth"][filled[surface]] = layers[filled[surface]]
    return found


def _travel_times(speeds: SpeedColumns) -> Floats:
    """Vertical travel time through each cast, s: in a layer of constant gradient h log(c2/c1)/(c2 - c1)."""
    upper, lower = speeds.speed[:-1], speeds.speed[1:]
    change = (lower - upper) / upper
    # log1p(x)/x by its series where x is small: the quotient loses its digits there, and most layers are such.
    small = np.abs(change) < 1e-3
    ratio = 1.0 - change * (0.5 - change * (1.0 / 3.0 - change * (0.25 - change * (0.2 - change / 6.0))))
    if not small.all():
        ratio[~small] = np.log1p(change[~small]) / change[~small]
    times = np.append(np.diff(speeds.depth) / upper * ratio, 0.0)
    filled = speeds.row_size > 0
    times[speeds.starts[1:][filled] - 1] = 0.0  # from the end of one cast to the beginning of the next
    total = np.zeros(speeds.row_size.size)
    total[filled] = np.add.reduceat(times, speeds.starts[:-1][filled])
    return total
