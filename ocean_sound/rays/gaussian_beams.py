"""The field of a point source in a section as a sum of Gaussian beams: what surrounds `_kernels_beams`."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from ..section.reflection import seabed_reflection, surface_reflection
from ..section.sediments import SedimentKind, resolved
from . import _kernels_beams as kernels
from .section_tracing import floor_of, trace_to
from .tracing import MOST_BOUNCES

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from ..section import Section

    Floats = NDArray[np.float64]

STEEPEST = 89.0
"""Launch angles go from this above the horizontal to this below, degrees."""
MOST_BEAMS = 100_000
WIDEST_PART = 1.0 / 2.5
"""A half-width is at most this part of the water's depth, so that no beam is folded twice."""

_FEWEST_BEAMS = 64
# How far apart, in half-widths, rays that spread as in even water lie on the farthest column, and how far in phase
# across a half-width (rad): the sum over beams is then that over all angles to 1e-3 in even water.
_SPACING, _TURN = 1.1, 1.2
# Rays that lie farther apart than this part of a half-width widen their beams, so many times at most.
_OVERLAP, _WIDEST = 0.85, 2.0
_STRAIGHT = 1e-6  # rad: rays in even water
_THINNEST = 3.0  # of a half-width times wavenumber: thinner beams are no beams
# Where a sparse fan shows that rays part faster than in even water beams start closer, at most so much.
_PILOTS, _PILOT_REACH, _DENSEST, _PLACES = 181, 45.0, 8.0, 3561
_COARSEST = 8  # doublings of the angle between the beams that count near the source
_FAINTEST = 1e-3  # of amplitude: after so much loss by reflection a beam ends
# Tolerances of position and of c_ref times travel time at the farthest column, in wavelengths.
_METRES, _TAU = 0.03, 0.01
_ANGLES = 4096  # of the tables of reflection, by the sine of the grazing angle
_GRAZING = 1e-7
_MOST_SHIFT, _MOST_BEND = 40.0, 400.0  # of d phase/d sine and its derivative: beyond are points where little comes back
_NOTHING_BACK = -700.0  # log of the modulus
_SPEED_STEP = 2.0  # m/s of the bottom water within which one table of reflection will do
_MOST_TABLES = 64
_CHUNK = 256  # beams at a time
_NEPER_PER_DB = np.log(10.0) / 20.0


@dataclass(frozen=True, eq=False)
class BeamField:
    """What beams give on columns and depths.

    Parameters
    ----------
    pressure : numpy.ndarray of complex, or None
        (ranges, depths), relative to that at 1 m from the source in free water; None where phases were dropped.
    intensity : numpy.ndarray
        (ranges, depths), relative to that at 1 m.
    beams, steps : int
        How many were launched, and of how many steps they took in all.
    half_width : float
        m, where the water is deep enough.
    spacing : float
        Between launch angles where they are farthest apart, degrees.
    turned_back, lost : int
        Beams that a steep seabed turned back, and beams that ended in a corner or at a step too small.
    """

    pressure: NDArray[np.complex128] | None
    intensity: Floats
    beams: int
    steps: int
    half_width: float
    spacing: float
    turned_back: int
    lost: int


def beam_field(
    section: Section,
    *,
    source_depth: float,
    frequency: float,
    ranges: Floats,
    depths: Floats,
    phases: str = "kept",
    absorption: float = 0.0,
    beams: int | None = None,
    half_width: float | None = None,
    threads: int = 1,
    progress: Callable[[float], None] | None = None,
) -> BeamField:
    """The field on a grid; arguments must have been checked.

    absorption: dB/km. Points above the surface and below the seabed are 0. `_kernels_influence` says how beams add up.
    """
    wavenumber = 2.0 * np.pi * frequency / section.field.reference_speed
    width = natural_half_width(section, frequency) if half_width is None else float(half_width)
    bottom = np.asarray(section.seabed.depth_at(ranges))
    widths = np.minimum(np.minimum(width, WIDEST_PART * bottom), np.sqrt(8.0 * ranges / wavenumber))
    widths = np.maximum(widths, np.minimum(_THINNEST / wavenumber, WIDEST_PART * bottom))
    wanted = np.minimum(_SPACING * widths / ranges, _TURN / (wavenumber * widths))
    evenly = beams is not None and phases == "dropped"
    fan, levels = _fan(section, source_depth, float(ranges[-1]), float(wanted.min()), beams, evenly=evenly)
    if phases == "surface":
        local = 2.0 * np.pi * frequency / float(section.speed_at(0.0, source_depth))
        fan[2] = 2.0 * np.sin(local * source_depth * np.sin(np.radians(fan[0]))) ** 2
    coarseness = np.clip(np.floor(np.log2(np.maximum(wanted / fan[1].max(), 1.0))), 0.0, _COARSEST)
    edges, which, tables = reflection_tables(section, frequency, ranges, bottom)
    grid = (kernel_array(depths), *_along(section, ranges), which, widths, coarseness)
    settings = _settings(wavenumber, absorption, depths)
    energy = phases != "kept"
    source = kernel_array([0.0, float(section.flat_depth(source_depth))])
    medium = (section.field.kernel_arrays(), floor_of(section), edges, tables, settings, grid, energy)
    sums = np.zeros((max(threads, 1), 1 if energy else 2, ranges.size, depths.size))
    ends = _summed(fan, levels, (source, kernel_array(ranges), *medium), sums, progress)
    total = sums.sum(axis=0)
    how = np.bincount(ends[:, 1].astype(np.int64), minlength=4)
    return BeamField(
        pressure=None if energy else total[0] + 1j * total[1],
        intensity=total[0] if energy else total[0] ** 2 + total[1] ** 2,
        beams=levels.size,
        steps=int(ends[:, 2].sum()),
        half_width=width,
        spacing=float(np.degrees(fan[1].max())),
        turned_back=int(how[kernels.TURNED_BACK]),
        lost=int(how[kernels.LOST]),
    )


def _summed(
    fan: Floats, levels: Floats, rest: tuple[Any, ...], sums: Floats, progress: Callable[[float], None] | None
) -> Floats:
    """Add up the beams, a thread to each of the sums; returned: how they ended."""
    ends = np.empty((levels.size, 3))
    parts = [slice(i, i + _CHUNK) for i in range(0, levels.size, _CHUNK)]
    threads = sums.shape[0]
    done: list[int] = []

    def share(number: int) -> None:
        for index in range(number, len(parts), threads):
            part = parts[index]
            kernels.sum_beams(fan[:, part].copy(), levels[part].copy(), *rest, sums[number], ends[part])
            done.append(index)
            if progress is not None:
                progress(len(done) / len(parts))

    if threads == 1:
        share(0)
    else:
        with ThreadPoolExecutor(threads) as pool:
            list(pool.map(share, range(threads)))
    return ends


def _along(section: Section, ranges: Floats) -> tuple[Floats, ...]:
    """Of each column depth and slope of the seabed, and (c_ref/c)² at surface and seabed."""
    seabed = section.seabed.shape_at(ranges)
    surface, bottom = (
        section.field.derivatives_at(ranges, depth)[:, 0] for depth in (0.0, section.flat_seabed.depth_at(ranges))
    )
    return tuple(np.ascontiguousarray(values) for values in (seabed[:, 0], seabed[:, 1], surface, bottom))


def _settings(wavenumber: float, absorption: float, depths: Floats) -> Floats:
    """What `_kernels_influence` lists."""
    even = depths.size > 1 and bool(np.ptp(np.diff(depths)) < 1e-6 * abs(depths[1] - depths[0]))
    wavelength = 2.0 * np.pi / wavenumber
    found = [
        _METRES * wavelength,
        _TAU * wavelength,
        wavenumber,
        _FAINTEST,
        absorption / 1000.0 * _NEPER_PER_DB,
        _OVERLAP,
        _WIDEST,
        float(even),
    ]
    return kernel_array(found)


def natural_half_width(section: Section, frequency: float) -> float:
    """The half-width, m, of beams that fit the water: neither too wide for what bends rays nor too thin for the waves.

    In a channel of depth H that holds rays within an angle A a beam keeps its width best at sqrt(2 b/k), b = H/A, as
    the ground state of an oscillator does; A is that of the whole span of speeds, and a third of the water's depth
    stands for H. By the measure of normal modes in Munk's channel and in shallow water half of it, or half as much
    again, does hardly worse.
    """
    speeds = section.speed_at(0.0, np.linspace(0.0, float(section.seabed.depth_at(0.0)), 201))
    wavenumber = 2.0 * np.pi * frequency / float(np.mean(speeds))
    angle = np.sqrt(2.0 * (speeds.max() / speeds.min() - 1.0))
    deepest = section.seabed.deepest
    width = np.sqrt(2.0 * deepest / (3.0 * max(angle, _STRAIGHT) * wavenumber))
    return float(min(max(width, _THINNEST / wavenumber), WIDEST_PART * deepest))


def _fan(
    section: Section, source_depth: float, farthest: float, wanted: float, beams: int | None, *, evenly: bool
) -> tuple[Floats, Floats]:
    """Launch angles (degrees), the angle each stands for (rad), ones; and for how coarse a fan each of them serves.

    They are so many rad apart, or so many in all, and closer where rays part faster than in even water; or all as far
    apart: without phases a given number of them does as well so, and over a rough seabed in a quarter of the time.
    """
    places = np.linspace(-STEEPEST, STEEPEST, _PLACES)
    density = np.ones(places.size) if evenly else _density(section, source_depth, farthest, places)
    reached = np.concatenate(([0.0], np.cumsum(0.5 * (density[1:] + density[:-1]) * np.radians(np.diff(places)))))
    if beams is None:
        beams = int(np.clip(np.ceil(reached[-1] / wanted), _FEWEST_BEAMS, MOST_BEAMS))
    number = np.arange(1, beams + 1)
    angles = np.interp((number - 0.5) / beams * reached[-1], reached, places)
    stands_for = reached[-1] / beams / np.interp(angles, places, density)
    levels = np.zeros(beams)
    for level in range(1, _COARSEST + 1):
        levels[number % 2**level == 0] = level
    return np.stack((angles, stands_for, np.ones(beams))), levels


def _density(section: Section, source_depth: float, farthest: float, places: Floats) -> Floats:
    """How much closer than in even water rays must start, by how far those of a sparse fan are parted at the end."""
    angles = np.linspace(-_PILOT_REACH, _PILOT_REACH, _PILOTS)
    ends = trace_to(section, source_depth, angles, farthest, limits=(MOST_BOUNCES, MOST_BOUNCES, MOST_BOUNCES))
    parted = np.abs(ends.spreading[:, 0]) / farthest
    parted[(ends.status[:, 0] != 0) | ~np.isfinite(parted)] = 1.0
    wide = np.lib.stride_tricks.sliding_window_view(np.pad(parted, 4, mode="edge"), 5).max(axis=1)
    smooth = np.lib.stride_tricks.sliding_window_view(wide, 5).mean(axis=1)
    found: Floats = np.interp(places, angles, np.clip(smooth, 1.0, _DENSEST), left=1.0, right=1.0)
    return found


def reflection_tables(
    section: Section, frequency: float, ranges: Floats, bottom: Floats
) -> tuple[Floats, NDArray[np.int64], Floats]:
    """Tables of reflection for the kernels: ranges between those of the seabed, the number for each column, tables.

    The first table is that of the surface. A sediment of its own speed gets a new one where the bottom water changes.
    """
    speeds = np.asarray(section.speed_at(ranges, bottom))
    starts = np.array([start for start, _ in section.seabed.kinds[1:]])
    owner = np.searchsorted(starts, ranges, side="right")
    step = max(_SPEED_STEP, float(np.ptp(speeds)) / _MOST_TABLES)
    edges: list[float] = []
    found = [_surface_table(section, frequency)]
    for number, (start, kind) in enumerate(section.seabed.kinds):
        mine = owner == number
        if number > 0:
            edges.append(start)
        water = float(speeds[mine].mean()) if mine.any() else float(speeds.mean())
        if kind is None or isinstance(kind, SedimentKind):
            found.append(_seabed_table(kind, water))
            continue
        place, speed = ranges[mine], speeds[mine]
        first = 0
        for i in range(1, place.size + 1):
            if i < place.size and np.ptp(speed[first : i + 1]) <= step:
                continue
            if first > 0:
                edges.append(float(0.5 * (place[first - 1] + place[first])))
            found.append(_seabed_table(kind, float(speed[first:i].mean())))
            first = i
        if place.size == 0:
            found.append(_seabed_table(kind, water))
    which = 1 + np.searchsorted(np.array(edges), ranges, side="right")
    return kernel_array(np.array(edges)), which.astype(np.int64), kernel_array(np.stack(found))


def _sines() -> Floats:
    sines = np.linspace(0.0, 1.0, _ANGLES + 1)
    sines[0] = _GRAZING
    return sines


def _surface_table(section: Section, frequency: float) -> Floats:
    angles = np.degrees(np.arcsin(_sines()))
    back = surface_reflection(
        angles,
        frequency=frequency,
        wind_speed=section.surface.wind_speed,
        water_speed=float(section.speed_at(0.0, 0.0)),
    )
    table = np.zeros((angles.size, 4))
    table[:, 0] = np.log(np.maximum(np.abs(back), np.exp(_NOTHING_BACK)))
    table[:, 1] = np.pi
    if not section.surface.reflects:
        table[:, 0] = _NOTHING_BACK
    return table


def _seabed_table(kind: Any, water_speed: float) -> Floats:
    """Log of the modulus, phase, and its two derivatives by the sine of the grazing angle."""
    sines = _sines()
    table = np.zeros((sines.size, 4))
    sediment = resolved(kind, water_speed)
    if sediment is None:
        table[:, 0], table[:, 1] = _NOTHING_BACK, np.pi
        return table
    back = seabed_reflection(np.degrees(np.arcsin(sines)), sediment, water_speed=water_speed)
    phase = np.unwrap(np.angle(back))
    slope = np.clip(np.gradient(phase, sines), -_MOST_SHIFT, _MOST_SHIFT)
    table[:, 0] = np.log(np.maximum(np.abs(back), np.exp(_NOTHING_BACK)))
    table[:, 1] = phase
    table[:, 2] = slope
    table[:, 3] = np.clip(np.gradient(slope, sines), -_MOST_BEND, _MOST_BEND)
    return table


def check_beams(beams: int | None, half_width: float | None) -> None:
    """Raise InputError for a number of beams or a half-width that makes no sense."""
    if beams is not None and not 2 <= beams <= MOST_BEAMS:
        raise InputError(f"beams is {beams}: from 2 to {MOST_BEAMS} would be right")
    if half_width is not None and not (np.isfinite(half_width) and half_width > 0.0):
        raise InputError(f"half_width is {half_width:g} m: above 0 would be right")
