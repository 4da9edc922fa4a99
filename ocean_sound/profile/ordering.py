"""In which order the levels of a cast go down."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]


def downward(vertical: Floats) -> tuple[NDArray[np.int64], bool]:
    """Which levels to take, and in which order, so that they go strictly down.

    Of a cast that goes down and up again, the longer way is taken, the way down if both are alike; a level that is not
    below all before it (the ship heaves) is left out. If that left less than half of the way, the levels are in no
    order at all and are sorted.

    Parameters
    ----------
    vertical : numpy.ndarray, shape (levels,)
        Pressure or depth, finite, in the order of the file.

    Returns
    -------
    order : numpy.ndarray of int
        Indices of the levels to take.
    sorted : bool
        Whether they had to be sorted.

    Examples
    --------
    >>> import numpy as np
    >>> downward(np.array([0.0, 2.0, 1.0, 3.0, 2.0]))[0]
    array([0, 1, 3])
    >>> downward(np.array([30.0, 20.0, 10.0]))[0]
    array([2, 1, 0])
    """
    count = vertical.size
    levels = np.arange(count)
    if (np.diff(vertical) > 0.0).all():
        return levels, False
    deepest = int(np.argmax(vertical))
    way = levels[: deepest + 1] if deepest >= count - 1 - deepest else levels[deepest:][::-1]
    taken = way[_below_all_before(vertical[way])]
    if 2 * taken.size >= way.size:
        return taken, False
    way = np.argsort(vertical, kind="stable")
    return way[_below_all_before(vertical[way])], True


def _below_all_before(vertical: Floats) -> NDArray[np.bool_]:
    below: NDArray[np.bool_] = vertical[1:] > np.maximum.accumulate(vertical)[:-1]
    return np.concatenate((np.ones(min(1, vertical.size), dtype=bool), below))
