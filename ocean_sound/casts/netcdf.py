"""Opening netCDF for reading, and its values as numbers and text; every failure of the libraries in our own words."""

from __future__ import annotations

import mmap
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import CastFileError, OceanSoundError
from ..files.writing import HDF5_LOCK
from .classic import CutShortError, open_classic
from .store import UnfitError, one_line
from .table import FILL_VALUES

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from .origin import Origin
    from .store import Store, Variable

# What lies beyond can't be a measurement of anything in the sea: the default fill value of every numeric type but
# bytes.
BEYOND = 1e30
# The default fill values of integers (netCDF C library, netcdf.h); those of floats lie beyond the bound above.
DEFAULT_FILLS = {
    "i2": -32767,
    "u2": 65535,
    "i4": -2147483647,
    "u4": 4294967295,
    "i8": -9223372036854775806,
    "u8": 18446744073709551614,
}
_FILLS = {4: np.unique(FILL_VALUES.astype(np.float32)).astype(np.float64), 8: np.unique(FILL_VALUES)}
_FIRST_FILL, _FIRST_POSITIVE_FILL, _FIRST_DEEP_FILL = -98.0, 99998.0, -9998.0
_MAPPED = 2**24  # bytes: larger files are mapped, not read
_FAILURES = (
    OSError,
    RuntimeError,
    ValueError,
    ArithmeticError,
    IndexError,
    AttributeError,
    KeyError,
    TypeError,
    MemoryError,
)


@contextmanager
def opened(origin: Origin) -> Iterator[Store]:
    """A netCDF file, open for reading.

    Errors that the libraries raise inside the block come out as `CastFileError`. For HDF5 the lock is held throughout,
    so a reader reads what it needs and leaves.
    """
    try:
        if origin.head()[:3] == b"CDF":
            yield _classic(origin)
            return
        with HDF5_LOCK:
            store = _hdf5(origin)
            try:
                yield store
            finally:
                store.close()
    except CastFileError as error:
        if str(error).isprintable():
            raise
        raise type(error)(one_line(str(error))) from error  # names of variables and units can be anything
    except OceanSoundError:
        raise
    except UnfitError as error:
        raise CastFileError(f"{origin.where}: {one_line(str(error))}") from error
    except _FAILURES as error:
        remedy = "unpack it where it was made" if "filter" in str(error) else "fetch it again"
        raise CastFileError(f"{origin.where}: its contents can't be read ({_reason(error)}); {remedy}") from error


def _classic(origin: Origin) -> Store:
    try:
        if origin.size() <= _MAPPED:
            return open_classic(origin.read())
        with origin.open() as file:
            return open_classic(mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ))
    except CutShortError as error:
        raise CastFileError(f"{origin.where}: is cut short or damaged, {error}; fetch it again") from error


def _hdf5(origin: Origin) -> Store:
    from .hdf5 import open_hdf5  # only who reads HDF5 waits for it

    try:
        return open_hdf5(None if origin.path is None else str(origin.path), origin.data)
    except _FAILURES as error:
        raise CastFileError(
            f"{origin.where}: can't be opened as netCDF, it is cut short or damaged ({_reason(error)}); fetch it again"
        ) from error


def _reason(error: BaseException) -> str:
    text = getattr(error, "strerror", None) or str(error)
    return f"{type(error).__name__}: {' '.join(str(text).split())[:120]}"


def floats(variable: Variable) -> NDArray[np.float64]:
    """Values of a variable as float64, unpacked, NaN for whatever the file declares to be no value."""
    raw = variable.read()
    if raw.dtype.kind not in "biuf":
        raise UnfitError(f"variable {variable.name} holds text where there should be numbers")
    values = raw.astype(np.float64)
    gone = ~(np.abs(values) <= BEYOND)
    declared = False
    for name in ("_FillValue", "missing_value"):
        fills = variable.get(name)
        if fills is None:
            continue
        fills = _numbers(fills)
        declared |= name == "_FillValue" and fills.size > 0
        for fill in fills:
            if np.isfinite(fill):
                # compared in the variable's own type: 99999.9 in float32 is not 99999.9 in float64
                gone |= raw == (np.float32(fill) if raw.dtype.itemsize == 4 and raw.dtype.kind == "f" else fill)
    if not declared and raw.dtype.str[1:] in DEFAULT_FILLS:
        gone |= raw == DEFAULT_FILLS[raw.dtype.str[1:]]
    scale, offset = variable.get("scale_factor"), variable.get("add_offset")
    if scale is not None or offset is not None:
        with np.errstate(over="ignore", invalid="ignore"):
            values = values * number(variable, "scale_factor", 1.0) + number(variable, "add_offset", 0.0)
        gone |= ~(np.abs(values) <= BEYOND)
    if gone.any():
        values[gone] = np.nan
    return values


def _numbers(given: Any) -> NDArray[np.float64]:
    """An attribute as numbers, those that stand as text among them; none where it is not numbers."""
    if isinstance(given, np.ndarray) and given.dtype == np.float64 and given.ndim:
        return given  # as nearly all are
    try:
        return np.atleast_1d(np.asarray(given.split() if isinstance(given, str) else given, np.float64))
    except (TypeError, ValueError):
        return np.empty(0)


def without_undeclared_fills(values: NDArray[np.float64], kind: np.dtype[Any], *, deep: bool) -> NDArray[np.float64]:
    """The values with NaN for every number that stands for 'no value' in this trade, declared or not.

    A number is compared as the variable's own type would hold it. `deep` says that values may well be negative and
    large: heights below the surface.
    """
    with np.errstate(invalid="ignore"):
        suspect = (values > _FIRST_POSITIVE_FILL) | (values < (_FIRST_DEEP_FILL if deep else _FIRST_FILL))
    if not suspect.any():
        return values
    gone = suspect & np.isin(values, _FILLS[4 if kind.kind == "f" and kind.itemsize == 4 else 8])
    return np.where(gone, np.nan, values) if gone.any() else values


def number(variable: Variable, name: str, default: float) -> float:
    """A numeric attribute; a number written as text is one."""
    given = variable.get(name)
    if given is None:
        return default
    numbers = _numbers(given)
    if numbers.size != 1 or not np.isfinite(numbers[0]):
        raise UnfitError(
            f"variable {variable.name}: its attribute {name} is {str(given)[:40]!r}; it must be one number"
        )
    return float(numbers[0])


def letters(variable: Variable) -> NDArray[np.uint8]:
    """Flags that may stand as digits or as numbers, as the codes of their characters: 1 and '1' are both b'1'."""
    raw = variable.read()
    if raw.dtype.kind == "S" and raw.dtype.itemsize == 1:
        return np.ascontiguousarray(raw).view(np.uint8)
    if raw.dtype.kind in "iu":
        return np.where((raw >= 0) & (raw <= 9), raw + 48, 32).astype(np.uint8)
    raise UnfitError(f"variable {variable.name} holds {raw.dtype} where there should be one character for each flag")


def strings(variable: Variable) -> list[str]:
    """A text variable as one string for each of its items: the last dimension of characters is that of the text."""
    raw = variable.read()
    if raw.dtype.kind == "S":
        if raw.ndim == 0:
            return [text(raw)]
        return [text(row) for row in raw.reshape(-1, raw.shape[-1])]
    return [text(item) for item in raw.ravel()]


def text(array: Any) -> str:
    """Text from characters: a byte that is not ASCII becomes a question mark, blanks and NULs at the end go."""
    if isinstance(array, str):
        return array.strip().strip("\x00").strip()
    data = np.asarray(array)
    if data.dtype.kind in "SV":
        return data.tobytes().decode("ascii", errors="replace").replace("�", "?").strip("\x00 \t\r\n").strip()
    return str(array).strip()
