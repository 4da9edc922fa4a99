"""Depth and pressure by Leroy and Parthiot (1998), JASA 103, 1346-1352: the standard ocean and corrections by area.

Pressure in MPa here. The square of pressure has -2.2512e-1; the form -2.512e-1 is widely copied and 26.6 m wrong at
100 MPa. With the right digit the depth of the standard ocean is that of the UNESCO report, rewritten for MPa.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, NamedTuple, TypeAlias

import numpy as np

from ..errors import InputError

Correction: TypeAlias = Callable[[Any], Any]


class Area(NamedTuple):
    """Corrections of one area: metres added to the depth (P in MPa), MPa taken from the pressure (Z in metres)."""

    depth: Correction | None
    pressure: Correction
    note: str


def _none(x: Any) -> Any:
    return 0.0 * x


_SEEN = "read in one transcription of each direction"
_MEMORY = "depth read in one transcription, pressure from memory; the two close"
_SUSPECT = (
    "the transcribed depth misses the pressure by 0.5 to 1.6 m: one digit of it is probably wrong, so it is left out"
)

#: The two directions of each area with both close within 0.2 m.
AREAS: dict[str, Area] = {
    "standard": Area(_none, _none, "ocean of 0 degC and salinity 35"),
    "common-ocean": Area(
        lambda p: p / (p + 1.0) + 5.7e-2 * p, lambda z: 1.0e-2 * z / (z + 100.0) + 6.2e-6 * z, f"60N to 40S; {_SEEN}"
    ),
    "north-east-atlantic": Area(
        lambda p: p / (p + 2.0) + 3e-2 * p, lambda z: 8e-3 * z / (z + 200.0) + 4e-6 * z, f"30N to 35N; {_SEEN}"
    ),
    "antarctic": Area(
        lambda p: p * (4e-2 - 2e-4 * p), lambda z: 8e-3 * z / (z + 1000.0) + 1.6e-6 * z, f"circumpolar; {_SEEN}"
    ),
    "mediterranean": Area(None, lambda z: z * (-8.5e-6 + 1.4e-9 * z), _SUSPECT),
    "red-sea": Area(_none, _none, _SEEN),
    "arctic": Area(_none, _none, _SEEN),
    "sea-of-japan": Area(None, lambda z: 7.8e-6 * z, _SUSPECT),
    "sulu-sea": Area(
        lambda p: 0.9 * p / (p + 1.0) + p * (0.17 + 7e-4 * p),
        lambda z: 1e-2 * z / (z + 100.0) + z * (1.6e-5 + 1e-9 * z),
        _SEEN,
    ),
    "halmahera": Area(lambda p: 0.8 * p / (p + 0.5) + 0.125 * p, lambda z: 8e-3 * z / (z + 50.0) + 1.3e-5 * z, _SEEN),
    "celebes-weber": Area(
        lambda p: 1.2 * p / (p + 1.0) + p * (6.7e-2 + 2.2e-4 * p),
        lambda z: 1.2e-2 * z / (z + 100.0) + z * (7e-6 + 2.5e-10 * z),
        _MEMORY,
    ),
    "black-sea": Area(lambda p: 1.1 * p, lambda z: 1.13e-4 * z, _MEMORY),
    "baltic": Area(lambda p: 1.8 * p, lambda z: 1.8e-4 * z, _MEMORY),
}


def correction(area: str, direction: str) -> Correction:
    """The correction of an area, or an InputError that names the areas."""
    if area not in AREAS:
        raise InputError(f"area: {area!r} is unknown; known are {', '.join(AREAS)}")
    found = AREAS[area].pressure if direction == "pressure" else AREAS[area].depth
    if found is None:
        raise InputError(
            f"area: the published depth correction of {area!r} is not trustworthy as known to us; "
            "use method 'teos10', or depth_from_density with the cast's own water"
        )
    return found


def depth(pressure: Any, gravity: Any, correct: Correction) -> Any:
    """Depth (m) from pressure (MPa above the atmosphere)."""
    column = pressure * (9.72659e2 + pressure * (-2.2512e-1 + pressure * (2.279e-4 - 1.82e-7 * pressure)))
    return column / (gravity + 1.092e-4 * pressure) + correct(pressure)


def pressure(depth: Any, latitude: Any, correct: Correction) -> Any:
    """Pressure (MPa above the atmosphere) from depth (m)."""
    column = depth * (1.00818e-2 + depth * (2.465e-8 + depth * (-1.25e-13 + 2.8e-19 * depth)))
    gravity = 9.7803 * (1.0 + 5.3e-3 * np.sin(np.deg2rad(latitude)) ** 2)
    return column * (gravity - 2e-5 * depth) / (9.80612 - 2e-5 * depth) - correct(depth)
