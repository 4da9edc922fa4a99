"""A table of travel times for one profile: beams within a stated tolerance, far cheaper than marching each."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from . import _kernels_table as kernels
from .beams import Beams, below_transducer

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from ..profile import Profile
    from ..rays.medium import Medium

    Floats = NDArray[np.float64]

DEFAULT_TOLERANCE = 0.001  # m
DEFAULT_ANGLE = 75.0  # degrees from the vertical
_LEAST, _MOST = 1e-6, 10.0  # m: tolerances that make sense
# Cells are fitted to this part of the tolerance, since the largest error need not lie where it is looked for.
_SHARE = 0.75
# A cell may leave so many of the last nodes it reaches, or this part of them (of few levels the larger one), to exact
# marches instead of being divided.
_LEFT_NODES, _LEFT_PART, _LEFT_OF_FEW = 4, 0.02, 0.125
# Cells narrower than this part of the table are not divided further: in them a beam turns, and is marched exactly.
_NARROWEST = 5e-4
_CELL_BINS = 4096
_BINS_PER_NODE = 8

_PLACES = np.cos((2 * np.arange(kernels.CUBIC)[::-1] + 1) * np.pi / (2 * kernels.CUBIC))
_INVERSE = np.linalg.inv(np.vander(_PLACES, kernels.CUBIC, increasing=True))
# Between the places of fitting a cubic errs most near the extremes of the Chebyshev polynomial, its ends among them.
_CHECKS = np.cos(np.arange(kernels.CUBIC + 1) * np.pi / kernels.CUBIC)
_ALL = np.concatenate((_PLACES, _CHECKS))


@dataclass(frozen=True, eq=False)
class BeamTable:
    """Travel times of a profile, ready for any number of beams; made by `beam_table`.

    Attributes
    ----------
    water : Medium
        The water below the transducer.
    tolerance : float
        What was asked for, m.
    error : float
        The largest error against exact marches that was found when it was built, m: arithmetic, not accuracy.
    max_angle : float
        Beams farther from the vertical, degrees, are marched exactly.
    """

    water: Medium
    tolerance: float
    error: float
    max_angle: float
    arrays: tuple[NDArray[Any], ...]

    @property
    def nbytes(self) -> int:
        """Memory that it takes, bytes."""
        return sum(array.nbytes for array in self.arrays)

    def positions(self, angles: ArrayLike, times: ArrayLike, *, surface_speed: ArrayLike | None = None) -> Beams:
        """Depth and across-track distance of beams after a one-way travel time.

        Parameters
        ----------
        angles, times, surface_speed
            As for `beam_positions`.

        Returns
        -------
        Beams
            As `beam_positions` gives them, within the tolerance, with the same statuses.

        Raises
        ------
        InputError
            If the arguments do not broadcast.
        """
        steering = 1.0 if surface_speed is None else self.water.source_speed / np.asarray(surface_speed, dtype=float)
        try:
            theta, time, ratio = np.broadcast_arrays(np.asarray(angles, float), np.asarray(times, float), steering)
        except ValueError:
            raise InputError("angles, times and surface_speed do not broadcast; equal shapes would be right") from None
        down, across, status = np.empty(time.size), np.empty(time.size), np.empty(time.size, dtype=np.int8)
        columns = [kernel_array(column.ravel()) for column in (theta, time, ratio)]
        self.locate(columns[0], columns[1], columns[2], (down, across, status))
        lost = status != 0
        down[lost], across[lost] = np.nan, np.nan
        shape = time.shape
        return Beams(time, self.water.source_depth + down.reshape(shape), across.reshape(shape), status.reshape(shape))

    def locate(
        self, angles: Floats, times: Floats, steering: Floats, out: tuple[Floats, Floats, NDArray[np.int8]]
    ) -> None:
        """As `positions`, for flat float64 columns, into columns that are there already.

        steering: speed at the transducer over that of steering; out: distance below the transducer, distance across,
        status. Beams beyond the profile go on at its last gradient.
        """
        water = self.water
        kernels.beams_by_table(angles, times, steering, water.source_speed, water.down, self.arrays, *out)


def beam_table(
    profile: Profile,
    *,
    transducer_depth: float = 0.0,
    tolerance: float = DEFAULT_TOLERANCE,
    max_angle: float = DEFAULT_ANGLE,
) -> BeamTable:
    """Make the table of a profile.

    Parameters
    ----------
    profile : Profile
        The water; one that starts below the surface is extended to it at its first speed.
    transducer_depth : float
        Depth of the transducer below the water surface, m.
    tolerance : float
        The largest error allowed against exact tracing, m: of the place along the beam plus that across.
    max_angle : float
        The largest angle from the vertical at the transducer that the table serves, degrees.

    Returns
    -------
    BeamTable
        Its `error` is what was measured, at five angles in each cell and every level.

    Raises
    ------
    InputError
        If the transducer is not between the surface and the deepest level, or a number makes no sense.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> table = beam_table(Profile([0, 20, 40, 200], [1510, 1510, 1490, 1492]))
    >>> beam = table.positions(60.0, 0.2)
    >>> round(float(beam.depth), 2), round(float(beam.across), 2), table.error < 0.001
    (153.93, 256.2, True)
    """
    if not _LEAST <= tolerance <= _MOST:
        raise InputError(f"tolerance is {tolerance:g} m: from {_LEAST:g} to {_MOST:g} m would be right")
    if not 0.0 < max_angle < 90.0:
        raise InputError(f"max_angle is {max_angle:g} degrees: above 0 and below 90 would be right")
    water = below_transducer(profile, transducer_depth)
    top = float(np.sin(np.radians(max_angle)) ** 2)
    edges, served, rows, error = _cells(water, top, tolerance)
    return BeamTable(water, tolerance, error, max_angle, _packed(water, tolerance, edges, served, rows))


def _packed(
    water: Medium, tolerance: float, edges: Floats, served: list[int], rows: list[Floats]
) -> tuple[NDArray[Any], ...]:
    """All cells one after the other, as the kernels want them."""
    bins = [_BINS_PER_NODE * (last + 1) for last in served]
    guesses = [np.empty(count + 1, dtype=np.int32) for count in bins]
    for row, last, count, guess in zip(rows, served, bins, guesses, strict=True):
        kernels.fill_guesses(last, row, count, guess)
    # The cell in which each bin of w begins; the kernel steps on from there.
    top = edges[-1]
    begins = np.searchsorted(edges, np.arange(_CELL_BINS) * (top / _CELL_BINS), side="right") - 1
    first_row, first_guess = (np.cumsum([0, *(len(each) for each in list_[:-1])]) for list_ in (rows, guesses))
    return (
        edges,
        np.clip(begins, 0, len(rows) - 1).astype(np.int32),
        np.array([_CELL_BINS * (1.0 - 1e-12) / top, tolerance, tolerance / water.source_speed]),
        np.column_stack((2.0 / np.diff(edges), bins)),
        np.column_stack((served, first_row, first_guess)).astype(np.int64),
        np.concatenate(guesses),
        np.concatenate(rows),
        _of_nodes(water),
    )


def _cells(water: Medium, top: float, tolerance: float) -> tuple[Floats, list[int], list[Floats], float]:
    """Cells of w = sin² of the angle whose cubics are good enough, the nodes each serves, and the largest error."""
    nodes = water.down[0].size
    work = (np.empty(_ALL.size), np.empty(_ALL.size), np.empty((nodes, _ALL.size)), np.empty((nodes, _ALL.size)))
    row = np.empty((nodes, 2 * kernels.CUBIC))
    left = max(min(_LEFT_NODES, _LEFT_OF_FEW * nodes), _LEFT_PART * nodes)
    todo = [(0.0, top)]
    edges: list[float] = []
    served: list[int] = []
    rows: list[Floats] = []
    worst = 0.0
    while todo:
        low, high = todo.pop()
        last, good, error = kernels.make_cell(
            low, high, water.source_speed, water.down, _ALL, _INVERSE, _SHARE * tolerance, *work, row
        )
        if good < last - left and high - low > _NARROWEST * top:
            middle = 0.5 * (low + high)
            todo += [(middle, high), (low, middle)]
            continue
        edges.append(low)
        served.append(int(good))
        rows.append(row[: good + 1].copy())
        worst = max(worst, error)
    return np.array([*edges, top]), served, rows, worst


def _of_nodes(water: Medium) -> Floats:
    """What the kernel needs of each node, side by side."""
    away, _, gradient, _, excess, ratio, _, _ = water.down
    found = np.zeros((away.size, 8))  # a cache line each
    found[:, 0], found[:, 1] = away, 1.0 + excess
    found[:, 2] = 0.5 * np.append(gradient, gradient[-1])
    found[:, 3], found[:, 4] = water.source_speed * ratio, ratio
    found[:, 5] = np.append(away[1:], np.inf)
    return found
