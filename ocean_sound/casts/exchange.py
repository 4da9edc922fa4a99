"""WHP-Exchange CTD and bottle files: the open comma-separated format of the repeat-hydrography community.

Source: J. H. Swift and S. C. Diggs, 'Description of WHP-Exchange format for CTD/hydrographic data'; the flags are in
`flag_codes`.
"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np

from ..errors import CastFileError, InputError
from .building import NoUsableLevelError, build_cast
from .cast import FAIL, MISSING, NO_TIME, NOT_EVALUATED, SUSPECT, VERTICAL, Cast
from .flag_codes import WOCE_CTD, WOCE_SAMPLE
from .levels import ABOVE_SURFACE
from .plain_csv import decode
from .table import Table, split_cells, without_fills
from .units import to_ours
from .where_when import read_position, read_time

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from numpy.typing import NDArray

_END = "END_DATA"
# our name -> the columns that hold it, the best first, and whether its flags are those of CTD data (else of water
# samples)
_COLUMNS = {
    "pressure": (("CTDPRS", True),),
    "depth": (("CTDDEP", True),),
    "temperature": (("CTDTMP", True), ("REVTMP", False)),
    "salinity": (("CTDSAL", True), ("SALNTY", False)),
    "conductivity": (("CTDCOND", True),),
}
_TABLES = {}
for _ctd, _codes in ((True, WOCE_CTD), (False, WOCE_SAMPLE)):
    _TABLES[_ctd] = np.full(10, SUSPECT, np.int8)  # 0, and 8 of CTD data: no code of the manual
    _TABLES[_ctd][list(_codes)] = list(_codes.values())
_ATTRIBUTES = {
    "EXPOCODE": "cruise",
    "SECT_ID": "section",
    "STNNBR": "station",
    "CASTNO": "cast_number",
    "DEPTH": "bottom_depth",
}
_HEADER_COLUMNS = (*_ATTRIBUTES, "DATE", "TIME", "LATITUDE", "LONGITUDE")
_HEADER = re.compile(r"^\s*([^=]+?)\s*=\s*(.*?)\s*$")


def read_exchange(data: bytes, where: str, *, source: str) -> Iterator[Cast]:
    """Read the casts of a WHP-Exchange file.

    Parameters
    ----------
    data : bytes
        The file's content; its first line begins with ``CTD`` or ``BOTTLE``.
    where : str
        The file, for messages.
    source : str
        What the casts say they came from.

    Yields
    ------
    Cast
        One from a CTD file; from a bottle file one for each EXPOCODE, STNNBR and CASTNO, its levels ordered by
        pressure.

    Raises
    ------
    CastFileError
        The header or the table is broken at the place named.
    """
    text, note = decode(data)
    lines = text.split("\n")
    start = next(number for number, line in enumerate(lines) if line.strip()) + 1
    while start < len(lines) and (not lines[start].strip() or lines[start].lstrip().startswith("#")):
        start += 1
    bottle = lines[start - 1 if start else 0] and text.lstrip().startswith("BOTTLE")
    header: dict[str, str] = {}
    if not bottle:
        header, start = _read_header(lines, start, where)
    table, units = _read_table(lines, start, where)
    notes = [note] if note else []
    try:
        if bottle:
            yield from _bottle_casts(table, units, where, source, notes)
        else:
            yield _cast(table, units, header, np.arange(len(table)), where, source, notes)
    except CastFileError:
        raise
    except InputError as error:
        raise CastFileError(str(error)) from error


def _read_header(lines: list[str], start: int, where: str) -> tuple[dict[str, str], int]:
    """The 'KEY = value' lines of a CTD file; NUMBER_HEADERS counts them, itself included."""
    first = _HEADER.match(lines[start]) if start < len(lines) else None
    if first is None or first[1].upper() != "NUMBER_HEADERS" or not re.fullmatch(r"[0-9]{1,6}", first[2]):
        found = lines[start].strip()[:40] if start < len(lines) else "the end of the file"
        raise CastFileError(f"{where}: line {start + 1} must be 'NUMBER_HEADERS = n', found {found!r}")
    count = int(first[2])
    header = {}
    for number in range(start + 1, start + count):
        match = _HEADER.match(lines[number]) if number < len(lines) else None
        if match is None:
            raise CastFileError(
                f"{where}: line {number + 1} must be 'NAME = value': NUMBER_HEADERS says there are {count} such lines"
            )
        header[match[1].upper()] = match[2]
    return header, start + count


def _read_table(lines: list[str], start: int, where: str) -> tuple[Table, dict[str, str]]:
    if start + 1 >= len(lines):
        raise CastFileError(f"{where}: ends before its line of column names")
    heads = [head.upper() for head in split_cells(lines[start], ",")]
    cells = split_cells(lines[start + 1], ",")
    units = dict(zip(heads, cells + [""] * len(heads), strict=False))
    rows = lines[start + 2 :]
    end = next((index for index, line in enumerate(rows) if line.strip() == _END), None)
    if end is None:
        raise CastFileError(f"{where}: the line {_END} is missing: the file is cut short; fetch it again")
    table = Table(where, heads, rows[:end], start + 3, ",")
    if not len(table):
        raise CastFileError(f"{where}: no level between line {start + 2} and {_END}")
    if "CTDPRS" not in heads and "CTDDEP" not in heads:
        raise CastFileError(f"{where}: line {start + 1} names no CTDPRS column; found {', '.join(heads[:12])}")
    return table, units


def _bottle_casts(table: Table, units: Mapping[str, str], where: str, source: str, notes: list[str]) -> Iterator[Cast]:
    keys = [name for name in ("EXPOCODE", "STNNBR", "CASTNO") if name in table.heads]
    if "STNNBR" not in keys:
        raise CastFileError(f"{where}: a bottle file needs a STNNBR column; found {', '.join(table.heads[:12])}")
    texts = [[text.strip() for text in table.texts(table.heads.index(key))] for key in keys]
    groups: dict[tuple[str, ...], list[int]] = {}
    for row, key in enumerate(zip(*texts, strict=True)):
        groups.setdefault(key, []).append(row)
    pressure = without_fills(table.numbers(table.heads.index("CTDPRS")))
    columns = [name for name in _HEADER_COLUMNS if name in table.heads]
    unusable = None
    count = 0
    for key, members in groups.items():
        rows = np.array(members)
        order = np.argsort(pressure[rows], kind="stable")
        ordered = [*notes, "levels ordered by pressure"] if (np.diff(order) < 0).any() else notes
        header = {name: table.texts(table.heads.index(name))[members[0]].strip() for name in columns}
        label = f"{where}: cast {'_'.join(key)}"
        try:
            yield _cast(table, units, header, rows[order], label, source, ordered)
            count += 1
        except NoUsableLevelError as error:
            unusable = error
    if not count and unusable is not None:
        raise unusable


def _cast(
    table: Table,
    units: Mapping[str, str],
    header: Mapping[str, str],
    rows: NDArray[np.int64],
    where: str,
    source: str,
    notes: list[str],
) -> Cast:
    values: dict[str, NDArray[np.float64]] = {}
    flags: dict[str, NDArray[np.int8]] = {}
    notes = list(notes)
    for name, columns in _COLUMNS.items():
        for head, ctd in columns:
            if head not in table.heads:
                continue
            column = without_fills(table.numbers(table.heads.index(head)))[rows]
            if np.isnan(column).all():
                continue
            unit = units.get(head) or None
            values[name], note = to_ours(name, column, unit, where=f"{table.where}: column {head}", settled=True)
            notes += [note] if note else []
            if f"{head}_FLAG_W" in table.heads:
                own = _flags(table, f"{head}_FLAG_W", ctd=ctd)[rows]
                # 'not sampled' beside a value: the source says that it is none
                flags[name] = np.where((own == MISSING) & np.isfinite(column), FAIL, own).astype(np.int8)
            break
    for name in VERTICAL:
        if name in values and (in_air := values[name] < ABOVE_SURFACE).any():
            before = flags.get(name, np.full(rows.size, NOT_EVALUATED, np.int8))
            flags[name] = np.where(in_air, FAIL, before).astype(np.int8)
            notes.append(f"{int(in_air.sum())} levels in air: flagged 4")
    ident = [header[key] for key in ("EXPOCODE", "STNNBR", "CASTNO") if header.get(key)]
    positions = {
        kind: read_position(header.get(kind.upper(), ""), kind, where=f"{where}: {kind.upper()}")
        for kind in ("latitude", "longitude")
        if not header.get(kind.upper(), "").startswith("-999")
    }
    time, note = _time(header, where)
    notes += [note] if note else []
    return build_cast(
        where,
        values=values,
        flags=flags,
        id="_".join(ident) or source,
        time=time,
        source=source,
        attributes={
            ours: header[key]
            for key, ours in _ATTRIBUTES.items()
            if header.get(key) and not header[key].startswith("-999")
        },
        notes=tuple(notes),
        **positions,
    )


def _flags(table: Table, head: str, *, ctd: bool) -> NDArray[np.int8]:
    column = table.heads.index(head)
    codes = table.numbers(column)
    known = np.isin(codes, np.arange(10.0)) | np.isnan(codes)
    if not known.all():
        row = int(np.argmin(known))
        raise CastFileError(
            f"{table.where}: line {table.line_of(row)}, column {head!r}: {codes[row]:g} is not a flag from 0 to 9"
        )
    flags: NDArray[np.int8] = _TABLES[ctd][np.where(np.isnan(codes), 9, codes).astype(np.int64)]
    return flags


def _time(header: Mapping[str, str], where: str) -> tuple[np.datetime64, str | None]:
    """DATE is yyyymmdd, TIME is hhmm in UTC."""
    date, clock = header.get("DATE", ""), header.get("TIME", "")
    if not date or date.startswith("-999"):
        return NO_TIME, None
    day = read_time(date, where=f"{where}: DATE")
    digits = clock.replace(":", "").zfill(4)
    if not clock or not re.fullmatch("[0-9]{4}", digits) or int(digits[:2]) > 23 or int(digits[2:]) > 59:
        return day, "time of day unknown; midnight stands for it"
    return day + np.timedelta64(int(digits[:2]) * 60 + int(digits[2:]), "m"), None
