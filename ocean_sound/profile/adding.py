"""How shapes and noise add up."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    Floats = NDArray[np.float64]


def total(shapes: Mapping[str, Floats], noise: Floats | None) -> Floats:
    """Root of the sum of squares of all shapes and the noise.

    >>> total({"a": np.array([3.0])}, np.array([4.0])).tolist()
    [5.0]
    """
    squares = np.zeros(())
    for share in (*shapes.values(), *([] if noise is None else [noise])):
        squares = squares + share**2
    found: Floats = np.sqrt(squares)
    return found
