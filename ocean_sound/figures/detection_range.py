"""The picture of how far each sensor hears: detection range over bearing, with its spread over waters and noise."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from ._look import GREY, INK, LINE, NORMAL, SMALL, heading, lift_heading, plain_axes

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

_SIDE = 3.3  # inches of one sensor
_BAND = "#9db8cf"  # the line's blue, paler
_MOST = 9
_METRES_PER_KM = 1000.0


def detection_range_figure(
    result: xarray.Dataset, *, sites: Sequence[int] | None = None, title: str = "", remark: str = ""
) -> Figure:
    """Detection range over bearing, one rose for each sensor.

    Parameters
    ----------
    result : xarray.Dataset
        Of `detection_ranges`, or of a whole sensor plan: `detection_range` and `cut` on `site`, `bearing` and
        `percentile`.
    sites : sequence of int, optional
        Which; the first nine where not given.
    title, remark : str
        A line of one's own, and a few words to stand in the second line.

    Returns
    -------
    matplotlib.figure.Figure
        North is up, bearings run clockwise, the scale is in km and the same for all. The line is the median, the band
        reaches from the lowest to the highest percentile; rings mark bearings on which hearing goes on where the
        computation ends. With fewer than three bearings plain axes instead of a rose.

    Raises
    ------
    InputError
        If a site is none.
    """
    from matplotlib.figure import Figure

    count = result.sizes["site"]
    chosen = list(range(min(count, _MOST))) if sites is None else list(sites)
    wrong = [s for s in chosen if not 0 <= s < count]
    if wrong or not chosen:
        raise InputError(f"sites: {wrong[0] if wrong else 'none'}: 0 to {count - 1} would be right")
    columns = min(len(chosen), 3)
    rows = -(-len(chosen) // columns)
    width, height = max(_SIDE * columns, 5.4), _SIDE * rows + 0.9
    figure = Figure(figsize=(width, height))
    rose = result.sizes["bearing"] >= 3
    grid = figure.add_gridspec(
        rows, columns, left=0.09, right=0.93, bottom=0.75 / height, top=1.0 - 1.15 / height, wspace=0.35, hspace=0.42
    )
    shown = result["detection_range"].isel(site=chosen) / _METRES_PER_KM
    largest = max(float(shown.max()), 1e-3)
    for k, site in enumerate(chosen):
        cell = grid[k // columns, k % columns]
        name = str(result["site_id"].values[site])
        axes = figure.add_subplot(cell, projection="polar" if rose else None, label=name)
        _draw(axes, result.isel(site=site), largest, rose=rose)
        axes.set_title(name, fontsize=NORMAL, color=INK, pad=14 if rose else 6, parse_math=False)
    if rose:
        handles, labels = figure.axes[0].get_legend_handles_labels()
        figure.legend(handles, labels, loc="lower center", ncols=3, fontsize=SMALL, frameon=False)
    level = result["detection_range"].attrs.get("probability")
    words = ["km over bearing", *([f"probability {level:g}"] if level is not None else [])]
    if count > len(chosen):
        words.append(f"{len(chosen)} of {count} sensors")
    heading(figure, title or "Detection range", ", ".join([*words, *([remark] if remark else [])]))
    lift_heading(figure)
    return figure


def _draw(axes: Axes, one: xarray.Dataset, largest: float, *, rose: bool) -> None:
    from matplotlib.ticker import MaxNLocator

    reach = one["detection_range"].transpose("percentile", "bearing").values / _METRES_PER_KM
    percentiles = one["percentile"].values
    bearing = one["bearing"].values
    middle = reach[int(np.argmin(np.abs(percentiles - 50.0)))]
    cut = one["cut"].values.astype(bool)
    band = f"{percentiles[0]:g} to {percentiles[-1]:g} %"
    ends = "hearing goes on beyond"
    if not rose:
        axes.vlines(bearing, reach[0], reach[-1], color=_BAND, linewidth=6.0, label=band)
        axes.plot(bearing, middle, "o", color=LINE, label="median", gid="median")
        plain_axes(axes, x_label="bearing (degrees)", y_label="range (km)")
        axes.set_ylim(0.0, 1.08 * largest)
        axes.legend(fontsize=SMALL, frameon=False)
        return
    around = np.radians(np.append(bearing, bearing[0] + 360.0))
    closed = np.concatenate((reach, reach[:, :1]), axis=1)
    axes.fill_between(around, closed[0], closed[-1], color=_BAND, linewidth=0.0, label=band, gid="band")
    axes.plot(around, np.append(middle, middle[0]), color=LINE, linewidth=1.4, label="median", gid="median")
    if cut.any():
        axes.plot(
            np.radians(bearing[cut]), reach[-1][cut], "o", markersize=4, markerfacecolor="none", markeredgecolor=INK,
            markeredgewidth=0.8, linestyle="none", label=ends, gid="cut",
        )  # fmt: skip
    axes.set_theta_zero_location("N")  # type: ignore[attr-defined]
    axes.set_theta_direction(-1)  # type: ignore[attr-defined]
    axes.set_ylim(0.0, 1.08 * largest)
    axes.set_yticks(MaxNLocator(4).tick_values(0.0, largest)[1:-1])
    axes.set_xticks(np.radians(np.arange(0, 360, 45)), ["N", "45", "E", "135", "S", "225", "W", "315"])
    axes.tick_params(labelsize=SMALL, pad=1)
    axes.grid(color=GREY, linewidth=0.4)
