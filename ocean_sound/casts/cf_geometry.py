"""How casts lie in a CF file: which dimension holds the levels, which the casts, and how to lay the levels end to end.

Source: CF conventions, chapter 9 and appendix H (discrete sampling geometries): orthogonal and incomplete arrays,
contiguous and indexed ragged arrays, single features, and ragged arrays of profiles within time series or trajectories.
The World Ocean Database gives each variable an observation dimension and a row size of its own; that is read too.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from .netcdf import floats, strings
from .store import UnfitError

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from .store import Store, Variable

_PLACES = {"latitude", "longitude", "time"}
_PLACE_NAMES = {"lat", "latitude", "lon", "longitude", "time", "juld", "xc", "yc"}
_ID_ROLES = {"profile_id", "timeseries_id", "trajectory_id"}
_COUNT_NAMES = {"row_size", "rowsize", "row_sizes"}


@dataclass(frozen=True)
class Dense:
    """Casts in an array: orthogonal, incomplete, or a single one. The levels of all casts count equally many."""

    instance: tuple[str, ...]
    level: str
    sizes: Mapping[str, int]
    note: str | None = None

    @property
    def casts(self) -> int:
        """How many."""
        return math.prod(self.sizes[name] for name in self.instance)

    @property
    def row_size(self) -> NDArray[np.int64]:
        """Levels of each cast, those that are only padding among them."""
        return np.full(self.casts, self.sizes[self.level], np.int64)

    @property
    def padded(self) -> bool:
        """Whether rows without any value may be there for the sake of the shape only."""
        return bool(self.instance)

    def per_level(self, values: NDArray[Any], dimensions: tuple[str, ...]) -> NDArray[Any] | None:
        """The values of all levels, cast after cast; None where the variable lies along other dimensions."""
        return self._laid(values, dimensions, (*self.instance, self.level))

    def per_cast(self, values: NDArray[Any], dimensions: tuple[str, ...]) -> NDArray[Any] | None:
        """One value for each cast; None where the variable lies along other dimensions."""
        return self._laid(values, dimensions, self.instance)

    def _laid(self, values: NDArray[Any], dimensions: tuple[str, ...], target: tuple[str, ...]) -> NDArray[Any] | None:
        if dimensions == target and values.shape == tuple(self.sizes[name] for name in target):
            return values.reshape(-1)  # as nearly all are
        named = [(name, size) for name, size in zip(dimensions, values.shape, strict=True)]
        kept = [name for name, size in named if name in target]
        if any(name not in target and size != 1 for name, size in named) or len(set(kept)) != len(kept):
            return None
        squeezed = values.reshape([size for name, size in named if name in target])
        order = sorted(range(len(kept)), key=lambda place: target.index(kept[place]))
        moved = squeezed.transpose(order) if order != list(range(len(kept))) else squeezed
        shape = [self.sizes[name] if name in kept else 1 for name in target]
        full = [self.sizes[name] for name in target]
        spread = moved.reshape(shape)
        return (spread if shape == full else np.broadcast_to(spread, full)).reshape(-1)


@dataclass(frozen=True)
class Ragged:
    """Casts one after the other along a dimension of observations, or mixed along it (`order` sorts them)."""

    instance: tuple[str, ...]
    sample: str
    row_size: NDArray[np.int64]
    order: NDArray[np.int64] | None = None
    others: Mapping[str, NDArray[np.int64]] = field(default_factory=dict)
    parents: Mapping[str, NDArray[np.int64]] = field(default_factory=dict)
    note: str | None = None
    padded = False

    @property
    def casts(self) -> int:
        """How many."""
        return self.row_size.size

    def per_level(self, values: NDArray[Any], dimensions: tuple[str, ...]) -> NDArray[Any] | None:
        """The values of all levels, cast after cast; None where the variable lies along other dimensions."""
        values, dimensions = _without_single(values, dimensions, {self.sample, *self.instance, *self.others})
        if dimensions == (self.sample,):
            return values[self.order] if self.order is not None else values[: int(self.row_size.sum())]
        if len(dimensions) == 1 and dimensions[0] in self.others:
            return self._realigned(values, self.others[dimensions[0]])
        found = self.per_cast(values, dimensions)
        return None if found is None else np.repeat(found, self.row_size)

    def per_cast(self, values: NDArray[Any], dimensions: tuple[str, ...]) -> NDArray[Any] | None:
        """One value for each cast; None where the variable lies along other dimensions."""
        values, dimensions = _without_single(values, dimensions, set(self.instance) | set(self.parents))
        if dimensions == self.instance:
            return values
        if len(dimensions) == 1 and dimensions[0] in self.parents:
            index = self.parents[dimensions[0]]
            return values[index] if index.size and index.min() >= 0 and index.max() < len(values) else None
        if not dimensions:
            return np.broadcast_to(values.reshape(()), self.casts)
        return None

    def _realigned(self, values: NDArray[Any], own: NDArray[np.int64]) -> NDArray[Any]:
        """A column with row sizes of its own: as many as the levels of the cast, or it has none there."""
        if np.array_equal(own, self.row_size):
            return values[: int(own.sum())]
        empty = np.zeros((), np.int8) if values.dtype == np.int8 else np.full((), np.nan)
        laid = np.full(int(self.row_size.sum()), empty, values.dtype)
        starts, own_starts = (np.concatenate([[0], np.cumsum(sizes)]) for sizes in (self.row_size, own))
        for cast in np.flatnonzero((own > 0) & (own == self.row_size)):
            laid[starts[cast] : starts[cast + 1]] = values[own_starts[cast] : own_starts[cast + 1]]
        return laid

    def misfits(self, dimension: str) -> NDArray[np.int64]:
        """Casts in which a column along that dimension has some values, but not one for each level."""
        own = self.others.get(dimension)
        return np.empty(0, np.int64) if own is None else np.flatnonzero((own > 0) & (own != self.row_size))


Geometry = Dense | Ragged


def _without_single(
    values: NDArray[Any], dimensions: tuple[str, ...], wanted: set[str]
) -> tuple[NDArray[Any], tuple[str, ...]]:
    """Without dimensions of length one that say nothing here."""
    kept = tuple(name for name, size in zip(dimensions, values.shape, strict=True) if size != 1 or name in wanted)
    if len(kept) == len(dimensions):
        return values, dimensions
    shape = [size for name, size in zip(dimensions, values.shape, strict=True) if size != 1 or name in wanted]
    return values.reshape(shape), kept


def geometry_of(store: Store, measured: Sequence[Variable], vertical: Sequence[Variable]) -> Geometry:
    """How the casts lie.

    Parameters
    ----------
    store : Store
    measured, vertical : sequences of Variable
        The variables measured, and those of depth or pressure; at least one of each.

    Returns
    -------
    Dense or Ragged

    Raises
    ------
    UnfitError
        It holds no casts but a grid, a time series or a trajectory, or its counts contradict it.
    """
    kind = store.text("featureType").lower() or store.text("cdm_data_type").lower()
    lead = max(measured, key=lambda variable: (variable.ndim, variable.size))
    found = _contiguous(store, [*vertical, *measured]) or _indexed(store, lead) or _by_identifier(store, lead, vertical)
    if found is not None:
        return found
    if kind in {"timeseries", "trajectory", "point", "section", "grid"}:
        raise UnfitError(f"holds a feature type {kind!r}, not casts: no dimension parts it into profiles")
    return _dense(store, lead, vertical)


def _counts(store: Store) -> dict[str, Variable]:
    """By dimension of observations, the variable that counts them in each cast."""
    found: dict[str, Variable] = {}
    for sample, variable in store.having("sample_dimension"):
        found.setdefault(sample, variable)
    if not found:
        for name, variable in store.variables.items():
            if name.lower() in _COUNT_NAMES and variable.ndim <= 1 and not variable.is_text:
                total = int(_checked_counts(variable).sum())
                found |= {dim: variable for dim, size in store.dimensions.items() if size == total > 1}
    return found


def _checked_counts(variable: Variable) -> NDArray[np.int64]:
    values = np.atleast_1d(floats(variable))
    counts = np.where(np.isnan(values), 0.0, values)
    if (counts < 0).any() or (counts != np.floor(counts)).any() or (counts > 2**40).any():
        bad = counts[(counts < 0) | (counts != np.floor(counts)) | (counts > 2**40)][0]
        raise UnfitError(f"{variable.name} counts {bad:g} levels in a cast; it must be a whole number from 0 up")
    return counts.astype(np.int64)


def _contiguous(store: Store, columns: Sequence[Variable]) -> Ragged | None:
    counts = _counts(store)
    dims = list(dict.fromkeys(name for variable in columns for name in variable.dimensions if name in counts))
    if not dims:
        return None
    sample = dims[0]  # of depth or pressure, where each variable has its own
    sizes = {}
    for name in dims:
        variable = counts[name]
        sizes[name] = _checked_counts(variable)
        held = store.dimensions.get(name, 0)
        if sizes[name].sum() > held:
            raise UnfitError(
                f"{variable.name} counts {sizes[name].sum()} levels in all, but there are {held} along {name}"
            )
    instance = counts[sample].dimensions
    row_size = sizes.pop(sample)
    others = {name: own for name, own in sizes.items() if own.size == row_size.size}
    rest = store.dimensions.get(sample, 0) - int(row_size.sum())
    note = f"{rest} levels behind the last cast belong to none; left out" if rest else None
    return Ragged(instance, sample, row_size, None, others, _parents(store, instance), note)


def _parents(store: Store, instance: tuple[str, ...]) -> dict[str, NDArray[np.int64]]:
    """By the dimension of stations or trajectories, the one that each cast belongs to."""
    found = {}
    for parent, variable in store.having("instance_dimension"):
        if variable.dimensions == instance and not variable.is_text:
            values = np.atleast_1d(floats(variable))
            found[parent] = np.where(np.isnan(values), -1, values).astype(np.int64)
    return found


def _indexed(store: Store, lead: Variable) -> Ragged | None:
    for instance, variable in store.having("instance_dimension"):
        if variable.ndim != 1 or variable.dimensions[0] not in lead.dimensions:
            continue
        count = store.dimensions.get(instance)
        if count is None:
            raise UnfitError(f"{variable.name} names a dimension {instance!r} that is not there")
        index = floats(variable)
        valid = np.isfinite(index) & (index >= 0)
        if (index[valid] >= count).any() or (index[valid] != np.floor(index[valid])).any():
            raise UnfitError(
                f"{variable.name} says that a level belongs to cast {np.nanmax(index):g}; there are {count} along "
                f"{instance}, counted from 0"
            )
        level = np.flatnonzero(valid)
        belongs = index[valid].astype(np.int64)
        order = level[np.argsort(belongs, kind="stable")]
        gone = index.size - level.size
        note = f"{gone} levels belong to no cast; left out" if gone else None
        row_size = np.bincount(belongs, minlength=count).astype(np.int64)
        return Ragged((instance,), variable.dimensions[0], row_size, order, {}, _parents(store, (instance,)), note)
    return None


def _by_identifier(store: Store, lead: Variable, vertical: Sequence[Variable]) -> Ragged | None:
    """Levels that each carry the name of their cast: one cast for each name."""
    if lead.ndim != 1 or not any(variable.dimensions == lead.dimensions for variable in vertical):
        return None
    for role, variable in store.having("cf_role"):
        if role != "profile_id" or variable.dimensions[:1] != lead.dimensions:
            continue
        if variable.ndim > (2 if variable.is_text else 1):
            continue
        names = np.array(strings(variable)) if variable.is_text else variable.read()
        _, first, belongs = np.unique(names, return_index=True, return_inverse=True)
        rank = np.empty(first.size, np.int64)
        rank[np.argsort(first)] = np.arange(first.size)  # casts in the order in which they come in the file
        belongs = rank[belongs.ravel()]
        order = np.argsort(belongs, kind="stable")
        row_size = np.bincount(belongs).astype(np.int64)
        return Ragged(("",), lead.dimensions[0], row_size, order, {}, {}, None)
    return None


def _dense(store: Store, lead: Variable, vertical: Sequence[Variable]) -> Dense:
    sizes = dict(zip(lead.dimensions, lead.shape, strict=True))
    if len(sizes) != lead.ndim or not sizes:
        raise UnfitError(f"{lead.name} has no dimension of levels")
    _refuse_grid(store, lead)
    evidence = _places_along(store, sizes)
    shared = [tuple(name for name in variable.dimensions if name in sizes) for variable in vertical]
    note = None
    alone = [names[0] for names in shared if len(names) == 1 and names[0] not in evidence]
    long = [names for names in shared if len(names) > 1]
    if alone:
        level = alone[0]
    elif long:
        rest = [name for name in long[0] if name not in evidence]
        if len(rest) == 1:
            level = rest[0]
        else:
            level = lead.dimensions[-1]
            if len(rest) > 1:
                note = f"levels taken to lie along {level}, the last dimension: nothing in the file says which"
    elif any(len(names) == 1 for names in shared):
        level = next(names[0] for names in shared if len(names) == 1)
        if _roams(store, level):
            raise UnfitError(f"position changes along {level}, the dimension of depth: a trajectory, not casts")
    else:
        raise UnfitError(
            f"depth or pressure ({vertical[0].name}) does not lie along a dimension of {lead.name} "
            f"({', '.join(lead.dimensions)}): a time series at one depth, not casts"
        )
    instance = tuple(name for name in lead.dimensions if name != level)
    return Dense(instance, level, sizes, note)


def _is_place(variable: Variable) -> bool:
    standard = variable.text("standard_name")
    return standard in _PLACES or (not standard and variable.name.lower() in _PLACE_NAMES)


def _places_along(store: Store, sizes: Mapping[str, int]) -> set[str]:
    """Dimensions along which position, time or names of casts change: those are not dimensions of levels."""
    found: set[str] = set()
    for variable in store.variables.values():
        role = variable.text("cf_role") in _ID_ROLES
        if not (role or _is_place(variable)):
            continue
        own = variable.dimensions[:-1] if variable.is_text and variable.ndim else variable.dimensions
        along = [name for name in own if name in sizes]
        if len(along) == 1:
            found.add(along[0])
        elif len(along) == 2 and role:
            found.update(along)
    return found


def _refuse_grid(store: Store, lead: Variable) -> None:
    along = {}
    for variable in store.variables.values():
        kind = variable.text("standard_name") or variable.name.lower()
        if variable.ndim == 1 and variable.dimensions[0] in lead.dimensions and variable.size > 1:
            if kind.startswith("lat") or _axis(variable) == "Y":
                along["latitude"] = variable.dimensions[0]
            elif kind.startswith("lon") or _axis(variable) == "X":
                along["longitude"] = variable.dimensions[0]
    if len(set(along.values())) == 2:
        names = ", ".join(f"{name} {size}" for name, size in zip(lead.dimensions, lead.shape, strict=True))
        raise UnfitError(f"holds a grid ({names}), not casts")


def _axis(variable: Variable) -> str:
    axis = variable.text("axis").upper()
    return axis or {"degrees_north": "Y", "degrees_east": "X"}.get(variable.text("units"), "")


def _roams(store: Store, level: str) -> bool:
    """Whether the position changes from level to level by more than a cast drifts: a tenth of a degree."""
    for variable in store.variables.values():
        name = variable.text("standard_name") or variable.name.lower()
        if variable.dimensions == (level,) and name in {"latitude", "longitude", "lat", "lon"}:
            values = floats(variable)
            held = values[np.isfinite(values)]
            if held.size and np.ptp(held) > 0.1:
                return True
    return False
