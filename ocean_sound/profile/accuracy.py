"""How well instruments measure: what is common to all levels of a cast, and what differs from level to level."""

from __future__ import annotations

import re
from dataclasses import dataclass, fields, replace
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

# Where a cast gives no salinity accuracy of its own: that of the Argo programme (see `INSTRUMENTS`).
SALINITY_UNCERTAINTY = 0.01
PRESSURE_UNCERTAINTY = 2.4  # dbar


@dataclass(frozen=True)
class Accuracy:
    """Standard uncertainties (k = 1) of what a cast measured.

    Those without ``noise`` in their name are of the calibration: one unknown error, alike on every level of the cast.
    Noise is drawn anew on every level.

    Parameters
    ----------
    temperature : float
        degC.
    salinity : float, optional
        Practical salinity; where not given 0.01 if it was measured and 1 if it is assumed.
    pressure : float, optional
        dbar, taken as metres for casts that give depth; where not given 2.4, and for casts that measured the speed of
        sound nothing: their depth is taken as exact.
    sound_speed : float, optional
        m/s, for casts that measured the speed itself; unknown where not given.
    conductivity : float, optional
        S/m, for casts that measured conductivity; where not given, what makes the stated uncertainty of salinity.
    pressure_fraction : float
        Share of the pressure or depth itself; the greater of this and `pressure` counts.
    temperature_noise, salinity_noise, pressure_noise, sound_speed_noise : float
        In the same units, independent from level to level.

    Raises
    ------
    InputError
        If one is negative or not finite.

    Examples
    --------
    >>> Accuracy(temperature=0.1).temperature_noise
    0.0005
    """

    temperature: float = 0.002
    salinity: float | None = None
    pressure: float | None = None
    sound_speed: float | None = None
    conductivity: float | None = None
    pressure_fraction: float = 0.0
    temperature_noise: float = 0.0005
    salinity_noise: float = 0.0005
    pressure_noise: float = 0.05
    sound_speed_noise: float = 0.0

    def __post_init__(self) -> None:
        for name in (each.name for each in fields(self)):
            value = getattr(self, name)
            if value is not None and not (np.isfinite(value) and value >= 0.0):
                raise InputError(f"{said_name(name)} is {value:g}; a finite number of 0 or more would be right")

    def but(self, **given: float | None) -> Accuracy:
        """The same with other numbers where one is given.

        >>> Accuracy().but(temperature=0.1, salinity=None).temperature
        0.1
        """
        return replace(self, **{name: value for name, value in given.items() if value is not None})


def said_name(name: str) -> str:
    """The name by which callers of `Profile.from_cast` know a field."""
    return name if name.endswith(("_noise", "_fraction")) else f"{name}_uncertainty"


INSTRUMENTS: Mapping[str, Accuracy] = MappingProxyType(
    {
        # What the Argo programme states: 0.002 degC, 0.01, 2.4 dbar. Wong et al. (2020), Frontiers in Marine Science
        # 7:700 (from memory, not confirmed). Noise: what rounding and the pump leave on a level (common practice).
        "float": Accuracy(pressure=PRESSURE_UNCERTAINTY),
        # A lowered CTD as the World Ocean Circulation Experiment asked for: 0.002 degC, 0.002, 3 dbar at full depth, of
        # which half is of the range: 0.05 % of 6000 dbar (WOCE Operations Manual; from memory, not confirmed).
        "ctd": Accuracy(salinity=0.002, pressure=0.5, pressure_fraction=0.0005),
        # An expendable probe: 0.1 degC, and 2 % of its depth or 5 m, whichever is greater (common practice).
        "xbt": Accuracy(
            temperature=0.1, pressure=5.0, pressure_fraction=0.02, temperature_noise=0.02, pressure_noise=0.0
        ),
    }
)
"""Stated defaults by kind of instrument."""

_USUAL = Accuracy()

_PER_CENT = re.compile(r"(\d+(?:\.\d+)?)\s*(?:%|per cent|percent)", re.IGNORECASE)
_METRES = re.compile(r"(\d+(?:\.\d+)?)\s*m(?:et(?:er|re)s?)?\b", re.IGNORECASE)


def accuracy_by_name(accuracy: Accuracy | str | None, attributes: Mapping[str, str]) -> Accuracy:
    """The accuracy meant: as given, by the name of an instrument, or by what the cast says of itself.

    A cast that states a fall-rate equation or the uncertainty of its depth is taken for an expendable probe's, any
    other for a float's.

    Raises
    ------
    InputError
        An unknown instrument.

    Examples
    --------
    >>> accuracy_by_name(None, {"depth_uncertainty": "3 % or 7 m"}).pressure_fraction
    0.03
    """
    if isinstance(accuracy, Accuracy):
        return accuracy
    if accuracy is not None:
        if accuracy not in INSTRUMENTS:
            raise InputError(f"accuracy: no instrument is named {accuracy!r}; known are {', '.join(INSTRUMENTS)}")
        return INSTRUMENTS[accuracy]
    stated = attributes.get("depth_uncertainty", "")
    if not stated and "fall_rate_equation" not in attributes:
        return _USUAL
    usual = INSTRUMENTS["xbt"]
    share, metres = _PER_CENT.search(stated), _METRES.search(stated)
    if share is None and metres is None:
        return usual
    return replace(
        usual,
        pressure=0.0 if metres is None else float(metres[1]),
        pressure_fraction=0.0 if share is None else float(share[1]) / 100.0,
    )


def columns_of(accuracies: Sequence[Accuracy]) -> dict[str, NDArray[np.float64]]:
    """One column for each field, one number for each cast; NaN where it is not given."""
    kinds = {id(accuracy): accuracy for accuracy in accuracies}  # few, of thousands of casts
    place = {kind: index for index, kind in enumerate(kinds)}
    of_cast = np.array([place[id(accuracy)] for accuracy in accuracies], dtype=np.int64)
    found: dict[str, Any] = {}
    for each in fields(Accuracy):
        values = [getattr(accuracy, each.name) for accuracy in kinds.values()]
        found[each.name] = np.array([np.nan if value is None else value for value in values], dtype=np.float64)[of_cast]
    return found
