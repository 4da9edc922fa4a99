"""Many files of casts at once: the same casts to the last bit as file by file, but fast where the files are alike."""

from __future__ import annotations

import os
from dataclasses import dataclass, field, replace
from io import FileIO
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import CastFileError, InputError
from .block import CastBlock
from .cast import AS_MEASURED, MISSING, NOT_EVALUATED, VARIABLES
from .columns import Recipe, make_recipe
from .layout import SEARCHED_LINES, find_table
from .levels import About, Raw, make_block
from .names import may_name_values
from .origin import Origin
from .plain_csv import cast_about, decode, finish_found, says_when
from .preamble import Found, read_preamble
from .reading import HDF5, LARGEST_TEXT, find_in_netcdf, is_plain, read_file
from .settings import SIDECAR, Settings, settings_for
from .table import number_of

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
    from os import PathLike

    from numpy.typing import NDArray

    from .layout import Layout


CASTS_PER_BLOCK = 500
"""Casts after which a block is handed on."""
_MOST_ODD = 4096  # cells of a file that are left to Python
_MOST_CASTS = 4096  # casts of a file that are read the fast way
_FIRST_LEVELS = 2**16  # room for levels at the start
_MOST_RECIPES = 64


def read_many(
    paths: Iterable[str | PathLike[str]],
    *,
    mapping: Mapping[str, str] | None = None,
    settings: Mapping[str, Any] | None = None,
    casts_per_block: int = CASTS_PER_BLOCK,
) -> Iterator[CastBlock]:
    r"""Read the casts of many files, some hundred casts at a time.

    The casts are those of `read_blocks`, bit for bit, in the order of the paths. A file that can't be read stops
    nothing: it is named in the `left_out` of its block. Plain CSVs with the same heads are read by a compiled kernel.

    Parameters
    ----------
    paths : iterable of path-like
        Files of any format that is read.
    mapping, settings
        As for `read_blocks`, for all of them; a TOML file beside a CSV is obeyed.
    casts_per_block : int
        Casts after which a block is handed on; the last file's casts are not parted.

    Yields
    ------
    CastBlock
        Without a cast where none of its files could be read.

    Raises
    ------
    InputError
        A name in `mapping` or a setting that is not ours.

    Examples
    --------
    >>> import tempfile
    >>> from pathlib import Path
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     files = [Path(folder) / f"{number}.csv" for number in range(3)]
    ...     for file in files[:2]:
    ...         _ = file.write_text("depth [m],sound speed [m/s]\n0,1500.5\n10,1499.25\n")
    ...     (block,) = read_many(files)
    >>> block, block.left_out[0][1]
    (<CastBlock: 2 casts, 4 levels, depth sound_speed>, 'no such file; check the name')
    """
    if casts_per_block < 1:
        raise InputError(f"casts_per_block is {casts_per_block}; it must be at least 1")
    common = settings_for(None, mapping, settings)
    files = ((path, _content(path)) for path in (os.fspath(given) for given in paths))
    return _read(files, common, mapping, settings, casts_per_block)


def read_contents(files: Iterable[tuple[str, bytes]]) -> Iterator[CastBlock]:
    """The same for paths that come with what is in the file, which is then not read a second time for a CSV."""
    return _read(files, Settings(), None, None, CASTS_PER_BLOCK)


def _content(path: str) -> bytes:
    """What is in a file; nothing where it can't be read, which is then told by the reader of single files."""
    try:
        with FileIO(path) as file:
            return file.readall()
    except (OSError, ValueError):
        return b""


def _read(
    files: Iterable[tuple[str, bytes]],
    common: Settings,
    mapping: Mapping[str, str] | None,
    settings: Mapping[str, Any] | None,
    casts_per_block: int,
) -> Iterator[CastBlock]:
    reader = _Reader(common)
    sidecars = _Sidecars()
    for path, data in files:
        try:
            if sidecars.has(path):
                reader.read_alone(path, settings_for(path, mapping, settings))
            else:
                reader.read(path, data)
        except (CastFileError, InputError) as error:
            reader.leave_out(path, str(error))
        if reader.count >= casts_per_block:
            yield reader.take()
    if reader.count or reader.has_left_out:
        yield reader.take()


class _Sidecars:
    """Which files have settings beside them; each folder is listed once."""

    def __init__(self) -> None:
        self._folders: dict[str, frozenset[str]] = {}

    def has(self, path: str) -> bool:
        folder, name = os.path.split(path)
        if folder not in self._folders:
            try:
                names = frozenset(name for name in os.listdir(folder or ".") if name.endswith(SIDECAR))  # noqa: PTH208
            except OSError:
                names = frozenset()
            self._folders[folder] = names
        names = self._folders[folder]
        return bool(names) and name + SIDECAR in names


@dataclass(frozen=True)
class _Orders:
    """What the kernel is told of the rows below some heads."""

    recipe: Recipe
    delimiter: int
    kinds: NDArray[np.int64]
    label_names: tuple[str, ...]
    label_kinds: NDArray[np.int64]
    flag_tables: tuple[NDArray[np.int8], ...]  # by column of flags: what each number from 0 means, 0 for nothing


@dataclass(frozen=True)
class _Form:
    """What was found out about one file, which holds for each that begins with the same bytes."""

    prefix: bytes
    heads: bytes  # the lines of heads, and of units if there are any, at the end of the prefix
    encoding_note: str | None
    found: Found
    orders: _Orders
    about: About | None  # for casts of which no column says anything


@dataclass
class _Run:
    """Files of one recipe that stand one after the other; those of netCDF each with what was found in it."""

    recipe: Recipe
    levels: int = 0
    row_size: list[int] = field(default_factory=list)
    about: list[About] = field(default_factory=list)
    found: list[Raw] = field(default_factory=list)


class _Reader:
    """Gathers casts file by file, and hands them on as a block."""

    def __init__(self, settings: Settings) -> None:
        from . import _kernels

        self._kernels = _kernels
        self._settings = settings
        self._form: _Form | None = None
        self._orders: dict[Any, _Orders] = {}
        self._points: tuple[int, ...] = (ord("."), ord(",")) if settings.decimal is None else (ord(settings.decimal),)
        self._numbers = np.empty((0, 0))
        self._odd = np.empty((_MOST_ODD, 4), np.int64)
        self._group_rows = np.empty(_MOST_CASTS, np.int64)
        self._parts: list[CastBlock | tuple[str, str]] = []
        self._run: _Run | None = None
        self.count = 0

    @property
    def has_left_out(self) -> bool:
        return bool(self._parts)

    def leave_out(self, path: str, reason: str) -> None:
        """Name a file that was not read."""
        self._finish_run()
        self._parts.append((path, reason.removeprefix(f"{path}: ")))

    def take(self) -> CastBlock:
        """All that was gathered since the last time."""
        self._finish_run()
        parts, self._parts, self.count = self._parts, [], 0
        return _joined(parts)

    def read_alone(self, path: str, settings: Settings, data: bytes = b"") -> None:
        """Read a file as if there were no other."""
        for block in read_file(path, settings, data):
            self._add(block)

    def _add(self, block: CastBlock) -> None:
        self._finish_run()
        self._parts.append(block)
        self.count += len(block)

    def read(self, path: str, data: bytes) -> None:
        """Read a file, the fast way if it can be."""
        if data.startswith(HDF5):
            self._read_netcdf(path, data)
        elif not (data and self._read_alike(path, data)):
            self.read_alone(path, self._settings, data)

    def _read_netcdf(self, path: str, data: bytes) -> None:
        """Read netCDF-4; plain casts of one recipe are worked on together."""
        source = os.path.basename(path)  # noqa: PTH119
        origin = Origin(path, source, os.path.splitext(source)[0], path=Path(path), known=data)  # noqa: PTH122
        found = find_in_netcdf(origin, self._settings, to_gather=True)
        if isinstance(found, CastBlock):
            self._add(found)
            return
        if self._run is None or not self._run.found or self._run.recipe != found.recipe:
            self._finish_run()
            self._run = _Run(found.recipe)
        self._run.found.append(found.raw)
        self._run.row_size += found.raw.row_size.tolist()
        self._run.about += found.about
        self.count += 1

    # --- the fast way ----------------------------------------------------------------------------------------------

    def _read_alike(self, path: str, data: bytes) -> bool:
        """Read a plain CSV by the kernel; False, with nothing changed, where it holds anything that is not plain."""
        form = self._form
        if form is None or not data.startswith(form.prefix):
            form = self._learn(path, data)
            if form is None:
                return False
        begin = len(form.prefix)
        if not (data.isascii() or data[begin:].isascii()) or data.find(b'"', begin) >= 0 or len(data) > LARGEST_TEXT:
            return False
        # a row has at least a delimiter or a line end for each of its cells
        run = self._run_for(form.orders.recipe, (len(data) - begin) // form.orders.kinds.size + 2)
        parsed = self._parse(data, form, run.levels)
        if parsed is None:
            return False
        end, cells = parsed
        one = len(cells) == 1
        sizes = [end - run.levels] if one else np.diff(self._group_rows[: len(cells)], append=end).tolist()
        about = self._about(path, data, form, cells)
        if about is None:
            return False
        run.levels = end
        run.row_size += sizes
        run.about += about
        self.count += len(sizes)
        return True

    def _learn(self, path: str, data: bytes) -> _Form | None:
        """What holds for all files that begin as this one does; None where it is not plain enough."""
        if self._settings.encoding is not None or not is_plain(data):
            return None
        try:
            form = self._same_heads(path, data) or self._other_heads(path, data)
        except (CastFileError, InputError):
            return None  # said again by the other way
        if form is not None:
            self._form = form
        return form

    def _same_heads(self, path: str, data: bytes) -> _Form | None:
        """The form of a file that has the heads of the one before, below lines none of which can hold heads."""
        before = self._form
        if before is None or self._settings.columns:
            return None
        begin = data.find(before.heads)
        if begin < 0 or data[begin - 1 : begin] not in {b"", b"\n"}:
            return None
        prefix = data[: begin + len(before.heads)]
        text, note = decode(prefix)
        above = text.split("\n")[: -before.heads.count(b"\n") - 1]
        if len(above) >= SEARCHED_LINES or may_name_values(" ".join(above)):
            return None
        found = read_preamble(above, path)
        if found.units != before.found.units or note != before.encoding_note:
            return None  # the same bytes might mean other heads
        return self._form_of(path, prefix, before.heads, found, before.orders, note)

    def _other_heads(self, path: str, data: bytes) -> _Form | None:
        text, note = decode(data)
        lines = text.split("\n", SEARCHED_LINES + 50)
        layout = find_table(lines, self._settings, path)
        found = read_preamble(lines[: layout.head_line], path)
        orders = self._orders_for(layout, found, path)
        ends = [0]
        for _ in range(layout.first_row):
            ends.append(data.find(b"\n", ends[-1]) + 1)
        if orders is None or 0 in ends[1:] or not data[ends[-1] :].isascii():
            return None
        return self._form_of(path, data[: ends[-1]], data[ends[layout.head_line] : ends[-1]], found, orders, note)

    def _form_of(
        self, path: str, prefix: bytes, heads: bytes, found: Found, orders: _Orders, note: str | None
    ) -> _Form | None:
        if prefix.count(b"\r") != prefix.count(b"\r\n"):
            return None  # lines that end by a carriage return alone
        finish_found(found, orders.recipe, note, self._settings)
        about = None if orders.label_names else self._about_one(path, found, orders, {})
        return _Form(prefix, heads, note, found, orders, about)

    def _orders_for(self, layout: Layout, found: Found, path: str) -> _Orders | None:
        key = layout.heads, layout.units, layout.delimiter, tuple(found.units.items())
        orders = self._orders.get(key)
        if orders is None and layout.delimiter is not None:
            if len(self._orders) >= _MOST_RECIPES:
                self._orders.clear()
            recipe = make_recipe(layout, found.units, self._settings, path)
            orders = self._orders[key] = _orders(recipe, layout.delimiter, self._settings)
        return orders

    def _run_for(self, recipe: Recipe, levels: int) -> _Run:
        """The run that a file of this recipe belongs to, with room for its levels."""
        if self._run is None or self._run.recipe is not recipe:
            self._finish_run()
            self._run = _Run(recipe)
        run, width = self._run, len(recipe.columns) + len(recipe.flags)
        needed = run.levels + levels
        if self._numbers.shape[0] != width or self._numbers.shape[1] < needed:
            more = np.empty((width, max(_FIRST_LEVELS, 2 * needed)))
            more[:, : run.levels] = self._numbers[:, : run.levels] if run.levels else 0.0
            self._numbers = more
        return run

    def _parse(self, data: bytes, form: _Form, first: int) -> tuple[int, NDArray[np.int64]] | None:
        """The place behind the last level, and where the labels of each cast stand; None where it is not plain."""
        kernels, numbers, orders = self._kernels, self._numbers, form.orders
        marks = np.frombuffer(data, np.uint8)
        labels = len(orders.label_names)
        cells = np.empty((_MOST_CASTS if labels else 1, labels, 2), np.int64)
        for point in self._points:
            if point == orders.delimiter:
                continue
            status, end, odd, groups = kernels.parse_rows(
                marks, len(form.prefix), orders.delimiter, point, orders.kinds, orders.label_kinds, numbers, first,
                self._odd, self._group_rows, cells, np.empty((labels, 2), np.int64),
            )  # fmt: skip
            if status != kernels.FINE or end == first:
                continue
            values = len(orders.recipe.columns)
            if not (
                self._settle_odd(data, int(odd), values, comma=point == ord(","))
                and not np.isnan(numbers[:values, first]).any()  # else a row of units might be meant
                and self._flags_known(form, first, int(end))
            ):
                continue
            self._points = (point, *(other for other in self._points if other != point))
            return int(end), cells[:groups]
        return None

    def _settle_odd(self, data: bytes, count: int, values: int, *, comma: bool) -> bool:
        """Numbers that the kernel left to Python, and words for 'no value'; False where there is anything else."""
        for level, column, begin, end in self._odd[:count].tolist():
            text = data[begin:end].decode("ascii")
            value = number_of(text, comma=comma, missing=self._settings.missing_words) if column < values else None
            if value is None:
                return False
            self._numbers[column, level] = value
        return True

    def _flags_known(self, form: _Form, first: int, end: int) -> bool:
        """Turn flags into those of QARTOD; False where one is not of its code."""
        for column, table in enumerate(form.orders.flag_tables, len(form.orders.recipe.columns)):
            found = self._numbers[column, first:end]
            blank = np.isnan(found)
            whole = np.where(blank, 0.0, found)
            if not ((whole >= 0.0) & (whole < table.size) & (whole == np.floor(whole))).all():
                return False
            flags = np.where(blank, np.int8(NOT_EVALUATED), table[whole.astype(np.intp)])
            if not flags.all():
                return False
            self._numbers[column, first:end] = flags
        return True

    def _about(self, path: str, data: bytes, form: _Form, cells: NDArray[np.int64]) -> list[About] | None:
        source = os.path.basename(path)  # noqa: PTH119  # a Path costs more than all the rest
        name = os.path.splitext(source)[0]  # noqa: PTH122
        if form.about is not None:
            return [replace(form.about, where=path, source=source, id=form.about.id or name)]
        texts = [
            {
                label: data[begin:end].decode("ascii").strip()
                for label, (begin, end) in zip(form.orders.label_names, places, strict=True)
            }
            for places in cells.tolist()
        ]
        if not all(all(one.values()) for one in texts):
            return None  # the first cell that is not empty stands in a later row
        ids = [one.get("id", "") for one in texts]
        if len(set(ids)) < len(ids):
            return None  # rows of a cast that do not stand together
        places = [path] if len(texts) == 1 else [f"{path}: cast {ident!r}" for ident in ids]
        try:
            abouts = [
                self._about_one(place, form.found, form.orders, one) for place, one in zip(places, texts, strict=True)
            ]
        except CastFileError:
            return None  # said again, with its line, by the other way
        return [replace(about, source=source, id=about.id or name) for about in abouts]

    def _about_one(self, where: str, found: Found, orders: _Orders, texts: dict[str, str]) -> About:
        """What the lines above the table and the cells of its columns say of a cast."""
        said = {
            label: (text, where)
            for label, text in texts.items()
            if label in {"latitude", "longitude"} or (label != "id" and says_when(text, label, orders.recipe))
        }
        return cast_about(
            {**found.metadata, **said},
            found,
            self._settings,
            where=where,
            source="",
            id=texts.get("id", ""),
            default="",
            notes=found.notes,
        )

    def _finish_run(self) -> None:
        """Turn the run into a block."""
        run, self._run = self._run, None
        if run is None or not run.row_size:
            return
        recipe = run.recipe
        if run.found:
            raw = Raw(
                {key: np.concatenate([one.numbers[key] for one in run.found]) for key in run.found[0].numbers},
                {key: np.concatenate([one.flags[key] for one in run.found]) for key in run.found[0].flags},
                np.array(run.row_size, np.int64),
            )
            self._parts.append(make_block(raw, recipe, self._settings, run.about))
            return
        columns = {column.index: self._numbers[row, : run.levels].copy() for row, column in enumerate(recipe.columns)}
        flags = {
            flag.index: self._numbers[row, : run.levels].astype(np.int8)
            for row, flag in enumerate(recipe.flags, len(recipe.columns))
        }
        raw = Raw(columns, flags, np.array(run.row_size, np.int64))
        self._parts.append(make_block(raw, recipe, self._settings, run.about))


def _orders(recipe: Recipe, delimiter: str, settings: Settings) -> _Orders:
    kinds = np.full(len(recipe.heads), -1, np.int64)
    places = [column.index for column in recipe.columns] + [flag.index for flag in recipe.flags]
    kinds[places] = np.arange(len(places))
    names = tuple(name for name in recipe.labels if name != "id" or settings.id is None)
    for number, name in enumerate(names):
        kinds[recipe.labels[name]] = -2 - number
    what = {"id": 1, "latitude": 2, "longitude": 2}
    tables = []
    for flag in recipe.flags:
        table = np.zeros(100, np.int8)
        for text, meaning in flag.codes.items():
            if text.isdecimal() and len(text) <= 2:
                table[int(text)] = meaning
        tables.append(table)
    return _Orders(
        recipe, ord(delimiter), kinds, names, np.array([what.get(name, 0) for name in names], np.int64), tuple(tables)
    )


def _joined(parts: Sequence[CastBlock | tuple[str, str]]) -> CastBlock:
    """Blocks laid end to end, with all that was left out."""
    blocks = [part for part in parts if isinstance(part, CastBlock)]
    left_out = [out for part in parts for out in (part.left_out if isinstance(part, CastBlock) else (part,))]
    if len(blocks) == 1 and len(left_out) == len(blocks[0].left_out):
        return blocks[0]
    blocks = [block for block in blocks if len(block)]
    names = [name for name in VARIABLES if any(name in block.values for block in blocks)]
    flagged = [
        name
        for name in names
        if any(name in block.flags for block in blocks) or not all(name in block.values for block in blocks)
    ]

    def together(pick: Callable[[CastBlock], NDArray[Any]], empty: Any) -> NDArray[Any]:
        return np.concatenate([pick(block) for block in blocks]) if blocks else np.empty(0, empty)

    def beside(which: str, otherwise: Any) -> dict[str, NDArray[Any]]:
        own = [getattr(block, which) for block in blocks]
        sizes = [int(block.starts[-1]) for block in blocks]
        return {
            name: np.concatenate(
                [mine.get(name, np.full(size, otherwise)) for mine, size in zip(own, sizes, strict=True)]
            )
            for name in names
            if any(name in mine for mine in own)
        }

    return CastBlock(
        row_size=together(lambda block: block.row_size, np.int64),
        values=beside("values", np.nan),
        flags={name: np.concatenate([_flag_column(block, name) for block in blocks]) for name in flagged},
        uncertainties=beside("uncertainties", np.nan),
        origins=beside("origins", np.int8(AS_MEASURED)),
        id=tuple(one for block in blocks for one in block.id),
        time=together(lambda block: block.time, "datetime64[ns]"),
        latitude=together(lambda block: block.latitude, np.float64),
        longitude=together(lambda block: block.longitude, np.float64),
        source=tuple(one for block in blocks for one in block.source),
        attributes=tuple(one for block in blocks for one in block.attributes),
        notes=tuple(one for block in blocks for one in block.notes),
        left_out=tuple(left_out),
    )


def _flag_column(block: CastBlock, name: str) -> NDArray[np.int8]:
    if name in block.flags:
        return block.flags[name]
    if name not in block.values:
        return np.full(int(block.starts[-1]), MISSING, np.int8)
    return np.where(np.isfinite(block.values[name]), NOT_EVALUATED, MISSING).astype(np.int8)
