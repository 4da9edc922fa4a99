"""How the speed of sound answers a change of temperature, salinity, pressure or depth."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Literal, NamedTuple, TypeAlias

import gsw

from ..errors import InputError
from ._state import State, on_state
from .registry import DEFAULT_EQUATION, find_equation

if TYPE_CHECKING:
    from ._arrays import Array
    from .equation import Equation

By: TypeAlias = Literal["temperature", "salinity", "pressure", "depth"]

_UNITS = {
    "temperature": "m s-1 degree_Celsius-1",
    "salinity": "m s-1",
    "pressure": "m s-1 dbar-1",
    "depth": "s-1",
}
#: A complex step has no difference in it, so it can be as small as the numbers allow.
_COMPLEX_STEP = 1e-30
_PASCAL_PER_DBAR = 1.0e4


class SpeedDerivatives(NamedTuple):
    """The four derivatives of the speed of sound, each as `speed_derivative` gives it."""

    temperature: Any
    salinity: Any
    pressure: Any
    depth: Any


def speed_derivative(
    temperature: Any,
    salinity: Any,
    *,
    by: By,
    pressure: Any | None = None,
    depth: Any | None = None,
    latitude: Any | None = None,
    longitude: Any | None = None,
    equation: str | Equation = DEFAULT_EQUATION,
) -> Any:
    """Derivative of the speed of sound by one variable, the others held.

    Parameters
    ----------
    temperature, salinity, pressure, depth, latitude, longitude
        As for `sound_speed`; exactly one of pressure and depth.
    by
        "temperature" (in situ), "salinity" (practical), "pressure" or "depth".
    equation
        A name from `equations`, or an `Equation`.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        m/s per degree Celsius, per unit of practical salinity, per dbar, or per metre; of the broadcast shape.

    Raises
    ------
    InputError
        For an unknown equation or variable, for the pressure or depth of an equation that holds at atmospheric
        pressure only, for both or neither of pressure and depth, and for impossible values.

    Notes
    -----
    Exact to rounding for the polynomials (a complex step) and for temperature and salinity of `teos10`
    (derivatives of the specific volume); five-point differences elsewhere, good to 1e-8 of the slope, but to 4e-4
    m/s by salinity below 0.001 with `teos10-exact`. Depth and pressure stand to each other as in the standard ocean
    of TEOS-10.

    Examples
    --------
    >>> round(speed_derivative(10.0, 35.0, by="temperature", depth=0.0, equation="mackenzie"), 3)
    3.602
    """
    chosen = find_equation(equation)
    if by not in _UNITS:
        raise InputError(f"by: {by!r} is unknown; known are {', '.join(_UNITS)}")
    if by in ("pressure", "depth") and chosen.vertical == "none":
        raise InputError(f"by: {chosen.name} holds at atmospheric pressure only and has no derivative by {by}")

    def core(state: State) -> Array:
        return _slope(chosen, by, state)

    return on_state(
        core,
        (temperature, salinity, pressure, depth, latitude, longitude),
        vertical="pressure" if chosen.vertical != "none" else "none",
        who=f"equation {chosen.name}",
        name=f"sound_speed_by_{by}",
        attributes={
            "long_name": f"derivative of the speed of sound by {by}",
            "units": _UNITS[by],
            "equation": chosen.name,
            "citation": chosen.citation,
        },
    )


def speed_derivatives(temperature: Any, salinity: Any, **options: Any) -> SpeedDerivatives:
    """All four derivatives of the speed of sound.

    Parameters
    ----------
    temperature, salinity
        As for `sound_speed`.
    **options
        The other arguments of `speed_derivative`, without `by`.

    Returns
    -------
    SpeedDerivatives
        By temperature, salinity, pressure and depth, in the units of `speed_derivative`.

    Raises
    ------
    InputError
        As `speed_derivative` does.

    Examples
    --------
    >>> slopes = speed_derivatives(10.0, 35.0, pressure=0.0, equation="del-grosso")
    >>> round(slopes.temperature, 2), round(slopes.salinity, 2), round(slopes.depth, 4)
    (3.6, 1.22, 0.0164)
    """
    return SpeedDerivatives(*(speed_derivative(temperature, salinity, by=by, **options) for by in _ORDER))


_ORDER: tuple[By, ...] = ("temperature", "salinity", "pressure", "depth")


def _slope(equation: Equation, by: By, state: State) -> Array:
    if by in ("temperature", "salinity"):
        return _own_slope(equation, by, state)
    slope = _own_slope(equation, equation.vertical, state)
    if equation.vertical == by:
        return slope
    # Depth grows with pressure by dz = v dp / g, in the standard ocean of gsw.
    pressure = state.vertical("pressure")
    metres_per_dbar = _PASCAL_PER_DBAR * gsw.specvol_SSO_0(pressure) / gsw.grav(state.gravity_latitude(), pressure)
    result: Array = slope * metres_per_dbar if by == "pressure" else slope / metres_per_dbar
    return result


def _own_slope(equation: Equation, by: str, state: State) -> Array:
    """The slope by temperature, salinity or the equation's own vertical."""
    kind = equation.vertical
    vertical = state.vertical(kind) if kind != "none" else None
    latitude = state.gravity_latitude() if kind == "depth" else state.latitude
    values = {"temperature": state.temperature, "salinity": state.salinity, kind: vertical}
    slope: Array
    if equation.slope is not None:
        slope = equation.slope(by, *values.values(), latitude, state.longitude)
        return slope
    stepped: dict[str, Any] = {**values, by: values[by] + 1j * _COMPLEX_STEP}  # type: ignore[operator]
    value = equation.evaluate(
        stepped["temperature"],
        stepped["salinity"],
        vertical=stepped[kind],
        latitude=latitude,
        longitude=state.longitude,
    )
    slope = value.imag / _COMPLEX_STEP
    return slope
