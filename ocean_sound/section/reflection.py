"""How much of a plane wave the seabed and the sea surface send back."""

from __future__ import annotations

from math import e, log10, pi
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .sediments import WATER_DENSITY

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from .sediments import Sediment

    Floats = NDArray[np.float64]

DB_PER_NEPER_WAVELENGTH = 40.0 * pi * log10(e)
"""An attenuation of so many dB per wavelength makes the imaginary part of a wavenumber as large as the real: 54.6."""
_GRAVITY = 9.81  # m/s2
# Of the spectrum of Pierson and Moskowitz (1964, J. Geophys. Res. 69:5181): its integral is 0.0081/(4 x 0.74) u⁴/g².
_ROUGHNESS = np.sqrt(0.0081 / (4.0 * 0.74))


def seabed_reflection(
    grazing_angle: ArrayLike, sediment: Sediment | None, *, water_speed: float, water_density: float = WATER_DENSITY
) -> NDArray[np.complex128]:
    """The reflection coefficient of a plane wave at a seabed that is one half-space.

    Parameters
    ----------
    grazing_angle : array_like
        Degrees from the seabed, 0 to 90.
    sediment : Sediment or None
        A fluid, or a solid if it has a shear speed; None for a seabed that absorbs all.
    water_speed, water_density : float
        Of the water above it, m/s and kg/m3.

    Returns
    -------
    numpy.ndarray of complex
        Of pressure, with the time factor exp(-i omega t): a positive phase is a delay undone.

    Raises
    ------
    InputError
        If an angle is none, or the water's speed or density is not above 0.

    Notes
    -----
    With impedances Z = rho c/sin(grazing) of the water, and of the compressional and shear waves below, that of the
    seabed is Zp cos²(2 s) + Zs sin²(2 s), s the angle of the shear wave from the vertical, and the coefficient
    (Z2 - Z1)/(Z2 + Z1) (Brekhovskikh, Waves in Layered Media, 1960). For a fluid it is Rayleigh's.

    Examples
    --------
    >>> from ocean_sound.section.sediments import SEDIMENTS
    >>> sand = SEDIMENTS["sand"].below(1500.0)
    >>> abs(seabed_reflection([10.0, 90.0], sand, water_speed=1500.0)).round(3)
    array([0.921, 0.353])
    """
    angle = np.asarray(grazing_angle, dtype=np.float64)
    if not np.all((angle >= 0.0) & (angle <= 90.0)):
        raise InputError("a grazing angle is outside 0 to 90 degrees: degrees from the seabed would be right")
    if not (water_speed > 0.0 and water_density > 0.0):
        raise InputError(f"water of {water_speed:g} m/s and {water_density:g} kg/m3: both above 0 would be right")
    if sediment is None:
        return np.zeros(angle.shape, dtype=np.complex128)
    theta = np.radians(angle)
    along = np.cos(theta) / water_speed  # slowness along the seabed
    with np.errstate(divide="ignore", invalid="ignore"):
        water = water_density / (np.sin(theta) / water_speed + 0j)  # rho over slowness down; infinite at 0 degrees
        below = sediment.density / _down(along, sediment.speed, sediment.attenuation)
        if sediment.shear_speed > 0.0:
            slow = _slowness(sediment.shear_speed, sediment.shear_attenuation)
            sine2 = (along / slow) ** 2
            shear = sediment.density / _down(along, sediment.shear_speed, sediment.shear_attenuation)
            below = below * (1.0 - 2.0 * sine2) ** 2 + shear * 4.0 * sine2 * (1.0 - sine2)
        found = (below - water) / (below + water)
    return np.where(theta == 0.0, -1.0 + 0j, found)


def surface_roughness(wind_speed: ArrayLike) -> Floats:
    """Standard deviation of the height of a sea fully risen under a wind, m.

    Parameters
    ----------
    wind_speed : array_like
        At 19.5 m above the sea, m/s, 0 or more.

    Notes
    -----
    The integral of the spectrum of Pierson and Moskowitz (1964, J. Geophys. Res. 69:5181), its constants from memory.

    Examples
    --------
    >>> float(surface_roughness(10.0).round(3))
    0.533
    """
    wind = np.asarray(wind_speed, dtype=np.float64)
    if not np.all((wind >= 0.0) & (wind <= 60.0)):
        raise InputError("wind speed is outside 0 to 60 m/s")
    height: Floats = _ROUGHNESS * wind**2 / _GRAVITY
    return height


def surface_reflection(
    grazing_angle: ArrayLike, *, frequency: float, wind_speed: float, water_speed: float
) -> NDArray[np.float64]:
    """The coherent reflection coefficient of a rough sea surface: -exp(-2 (k s sin(grazing))²).

    Parameters
    ----------
    grazing_angle : array_like
        Degrees from the surface, 0 to 90.
    frequency : float
        Hz.
    wind_speed : float
        m/s; see `surface_roughness`, from which s comes.
    water_speed : float
        Speed of sound at the surface, m/s.

    Notes
    -----
    Eckart (1953, JASA 25:566): the mean field over a surface of normally distributed height whose slopes are small
    and that shades no part of itself. What is scattered is counted as lost, so the loss is an upper bound.

    Examples
    --------
    >>> surface_reflection([0.0, 10.0], frequency=1000.0, wind_speed=5.0, water_speed=1500.0).round(3)
    array([-1.   , -0.981])
    """
    sine = np.sin(np.radians(np.asarray(grazing_angle, dtype=np.float64)))
    rayleigh = 2.0 * np.pi * frequency / water_speed * float(surface_roughness(wind_speed)) * sine
    kept: Floats = np.exp(-2.0 * rayleigh**2)
    return -kept


def _slowness(speed: float, attenuation: float) -> complex:
    return complex(1.0, attenuation / DB_PER_NEPER_WAVELENGTH) / speed


def _down(along: Floats, speed: float, attenuation: float) -> Any:
    """Slowness downward: growing away from the seabed is ruled out by its imaginary part."""
    root: Any = np.sqrt(_slowness(speed, attenuation) ** 2 - along**2 + 0j)
    return np.where(root.imag < 0.0, -root, root)
