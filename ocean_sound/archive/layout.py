"""How an archive lies on disk: a CF contiguous ragged array of profiles, put together from finished parts."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import UTC, datetime
from importlib import metadata
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import OutputError
from ..files import CONVENTIONS, HDF5_LOCK, attributes
from .parts import AS_READ, TEXT, text_column

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Mapping, Sequence
    from pathlib import Path

    from numpy.typing import NDArray

    from .parts import PartFile

# Values in one chunk of a compressed column: a compromise between reading one cast and reading all.
CHUNK = 1 << 16
LEFT_OUT = "left_out"
# What the global attributes say of the file itself, which no one else may say.
OWN_ATTRIBUTES = ("Conventions", "featureType", "date_created", "plan_checksum")
_EPOCH = "seconds since 1970-01-01T00:00:00Z"
_COORDINATES = ("time", "latitude", "longitude")
_COMPANIONS = ("flag", "uncertainty", "origin")


class Shape:
    """What all parts together hold: counts, the kind of every column, and what was left out."""

    def __init__(self, parts: Iterable[PartFile]) -> None:
        self.casts = self.levels = self.files = 0
        self.cast: dict[str, str] = {}
        self.obs: dict[str, str] = {}
        self.left_out: list[tuple[str, str, str]] = []
        for part in parts:
            outline = part.outline
            self.casts += outline.casts
            self.levels += outline.levels
            self.files += outline.files
            self.left_out += outline.left_out
            for known, columns in ((self.cast, outline.cast), (self.obs, outline.obs)):
                for name, kind in columns.items():
                    known.setdefault(name, kind)


@dataclass(frozen=True)
class About:
    """What an archive says beside its casts.

    Parameters
    ----------
    further : mapping of str to numpy.ndarray, shape (casts,)
        Columns that are known only of all casts together; they stand for those of the same name in the parts.
    attributes : mapping
        Global attributes beside those that follow from the content; a history among them is carried on.
    done : str
        What was done, for the history.
    """

    further: Mapping[str, NDArray[Any]] = field(default_factory=dict)
    attributes: Mapping[str, Any] = field(default_factory=dict)
    done: str = "built"


def write_archive(
    path: Path,
    parts: Sequence[PartFile],
    about: About,
    *,
    compression: int,
    progress: Callable[[int], None] = lambda _: None,
) -> Shape:
    """Put parts together, in their order, and look whether all of it arrived.

    Parameters
    ----------
    path : pathlib.Path
        A file that nobody reads yet: it is unreadable until all is written.
    parts : sequence of PartFile
        The casts.
    about : About
        What is said beside them.
    compression : int
        zlib level, 0 for none.
    progress : callable
        Told after each part how many casts it brought.

    Raises
    ------
    OutputError
        If it can't be written, or what is read back is not what was to be written.
    """
    import netCDF4

    shape = Shape(parts)
    with HDF5_LOCK:
        try:
            with netCDF4.Dataset(path, "w", format="NETCDF4") as file:
                file.set_auto_mask(False)
                file.set_fill_off()  # all of it is written below, and need not be filled before
                _define(file, shape, about, compression)
                span = _fill(file, parts, about, progress)
                _fill_left_out(file, shape.left_out)
                file.setncatts(_globals(span, about))
            with netCDF4.Dataset(path) as file:
                file.set_auto_mask(False)
                _check_counts(file, path, shape)
        except (RuntimeError, OSError) as error:  # netCDF reports a full disk as either
            if isinstance(error, OutputError):
                raise
            raise OutputError(f"{path}: can't be written: {error}; is the disk full?") from error
    return shape


def _define(file: Any, shape: Shape, about: About, compression: int) -> None:
    file.createDimension("cast", shape.casts)
    file.createDimension("obs", shape.levels)
    for dimension, columns in (("cast", shape.cast), ("obs", shape.obs)):
        for name, kind in columns.items():
            _define_variable(file, name, kind, dimension, compression)
    for name, values in about.further.items():
        if name not in file.variables:
            _define_variable(file, name, TEXT if values.dtype.kind == "O" else values.dtype.str, "cast", compression)
    for name in shape.obs:
        beside = [f"{name}_{kind}" for kind in _COMPANIONS if f"{name}_{kind}" in shape.obs]
        if beside:
            file.variables[name].ancillary_variables = " ".join(beside)


def _define_variable(file: Any, name: str, kind: str, dimension: str, compression: int) -> None:
    about = attributes(name)
    options: dict[str, Any] = {}
    if compression and kind != TEXT:
        options = {"zlib": True, "complevel": compression, "shuffle": True}
        options["chunksizes"] = (min(CHUNK, max(len(file.dimensions[dimension]), 1)),)
    stored: Any = str if kind == TEXT else np.dtype(kind)
    if kind != TEXT and stored.kind == "M":
        stored, about["units"], about["calendar"] = np.dtype("f8"), _EPOCH, "standard"
    if kind != TEXT and stored.kind == "f":
        options["fill_value"] = np.nan
    variable = file.createVariable(name, stored, (dimension,), **options)
    variable.setncatts(about)
    if name == "row_size":
        variable.sample_dimension = "obs"
    elif dimension == "obs" and name not in ("depth", "pressure"):
        variable.coordinates = " ".join((*_COORDINATES, "depth"))
    elif dimension == "cast" and name not in (*_COORDINATES, "cast_id"):
        variable.coordinates = " ".join(_COORDINATES)


def _fill(
    file: Any, parts: Iterable[PartFile], about: About, progress: Callable[[int], None]
) -> dict[str, tuple[Any, Any]]:
    """Write all columns; returned: the first and last value of what the global attributes tell the span of."""
    span: dict[str, tuple[Any, Any]] = {}
    for name, values in about.further.items():
        file.variables[name][:] = _stored(values)
    at = {"cast": 0, "obs": 0}
    for part in parts:
        outline = part.outline
        if not outline.casts:
            continue
        count = {"cast": outline.casts, "obs": outline.levels}
        for name, variable in file.variables.items():
            group = variable.dimensions[0]
            if name in about.further:
                continue
            if name in getattr(outline, group):
                values = part.cast(name) if group == "cast" else part.obs(name)
                _widen(span, name, values)
            else:
                values = _absent(variable, part, count[group])
            variable[at[group] : at[group] + count[group]] = _stored(values)
        for group, size in count.items():
            at[group] += size
        progress(outline.casts)
    return span


def _stored(values: NDArray[Any]) -> NDArray[Any]:
    if values.dtype.kind == "M":
        seconds = values.astype("datetime64[ns]").astype(np.int64) / 1e9
        return np.where(np.isnat(values), np.nan, seconds)
    if values.dtype.kind == "O":  # HDF5 ends a text at a NUL
        return np.array([text.replace("\0", "") for text in values.tolist()], dtype=object)
    return values


def _absent(variable: Any, part: PartFile, count: int) -> NDArray[Any]:
    """What stands for a column in a part that has none of it, as in a block of casts."""
    name = variable.name
    if variable.dtype is str:
        return np.full(count, "", dtype=object)
    if variable.dtype.kind == "f":
        return np.full(count, np.nan)
    column = np.zeros(count, dtype=variable.dtype)
    if name.endswith("_flag"):
        base = name.removesuffix("_flag")
        there = np.isfinite(part.obs(base)) if base in part.outline.obs else np.zeros(count, dtype=bool)
        column[:] = np.where(there, 2, 9)
        if name == "depth_flag" and "pressure_flag" in part.outline.obs:  # a depth is as good as its pressure
            computed = np.repeat(part.cast("depth_source") != AS_READ, part.cast("row_size"))
            column = np.where(computed & there, part.obs("pressure_flag"), column)
    return column


def _widen(span: dict[str, tuple[Any, Any]], name: str, values: NDArray[Any]) -> None:
    if name not in ("time", "latitude", "longitude", "depth"):
        return
    good = values[~np.isnat(values)] if values.dtype.kind == "M" else values[np.isfinite(values)]
    if good.size:
        low, high = span.get(name, (good.min(), good.max()))
        span[name] = min(low, good.min()), max(high, good.max())


def _fill_left_out(file: Any, rows: Sequence[tuple[str, str, str]]) -> None:
    """The inputs that are not in the archive, as a group of their own, with the reason of each."""
    group = file.createGroup(LEFT_OUT)
    group.createDimension("input", len(rows))
    group.comment = "inputs that are not in this archive, and why"
    columns = {"file": "file that was read", "cast": "what in the file, empty for all of it", "reason": "why not"}
    for index, (column, long_name) in enumerate(columns.items()):
        variable = group.createVariable(column, str, ("input",))
        variable.long_name = long_name
        if rows:
            variable[:] = _stored(text_column([row[index] for row in rows]))


def _globals(span: Mapping[str, tuple[Any, Any]], about: About) -> dict[str, Any]:
    now = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    line = f"{now} {about.done} by ocean_sound {metadata.version('ocean_sound')}"
    earlier = about.attributes.get("history")
    found: dict[str, Any] = {"Conventions": CONVENTIONS, "featureType": "profile", **about.attributes}
    found |= {"date_created": now, "history": f"{earlier}\n{line}" if earlier else line}
    for name, label, units in (("latitude", "lat", "degrees_north"), ("longitude", "lon", "degrees_east")):
        if name in span:
            found[f"geospatial_{label}_min"], found[f"geospatial_{label}_max"] = map(float, span[name])
            found[f"geospatial_{label}_units"] = units
    if "depth" in span:
        found["geospatial_vertical_min"], found["geospatial_vertical_max"] = map(float, span["depth"])
        found["geospatial_vertical_units"], found["geospatial_vertical_positive"] = "m", "down"
    if "time" in span:
        first, last = (f"{np.datetime_as_string(moment, unit='s')}Z" for moment in span["time"])
        found["time_coverage_start"], found["time_coverage_end"] = first, last
    return found


def _check_counts(file: Any, path: Path, shape: Shape) -> None:
    """Whether what lies on the disk is what was to be written."""
    found = {
        "casts": len(file.dimensions["cast"]),
        "levels": len(file.dimensions["obs"]),
        "sum of the levels of the casts": int(file.variables["row_size"][:].sum(dtype=np.int64)),
        "inputs left out": len(file.groups[LEFT_OUT].dimensions["input"]),
    }
    wanted = dict(zip(found, (shape.casts, shape.levels, shape.levels, len(shape.left_out)), strict=True))
    for what, count in found.items():
        if count != wanted[what]:
            raise OutputError(f"{path}: {what}: {count} read back, {wanted[what]} written; a fault of ocean_sound")
