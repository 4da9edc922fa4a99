"""Ask an archive: which casts it holds where and when, and hand them out one by one."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Self

import numpy as np

from ..casts import VARIABLES, Cast
from ..errors import CastFileError, InputError
from ..files import HDF5_LOCK
from ..profile import Profile
from .layout import LEFT_OUT, OWN_ATTRIBUTES
from .parts import Part

if TYPE_CHECKING:
    from collections.abc import Iterator
    from os import PathLike
    from types import TracebackType

    from numpy.typing import ArrayLike, NDArray

_NEEDED = ("cast_id", "row_size", "time", "latitude", "longitude", "source_file", "deepest_depth", "depth_source")


@dataclass(frozen=True)
class Wanted:
    """Which casts are asked for; what is None does not matter.

    Parameters
    ----------
    box : (west, south, east, north), optional
        Degrees; a west greater than east crosses the date line.
    start, end : datetime64 or str, optional
        UTC; both ends count.
    depth : float, optional
        The least depth that a cast must reach, m.
    ids : sequence of str, optional
        Names of casts.

    Raises
    ------
    InputError
        If the box or the times are out of order or not on the Earth.
    """

    box: tuple[float, float, float, float] | None = None
    start: Any = None
    end: Any = None
    depth: float | None = None
    ids: Sequence[str] | None = None

    def __post_init__(self) -> None:
        if self.box is not None:
            west, south, east, north = self.box
            if not (-90.0 <= south <= north <= 90.0 and abs(west) <= 360.0 and abs(east) <= 360.0):
                raise InputError(
                    f"box {west:g} {south:g} {east:g} {north:g}: give west, south, east, north in degrees, south first"
                )
        for name in ("start", "end"):
            object.__setattr__(self, name, _moment(name, getattr(self, name)))
        if self.start is not None and self.end is not None and self.start > self.end:
            raise InputError(f"start {self.start} comes after end {self.end}")


def _moment(name: str, value: Any) -> np.datetime64 | None:
    if value is None:
        return None
    try:
        return np.datetime64(value.removesuffix("Z") if isinstance(value, str) else value, "ns")
    except ValueError:
        raise InputError(f"{name} is {value!r}: give a date or time such as 2024-08-13 or 2024-08-13T10:05") from None


class Archive(Sequence[Cast]):
    """The casts of an archive, read when they are asked for; a context manager.

    Examples
    --------
    >>> import tempfile
    >>> from ocean_sound.archive import build_archive, open_archive
    >>> from ocean_sound.files import packaged_profile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     output = Path(folder) / "ostray.nc"
    ...     _ = build_archive([packaged_profile("invented/ostray_edge.csv")], output, workers=0)
    ...     with open_archive(output) as archive:
    ...         print(len(archive), archive[0].id)
    1 ostray_edge
    """

    def __init__(self, path: str | PathLike[str]) -> None:
        import netCDF4

        self.path = Path(path)
        with HDF5_LOCK:
            try:
                self._file: Any = netCDF4.Dataset(self.path)
            except FileNotFoundError:
                raise CastFileError(f"{path}: no such file; check the name") from None
            except OSError as error:
                raise CastFileError(f"{path}: can't be read as netCDF: {error.strerror or error}") from None
            self._file.set_auto_mask(False)
            missing = [name for name in _NEEDED if name not in self._file.variables]
            if missing:
                self._file.close()
                raise CastFileError(f"{path}: is no archive of this package: it has no variable {missing[0]!r}")
            known = {name: np.asarray(self._file.variables[name][:]) for name in _NEEDED}
        self.id: tuple[str, ...] = tuple(map(str, known["cast_id"]))
        self.row_size: NDArray[np.int64] = known["row_size"].astype(np.int64)
        self.starts = np.concatenate(([0], np.cumsum(self.row_size)))
        self.time = _times(known["time"])
        self.latitude: NDArray[np.float64] = known["latitude"]
        self.longitude: NDArray[np.float64] = known["longitude"]
        self.source: tuple[str, ...] = tuple(map(str, known["source_file"]))
        self.deepest: NDArray[np.float64] = known["deepest_depth"]
        self._depth_source: NDArray[np.int8] = known["depth_source"]
        self._on = {
            dimension: [name for name, of in self._file.variables.items() if of.dimensions == (dimension,)]
            for dimension in ("cast", "obs")
        }

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Let go of the file."""
        with HDF5_LOCK:
            if self._file.isopen():
                self._file.close()

    def __len__(self) -> int:
        return len(self.id)

    def __getitem__(self, index: Any) -> Any:
        if isinstance(index, slice):
            return [self[position] for position in range(*index.indices(len(self)))]
        position = range(len(self))[index]
        columns = self.columns(position)
        given = self._depth_source[position] == 0
        names = [name for name in VARIABLES if _stored_as(name) in columns and (given or name != "depth")]
        present = [name for name in names if np.isfinite(columns[_stored_as(name)]).any()]
        if not {"pressure", "depth"} & {*present}:
            present += [name for name in names if name in ("pressure", "depth")][:1]

        def companions(kind: str) -> dict[str, NDArray[Any]]:
            keys = {name: f"{_stored_as(name)}_{kind}" for name in present}
            return {name: columns[key] for name, key in keys.items() if key in columns}

        about = self.texts(position)
        return Cast(
            id=self.id[position],
            values={name: columns[_stored_as(name)] for name in present},
            flags=companions("flag"),
            uncertainties={name: own for name, own in companions("uncertainty").items() if np.isfinite(own).any()},
            origins={name: own for name, own in companions("origin").items() if own.any()},
            time=self.time[position],
            latitude=self.latitude[position],
            longitude=self.longitude[position],
            source=self.source[position],
            attributes=json.loads(about["cast_attributes"]) if about.get("cast_attributes") else {},
            notes=tuple(about["notes"].split("\n")) if about.get("notes") else (),
        )

    def __iter__(self) -> Iterator[Cast]:
        return (self[position] for position in range(len(self)))

    def columns(self, index: int, names: Sequence[str] | None = None) -> dict[str, NDArray[Any]]:
        """Columns of one cast as they stand in the file: those named, as far as there are such; all if none are."""
        return self._rows(int(self.starts[index]), int(self.starts[index + 1]), names)

    def _rows(self, first: int, last: int, names: Sequence[str] | None = None) -> dict[str, NDArray[Any]]:
        wanted = self._on["obs"] if names is None else [name for name in names if name in self._on["obs"]]
        with HDF5_LOCK:
            return {name: np.asarray(self._file.variables[name][first:last]) for name in wanted}

    def texts(self, index: int) -> dict[str, str]:
        """The texts that the archive has of one cast, such as its notes."""
        with HDF5_LOCK:
            return {
                name: str(self._file.variables[name][index])
                for name in self._on["cast"]
                if self._file.variables[name].dtype is str
            }

    def column(self, name: str) -> NDArray[Any]:
        """A column with one value for each cast, such as ``sonic_layer_depth``; texts as objects.

        Raises
        ------
        InputError
            If there is no such column.
        """
        return self._of_casts(name, 0, len(self))

    def _of_casts(self, name: str, first: int, last: int) -> NDArray[Any]:
        if name not in self._on["cast"]:
            known = ", ".join(self._on["cast"])
            raise InputError(f"{self.path}: no column for each cast is named {name!r}; there are {known}")
        with HDF5_LOCK:
            values = np.asarray(self._file.variables[name][first:last])
        return _times(values) if name == "time" else values

    def part(self, first: int, last: int) -> Part:
        """Casts that stand one behind the other, with all that the archive has of them."""
        cast = {name: self._of_casts(name, first, last) for name in self._on["cast"]}
        return Part(cast, self._rows(int(self.starts[first]), int(self.starts[last])))

    def about(self) -> dict[str, Any]:
        """The global attributes that say what the archive is, without those that follow from its content."""
        with HDF5_LOCK:
            return {
                name: self._file.getncattr(name)
                for name in self._file.ncattrs()
                if not name.startswith(("geospatial_", "time_coverage_")) and name not in OWN_ATTRIBUTES
            }

    def attribute(self, name: str) -> str:
        """A global attribute as text; empty where there is none."""
        with HDF5_LOCK:
            return str(self._file.getncattr(name)) if name in self._file.ncattrs() else ""

    def speed(self, index: int) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
        """Depth, sound speed and its uncertainty of one cast where it has a speed, from the surface down."""
        columns = self.columns(index, ["depth", "depth_from_pressure", "sound_speed", "sound_speed_uncertainty"])
        depth = columns["depth"]
        if "depth_from_pressure" in columns:
            depth = np.where(np.isfinite(columns["depth_from_pressure"]), columns["depth_from_pressure"], depth)
        good = np.flatnonzero(np.isfinite(columns["sound_speed"]) & np.isfinite(depth))
        order = good[np.argsort(depth[good], kind="stable")]
        return depth[order], columns["sound_speed"][order], columns["sound_speed_uncertainty"][order]

    def profile(self, index: int) -> Profile:
        """The sound-speed profile of one cast, as the archive has it.

        Raises
        ------
        InputError
            If fewer than two of its levels have a speed.
        """
        depth, speed, uncertainty = self.speed(index)
        if depth.size < 2:
            raise InputError(
                f"{self.path}: cast {self.id[index]!r} has {depth.size} levels with a speed; two are needed"
            )
        about = self.texts(index)
        return Profile(
            depth,
            speed,
            None if np.isnan(uncertainty).all() else uncertainty,
            id=self.id[index],
            time=self.time[index],
            latitude=self.latitude[index],
            longitude=self.longitude[index],
            equation=about.get("equation", ""),
            notes=tuple(about["speed_notes"].split("\n")) if about.get("speed_notes") else (),
        )

    def select(self, wanted: Wanted) -> NDArray[np.int64]:
        """Positions of the casts that are asked for, in the order of the archive.

        Raises
        ------
        InputError
            If a name asked for is not in the archive.
        """
        chosen = np.ones(len(self), dtype=bool)
        if wanted.box is not None:
            west, south, east, north = wanted.box
            chosen &= (self.latitude >= south) & (self.latitude <= north) & _between(self.longitude, west, east)
        if wanted.start is not None:
            chosen &= self.time >= wanted.start
        if wanted.end is not None:
            chosen &= self.time <= wanted.end
        if wanted.depth is not None:
            chosen &= self.deepest >= wanted.depth
        if wanted.ids is not None:
            unknown = set(wanted.ids) - set(self.id)
            if unknown:
                raise InputError(f"{self.path}: no cast is named {min(unknown)!r}; 'archive list' shows the names")
            chosen &= np.isin(np.array(self.id), list(wanted.ids))
        return np.flatnonzero(chosen)

    def left_out(self) -> list[tuple[str, str, str]]:
        """The inputs that are not in the archive: file, cast, reason."""
        with HDF5_LOCK:
            group = self._file.groups.get(LEFT_OUT)
            if group is None or len(group.dimensions["input"]) == 0:
                return []
            columns = [[str(text) for text in group.variables[name][:]] for name in ("file", "cast", "reason")]
        return list(zip(*columns, strict=True))

    def pairs(self, name: str) -> tuple[tuple[str, str], ...]:
        """Names of the casts that ``duplicate_of`` or ``near_duplicate_of`` marks, each with the earlier one."""
        earlier = self.column(name)
        return tuple((self.id[later], self.id[earlier[later]]) for later in np.flatnonzero(earlier >= 0))


def _stored_as(name: str) -> str:
    """Under which name an archive keeps what was measured: ``sound_speed`` there is what is known of the cast."""
    return "measured_sound_speed" if name == "sound_speed" else name


def _between(longitude: NDArray[np.float64], west: float, east: float) -> NDArray[np.bool_]:
    """Whether longitudes lie from west eastward to east, whatever turn each is counted in."""
    width = (east - west) % 360.0
    if width == 0.0 and east != west:
        width = 360.0
    inside: NDArray[np.bool_] = (longitude - west) % 360.0 <= width
    return inside


def _times(seconds: ArrayLike) -> NDArray[np.datetime64]:
    values = np.asarray(seconds, dtype=np.float64)
    known = np.isfinite(values)
    # microseconds: what seconds since 1970 tell apart as float64
    whole = np.where(known, np.rint(values * 1e6), 0.0).astype("datetime64[us]").astype("datetime64[ns]")
    return np.where(known, whole, np.datetime64("NaT", "ns"))


def open_archive(path: str | PathLike[str]) -> Archive:
    """Open an archive that `build_archive` made; casts are read when they are asked for.

    Parameters
    ----------
    path : path-like
        The netCDF file.

    Returns
    -------
    Archive
        A sequence of casts, and a context manager that closes the file.

    Raises
    ------
    CastFileError
        If the file is missing, not netCDF, or no such archive.
    """
    return Archive(path)
