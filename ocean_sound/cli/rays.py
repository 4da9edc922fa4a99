"""`ocean-sound rays`: paths of sound through the water of one cast."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from . import _shared as shared

if TYPE_CHECKING:
    from ..profile import Profile
    from ..rays import Fan, Shadow

# More rays than this are not listed one by one for a person.
LISTED = 45
# Points along a path that make it smooth in a figure.
FIGURE_POINTS = 1001

_PHYSICS = (
    "source_depth", "max_range", "angles", "number", "seabed_depth", "max_surface_bounces", "max_seabed_bounces",
    "with_shadow", "points", "which", "mapping", "equation", "salinity", "instrument",
)  # fmt: skip


@dataclass(frozen=True)
class _Asked:
    """What to do, whether a plan says it or the options."""

    title: str
    water: Profile
    source: dict[str, Any]
    angles: Any
    bounces: dict[str, int]
    points: int
    grid: tuple[int, int] | None


@click.command("rays", short_help="Trace rays through the water of a cast; find shadow zones.")
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
    replace: bool,
    as_json: bool,
    **physics: Any,
) -> None:
    """Trace a fan of rays through the sound-speed profile of a cast, exactly for its layers.

    \b
    Examples:
      ocean-sound rays cast.csv --source-depth 30 --max-range 10000 --shadow --figure rays.png
      ocean-sound rays plan.toml -o rays.nc

    CAST_OR_PLAN is a cast file (CSV, WHP-Exchange, Argo netCDF, or what 'ocean-sound cast' wrote) or a TOML plan. With
    a plan the options for output remain; all else is said in the plan.
    """
    from .._numba import spare_scipy
    from ..files import looks_like_toml

    spare_scipy()
    from ..rays import find_shadow, trace_fan

    shared.check_outputs(output, figure, replace=replace)
    if looks_like_toml(path):
        _refuse_physics(context)
        asked = _from_plan(path)
    else:
        asked = _from_options(path, physics)
    points = asked.points or (FIGURE_POINTS if figure is not None else 0)
    fan = trace_fan(asked.water, launch_angles=asked.angles, points=points, **asked.source, **asked.bounces)
    shadow = None
    if asked.grid is not None:
        shadow = find_shadow(asked.water, **asked.source, grid=asked.grid)
    _write(fan, shadow, output, figure, replace=replace)
    notes = list(asked.water.notes)
    if asked.source["seabed_depth"] is None:
        notes.append(
            f"no seabed depth is given: the deepest level of the profile, {fan.seabed_depth:g} m, is the bottom"
        )
    shared.tell(*(f"note: {note}" for note in notes))
    heading = [asked.title, ""] if asked.title else []
    shared.show({"title": asked.title, **_summary(fan, shadow, notes)}, heading + _lines(fan, shadow), as_json=as_json)


def _refuse_physics(context: click.Context) -> None:
    """Two places that say the same thing would leave it open which holds."""
    said = click.core.ParameterSource.COMMANDLINE
    for parameter in context.command.params:
        if parameter.name in _PHYSICS and context.get_parameter_source(parameter.name) is said:
            raise click.UsageError(f"{parameter.opts[0]} goes with a cast file; with a plan, say it in the plan")


def _from_plan(path: Path) -> _Asked:
    from ..plans import read_rays_plan
    from ..rays import even_angles

    plan = read_rays_plan(path)
    return _Asked(
        title=plan.title,
        water=shared.profile_in(
            path.parent / plan.water.file,
            which=plan.water.cast,
            mapping=[f"{name}={column}" for name, column in plan.water.columns.items()],
            equation=plan.water.equation,
            salinity=plan.water.salinity,
            instrument=plan.water.instrument,
        ),
        source={
            "source_depth": plan.source.depth,
            "max_range": plan.rays.max_range,
            "seabed_depth": plan.seabed.depth,
        },
        angles=even_angles(plan.rays.lowest_angle, plan.rays.highest_angle, plan.rays.number),
        bounces={
            "max_surface_bounces": plan.rays.max_surface_bounces,
            "max_seabed_bounces": plan.rays.max_seabed_bounces,
        },
        points=plan.rays.points,
        grid=(plan.shadow.depths, plan.shadow.ranges) if plan.shadow.wanted else None,
    )


def _from_options(path: Path, physics: dict[str, Any]) -> _Asked:
    from ..rays import GRID, even_angles

    lowest, highest = physics["angles"]
    for name in ("source_depth", "max_range"):
        if physics[name] is None:
            option = "--" + name.replace("_", "-")
            raise click.UsageError(f"{option} is missing: rays need the depth of their source and a range to go to")
    return _Asked(
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


def _write(fan: Fan, shadow: Shadow | None, output: Path | None, figure: Path | None, *, replace: bool) -> None:
    from ..files import write_csv, write_dataset

    if output is not None and output.suffix.lower() == ".csv":
        write_csv(output, fan.columns(), replace=replace, preamble=fan.about())
    elif output is not None:
        write_dataset(fan.to_dataset(shadow), output, replace=replace)
    if figure is not None:
        from ..figures import fan_figure, save_figure

        save_figure(fan_figure(fan, shadow=shadow), figure, replace=replace)


def _summary(fan: Fan, shadow: Shadow | None, notes: list[str]) -> dict[str, Any]:
    summary = {**fan.about(), "rays": len(fan), "endings": fan.status_counts(), "notes": notes}
    if shadow is not None:
        summary["shadow"] = shadow.summary()
    return {**summary, "per_ray": fan.columns()}


def _lines(fan: Fan, shadow: Shadow | None) -> list[str]:
    from ..rays import CAUTION

    about = fan.about()
    cast, equation = about["cast_id"] or "without a name", about["equation"] or "none"
    lines = [
        f"Cast {cast}, {len(fan.profile)} levels, equation {equation}",
        f"Source at {fan.source_depth:g} m, seabed at {fan.seabed_depth:g} m, {len(fan)} rays to {fan.max_range:g} m",
        "; ".join(f"{count} {name.replace('_', ' ')}" for name, count in fan.status_counts().items()),
    ]
    if len(fan) <= LISTED:
        lines += ["", *shared.table([head for head, _ in _LISTING.values()], _rows(fan))]
    if shadow is not None:
        told = shadow.summary()
        share = (
            f"In shadow: {told['no_bounce']:.1%} of the water to that range if no bounce is counted, "
            f"{told['surface_bounces']:.1%} with surface bounces."
        )
        lines += ["", share, CAUTION]
    return lines


_LISTING = {
    "launch_angle": ("launch °", ".2f"),
    "range": ("range m", ".1f"),
    "depth": ("depth m", ".2f"),
    "travel_time": ("time s", ".6f"),
    "path_length": ("path m", ".1f"),
    "arrival_angle": ("arrival °", ".2f"),
    "turns": ("turns", "d"),
    "surface_bounces": ("surface", "d"),
    "seabed_bounces": ("seabed", "d"),
    "status": ("end", "s"),
}


def _rows(fan: Fan) -> list[list[str]]:
    columns = fan.columns()
    cells = [
        [format(value, form).replace("_", " ") for value in columns[name].tolist()]
        for name, (_, form) in _LISTING.items()
    ]
    return [list(row) for row in zip(*cells, strict=True)]
