"""From columns of raw numbers to a block of casts: units, flags, levels in air, casts that hold nothing."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import gsw
import numpy as np

from ..water import pressure_of_columns
from .block import CastBlock
from .building import flagged_gaps
from .cast import FAIL, MEASURED, MISSING, VERTICAL
from .columns import pressure_name
from .flag_codes import worst
from .table import without_fills
from .units import AIR_PRESSURE, conductivity_in_situ, from_name, quantity_of, to_ours

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from .columns import Recipe
    from .settings import Settings

    Values = dict[str, NDArray[np.float64]]
    Flags = dict[str, NDArray[np.int8]]

ABOVE_SURFACE = -0.5
"""Sea pressure (dbar) or depth (m) above which a level was taken in air, whatever else it says (common practice)."""
_NO_WATER = 1e-4  # S/m: less than the purest lake, more than a cell reads in air (common practice)


@dataclass(frozen=True)
class Raw:
    """Levels of several casts as they stand in their files, one cast after the other.

    Parameters
    ----------
    numbers : mapping of int to ndarray
        Columns of values by their place in the file, NaN where a cell is empty.
    flags : mapping of int to ndarray of int8
        Columns of flags by their place in the file, on the QARTOD scale.
    row_size : ndarray of int
        Levels of each cast.
    """

    numbers: Mapping[int, NDArray[np.float64]]
    flags: Mapping[int, NDArray[np.int8]]
    row_size: NDArray[np.int64]


@dataclass(frozen=True)
class About:
    """What is known of a cast apart from its levels; `where` is its file, and its name if the file has several."""

    where: str
    id: str
    source: str
    latitude: float
    longitude: float
    time: np.datetime64
    attributes: Mapping[str, str] = field(default_factory=dict)
    notes: Sequence[str] = ()


def make_block(raw: Raw, recipe: Recipe, settings: Settings, about: Sequence[About]) -> CastBlock:
    """The block of all casts that hold something; the others are named in its `left_out`.

    Elementwise in the levels and cast by cast in the rest: a cast comes out the same whatever stands beside it.
    """
    starts = np.concatenate([[0], np.cumsum(raw.row_size)[:-1]])
    with np.errstate(all="ignore"):  # absurd numbers become infinite, and so missing
        values, notes = _values(raw, recipe, settings, about)
        flags = _flags(raw, recipe)
        wrong = _wrong_sign(values, recipe, starts)
        values, flags = flagged_gaps(values, flags)
        flags, in_air = _flag_air(values, flags, starts)
    extra: list[list[str]] = [[*one.notes] for one in about]
    for index in np.flatnonzero(in_air):
        count = in_air[index]
        extra[index].append(
            f"{count} level{'' if count == 1 else 's'} in air (above {-ABOVE_SURFACE} m or dbar over the surface, or "
            "without conductivity): flagged 4"
        )
    usable = _usable(values, starts)
    left_out = [
        (one.where, wrong.get(index) or _nothing(values))
        for index, one in enumerate(about)
        if index in wrong or not usable[index]
    ]
    kept = np.array([index not in wrong and bool(usable[index]) for index in range(len(about))])
    if not kept.all():
        rows = np.repeat(kept, raw.row_size)
        values = {name: column[rows] for name, column in values.items()}
        flags = {name: column[rows] for name, column in flags.items()}
    casts = [(one, more) for one, more, keep in zip(about, extra, kept, strict=True) if keep]
    return CastBlock(
        row_size=raw.row_size[kept],
        values=values,
        flags=flags,
        id=tuple(one.id for one, _ in casts),
        time=np.array([one.time for one, _ in casts], "datetime64[ns]"),
        latitude=np.array([one.latitude for one, _ in casts], np.float64),
        longitude=np.array([one.longitude for one, _ in casts], np.float64),
        source=tuple(one.source for one, _ in casts),
        attributes=tuple(one.attributes for one, _ in casts),
        notes=tuple((*more[: len(one.notes)], *notes, *recipe.notes, *more[len(one.notes) :]) for one, more in casts),
        left_out=tuple(left_out),
    )


def _nothing(values: Values) -> str:
    if not any(name in values for name in MEASURED):
        return f"nothing measured beside {' and '.join(values)}"
    return "no usable level: no level holds both a depth or pressure and a measured value"


def _values(raw: Raw, recipe: Recipe, settings: Settings, about: Sequence[About]) -> tuple[Values, list[str]]:
    """Columns by our names, in our units; and what was made of them."""
    values: Values = {}
    notes: list[str] = []
    special = {}
    for column in recipe.columns:
        numbers = without_fills(raw.numbers[column.index], negative=column.name == "height")
        if settings.missing_numbers:
            numbers = np.where(np.isin(numbers, settings.missing_numbers), np.nan, numbers)
        name = pressure_name(column.name, settings)
        ours, converted = to_ours(name, numbers, column.unit, where="", settled=column.settled)
        if name == "temperature":
            ours, converted = _on_its_90(ours, converted, settings)
        if quantity_of(name) == "pressure":
            ours, turned = _sea_pressure(name, ours, settings)
        else:
            ours, turned = from_name(name, ours)
        values[quantity_of(name)] = ours
        special[name] = ours
        notes += filter(None, [converted, turned])
    if "specific_conductance" in special:
        values["conductivity"] = conductivity_in_situ(values["conductivity"], values["temperature"], settings.percent)
        notes.append(_about_specific_conductance(settings))
    if "absolute_salinity" in special:
        values["salinity"], said = _practical(values, raw.row_size, about)
        notes.append(said)
    return values, notes


def _on_its_90(
    temperature: NDArray[np.float64], note: str | None, settings: Settings
) -> tuple[NDArray[np.float64], str | None]:
    if settings.temperature_scale != "IPTS-68" or (note or "").endswith("IPTS-68"):
        return temperature, note
    ours, said = to_ours("temperature", temperature, "IPTS-68", where="")
    return ours, "; ".join(filter(None, [note, said]))


def _sea_pressure(
    name: str, pressure: NDArray[np.float64], settings: Settings
) -> tuple[NDArray[np.float64], str | None]:
    """Sea pressure from what the sensor read, all in dbar."""
    if settings.in_air_pressure is not None:
        return pressure - settings.in_air_pressure, (
            f"sea pressure is the reading less {settings.in_air_pressure:g} dbar, what the sensor read in air"
        )
    surface = settings.surface_air_pressure
    if settings.pressure_kind == "above-standard-atmosphere" and name != "absolute_pressure":
        if surface is None:
            return pressure, "pressure above a standard atmosphere taken as sea pressure"
        return pressure + (AIR_PRESSURE - surface), (
            f"sea pressure is the reading plus {AIR_PRESSURE - surface:g} dbar, for {surface:g} dbar of air at the "
            f"surface in place of {AIR_PRESSURE}"
        )
    if name == "absolute_pressure" and surface is not None:
        return pressure - surface, f"sea pressure is absolute pressure less {surface:g} dbar of air at the surface"
    return from_name(name, pressure)


def _about_specific_conductance(settings: Settings) -> str:
    known = "as told" if settings.percent_per_degree is not None else "Standard Methods 2510 B; from memory"
    return (
        f"conductivity in situ from specific conductance at 25 degC with {settings.percent:g} % per degC ({known}): "
        "the instrument may have reckoned otherwise"
    )


def _practical(values: Values, row_size: NDArray[np.int64], about: Sequence[About]) -> tuple[NDArray[np.float64], str]:
    """Practical from absolute salinity: by the atlas of TEOS-10 where a position is known, else as from Reference."""
    absolute = values["salinity"]
    latitude = np.repeat([one.latitude for one in about], row_size)
    longitude = np.repeat([one.longitude for one in about], row_size)
    pressure = values["pressure"] if "pressure" in values else pressure_of_columns(values["depth"], latitude)
    known = np.isfinite(latitude) & np.isfinite(longitude) & np.isfinite(pressure)
    practical = gsw.SP_from_SR(absolute)
    if known.any():
        by_atlas = gsw.SP_from_SA(absolute[known], pressure[known], longitude[known], latitude[known])
        practical[known] = np.where(np.isfinite(by_atlas), by_atlas, practical[known])
    return practical, (
        "practical from absolute salinity by the TEOS-10 atlas where the position is known, else as Reference Salinity"
    )


def _flags(raw: Raw, recipe: Recipe) -> Flags:
    """Flags of each variable: the worst of those that the file gives it."""
    flags: Flags = {}
    for column in recipe.flags:
        found = raw.flags[column.index]
        for name in column.variables:
            before = flags.get(name)
            flags[name] = found if before is None else worst(before, found)
    return flags


def _wrong_sign(values: Values, recipe: Recipe, starts: NDArray[np.intp]) -> dict[int, str]:
    """By cast: depths that are all above the surface."""
    column = next((column for column in recipe.columns if column.name == "depth"), None)
    if column is None or not values["depth"].size:
        return {}
    highest, lowest = np.fmin.reduceat(values["depth"], starts), np.fmax.reduceat(values["depth"], starts)
    head = recipe.heads[column.index]
    return {
        int(index): f"column {head!r} has depths from {lowest[index]:g} to {highest[index]:g}, none below the surface; "
        f'if it is negative downward, say --map "height={head}"'
        for index in np.flatnonzero((lowest <= 0.0) & (highest < 0.0))
    }


def _flag_air(values: Values, flags: Flags, starts: NDArray[np.intp]) -> tuple[Flags, NDArray[np.intp]]:
    """Flags with those of levels in air, and how many of them each cast has."""
    air = np.zeros(next(iter(values.values())).size, bool)
    for name in VERTICAL:
        if name in values:
            here = values[name] < ABOVE_SURFACE
            if "conductivity" in values:
                here |= (values[name] < 0.0) & (values["conductivity"] < _NO_WATER)
            air |= here
    if not air.any():
        return flags, np.zeros(starts.size, np.intp)
    flags = dict(flags)
    for name in VERTICAL:
        if name in values:
            own = flags.get(name, np.where(np.isnan(values[name]), MISSING, 2).astype(np.int8))
            flags[name] = np.where(air & (own != MISSING), FAIL, own).astype(np.int8)
    return flags, np.add.reduceat(air, starts, dtype=np.intp)


def _usable(values: Values, starts: NDArray[np.intp]) -> NDArray[np.bool_]:
    """By cast: whether one level at least holds a depth or pressure and something measured there."""

    def present(names: tuple[str, ...]) -> NDArray[np.bool_]:
        masks = [np.isfinite(values[name]) for name in names if name in values]
        return np.logical_or.reduce(masks) if masks else np.zeros(next(iter(values.values())).size, bool)

    return np.logical_or.reduceat(present(VERTICAL) & present(MEASURED), starts)
