"""What the seabed is made of: density, speed and attenuation of sound, and shear where it is rock."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TypeAlias

import numpy as np

from ..errors import InputError

WATER_DENSITY = 1000.0
"""The density, kg/m3, that the ratios of the table are taken to refer to."""


@dataclass(frozen=True)
class Sediment:
    """A seabed as sound meets it: a fluid, or a solid where it carries shear waves.

    Parameters
    ----------
    speed : float
        Of compressional waves, m/s.
    density : float
        kg/m3.
    attenuation : float
        Of compressional waves, dB per wavelength.
    shear_speed : float
        m/s; 0 for a fluid.
    shear_attenuation : float
        dB per wavelength.
    name : str
        What it is called; no more than a label.

    Raises
    ------
    InputError
        A number that no seabed has: the message names it and what would be right.

    Examples
    --------
    >>> Sediment(1650.0, 1900.0, 0.8).shear_speed
    0.0
    """

    speed: float
    density: float
    attenuation: float
    shear_speed: float = 0.0
    shear_attenuation: float = 0.0
    name: str = ""

    def __post_init__(self) -> None:
        owner = f"sediment {self.name!r}" if self.name else "sediment"
        for field, low, high, unit in (
            ("speed", 100.0, 10000.0, "m/s"),
            ("density", 500.0, 10000.0, "kg/m3"),
            ("attenuation", 0.0, 20.0, "dB per wavelength"),
            ("shear_speed", 0.0, 7000.0, "m/s"),
            ("shear_attenuation", 0.0, 20.0, "dB per wavelength"),
        ):
            value = float(getattr(self, field))
            object.__setattr__(self, field, value)
            if not low <= value <= high:
                raise InputError(f"{owner}: {field} is {value:g}; {low:g} to {high:g} {unit} would be right")
        # A solid whose bulk modulus is positive: cp² > 4/3 cs².
        if self.speed**2 <= 4.0 / 3.0 * self.shear_speed**2:
            raise InputError(
                f"{owner}: shear_speed is {self.shear_speed:g} m/s; less than {self.speed * 0.75**0.5:.0f} m/s "
                f"(0.866 of speed) would be right"
            )

    def without_shear(self) -> Sediment:
        """The same as a fluid.

        Examples
        --------
        >>> Sediment(3000.0, 2400.0, 0.1, 1500.0, 0.2).without_shear().shear_speed
        0.0
        """
        return replace(self, shear_speed=0.0, shear_attenuation=0.0)


@dataclass(frozen=True)
class SedimentKind:
    """A row of the table: speed and density relative to the water above, attenuation in dB per wavelength.

    Parameters
    ----------
    name : str
    speed_ratio, density_ratio : float
        To those of the bottom water.
    attenuation : float
        dB per wavelength.
    shear_speed, shear_attenuation : float
        m/s and dB per wavelength; 0 where the table gives none, or one that depends on the depth below the seabed.
    """

    name: str
    speed_ratio: float
    density_ratio: float
    attenuation: float
    shear_speed: float = 0.0
    shear_attenuation: float = 0.0

    def below(self, water_speed: float, water_density: float = WATER_DENSITY) -> Sediment:
        """The sediment under water of a speed, m/s, and a density, kg/m3.

        Examples
        --------
        >>> round(SEDIMENTS["sand"].below(1500.0).speed, 6)
        1650.0
        """
        return Sediment(
            self.speed_ratio * water_speed,
            self.density_ratio * water_density,
            self.attenuation,
            self.shear_speed,
            self.shear_attenuation,
            self.name,
        )


# Jensen, Kuperman, Porter and Schmidt, Computational Ocean Acoustics (2011), table 1.3, after Hamilton (1980, JASA
# 68:1313). Shear of clay to gravel grows with depth below the seabed from next to nothing, so those stand as fluids.
SEDIMENTS = {
    kind.name: kind
    for kind in (
        SedimentKind("clay", 1.00, 1.5, 0.2),
        SedimentKind("silt", 1.05, 1.7, 1.0),
        SedimentKind("sand", 1.1, 1.9, 0.8),
        SedimentKind("gravel", 1.2, 2.0, 0.6),
        SedimentKind("moraine", 1.3, 2.1, 0.4, 600.0, 1.0),
        SedimentKind("chalk", 1.6, 2.2, 0.2, 1000.0, 0.5),
        SedimentKind("limestone", 2.0, 2.4, 0.1, 1500.0, 0.2),
        SedimentKind("basalt", 3.5, 2.7, 0.1, 2500.0, 0.2),
    )
}
"""Kinds of seabed by name, from soft to hard."""

Kind: TypeAlias = str | Sediment | SedimentKind | None
"""A name from `SEDIMENTS`, numbers of one's own, or None for a seabed that absorbs all."""


def kind_of(kind: Kind, where: str = "seabed") -> Sediment | SedimentKind | None:
    """The kind that is meant.

    Raises
    ------
    InputError
        It is none; the message lists those of the table.

    Examples
    --------
    >>> kind_of("sand").density_ratio
    1.9
    """
    if kind is None or isinstance(kind, Sediment | SedimentKind):
        return kind
    if not isinstance(kind, str) or kind not in SEDIMENTS:
        raise InputError(
            f"{where}: kind is {kind!r}; {', '.join(SEDIMENTS)}, a Sediment, or None (absorbs all) would be right"
        )
    return SEDIMENTS[kind]


def resolved(kind: Sediment | SedimentKind | None, water_speed: float) -> Sediment | None:
    """The sediment under bottom water of a speed, m/s; None for a seabed that absorbs all."""
    if not np.isfinite(water_speed):
        raise InputError(f"speed of the bottom water is {water_speed:g} m/s; about 1500 would be right")
    return kind.below(water_speed) if isinstance(kind, SedimentKind) else kind
