"""Writing files whole or not at all.

Everything is written under a temporary name in the folder of its goal and then renamed, so that a reader never sees
half a file and a failure leaves what was there. An existing output is replaced only when that was asked for.
"""

from __future__ import annotations

import hashlib
import secrets
import threading
from contextlib import contextmanager
from datetime import UTC, datetime
from importlib import metadata
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError, OutputError
from .cf import header

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping
    from os import PathLike

    import xarray as xr
    from numpy.typing import ArrayLike, NDArray

HDF5_LOCK = threading.RLock()
"""Held around every call into netCDF and HDF5: two threads inside those libraries crash the process."""

CONVENTIONS = "CF-1.11 ACDD-1.3"
_EPOCH = np.datetime64("1970-01-01", "ns")
_TIME_ATTRIBUTES = {"units": "seconds since 1970-01-01T00:00:00Z", "calendar": "standard"}


@contextmanager
def replacing(path: str | PathLike[str], replace: bool = False) -> Iterator[Path]:  # noqa: FBT001, FBT002
    """A temporary path to write to, which takes the place of `path` if the block ends well and vanishes if not.

    Parameters
    ----------
    path : path-like
        The output wanted. Its folder must exist.
    replace : bool
        Whether an existing file may be replaced.

    Yields
    ------
    pathlib.Path
        A name that does not exist yet, in the same folder and with the same ending.

    Raises
    ------
    OutputError
        The output exists and may not be replaced, is a folder, its folder is missing, or the disk refuses.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     with replacing(Path(folder) / "note.txt") as temporary:
    ...         _ = temporary.write_text("done")
    ...     (Path(folder) / "note.txt").read_text()
    'done'
    """
    goal = Path(path)
    check_output(goal, replace=replace)
    temporary = goal.with_name(f".{goal.stem}-{secrets.token_hex(4)}{goal.suffix}")
    try:
        yield temporary
        check_output(goal, replace=replace)  # it may have come into being while we wrote
        temporary.replace(goal)
    except OutputError:
        raise
    except OSError as error:
        raise OutputError(f"{goal}: can't be written: {error.strerror or error}") from error
    finally:
        temporary.unlink(missing_ok=True)


def check_output(path: str | PathLike[str], *, replace: bool = False) -> None:
    """Refuse an output that could not be written, before any work is done for it.

    Parameters
    ----------
    path : path-like
        The output wanted.
    replace : bool
        Whether an existing file may be replaced.

    Raises
    ------
    OutputError
        The output exists and may not be replaced, is a folder, or its folder is missing.
    """
    goal = Path(path)
    if not goal.name:
        raise OutputError(f"{str(goal)!r} names no file to write")
    if goal.is_dir():
        raise OutputError(f"{goal}: is a folder; name a file in it")
    if not goal.parent.is_dir():
        raise OutputError(f"{goal}: the folder {goal.parent} does not exist; make it first")
    if goal.exists() and not replace:
        raise OutputError(f"{goal}: exists already; give another name, or --replace to write over it")


def write_text(path: str | PathLike[str], text: str, *, replace: bool = False) -> None:
    """Write a text file (UTF-8, line ends as given), whole or not at all.

    Parameters
    ----------
    path : path-like
        The output.
    text : str
        Its content.
    replace : bool
        Whether an existing file may be replaced.

    Raises
    ------
    OutputError
        As for `replacing`.
    """
    with replacing(path, replace) as temporary:
        temporary.write_text(text, encoding="utf-8", newline="")


def write_csv(
    path: str | PathLike[str],
    columns: Mapping[str, ArrayLike],
    *,
    replace: bool = False,
    preamble: Mapping[str, object] | None = None,
) -> None:
    """Write columns as comma-separated text that reads back bit for bit.

    Parameters
    ----------
    path : path-like
        The output.
    columns : mapping of str to array_like, each of shape (n,)
        Numbers, text, booleans or datetime64. The head of a column is its name, with the unit in square brackets
        where the name is one of the package's own (``depth [m]``). Floating-point numbers are written with as many
        digits as tell them from their neighbours; NaN becomes an empty cell, NaT too.
    replace : bool
        Whether an existing file may be replaced.
    preamble : mapping, optional
        Written above the table as comments, ``# key: value``; None and NaN values are left out.

    Raises
    ------
    InputError
        The columns differ in length, or are not one-dimensional.
    OutputError
        As for `replacing`.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     goal = Path(folder) / "profile.csv"
    ...     write_csv(goal, {"depth": [0.0, 10.0], "sound_speed": [1500.25, 1499.5]}, preamble={"cast_id": "A1"})
    ...     print(goal.read_text())
    # cast_id: A1
    depth [m],sound_speed [m/s]
    0.0,1500.25
    10.0,1499.5
    """
    write_csv_blocks(path, [columns], replace=replace, preamble=preamble)


def write_csv_blocks(
    path: str | PathLike[str],
    blocks: Iterable[Mapping[str, ArrayLike]],
    *,
    replace: bool = False,
    preamble: Mapping[str, object] | None = None,
    units: bool = True,
) -> None:
    """Write columns that come block by block as one table, whole or not at all, without holding it in memory.

    Parameters
    ----------
    path, replace, preamble
        As for `write_csv`.
    blocks : iterable of mapping of str to array_like, each of shape (n,)
        The same names in each.
    units : bool
        Whether a column named like one of the package's own has its unit put behind the name.

    Raises
    ------
    InputError
        Columns that are not one-dimensional and equally long, or whose names change.
    OutputError
        As for `replacing`.
    """
    names: list[str] | None = None
    with replacing(path, replace) as temporary, temporary.open("w", encoding="utf-8", newline="") as file:
        file.writelines(
            f"# {key}: {_one_line(value)}\n" for key, value in (preamble or {}).items() if not _is_blank(value)
        )
        for block in blocks:
            arrays = _checked_columns(block)
            if names is None:
                names = list(arrays)
                file.write(",".join(_quoted(header(name) if units else name) for name in names) + "\n")
            if list(arrays) != names:
                raise InputError(f"the columns change from {', '.join(names)} to {', '.join(arrays)}")
            cells = [_cells(array, blank="nan" if len(arrays) == 1 else "") for array in arrays.values()]
            file.writelines(",".join(row) + "\n" for row in zip(*cells, strict=True))


def _checked_columns(columns: Mapping[str, ArrayLike]) -> dict[str, np.ndarray[Any, Any]]:
    arrays = {name: np.asarray(values) for name, values in columns.items()}
    shapes = {name: array.shape for name, array in arrays.items()}
    if not arrays or len(set(shapes.values())) != 1 or any(len(shape) != 1 for shape in shapes.values()):
        found = ", ".join(f"{name} {shape}" for name, shape in shapes.items())
        raise InputError(f"columns of a CSV file must be one-dimensional and equally long; found {found or 'none'}")
    return arrays


def _is_blank(value: object) -> bool:
    return value is None or str(value) in {"", "nan", "NaT"}


def _one_line(value: object) -> str:
    return " ".join(str(value).split())


def _quoted(text: str) -> str:
    return '"' + text.replace('"', '""') + '"' if any(mark in text for mark in ',"\n\r') else text


def _cells(array: np.ndarray[Any, Any], *, blank: str) -> list[str]:
    """One text per value. A NaN in a lone column needs a word, or its line would be empty and so no line at all."""
    if array.dtype.kind == "f":
        texts = map(repr, array.astype(np.float64).tolist())
        return [blank if text == "nan" else text for text in texts]
    if array.dtype.kind == "M":
        return ["" if text == "NaT" else text + "Z" for text in np.datetime_as_string(array).tolist()]
    if array.dtype.kind in "iub":
        return [str(value) for value in array.tolist()]
    return [_quoted(_one_line(value)) for value in array.tolist()]


def write_dataset(
    dataset: xr.Dataset,
    path: str | PathLike[str],
    *,
    replace: bool = False,
    groups: Mapping[str, xr.Dataset] | None = None,
) -> None:
    """Write a dataset as netCDF-4, whole or not at all, with the global attributes that CF and ACDD ask for.

    Parameters
    ----------
    dataset : xarray.Dataset
        Not changed. ``Conventions``, ``date_created`` and a line of ``history`` with the package's version are added
        to what is written.
    path : path-like
        The output.
    replace : bool
        Whether an existing file may be replaced.
    groups : mapping of str to xarray.Dataset, optional
        Further datasets, each in a group of that name (``xarray.open_dataset(path, group=name)`` opens it).

    Raises
    ------
    OutputError
        As for `replacing`.

    References
    ----------
    CF Conventions 1.11; Attribute Convention for Data Discovery 1.3.
    """
    now = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    line = f"{now} written by ocean_sound {metadata.version('ocean_sound')}"
    earlier = dataset.attrs.get("history")
    written = dataset.assign_attrs(
        Conventions=CONVENTIONS, date_created=now, history=f"{earlier}\n{line}" if earlier else line
    )
    with replacing(path, replace) as temporary, HDF5_LOCK:
        try:
            _write_group(written, temporary, None)
            for group, content in (groups or {}).items():
                _write_group(content, temporary, group)
        except RuntimeError as error:  # how netCDF reports a full disk
            raise OutputError(f"{path}: can't be written as netCDF: {error}") from error


def _write_group(dataset: xr.Dataset, path: Path, group: str | None) -> None:
    times = {name: variable for name, variable in dataset.variables.items() if variable.dtype.kind == "M"}
    written = dataset.assign({name: _in_seconds(variable) for name, variable in times.items()})
    encoding: dict[Any, dict[str, Any]] = {
        name: {"_FillValue": None if name in dataset.dims else np.nan}
        for name, variable in written.variables.items()
        if variable.dtype.kind == "f"
    }
    written.to_netcdf(
        path, mode="w" if group is None else "a", group=group, format="NETCDF4", engine="netcdf4", encoding=encoding
    )


def _in_seconds(variable: xr.Variable) -> tuple[Any, NDArray[np.float64], dict[Any, Any]]:
    """A time as CF stores it: xarray's own encoding of an unknown time stumbles over it."""
    seconds = (variable.values.astype("datetime64[ns]") - _EPOCH) / np.timedelta64(1, "s")
    return variable.dims, seconds, {**variable.attrs, **_TIME_ATTRIBUTES}


def checksum(path: str | PathLike[str]) -> str:
    """SHA-256 of a file, in hexadecimal.

    Parameters
    ----------
    path : path-like
        An existing file.

    Returns
    -------
    str
        64 hexadecimal digits.

    Raises
    ------
    InputError
        The file can't be read.
    """
    try:
        with Path(path).open("rb") as file:
            return hashlib.file_digest(file, "sha256").hexdigest()
    except OSError as error:
        raise InputError(f"{path}: can't be read: {error.strerror or error}") from error
