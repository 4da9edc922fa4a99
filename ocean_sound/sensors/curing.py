"""Why a cell is deaf, and what would cure it.

The loss that is allowed in a calm sea is a budget, and each cause takes its part of it. With the sensor that hears the
cell best, in dB:

    missing = -signal excess at the median noise = loss - allowed loss
    loss = spreading + absorption + refraction + boundaries
    allowed loss = budget - noise

- spreading: 20 log10 of the straight distance in metres;
- absorption: its coefficient times that distance;
- refraction: the loss in the same water with neither surface nor seabed sending anything back, less the two above;
  negative where the water gathers the sound, large in a shadow;
- boundaries: the loss with surface and seabed less that without: negative where reflections help, positive where the
  seabed stands in the way;
- noise: the median noise in the band less that of a calm sea without ships, the receiver's own included in both;
- budget: what may be lost in a calm sea; it counts negative, and what spreading takes beyond it no cure of the water
  could give back.

So the parts, the budget with its sign, add up to what is missing by construction. Losses are never counted beyond 300
dB, which stands for no sound at all.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from .losses import MOST

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from .area import Area
    from .coverage import Hearing
    from .sites import Site

    Floats = NDArray[np.floating[Any]]
    Integers = NDArray[np.int64]

CAUSES = ("spreading", "absorption", "refraction", "boundaries", "noise")
PARTS = (*CAUSES, "budget")


@dataclass(frozen=True, eq=False)
class Deafness:
    """What is missing in each cell, and by which causes.

    Parameters
    ----------
    missing : numpy.ndarray, shape (members, cells)
        dB, positive where less than half of all signals are heard by the best sensor; NaN beyond the range computed.
    parts : numpy.ndarray, shape (parts, members, cells)
        In the order of `PARTS`; their sum is `missing`.
    best : numpy.ndarray of int, shape (members, cells)
        Which sensor that is.
    cause : numpy.ndarray of int, shape (members, cells)
        Index into `CAUSES`: spreading where it alone takes the budget, else the largest of the others; -1 where the
        cell is heard, or beyond the range computed.
    """

    missing: Floats
    parts: Floats
    best: Integers
    cause: Integers


def deafness(
    loss: Floats,
    free: Floats,
    *,
    area: Area,
    sensors: Sequence[Site],
    absorption: float,
    hearing: Hearing,
) -> Deafness:
    """What is missing by cause.

    Parameters
    ----------
    loss, free : numpy.ndarray, shape (members, sensors, cells)
        Loss with, and without, surface and seabed, dB.
    area : Area
    sensors : sequence of Site
    absorption : float
        dB/km.
    hearing : Hearing

    Returns
    -------
    Deafness
    """
    from pyproj import Geod

    geod = Geod(ellps="WGS84")
    best = np.argmin(loss, axis=1)
    slant = np.empty((len(sensors), area.size))
    for s, sensor in enumerate(sensors):
        distance = geod.inv(
            np.full(area.size, sensor.longitude), np.full(area.size, sensor.latitude), area.cell_longitude,
            area.cell_latitude,
        )[2]  # fmt: skip
        slant[s] = np.maximum(np.hypot(np.asarray(distance), area.cell_depth - sensor.depth), 1.0)
    taken = np.take_along_axis(np.asarray(loss, np.float64), best[:, None], axis=1)[:, 0]
    without = np.take_along_axis(np.asarray(free, np.float64), best[:, None], axis=1)[:, 0]
    known = np.isfinite(taken) & np.isfinite(without)
    taken, without = np.where(known, taken, np.nan), np.where(known, without, np.nan)
    straight = np.take_along_axis(slant, best, axis=0)
    spreading = 20.0 * np.log10(straight)
    absorbed = absorption * straight / 1000.0
    budget = hearing.allowed(hearing.noise.calm)
    noise = budget - hearing.allowed(hearing.noise.middle)
    parts = np.array([
        np.where(known, spreading, np.nan),
        np.where(known, absorbed, np.nan),
        without - spreading - absorbed,
        taken - without,
        np.where(known, noise, np.nan),
        np.where(known, -budget, np.nan),
    ])  # fmt: skip
    missing = taken - (budget - noise)
    deaf = missing > 0.0
    largest = 1 + np.argmax(np.where(known, parts[1:5], -np.inf), axis=0)
    cause = np.where(deaf, np.where(parts[0] >= budget, 0, largest), -1)
    return Deafness(missing, parts, best, cause)


@dataclass(frozen=True, eq=False)
class Cures:
    """The smallest change of each kind that restores hearing of half of all signals; NaN where none computed does.

    Parameters
    ----------
    threshold : numpy.ndarray, shape (members, cells)
        dB by which the detection threshold would change, negative; 0 where the cell is heard.
    depth : numpy.ndarray, shape (members, cells)
        m by which a sensor would be moved, positive downward.
    place : numpy.ndarray, shape (members, cells)
        m from the nearest sensor to the candidate.
    site : numpy.ndarray of int, shape (members, cells)
        Which candidate that is; -1 for none.
    """

    threshold: Floats
    depth: Floats
    place: Floats
    site: Integers


def cures(
    found: Deafness,
    loss: Floats,
    *,
    candidates: Sequence[Site],
    sensors: Sequence[Site],
    hearing: Hearing,
) -> Cures:
    """What would restore hearing in the cells that are deaf, among the candidates that were computed.

    Parameters
    ----------
    found : Deafness
    loss : numpy.ndarray, shape (members, candidates, cells)
        Of all candidates, at all their depths.
    candidates, sensors : sequence of Site
    hearing : Hearing

    Returns
    -------
    Cures
        A cell that is heard needs none: 0, and no candidate.
    """
    from pyproj import Geod

    geod = Geod(ellps="WGS84")
    shape = found.missing.shape
    deaf = found.cause >= 0
    depth = np.where(deaf, np.nan, 0.0)
    place = np.where(deaf, np.nan, 0.0)
    site = np.full(shape, -1, dtype=np.int64)
    allowed = hearing.allowed(hearing.noise.middle)
    for c, candidate in enumerate(candidates):
        away = np.array([
            geod.inv(sensor.longitude, sensor.latitude, candidate.longitude, candidate.latitude)[2]
            for sensor in sensors
        ])  # fmt: skip
        hears = deaf & (loss[:, c] <= allowed) & (loss[:, c] < MOST)
        here = np.flatnonzero(away < 1.0)
        if here.size:
            moves = np.array([candidate.depth - sensors[int(s)].depth for s in here])
            move = float(moves[np.argmin(np.abs(moves))])
            better = hears & ~(np.abs(depth) <= abs(move))
            depth[better] = move
        else:
            nearest = float(away.min())
            better = hears & ~(place <= nearest)
            place[better] = nearest
            site[better] = c
    beyond = np.isnan(found.missing)
    threshold = np.where(beyond, np.nan, -np.maximum(found.missing, 0.0))
    # no sound at all: no threshold helps
    threshold = np.where(found.missing + allowed >= MOST, np.nan, threshold)
    return Cures(threshold, depth, place, site)
