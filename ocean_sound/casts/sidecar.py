"""The TOML beside a CSV, checked field by field; imported only where there is one, since pydantic is slow to load."""

from __future__ import annotations

import codecs
from datetime import date, datetime
from typing import TYPE_CHECKING, Any, Literal

from pydantic import Field

from ..errors import InputError
from ..files.fields import Fields, checked, load_toml
from .cast import FLAGS
from .names import MAPPABLE
from .settings import Settings

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path


class _Settings(Fields):
    columns: dict[str, str] = Field(default_factory=dict)
    delimiter: Literal[",", ";", "\t", "space"] | None = None
    decimal: Literal[".", ","] | None = None
    encoding: str | None = None
    date_order: Literal["day-first", "month-first"] | None = None
    missing: list[float | str] = Field(default_factory=list)
    temperature_scale: Literal["ITS-90", "IPTS-68"] | None = None
    pressure_kind: Literal["sea", "absolute", "above-standard-atmosphere"] | None = None
    in_air_pressure: float | None = Field(default=None, ge=-20, le=50)
    surface_air_pressure: float | None = Field(default=None, gt=0, le=12)
    latitude: float | str | None = None
    longitude: float | str | None = None
    time: str | datetime | date | None = None
    id: str | None = None
    flag_codes: dict[str, int] = Field(default_factory=dict)
    percent_per_degree: float | None = Field(default=None, ge=1, le=3)


def read_settings(path: Path | None, more: Mapping[str, Any]) -> Settings:
    """Settings from a TOML file, with more of them over it.

    Parameters
    ----------
    path : pathlib.Path or None
        The TOML file.
    more : mapping
        The same fields.

    Returns
    -------
    Settings

    Raises
    ------
    InputError
        The file can't be read, or a field is unknown, impossible or at odds with another; one line for each.
    """
    fields = load_toml(path, error=InputError) if path is not None else {}
    if path is not None:
        checked(_Settings, fields, str(path), error=InputError)
    where = "settings" if more or path is None else str(path)
    model = checked(_Settings, {**fields, **more}, where, error=InputError)
    _agree(model, where)
    said = model.model_dump()
    time = said["time"]
    said |= {
        "time": time.isoformat() if isinstance(time, date) else time,
        "missing": tuple(said["missing"]),
        "source": path.name if path is not None else "",
    }
    return Settings(**said)


def _agree(model: _Settings, where: str) -> None:
    """Refuse what no single field shows to be wrong."""
    unknown = [name for name in model.columns if name not in MAPPABLE]
    if unknown:
        raise InputError(f"{where}: field 'columns.{unknown[0]}' is unknown: known here: {', '.join(MAPPABLE)}")
    if model.encoding is not None:
        try:
            codecs.lookup(model.encoding)
        except LookupError:
            raise InputError(
                f"{where}: field 'encoding' is {model.encoding!r}: give one such as 'utf-8', 'latin-1', 'cp1252'"
            ) from None
    wrong = [code for code in model.flag_codes.values() if code not in FLAGS]
    if wrong:
        raise InputError(f"{where}: field 'flag_codes' has {wrong[0]}: give QARTOD flags, {', '.join(map(str, FLAGS))}")
    if model.decimal is not None and model.decimal == model.delimiter:
        raise InputError(f"{where}: fields 'decimal' and 'delimiter' are both {model.decimal!r}: they must differ")
    if model.surface_air_pressure is not None:
        if model.in_air_pressure is not None:
            raise InputError(
                f"{where}: fields 'in_air_pressure' and 'surface_air_pressure' are both given: what the sensor reads "
                "in air holds the atmosphere already; give one of them"
            )
        if model.pressure_kind == "sea":
            raise InputError(
                f"{where}: field 'surface_air_pressure' is {model.surface_air_pressure:g} but pressure_kind is 'sea': "
                "sea pressure is zero at the surface whatever the atmosphere; give one of them"
            )
