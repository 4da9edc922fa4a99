"""Argo profile files: one or many profiles by N_PROF and N_LEVELS, each with its own state of processing.

Synthetic files, which lay all parameters of a float on one pressure axis, are read the same way.

Source: Argo user's manual (Argo data management, doi:10.13155/29825): sections on the profile format, reference table
2 (flags), 3 (parameters) and the rule that ADJUSTED values are the ones to use in data modes A and D. Where no
adjustment could save a value, the adjusted one is left empty with the flag 4; then we keep the value as received
beside that flag.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import CastFileError
from .block import CastBlock
from .cast import FAIL, MISSING, NO_TIME, NOT_EVALUATED, PASS, SUSPECT, normalised_longitude
from .levels import ABOVE_SURFACE
from .netcdf import floats, letters, strings
from .store import UnfitError

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from .origin import Origin
    from .store import Store

_PARAMETERS = {"pressure": "PRES", "temperature": "TEMP", "salinity": "PSAL", "conductivity": "CNDC"}
_UNITS_SCALE = {"mhos/m": 1.0, "mhos.m-1": 1.0, "S/m": 1.0, "mS/cm": 0.1}
# Reference table 2: 0 no QC, 1 good, 2 probably good, 3 probably bad, 4 bad, 5 changed, 8 estimated, 9 missing.
_FLAG_TABLE = np.full(256, NOT_EVALUATED, np.int8)
for _codes, _flag in ((b"1258", PASS), (b"3", SUSPECT), (b"4", FAIL), (b"9", MISSING)):
    _FLAG_TABLE[list(_codes)] = _flag
_NO_DOUBT = frozenset("01258 \x00")
_TEXTS = {
    "platform": "PLATFORM_NUMBER",
    "project": "PROJECT_NAME",
    "principal_investigator": "PI_NAME",
    "sampling": "VERTICAL_SAMPLING_SCHEME",
}
_DIRECTIONS = {"A": "ascending", "D": "descending"}
_EPOCH = np.datetime64("1950-01-01", "ms")
_MODES = {"R": "real time", "A": "adjusted in real time", "D": "delayed mode"}


def is_argo(store: Store) -> bool:
    """Whether an open file is an Argo profile file: it has what the manual makes mandatory."""
    return {"N_PROF", "N_LEVELS"} <= store.dimensions.keys() and {"PRES", "DATA_MODE"} <= store.variables.keys()


def other_argo(store: Store) -> str | None:
    """What an Argo file is that holds no profiles, in its own words; None if it is no Argo file."""
    if "DATA_TYPE" not in store.variables or not store.variables["DATA_TYPE"].is_text:
        return None
    kind = " ".join(strings(store.variables["DATA_TYPE"]))
    return kind if kind.lower().startswith(("argo", "b-argo")) else None


@dataclass(frozen=True)
class _Parameter:
    """One parameter of all profiles, raw or adjusted as each profile's mode says; shape (profiles, levels)."""

    values: NDArray[np.float64]
    flags: NDArray[np.int8]
    adjusted: NDArray[np.bool_]


def read_argo(store: Store, origin: Origin) -> CastBlock:
    """Read the casts of an Argo profile file.

    Parameters
    ----------
    store : Store
        The open file.
    origin : Origin
        For names and messages.

    Returns
    -------
    CastBlock
        One cast for each profile that holds pressure and temperature or salinity; the others are named in `left_out`.

    Raises
    ------
    CastFileError
        No profile can be used.
    """
    count = store.dimensions["N_PROF"]
    shape = (count, store.dimensions["N_LEVELS"])
    _check_shapes(store, shape, origin.where)
    modes = _letters(store, "DATA_MODE", count)
    found = {ours: _parameter(store, name, modes) for ours, name in _PARAMETERS.items() if name in store.variables}
    present = np.isfinite(found["pressure"].values)
    measured = np.zeros(present.shape, bool)
    for name, parameter in found.items():
        if name != "pressure":
            measured |= np.isfinite(parameter.values)
    kept: Any = (present & measured).any(axis=1)
    texts = {name: _texts(store, name, count) for name in _TEXTS.values()}
    labels = _labels(store, texts["PLATFORM_NUMBER"], count)
    reason = "holds no pressure together with temperature or salinity"
    left_out = tuple(
        (f"{origin.where}: profile {index + 1} of {count} ({labels[index]})", reason) for index in np.flatnonzero(~kept)
    )
    if not kept.any():
        raise CastFileError(f"{origin.where}: no usable level: each of its {count} profiles {reason}")
    rows = (present | measured) & kept[:, None]
    chosen = np.flatnonzero(kept).tolist()
    times, time_notes = _times(store, count)
    latitude, longitude, position_notes = _positions(store, count)
    summary = _Summary(found)
    notes = [(*summary.notes(index), *time_notes[index], *position_notes[index]) for index in chosen]
    notes[0] = (*notes[0], *(f"{what.rsplit(': ', 1)[1]} left out: {why}" for what, why in left_out))
    return CastBlock(
        row_size=rows.sum(axis=1)[chosen],
        values={name: parameter.values[rows] for name, parameter in found.items()},
        flags={name: parameter.flags[rows] for name, parameter in found.items()},
        id=tuple(labels[index] for index in chosen),
        time=times[chosen],
        latitude=latitude[chosen],
        longitude=longitude[chosen],
        source=(origin.source,) * len(chosen),
        attributes=tuple(_attributes(store, texts, chosen, modes)),
        notes=tuple(notes),
        left_out=left_out,
    )


def _check_shapes(store: Store, shape: tuple[int, int], where: str) -> None:
    """Every parameter must lie along the profiles and, within them, the levels."""
    for name in _PARAMETERS.values():
        for companion in (name, f"{name}_QC", f"{name}_ADJUSTED", f"{name}_ADJUSTED_QC"):
            variable = store.variables.get(companion)
            if variable is not None and (variable.shape != shape or variable.dimensions != ("N_PROF", "N_LEVELS")):
                raise CastFileError(
                    f"{where}: {companion} lies along ({', '.join(variable.dimensions)}); in an Argo profile file it "
                    "must lie along (N_PROF, N_LEVELS)"
                )


def _letters(store: Store, name: str, count: int) -> NDArray[np.uint8]:
    """One character per profile; blanks where the file has none."""
    if name not in store.variables:
        return np.full(count, ord(" "), np.uint8)
    return letters(store.variables[name]).reshape(count)


def _parameter(store: Store, name: str, modes: NDArray[np.uint8]) -> _Parameter:
    values, flags = _values_and_flags(store, name)
    adjusted = np.zeros(len(values), bool)
    if f"{name}_ADJUSTED" in store.variables:
        own = _parameter_modes(store, name, modes)
        wanted = (own == ord("A")) | (own == ord("D"))
        if wanted.any():
            better, better_flags = _values_and_flags(store, f"{name}_ADJUSTED")
            there = np.isfinite(better)
            adjusted = wanted & (there.any(axis=1) | (better_flags == FAIL).any(axis=1))
            # no adjustment saved it: as received, but bad
            lost = ~there & (better_flags == FAIL) & np.isfinite(values)
            better = np.where(lost, values, better)
            # a delayed-mode verdict that leaves nothing and says nothing of it
            silent = wanted & (own == ord("D")) & ~adjusted
            flags = np.where(silent[:, None] & (flags == PASS), SUSPECT, flags)
            values = np.where(adjusted[:, None], better, values)
            flags = np.where(adjusted[:, None], better_flags, flags)
    if name == "PRES":
        flags = np.where(values < ABOVE_SURFACE, FAIL, flags)  # taken in air
    # 'missing' beside a value: the source says it is none
    flags = np.where(np.isfinite(values), np.where(flags == MISSING, FAIL, flags), MISSING).astype(np.int8)
    return _Parameter(values, flags, adjusted)


def _values_and_flags(store: Store, name: str) -> tuple[NDArray[np.float64], NDArray[np.int8]]:
    variable = store.variables[name]
    values = floats(variable)
    if name.startswith("CNDC"):
        units = variable.text("units") or "mhos/m"
        if units not in _UNITS_SCALE:
            return np.full_like(values, np.nan), np.full(values.shape, MISSING, np.int8)
        values = values * _UNITS_SCALE[units] if _UNITS_SCALE[units] != 1.0 else values
    if f"{name}_QC" not in store.variables:
        return values, np.full(values.shape, NOT_EVALUATED, np.int8)
    return values, _FLAG_TABLE[letters(store.variables[f"{name}_QC"])]


def _parameter_modes(store: Store, name: str, modes: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """The mode of one parameter in each profile: its own where the file has one per parameter, else the profile's."""
    if not {"PARAMETER_DATA_MODE", "STATION_PARAMETERS"} <= store.variables.keys():
        return modes
    own = letters(store.variables["PARAMETER_DATA_MODE"]).reshape(len(modes), -1)
    names = np.array(strings(store.variables["STATION_PARAMETERS"])).reshape(len(modes), -1)
    if names.shape != own.shape:
        raise UnfitError("PARAMETER_DATA_MODE and STATION_PARAMETERS do not name the same parameters")
    stated = (names == name) & np.isin(own, [ord(mode) for mode in _MODES])
    return np.where(stated.any(axis=1), own[np.arange(len(own)), stated.argmax(axis=1)], modes)


def _labels(store: Store, platforms: list[str], count: int) -> list[str]:
    """PLATFORM_CYCLE_direction; further profiles of the same cycle (near the surface, say) are numbered on."""
    cycles = np.full(count, np.nan)
    if "CYCLE_NUMBER" in store.variables:
        cycles = floats(store.variables["CYCLE_NUMBER"]).reshape(count)
    directions = _letters(store, "DIRECTION", count)
    seen: dict[str, int] = {}
    labels = []
    for index in range(count):
        cycle = "unknown" if np.isnan(cycles[index]) else f"{int(cycles[index]):03d}"
        label = f"{platforms[index] or 'unknown'}_{cycle}_{_DIRECTIONS.get(chr(directions[index]), 'ascending')}"
        seen[label] = seen.get(label, 0) + 1
        labels.append(label if seen[label] == 1 else f"{label}_{seen[label]}")
    return labels


def _texts(store: Store, name: str, count: int) -> list[str]:
    if name not in store.variables:
        return [""] * count
    found = strings(store.variables[name])
    if len(found) != count:
        raise UnfitError(f"{name} holds {len(found)} texts for {count} profiles")
    return found


def _attributes(
    store: Store, texts: dict[str, list[str]], chosen: list[int], modes: NDArray[np.uint8]
) -> Iterator[dict[str, str]]:
    count = len(modes)
    cycles = store.variables["CYCLE_NUMBER"].read().reshape(count) if "CYCLE_NUMBER" in store.variables else None
    directions = _letters(store, "DIRECTION", count)
    for index in chosen:
        found = {ours: texts[name][index] for ours, name in _TEXTS.items()}
        found["cycle"] = "" if cycles is None else str(cycles[index])
        found["direction"] = _DIRECTIONS.get(chr(directions[index]), "")
        found["data_mode"] = _MODES.get(chr(modes[index]), "")
        yield {key: value for key, value in found.items() if value}


class _Summary:
    """Which parameters each profile holds, and which of them are adjusted."""

    def __init__(self, found: dict[str, _Parameter]) -> None:
        self._adjusted = {name: parameter.adjusted for name, parameter in found.items()}
        self._present: dict[str, NDArray[np.bool_]] = {
            name: np.any(np.isfinite(parameter.values), axis=1) for name, parameter in found.items()
        }

    def notes(self, index: int) -> list[str]:
        adjusted = [name for name, held in self._adjusted.items() if held[index]]
        raw = [name for name, held in self._present.items() if held[index] and name not in adjusted]
        return [
            *([f"adjusted values of {', '.join(adjusted)}"] if adjusted else []),
            *([f"values of {', '.join(raw)} as received, not adjusted"] if raw else []),
        ]


def _quality_note(what: str, code: int) -> list[str]:
    return [] if chr(code) in _NO_DOUBT else [f"{what} is doubtful: its flag in the file is {chr(code)!r}"]


def _times(store: Store, count: int) -> tuple[NDArray[np.datetime64], list[list[str]]]:
    """JULD counts days since 1950 to about a tenth of a second: rounded to the millisecond."""
    times = np.full(count, NO_TIME)
    if "JULD" in store.variables:
        days = floats(store.variables["JULD"]).reshape(count)
        sane = np.isfinite(days) & (np.abs(days) < 100_000)
        times[sane] = _EPOCH + np.rint(days[sane] * 86_400_000).astype("timedelta64[ms]")
    codes = _letters(store, "JULD_QC", count)
    return times, [_quality_note("time", code) for code in codes]


def _positions(store: Store, count: int) -> tuple[NDArray[np.float64], NDArray[np.float64], list[list[str]]]:
    def read(name: str, limit: float) -> NDArray[np.float64]:
        if name not in store.variables:
            return np.full(count, np.nan)
        values = floats(store.variables[name]).reshape(count)
        return np.where(np.abs(values) <= limit, values, np.nan)

    latitude, longitude = read("LATITUDE", 90.0), read("LONGITUDE", 360.0)
    longitude = np.array([normalised_longitude(value) if np.isfinite(value) else np.nan for value in longitude])
    codes = _letters(store, "POSITION_QC", count)
    return latitude, longitude, [_quality_note("position", code) for code in codes]
