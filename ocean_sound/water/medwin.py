"""The short equation of Medwin (1975), for the upper ocean."""

from __future__ import annotations

from typing import Any

from ._polynomial import polynomial
from .equation import Bounds, Equation

_TEMPERATURE = (1449.2, 4.6, -0.055, 0.00029)


def medwin(temperature: Any, salinity: Any, depth: Any) -> Any:
    """Speed of sound by Medwin's equation.

    Parameters
    ----------
    temperature
        Degrees Celsius on IPTS-68 (inferred from the year of the paper).
    salinity
        Practical salinity.
    depth
        Metres, positive down.

    Returns
    -------
    numpy.ndarray
        Speed of sound, m/s.

    Notes
    -----
    Medwin (1975), JASA 58, 1318-1319. Copies with (0.055 T)^2 and (0.00029 T)^3 are in circulation and wrong.

    Examples
    --------
    >>> round(float(medwin(20.0, 30.0, 100.0)), 2)
    1517.42
    """
    return polynomial(_TEMPERATURE, temperature) + (1.34 - 0.010 * temperature) * (salinity - 35.0) + 0.016 * depth


EQUATIONS = (
    Equation(
        name="medwin",
        title="Medwin 1975",
        function=medwin,
        arguments=("temperature", "salinity", "depth"),
        temperature_scale="IPTS-68",
        range={
            "temperature": Bounds(0.0, 35.0, "degC"),
            "salinity": Bounds(0.0, 45.0, "practical salinity"),
            "depth": Bounds(0.0, 1000.0, "m"),
        },
        standard_error=0.2,
        error_basis="from memory, not confirmed",
        citation="Medwin (1975), JASA 58, 1318-1319",
    ),
)
