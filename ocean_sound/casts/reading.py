"""Reading casts: the format is told from the content, never from the name of the file."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from ..errors import CastFileError, InputError
from .block import CastBlock
from .exchange import read_exchange
from .origin import HEAD_SIZE, Origin
from .plain_csv import read_plain
from .settings import Settings, settings_for
from .zipped import read_zip

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping
    from os import PathLike
    from typing import Any

    from .cast import Cast
    from .cf_profile import CfCasts

LARGEST_TEXT = 2**27
"""Bytes of text in one file: some two million levels."""
_CLASSIC = (b"CDF\x01", b"CDF\x02", b"CDF\x05")
HDF5 = b"\x89HDF\r\n\x1a\n"
_ZIP = (b"PK\x03\x04", b"PK\x05\x06")
_UTF16 = (b"\xff\xfe", b"\xfe\xff")
_PACKED = {b"\x1f\x8b": "gzip", b"BZh": "bzip2", b"\xfd7zXZ": "xz"}
_IN_TEXT = b"\t\n\r\x0b\x0c\x1a\x1b" + bytes(range(32, 256))
_KNOWN = "plain CSV, WHP-Exchange, Argo, CF and World Ocean Database netCDF, and a ZIP of any"


def read_blocks(
    path: str | PathLike[str],
    *,
    mapping: Mapping[str, str] | None = None,
    settings: Mapping[str, Any] | None = None,
) -> Iterator[CastBlock]:
    """Read the casts of a file, block by block.

    Parameters
    ----------
    path : path-like
        Plain CSV, WHP-Exchange CTD or bottle, Argo profile netCDF, CF netCDF in any layout of profiles (the World
        Ocean Database's among them), or a ZIP file of any. The format is told from the content.
    mapping : mapping of str to str, optional
        For plain CSV and CF netCDF: by our name (``depth``, ``height``, ``pressure``, ``sea_pressure``,
        ``absolute_pressure``, ``temperature``, ``salinity``, ``absolute_salinity``, ``conductivity``,
        ``specific_conductance``, ``sound_speed``, ``latitude``, ``longitude``, ``time``, ``date``, ``id``) the column
        or variable that holds it. A unit in square brackets behind its name overrides the file's:
        ``{"depth": "Z [ft]"}``. Flags by ``temperature_flag`` and the like (``flag`` for whole levels), with their
        code in brackets: ``argo``, ``qartod``, ``seadatanet``, ``whp-ctd``, ``whp-bottle`` or ``ignored``.
    settings : mapping of str to object, optional
        For plain CSV and CF netCDF: what else the file does not say, by the fields of `ocean_sound.casts.Settings`,
        such as ``{"in_air_pressure": 0.3}``. The same fields are read from a TOML file beside it, whose name is that
        of the file with ``.toml`` behind it (``cast.csv.toml``); those given here go before.

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
        A name in `mapping` that is not ours, a column that is not in the file, a setting that is unknown or
        impossible, or either for a file that names its variables itself.
    """
    return read_file(path, settings_for(path, mapping, settings))


def read_file(path: str | PathLike[str], settings: Settings, known: bytes = b"") -> Iterator[CastBlock]:
    """The same with settings and, where it was read already, content that are known; for files by the thousand."""
    path = Path(path)
    where = str(path)
    if path.is_dir():
        raise CastFileError(f"{where}: is a folder; name a file in it")
    if not path.exists():
        raise CastFileError(f"{where}: no such file; check the name")
    origin = Origin(where, path.name, path.stem, path=path, known=known)
    head = _checked_head(origin)
    return _read(origin, head, settings)


def read_casts(
    path: str | PathLike[str],
    *,
    mapping: Mapping[str, str] | None = None,
    settings: Mapping[str, Any] | None = None,
) -> Iterator[Cast]:
    r"""Read the casts of a file, one by one.

    Parameters
    ----------
    path, mapping, settings
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
    blocks = read_blocks(path, mapping=mapping, settings=settings)  # here, so that a missing file is told at once
    return (cast for block in blocks for cast in block)


def _checked_head(origin: Origin) -> bytes:
    head = origin.head()
    if not head.strip():
        raise CastFileError(f"{origin.where}: the file is empty")
    return head


def _read(origin: Origin, head: bytes, settings: Settings) -> Iterator[CastBlock]:
    """One origin, by its content; members of a ZIP file come back here."""
    if head.startswith(_ZIP):
        yield from read_zip(origin, lambda member: _read(member, _checked_head(member), settings))
        return
    if head.startswith((*_CLASSIC, HDF5)):
        yield _read_netcdf(origin, settings)
        return
    _refuse_binary(origin, head)
    if origin.size() > LARGEST_TEXT:
        raise CastFileError(
            f"{origin.where}: {origin.size()} bytes of text are more than one cast can be; "
            f"at most {LARGEST_TEXT} are read"
        )
    if _is_exchange(head):
        _refuse_settings(origin, settings)
        yield CastBlock.from_casts(read_exchange(origin.read(), origin.where, source=origin.source))
        return
    yield read_plain(origin.read(), origin.where, source=origin.source, name=origin.name, settings=settings)


def is_plain(data: bytes) -> bool:
    """Whether bytes are to be read as plain CSV, of ASCII at its head."""
    head = data[:HEAD_SIZE]
    return not (
        not head.strip()
        or head.startswith(_ZIP + _CLASSIC + (HDF5,) + _UTF16 + tuple(_PACKED))
        or head.translate(None, _IN_TEXT)
        or _is_exchange(head)
    )


def _is_exchange(head: bytes) -> bool:
    return head.lstrip(b"\xef\xbb\xbf \t\r\n").startswith((b"CTD,", b"BOTTLE,"))


def _read_netcdf(origin: Origin, settings: Settings) -> CastBlock:
    found = find_in_netcdf(origin, settings, to_gather=False)
    return found if isinstance(found, CastBlock) else found.block(settings)


def find_in_netcdf(origin: Origin, settings: Settings, *, to_gather: bool) -> CastBlock | CfCasts:
    """The casts of a netCDF file; `to_gather` leaves a plain one of a CF file as it was found in it."""
    from .argo import is_argo, other_argo, read_argo
    from .cf_profile import find_cf
    from .netcdf import opened

    with opened(origin) as store:
        if is_argo(store):
            _refuse_settings(origin, settings)
            return read_argo(store, origin)
        kind = other_argo(store)
        if kind is not None:
            raise CastFileError(f"{origin.where}: is a file of {kind!r}, which holds no profiles")
        found = find_cf(store, origin, settings)
        return found if to_gather and found.plain else found.block(settings)


def _refuse_settings(origin: Origin, settings: Settings) -> None:
    if settings:
        what = settings.source or ("--map" if settings.columns else "a setting")
        raise InputError(
            f"{origin.where}: {what} is for plain CSV and CF netCDF; this file says itself what its variables are"
        )


def _halves(head: bytes) -> Iterator[tuple[bytes, bytes]]:
    yield head[::2], head[1::2]
    yield head[1::2], head[::2]


def _refuse_binary(origin: Origin, head: bytes) -> None:
    for magic, name in _PACKED.items():
        if head.startswith(magic):
            raise CastFileError(f"{origin.where}: is packed with {name}; unpack it first")
    if b"\0" in head and any(half.strip(b"\0") and not rest.strip(b"\0") for half, rest in _halves(head)):
        raise CastFileError(f"{origin.where}: looks like UTF-16 without a byte order mark; save it as UTF-8")
    if head.translate(None, _IN_TEXT) and not head.startswith(_UTF16):
        raise CastFileError(f"{origin.where}: is neither text nor a format that is known; casts are read from {_KNOWN}")
