"""The one door through which every public function of `water` takes its arguments and hands back its result.

Scalars go in and a float comes out; arrays broadcast; xarray objects keep their coordinates and get attributes, and
stay lazy where they are backed by dask (the checks then run inside each block). The functions behind the door see
float64 arrays only.
"""

from __future__ import annotations

import sys
from typing import TYPE_CHECKING, Any, NamedTuple, TypeAlias

import numpy as np
from numpy.typing import NDArray

from ..errors import InputError

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

Array: TypeAlias = NDArray[np.float64]


class Limits(NamedTuple):
    """What a quantity can be at all; beyond it a direct call is refused."""

    low: float
    high: float
    unit: str


_ANY = float("inf")

#: Wide physical limits, not the range of any equation: beyond them an argument is a slip (a unit, a sign, a fill
#: value).
LIMITS: Mapping[str, Limits] = {
    "temperature": Limits(-5.0, 100.0, "degrees Celsius (ITS-90)"),
    "salinity": Limits(0.0, 500.0, "practical salinity"),
    "absolute_salinity": Limits(0.0, 500.0, "g/kg"),
    "pressure": Limits(0.0, 12000.0, "dbar of sea pressure"),
    "depth": Limits(0.0, 12000.0, "metres, positive down"),
    "latitude": Limits(-90.0, 90.0, "degrees"),
    "longitude": Limits(-_ANY, _ANY, "degrees"),
    "frequency": Limits(1e-6, 1e9, "Hz"),
    "ph": Limits(0.0, 14.0, "pH"),
    "speed": Limits(1.0, 10000.0, "m/s"),
    "conductivity": Limits(0.0, 20.0, "S/m"),
}

_REMEDY = {
    "temperature": "set bad levels to NaN, or convert kelvin or Fahrenheit first",
    "salinity": "set bad levels to NaN",
    "absolute_salinity": "set bad levels to NaN",
    "pressure": "take the pressure of the air off, or set levels in air to NaN",
    "depth": "turn heights into depths (positive down), or set levels in air to NaN",
    "latitude": "check that latitude and longitude are not exchanged",
    "conductivity": "divide mS/cm by 10 to get S/m",
    "frequency": "give hertz, not kilohertz",
}


def elementwise(
    core: Callable[..., Array],
    arguments: Mapping[str, Any],
    *,
    name: str,
    attributes: Mapping[str, Any],
    limits: Mapping[str, Limits] = LIMITS,
) -> Any:
    """Call a numbers-only function on scalars, arrays or xarray objects, element by element.

    Parameters
    ----------
    core
        Takes float64 arrays by keyword (the names of `arguments`) and returns one float64 array of their broadcast
        shape.
    arguments
        Values by name; those that are None are left out. Each is checked against `limits` where its name stands there.
    name
        Name of the result, for xarray.
    attributes
        Attributes of the result, for xarray.
    limits
        What each argument can be at all.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray

    Raises
    ------
    InputError
        If a value is infinite or impossible, is not a number, or the shapes do not broadcast.
    """
    given = {key: value for key, value in arguments.items() if value is not None}
    xarray = sys.modules.get("xarray")
    if xarray is not None and any(isinstance(value, (xarray.DataArray, xarray.Variable)) for value in given.values()):
        return _labelled(core, given, name, attributes, limits)
    arrays = {key: float_array(key, value) for key, value in given.items()}
    result = _checked(core, arrays, limits)
    return float(result) if result.ndim == 0 else result


def float_array(name: str, value: Any) -> Array:
    """A float64 array of a number, a sequence or an array (masked values become NaN); never written to."""
    try:
        if isinstance(value, np.ma.MaskedArray):
            value = np.ma.filled(value.astype(np.float64), np.nan)
        array = np.asarray(value)
        if array.dtype.kind not in "fiu":
            if array.dtype.kind != "O":
                raise TypeError(array.dtype)
            array = array.astype(np.float64)
        return np.asarray(array, dtype=np.float64)
    except (TypeError, ValueError):
        raise InputError(f"{name}: numbers are needed, not {type(value).__name__} {value!r:.60}") from None


def check_limits(name: str, values: Array, limits: Limits) -> None:
    """Refuse infinite and impossible values, naming the first; NaN passes."""
    if values.size == 0:
        return
    # Nothing is allocated in the usual case: minimum and maximum tell (NaN is ignored by fmin and fmax).
    low, high = np.fmin.reduce(values, axis=None), np.fmax.reduce(values, axis=None)
    if np.isnan(low) or (low >= limits.low and high <= limits.high and np.isfinite(low) and np.isfinite(high)):
        return
    bad = (values < limits.low) | (values > limits.high) | np.isinf(values)
    index = np.unravel_index(int(np.argmax(bad)), bad.shape)
    where = f" at index {', '.join(str(i) for i in index)}" if index else ""
    span = f"from {limits.low:g} to {limits.high:g} " if np.isfinite(limits.high) else ""
    remedy = f"; {_REMEDY[name]}" if name in _REMEDY else ""
    raise InputError(
        f"{name}: {values[index]:g}{where} is impossible ({int(bad.sum())} such of {values.size}); "
        f"finite {limits.unit} {span}are accepted{remedy}"
    )


def _checked(core: Callable[..., Array], arrays: Mapping[str, Array], limits: Mapping[str, Limits]) -> Array:
    for key, values in arrays.items():
        if key in limits:
            check_limits(key, values, limits[key])
    try:
        shape = np.broadcast_shapes(*(values.shape for values in arrays.values()))
    except ValueError:
        shapes = ", ".join(f"{key} {values.shape}" for key, values in arrays.items())
        raise InputError(f"shapes do not broadcast: {shapes}; give arrays of one shape, or scalars") from None
    result = np.asarray(core(**arrays), dtype=np.float64)
    return result if result.shape == shape else np.broadcast_to(result, shape).copy()


def _labelled(
    core: Callable[..., Array],
    given: Mapping[str, Any],
    name: str,
    attributes: Mapping[str, Any],
    limits: Mapping[str, Limits],
) -> Any:
    import xarray

    names = tuple(given)

    def on_blocks(*blocks: Any) -> Array:
        # Each block is checked when it is computed: a dask array is never computed just to look at it.
        return _checked(core, {key: float_array(key, block) for key, block in zip(names, blocks, strict=True)}, limits)

    try:
        result = xarray.apply_ufunc(
            on_blocks, *given.values(), dask="parallelized", output_dtypes=[np.float64], keep_attrs=False
        )
    except InputError:
        raise
    except ValueError as error:
        reason = str(error).splitlines()[0]
        raise InputError(f"the labelled arrays {', '.join(names)} do not line up: {reason}") from error
    result.attrs = dict(attributes)
    if isinstance(result, xarray.DataArray):
        result.name = name
    return result
