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
    "pressure": [
        ("dbar", "dbar dbars decibar decibars db", None),
        ("bar", "bar bars", lambda p: p * 10.0),
        ("MPa", "mpa megapascal", lambda p: p * 100.0),
        ("kPa", "kpa kilopascal", lambda p: p / 10.0),
        ("hPa", "hpa mbar millibar hectopascal", lambda p: p / 100.0),
        ("Pa", "pa pascal", lambda p: p / 1e4),
        ("psi", "psi", lambda p: p * _DBAR_PER_PSI),
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
_QUANTITY = {"height": "depth", "absolute_pressure": "pressure", "sea_pressure": "pressure"}


def quantity_of(name: str) -> str:
    """The variable that a recognised column name belongs to: a height is a depth with the other sign."""
    return _QUANTITY.get(name, name)


def _plain(unit: str) -> str:
    text = unit.strip().lower().replace("°", "deg").replace("º", "deg").replace("µ", "u").replace("μ", "u")
    return re.sub(r"[\s,()\[\]{}^*·._]", "", text)


def is_unit(name: str, unit: str) -> bool:
    """Whether the text is a unit in which that variable may be given, ambiguous ones included."""
    plain = _plain(unit)
    return plain in _WAYS.get(quantity_of(name), {}) or (name == "salinity" and plain in _GRAMS)


def accepted(name: str) -> str:
    """The units in which a variable may be given, as a list in words."""
    return ", ".join(unit for unit, _, _ in _SPELLINGS[quantity_of(name)])


def to_ours(
    name: str, values: NDArray[np.float64], unit: str | None, *, where: str, settled: bool = False
) -> tuple[NDArray[np.float64], str | None]:
    """Values in our unit, and one line on what was assumed or converted, if anything was.

    Parameters
    ----------
    name : str
        The column's recognised name: a variable of ours, or ``height``, ``sea_pressure`` or ``absolute_pressure``.
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
    choices = _WAYS[quantity]
    plain = _plain(unit) if unit else None
    if plain in _GRAMS and quantity == "salinity":
        raise InputError(
            f"{where}: salinity in g/kg may be absolute salinity or practical salinity; if it is practical say so with "
            f'--map "salinity=COLUMN [PSS-78]", if absolute convert it to practical salinity first'
        )
    if plain is not None and plain not in choices:
        what = quantity.replace("_", " ")
        raise InputError(f"{where}: unit {unit!r} is not known for {what}; use one of {accepted(name)}")
    note: str | None
    if plain is None:
        ours = _SPELLINGS[quantity][0][0]
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


def conversions() -> Mapping[str, Mapping[str, tuple[str, Convert]]]:
    """By variable and plain spelling, each unit and the way from it to ours (None: the same)."""
    return _WAYS
