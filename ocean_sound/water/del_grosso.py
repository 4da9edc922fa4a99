"""The NRL II equation of Del Grosso (1974), and its form for ITS-90."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

from ._polynomial import polynomial
from .equation import Bounds, Equation

if TYPE_CHECKING:
    from collections.abc import Sequence

#: One kg/cm2 (technical atmosphere) is 98066.5 Pa, exactly.
DBAR_PER_KG_CM2 = 9.80665


class _Coefficients(NamedTuple):
    """Powers of temperature, salinity and pressure alone, then the mixed terms by name."""

    temperature: Sequence[float]
    salinity: Sequence[float]
    pressure: Sequence[float]
    st: float
    tp: float
    t2p2: float
    tp2: float
    tp3: float
    t3p: float
    s2p2: float
    st2: float
    s2tp: float
    stp: float


# Del Grosso (1974), JASA 56, 1084-1091; IPTS-68. Misprints in circulation: an 8 lost from the cube of pressure, and
# 1.98955756844e-4 for the square of salinity; the tests compare both sets of coefficients with each other.
_IPTS68 = _Coefficients(
    temperature=(1402.392, 5.01109398873, -0.0550946843172, 2.2153596924e-4),
    salinity=(0.0, 1.32952290781, 1.28955756844e-4),
    pressure=(0.0, 0.156059257041, 2.44998688441e-5, -8.83392332513e-9),
    st=-0.0127562783426,
    tp=6.35191613389e-3,
    t2p2=2.65484716608e-8,
    tp2=-1.59349479045e-6,
    tp3=5.22116437235e-10,
    t3p=-4.38031096213e-7,
    s2p2=-1.61674495909e-9,
    st2=9.6840315641e-5,
    s2tp=4.85639620015e-6,
    stp=-3.40597039004e-4,
)

# Wong and Zhu (1995), JASA 97, 1732-1736; ITS-90.
_ITS90 = _Coefficients(
    temperature=(1402.392, 5.012285, -0.0551184, 2.21649e-4),
    salinity=(0.0, 1.32953, 1.288598e-4),
    pressure=(0.0, 0.1560592, 2.449993e-5, -8.833959e-9),
    st=-0.01275936,
    tp=6.353509e-3,
    t2p2=2.656174e-8,
    tp2=-1.593895e-6,
    tp3=5.222483e-10,
    t3p=-4.383615e-7,
    s2p2=-1.616745e-9,
    st2=9.688441e-5,
    s2tp=4.857614e-6,
    stp=-3.406824e-4,
)


def _nrl2(k: _Coefficients, temperature: Any, salinity: Any, pressure: Any) -> Any:
    t, s, p = temperature, salinity, pressure / DBAR_PER_KG_CM2
    mixed = t * p * (k.tp + t * (k.t3p * t + k.t2p2 * p) + p * (k.tp2 + k.tp3 * p) + s * (k.stp + k.s2tp * s))
    mixed = mixed + s * (t * (k.st + k.st2 * t) + k.s2p2 * s * p * p)
    return polynomial(k.temperature, t) + polynomial(k.salinity, s) + polynomial(k.pressure, p) + mixed


def del_grosso(temperature: Any, salinity: Any, pressure: Any) -> Any:
    """Speed of sound by Del Grosso's equation in the form of Wong and Zhu (1995) for ITS-90.

    Parameters
    ----------
    temperature
        Degrees Celsius on ITS-90.
    salinity
        Practical salinity.
    pressure
        Sea pressure, dbar (the paper takes kg/cm2 above the atmosphere).

    Returns
    -------
    numpy.ndarray
        Speed of sound, m/s.

    Notes
    -----
    Within 0.001 m/s of the original.

    Examples
    --------
    >>> round(float(del_grosso(10.0, 35.0, 0.0)), 4)
    1489.7894
    """
    return _nrl2(_ITS90, temperature, salinity, pressure)


def del_grosso_ipts68(temperature: Any, salinity: Any, pressure: Any) -> Any:
    """Speed of sound by Del Grosso's original equation; temperature on IPTS-68, else as `del_grosso`.

    Examples
    --------
    >>> round(float(del_grosso_ipts68(0.0, 35.0, 0.0)), 4)
    1449.0833
    """
    return _nrl2(_IPTS68, temperature, salinity, pressure)


_ARGUMENTS = ("temperature", "salinity", "pressure")
_RANGE = {
    "temperature": Bounds(0.0, 30.0, "degC"),
    "salinity": Bounds(30.0, 40.0, "practical salinity"),
    "pressure": Bounds(0.0, 1000.0 * DBAR_PER_KG_CM2, "dbar"),
}

EQUATIONS = (
    Equation(
        name="del-grosso",
        title="Del Grosso 1974, ITS-90 form of Wong and Zhu 1995",
        function=del_grosso,
        arguments=_ARGUMENTS,
        temperature_scale="ITS-90",
        range=_RANGE,
        standard_error=0.05,
        error_basis="stated for Del Grosso's equation; the ITS-90 form follows it within 0.001 m/s",
        citation="Del Grosso (1974), JASA 56, 1084-1091; Wong and Zhu (1995), JASA 97, 1732-1736",
    ),
    Equation(
        name="del-grosso-ipts68",
        title="Del Grosso 1974, original form",
        function=del_grosso_ipts68,
        arguments=_ARGUMENTS,
        temperature_scale="IPTS-68",
        range=_RANGE,
        standard_error=0.05,
        error_basis="stated by Del Grosso",
        citation="Del Grosso (1974), JASA 56, 1084-1091",
    ),
)
