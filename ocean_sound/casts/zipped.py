"""ZIP files of casts: each member is read as the file it is. A bomb is refused before it is opened."""

from __future__ import annotations

import lzma
import struct
import zipfile
import zlib
from pathlib import PurePosixPath
from typing import TYPE_CHECKING

from ..errors import CastFileError
from .block import CastBlock
from .origin import Origin
from .store import one_line

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from pathlib import Path

    from .cast import Cast

LARGEST_TOTAL = 2**30
"""Bytes that the members of a ZIP file may unpack to, all together."""
LARGEST_RATIO = 200
"""How many times its packed size a member may unpack to (text packs to a tenth, rarely to a fiftieth)..."""
SMALL = 2**20
"""... if it is larger than this."""
MOST_MEMBERS = 100_000
_BLOCK_SIZE = 500
# What the zipfile module raises where a file is damaged, locked, packed by another method, or wants absurd memory.
_CANT_UNPACK = (
    zipfile.BadZipFile,
    zlib.error,
    lzma.LZMAError,
    struct.error,
    OSError,
    EOFError,
    RuntimeError,
    ValueError,
    MemoryError,
)


def read_zip(origin: Origin, read_member: Callable[[Origin], Iterator[CastBlock]]) -> Iterator[CastBlock]:
    """Read the casts of all members.

    Parameters
    ----------
    origin : Origin
        The ZIP file.
    read_member : callable
        Reads one member, whatever its format.

    Yields
    ------
    CastBlock
        Of some hundreds of casts. Members that hold no cast are named in the last block's `left_out`.

    Raises
    ------
    CastFileError
        Not a ZIP file, one that unpacks to an absurd size, or one without a single cast.
    """
    if origin.path is None:
        raise CastFileError(f"{origin.where}: a ZIP file inside a ZIP file is not read; unpack it first")
    casts: list[Cast] = []
    left_out: list[tuple[str, str]] = []
    with _opened(origin.path, origin.where) as archive:
        members = [member for member in archive.infolist() if not member.is_dir()]
        _refuse_bombs(members, origin.where)
        for member in members:
            if len(casts) > _BLOCK_SIZE:  # one is kept back, for the last block to carry what was left out
                yield CastBlock.from_casts(casts[:-1])
                casts = casts[-1:]
            where = f"{origin.where}: {one_line(member.filename)}"
            try:
                data = archive.read(member)
            except _CANT_UNPACK as error:
                left_out.append((where, f"can't be unpacked: {one_line(str(error)) or type(error).__name__}"))
                continue
            source = f"{origin.source}/{one_line(member.filename)}"
            try:
                for block in read_member(Origin(where, source, PurePosixPath(member.filename).stem, data=data)):
                    casts += block
                    left_out += block.left_out
            except CastFileError as error:
                left_out.append((where, str(error).removeprefix(f"{where}: ")))
    if not casts:
        if not left_out:
            raise CastFileError(f"{origin.where}: the ZIP file is empty")
        first, why = left_out[0]
        raise CastFileError(f"{origin.where}: none of its {len(left_out)} members is a cast; the first, {first}: {why}")
    yield CastBlock.from_casts(casts, left_out=left_out)


def _opened(path: Path, where: str) -> zipfile.ZipFile:
    try:
        return zipfile.ZipFile(path)
    except _CANT_UNPACK as error:
        raise CastFileError(
            f"{where}: can't be opened as ZIP, it is cut short or damaged ({one_line(str(error))}); fetch it again"
        ) from error


def _refuse_bombs(members: list[zipfile.ZipInfo], where: str) -> None:
    total = sum(member.file_size for member in members)
    if total > LARGEST_TOTAL or len(members) > MOST_MEMBERS:
        raise CastFileError(
            f"{where}: its {len(members)} members would unpack to {total / 2**20:.0f} MB; at most "
            f"{LARGEST_TOTAL / 2**20:.0f} MB in {MOST_MEMBERS} members are read: unpack it and read the files"
        )
    for member in members:
        if member.file_size > SMALL and member.file_size > LARGEST_RATIO * max(member.compress_size, 1):
            raise CastFileError(
                f"{where}: member {one_line(member.filename)} would unpack to {member.file_size} bytes from "
                f"{member.compress_size}, more than {LARGEST_RATIO} times its size: no cast packs so well; refused"
            )
