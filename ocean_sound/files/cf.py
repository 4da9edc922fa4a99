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
SPEED_ERROR = "sound_speed_error_"
"""Before the name of a shape of uncertainty."""
ORIGIN_VALUES = (0, 1, 2, 3, 4, 5)
ORIGIN_MEANINGS = "measured carried_to_the_surface carried_down neighbour_cast climatology assumed"

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
    # of each cast in an archive
    "source_checksum": (None, "SHA-256 of the file that the cast was read from", None),
    "equation": (None, "sound-speed equation, empty where the speed was measured or there is none", None),
    "depth_source": (None, "where the depth comes from", None),
    "depth_from_pressure": ("m", "depth computed from pressure, of casts that give a depth of their own", None),
    "deepest_depth": ("m", "depth that the cast reaches", None),
    "surface_speed": (_SPEED, "speed of sound at the surface", None),
    "harmonic_mean_speed": (_SPEED, "harmonic mean speed of sound from the first to the deepest level", None),
    "sonic_layer_depth": (
        "m",
        "sonic layer depth: the first maximum of the speed of sound from the surface down",
        None,
    ),
    "duplicate_of": ("1", "position of the earlier cast that this one repeats, -1 for none", None),
    "near_duplicate_of": (
        "1",
        "position of an earlier cast at the same place and time whose levels differ, or -1",
        None,
    ),
    "notes": (None, "what was assumed or found when the cast was read and checked", None),
    "speed_notes": (None, "how the speed of sound came about, or why there is none", None),
    "cast_attributes": (None, "what else the source says of the cast, as JSON", None),
    "measured_sound_speed": (_SPEED, "speed of sound as measured", "speed_of_sound_in_sea_water"),
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
    "sound_speed_noise": (
        _SPEED,
        "standard uncertainty (k=1) of the speed of sound, independent on each level",
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
    "caustics": ("1", "number of times that neighbouring rays of the vertical plane crossed", None),
    "spreading": ("m", "offset across the ray for one radian of launch angle; its sign changes at each caustic", None),
    "amplitude": ("1", "amplitude of sound pressure relative to that 1 m from the source", None),
    "phase": (_DEGREES, "phase from caustics and reflections, of exp(-i omega t)", None),
    "receiver": ("1", "place of the receiver in the list of receivers, from 0", None),
    "receiver_depth": ("m", "depth of the receiver below the water surface", "depth"),
    "receiver_range": ("m", "horizontal range of the receiver from the source", None),
    "source_depth": ("m", "depth of the source below the water surface", "depth"),
    "seabed_depth": ("m", "depth of the seabed below the water surface", "sea_floor_depth_below_sea_surface"),
    "status": ("1", "how the path ended", None),
    "transmission_loss": ("1", "transmission loss re 1 m, dB", None),
    # sensors
    "bearing": (_DEGREES, "bearing, clockwise from north", None),
    "site_id": (None, "name of the site", None),
    "sensor_depth": ("m", "depth of the sensor below the water surface", "depth"),
    "cost": ("1", "cost of the site, in the unit of the plan", None),
    "gain": ("m2", "covered weight that the sensor adds to those before it", None),
    "weight": ("m2", "what the cell is worth: its area times the share of time at its depth", None),
    "heard_probability": ("1", "probability that at least so many sensors hear one", None),
    "signal_excess": ("1", "signal excess at the sensor that hears best, dB", None),
    "detection_range": ("m", "distance to which the probability of detection is reached without a break", None),
    "farthest_detection": ("m", "farthest distance at which the probability of detection is reached", None),
    "missing_excess": ("1", "by how much the best sensor falls short of hearing half of all signals, dB", None),
    "missing_by_cause": ("1", "parts of the missing excess by cause, dB; they add up to it", None),
    "main_cause": ("1", "the cause without which the signal would be heard, or the largest", None),
    "threshold_cure": ("1", "change of the detection threshold that restores hearing, dB", None),
    "depth_cure": ("m", "smallest change of a sensor's depth that restores hearing, positive downward", None),
    "place_cure": ("m", "smallest distance from a sensor to a candidate site that hears", None),
    "place_cure_site": ("1", "which candidate that is, counted from 0, -1 for none", None),
    # ranging
    "horizontal_range": ("m", "horizontal distance between the two ends of the ray", None),
    "horizontal_range_uncertainty_by_timing": ("m", "the part of its standard uncertainty (k=1) from timing", None),
    "horizontal_range_uncertainty_by_sound_speed": ("m", "the part of it from the speed of sound", None),
    "horizontal_range_uncertainty_by_depth": ("m", "the part of it from the difference of depths", None),
    "slant_range": ("m", "straight distance between the two ends of the ray", None),
    "straight_range": ("m", "horizontal distance by a straight line at the mean speed of sound", None),
    "straight_range_error": ("m", "its error, positive where it is too long", None),
    "target_depth": ("m", "depth of the target below the water surface", "depth"),
    "clock_offset": ("s", "by how much measured one-way times are too long for one clock", None),
    "residual": ("s", "measured less computed one-way travel time", None),
    "misfit": ("1", "chi squared of the residuals over their degrees of freedom", None),
    "error_major_95": ("m", "half of the long axis of the ellipse that holds 95 % of positions", None),
    "error_minor_95": ("m", "half of the short axis of the ellipse that holds 95 % of positions", None),
    "error_azimuth": (_DEGREES, "bearing of the long axis, clockwise from north, 0 to 180", None),
    "sound_speed_error_95": ("m", "the long half axis from the uncertainty of the speed of sound alone", None),
    "dilution": ("1", "horizontal dilution of precision", None),
    "stations_heard": ("1", "number of stations with a direct ray", None),
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
        The variable's name, as design and files have it; ``<name>_flag`` for its companion of QARTOD flags,
        ``<name>_uncertainty`` for standard uncertainties, ``<name>_origin`` for where its values come from;
        ``sound_speed_error_<cause>`` for the error of the speed from one cause.

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
    if name not in _QUANTITIES:
        for ending, companion in _COMPANIONS.items():
            if name.endswith(ending) and name.removesuffix(ending) in _QUANTITIES:
                return companion(name.removesuffix(ending))
        if name.startswith(SPEED_ERROR) and len(name) > len(SPEED_ERROR):
            cause = name.removeprefix(SPEED_ERROR).replace("_", " ")
            return {"long_name": f"error of the speed of sound from one standard error of {cause}", "units": _SPEED}
        raise InputError(f"no CF attributes for a variable named {name!r}; known: {', '.join(sorted(_QUANTITIES))}")
    units, long_name, standard_name = _QUANTITIES[name]
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
    if name == "depth_source":
        found["flag_values"] = np.array((0, 1, 2), np.int8)
        found["flag_meanings"] = "as_read from_pressure_by_own_density from_pressure_by_standard_ocean"
    return found


def _flag_attributes(base: str) -> dict[str, Any]:
    return {
        "long_name": f"quality flag of the {base.replace('_', ' ')}",
        "standard_name": "quality_flag",
        "flag_values": np.array(FLAG_VALUES, np.int8),
        "flag_meanings": FLAG_MEANINGS,
    }


def _origin_attributes(base: str) -> dict[str, Any]:
    return {
        "long_name": f"where the {base.replace('_', ' ')} comes from",
        "flag_values": np.array(ORIGIN_VALUES, np.int8),
        "flag_meanings": ORIGIN_MEANINGS,
    }


def _uncertainty_attributes(base: str) -> dict[str, Any]:
    units, long_name, standard_name = _QUANTITIES[base]
    found = {"long_name": f"standard uncertainty (k=1) of the {long_name}", "units": units or "1"}
    if standard_name is not None:
        found["standard_name"] = f"{standard_name} standard_error"
    if units == _CELSIUS:
        found["units_metadata"] = "temperature: difference"  # CF 1.11, section 3.1.2
    return found


_COMPANIONS = {"_flag": _flag_attributes, "_origin": _origin_attributes, "_uncertainty": _uncertainty_attributes}


def unit_text(name: str) -> str | None:
    """The unit of a variable as people write it, or None where it has none or the name is not ours.

    >>> unit_text("temperature"), unit_text("salinity"), unit_text("turns")
    ('degC', 'PSS-78', None)
    """
    if name in _SCALED:
        return _SCALED[name]
    units = _SPEED if name.startswith(SPEED_ERROR) else _QUANTITIES.get(name, (None,))[0]
    return None if units in {None, "1"} else _UNIT_TEXTS.get(str(units), units)


def header(name: str) -> str:
    """The head of a column of ours: the name, and the unit in square brackets where there is one.

    >>> header("sound_speed"), header("anything_else")
    ('sound_speed [m/s]', 'anything_else')
    """
    unit = unit_text(name)
    return name if unit is None else f"{name} [{unit}]"
