"""The block of casts: many casts in flat columns, so that what is done to one is done to thousands at once."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .cast import AS_MEASURED, MISSING, NOT_EVALUATED, VARIABLES, VERTICAL, Cast, read_only

if TYPE_CHECKING:
    from numpy.typing import NDArray


@dataclass(frozen=True, eq=False, repr=False, kw_only=True)
class CastBlock(Sequence[Cast]):
    """Many casts in flat columns.

    A variable that a cast has no value of is all NaN, flagged 9, in its rows of the column, and absent from the
    `Cast` seen there.

    Parameters
    ----------
    row_size : array_like of int, shape (casts,)
        Levels of each cast, at least one each.
    values : mapping of str to array_like, each of shape (levels of all casts,)
        Columns by the names of `VARIABLES`, in the units of `Cast`; the levels of a cast are contiguous.
    id : sequence of str, length casts
        Names of the casts.
    time : array_like of datetime64, shape (casts,)
        UTC; NaT where unknown.
    latitude, longitude : array_like, shape (casts,)
        Degrees; NaN where unknown.
    flags : mapping of str to array_like of int8, each as long as the columns, optional
        QARTOD flags.
    uncertainties, origins : mappings of str to array_like, each as long as the columns, optional
        As in `Cast`; NaN and 0 in the rows of a cast that has none.
    source, attributes, notes : sequences, length casts, optional
        As in `Cast`.
    left_out : sequence of (str, str), optional
        What the file held that is not in the block: which, and why.

    Raises
    ------
    InputError
        Lengths that do not agree, or a cast without a level.

    Examples
    --------
    >>> block = CastBlock.from_casts([
    ...     Cast(id="A", values={"depth": [0.0, 10.0], "temperature": [12.5, 11.0]}),
    ...     Cast(id="B", values={"depth": [0.0], "sound_speed": [1500.0]}),
    ... ])
    >>> block
    <CastBlock: 2 casts, 3 levels, depth temperature sound_speed>
    >>> [cast.id for cast in block], block[1].temperature is None
    (['A', 'B'], True)
    """

    row_size: NDArray[np.int64]
    values: Mapping[str, NDArray[np.float64]]
    id: tuple[str, ...]
    time: NDArray[np.datetime64]
    latitude: NDArray[np.float64]
    longitude: NDArray[np.float64]
    flags: Mapping[str, NDArray[np.int8]] = field(default_factory=dict)
    uncertainties: Mapping[str, NDArray[np.float64]] = field(default_factory=dict)
    origins: Mapping[str, NDArray[np.int8]] = field(default_factory=dict)
    source: tuple[str, ...] = ()
    attributes: tuple[Mapping[str, str], ...] = ()
    notes: tuple[tuple[str, ...], ...] = ()
    left_out: tuple[tuple[str, str], ...] = ()
    starts: NDArray[np.int64] = field(init=False)

    def __post_init__(self) -> None:
        row_size = read_only(self.row_size, np.int64)
        count = row_size.size
        if (row_size < 1).any():
            raise InputError(f"cast {int(np.argmax(row_size < 1))} of the block has no level")
        starts = read_only(np.concatenate([[0], np.cumsum(row_size)]), np.int64)
        values = {name: read_only(column, np.float64) for name, column in self.values.items()}
        flags = {name: read_only(column, np.int8) for name, column in self.flags.items()}
        uncertainties = {name: read_only(column, np.float64) for name, column in self.uncertainties.items()}
        origins = {name: read_only(column, np.int8) for name, column in self.origins.items()}
        for name, column in (*values.items(), *flags.items(), *uncertainties.items(), *origins.items()):
            if column.shape != (starts[-1],):
                raise InputError(f"block: {name} has shape {column.shape}; the row sizes add up to {starts[-1]} levels")
        fields: dict[str, Any] = {
            "row_size": row_size,
            "starts": starts,
            "values": MappingProxyType(values),
            "flags": MappingProxyType(flags),
            "uncertainties": MappingProxyType(uncertainties),
            "origins": MappingProxyType(origins),
            "id": tuple(self.id),
            "time": read_only(self.time, "datetime64[ns]"),
            "latitude": read_only(self.latitude, np.float64),
            "longitude": read_only(self.longitude, np.float64),
            "source": tuple(self.source) or ("",) * count,
            "attributes": tuple(self.attributes) or ({},) * count,
            "notes": tuple(map(tuple, self.notes)) or ((),) * count,
            "left_out": tuple(self.left_out),
        }
        for name in ("id", "time", "latitude", "longitude", "source", "attributes", "notes"):
            if len(fields[name]) != count:
                raise InputError(f"block: {len(fields[name])} of {name} for {count} casts")
        for name, value in fields.items():
            object.__setattr__(self, name, value)

    def __reduce__(self) -> tuple[Any, ...]:
        fields = {name: getattr(self, name) for name in self.__dataclass_fields__ if name != "starts"}
        fields |= {name: dict(fields[name]) for name in ("values", "flags", "uncertainties", "origins")}
        fields["attributes"] = tuple(map(dict, fields["attributes"]))
        return _rebuilt, (fields,)

    @classmethod
    def from_casts(cls, casts: Iterable[Cast], *, left_out: Sequence[tuple[str, str]] = ()) -> CastBlock:
        """Casts laid end to end.

        Parameters
        ----------
        casts : iterable of Cast
            At least one. They may hold different variables: where a cast has none of a variable that another has, the
            column holds NaN there, flagged 9; where it has values but no flags, they are flagged 2.
        left_out : sequence of (str, str)
            What belongs with these casts but could not be read, and why.

        Returns
        -------
        CastBlock

        Raises
        ------
        InputError
            There is no cast.
        """
        casts = list(casts)
        if not casts:
            raise InputError("a block needs at least one cast")
        names = [name for name in VARIABLES if any(name in cast.values for cast in casts)]
        gaps = {name for name in names if not all(name in cast.values for cast in casts)}
        flagged = [name for name in names if name in gaps or any(name in cast.flags for cast in casts)]
        return cls(
            row_size=np.array([len(cast) for cast in casts]),
            values={name: np.concatenate([_column(cast, name) for cast in casts]) for name in names},
            flags={name: np.concatenate([_flag_column(cast, name) for cast in casts]) for name in flagged},
            uncertainties=_beside([cast.uncertainties for cast in casts], casts, np.nan),
            origins=_beside([cast.origins for cast in casts], casts, np.int8(AS_MEASURED)),
            id=tuple(cast.id for cast in casts),
            time=np.array([cast.time for cast in casts], "datetime64[ns]"),
            latitude=np.array([cast.latitude for cast in casts]),
            longitude=np.array([cast.longitude for cast in casts]),
            source=tuple(cast.source for cast in casts),
            attributes=tuple(cast.attributes for cast in casts),
            notes=tuple(cast.notes for cast in casts),
            left_out=tuple(left_out),
        )

    def __len__(self) -> int:
        return self.row_size.size

    def __getitem__(self, index: Any) -> Any:
        if isinstance(index, slice):
            return [self[i] for i in range(*index.indices(len(self)))]
        count = len(self)
        if not -count <= index < count:
            raise IndexError(f"cast {index} of a block of {count}")
        index %= count
        rows = slice(self.starts[index], self.starts[index + 1])
        columns = {name: column[rows] for name, column in self.values.items()}
        present = {name: column for name, column in columns.items() if np.isfinite(column).any()}
        if not any(name in present for name in VERTICAL):
            present |= {name: columns[name] for name in VERTICAL if name in columns}
        return Cast(
            id=self.id[index],
            values=present,
            time=self.time[index],
            latitude=self.latitude[index],
            longitude=self.longitude[index],
            flags={name: flag[rows] for name, flag in self.flags.items() if name in present},
            uncertainties=_of_cast(self.uncertainties, rows, present, np.isfinite),
            origins=_of_cast(self.origins, rows, present, np.any),
            source=self.source[index],
            attributes=self.attributes[index],
            notes=self.notes[index],
        )

    def __iter__(self) -> Iterator[Cast]:
        return (self[index] for index in range(len(self)))

    def __repr__(self) -> str:
        return f"<CastBlock: {len(self)} casts, {self.starts[-1]} levels, {' '.join(self.values)}>"


def _rebuilt(fields: dict[str, Any]) -> CastBlock:
    return CastBlock(**fields)


def _beside(of: Sequence[Mapping[str, NDArray[Any]]], casts: Sequence[Cast], otherwise: Any) -> dict[str, NDArray[Any]]:
    """Companion columns laid end to end, filled up for casts that have none."""
    names = [name for name in VARIABLES if any(name in own for own in of)]
    return {
        name: np.concatenate(
            [own[name] if name in own else np.full(len(cast), otherwise) for own, cast in zip(of, casts, strict=True)]
        )
        for name in names
    }


def _of_cast(
    columns: Mapping[str, NDArray[Any]], rows: slice, present: Mapping[str, Any], says: Callable[[Any], Any]
) -> dict[str, NDArray[Any]]:
    """The companion columns of one cast that say anything about it."""
    own = {name: column[rows] for name, column in columns.items() if name in present}
    return {name: column for name, column in own.items() if np.any(says(column))}


def _column(cast: Cast, name: str) -> NDArray[np.float64]:
    return cast.values[name] if name in cast.values else np.full(len(cast), np.nan)


def _flag_column(cast: Cast, name: str) -> NDArray[np.int8]:
    if name in cast.flags:
        return cast.flags[name]
    return np.where(np.isfinite(_column(cast, name)), NOT_EVALUATED, MISSING).astype(np.int8)
