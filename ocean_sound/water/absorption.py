"""Absorption of sound in sea water, in decibels per KILOMETRE, by three published formulas.

Frequencies come in hertz; the papers take kilohertz, which stays inside this file.
"""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..files.cf import attributes as cf_attributes
from ._state import State, on_state
from .equation import Bounds
from .ranges import OutOfRangeWarning, box_findings, counted

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from ._arrays import Array

DEFAULT_FORMULA = "francois-garrison"

HERTZ_PER_KILOHERTZ = 1000.0
#: One yard is 0.9144 m exactly; the paper of Thorp gives decibels per kiloyard.
KM_PER_KILOYARD = 0.9144

#: The caller of `absorption`, past the functions of the door that arrays come through.
_WARNING_LEVEL = 7


def _relaxation(frequency: Any, relaxation: Any) -> Any:
    """f1 f^2 / (f1^2 + f^2), 0 for a substance that is not there (f1 = 0)."""
    return relaxation * frequency**2 / (relaxation**2 + frequency**2)


def _water_term(temperature: Any) -> Any:
    """Pure-water coefficient A3 of Francois and Garrison, dB/km/kHz^2; misprints spoil 4.937e-4 and 6.5e-10."""
    t = temperature
    cold = 4.937e-4 + t * (-2.59e-5 + t * (9.11e-7 - 1.50e-8 * t))
    warm = 3.964e-4 + t * (-1.146e-5 + t * (1.45e-7 - 6.5e-10 * t))
    return np.where(t <= 20.0, cold, warm)


def francois_garrison(frequency: Any, temperature: Any, salinity: Any, depth: Any, ph: Any) -> Any:
    """Absorption by Francois and Garrison: boric acid, magnesium sulphate, water.

    Parameters
    ----------
    frequency
        Kilohertz.
    temperature
        Degrees Celsius.
    salinity
        Practical salinity.
    depth
        Metres, positive down.
    ph
        Acidity, pH.

    Returns
    -------
    numpy.ndarray
        dB/km.

    Notes
    -----
    Francois and Garrison (1982), JASA 72, 896-907 and 1879-1890. Absolute temperature is 273 + T, as in
    the paper; 273.15 would change the result by up to 0.7 %. At salinity 0 the water term alone is left.

    Examples
    --------
    >>> round(float(francois_garrison(38.0, 10.0, 35.0, 0.0, 8.0)), 4)
    10.1658
    """
    f, t, s, d = frequency, temperature, salinity, depth
    kelvin = 273.0 + t
    speed = 1412.0 + 3.21 * t + 1.19 * s + 0.0167 * d
    boric = 8.86 / speed * 10.0 ** (0.78 * ph - 5.0)
    boric_frequency = 2.8 * np.sqrt(s / 35.0) * 10.0 ** (4.0 - 1245.0 / kelvin)
    magnesium = 21.44 * s / speed * (1.0 + 0.025 * t) * (1.0 + d * (-1.37e-4 + 6.2e-9 * d))
    magnesium_frequency = 8.17 * 10.0 ** (8.0 - 1990.0 / kelvin) / (1.0 + 0.0018 * (s - 35.0))
    water = _water_term(t) * (1.0 + d * (-3.83e-5 + 4.9e-10 * d))
    return boric * _relaxation(f, boric_frequency) + magnesium * _relaxation(f, magnesium_frequency) + water * f**2


def ainslie_mccolm(frequency: Any, temperature: Any, salinity: Any, depth: Any, ph: Any) -> Any:
    """Absorption by Ainslie and McColm, a simpler form of Francois and Garrison; arguments and result as there.

    Notes
    -----
    Ainslie and McColm (1998), JASA 103, 1671-1672. Within 10 % of Francois and Garrison over the ocean,
    says the paper; 18 % off in the worst corner tried (salinity 8, 30 degC, 3000 m). In fresh water it gives the
    water term alone.

    Examples
    --------
    >>> round(float(ainslie_mccolm(38.0, 10.0, 35.0, 0.0, 8.0)), 4)
    10.3802
    """
    f, t, s, z = frequency, temperature, salinity / 35.0, depth / 1000.0
    boric = 0.106 * _relaxation(f, 0.78 * np.sqrt(s) * np.exp(t / 26.0)) * np.exp((ph - 8.0) / 0.56)
    magnesium = 0.52 * (1.0 + t / 43.0) * s * _relaxation(f, 42.0 * np.exp(t / 17.0)) * np.exp(-z / 6.0)
    return boric + magnesium + 0.00049 * f**2 * np.exp(-(t / 27.0 + z / 17.0))


def thorp(frequency: Any) -> Any:
    """Absorption by Thorp, which depends on the frequency alone.

    Parameters
    ----------
    frequency
        Kilohertz.

    Returns
    -------
    numpy.ndarray
        dB/km; the paper gives dB per kiloyard.

    Notes
    -----
    Thorp (1967), JASA 42, 270: 0.1 f^2/(1 + f^2) + 40 f^2/(4100 + f^2) dB per kiloyard. Fits the deep sea near 4 degC.

    Examples
    --------
    >>> round(float(thorp(10.0)), 4)
    1.1498
    """
    f2 = frequency**2
    return (0.1 * f2 / (1.0 + f2) + 40.0 * f2 / (4100.0 + f2)) / KM_PER_KILOYARD


def thorp_metric(frequency: Any) -> Any:
    """Absorption by Thorp's formula as rewritten for dB/km with two more terms; argument and result as for `thorp`.

    Notes
    -----
    Jensen, Kuperman, Porter and Schmidt, Computational Ocean Acoustics, chapter 1.

    Examples
    --------
    >>> round(float(thorp_metric(50.0)), 4)
    17.5299
    """
    f2 = frequency**2
    return 3.3e-3 + 0.11 * f2 / (1.0 + f2) + 44.0 * f2 / (4100.0 + f2) + 3e-4 * f2


@dataclass(frozen=True, eq=False)
class AbsorptionFormula:
    """One published formula for absorption.

    Attributes
    ----------
    name, title, citation
        What callers ask for; what it is; the paper.
    function
        Takes kilohertz and, if `takes_water`, temperature, salinity, depth and pH; gives dB/km.
    takes_water
        Whether the formula knows more than the frequency.
    range
        Bounds by variable (frequency in Hz) where known to us.
    range_basis
        Where the bounds come from.
    """

    name: str
    title: str
    citation: str
    function: Callable[..., Any]
    takes_water: bool
    range: Mapping[str, Bounds]
    range_basis: str


_FORMULAS = {
    formula.name: formula
    for formula in (
        AbsorptionFormula(
            name="francois-garrison",
            title="Francois and Garrison 1982",
            citation="Francois and Garrison (1982), JASA 72, 896-907 and 1879-1890",
            function=francois_garrison,
            takes_water=True,
            range={"frequency": Bounds(200.0, 1e6, "Hz")},
            range_basis="stated for the formula",
        ),
        AbsorptionFormula(
            name="ainslie-mccolm",
            title="Ainslie and McColm 1998",
            citation="Ainslie and McColm (1998), JASA 103, 1671-1672",
            function=ainslie_mccolm,
            takes_water=True,
            range={
                "frequency": Bounds(100.0, 1e6, "Hz"),
                "temperature": Bounds(-6.0, 35.0, "degC"),
                "salinity": Bounds(5.0, 50.0, "practical salinity"),
                "depth": Bounds(0.0, 7000.0, "m"),
                "ph": Bounds(7.7, 8.3, "pH"),
            },
            range_basis="from memory, not confirmed",
        ),
        AbsorptionFormula(
            name="thorp",
            title="Thorp 1967",
            citation="Thorp (1967), JASA 42, 270",
            function=thorp,
            takes_water=False,
            range={},
            range_basis="none known to us; it fits the deep sea near 4 degC",
        ),
        AbsorptionFormula(
            name="thorp-metric",
            title="Thorp's formula rewritten for dB/km",
            citation="Jensen, Kuperman, Porter and Schmidt, Computational Ocean Acoustics, chapter 1",
            function=thorp_metric,
            takes_water=False,
            range={},
            range_basis="none known to us; it fits the deep sea near 4 degC",
        ),
    )
}


def absorption_formulas() -> dict[str, AbsorptionFormula]:
    """All formulas for absorption, by name, in a new dictionary.

    Examples
    --------
    >>> list(absorption_formulas())
    ['francois-garrison', 'ainslie-mccolm', 'thorp', 'thorp-metric']
    """
    return dict(_FORMULAS)


def absorption(
    frequency: Any,
    temperature: Any,
    salinity: Any,
    *,
    pressure: Any | None = None,
    depth: Any | None = None,
    latitude: Any | None = None,
    ph: Any = 8.0,
    formula: str = DEFAULT_FORMULA,
) -> Any:
    """Absorption of sound in decibels per KILOMETRE (not per metre, not nepers) at frequencies in HERTZ.

    Parameters
    ----------
    frequency
        Hertz, from 1e-6 to 1e9; scalar, array or xarray object.
    temperature
        Degrees Celsius on ITS-90.
    salinity
        Practical salinity.
    pressure, depth
        Sea pressure (dbar) or depth (m, positive down), exactly one of them; pressure is turned into depth by TEOS-10.
    latitude
        Degrees, for that; 45 is assumed if None.
    ph
        Acidity; 8 is common in the upper ocean, 7.7 in the deep Pacific (common practice).
    formula
        "francois-garrison", "ainslie-mccolm", "thorp" or "thorp-metric" (the last two use the frequency alone).

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        dB/km, of the broadcast shape.

    Raises
    ------
    InputError
        For an unknown formula, for both or neither of pressure and depth, and for impossible values.

    Warns
    -----
    OutOfRangeWarning
        Once, in one line, if values lie outside the range of the formula.

    Notes
    -----
    Francois and Garrison state an accuracy of about 5 % (from memory, not confirmed) from 200 Hz to 1
    MHz. The scale of temperature does not matter at that level.

    Examples
    --------
    >>> round(absorption(100e3, 10.0, 35.0, depth=0.0), 2)
    33.63
    """
    if formula not in _FORMULAS:
        raise InputError(f"formula: {formula!r} is unknown; known are {', '.join(_FORMULAS)}")
    chosen = _FORMULAS[formula]

    def core(state: State, *, frequency: Array, ph: Array) -> Array:
        values = {
            "frequency": frequency,
            "temperature": state.temperature,
            "salinity": state.salinity,
            "depth": state.vertical("depth"),
            "ph": ph,
        }
        notes = [counted(note, mask) for mask, note in box_findings(chosen.name, chosen.range, values.__getitem__)]
        if notes:
            warnings.warn("; ".join(notes), OutOfRangeWarning, stacklevel=_WARNING_LEVEL)
        kilohertz = frequency / HERTZ_PER_KILOHERTZ
        if not chosen.takes_water:
            # What the formula does not take still counts as missing where it is NaN, and still broadcasts.
            return np.asarray(
                chosen.function(kilohertz) + 0.0 * (state.temperature + state.salinity + state.vertical("depth"))
            )
        return np.asarray(chosen.function(kilohertz, state.temperature, state.salinity, values["depth"], ph))

    return on_state(
        core,
        (temperature, salinity, pressure, depth, latitude, None),
        vertical="depth",
        who=f"absorption by {chosen.name}",
        name="absorption",
        attributes={
            **cf_attributes("absorption"),
            "long_name": "absorption of sound, decibels per kilometre",
            "formula": chosen.name,
            "citation": chosen.citation,
        },
        others={"frequency": frequency, "ph": ph},
    )
