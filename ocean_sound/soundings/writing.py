"""Corrected soundings written to netCDF or CSV: all that the input has, and what was found, block by block.

NetCDF is written over a copy of the input, so that everything in it stays as it was, groups and packing included; only
variables that have the name of a new one get another. Classic formats become netCDF-4 on the way.
"""

from __future__ import annotations

import hashlib
import json
import re
from dataclasses import dataclass, field
from datetime import UTC, datetime
from importlib import metadata
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError, OutputError
from ..files import CONVENTIONS, HDF5_LOCK, checksum, replacing, write_csv_blocks
from .columns import INPUTS, OUTPUTS, REASONS
from .orders import SWATH_NOTE

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping, Sequence
    from os import PathLike

    from numpy.typing import NDArray

    from ..profile import Profile
    from .reading import Slab, Soundings

    Results = Iterable[tuple[Slab, Mapping[str, NDArray[Any]]]]

_EPOCH = "seconds since 1970-01-01T00:00:00Z"
_BEFORE = "_before"
_COPIED = 4 * 2**20  # bytes at a time
_CONVERTED = 2**20  # values at a time
_CHUNK = 2**17  # values in a chunk of a compressed or growing variable, about
_DECIMALS = 5  # of what is stored in single precision, in a table
_NO_NAME = re.compile(r"\W+")
_UNIT_TEXTS = {"m s-1": "m/s", "degree": "degrees"}


@dataclass(frozen=True, eq=False)
class About:
    """What an output says beside its soundings.

    Parameters
    ----------
    profiles : sequence of Profile
        The casts, in the order in which `cast_used` counts them.
    sources : sequence of (str, str)
        File and checksum of each, where known.
    orders : sequence of str
        Names of the survey orders, by the bits of `orders_held`.
    settings : mapping
        How it was corrected; told as JSON.
    done : str
        What was done, for the history.
    """

    profiles: Sequence[Profile] = ()
    sources: Sequence[tuple[str, str]] = ()
    orders: Sequence[str] = ()
    settings: Mapping[str, Any] = field(default_factory=dict)
    done: str = "soundings corrected for refraction"


def write_soundings(
    output: str | PathLike[str],
    source: Soundings,
    results: Results,
    about: About | None = None,
    *,
    replace: bool = False,
    compression: int = 0,
) -> None:
    """Write corrected soundings, whole or not at all.

    Parameters
    ----------
    output : path-like
        NetCDF (``.nc``) or CSV (``.csv``), by its ending.
    source : Soundings
        The input; all of its variables are kept. Those with the name of a new one are called ``<name>_before``.
    results : iterable of (Slab, mapping of str to numpy.ndarray of shape (n, m))
        All slabs of the source in their order, each with its columns of `columns.OUTPUTS`; the same names each time.
        For CSV, and where the source is no netCDF file, slabs with what is kept.
    about : About, optional
    replace : bool
        Whether an existing output may be replaced.
    compression : int
        zlib level of what is added to netCDF, 0 for none.

    Raises
    ------
    InputError
        The ending is another, or the compression no level.
    OutputError
        It can't be written, or not all soundings arrived.
    """
    path = Path(output)
    about = About() if about is None else about
    if not 0 <= compression <= 9:
        raise InputError(f"compression is {compression}: a zlib level from 0 to 9 would be right")
    if path.suffix.lower() == ".csv":
        write_csv_blocks(
            path, _tables(source, results, about), replace=replace, preamble=_preamble(source, about), units=False
        )
        return
    check_ending(path)
    with replacing(path, replace) as temporary:
        digest = _base(source, temporary)
        _fill(path, temporary, source, results, about, digest, compression)


def check_ending(path: Path) -> None:
    """Refuse an output of another kind.

    Raises
    ------
    InputError
        It ends neither in ``.nc`` nor in ``.csv``.
    """
    if path.suffix.lower() not in {".nc", ".csv"}:
        raise InputError(f"{path}: the ending must be .nc (netCDF) or .csv")


def needs_kept(output: Path, source: Soundings) -> bool:
    """Whether slabs must bring along what is not recognised."""
    return output.suffix.lower() == ".csv" or source.path is None or not _is_netcdf(source.path)


def _is_netcdf(path: Path | None) -> str:
    """``hdf5``, ``classic``, or nothing."""
    if path is None:
        return ""
    with path.open("rb") as file:
        head = file.read(4)
    return "classic" if head[:3] == b"CDF" else "hdf5" if head[1:] == b"HDF" else ""


def _base(source: Soundings, temporary: Path) -> str:
    """What is there before the results: a copy of the input, or an empty file; returned: the input's checksum."""
    kind = _is_netcdf(source.path)
    if source.path is None:
        return ""
    if kind == "hdf5":
        return _copied(source.path, temporary)
    if kind == "classic":
        _converted(source.path, temporary)
    return checksum(source.path)


def _copied(path: Path, goal: Path) -> str:
    digest = hashlib.sha256()
    with path.open("rb") as file, goal.open("xb") as copy:
        while data := file.read(_COPIED):
            digest.update(data)
            copy.write(data)
    return digest.hexdigest()


def _converted(path: Path, goal: Path) -> None:
    """A classic file as netCDF-4, every value as it stands."""
    import netCDF4

    with HDF5_LOCK, netCDF4.Dataset(path) as file, netCDF4.Dataset(goal, "w", format="NETCDF4") as copy:
        file.set_auto_maskandscale(False)
        copy.setncatts({name: file.getncattr(name) for name in file.ncattrs()})
        for name, dimension in file.dimensions.items():
            copy.createDimension(name, None if dimension.isunlimited() else len(dimension))
        for name, variable in file.variables.items():
            attributes = {key: variable.getncattr(key) for key in variable.ncattrs()}
            fill = attributes.pop("_FillValue", None)
            made = copy.createVariable(name, variable.dtype, variable.dimensions, fill_value=fill)
            made.set_auto_maskandscale(False)
            made.setncatts(attributes)
            if not variable.ndim:
                made[...] = variable[...]
                continue
            rows = max(_CONVERTED // max(int(np.prod(variable.shape[1:])), 1), 1)
            for first in range(0, variable.shape[0], rows):
                last = min(first + rows, variable.shape[0])
                made[first:last] = variable[first:last]


def _fill(
    path: Path, temporary: Path, source: Soundings, results: Results, about: About, digest: str, compression: int
) -> None:
    import netCDF4

    try:
        with HDF5_LOCK:
            file = netCDF4.Dataset(temporary, "a" if temporary.exists() else "w", format="NETCDF4")
    except (RuntimeError, OSError) as error:
        raise OutputError(f"{path}: can't be written: {error}; is the disk full?") from error
    try:
        with HDF5_LOCK:
            file.set_fill_off()  # every value is written
            file.set_auto_maskandscale(False)
        written = 0
        added: dict[str, Any] = {}
        for slab, found in results:
            with HDF5_LOCK:
                if not added:
                    _room_for(file, {*found, *_CASTS})
                    added = _define(file, source, slab, found, about, compression)
                first = slab.block.start
                last = first + slab.block.shape[0]
                for name, values in _stored(source, slab, found).items():
                    added[name][first:last] = values
            written += slab.block.shape[0]
        if written != source.shape[0]:
            raise OutputError(f"{path}: {written} of {source.shape[0]} pings were written; a fault of ocean_sound")
        with HDF5_LOCK:
            _fill_casts(file, about)
            file.setncatts(_globals(file, source, about, digest))
            file.close()
    except (RuntimeError, OSError) as error:  # netCDF reports a full disk as either
        if isinstance(error, OutputError):
            raise
        raise OutputError(f"{path}: can't be written: {error}; is the disk full?") from error
    finally:
        _let_go(file)


def _let_go(file: Any) -> None:
    """Close what is given up; on a full disk that fails again."""
    with HDF5_LOCK:
        try:
            if file.isopen():
                file.close()
        except (RuntimeError, OSError):
            return


_CASTS = ("cast_id", "cast_time", "cast_latitude", "cast_longitude", "cast_file", "cast_checksum")


def _room_for(file: Any, names: set[str]) -> None:
    """Give other names to variables, and to a dimension, that would stand in the way."""
    for name in sorted(names & set(file.variables)):
        file.renameVariable(name, _free(name, file.variables))
    if "cast" in file.dimensions:
        file.renameDimension("cast", _free("cast", file.dimensions))


def _free(name: str, taken: Mapping[str, Any]) -> str:
    found = name + _BEFORE
    while found in taken:
        found += _BEFORE
    return found


def _define(
    file: Any, source: Soundings, slab: Slab, found: Mapping[str, Any], about: About, compression: int
) -> dict[str, Any]:
    """The variables that blocks bring, by their names there."""
    for dimension, size in zip(source.dimensions, source.shape, strict=False):
        if dimension not in file.dimensions:
            file.createDimension(dimension, size)
    growing = any(file.dimensions[dimension].isunlimited() for dimension in source.dimensions)
    options: dict[str, Any] = {"zlib": True, "complevel": compression, "shuffle": True} if compression else {}
    if compression or growing:
        beams = source.shape[1]
        rows = min(slab.block.shape[0], max(_CHUNK // max(beams, 1), 1))
        options["chunksizes"] = (max(rows, 1), beams)[: len(source.dimensions)]
    added: dict[str, Any] = {}
    if needs_kept(Path("a.nc"), source):
        _define_kept(file, source, slab, options, added, set(found))
    for name in found:
        column = OUTPUTS[name]
        fill = {"fill_value": np.nan} if column.dtype.startswith("f") else {}
        variable = file.createVariable(name, column.dtype, source.dimensions, **options, **fill)
        variable.set_auto_maskandscale(False)
        variable.setncatts({**column.attributes(), **attributes_beside(name, found, about)})
        added[name] = variable
    return added


def _define_kept(
    file: Any, source: Soundings, slab: Slab, options: Mapping[str, Any], added: dict[str, Any], new: set[str]
) -> None:
    """Columns of an input that is no netCDF file."""
    for name in (*slab.block.names, *slab.kept):
        values = slab.block.of(name) if name in slab.block.names else slab.kept[name]
        text = values is not None and values.dtype.kind in "OUS"
        kind: Any = str if text else np.dtype("f8") if values is None or values.dtype.kind in "fM" else values.dtype
        dimensions = source.dimensions if name not in slab.block.pings else source.dimensions[:1]
        own = _NO_NAME.sub("_", name + _BEFORE if name in new else name)
        while own in file.variables or own in new:
            own += "_"
        extra = {} if text else dict(options)
        if "chunksizes" in extra:
            extra["chunksizes"] = extra["chunksizes"][: len(dimensions)]
        fill = {"fill_value": np.nan} if kind == np.dtype("f8") else {}
        variable = file.createVariable(own, kind, dimensions, **extra, **fill)
        variable.set_auto_maskandscale(False)
        about = _kept_attributes(source, slab, name)
        if values is not None and values.dtype.kind == "M":
            about |= {"units": _EPOCH, "calendar": "standard"}
        variable.setncatts(about)
        added[f"{name} kept"] = variable


def _kept_attributes(source: Soundings, slab: Slab, name: str) -> dict[str, Any]:
    if name in slab.block.names:
        return INPUTS[name].attributes() if name in INPUTS else OUTPUTS[name].attributes()
    unit = source.unit_of(name)
    return {"long_name": name} | ({"units": unit} if unit else {})


def attributes_beside(name: str, found: Mapping[str, Any], about: About) -> dict[str, Any]:
    """Attributes that depend on what else is written."""
    extra: dict[str, Any] = {}
    ancillary = [other for other in ("depth_uncertainty", "sounding_flag", "sounding_reason") if other in found]
    if name == "depth" and ancillary:
        extra["ancillary_variables"] = " ".join(ancillary)
    if {"sounding_latitude", "sounding_longitude"} <= set(found) and not name.startswith(("sounding_l", "cast_")):
        extra["coordinates"] = "sounding_latitude sounding_longitude"
    if name.startswith("orders_held") and about.orders:
        extra["flag_masks"] = np.array([1 << bit for bit in range(len(about.orders))], np.int16)
        extra["flag_meanings"] = " ".join("_".join(order.split()) for order in about.orders)
    return extra


def _stored(source: Soundings, slab: Slab, found: Mapping[str, NDArray[Any]]) -> dict[str, NDArray[Any]]:
    """Arrays by the names of `_define`, in the shape of their variables."""
    single = len(source.dimensions) == 1
    stored: dict[str, NDArray[Any]] = {}
    for name, values in found.items():
        full = np.broadcast_to(values, slab.block.shape)
        stored[name] = full[:, 0] if single else full
    if needs_kept(Path("a.nc"), source):
        columns = {**slab.block.pings, **slab.block.beams, **slab.kept}
        for name, values in columns.items():
            flat = values[:, 0] if single and values.ndim == 2 else values
            stored[f"{name} kept"] = _seconds(flat) if flat.dtype.kind == "M" else flat
    return stored


def _seconds(times: NDArray[Any]) -> NDArray[np.float64]:
    seconds = times.astype("datetime64[ns]").astype(np.int64) / 1e9
    return np.where(np.isnat(times), np.nan, seconds)


def _fill_casts(file: Any, about: About) -> None:
    """The casts, in the order of `cast_used`."""
    if not about.profiles:
        return
    file.createDimension("cast", len(about.profiles))
    known = len(about.sources) == len(about.profiles)
    text: dict[str, tuple[list[str], str]] = {
        "cast_id": ([profile.id for profile in about.profiles], "identifier of the cast"),
    }
    if known:
        text["cast_file"] = [name for name, _ in about.sources], "file that the cast was read from"
        text["cast_checksum"] = [digest for _, digest in about.sources], "SHA-256 of that file"
    for name, (values, title) in text.items():
        variable = file.createVariable(name, str, ("cast",))
        variable.long_name = title
        variable[:] = np.array(values, dtype=object)
    times = _seconds(np.array([profile.time for profile in about.profiles], dtype="datetime64[ns]"))
    numbers: dict[str, tuple[Any, dict[str, str]]] = {
        "cast_time": (times, {"standard_name": "time", "units": _EPOCH, "calendar": "standard"}),
        "cast_latitude": (
            [profile.latitude for profile in about.profiles],
            {"standard_name": "latitude", "units": "degrees_north"},
        ),
        "cast_longitude": (
            [profile.longitude for profile in about.profiles],
            {"standard_name": "longitude", "units": "degrees_east"},
        ),
    }
    for name, (column, attributes) in numbers.items():
        variable = file.createVariable(name, "f8", ("cast",), fill_value=np.nan)
        variable.setncatts({"long_name": f"{name.removeprefix('cast_')} of the cast", **attributes})
        variable[:] = np.asarray(column, dtype=np.float64)


def _globals(file: Any, source: Soundings, about: About, digest: str) -> dict[str, Any]:
    now = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    line = f"{now} {about.done} by ocean_sound {metadata.version('ocean_sound')}"
    earlier = file.getncattr("history") if "history" in file.ncattrs() else "\n".join(source.comments)
    found = {
        "Conventions": CONVENTIONS,
        "date_created": now,
        "history": f"{earlier}\n{line}" if earlier else line,
        "comment": SWATH_NOTE,
        "settings": json.dumps(about.settings, ensure_ascii=False, default=str),
    }
    if source.path is not None:
        found |= {"source_file": source.path.name, "source_checksum": digest}
    return found


def _preamble(source: Soundings, about: About) -> dict[str, object]:
    """Lines above a table."""
    now = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    lines: dict[str, object] = {f"input {at}": text for at, text in enumerate(source.comments)}
    lines["history"] = f"{now} {about.done} by ocean_sound {metadata.version('ocean_sound')}"
    lines["comment"] = SWATH_NOTE
    if source.path is not None:
        lines |= {"source_file": source.path.name, "source_checksum": checksum(source.path)}
    lines["settings"] = json.dumps(about.settings, ensure_ascii=False, default=str)
    known = len(about.sources) == len(about.profiles)
    for at, profile in enumerate(about.profiles):
        where = f", {about.sources[at][0]} {about.sources[at][1]}" if known else ""
        lines[f"cast {at}"] = f"{profile.id}, {profile.time}, {profile.latitude}, {profile.longitude}{where}"
    return lines


def _tables(source: Soundings, results: Results, about: About) -> Iterator[dict[str, NDArray[Any]]]:
    """Columns of a table, one sounding a row, a ping's values repeated for its beams."""
    reasons = np.array([reason.name for reason in REASONS], dtype=object)
    for slab, found in results:
        n, m = slab.block.shape
        table: dict[str, NDArray[Any]] = {}
        if len(source.dimensions) == 2:
            table[source.dimensions[0]] = np.repeat(slab.block.start + np.arange(n), m)
            table[source.dimensions[1]] = np.tile(np.arange(m), n)
        for name in slab.block.names:
            column = INPUTS[name] if name in INPUTS else OUTPUTS[name]
            label = name + _BEFORE if name in found else name
            table[_head(label, column.units)] = _flat(slab.block.of(name), (n, m))
        for name, values in slab.kept.items():
            label = name + _BEFORE if name in found or name in table else name
            table[_head(label, source.unit_of(name))] = _flat(values, (n, m))
        for name, values in found.items():
            flat = _flat(values, (n, m))
            if name == "sounding_reason":
                flat = reasons[flat]
            elif name.startswith("orders_held"):
                flat = _words(len(about.orders), about.orders)[flat] if about.orders else flat
            if flat.dtype == np.float32:
                flat = np.round(flat.astype(np.float64), _DECIMALS)
            table[_head(name, OUTPUTS[name].units)] = flat
        yield table


def _head(name: str, units: str) -> str:
    unit = _UNIT_TEXTS.get(units, units)
    return name if unit in {"", "1"} else f"{name} [{unit}]"


def _flat(values: Any, shape: tuple[int, int]) -> NDArray[Any]:
    array = np.asarray(values)
    return np.broadcast_to(array[:, None] if array.ndim == 1 else array, shape).ravel()


def _words(bits: int, orders: Sequence[str]) -> NDArray[Any]:
    """For each number of so many bits, the orders that it stands for."""
    each = [" ".join(order for bit, order in enumerate(orders) if number >> bit & 1) for number in range(1 << bits)]
    return np.array(each, dtype=object)
