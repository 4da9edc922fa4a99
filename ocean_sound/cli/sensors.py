"""`ocean-sound sensors`: where to put sensors, what they hear and what they miss."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from ..errors import InputError
from . import _shared as shared
from ._progress import progress

if TYPE_CHECKING:
    from pathlib import Path

    from ..sensors.planning import SensorPlan


@click.command("sensors", short_help="Choose places for sensors; say what they hear and miss.")
@click.argument("path", metavar="PLAN", type=shared.FILE)
@shared.options(
    click.option("-o", "--output", type=shared.FILE, help="Write the result as netCDF (.nc)."),
    click.option("--geojson", type=shared.FILE, help="Write sensors, their reach and what is covered as GeoJSON."),
    click.option("--figure", type=shared.FILE, help="Draw the map of what is covered: PNG, SVG or PDF, by its ending."),
    click.option(
        "--report", type=shared.FILE, help="Write one page (.html) of tables and figures that needs no network."
    ),
    shared.replace_option,
    shared.json_option,
    shared.debug_option,
)
def command(
    path: Path,
    output: Path | None,
    geojson: Path | None,
    figure: Path | None,
    report: Path | None,
    replace: bool,
    as_json: bool,
) -> None:
    """Choose the best few of many places for sensors, and say what they hear over an area, how far, and why not.

    \b
    Examples:
      ocean-sound sensors plan.toml
      ocean-sound sensors plan.toml -o coverage.nc --geojson coverage.geojson
      ocean-sound sensors plan.toml --report plan.html

    PLAN is a TOML file: the water, the seabed, the area, what is to be heard, the receiver, the noise, where sensors
    may go, how many. Losses are kept in the plan's folder for them, if it names one: a change of threshold, noise or
    number computes none again, and a run that was stopped goes on where it was.

    A plan is as good as the water, noise and threshold it is given; local rules on permits, marine mammals and
    navigation, and licensed practice, come first.
    """
    from .._numba import spare_scipy

    spare_scipy()
    from ..plans import read_sensors_plan
    from ..sensors.planning import place_sensors
    from ._sensors import inputs_of, task_of

    _check_outputs(output, geojson, replace=replace)
    _check_shown(figure, report, replace=replace)
    plan = read_sensors_plan(path)
    task, notes = task_of(plan, path)
    shared.tell(*(f"note: {note}" for note in notes))
    folder = None if plan.run.folder is None else path.parent / plan.run.folder
    with progress(quiet=as_json) as told:
        found = place_sensors(
            task,
            folder=folder,
            number=plan.run.workers,
            scheduler=plan.run.scheduler,
            progress=lambda done, of: told("losses along bearings", done, of),
        )
    shared.tell(*(f"note: {note}" for note in found.notes))
    if output is not None:
        from ..files import write_dataset

        about = {"plan_title": plan.title} | ({"acknowledgement": "\n".join(plan.credits)} if plan.credits else {})
        write_dataset(found.to_dataset().assign_attrs(about), output, replace=replace)
    if geojson is not None:
        from ..files.geojson import write_geojson

        write_geojson(geojson, found.to_geojson(), replace=replace)
    if figure is not None:
        from ..figures import coverage_map_figure, save_figure

        save_figure(
            coverage_map_figure(found.to_dataset(), level=found.level, title=plan.title), figure, replace=replace
        )
    if report is not None:
        from ..reports import sensors_report, write_report

        text = sensors_report(found, title=plan.title, inputs=inputs_of(plan, path), sources=plan.credits, notes=notes)
        write_report(report, text, replace=replace)
    summary = {"title": plan.title, **found.summary()}
    summary["notes"] = [*notes, *summary["notes"]]
    heading = [plan.title, ""] if plan.title else []
    shared.show(summary, heading + _lines(found, summary), as_json=as_json)


def _check_outputs(output: Path | None, geojson: Path | None, *, replace: bool) -> None:
    from ..files import check_output

    if output is not None and output.suffix.lower() != ".nc":
        raise InputError(f"-o {output}: the ending must be .nc (netCDF)")
    if geojson is not None and geojson.suffix.lower() not in {".geojson", ".json"}:
        raise InputError(f"--geojson {geojson}: the ending must be .geojson or .json")
    for goal in (output, geojson):
        if goal is not None:
            check_output(goal, replace=replace)


def _check_shown(figure: Path | None, report: Path | None, *, replace: bool) -> None:
    """Refuse a picture or page that could not be written; neither needs to be loaded where none is asked for."""
    if figure is not None:
        from ..figures import check_picture

        check_picture(figure, replace=replace)
    if report is not None:
        from ..reports.page import check_page

        check_page(report, replace=replace)


def _lines(found: SensorPlan, told: dict[str, Any]) -> list[str]:
    sections = told["sections"]
    waters = f"{told['waters']} water{'s' if told['waters'] > 1 else ''}"
    where = f"{told['cells']} cells over {told['area_km2']:.4g} km2"
    work = f"{sections['computed']} sections computed, {sections['kept']} from disk"
    lines = [f"{told['candidates']} candidates, {waters}, {where}; {work}", ""]
    heads = ["sensor", "latitude", "longitude", "depth m", "adds", "range km 10 %", "50 %", "90 %"]
    lines += [*shared.table(heads, [_row(sensor) for sensor in told["sensors"]]), ""]
    for at_once, share in told["covered"].items():
        if int(at_once) <= len(found.sensors):
            hear = "hears" if at_once == "1" else "hear"
            lines.append(
                f"At least {at_once} {hear} one with {told['probability']:.0%} or more over {share:.1%} of the area "
                f"(mean probability {told['mean_probability'][at_once]:.1%})"
            )
    for group, mean in told["mean_probability_by_group"].items():
        lines.append(f"  {group}: mean probability that one hears {mean:.1%}")
    if "choice" in told:
        choice = told["choice"]
        lines += ["", f"Choice: {choice['method']}; {'; '.join(choice['notes'])}"]
    if "why_deaf" in told:
        causes = [f"{name} {share:.1%}" for name, share in told["why_deaf"].items() if share > 0.0]
        lines += ["", f"Deaf by main cause: {', '.join(causes) or 'nowhere'}"]
    depths = found.task.area.depths
    if len(depths) > 1:
        lines.append(f"Over the depths {', '.join(f'{z:g}' for z in depths)} m, by their shares of the time")
    return [*lines, "", told["caution"]]


def _row(sensor: dict[str, Any]) -> list[str]:
    gain = "there" if sensor["existing"] else ("" if sensor["gain"] is None else f"{sensor['gain']:.1%}")
    reach = [f"{value / 1000.0:.2f}" for value in sensor["detection_range"].values()]
    return [
        sensor["name"], f"{sensor['latitude']:.4f}", f"{sensor['longitude']:.4f}", f"{sensor['depth']:.0f}", gain,
        *reach,
    ]  # fmt: skip
