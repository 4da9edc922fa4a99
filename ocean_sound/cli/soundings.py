"""`ocean-sound soundings`: beams of an echo sounder corrected for refraction, each with its uncertainty."""

from __future__ import annotations

import math
import shlex
from typing import TYPE_CHECKING, Any

import click

from ..errors import InputError
from . import IN_PART
from . import _shared as shared
from . import _soundings as steps
from . import _soundings_casts as judging
from ._progress import progress

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence
    from pathlib import Path

    from matplotlib.figure import Figure

    from ..soundings.orders import Order
    from ..soundings.streaming import Corrected, Job

# Options that change nothing in the numbers.
_WITHOUT_EFFECT = {"as_json", "debug", "replace", "output", "figure", "compress", "workers", "scheduler"}
_HOUR, _KILOMETRE = 3600.0, 1000.0
_SCALE_UNITS = {"time": "hours", "length": "km"}

casts_options = (
    click.option(
        "--casts",
        "cast_paths",
        multiple=True,
        required=True,
        type=shared.FILE,
        help="A file of casts, or a folder of such files; repeat for each.",
    ),
    shared.map_option,
    shared.equation_option,
    shared.salinity_option,
    shared.instrument_option,
    click.option(
        "--thresholds",
        metavar="SET",
        help="Check the casts first, by ocean, coast, estuary, lake, or a TOML file; else they are used as read.",
    ),
)
choice_options = (
    click.option("--time-scale", type=float, metavar="HOURS", help="Decorrelation time of the water; else estimated."),
    click.option("--length-scale", type=float, metavar="KM", help="Decorrelation length of the water; else estimated."),
    click.option("--as-it-was", is_flag=True, help="Use only casts taken before each ping."),
    click.option("--nearest", is_flag=True, help="Use the nearest cast alone, not a blend of up to four."),
    click.option(
        "--water-change",
        type=float,
        metavar="M/S",
        help="How much the water changes, alike at all depths: standard deviation of its speed; else from the casts.",
    ),
    click.option(
        "--beyond-cast",
        type=click.Choice(["complete", "flag"]),
        default="complete",
        show_default=True,
        help="Soundings below their cast: carry the cast down and call them suspect, or leave them out.",
    ),
)
beam_options = (
    click.option(
        "--angles",
        type=click.Choice(["cones", "tilted-fan"]),
        default="cones",
        show_default=True,
        help="What the along-track angle is: a cone like the other, or the tilt of the fan.",
    ),
    click.option(
        "--array",
        type=click.Choice(["flat", "curved"]),
        default="flat",
        show_default=True,
        help="A flat array keeps the slowness along its face; a curved one its angles.",
    ),
    click.option("--vertical", is_flag=True, help="A single-beam echo sounder: every beam goes straight down."),
    click.option(
        "--recorded-speed",
        type=float,
        metavar="M/S",
        help="Depths recorded at this nominal speed are given, not times (1500; 1463.04 is 4800 ft/s).",
    ),
    click.option(
        "--recorded-added",
        type=float,
        default=0.0,
        show_default=True,
        metavar="M",
        help="What the recorder had added to these depths for the transducer.",
    ),
    click.option(
        "--corrected-with",
        type=shared.FILE,
        metavar="CAST",
        help="The soundings were corrected with this cast: they are taken back to time and angle first.",
    ),
)
doubt_options = (
    click.option(
        "--order", "orders", multiple=True, metavar="NAME", help="Judge by this order only; repeat for each. Else all."
    ),
    click.option("--limits", type=shared.FILE, metavar="TOML", help="Orders of your own in place of those of S-44."),
    click.option(
        "--components", type=shared.FILE, metavar="TOML", help="The survey's other uncertainties: motion, tide, ..."
    ),
    click.option(
        "--steering-speed-uncertainty",
        type=float,
        metavar="M/S",
        help="Standard uncertainty (k=1) of the speed the beams were steered with, where that is not exactly the "
        "surface sound speed of the file (or none is there).",
    ),
    click.option(
        "--tolerance",
        type=float,
        default=0.001,
        show_default=True,
        help="Arithmetic error allowed to the tables of travel times, m.",
    ),
    click.option(
        "--surface-difference",
        type=float,
        default=2.0,
        show_default=True,
        metavar="M/S",
        help="Tell where surface sound speed and cast part by more.",
    ),
)
extra_options = (
    click.option(
        "--frequency",
        "absorption",
        type=float,
        multiple=True,
        metavar="KHZ",
        help="Also the mean absorption to the seabed at this frequency; repeat for each.",
    ),
    click.option("--passport", metavar="PING,BEAM", help="Also how one sounding came about, counted from 0,0."),
    click.option(
        "--by-angle", is_flag=True, help="Also the largest beam angle that holds each order, by depth; needs no BEAMS."
    ),
    click.option("--next-cast", is_flag=True, help="Also when the next cast is due; needs no BEAMS."),
    click.option("--leave-one-out", is_flag=True, help="Also what each cast is worth; needs no BEAMS."),
    click.option(
        "--differ-most", is_flag=True, help="Also which two casts differ most at the outer beam; needs no BEAMS."
    ),
    click.option(
        "--max-angle",
        type=float,
        default=65.0,
        show_default=True,
        help="Outer beam for the last three, degrees from the vertical.",
    ),
    click.option(
        "--seabed-depth", type=float, help="Depth of the seabed for all these, m; else where the shallowest cast ends."
    ),
    click.option(
        "--transducer-depth", type=float, help="For all these, m below the surface; else the least in BEAMS, or 0."
    ),
)  # fmt: skip
work_options = (
    click.option(
        "-o",
        "--output",
        type=shared.FILE,
        help="Write the soundings: netCDF (.nc) or CSV (.csv), by its ending; for several BEAMS an existing folder.",
    ),
    click.option("--compress", type=click.IntRange(0, 9), default=0, show_default=True, help="zlib level of netCDF."),
    click.option("--workers", type=int, help="Threads; one for each processor if not given."),
    click.option(
        "--scheduler", metavar="ADDRESS", help="A dask scheduler whose workers do it, a file each; needs several BEAMS."
    ),
)


@click.command("soundings", short_help="Correct echo-sounder beams for refraction, with uncertainty and orders.")
@click.argument("paths", metavar="[BEAMS]...", nargs=-1, type=shared.FILE)
@shared.options(
    *casts_options,
    *choice_options,
    *beam_options,
    *doubt_options,
    *extra_options,
    *work_options,
    shared.figure_option,
    shared.replace_option,
    shared.json_option,
    shared.debug_option,
)
def command(
    paths: Sequence[Path], output: Path | None, figure: Path | None, replace: bool, as_json: bool, **asked: Any
) -> int:
    """Correct the beams of an echo sounder with casts, and tell the uncertainty of each sounding.

    \b
    Examples:
      ocean-sound soundings line.nc --casts casts/ -o corrected.nc
      ocean-sound soundings line.nc --casts am.csv --casts pm.csv --order 1a --components boat.toml -o corrected.nc
      ocean-sound soundings lines/*.nc --casts casts/ --time-scale 4 --length-scale 10 -o corrected/
      ocean-sound soundings --casts casts/ --next-cast --order Special --figure interval.png
      ocean-sound soundings --casts casts/ --by-angle --seabed-depth 60 --figure orders.png

    BEAMS are netCDF or CSV with two_way_travel_time, across_track_angle and transducer_depth, of each ping and beam;
    with time, latitude, longitude and heading casts are chosen and soundings placed; surface_sound_speed, face_roll,
    face_pitch, along_track_angle, transducer_height and water_level are used where given. All of it is kept.

    An aid, not a navigational product: the hydrographer in charge and the responsible authority's own specification
    decide whether a survey meets its order.
    """
    from .._numba import spare_scipy

    spare_scipy()
    _check(paths, output, figure, asked, replace=replace)
    orders = steps.chosen_orders(asked["limits"], asked["orders"])
    casts = steps.read_casts(
        asked["cast_paths"],
        **{name: asked[name] for name in ("mapping", "equation", "salinity", "instrument", "thresholds")},
    )
    scales = _scales(casts, asked)
    summary: dict[str, Any] = {"casts": steps.told_of_casts(casts), "scales": scales}
    lines = [*steps.cast_lines(casts), *steps.scale_lines(scales)]
    shared.tell(*(f"note: {note}" for note in (*summary["casts"]["notes"], *scales.get("notes", ()))))
    status = IN_PART if casts.left_out else 0
    done: list[Corrected] = []
    if paths:
        job = _job(casts, orders, scales, asked, replace=replace)
        done, lost = _corrected(paths, output, job, asked["scheduler"], quiet=as_json)
        summary |= {"files": [one.to_dict() for one in done], "left_out": lost}
        for one in done:
            shared.tell(*(f"note: {note}" for note in one.notes), *steps.warnings_of(one, scales))
            lines += steps.lines_of(one)
        status = IN_PART if lost else status
        if asked["passport"] is not None:
            told, more = _passport(paths[0], job, asked["passport"], figure, replace=replace)
            summary["passport"], lines = told, lines + more
        elif figure is not None and not any(asked[name] for name in judging.DRAWN):
            _draw_swath(paths[0], job, figure, replace=replace)
    beam = _beam(done, asked)
    for name, judge in judging.BY_OPTION.items():
        if asked[name]:
            summary[name], more, draw = judge(casts, orders, scales, beam, asked)
            lines += ["", *more]
            if figure is not None and draw is not None:
                _save(draw(), figure, replace=replace)
    shared.show({**summary, "exit_status": status}, lines, as_json=as_json)
    return status


def _check(
    paths: Sequence[Path], output: Path | None, figure: Path | None, asked: Mapping[str, Any], *, replace: bool
) -> None:
    """Refuse what can't be before anything is read."""
    alone = any(asked[name] for name in judging.BY_OPTION)
    drawn = [f"--{name.replace('_', '-')}" for name in judging.DRAWN if asked[name]]
    if not paths and not alone:
        raise click.UsageError("BEAMS are missing: name the files to correct")
    if not paths and output is not None:
        raise click.UsageError("-o names the corrected soundings: name the BEAMS to correct too")
    if figure is not None and not (paths or drawn):
        raise click.UsageError("--figure has nothing to draw: name BEAMS, or give --by-angle or --next-cast")
    if (figure is not None or asked["passport"] is not None) and len(paths) > 1:
        raise click.UsageError("--figure and --passport are of one file of BEAMS: give one")
    if asked["passport"] is not None and not paths:
        raise click.UsageError("--passport is of a sounding: name the BEAMS it is in")
    drawn += ["--passport"] if asked["passport"] is not None else []
    if len(drawn) > 1 and figure is not None:
        raise click.UsageError(f"--figure draws one thing: give one of {' and '.join(drawn)}")
    kinds = [name for name in ("vertical", "recorded_speed", "corrected_with") if asked[name] not in (None, False)]
    if len(kinds) > 1:
        raise click.UsageError("--vertical, --recorded-speed and --corrected-with exclude each other")
    if asked["scheduler"] is not None and len(paths) < 2:
        raise click.UsageError("--scheduler works a file a task: give several BEAMS, or leave it out")
    for name in ("next_cast", "leave_one_out"):
        if asked[name] and len(asked["orders"]) != 1:
            raise click.UsageError(f"--{name.replace('_', '-')} needs one order to hold: name it with --order")
    if len(paths) > 1 and output is not None and not output.is_dir():
        raise InputError(f"-o {output}: several BEAMS need an existing folder to be written to")
    shared.check_outputs(output if len(paths) == 1 else None, figure, replace=replace)


def _scales(casts: steps.Casts, asked: Mapping[str, Any]) -> dict[str, Any]:
    """Over which time, s, and distance, m, a cast stands for the water, and how that is known; empty for one cast."""
    given: dict[str, float | None] = {
        "time": None if asked["time_scale"] is None else asked["time_scale"] * _HOUR,
        "length": None if asked["length_scale"] is None else asked["length_scale"] * _KILOMETRE,
    }
    if None not in given.values():
        return {**given, "how": "as given"}
    if len(casts.profiles) == 1:
        return {name: math.inf if value is None else value for name, value in given.items()} | {
            "how": "one cast serves all", "notes": ["with one cast nothing tells how the water changes"],
        }  # fmt: skip
    from ..soundings.changing import GIVE_SCALES, estimate_scales

    try:
        found = estimate_scales(
            casts.profiles,
            time=given["time"],
            length=given["length"],
            angle=asked["max_angle"],
            flat_array=asked["array"] == "flat",
        )
    except InputError as error:
        lacking = [f"--{name}-scale ({unit})" for name, unit in _SCALE_UNITS.items() if given[name] is None]
        raise InputError(str(error).replace(GIVE_SCALES, f"give {' and '.join(lacking)}")) from None
    return {
        "time": found.scales.time,
        "length": found.scales.length,
        "how": f"estimated from {found.casts} casts",
        "time_range": found.time_range,
        "length_range": found.length_range,
        "notes": list(found.notes),
    }


def _corrected(
    paths: Sequence[Path], output: Path | None, job: Job, scheduler: str | None, *, quiet: bool
) -> tuple[list[Corrected], list[dict[str, str]]]:
    """Each file corrected; and those that could not be, with the reason, where there are several."""
    from ..soundings.streaming import correct_file, correct_files

    with progress(quiet=quiet) as told:
        if len(paths) == 1:
            one = correct_file(
                paths[0], job, output, progress=lambda n, of: told("correcting", n, of, count=n, unit="soundings")
            )
            return [one], []
        done, lost = correct_files(
            paths, job, output, scheduler=scheduler, progress=lambda n, of: told("correcting files", n, of)
        )
    shared.tell(*(f"left out: {path}: {why}" for path, why in lost))
    if not done:
        raise InputError(f"none of {len(paths)} files could be corrected")
    return done, [{"file": path, "reason": why} for path, why in lost]


def _job(
    casts: steps.Casts,
    orders: Mapping[str, Order],
    scales: Mapping[str, Any],
    asked: Mapping[str, Any],
    *,
    replace: bool,
) -> Job:
    """What the options say of how soundings are corrected."""
    from ..soundings.choosing import Scales
    from ..soundings.correcting import Options
    from ..soundings.streaming import Job

    choice: dict[str, Any] = {"as_it_was": asked["as_it_was"], "orders": orders, "change": asked["water_change"]}
    if asked["nearest"]:
        choice["most"] = 1
    if len(casts.profiles) > 1 or math.isfinite(min(scales["time"], scales["length"])):
        choice["scales"] = Scales(scales["time"], scales["length"])
    if asked["components"] is not None:
        from ..soundings.components import read_components

        choice["components"] = read_components(asked["components"])
    case = "vertical" if asked["vertical"] else "beams"
    if asked["recorded_speed"] is not None:
        case = "recorded"
    if asked["corrected_with"] is not None:
        case = "corrected"
        choice["corrected_with"] = shared.profile_in(
            asked["corrected_with"],
            which=None,
            **{name: asked[name] for name in ("mapping", "equation", "salinity", "instrument")},
        )
    names = ("angles", "array", "tolerance", "beyond_cast", "steering_speed_uncertainty", "recorded_speed",
             "recorded_added")  # fmt: skip
    return Job(
        casts.profiles,
        case,
        Options(**{name: asked[name] for name in names}, surface_speed_limit=asked["surface_difference"]),
        choice,
        casts.sources,
        {"scales": scales.get("how", "")},
        workers=asked["workers"],
        replace=replace,
        compression=asked["compress"],
        surface_difference=asked["surface_difference"],
    )


def _passport(
    path: Path, job: Job, which: str, figure: Path | None, *, replace: bool
) -> tuple[dict[str, Any], list[str]]:
    """How one sounding came about."""
    from ..soundings.passport import passport_of_file

    ping, comma, beam = which.partition(",")
    if not (comma and ping.strip().isdigit() and beam.strip().isdigit()):
        raise InputError(f"--passport {which!r}: is not PING,BEAM; such as 120,3 would be right")
    found = passport_of_file(path, job, int(ping), int(beam), command=_command_line())
    if figure is not None:
        from ..figures import passport_figure

        _save(passport_figure(found), figure, replace=replace)
    return steps.told_of_passport(found), ["", *found.lines()]


def _command_line() -> str:
    """The command as it was given, but for what does not change its numbers."""
    context = click.get_current_context()
    words = ["ocean-sound", "soundings", *map(str, context.params["paths"])]
    for parameter in context.command.params:
        said = context.get_parameter_source(str(parameter.name)) is click.core.ParameterSource.COMMANDLINE
        if not said or not isinstance(parameter, click.Option) or parameter.name in _WITHOUT_EFFECT:
            continue
        value = context.params.get(str(parameter.name))
        values = value if isinstance(value, tuple) else (value,)
        words += [parameter.opts[-1]] if parameter.is_flag else [
            word for each in values for word in (parameter.opts[-1], str(each))
        ]  # fmt: skip
    return shlex.join(words)


def _save(drawn: Figure, path: Path, *, replace: bool) -> None:
    from ..figures import save_figure

    save_figure(drawn, path, replace=replace)


def _draw_swath(path: Path, job: Job, figure: Path, *, replace: bool) -> None:
    from ..figures import swath_figure
    from ..soundings.before_and_after import before_and_after

    before, after, what = before_and_after(path, job)
    _save(swath_figure(before, after, names=(what, "corrected")), figure, replace=replace)


def _beam(done: Sequence[Corrected], asked: Mapping[str, Any]) -> judging.Beam:
    """By which beam casts are judged: as asked, its transducer else the highest of the soundings."""
    top = asked["transducer_depth"]
    if top is None:
        top = min((one.transducer_depth for one in done), default=0.0)
    return judging.Beam(asked["max_angle"], asked["seabed_depth"], top, asked["array"] == "flat")
