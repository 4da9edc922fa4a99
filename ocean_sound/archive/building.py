"""Build an archive: find the inputs, part them into jobs, have them worked on, put the parts together."""

from __future__ import annotations

import time
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from ..casts import read_thresholds
from ..errors import InputError, OutputError, WorkerError
from ..files import check_output
from ..parallel import in_order
from ..parallel import workers as pool_of
from ..water import DEFAULT_EQUATION, find_equation
from .asking import open_archive
from .duplicates import find_duplicates
from .inputs import find_inputs, in_blocks
from .journal import Journal, digest_of, locked, opened_journal, planned
from .layout import OWN_ATTRIBUTES, About, write_archive
from .parts import PartFile, text_column
from .working import Job, Settings, Stretch, finished_parts, make_ready, work

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping, Sequence
    from os import PathLike

    from ..casts import Thresholds
    from .inputs import Input
    from .working import Done

    Blocks = list[tuple[Input, ...]]

# Levels of an existing archive that are taken over at once.
_STRETCH_LEVELS = 400_000


@dataclass(frozen=True)
class Progress:
    """How far a build is.

    Parameters
    ----------
    stage : str
        "casts" while inputs are read, "archive" while the archive is put together.
    share : float
        Of the work of this stage that is done, from 0 to 1.
    casts : int
        Casts so far.
    """

    stage: str
    share: float
    casts: int


@dataclass(frozen=True)
class Built:
    """What came of a build.

    Parameters
    ----------
    path : pathlib.Path
        The archive.
    casts, levels, files : int
        Casts and levels in it, and input files that are accounted for.
    left_out : tuple of (file, cast, reason)
        Inputs that are not in it; cast is empty where it is the whole file.
    duplicates : tuple of (str, str)
        Names of casts that repeat an earlier one, each with that one; they are in the archive, marked.
    near : tuple of (str, str)
        Names of casts at the place and time of an earlier one, whose levels differ, each with that one.
    without_speed : int
        Casts that could not be given a sound speed; why stands with each in the archive.
    seconds : float
        Time that it took.
    """

    path: Path
    casts: int
    levels: int
    files: int
    left_out: tuple[tuple[str, str, str], ...]
    duplicates: tuple[tuple[str, str], ...]
    near: tuple[tuple[str, str], ...]
    without_speed: int
    seconds: float

    def to_dict(self) -> dict[str, Any]:
        """The same as plain values, ready for JSON."""
        found = asdict(self)
        found["path"] = str(self.path)
        found["left_out"] = [dict(zip(("file", "cast", "reason"), row, strict=True)) for row in self.left_out]
        return found


def build_archive(
    paths: Sequence[str | PathLike[str]],
    output: str | PathLike[str],
    *,
    equation: str = DEFAULT_EQUATION,
    thresholds: str | PathLike[str] | Thresholds = "ocean",
    salinity: float | None = None,
    check: bool = True,
    compression: int = 0,
    workers: int | None = None,
    scheduler: str | None = None,
    resume: bool = False,
    replace: bool = False,
    append: bool = False,
    title: str = "",
    attributes: Mapping[str, Any] | None = None,
    progress: Callable[[Progress], None] | None = None,
) -> Built:
    """Read thousands of casts, check them, give them their sound speed, and write them as one CF netCDF file.

    Every input is in the archive or in its group ``left_out``, with the reason. The content does not depend on how many
    workers there were, nor on whether the build was interrupted.

    Parameters
    ----------
    paths : sequence of path-like
        Files and folders; folders are walked, ZIP files opened. Inputs are never touched.
    output : path-like
        The archive, ``.nc``.
    equation : str
        Sound-speed equation.
    thresholds : str, path-like or Thresholds
        By what the casts are checked: see `check_block`.
    salinity : float, optional
        To assume for casts without one; they have no speed where it is not given.
    check : bool
        Whether to check the casts at all.
    compression : int
        zlib level from 0 (none) to 9.
    workers : int, optional
        Processes; by default one for each processor, 0 for none beside this one.
    scheduler : str, optional
        Address of a dask scheduler whose workers do the work instead. They must see inputs and output under the same
        paths, on a file system that all share.
    resume : bool
        Whether to go on with a build of the same inputs and settings that was interrupted, if there is one.
    replace, append : bool
        Whether an existing archive is replaced, or the new casts are put behind those that are in it. It stays as it is
        until the new one is complete.
    title : str
        Of the archive.
    attributes : mapping, optional
        Further global attributes, such as ``creator_name``.
    progress : callable, optional
        Told of each step.

    Returns
    -------
    Built

    Raises
    ------
    InputError
        For impossible options, or if no input gave a cast.
    CastFileError
        If a path does not exist, or no file is found.
    OutputError
        If the output exists and neither `replace` nor `append` is given, is being built by another process, or can't be
        written. Finished work is kept for `resume`.
    WorkerError
        If a worker died. Finished work is kept for `resume`.

    Notes
    -----
    Worker processes start afresh: a script that calls this must do so under ``if __name__ == "__main__":``, or with
    ``workers=0``. Finished parts are kept in a hidden folder beside the output until the archive is put together there
    and renamed: a kill at any moment leaves the old archive intact. A cast that repeats an earlier one (within 60 s,
    0.001 degrees, and rounding of its values) is kept and marked by ``duplicate_of``.

    Examples
    --------
    >>> import tempfile
    >>> from ocean_sound.files import packaged_profile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     built = build_archive([packaged_profile("invented/ostray_edge.csv")], Path(folder) / "a.nc", workers=0)
    >>> built.casts, built.left_out
    (1, ())
    """
    began = time.monotonic()
    output = Path(output)
    settings = Settings(
        find_equation(equation).name,
        _checked_thresholds(thresholds) if check else None,
        _checked_salinity(salinity),
    )
    about = _checked_attributes(title, attributes)
    _check_options(output, compression, workers, replace=replace, append=append)
    check_output(output, replace=replace or append or resume)
    build = _Build(
        output=output,
        settings=settings,
        attributes=about,
        compression=compression,
        number=workers,
        scheduler=scheduler,
        replace=replace,
        append=append,
        began=began,
        progress=progress or (lambda _: None),
    )
    with locked(output):
        return build.run(paths, resume=resume)


def _checked_thresholds(thresholds: str | PathLike[str] | Thresholds) -> Thresholds:
    from ..casts import Thresholds

    return thresholds if isinstance(thresholds, Thresholds) else read_thresholds(thresholds)


def _checked_salinity(salinity: float | None) -> float | None:
    if salinity is not None and not 0.0 <= salinity <= 500.0:
        raise InputError(f"salinity is {salinity:g}; a practical salinity from 0 to 500 would be right")
    return salinity


def _checked_attributes(title: str, attributes: Mapping[str, Any] | None) -> dict[str, Any]:
    own = dict(attributes or {})
    for name in own:
        if name in OWN_ATTRIBUTES or name == "history":
            raise InputError(f"the attribute {name!r} follows from the archive itself; leave it away")
    return own | ({"title": title} if title else {})


def _check_options(output: Path, compression: int, number: int | None, *, replace: bool, append: bool) -> None:
    if output.suffix.lower() != ".nc":
        raise InputError(f"{output}: an archive is netCDF; its name must end in .nc")
    if not 0 <= compression <= 9:
        raise InputError(f"compression is {compression}; a level from 0 (none) to 9 would be right")
    if number is not None and number < 0:
        raise InputError(f"{number} workers: 0 or more would be right")
    if replace and append:
        raise InputError("an existing archive is either replaced or appended to: give one of --replace and --append")


@dataclass
class _Build:
    """One build, from its inputs to the archive in its place."""

    output: Path
    settings: Settings
    attributes: dict[str, Any]
    compression: int
    number: int | None
    scheduler: str | None
    replace: bool
    append: bool
    began: float
    progress: Callable[[Progress], None]

    def run(self, paths: Sequence[str | PathLike[str]], *, resume: bool) -> Built:
        inputs = find_inputs(paths, apart_from=[self.output])
        blocks = in_blocks(inputs)
        old = self._old() if self.append and self.output.exists() else []
        plan = {
            "settings": {**self.settings.to_dict(), "compression": self.compression},
            "attributes": self.attributes,
            "old": [asdict(stretch) for stretch in old],
            "old_changed": self.output.stat().st_mtime_ns if old else 0,
            "blocks": [[vars(entry) for entry in block] for block in blocks],
        }
        if resume and self._complete(plan):
            return self._told(len(inputs))
        check_output(self.output, replace=self.replace or self.append)
        with opened_journal(self.output, plan, resume=resume) as journal:
            try:
                parts = self._parts(journal, blocks, old, sum(entry.size for entry in inputs))
                self._assemble(journal, parts, digest_of(plan), len(inputs))
            except (WorkerError, OutputError) as error:
                raise type(error)(f"{error}; what is finished is kept, and --resume goes on with it") from error
            except InputError:
                if not resume:  # there is nothing to go on with
                    journal.remove()
                raise
            journal.remove()
        return self._told(len(inputs))

    def _old(self) -> list[Stretch]:
        """The casts of the existing archive, in stretches."""
        with open_archive(self.output) as archive:
            self.attributes = {**archive.about(), **self.attributes}
            found, first = [], 0
            while first < len(archive):
                reach = int(np.searchsorted(archive.starts, archive.starts[first] + _STRETCH_LEVELS, side="right")) - 1
                last = max(first + 1, reach)
                found.append(Stretch(str(self.output), first, last))
                first = last
        return found

    def _complete(self, plan: Mapping[str, Any]) -> bool:
        """Whether the build that is to be resumed had come to its end, but for the journal it left."""
        if not self.output.exists():
            return False
        try:
            with open_archive(self.output) as archive:
                digest = archive.attribute("plan_checksum")
        except ValueError:
            return False
        earlier = planned(self.output)
        if not digest or digest not in (earlier, digest_of(plan)):
            return False
        if earlier is not None:
            with opened_journal(self.output, plan, resume=False) as journal:
                journal.remove()
        return True

    def _jobs(self, journal: Journal, blocks: Blocks, old: Sequence[Stretch]) -> list[Job]:
        jobs = [Job(journal.parts(number), self.settings, stretch=stretch) for number, stretch in enumerate(old)]
        return jobs + [
            Job(journal.parts(number), self.settings, files=block) for number, block in enumerate(blocks, len(jobs))
        ]

    def _parts(self, journal: Journal, blocks: Blocks, old: Sequence[Stretch], size: int) -> list[PartFile]:
        """All parts, finished."""
        jobs = self._jobs(journal, blocks, old)
        casts, read = 0, 0
        for job, done in self._results(jobs):
            casts += done.casts
            read += sum(entry.size for entry in job.files)
            self.progress(Progress("casts", read / max(size, 1), casts))
        return [PartFile(path) for job in jobs for path in finished_parts(job)]

    def _results(self, jobs: Sequence[Job]) -> Iterator[tuple[Job, Done]]:
        if self.number == 0 and self.scheduler is None:
            yield from ((job, work(job)) for job in jobs)
            return
        # not more workers than jobs: each takes its time to start
        number = None if self.number is None else max(1, min(self.number, len(jobs)))
        with pool_of(number, scheduler=self.scheduler, make_ready=make_ready) as (executor, count):
            yield from in_order(work, jobs, executor=executor, number=count)

    def _assemble(self, journal: Journal, parts: Sequence[PartFile], digest: str, files: int) -> None:
        left_out = [row for part in parts for row in part.outline.left_out]
        casts = sum(part.outline.casts for part in parts)
        accounted = sum(part.outline.files for part in parts)
        if accounted != files:
            raise OutputError(f"{self.output}: {accounted} of {files} input files are accounted for; a fault of ours")
        if casts == 0:
            which, _, why = left_out[0]
            raise InputError(
                f"{self.output}: nothing to write: none of {files} files gave a cast; the first, {which}: {why}"
            )
        found = find_duplicates(parts)
        ids = _unique([name for part in parts if part.outline.casts for name in part.cast("cast_id").tolist()])
        attributes = {
            "title": "Casts with their sound speed",
            "summary": "Casts of temperature, salinity and sound speed, with flags and the files they were read from",
            **self.attributes,
            "plan_checksum": digest,
        }
        further = {"cast_id": text_column(ids), "duplicate_of": found.repeats, "near_duplicate_of": found.near}
        about = About(further, attributes)
        told = 0

        def progress(more: int) -> None:
            nonlocal told
            told += more
            self.progress(Progress("archive", told / casts, told))

        try:
            write_archive(journal.archive, parts, about, compression=self.compression, progress=progress)
        except OutputError:
            journal.archive.unlink(missing_ok=True)  # half of it is of no use, and the disk may be full
            raise
        check_output(self.output, replace=self.replace or self.append)
        try:
            journal.archive.replace(self.output)
        except OSError as error:
            raise OutputError(f"{self.output}: can't be written: {error.strerror}") from error

    def _told(self, files: int) -> Built:
        """What the finished archive says of itself."""
        with open_archive(self.output) as archive:
            return Built(
                path=self.output,
                casts=len(archive),
                levels=int(archive.starts[-1]),
                files=files,
                left_out=tuple(archive.left_out()),
                duplicates=archive.pairs("duplicate_of"),
                near=archive.pairs("near_duplicate_of"),
                without_speed=int(np.isnan(archive.column("harmonic_mean_speed")).sum()),
                seconds=time.monotonic() - self.began,
            )


def _unique(names: Sequence[str]) -> list[str]:
    """Names that differ: what was there already gets a number behind it."""
    taken: set[str] = set()
    given = set(names)
    counts: dict[str, int] = {}
    found = []
    for name in names:
        own = name
        while own in taken or (own != name and own in given):
            counts[name] = counts.get(name, 1) + 1
            own = f"{name} ({counts[name]})"
        taken.add(own)
        found.append(own)
    return found
