"""The nine-term equation of Mackenzie (1981)."""

from __future__ import annotations

from typing import Any

from ._polynomial import polynomial
from .equation import Bounds, Equation

_TEMPERATURE = (1448.96, 4.591, -5.304e-2, 2.374e-4)


def mackenzie(temperature: Any, salinity: Any, depth: Any) -> Any:
    """Speed of sound by the nine-term equation of Mackenzie.

    Parameters
    ----------
    temperature
        Degrees Celsius on IPTS-68.
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
    Mackenzie (1981), JASA 70, 807-812. The value attributed to the paper for 25 degC, 35 and 1000 m is 1550.744.

    Examples
    --------
    >>> round(float(mackenzie(25.0, 35.0, 1000.0)), 3)
    1550.744
    """
    t, s, d = temperature, salinity - 35.0, depth
    return (
        polynomial(_TEMPERATURE, t) + s * (1.340 - 1.025e-2 * t) + d * (1.630e-2 + d * (1.675e-7 - 7.139e-13 * t * d))
    )


EQUATIONS = (
    Equation(
        name="mackenzie",
        title="Mackenzie 1981, nine terms",
        function=mackenzie,
        arguments=("temperature", "salinity", "depth"),
        temperature_scale="IPTS-68",
        range={
            "temperature": Bounds(2.0, 30.0, "degC"),
            "salinity": Bounds(25.0, 40.0, "practical salinity"),
            "depth": Bounds(0.0, 8000.0, "m"),
        },
        standard_error=0.070,
        error_basis="stated for the equation",
        citation="Mackenzie (1981), JASA 70, 807-812",
    ),
)
