"""The arguments of functions over many soundings: checked arrays of one shape."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..water._arrays import Limits, check_limits, float_array

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

_LIMITS = {
    "depth": Limits(-12_000.0, 12_000.0, "metres, positive down"),
    "xx": Limits(0.0, np.inf, "m2 of 0 or more"),
    "yy": Limits(0.0, np.inf, "m2 of 0 or more"),
    "xy": Limits(-np.inf, np.inf, "m2"),
    "uncertainty": Limits(0.0, np.inf, "metres of 0 or more, and NaN for what is unknown,"),
}


def together(**arrays: Floats) -> tuple[Floats, ...]:
    """Arrays in their common shape.

    Raises
    ------
    InputError
        If they have none.
    """
    try:
        return tuple(np.broadcast_arrays(*arrays.values()))
    except ValueError:
        shapes = ", ".join(f"{name} {values.shape}" for name, values in arrays.items())
        raise InputError(f"shapes do not broadcast: {shapes}; equal shapes or single numbers would be right") from None


def checked_array(name: str, values: ArrayLike) -> Floats:
    """A float64 array of what can be.

    Raises
    ------
    InputError
        If a value is impossible or no number.
    """
    array = float_array(name, values)
    check_limits(name, array, _LIMITS.get(name, _LIMITS["uncertainty"]))
    return array


def given_back(result: Any) -> Any:
    """A float for a single number, else the array."""
    array = np.asarray(result, dtype=np.float64)
    return float(array) if array.ndim == 0 else array
