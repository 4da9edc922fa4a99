"""What the commands share: options that mean the same everywhere, and how results are shown."""

from __future__ import annotations

import json
import math
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from ..errors import InputError

if TYPE_CHECKING:
    from ..casts import Cast
    from ..profile import Profile

FILE = click.Path(path_type=Path)

Decorator = Callable[[Callable[..., Any]], Callable[..., Any]]

json_option = click.option("--json", "as_json", is_flag=True, help="Print the summary as one JSON object.")
output_option = click.option(
    "-o",
    "--output",
    type=click.Path(path_type=Path),
    help="Write the result: netCDF (.nc) or CSV (.csv), by its ending.",
)
figure_option = click.option(
    "--figure", type=click.Path(path_type=Path), help="Draw the result: PNG, SVG or PDF, by its ending."
)
replace_option = click.option("--replace", is_flag=True, help="Overwrite existing outputs.")
debug_option = click.option("--debug", is_flag=True, expose_value=False, help="Show the traceback of an error.")
equation_option = click.option(
    "--equation",
    default="teos10",
    show_default=True,
    help="Sound-speed equation; 'ocean-sound speed --help' lists them.",
)
map_option = click.option(
    "--map",
    "mapping",
    multiple=True,
    metavar="NAME=COLUMN",
    help="Which column of a CSV is what, e.g. --map temperature=T1; repeat for each.",
)
cast_option = click.option(
    "--cast", "which", metavar="ID", help="Which cast of a file with several: its id, or its number from 1."
)
instrument_option = click.option(
    "--instrument",
    type=click.Choice(["float", "ctd", "xbt"]),
    help="Whose stated accuracy to take for the uncertainty; else float's, or xbt's where the cast says so.",
)
salinity_option = click.option(
    "--salinity", type=float, help="Salinity to assume for a cast without one (practical salinity)."
)


def options(*decorators: Decorator) -> Decorator:
    """Stack options so that the help shows them in the order given."""

    def decorate(function: Callable[..., Any]) -> Callable[..., Any]:
        for decorator in reversed(decorators):
            function = decorator(function)
        return function

    return decorate


def parse_mapping(pairs: Sequence[str]) -> dict[str, str] | None:
    """Turn repeated NAME=COLUMN options into a dict, or None if there are none."""
    mapping = {}
    for pair in pairs:
        name, sign, column = pair.partition("=")
        if not (sign and name.strip() and column.strip()):
            raise InputError(f"--map {pair!r} is not NAME=COLUMN: write for example --map temperature=T1")
        mapping[name.strip()] = column.strip()
    return mapping or None


def check_outputs(output: Path | None, figure: Path | None, *, replace: bool) -> None:
    """Refuse an output that could not be written before any work is done, so that nothing is left half done."""
    from ..files import check_output

    if output is not None:
        if output.suffix.lower() not in {".nc", ".csv"}:
            raise InputError(f"-o {output}: the ending must be .nc (netCDF) or .csv")
        check_output(output, replace=replace)
    if figure is not None:
        from ..figures import figure_format

        figure_format(figure)
        check_output(figure, replace=replace)


def read_all(path: Path, mapping: Sequence[str]) -> list[Cast]:
    """All casts of a file; what the file holds beside them is told."""
    from ..casts import read_blocks

    casts: list[Cast] = []
    for block in read_blocks(path, mapping=parse_mapping(mapping)):
        casts.extend(block)
        tell(*(f"left out: {name}: {reason}" for name, reason in block.left_out))
    if not casts:
        raise InputError(f"{path}: holds no cast that can be read")
    return casts


def pick(casts: Sequence[Cast], path: Path, which: str | None) -> Cast:
    """The one cast of a file, or the one asked for by id or by number."""
    named = [cast for cast in casts if cast.id == which]
    if len(named) == 1:
        return named[0]
    if which is not None and which.isdigit() and 1 <= int(which) <= len(casts):
        return casts[int(which) - 1]
    if which is None and len(casts) == 1:
        return casts[0]
    listed = ", ".join(cast.id for cast in casts[:5]) + (", ..." if len(casts) > 5 else "")
    asked = "say which with --cast" if which is None else f"none or several of them are '{which}'"
    raise InputError(f"{path}: holds {len(casts)} casts: {asked}, by id ({listed}) or by number from 1")


@contextmanager
def about(path: Path) -> Iterator[None]:
    """What is wrong with a cast is said of its file."""
    try:
        yield
    except InputError as error:
        raise InputError(f"{path}: {error}") from None


def profile_of(
    cast: Cast, path: Path, *, equation: str, salinity: float | None, instrument: str | None = None
) -> Profile:
    """The sound-speed profile of a cast."""
    from ..profile import Profile

    with about(path):
        return Profile.from_cast(cast, equation=equation, salinity=salinity, accuracy=instrument)


def profile_in(
    path: Path,
    *,
    which: str | None,
    mapping: Sequence[str],
    equation: str,
    salinity: float | None,
    instrument: str | None = None,
) -> Profile:
    """The sound-speed profile of one cast in a file."""
    cast = pick(read_all(path, mapping), path, which)
    return profile_of(cast, path, equation=equation, salinity=salinity, instrument=instrument)


def plain(value: Any) -> Any:
    """A value as JSON has it: numpy made plain, NaN and infinities null."""
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if hasattr(value, "tolist"):
        value = value.tolist()
    if isinstance(value, (list, tuple)):
        return [plain(item) for item in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None
    if value is None or isinstance(value, (bool, int, float, str)):
        return value
    return str(value)


def show(summary: Mapping[str, Any], lines: Sequence[str], *, as_json: bool) -> None:
    """Print a result on standard output: the summary as one JSON object, or the lines for a person."""
    if as_json:
        click.echo(json.dumps(plain(summary), indent=2, allow_nan=False, ensure_ascii=False))
    else:
        for line in lines:
            click.echo(line)


def tell(*lines: str) -> None:
    """Say something beside the result, on standard error."""
    for line in lines:
        click.echo(line, err=True)


def table(header: Sequence[str], rows: Sequence[Sequence[str]]) -> list[str]:
    """Lines of a plain table, columns aligned to the right but for the first."""
    widths = [max(len(row[i]) for row in (header, *rows)) for i in range(len(header))]

    def line(cells: Sequence[str]) -> str:
        rest = (cell.rjust(width) for cell, width in zip(cells[1:], widths[1:], strict=True))
        return "  ".join((cells[0].ljust(widths[0]), *rest)).rstrip()

    return [line(header), "  ".join("-" * width for width in widths), *(line(row) for row in rows)]
