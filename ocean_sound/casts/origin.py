"""Where the bytes of casts come from: a file, or a member of a ZIP file."""

from __future__ import annotations

from dataclasses import dataclass
from io import BytesIO
from typing import TYPE_CHECKING

from ..errors import CastFileError

if TYPE_CHECKING:
    from pathlib import Path
    from typing import BinaryIO

HEAD_SIZE = 4096


@dataclass(frozen=True)
class Origin:
    """One source of bytes.

    Parameters
    ----------
    where : str
        As a message names it.
    source : str
        As a cast keeps it: the file's name, and the member's behind a slash.
    name : str
        The name without folder and ending, for casts that bring no id.
    path : pathlib.Path or None
        The file; None where the bytes are at hand.
    data : bytes
        The bytes, where there is no file.
    known : bytes
        What is in the file, where it was read already.
    """

    where: str
    source: str
    name: str
    path: Path | None = None
    data: bytes = b""
    known: bytes = b""

    def open(self) -> BinaryIO:
        """The bytes as a file, to be closed by the caller."""
        if self.path is None:
            return BytesIO(self.data)
        try:
            return self.path.open("rb")
        except OSError as error:
            raise CastFileError(f"{self.where}: can't be read: {error.strerror or error}") from error

    def read(self, size: int = -1) -> bytes:
        """All bytes, or the first of them."""
        at_hand = self.data if self.path is None else self.known
        if at_hand:
            return at_hand if size < 0 else at_hand[:size]
        with self.open() as file:
            return file.read(size)

    def head(self) -> bytes:
        """The first bytes, enough to tell the format."""
        return self.read(HEAD_SIZE)

    def size(self) -> int:
        """Number of bytes."""
        at_hand = self.data if self.path is None else self.known
        return len(at_hand) if self.path is None or at_hand else self.path.stat().st_size
