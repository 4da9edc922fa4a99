"""The map of how well stations tell places by travel times."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ._look import INK, NORMAL, SMALL, heading
from ._map import colour_bar, draw_places, light, map_axes, near

if TYPE_CHECKING:
    import xarray
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

_SIZE = (10.4, 5.4)  # inches
_WORST = 8.0  # times the least value: beyond, the map says 'more'
_LEVELS = 9


def dilution_figure(result: xarray.Dataset, *, title: str = "", remark: str = "") -> Figure:
    """Dilution of precision, and the error of a place, over an area.

    Parameters
    ----------
    result : xarray.Dataset
        Of `dilution_map`.
    title, remark : str
        A line of one's own, and a few words to stand in the second line.

    Returns
    -------
    matplotlib.figure.Figure
        Lighter is better; steps grow evenly in ratio. White where too few stations are heard or their lines cross too
        flatly, the darkest where it is worse than eight times the best.
    """
    from matplotlib.figure import Figure

    figure = Figure(figsize=_SIZE)
    longitude, latitude = result["longitude"].values, result["latitude"].values
    places = near(result["station_longitude"].values, float(longitude.mean())), result["station_latitude"].values
    panels = (
        ("dilution", "dilution of precision", ""),
        ("error_major_95", "long half axis of the 95 % ellipse", " (m)"),
    )
    for k, (name, label, unit) in enumerate(panels):
        axes = figure.add_axes((0.07 + 0.49 * k, 0.12, 0.385, 0.7), label=name)
        map_axes(axes, longitude, latitude, places)
        axes.set_title(label + unit, fontsize=NORMAL, color=INK, loc="left")
        drawn = _draw(axes, longitude, latitude, result[name].values)
        if drawn is not None:
            colour_bar(figure, axes, drawn[0], "", ticks=drawn[1])
        draw_places(axes, *places, result["station"].values.tolist(), label="station", marker="^")
    about = result.attrs
    words = [
        f"target at {about['target_depth']:g} m", f"{about['timing']}, timing {about['timing_uncertainty']:g} s (k=1)",
        f"unknown: {about['unknown']}", *([remark] if remark else []),
    ]  # fmt: skip
    heading(figure, title or "How well stations tell places", "; ".join(words))
    return figure


def _draw(axes: Any, longitude: Floats, latitude: Floats, values: Floats) -> tuple[Any, Floats] | None:
    """Filled contours in even ratios, and their levels; None where there is nothing to draw."""
    from matplotlib.colors import LogNorm

    known: Any = np.ma.masked_invalid(values)
    if min(known.shape) < 2 or not known.count():
        axes.text(0.5, 0.5, "no place is told", transform=axes.transAxes, ha="center", fontsize=SMALL, color=INK)
        return None
    least = float(known.min())
    most = float(np.clip(known.max(), 1.05 * least, _WORST * least))
    levels = np.geomspace(least * (1.0 - 1e-9), most, _LEVELS)
    mesh = axes.contourf(
        longitude, latitude, known, levels=levels, cmap=light().reversed(), norm=LogNorm(levels[0], most), extend="max"
    )
    lines = axes.contour(longitude, latitude, known, levels=levels[1:-1], colors=INK, linewidths=0.4)
    for label in axes.clabel(lines, levels[2:-1:2], fmt="%.3g", fontsize=SMALL, inline_spacing=3):
        label.set_bbox({"facecolor": "white", "alpha": 0.6, "edgecolor": "none", "pad": 0.6})
    return mesh, levels
