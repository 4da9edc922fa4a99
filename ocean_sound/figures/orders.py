"""The picture of uncertainty against the survey orders: by depth and angle, and where each order ends."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..soundings.orders import SWATH_NOTE
from ..soundings.reach import largest_angle
from ._look import GREY, INK, LINE, NORMAL, SMALL, heading, plain_axes, spread_apart

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from ..soundings.orders import Order

    Floats = NDArray[np.float64]

_SIZE = (10.5, 5.8)  # inches
_DASHES: tuple[Any, ...] = ("-", (0, (6, 2)), (0, (2, 1.2)), (0, (7, 2, 1.5, 2)), (0, (1, 1)))
_COLOURS = "cividis_r"  # perceptually uniform, and the same to the colour-blind
_LEVELS = 12
_ANGLES = (0.0, 45.0, 60.0, 90.0)  # whose TVU is drawn against the limits, as near as there are; the last: the largest
_ROW, _LETTER = 0.045, 0.022  # of the height: a line of small letters; of the width: a letter


def orders_figure(
    uncertainty: xarray.Dataset,
    orders: Mapping[str, Order] | Sequence[Order],
    *,
    title: str = "Uncertainty from the speed of sound against survey orders",
    remark: str = "",
) -> Figure:
    """TVU over angle and depth with the end of each order, and TVU of some angles against the limits.

    Parameters
    ----------
    uncertainty : xarray.Dataset
        `tvu_95` and `thu_95`, m, on (`angle`, `depth`): degrees from the vertical, from 0 or more upward, and m.
    orders : mapping of str to Order, or sequence of Order
    title : str
        The first line.
    remark : str
        What the uncertainty contains, for the second line.

    Returns
    -------
    matplotlib.figure.Figure
        On the left depth grows downward and a line for each order runs along the largest angle up to which TVU and THU
        both hold it; on the right the limits are pale lines, named at their ends.

    Raises
    ------
    InputError
        If a column is missing or not on (angle, depth).

    Examples
    --------
    >>> import xarray as xr
    >>> from ocean_sound.soundings.orders import read_orders
    >>> angle, depth = np.linspace(0, 70, 15), np.linspace(10, 200, 20)
    >>> grown = 0.002 * depth / np.cos(np.radians(angle))[:, None] ** 2
    >>> table = xr.Dataset({name: (("angle", "depth"), grown) for name in ("tvu_95", "thu_95")},
    ...                    {"angle": angle, "depth": depth})
    >>> [axes.get_label() for axes in orders_figure(table, read_orders()).axes]
    ['angle and depth', 'limits', 'key of colours']
    """
    from matplotlib.figure import Figure

    for name in ("tvu_95", "thu_95"):
        if name not in uncertainty or set(uncertainty[name].dims) != {"angle", "depth"}:
            raise InputError(f"uncertainty: {name} on (angle, depth) is missing, in metres, for the figure of orders")
    table = uncertainty.transpose("angle", "depth")
    chosen = distinct(orders)
    figure = Figure(figsize=_SIZE)
    grid = figure.add_gridspec(1, 2, width_ratios=[1.25, 1.0], wspace=0.32, left=0.07, right=0.9, top=0.82, bottom=0.22)
    over = figure.add_subplot(grid[0], label="angle and depth")
    limits = figure.add_subplot(grid[1], label="limits")
    filled = _draw_map(over, table, chosen)
    _draw_limits(limits, table, chosen)
    box = over.get_position()
    colours = figure.add_axes((box.x0, 0.115, box.width, 0.022), label="key of colours")
    bar = figure.colorbar(filled, cax=colours, orientation="horizontal")
    bar.set_label("TVU, 95 % (m)", fontsize=NORMAL)
    bar.ax.tick_params(labelsize=SMALL)
    heading(figure, title, f"{remark}\n{_note()}" if remark else _note())
    return figure


def distinct(orders: Mapping[str, Order] | Sequence[Order]) -> list[Order]:
    """Orders, those of the same limits as one under their joined names.

    >>> from ocean_sound.soundings.orders import read_orders
    >>> [order.name for order in distinct(read_orders())]
    ['2', '1b, 1a', 'Special', 'Exclusive']
    """
    found: dict[tuple[float | None, ...], Order] = {}
    for order in orders.values() if isinstance(orders, Mapping) else orders:
        limits = (order.tvu_fixed, order.tvu_share, order.thu_fixed, order.thu_share)
        name = f"{found[limits].name}, {order.name}" if limits in found else order.name
        found[limits] = replace(order, name=name)
    return list(found.values())


def _note() -> str:
    return f"{SWATH_NOTE[0].upper()}{SWATH_NOTE[1:].split(',', 1)[0]}."


def _draw_map(axes: Axes, table: xarray.Dataset, orders: Sequence[Order]) -> Any:
    from matplotlib.ticker import MaxNLocator

    angle, depth = table["angle"].to_numpy(), table["depth"].to_numpy()
    tvu: Any = np.ma.masked_invalid(table["tvu_95"].to_numpy().T)
    top = float(tvu.max()) if tvu.count() else 1.0
    levels = MaxNLocator(_LEVELS).tick_values(0.0, top)
    filled = axes.contourf(angle, depth, tvu, levels=levels, cmap=_COLOURS)
    plain_axes(axes, x_label="angle from the vertical (degrees)", y_label="depth (m)")
    through, nowhere = [], []
    for order, dashes in zip(orders, _DASHES, strict=False):
        reach = largest_angle(order, angle, depth, table["tvu_95"], table["thu_95"])
        limited = reach.limited_by != 0
        ends = np.where(limited, reach.angle, np.nan)
        if np.isfinite(ends).any():
            axes.plot(ends, depth, color="white", linewidth=3.4, gid=f"behind {order.name}")
            axes.plot(ends, depth, color=INK, linewidth=1.6, linestyle=dashes, label=order.name, gid=order.name)
        elif limited.all():
            nowhere.append(order.name)
        elif not limited.any():
            through.append(order.name)
    axes.set_xlim(angle[0], angle[-1])
    axes.set_ylim(depth[-1], depth[0])
    others = [
        f"{', '.join(names)} {words}" for names, words in ((through, "throughout"), (nowhere, "nowhere")) if names
    ]
    rest = f"held {'; '.join(others)}" if others else ""
    if axes.get_legend_handles_labels()[1]:
        axes.legend(
            loc="lower left", bbox_to_anchor=(-0.02, 1.0), ncols=len(orders), fontsize=SMALL, frameon=False,
            handlelength=3.0, columnspacing=1.2, borderaxespad=0.1, title_fontsize=SMALL, alignment="left",
            title=f"order ends at line{'; ' + rest if rest else ''}",
        )  # fmt: skip
    else:
        axes.set_title(f"orders {rest}", fontsize=SMALL, color=INK, loc="left")
    return filled


def _draw_limits(axes: Axes, table: xarray.Dataset, orders: Sequence[Order]) -> None:
    angle, depth = table["angle"].to_numpy(), table["depth"].to_numpy()
    rows = np.unique([int(np.abs(angle - wanted).argmin()) for wanted in _ANGLES])
    curves = [(f"{angle[row]:.0f}°", table["tvu_95"].to_numpy()[row], LINE, 1.5) for row in rows]
    limits = [(order.name, np.asarray(order.tvu(depth)), GREY, 1.0) for order in orders]
    drawn = [(name, values, colour, width) for name, values, colour, width in [*curves, *limits]
             if np.isfinite(values).any()]  # fmt: skip
    for name, values, colour, width in drawn:
        axes.plot(depth, values, color=colour, linewidth=width, gid=name,
                  linestyle="-" if colour == LINE else (0, (4, 2)))  # fmt: skip
    plain_axes(axes, x_label="depth (m)", y_label="TVU, 95 % (m)")
    axes.set_xlim(depth[0], depth[-1])
    highest = max((float(np.nanmax(values)) for _, values, _, _ in curves if np.isfinite(values).any()), default=1.0)
    allowed = sorted(float(np.nanmax(values)) for _, values, _, _ in limits if np.isfinite(values).any())
    # so high that all curves are seen, and one limit above them
    axes.set_ylim(0.0, 1.08 * max(highest, *(allowed[:1]), *([a for a in allowed if a > highest][:1])))
    _name_ends(axes, drawn, depth)
    axes.set_title("solid: by angle; dashed: limit of the order", fontsize=SMALL, color=INK, loc="left")


def _name_ends(axes: Axes, drawn: Sequence[tuple[str, Floats, str, float]], depth: Floats) -> None:
    """Each curve's name beside its right end, or where it leaves the top."""
    top = axes.get_ylim()[1]
    last = [(float(values[np.isfinite(values)][-1]) / top, name, colour) for name, values, colour, _ in drawn]
    seen = sorted(end for end in last if end[0] <= 1.0)
    places = spread_apart(np.array([end[0] for end in seen]), np.full(len(seen), _ROW), 0.0, 1.0)
    for place, (_, name, colour) in zip(places, seen, strict=True):
        axes.text(1.02, float(place), name, transform=axes.transAxes, va="center", ha="left", **_letters(colour))
    leaving = sorted(
        (float(np.interp(top, values, depth) - depth[0]) / float(depth[-1] - depth[0]), name, colour)
        for (name, values, colour, _), end in zip(drawn, last, strict=True)
        if end[0] > 1.0 and values[0] < top
    )
    widths = np.array([_LETTER * (len(name) + 1) for _, name, _ in leaving])
    starts = spread_apart(np.array([place for place, _, _ in leaving]) - 0.5 * widths - _LETTER, widths, 0.0, 1.0)
    for place, (_, name, colour) in zip(starts, leaving, strict=True):
        axes.text(float(place), 0.985, name, transform=axes.transAxes, va="top", ha="center", **_letters(colour))


def _letters(colour: str) -> dict[str, Any]:
    own = colour == LINE
    return {"fontsize": SMALL, "color": LINE if own else INK, "fontweight": "bold" if own else "normal"}
