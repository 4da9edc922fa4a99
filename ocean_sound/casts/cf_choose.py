"""Which variable of a netCDF file is what: by standard name, else by a well-known code, name or long name.

Source: CF standard-name table, version 83; parameter codes of WHP-Exchange, Argo and OceanSITES.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from .cast import MEASURED, VERTICAL
from .names import FLAGGED, METADATA, meaning, split_unit
from .store import UnfitError
from .table import listed
from .units import quantity_of

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from .settings import Settings
    from .store import Store, Variable

_STANDARD = {
    "sea_water_temperature": "temperature",
    "sea_water_practical_salinity": "salinity",
    "sea_water_salinity": "salinity",
    "sea_water_absolute_salinity": "absolute_salinity",
    "sea_water_pressure": "pressure",
    "sea_water_pressure_due_to_sea_water": "sea_pressure",
    "sea_water_electrical_conductivity": "conductivity",
    "speed_of_sound_in_sea_water": "sound_speed",
    "depth": "depth",
    "height": "height",
    "altitude": "height",
    "height_above_mean_sea_level": "height",
}
# Codes that the conventions of these communities fix, pressure as zero at the surface among them.
_CODES = {
    "CTDPRS": "sea_pressure",
    "CTDTMP": "temperature",
    "CTDSAL": "salinity",
    "CTDDEP": "depth",
    "CTDCOND": "conductivity",
    "SALNTY": "salinity",
    "PRES": "sea_pressure",
    "PRES_REL": "sea_pressure",
    "TEMP": "temperature",
    "PSAL": "salinity",
    "CNDC": "conductivity",
    "SVEL": "sound_speed",
    "SSPEED": "sound_speed",
    "DEPH": "depth",
    "DEPTH": "depth",
    "Z": "depth",
}
_MORE_NAMES = {"ctd temperature": "temperature", "ctd salinity": "salinity", "ctd pressure": "pressure"}
_OTHER_TEMPERATURES = {
    "sea_water_potential_temperature": "potential",
    "sea_water_conservative_temperature": "conservative",
}
_MAPPED_FURTHER = ("latitude", "longitude", "time", "id")
_ABSOLUTE = re.compile(r"\babsolute\b|\bincl\w* (?:of )?(?:the )?(?:atmospher|air)|plus atmospher")
_RELATIVE = re.compile(
    r"\brelative\b|\bgauge\b|\bsea pressure\b|(?:equals?|is) (?:0|zero) at (?:the )?(?:sea|surface|water)"
    r"|zero at (?:the )?(?:sea|surface)|due to sea ?water|atmospher\w* (?:pressure )?(?:removed|subtracted)"
)
# No air over any water presses less: 5 dbar is the air at 5500 m.
_LEAST_AIR = 5.0
_SHALLOW = 100.0  # m: so far down, the difference between waters is less than 3 dbar


@dataclass(frozen=True)
class Candidate:
    """A variable that may be one of ours.

    Parameters
    ----------
    name : str
        As `units` names it.
    variable : Variable
    told : bool
        Whether a person said so.
    unit : str or None
        If a person gave it.
    rank : int
        How it was found; the lowest is best.
    """

    name: str
    variable: Variable
    told: bool = False
    unit: str | None = None
    rank: int = 0


def candidates(store: Store, settings: Settings) -> dict[str, list[Candidate]]:
    """By our variable, what may hold it, the likeliest first.

    Raises
    ------
    InputError
        A person named a variable that is not there, or one that can't be named for netCDF.
    """
    told = _told(store, settings)
    found: dict[str, list[Candidate]] = {quantity_of(candidate.name): [candidate] for candidate in told}
    for variable in store.variables.values():
        candidate = _recognised(variable)
        if candidate is not None:
            known = found.setdefault(quantity_of(candidate.name), [])
            if not any(other.told for other in known):
                known.append(candidate)
    return {name: sorted(known, key=lambda one: one.rank) for name, known in found.items()}


def _told(store: Store, settings: Settings) -> Iterator[Candidate]:
    for name, wanted in settings.columns.items():
        if name in FLAGGED or name in _MAPPED_FURTHER:
            continue
        if name in METADATA:
            raise InputError(f"--map {name}=...: is for CSV; in netCDF name {', '.join(_MAPPED_FURTHER)} or a value")
        key, unit = (wanted, None) if wanted in store.variables else split_unit(wanted)
        yield Candidate(name, variable_named(store, key, name), told=True, unit=unit, rank=-1)


def variable_named(store: Store, key: str, name: str) -> Variable:
    """The variable that a person named.

    Raises
    ------
    InputError
        It is not there.
    """
    if key not in store.variables:
        raise InputError(f"--map {name}={key}: there is no such variable; it holds {listed(list(store.variables))}")
    return store.variables[key]


def _recognised(variable: Variable) -> Candidate | None:
    if variable.ndim == 0 or variable.is_text:
        return None
    standard = variable.text("standard_name")
    if standard:
        name = _STANDARD.get(standard)
        return None if name is None else Candidate(_by_direction(name, variable), variable)
    for rank, code in enumerate((variable.text("WHPO_Variable_Name"), variable.text("whp_name"), variable.name), 1):
        name = _CODES.get(code if code in _CODES else code.upper() if rank == 3 and code.isupper() else code)
        if name is not None:
            later = 1 if code == "SALNTY" else 0  # of water samples: the CTD's goes before it
            return Candidate(_by_direction(name, variable), variable, rank=rank + later)
    plain = variable.name.replace("_", " ").lower()
    name = meaning(variable.name) or _MORE_NAMES.get(plain) or ("depth" if plain == "z" else None)
    rank = 4
    if name is None:
        name, rank = meaning(variable.text("long_name")), 5
    if name is None or name in METADATA or name == "specific_conductance":
        return None
    return Candidate(_by_direction(name, variable), variable, rank=rank)


def _by_direction(name: str, variable: Variable) -> str:
    """Depth or height by the attribute `positive`, whatever the name says (WOD calls depth an altitude, down)."""
    if name not in {"depth", "height"}:
        return name
    return {"up": "height", "down": "depth"}.get(variable.text("positive").lower(), name)


def require(store: Store, found: dict[str, list[Candidate]]) -> None:
    """That there is a depth or pressure and something measured.

    Raises
    ------
    UnfitError
        There is not; the text says what the file holds instead.
    """
    if not store.variables and store.groups:
        raise UnfitError(f"its variables lie in groups ({listed(store.groups)}); only the root of a file is read")
    if not store.variables:
        raise UnfitError("holds no variable: it is empty or cut short; fetch it again")
    held = listed(list(store.variables))
    if not any(name in found for name in VERTICAL):
        raise UnfitError(
            "no variable with the standard name of depth (depth) or of sea pressure "
            f"(sea_water_pressure_due_to_sea_water), or a well-known name of one; it holds {held}"
        )
    if not any(name in found for name in MEASURED):
        for standard, variable in store.having("standard_name"):
            other = _OTHER_TEMPERATURES.get(standard)
            if other is not None:
                what = f"its only temperature ({variable.name}) is {other} temperature"
                raise UnfitError(f"{what}; sound needs temperature in situ: convert it")
        raise UnfitError(f"no temperature, salinity, conductivity or sound speed; it holds {held}")


def other_temperatures(store: Store) -> list[str]:
    """Notes on temperatures that are not in situ and so are left out."""
    return [
        f"{variable.name} is {_OTHER_TEMPERATURES[standard]} temperature, not in situ: left out"
        for standard, variable in store.having("standard_name")
        if standard in _OTHER_TEMPERATURES
    ]


def pressure_kind(
    variable: Variable, pressure: NDArray[np.float64], depth: NDArray[np.float64] | None
) -> tuple[str, str | None]:
    """Whether pressure named without more is sea pressure or absolute, by what the file says or its numbers prove.

    Parameters
    ----------
    variable : Variable
        By standard name ``sea_water_pressure``, which with the air is absolute pressure by CF's definition, while
        most files give it as zero at the surface.
    pressure : ndarray
        dbar.
    depth : ndarray or None
        Beside it, metres positive down.

    Returns
    -------
    name : str
        ``sea_pressure``, ``absolute_pressure``, or ``pressure`` where nothing decides.
    note : str or None
    """
    said = " ".join([variable.name, *(variable.text(about) for about in ("long_name", "comment", "description"))])
    words = said.lower().replace("_", " ")
    if _ABSOLUTE.search(words):
        return "absolute_pressure", "pressure is absolute, as its variable says"
    if _RELATIVE.search(words):
        return "sea_pressure", None
    held = np.isfinite(pressure)
    if held.any() and (least := float(pressure[held].min())) < _LEAST_AIR:
        return "sea_pressure", f"pressure taken as sea pressure: it begins at {least:.4g} dbar, less than any air"
    if depth is not None:
        both = held & np.isfinite(depth) & (np.abs(depth) < _SHALLOW)
        if both.any():
            excess = float(np.median(pressure[both] - depth[both]))
            if abs(excess) < 4.0:
                return "sea_pressure", "pressure taken as sea pressure: it agrees with the depth beside it"
            if 5.0 < excess < 14.0:
                return "absolute_pressure", (
                    f"pressure taken as absolute: it exceeds the depth beside it by {excess:.1f} dbar, which is air"
                )
    return "pressure", None
