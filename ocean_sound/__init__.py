"""From casts of temperature, salinity and depth to the speed of sound in water and its paths.

The public face: each name is handed on when it is first asked for, so that importing the package costs nothing.

>>> import ocean_sound as sound
>>> round(float(sound.sound_speed(10.0, 35.0, pressure=0.0, equation="unesco")), 2)
1489.83
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

_NAMES = {
    "errors": ("OceanSoundError", "InputError", "CastFileError", "PlanError", "OutputError", "WorkerError"),
    "water": (
        "sound_speed",
        "equations",
        "Equation",
        "OutOfRangeWarning",
        "speed_derivatives",
        "density",
        "compressibility",
        "impedance",
        "absorption",
        "depth_from_pressure",
        "pressure_from_depth",
        "depth_from_density",
        "salinity_from_conductivity",
        "wavelength",
        "wave_number",
        "period",
    ),
    "casts": (
        "Cast",
        "CastBlock",
        "read_casts",
        "read_blocks",
        "read_many",
        "check_cast",
        "check_block",
        "complete_cast",
        "read_thresholds",
        "read_verdicts",
        "apply_verdicts",
    ),
    "grids": ("open_climatology", "open_bathymetry"),
    "profile": ("Profile", "Features", "Accuracy"),
    "section": ("Section", "Seabed", "Sediment", "Surface", "Track"),
    "rays": ("trace", "connect", "loss", "shadow_zones", "ensemble"),
    "soundings": (
        "compare",
        "thin",
        "hand_over",
        "bin_levels",
        "smooth",
        "beam_positions",
        "cast_interval",
        "leave_one_out",
        "correct_soundings",
        "correct_file",
        "estimate_scales",
        "water_change",
        "path_uncertainty",
        "uncertainty_by_angle",
        "largest_angle",
        "refraction_errors",
        "read_orders",
        "read_components",
        "Scales",
        "Order",
        "Component",
    ),
    "sensors": (
        "ambient_noise",
        "band_level",
        "signal_excess",
        "detection_probability",
        "detection_range",
        "fit_range_test",
        "choose_sites",
        "place_sensors",
        "travel_times",
        "ranges_from_times",
        "locate",
        "dilution_map",
        "Area",
        "Hearing",
        "LossSettings",
        "Member",
        "Noise",
        "Receiver",
        "Site",
        "Target",
        "Task",
        "Wanted",
    ),
    "archive": ("build_archive", "open_archive"),
}
_HOMES = {name: home for home, names in _NAMES.items() for name in names}

__all__ = sorted(_HOMES)


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f".{_HOMES[name]}", __name__), name)


def __dir__() -> list[str]:
    return sorted([*globals(), *__all__])
