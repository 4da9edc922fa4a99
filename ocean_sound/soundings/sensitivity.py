"""What errors of sound speed do to a sounding: exact derivatives, and a table of variances for any beam."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from . import _kernels_sensitivity as kernels
from ._arguments import together
from .beams import below_transducer

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import ArrayLike, NDArray

    from ..profile import Profile
    from ..rays.medium import Medium

    Floats = NDArray[np.float64]
    Side = tuple[NDArray[Any], ...]

DEFAULT_ANGLE = 75.0  # degrees from the vertical
TOLERANCE = 0.02  # of a standard deviation
# A variance is held against the exact one, or against that of this share of the whole displacement if that is more:
# near 45 degrees a beam may move along the seabed only, and its depth not at all.
FLOOR = 0.05
NO_UNCERTAINTY = "the profile says nothing of its uncertainty, so that of a sounding is unknown"
NO_CHANGE = "nothing is given of how the water changes with time and distance from the cast"

# Cells are fitted to a part of the tolerance, since the largest error need not lie where it is looked for: over depth
# to the first of these, over depth and angle together to the second.
_DEPTH_SHARE, _SHARE = 0.3, 0.6
_INNER = 0.25  # sin² up to which it cancels little that the ray parameter follows the speed: 30 degrees
_NARROWEST = 2e-3  # of the table: cells of sin² are not divided further; in them a beam turns
_LEFT_PART = 0.03  # of the depth cells: so many may lie where some beams of a cell of sin² turn, and others do not
_LEFT_DEPTH = 0.005  # of the depth: so much may lie where a cell of sin² is not good enough, and is marched exactly
_DEPTH_CELLS, _LEAST_CELL = 400, 1e-4  # at most so many; none thinner than this part of the depth
_DEPTH_COLUMNS = np.array([0.0, 0.25, 0.5, 0.75, 0.93, 1.0])  # of the table: beams by which depth cells are chosen
_BINS = 1024
_CELLS_TO_TURN = 40  # over depth, where beams turn: each one has some above its turning point that is marched exactly
_PEAK = 6  # the place among a side's arrays of the largest excess
_TOP = 1e-6  # m: how near to the transducer the first values are taken

_W_PLACES = np.array([-1.0, -0.5, 0.5, 1.0])
_W_CHECKS = np.array([-0.75, 0.0, 0.75])
_W_INVERSE = np.linalg.inv(np.vander(_W_PLACES, kernels.CUBIC, increasing=True))
# Of the places over depth those at even positions are fitted.
_D_PLACES = np.array([-1.0, -0.6, 0.0, 0.6, 1.0])
_FITTED, _CHECKED = slice(0, 5, 2), slice(1, 4)
_D_INVERSE = np.linalg.inv(np.vander(_D_PLACES[_FITTED], kernels.QUADRATIC, increasing=True))
_D_TO_CHECKS = np.vander(_D_PLACES[_CHECKED], kernels.QUADRATIC, increasing=True) @ _D_INVERSE


@dataclass(frozen=True, eq=False)
class Moves:
    """How the end points of beams move with the speed at each level, at a fixed travel time.

    Parameters
    ----------
    levels : numpy.ndarray, shape (levels,)
        Depth of the levels, m: those of the profile, carried to the surface.
    depth, across : numpy.ndarray, shape (beams, levels)
        Derivatives of the depth and of the distance across with respect to the speed at each level, m per m/s, at a
        fixed ray parameter. With an error shape their sum over the levels is the error of the sounding.
    depth_by_slowness, across_by_slowness : numpy.ndarray, shape (beams,)
        Derivatives with respect to the ray parameter, m per s/m.
    """

    levels: Floats
    depth: Floats
    across: Floats
    depth_by_slowness: Floats
    across_by_slowness: Floats


def beam_moves(profile: Profile, sine: ArrayLike, depth: ArrayLike, *, transducer_depth: float = 0.0) -> Moves:
    """Exact first-order derivatives of where beams are after their travel time.

    Parameters
    ----------
    profile : Profile
        The water; one that starts below the surface is extended to it at its first speed.
    sine : array_like
        Sine of the angle from the vertical at the transducer, positive to starboard.
    depth : array_like
        Depth of the end point below the water surface, m.
    transducer_depth : float
        Depth of the transducer below the water surface, m.

    Returns
    -------
    Moves
        NaN for beams that do not get there: they turn, or the profile ends.

    Raises
    ------
    InputError
        If the transducer is not between the surface and the deepest level, or the arguments do not broadcast.

    Notes
    -----
    The ray parameter is that with which the beam leaves. Exact but for rounding; of a beam within a thousandth of the
    horizontal some digits are lost. Derived in `_kernels_sensitivity`.

    Examples
    --------
    In water of one speed a beam of 60 degrees that is 100 m down: depth changes by (1 - tan²) h/c with the speed, at a
    fixed ray parameter, and the distance across by 2 tan h/c.

    >>> from ocean_sound.profile import Profile
    >>> moves = beam_moves(Profile([0, 50, 100], [1500, 1500, 1500]), np.sin(np.radians(60)), 100.0)
    >>> round(1500 * float(moves.depth.sum()), 6), round(1500 * float(moves.across.sum()), 6)
    (-200.0, 346.410162)
    """
    water = below_transducer(profile, transducer_depth)
    u, down = _columns(sine=sine, depth=np.asarray(depth, dtype=float) - water.source_depth)
    nodes = water.down[0].size
    z, x = np.empty((u.size, nodes)), np.empty((u.size, nodes))
    z_p, x_p = np.empty(u.size), np.empty(u.size)
    kernels.move_of_nodes(u, down, water.source_speed, water.down, np.empty((2, nodes)), z, x, z_p, x_p)
    levels = profile.to_surface().depth
    return Moves(levels, _at_levels(levels, water, z), _at_levels(levels, water, x), z_p, x_p)


def _at_levels(levels: Floats, water: Medium, moves: Floats) -> Floats:
    """Derivatives by levels from those by nodes: the first node may lie between two levels."""
    upper, share = _above(levels, water.source_depth)
    found = np.zeros((moves.shape[0], levels.size))
    found[:, upper + 1 :] = moves[:, 1:]
    found[:, upper] = (1.0 - share) * moves[:, 0]
    found[:, upper + 1] += share * moves[:, 0]
    return found


def _above(levels: Floats, transducer_depth: float) -> tuple[int, float]:
    """The level at or above the transducer, and the share of the next one in the speed there."""
    upper = int(np.searchsorted(levels, transducer_depth, side="right")) - 1
    return upper, float((transducer_depth - levels[upper]) / (levels[upper + 1] - levels[upper]))


@dataclass(frozen=True, eq=False)
class PathUncertainty:
    """Variances of soundings that come from the sound speed of one profile; made by `path_uncertainty`.

    Attributes
    ----------
    water : Medium
        The water below the transducer.
    error : float
        The largest error of a standard deviation that was found when it was built, as a share of the exact one: see
        `path_uncertainty`.
    max_angle : float
        Beams farther from the vertical at the transducer, degrees, are marched exactly.
    known_to : float
        Depth below the water surface, m, down to which the profile knows its uncertainty; deeper results are NaN. Minus
        infinity where it knows none.
    notes : tuple of str
        One line for each thing that is not known.
    """

    water: Medium
    error: float
    max_angle: float
    known_to: float
    notes: tuple[str, ...]
    side: Side
    doubt: tuple[Any, ...]
    table: Side
    limits: tuple[float, float, float]

    @property
    def nbytes(self) -> int:
        """Memory that it takes, bytes."""
        return sum(array.nbytes for array in (*self.table, *self.side, self.doubt[0], self.doubt[2]))

    def covariance(
        self,
        sine: ArrayLike,
        below: ArrayLike,
        *,
        slowness_per_speed: ArrayLike,
        slowness_per_steering_speed: ArrayLike = 0.0,
        steering_speed_uncertainty: ArrayLike = 0.0,
        change: ArrayLike = 0.0,
        heave: ArrayLike = 0.0,
    ) -> tuple[Any, Any, Any]:
        """Variances and covariance of soundings.

        Parameters
        ----------
        sine : array_like
            Sine of the angle from the vertical at the transducer, positive to starboard: ray parameter times speed.
        below : array_like
            Depth of the sounding below the transducer, m.
        slowness_per_speed : array_like
            Change of the beam's ray parameter with the profile's speed at the transducer, s2/m2. 0 where the slowness
            is kept (a level flat face whose speed of steering is known); -sine/speed2 where the angle is kept (a curved
            array, or no speed of steering).
        slowness_per_steering_speed : array_like
            Change of the ray parameter with the speed of steering, s2/m2: -sine/speed2 for a level flat face.
        steering_speed_uncertainty : array_like
            Standard uncertainty (k = 1), m/s, with which the speed of steering is known, independent of the profile: 0
            where the number that the beams were steered with is recorded. An error of the sensor that gave the number
            does not count: see `Options`.
        change : array_like
            Variance of the water's change since and away from the cast, relative to that of the shapes of change.
        heave : array_like
            How much deeper than that of the table the transducer is, m, 0 or more. The sine is then that which the
            beam would have at the depth of the table's: its ray parameter times the speed there.

        Returns
        -------
        tuple of float or numpy.ndarray
            Variance of the depth, covariance of depth and distance across, variance of the distance across, m2; NaN
            where the uncertainty of the profile is not known, and for beams that turn or leave the profile.

        Raises
        ------
        InputError
            If the arguments do not broadcast.

        Examples
        --------
        >>> from ocean_sound.profile import Profile
        >>> water = Profile([0, 50, 100], [1500, 1500, 1500], [0.3, 0.3, 0.3])
        >>> doubt = path_uncertainty(water)
        >>> zz, zx, xx = doubt.covariance(np.sin(np.radians(60)), 100.0, slowness_per_speed=0.0)
        >>> round(float(np.sqrt(zz)), 3), round(float(np.sqrt(xx)), 3)
        (0.04, 0.069)
        """
        given = {
            "sine": sine,
            "below": below,
            "slowness_per_speed": slowness_per_speed,
            "slowness_per_steering_speed": slowness_per_steering_speed,
            "steering_speed_uncertainty": steering_speed_uncertainty,
            "change": change,
            "heave": heave,
        }
        u, down, by_speed, by_steering, sigma, changes, deeper = _columns(**given)
        shape = np.broadcast_shapes(*(np.shape(value) for value in given.values()))
        out = tuple(np.empty(u.size) for _ in range(3))
        self.fill(u, down, by_speed, by_steering * sigma, changes, deeper, out)
        zz, zx, xx = (column.reshape(shape)[()] for column in out)
        return zz, zx, xx

    def fill(
        self,
        sine: Floats,
        below: Floats,
        slowness_per_speed: Floats,
        slowness_uncertainty: Floats,
        change: Floats,
        heave: Floats,
        out: tuple[Floats, ...],
    ) -> None:
        """As `covariance`, for flat float64 columns, into columns that are there already.

        slowness_uncertainty: standard uncertainty of the ray parameter, s/m, from causes other than the profile: the
        change with the speed of steering times the uncertainty of that.
        """
        kernels.covariances(
            sine, below, slowness_per_speed, slowness_uncertainty, change, heave,
            self.water.source_speed, self.side, self.doubt, self.table, self.limits, *out,
        )  # fmt: skip


def path_uncertainty(
    profile: Profile,
    *,
    transducer_depth: float = 0.0,
    change: Mapping[str, tuple[ArrayLike, ArrayLike]] | None = None,
    max_angle: float = DEFAULT_ANGLE,
) -> PathUncertainty:
    """The uncertainty of soundings that comes from a profile, tabulated over angle and depth.

    Parameters
    ----------
    profile : Profile
        With its shapes and noise. One that starts below the surface is extended to it. Below its deepest level nothing
        is known: give a profile that was completed, with the uncertainty that this has.
    transducer_depth : float
        Depth of the transducer below the water surface, m.
    change : mapping of str to (depths, amplitudes), optional
        Shapes of the water's change: depths, m, and signed change of the speed there, m/s, of one standard deviation of
        water that has nothing to do any more with that of the cast. Taken at the profile's levels; above the first and
        below the last depth the change there.
    max_angle : float
        The largest angle from the vertical at the transducer that the table serves, degrees.

    Returns
    -------
    PathUncertainty

    Raises
    ------
    InputError
        If the transducer is not between the surface and the deepest level, the angle makes no sense, or a shape of
        change is none.

    Notes
    -----
    First order in the errors. Each shape is fully correlated along the beam, so that its effect adds up with its sign;
    shapes are independent of each other, noise from level to level.

    The table is refined until standard deviations of depth and of the distance across (by half the relative error of
    their variances, and likewise the covariance) are within 2 % of the exact derivative at places between those fitted:
    for beams that keep their slowness, for those that keep their angle, and for those between that are hardest; of the
    cast alone, and with a change of 2 (so also with any between). One that is below a twentieth of the whole
    displacement (the root of both variances together), as that of depth near 45 degrees may be, is held against that
    twentieth: it may be wrong by 1 % of the whole displacement at most.
    `PathUncertainty.error` is the largest error found. Where beams turn they are marched exactly.

    Of a beam whose transducer is deeper (heave) what the layer above it does is taken out of the table's, as if the
    speed were even in it, and the shapes changed there in proportion to each other. A metre of it, 30 m above the
    seabed, adds less than 1 % to the error in water that is even over that metre; in the steep lower side of a river's
    plume (13 m/s in that metre) it was 3 %.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> water = Profile([0, 20, 40, 200], [1510, 1510, 1490, 1492], shapes={"temperature": [0.3, 0.3, 0.1, 0.1]})
    >>> path_uncertainty(water, transducer_depth=3.0).error < 0.02
    True
    """
    if not 0.0 < max_angle < 90.0:
        raise InputError(f"max_angle is {max_angle:g} degrees: above 0 and below 90 would be right")
    water = below_transducer(profile, transducer_depth)
    doubt, nodes = _doubt(profile.to_surface(), water, change or {})
    table, known, error = _EMPTY, -1.0, 0.0
    side = tuple(kernel_array(column[: max(nodes, 2) - (column.size < water.down[0].size)]) for column in water.down)
    if nodes > 1:
        known = float(side[0][-1])
        table, error = _Builder(water.source_speed, side, doubt, max_angle).built()
    return PathUncertainty(
        water=water,
        error=error,
        max_angle=float(max_angle),
        known_to=water.source_depth + known if nodes > 1 else -np.inf,
        notes=_notes(profile, nodes, water, change),
        side=side,
        doubt=doubt,
        table=table,
        limits=(known, *(_BINS * (1.0 - 1e-12) / max(span, _TOP) for span in (table[0][-1], table[2][-1] ** 0.5))),
    )


def _notes(profile: Profile, nodes: int, water: Medium, change: Any) -> tuple[str, ...]:
    notes = []
    if profile.uncertainty is None:
        notes.append(NO_UNCERTAINTY)
    elif nodes < water.down[0].size:
        where = f"below {water.source_depth + water.down[0][nodes - 1]:g} m" if nodes > 1 else "at the transducer"
        notes.append(f"the profile does not know its uncertainty {where}, so that of a sounding is unknown there")
    if not change:
        notes.append(NO_CHANGE)
    return tuple(notes)


def _doubt(profile: Profile, water: Medium, change: Mapping[str, Any]) -> tuple[tuple[Any, ...], int]:
    """Shapes and noise at the nodes below the transducer, as the kernels want them, and how many nodes know them."""
    upper, share = _above(profile.depth, water.source_depth)

    def seen(column: Floats) -> Floats:
        top = column[upper] + (share * (column[upper + 1] - column[upper]) if share > 0.0 else 0.0)
        return np.concatenate(([top], column[upper + 1 :]))

    own = [seen(shape) for shape in profile.shapes.values()]
    changes = [seen(_change(name, shape, profile.depth)) for name, shape in change.items()]
    noise = np.zeros(len(profile)) if profile.noise is None else profile.noise
    below = noise[upper:].copy()
    below[0] *= 1.0 - share
    shapes = np.column_stack((*own, *changes, np.empty((below.size, 0))))
    known = np.isfinite(shapes).all(axis=1) & np.isfinite(below) & (profile.uncertainty is not None)
    nodes = int(np.argmin(known)) if not known.all() else known.size
    tops = shapes[0]
    variance = np.array(
        [np.sum(tops[: len(own)] ** 2) + below[0] ** 2 + (share * below[1]) ** 2, np.sum(tops[len(own) :] ** 2)]
    )
    arrays = kernel_array(shapes[: max(nodes, 2)]), np.array([len(own)]), kernel_array(below[: max(nodes, 2)])
    return (*arrays, np.array([share]), variance), nodes


def _change(name: str, shape: tuple[ArrayLike, ArrayLike], levels: Floats) -> Floats:
    depth, amplitude = (np.asarray(column, dtype=float) for column in shape)
    rising = depth.ndim == 1 and depth.size > 0 and bool((np.diff(depth) > 0.0).all())
    if not (rising and depth.shape == amplitude.shape and np.isfinite([depth, amplitude]).all()):
        raise InputError(
            f"change {name!r}: increasing depths, m, and at each a finite change of speed, m/s, would be right"
        )
    found: Floats = np.interp(levels, depth, amplitude)
    return found


class _Builder:
    """The table of one profile in the making."""

    def __init__(self, speed: float, side: Side, doubt: tuple[Any, ...], max_angle: float) -> None:
        self.speed, self.side, self.doubt = speed, side, doubt
        self.top = float(np.sin(np.radians(max_angle)) ** 2)
        self.width = kernels.WIDE if doubt[0].shape[1] > doubt[1][0] else kernels.NARROW
        self.sums = np.empty((side[0].size, 2 * doubt[0].shape[1] + 8))

    def built(self) -> tuple[Side, float]:
        """The table, and the largest error found."""
        depths = self._depth_edges()
        edges, served, cells, error, outer = self._columns(depths)
        return (
            edges,
            _begins(edges, np.arange(_BINS) * (edges[-1] / _BINS)),
            depths,
            _begins(depths, (np.arange(_BINS) * (depths[-1] ** 0.5 / _BINS)) ** 2),
            np.array(served, dtype=np.bool_),
            np.array([outer], dtype=np.int64),
            np.array(cells, dtype=np.float32),
        ), error

    def _packed(self, w: float, places: Floats, *, inner: bool) -> tuple[int, Floats]:
        """How many cells a beam reaches, and its packed values (cells, places, width) at places (cells, places)."""
        downs = np.maximum(places.ravel(), min(_TOP, 1e-3 * self.side[1][0]))
        values, packed = np.empty((downs.size, kernels.VALUES)), np.zeros((downs.size, self.width))
        reached = kernels.packed_down(w, downs, inner, self.speed, self.side, self.doubt, self.sums, values, packed)
        return reached // places.shape[1], packed.reshape(*places.shape, self.width)

    def _depth_edges(self) -> Floats:
        """Depths between which values are quadratic enough, for beams over the whole table."""
        away = self.side[0]
        turns = self.top * (1.0 + self.side[_PEAK][-1]) >= 1.0
        start = np.linspace(0.0, away[-1], (_CELLS_TO_TURN if turns else 1) + 1)
        low, high = start[:-1], start[1:]
        done: list[Floats] = []
        count = 0
        while low.size:
            count += low.size
            errors = np.zeros(low.size)
            for w in self.top * _DEPTH_COLUMNS:
                reached, packed = self._packed(w, _places(low, high), inner=w < _INNER)
                found = np.einsum("pj,cjf->cpf", _D_TO_CHECKS, packed[:, _FITTED])
                kernels.misses_of_cells(
                    w, w < _INNER, self.speed, self.doubt, found[:reached], packed[:reached, _CHECKED], FLOOR,
                    errors[:reached],
                )  # fmt: skip
            wide = (errors > _DEPTH_SHARE * TOLERANCE) & (high - low > _LEAST_CELL * away[-1]) & (count < _DEPTH_CELLS)
            done.append(high[~wide])
            low, high = low[wide], high[wide]
            # a level, if one is near the middle: the noise has a kink there
            middle = 0.5 * (low + high)
            node = away[np.clip(np.searchsorted(away, middle), 0, away.size - 1)]
            middle = np.where(np.abs(node - middle) < 0.25 * (high - low), node, middle)
            low, high = np.stack((low, middle), axis=1).ravel(), np.stack((middle, high), axis=1).ravel()
        return np.concatenate(([0.0], np.unique(np.concatenate(done))))

    def _columns(self, depths: Floats) -> tuple[Floats, list[Any], list[Floats], float, int]:
        """Edges of the cells of w, which depth cells each serves, values, the largest error, the first not inner."""
        places, thickness = _places(depths[:-1], depths[1:]), np.diff(depths)
        edges: list[float] = []
        served: list[Any] = []
        cells: list[Floats] = []
        worst = 0.0
        known: dict[tuple[float, bool], tuple[int, Floats]] = {}

        def packed(low: float, high: float, s: float) -> tuple[int, Floats]:
            w, inner = low + 0.5 * (high - low) * (1.0 + s), high <= _INNER
            key = (round(w, 12), inner)  # most of the places of a cell are those of what it is divided into
            if key not in known:
                known[key] = self._packed(w, places, inner=inner)
            return known[key]

        todo = [(low, high) for low, high in ((_INNER, self.top), (0.0, min(_INNER, self.top))) if low < high]
        while todo:
            low, high = todo.pop()
            fitted = [packed(low, high, s) for s in _W_PLACES]
            reach = min(reached for reached, _ in fitted)
            cell = _fit(np.stack([values[:, _FITTED] for _, values in fitted]))
            errors = np.zeros(reach)
            for s in _W_CHECKS:
                _, exact = packed(low, high, s)
                kernels.misses_of_cells(
                    low + 0.5 * (high - low) * (1.0 + s), high <= _INNER, self.speed, self.doubt,
                    np.einsum("pc,dcf->dpf", _basis(s), cell[:reach]), exact[:reach], FLOOR, errors,
                )  # fmt: skip
            good = errors <= _SHARE * TOLERANCE
            some_turn = max(reached for reached, _ in fitted) > reach + _LEFT_PART * len(places)
            missed = float(np.sum(thickness[:reach][~good])) > _LEFT_DEPTH * depths[-1]
            if (some_turn or missed) and high - low > _NARROWEST * self.top:
                middle = 0.5 * (low + high)
                todo += [(middle, high), (low, middle)]
                continue
            edges.append(low)
            served.append(np.concatenate((good, np.zeros(len(places) - reach, dtype=bool))))
            cells.append(cell)
            worst = max(worst, float(errors[good].max(initial=0.0)))
        edges.append(self.top)
        return np.array(edges), served, cells, worst, int(np.searchsorted(edges, min(_INNER, self.top)))


def _places(low: Floats, high: Floats) -> Floats:
    """Places in each of many depth cells."""
    return low[:, np.newaxis] + 0.5 * (high - low)[:, np.newaxis] * (1.0 + _D_PLACES)


def _fit(values: Floats) -> Floats:
    """Coefficients of cells (cells, 12, width) from values at the places fitted: (places over w, cells, over depth)."""
    cells: Floats = np.einsum("bj,ai,idjf->dbaf", _D_INVERSE, _W_INVERSE, values, optimize=True)
    return cells.reshape(values.shape[1], -1, values.shape[3])


def _basis(s: float) -> Floats:
    """Products of the powers of depth and of s, as in a cell, at all places over depth."""
    depth = np.vander(_D_PLACES, kernels.QUADRATIC, increasing=True)
    products: Floats = (depth[:, :, np.newaxis] * s ** np.arange(kernels.CUBIC)).reshape(len(depth), -1)
    return products


def _begins(edges: Floats, places: Floats) -> NDArray[np.int32]:
    """The cell in which each place lies."""
    return np.clip(np.searchsorted(edges, places, side="right") - 1, 0, edges.size - 2).astype(np.int32)


_EMPTY: Side = (
    np.zeros(2), np.zeros(1, np.int32), np.zeros(2), np.zeros(1, np.int32), np.zeros((1, 1), np.bool_),
    np.zeros(1, np.int64), np.zeros((1, 1, kernels.CUBIC * kernels.QUADRATIC, kernels.NARROW), np.float32),
)  # fmt: skip


def _columns(**values: ArrayLike) -> tuple[Floats, ...]:
    """Flat float64 columns of one length."""
    given = {name: np.asarray(value, dtype=np.float64) for name, value in values.items()}
    return tuple(kernel_array(column.ravel()) for column in together(**given))
