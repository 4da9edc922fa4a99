"""Opening netCDF for reading: under the one lock, without masks, every failure of the libraries in our own words."""

from __future__ import annotations

from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import CastFileError, OceanSoundError
from ..files.writing import HDF5_LOCK
from .classic import CutShortError, needed_size

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from .origin import Origin

# What lies beyond can't be a measurement of anything in the sea: the default fill value of every numeric type but
# bytes.
_BEYOND = 1e30
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
def opened(origin: Origin) -> Iterator[Any]:
    """A `netCDF4.Dataset`, open for reading.

    Errors that the libraries raise inside the block come out as `CastFileError`.
    The lock is held throughout, so a reader reads what it needs and leaves.
    """
    import netCDF4  # only who reads netCDF waits for it

    if origin.head().startswith(b"CDF"):
        _check_size(origin)
    with HDF5_LOCK:
        try:
            if origin.path is not None:
                dataset = netCDF4.Dataset(str(origin.path), "r")
            else:
                dataset = netCDF4.Dataset("memory.nc", "r", memory=origin.read())
        except (OSError, RuntimeError, ValueError) as error:
            raise CastFileError(
                f"{origin.where}: can't be opened as netCDF, it is cut short or damaged ({_reason(error)}); "
                "fetch it again"
            ) from error
        try:
            dataset.set_auto_maskandscale(False)
            yield dataset
        except OceanSoundError:
            raise
        except _FAILURES as error:
            raise CastFileError(
                f"{origin.where}: its contents can't be read ({_reason(error)}); fetch it again"
            ) from error
        finally:
            dataset.close()


def _check_size(origin: Origin) -> None:
    with origin.open() as file:
        try:
            needed = needed_size(file)
        except CutShortError as error:
            raise CastFileError(f"{origin.where}: is cut short or damaged, {error}; fetch it again") from error
    if origin.size() < needed:
        raise CastFileError(
            f"{origin.where}: is cut short, {origin.size()} bytes where its header promises {needed}; fetch it again"
        )


def _reason(error: BaseException) -> str:
    text = getattr(error, "strerror", None) or str(error)
    return f"{type(error).__name__}: {' '.join(str(text).split())[:120]}"


def floats(variable: Any, index: Any = slice(None)) -> NDArray[np.float64]:
    """Values of a variable as float64, unpacked, NaN for fill and missing values and outside a stated valid range."""
    raw = np.asarray(variable[index])
    values = raw.astype(np.float64)
    gone = ~np.isfinite(values) | (np.abs(values) > _BEYOND)
    names = set(variable.ncattrs())
    for name in ("_FillValue", "missing_value"):
        if name in names:
            for fill in np.atleast_1d(np.asarray(variable.getncattr(name))):
                if fill.dtype.kind in "iuf":
                    # compared in the variable's own type: 99999.9 in float32 is not 99999.9 in float64
                    gone |= raw == fill.astype(raw.dtype)
    if "_FillValue" not in names and raw.dtype.kind in "iu" and raw.dtype.itemsize > 1:
        import netCDF4

        gone |= raw == netCDF4.default_fillvals.get(raw.dtype.str[1:], np.nan)
    if names & {"scale_factor", "add_offset"}:
        values = values * number(variable, "scale_factor", 1.0) + number(variable, "add_offset", 0.0)
    return np.where(gone, np.nan, values)


def number(variable: Any, name: str, default: float) -> float:
    """A numeric attribute."""
    return float(variable.getncattr(name)) if name in variable.ncattrs() else default


def text_of(owner: Any, name: str) -> str:
    """A text attribute of a dataset or variable; empty where absent or not text."""
    value = owner.getncattr(name) if name in owner.ncattrs() else ""
    return value.strip() if isinstance(value, str) else ""


def text(array: Any) -> str:
    """Text from characters: a byte that is not ASCII becomes a question mark, blanks and NULs at the end go."""
    if isinstance(array, str):
        return array.strip().strip("\x00").strip()
    data = np.asarray(array)
    if data.dtype.kind in "SV":
        return data.tobytes().decode("ascii", errors="replace").replace("�", "?").strip("\x00 \t\r\n").strip()
    return str(array).strip()
