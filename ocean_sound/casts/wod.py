"""What the World Ocean Database adds to CF: probes, fall-rate equations, flags of whole profiles.

Source: World Ocean Database user's manual (NCEI/OCL), from memory; its netCDF files explain their own codes.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from .netcdf import floats, strings

if TYPE_CHECKING:
    from .cf_geometry import Geometry
    from .store import Store

_KEPT = {
    "dataset": "dataset",
    "platform": "Platform",
    "institute": "Institute",
    "cruise": "WOD_cruise_identifier",
    "country": "country",
    "project": "Project",
    "probe": "Temperature_Instrument",
    "recorder": "Recorder",
    "fall_rate_equation": "depth_eq",
    "depth_correction": "needs_z_fix",
}
_PROFILE_FLAG = "_WODprofileflag"


def is_wod(store: Store) -> bool:
    """Whether a file comes from the World Ocean Database: its casts carry the database's number."""
    return "wod_unique_cast" in store.variables


def wod_attributes(store: Store, geometry: Geometry) -> list[dict[str, str]]:
    """What is known of each cast."""
    found: list[dict[str, str]] = [{} for _ in range(geometry.casts)]
    for ours, key in _KEPT.items():
        variable = store.variables.get(key)
        if variable is None or not variable.is_text:
            continue
        texts = strings(variable)
        if len(texts) in {1, geometry.casts}:
            for index, own in enumerate(found):
                value = texts[index if len(texts) > 1 else 0]
                if value:
                    own[ours] = value
    return found


def wod_notes(store: Store, geometry: Geometry, attributes: list[dict[str, str]]) -> list[list[str]]:
    """What a user must know of each cast."""
    notes: list[list[str]] = [[] for _ in range(geometry.casts)]
    for own, about in zip(notes, attributes, strict=True):
        fix = about.get("depth_correction")
        if fix:
            own.append(f"depths as in the file, whose probe {fix}: not corrected here")
    for key in ("Temperature", "Salinity", "Pressure"):
        variable = store.variables.get(f"{key}{_PROFILE_FLAG}")
        if variable is None:
            continue
        codes = geometry.per_cast(floats(variable), variable.dimensions)
        if codes is None:
            continue
        meanings = _meanings(store, variable.text("flag_definitions") or variable.name)
        for index in np.flatnonzero(np.isfinite(codes) & (codes > 0)):
            code = int(codes[index])
            notes[index].append(
                f"the database flags the whole profile of {key.lower()}: {meanings.get(code, f'code {code}')}"
            )
    return notes


def _meanings(store: Store, key: str) -> dict[int, str]:
    explained = store.variables.get(key)
    if explained is None:
        return {}
    words = explained.text("flag_meanings").split()
    values = explained.get("flag_values")
    if values is None or isinstance(values, str) or len(values) != len(words):
        return {}
    return {int(value): word for value, word in zip(values, words, strict=True)}
