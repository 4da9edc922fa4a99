"""Telling TOML from tables of numbers."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from os import PathLike

_ENOUGH = 65536  # bytes in which the first line that counts is found


def looks_like_toml(path: str | PathLike[str]) -> bool:
    """Whether a file is meant as TOML, by its ending or by its first line: a table or a field of text.

    A file that can't be read as text is not; why it can't is for its reader to say.

    Examples
    --------
    >>> looks_like_toml("plan.toml"), looks_like_toml("no-such-file.csv")
    (True, False)
    """
    path = Path(path)
    if path.suffix.lower() == ".toml":
        return True
    try:
        with path.open("rb") as file:
            text = file.read(_ENOUGH).decode("utf-8")
    except (OSError, UnicodeDecodeError):
        return False
    lines = (line.strip() for line in text.splitlines())
    first = next((line for line in lines if line and not line.startswith("#")), "")
    key, sign, value = first.partition("=")
    quoted = value.strip()[:1] in {'"', "'"}
    return first.startswith("[") or (
        bool(sign) and quoted and all(part.isidentifier() for part in key.strip().split("."))
    )
