"""`ocean-sound cast`: what a file of casts holds; one cast checked, completed, made a profile, compared, thinned."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from . import _casts as steps
from . import _shared as shared

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray

    from ..casts import Cast
    from ..profile import Features, Profile


@click.command("cast", short_help="Read, check, complete, compare or thin a cast; write its sound-speed profile.")
@click.argument("path", metavar="FILE", type=click.Path(path_type=Path))
@shared.options(
    shared.cast_option,
    shared.map_option,
    shared.equation_option,
    shared.instrument_option,
    steps.checking,
    steps.completing,
    click.option("--seabed-depth", type=float, help="Depth of the seabed, m, for the depth excess."),
    click.option("--compare", "other", type=shared.FILE, help="Another cast: what soundings of its water suffer."),
    steps.thinning,
    shared.output_option,
    shared.figure_option,
    shared.replace_option,
    shared.json_option,
    shared.debug_option,
)
def command(
    path: Path,
    which: str | None,
    mapping: Sequence[str],
    equation: str,
    instrument: str | None,
    other: Path | None,
    output: Path | None,
    figure: Path | None,
    replace: bool,
    as_json: bool,
    **asked: Any,
) -> None:
    """Read a cast and say what it does to sound: its profile, layers, ducts and mean speeds.

    \b
    Examples:
      ocean-sound cast cast.csv --figure profile.png -o profile.nc
      ocean-sound cast casts.zip                 (lists the casts of a file with several)
      ocean-sound cast casts.zip --cast 3 --check --figure sheet.png
      ocean-sound cast xbt.csv --climatology levels.nc --grid-temperature in-situ --to-depth 3000
      ocean-sound cast morning.csv --compare evening.csv --figure comparison.png
      ocean-sound cast cast.csv --thin 0.005 --template sounder.toml -o levels.txt

    FILE is CSV, WHP-Exchange, Argo, World Ocean Database or CF netCDF, or a ZIP of text files; the format is told from
    the content. A table that leaves something open is settled by --map, or by a small TOML beside it.
    """
    if asked["template"] is None:
        shared.check_outputs(output, figure, replace=replace)
    elif output is None:
        raise click.UsageError("--template says how to write a file: name the file with -o")
    else:
        shared.check_outputs(None, figure, replace=replace)
    casts = shared.read_all(path, mapping)
    if which is None and len(casts) > 1 and output is None and figure is None:
        shared.show({"casts": [_about(cast) for cast in casts]}, _listing(casts), as_json=as_json)
        return
    cast = shared.pick(casts, path, which)
    checked = steps.checked(cast, **_only(asked, "with_check", "thresholds", "verdicts"))
    cast = _completed(checked.cast, path, asked)
    if other is not None:
        _compare(cast, other, equation, asked, output, figure, replace=replace, as_json=as_json)
        return
    whole = shared.profile_of(cast, path, equation=equation, salinity=None, instrument=instrument)
    features = whole.features(seabed_depth=asked["seabed_depth"])
    place = _only(asked, "max_angle", "transducer_depth")
    fewer = {} if asked["template"] is not None else _only(asked, "tolerance", "levels")
    profile, said = steps.thinned(whole, **_only(asked, "thickness", "scale"), **fewer, **place)
    if asked["template"] is not None:
        said += _hand_over(profile, output, asked, replace=replace)
    else:
        _write(profile, output, replace=replace)
    if figure is not None:
        _draw(checked, whole, features, figure, replace=replace)
    notes = [*cast.notes, *(note for note in profile.notes if note not in cast.notes)]
    shared.tell(*(f"note: {note}" for note in notes))
    summary = {
        **_about(cast),
        "equation": profile.equation,
        "profile_levels": len(profile),
        "features": features.to_dict(),
        "effects_on_beams": said,
        "checks": None if checked.report is None else checked.report.counts(),
        "notes": notes,
    }
    shared.show(summary, _lines(checked, cast, profile, features, said), as_json=as_json)


def _only(asked: dict[str, Any], *names: str) -> dict[str, Any]:
    return {name: asked[name] for name in names}


def _completed(cast: Cast, path: Path, asked: dict[str, Any]) -> Cast:
    names = ("salinity", "neighbour", "climatology", "grid_temperature", "grid_salinity", "to_depth")
    with shared.about(path):
        return steps.completed(cast, **_only(asked, *names))


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


def _write(profile: Profile, output: Path | None, *, replace: bool) -> None:
    from ..files import write_csv, write_dataset

    if output is not None and output.suffix.lower() == ".csv":
        write_csv(output, profile.columns(), replace=replace, preamble=profile.about())
    elif output is not None:
        write_dataset(profile.to_dataset(), output, replace=replace)


def _hand_over(profile: Profile, output: Path | None, asked: dict[str, Any], *, replace: bool) -> list[str]:
    from ..soundings import hand_over

    if output is None:
        return []
    given = {} if asked["tolerance"] is None else {"tolerance": asked["tolerance"]}
    done = hand_over(
        profile,
        output,
        template=asked["template"],
        max_levels=asked["levels"],
        max_angle=asked["max_angle"],
        transducer_depth=asked["transducer_depth"],
        overwrite=replace,
        **given,
    )
    return [f"as printed, {len(done.profile)} levels: {done.guarantee}"]


def _draw(checked: steps.Checked, profile: Profile, features: Features, figure: Path, *, replace: bool) -> None:
    from ..figures import cast_sheet_figure, profile_figure, save_figure

    if checked.report is None:
        picture = profile_figure(profile, features=features)
    else:
        picture = cast_sheet_figure(checked.cast, profile, features, checked.report)
    save_figure(picture, figure, replace=replace)


def _lines(checked: steps.Checked, cast: Cast, profile: Profile, features: Features, said: Sequence[str]) -> list[str]:
    lines = [repr(cast)[1:-1], repr(profile)[1:-1] + f", equation {profile.equation or 'none: speed as measured'}"]
    if checked.report is not None:
        lines += ["", f"Checked by the thresholds '{checked.report.thresholds}':", *checked.report.lines()]
    return [*lines, "", *features.lines(), *(["", *said] if said else [])]


def _compare(
    cast: Cast,
    other: Path,
    equation: str,
    asked: dict[str, Any],
    output: Path | None,
    figure: Path | None,
    *,
    replace: bool,
    as_json: bool,
) -> None:
    from ..soundings import compare

    second = shared.pick(shared.read_all(other, ()), other, None)
    with shared.about(other):
        found = compare(
            cast, second, equation=equation, salinity=asked["salinity"], transducer_depth=asked["transducer_depth"]
        )
    if output is not None:
        from ..files import write_csv, write_dataset

        if output.suffix.lower() == ".csv":
            on_depth = [name for name in found.variables if found[name].dims == ("depth",)]
            write_csv(
                output, {f"{name} [{found[name].units}]": found[name].values for name in on_depth}, replace=replace
            )
        else:
            write_dataset(found, output, replace=replace)
    if figure is not None:
        from ..figures import comparison_figure, save_figure

        save_figure(comparison_figure(found), figure, replace=replace)
    shared.show(_comparison(cast, second, found), _comparison_lines(cast, second, found), as_json=as_json)


def _comparison(cast: Cast, second: Cast, found: xarray.Dataset) -> dict[str, Any]:
    return {
        "corrected_with": cast.id,
        "water": second.id,
        **{name: {"values": found[name].values, "dimensions": found[name].dims} for name in map(str, found.variables)},
    }


def _comparison_lines(cast: Cast, second: Cast, found: xarray.Dataset) -> list[str]:
    """The errors of soundings, as a table of depth against angle."""
    difference = found.speed_difference
    at = float(difference.depth[int(abs(difference.values).argmax())])
    lines = [
        f"Soundings of the water of {second.id}, corrected with {cast.id}",
        f"largest difference of speed {float(difference.sel(depth=at)):+.2f} m/s at {at:.0f} m",
    ]
    for name, what in (("depth_error", "depth error, m"), ("across_track_error", "across-track error, m")):
        header = ("seabed m", *(f"{angle:g}°" for angle in found.angle.values))
        rows = [
            (f"{depth:.0f}", *(f"{value:+.3f}" for value in found[name].sel(sounding_depth=depth).values))
            for depth in found.sounding_depth.values
        ]
        lines += ["", f"{what}, by angle from the vertical:", *shared.table(header, rows)]
    return lines
