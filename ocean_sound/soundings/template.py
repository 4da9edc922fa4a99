"""How levels are written for an echo sounder: a format of the user's own, in a small TOML."""

from __future__ import annotations

import difflib
import string
import tomllib
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError, PlanError

if TYPE_CHECKING:
    from collections.abc import Mapping
    from os import PathLike

    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

LEVEL_FIELDS = ("number", "depth", "speed")
HEADER_FIELDS = ("id", "time", "latitude", "longitude", "levels", "deepest")
_LINE_ENDINGS = {"lf": "\n", "crlf": "\r\n"}
_KEYS = {"level": "a text", "header": "a list of texts", "footer": "a list of texts", "line_ending": "'lf' or 'crlf'",
         "decimal": "'.' or ','"}  # fmt: skip
_SAMPLE = {"number": 1, "depth": 1234.5678, "speed": 1500.1234}
_SAMPLE_HEADER = {"id": "", "time": np.datetime64("2026-01-31T12:00").item(), "latitude": 1.0, "longitude": 1.0,
                  "levels": 2, "deepest": 100.0}  # fmt: skip


@dataclass(frozen=True)
class Template:
    """How a file for an echo sounder is written.

    Parameters
    ----------
    level : str
        The line of a level, in the format language of Python, of the fields `depth` (m), `speed` (m/s) and `number`
        (from 1): such as ``"{depth:.1f},{speed:.2f}"``.
    header, footer : tuple of str
        The lines before and after, which may have the fields `id`, `time` (UTC), `latitude`, `longitude`, `levels` (how
        many) and `deepest` (m): such as ``"{time:%Y-%m-%d} {levels:d}"``.
    line_ending : str
        "lf" or "crlf".
    decimal : str
        What stands before the decimals, "." or ",", in the lines of levels.

    Raises
    ------
    PlanError
        If a field is unknown or can't be formatted so, or `depth` or `speed` is missing.

    Examples
    --------
    >>> template = Template("{depth:.1f} {speed:.2f}", header=("levels {levels}",))
    >>> template.printed([0.04, 10.0], [1500.123, 1500.0])
    (array([ 0., 10.]), array([1500.12, 1500.  ]))
    """

    level: str
    header: tuple[str, ...] = ()
    footer: tuple[str, ...] = ()
    line_ending: str = "lf"
    decimal: str = "."
    _formats: dict[str, str] = field(init=False, repr=False, compare=False, default_factory=dict)

    def __post_init__(self) -> None:
        if self.line_ending not in _LINE_ENDINGS:
            raise PlanError(f"field 'line_ending' is {self.line_ending!r}: give {_KEYS['line_ending']}")
        if self.decimal not in (".", ","):
            raise PlanError(f"field 'decimal' is {self.decimal!r}: give {_KEYS['decimal']}")
        for name in ("header", "footer"):
            for line in getattr(self, name):
                _formats_of(line, name, HEADER_FIELDS, _SAMPLE_HEADER)
        formats = _formats_of(self.level, "level", LEVEL_FIELDS, _SAMPLE)
        for name in ("depth", "speed"):
            if name not in formats:
                raise PlanError(f"field 'level' is {self.level!r}: it must have {{{name}}}, such as {{{name}:.2f}}")
            try:
                float(format(_SAMPLE[name], formats[name]))
            except ValueError:
                raise PlanError(
                    f"field 'level' is {self.level!r}: {{{name}:{formats[name]}}} prints no plain number; "
                    f"{{{name}:.2f}} would be right"
                ) from None
        self._formats.update(formats)

    def printed(self, depth: Any, speed: Any) -> tuple[Floats, Floats]:
        """The numbers that a reader of the file finds for these depths and speeds."""
        columns = []
        for name, column in (("depth", depth), ("speed", speed)):
            spec = self._formats[name]
            columns.append(np.array([float(format(value, spec)) for value in np.asarray(column, float).tolist()]))
        return columns[0], columns[1]

    def lines(self, depth: Floats, speed: Floats, about: Mapping[str, Any]) -> str:
        """The whole text of a file.

        Raises
        ------
        InputError
            If a line asks for a time or position that is not known.

        """
        known = {**about, "levels": depth.size, "deepest": float(depth[-1])}
        for line in (*self.header, *self.footer):
            for _, name, _, _ in string.Formatter().parse(line):
                if name is not None and known.get(name) is None:
                    raise InputError(
                        f"the template asks for {{{name}}} in {line!r}, which is not known of this profile: "
                        "give the profile one, or take the field out"
                    )
        rows = [
            self._level_line(number, *level)
            for number, level in enumerate(zip(depth.tolist(), speed.tolist(), strict=True), start=1)
        ]
        before, after = ([line.format_map(known) for line in lines] for lines in (self.header, self.footer))
        end = _LINE_ENDINGS[self.line_ending]
        return end.join([*before, *rows, *after, ""])

    def _level_line(self, number: int, depth: float, speed: float) -> str:
        values = {"number": number, "depth": depth, "speed": speed}
        parts = []
        for literal, name, spec, _ in string.Formatter().parse(self.level):
            parts.append(literal)
            if name is not None:
                parts.append(format(values[name], spec or "").replace(".", self.decimal))
        return "".join(parts)


def read_template(path: str | PathLike[str]) -> Template:
    r"""Read a template from a TOML file.

    Parameters
    ----------
    path : path-like
        A TOML file with the fields of `Template`, of which only `level` is needed.

    Returns
    -------
    Template

    Raises
    ------
    PlanError
        If the file can't be read, is not TOML, or a field is missing, unknown or impossible.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = Path(folder) / "sounder.toml"
    ...     _ = path.write_text('level = "{depth:8.2f};{speed:8.2f}"\nline_ending = "crlf"\n')
    ...     read_template(path).line_ending
    'crlf'
    """
    try:
        with Path(path).open("rb") as file:
            fields = tomllib.load(file)
    except OSError as error:
        raise PlanError(f"{path}: can't be read: {error.strerror or error}") from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise PlanError(f"{path}: is not TOML: {error}") from error
    for name, value in fields.items():
        if name not in _KEYS:
            near = difflib.get_close_matches(name, _KEYS, n=1)
            hint = f"did you mean '{near[0]}'?" if near else f"known here: {', '.join(_KEYS)}"
            raise PlanError(f"{path}: field '{name}' is unknown: {hint}")
        many = name in ("header", "footer")
        texts = value if many and isinstance(value, list) else [value]
        if many != isinstance(value, list) or not all(isinstance(text, str) for text in texts):
            raise PlanError(f"{path}: field '{name}' is {value!r}: give {_KEYS[name]}")
    if "level" not in fields:
        raise PlanError(f"{path}: field 'level' is missing: give a text such as \"{{depth:.2f}} {{speed:.2f}}\"")
    try:
        settled: dict[str, Any] = {key: tuple(of) if isinstance(of, list) else of for key, of in fields.items()}
        return Template(**settled)
    except PlanError as error:
        raise PlanError(f"{path}: {error}") from None


def _formats_of(line: str, where: str, known: tuple[str, ...], sample: Mapping[str, Any]) -> dict[str, str]:
    """The fields of a line with their formats; nothing but plain names and formats that work."""
    formats: dict[str, str] = {}
    try:
        parts = list(string.Formatter().parse(line))
    except ValueError as error:
        raise PlanError(f"field '{where}' is {line!r}: {error}") from None
    for _, name, spec, conversion in parts:
        if name is None:
            continue
        if name not in known or conversion or "{" in (spec or ""):
            raise PlanError(f"field '{where}' is {line!r}: {{{name}}} is unknown there; known are {', '.join(known)}")
        if name in formats and where == "level":
            raise PlanError(f"field '{where}' is {line!r}: {{{name}}} stands there twice")
        try:
            format(sample[name], spec or "")
        except ValueError as error:
            raise PlanError(f"field '{where}' is {line!r}: {{{name}:{spec}}} can't be: {error}") from None
        formats[name] = spec or ""
    if "\n" in line or "\r" in line:
        raise PlanError(f"field '{where}' is {line!r}: it must be one line")
    return formats
