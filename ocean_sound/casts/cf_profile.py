"""Casts in CF netCDF: found by standard name and units, else by well-known names, in any layout of chapter 9.

What was assumed is noted on each cast. Pressure by the standard name ``sea_water_pressure`` is, by CF's definition,
absolute; most files mean sea pressure. It is taken for what the file says, else for what its numbers prove (no absolute
pressure in water is below 5 dbar; a depth beside it tells the two apart); failing both, dbar are taken as sea pressure,
with a note, and any other unit is an error that names the choices.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import CastFileError, InputError
from ..files.cf import ORIGIN_VALUES
from .building import NoUsableLevelError
from .cast import FAIL, MISSING, NOT_EVALUATED, SUSPECT, VARIABLES
from .cf_about import about_casts
from .cf_choose import Candidate, candidates, other_temperatures, pressure_kind, require
from .cf_geometry import Geometry, Ragged, geometry_of
from .cf_units import cleaned_unit
from .columns import FLAG_CODES, Column, FlagColumn, Recipe
from .flag_codes import Scheme, UnknownSchemeError, companions, scheme_of, worst
from .levels import Raw, make_block
from .names import FLAGGED, split_unit
from .netcdf import floats, without_undeclared_fills
from .settings import Settings
from .store import one_line
from .table import listed
from .units import quantity_of, to_ours

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from .block import CastBlock
    from .levels import About
    from .origin import Origin
    from .store import Store, Variable

_NO_SETTINGS = Settings()
# degC: what stands for 'no value' in archives of expendable probes, in either precision
_NO_WATER = [number for text in ("99", "99.9", "99.99", "99.999") for number in (float(text), float(np.float32(text)))]
_LIMITS = ("valid_min", "valid_max")


@dataclass
class _Found:
    """Columns as they are found, in the order of `VARIABLES`."""

    columns: dict[int, NDArray[np.float64]] = field(default_factory=dict)
    recipe: list[Column] = field(default_factory=list)
    flags: dict[int, NDArray[np.int8]] = field(default_factory=dict)
    flag_recipe: list[FlagColumn] = field(default_factory=list)
    uncertainties: dict[str, NDArray[np.float64]] = field(default_factory=dict)
    origins: dict[str, NDArray[np.int8]] = field(default_factory=dict)
    heads: list[str] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)


@dataclass(frozen=True, eq=False)
class CfCasts:
    """The casts of a file as they were found: all that is taken from the file, and not yet made of it.

    Parameters
    ----------
    where : str
        The file, for messages.
    raw : Raw
    recipe : Recipe
    about : list of About
        For each cast that has a level.
    empty : list of (str, str)
        The others, and why.
    uncertainties, origins : dict
        Columns as long as those of `raw`.
    labels : list of str
        All casts, in the order of the file.
    """

    where: str
    raw: Raw
    recipe: Recipe
    about: list[About]
    empty: list[tuple[str, str]]
    uncertainties: dict[str, NDArray[np.float64]]
    origins: dict[str, NDArray[np.int8]]
    labels: list[str]

    @property
    def plain(self) -> bool:
        """Whether it is one cast without anything beside its values, which may be worked on together with others."""
        return len(self.labels) == len(self.about) == 1 and not (self.uncertainties or self.origins)

    def block(self, settings: Settings) -> CastBlock:
        """The casts by our names, in our units.

        Raises
        ------
        CastFileError
            None of them is usable.
        """
        try:
            block = make_block(self.raw, self.recipe, settings, self.about) if self.about else None
        except InputError as error:
            raise CastFileError(str(error)) from error
        if block is None or not len(block):
            why = block.left_out[0][1] if block is not None else "no usable level: no cast has a level"
            raise NoUsableLevelError(f"{self.where}: {why}")
        gone = {place for place, _ in block.left_out}
        stays = np.repeat([one.where not in gone for one in self.about], self.raw.row_size)
        if not (self.empty or self.uncertainties or self.origins):
            return block
        return replace(
            block,
            left_out=tuple(_in_order([*self.empty, *block.left_out], self.labels)),
            uncertainties=_kept_rows(self.uncertainties, stays, block),
            origins=_kept_rows(self.origins, stays, block),
        )


def find_cf(store: Store, origin: Origin, settings: Settings = _NO_SETTINGS) -> CfCasts:
    """Find the casts of a CF netCDF file.

    Parameters
    ----------
    store : Store
        The open file.
    origin : Origin
        For names and messages.
    settings : Settings, optional
        What a person said of the file: which variable is what, in which unit, what kind of pressure.

    Returns
    -------
    CfCasts

    Raises
    ------
    CastFileError
        It holds no cast, or its layout, units or flags can't be told; the message says which.
    InputError
        A variable that a person named is not there.
    """
    where = origin.where
    try:
        found = candidates(store, settings)
    except InputError as error:
        raise type(error)(f"{where}: {error}") from error
    require(store, found)
    vertical = [known[0].variable for name in VARIABLES[:2] if (known := found.get(name))]
    measured = [known[0].variable for name in VARIABLES[2:] if (known := found.get(name))]
    geometry = geometry_of(store, measured, vertical)
    columns = _columns(store, found, geometry, settings, where)
    if not geometry.casts or not geometry.row_size.sum():
        raise NoUsableLevelError(f"{where}: no usable level: none of its {geometry.casts} casts has a level")
    about, labels = about_casts(store, geometry, origin, settings, temperature_only=_temperature_only(columns))
    _note_misfits(geometry, found, about)
    row_size, rows, kept = _rows(geometry, columns)
    raw = Raw(
        {index: column[rows] for index, column in columns.columns.items()},
        {index: column[rows] for index, column in columns.flags.items()},
        row_size[kept],
    )
    notes = tuple(map(one_line, columns.notes))
    return CfCasts(
        where,
        raw,
        Recipe(tuple(columns.heads), tuple(columns.recipe), tuple(columns.flag_recipe), {}, notes),
        [about[index] for index in np.flatnonzero(kept)],
        [(about[index].where, "has no level") for index in np.flatnonzero(~kept)],
        {name: column[rows] for name, column in columns.uncertainties.items()},
        {name: column[rows] for name, column in columns.origins.items()},
        labels,
    )


def _in_order(left_out: list[tuple[str, str]], labels: list[str]) -> list[tuple[str, str]]:
    place = {label: index for index, label in enumerate(labels)}
    return sorted(left_out, key=lambda one: place.get(one[0], 0))


# --- columns -------------------------------------------------------------------------------------------------------


def _columns(
    store: Store, found: dict[str, list[Candidate]], geometry: Geometry, settings: Settings, where: str
) -> _Found:
    columns = _Found(notes=[*([geometry.note] if geometry.note else []), *other_temperatures(store)])
    for name in VARIABLES:
        known = found.get(name, [])
        taken = _first_that_fits(known, geometry)
        if taken is None:
            _refuse_if_needed(known, name, where)
            continue
        candidate, column = taken
        for other in known:
            if other is not candidate and other.rank <= 3:
                columns.notes.append(
                    f"{other.variable.name} holds {name.replace('_', ' ')} too; {candidate.variable.name} taken"
                )
        _add_column(columns, store, candidate, column, geometry, settings, where)
    _settle_pressure(columns, store, where)
    return columns


def _first_that_fits(known: list[Candidate], geometry: Geometry) -> tuple[Candidate, NDArray[np.float64]] | None:
    """The likeliest variable that lies along the levels and holds anything; failing that, one that holds nothing."""
    empty = None
    for candidate in known:
        values = floats(candidate.variable)
        deep = candidate.name == "height"
        values = without_undeclared_fills(values, candidate.variable.dtype, deep=deep)
        column = geometry.per_level(values, candidate.variable.dimensions)
        if column is None:
            continue
        if np.isfinite(column).any():
            return candidate, column
        empty = empty or (candidate, column)
    return empty


def _refuse_if_needed(known: list[Candidate], name: str, where: str) -> None:
    if known and known[0].told:
        variable = known[0].variable
        raise InputError(
            f"{where}: --map {name}={variable.name}: it lies along ({', '.join(variable.dimensions)}), not along the "
            "levels of the casts"
        )


def _add_column(
    columns: _Found,
    store: Store,
    candidate: Candidate,
    column: NDArray[np.float64],
    geometry: Geometry,
    settings: Settings,
    where: str,
) -> None:
    variable, name = candidate.variable, candidate.name
    unit, factor, notes = cleaned_unit(variable, name)
    if candidate.unit is not None:
        unit, factor, notes = candidate.unit, 1.0, []
    if factor != 1.0:
        column = column * factor
        notes = [*notes, f"{name.replace('_', ' ')} is in units of {variable.text('units')}"]
    settled = candidate.told or name != "pressure"
    try:
        if name != "pressure":  # of which the kind is settled later
            to_ours(name, np.empty(0), unit, where=f"{where}: variable {variable.name}", settled=settled)
    except InputError as error:
        raise CastFileError(str(error)) from error
    index = len(columns.recipe)
    columns.columns[index] = column
    columns.heads.append(variable.name)
    columns.recipe.append(Column(name, index, unit, settled))
    columns.notes += notes
    _add_flags(columns, store, candidate, index, geometry, settings, where)
    _add_beside(columns, store, candidate, geometry)


def _settle_pressure(columns: _Found, store: Store, where: str) -> None:
    """Say which kind of pressure it is, where its name does not."""
    place = next((column for column in columns.recipe if column.name == "pressure"), None)
    if place is None or place.settled:
        return
    variable = store.variables[columns.heads[place.index]]
    spot = f"{where}: variable {variable.name}"
    try:
        pressure, _ = to_ours("sea_pressure", columns.columns[place.index], place.unit, where=spot, settled=True)
        deep = next((column for column in columns.recipe if quantity_of(column.name) == "depth"), None)
        depth = None
        if deep is not None:
            depth, _ = to_ours(deep.name, columns.columns[deep.index], deep.unit, where=spot, settled=True)
            depth = -depth if deep.name == "height" else depth
        name, note = pressure_kind(variable, pressure, depth)
        to_ours(name, np.empty(0), place.unit, where=spot, settled=name != "pressure")
    except InputError as error:
        raise CastFileError(str(error)) from error
    columns.recipe[columns.recipe.index(place)] = replace(place, name=name, settled=name != "pressure")
    columns.notes += [note] if note else []


# --- flags ---------------------------------------------------------------------------------------------------------


def _add_flags(
    columns: _Found,
    store: Store,
    candidate: Candidate,
    index: int,
    geometry: Geometry,
    settings: Settings,
    where: str,
) -> None:
    variable = candidate.variable
    ours = quantity_of(candidate.name)
    values = columns.columns[index]
    flags = None
    for companion, scheme in _schemes(store, variable, ours, settings, where, columns.notes):
        laid = geometry.per_level(companion.read(), companion.dimensions)
        if laid is None:
            columns.notes.append(f"flags {companion.name} do not lie along the levels: not used")
            continue
        own, unknown = scheme.translate(laid)
        if unknown:
            columns.notes.append(
                f"{companion.name} holds {', '.join(unknown[:5])}, of no meaning in its scheme: taken as suspect"
            )
        flags = own if flags is None else worst(flags, own)
    if ours == "temperature":
        sentinel = values >= _NO_WATER[0]  # a quick look
        if sentinel.any() and (sentinel := np.isin(values, _NO_WATER)).any():
            flags = np.full(values.shape, NOT_EVALUATED, np.int8) if flags is None else flags
            flags = np.where(sentinel, FAIL, flags).astype(np.int8)
            count = int(sentinel.sum())
            columns.notes.append(f"{count} temperatures of 99.9, which stands for no value: flagged 4")
    flags = _outside_valid(variable, values, flags, columns.notes)
    if flags is None:
        return
    # 'missing' beside a value: the source says that it is none
    flags = np.where((flags == MISSING) & np.isfinite(values), FAIL, flags).astype(np.int8)
    columns.flags[index] = flags
    columns.flag_recipe.append(FlagColumn((ours,), index, {}))


def _schemes(
    store: Store, variable: Variable, ours: str, settings: Settings, where: str, notes: list[str]
) -> list[tuple[Variable, Scheme]]:
    told = {name: wanted for name, wanted in settings.columns.items() if name in FLAGGED and ours in FLAGGED[name]}
    found = []
    for name, wanted in told.items():
        key, code = (wanted, None) if wanted in store.variables else split_unit(wanted)
        if key not in store.variables:
            raise InputError(
                f"{where}: --map {name}={key}: there is no such variable; it holds {listed(list(store.variables))}"
            )
        if code == "ignored":
            notes.append(f"flags {key} ignored as told")
            return []
        codes = (
            settings.flag_codes if code in {None, "own"} and settings.flag_codes else FLAG_CODES.get(code or "qartod")
        )
        if codes is None:
            raise InputError(f"{where}: --map {name}={wanted}: use one of {', '.join(FLAG_CODES)}, own, ignored")
        found.append((store.variables[key], Scheme({_number(one): flag for one, flag in codes.items()})))
    if found:
        return found
    for companion in companions(store, variable.name):
        try:
            found.append((companion, scheme_of(store, companion)))
        except UnknownSchemeError as error:
            if settings.flag_codes:
                found.append((companion, Scheme({_number(one): flag for one, flag in settings.flag_codes.items()})))
                continue
            raise CastFileError(
                f"{where}: the flags of {variable.name} ({companion.name}) are of an unknown scheme ({error}); without "
                f'them the cast can\'t be trusted: say which with --map "{ours}_flag={companion.name} [CODE]", where '
                f"CODE is {', '.join(FLAG_CODES)} or ignored"
            ) from error
    return found


def _number(code: str) -> int | str:
    return int(code) if code.lstrip("-").isdigit() else code


def _outside_valid(
    variable: Variable, values: NDArray[np.float64], flags: NDArray[np.int8] | None, notes: list[str]
) -> NDArray[np.int8] | None:
    """Values outside the range that the file itself calls valid are suspect, unless its flags say that they pass."""
    if variable.get("scale_factor") is not None or variable.get("add_offset") is not None:
        return flags  # the range is one of packed numbers
    least, most = _limit(variable, 0), _limit(variable, 1)
    if least is None and most is None:
        return flags
    outside = np.zeros(values.shape, bool)
    with np.errstate(invalid="ignore"):
        if least is not None:
            outside |= values < least
        if most is not None:
            outside |= values > most
    if flags is not None:
        outside &= flags == NOT_EVALUATED
    if not outside.any():
        return flags
    notes.append(f"{int(outside.sum())} values of {variable.name} outside the range that the file calls valid: suspect")
    base = np.full(values.shape, NOT_EVALUATED, np.int8) if flags is None else flags
    return np.where(outside, SUSPECT, base).astype(np.int8)


def _limit(variable: Variable, side: int) -> float | None:
    given: Any = variable.get(_LIMITS[side])
    if given is None:
        both = variable.get("valid_range")
        given = None if both is None or isinstance(both, str) or len(both) != 2 else both[side]
    try:
        limit = float(np.ravel(given)[0]) if given is not None else None
    except (TypeError, ValueError, IndexError):
        return None
    return limit if limit is not None and np.isfinite(limit) else None


# --- what stands beside a variable: uncertainties, and where its values come from -----------------------------------


def _add_beside(columns: _Found, store: Store, candidate: Candidate, geometry: Geometry) -> None:
    variable, ours = candidate.variable, quantity_of(candidate.name)
    standard = variable.text("standard_name")
    for key in dict.fromkeys([*variable.text("ancillary_variables").split(), f"{variable.name}_uncertainty"]):
        beside = store.variables.get(key)
        if beside is None or beside.is_text:
            continue
        said = beside.text("standard_name")
        if said.endswith(" standard_error") or (not said and key == f"{variable.name}_uncertainty"):
            same = beside.text("units") in {"", variable.text("units")}
            if same and candidate.name == ours and ours not in columns.uncertainties and not _converted(columns, ours):
                values = geometry.per_level(floats(beside), beside.dimensions)
                if values is not None:
                    columns.uncertainties[ours] = np.where(values >= 0.0, values, np.nan)
        elif key == f"{variable.name}_origin" and standard and beside.get("flag_values") is not None:
            values = geometry.per_level(beside.read(), beside.dimensions)
            if values is not None and values.dtype.kind in "iu" and np.isin(values, ORIGIN_VALUES).all():
                columns.origins[ours] = values.astype(np.int8)


def _converted(columns: _Found, ours: str) -> bool:
    """Whether the values of a column will be turned into another unit: its uncertainty would need turning too."""
    place = next(column for column in columns.recipe if quantity_of(column.name) == ours)
    probe = np.array([1.0])
    return bool(to_ours(place.name, probe, place.unit, where="", settled=True)[0][0] != 1.0)


def _kept_rows(held: dict[str, NDArray[Any]], stays: NDArray[np.bool_], block: CastBlock) -> dict[str, NDArray[Any]]:
    return {name: column[stays] for name, column in held.items() if name in block.values}


# --- rows ----------------------------------------------------------------------------------------------------------


def _rows(geometry: Geometry, columns: _Found) -> tuple[NDArray[np.int64], Any, NDArray[np.bool_]]:
    """Levels of each cast, the rows that are levels, and the casts that have any."""
    row_size = geometry.row_size
    if not geometry.padded:
        return row_size, slice(None), row_size > 0
    held = np.logical_or.reduce([np.isfinite(column) for column in columns.columns.values()])
    sizes = held.reshape(geometry.casts, -1).sum(axis=1)
    return sizes.astype(np.int64), held, sizes > 0


def _temperature_only(columns: _Found) -> bool:
    return {quantity_of(column.name) for column in columns.recipe} == {"depth", "temperature"}


def _note_misfits(geometry: Geometry, found: dict[str, list[Candidate]], about: list[Any]) -> None:
    """Casts in which a variable with row sizes of its own has some values, but not one for each level."""
    if not isinstance(geometry, Ragged):
        return
    for name in VARIABLES:
        for candidate in found.get(name, [])[:1]:
            for dimension in candidate.variable.dimensions:
                for index in geometry.misfits(dimension):
                    about[index].notes.append(
                        f"{candidate.variable.name} has not as many values as the cast has levels: left out"
                    )
