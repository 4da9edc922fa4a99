"""Take casts out of an archive: as a smaller archive, or as one table for programs that read nothing else."""

from __future__ import annotations

import tempfile
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..files import check_output, replacing, write_csv_blocks
from .layout import About, write_archive
from .parts import Part, PartFile

if TYPE_CHECKING:
    from collections.abc import Iterator
    from os import PathLike

    from numpy.typing import NDArray

    from .asking import Archive

# Casts handled at once.
_BATCH = 200
_COMPRESSION = 1


def extract(
    archive: Archive, positions: NDArray[np.int64], output: str | PathLike[str], *, replace: bool = False
) -> int:
    """Write some casts of an archive to a file of their own.

    Parameters
    ----------
    archive : Archive
        An open archive.
    positions : array of int
        Which casts, from `Archive.select`.
    output : path-like
        ``.nc`` for an archive of the same layout, ``.csv`` for one table with the name, time and position of the cast
        on every line.
    replace : bool
        Whether an existing file may be replaced.

    Returns
    -------
    int
        How many levels were written.

    Raises
    ------
    InputError
        If no cast is chosen, or the ending is another.
    OutputError
        If the output exists and may not be replaced, is the archive itself, or can't be written.
    """
    output = Path(output)
    ending = output.suffix.lower()
    if ending not in {".csv", ".nc"}:
        raise InputError(f"{output}: the ending must be .nc or .csv")
    check_output(output, replace=replace)
    if output.exists() and output.samefile(archive.path):
        raise InputError(f"{output}: is the archive itself; name another file")
    if len(positions) == 0:
        raise InputError(f"{archive.path}: no cast is chosen; nothing to write")
    parts = _parts(archive, positions)
    if ending == ".csv":
        write_csv_blocks(output, map(_table, parts), replace=replace)
    else:
        _as_archive(archive, positions, output, replace=replace)
    return int(archive.row_size[positions].sum())


def _parts(archive: Archive, positions: NDArray[np.int64]) -> Iterator[Part]:
    """The chosen casts in batches."""
    columns = archive.part(0, 0).cast
    known = {name: archive.column(name) for name in columns}
    for first in range(0, len(positions), _BATCH):
        batch = positions[first : first + _BATCH]
        levels = [archive.columns(int(position)) for position in batch]
        obs = {name: np.concatenate([columns[name] for columns in levels]) for name in levels[0]}
        yield Part({name: values[batch] for name, values in known.items()}, obs)


def _table(part: Part) -> dict[str, NDArray[Any]]:
    """One line for each level."""
    row_size = part.cast["row_size"]
    names = ("cast_id", "time", "latitude", "longitude")
    return {name: np.repeat(part.cast[name], row_size) for name in names} | dict(part.obs)


def _as_archive(archive: Archive, positions: NDArray[np.int64], output: Path, *, replace: bool) -> None:
    place = np.full(len(archive), -1, dtype=np.int32)
    place[positions] = np.arange(len(positions), dtype=np.int32)
    further = {}
    for name in ("duplicate_of", "near_duplicate_of"):
        earlier = archive.column(name)[positions]
        further[name] = np.where(earlier >= 0, place[earlier], -1).astype(np.int32)
    about = About(further, archive.about(), f"{len(positions)} casts taken out of {archive.path.name}")
    with replacing(output, replace) as temporary, tempfile.TemporaryDirectory(prefix="ocean-sound-") as folder:
        parts = []
        for number, part in enumerate(_parts(archive, positions)):
            path = Path(folder) / f"{number:06d}.part"
            part.write(path)
            parts.append(PartFile(path))
        write_archive(temporary, parts, about, compression=_COMPRESSION)
