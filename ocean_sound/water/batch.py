"""TEOS-10 for many casts at once: what gsw computes, to the last bit, in a sixth of its time.

gsw serves all other calls, for two reasons: one cast must not wait 0.3 s for the compiler of the kernels, and only gsw
holds the atlas and all the other quantities. The kernels do the same operations in the same order; the tests hold them
to gsw over the whole oceanographic range.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import gsw
import numpy as np

from ._state import State
from .vertical import known_latitude

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from ._arrays import Array

# dbar, pressures of the atlas of gsw; between two of them its anomaly ratio is a straight line, and beyond constant.
ATLAS_PRESSURES = (
    0, 10, 20, 30, 40, 50, 76, 101, 126, 151, 176, 202, 252, 303, 353, 404, 505, 606, 707, 808, 909, 1010, 1111, 1213,
    1314, 1416, 1517, 1771, 2025, 2279, 2534, 2789, 3045, 3300, 3556, 3812, 4069, 4325, 4583, 4840, 5098, 5355, 5614,
    5872, 6131,
)  # fmt: skip


class Batch:
    """Many casts, each at its place.

    Parameters
    ----------
    latitude, longitude : array-like, shape (casts,)
        Degrees, NaN where unknown: the Reference Salinity is then taken for the Absolute Salinity, and the latitude as
        45, as everywhere in `water`.

    Notes
    -----
    The columns below hold the levels of all casts, one cast after another; `row_size` says how many each has.

    Examples
    --------
    >>> batch = Batch([45.0, np.nan], [-20.0, np.nan])
    >>> p, t, s = np.array([0.0, 100.0, 100.0]), np.full(3, 10.0), np.full(3, 35.0)
    >>> depth, speed = batch.depth_and_speed(t, s, p, np.array([2, 1]))
    >>> depth.round(2), speed.round(2)
    (array([ 0.  , 99.28, 99.28]), array([1489.82, 1491.44, 1491.44]))
    """

    def __init__(self, latitude: Any, longitude: Any) -> None:
        self._latitude = np.asarray(latitude, dtype=np.float64)
        longitude = np.asarray(longitude, dtype=np.float64)
        self._levels = np.array(ATLAS_PRESSURES, dtype=np.float64)
        self._anomaly: Array = gsw.SAAR(self._levels, longitude[:, np.newaxis], self._latitude[:, np.newaxis])
        self._fresh: Array = gsw.SA_from_SP(np.zeros(longitude.size), 0.0, longitude, self._latitude)

    def speed(self, temperature: Array, salinity: Array, pressure: Array, row_size: NDArray[np.int64]) -> Array:
        """Speed of sound (m/s), as `speed_of_columns` gives it.

        Parameters
        ----------
        temperature, salinity, pressure : numpy.ndarray, shape (levels,)
            degC, practical salinity, dbar.
        row_size : numpy.ndarray of int, shape (casts,)

        Returns
        -------
        numpy.ndarray
            NaN where an input is NaN or impossible.
        """
        state = State(temperature, salinity, pressure).possible()
        columns = state.temperature, state.salinity, state.vertical("pressure")
        return self._volume_and_speed(*columns, _starts(row_size))[1]

    def depth_and_speed(
        self, temperature: Array, salinity: Array, pressure: Array, row_size: NDArray[np.int64]
    ) -> tuple[Array, Array]:
        """Depth (m) as by `depth_from_density` and speed (m/s) as by `teos10`.

        Parameters
        ----------
        temperature, salinity, pressure, row_size
            As for `speed`; no pressure may be NaN.

        Returns
        -------
        depth, speed : numpy.ndarray
        """
        from .._numba import kernel_array
        from . import _kernels_teos10 as kernels

        starts = _starts(row_size)
        volume, speed = self._volume_and_speed(temperature, salinity, pressure, starts)
        depth = np.empty_like(volume)
        latitude = kernel_array(known_latitude(self._latitude))
        kernels.depths(kernel_array(pressure), volume, starts, latitude, depth)
        return depth, speed

    def _volume_and_speed(
        self, temperature: Array, salinity: Array, pressure: Array, starts: NDArray[np.int64]
    ) -> tuple[Array, Array]:
        from .._numba import kernel_array
        from . import _kernels_teos10 as kernels

        temperature, salinity, pressure = map(kernel_array, (temperature, salinity, pressure))
        absolute, conservative, volume, speed = np.empty((4, pressure.size))
        kernels.absolute_salinities(
            salinity, pressure, starts, self._levels, kernel_array(self._anomaly), kernel_array(self._fresh), absolute
        )
        kernels.conservative_temperatures(absolute, temperature, pressure, conservative)
        kernels.volumes_and_speeds(absolute, conservative, pressure, volume, speed)
        return volume, speed


def _starts(row_size: NDArray[np.int64]) -> NDArray[np.int64]:
    return np.concatenate(([0], np.cumsum(row_size, dtype=np.int64)))
