"""`ocean-sound speed`: what the published equations say of one state of water, or of a table of states."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from . import _shared as shared

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import numpy as np
    from numpy.typing import NDArray

    from ..water import Reading

# More states than this are not listed one by one for a person.
LISTED = 40

_STATE = ("temperature", "salinity", "pressure", "depth", "latitude", "longitude")
_UNITS = {
    "temperature": "degC",
    "salinity": "",
    "pressure": "dbar",
    "depth": "m",
    "latitude": "degrees",
    "longitude": "degrees",
}
# Heading and format of each.
_PROPERTIES = {
    "density": ("density, kg/m3", ".4f"),
    "compressibility": ("adiabatic compressibility, 1/Pa", ".6e"),
    "impedance": ("acoustic impedance, kg/(m2 s)", ".6e"),
}
_DERIVATIVES = {
    "temperature": ("per degC", ".4f"),
    "salinity": ("per salinity", ".4f"),
    "pressure": ("per dbar", ".6f"),
    "depth": ("per m", ".6f"),
}
_SLOPE_UNITS = {
    "temperature": "m s-1 degree_Celsius-1",
    "salinity": "m s-1",
    "pressure": "m s-1 dbar-1",
    "depth": "s-1",
}
_WAVE_UNITS = {"wavelength": "m", "wave_number": "rad m-1"}
_WAVES = {
    "wavelength": ("wavelength, m", ".6g"),
    "wave_number": ("wave number, rad/m", ".6g"),
}


@dataclass(frozen=True)
class _Asked:
    """The states, each column an array of one length; where they came from; what else is wanted."""

    state: Mapping[str, NDArray[np.float64]]
    single: bool
    source: str | None
    properties: bool
    frequency: float | None
    ph: float


def _number(name: str, text: str) -> Any:
    return click.option(f"--{name}", type=float, help=text)


@click.command("speed", short_help="Speed of sound by all equations, side by side.")
@click.argument("states", metavar="[STATES.csv]", required=False, type=click.Path(path_type=Path))
@shared.options(
    _number("temperature", "Temperature in situ, degrees Celsius (ITS-90)."),
    _number("salinity", "Practical salinity; 0 for fresh water."),
    _number("pressure", "Sea pressure, dbar (this or the depth)."),
    _number("depth", "Depth, m, positive down (this or the pressure)."),
    _number("latitude", "Latitude, degrees north; 45 is assumed where it is needed and not given."),
    _number("longitude", "Longitude, degrees east; with the latitude it gives TEOS-10 the local sea salt."),
    click.option("--equation", "names", multiple=True, metavar="NAME", help="Only this equation; repeat for several."),
    click.option("--properties", is_flag=True, help="Density, compressibility, impedance, and how the speed changes."),
    click.option("--frequency", type=float, help="Hz: adds absorption (dB/km), wavelength, wave number and period."),
    click.option("--ph", type=float, default=8.0, show_default=True, help="Acidity, for the absorption."),
    shared.map_option,
    shared.output_option,
    shared.replace_option,
    shared.json_option,
    shared.debug_option,
)
def command(
    states: Path | None,
    names: Sequence[str],
    properties: bool,
    frequency: float | None,
    ph: float,
    mapping: Sequence[str],
    output: Path | None,
    replace: bool,
    as_json: bool,
    **given: float | None,
) -> None:
    """Speed of sound in water by the published equations, side by side, with their ranges marked.

    \b
    Examples:
      ocean-sound speed --temperature 10 --salinity 35 --depth 100 --latitude 45
      ocean-sound speed --temperature 18 --salinity 0 --equation marczak
      ocean-sound speed --temperature 10 --salinity 35 --depth 50 --properties --frequency 200000
      ocean-sound speed states.csv -o speeds.csv

    STATES.csv has one state a line and names at the head of its columns: temperature, salinity, depth or pressure,
    and latitude and longitude if known. What is the same in all lines may be given by an option instead.

    \b
    Equations: teos10, teos10-exact, unesco, unesco-ipts68, unesco-millero-li, del-grosso,
    del-grosso-ipts68, mackenzie, medwin, coppens, leroy; for fresh water at atmospheric pressure
    bilaniuk-wong and marczak, under pressure belogolskii.
    """
    shared.check_outputs(output, None, replace=replace)
    asked = _asked(states, mapping, given, properties=properties, frequency=frequency, ph=ph)
    nowhere = not names and "pressure" not in asked.state and "depth" not in asked.state
    if nowhere and (asked.state["salinity"] > 0.0).any():
        raise click.UsageError("--depth or --pressure is missing: 0 stands for the surface")
    from ..water import speeds_side_by_side

    readings = speeds_side_by_side(**asked.state, names=names or None)
    further = _further(asked, readings)
    if output is not None:
        _write(output, asked, readings, further, replace=replace)
    notes = list(dict.fromkeys(line for reading in readings.values() for line in reading.assumptions))
    if nowhere:
        notes.append("neither depth nor pressure is given: only the equations for atmospheric pressure are shown")
    shared.tell(*(f"note: {note}" for note in notes))
    lines = _one(asked, readings, further) if asked.single else _many(asked, readings, further)
    shared.show(_summary(asked, readings, further, notes), lines, as_json=as_json)


# --- the states ----------------------------------------------------------------------------------------------------


def _asked(states: Path | None, mapping: Sequence[str], given: Mapping[str, float | None], **wanted: Any) -> _Asked:
    import numpy as np

    options = {name: np.float64(value) for name, value in given.items() if value is not None}
    columns: dict[str, Any] = {}
    if states is not None:
        from ._states import read_states

        columns, notes = read_states(states, shared.parse_mapping(mapping) or {})
        shared.tell(*(f"note: {note}" for note in notes))
        both = [name for name in options if name in columns]
        if both:
            raise click.UsageError(f"--{both[0]}: {states} has a column of it; leave one of the two out")
    elif mapping:
        raise click.UsageError("--map goes with a CSV of states; name one")
    state = {**columns, **options}
    for name in ("temperature", "salinity"):
        if name not in state:
            fresh = "; 0 for fresh water" if name == "salinity" else ""
            where = f"{states} has no such column: add it, " if states is not None else ""
            raise click.UsageError(f"no {name}: {where}give --{name}{fresh}")
    ordered = {name: state[name] for name in _STATE if name in state}
    shape = np.broadcast_shapes(*(value.shape for value in ordered.values()))
    full = {name: np.broadcast_to(value, shape) for name, value in ordered.items()}
    return _Asked(full, states is None, None if states is None else str(states), **wanted)


# --- what else is asked for ----------------------------------------------------------------------------------------


def _further(asked: _Asked, readings: Mapping[str, Reading]) -> dict[str, dict[str, Any]]:
    """By kind and name: properties of the water, slopes and waves by equation, absorption by formula, the period."""
    from .. import water

    basic = (asked.state["temperature"], asked.state["salinity"])
    place = {name: value for name, value in asked.state.items() if name not in ("temperature", "salinity")}
    deep = "pressure" in place or "depth" in place
    further: dict[str, dict[str, Any]] = {}
    if asked.properties:
        if not deep:
            raise click.UsageError("--properties needs --pressure or --depth; 0 at the surface")
        further["properties"] = {name: getattr(water, name)(*basic, **place) for name in _PROPERTIES}
        further["derivatives"] = {
            name: {
                by: water.speed_derivative(*basic, by=by, equation=name, **place)  # type: ignore[arg-type]
                for by in _DERIVATIVES
                if reading.equation.vertical != "none" or by in ("temperature", "salinity")
            }
            for name, reading in readings.items()
        }
    if asked.frequency is not None:
        further["waves"] = {
            name: {wave: getattr(water, wave)(reading.speed, asked.frequency) for wave in _WAVES}
            for name, reading in readings.items()
        }
        further["period"] = {"period": water.period(asked.frequency)}
        if deep:
            place.pop("longitude", None)
            further["absorption"] = _absorption(asked, basic, place)
    return further


def _absorption(asked: _Asked, basic: tuple[Any, Any], place: Mapping[str, Any]) -> dict[str, Any]:
    """By formula; what lies outside a range is told on standard error."""
    import warnings

    from ..water import OutOfRangeWarning, absorption, absorption_formulas

    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always", OutOfRangeWarning)
        found = {
            name: absorption(asked.frequency, *basic, ph=asked.ph, formula=name, **place)
            for name in absorption_formulas()
        }
    shared.tell(*(f"note: {warning.message}" for warning in caught))
    return found


# --- how it is shown -----------------------------------------------------------------------------------------------


def _one(asked: _Asked, readings: Mapping[str, Reading], further: Mapping[str, Any]) -> list[str]:
    """One state: a line for each equation, then the water itself."""
    said = [f"{name} {value:g} {_UNITS[name]}".rstrip() for name, value in asked.state.items()]
    header = ["equation", "speed, m/s", "standard error, m/s", "range"]
    kinds = [(kind, heads) for kind, heads in (("derivatives", _DERIVATIVES), ("waves", _WAVES)) if kind in further]
    header += [heading for _, heads in kinds for heading, _ in heads.values()]
    rows = []
    for name, reading in readings.items():
        error, outside = reading.equation.standard_error, reading.report.count > 0
        stated = "not stated" if error is None else "does not hold" if outside else f"{error:g}"
        row = [name, f"{reading.speed:.2f}", stated, "outside" if outside else "inside"]
        for kind, heads in kinds:
            values = further[kind][name]
            row += [format(values[key], form) if key in values else "-" for key, (_, form) in heads.items()]
        rows.append(row)
    lines = [", ".join(said), "", *shared.table(header, rows)]
    marks = [note for reading in readings.values() for note in reading.report.notes]
    lines += ["", *(f"outside: {note}" for note in marks)] if marks else []
    if "properties" in further:
        lines.append("")
        lines += [f"{heading}: {further['properties'][name]:{form}}" for name, (heading, form) in _PROPERTIES.items()]
    if "absorption" in further:
        lines += ["", f"absorption at {asked.frequency:g} Hz, dB/km (per kilometre):"]
        lines += [f"  {name}: {value:.6g}" for name, value in further["absorption"].items()]
    if "period" in further:
        lines += ["", f"period: {further['period']['period']:.6g} s"]
    return lines


def _many(asked: _Asked, readings: Mapping[str, Reading], further: Mapping[str, Any]) -> list[str]:
    """Many states: a line for each, a star where an equation is outside its range."""
    count = len(next(iter(asked.state.values())))
    rows = []
    for i in range(min(count, LISTED)):
        row = [str(i + 1), *(f"{column[i]:g}" for column in asked.state.values())]
        row += [
            f"{reading.speed[i]:.2f}" + ("*" if reading.report.outside[i] else " ") for reading in readings.values()
        ]
        rows.append(row)
    lines = shared.table(["state", *asked.state, *readings], rows)
    if count > LISTED:
        lines.append(f"... {count - LISTED} more; -o writes all {count}")
    outside = [note for reading in readings.values() for note in reading.report.notes]
    lines += ["", "* outside the range of the equation:", *(f"  {note}" for note in outside)] if outside else []
    if further:
        lines += ["", "the other quantities asked for are in the output of -o and of --json"]
    return lines


def _summary(
    asked: _Asked, readings: Mapping[str, Reading], further: Mapping[str, Any], notes: Sequence[str]
) -> dict[str, Any]:
    return {
        "source_file": asked.source,
        "state": asked.state,
        "equations": {
            name: {
                "sound_speed": reading.speed,
                "outside_range": reading.report.outside,
                "range_notes": reading.report.notes,
                "standard_error": reading.equation.standard_error,
                "citation": reading.equation.citation,
                **{f"by_{by}": value for by, value in further.get("derivatives", {}).get(name, {}).items()},
                **further.get("waves", {}).get(name, {}),
            }
            for name, reading in readings.items()
        },
        "frequency": asked.frequency,
        **{kind: further[kind] for kind in ("properties", "absorption") if kind in further},
        **further.get("period", {}),
        "notes": notes,
    }


# --- what is written -----------------------------------------------------------------------------------------------


def _columns(
    asked: _Asked, readings: Mapping[str, Reading], further: Mapping[str, Any]
) -> dict[str, tuple[Any, dict[str, Any]]]:
    """By name, each quantity and its CF attributes."""
    from ..files.cf import attributes

    columns: dict[str, tuple[Any, dict[str, Any]]] = {
        name: (value, attributes(name)) for name, value in asked.state.items()
    }
    for name, reading in readings.items():
        end, owner = "_" + name.replace("-", "_"), {"equation": name}
        columns["sound_speed" + end] = reading.speed, {**attributes("sound_speed"), **owner}
        mark = {"long_name": "whether the state is outside the range of the equation", **owner}
        columns["outside_range" + end] = reading.report.outside, mark
        for by, value in further.get("derivatives", {}).get(name, {}).items():
            slope = {"long_name": f"derivative of the speed of sound by {by}", "units": _SLOPE_UNITS[by], **owner}
            columns[f"sound_speed{end}_by_{by}"] = value, slope
        for wave, value in further.get("waves", {}).get(name, {}).items():
            kind = {"long_name": f"{wave.replace('_', ' ')} of sound", "units": _WAVE_UNITS[wave], **owner}
            columns[wave + end] = value, kind
    for name, value in further.get("properties", {}).items():
        columns[name] = value, attributes(name)
    for name, value in further.get("absorption", {}).items():
        columns[f"absorption_{name.replace('-', '_')}"] = value, {**attributes("absorption"), "formula": name}
    return columns


def _write(
    output: Path, asked: _Asked, readings: Mapping[str, Reading], further: Mapping[str, Any], *, replace: bool
) -> None:
    import numpy as np

    from ..files import write_csv, write_dataset

    columns = _columns(asked, readings, further)
    about = {"source_file": asked.source, "frequency": asked.frequency}
    if output.suffix.lower() == ".csv":
        papers = {f"equation {name}": reading.equation.citation for name, reading in readings.items()}
        values = {name: np.atleast_1d(value) for name, (value, _) in columns.items()}
        write_csv(output, values, replace=replace, preamble={**about, **papers})
        return
    import xarray as xr

    dataset = xr.Dataset(
        {name: ("state", np.atleast_1d(value), said) for name, (value, said) in columns.items()},
        attrs={name: value for name, value in about.items() if value is not None},
    )
    write_dataset(dataset, output, replace=replace)
