"""The columns of a profile: read-only copies, and what keeps them from being one."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from .profile import Profile

# No natural water comes near these: fresh water at 0 degC carries sound at 1402 m/s, the deepest trench about 1630.
# Wide enough for the steep gradients of textbook cases, narrow enough to catch feet per second and a column of depths.
SLOWEST_SPEED = 1000.0  # m/s
FASTEST_SPEED = 3000.0  # m/s


def whose(name: str) -> str:
    """How a message calls a profile."""
    return f"profile {name!r}" if name else "profile"


def column_of(values: Any, field: str, name: str) -> NDArray[np.float64]:
    """A read-only copy as a flat float64 array."""
    if isinstance(values, np.ma.MaskedArray):
        values = np.ma.filled(np.ma.asarray(values, dtype=np.float64), np.nan)
    try:
        column = np.array(values, dtype=np.float64)
    except (TypeError, ValueError):
        raise InputError(
            f"{whose(name)}: {field} is not a list of numbers; one number for each level would be right"
        ) from None
    if column.ndim != 1:
        raise InputError(
            f"{whose(name)}: {field} has {column.ndim} dimensions; one, with a number for each level, would be right"
        )
    column.flags.writeable = False
    return column


def check_parts(
    depth: NDArray[np.float64], shapes: Mapping[str, NDArray[np.float64]], noise: NDArray[np.float64] | None, name: str
) -> None:
    """Raise InputError for a shape or a noise that can't be this profile's."""
    owner = whose(name)
    named = {f"shape {key!r}": shape for key, shape in shapes.items()} | ({} if noise is None else {"noise": noise})
    for field_name, column in named.items():
        if column.size != depth.size:
            raise InputError(
                f"{owner}: {depth.size} depths and {column.size} values of {field_name}; as many of each would be right"
            )
        good = ~np.isinf(column) & ((column >= 0.0) | np.isnan(column) if field_name == "noise" else True)
        _check_levels(owner, field_name, column, good, "m/s; a finite number (noise: 0 or more), or NaN,")


def check(profile: Profile) -> None:
    """Raise InputError for the first thing that keeps these columns from being a profile."""
    depth, speed, uncertainty = profile.depth, profile.speed, profile.uncertainty
    owner = whose(profile.id)
    for kind, column in (("speed", speed), ("uncertainty", uncertainty)):
        if column is not None and column.size != depth.size:
            raise InputError(
                f"{owner}: {depth.size} depths and {column.size} values of {kind}; as many of each would be right"
            )
    if depth.size < 2:
        raise InputError(f"{owner}: {depth.size} level{'s' * (depth.size != 1)}; a profile needs at least 2")
    _check_levels(owner, "depth", depth, np.isfinite(depth) & (depth >= 0.0), "m; a finite depth of 0 m or more")
    _check_levels(
        owner,
        "speed",
        speed,
        (speed >= SLOWEST_SPEED) & (speed <= FASTEST_SPEED),
        f"m/s; {SLOWEST_SPEED:g} to {FASTEST_SPEED:g} m/s",
    )
    if uncertainty is not None:
        good = np.isnan(uncertainty) | ((uncertainty >= 0.0) & np.isfinite(uncertainty))
        _check_levels(owner, "uncertainty", uncertainty, good, "m/s; 0 m/s or more, or NaN where it is not known,")
    falls = np.flatnonzero(np.diff(depth) <= 0.0)
    if falls.size:
        level = int(falls[0]) + 1
        raise InputError(
            f"{owner}: level {level} (counted from 0) lies at {depth[level]:g} m, not below the level before it at "
            f"{depth[level - 1]:g} m; depths that strictly increase would be right"
        )


def _check_levels(owner: str, field: str, column: NDArray[np.float64], good: NDArray[np.bool_], right: str) -> None:
    bad = np.flatnonzero(~good)
    if bad.size:
        level = int(bad[0])
        raise InputError(
            f"{owner}: {field} at level {level} (counted from 0) is {column[level]:g} {right} would be right"
        )
