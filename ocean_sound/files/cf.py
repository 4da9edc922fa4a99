"""The CF attributes of every variable the package writes, once.

Standard names and canonical units are those of the CF standard-name table (names checked against version 83 of 17
October 2023); where the table has no name for a quantity, the long name says what it is. Flags follow CF section 3.5
with the QARTOD values.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from ..errors import InputError

FLAG_VALUES = (1, 2, 3, 4, 9)
FLAG_MEANINGS = "pass not_evaluated suspect fail missing"

_DEGREES = "degree"
_CELSIUS = "degree_Celsius"
_SPEED = "m s-1"

# name: (units or None, long name, standard name or None)
_QUANTITIES: dict[str, tuple[str | None, str, str | None]] = {
    # where and when
    "time": (None, "time of the cast", "time"),
    "latitude": ("degrees_north", "latitude", "latitude"),
    "longitude": ("degrees_east", "longitude", "longitude"),
    "cast_id": (None, "identifier of the cast", None),
    "source_file": (None, "file that the cast was read from", None),
    "row_size": ("1", "number of levels of the cast", None),
    # measured, and what follows from it
    "depth": ("m", "depth below the water surface", "depth"),
    "pressure": ("dbar", "sea pressure, zero at the surface", "sea_water_pressure_due_to_sea_water"),
    "temperature": (_CELSIUS, "temperature in situ, ITS-90", "sea_water_temperature"),
    "conservative_temperature": (_CELSIUS, "conservative temperature, TEOS-10", "sea_water_conservative_temperature"),
    "salinity": ("1", "practical salinity, PSS-78", "sea_water_practical_salinity"),
    "absolute_salinity": ("g kg-1", "absolute salinity, TEOS-10", "sea_water_absolute_salinity"),
    "conductivity": ("S m-1", "electrical conductivity", "sea_water_electrical_conductivity"),
    "density": ("kg m-3", "density in situ", "sea_water_density"),
    "compressibility": ("Pa-1", "adiabatic compressibility", None),
    "impedance": ("kg m-2 s-1", "characteristic acoustic impedance", None),
    "absorption": ("dB km-1", "absorption of sound", None),
    "sound_speed": (_SPEED, "speed of sound", "speed_of_sound_in_sea_water"),
    "sound_speed_uncertainty": (
        _SPEED,
        "standard uncertainty (k=1) of the speed of sound",
        "speed_of_sound_in_sea_water standard_error",
    ),
    "sound_speed_gradient": (
        "s-1",
        "gradient of the speed of sound with depth, positive where it grows downward",
        None,
    ),
    # paths
    "launch_angle": (_DEGREES, "launch angle from the horizontal, positive downward", None),
    "arrival_angle": (
        _DEGREES,
        "arrival angle from the horizontal, positive downward in the direction of travel",
        None,
    ),
    "range": ("m", "horizontal range from the source", None),
    "travel_time": ("s", "travel time along the path, one way", None),
    "path_length": ("m", "length of the path", None),
    "path_range": ("m", "horizontal distance from the source along the path", None),
    "path_depth": ("m", "depth of the path below the water surface", None),
    "travel_time_uncertainty": ("s", "standard uncertainty of the travel time from sound speed (k=1)", None),
    "turns": ("1", "number of turning points of the path", None),
    "surface_bounces": ("1", "number of reflections from the surface", None),
    "seabed_bounces": ("1", "number of reflections from the seabed", None),
    "source_depth": ("m", "depth of the source below the water surface", "depth"),
    "status": ("1", "how the path ended", None),
}

# Units as people write them at the head of a column; `casts.units` reads every one of them back.
_UNIT_TEXTS = {
    _CELSIUS: "degC",
    _SPEED: "m/s",
    "S m-1": "S/m",
    "degrees_north": "degrees_north",
    "degrees_east": "degrees_east",
    _DEGREES: "degrees",
    "g kg-1": "g/kg",
    "kg m-3": "kg/m3",
    "dB km-1": "dB/km",
    "s-1": "1/s",
    "Pa-1": "1/Pa",
    "kg m-2 s-1": "kg/m2/s",
}
_SCALED = {"salinity": "PSS-78"}


def attributes(name: str) -> dict[str, Any]:
    """CF attributes of a variable the package writes.

    Parameters
    ----------
    name : str
        The variable's name, as design and files have it; ``<name>_flag`` for its companion of QARTOD flags.

    Returns
    -------
    dict
        A new dict: ``long_name``, and where they apply ``standard_name``, ``units``, ``positive``, ``axis``,
        ``units_metadata``, ``cf_role``, ``flag_values``, ``flag_meanings``.

    Raises
    ------
    InputError
        The package writes no such variable.

    References
    ----------
    CF Conventions 1.11, sections 3.1 to 3.5 and 4.3; standard names as listed there.

    Examples
    --------
    >>> attributes("sound_speed")["standard_name"]
    'speed_of_sound_in_sea_water'
    >>> attributes("temperature_flag")["flag_meanings"]
    'pass not_evaluated suspect fail missing'
    """
    base = name.removesuffix("_flag")
    if base not in _QUANTITIES:
        raise InputError(f"no CF attributes for a variable named {name!r}; known: {', '.join(sorted(_QUANTITIES))}")
    units, long_name, standard_name = _QUANTITIES[base]
    if base != name:
        return {
            "long_name": f"quality flag of the {base.replace('_', ' ')}",
            "standard_name": "quality_flag",
            "flag_values": np.array(FLAG_VALUES, np.int8),
            "flag_meanings": FLAG_MEANINGS,
        }
    found: dict[str, Any] = {"long_name": long_name}
    if standard_name is not None:
        found["standard_name"] = standard_name
    if units is not None:
        found["units"] = units
    if units == _CELSIUS:
        found["units_metadata"] = "temperature: on_scale"  # CF 1.11, section 3.1.2
    if standard_name == "depth":
        found["positive"] = "down"
    if name == "cast_id":
        found["cf_role"] = "profile_id"
    return found


def unit_text(name: str) -> str | None:
    """The unit of a variable as people write it, or None where it has none or the name is not ours.

    >>> unit_text("temperature"), unit_text("salinity"), unit_text("turns")
    ('degC', 'PSS-78', None)
    """
    if name in _SCALED:
        return _SCALED[name]
    units = _QUANTITIES.get(name, (None,))[0]
    return None if units in {None, "1"} else _UNIT_TEXTS.get(str(units), units)


def header(name: str) -> str:
    """The head of a column of ours: the name, and the unit in square brackets where there is one.

    >>> header("sound_speed"), header("anything_else")
    ('sound_speed [m/s]', 'anything_else')
    """
    unit = unit_text(name)
    return name if unit is None else f"{name} [{unit}]"
