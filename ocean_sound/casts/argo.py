"""Argo profile files: one or many profiles by N_PROF and N_LEVELS, each with its own state of processing.

Source: Argo user's manual (Argo data management, doi:10.13155/29825): sections on the profile format, reference table
2 (flags), 3 (parameters) and the rule that ADJUSTED values are the ones to use in data modes A and D.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import CastFileError
from .block import CastBlock
from .cast import FAIL, MISSING, NO_TIME, NOT_EVALUATED, PASS, SUSPECT, normalised_longitude
from .netcdf import floats, opened, text

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from .origin import Origin

_PARAMETERS = {"pressure": "PRES", "temperature": "TEMP", "salinity": "PSAL", "conductivity": "CNDC"}
_UNITS_SCALE = {"mhos/m": 1.0, "mhos.m-1": 1.0, "S/m": 1.0, "mS/cm": 0.1}
# Reference table 2: 0 no QC, 1 good, 2 probably good, 3 probably bad, 4 bad, 5 changed, 8 estimated, 9 missing.
_FLAG_TABLE = np.full(256, NOT_EVALUATED, np.int8)
for _codes, _flag in ((b"1258", PASS), (b"3", SUSPECT), (b"4", FAIL), (b"9", MISSING)):
    _FLAG_TABLE[list(_codes)] = _flag
_GOOD_QC = b"1258"
_UNKNOWN_QC = (b"0", b" ", b"\x00", b"")
_DIRECTIONS = {"A": "ascending", "D": "descending"}
_EPOCH = np.datetime64("1950-01-01", "ms")
_MODES = {"R": "real time", "A": "adjusted in real time", "D": "delayed mode"}


def is_argo(dataset: Any) -> bool:
    """Whether an open dataset is an Argo profile file: it has what the manual makes mandatory."""
    return {"N_PROF", "N_LEVELS"} <= set(dataset.dimensions) and {"PRES", "DATA_MODE"} <= set(dataset.variables)


@dataclass(frozen=True)
class _Parameter:
    """One parameter of all profiles, raw or adjusted as each profile's mode says; shape (profiles, levels)."""

    values: NDArray[np.float64]
    flags: NDArray[np.int8]
    adjusted: NDArray[np.bool_]


def read_argo(dataset: Any, origin: Origin) -> CastBlock:
    """Read the casts of an Argo profile file.

    Parameters
    ----------
    dataset : netCDF4.Dataset
        Open, without masks.
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
    count = len(dataset.dimensions["N_PROF"])
    modes = _letters(dataset, "DATA_MODE", count)
    found = {ours: _parameter(dataset, name, modes) for ours, name in _PARAMETERS.items() if name in dataset.variables}
    present = np.isfinite(found["pressure"].values)
    others = [np.isfinite(parameter.values) for name, parameter in found.items() if name != "pressure"]
    measured = np.zeros(present.shape, bool)
    for held in others:
        measured |= held
    kept: Any = (present & measured).any(axis=1)
    labels = _labels(dataset, count)
    reason = "holds no pressure together with temperature or salinity"
    left_out = tuple(
        (f"{origin.where}: profile {index + 1} of {count} ({labels[index]})", reason) for index in np.flatnonzero(~kept)
    )
    if not kept.any():
        raise CastFileError(f"{origin.where}: no usable level: each of its {count} profiles {reason}")
    rows = (present | measured) & kept[:, None]
    chosen = np.flatnonzero(kept).tolist()
    times, time_notes = _times(dataset, count)
    latitude, longitude, position_notes = _positions(dataset, count)
    notes = [(*_mode_notes(found, index), *time_notes[index], *position_notes[index]) for index in chosen]
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
        attributes=tuple(_attributes(dataset, index, modes) for index in chosen),
        notes=tuple(notes),
        left_out=left_out,
    )


def _letters(dataset: Any, name: str, count: int) -> NDArray[np.bytes_]:
    """One character per profile; blanks where the file has none."""
    if name not in dataset.variables:
        return np.full(count, b" ", "S1")
    return np.atleast_1d(np.asarray(dataset.variables[name][:], "S1")).reshape(count)


def _parameter(dataset: Any, name: str, modes: NDArray[np.bytes_]) -> _Parameter:
    values, flags = _values_and_flags(dataset, name)
    adjusted = np.zeros(len(values), bool)
    if f"{name}_ADJUSTED" in dataset.variables:
        better, better_flags = _values_and_flags(dataset, f"{name}_ADJUSTED")
        adjusted = np.isin(_parameter_modes(dataset, name, modes), [b"A", b"D"]) & np.isfinite(better).any(axis=1)
        values = np.where(adjusted[:, None], better, values)
        flags = np.where(adjusted[:, None], better_flags, flags)
    finite = np.isfinite(values)
    flags = np.where(finite, np.where(flags == MISSING, NOT_EVALUATED, flags), MISSING).astype(np.int8)
    return _Parameter(values, flags, adjusted)


def _values_and_flags(dataset: Any, name: str) -> tuple[NDArray[np.float64], NDArray[np.int8]]:
    variable = dataset.variables[name]
    values = floats(variable)
    if name.startswith("CNDC"):
        units = str(getattr(variable, "units", "mhos/m")).strip()
        if units not in _UNITS_SCALE:
            return np.full_like(values, np.nan), np.full(values.shape, MISSING, np.int8)
        values = values * _UNITS_SCALE[units] if _UNITS_SCALE[units] != 1.0 else values
    if f"{name}_QC" not in dataset.variables:
        return values, np.full(values.shape, NOT_EVALUATED, np.int8)
    codes = np.asarray(dataset.variables[f"{name}_QC"][:], "S1").view(np.uint8).reshape(values.shape)
    return values, _FLAG_TABLE[codes]


def _parameter_modes(dataset: Any, name: str, modes: NDArray[np.bytes_]) -> NDArray[np.bytes_]:
    """The mode of one parameter in each profile: its own where the file has one per parameter, else the profile's."""
    if not {"PARAMETER_DATA_MODE", "STATION_PARAMETERS"} <= set(dataset.variables):
        return modes
    names = np.asarray(dataset.variables["STATION_PARAMETERS"][:], "S1")
    own = np.asarray(dataset.variables["PARAMETER_DATA_MODE"][:], "S1")
    found = modes.copy()
    for profile in range(len(modes)):
        for index in range(own.shape[1]):
            if text(names[profile, index]) == name and own[profile, index] in {b"R", b"A", b"D"}:
                found[profile] = own[profile, index]
    return found


def _labels(dataset: Any, count: int) -> list[str]:
    """PLATFORM_CYCLE_direction; further profiles of the same cycle (near the surface, say) are numbered on."""
    cycles = np.full(count, np.nan)
    if "CYCLE_NUMBER" in dataset.variables:
        cycles = floats(dataset.variables["CYCLE_NUMBER"]).reshape(count)
    directions = _letters(dataset, "DIRECTION", count)
    seen: dict[str, int] = {}
    labels = []
    for index in range(count):
        platform = _row_text(dataset, "PLATFORM_NUMBER", index) or "unknown"
        cycle = "unknown" if np.isnan(cycles[index]) else f"{int(cycles[index]):03d}"
        label = f"{platform}_{cycle}_{_DIRECTIONS.get(text(directions[index]), 'ascending')}"
        seen[label] = seen.get(label, 0) + 1
        labels.append(label if seen[label] == 1 else f"{label}_{seen[label]}")
    return labels


def _row_text(dataset: Any, name: str, index: int) -> str:
    return text(np.asarray(dataset.variables[name][index])) if name in dataset.variables else ""


def _attributes(dataset: Any, index: int, modes: NDArray[np.bytes_]) -> dict[str, str]:
    cycle = dataset.variables["CYCLE_NUMBER"][index] if "CYCLE_NUMBER" in dataset.variables else ""
    direction = text(dataset.variables["DIRECTION"][index]) if "DIRECTION" in dataset.variables else ""
    found = {
        "platform": _row_text(dataset, "PLATFORM_NUMBER", index),
        "cycle": str(cycle),
        "direction": _DIRECTIONS.get(direction, ""),
        "data_mode": _MODES.get(text(modes[index]), ""),
        "project": _row_text(dataset, "PROJECT_NAME", index),
        "principal_investigator": _row_text(dataset, "PI_NAME", index),
        "sampling": _row_text(dataset, "VERTICAL_SAMPLING_SCHEME", index),
    }
    return {key: value for key, value in found.items() if value}


def _mode_notes(found: dict[str, _Parameter], index: int) -> list[str]:
    adjusted = [name for name, parameter in found.items() if parameter.adjusted[index]]
    present = [name for name, parameter in found.items() if np.isfinite(parameter.values[index]).any()]
    raw = [name for name in present if name not in adjusted]
    return [
        *([f"adjusted values of {', '.join(adjusted)}"] if adjusted else []),
        *([f"values of {', '.join(raw)} as received, not adjusted"] if raw else []),
    ]


def _quality_note(what: str, code: bytes) -> list[str]:
    if code in _UNKNOWN_QC or code in {_GOOD_QC[i : i + 1] for i in range(len(_GOOD_QC))}:
        return []
    return [f"{what} is doubtful: its flag in the file is {text(code)!r}"]


def _times(dataset: Any, count: int) -> tuple[NDArray[np.datetime64], list[list[str]]]:
    """JULD counts days since 1950 to about a tenth of a second: rounded to the millisecond."""
    times = np.full(count, NO_TIME)
    if "JULD" in dataset.variables:
        days = floats(dataset.variables["JULD"]).reshape(count)
        sane = np.isfinite(days) & (np.abs(days) < 100_000)
        times[sane] = _EPOCH + np.rint(days[sane] * 86_400_000).astype("timedelta64[ms]")
    codes = _letters(dataset, "JULD_QC", count)
    return times, [_quality_note("time", codes[index]) for index in range(count)]


def _positions(dataset: Any, count: int) -> tuple[NDArray[np.float64], NDArray[np.float64], list[list[str]]]:
    def read(name: str, limit: float) -> NDArray[np.float64]:
        if name not in dataset.variables:
            return np.full(count, np.nan)
        values = floats(dataset.variables[name]).reshape(count)
        return np.where(np.abs(values) <= limit, values, np.nan)

    latitude, longitude = read("LATITUDE", 90.0), read("LONGITUDE", 360.0)
    longitude = np.array([normalised_longitude(value) if np.isfinite(value) else np.nan for value in longitude])
    codes = _letters(dataset, "POSITION_QC", count)
    return latitude, longitude, [_quality_note("position", codes[index]) for index in range(count)]


def read_argo_file(origin: Origin) -> CastBlock:
    """Open and read an Argo profile file; see `read_argo`."""
    with opened(origin) as dataset:
        return read_argo(dataset, origin)
