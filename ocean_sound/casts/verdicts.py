"""A person's verdicts: flags that override those of the source and of the tests, with a reason and a name."""

from __future__ import annotations

import csv
import io
import re
from collections import Counter
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from .cast import FAIL, MISSING, NOT_EVALUATED, PASS, SUSPECT, VARIABLES, Cast
from .checking_report import levels_in_words

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence
    from os import PathLike

    from numpy.typing import NDArray

_COLUMNS = ("level", "variable", "flag", "reason", "who")
_OPTIONAL = ("cast",)
_FLAGS = (PASS, NOT_EVALUATED, SUSPECT, FAIL)  # missing is what has no value: no matter of opinion
_LEVELS = re.compile(r"([0-9]{1,9})(?:\s*-\s*([0-9]{1,9}))?", re.ASCII)
_ALL = "all"
_LARGEST = 2**24
"""Bytes of a file of verdicts: some hundred thousand of them."""


@dataclass(frozen=True)
class Verdict:
    """What a person says of one or several levels of a variable.

    Parameters
    ----------
    first, last : int
        Levels of the cast in the order of its file, counted from 1; `last` is 0 for all from `first` on.
    variable : str
        One of a cast's variables.
    flag : int
        QARTOD flag: 1 pass, 2 not evaluated, 3 suspect, 4 fail.
    reason, who : str
        Why, and who says so.
    cast : str, optional
        The id of the cast it is about; about any cast where empty.
    where : str, optional
        File and line it stands on, for messages.
    """

    first: int
    last: int
    variable: str
    flag: int
    reason: str
    who: str
    cast: str = ""
    where: str = ""


def read_verdicts(path: str | PathLike[str]) -> tuple[Verdict, ...]:
    r"""Read a person's verdicts from a CSV file.

    Parameters
    ----------
    path : path-like
        UTF-8 text with a line of heads: ``level``, ``variable``, ``flag``, ``reason``, ``who``, in any order, and
        ``cast`` if it speaks of several casts. A level is a number counted from 1 in the order of the cast's own
        file, a span such as ``120-135``, or ``all``. Blank lines and lines that begin with # are passed over.

    Returns
    -------
    tuple of Verdict
        In the order of the file.

    Raises
    ------
    InputError
        The file can't be read, or a field is missing, unknown or impossible; the message names line and field.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = Path(folder) / "verdicts.csv"
    ...     _ = path.write_text("level,variable,flag,reason,who\n7-9,salinity,4,bubbles in the cell,A. Person\n")
    ...     verdict, = read_verdicts(path)
    >>> verdict.first, verdict.last, verdict.flag
    (7, 9, 4)
    """
    path = Path(path)
    lines = _text(path).splitlines()
    kept = [(number, line) for number, line in enumerate(lines, 1) if line.strip() and not line.startswith("#")]
    if not kept:
        raise InputError(f"{path}: is empty; its first line must name {', '.join(_COLUMNS)}")
    heads = [head.lower() for head in _cells(kept[0][1], f"{path}: line {kept[0][0]}")]
    for name in _COLUMNS:
        if name not in heads:
            raise InputError(f"{path}: line {kept[0][0]} names no column {name!r}; needed are {', '.join(_COLUMNS)}")
    for name in heads:
        if name not in (*_COLUMNS, *_OPTIONAL) or heads.count(name) > 1:
            trouble = "stands there twice" if heads.count(name) > 1 else "is not known"
            known = ", ".join((*_COLUMNS, *_OPTIONAL))
            raise InputError(f"{path}: line {kept[0][0]}: the column {name!r} {trouble}; known are {known}")
    return tuple(_verdict(heads, line, f"{path}: line {number}") for number, line in kept[1:])


def _text(path: Path) -> str:
    try:
        with path.open("rb") as file:
            data = file.read(_LARGEST + 1)
    except OSError as error:
        raise InputError(f"{path}: can't be read: {error.strerror or error}") from error
    if len(data) > _LARGEST:
        raise InputError(f"{path}: is larger than {_LARGEST} bytes; give the verdicts on one cast or a few")
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputError(f"{path}: is not UTF-8 text: byte {error.start}; save it as UTF-8") from error


def _cells(line: str, where: str) -> list[str]:
    try:
        return [cell.strip() for cell in next(csv.reader(io.StringIO(line), skipinitialspace=True, strict=True))]
    except csv.Error as error:
        raise InputError(f"{where}: {error}; put a text with commas in double quotes, on one line") from error


def _verdict(heads: Sequence[str], line: str, where: str) -> Verdict:
    cells = _cells(line, where)
    if len(cells) != len(heads):
        raise InputError(f"{where} has {len(cells)} cells where the heads name {len(heads)} columns")
    fields: Mapping[str, str] = dict(zip(heads, cells, strict=True))
    first, last = _span(fields["level"], where)
    variable = fields["variable"].lower().replace(" ", "_")
    if variable not in VARIABLES:
        raise InputError(f"{where}, field 'variable': {fields['variable']!r}; give one of {', '.join(VARIABLES)}")
    if fields["flag"] not in set(map(str, _FLAGS)):
        raise InputError(
            f"{where}, field 'flag': {fields['flag']!r}; give 1 (pass), 2 (not evaluated), 3 (suspect) or 4 (fail)"
        )
    for name in ("reason", "who"):
        if not fields[name]:
            raise InputError(f"{where}, field {name!r} is empty; a verdict needs a reason and a name")
    return Verdict(
        first,
        last,
        variable,
        int(fields["flag"]),
        fields["reason"],
        fields["who"],
        cast=fields.get("cast", ""),
        where=where,
    )


def _span(text: str, where: str) -> tuple[int, int]:
    if text.lower() == _ALL:
        return 1, 0
    match = _LEVELS.fullmatch(text)
    first, last = (int(match[1]), int(match[2] or match[1])) if match else (0, 0)
    if first < 1 or last < first:
        raise InputError(
            f"{where}, field 'level': {text!r}; give a number counted from 1, a span such as 120-135, or {_ALL}"
        )
    return first, last


def apply_verdicts(cast: Cast, verdicts: Iterable[Verdict]) -> Cast:
    """The same cast with the flags that a person gave, which override all others, upwards as well as downwards.

    Parameters
    ----------
    cast : Cast
        The cast, checked or not; never changed.
    verdicts : iterable of Verdict
        Where two speak of the same value the later one holds. Those about another cast are passed over; missing values
        within a span stay missing.

    Returns
    -------
    Cast
        Each verdict is recorded in its notes with what the flag was before, and the number of them and their authors
        in its attribute ``verdicts``.

    Raises
    ------
    InputError
        A verdict speaks of a variable or level that the cast does not have, or only of levels without a value.

    Examples
    --------
    >>> cast = Cast(id="A1", values={"depth": [0.0, 5.0], "temperature": [12.0, 30.0]}, flags={"temperature": [1, 4]})
    >>> verdict = Verdict(2, 2, "temperature", 1, "a warm spring, seen by the diver", "A. Person")
    >>> seen = apply_verdicts(cast, [verdict])
    >>> seen.flags["temperature"].tolist(), seen.attributes["verdicts"]
    ([1, 1], '1 by A. Person')
    """
    flags = {name: flag.copy() for name, flag in cast.flags.items()}
    notes: list[str] = []
    authors: Counter[str] = Counter()
    for verdict in verdicts:
        if verdict.cast and verdict.cast != cast.id:
            continue
        rows = _rows(cast, verdict)
        name = verdict.variable
        if name not in flags:
            finite = np.isfinite(cast.values[name])
            flags[name] = np.where(finite, NOT_EVALUATED, MISSING).astype(np.int8)
        before = sorted(set(flags[name][rows].tolist()))
        flags[name][rows] = verdict.flag
        authors[verdict.who] += 1
        what = f"{name.replace('_', ' ')} on {levels_in_words(rows.tolist())}"
        notes.append(
            f"verdict of {verdict.who}: {what} flagged {verdict.flag} "
            f"(was {', '.join(map(str, before))}): {verdict.reason}"
        )
    if not notes:
        return cast
    said = ", ".join(f"{count} by {who}" for who, count in authors.items())
    earlier = cast.attributes.get("verdicts")
    attributes = {**cast.attributes, "verdicts": f"{earlier}, {said}" if earlier else said}
    return replace(cast, flags=flags, attributes=attributes, notes=(*cast.notes, *notes))


def _rows(cast: Cast, verdict: Verdict) -> NDArray[np.int64]:
    """Rows that the verdict speaks of and that hold a value."""
    where = f"{verdict.where}: " if verdict.where else ""
    about = f"cast {cast.id!r}"
    if verdict.variable not in cast.values:
        raise InputError(f"{where}field 'variable': {about} has no {verdict.variable}; it has {', '.join(cast.values)}")
    last = verdict.last or len(cast)
    if not 1 <= verdict.first <= last <= len(cast):
        raise InputError(f"{where}field 'level': {last} of {about}, which has levels 1 to {len(cast)}")
    rows = np.arange(verdict.first - 1, last)
    rows = rows[np.isfinite(cast.values[verdict.variable][rows])]
    if not rows.size:
        span = f"level {last}" if last == verdict.first else f"levels {verdict.first}-{last}"
        raise InputError(
            f"{where}field 'level': {verdict.variable} of {about} has no value on {span}: it stays missing"
        )
    return rows
