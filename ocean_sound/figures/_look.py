"""What all figures share: sizes, inks, and the words that say which cast it is."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from ..profile import Profile

SMALL, NORMAL, LARGE = 8.0, 9.0, 11.0  # points: nothing is smaller than 8
INK = "#1a1a1a"
LINE = "#123a5c"  # a dark blue, which prints as dark grey
GREY = "#8c8c8c"
PALE = "#d9d9d9"
SEABED = "#b8ada0"


def plain_axes(axes: Axes, *, x_label: str, y_label: str = "") -> None:
    """Axes with a light grid and readable letters."""
    axes.set_xlabel(x_label, fontsize=NORMAL)
    axes.set_ylabel(y_label, fontsize=NORMAL)
    axes.tick_params(labelsize=SMALL)
    axes.grid(visible=True, color=PALE, linewidth=0.5)
    axes.set_axisbelow(True)
    axes.spines[["top", "right"]].set_visible(False)


def heading(figure: Figure, title: str, subtitle: str) -> None:
    """Two lines at the upper left: what it is, and of which cast."""
    figure.text(0.015, 0.985, title, ha="left", va="top", fontsize=LARGE, color=INK, fontweight="bold",
                parse_math=False)  # fmt: skip
    figure.text(0.015, 0.945, subtitle, ha="left", va="top", fontsize=SMALL, color=INK, parse_math=False)


def lift_heading(figure: Figure) -> None:
    """Keep the two lines of the heading so many inches from the top, whatever the height of the figure."""
    height = figure.get_size_inches()[1]
    for text, inches in zip(figure.texts, (0.1, 0.36), strict=True):
        text.set_y(1.0 - inches / height)


def provenance(profile: Profile, remark: str = "") -> str:
    """When, where and by which equation, as far as known, and a remark."""
    parts = []
    if not np.isnat(profile.time):
        parts.append(f"{np.datetime_as_string(profile.time, unit='m').replace('T', ' ')} UTC")
    if np.isfinite(profile.latitude) and np.isfinite(profile.longitude):
        north, east = "N" if profile.latitude >= 0 else "S", "E" if profile.longitude >= 0 else "W"
        parts.append(f"{abs(profile.latitude):.3f}° {north} {abs(profile.longitude):.3f}° {east}")
    parts.append(f"equation {profile.equation}" if profile.equation else "sound speed as given")
    return ", ".join([*parts, remark] if remark else parts)


def draw_speed(axes: Axes, profile: Profile) -> None:
    """The speed against depth; dashed where the surface was assumed, not measured."""
    start = 1 if profile.surface_assumed else 0
    axes.plot(profile.speed[start:], profile.depth[start:], color=LINE, linewidth=1.2, gid="speed")
    if start:
        axes.plot(profile.speed[:2], profile.depth[:2], color=LINE, linewidth=1.2, linestyle="--", gid="assumed")


def east_or_west(value: float, _position: Any = None) -> str:
    """A longitude of any turn as people write it, for the ticks of an axis."""
    turned = (value + 180.0) % 360.0 - 180.0
    side = "" if turned in {0.0, -180.0} else "E" if turned > 0 else "W"
    return f"{abs(turned):g}°{side}"


def north_or_south(value: float, _position: Any = None) -> str:
    """A latitude likewise."""
    return f"{abs(value):g}°{'N' if value > 0 else 'S' if value < 0 else ''}"


def spread_apart(wanted: NDArray[np.float64], heights: NDArray[np.float64], low: float, high: float) -> Any:
    """Centres as near as may be to those wanted (ascending), so that things of these heights do not overlap.

    They stay between `low` and `high` if there is room for all.

    >>> spread_apart(np.array([1.0, 1.0, 9.0]), np.array([2.0, 2.0, 2.0]), 0.0, 10.0)
    array([1., 3., 9.])
    """
    centres = np.array(wanted, dtype=np.float64)
    floor = low
    for index, height in enumerate(heights):
        centres[index] = max(centres[index], floor + height / 2.0)
        floor = centres[index] + height / 2.0
    ceiling = high
    for index in range(len(centres) - 1, -1, -1):
        centres[index] = min(centres[index], ceiling - heights[index] / 2.0)
        ceiling = centres[index] - heights[index] / 2.0
    return centres
