"""Units as they stand in netCDF files, brought to a spelling that `units` knows: factors, scales and broken bytes."""

from __future__ import annotations

import re
from functools import lru_cache
from typing import TYPE_CHECKING

from .table import shortened
from .units import is_unit

if TYPE_CHECKING:
    from .store import Variable

_FACTOR = re.compile(r"^\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*\*?\s*([A-Za-zµμ%].*)$")
_NONE = {"", "unspecified", "none", "n/a", "unknown", "nan", "unitless", "?"}
_SPELLINGS = {
    "temperature": {"celcius": "degC", "degreescelcius": "degC"},
    "salinity": {
        **dict.fromkeys(("0.001", "10-3", "10^-3", "1.e-3", "1.0e-3", "1e-03", "1.e-03", "1.0e-03"), "1e-3"),
        **dict.fromkeys(("dimensionless", "1.0", "pss78", "psss78", "psu78", "psal"), "PSS-78"),
    },
    "conductivity": dict.fromkeys(("mho/m", "mhos/m", "mhom-1", "mhosm-1", "mhos.m-1", "siemensm-1"), "S/m"),
}
_MEANT = {"temperature": {"c": "degC", "f": "degF"}, "conductivity": {"s/cm": "uS/cm", "s/m": "uS/m"}}
_SCALE_NAMES = ("reference_scale", "temperature_scale", "scale", "Scale", "sdn_parameter_name")


def cleaned_unit(variable: Variable, name: str) -> tuple[str | None, float, list[str]]:
    """The unit of a variable as `units.to_ours` wants it, a factor on the values, and what was assumed.

    Parameters
    ----------
    variable : Variable
    name : str
        What it is, as `units` names it.

    Returns
    -------
    unit : str or None
        None where the file says nothing.
    factor : float
        As of ``10000.0 Pa``.
    notes : list of str
    """
    given = shortened(variable.text("units"))
    if given.lower() in _NONE:
        return _scaled(variable, name, None), 1.0, []
    if variable.text("standard_name") == "sea_water_practical_salinity":
        return "PSS-78", 1.0, []  # the standard name says which salinity, whatever the unit
    unit, factor, notes = _spelt(given, name)
    return _scaled(variable, name, unit), factor, [*notes]


@lru_cache(maxsize=1024)
def _spelt(given: str, name: str) -> tuple[str, float, tuple[str, ...]]:
    unit, factor = given, 1.0
    notes: tuple[str, ...] = ()
    match = _FACTOR.match(unit)
    if match is not None and not is_unit(name, unit):
        factor, unit = float(match[1]), match[2].strip()
    unit = _SPELLINGS.get(name, {}).get(re.sub(r"[\s_]", "", unit).lower(), unit)
    if not is_unit(name, unit):
        repaired = _repaired(unit, name)
        if repaired is not None:
            shown = given.encode("ascii", "backslashreplace").decode()
            notes = (f"unit of {name.replace('_', ' ')}, damaged in the file ({shown}), read as {repaired}",)
            unit = repaired
    return unit, factor, notes


def _repaired(unit: str, name: str) -> str | None:
    """A unit whose bytes that are no ASCII were lost, where only one unit can have stood there."""
    rest = re.sub(r"^(?:[^\x20-\x7e]|\?|\\x?[0-9a-fA-F]{2})+\s*", "", unit)
    if rest == unit:
        bare = re.sub(r"\s*[(\[][^()\[\]]*[)\]]\s*$", "", unit)  # a remark in brackets behind the unit
        return bare if bare != unit and is_unit(name, bare) else None
    whole = re.sub(r"\s*[(\[].*$", "", rest).strip().lower()
    meant = _MEANT.get(name, {}).get(whole)
    if meant is None:
        return rest if is_unit(name, rest) and name != "conductivity" else None
    if name == "temperature":
        with_scale = f"deg{rest}"
        return with_scale if is_unit(name, with_scale) else meant
    return meant


def _scaled(variable: Variable, name: str, unit: str | None) -> str | None:
    """Temperatures whose scale stands in an attribute of its own."""
    if name != "temperature" or (unit is not None and not re.search(r"(?i)c$|celsius", unit)):
        return unit
    if any("68" in variable.text(about) for about in _SCALE_NAMES):
        return "degC IPTS-68"
    return unit
