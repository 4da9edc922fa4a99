"""A figure into a file, whole or not at all."""

from __future__ import annotations

from contextlib import suppress
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ..errors import InputError
from ..files.writing import replacing

if TYPE_CHECKING:
    from os import PathLike

    from matplotlib.figure import Figure

_DOTS_PER_INCH = 200
# Without the date in them, two pictures of the same result are the same file.
_METADATA: dict[str, dict[str, Any]] = {"png": {}, "svg": {"Date": None}, "pdf": {"CreationDate": None}}


def figure_format(path: str | PathLike[str]) -> str:
    """The format in which a figure of this name is written.

    Parameters
    ----------
    path : path-like
        The name of the picture.

    Returns
    -------
    str
        "png", "svg" or "pdf".

    Raises
    ------
    InputError
        For any other ending.

    Examples
    --------
    >>> figure_format("rays.PDF")
    'pdf'
    """
    ending = Path(path).suffix.lower().removeprefix(".")
    if ending not in _METADATA:
        raise InputError(f"{path}: a figure can't be written as {ending or 'a file without ending'!r}; "
                         "name it .png, .svg or .pdf")  # fmt: skip
    return ending


def check_picture(path: str | PathLike[str], *, replace: bool = False) -> None:
    """Refuse a picture that could not be written, before any work is done for it.

    Parameters
    ----------
    path : path-like
        The file wanted.
    replace : bool
        Whether an existing file may be replaced.

    Raises
    ------
    InputError
        For an ending other than .png, .svg and .pdf.
    OutputError
        If the file exists and may not be replaced, or its folder is missing.

    Examples
    --------
    >>> check_picture("rays.png")
    """
    figure_format(path)
    with suppress(_NothingToWrite), replacing(path, replace):
        raise _NothingToWrite


class _NothingToWrite(Exception):  # noqa: N818
    """Leaves `replacing` after its checks, with nothing written."""


def save_figure(figure: Figure, path: str | PathLike[str], *, replace: bool = False) -> None:
    """Write a figure to a file; its ending names the format.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        The figure.
    path : path-like
        The file, ending in .png, .svg or .pdf.
    replace : bool
        Whether an existing file may be replaced.

    Raises
    ------
    InputError
        For another ending.
    OutputError
        If the file exists and may not be replaced, or can't be written.

    Examples
    --------
    >>> import tempfile
    >>> from matplotlib.figure import Figure
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     save_figure(Figure(figsize=(1, 1)), Path(folder) / "empty.png")
    ...     [path.name for path in Path(folder).iterdir()]
    ['empty.png']
    """
    chosen = figure_format(path)
    with replacing(path, replace) as temporary:
        figure.savefig(temporary, format=chosen, dpi=_DOTS_PER_INCH, metadata=_METADATA[chosen])
