"""The kernel that finds the sonic layer of thousands of casts."""

# mypy: ignore-errors

from __future__ import annotations

import numpy as np

from .._numba import kernel


@kernel
def sonic_layer_depths(starts, depth, speed, assumed, prominence):
    """The depth of the first maximum of each cast from the surface down; NaN where the speed grows all the way down.

    A swing counts from the prominence up, so the first that counts is told by how far the speed falls below the
    highest, or rises above the lowest, of all before.

    Parameters
    ----------
    starts : int64, shape (casts + 1,)
        The first level of each cast, and the end of the last.
    depth, speed : float64, shape (levels of all casts,)
    assumed : bool, shape (casts,)
        Whether the first level was assumed, not measured.
    prominence : float

    Returns
    -------
    float64, shape (casts,)
        0 where there is no layer; of a cast without levels too.
    """
    found = np.zeros(starts.size - 1)
    for cast in range(found.size):
        first, end = starts[cast], starts[cast + 1]
        highest, lowest, rise = first, first, end
        for row in range(first, end):
            if speed[row] > speed[highest]:
                highest = row
            if speed[row] < speed[lowest]:
                lowest = row
            if speed[row] - speed[lowest] >= prominence:
                rise = row
                break
            if speed[highest] - speed[row] >= prominence:
                break
        if rise == end:
            continue  # no layer, or the fastest water is at the surface
        top, fell = rise, False
        for row in range(rise, end):
            if speed[row] > speed[top]:
                top = row
            if speed[top] - speed[row] >= prominence:
                fell = True
                break
        if not fell:
            found[cast] = np.nan
        elif not (assumed[cast] and top == first + 1 and lowest == first):  # else a layer that was assumed
            found[cast] = depth[top]
    return found
