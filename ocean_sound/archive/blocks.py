"""Blocks of casts cut and joined by their columns, without a look at each cast."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..casts import MISSING, NOT_EVALUATED, VARIABLES, CastBlock

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from numpy.typing import NDArray


def cut(block: CastBlock, first: int, last: int) -> CastBlock:
    """Some casts of a block, from first up to but not including last."""
    if first == 0 and last == len(block):
        return block
    rows = slice(int(block.starts[first]), int(block.starts[last]))
    casts = slice(first, last)
    return CastBlock(
        row_size=block.row_size[casts],
        values={name: column[rows] for name, column in block.values.items()},
        flags={name: column[rows] for name, column in block.flags.items()},
        uncertainties={name: column[rows] for name, column in block.uncertainties.items()},
        origins={name: column[rows] for name, column in block.origins.items()},
        id=block.id[casts],
        time=block.time[casts],
        latitude=block.latitude[casts],
        longitude=block.longitude[casts],
        source=block.source[casts],
        attributes=block.attributes[casts],
        notes=block.notes[casts],
    )


def in_pieces(block: CastBlock, most_levels: int) -> Iterator[tuple[int, int]]:
    """Ranges of casts with at most so many levels in each; a cast that has more stands alone."""
    first = 0
    while first < len(block):
        reach = int(np.searchsorted(block.starts, block.starts[first] + most_levels, side="right")) - 1
        last = max(first + 1, reach)
        yield first, last
        first = last


def joined(blocks: Sequence[CastBlock]) -> CastBlock:
    """Blocks laid end to end; where one has none of a variable its rows are NaN, flagged 9, as in `CastBlock`."""
    if len(blocks) == 1:
        return blocks[0]
    names = [name for name in VARIABLES if any(name in block.values for block in blocks)]
    flagged = [
        name
        for name in names
        if any(name in block.flags for block in blocks) or not all(name in block.values for block in blocks)
    ]
    return CastBlock(
        row_size=np.concatenate([block.row_size for block in blocks]),
        values={name: np.concatenate([_values(block, name) for block in blocks]) for name in names},
        flags={name: np.concatenate([_flags(block, name) for block in blocks]) for name in flagged},
        uncertainties=_beside(blocks, [block.uncertainties for block in blocks], np.nan),
        origins=_beside(blocks, [block.origins for block in blocks], np.int8(0)),
        id=tuple(name for block in blocks for name in block.id),
        time=np.concatenate([block.time for block in blocks]),
        latitude=np.concatenate([block.latitude for block in blocks]),
        longitude=np.concatenate([block.longitude for block in blocks]),
        source=tuple(source for block in blocks for source in block.source),
        attributes=tuple(attributes for block in blocks for attributes in block.attributes),
        notes=tuple(notes for block in blocks for notes in block.notes),
    )


def _levels(block: CastBlock) -> int:
    return int(block.starts[-1])


def _values(block: CastBlock, name: str) -> NDArray[np.float64]:
    return block.values[name] if name in block.values else np.full(_levels(block), np.nan)


def _flags(block: CastBlock, name: str) -> NDArray[np.int8]:
    if name in block.flags:
        return block.flags[name]
    return np.where(np.isfinite(_values(block, name)), NOT_EVALUATED, MISSING).astype(np.int8)


def _beside(
    blocks: Sequence[CastBlock], columns: Sequence[Mapping[str, NDArray[Any]]], otherwise: Any
) -> dict[str, NDArray[Any]]:
    names = [name for name in VARIABLES if any(name in own for own in columns)]
    return {
        name: np.concatenate(
            [
                own[name] if name in own else np.full(_levels(block), otherwise)
                for block, own in zip(blocks, columns, strict=True)
            ]
        )
        for name in names
    }
