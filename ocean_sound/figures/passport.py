"""The picture of one sounding: its ray, the casts that served it, and its TVU by cause."""

from __future__ import annotations

from textwrap import wrap
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ._look import GREY, INK, LINE, NORMAL, PALE, SEABED, SMALL, heading, plain_axes

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from ..soundings.passport import Passport, Serving

_SIZE = (10.5, 6.2)  # inches
_LETTERS = 118  # in a line of the command, whose letters are all as wide
_MOST_CAUSES = 10
_MOST_CASTS = 4
_HOUR, _KM, _CM = 3600.0, 1000.0, 100.0
_LINES: tuple[Any, ...] = ("-", (0, (6, 2)), (0, (2, 1.2)), (0, (7, 2, 1.5, 2)))
_ROOM = 1.3  # of the longest bar, for its number


def passport_figure(passport: Passport, *, remark: str = "") -> Figure:
    """The ray of a sounding, the casts that served it with their weights, and its TVU by cause.

    Parameters
    ----------
    passport : Passport
        Of the sounding.
    remark : str
        A few words for the second line, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        On the left the ray, and pale the straight line from the transducer to the sounding; in the middle the speed of
        sound in each cast; on the right 1.96 standard uncertainties of the depth from each cause. Causes are
        independent: their squares add up.

    Raises
    ------
    InputError
        If the sounding failed, and so has no ray.

    Examples
    --------
    >>> from types import SimpleNamespace as Made
    >>> cast = Made(id="K1", weight=1.0, time_apart=600.0, distance=900.0, levels=[0, 50], speed=[1500, 1490])
    >>> sounding = Made(name="ping 7, beam 3", depth=40.0, across=60.0, transducer_depth=4.0, ray_across=[0.0, 60.0],
    ...                 ray_depth=[4.0, 40.0], casts=[cast], causes={"temperature": 0.1}, tvu_95=0.1, command="")
    >>> [axes.get_label() for axes in passport_figure(sounding).axes]
    ['ray', 'speed', 'causes']
    """
    from matplotlib.figure import Figure

    if not np.size(passport.ray_depth):
        raise InputError(f"{passport.name}: {passport.reason}; without a depth there is no ray to draw")
    command = wrap(passport.command, _LETTERS, break_on_hyphens=False, subsequent_indent="    ")
    figure = Figure(figsize=_SIZE)
    bottom = 0.1 + (0.035 * (len(command) + 1) if command else 0.0)
    grid = figure.add_gridspec(
        1, 3, width_ratios=[1.45, 0.75, 1.15], wspace=0.1, left=0.065, right=0.985, top=0.8, bottom=bottom
    )
    ray = figure.add_subplot(grid[0], label="ray")
    speed = figure.add_subplot(grid[1], label="speed", sharey=ray)
    _draw_ray(ray, passport)
    _draw_casts(speed, passport)
    speed.tick_params(labelleft=False)
    inner = grid[2].subgridspec(1, 2, width_ratios=[0.62, 1.0])
    _draw_causes(figure.add_subplot(inner[1], label="causes"), passport)
    if command:
        figure.text(0.015, 0.015, "\n".join(["To reproduce it:", *command]), ha="left", va="bottom", fontsize=SMALL,
                    family="monospace", color=INK, linespacing=1.35)  # fmt: skip
    side = "to starboard" if passport.across > 0 else "to port"
    heading(
        figure,
        f"Sounding of {passport.name}, counted from 0",
        f"{passport.depth:.3f} m deep, {abs(passport.across):.3f} m {side}, TVU {_in_cm(passport.tvu_95)} (95 %)"
        + (f", {remark}" if remark else "")
        + "\n"
        + "; ".join(_who(cast) for cast in passport.casts[:_MOST_CASTS]),
    )
    return figure


def _in_cm(value: float) -> str:
    return f"{_CM * value:.1f} cm" if np.isfinite(value) else "unknown"


def _who(cast: Serving) -> str:
    """A cast's name, weight, and how far it is."""
    far = [
        f"{value / unit:.1f} {name}"
        for value, unit, name in ((cast.time_apart, _HOUR, "h"), (cast.distance, _KM, "km"))
        if np.isfinite(value)
    ]
    return f"{cast.id} {cast.weight:.0%}" + (f" ({', '.join(far)} away)" if far else "")


def _draw_ray(axes: Axes, passport: Passport) -> None:
    across, depth = np.asarray(passport.ray_across), np.asarray(passport.ray_depth)
    axes.plot(across[[0, -1]], depth[[0, -1]], color=GREY, linewidth=0.8, linestyle=(0, (3, 2)), gid="straight")
    axes.plot(across, depth, color=LINE, linewidth=1.6, gid="ray")
    axes.plot(across[:1], depth[:1], marker="o", markersize=7, color=INK, markeredgecolor="white", gid="transducer")
    axes.plot(across[-1:], depth[-1:], marker="s", markersize=7, color=SEABED, markeredgecolor=INK, gid="sounding")
    plain_axes(axes, x_label="across-track, positive to starboard (m)", y_label="depth (m)")
    axes.set_ylim(1.05 * float(passport.depth), 0.0)
    way = np.array([across[-1] - across[0], depth[-1] - depth[0]])
    apart = np.abs(way[0] * (depth - depth[0]) - way[1] * (across - across[0])) / max(float(np.hypot(*way)), 1e-9)
    bend = f"ray; at most {apart.max():.2f} m from a straight line"
    axes.set_title(bend, fontsize=NORMAL, color=INK, loc="left")


def _draw_casts(axes: Axes, passport: Passport) -> None:
    for cast, dashes in zip(passport.casts, _LINES, strict=False):
        shown = np.asarray(cast.levels) <= 1.05 * passport.depth
        axes.plot(np.asarray(cast.speed)[shown], np.asarray(cast.levels)[shown], color=LINE, linewidth=1.1,
                  linestyle=dashes, label=cast.id, gid=cast.id)  # fmt: skip
    plain_axes(axes, x_label="sound speed (m/s)")
    axes.locator_params(axis="x", nbins=3)
    axes.legend(
        loc="lower left", bbox_to_anchor=(-0.05, 1.0), fontsize=SMALL, frameon=False, handlelength=2.6,
        ncols=2 if len(passport.casts) > 2 else 1, borderaxespad=0.1, labelspacing=0.2, columnspacing=0.8,
    )  # fmt: skip


def _draw_causes(axes: Axes, passport: Passport) -> None:
    causes = list(passport.causes.items())  # the largest first
    rows = causes[: _MOST_CAUSES - 1] if len(causes) > _MOST_CAUSES else causes
    rest = causes[len(rows) :]
    if rest:
        rows = [*rows, (f"{len(rest)} others", float(np.sqrt(sum(value**2 for _, value in rest))))]
    rows = [*rows, ("together", passport.tvu_95)]
    values = [_CM * float(np.nan_to_num(value)) for _, value in rows]
    places = np.arange(len(rows), dtype=float)
    places[-1] += 0.4
    axes.barh(places, values, height=0.62, color=[*[PALE] * (len(rows) - 1), LINE], edgecolor=LINE, linewidth=0.6)
    axes.set_yticks(places, [name.replace("_", " ") for name, _ in rows])
    longest = max(values) or 1.0
    for place, value, (_, known) in zip(places, values, rows, strict=True):
        words = f"{value:.1f}" if np.isfinite(known) else "unknown"
        axes.text(value + 0.03 * longest, place, words, va="center", ha="left", fontsize=SMALL, color=INK)
    plain_axes(axes, x_label="TVU by cause, 95 % (cm)")
    axes.grid(visible=False, axis="y")
    axes.tick_params(axis="y", length=0)
    axes.set_xlim(0.0, _ROOM * longest)
    axes.set_ylim(float(places[-1]) + 0.6, -0.6)
    axes.locator_params(axis="x", nbins=4)
