"""Pure water under pressure: Belogol'skii et al. (1999)."""

from __future__ import annotations

from typing import Any

from ._polynomial import double_polynomial
from .bilaniuk_wong import COEFFICIENTS
from .equation import Bounds, Equation

ATMOSPHERE_MPA = 0.101325
DBAR_PER_MPA = 100.0

# Rows multiply powers 0 to 3 of the pressure above the atmosphere (MPa); the first is the 148-point set of Bilaniuk
# and Wong.
_ROWS = (
    COEFFICIENTS[148],
    (1.49043589, 1.077850609e-2, -2.232794656e-4, 2.718246452e-6),
    (4.31532833e-3, -2.938590293e-4, 6.822485943e-6, -6.674551162e-8),
    (-1.852993525e-5, 1.481844713e-6, -3.940994021e-8, 3.939902307e-10),
)


def belogolskii(temperature: Any, pressure: Any) -> Any:
    """Speed of sound in pure water under pressure by Belogol'skii et al.

    Parameters
    ----------
    temperature
        Degrees Celsius on ITS-90.
    pressure
        Pressure above the atmosphere, dbar (the paper takes absolute MPa).

    Returns
    -------
    numpy.ndarray
        Speed of sound, m/s.

    Notes
    -----
    Valid for 0 to 40 degC and 0.1 to 60 MPa absolute. Belogol'skii et al. (1999), Measurement
    Techniques 42, 406-413. TEOS-10 at salinity 0 lies 0.8 to 1.2 m/s above it at 0 degC and 10 to 30 MPa: the
    standards themselves differ there.

    Examples
    --------
    >>> round(float(belogolskii(20.0, (60.0 - 0.101325) * 100.0)), 5)
    1582.44647
    """
    return double_polynomial(_ROWS, pressure / DBAR_PER_MPA, temperature)


EQUATIONS = (
    Equation(
        name="belogolskii",
        title="Belogol'skii et al. 1999, pure water under pressure",
        function=belogolskii,
        arguments=("temperature", "pressure"),
        temperature_scale="ITS-90",
        range={
            "temperature": Bounds(0.0, 40.0, "degC"),
            "salinity": Bounds(0.0, 0.0, "practical salinity"),
            "pressure": Bounds(0.0, (60.0 - ATMOSPHERE_MPA) * DBAR_PER_MPA, "dbar"),
        },
        standard_error=None,
        error_basis="none known to us",
        citation="Belogol'skii et al. (1999), Measurement Techniques 42, 406-413",
    ),
)
