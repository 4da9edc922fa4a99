"""Reading a table of states of water for `ocean-sound speed`: one state a line, names at the head of the columns."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ..casts.names import read_head, split_unit
from ..casts.plain_csv import decode
from ..casts.table import Table, split_cells, without_fills
from ..casts.units import from_name, quantity_of, to_ours
from ..errors import InputError
from ..water import LIMITS

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence
    from pathlib import Path

    from numpy.typing import NDArray

_POSITION = ("latitude", "longitude")
_KNOWN = ("temperature", "salinity", "pressure", "sea_pressure", "absolute_pressure", "depth", "height", *_POSITION)
_EXAMPLE = "temperature [degC],salinity [PSS-78],depth [m]"


def read_states(path: Path, mapping: Mapping[str, str]) -> tuple[dict[str, NDArray[np.float64]], list[str]]:
    """Columns of a CSV of states by our names, in our units, and what was made of them."""
    table, notes = _table(path)
    columns: dict[str, NDArray[np.float64]] = {}
    for index, (name, unit, settled) in _chosen(path, table.heads, mapping).items():
        quantity = quantity_of(name)
        if quantity in columns:
            raise InputError(f"{path}: two columns look like {quantity}; choose with --map {quantity}=COLUMN")
        values = without_fills(table.numbers(index), negative=name == "height")
        if name not in _POSITION:
            values, said = to_ours(name, values, unit, where=f"{path}: column {table.heads[index]!r}", settled=settled)
            values, turned = from_name(name, values)
            notes += filter(None, (said, turned))
        _check_possible(table, index, quantity, values)
        columns[quantity] = values
    return columns, notes


def _table(path: Path) -> tuple[Table, list[str]]:
    if path.is_dir():
        raise InputError(f"{path}: is a folder; name a CSV file in it")
    try:
        data = path.read_bytes()
    except FileNotFoundError:
        raise InputError(f"{path}: no such file; check the name") from None
    if b"\0" in data[:4096] and not data.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise InputError(f"{path}: is not text; a CSV of states is needed, with heads such as {_EXAMPLE!r}")
    text, note = decode(data)
    lines = text.split("\n")
    first = next((i for i, line in enumerate(lines) if line.strip() and line.strip()[0] not in "#%"), None)
    if first is None:
        raise InputError(f"{path}: holds no line of column names, such as {_EXAMPLE!r}")
    delimiter = next((mark for mark in "\t;," if mark in lines[first]), ",")
    heads = [cell.strip() for cell in split_cells(lines[first], delimiter)]
    table = Table(str(path), heads, lines[first + 1 :], first + 2, delimiter)
    if not len(table):
        raise InputError(f"{path}: no state below the column names on line {first + 1}")
    return table, [] if note is None else [note]


def _chosen(path: Path, heads: Sequence[str], mapping: Mapping[str, str]) -> dict[int, tuple[str, str | None, bool]]:
    """By column: the name we know it by, its unit, and whether a person said so."""
    chosen: dict[int, tuple[str, str | None, bool]] = {}
    for name, wanted in mapping.items():
        if name not in _KNOWN:
            raise InputError(f"--map {name}=...: nothing is named {name!r} here; use one of {', '.join(_KNOWN)}")
        column, unit = (wanted, None) if wanted in heads else split_unit(wanted)
        if column not in heads:
            raise InputError(f"{path}: no column is named {column!r}; the columns are {', '.join(heads)}")
        chosen[heads.index(column)] = (name, unit or read_head(column).unit, True)
    settled = {quantity_of(name) for name, _, _ in chosen.values()}
    for index, text in enumerate(heads):
        head = read_head(text)
        if index not in chosen and head.name in _KNOWN and quantity_of(head.name) not in settled:
            chosen[index] = (head.name, head.unit, False)
    return chosen


def _check_possible(table: Table, index: int, quantity: str, values: NDArray[np.float64]) -> None:
    """Name the line of the first value that no water can have."""
    limits = LIMITS[quantity]
    bad = (values < limits.low) | (values > limits.high) | np.isinf(values)
    if bad.any():
        row = int(np.argmax(bad))
        span = f" from {limits.low:g} to {limits.high:g}" if np.isfinite(limits.high) else ""
        raise InputError(
            f"{table.where}: line {table.line_of(row)}, column {table.heads[index]!r}: {values[row]:g} is impossible; "
            f"{limits.unit}{span} are accepted; correct it, or leave the cell empty"
        )
