"""The picture of two casts compared: their speeds, the difference and its causes, and its effect on soundings."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..profile import Profile
from ..soundings import refraction_errors
from ._look import GREY, INK, LINE, NORMAL, SMALL, heading, plain_axes

if TYPE_CHECKING:
    import xarray
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

_SIZE = (10.5, 7.0)  # inches
_OTHER = "#b35806"  # a dark orange; told from the blue by its dashes too
_DASHED = (0, (5, 1.5))
_COLOURS = "PuOr_r"  # orange and purple are told apart by the colour-blind, and as dark as each other
_GRID = 61  # angles, and depths
_WHOLE = "#bdbdbd"  # a broad pale line, on which the parts can be seen
_MARGIN = 0.035  # of the width or height: labels of contours nearer to an edge would be cut
_PALER = 1.35  # the scale of colours is so much longer than the values: letters must be read on all of them
_STEPS = 8  # of the scale, about
_CAUSES = (("temperature", _DASHED), ("salinity", (0, (1, 1.2))), ("pressure", (0, (4, 1.2, 1, 1.2))))
_IN_CENTIMETRES = 1.0  # m: errors smaller than this are given in centimetres


def comparison_figure(comparison: xarray.Dataset, *, remark: str = "") -> Figure:
    """Two casts side by side: their speeds, the difference with its causes, and the error of soundings.

    Parameters
    ----------
    comparison : xarray.Dataset
        From `soundings.compare`. The errors are drawn from the vertical to its largest angle, and from the transducer
        to its deepest sounding, traced on a grid of their own.
    remark : str
        A few words to stand beside the names of the casts, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        Depth grows downward. Where a beam turns or leaves the profile the grid stays empty.

    Examples
    --------
    >>> from ocean_sound.soundings import compare
    >>> a, b = (Profile([0, 20, 100], [1500, top, 1490], id=name) for name, top in (("A", 1500), ("B", 1503)))
    >>> [axes.get_label() for axes in comparison_figure(compare(a, b)).axes]
    ['speed', 'difference', 'depth error', 'across-track error']
    """
    from matplotlib.figure import Figure

    figure = Figure(figsize=_SIZE)
    grid = figure.add_gridspec(
        2, 3, width_ratios=[1.0, 1.0, 1.75], hspace=0.42, wspace=0.3, left=0.075, right=0.975, top=0.82, bottom=0.085
    )
    speed = figure.add_subplot(grid[:, 0], label="speed")
    difference = figure.add_subplot(grid[:, 1], label="difference", sharey=speed)
    _draw_speeds(speed, comparison)
    _draw_difference(difference, comparison)
    names = _names(comparison)
    errors = _errors(comparison)
    for row, (name, title) in enumerate((("depth_error", "depth error"), ("across_track_error", "across-track error"))):
        axes = figure.add_subplot(grid[row, 2], label=title)
        draw_error(axes, errors, name, title)
    keep = "keeping sin(angle)/speed" if comparison.attrs["beams_keep"].startswith("sin") else "keeping their angle"
    heading(
        figure,
        f"{names[0]} and {names[1]} compared",
        ". ".join([part for part in (_when(comparison), remark) if part])
        + f"\nErrors of soundings taken in {names[1]} and corrected with {names[0]}, beams {keep}; "
        "positive: found too deep, or too far out.",
    )
    return figure


def _names(comparison: xarray.Dataset) -> list[str]:
    return [comparison.attrs.get(key) or f"cast {key}" for key in "ab"]


def _when(comparison: xarray.Dataset) -> str:
    times = [comparison.attrs.get(f"{key}_time") for key in "ab"]
    if not any(times):
        return ""
    return " and ".join(f"{time[:16].replace('T', ' ')} UTC" if time else "time unknown" for time in times)


def _draw_speeds(axes: Axes, comparison: xarray.Dataset) -> None:
    depth = comparison["depth"].to_numpy()
    names = _names(comparison)
    axes.plot(comparison["speed_a"], depth, color=LINE, linewidth=1.2, label=names[0], gid="a")
    axes.plot(
        comparison["speed_b"], depth, color=_OTHER, linewidth=1.2, linestyle=(0, (5, 1.5)), label=names[1], gid="b"
    )
    plain_axes(axes, x_label="sound speed (m/s)", y_label="depth (m)")
    axes.locator_params(axis="x", nbins=4)
    top, bottom = float(depth[0]), float(depth[-1])
    axes.set_ylim(bottom + 0.01 * (bottom - top), top - 0.01 * (bottom - top))
    _legend(axes)


def _draw_difference(axes: Axes, comparison: xarray.Dataset) -> None:
    depth = comparison["depth"].to_numpy()
    axes.axvline(0.0, color=GREY, linewidth=0.8)
    axes.plot(comparison["speed_difference"], depth, color=_WHOLE, linewidth=3.0, label="whole", gid="whole")
    for cause, dashes in _CAUSES:
        name = f"speed_difference_by_{cause}"
        if name in comparison:
            axes.plot(comparison[name], depth, color=LINE, linewidth=1.1, linestyle=dashes, label=cause, gid=cause)
    plain_axes(axes, x_label="second minus first (m/s)")
    axes.tick_params(labelleft=False)
    axes.locator_params(axis="x", nbins=4)
    _legend(axes)


def _legend(axes: Axes) -> None:
    axes.legend(
        loc="lower left", bbox_to_anchor=(-0.03, 1.0), fontsize=SMALL, frameon=False, handlelength=2.6,
        borderaxespad=0.2, labelspacing=0.25, ncols=2 if len(axes.get_legend_handles_labels()[1]) > 2 else 1,
        columnspacing=0.9,
    )  # fmt: skip


def _errors(comparison: xarray.Dataset) -> xarray.Dataset:
    """The errors on a grid fine enough for contours."""
    depth = comparison["depth"].to_numpy()
    used, true = (Profile(depth, comparison[f"speed_{key}"].to_numpy()) for key in "ab")
    transducer = float(comparison.attrs["transducer_depth"])
    deepest = float(comparison["sounding_depth"].max())
    return refraction_errors(
        used,
        true,
        angles=np.linspace(0.0, float(np.abs(comparison["angle"]).max()) or 1.0, _GRID),
        depths=np.linspace(transducer, deepest, _GRID + 1)[1:],
        transducer_depth=transducer,
        flat_array=comparison.attrs["beams_keep"].startswith("sin"),
    )


def draw_error(axes: Axes, errors: xarray.Dataset, name: str, title: str) -> None:
    """Contours of an error of `refraction_errors` over angle and depth."""
    from matplotlib.ticker import MaxNLocator

    values: Any = np.ma.masked_invalid(errors[name].to_numpy())
    angle, depth = errors["angle"].to_numpy(), errors["sounding_depth"].to_numpy()
    largest = float(np.abs(values).max()) if values.count() else 0.0
    factor, unit = (100.0, "cm") if largest < _IN_CENTIMETRES else (1.0, "m")
    axes.set_title(f"{title} ({unit}); heavy line: no error", fontsize=NORMAL, color=INK, loc="left")
    plain_axes(axes, x_label="angle from the vertical (degrees)", y_label="depth (m)")
    axes.set_xlim(angle[0], angle[-1])
    axes.set_ylim(depth[-1], depth[0])
    if largest * factor < 1e-6:
        axes.text(0.5, 0.5, "none", transform=axes.transAxes, ha="center", fontsize=SMALL, color=INK)
        return
    values = factor * values
    levels = MaxNLocator(_STEPS, symmetric=True).tick_values(-factor * largest, factor * largest)
    limit = _PALER * float(np.abs(levels).max())
    axes.contourf(angle, depth, values, levels=levels, cmap=_COLOURS, vmin=-limit, vmax=limit)
    lines = axes.contour(
        angle, depth, values, levels=levels, colors=INK, linewidths=[1.4 if level == 0.0 else 0.6 for level in levels]
    )
    labels = axes.clabel(lines, fmt=lambda level: f"{level:+g}" if level else "0", fontsize=SMALL, inline_spacing=3)
    for label in labels:
        x, y = axes.transAxes.inverted().transform(axes.transData.transform(label.get_position()))
        label.set_visible(bool(_MARGIN < x < 1.0 - _MARGIN and 2 * _MARGIN < y < 1.0 - 2 * _MARGIN))
        label.set_bbox({"facecolor": "white", "alpha": 0.75, "edgecolor": "none", "pad": 0.8})
