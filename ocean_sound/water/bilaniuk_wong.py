"""Pure water at atmospheric pressure: Bilaniuk and Wong (1993, erratum 1996)."""

from __future__ import annotations

from typing import Any

from ..errors import InputError
from ._polynomial import polynomial
from .equation import Bounds, Equation

#: The three polynomials of the erratum, named by the number of measured points behind each.
COEFFICIENTS = {
    112: (1402.38742, 5.03821344, -5.80539349e-2, 3.32000870e-4, -1.44537900e-6, 2.99402365e-9),
    148: (1402.38744, 5.03836171, -5.81172916e-2, 3.34638117e-4, -1.48259672e-6, 3.16585020e-9),
    36: (1402.38677, 5.03798765, -5.80980033e-2, 3.34296650e-4, -1.47936902e-6, 3.14893508e-9),
}

#: The set with the most points; Belogol'skii et al. (1999) build on it, and the UNESCO equation at salinity 0
#: follows it within 0.001 m/s up to 40 degC (the 112-point set departs by up to 0.0075).
DEFAULT_POINTS = 148


def bilaniuk_wong(temperature: Any, *, points: int = DEFAULT_POINTS) -> Any:
    """Speed of sound in pure water at atmospheric pressure by Bilaniuk and Wong.

    Parameters
    ----------
    temperature
        Degrees Celsius on ITS-90.
    points
        Which of the three polynomials: 112, 148 or 36.

    Returns
    -------
    numpy.ndarray
        Speed of sound, m/s.

    Raises
    ------
    InputError
        If `points` is none of the three.

    Notes
    -----
    Valid from 0 to 100 degC. Bilaniuk and Wong (1993), JASA 93, 1609-1612, with the erratum (1996), JASA 99, 3257.

    Examples
    --------
    >>> round(float(bilaniuk_wong(25.0, points=112)), 4)
    1496.7112
    """
    if points not in COEFFICIENTS:
        raise InputError(f"points: {points!r} is no polynomial of Bilaniuk and Wong; 112, 148 or 36 are")
    return polynomial(COEFFICIENTS[points], temperature)


EQUATIONS = (
    Equation(
        name="bilaniuk-wong",
        title="Bilaniuk and Wong 1993/1996, pure water at atmospheric pressure, 148 points",
        function=bilaniuk_wong,
        arguments=("temperature",),
        temperature_scale="ITS-90",
        range={
            "temperature": Bounds(0.0, 100.0, "degC"),
            "salinity": Bounds(0.0, 0.0, "practical salinity"),
            "pressure": Bounds(0.0, 0.0, "dbar"),
        },
        standard_error=None,
        error_basis="none known to us; published equations for pure water lie within 0.03 m/s of each other",
        citation="Bilaniuk and Wong (1993), JASA 93, 1609-1612; erratum (1996), JASA 99, 3257",
    ),
)
