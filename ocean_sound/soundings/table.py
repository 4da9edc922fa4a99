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
# A cell may leave so many of the last nodes it reaches, or this part of them, to exact marches instead of being
# divided.
_LEFT_NODES, _LEFT_PART = 4, 0.02
# Cells narrower than this part of the table are not divided further: in them a beam turns, and is marched exactly.
_NARROWEST = 2e-3
_CELL_BINS = 4096
_BINS_PER_NODE = 2

_PLACES = np.cos((2 * np.arange(kernels.CUBIC)[::-1] + 1) * np.pi / (2 * kernels.CUBIC))
_INVERSE = np.linalg.inv(np.vander(_PLACES, kernels.CUBIC, increasing=True))
# Between the places of fitting a cubic errs most near the extremes of the Chebyshev polynomial, its ends among them.
_CHECKS = np.cos(np.arange(kernels.CUBIC + 1) * np.pi / kernels.CUBIC)


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
    cells: tuple[NDArray[Any], ...]
    layers: tuple[NDArray[Any], ...]

    @property
    def nbytes(self) -> int:
        """Memory that it takes, bytes."""
        return sum(array.nbytes for array in (*self.cells, *self.layers))

    def positions(self, angles: ArrayLike, times: ArrayLike, *, surface_speed: ArrayLike | None = None) -> Beams:
        """Depth and across-track distance of beams after a one-way travel time.

        Parameters
        ----------
        angles, times, surface_speed
            As for `beam_positions`.

        Returns
        -------
        Beams
            As `beam_positions` gives them, within the tolerance; every status is the same but within it of an edge.

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
        kernels.beams_by_table(angles, times, steering, water.source_speed, water.down, self.cells, self.layers, *out)


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
    nodes, bins = water.down[0].size, _BINS_PER_NODE * water.down[0].size
    time_bins = np.array([bins / max(1.02 * row[last, 0], 1e-9) for row, last in zip(rows, served, strict=True)])
    guesses = np.empty((len(rows), bins), dtype=np.int32)
    for row, last, scale, guess in zip(rows, served, time_bins, guesses, strict=True):
        kernels.fill_guesses(last, row, scale, guess)
    # The cell in which each bin of w begins; the kernel steps on from there.
    begins = np.searchsorted(edges, np.arange(_CELL_BINS) * (top / _CELL_BINS), side="right") - 1
    cells = (
        edges,
        2.0 / np.diff(edges),
        np.clip(begins, 0, len(rows) - 1).astype(np.int32),
        np.array(_CELL_BINS * (1.0 - 1e-12) / top),
        np.array(served, dtype=np.int64),
    )
    return BeamTable(
        water=water,
        tolerance=tolerance,
        error=error,
        max_angle=max_angle,
        cells=(*cells[:3], cells[3].reshape(1), cells[4]),
        layers=(time_bins, guesses, np.array(rows), _of_nodes(water, nodes)),
    )


def _cells(water: Medium, top: float, tolerance: float) -> tuple[Floats, list[int], list[Floats], float]:
    """Cells of w = sin² of the angle whose cubics are good enough, the nodes each serves, and the largest error."""
    nodes = water.down[0].size
    time, reach, errors = np.empty(nodes), np.empty(nodes), np.empty(nodes)
    todo = [(0.0, top)]
    edges: list[float] = []
    served: list[int] = []
    rows: list[Floats] = []
    worst = 0.0
    while todo:
        low, high = todo.pop()
        row = np.empty((nodes, 2 * kernels.CUBIC))
        last = kernels.fit_cell(low, high, water.down, _PLACES, _INVERSE, row, time, reach)
        good = kernels.served_nodes(
            low, high, last, water.source_speed, water.down, _CHECKS, row, _SHARE * tolerance, time, reach, errors
        )
        if good < last - max(_LEFT_NODES, _LEFT_PART * nodes) and high - low > _NARROWEST * top:
            middle = 0.5 * (low + high)
            todo += [(middle, high), (low, middle)]
            continue
        edges.append(low)
        served.append(int(good))
        rows.append(row)
        worst = max(worst, float(errors[: good + 1].max()))
    return np.array([*edges, top]), served, rows, worst


def _of_nodes(water: Medium, nodes: int) -> Floats:
    """What the kernel needs of each node, side by side."""
    away, _, gradient, _, excess, ratio, _, _ = water.down
    found = np.zeros((nodes, 8))  # a cache line each
    found[:, 0], found[:, 1] = away, 1.0 + excess
    found[:, 2] = 0.5 * np.append(gradient, gradient[-1])
    found[:, 3], found[:, 4] = water.source_speed * ratio, ratio
    return found
