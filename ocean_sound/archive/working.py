"""What a worker does with one job: read casts, check them, give them their speed, and leave finished parts."""

from __future__ import annotations

import hashlib
import json
import os
from dataclasses import asdict, dataclass, replace
from io import FileIO
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from ..casts import VARIABLES, CastBlock, Thresholds, check_block, read_blocks
from ..casts.many import read_contents
from ..errors import CastFileError, InputError, OceanSoundError, OutputError
from ..files import checksum
from ..profile.speeds import speeds_of_block
from ..water import depth_from_pressure
from .asking import Archive
from .blocks import cut, in_pieces, joined
from .parts import AS_READ, FROM_DENSITY, FROM_STANDARD_OCEAN, Part, PartFile, empty_part, text_column
from .summary import summaries

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Sequence

    from numpy.typing import NDArray

    from ..profile.speeds import SpeedColumns
    from .inputs import Input
    from .parts import Outline

# Levels worked on at once: what is computed on the way then stays in the cache of a processor.
MOST_LEVELS = 1 << 16
_DEPTH_RANGE = (0.0, 12000.0)  # dbar that can be turned into a depth
_END = "-end.part"


@dataclass(frozen=True)
class Settings:
    """What decides the content of an archive, beside its inputs."""

    equation: str
    thresholds: Thresholds | None
    salinity: float | None

    def to_dict(self) -> dict[str, Any]:
        """The settings as plain values."""
        return asdict(self)


@dataclass(frozen=True)
class Stretch:
    """Casts of an existing archive, from first up to but not including last, that go into a new one as they are."""

    path: str
    first: int
    last: int


@dataclass(frozen=True)
class Job:
    """Files to read or casts to take over, and the beginning of the names of their parts."""

    parts: str
    settings: Settings
    files: tuple[Input, ...] = ()
    stretch: Stretch | None = None


@dataclass(frozen=True)
class Done:
    """What came of a job."""

    casts: int
    files: int
    left_out: int


def finished_parts(job: Job) -> list[Path]:
    """The part files of a job in their order, or none as long as it is not finished: the last is written last."""
    end = Path(job.parts + _END)
    if not end.is_file():
        return []
    return [*sorted(end.parent.glob(f"{Path(job.parts).name}-[0-9]*.part")), end]


def make_ready() -> None:
    """In a worker of our own, before its first job: without this it takes 0.2 s longer to start."""
    from .._numba import spare_scipy

    spare_scipy()


def work(job: Job) -> Done:
    """Make the parts of a job, or find it finished."""
    outlines = _outlines(job)
    if not outlines:
        parts = _taken_over(job.stretch) if job.stretch else _made(job)
        number, held = 0, next(parts)
        for part in parts:
            outlines.append(held.write(Path(f"{job.parts}-{number:04d}.part")))
            number, held = number + 1, part
        outlines.append(held.write(Path(job.parts + _END)))
    return Done(
        sum(outline.casts for outline in outlines),
        sum(outline.files for outline in outlines),
        sum(len(outline.left_out) for outline in outlines),
    )


def _outlines(job: Job) -> list[Outline]:
    """What the finished parts of a job hold; none if a part was damaged, as when the machine itself went down."""
    try:
        return [PartFile(path).outline for path in finished_parts(job)]
    except OutputError:
        return []


def _taken_over(stretch: Stretch | None) -> Iterator[Part]:
    if stretch is not None:
        with Archive(stretch.path) as archive:
            left_out = tuple(archive.left_out()) if stretch.first == 0 else ()
            yield replace(archive.part(stretch.first, stretch.last), left_out=left_out)


@dataclass(frozen=True)
class _Found:
    """Casts as read, with the name and checksum of the file of each."""

    block: CastBlock
    sources: tuple[str, ...]
    checksums: tuple[str, ...]

    def cut(self, first: int, last: int) -> _Found:
        return _Found(cut(self.block, first, last), self.sources[first:last], self.checksums[first:last])


def _made(job: Job) -> Iterator[Part]:
    """The parts made of a job's files; the last says what was left out of all, and accounts for the files."""
    left_out: list[tuple[str, str, str]] = []
    waiting: list[_Found] = []
    levels = 0
    last = None
    for found in _read(job.files, left_out):
        for first, end in in_pieces(found.block, MOST_LEVELS):
            piece = found.cut(first, end)
            size = int(piece.block.starts[-1])
            if waiting and levels + size > MOST_LEVELS:
                for part in _worked(_together(waiting), job.settings, left_out):
                    if last is not None:
                        yield last
                    last = part
                waiting, levels = [], 0
            waiting.append(piece)
            levels += size
    if waiting:
        for part in _worked(_together(waiting), job.settings, left_out):
            if last is not None:
                yield last
            last = part
    yield replace(last or empty_part(), left_out=tuple(left_out), files=len(job.files))


def _together(found: Sequence[_Found]) -> _Found:
    return _Found(
        joined([one.block for one in found]),
        tuple(source for one in found for source in one.sources),
        tuple(digest for one in found for digest in one.checksums),
    )


# --- reading


def _read(files: Iterable[Input], left_out: list[tuple[str, str, str]]) -> Iterator[_Found]:
    """The casts of some files, in their order; of each file some cast, or what is said in `left_out`."""
    for run in _runs(files):
        yield from _read_run(run, left_out)


def _runs(files: Iterable[Input]) -> Iterator[dict[str, Input]]:
    """Files in runs without two of the same name: a cast of a block says the name of its file, not the folder."""
    run: dict[str, Input] = {}
    for entry in files:
        name = os.path.basename(entry.path)  # noqa: PTH119  # thousands of times
        if name in run:
            yield run
            run = {}
        run[name] = entry
    if run:
        yield run


def _read_run(run: dict[str, Input], left_out: list[tuple[str, str, str]]) -> Iterator[_Found]:
    said = _Said(run)
    digests: dict[str, str] = {}
    try:
        found = list(said.named(read_contents(_contents(run, digests, said)), digests))
    except (MemoryError, OutputError):
        raise
    except Exception:  # noqa: BLE001 - one file that trips a reader must not cost the others
        said = _Said(run)
        found = [one for name in run for one in _read_alone(name, run, said)]
    yield from found
    said.close()
    left_out += said.left_out


def _contents(run: dict[str, Input], digests: dict[str, str], said: _Said) -> Iterator[tuple[str, bytes]]:
    """Path and content of each file that can be read; its checksum is put into `digests`."""
    for name, entry in run.items():
        try:
            with FileIO(entry.path) as file:
                data = file.readall()
        except OSError as error:
            said.leave_out(entry, "", f"can't be read: {error.strerror or error}")
            continue
        digests[name] = hashlib.sha256(data).hexdigest()
        yield entry.path, data


def _read_alone(name: str, run: dict[str, Input], said: _Said) -> Iterator[_Found]:
    """One file by itself; whatever goes wrong is said of it."""
    entry = run[name]
    try:
        yield from said.named(read_blocks(entry.path), {name: checksum(entry.path)})
    except MemoryError:
        raise
    except (CastFileError, InputError) as error:
        said.leave_out(entry, "", str(error))
    except Exception as error:  # noqa: BLE001 - as above
        said.leave_out(entry, "", f"a fault of ocean_sound itself: {type(error).__name__}: {error}")


class _Said:
    """Who is who in what the readers return, so that each file is accounted for."""

    def __init__(self, run: dict[str, Input]) -> None:
        self.run = run
        self.by_path = {entry.path: entry for entry in run.values()}
        self.heard: set[str] = set()
        self.left_out: list[tuple[str, str, str]] = []

    def named(self, blocks: Iterable[CastBlock], digests: dict[str, str]) -> Iterator[_Found]:
        """Blocks with the file of each cast."""
        for block in blocks:
            for which, why in block.left_out:
                self._leave_out(which, why)
            if not len(block):
                continue
            names = [source.partition("/")[0] for source in block.source]
            self.heard.update(names)
            sources = tuple(
                self.run[name].name + source[len(name) :] for name, source in zip(names, block.source, strict=True)
            )
            yield _Found(block, sources, tuple(digests[name] for name in names))

    def _leave_out(self, which: str, why: str) -> None:
        """`which` is the path of a file, with a colon and what is in it where it is not the whole file."""
        entry = self.by_path.get(which)
        if entry is not None:
            self.leave_out(entry, "", why)
            return
        for path, candidate in self.by_path.items():
            if which.startswith(f"{path}: "):
                self.leave_out(candidate, which.removeprefix(f"{path}: "), why)
                return
        self.left_out.append(("", which, why))

    def leave_out(self, entry: Input, which: str, why: str) -> None:
        """Name a file, or something in it, that is not in the archive."""
        self.heard.add(os.path.basename(entry.path))  # noqa: PTH119
        self.left_out.append((entry.name, which, why.removeprefix(f"{entry.path}: ")))

    def close(self) -> None:
        """Name the files of which nothing was heard."""
        for name in [name for name in self.run if name not in self.heard]:
            self.leave_out(self.run[name], "", "holds no cast")


# --- checking, speed, columns


def _worked(found: _Found, settings: Settings, left_out: list[tuple[str, str, str]]) -> Iterator[Part]:
    """Casts checked and given their speed; a cast that trips the code is named and the others go on."""
    try:
        yield _part(found, settings)
    except (MemoryError, OSError):
        raise
    except Exception as error:  # noqa: BLE001 - thousands of casts must not be lost to one
        if len(found.block) == 1:
            fault = "" if isinstance(error, OceanSoundError) else f"a fault of ocean_sound: {type(error).__name__}: "
            left_out.append((found.sources[0], found.block.id[0], f"{fault}{error}"))
            return
        middle = len(found.block) // 2
        yield from _worked(found.cut(0, middle), settings, left_out)
        yield from _worked(found.cut(middle, len(found.block)), settings, left_out)


def _part(found: _Found, settings: Settings) -> Part:
    block = found.block
    if settings.thresholds is not None:
        block = check_block(block, thresholds=settings.thresholds)[0]
    speeds = speeds_of_block(block, equation=settings.equation, salinity=settings.salinity, compiled=True)
    obs = _obs_columns(block)
    source = _place(obs, block, speeds)
    summary = summaries(speeds)
    summary["deepest_depth"] = _deepest(block, summary["deepest_depth"], obs)
    computed = (speeds.row_size > 0) & ~speeds.direct
    cast = {
        "cast_id": text_column(block.id),
        "row_size": block.row_size.astype(np.int32),
        "time": block.time,
        "latitude": block.latitude,
        "longitude": block.longitude,
        "source_file": text_column(found.sources),
        "source_checksum": text_column(found.checksums),
        "equation": text_column([speeds.equation if own else "" for own in computed.tolist()]),
        "depth_source": source,
        **summary,
        "notes": text_column(["\n".join(notes) for notes in block.notes]),
        "speed_notes": text_column(
            [reason or "\n".join(notes) for reason, notes in zip(speeds.reasons, speeds.notes, strict=True)]
        ),
        "cast_attributes": text_column([_as_text(attributes) for attributes in block.attributes]),
    }
    return Part(cast, obs)


def _as_text(attributes: Any) -> str:
    return json.dumps(dict(attributes), ensure_ascii=False) if attributes else ""


def _obs_columns(block: CastBlock) -> dict[str, NDArray[Any]]:
    """All that was read, by the names it has in an archive: a measured speed stands beside that told of a cast."""
    columns: dict[str, NDArray[Any]] = {}
    companions = (("flag", block.flags), ("uncertainty", block.uncertainties), ("origin", block.origins))
    for name in VARIABLES:
        if name in block.values:
            stored = "measured_sound_speed" if name == "sound_speed" else name
            columns[stored] = block.values[name]
            columns |= {f"{stored}_{kind}": of[name] for kind, of in companions if name in of}
    return columns


def _place(obs: dict[str, NDArray[Any]], block: CastBlock, speeds: SpeedColumns) -> NDArray[np.int8]:
    """Add depth, speed and its uncertainty on the levels that were read; returned is where each depth comes from."""
    size = int(block.starts[-1])
    own = speeds.level >= 0  # a level that was added at the surface was not read
    level = speeds.level[own]

    def scattered(values: NDArray[np.float64]) -> NDArray[np.float64]:
        column = np.full(size, np.nan)
        column[level] = values[own]
        return column

    computed = scattered(speeds.depth)
    read = obs.get("depth", np.full(size, np.nan))
    has = np.logical_or.reduceat(np.isfinite(read), block.starts[:-1])
    source = np.where(has, AS_READ, np.where(speeds.row_size > 0, FROM_DENSITY, FROM_STANDARD_OCEAN)).astype(np.int8)
    where = np.repeat(source, block.row_size)
    depth = np.where(where == AS_READ, read, computed)
    lost = where == FROM_STANDARD_OCEAN
    if lost.any() and "pressure" in obs:
        latitude = np.repeat(block.latitude, block.row_size)
        low, high = _DEPTH_RANGE
        lost &= (obs["pressure"] >= low) & (obs["pressure"] <= high)
        depth[lost] = depth_from_pressure(obs["pressure"][lost], latitude[lost])
    obs["depth"] = depth
    if "depth_flag" in obs:
        of_pressure = obs.get("pressure_flag", np.full(size, 2, dtype=np.int8))
        obs["depth_flag"] = np.where((where != AS_READ) & np.isfinite(depth), of_pressure, obs["depth_flag"])
    both = (where == AS_READ) & np.isfinite(computed) & (computed != read)
    if both.any():
        obs["depth_from_pressure"] = np.where(both, computed, np.nan)
    obs["sound_speed"] = scattered(speeds.speed)
    obs["sound_speed_uncertainty"] = scattered(speeds.uncertainty)
    return source


def _deepest(block: CastBlock, deepest: NDArray[np.float64], obs: dict[str, NDArray[Any]]) -> NDArray[np.float64]:
    """The depth that each cast reaches, also of those without a speed: of their levels not flagged bad."""
    if np.isfinite(deepest).all():
        return deepest
    depth = obs["depth"]
    usable = np.isfinite(depth) & (depth <= _DEPTH_RANGE[1])
    for name in ("depth_flag", "pressure_flag"):
        if name in obs:
            usable &= ~np.isin(obs[name], (4,))
    reached = np.maximum.reduceat(np.where(usable, depth, -np.inf), block.starts[:-1])
    return np.where(np.isfinite(deepest), deepest, np.where(np.isfinite(reached), reached, np.nan))
