"""The equation of Leroy, Robinson and Goldsmith (2008), for all oceans and seas."""

from __future__ import annotations

from typing import Any

import numpy as np

from ._polynomial import polynomial
from .equation import Bounds, Equation

_TEMPERATURE = (1402.5, 5.0, -5.44e-2, 2.1e-4)
_SALINITY = (1.33, -1.23e-2, 8.7e-5)


def leroy_as_printed(temperature: Any, salinity: Any, depth: Any, latitude: Any) -> Any:
    """The formula with the latitude term as printed, 1.2e-6 Z (L - 45); arguments as for `leroy`.

    Whether the authors mean a southern latitude by its absolute value could not be read; the formula as it stands
    would make water at 65 degrees south and 5000 m slower by 0.78 m/s than its like in the north.

    Examples
    --------
    >>> round(float(leroy_as_printed(0.0, 34.0, 5000.0, -65.0)), 4)
    1532.9535
    """
    t, s, z = temperature, salinity, depth
    vertical = 1.56e-2 + 1.2e-6 * (latitude - 45.0) + 3e-7 * t * t + 1.43e-5 * s
    vertical = vertical + z * (2.55e-7 - z * (7.3e-12 + 9.5e-13 * t))
    return polynomial(_TEMPERATURE, t) + polynomial(_SALINITY, t) * s + vertical * z


def leroy(temperature: Any, salinity: Any, depth: Any, latitude: Any) -> Any:
    """Speed of sound by the equation of Leroy, Robinson and Goldsmith.

    Parameters
    ----------
    temperature
        Degrees Celsius on ITS-90.
    salinity
        Practical salinity.
    depth
        Metres, positive down.
    latitude
        Degrees. Its absolute value counts: the term stands for gravity, which is alike on both hemispheres.

    Returns
    -------
    numpy.ndarray
        Speed of sound, m/s.

    Notes
    -----
    Leroy, Robinson and Goldsmith (2008), JASA 124, 2774-2782.

    Examples
    --------
    >>> round(float(leroy(10.0, 35.0, 1000.0, 45.0)), 4)
    1506.1882
    """
    return leroy_as_printed(temperature, salinity, depth, np.abs(latitude))


EQUATIONS = (
    Equation(
        name="leroy",
        title="Leroy, Robinson and Goldsmith 2008",
        function=leroy,
        arguments=("temperature", "salinity", "depth", "latitude"),
        temperature_scale="ITS-90",
        range={
            "temperature": Bounds(-1.0, 30.0, "degC"),
            "salinity": Bounds(0.0, 42.0, "practical salinity"),
            "depth": Bounds(0.0, 12000.0, "m"),
        },
        standard_error=0.2,
        error_basis="agreement with two reference equations, stated in the abstract",
        citation="Leroy, Robinson and Goldsmith (2008), JASA 124, 2774-2782",
    ),
)
