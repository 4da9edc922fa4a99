"""The seabed below a section: depth, slope and curvature along the track, and what it is made of."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any, TypeAlias

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from .sediments import Kind, Sediment, SedimentKind, kind_of, resolved
from .track import Place, Track, spacing_of

if TYPE_CHECKING:
    from os import PathLike

    from numpy.typing import ArrayLike, NDArray

    from ..grids import Bathymetry

    Floats = NDArray[np.float64]

Kinds: TypeAlias = "Kind | Sequence[tuple[float, Kind]]"

DEEPEST = 12000.0
"""m; no seabed is deeper."""
_MOST_BINS = 1 << 18
_MOST_POINTS = 20001


@dataclass(frozen=True, eq=False, repr=False)
class Seabed:
    """Depth along the track: a smooth curve through the points that neither overshoots nor invents hills.

    Parameters
    ----------
    ranges : array_like, shape (points,)
        m along the track, increasing, at least two.
    depths : array_like, shape (points,)
        m, positive down, above 0.
    kind : str, Sediment, None, or sequence of (range, kind)
        A name from `SEDIMENTS`, a sediment, or None for a seabed that absorbs all; a list where it changes along the
        track, each kind from its range (m) on.
    notes : tuple of str
        How it came about.

    Raises
    ------
    InputError
        Ranges that do not increase, a depth that is no sea, an unknown kind; the message says which.

    Notes
    -----
    Cubic Hermite pieces with the slopes of Fritsch and Butland (1984, SIAM J. Sci. Stat. Comput. 5:300): slope is
    continuous, curvature is not. Beyond its first and last point the seabed is level.

    Examples
    --------
    >>> seabed = Seabed([0.0, 5000.0, 10000.0], [100.0, 120.0, 300.0], kind=[(0.0, "sand"), (7000.0, "silt")])
    >>> seabed
    <Seabed: 3 points to 10000 m, 100 to 300 m deep, sand, silt>
    >>> seabed.depth_at([5000.0, 20000.0]), seabed.kind_at(8000.0).name
    (array([120., 300.]), 'silt')
    """

    ranges: Floats
    depths: Floats
    kind: Any = "sand"
    notes: tuple[str, ...] = ()
    kinds: tuple[tuple[float, Sediment | SedimentKind | None], ...] = field(init=False)

    def __post_init__(self) -> None:
        put = object.__setattr__
        for name in ("ranges", "depths"):
            values = np.array(getattr(self, name), dtype=np.float64)
            values.flags.writeable = False
            put(self, name, values)
        _check(self.ranges, self.depths)
        put(self, "kinds", _kinds(self.kind))
        put(self, "notes", tuple(self.notes))

    @classmethod
    def flat(cls, depth: float, kind: Kinds = "sand") -> Seabed:
        """A level seabed.

        Examples
        --------
        >>> Seabed.flat(100.0, kind="silt").depth_at(1e6)
        100.0
        """
        return cls(np.array([0.0, 1.0]), np.array([depth, depth], dtype=np.float64), kind)

    @classmethod
    def from_bathymetry(
        cls,
        path: str | PathLike[str] | Bathymetry,
        start: Place | None = None,
        end: Place | None = None,
        *,
        along: Track | Sequence[Place] | None = None,
        kind: Kinds = "sand",
        spacing: float | None = None,
    ) -> Seabed:
        """The seabed below a line, from a grid on disk.

        Parameters
        ----------
        path : path-like or Bathymetry
            A CF grid of heights or depths, or one from `open_bathymetry` (which takes what the file does not say).
        start, end : tuple of float
            Latitude and longitude, degrees; the line is the geodesic between them, across the date line too.
        along : Track or sequence of (latitude, longitude), optional
            A track of several legs instead of start and end.
        kind : str, Sediment, None, or sequence of (range, kind)
            As for the class.
        spacing : float, optional
            Distance between the points taken from the grid, m; that of the grid itself where not given.

        Returns
        -------
        Seabed
            Depths bilinear in the grid; they refer to its datum, mean sea level for most.

        Raises
        ------
        InputError
            The line leaves the grid or meets land or a gap in it; the message says where.
        """
        from ..grids import Bathymetry, open_bathymetry

        track = track_of(start, end, along)
        grid = path if isinstance(path, Bathymetry) else open_bathymetry(path)
        name = str(grid.grid.path).replace("\\", "/").rsplit("/", 1)[-1]
        step = spacing_of(grid.grid, track) if spacing is None else float(spacing)
        if not step > 0.0:
            raise InputError(f"seabed: spacing is {step:g} m; a distance above 0 would be right")
        pieces = int(min(max(np.ceil(track.length / step), 1), _MOST_POINTS - 1))
        ranges = np.linspace(0.0, track.length, pieces + 1)
        latitude, longitude = track.at(ranges)
        depths = np.asarray(grid.depth_at(latitude, longitude))
        bad = np.flatnonzero(~(depths > 0.0))
        if bad.size:
            j = int(bad[0])
            what = "has no value" if np.isnan(depths[j]) else f"is land ({-depths[j]:g} m high)"
            raise InputError(
                f"{grid.grid.path}: {what} at latitude {latitude[j]:.4f}, longitude {longitude[j]:.4f}, "
                f"{ranges[j] / 1000.0:.1f} km along the line; a line over the sea would be right"
            )
        note = f"seabed from {name}, a point each {ranges[1]:.0f} m"
        return cls(ranges, depths, kind, (note,))

    def __repr__(self) -> str:
        names = ", ".join(dict.fromkeys(_name(kind) for _, kind in self.kinds))
        low, high = self.depths.min(), self.depths.max()
        if low == high:
            return f"<Seabed: level at {low:g} m, {names}>"
        return f"<Seabed: {self.ranges.size} points to {self.ranges[-1]:g} m, {low:g} to {high:g} m deep, {names}>"

    @property
    def shallowest(self) -> float:
        """Its least depth, m; the curve has none that the points don't span."""
        return float(self.depths.min())

    @property
    def deepest(self) -> float:
        """Its greatest depth, m."""
        return float(self.depths.max())

    @property
    def varies(self) -> bool:
        """Whether depth or kind changes along the track."""
        return self.shallowest != self.deepest or len(self.kinds) > 1

    @cached_property
    def _arrays(self) -> tuple[Any, ...]:
        from scipy.interpolate import PchipInterpolator

        x = self.ranges
        lengths = np.diff(x)
        pieces = PchipInterpolator(x, self.depths).c[::-1].T * lengths[:, None] ** np.arange(4)
        span = float(x[-1] - x[0])
        bins = int(np.ceil(1.01 * span / float(lengths.min())))
        tops = x[0] + np.arange(bins + 1) * (span / bins) - 1e-12 * span
        guess = np.clip(np.searchsorted(x, tops, side="right") - 1, 0, x.size - 2).astype(np.int32)
        frame = kernel_array([x[0], x[-1], bins / span, np.nextafter(x[-1], x[0])])
        return frame, kernel_array(x), kernel_array(1.0 / lengths), guess, kernel_array(pieces)

    def kernel_arrays(self) -> tuple[Any, ...]:
        """The arrays that the kernel `seabed` takes: frame, nodes, 1/lengths, guess, pieces."""
        return self._arrays

    def shape_at(self, range: ArrayLike) -> Floats:  # noqa: A002  # the trade's word
        """Depth (m), slope dz/dx and second derivative d²z/dx² (1/m) along the track.

        Parameters
        ----------
        range : array_like
            m.

        Returns
        -------
        numpy.ndarray, shape (..., 3)

        Examples
        --------
        >>> Seabed([0.0, 1000.0], [100.0, 150.0]).shape_at(500.0).round(9).tolist()
        [125.0, 0.05, 0.0]
        """
        from ._kernels_seabed import seabeds

        x = np.asarray(range, dtype=np.float64)
        out = np.empty((x.size, 3))
        seabeds(kernel_array(x.ravel()), self.kernel_arrays(), out)
        return out.reshape((*x.shape, 3))

    def depth_at(self, range: ArrayLike) -> Any:  # noqa: A002
        """Depth of the seabed along the track, m, in the shape of `range` (m).

        Examples
        --------
        >>> Seabed([0.0, 1000.0], [100.0, 150.0]).depth_at(500.0)
        125.0
        """
        depth = self.shape_at(range)[..., 0]
        return float(depth) if depth.ndim == 0 else depth

    def kind_at(self, range: float) -> Sediment | SedimentKind | None:  # noqa: A002
        """What the seabed is made of at a range, m; None where it absorbs all."""
        starts = [start for start, _ in self.kinds]
        return self.kinds[max(int(np.searchsorted(starts, range, side="right")) - 1, 0)][1]

    def sediment_at(self, range: float, water_speed: float) -> Sediment | None:  # noqa: A002
        """The sediment at a range, m, under bottom water of a speed, m/s; None where it absorbs all.

        Examples
        --------
        >>> round(Seabed.flat(100.0).sediment_at(0.0, 1500.0).speed, 6)
        1650.0
        """
        return resolved(self.kind_at(range), water_speed)

    def at_depths(self, depths: ArrayLike, note: str = "") -> Seabed:
        """The same with other depths at its points, as for flattened water."""
        notes = (*self.notes, note) if note else self.notes
        return Seabed(self.ranges, np.asarray(depths, dtype=np.float64), self.kind, notes)


def track_of(start: Place | None, end: Place | None, along: Track | Sequence[Place] | None) -> Track:
    """The track that is meant by start and end, or by along."""
    if along is not None and start is None and end is None:
        return Track.of(along)
    if along is None and start is not None and end is not None:
        return Track.between(start, end)
    raise InputError("a line needs either start and end, each as (latitude, longitude), or along, a list of such")


def _name(kind: Sediment | SedimentKind | None) -> str:
    return "absorbs all" if kind is None else kind.name or "sediment of its own numbers"


def _kinds(kind: Any) -> tuple[tuple[float, Sediment | SedimentKind | None], ...]:
    if kind is None or isinstance(kind, str | Sediment | SedimentKind):
        return ((0.0, kind_of(kind)),)
    if not isinstance(kind, Sequence) or not kind:
        raise InputError(f"seabed: kind is {kind!r}; a name, a Sediment, None, or a list of (range, kind) is right")
    found: list[tuple[float, Sediment | SedimentKind | None]] = []
    for entry in kind:
        if not isinstance(entry, Sequence) or isinstance(entry, str) or len(entry) != 2:
            raise InputError(f"seabed: an entry of kind is {entry!r}; (range in m, kind) would be right")
        start = float(entry[0])
        if not np.isfinite(start) or (found and start <= found[-1][0]):
            raise InputError(f"seabed: a kind starts at {start:g} m; ranges that increase would be right")
        found.append((start, kind_of(entry[1], f"seabed from {start:g} m")))
    return tuple(found)


def _check(ranges: Floats, depths: Floats) -> None:
    """Raise InputError for the first thing that keeps these points from being a seabed."""
    if ranges.ndim != 1 or ranges.shape != depths.shape or ranges.size < 2:
        raise InputError(
            f"seabed: {ranges.size} ranges and {depths.size} depths; as many of each, and two at least, would be right"
        )
    if not np.isfinite(ranges).all():
        raise InputError("seabed: a range is not a finite number; metres along the track would be right")
    lengths = np.diff(ranges)
    if (lengths <= 0.0).any():
        j = int(np.flatnonzero(lengths <= 0.0)[0]) + 1
        raise InputError(
            f"seabed: point {j} (counted from 0) is at {ranges[j]:g} m, not beyond the one before it at "
            f"{ranges[j - 1]:g} m; ranges that increase would be right"
        )
    bad = np.flatnonzero(~((depths > 0.0) & (depths <= DEEPEST)))
    if bad.size:
        j = int(bad[0])
        what = "land" if depths[j] <= 0.0 else "no depth of the sea"
        raise InputError(
            f"seabed: point {j} (counted from 0), at {ranges[j]:g} m, has the depth {depths[j]:g} m, {what}; above 0 "
            f"and up to {DEEPEST:g} m would be right"
        )
    least = (ranges[-1] - ranges[0]) * 1.01 / _MOST_BINS
    if lengths.min() < least:
        j = int(np.argmin(lengths))
        raise InputError(
            f"seabed: points {j} and {j + 1} (counted from 0) are {lengths.min():g} m apart; {least:.2g} m or more "
            "would be right on a track of this length"
        )
