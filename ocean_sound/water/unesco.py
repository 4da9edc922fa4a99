"""The UNESCO equation: Chen and Millero (1977), its form for ITS-90, and its correction at pressure for cold water."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from ._polynomial import double_polynomial, polynomial
from .equation import Bounds, Equation

if TYPE_CHECKING:
    from collections.abc import Sequence

DBAR_PER_BAR = 10.0


class _Coefficients(NamedTuple):
    """Rows multiply powers of pressure (bar, gauge), columns powers of temperature."""

    water: Sequence[Sequence[float]]
    linear: Sequence[Sequence[float]]
    root: Sequence[Sequence[float]]
    square: Sequence[float]


# Fofonoff and Millard (1983), UNESCO Technical Papers in Marine Science 44, after Chen and Millero (1977).
_IPTS68 = _Coefficients(
    water=(
        (1402.388, 5.03711, -5.80852e-2, 3.3420e-4, -1.47800e-6, 3.1464e-9),
        (0.153563, 6.8982e-4, -8.1788e-6, 1.3621e-7, -6.1185e-10),
        (3.1260e-5, -1.7107e-6, 2.5974e-8, -2.5335e-10, 1.0405e-12),
        (-9.7729e-9, 3.8504e-10, -2.3643e-12),
    ),
    linear=(
        (1.389, -1.262e-2, 7.164e-5, 2.006e-6, -3.21e-8),
        (9.4742e-5, -1.2580e-5, -6.4885e-8, 1.0507e-8, -2.0122e-10),
        (-3.9064e-7, 9.1041e-9, -1.6002e-10, 7.988e-12),
        (1.100e-10, 6.649e-12, -3.389e-13),
    ),
    root=((-1.922e-2, -4.42e-5), (7.3637e-5, 1.7945e-7)),
    square=(1.727e-3, -7.9836e-6),
)

# Wong and Zhu (1995), JASA 97, 1732-1736.
_ITS90 = _Coefficients(
    water=(
        (1402.388, 5.03830, -5.81090e-2, 3.3432e-4, -1.47797e-6, 3.1419e-9),
        (0.153563, 6.8999e-4, -8.1829e-6, 1.3632e-7, -6.1260e-10),
        (3.1260e-5, -1.7111e-6, 2.5986e-8, -2.5353e-10, 1.0415e-12),
        (-9.7729e-9, 3.8513e-10, -2.3654e-12),
    ),
    linear=(
        (1.389, -1.262e-2, 7.166e-5, 2.008e-6, -3.21e-8),
        (9.4742e-5, -1.2583e-5, -6.4928e-8, 1.0515e-8, -2.0142e-10),
        (-3.9064e-7, 9.1061e-9, -1.6009e-10, 7.994e-12),
        (1.100e-10, 6.651e-12, -3.391e-13),
    ),
    root=((-1.922e-2, -4.42e-5), (7.3637e-5, 1.7950e-7)),
    square=(1.727e-3, -7.9836e-6),
)

# Millero and Li (1994), JASA 95, 2757-2759: rows multiply powers 1, 2 and 3 of pressure (bar). The last coefficient
# of the second row is -2.59e-8.
_MILLERO_LI = ((0.0,), (0.0029, -2.19e-4, 1.4e-5), (-4.76e-6, 3.47e-7, -2.59e-8), (2.68e-9,))


def _chen_millero(coefficients: _Coefficients, temperature: Any, salinity: Any, pressure: Any) -> Any:
    bar = pressure / DBAR_PER_BAR
    water = double_polynomial(coefficients.water, bar, temperature)
    linear = double_polynomial(coefficients.linear, bar, temperature)
    root = double_polynomial(coefficients.root, bar, temperature)
    square = polynomial(coefficients.square, bar)
    return water + salinity * (linear + np.sqrt(salinity) * root + salinity * square)


def unesco(temperature: Any, salinity: Any, pressure: Any) -> Any:
    """Speed of sound by the UNESCO equation in the form of Wong and Zhu (1995) for ITS-90.

    Parameters
    ----------
    temperature
        Degrees Celsius on ITS-90.
    salinity
        Practical salinity.
    pressure
        Sea pressure, dbar.

    Returns
    -------
    numpy.ndarray
        Speed of sound, m/s.

    Notes
    -----
    Within 0.01 m/s of the original. At depth it runs 0.5 to 1.3 m/s fast against Del Grosso and TEOS-10.

    Examples
    --------
    >>> round(float(unesco(20.0, 35.0, 0.0)), 4)
    1521.478
    """
    return _chen_millero(_ITS90, temperature, salinity, pressure)


def unesco_ipts68(temperature: Any, salinity: Any, pressure: Any) -> Any:
    """Speed of sound by the original UNESCO equation; temperature on IPTS-68, else as `unesco`.

    Notes
    -----
    Fofonoff and Millard (1983), after Chen and Millero (1977). The check value of that report:

    Examples
    --------
    >>> round(float(unesco_ipts68(40.0, 40.0, 10000.0)), 3)
    1731.995
    """
    return _chen_millero(_IPTS68, temperature, salinity, pressure)


def unesco_millero_li(temperature: Any, salinity: Any, pressure: Any) -> Any:
    """Speed of sound by the original UNESCO equation corrected by Millero and Li (1994); arguments as `unesco_ipts68`.

    Notes
    -----
    The correction is for cold water at pressure: at 40 degC and 300 bar it overcorrects by 1.9 m/s.

    Examples
    --------
    >>> round(float(unesco_ipts68(2.0, 35.0, 4000.0) - unesco_millero_li(2.0, 35.0, 4000.0)), 3)
    0.512
    """
    correction = double_polynomial(_MILLERO_LI, pressure / DBAR_PER_BAR, temperature)
    return _chen_millero(_IPTS68, temperature, salinity, pressure) - correction


_ARGUMENTS = ("temperature", "salinity", "pressure")
_RANGE = {
    "temperature": Bounds(0.0, 40.0, "degC"),
    "salinity": Bounds(0.0, 40.0, "practical salinity"),
    "pressure": Bounds(0.0, 10000.0, "dbar"),
}
_CITATION = "Chen and Millero (1977), JASA 62, 1129-1135; Fofonoff and Millard (1983), UNESCO Tech. Pap. Mar. Sci. 44"

_ERROR_BASIS = "standard deviation of the fit at pressure, stated by the authors; the known bias at depth is larger"

EQUATIONS = (
    Equation(
        name="unesco",
        title="UNESCO (Chen and Millero 1977), ITS-90 form of Wong and Zhu 1995",
        function=unesco,
        arguments=_ARGUMENTS,
        temperature_scale="ITS-90",
        range=_RANGE,
        standard_error=0.19,
        error_basis=_ERROR_BASIS,
        citation=f"{_CITATION}; Wong and Zhu (1995), JASA 97, 1732-1736",
    ),
    Equation(
        name="unesco-ipts68",
        title="UNESCO (Chen and Millero 1977), original form",
        function=unesco_ipts68,
        arguments=_ARGUMENTS,
        temperature_scale="IPTS-68",
        range=_RANGE,
        standard_error=0.19,
        error_basis=_ERROR_BASIS,
        citation=_CITATION,
    ),
    Equation(
        name="unesco-millero-li",
        title="UNESCO with the correction of Millero and Li 1994 for cold water",
        function=unesco_millero_li,
        arguments=_ARGUMENTS,
        temperature_scale="IPTS-68",
        range=_RANGE,
        standard_error=None,
        error_basis="none known to us for the corrected form",
        citation=f"{_CITATION}; Millero and Li (1994), JASA 95, 2757-2759",
    ),
)
