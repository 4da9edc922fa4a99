"""TEOS-10: the 75-term polynomial of specific volume, and the exact Gibbs function."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import gsw
import numpy as np

from .equation import Bounds, Equation
from .salinity import absolute_salinity_of

if TYPE_CHECKING:
    from collections.abc import Callable


def teos10(temperature: Any, salinity: Any, pressure: Any, latitude: Any = None, longitude: Any = None) -> Any:
    """Speed of sound by the 75-term polynomial of TEOS-10.

    Parameters
    ----------
    temperature
        In-situ temperature, degrees Celsius on ITS-90.
    salinity
        Practical salinity (PSS-78).
    pressure
        Sea pressure, dbar.
    latitude, longitude
        Degrees. Without both, Absolute Salinity is the Reference Salinity.

    Returns
    -------
    numpy.ndarray
        Speed of sound, m/s.

    Notes
    -----
    Equation 2.17.1 of IOC et al. (2010) with the specific volume of Roquet et al. (2015). Holds in the
    oceanographic funnel. It departs from the exact Gibbs function by up to 0.13 m/s at the warm surface.

    Examples
    --------
    >>> round(float(teos10(10.0, 35.0, 0.0)), 4)
    1489.8177
    """
    sa = absolute_salinity_of(salinity, pressure, latitude, longitude)
    return gsw.sound_speed(sa, gsw.CT_from_t(sa, temperature, pressure), pressure)


def teos10_exact(temperature: Any, salinity: Any, pressure: Any, latitude: Any = None, longitude: Any = None) -> Any:
    """Speed of sound by the exact Gibbs function of TEOS-10; arguments and result as for `teos10`.

    Notes
    -----
    Equation 2.17.1 of IOC et al. (2010), Gibbs function of Feistel (2008).

    Examples
    --------
    >>> round(float(teos10_exact(10.0, 35.0, 0.0)), 4)
    1489.7883
    """
    sa = absolute_salinity_of(salinity, pressure, latitude, longitude)
    return gsw.sound_speed_t_exact(sa, temperature, pressure)


_PASCAL_PER_DBAR = 1.0e4

#: Steps of the five-point differences: degrees, dbar. Cutting error and rounding both stay below 1e-9 of the slope.
_STEP_TEMPERATURE = 0.05
_STEP_PRESSURE = 10.0
#: Below this salinity the step in salinity is one-sided, because the exact Gibbs function has the root of the
#: salinity in it.
_SMALL_SALINITY = 1e-3
_STEP_SMALL_SALINITY = 1e-4


def _five_point(function: Callable[[Any], Any], step: Any) -> Any:
    """First derivative of a function of the offset, at offset 0; cutting error step^4/30 times the fifth derivative."""
    near = function(step) - function(-step)
    return (8.0 * near - (function(2.0 * step) - function(-2.0 * step))) / (12.0 * step)


def _salinity_rate(salinity: Any, pressure: Any, latitude: Any, longitude: Any) -> Any:
    """Absolute Salinity (g/kg) per practical salinity; each branch is a straight line, so a unit step is exact."""
    more = absolute_salinity_of(salinity + 1.0, pressure, latitude, longitude)
    return more - absolute_salinity_of(salinity, pressure, latitude, longitude)


def teos10_slope(
    by: str, temperature: Any, salinity: Any, pressure: Any, latitude: Any = None, longitude: Any = None
) -> Any:
    """Derivative of `teos10` by temperature (per degC), salinity (per unit) or pressure (per dbar).

    Notes
    -----
    Pressure: at constant Absolute Salinity. From c = v / sqrt(-v_p) with the exact derivatives of the specific
    volume and of Conservative Temperature in gsw; only the pressure at constant Conservative Temperature goes by a
    five-point difference of 10 dbar.

    Examples
    --------
    >>> round(float(teos10_slope("pressure", 10.0, 35.0, 0.0)), 4)
    0.0162
    """
    sa = absolute_salinity_of(salinity, pressure, latitude, longitude)
    ct = gsw.CT_from_t(sa, temperature, pressure)
    volume = gsw.specvol(sa, ct, pressure)
    v_sa, v_ct, v_p = gsw.specvol_first_derivatives(sa, ct, pressure)
    _, _, _, v_sa_p, v_ct_p = gsw.specvol_second_derivatives(sa, ct, pressure)
    root = np.sqrt(-v_p)
    by_ct = (v_ct + 0.5 * volume * v_ct_p / -v_p) / root
    ct_by_sa, ct_by_t, ct_by_pascal = gsw.CT_first_derivatives_wrt_t_exact(sa, temperature, pressure)
    if by == "temperature":
        return by_ct * ct_by_t
    if by == "salinity":
        by_sa = (v_sa + 0.5 * volume * v_sa_p / -v_p) / root
        return (by_sa + by_ct * ct_by_sa) * _salinity_rate(salinity, pressure, latitude, longitude)
    along = _five_point(lambda step: gsw.sound_speed(sa, ct, pressure + step), _STEP_PRESSURE)
    return along + by_ct * ct_by_pascal * _PASCAL_PER_DBAR


def teos10_exact_slope(
    by: str, temperature: Any, salinity: Any, pressure: Any, latitude: Any = None, longitude: Any = None
) -> Any:
    """Derivative of `teos10_exact`; arguments and result as for `teos10_slope`.

    Notes
    -----
    By five-point differences, good to 1e-8 m/s per degC, 1e-5 per unit of salinity above 1e-3, 1e-11
    per dbar. Below salinity 1e-3 the slope by salinity is one-sided and good to 4e-4.

    Examples
    --------
    >>> round(float(teos10_exact_slope("temperature", 10.0, 35.0, 0.0)), 2)
    3.6
    """
    sa = absolute_salinity_of(salinity, pressure, latitude, longitude)
    if by == "temperature":
        return _five_point(lambda h: gsw.sound_speed_t_exact(sa, temperature + h, pressure), _STEP_TEMPERATURE)
    if by == "pressure":
        return _five_point(lambda h: gsw.sound_speed_t_exact(sa, temperature, pressure + h), _STEP_PRESSURE)
    step = np.clip(sa / 8.0, _STEP_SMALL_SALINITY, 0.1)
    middle = _five_point(lambda h: gsw.sound_speed_t_exact(np.maximum(sa + h, 0.0), temperature, pressure), step)
    ahead = gsw.sound_speed_t_exact(sa + _STEP_SMALL_SALINITY, temperature, pressure)
    forward = (ahead - gsw.sound_speed_t_exact(sa, temperature, pressure)) / _STEP_SMALL_SALINITY
    rate = _salinity_rate(salinity, pressure, latitude, longitude)
    return np.where(sa < _SMALL_SALINITY, forward, middle) * rate


_ARGUMENTS = ("temperature", "salinity", "pressure", "latitude", "longitude")

EQUATIONS = (
    Equation(
        name="teos10",
        title="TEOS-10, 75-term polynomial",
        function=teos10,
        arguments=_ARGUMENTS,
        temperature_scale="ITS-90",
        range={
            "temperature": Bounds(-6.0, 40.0, "degC"),
            "salinity": Bounds(0.0, 42.0, "practical salinity"),
            "pressure": Bounds(0.0, 8000.0, "dbar"),
        },
        standard_error=0.07,
        error_basis=(
            "0.035 m/s of the exact Gibbs function (from memory, not confirmed) together with the 0.057 m/s root mean "
            "square by which the polynomial departs from it above 500 dbar (computed with gsw; 0.013 below 1000 dbar)"
        ),
        citation=(
            "IOC, SCOR and IAPSO (2010), TEOS-10 manual, eq. 2.17.1; "
            "Roquet, Madec, McDougall and Barker (2015), Ocean Modelling 90, 29-43"
        ),
        funnel=True,
        slope=teos10_slope,
    ),
    Equation(
        name="teos10-exact",
        title="TEOS-10, exact Gibbs function",
        function=teos10_exact,
        arguments=_ARGUMENTS,
        temperature_scale="ITS-90",
        range={
            "temperature": Bounds(-6.0, 40.0, "degC"),
            "salinity": Bounds(0.0, 42.0, "practical salinity"),
            "pressure": Bounds(0.0, 10000.0, "dbar"),
        },
        standard_error=0.035,
        error_basis="root mean square of the fit of the Gibbs function to sound speeds (from memory, not confirmed)",
        citation=(
            "IOC, SCOR and IAPSO (2010), TEOS-10 manual, eq. 2.17.1; Feistel (2008), Deep-Sea Research I 55, 1639-1671"
        ),
        slope=teos10_exact_slope,
    ),
)
