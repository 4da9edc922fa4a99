"""The speed field of a section: a cubic spline in range and depth, twice continuously differentiable."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from .._numba import kernel_array
from ..errors import InputError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

# Bins of the table that finds the cell of a depth, all thinner than the thinnest cell; 1 MB at most.
_MOST_BINS = 1 << 18
# As for profiles, with room for what flattening adds (0.2 % at the bottom of the deepest trench).
_SLOWEST, _FASTEST = 1000.0, 3010.0
_WEIGHTS = 16


@dataclass(frozen=True, eq=False, repr=False)
class SpeedField:
    """Sound speed over range and depth, as kernels take it; made by `from_speeds`.

    In each cell the spline of w = (c_ref/c)² is the sum of a[4 m + n] xi^m zeta^n, m and n from 0 to 3, where xi and
    zeta run from 0 to 1 across the cell in range and depth.

    Parameters
    ----------
    ranges : array_like, shape (nx + 1,)
        Edges of the cells, m, equally far apart.
    depths : array_like, shape (nz + 1,)
        Edges of the cells, m, from 0 down.
    coefficients : array_like, shape (nx, nz, 16)
        Of each cell. One cell in range, with m = 0 alone, where the water does not change with range.
    reference_speed : float
        c_ref, m/s.
    varies : bool
        Whether the field changes with range.

    Notes
    -----
    Beyond its edges in range the field is that of the edge. Above and below it goes on as the edge cell's polynomial
    for that cell's height, then linearly (in w); nothing should be read into that: rays end at the seabed.

    Examples
    --------
    >>> field = SpeedField.from_speeds([0.0, 100.0, 200.0], [1500.0, 1500.0, 1500.0])
    >>> field, field.speed_at(5000.0, 130.0)
    (<SpeedField: 2 cells in depth to 200 m>, 1500.0)
    """

    ranges: Floats
    depths: Floats
    coefficients: Floats
    reference_speed: float
    varies: bool
    guess: NDArray[np.int32] = field(init=False)
    bins_per_metre: float = field(init=False)

    def __post_init__(self) -> None:
        put = object.__setattr__
        for name in ("ranges", "depths", "coefficients"):
            values = np.array(getattr(self, name), dtype=np.float64, order="C")
            values.flags.writeable = False
            put(self, name, values)
        cells = (self.ranges.size - 1, self.depths.size - 1, _WEIGHTS)
        if self.coefficients.shape != cells:
            raise InputError(f"speed field: coefficients of shape {self.coefficients.shape}; {cells} would be right")
        _check_edges("depths", self.depths)
        deepest, thinnest = float(self.depths[-1]), float(np.diff(self.depths).min())
        bins = int(np.ceil(1.01 * deepest / thinnest))
        if bins > _MOST_BINS:
            raise InputError(
                f"speed field: a cell of {thinnest:g} m is too thin; {1.01 * deepest / _MOST_BINS:.2g} m will do"
            )
        put(self, "bins_per_metre", bins / deepest)
        # one more, for depths that rounding puts beyond the last bin; a hair above, so that none starts too low
        tops = np.arange(bins + 1) / self.bins_per_metre * (1.0 - 1e-12)
        found = np.searchsorted(self.depths, tops, side="right") - 1
        put(self, "guess", np.clip(found, 0, self.depths.size - 2).astype(np.int32))
        self.guess.flags.writeable = False

    def __getstate__(self) -> dict[str, Any]:
        # What kernels take is made again where it is needed: it is as large as the field itself.
        return {name: value for name, value in self.__dict__.items() if name != "_arrays"}

    @classmethod
    def from_speeds(
        cls, depths: ArrayLike, speeds: ArrayLike, ranges: ArrayLike | None = None, *, reference_speed: float = 0.0
    ) -> SpeedField:
        """The spline through speeds on a grid.

        Parameters
        ----------
        depths : array_like, shape (nz + 1,)
            m, from 0 down, at least two.
        speeds : array_like, shape (nz + 1,) or (nx + 1, nz + 1)
            m/s; in the second shape along the ranges.
        ranges : array_like, shape (nx + 1,), optional
            m, equally far apart; needed for the second shape.
        reference_speed : float, optional
            c_ref, m/s; the mean of the speeds where not given.

        Returns
        -------
        SpeedField
            Through every speed given; at the ends the spline has no knot at the second point ("not-a-knot").

        Raises
        ------
        InputError
            Depths that do not start at 0 and increase, ranges not equally far apart, a speed that is none.

        Examples
        --------
        >>> field = SpeedField.from_speeds([0.0, 50.0, 100.0], [[1500.0, 1490.0, 1485.0]] * 4, [0.0, 1e3, 2e3, 3e3])
        >>> round(field.speed_at(1500.0, 50.0), 9)
        1490.0
        """
        z, c = np.array(depths, dtype=np.float64), np.array(speeds, dtype=np.float64)
        _check_edges("depths", z)
        varies = c.ndim == 2
        if ranges is None and varies:
            raise InputError("speed field: speeds over range and depth need ranges, one for each row")
        x = np.array([0.0, 1.0] if ranges is None else ranges, dtype=np.float64)
        if ranges is not None:
            _check_even(x)
        shape = (x.size, z.size) if varies else (z.size,)
        if c.shape != shape:
            raise InputError(f"speed field: speeds of shape {c.shape}; {shape} would be right for its edges")
        bad = ~((c >= _SLOWEST) & (c <= _FASTEST))
        if bad.any():
            raise InputError(
                f"speed field: a speed is {c[bad][0]:g} m/s; {_SLOWEST:g} to {_FASTEST:g} m/s would be right"
            )
        reference = float(reference_speed or c.mean())
        w = (reference / c) ** 2
        return cls(x, z, _cells(x, z, w), reference, varies)

    def __repr__(self) -> str:
        across = f"{self.ranges.size - 1} cells in range to {self.ranges[-1]:g} m, " if self.varies else ""
        return f"<SpeedField: {across}{self.depths.size - 1} cells in depth to {self.depths[-1]:g} m>"

    @cached_property
    def _arrays(self) -> tuple[Any, ...]:
        x, deepest = self.ranges, np.nextafter(self.depths[-1], 0.0)
        frame = kernel_array([x[0], (x.size - 1) / (x[-1] - x[0]), self.bins_per_metre, deepest, float(self.varies)])
        inverse = kernel_array(1.0 / np.diff(self.depths))
        # copies: kernels are compiled for arrays that can be written
        return frame, kernel_array(self.depths), inverse, self.guess.copy(), kernel_array(self.coefficients)

    def kernel_arrays(self) -> tuple[Any, ...]:
        """The arrays that the kernel `field` takes: frame, depths, 1/heights, guess, coefficients."""
        return self._arrays

    def derivatives_at(self, range: ArrayLike, depth: ArrayLike) -> Floats:  # noqa: A002  # the trade's word
        """The field and its derivatives at points.

        Parameters
        ----------
        range, depth : array_like
            m, of one shape or to be broadcast.

        Returns
        -------
        numpy.ndarray, shape (..., 6)
            w = (c_ref/c)², w_x, w_z, w_xx, w_xz, w_zz, in powers of 1/m.

        Examples
        --------
        >>> SpeedField.from_speeds([0.0, 100.0], [1500.0, 1500.0]).derivatives_at(0.0, [10.0, 20.0])[:, 0]
        array([1., 1.])
        """
        from ._kernels_field import fields

        x, z = np.broadcast_arrays(np.asarray(range, np.float64), np.asarray(depth, np.float64))
        out = np.empty((x.size, 6))
        fields(kernel_array(x.flatten()), kernel_array(z.flatten()), self.kernel_arrays(), out)
        found: Floats = out.reshape((*x.shape, 6))
        return found

    def speed_at(self, range: ArrayLike, depth: ArrayLike) -> Any:  # noqa: A002
        """Sound speed at points, m/s; beyond the edges as the notes of the class say.

        Parameters
        ----------
        range, depth : float or array_like
            m, of one shape or to be broadcast.

        Returns
        -------
        float or numpy.ndarray

        Examples
        --------
        >>> SpeedField.from_speeds([0.0, 100.0], [1500.0, 1500.0]).speed_at(0.0, [10.0, 20.0])
        array([1500., 1500.])
        """
        speed = self.reference_speed / np.sqrt(self.derivatives_at(range, depth)[..., 0])
        return float(speed) if speed.ndim == 0 else speed


def _cells(x: Floats, z: Floats, w: Floats) -> Floats:
    """The polynomials of each cell of the tensor spline through w."""
    from scipy.interpolate import CubicSpline

    power = np.arange(4)
    down = CubicSpline(z, w, axis=-1).c[::-1]  # (4 powers of depth, cells in depth[, ranges])
    down = down * (np.diff(z)[None, :] ** power[:, None]).reshape((4, -1) + (1,) * (w.ndim - 1))
    if w.ndim == 1:
        alone = np.zeros((1, z.size - 1, _WEIGHTS))
        alone[0, :, :4] = down.T
        return alone
    width = (x[-1] - x[0]) / (x.size - 1)
    both = CubicSpline(x, down, axis=-1).c[::-1]  # (4 powers of range, cells in range, 4 powers of depth, cells)
    both = both * (width**power)[:, None, None, None]
    found: Floats = np.moveaxis(both, (1, 3), (0, 1)).reshape(x.size - 1, z.size - 1, _WEIGHTS)
    return found


def _check_edges(name: str, z: Floats) -> None:
    if z.ndim != 1 or z.size < 2 or not np.isfinite(z).all():
        raise InputError(f"speed field: {name} are no list of two or more finite numbers")
    if z[0] != 0.0 or (np.diff(z) <= 0.0).any():
        raise InputError(f"speed field: {name} from {z[0]:g} to {z[-1]:g} m; from 0 down, increasing, would be right")


def _check_even(x: Floats) -> None:
    if x.ndim != 1 or x.size < 2 or not np.isfinite(x).all():
        raise InputError("speed field: ranges are no list of two or more finite numbers")
    steps = np.diff(x)
    width = (x[-1] - x[0]) / (x.size - 1)
    if not width > 0.0 or (np.abs(steps - width) > 1e-6 * width).any():
        raise InputError(
            f"speed field: ranges go by {steps.min():g} to {steps.max():g} m; equal steps upward would be right"
        )
