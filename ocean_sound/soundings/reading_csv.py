"""Soundings read from CSV, in blocks of rows."""

from __future__ import annotations

import csv
import re
from collections import Counter
from typing import TYPE_CHECKING, Any

import numpy as np

from ..casts.names import split_unit
from ..errors import InputError
from .columns import INPUTS, OUTPUTS, Column, PingBlock, missing_line
from .decoding import Decoder
from .reading import ASIDE, Slab, Soundings, corrected_columns, reject, wider

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path
    from typing import TextIO

    from numpy.typing import NDArray

_BLANK = ["", "nan", "NaN", "NAN", "NA", "N/A", "null", "NULL", "-"]
_TAIL = 2**16
_ZONE = re.compile(r"(Z|[+-]\d{2}:?\d{2})$")
_FLAG = "_flag"
_EXACT = 2.0**53


class CsvSoundings(Soundings):
    """Of a table with a head: one sounding a row."""

    def __init__(self, path: Path, case: str, beams: int) -> None:
        self.where, self.case, self.path, self._rows = str(path), case, path, beams
        self.dimensions = ("sounding",)
        self._heads, self.comments, self._delimiter = self._head(path)
        labels = [split_unit(head) for head in self._heads]
        self._names = [name.strip() for name, _ in labels]
        self._units = [unit or "" for _, unit in labels]
        self._labels = ["_".join(name.lower().split()) for name in self._names]
        twice = [name for name, count in Counter(self._labels).items() if count > 1]
        if twice:
            raise InputError(f"{path}: the column {twice[0]} is there twice; leave one of them out")
        columns: dict[str, Column] = {**INPUTS, **{name: OUTPUTS[name] for name in corrected_columns(case)}}
        self._found = {name: self._labels.index(name) for name in columns if name in self._labels}
        line = missing_line(case, self._found, self.where)
        if line is not None:
            raise InputError(line)
        self._decoders = {name: self._decoder(columns[name], labels[at][1]) for name, at in self._found.items()}
        self._flags = {name: self._labels.index(name + _FLAG) for name in self._found if name + _FLAG in self._labels}
        self._assumed_zone = False
        self._check_end(path)
        self._survey()

    def close(self) -> None:
        """Nothing is kept open."""

    @property
    def names(self) -> tuple[str, ...]:
        """As of any soundings."""
        return tuple(self._found)

    @property
    def kept_names(self) -> tuple[str, ...]:
        """As of any soundings."""
        return tuple(self._names[at] for at in self._others)

    @property
    def notes(self) -> tuple[str, ...]:
        """As of any soundings."""
        lines = [line for decoder in self._decoders.values() for line in decoder.notes]
        lines += [
            f"{name}: {decoder.impossible} values are impossible; {decoder.column.range_text} would be right"
            for name, decoder in self._decoders.items()
            if decoder.impossible
        ]
        if self._assumed_zone:
            lines.append("times without a zone are taken as UTC")
        return tuple(lines)

    def is_number(self, kept: str) -> bool:
        """Whether every value of a column that is not recognised is a number or blank."""
        return self._names.index(kept) in self._numeric

    def unit_of(self, kept: str) -> str:
        """The unit of a column that is not recognised, as its head has it; empty for none."""
        return self._units[self._names.index(kept)]

    @property
    def _others(self) -> list[int]:
        taken = set(self._found.values())
        return [at for at in range(len(self._heads)) if at not in taken]

    def _decoder(self, column: Column, unit: str | None) -> Decoder:
        kind = np.dtype("M8[ns]" if column.kind == "time" else "f8")
        return Decoder(column, {} if unit is None else {"units": unit}, kind, f"{self.where}: column {column.name}")

    def _head(self, path: Path) -> tuple[list[str], tuple[str, ...], str]:
        """Names of the columns, the comments above them, and what stands between columns."""
        comments = []
        try:
            with path.open(encoding="utf-8-sig", newline="") as file:
                for line in file:
                    if line.startswith("#") or not line.strip():
                        comments += [line.lstrip("#").strip()] if line.strip("# \r\n") else []
                        continue
                    delimiter = next((mark for mark in ",;\t" if mark in line), ",")
                    return next(csv.reader([line], delimiter=delimiter)), tuple(comments), delimiter
        except UnicodeDecodeError as error:
            raise InputError(f"{path}: is neither netCDF nor text in UTF-8; one of them would be right") from error
        raise InputError(f"{path}: is empty; a CSV with a head such as two_way_travel_time [s] would be right")

    def _check_end(self, path: Path) -> None:
        """A file that was cut short ends within a row."""
        with path.open("rb") as file:
            size = file.seek(0, 2)
            file.seek(max(size - _TAIL, 0))
            tail = file.read().decode("utf-8", errors="replace")
        if tail.endswith("\n"):
            return
        last = tail.splitlines()[-1]
        cells = len(next(csv.reader([last], delimiter=self._delimiter), []))
        if cells < len(self._heads) and not last.startswith("#"):
            raise InputError(
                f"{path}: is cut short: its last row has {cells} of {len(self._heads)} columns; fetch it again"
            )

    def _survey(self) -> None:
        """One pass for the number of rows, extents, and which columns that are not ours are numbers."""
        flags = set(self._flags.values())
        self._numeric: set[int] = flags
        rows, numeric = 0, set(self._others) - flags
        ours = [name for name, decoder in self._decoders.items() if decoder.column.kind != "time"]
        extents = dict.fromkeys(ours, (np.nan, np.nan))
        for frame in self._frames(sorted({*numeric, *flags, *(self._found[name] for name in ours)})):
            for name in ours:
                extents[name] = wider(extents[name], self._read(frame, name, rows)[0])
            rows += len(frame)
            numeric = {at for at in numeric if _is_numbers(frame[at].to_numpy())}
        self._numeric = numeric | flags
        self.shape = (rows, 1)
        self._extents = {name: (float(low), float(high)) for name, (low, high) in extents.items()}

    def _frames(self, wanted: list[int], *, settled: bool = False) -> Iterator[Any]:
        """The table in parts of so many rows; ours (and, once it is known, others of numbers) read as numbers."""
        import pandas as pd

        ours = {at: name for name, at in self._found.items()}
        numbers = [at for at in wanted if at in ours and self._decoders[ours[at]].column.kind != "time"]
        numbers += [at for at in wanted if at in self._numeric]
        over = len(self._heads)  # one column more than the head, which must stay empty
        open_ = [] if settled else [at for at in wanted if at not in ours and at not in numbers]  # pandas finds out
        kinds: dict[str, Any] = {
            str(at): np.float64 if at in numbers else str for at in [*wanted, over] if at not in open_
        }
        blank: dict[str, Any] = {str(at): _BLANK for at in [*numbers, *open_]}
        start = 0
        head = self._delimiter.join(map(str, range(over + 1)))
        with self.path.open(encoding="utf-8-sig", newline="") as file:  # type: ignore[union-attr]
            try:
                parts = pd.read_csv(  # type: ignore[call-overload]
                    _Rows(file, head), sep=self._delimiter, usecols=list(map(str, [*wanted, over])),
                    dtype=kinds, na_values=blank, keep_default_na=False,
                    chunksize=self._rows, index_col=False, low_memory=False, **_to_the_last_digit(pd.__version__),
                )  # fmt: skip
                for part in parts:
                    part.columns = [int(name) for name in part.columns]
                    full = part[over].notna() & (part[over] != "")
                    if full.any():
                        row = start + int(np.argmax(full.to_numpy())) + 1
                        raise InputError(f"{self.where}: row {row} has more columns than the head, {len(self._heads)}")
                    start += len(part)
                    yield part
            except pd.errors.EmptyDataError:
                return
            except pd.errors.ParserError as error:
                raise InputError(f"{self.where}: is not a table: {' '.join(str(error).split())}") from error
            except UnicodeDecodeError as error:
                raise InputError(f"{self.where}: is not text in UTF-8 after row {start}") from error
            except ValueError as error:
                if isinstance(error, InputError):
                    raise
                raise self._no_number(start, numbers, error) from error

    def _no_number(self, start: int, numbers: list[int], error: ValueError) -> InputError:
        """Which cell it is that should be a number; rows are counted from 1 below the head."""
        import pandas as pd

        with self.path.open(encoding="utf-8-sig", newline="") as file:  # type: ignore[union-attr]
            frame: Any = pd.read_csv(  # type: ignore[call-overload]
                _Rows(file, "", start), sep=self._delimiter, header=None, dtype=str, keep_default_na=False,
                nrows=self._rows, names=list(range(len(self._heads))), index_col=False,
            )  # fmt: skip
        for at in numbers:
            texts = frame[at]
            bad = (pd.to_numeric(texts, errors="coerce").isna() & ~texts.isin(_BLANK)).to_numpy()
            if bad.any():
                row = int(np.argmax(bad))
                found = str(texts[row])[:40]
                return InputError(
                    f"{self.where}: row {start + row + 1}, column {self._labels[at]}: {found!r} is no number"
                )
        return InputError(f"{self.where}: after row {start}: {error}")

    def slabs(self, *, keep: bool = False) -> Iterator[Slab]:
        """As of any soundings."""
        others = self._others if keep else []
        for decoder in self._decoders.values():
            decoder.impossible = 0
        start = 0
        for frame in self._frames(sorted({*self._found.values(), *self._flags.values(), *others}), settled=True):
            yield Slab(self._block(frame, start), {self._names[at]: self._kept(frame, at) for at in others})
            start += len(frame)

    def _kept(self, frame: Any, at: int) -> NDArray[Any]:
        if at in self._numeric:
            return np.asarray(frame[at].to_numpy(np.float64))
        return np.asarray(frame[at].fillna("").to_numpy(object))

    def _block(self, frame: Any, start: int) -> PingBlock:
        pings, beams = {}, {}
        impossible: NDArray[np.bool_] | None = None
        for name in self._found:
            values, bad = self._read(frame, name, start)
            if self._decoders[name].column.per == "beam":
                beams[name] = values[:, None]
            else:
                pings[name] = values
            if bad is not None and name not in ASIDE:
                impossible = bad[:, None] | (False if impossible is None else impossible)
        return PingBlock(pings, beams, start, impossible)

    def _read(self, frame: Any, name: str, start: int) -> tuple[NDArray[Any], NDArray[np.bool_] | None]:
        decoder = self._decoders[name]
        cells = frame[self._found[name]]
        raw = self._times(cells, start) if decoder.column.kind == "time" else cells.to_numpy(np.float64)
        values, bad = decoder(raw)
        if name in self._flags:
            reject(values, frame[self._flags[name]].to_numpy(np.float64))
        return values, bad

    def _times(self, cells: Any, start: int) -> NDArray[Any]:
        import pandas as pd

        texts = cells.astype(object).where(~cells.isin(_BLANK), None)
        found = pd.to_datetime(texts, format="ISO8601", utc=True, errors="coerce")
        wrong = (found.isna() & texts.notna()).to_numpy()
        if wrong.any():
            row = int(np.argmax(wrong))
            given = str(texts.iloc[row])[:40]
            raise InputError(
                f"{self.where}: row {start + row + 1}, column time: {given!r} is no time; ISO 8601 such as "
                "2026-05-04T10:30:00.250Z would be right"
            )
        first = texts.first_valid_index()
        if first is not None and not _ZONE.search(str(texts[first]).strip()):
            self._assumed_zone = True
        return np.asarray(found.dt.tz_localize(None).to_numpy("datetime64[ns]"))

    def extent(self, name: str) -> tuple[float, float]:
        """As of any soundings."""
        return self._extents[name]


def _is_numbers(values: NDArray[Any]) -> bool:
    """Whether they are numbers that float64 keeps to the last digit."""
    if values.dtype.kind in "iu":
        return bool((np.abs(values.astype(np.float64)) <= _EXACT).all())
    return values.dtype.kind == "f"


def _to_the_last_digit(version: str) -> dict[str, Any]:
    """What makes pandas read every number exactly; from 3.1 on it does, and warns of being asked."""
    return {"float_precision": "round_trip"} if tuple(map(int, version.split(".")[:2])) < (3, 1) else {}


class _Rows:
    """A text file as pandas reads it: without comments, blank lines and some rows, and with a head of ours."""

    def __init__(self, file: TextIO, head: str, skip: int = 0) -> None:
        self._file, self._head, self._skip = file, head + "\n" if head else "", skip + 1

    def __iter__(self) -> Iterator[str]:  # pandas asks whether it is there
        return iter(self._file)

    def read(self, size: int = -1) -> str:
        """About so many letters, whole lines only; empty at the end."""
        while True:
            text = self._file.read(size) + self._file.readline()
            if not text:
                return ""
            if text.startswith("#") or "\n#" in text or self._skip:
                lines = [line for line in text.splitlines(keepends=True) if not line.startswith("#") and line.strip()]
                skipped = min(self._skip, len(lines))
                self._skip -= skipped
                text = "".join(lines[skipped:])
            if text:
                head, self._head = self._head, ""
                return head + text
