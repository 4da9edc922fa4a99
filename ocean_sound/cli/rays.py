"""`ocean-sound rays`: paths of sound through the water of a cast, or all that a plan asks for."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from . import _shared as shared
from ._progress import progress

if TYPE_CHECKING:
    from ._rays import Asked

# Points along a path that make it smooth in a figure.
FIGURE_POINTS = 1001

_PHYSICS = (
    "source_depth", "max_range", "angles", "number", "seabed_depth", "max_surface_bounces", "max_seabed_bounces",
    "with_shadow", "points", "which", "mapping", "equation", "salinity", "instrument",
)  # fmt: skip


@click.command("rays", short_help="Rays, arrivals, loss and shadow zones, in a cast or a section.")
@click.argument("path", metavar="CAST_OR_PLAN", type=click.Path(path_type=Path))
@shared.options(
    click.option("--source-depth", type=float, help="Depth of the source, m."),
    click.option("--max-range", type=float, help="Horizontal distance to trace to, m."),
    click.option(
        "--angles",
        type=(float, float),
        default=(-20.0, 20.0),
        show_default=True,
        metavar="LOWEST HIGHEST",
        help="Launch angles, degrees from the horizontal, positive downward.",
    ),
    click.option("--rays", "number", type=int, default=41, show_default=True, help="How many rays, evenly spread."),
    click.option("--seabed-depth", type=float, help="Depth of a flat seabed, m; else the deepest level is the bottom."),
    click.option(
        "--max-surface-bounces",
        type=int,
        default=10_000,
        show_default=True,
        help="End a ray that would bounce off the surface more often.",
    ),
    click.option(
        "--max-seabed-bounces",
        type=int,
        default=10_000,
        show_default=True,
        help="End a ray that would bounce off the seabed more often.",
    ),
    click.option("--shadow", "with_shadow", is_flag=True, help="Find where refraction lets no ray arrive."),
    click.option("--points", type=int, default=0, help="Points sampled along each path for the output."),
    shared.cast_option,
    shared.map_option,
    shared.equation_option,
    shared.salinity_option,
    shared.instrument_option,
    shared.output_option,
    shared.figure_option,
    click.option(
        "--zones", type=click.Path(path_type=Path), help="Write shadow zones of a section on the Earth as GeoJSON."
    ),
    shared.replace_option,
    shared.json_option,
    shared.debug_option,
)
@click.pass_context
def command(
    context: click.Context,
    /,
    path: Path,
    output: Path | None,
    figure: Path | None,
    zones: Path | None,
    replace: bool,
    as_json: bool,
    **physics: Any,
) -> None:
    """Trace a fan of rays through the sound-speed profile of a cast, exactly for its layers; or do what a plan asks.

    \b
    Examples:
      ocean-sound rays cast.csv --source-depth 30 --max-range 10000 --shadow --figure rays.png
      ocean-sound rays plan.toml -o rays.nc --figure rays.png

    CAST_OR_PLAN is a cast file (CSV, WHP-Exchange, Argo netCDF, or what 'ocean-sound cast' wrote) or a TOML plan. With
    a plan the options for output remain; all else is said in the plan, which can ask for more: water and seabed that
    change along a track, arrivals at receivers, transmission loss, convergence zones, ensembles. Each further result is
    a group of the netCDF, and a figure of its own beside the one named.
    """
    from .._numba import spare_scipy
    from ..files import check_output, looks_like_toml

    spare_scipy()
    from . import _rays as rays

    shared.check_outputs(output, figure, replace=replace)
    planned = looks_like_toml(path)
    if planned:
        _refuse_physics(context)
    with progress(quiet=as_json) as told:
        asked = rays.from_plan(path) if planned else _from_options(path, physics)
        for further in rays.outputs(asked, output, figure):
            check_output(further, replace=replace)
        if zones is not None:
            rays.check_zones(asked, zones, replace=replace)
        points = asked.points or (FIGURE_POINTS if figure is not None else 0)
        found = rays.work(asked, points=points, told=told)
        rays.write(found, output, zones, replace=replace)
        if figure is not None:
            rays.draw(found, figure, replace=replace)
    notes = found.notes()
    shared.tell(*(f"note: {note}" for note in notes))
    heading = [asked.title, ""] if asked.title else []
    told_all = {"title": asked.title, **rays.summary(found, notes)}
    shared.show(told_all, heading + rays.lines(found), as_json=as_json)


def _refuse_physics(context: click.Context) -> None:
    """Two places that say the same thing would leave it open which holds."""
    said = click.core.ParameterSource.COMMANDLINE
    for parameter in context.command.params:
        if parameter.name in _PHYSICS and context.get_parameter_source(parameter.name) is said:
            raise click.UsageError(f"{parameter.opts[0]} goes with a cast file; with a plan, say it in the plan")


def _from_options(path: Path, physics: dict[str, Any]) -> Asked:
    from ..rays import GRID, even_angles
    from ._rays import Asked

    lowest, highest = physics["angles"]
    for name in ("source_depth", "max_range"):
        if physics[name] is None:
            option = "--" + name.replace("_", "-")
            raise click.UsageError(f"{option} is missing: rays need the depth of their source and a range to go to")
    return Asked(
        title="",
        water=shared.profile_in(
            path,
            which=physics["which"],
            mapping=physics["mapping"],
            equation=physics["equation"],
            salinity=physics["salinity"],
            instrument=physics["instrument"],
        ),
        source={name: physics[name] for name in ("source_depth", "max_range", "seabed_depth")},
        angles=even_angles(lowest, highest, physics["number"]),
        bounces={name: physics[name] for name in ("max_surface_bounces", "max_seabed_bounces")},
        points=physics["points"],
        grid=GRID if physics["with_shadow"] else None,
    )
