"""Reading casts: the format is told from the content, never from the name of the file."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from ..errors import CastFileError, InputError
from .block import CastBlock
from .exchange import read_exchange
from .names import MAPPABLE
from .origin import Origin
from .plain_csv import read_plain
from .zipped import read_zip

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping
    from os import PathLike

    from .cast import Cast

LARGEST_TEXT = 2**27
"""Bytes of text in one file: some two million levels."""
_CLASSIC = (b"CDF\x01", b"CDF\x02", b"CDF\x05")
_HDF5 = b"\x89HDF\r\n\x1a\n"
_ZIP = (b"PK\x03\x04", b"PK\x05\x06")
_UTF16 = (b"\xff\xfe", b"\xfe\xff")
_PACKED = {b"\x1f\x8b": "gzip", b"BZh": "bzip2", b"\xfd7zXZ": "xz"}
_IN_TEXT = b"\t\n\r\x0b\x0c\x1a\x1b" + bytes(range(32, 256))
_KNOWN = "plain CSV, WHP-Exchange (or a ZIP of either), Argo netCDF, CF netCDF of one cast"


def read_blocks(path: str | PathLike[str], *, mapping: Mapping[str, str] | None = None) -> Iterator[CastBlock]:
    """Read the casts of a file, block by block.

    Parameters
    ----------
    path : path-like
        Plain CSV, WHP-Exchange CTD or bottle (or a ZIP file of any), Argo profile netCDF, or CF netCDF of one cast or
        profile as the package writes it. The format is told from the content.
    mapping : mapping of str to str, optional
        For plain CSV: by our name (``depth``, ``height``, ``pressure``, ``sea_pressure``, ``absolute_pressure``,
        ``temperature``, ``salinity``, ``conductivity``, ``sound_speed``, ``latitude``, ``longitude``, ``time``,
        ``date``, ``id``) the column that holds it. A unit in square brackets behind the column's name overrides the
        file's: ``{"depth": "Z [ft]"}``.

    Returns
    -------
    iterator of CastBlock
        Each with what was left out of it, and why, in `CastBlock.left_out`.

    Raises
    ------
    CastFileError
        At once, or while iterating: the file is missing, a folder, empty, of no known format, or broken at the place
        named.
    InputError
        A name in `mapping` that is not ours, a column that is not in the file, or a mapping for a file that names its
        variables itself.
    """
    mapping = dict(mapping or {})
    unknown = [name for name in mapping if name not in MAPPABLE]
    if unknown:
        raise InputError(f"--map {unknown[0]}=...: nothing is named {unknown[0]!r}; use one of {', '.join(MAPPABLE)}")
    path = Path(path)
    where = str(path)
    if path.is_dir():
        raise CastFileError(f"{where}: is a folder; name a file in it")
    if not path.exists():
        raise CastFileError(f"{where}: no such file; check the name")
    origin = Origin(where, path.name, path.stem, path=path)
    head = _checked_head(origin)
    return _read(origin, head, mapping)


def read_casts(path: str | PathLike[str], *, mapping: Mapping[str, str] | None = None) -> Iterator[Cast]:
    r"""Read the casts of a file, one by one.

    Parameters
    ----------
    path, mapping
        As for `read_blocks`.

    Returns
    -------
    iterator of Cast

    Raises
    ------
    CastFileError, InputError
        As for `read_blocks`.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     file = Path(folder) / "harbour.csv"
    ...     _ = file.write_text("depth [m],temp [degC],sal\n0,14.0,31.5\n10,11.0,33.0\n")
    ...     cast = next(read_casts(file))
    >>> cast
    <Cast harbour: 2 levels, depth 0 to 10 m, temperature, salinity; position unknown, time unknown>
    >>> cast.notes
    ('salinity has no unit; taken as PSS-78',)
    """
    blocks = read_blocks(path, mapping=mapping)  # here, so that a missing file is told at once
    return (cast for block in blocks for cast in block)


def _checked_head(origin: Origin) -> bytes:
    head = origin.head()
    if not head.strip():
        raise CastFileError(f"{origin.where}: the file is empty")
    return head


def _read(origin: Origin, head: bytes, mapping: Mapping[str, str]) -> Iterator[CastBlock]:
    """One origin, by its content; members of a ZIP file come back here."""
    if head.startswith(_ZIP):
        yield from read_zip(origin, lambda member: _read(member, _checked_head(member), mapping))
        return
    if head.startswith((*_CLASSIC, _HDF5)):
        _refuse_mapping(origin, mapping)
        yield _read_netcdf(origin)
        return
    _refuse_binary(origin, head)
    if origin.size() > LARGEST_TEXT:
        raise CastFileError(
            f"{origin.where}: {origin.size()} bytes of text are more than one cast can be; "
            f"at most {LARGEST_TEXT} are read"
        )
    if head.lstrip(b"\xef\xbb\xbf \t\r\n").startswith((b"CTD,", b"BOTTLE,")):
        _refuse_mapping(origin, mapping)
        yield CastBlock.from_casts(read_exchange(origin.read(), origin.where, source=origin.source))
        return
    cast = read_plain(origin.read(), origin.where, source=origin.source, name=origin.name, mapping=mapping)
    yield CastBlock.from_casts([cast])


def _read_netcdf(origin: Origin) -> CastBlock:
    from .argo import is_argo, read_argo
    from .cf_profile import read_cf
    from .netcdf import opened

    with opened(origin) as dataset:
        if is_argo(dataset):
            return read_argo(dataset, origin)
        return CastBlock.from_casts([read_cf(dataset, origin)])


def _refuse_mapping(origin: Origin, mapping: Mapping[str, str]) -> None:
    if mapping:
        raise InputError(f"{origin.where}: --map is for plain CSV; this file says itself what its variables are")


def _refuse_binary(origin: Origin, head: bytes) -> None:
    for magic, name in _PACKED.items():
        if head.startswith(magic):
            raise CastFileError(f"{origin.where}: is packed with {name}; unpack it first")
    if head.translate(None, _IN_TEXT) and not head.startswith(_UTF16):
        raise CastFileError(f"{origin.where}: is neither text nor a format that is known; casts are read from {_KNOWN}")
