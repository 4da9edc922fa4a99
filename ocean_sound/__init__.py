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
    "casts": ("Cast", "CastBlock", "read_casts", "read_blocks"),
    "profile": ("Profile", "Features"),
    "rays": ("trace", "shadow_zones"),
}
_HOMES = {name: home for home, names in _NAMES.items() for name in names}

__all__ = sorted(_HOMES)


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f".{_HOMES[name]}", __name__), name)


def __dir__() -> list[str]:
    return sorted([*globals(), *__all__])
