"""Normal modes of sound in water that does not change with range, and the field that they carry."""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from math import e, log10
from typing import TYPE_CHECKING

import numpy as np

from .._numba import kernel_array
from ..errors import InputError
from ..section.reflection import DB_PER_NEPER_WAVELENGTH, surface_reflection
from ..section.sediments import WATER_DENSITY
from ..water import OutOfRangeWarning, absorption
from . import _kernels_modes as kernels

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from ..profile import Profile
    from ..section.sediments import Sediment

    Floats = NDArray[np.float64]

# Intervals on the coarser of the two meshes: in a vertical wavelength of the steepest mode, and at least in all.
_INTERVALS, _FEWEST = 24, 200
# Samples an interval over which the water is averaged, so that thin layers count for what they are.
_SAMPLES = 8
# Shapes larger than this are not made, bytes: beams serve such frequencies.
_LARGEST = 1 << 30
_SETTLES = 30  # steps of Newton's method, of which far fewer count
_DB_PER_NEPER = 20.0 * log10(e)


@dataclass(frozen=True, eq=False)
class Modes:
    """The normal modes of a water column, by falling wavenumber.

    Parameters
    ----------
    frequency : float
        Hz.
    wavenumber : numpy.ndarray of complex, shape (modes,)
        Horizontal, 1/m; the imaginary part is the decay of amplitude with range.
    group_speed : numpy.ndarray, shape (modes,)
        m/s.
    depth : numpy.ndarray, shape (depths,)
        From the surface to the seabed, m.
    shape : numpy.ndarray, shape (modes, depths)
        Pressure, such that the integral of its square over depth, the seabed included, is 1 (the density being
        relative to that of the water), 1/sqrt(m).
    error : float
        The largest change of a real wavenumber from the finer mesh to the extrapolated one, 1/m: of what is handed
        out the error is far smaller.
    notes : tuple of str
        What was assumed or left out; that no mode is trapped.
    """

    frequency: float
    wavenumber: NDArray[np.complex128]
    group_speed: Floats
    depth: Floats
    shape: Floats
    error: float
    notes: tuple[str, ...] = ()

    def __len__(self) -> int:
        return self.wavenumber.size

    @property
    def phase_speed(self) -> Floats:
        """Of each mode, m/s."""
        return 2.0 * np.pi * self.frequency / self.wavenumber.real

    def at(self, depth: ArrayLike) -> Floats:
        """Shapes at depths, (modes, depths): cubic between the mesh's nodes; 0 above the surface and below the seabed.

        Raises
        ------
        InputError
            If a depth is not finite.
        """
        from scipy.interpolate import CubicSpline

        wanted = np.atleast_1d(np.asarray(depth, dtype=np.float64))
        if not np.all(np.isfinite(wanted)):
            raise InputError("a depth is not finite: metres below the surface would be right")
        found = CubicSpline(self.depth, self.shape, axis=1)(np.clip(wanted, 0.0, self.depth[-1]))
        return np.where((wanted >= 0.0) & (wanted <= self.depth[-1]), found, 0.0)

    def pressure(self, source_depth: float, ranges: ArrayLike, depths: ArrayLike) -> NDArray[np.complex128]:
        """Pressure relative to that at 1 m from the source in free water, (depths, ranges).

        Far from the source only: within a few depths of it the sound that no mode carries matters.

        Raises
        ------
        InputError
            If the source is not between surface and seabed, or a range is not above 0.
        """
        r, weights = self._weights(source_depth, ranges)
        phases = np.exp(1j * np.outer(self.wavenumber, r))
        return self.at(depths).T @ (weights[:, None] * phases) * np.sqrt(2.0 * np.pi / r)

    def intensity(self, source_depth: float, ranges: ArrayLike, depths: ArrayLike) -> Floats:
        """Sum of the squares of what each mode carries: `pressure` squared, averaged over the phases between modes.

        Raises
        ------
        InputError
            As `pressure` does.
        """
        r, weights = self._weights(source_depth, ranges)
        decay = np.exp(-2.0 * np.outer(self.wavenumber.imag, r))
        carried: Floats = (self.at(depths) ** 2).T @ (np.abs(weights)[:, None] ** 2 * decay) * (2.0 * np.pi / r)
        return carried

    def _weights(self, source_depth: float, ranges: ArrayLike) -> tuple[Floats, NDArray[np.complex128]]:
        if not 0.0 < source_depth < self.depth[-1]:
            raise InputError(
                f"source depth {source_depth:g} m: between 0 and the seabed at {self.depth[-1]:g} m would be right"
            )
        r = np.atleast_1d(np.asarray(ranges, dtype=np.float64))
        if not np.all(r > 0.0) or not np.all(np.isfinite(r)):
            raise InputError("a range is not above 0 m: modes hold away from the source only")
        return r, self.at(source_depth)[:, 0] * np.exp(0.25j * np.pi) / np.sqrt(self.wavenumber.real)


def normal_modes(
    profile: Profile,
    *,
    frequency: float,
    seabed_depth: float | None = None,
    sediment: Sediment | None = None,
    water_absorption: float | None = None,
    wind_speed: float = 0.0,
    most: int | None = None,
) -> Modes:
    """The normal modes of water over a seabed that is one half-space.

    Parameters
    ----------
    profile : Profile
        The water; one that starts below the surface is extended to it at its first speed.
    frequency : float
        Hz.
    seabed_depth : float, optional
        m; by default the deepest level.
    sediment : Sediment, optional
        The half-space, a fluid. Where not given it is water like that at the seabed: it sends nothing back, and modes
        are those that the water traps without it.
    water_absorption : float, optional
        dB/m; by default that of Francois and Garrison for water of 10 degC and 35 at mid depth.
    wind_speed : float
        m/s; a rough surface takes from each mode what it does not send back coherently (see
        `section.reflection.surface_reflection`).
    most : int, optional
        Only so many, of the largest wavenumbers.

    Returns
    -------
    Modes
        None, with a note that says so, where nothing is trapped.

    Raises
    ------
    InputError
        If a number makes no sense, the seabed carries shear waves, or there are too many modes for this method.

    Notes
    -----
    Finite differences on two meshes and Richardson's extrapolation (Porter and Reiss 1984, JASA 76:244); attenuation
    to first order in what it changes within the water: over sand the decay is within 1 %, over silt, which absorbs
    most, within 6 %. The head of `_kernels_modes` says how. The density of the water is taken as even.

    Examples
    --------
    In a guide between a free surface and a seabed so hard that it is nearly rigid the wavenumbers are known:

    >>> import numpy as np
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.section.sediments import Sediment
    >>> hard = Sediment(1e4, 1e4, 0.0)
    >>> modes = normal_modes(Profile([0, 100], [1500, 1500]), frequency=50.0, sediment=hard, water_absorption=0.0)
    >>> rigid = np.sqrt((2 * np.pi * 50 / 1500) ** 2 - ((np.arange(len(modes)) + 0.5) * np.pi / 100) ** 2)
    >>> len(modes), bool(np.all(abs(modes.wavenumber.real - rigid) < 2e-3))
    (7, True)
    """
    water = profile.to_surface()
    bottom = float(water.depth[-1]) if seabed_depth is None else float(seabed_depth)
    _check(frequency, bottom, float(water.depth[-1]), sediment, wind_speed)
    omega = 2.0 * np.pi * frequency
    below = float(water.at(bottom)) if sediment is None else sediment.speed
    seabed = np.array([(omega / below) ** 2, 1.0 if sediment is None else WATER_DENSITY / sediment.density])
    slowest = float(min(water.speed[water.depth <= bottom].min(), water.at(bottom)))
    steepest = np.sqrt(max((omega / slowest) ** 2 - seabed[0], 0.0))
    number = max(_FEWEST, int(np.ceil(_INTERVALS * bottom * steepest / (2.0 * np.pi))))
    coarse, fine = (_Mesh(water, bottom, omega, n, seabed) for n in (number, 2 * number))
    count = min(coarse.count(), fine.count())
    count = count if most is None else min(count, most)
    if count * 3 * number * 8 > _LARGEST:
        raise InputError(
            f"at {frequency:g} Hz there are {count} modes of {2 * number} nodes: too many for this method; beams serve "
            "such frequencies, or ask for fewer modes"
        )
    if count == 0:
        notes = (f"no mode is trapped at {frequency:g} Hz: the seabed or the water below lets all sound go",)
        nothing = np.empty(0)
        return Modes(frequency, nothing.astype(complex), nothing, coarse.nodes, np.empty((0, number + 1)), 0.0, notes)
    values, shapes = coarse.solve(count)
    finer, finer_shapes = fine.solve(count, near=values)
    squares = (4.0 * finer - values) / 3.0
    alike = np.sign(np.sum(shapes * finer_shapes[:, ::2], axis=1))[:, None]
    shape = (4.0 * alike * finer_shapes[:, ::2] - shapes) / 3.0
    k = np.sqrt(squares)
    slope = seabed[1] * np.sqrt(np.maximum(squares - seabed[0], 1e-30))
    # of the square of a shape in the half-space, its density relative to the water's
    tail = 0.5 * shape[:, -1] ** 2 * seabed[1] / np.maximum(slope / seabed[1], 1e-15)
    norm = coarse.integral(shape, slope) + tail
    shape, tail = shape / np.sqrt(norm)[:, None], tail / norm
    inverse2 = coarse.squares_with_surface / omega**2  # 1/c² at the nodes
    group = k / omega / (coarse.integral(shape, slope, inverse2) + tail / below**2)
    lost = water_absorption
    if lost is None:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", OutOfRangeWarning)  # far below its range there is next to none
            lost = float(absorption(frequency, 10.0, 35.0, depth=0.5 * bottom)) / 1000.0
    decay = omega / k * coarse.integral(shape, slope, np.sqrt(inverse2)) * lost / _DB_PER_NEPER
    decay += _surface_decay(coarse, shape, k, omega, wind_speed)
    error = float(np.max(np.abs(np.sqrt(finer) - k)))
    lossy = k.astype(complex)
    if sediment is not None:
        lossy = _with_lossy_seabed(squares, seabed, slope, (shape[:, -1] ** 2, tail), sediment.attenuation)
    return Modes(frequency, lossy + 1j * decay, group, coarse.nodes, shape, error, _notes(sediment, wind_speed))


def _with_lossy_seabed(
    squares: Floats, seabed: Floats, slope: Floats, parts: tuple[Floats, Floats], attenuation: float
) -> NDArray[np.complex128]:
    """Wavenumbers over a half-space that absorbs.

    A change d of the slope -psi'/psi at the seabed moves the squared wavenumber x by -d psi² over the mode's part in
    the water; the slope itself follows x and the complex wavenumber below without approximation, which matters next to
    cut-off. Newton's method finds where both agree.
    """
    below = seabed[0] * (1.0 + 1j * attenuation / DB_PER_NEPER_WAVELENGTH) ** 2
    at_seabed, tail = parts
    moved = np.zeros(squares.size, dtype=np.complex128)
    for _ in range(_SETTLES):
        here = seabed[1] * np.sqrt(squares + moved - below)
        off = moved * (1.0 - tail) + (here - slope) * at_seabed
        moved -= off / (1.0 - tail + 0.5 * seabed[1] ** 2 / here * at_seabed)
    return np.sqrt(squares + moved)


def _surface_decay(mesh: _Mesh, shape: Floats, k: Floats, omega: float, wind_speed: float) -> Floats:
    """What a rough surface takes of each mode, 1/m.

    A mode goes up and down as a plane wave of vertical wavenumber g and amplitude A at the surface, psi = A sin(g z);
    the power that it brings to the surface is that of one of the two waves, (A/2)² g, out of what it carries along, k
    times the integral of its square (1) in the same units: of amplitude it loses half the share lost at each bounce.
    """
    if wind_speed == 0.0:
        return np.zeros(k.size)
    vertical = np.sqrt(np.maximum(mesh.squares_with_surface[0] - k**2, 0.0))
    steepness = (8.0 * shape[:, 1] - shape[:, 2]) / (6.0 * (mesh.nodes[1] - mesh.nodes[0]))  # psi' at the surface
    speed = omega / np.sqrt(mesh.squares_with_surface[0])
    grazing = np.degrees(np.arctan2(vertical, k))
    back = surface_reflection(grazing, frequency=omega / (2.0 * np.pi), wind_speed=wind_speed, water_speed=speed)
    kept = np.maximum(back**2, 1e-12)
    brought = 0.25 * steepness**2 / np.maximum(vertical, 1e-12)
    return np.where(vertical > 0.0, -0.5 * np.log(kept) * brought / k, 0.0)


class _Mesh:
    """Evenly spread nodes from the surface to the seabed, and the modes on them."""

    def __init__(self, water: Profile, bottom: float, omega: float, number: int, seabed: Floats) -> None:
        self.nodes = np.linspace(0.0, bottom, number + 1)
        self.h = bottom / number
        self.seabed = seabed
        self.squares_with_surface = omega**2 * _averaged(water, bottom, number)
        self.squares = kernel_array(self.squares_with_surface[1:])
        self.highest = float(self.squares_with_surface.max())

    def count(self) -> int:
        """How many modes are trapped."""
        return int(kernels.count_above(self.seabed[0] * (1.0 + 1e-14), self.squares, self.h, self.seabed))

    def solve(self, count: int, near: Floats | None = None) -> tuple[Floats, Floats]:
        """Squared wavenumbers and shapes of the first modes, of either sign; from values near them if given."""
        n = self.squares.size
        shapes, down, up = np.empty((count, n)), np.empty(n), np.empty(n)
        values = np.empty(count) if near is None else near.copy()
        here = (self.squares, self.h, self.seabed)
        if near is None or kernels.follow_modes(*here, down, up, values, shapes) > 0:
            lows, highs = np.empty((2, count)), np.empty((2, count))
            kernels.bracket(self.seabed[0], self.highest, count, *here, lows, highs)
            kernels.find_modes(lows, highs, *here, down, up, values, shapes)
        shapes = np.concatenate((np.zeros((count, 1)), shapes), axis=1)
        sizes = np.sqrt(self.integral(shapes, np.zeros(count)))
        return values, shapes / sizes[:, None]

    def integral(self, shape: Floats, slope: Floats, factor: Floats | None = None) -> Floats:
        """Of the square of each shape over the water times a factor, by the rule of Euler and Maclaurin."""
        square = shape**2 if factor is None else shape**2 * factor
        last = 1.0 if factor is None else factor[-1]
        end = -2.0 * slope * shape[:, -1] ** 2 * last
        whole: Floats = self.h * (square.sum(axis=1) - 0.5 * square[:, -1]) - self.h**2 / 12.0 * end
        return whole


def _averaged(water: Profile, bottom: float, number: int) -> Floats:
    """1/c² at the nodes of a mesh, each the mean over its neighbourhood weighted as a hat."""
    fine = np.linspace(0.0, bottom, number * _SAMPLES + 1)
    values = 1.0 / np.interp(fine, water.depth, water.speed) ** 2
    hat = 1.0 - np.abs(np.arange(1 - _SAMPLES, _SAMPLES)) / _SAMPLES
    # beyond both ends the water is mirrored, so that the end nodes have the mean over their own half
    mirrored = np.concatenate((values[_SAMPLES - 1 : 0 : -1], values, values[-2 : -_SAMPLES - 1 : -1]))
    return np.convolve(mirrored, hat / hat.sum(), mode="valid")[::_SAMPLES]


def _check(frequency: float, bottom: float, deepest: float, sediment: Sediment | None, wind_speed: float) -> None:
    if not (np.isfinite(frequency) and frequency > 0.0):
        raise InputError(f"frequency is {frequency:g} Hz: above 0 would be right")
    if not 0.0 < bottom <= deepest:
        raise InputError(f"seabed depth {bottom:g} m is outside the profile, which reaches from 0 to {deepest:g} m")
    if sediment is not None and sediment.shear_speed > 0.0:
        raise InputError(
            f"the seabed carries shear waves ({sediment.shear_speed:g} m/s), which modes here do not know: use beams, "
            "or the sediment without_shear()"
        )
    if not 0.0 <= wind_speed <= 60.0:
        raise InputError(f"wind speed is {wind_speed:g} m/s: 0 to 60 would be right")


def _notes(sediment: Sediment | None, wind_speed: float) -> tuple[str, ...]:
    notes = []
    if sediment is None:
        notes.append("the seabed sends nothing back: only modes that the water itself traps")
    if wind_speed > 0.0:
        notes.append("what the rough surface scatters is counted as lost")
    return tuple(notes)
