"""The picture of what arrives: amplitude over travel time, for each receiver, and from where."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ._look import INK, NORMAL, SMALL, heading, plain_axes

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

_WIDTH, _ROW, _REST = 9.5, 2.3, 1.5  # inches
# Kinds of paths by what they touched, told apart by line and marker: name, line, marker, whether it is filled.
_KINDS = (
    ("refracted only", "-", "o", True),
    ("surface bounces", "--", "^", False),
    ("seabed bounces", ":", "s", False),
)
_MOST_ROWS = 8
_SPAN, _LEAST_SPAN = 60.0, 20.0  # dB below the strongest arrival that are shown, at most and at least
_LEAST_TIME = 0.01  # s across a receiver's axis at least
_MOST_WORDS = 12  # arrivals of a receiver beyond which none is labelled
_COLUMNS = ("receiver", "receiver_depth", "receiver_range", "travel_time", "amplitude", "arrival_angle",
            "surface_bounces", "seabed_bounces")  # fmt: skip


def arrivals_figure(arrivals: Any, receivers: Any = None, *, title: str = "", remark: str = "") -> Figure:
    """The impulse response at each receiver: amplitude over travel time.

    Parameters
    ----------
    arrivals : Arrivals or xarray.Dataset
        What connects the source with receivers: `travel_time`, `amplitude` and the counts of bounces by arrival.
    receivers : array_like of int, optional
        Which receivers, by their place in the list; the first eight where not given.
    title : str
        The first line; "Arrivals" where not given.
    remark : str
        A few words to stand in the second line, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        One row for each receiver. Levels are 20 log10 of the amplitude of pressure relative to that 1 m from the
        source, down to 60 dB below the strongest. Solid stems with dots touched nothing, dashed ones with triangles the
        surface only, dotted ones with squares the seabed. Where there are few, the arrival angle stands beside each.

    Raises
    ------
    InputError
        If there is no arrival to draw.

    Examples
    --------
    >>> import ocean_sound as sound
    >>> water = sound.Profile(depth=[0, 100], speed=[1500, 1500])
    >>> arrivals = sound.connect(water, source_depth=30, receiver_depth=50, receiver_range=1000, max_bounces=1)
    >>> [axes.get_label() for axes in arrivals_figure(arrivals).axes]
    ['receiver 0']
    """
    from matplotlib.figure import Figure

    table = {name: np.asarray(getattr(arrivals, name)) for name in _COLUMNS}
    known = np.unique(table["receiver"])
    chosen = known[:_MOST_ROWS] if receivers is None else np.atleast_1d(np.asarray(receivers))
    chosen = np.array([one for one in chosen if one in known])
    if not chosen.size:
        raise InputError("nothing arrives at the receivers asked for: there is nothing to draw")
    figure = Figure(figsize=(_WIDTH, _REST + _ROW * chosen.size))
    height = figure.get_figheight()
    grid = figure.add_gridspec(chosen.size, 1, hspace=0.42, left=0.085, right=0.98, top=1.0 - 0.75 / height,
                               bottom=0.85 / height)  # fmt: skip
    levels = _levels(table["amplitude"])
    known_levels = levels[np.isin(table["receiver"], chosen) & np.isfinite(levels)]
    strongest = float(known_levels.max()) if known_levels.size else 0.0
    weakest = float(known_levels.min()) if known_levels.size else 0.0
    floor = strongest - min(_SPAN, max(_LEAST_SPAN, 10.0 * np.ceil((strongest - weakest + 5.0) / 10.0)))
    keys: dict[str, Artist] = {}
    for place, one in enumerate(chosen):
        axes = figure.add_subplot(grid[place], label=f"receiver {one}")
        mine = table["receiver"] == one
        _draw(axes, {name: values[mine] for name, values in table.items()}, levels[mine], (floor, strongest), keys)
        depth, distance = (float(table[f"receiver_{name}"][mine][0]) for name in ("depth", "range"))
        axes.set_title(f"receiver at {distance / 1000.0:g} km, {depth:g} m", loc="left", fontsize=NORMAL, color=INK)
        plain_axes(axes, x_label="travel time (s)" if place == chosen.size - 1 else "", y_label="level (dB re 1 m)")
    order = [name for name, *_ in _KINDS if name in keys]
    figure.legend(handles=[keys[name] for name in order], loc="lower center", ncols=3, fontsize=SMALL, frameon=False,
                  handlelength=3.2, columnspacing=2.2)  # fmt: skip
    left = known.size - chosen.size
    number = int(np.isin(table["receiver"], chosen).sum())
    words = [f"{number} arrival{'s' * (number != 1)} at {chosen.size} receiver{'s' * (chosen.size != 1)}"]
    words += [f"{left} more receivers are not drawn"] * (left > 0 and receivers is None)
    words += [remark] * bool(remark)
    _head(figure, title or "Arrivals", ", ".join(words))
    return figure


def _head(figure: Figure, title: str, subtitle: str) -> None:
    """As `heading` has it, on figures of any height."""
    heading(figure, title, subtitle)
    height = figure.get_figheight()
    for text, inches in zip(figure.texts[-2:], (0.1, 0.34), strict=True):
        text.set_y(1.0 - inches / height)


def _levels(amplitude: NDArray[np.float64]) -> NDArray[np.float64]:
    """Levels in dB; NaN for those on a caustic itself, whose amplitude no ray tells."""
    with np.errstate(divide="ignore"):
        levels = 20.0 * np.log10(np.abs(amplitude))
    return np.where(np.isfinite(levels), levels, np.nan)


def _draw(
    axes: Axes,
    table: dict[str, NDArray[Any]],
    levels: NDArray[np.float64],
    span: tuple[float, float],
    keys: dict[str, Artist],
) -> None:
    """Stems of one receiver, by kind."""
    floor, strongest = span
    time = table["travel_time"]
    kinds = np.where(table["seabed_bounces"] > 0, 2, np.where(table["surface_bounces"] > 0, 1, 0))
    for kind, (name, style, marker, filled) in enumerate(_KINDS):
        mine = (kinds == kind) & (levels > floor)
        if not mine.any():
            continue
        axes.vlines(time[mine], floor, levels[mine], color=INK, linewidth=0.9, linestyle=style, gid=f"{name} stems")
        drawn = axes.plot(
            time[mine], levels[mine], linestyle=style, linewidth=0.9, marker=marker, markersize=5, color=INK,
            markerfacecolor=INK if filled else "white", label=name, gid=name,
        )[0]  # fmt: skip
        keys.setdefault(name, _key(style, marker, name, filled=filled))
        drawn.set_linestyle("none")
    _label_angles(axes, time, levels, table["arrival_angle"], floor)
    axes.set_ylim(floor, strongest + 0.14 * (strongest - floor))
    wide = max(float(np.ptp(time)), _LEAST_TIME)
    middle = 0.5 * float(time.min() + time.max())
    axes.set_xlim(middle - 0.55 * wide, middle + 0.58 * wide)
    axes.ticklabel_format(axis="x", useOffset=False)


def _key(style: Any, marker: str, name: str, *, filled: bool) -> Artist:
    from matplotlib.lines import Line2D

    return Line2D(
        [], [], linestyle=style, linewidth=0.9, marker=marker, markersize=5, color=INK,
        markerfacecolor=INK if filled else "white", label=name,
    )  # fmt: skip


def _label_angles(
    axes: Axes, time: NDArray[np.float64], levels: NDArray[np.float64], angles: NDArray[np.float64], floor: float
) -> None:
    shown = np.flatnonzero(levels > floor)
    if not 0 < shown.size <= _MOST_WORDS:
        return
    span = max(float(np.ptp(time)), 1e-3)
    taken: list[tuple[float, float]] = []
    for i in shown[np.argsort(-levels[shown])]:
        # a label that would lie on a stronger one's is left out
        if any(abs(time[i] - t) < 0.05 * span and abs(levels[i] - level) < 5.0 for t, level in taken):
            continue
        taken.append((float(time[i]), float(levels[i])))
        axes.annotate(f"{angles[i]:+.1f}°", (time[i], levels[i]), xytext=(5, 2), textcoords="offset points",
                      fontsize=SMALL, color=INK)  # fmt: skip
