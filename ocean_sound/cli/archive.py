"""`ocean-sound archive`: build an archive of thousands of casts, ask it, take casts out of it."""

from __future__ import annotations

from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from . import IN_PART
from . import _shared as shared
from ._progress import progress

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    import numpy as np
    from numpy.typing import NDArray

    from ..archive import Archive, Built

# What is said of each stage of a build.
_STAGES = {"casts": "reading casts", "archive": "writing the archive"}
_SHOWN = 50  # lines of a table on standard error; the archive has them all

which_options = (
    click.option(
        "--box",
        nargs=4,
        type=float,
        metavar="W S E N",
        help="West, south, east, north, degrees; a west greater than east crosses the date line.",
    ),
    click.option("--from", "start", metavar="TIME", help="Earliest time, UTC, such as 2024-08-13 or 2024-08-13T10:05."),
    click.option("--to", "end", metavar="TIME", help="Latest time, UTC; a date means its first moment."),
    click.option("--depth", type=float, help="Only casts that reach this depth, m."),
    click.option("--id", "ids", multiple=True, metavar="ID", help="The cast of this name; repeat for each."),
)


@click.group("archive", short_help="Build an archive of many casts, list it, extract from it.")
def command() -> None:
    """Thousands of casts in one CF netCDF file, each with its sound speed, flags and source.

    \b
    Examples:
      ocean-sound archive build casts/ -o archive.nc
      ocean-sound archive list archive.nc --box 170 -20 -170 10 --depth 1000
      ocean-sound archive extract archive.nc --from 2024-08 --to 2024-09 -o august.csv
    """


@command.command("build", short_help="Read, check and archive every cast under some paths.")
@click.argument("paths", metavar="PATH...", nargs=-1, required=True, type=click.Path(path_type=Path))
@shared.options(
    click.option(
        "-o", "--output", required=True, type=click.Path(path_type=Path), help="The archive to write, netCDF (.nc)."
    ),
    click.option("--workers", type=int, help="Processes; one for each processor if not given, 0 for none but this."),
    click.option(
        "--scheduler", metavar="ADDRESS", help="A dask scheduler whose workers do it, e.g. tcp://10.0.0.5:8786."
    ),
    click.option("--resume", is_flag=True, help="Go on with the same build where it was interrupted."),
    shared.replace_option,
    click.option("--append", is_flag=True, help="Put the casts behind those of an existing archive."),
    click.option("--compress", type=click.IntRange(0, 9), default=0, show_default=True, help="zlib level."),
    shared.equation_option,
    click.option(
        "--thresholds",
        default="ocean",
        show_default=True,
        metavar="SET",
        help="By what casts are checked: ocean, coast, estuary, lake, a TOML file, or 'none'.",
    ),
    shared.salinity_option,
    click.option("--title", default="", help="Title of the archive."),
    shared.figure_option,
    shared.json_option,
    shared.debug_option,
)
def build(
    paths: Sequence[Path],
    output: Path,
    workers: int | None,
    scheduler: str | None,
    resume: bool,
    replace: bool,
    append: bool,
    compress: int,
    equation: str,
    thresholds: str,
    salinity: float | None,
    title: str,
    figure: Path | None,
    as_json: bool,
) -> int:
    """Read every cast under some files and folders, check it, give it its sound speed, and write all as one archive.

    \b
    Examples:
      ocean-sound archive build casts/ -o archive.nc
      ocean-sound archive build argo/ ctd.zip -o archive.nc --workers 8 --compress 1
      ocean-sound archive build casts/ -o archive.nc --resume      (after an interruption)
      ocean-sound archive build new/ -o archive.nc --append --figure archive.png

    Folders are walked and ZIP files opened; inputs are never touched. Whatever can't be read is left out and named with
    the reason, in the archive too, and the exit status is then 3. An existing archive stays as it is until the new one
    is complete. The workers of a dask cluster must see all files under the same paths.
    """
    from ..archive import build_archive

    if figure is not None:
        from ..figures import check_picture

        check_picture(figure, replace=replace)
    with _kept_when_interrupted(), progress(quiet=as_json) as told:
        built = build_archive(
            paths,
            output,
            equation=equation,
            thresholds=thresholds if thresholds != "none" else "ocean",
            check=thresholds != "none",
            salinity=salinity,
            compression=compress,
            workers=workers,
            scheduler=scheduler,
            resume=resume,
            replace=replace,
            append=append,
            title=title,
            progress=lambda step: told(_STAGES[step.stage], 100.0 * step.share, 100.0, count=step.casts, unit="casts"),
        )
    if figure is not None:
        _draw(output, figure, replace=replace)
    status = IN_PART if built.left_out else 0
    _tell_pairs(built)
    if built.left_out:
        rows = [(one or "?", which or "(all of it)", why) for one, which, why in built.left_out[:_SHOWN]]
        shared.tell(f"left out: {len(built.left_out)}", *_plain_table(("file", "cast", "reason"), rows))
        if len(built.left_out) > _SHOWN:
            shared.tell(f"... and {len(built.left_out) - _SHOWN} more: see the group left_out of {output}")
    shared.show({**built.to_dict(), "exit_status": status}, _built_lines(built), as_json=as_json)
    return status


@command.command("list", short_help="List the casts of an archive.")
@click.argument("path", metavar="ARCHIVE", type=click.Path(path_type=Path))
@shared.options(*which_options, shared.json_option, shared.debug_option)
def list_casts(
    path: Path,
    box: tuple[float, float, float, float] | None,
    start: str | None,
    end: str | None,
    depth: float | None,
    ids: tuple[str, ...],
    as_json: bool,
) -> None:
    """List the casts of an archive, or those in a box, a span of time, down to a depth, of some names.

    \b
    Examples:
      ocean-sound archive list archive.nc
      ocean-sound archive list archive.nc --box 170 -20 -170 10        (across the date line)
      ocean-sound archive list archive.nc --from 2024-08-13 --depth 1000 --json
    """
    from ..archive import open_archive

    with open_archive(path) as archive:
        positions = _chosen(archive, box, start, end, depth, ids)
        rows = _rows(archive, positions)
        shared.show(
            {"archive": str(path), "casts_in_archive": len(archive), "casts": rows},
            _listing(rows, len(archive)),
            as_json=as_json,
        )


@command.command("extract", short_help="Take casts out of an archive, to netCDF or CSV.")
@click.argument("path", metavar="ARCHIVE", type=click.Path(path_type=Path))
@shared.options(
    *which_options,
    click.option(
        "-o",
        "--output",
        required=True,
        type=click.Path(path_type=Path),
        help="Write these casts: an archive (.nc) or one table (.csv), by its ending.",
    ),
    shared.replace_option,
    shared.json_option,
    shared.debug_option,
)
def extract(
    path: Path,
    box: tuple[float, float, float, float] | None,
    start: str | None,
    end: str | None,
    depth: float | None,
    ids: tuple[str, ...],
    output: Path,
    replace: bool,
    as_json: bool,
) -> None:
    """Take casts out of an archive: all, or those in a box, a span of time, down to a depth, of some names.

    \b
    Examples:
      ocean-sound archive extract archive.nc --box 170 -20 -170 10 -o pacific.nc
      ocean-sound archive extract archive.nc --id C0042 -o C0042.csv
    """
    from ..archive import extract as take_out
    from ..archive import open_archive

    with open_archive(path) as archive:
        positions = _chosen(archive, box, start, end, depth, ids)
        levels = take_out(archive, positions, output, replace=replace)
    shared.show(
        {"archive": str(path), "output": str(output), "casts": len(positions), "levels": levels},
        [f"{output}: {len(positions)} casts, {levels} levels"],
        as_json=as_json,
    )


@contextmanager
def _kept_when_interrupted() -> Iterator[None]:
    try:
        yield
    except KeyboardInterrupt:
        shared.tell("what is finished is kept: the same command with --resume goes on with it")
        raise


def _chosen(
    archive: Archive,
    box: tuple[float, float, float, float] | None,
    start: str | None,
    end: str | None,
    depth: float | None,
    ids: tuple[str, ...],
) -> NDArray[np.int64]:
    from ..archive import Wanted

    return archive.select(Wanted(box=box, start=start, end=end, depth=depth, ids=ids or None))


def _rows(archive: Archive, positions: NDArray[np.int64]) -> list[dict[str, Any]]:
    layers = archive.column("sonic_layer_depth")
    return [
        {
            "cast_id": archive.id[position],
            "time": None
            if str(archive.time[position]) == "NaT"
            else str(archive.time[position].astype("datetime64[s]")),
            "latitude": float(archive.latitude[position]),
            "longitude": float(archive.longitude[position]),
            "levels": int(archive.row_size[position]),
            "deepest_depth": float(archive.deepest[position]),
            "sonic_layer_depth": float(layers[position]),
            "source_file": archive.source[position],
        }
        for position in positions.tolist()
    ]


def _listing(rows: Sequence[dict[str, Any]], total: int) -> list[str]:
    def number(value: float, form: str) -> str:
        return "-" if value != value else format(value, form)  # noqa: PLR0124  # NaN

    cells = [
        (
            row["cast_id"],
            (row["time"] or "-").replace("T", " "),
            number(row["latitude"], ".4f"),
            number(row["longitude"], ".4f"),
            str(row["levels"]),
            number(row["deepest_depth"], ".1f"),
            number(row["sonic_layer_depth"], ".1f"),
            row["source_file"],
        )
        for row in rows
    ]
    header = ("cast", "time", "latitude", "longitude", "levels", "deepest (m)", "sonic layer (m)", "file")
    return [*shared.table(header, cells), "", f"{len(rows)} of {total} casts"]


def _plain_table(header: Sequence[str], rows: Sequence[Sequence[str]]) -> list[str]:
    """Texts in columns, all to the left."""
    widths = [max(len(row[i]) for row in (header, *rows)) for i in range(len(header))]
    return [
        "  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip()
        for row in (header, *rows)
    ]


def _tell_pairs(built: Built) -> None:
    for pairs, words in ((built.duplicates, "repeats"), (built.near, "is near, in place and time, to")):
        shared.tell(*(f"note: {later} {words} {earlier}" for later, earlier in pairs[:_SHOWN]))
        if len(pairs) > _SHOWN:
            shared.tell(f"note: ... and {len(pairs) - _SHOWN} more of these")


def _draw(output: Path, figure: Path, *, replace: bool) -> None:
    from ..archive import open_archive
    from ..figures import save_figure
    from ..figures.archive import archive_figure

    with open_archive(output) as archive:
        save_figure(archive_figure(archive), figure, replace=replace)


def _built_lines(built: Built) -> list[str]:
    rate = built.casts / built.seconds if built.seconds > 0 else 0.0
    return [
        f"{built.path}: {built.casts} casts, {built.levels} levels, from {built.files} files",
        f"in {built.seconds:.1f} s ({rate:,.0f} casts/s)",
        f"left out: {len(built.left_out)}; without a speed: {built.without_speed}; "  # noqa: ISC004
        f"repeated: {len(built.duplicates)}; near repeats: {len(built.near)}",
    ]
