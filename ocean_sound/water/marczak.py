"""Pure water at atmospheric pressure: Marczak (1997)."""

from __future__ import annotations

from typing import Any

from ._polynomial import polynomial
from .equation import Bounds, Equation

_TEMPERATURE = (1402.385, 5.038813, -5.799136e-2, 3.287156e-4, -1.398845e-6, 2.787860e-9)


def marczak(temperature: Any) -> Any:
    """Speed of sound in pure water at atmospheric pressure by Marczak.

    Parameters
    ----------
    temperature
        Degrees Celsius on ITS-90.

    Returns
    -------
    numpy.ndarray
        Speed of sound, m/s.

    Notes
    -----
    Valid from 0 to 95 degC. Marczak (1997), JASA 102, 2776-2779.

    Examples
    --------
    >>> round(float(marczak(20.0)), 5)
    1482.37955
    """
    return polynomial(_TEMPERATURE, temperature)


EQUATIONS = (
    Equation(
        name="marczak",
        title="Marczak 1997, pure water at atmospheric pressure",
        function=marczak,
        arguments=("temperature",),
        temperature_scale="ITS-90",
        range={
            "temperature": Bounds(0.0, 95.0, "degC"),
            "salinity": Bounds(0.0, 0.0, "practical salinity"),
            "pressure": Bounds(0.0, 0.0, "dbar"),
        },
        standard_error=0.02,
        error_basis="from memory, not confirmed",
        citation="Marczak (1997), JASA 102, 2776-2779",
    ),
)
