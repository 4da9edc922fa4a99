"""The journal of a build: a folder of finished parts beside the archive to be, under a lock.

A netCDF file that is being written when its process is killed can't be read afterwards. So nothing is written to the
archive until every part is there; then it is put together in the journal and renamed.
"""

from __future__ import annotations

import hashlib
import json
import os
import shutil
from contextlib import contextmanager, suppress
from typing import TYPE_CHECKING, Any

from ..errors import OutputError
from ..files import write_text

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping
    from pathlib import Path

_PLAN = "plan.json"


class Journal:
    """The finished parts of one build."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    @property
    def archive(self) -> Path:
        """Where the archive is put together."""
        return self.folder / "archive.nc"

    def parts(self, number: int) -> str:
        """How the names of the part files of a job begin."""
        return str(self.folder / f"part-{number:06d}")

    def remove(self) -> None:
        """Throw the journal away; the plan goes last, so that it tells what the rest belongs to until there is none."""
        for path in self.folder.iterdir():
            if path.name != _PLAN:
                path.unlink(missing_ok=True)
        (self.folder / _PLAN).unlink(missing_ok=True)
        with suppress(OSError):
            self.folder.rmdir()


def journal_folder(output: Path) -> Path:
    """Where the journal of an archive lies: beside it, hidden."""
    return output.with_name(f".{output.name}.journal")


def digest_of(plan: Mapping[str, Any]) -> str:
    """SHA-256 of what decides the content of an archive."""
    return hashlib.sha256(json.dumps(plan, sort_keys=True, default=str).encode()).hexdigest()


def planned(output: Path) -> str | None:
    """The digest of the plan that an interrupted build left, if there is one."""
    try:
        digest = json.loads((journal_folder(output) / _PLAN).read_text(encoding="utf-8"))["digest"]
    except (OSError, ValueError, KeyError):
        return None
    return str(digest)


@contextmanager
def opened_journal(output: Path, plan: Mapping[str, Any], *, resume: bool) -> Iterator[Journal]:
    """The journal of a build; the lock of the archive must be held.

    Parameters
    ----------
    output : pathlib.Path
        The archive to be.
    plan : mapping
        The inputs, how they are parted, and the settings: what decides the content.
    resume : bool
        Whether to go on with a journal that an interrupted build left, if there is one; otherwise it is thrown away.

    Raises
    ------
    OutputError
        If the folder can't be made, or `resume` finds a journal of other inputs or settings.
    """
    folder = journal_folder(output)
    digest, earlier = digest_of(plan), planned(output)
    if resume and earlier is not None and earlier != digest:
        raise OutputError(
            f"{output}: the interrupted build had other inputs or settings (files added, removed or changed count); "
            "leave --resume away to begin anew"
        )
    try:
        if not resume or earlier is None:
            if folder.exists():
                shutil.rmtree(folder)
            folder.mkdir()
            write_text(folder / _PLAN, json.dumps({"digest": digest, **plan}, default=str), replace=True)
        for leftover in folder.glob(".*"):  # half-written files of a build that was killed
            leftover.unlink()
    except OSError as error:
        if isinstance(error, OutputError):
            raise
        raise OutputError(f"{folder}: can't be made: {error.strerror or error}") from error
    yield Journal(folder)


@contextmanager
def locked(output: Path) -> Iterator[None]:
    """Hold the lock of an archive; the system lets go of it when its holder is gone, however it went.

    Raises
    ------
    OutputError
        If another process builds the same archive, or the lock can't be made.
    """
    try:
        import fcntl
    except ImportError:  # no such locks on this system: two builds of one archive are then the user's own care
        yield
        return
    path = output.with_name(f".{output.name}.lock")
    try:
        handle = os.open(path, os.O_RDWR | os.O_CREAT, 0o644)
    except OSError as error:
        raise OutputError(f"{path}: can't be made: {error.strerror}") from error
    try:
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
            still_there = os.fstat(handle).st_ino == path.stat().st_ino  # not one that its holder has just removed
        except (BlockingIOError, FileNotFoundError):
            still_there = False
        except OSError:  # a file system without locks
            still_there = True
        if not still_there:
            raise OutputError(f"{output}: is being built by another process; wait for it, or name another")
        try:
            yield
        finally:
            path.unlink(missing_ok=True)
    finally:
        os.close(handle)
