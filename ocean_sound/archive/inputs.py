"""What a build reads: files found under the paths given, in a fixed order, parted into blocks."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path
from stat import S_ISREG
from typing import TYPE_CHECKING

from ..casts.settings import SIDECAR
from ..errors import CastFileError

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Sequence

# A block of files is what one worker reads at a time: hundreds of casts, whether each has a file or shares one.
MOST_FILES, MOST_BYTES = 200, 1 << 25


@dataclass(frozen=True)
class Input:
    """A file to read: its name in the archive, where it lies, its size, when it and settings beside it changed."""

    name: str
    path: str
    size: int
    changed: int
    settings_changed: int = 0


def find_inputs(paths: Sequence[str | os.PathLike[str]], *, apart_from: Iterable[Path] = ()) -> list[Input]:
    """All files under some paths: files as given, folders walked in the order of their names.

    Hidden files and folders are passed over, and links to folders are not followed. A file that is met twice is taken
    once. The settings of a CSV (``cast.csv.toml`` beside ``cast.csv``) belong to it and are no input of their own.

    Parameters
    ----------
    paths : sequence of path-like
        Files and folders.
    apart_from : iterable of pathlib.Path
        Files that are not input, such as the archive itself.

    Returns
    -------
    list of Input
        A file of a folder is named by the folder's own name and its path below it.

    Raises
    ------
    CastFileError
        If a path does not exist, or no file is found.
    """
    avoided = {(status.st_dev, status.st_ino) for status in (path.stat() for path in apart_from if path.exists())}
    found: dict[tuple[int, int] | str, Input] = {}
    for given in map(Path, paths):
        if not given.exists():
            raise CastFileError(f"{given}: no such file or folder; check the name")
        for name, path, settings_changed in _walk(given):
            try:
                status = os.stat(path)  # noqa: PTH116  # thousands of times
            except OSError:  # gone meanwhile, or a dead link: told when it is read
                found.setdefault(path, Input(name, path, 0, 0))
                continue
            which = status.st_dev, status.st_ino
            if which not in avoided and S_ISREG(status.st_mode):
                entry = Input(name, path, status.st_size, status.st_mtime_ns, settings_changed)
                found.setdefault(which, entry)
    if not found:
        raise CastFileError(f"{', '.join(map(str, paths))}: no file to read there")
    return list(found.values())


def _walk(given: Path) -> Iterator[tuple[str, str, int]]:
    """Name in the archive, path, and time of change of the settings beside it."""
    if given.is_file():
        settings = Path(f"{given}{SIDECAR}")
        yield given.name, str(given), settings.stat().st_mtime_ns if settings.is_file() else 0
        return
    top = given.resolve().name
    for folder, folders, files in os.walk(given):
        folders[:] = sorted(name for name in folders if not name.startswith("."))
        below = os.path.relpath(folder, given)
        shown = top if below == os.curdir else f"{top}/{Path(below).as_posix()}"
        present = set(files)
        for name in sorted(files):
            if name.startswith(".") or (name.endswith(SIDECAR) and name.removesuffix(SIDECAR) in present):
                continue
            path = os.path.join(folder, name)  # noqa: PTH118
            beside = Path(path + SIDECAR).stat().st_mtime_ns if name + SIDECAR in present else 0
            yield f"{shown}/{name}", path, beside


def in_blocks(inputs: Sequence[Input]) -> list[tuple[Input, ...]]:
    """Part the inputs into blocks, in their order; which file comes in which block depends on nothing else."""
    blocks: list[list[Input]] = []
    size = 0
    for entry in inputs:
        if not blocks or len(blocks[-1]) >= MOST_FILES or size + entry.size > MOST_BYTES:
            blocks.append([])
            size = 0
        blocks[-1].append(entry)
        size += entry.size
    return [tuple(block) for block in blocks]
