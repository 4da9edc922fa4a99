"""The equation of Coppens (1981)."""

from __future__ import annotations

from typing import Any

from ._polynomial import polynomial
from .equation import Bounds, Equation

_TEMPERATURE = (1449.05, 45.7, -5.21, 0.23)
_SALINITY = (1.333, -0.126, 0.009)


def coppens(temperature: Any, salinity: Any, depth: Any) -> Any:
    """Speed of sound by the equation of Coppens.

    Parameters
    ----------
    temperature
        Degrees Celsius on IPTS-68 (inferred from the year of the paper).
    salinity
        Practical salinity.
    depth
        Metres, positive down (the paper takes kilometres).

    Returns
    -------
    numpy.ndarray
        Speed of sound, m/s.

    Notes
    -----
    Coppens (1981), JASA 69, 862-863.

    Examples
    --------
    >>> round(float(coppens(20.0, 30.0, 1000.0)), 3)
    1532.464
    """
    t, s, d = temperature / 10.0, salinity - 35.0, depth / 1000.0
    surface = polynomial(_TEMPERATURE, t) + polynomial(_SALINITY, t) * s
    return surface + d * (16.23 + 0.253 * t + (0.213 - 0.1 * t) * d + (0.016 + 0.0002 * s) * s * t)


EQUATIONS = (
    Equation(
        name="coppens",
        title="Coppens 1981",
        function=coppens,
        arguments=("temperature", "salinity", "depth"),
        temperature_scale="IPTS-68",
        range={
            "temperature": Bounds(0.0, 35.0, "degC"),
            "salinity": Bounds(0.0, 45.0, "practical salinity"),
            "depth": Bounds(0.0, 4000.0, "m"),
        },
        standard_error=0.1,
        error_basis="from memory, not confirmed",
        citation="Coppens (1981), JASA 69, 862-863",
    ),
)
