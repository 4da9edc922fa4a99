"""What a person says of a CSV that the file does not say itself."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ..errors import InputError
from .names import MAPPABLE
from .units import PERCENT_PER_DEGREE

if TYPE_CHECKING:
    from collections.abc import Mapping
    from os import PathLike

SIDECAR = ".toml"
"""What stands behind the whole name of a CSV in the name of the TOML beside it: ``cast.csv.toml``."""


@dataclass(frozen=True)
class Settings:
    """What a person has said of a CSV; each field means 'as the file says' where it is None or empty.

    These are the fields of the TOML beside the file too.

    Parameters
    ----------
    columns : mapping of str to str
        By our name (as in ``--map``), the column that holds it, with a unit in square brackets behind where the head
        says none or the wrong one; for flags (``temperature_flag``, or ``flag`` for whole levels) the brackets name
        the code: ``qartod``, ``argo``, ``seadatanet``, ``whp-ctd``, ``whp-bottle``, ``own`` (see `flag_codes`), or
        ``ignored``.
    delimiter : str
        Between cells: ``,`` ``;`` a tab, or ``space`` for any white space.
    decimal : str
        ``.`` or ``,``.
    encoding : str
        As Python names it: ``latin-1``, ``cp1252``.
    date_order : str
        ``day-first`` or ``month-first``, for dates such as 03/04/2026.
    missing : tuple of float or str
        Further values that stand for 'no value'.
    temperature_scale : str
        ``ITS-90`` or ``IPTS-68``.
    pressure_kind : str
        ``sea`` (zero at the surface), ``absolute``, or ``above-standard-atmosphere`` (absolute less 10.1325 dbar, as
        instruments give it that do not know the weather).
    in_air_pressure : float
        What the pressure column reads in air at the site, dbar; taken off.
    surface_air_pressure : float
        Atmospheric pressure at the water surface, dbar (8 dbar on a lake at 2000 m), for pressure that is not sea
        pressure.
    latitude, longitude : float or str
        Of all casts in the file, as people write them.
    time, id : str
        Of the cast in the file.
    flag_codes : mapping of str to int
        By a flag of the file, what it is as a flag of QARTOD.
    percent_per_degree : float
        By how much conductivity changes with temperature where specific conductance was reckoned, per cent of its
        value at 25 degC.
    source : str
        Where this was said, for the notes of the cast.
    """

    columns: Mapping[str, str] = field(default_factory=dict)
    delimiter: str | None = None
    decimal: str | None = None
    encoding: str | None = None
    date_order: str | None = None
    missing: tuple[float | str, ...] = ()
    temperature_scale: str | None = None
    pressure_kind: str | None = None
    in_air_pressure: float | None = None
    surface_air_pressure: float | None = None
    latitude: float | str | None = None
    longitude: float | str | None = None
    time: str | None = None
    id: str | None = None
    flag_codes: Mapping[str, int] = field(default_factory=dict)
    percent_per_degree: float | None = None
    source: str = ""

    def __bool__(self) -> bool:
        return self != _NONE

    @cached_property
    def missing_words(self) -> frozenset[str]:
        """Words for 'no value', in lower case."""
        return frozenset(str(value).strip().lower() for value in self.missing)

    @cached_property
    def missing_numbers(self) -> tuple[float, ...]:
        """Numbers for 'no value'."""
        return tuple(float(value) for value in self.missing if not isinstance(value, str))

    @property
    def percent(self) -> float:
        """By how much conductivity grows with each degree, per cent of its value at 25 degC."""
        return PERCENT_PER_DEGREE if self.percent_per_degree is None else self.percent_per_degree

    def mapped(self, mapping: Mapping[str, str]) -> Settings:
        """The same with further columns, which go before."""
        return replace(self, columns={**self.columns, **mapping}) if mapping else self


_NONE = Settings()


def checked_mapping(mapping: Mapping[str, str] | None) -> dict[str, str]:
    """A mapping whose names are ours.

    Raises
    ------
    InputError
        A name is not.
    """
    mapping = dict(mapping or {})
    unknown = [name for name in mapping if name not in MAPPABLE]
    if unknown:
        raise InputError(f"--map {unknown[0]}=...: nothing is named {unknown[0]!r}; use one of {', '.join(MAPPABLE)}")
    return mapping


def settings_for(
    path: str | PathLike[str] | None, mapping: Mapping[str, str] | None, settings: Mapping[str, Any] | None
) -> Settings:
    """What is said of a file: by the TOML beside it, over that by `settings`, over that by `mapping`.

    Raises
    ------
    InputError
        A field is unknown or impossible.
    """
    mapping = checked_mapping(mapping)
    beside = None if path is None else Path(f"{path}{SIDECAR}")
    if beside is not None and not beside.is_file():
        beside = None
    given = _NONE
    if settings or beside is not None:
        from .sidecar import read_settings

        given = read_settings(beside, settings or {})
    return given.mapped(mapping)
