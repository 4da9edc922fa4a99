"""Casts that stand in the input twice: found by place and time, told apart level by level."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import islice
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from numpy.typing import NDArray

    from .parts import PartFile

# Two casts so near in time and place may be one and the same, passed on by two ways.
SAME_TIME = np.timedelta64(60, "s")
SAME_DEGREES = 0.001
# How far the values of the same level may differ where they were rounded on the way.
SAME_VALUE = {
    "pressure": 0.05, "depth": 0.05, "temperature": 0.001, "salinity": 0.001, "conductivity": 0.0001,
    "measured_sound_speed": 0.01,
}  # fmt: skip
# Neighbours that one cast is compared with; many more at one place and time are a time series, not copies.
MOST_COMPARED = 50


@dataclass(frozen=True, eq=False)
class Duplicates:
    """For each cast the position of the earlier one that it repeats, and of the first that is near but not the same.

    -1 stands for none.
    """

    repeats: NDArray[np.int32]
    near: NDArray[np.int32]


def find_duplicates(parts: Sequence[PartFile]) -> Duplicates:
    """Find casts with the same position, time and levels, within the tolerances above.

    Casts without a time or position are left alone: there is nothing to know them by.
    """
    filled = [part for part in parts if part.outline.casts]
    time, latitude, longitude, row_size = (
        np.concatenate([part.cast(name) for part in filled]) for name in ("time", "latitude", "longitude", "row_size")
    )
    levels = _Levels(filled)
    repeats = np.full(row_size.size, -1, dtype=np.int32)
    near = np.full(row_size.size, -1, dtype=np.int32)
    for earlier, later in sorted(_candidates(time, latitude, longitude)):
        if repeats[later] >= 0 or repeats[earlier] >= 0:
            continue
        if row_size[earlier] == row_size[later] and levels.same(earlier, later):
            repeats[later] = earlier
        elif near[later] < 0:
            near[later] = earlier
    near[repeats >= 0] = -1  # what is the same as an earlier one is near to what that is near to
    return Duplicates(repeats, near)


def _candidates(
    time: NDArray[np.datetime64], latitude: NDArray[np.float64], longitude: NDArray[np.float64]
) -> Iterator[tuple[int, int]]:
    """Pairs (earlier, later in the input) that are near in time and place."""
    usable = np.flatnonzero(~np.isnat(time) & np.isfinite(latitude) & np.isfinite(longitude))
    order = usable[np.argsort(time[usable], kind="stable")]
    sorted_time = time[order]
    until = np.searchsorted(sorted_time, sorted_time + SAME_TIME, side="right")
    for position in np.flatnonzero(until > np.arange(1, order.size + 1)).tolist():
        first = order[position]
        others = order[position + 1 : until[position]]
        # east and west shrink towards the poles, where longitude tells little
        reach = SAME_DEGREES / max(float(np.cos(np.radians(latitude[first]))), 1e-3)
        turned = np.abs((longitude[others] - longitude[first] + 180.0) % 360.0 - 180.0)
        close = others[(np.abs(latitude[others] - latitude[first]) <= SAME_DEGREES) & (turned <= reach)]
        for other in islice(close, MOST_COMPARED):
            yield (int(min(first, other)), int(max(first, other)))


class _Levels:
    """The levels of any cast, read from its part when they are asked for."""

    def __init__(self, parts: Sequence[PartFile]) -> None:
        self.parts = parts
        self.first = np.concatenate(([0], np.cumsum([part.outline.casts for part in parts])))
        self.starts = [np.concatenate(([0], np.cumsum(part.cast("row_size"), dtype=np.int64))) for part in parts]

    def of(self, cast: int) -> dict[str, NDArray[Any]]:
        """The values of a cast that can tell it from another."""
        number = int(np.searchsorted(self.first, cast, side="right")) - 1
        part, within = self.parts[number], cast - int(self.first[number])
        first, last = self.starts[number][within : within + 2].tolist()
        return {name: part.obs(name, first, last) for name in SAME_VALUE if name in part.outline.obs}

    def same(self, one: int, other: int) -> bool:
        """Whether two casts have the same values on the same levels."""
        a, b = self.of(one), self.of(other)
        missing = np.full(len(next(iter(a.values()))), np.nan)
        return all(
            np.allclose(a.get(name, missing), b.get(name, missing), rtol=0.0, atol=SAME_VALUE[name], equal_nan=True)
            for name in {*a, *b}
        )
