"""What maps share: plain axes of longitude and latitude, depths of the seabed as lines, and places with names."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ._look import INK, SEABED, SMALL, east_or_west, north_or_south, plain_axes

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

_LINES = 5  # of depth, about
_MOST_NAMES = 25
_LEAST_HEIGHT = 1.5  # inches of a map
_PAD = 0.03  # of the map, around places


def edges(centres: Floats, least: float = 1e-3) -> Floats:
    """Edges of cells from their centres, evenly apart."""
    step = float(np.median(np.diff(centres))) if centres.size > 1 else least
    return np.append(centres - 0.5 * step, centres[-1] + 0.5 * step)


def near(longitude: Any, middle: float) -> Floats:
    """Longitudes counted so that they lie within half a turn of a middle."""
    found: Floats = middle + (np.asarray(longitude, dtype=np.float64) - middle + 180.0) % 360.0 - 180.0
    return found


def map_axes(axes: Axes, longitude: Floats, latitude: Floats, others: tuple[Floats, Floats]) -> None:
    """Limits that hold a grid and other places, a degree of longitude as long as it is there."""
    from matplotlib.ticker import MaxNLocator

    plain_axes(axes, x_label="longitude", y_label="latitude")
    axes.grid(visible=False)
    x, y = (_around(edges(grid), more) for grid, more in zip((longitude, latitude), others, strict=True))
    axes.set_xlim(*x)
    axes.set_ylim(*y)
    axes.set_aspect(1.0 / max(float(np.cos(np.radians(np.clip(sum(y) / 2.0, -85.0, 85.0)))), 0.05), adjustable="box")
    axes.xaxis.set_major_locator(MaxNLocator(nbins=4, steps=[1, 1.5, 2, 3, 5, 10]))
    axes.yaxis.set_major_locator(MaxNLocator(nbins=6, steps=[1, 1.5, 2, 3, 5, 10]))
    axes.xaxis.set_major_formatter(east_or_west)
    axes.yaxis.set_major_formatter(north_or_south)


def _around(grid: Floats, places: Floats) -> tuple[float, float]:
    """The ends of a grid, or a little beyond places outside it."""
    pad = _PAD * float(np.ptp(np.concatenate((grid, places))))
    low, high = (places.min() - pad, places.max() + pad) if places.size else (np.inf, -np.inf)
    return float(min(grid[0], low)), float(max(grid[-1], high))


def fit_height(figure: Figure, axes: Axes) -> None:
    """Make a figure less high where its map is wider than high; the margins keep their inches."""
    width, height = figure.get_size_inches()
    left, bottom, wide, high = axes.get_position(original=True).bounds
    (west, east), (south, north) = axes.get_xlim(), axes.get_ylim()
    wanted = max(wide * width * (north - south) / (east - west) * float(axes.get_aspect()), _LEAST_HEIGHT)
    lower = height - max(high * height - wanted, 0.0)
    figure.set_size_inches(width, lower)
    axes.set_position((left, bottom * height / lower, wide, 1.0 - (1.0 - high) * height / lower))


def draw_seabed(axes: Axes, longitude: Floats, latitude: Floats, depth: Floats) -> None:
    """Land, and thin lines of equal depth, with metres on them."""
    from matplotlib.colors import ListedColormap
    from matplotlib.ticker import MaxNLocator

    land = np.where(depth <= 0.0, 1.0, np.nan)
    if np.isfinite(land).any():
        axes.pcolormesh(edges(longitude), edges(latitude), land, cmap=ListedColormap([SEABED]), zorder=1.5, gid="land")
    wet = np.where(depth > 0.0, depth, np.nan)
    if min(depth.shape) < 2 or not np.isfinite(wet).any() or np.nanmax(wet) - np.nanmin(wet) < 1.0:
        return
    levels = MaxNLocator(_LINES).tick_values(float(np.nanmin(wet)), float(np.nanmax(wet)))
    inside = levels[(levels > np.nanmin(wet)) & (levels < np.nanmax(wet))]
    if not inside.size:
        return
    lines = axes.contour(
        longitude, latitude, np.ma.masked_invalid(wet), levels=inside, colors=INK, linewidths=0.5, alpha=0.75, zorder=2
    )
    for label in axes.clabel(lines, fmt="%g m", fontsize=SMALL, inline_spacing=3):
        label.set_bbox({"facecolor": "white", "alpha": 0.6, "edgecolor": "none", "pad": 0.6})


def draw_places(
    axes: Axes,
    longitude: Floats,
    latitude: Floats,
    names: Sequence[str],
    *,
    label: str,
    marker: str,
    hollow: bool = False,
) -> None:
    """Places with their names beside them, where there are not too many."""
    if not len(names):
        return
    axes.plot(
        longitude, latitude, linestyle="none", marker=marker, markersize=7, label=label, gid=label, zorder=6,
        color="white" if hollow else INK, markeredgecolor=INK if hollow else "white", markeredgewidth=1.0,
    )  # fmt: skip
    if len(names) > _MOST_NAMES:
        return
    for x, y, name in zip(longitude, latitude, names, strict=True):
        text = axes.annotate(
            name,
            (x, y),
            xytext=(5, 4),
            textcoords="offset points",
            fontsize=SMALL,
            color=INK,
            zorder=7,
            parse_math=False,
        )
        text.set_bbox({"facecolor": "white", "alpha": 0.7, "edgecolor": "none", "pad": 0.8})


def colour_bar(figure: Figure, axes: Axes, mesh: Any, label: str, *, ticks: Floats | None = None) -> None:
    """A bar of colours as high as the map beside it; at ticks of one's own, numbers of three digits."""
    bar = axes.inset_axes((1.03, 0.0, 0.04, 1.0), label="colours")
    if ticks is None:
        figure.colorbar(mesh, cax=bar)
    else:
        figure.colorbar(mesh, cax=bar, ticks=ticks, format=lambda value, _: f"{value:.3g}").ax.minorticks_off()
    bar.set_ylabel(label, fontsize=SMALL + 1.0)
    bar.tick_params(labelsize=SMALL)


def light(name: str = "viridis", darkest: float = 0.3) -> Any:
    """The light part of a perceptually uniform map, so that black lines stay readable on it."""
    import matplotlib as mpl
    from matplotlib.colors import ListedColormap

    return ListedColormap(mpl.colormaps[name](np.linspace(darkest, 1.0, 256)))
