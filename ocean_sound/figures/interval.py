"""The picture of the cast interval: how the error of an outer beam grows with time and distance from the last cast."""

from __future__ import annotations

from textwrap import wrap
from typing import TYPE_CHECKING

import numpy as np

from ._look import INK, LINE, NORMAL, PALE, SMALL, heading, plain_axes

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from ..soundings.interval import CastInterval, Growth

    Floats = NDArray[np.float64]

_SIZE = (10.0, 5.4)  # inches
_LIMIT = "#b35806"  # a dark orange; dashed too
_LETTERS = 150  # in a line of notes
_MOST_NOTES = 4
_HEAD = 1.25  # of the largest value: the top of the axes
_FINE = 201  # points of a curve
_DUE_SHADE = "#efe3d6"
_CAUTION = "Guidance only: the surveyor in charge and local rules decide."


def interval_figure(interval: CastInterval, *, depth: float | None = None, remark: str = "") -> Figure:
    """Depth error that 95 % stay within, by time and by distance from the cast, with confidence, limit, and when due.

    Parameters
    ----------
    interval : CastInterval
        From `cast_interval`.
    depth : float, optional
        Of its depths the nearest to this, m, is drawn; where not given that whose limit is passed first.
    remark : str
        A few words to stand beside the number of casts, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        The line is the error at each separation, the band its confidence interval; the dashed line is the limit; where
        they meet the next cast is due, and the shade is the confidence interval of that.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.soundings.interval import cast_interval
    >>> casts = [Profile([0, 50], [1500 + i % 7, 1490], time=np.datetime64("2026-05-01") + np.timedelta64(i, "h"))
    ...          for i in range(30)]
    >>> [axes.get_label() for axes in interval_figure(cast_interval(casts, tolerance=0.3)).axes]
    ['time', 'distance']
    """
    from matplotlib.figure import Figure

    row = _row(interval) if depth is None else int(np.abs(interval.depth - depth).argmin())
    notes = [line for note in interval.notes[:_MOST_NOTES] for line in wrap(note, _LETTERS)]
    left_out = len(interval.notes) - _MOST_NOTES
    lines = [*notes, *([f"and {left_out} more notes"] if left_out > 0 else []), _CAUTION]
    figure = Figure(figsize=_SIZE)
    bottom = 0.13 + 0.032 * len(lines)
    grid = figure.add_gridspec(1, 2, wspace=0.12, left=0.075, right=0.98, top=0.82, bottom=bottom)
    time = figure.add_subplot(grid[0], label="time")
    distance = figure.add_subplot(grid[1], label="distance", sharey=time)
    for axes, growth, unit, scale in (
        (time, interval.by_time, "h", 3600.0),
        (distance, interval.by_distance, "km", 1000.0),
    ):
        _draw(axes, growth, row, unit, scale, float(interval.limit[row]))
        kind = axes.get_label()
        plain_axes(
            axes, x_label=f"{kind} from the cast ({unit})", y_label="depth error, 95 % (m)" if axes is time else ""
        )
    distance.tick_params(labelleft=False)
    time.set_ylim(0.0, _HEAD * max(float(interval.limit[row]), _highest(interval, row)))
    figure.text(0.015, 0.015, "\n".join(lines), ha="left", va="bottom", fontsize=SMALL, color=INK, linespacing=1.35)
    heading(
        figure,
        f"When the next cast is due: beam of {interval.angle:g}°, depth {interval.depth[row]:g} m",
        ", ".join(part for part in (f"{interval.casts} casts", remark) if part)
        + f"; limit {interval.limit[row]:.2f} m, {interval.limited_by}. "
        f"Band and shade: {100 * interval.confidence:g} % confidence.",
    )
    return figure


def _row(interval: CastInterval) -> int:
    """The depth whose limit is passed first by time, or else by distance; the deepest where none is."""
    for growth in (interval.by_time, interval.by_distance):
        if np.isfinite(growth.due).any():
            return int(np.nanargmin(np.where(np.isfinite(growth.due), growth.due, np.nan)))
    return int(interval.depth.argmax())


def _highest(interval: CastInterval, row: int) -> float:
    values = [
        value
        for growth in (interval.by_time, interval.by_distance)
        for value in (*growth.error_95[row], *growth.high[row])
        if np.isfinite(value)
    ]
    return max(values, default=0.0)


def _draw(axes: Axes, growth: Growth, row: int, unit: str, scale: float, limit: float) -> None:
    axes.axhline(limit, color=_LIMIT, linewidth=1.2, linestyle=(0, (5, 2)), gid="limit")
    if not growth.separation.size:
        axes.text(0.5, 0.5, "too few pairs of casts", transform=axes.transAxes, ha="center", fontsize=SMALL, color=INK)
        axes.set_xticks([])
        return
    x = np.append(0.0, growth.separation / scale)
    right = 1.03 * float(x[-1])
    due, low, high = (float(each[row]) / scale for each in (growth.due, growth.due_low, growth.due_high))
    if np.isfinite(low):
        end = min(high, right) if not np.isnan(high) else right
        axes.axvspan(low, end, color=_DUE_SHADE, linewidth=0.0, zorder=0.2, gid="due range")
    fine = np.unique(np.append(np.linspace(0.0, float(x[-1]), _FINE), x))
    error, lower, upper = (
        _between(fine, x, np.append(0.0, each[row])) for each in (growth.error_95, growth.low, growth.high)
    )
    axes.fill_between(fine, lower, upper, color=PALE, linewidth=0.0, alpha=0.8, gid="band")
    axes.plot(fine, error, color=LINE, linewidth=1.4, gid="error")
    axes.plot(x[1:], growth.error_95[row], color=LINE, linestyle="none", marker="o", markersize=3.5, gid="bins")
    if np.isfinite(due):
        axes.axvline(due, color=_LIMIT, linewidth=1.2, gid="due")
    axes.set_xlim(0.0, right)
    axes.set_title(_due(due, low, high, unit), fontsize=NORMAL, color=INK, loc="left")


def _between(fine: Floats, x: Floats, values: Floats) -> Floats:
    """Between the bins the square of the error goes along straight lines, as where the limit is passed was found."""
    known = np.isfinite(values)
    found: Floats = np.sqrt(np.interp(fine, x[known], values[known] ** 2, right=np.nan))
    return found


def _due(due: float, low: float, high: float, unit: str) -> str:
    if np.isnan(due):
        return "when due is not known"
    if np.isinf(due):
        early = f"; confidence from {low:.3g} {unit}" if np.isfinite(low) else ""
        return f"limit not passed as far as the casts are apart{early}"
    top = f"to {high:.3g} {unit}" if np.isfinite(high) else "and longer"
    return f"due after {due:.3g} {unit} (from {low:.3g} {top})"
