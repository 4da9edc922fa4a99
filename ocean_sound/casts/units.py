"""Units as they stand at the head of columns, and the way from each to ours; here and nowhere else."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from ..errors import InputError
from ..water.scales import t90_from_t68

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    import numpy as np
    from numpy.typing import NDArray

    Convert = Callable[[NDArray[np.float64]], NDArray[np.float64]] | None  # None: ours already, not a bit is changed

# Exact by definition: the pound-force and the inch (international yard and pound, 1959), the standard gravity, the
# standard atmosphere (CGPM 1954), the international fathom of six feet.
_DBAR_PER_PSI = 4.4482216152605 / 0.0254**2 / 1e4
_DBAR_PER_KGF_CM2 = 9.80665
_DBAR_PER_ATM = 10.1325
_METRES_PER_FOOT = 0.3048
_METRES_PER_FATHOM = 1.8288

AIR_PRESSURE = 10.1325
"""Standard atmosphere, dbar: between absolute and sea pressure where nothing else is said (as in TEOS-10)."""

# Spellings are compared after `_plain`: lower case, no blanks or brackets, degree sign as 'deg', micro sign as 'u'.
_CELSIUS = (
    "degc c celsius degcelsius degreec degreescelsius degreecelsius degreesc degsc "
    "its-90 its90 its-90degc degcits-90 t90"
)
_T68 = "ipts-68 ipts68 ipts-68degc degcipts-68 its-68 t68"
_FAHRENHEIT = "degf f fahrenheit degfahrenheit degreesfahrenheit degreef degreesf"
_FOOT = "ft feet foot"

_SPELLINGS: dict[str, list[tuple[str, str, Convert]]] = {
    # quantity: (the unit as our messages name it, its spellings, the way to ours)
    "temperature": [
        ("degC", _CELSIUS, None),
        ("degC IPTS-68", _T68, t90_from_t68),
        ("degF", _FAHRENHEIT, lambda t: (t - 32.0) / 1.8),
        ("K", "k kelvin degk", lambda t: t - 273.15),
    ],
    "salinity": [
        ("PSS-78", "pss-78 pss78 pss psu 1 practical practicalsalinityunit practicalsalinityunits", None),
        ("ppt", "ppt 1e-3 permil permille o/oo 0/00 ‰", None),
    ],
    "absolute_salinity": [("g/kg", "g/kg gkg-1", None), ("kg/kg", "kg/kg kgkg-1", lambda s: s * 1000.0)],
    "pressure": [
        ("dbar", "dbar dbars decibar decibars db", None),
        ("bar", "bar bars", lambda p: p * 10.0),
        ("MPa", "mpa megapascal megapascals", lambda p: p * 100.0),
        ("kPa", "kpa kilopascal kilopascals", lambda p: p / 10.0),
        ("hPa", "hpa mbar millibar millibars hectopascal hectopascals", lambda p: p / 100.0),
        ("Pa", "pa pascal pascals", lambda p: p / 1e4),
        ("psi", "psi lbf/in2", lambda p: p * _DBAR_PER_PSI),
        ("kg/cm2", "kg/cm2 kgf/cm2", lambda p: p * _DBAR_PER_KGF_CM2),
        ("atm", "atm", lambda p: p * _DBAR_PER_ATM),
    ],
    "depth": [
        ("m", "m metre metres meter meters mtr mts", None),
        ("ft", _FOOT, lambda z: z * _METRES_PER_FOOT),
        ("fathom", "fathom fathoms fm fms fth fthm", lambda z: z * _METRES_PER_FATHOM),
        ("km", "km", lambda z: z * 1000.0),
    ],
    "conductivity": [
        ("S/m", "s/m sm-1 siemens/m siemens/metre", None),
        ("mS/cm", "ms/cm mscm-1 mmho/cm", lambda c: c / 10.0),
        ("uS/cm", "us/cm uscm-1 umho/cm", lambda c: c / 1e4),
        ("mS/m", "ms/m msm-1", lambda c: c / 1e3),
        ("uS/m", "us/m usm-1", lambda c: c / 1e6),
    ],
    "sound_speed": [
        ("m/s", "m/s ms-1 m/sec mps metres/second meters/second metre/second", None),
        ("ft/s", "ft/s fts-1 ft/sec fps feet/second feet/s", lambda c: c * _METRES_PER_FOOT),
        ("km/s", "km/s kms-1", lambda c: c * 1000.0),
    ],
}
_WAYS: dict[str, dict[str, tuple[str, Convert]]] = {
    quantity: {spelling: (unit, way) for unit, spellings, way in rows for spelling in spellings.split()}
    for quantity, rows in _SPELLINGS.items()
}
_GRAMS = {"g/kg", "gkg-1"}

# Columns that end up as one of our variables but are not named like it.
_QUANTITY = {
    "height": "depth",
    "absolute_pressure": "pressure",
    "sea_pressure": "pressure",
    "absolute_salinity": "salinity",
    "specific_conductance": "conductivity",
}


def quantity_of(name: str) -> str:
    """The variable that a recognised column name belongs to: a height is a depth with the other sign."""
    return _QUANTITY.get(name, name)


def _plain(unit: str) -> str:
    text = unit.strip().lower().replace("°", "deg").replace("º", "deg").replace("µ", "u").replace("μ", "u")
    return re.sub(r"[\s,()\[\]{}^*·._]", "", text)


def is_unit(name: str, unit: str) -> bool:
    """Whether the text is a unit in which that variable may be given, ambiguous ones included."""
    plain = _plain(unit)
    return plain in _ways(name) or (name == "salinity" and plain in _GRAMS)


def _ways(name: str) -> dict[str, tuple[str, Convert]]:
    return _WAYS[name] if name in _WAYS else _WAYS.get(quantity_of(name), {})


def accepted(name: str) -> str:
    """The units in which a variable may be given, as a list in words."""
    return ", ".join(unit for unit, _, _ in _spellings(name))


def _spellings(name: str) -> list[tuple[str, str, Convert]]:
    return _SPELLINGS[name] if name in _SPELLINGS else _SPELLINGS[quantity_of(name)]


def to_ours(
    name: str, values: NDArray[np.float64], unit: str | None, *, where: str, settled: bool = False
) -> tuple[NDArray[np.float64], str | None]:
    """Values in our unit, and one line on what was assumed or converted, if anything was.

    Parameters
    ----------
    name : str
        The column's recognised name: a variable of ours, or ``height``, ``sea_pressure``, ``absolute_pressure``,
        ``absolute_salinity`` or ``specific_conductance``.
    values : ndarray
        Not changed; handed back itself where it is in our unit already.
    unit : str or None
        As it stands in the file; None where the file says nothing.
    where : str
        File and column, for the message.
    settled : bool
        Whether a person has said which column is what, and so settled what the name leaves open.

    Returns
    -------
    values : ndarray
    note : str or None

    Raises
    ------
    InputError
        An unknown unit, or one that leaves open what is meant; the message names the choices.

    Examples
    --------
    >>> import numpy as np
    >>> to_ours("temperature", np.array([50.0]), "°F", where="demo.csv")
    (array([10.]), 'temperature converted from degF')
    """
    quantity = quantity_of(name)
    choices = _ways(name)
    plain = _plain(unit) if unit else None
    if plain in _GRAMS and name == "salinity":
        raise InputError(
            f"{where}: salinity in g/kg may be absolute salinity or practical salinity; say which with "
            f'--map "absolute_salinity=COLUMN [g/kg]" or --map "salinity=COLUMN [PSS-78]"'
        )
    if plain is not None and plain not in choices:
        what = (name if name in _WAYS else quantity).replace("_", " ")
        raise InputError(f"{where}: unit {unit!r} is not known for {what}; use one of {accepted(name)}")
    note: str | None
    if plain is None:
        ours = _spellings(name)[0][0]
        label, way, note = ours, None, f"{name.replace('_', ' ')} has no unit; taken as {ours}"
    else:
        label, way = choices[plain]
        note = None if way is None else f"{name.replace('_', ' ')} converted from {label}"
    if name == "pressure" and not settled:
        if label != "dbar":
            raise InputError(
                f"{where}: pressure in {label} may be sea pressure or absolute pressure; say which with "
                f'--map "sea_pressure=COLUMN [{label}]" or --map "absolute_pressure=COLUMN [{label}]"'
            )
        note = "; ".join(filter(None, [note, "pressure taken as sea pressure"]))
    if label == "ppt":
        note = "salinity in parts per thousand taken as practical salinity"
    return (values if way is None else way(values)), note


def from_name(name: str, values: NDArray[np.float64]) -> tuple[NDArray[np.float64], str | None]:
    """Values of the variable itself from a height or an absolute pressure, both in our units; and a line on it."""
    if name == "height":
        return 0.0 - values, "height above the surface turned into depth below it"
    if name == "absolute_pressure":
        note = f"sea pressure is absolute pressure less a standard atmosphere of {AIR_PRESSURE} dbar"
        return values - AIR_PRESSURE, note
    return values, None


PERCENT_PER_DEGREE = 1.91
"""By how much of its value at 25 degC the conductivity of water grows with each degree: Standard Methods for the
Examination of Water and Wastewater, method 2510 B (from memory)."""


def conductivity_in_situ(
    at_25_degrees: NDArray[np.float64], temperature: NDArray[np.float64], percent: float = PERCENT_PER_DEGREE
) -> NDArray[np.float64]:
    """Conductivity in situ from specific conductance: what the instrument did to get there is taken back.

    Parameters
    ----------
    at_25_degrees : ndarray
        Specific conductance, referred to 25 degC, in any unit.
    temperature : ndarray
        degC, ITS-90.
    percent : float
        Change of conductivity with temperature that the instrument reckoned with, per cent of the value at 25 degC.

    Returns
    -------
    ndarray
        In the same unit: ``at_25_degrees * (1 + percent / 100 * (temperature - 25))``.

    Examples
    --------
    >>> import numpy as np
    >>> conductivity_in_situ(np.array([50.0, 50.0]), np.array([25.0, 15.0]))
    array([50.  , 40.45])
    """
    return at_25_degrees * (1.0 + percent / 100.0 * (temperature - 25.0))


def conversions() -> Mapping[str, Mapping[str, tuple[str, Convert]]]:
    """By variable and plain spelling, each unit and the way from it to ours (None: the same)."""
    return _WAYS
