"""Several equations on the same water, with their marks: what each says, where it holds, what was assumed."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ._state import on_state
from .registry import equations, find_equation
from .speed import assumptions, evaluated, range_report

if TYPE_CHECKING:
    from collections.abc import Iterable

    from ._arrays import Array
    from .equation import Equation
    from .ranges import RangeReport
    from .speed import Vertical


@dataclass(frozen=True, eq=False)
class Reading:
    """What one equation says.

    Attributes
    ----------
    equation
        The equation.
    speed
        Speed of sound, m/s, of the broadcast shape; values outside the range are kept.
    report
        Which of them lie outside, in a mask of the same shape and in words.
    assumptions
        What was assumed, one line each.
    """

    equation: Equation
    speed: Array
    report: RangeReport
    assumptions: tuple[str, ...]


def speeds_side_by_side(
    temperature: Any,
    salinity: Any,
    *,
    pressure: Any | None = None,
    depth: Any | None = None,
    latitude: Any | None = None,
    longitude: Any | None = None,
    names: Iterable[str] | None = None,
) -> dict[str, Reading]:
    """Speed of sound by several equations, quietly: marks instead of warnings.

    Parameters
    ----------
    temperature, salinity, pressure, depth, latitude, longitude
        As for `sound_speed`; numbers or arrays.
    names
        Which equations; if None all, or all that need no vertical where neither pressure nor depth is given.

    Returns
    -------
    dict of str to Reading
        In the order of the names.

    Raises
    ------
    InputError
        As `sound_speed` does.

    Examples
    --------
    >>> readings = speeds_side_by_side(10.0, 35.0, depth=100.0, names=["mackenzie", "del-grosso"])
    >>> {name: round(float(reading.speed), 1) for name, reading in readings.items()}
    {'mackenzie': 1491.4, 'del-grosso': 1491.4}
    """
    if names is None:
        bare = pressure is None and depth is None
        chosen = [equation for equation in equations().values() if not bare or equation.vertical == "none"]
    else:
        chosen = [find_equation(name) for name in names]
    columns = (temperature, salinity, pressure, depth, latitude, longitude)
    vertical: Vertical | None = "pressure" if pressure is not None else "depth" if depth is not None else None
    readings = {}
    for equation in chosen:
        speed = on_state(
            lambda state, equation=equation: evaluated(equation, state),
            columns,
            vertical=equation.vertical,
            who=f"equation {equation.name}",
            name="sound_speed",
            attributes={},
        )
        report = range_report(equation, temperature, salinity, pressure=pressure, depth=depth, latitude=latitude)
        said = _assumed(equation, vertical, latitude, longitude)
        readings[equation.name] = Reading(equation, np.asarray(speed), report, said)
    return readings


def _assumed(equation: Equation, vertical: Vertical | None, latitude: Any, longitude: Any) -> tuple[str, ...]:
    """The assumptions, with those that hold only where a position is missing marked by their count."""
    gaps = [np.isnan(np.asarray(values, dtype=np.float64)) for values in (latitude, longitude) if values is not None]
    missing = np.logical_or.reduce(np.broadcast_arrays(*gaps)) if gaps else np.zeros((), dtype=bool)
    known = not missing.all()
    everywhere = assumptions(
        equation, vertical=vertical, latitude=known and latitude is not None, longitude=known and longitude is not None
    )
    if not known or not missing.any():
        return everywhere
    there = assumptions(equation, vertical=vertical, latitude=False, longitude=False)
    count = f" in {int(missing.sum())} of {missing.size} values"
    return (*everywhere, *(line + count for line in there if line not in everywhere))
