"""The physics of sea water and fresh water: arrays in, arrays out.

Speed of sound by fourteen published equations in one registry; pressure and depth; temperature scales; salinities;
density, compressibility, impedance; derivatives of the speed; absorption. Nothing here reads a file.
"""

from ._arrays import LIMITS, Limits
from .absorption import AbsorptionFormula, absorption, absorption_formulas
from .derivatives import SpeedDerivatives, speed_derivative, speed_derivatives
from .equation import Bounds, Equation
from .properties import compressibility, density, impedance, period, wave_number, wavelength
from .ranges import OutOfRangeWarning, RangeReport
from .registry import DEFAULT_EQUATION, equations, find_equation
from .salinity import (
    absolute_salinity,
    conductivity_from_salinity,
    conservative_temperature,
    salinity_from_conductivity,
)
from .scales import t68_from_t90, t90_from_t48, t90_from_t68
from .side_by_side import Reading, speeds_side_by_side
from .speed import assumptions, range_report, sound_speed, speed_of_columns
from .vertical import (
    DEFAULT_LATITUDE,
    depth_areas,
    depth_from_density,
    depth_from_pressure,
    depth_of_columns,
    pressure_from_depth,
    pressure_of_columns,
)

__all__ = [
    "DEFAULT_EQUATION",
    "DEFAULT_LATITUDE",
    "LIMITS",
    "AbsorptionFormula",
    "Bounds",
    "Equation",
    "Limits",
    "OutOfRangeWarning",
    "RangeReport",
    "Reading",
    "SpeedDerivatives",
    "absolute_salinity",
    "absorption",
    "absorption_formulas",
    "assumptions",
    "compressibility",
    "conductivity_from_salinity",
    "conservative_temperature",
    "density",
    "depth_areas",
    "depth_from_density",
    "depth_from_pressure",
    "depth_of_columns",
    "equations",
    "find_equation",
    "impedance",
    "period",
    "pressure_from_depth",
    "pressure_of_columns",
    "range_report",
    "salinity_from_conductivity",
    "sound_speed",
    "speed_derivative",
    "speed_derivatives",
    "speed_of_columns",
    "speeds_side_by_side",
    "t68_from_t90",
    "t90_from_t48",
    "t90_from_t68",
    "wave_number",
    "wavelength",
]
