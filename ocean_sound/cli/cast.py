"""`ocean-sound cast`: what a file of casts holds, and the sound-speed profile of one."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from . import _shared as shared

if TYPE_CHECKING:
    from collections.abc import Sequence

    from ..casts import Cast
    from ..profile import Features, Profile


@click.command("cast", short_help="Read a cast, summarise it, write its sound-speed profile.")
@click.argument("path", metavar="FILE", type=click.Path(path_type=Path))
@shared.options(
    shared.cast_option,
    shared.map_option,
    shared.equation_option,
    shared.salinity_option,
    click.option("--seabed-depth", type=float, help="Depth of the seabed, m, for the depth excess."),
    shared.output_option,
    shared.figure_option,
    shared.replace_option,
    shared.json_option,
)
def command(
    path: Path,
    which: str | None,
    mapping: Sequence[str],
    equation: str,
    salinity: float | None,
    seabed_depth: float | None,
    output: Path | None,
    figure: Path | None,
    replace: bool,
    as_json: bool,
) -> None:
    """Read a cast and say what it does to sound: its profile, layers, ducts and mean speeds.

    \b
    Examples:
      ocean-sound cast cast.csv --figure profile.png -o profile.nc
      ocean-sound cast casts.zip                 (lists the casts of a file with several)
      ocean-sound cast casts.zip --cast 3

    FILE is CSV, WHP-Exchange (CSV or ZIP), or Argo netCDF; the format is told from the content.
    """
    shared.check_outputs(output, figure, replace=replace)
    casts = shared.read_all(path, mapping)
    if which is None and len(casts) > 1 and output is None and figure is None:
        shared.show({"casts": [_about(cast) for cast in casts]}, _listing(casts), as_json=as_json)
        return
    cast = shared.pick(casts, path, which)
    profile = shared.profile_of(cast, path, equation=equation, salinity=salinity)
    features = profile.features(seabed_depth=seabed_depth)
    _write(profile, features, output, figure, replace=replace)
    notes = [*cast.notes, *(note for note in profile.notes if note not in cast.notes)]
    shared.tell(*(f"note: {note}" for note in notes))
    summary = {**_about(cast), "equation": profile.equation, "features": features.to_dict(), "notes": notes}
    shared.show(summary, _lines(cast, profile, features), as_json=as_json)


def _about(cast: Cast) -> dict[str, Any]:
    return {
        "cast_id": cast.id,
        "source_file": cast.source,
        "time": None if str(cast.time) == "NaT" else str(cast.time),
        "latitude": cast.latitude,
        "longitude": cast.longitude,
        "levels": len(cast),
        "variables": list(cast.values),
    }


def _listing(casts: Sequence[Cast]) -> list[str]:
    rows = [
        (
            cast.id,
            str(number),
            str(cast.time.astype("datetime64[m]")) if str(cast.time) != "NaT" else "unknown",
            f"{cast.latitude:.4f}",
            f"{cast.longitude:.4f}",
            str(len(cast)),
            ", ".join(cast.values),
        )
        for number, cast in enumerate(casts, 1)
    ]
    header = ("cast", "number", "time", "latitude", "longitude", "levels", "variables")
    return [f"{len(casts)} casts; choose one with --cast", "", *shared.table(header, rows)]


def _write(profile: Profile, features: Features, output: Path | None, figure: Path | None, *, replace: bool) -> None:
    from ..files import write_csv, write_dataset

    if output is not None and output.suffix.lower() == ".csv":
        write_csv(output, profile.columns(), replace=replace, preamble=profile.about())
    elif output is not None:
        write_dataset(profile.to_dataset(), output, replace=replace)
    if figure is not None:
        from ..figures import profile_figure, save_figure

        save_figure(profile_figure(profile, features=features), figure, replace=replace)


def _lines(cast: Cast, profile: Profile, features: Features) -> list[str]:
    return [
        repr(cast)[1:-1],
        repr(profile)[1:-1] + f", equation {profile.equation or 'none: speed as measured'}",
        "",
        *features.lines(),
    ]
