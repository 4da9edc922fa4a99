"""The speed of sound in water, by any equation of the registry."""

from __future__ import annotations

import warnings
from typing import TYPE_CHECKING, Any, Literal, TypeAlias

import numpy as np

from ..errors import InputError
from ..files.cf import attributes as cf_attributes
from ._state import State, need_one_vertical, on_state
from .ranges import OutOfRangeWarning, RangeReport, report_on
from .registry import DEFAULT_EQUATION, find_equation
from .vertical import DEFAULT_LATITUDE

if TYPE_CHECKING:
    from ._arrays import Array
    from .equation import Equation

#: The caller of `sound_speed`, past the functions of the door that arrays come through.
_WARNING_LEVEL = 7

Vertical: TypeAlias = Literal["pressure", "depth"]


def sound_speed(
    temperature: Any,
    salinity: Any,
    *,
    pressure: Any | None = None,
    depth: Any | None = None,
    latitude: Any | None = None,
    longitude: Any | None = None,
    equation: str | Equation = DEFAULT_EQUATION,
    outside: Literal["keep", "mask"] = "keep",
) -> Any:
    """Speed of sound in water.

    Parameters
    ----------
    temperature
        In-situ temperature, degrees Celsius on ITS-90 (equations on IPTS-68 convert it themselves); scalar, array
        or xarray object.
    salinity
        Practical salinity (PSS-78); 0 for fresh water.
    pressure
        Sea pressure, dbar. Exactly one of pressure and depth is needed (neither is, for the equations of pure water
        at atmospheric pressure); the one that the equation does not take is converted by TEOS-10.
    depth
        Metres, positive down.
    latitude, longitude
        Degrees; longitude in any turn. A position that is None or NaN is not known: the latitude is then taken as
        45, and the Absolute Salinity of TEOS-10 as the Reference Salinity; `assumptions` says so in words.
    equation
        A name from `equations`, or an `Equation`.
    outside
        What to do outside the range of the equation: "keep" the value (and warn in one line), or "mask" it as NaN.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Speed of sound, m/s, of the broadcast shape; NaN where temperature, salinity, pressure or depth is NaN. An
        xarray object keeps its coordinates and, backed by dask, stays lazy; its attributes carry the equation, its
        citation and what was assumed.

    Raises
    ------
    InputError
        For an unknown equation, for both or neither of pressure and depth, for shapes that do not broadcast, and
        for impossible values: infinite, salinity below 0, temperature below -5 or above 100, pressure or depth
        below 0 or above 12000, latitude beyond 90.

    Warns
    -----
    OutOfRangeWarning
        Once, in one line, if values lie outside the range and are kept.

    Notes
    -----
    Each equation carries its range, its stated standard error and its paper: see `equations`.

    Examples
    --------
    >>> round(sound_speed(20.0, 35.0, pressure=0.0, equation="unesco"), 4)
    1521.478
    >>> sound_speed([4.0, 8.0], 0.0, depth=10.0, latitude=47.5, equation="belogolskii").round(2)
    array([1421.79, 1439.3 ])
    """
    chosen = find_equation(equation)
    if outside not in ("keep", "mask"):
        raise InputError(f"outside: {outside!r} is unknown; 'keep' or 'mask' are known")

    def core(state: State) -> Array:
        speed = evaluated(chosen, state)
        report = report_on(chosen, state)
        if report.notes and outside == "mask":
            return np.where(report.outside, np.nan, speed)
        if report.notes:
            warnings.warn("; ".join(report.notes), OutOfRangeWarning, stacklevel=_WARNING_LEVEL)
        return speed

    vertical: Vertical | None = "pressure" if pressure is not None else "depth" if depth is not None else None
    return on_state(
        core,
        (temperature, salinity, pressure, depth, latitude, longitude),
        vertical=chosen.vertical,
        who=f"equation {chosen.name}",
        name="sound_speed",
        attributes={
            **cf_attributes("sound_speed"),
            "equation": chosen.name,
            "citation": chosen.citation,
            "assumptions": "; ".join(
                assumptions(chosen, vertical=vertical, latitude=latitude is not None, longitude=longitude is not None)
            ),
        },
    )


def speed_of_columns(
    temperature: Array,
    salinity: Array,
    *,
    pressure: Array | None = None,
    depth: Array | None = None,
    latitude: Array | float | None = None,
    longitude: Array | float | None = None,
    equation: str | Equation = DEFAULT_EQUATION,
) -> Array:
    """Speed of sound (m/s) of plain float64 columns, many casts at once: no warning, and no error for a bad value.

    Parameters
    ----------
    temperature, salinity, pressure, depth, latitude, longitude, equation
        As for `sound_speed`. Columns broadcast; a position may be one number or one per level, NaN where unknown.

    Returns
    -------
    numpy.ndarray
        m/s; NaN where an input is NaN or impossible. Pressures and depths down to -5 (noise in air) are computed as
        they stand.

    Raises
    ------
    InputError
        For an unknown equation, and for both or neither of pressure and depth.

    Examples
    --------
    >>> import numpy as np
    >>> speed_of_columns(np.array([10.0, np.nan]), np.array([35.0, 35.0]), pressure=np.zeros(2)).round(4)
    array([1489.8177,       nan])
    """
    chosen = find_equation(equation)
    need_one_vertical(pressure, depth, required=chosen.vertical != "none", who=f"equation {chosen.name}")
    state = _columns_state(temperature, salinity, pressure, depth, latitude, longitude).possible()
    return evaluated(chosen, state.completed(chosen.vertical))


def range_report(
    equation: str | Equation,
    temperature: Any,
    salinity: Any,
    *,
    pressure: Any | None = None,
    depth: Any | None = None,
    latitude: Any | None = None,
) -> RangeReport:
    """Which values lie outside the range of an equation, and one line about each variable that does.

    Parameters
    ----------
    equation
        A name from `equations`, or an `Equation`.
    temperature, salinity, pressure, depth, latitude
        As for `sound_speed`; numbers or arrays.

    Returns
    -------
    RangeReport
        A boolean mask of the broadcast shape, and the lines.

    Raises
    ------
    InputError
        For an unknown equation, and for both or neither of pressure and depth.

    Examples
    --------
    >>> report = range_report("mackenzie", [10.0, 31.5], 35.0, depth=20.0)
    >>> report.outside.tolist(), len(report.notes)
    ([False, True], 1)
    """
    chosen = find_equation(equation)
    need_one_vertical(pressure, depth, required=chosen.vertical != "none", who=f"equation {chosen.name}")
    state = _columns_state(temperature, salinity, pressure, depth, latitude, None)
    return report_on(chosen, state.completed(chosen.vertical))


def assumptions(
    equation: str | Equation,
    *,
    vertical: Vertical | None,
    latitude: bool,
    longitude: bool,
) -> tuple[str, ...]:
    """What is assumed when an equation is used, one line each, for people and for attributes.

    Parameters
    ----------
    equation
        A name from `equations`, or an `Equation`.
    vertical
        Which of pressure and depth is given, None for neither.
    latitude, longitude
        Whether they are given.

    Returns
    -------
    tuple of str
        Empty if nothing is assumed.

    Raises
    ------
    InputError
        For an unknown equation.

    Examples
    --------
    >>> for line in assumptions("mackenzie", vertical="pressure", latitude=False, longitude=False):
    ...     print(line)
    depth from pressure by TEOS-10 for the standard ocean at latitude 45 degrees (no latitude is given)
    """
    chosen = find_equation(equation)
    at = "the latitude given" if latitude else f"latitude {DEFAULT_LATITUDE:g} degrees (no latitude is given)"
    lines = []
    if vertical is not None and chosen.vertical not in ("none", vertical):
        lines.append(f"{chosen.vertical} from {vertical} by TEOS-10 for the standard ocean at {at}")
    if chosen.vertical == "depth" and "latitude" in chosen.arguments and not latitude:
        lines.append(f"{chosen.name}: {at}")
    if "longitude" in chosen.arguments and not (latitude and longitude):
        lines.append(
            "Absolute Salinity is taken as the Reference Salinity, 35.16504/35 of the practical salinity "
            "(no position is given)"
        )
    return tuple(lines)


def _columns_state(temperature: Any, salinity: Any, pressure: Any, depth: Any, latitude: Any, longitude: Any) -> State:
    columns = (temperature, salinity, pressure, depth, latitude, longitude)
    return State(*(None if column is None else np.asarray(column, dtype=np.float64) for column in columns))  # type: ignore[arg-type]


def evaluated(equation: Equation, state: State) -> Array:
    """Speed on a state whose vertical is filled in."""
    vertical = state.vertical(equation.vertical) if equation.vertical != "none" else None
    if vertical is None:
        vertical = state.pressure if state.pressure is not None else state.depth
    latitude = state.gravity_latitude() if equation.vertical == "depth" else state.latitude
    speed: Array = equation.evaluate(
        state.temperature, state.salinity, vertical=vertical, latitude=latitude, longitude=state.longitude
    )
    return speed
