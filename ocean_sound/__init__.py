"""From casts of temperature, salinity and depth to the speed of sound in water and its paths.

The public face: each name is handed on when it is first asked for, so that importing the package costs nothing.

>>> import ocean_sound as sound
>>> round(float(sound.sound_speed(10.0, 35.0, pressure=0.0, equation="unesco")), 2)
1489.83
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

_HOMES = {
    "errors": ("errors", None),
    "OceanSoundError": ("errors", "OceanSoundError"),
    "InputError": ("errors", "InputError"),
    # water
    "sound_speed": ("water", "sound_speed"),
    "equations": ("water", "equations"),
    "Equation": ("water", "Equation"),
    # casts
    "Cast": ("casts", "Cast"),
    "CastBlock": ("casts", "CastBlock"),
    "read_casts": ("casts", "read_casts"),
    # profile
    "Profile": ("profile", "Profile"),
    # rays
    "trace": ("rays", "trace"),
    "shadow_zones": ("rays", "shadow_zones"),
}

__all__ = sorted(_HOMES)


def __getattr__(name: str) -> Any:
    try:
        home, attribute = _HOMES[name]
    except KeyError:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}") from None
    module = import_module(f".{home}", __name__)
    return module if attribute is None else getattr(module, attribute)


def __dir__() -> list[str]:
    return sorted([*globals(), *__all__])
