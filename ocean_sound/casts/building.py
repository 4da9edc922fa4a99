"""From what a reader found to a cast: gaps flagged, a cast without one usable level refused. Every reader ends here."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import CastFileError, InputError
from .cast import FAIL, MEASURED, MISSING, NOT_EVALUATED, VERTICAL, Cast

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray


class NoUsableLevelError(CastFileError):
    """A cast in a file that holds nothing that could be used."""


def flagged_gaps(
    values: Mapping[str, NDArray[np.float64]], flags: Mapping[str, NDArray[np.int8]]
) -> tuple[dict[str, NDArray[np.float64]], dict[str, NDArray[np.int8]]]:
    """Columns with NaN for whatever is not a finite number, and flags that say 9 there and nowhere else.

    A column without gaps and without flags of its own stays without flags.
    """
    clean, marked = {}, {}
    for name, column in values.items():
        finite = np.isfinite(column)
        own = flags.get(name)
        if finite.all():
            clean[name] = column
            if own is not None:
                marked[name] = _contradicted(own)
            continue
        clean[name] = np.where(finite, column, np.nan)
        base = np.int8(NOT_EVALUATED) if own is None else _contradicted(own)
        marked[name] = np.where(finite, base, MISSING).astype(np.int8)
    return clean, marked


def _contradicted(flags: NDArray[np.int8]) -> NDArray[np.int8]:
    """Flags of values that are there: one that its source calls missing must not be used as if it were good."""
    return np.where(flags == MISSING, FAIL, flags).astype(np.int8)


def _usable(values: Mapping[str, NDArray[np.float64]]) -> bool:
    """Whether one level at least holds a depth or pressure and something measured there."""

    def present(names: tuple[str, ...]) -> Any:
        return np.any([np.isfinite(values[name]) for name in names if name in values], axis=0)

    return bool(np.any(present(VERTICAL) & present(MEASURED)))


def build_cast(
    where: str, *, values: Mapping[str, NDArray[np.float64]], flags: Mapping[str, NDArray[np.int8]], **others: Any
) -> Cast:
    """The cast, with its gaps flagged.

    Parameters
    ----------
    where : str
        The file, and the member or cast within it, for the message.
    values, flags : mappings
        As for `Cast`, with anything that is not finite where a value is missing.
    **others
        The other fields of `Cast`.

    Returns
    -------
    Cast

    Raises
    ------
    CastFileError
        No level holds both a depth or pressure and something measured, or a field is impossible.
    """
    clean, marked = flagged_gaps(values, flags)
    if not any(name in clean for name in MEASURED):
        raise NoUsableLevelError(f"{where}: nothing measured beside {' and '.join(clean)}")
    if not _usable(clean):
        raise NoUsableLevelError(
            f"{where}: no usable level: no level holds both a depth or pressure and a measured value"
        )
    try:
        return Cast(values=clean, flags=marked, **others)
    except InputError as error:
        raise CastFileError(f"{where}: {error}") from error
