"""The picture of what each further sensor adds."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from ._look import GREY, INK, LINE, NORMAL, SMALL, heading, plain_axes

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from ..sensors.planning import SensorPlan

_SIZE = (7.6, 4.6)  # inches
_BAR = "#9db8cf"
_MOST_NAMES, _LONGEST = 14, 14  # names below the bars, and letters of each


def gain_figure(plan: SensorPlan, *, title: str = "", remark: str = "") -> Figure:
    """What each sensor chosen adds to those before it, and what all together cover.

    Parameters
    ----------
    plan : SensorPlan
        One in which sites were chosen.
    title, remark : str
        A line of one's own, and a few words to stand in the second line.

    Returns
    -------
    matplotlib.figure.Figure
        Bars and line are parts of the weighted area in percent; a dashed line is what no choice could exceed, if known.

    Raises
    ------
    InputError
        If nothing was chosen.
    """
    from matplotlib.figure import Figure

    choice = plan.choice
    if choice is None or not choice.sites:
        raise InputError("no site was chosen, so none adds to others: a plan with a choice would be right")
    total = float(plan.task.area.weight.sum())
    gains = 100.0 * np.asarray(choice.gains) / total
    before = 100.0 * choice.existing_value / total
    reached = before + np.cumsum(gains)
    count = np.arange(1, gains.size + 1)
    figure = Figure(figsize=_SIZE)
    axes = figure.add_axes((0.1, 0.22, 0.86, 0.6), label="gain")
    axes.bar(count, gains, color=_BAR, width=0.7, label="adds", gid="gains")
    axes.plot(np.append(0, count), np.append(before, reached), "o-", color=LINE, linewidth=1.4, markersize=4,
              label="all together", gid="reached")  # fmt: skip
    if np.isfinite(choice.bound):
        bound = 100.0 * choice.bound / total
        axes.axhline(bound, color=GREY, linewidth=1.0, linestyle=(0, (5, 2)), label="no choice of so many covers more")
    for x, y, gain in zip(count, reached, gains, strict=True):
        axes.annotate(f"{gain:+.1f}", (x, y), xytext=(0, 5), textcoords="offset points", ha="center", fontsize=SMALL,
                      color=INK)  # fmt: skip
    plain_axes(axes, x_label="", y_label="part of the weighted area (%)")
    axes.set_xlim(-0.5, gains.size + 0.6)
    axes.set_ylim(0.0, min(1.18 * max(float(reached[-1]), 1.0), 108.0))
    _name(axes, plan)
    figure.legend(loc="lower left", bbox_to_anchor=(0.08, 0.0), ncols=3, fontsize=SMALL, frameon=False)
    words = [f"{choice.method} choice", *choice.notes, *([remark] if remark else [])]
    heading(figure, title or "What each further sensor adds", "; ".join(words))
    return figure


def _name(axes: Axes, plan: SensorPlan) -> None:
    from matplotlib.ticker import MaxNLocator

    names = [site.name for site in plan.sensors[: len(plan.chosen)]]
    if len(names) > _MOST_NAMES:
        axes.set_xlabel("sensors chosen", fontsize=NORMAL)
        axes.xaxis.set_major_locator(MaxNLocator(integer=True))
        return
    short = [name if len(name) <= _LONGEST else f"{name[: _LONGEST - 1]}…" for name in names]
    labels = ["existing" if plan.task.existing else "none", *short]
    axes.set_xticks(np.arange(len(labels)), labels, rotation=25, ha="right", parse_math=False)
