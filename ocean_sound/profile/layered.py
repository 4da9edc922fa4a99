"""What follows from levels between which the speed is linear: speeds, means and times between two depths."""

from __future__ import annotations

from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .columns import whose

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import ArrayLike, NDArray


class Layered:
    """Levels of depth and speed, linear in between, with the shapes and noise of what the speed is uncertain by."""

    depth: NDArray[np.float64]
    speed: NDArray[np.float64]
    uncertainty: NDArray[np.float64] | None
    shapes: Mapping[str, NDArray[np.float64]]
    noise: NDArray[np.float64] | None
    id: str

    @cached_property
    def gradient(self) -> NDArray[np.float64]:
        """Gradient of sound speed in each layer, 1/s, positive where speed grows downward; shape (levels - 1,)."""
        gradient: NDArray[np.float64] = np.diff(self.speed) / np.diff(self.depth)
        gradient.flags.writeable = False
        return gradient

    def at(self, depth: ArrayLike) -> Any:
        """The sound speed at a depth, m/s, by linear interpolation.

        Parameters
        ----------
        depth : float or array_like
            Depth, m, within the levels of the profile.

        Returns
        -------
        float or numpy.ndarray
            Sound speed, m/s, in the shape of `depth`.

        Raises
        ------
        InputError
            If a depth lies above the first or below the last level, or is not a number.

        Examples
        --------
        >>> from ocean_sound.profile import Profile
        >>> Profile([0.0, 10.0], [1500.0, 1490.0]).at([0.0, 2.5])
        array([1500. , 1497.5])
        """
        wanted = np.asarray(depth, dtype=np.float64)
        self._require_within(wanted)
        speed = np.interp(wanted, self.depth, self.speed)
        return float(speed) if wanted.ndim == 0 else speed

    def mean_speed(self, top: float | None = None, bottom: float | None = None) -> float:
        """The depth average of sound speed between two depths, m/s.

        Parameters
        ----------
        top, bottom : float, optional
            The two depths, m, in either order; the first and the last level where not given.

        Returns
        -------
        float
            The integral of speed over depth, divided by the distance; at two equal depths the speed there.

        Raises
        ------
        InputError
            If a depth lies outside the profile.

        Examples
        --------
        >>> from ocean_sound.profile import Profile
        >>> Profile([0.0, 10.0], [1500.0, 1490.0]).mean_speed()
        1495.0
        """
        depth, speed = self._between(top, bottom)
        if depth[-1] == depth[0]:
            return float(speed[0])
        return float(np.sum(np.diff(depth) * (speed[1:] + speed[:-1])) / (2.0 * (depth[-1] - depth[0])))

    def travel_time(self, top: float | None = None, bottom: float | None = None) -> float:
        """The one-way travel time of sound straight up or down between two depths, s.

        Parameters
        ----------
        top, bottom : float, optional
            The two depths, m, in either order; the first and the last level where not given.

        Returns
        -------
        float
            Travel time, s, never negative.

        Raises
        ------
        InputError
            If a depth lies outside the profile.

        Notes
        -----
        In a layer of thickness h from speed c1 to c2 the time is (h / g) ln(c2 / c1), g = (c2 - c1) / h. Written as
        2 h / (c1 + c2) * atanh(y) / y with y = (c2 - c1) / (c1 + c2) it cancels nowhere, however small the gradient.

        Examples
        --------
        >>> from ocean_sound.profile import Profile
        >>> round(Profile([0.0, 1000.0], [1500.0, 1517.0]).travel_time(), 12)
        0.662917191661
        """
        depth, speed = self._between(top, bottom)
        total = speed[1:] + speed[:-1]
        y = np.diff(speed) / total
        stretch = np.ones_like(y)
        np.divide(np.arctanh(y), y, out=stretch, where=y != 0.0)
        return float(np.sum(2.0 * np.diff(depth) / total * stretch))

    def harmonic_mean_speed(self, top: float | None = None, bottom: float | None = None) -> float:
        """The harmonic mean of sound speed between two depths, m/s: the distance over the vertical travel time.

        This is the one speed with which an echo straight below gives the true depth.

        Parameters
        ----------
        top, bottom : float, optional
            The two depths, m, in either order; the first and the last level where not given.

        Returns
        -------
        float
            Distance over travel time; at two equal depths the speed there.

        Raises
        ------
        InputError
            If a depth lies outside the profile.

        Examples
        --------
        >>> from ocean_sound.profile import Profile
        >>> Profile([0.0, 10.0], [1500.0, 1500.0]).harmonic_mean_speed(2.0, 7.0)
        1500.0
        """
        depth, speed = self._between(top, bottom)
        if depth[-1] == depth[0]:
            return float(speed[0])
        return float(depth[-1] - depth[0]) / self.travel_time(top, bottom)

    def travel_time_uncertainty(self, top: float | None = None, bottom: float | None = None) -> float:
        """Standard uncertainty (k = 1) of the one-way travel time between two depths, s.

        Parameters
        ----------
        top, bottom : float, optional
            The two depths, m, in either order; the first and the last level where not given.

        Returns
        -------
        float
            NaN where the uncertainty of the speed is not known.

        Raises
        ------
        InputError
            If a depth lies outside the profile.

        Notes
        -----
        To first order the time errs by the integral of -dc / c^2. Each shape goes into that integral with its sign;
        their squares, and those of the levels' noise, add.

        Examples
        --------
        >>> from ocean_sound.profile import Profile
        >>> profile = Profile([0.0, 1500.0], [1500.0, 1500.0], shapes={"up": [0.0, 3.0], "down": [-1.5, 1.5]})
        >>> profile.travel_time_uncertainty()
        0.001
        """
        ends = self._ends(top, bottom)
        if self.uncertainty is None:
            return float("nan")
        weight = _weights(self.depth, float(ends[0]), float(ends[1])) / self.speed**2
        used = weight != 0.0
        sums = [float(np.sum(weight[used] * shape[used])) for shape in self.shapes.values()]
        if self.noise is not None:
            sums.append(float(np.linalg.norm(weight[used] * self.noise[used])))
        return float(np.hypot.reduce(sums)) if sums else 0.0

    def mean_speed_uncertainty(self, top: float | None = None, bottom: float | None = None) -> float:
        """Standard uncertainty (k = 1) of the harmonic mean speed between two depths, m/s.

        Parameters
        ----------
        top, bottom : float, optional
            The two depths, m, in either order; the first and the last level where not given.

        Returns
        -------
        float
            NaN where the uncertainty of the speed is not known.

        Raises
        ------
        InputError
            If a depth lies outside the profile.

        Examples
        --------
        >>> from ocean_sound.profile import Profile
        >>> noisy = Profile([0.0, 50.0, 100.0], [1500.0] * 3, noise=[0.2, 0.2, 0.2])
        >>> round(noisy.mean_speed_uncertainty(), 4)
        0.1225
        """
        ends = self._ends(top, bottom)
        if ends[0] == ends[1]:
            return float("nan") if self.uncertainty is None else float(np.interp(ends[0], self.depth, self.uncertainty))
        time = self.travel_time(top, bottom)
        return self.harmonic_mean_speed(top, bottom) * self.travel_time_uncertainty(top, bottom) / time

    def _ends(self, top: float | None, bottom: float | None) -> NDArray[np.float64]:
        """The two depths, the upper one first."""
        ends = np.array(
            [self.depth[0] if top is None else top, self.depth[-1] if bottom is None else bottom], dtype=np.float64
        )
        self._require_within(ends)
        ends.sort()
        return ends

    def _between(self, top: float | None, bottom: float | None) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Depth and speed of the part between two depths, both ends included; at equal depths one point twice."""
        ends = self._ends(top, bottom)
        inner = slice(np.searchsorted(self.depth, ends[0], "right"), np.searchsorted(self.depth, ends[1], "left"))
        at_ends = np.interp(ends, self.depth, self.speed)
        return (
            np.concatenate((ends[:1], self.depth[inner], ends[1:])),
            np.concatenate((at_ends[:1], self.speed[inner], at_ends[1:])),
        )

    def _require_within(self, depth: NDArray[np.float64]) -> None:
        outside = ~((depth >= self.depth[0]) & (depth <= self.depth[-1]))
        if outside.any():
            raise InputError(
                f"{whose(self.id)}: depth {depth[outside].flat[0]:g} m lies outside the profile; "
                f"a depth from {self.depth[0]:g} to {self.depth[-1]:g} m would be right"
            )


def _weights(depth: NDArray[np.float64], top: float, bottom: float) -> NDArray[np.float64]:
    """What each level counts in the integral from top to bottom of a quantity linear between the levels."""
    thickness = np.diff(depth)
    low = np.clip((top - depth[:-1]) / thickness, 0.0, 1.0)
    high = np.clip((bottom - depth[:-1]) / thickness, 0.0, 1.0)
    whole = thickness * (high - low)
    lower = 0.5 * thickness * (high**2 - low**2)
    weight = np.zeros(depth.size)
    weight[:-1] += whole - lower
    weight[1:] += lower
    return weight
