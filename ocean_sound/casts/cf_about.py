"""Where and when the casts of a CF file were taken, what they are called, and what else is known of them."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .cast import NO_TIME
from .cf_choose import variable_named
from .cf_time import NoTimeError, times_since
from .flag_codes import UnknownSchemeError, companions, scheme_of
from .levels import About
from .names import meaning, plain_words, split_unit
from .netcdf import floats, strings
from .preamble import Found, note_fall_rate
from .where_when import read_position, read_time
from .wod import is_wod, wod_attributes, wod_notes

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from .cf_geometry import Geometry
    from .origin import Origin
    from .settings import Settings
    from .store import Store, Variable

_KEPT = {
    *("equation", "title", "institution", "project", "platform", "platform_code", "instrument", "license", "cruise"),
    *("station", "site_code", "ship_name", "callsign", "WOCE_ID"),
}
_WOCE = {"EXPOCODE": "cruise", "STATION_NUMBER": "station", "CAST_NUMBER": "cast_number"}
_LIMITS = {"latitude": 90.0, "longitude": 360.0}
_ROLES = {"trajectory_id": "trajectory", "timeseries_id": "station"}


def about_casts(
    store: Store, geometry: Geometry, origin: Origin, settings: Settings, *, temperature_only: bool
) -> tuple[list[About], list[str]]:
    """What is known of each cast apart from its levels.

    Parameters
    ----------
    store, geometry, origin, settings
        The file, how casts lie in it, its name, and what a person said of it.
    temperature_only : bool
        Whether the casts hold depth and temperature alone, as those of expendable probes do.

    Returns
    -------
    about : list of About
    labels : list of str
        The `where` of each, for messages.
    """
    count = geometry.casts
    notes: list[list[str]] = [[] for _ in range(count)]
    latitude, longitude = (_coordinates(store, geometry, kind, settings, notes) for kind in ("latitude", "longitude"))
    times = _times(store, geometry, settings, notes, origin.where)
    shared = _shared_attributes(store)
    own = wod_attributes(store, geometry) if is_wod(store) else [{} for _ in range(count)]
    if is_wod(store):
        for lines, more in zip(notes, wod_notes(store, geometry, own), strict=True):
            lines.extend(more)
    for role, ours in _ROLES.items():
        for index, name in enumerate(_names_by_role(store, geometry, role) or []):
            if name:
                own[index][ours] = name
    ids = _identifiers(store, geometry, origin, settings, own)
    kept = tuple(line for line in store.text("notes").split("\n") if line)
    labels = [origin.where if count == 1 else f"{origin.where}: cast {name}" for name in ids]
    about = []
    for index in range(count):
        found = Found(attributes={**shared, **own[index]}, notes=[*kept, *notes[index]])
        if temperature_only:
            note_fall_rate(found)
        about.append(
            About(
                labels[index],
                ids[index],
                origin.source,
                float(latitude[index]),
                float(longitude[index]),
                times[index],
                found.attributes,
                found.notes,
            )
        )
    return about, labels


# --- one value for each cast ---------------------------------------------------------------------------------------


def _per_cast(values: NDArray[Any], variable: Variable, geometry: Geometry) -> tuple[NDArray[Any] | None, bool]:
    """One number for each cast, from a variable along the casts or, the first there is, along their levels."""
    found = geometry.per_cast(values, variable.dimensions)
    if found is not None:
        return found, False
    laid = geometry.per_level(values, variable.dimensions)
    if laid is None or not laid.size:
        return None, False
    row_size = geometry.row_size
    starts = np.concatenate([[0], np.cumsum(row_size)[:-1]])
    there = np.isfinite(laid)
    place = np.where(there, np.arange(laid.size), laid.size)
    first = np.full(row_size.size, laid.size)
    some = row_size > 0
    first[some] = np.minimum.reduceat(place, starts[some])
    ends = starts + row_size
    held = first < ends
    return np.where(held, laid[np.minimum(first, laid.size - 1)], np.nan), True


def _told(store: Store, kind: str, settings: Settings) -> Variable | None:
    wanted = settings.columns.get(kind)
    if wanted is None:
        return None
    return variable_named(store, wanted if wanted in store.variables else split_unit(wanted)[0], kind)


def _named(store: Store, kind: str) -> Iterator[Variable]:
    """Variables that may hold a position or time: by a plain name first, then any of the standard name."""
    later = []
    for variable in store.variables.values():
        standard = variable.text("standard_name")
        if variable.is_text or (standard and standard != kind):
            continue
        if meaning(variable.name) == kind or variable.name == "JULD":
            if standard or kind != "time" or " since " in variable.text("units"):
                yield variable
        elif standard == kind:
            later.append(variable)
    yield from later


def _coordinates(
    store: Store, geometry: Geometry, kind: str, settings: Settings, notes: list[list[str]]
) -> NDArray[np.float64]:
    given = settings.latitude if kind == "latitude" else settings.longitude
    if given is not None:
        return np.full(geometry.casts, read_position(str(given), kind, where=kind))
    told = _told(store, kind, settings)
    for variable in [told] if told is not None else _named(store, kind):
        values, inner = _per_cast(floats(variable), variable, geometry)
        if values is None or not np.isfinite(values).any():
            continue
        values = np.array(values, np.float64)
        beyond = np.abs(values) > _LIMITS[kind]
        for index in np.flatnonzero(beyond):
            notes[index].append(f"{kind} {values[index]:g} is not on the Earth: position taken as unknown")
        values[beyond] = np.nan
        if inner:
            for lines in notes:
                lines.append(f"{kind} changes with the levels; that of the first is kept")
        _note_doubt(store, variable, geometry, notes)
        if kind == "longitude":
            outside = (values < -180.0) | (values >= 180.0)
            values[outside] = (values[outside] + 180.0) % 360.0 - 180.0
        return values
    return np.full(geometry.casts, np.nan)


def _note_doubt(store: Store, variable: Variable, geometry: Geometry, notes: list[list[str]]) -> None:
    """Notes where the file's own flags of a position or time do not say that it is good."""
    kind = variable.text("standard_name") or meaning(variable.name) or variable.name
    for companion in companions(store, variable.name):
        try:
            flags, _ = scheme_of(store, companion).translate(companion.read())
        except UnknownSchemeError:
            continue
        own = geometry.per_cast(flags, companion.dimensions)
        if own is None:
            continue
        for index in np.flatnonzero((own != 1) & (own != 2)):
            notes[index].append(f"{kind} is doubtful: its flag in the file says so")


def _times(
    store: Store, geometry: Geometry, settings: Settings, notes: list[list[str]], where: str
) -> NDArray[np.datetime64]:
    if settings.time is not None:
        return np.full(geometry.casts, read_time(settings.time, where=where))
    told = _told(store, "time", settings)
    trouble = None
    for variable in [told] if told is not None else _named(store, "time"):
        values, inner = _per_cast(floats(variable), variable, geometry)
        if values is None or not np.isfinite(values).any():
            continue
        try:
            found = times_since(np.array(values, np.float64), variable.text("units"), variable.text("calendar"))
        except NoTimeError as error:
            trouble = trouble or str(error)
            continue
        for index in np.flatnonzero(np.isnat(found) & np.isfinite(values)):
            notes[index].append(f"time {values[index]:g} ({variable.text('units')}) is beyond all dates: unknown")
        if inner:
            for lines in notes:
                lines.append("time changes with the levels; that of the first is kept")
        _note_doubt(store, variable, geometry, notes)
        return found
    if trouble is not None:
        for lines in notes:
            lines.append(f"time unknown: {trouble}")
    return np.full(geometry.casts, NO_TIME)


# --- names and attributes ------------------------------------------------------------------------------------------


def _texts(variable: Variable, geometry: Geometry) -> list[str] | None:
    """One text for each cast."""
    if variable.is_text:
        texts = np.array(strings(variable), object)
        own = variable.dimensions[:-1] if variable.dtype.kind == "S" else variable.dimensions
        shape = variable.shape[:-1] if variable.dtype.kind == "S" else variable.shape
        texts = texts.reshape(shape)
        found = geometry.per_cast(texts, own)
        if found is None and (laid := geometry.per_level(texts, own)) is not None and laid.size:
            starts = np.concatenate([[0], np.cumsum(geometry.row_size)[:-1]])
            found = laid[np.minimum(starts, laid.size - 1)]
        return None if found is None else [str(text) for text in found.tolist()]
    values, _ = _per_cast(floats(variable), variable, geometry)
    if values is None:
        return None
    return [("" if np.isnan(value) else f"{value:.15g}") for value in values.tolist()]


def _names_by_role(store: Store, geometry: Geometry, role: str) -> list[str] | None:
    for said, variable in store.having("cf_role"):
        if said == role:
            found = _texts(variable, geometry)
            if found is not None:
                return found
    return None


def _identifiers(
    store: Store, geometry: Geometry, origin: Origin, settings: Settings, own: list[dict[str, str]]
) -> list[str]:
    """Names of the casts, each once: from the file where it has any, else from those of its station and its own."""
    told = _told(store, "id", settings)
    if settings.id is not None and geometry.casts == 1:
        return [settings.id]
    if told is not None:
        names = _texts(told, geometry)
        if names is None:
            raise InputError(f"--map id={told.name}: it does not lie along the casts")
    else:
        names = _names_by_role(store, geometry, "profile_id") or _woce_names(store, geometry) or [""] * geometry.casts
    parent = [about.get("station") or about.get("trajectory") or "" for about in own]
    seen: dict[str, int] = {}
    unique = []
    for index, name in enumerate(names):
        stem = name or parent[index] or origin.name
        if not name and geometry.casts > 1:
            stem = f"{stem}_{index + 1}"
        seen[stem] = seen.get(stem, 0) + 1
        unique.append(stem if seen[stem] == 1 else f"{stem}_{seen[stem]}")
    return unique


def _woce_names(store: Store, geometry: Geometry) -> list[str] | None:
    """Cruise, station and cast, from the attributes of a WOCE file or, one for each cast, its variables."""
    if geometry.casts == 1 and store.get("EXPOCODE") is not None:
        parts = [str(part).strip() for key in _WOCE if isinstance(part := store.get(key), str)]
        return ["_".join(part for part in parts if part)]
    columns = [store.variables[key] for key in ("expocode", "station", "cast") if key in store.variables]
    if len(columns) < 3:
        return None
    texts = [_texts(column, geometry) for column in columns]
    if any(text is None for text in texts):
        return None
    return ["_".join(parts) for parts in zip(*(text for text in texts if text is not None), strict=True)]


def _shared_attributes(store: Store) -> dict[str, str]:
    """Attributes of the file that hold for all its casts."""
    found = {}
    for key in store.names():
        lower = key.lower()
        if not (key.startswith("cast_") or lower in _KEPT or lower.startswith("xbt") or key in _WOCE):
            continue
        value = store.text(key)
        if value:
            ours = _WOCE.get(key) or plain_words(key.removeprefix("cast_")).replace(" ", "_")
            found[ours] = value
    return found
