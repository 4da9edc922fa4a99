"""What else water says about sound: density, compressibility, impedance; wavelength, wave number, period."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import gsw
import numpy as np

from ..files.cf import attributes as cf_attributes
from ._arrays import Array, elementwise
from ._state import State, on_state
from .registry import DEFAULT_EQUATION, find_equation
from .salinity import absolute_salinity_of
from .speed import evaluated

if TYPE_CHECKING:
    from .equation import Equation


def _density(state: State, *, exact: bool) -> Array:
    sa = absolute_salinity_of(state.salinity, state.pressure, state.latitude, state.longitude)
    if exact:
        return np.asarray(gsw.rho_t_exact(sa, state.temperature, state.pressure))
    return np.asarray(gsw.rho(sa, gsw.CT_from_t(sa, state.temperature, state.pressure), state.pressure))


def _compressibility(state: State, *, exact: bool) -> Array:
    sa = absolute_salinity_of(state.salinity, state.pressure, state.latitude, state.longitude)
    if exact:
        return np.asarray(gsw.kappa_t_exact(sa, state.temperature, state.pressure))
    return np.asarray(gsw.kappa(sa, gsw.CT_from_t(sa, state.temperature, state.pressure), state.pressure))


def density(
    temperature: Any,
    salinity: Any,
    *,
    pressure: Any | None = None,
    depth: Any | None = None,
    latitude: Any | None = None,
    longitude: Any | None = None,
    exact: bool = False,
) -> Any:
    """Density of water in situ, by TEOS-10.

    Parameters
    ----------
    temperature, salinity, pressure, depth, latitude, longitude
        As for `sound_speed`; exactly one of pressure and depth.
    exact
        By the exact Gibbs function instead of the 75-term polynomial.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        kg/m3, of the broadcast shape.

    Raises
    ------
    InputError
        For both or neither of pressure and depth, and for impossible values.

    Notes
    -----
    IOC, SCOR and IAPSO (2010), TEOS-10 manual, section 2.8. Valid where TEOS-10 is: see `equations`.

    Examples
    --------
    >>> round(density(10.0, 35.0, pressure=0.0), 2)
    1026.95
    """
    return on_state(
        lambda state: _density(state, exact=exact),
        (temperature, salinity, pressure, depth, latitude, longitude),
        vertical="pressure",
        who="density",
        name="density",
        attributes=cf_attributes("density"),
    )


def compressibility(
    temperature: Any,
    salinity: Any,
    *,
    pressure: Any | None = None,
    depth: Any | None = None,
    latitude: Any | None = None,
    longitude: Any | None = None,
    exact: bool = False,
) -> Any:
    """Adiabatic compressibility kappa of water, by TEOS-10; the speed of sound squared is 1/(density kappa).

    Parameters
    ----------
    temperature, salinity, pressure, depth, latitude, longitude
        As for `sound_speed`; exactly one of pressure and depth.
    exact
        By the exact Gibbs function instead of the 75-term polynomial.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        1/Pa, of the broadcast shape.

    Raises
    ------
    InputError
        For both or neither of pressure and depth, and for impossible values.

    Notes
    -----
    IOC, SCOR and IAPSO (2010), TEOS-10 manual, section 2.16. Valid where TEOS-10 is: see `equations`.

    Examples
    --------
    >>> kappa = compressibility(10.0, 35.0, pressure=0.0)
    >>> round((density(10.0, 35.0, pressure=0.0) * kappa) ** -0.5, 4)
    1489.8177
    """
    return on_state(
        lambda state: _compressibility(state, exact=exact),
        (temperature, salinity, pressure, depth, latitude, longitude),
        vertical="pressure",
        who="compressibility",
        name="compressibility",
        attributes=cf_attributes("compressibility"),
    )


def impedance(
    temperature: Any,
    salinity: Any,
    *,
    pressure: Any | None = None,
    depth: Any | None = None,
    latitude: Any | None = None,
    longitude: Any | None = None,
    equation: str | Equation = DEFAULT_EQUATION,
) -> Any:
    """Characteristic acoustic impedance of water: density (TEOS-10) times the speed of sound.

    Parameters
    ----------
    temperature, salinity, pressure, depth, latitude, longitude
        As for `sound_speed`; exactly one of pressure and depth.
    equation
        The equation for the speed of sound.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        kg/(m2 s), which is Pa s/m, of the broadcast shape.

    Raises
    ------
    InputError
        For an unknown equation, for both or neither of pressure and depth, and for impossible values.

    Examples
    --------
    >>> round(impedance(10.0, 35.0, pressure=0.0) / 1e6, 3)
    1.53
    """
    chosen = find_equation(equation)
    exact = chosen.name == "teos10-exact"

    def core(state: State) -> Array:
        speed = evaluated(chosen, state.completed(chosen.vertical))
        return np.asarray(_density(state, exact=exact) * speed, dtype=np.float64)

    return on_state(
        core,
        (temperature, salinity, pressure, depth, latitude, longitude),
        vertical="pressure",
        who="impedance",
        name="impedance",
        attributes={
            **cf_attributes("impedance"),
            "equation": chosen.name,
            "citation": chosen.citation,
        },
    )


def wavelength(speed: Any, frequency: Any) -> Any:
    """Wavelength of sound, metres: speed over frequency.

    Parameters
    ----------
    speed
        Speed of sound, m/s; scalar, array or xarray object.
    frequency
        Hz.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Metres, of the broadcast shape.

    Raises
    ------
    InputError
        If a speed is not between 1 and 10000 m/s, or a frequency not between 1e-6 and 1e9 Hz.

    Examples
    --------
    >>> wavelength(1500.0, 12000.0)
    0.125
    """
    return elementwise(
        lambda *, speed, frequency: speed / frequency,
        {"speed": speed, "frequency": frequency},
        name="wavelength",
        attributes={"long_name": "wavelength of sound", "units": "m"},
    )


def wave_number(speed: Any, frequency: Any) -> Any:
    """Wave number of sound, radians per metre: 2 pi times frequency over speed.

    Parameters
    ----------
    speed
        Speed of sound, m/s; scalar, array or xarray object.
    frequency
        Hz.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Radians per metre, of the broadcast shape.

    Raises
    ------
    InputError
        If a speed is not between 1 and 10000 m/s, or a frequency not between 1e-6 and 1e9 Hz.

    Examples
    --------
    >>> round(wave_number(1500.0, 1500.0), 6)
    6.283185
    """
    return elementwise(
        lambda *, speed, frequency: 2.0 * np.pi * frequency / speed,
        {"speed": speed, "frequency": frequency},
        name="wave_number",
        attributes={"long_name": "wave number of sound", "units": "rad m-1"},
    )


def period(frequency: Any) -> Any:
    """Period of a sound, seconds: one over the frequency.

    Parameters
    ----------
    frequency
        Hz; scalar, array or xarray object.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Seconds, of the same shape.

    Raises
    ------
    InputError
        If a frequency is not between 1e-6 and 1e9 Hz.

    Examples
    --------
    >>> period(50.0)
    0.02
    """
    return elementwise(
        lambda *, frequency: 1.0 / frequency,
        {"frequency": frequency},
        name="period",
        attributes={"long_name": "period of sound", "units": "s"},
    )
