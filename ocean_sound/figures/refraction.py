"""The picture of refraction: errors of soundings over angle and depth, and where they pass an order's limits."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ._look import LINE, SMALL, heading
from .comparison import draw_error
from .orders import distinct

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import xarray
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from ..soundings.orders import Order

_SIZE = (10.5, 5.2)  # inches
_DASHES: tuple[Any, ...] = ("-", (0, (6, 2)), (0, (2, 1.2)), (0, (7, 2, 1.5, 2)), (0, (1, 1)))
_TITLES = {"depth_error": "depth error", "across_track_error": "across-track error"}


def refraction_figure(
    errors: xarray.Dataset,
    *,
    used: str = "one cast",
    true: str = "another",
    orders: Mapping[str, Order] | Sequence[Order] = (),
    remark: str = "",
) -> Figure:
    """Errors of soundings taken in one water and corrected with another, over angle and depth.

    Parameters
    ----------
    errors : xarray.Dataset
        From `soundings.refraction_errors` or `soundings.compare`; a grid of some tens of angles of 0 or more, and as
        many depths, makes smooth contours.
    used, true : str
        What the water that soundings were corrected with, and that they were taken in, are called.
    orders : mapping of str to Order, or sequence of Order
        Of these a line shows where the error is as large as the limit (TVU for depth, THU for the distance across):
        beyond it the sounding fails by this error alone.
    remark : str
        A few words to stand beside the names, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        Depth grows downward. Where a beam turns or leaves the profile the grid stays empty.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.soundings import refraction_errors
    >>> a, b = (Profile([0, 20, 100], [top, 1500, 1490]) for top in (1500, 1503))
    >>> errors = refraction_errors(a, b, angles=range(0, 76, 5), depths=range(10, 100, 10))
    >>> [axes.get_label() for axes in refraction_figure(errors).axes]
    ['depth error', 'across-track error']
    """
    from matplotlib.figure import Figure

    chosen = distinct(orders)
    passed = {
        name: [(order, dashes) for order, dashes in zip(chosen, _DASHES, strict=False) if _passed(errors, name, order)]
        for name in _TITLES
    }
    figure = Figure(figsize=_SIZE)
    bottom = 0.18 if any(passed.values()) else 0.105
    grid = figure.add_gridspec(1, 2, wspace=0.2, left=0.07, right=0.98, top=0.81, bottom=bottom)
    for column, (name, title) in enumerate(_TITLES.items()):
        axes = figure.add_subplot(grid[column], label=title)
        draw_error(axes, errors, name, title)
        for order, dashes in passed[name]:
            _draw_limit(axes, errors, name, order, dashes)
    _key(figure, [each for order in chosen for each in [*passed["depth_error"], *passed["across_track_error"]]
                  if each[0] is order])  # fmt: skip
    keep = "keeping sin(angle)/speed" if errors.attrs["beams_keep"].startswith("sin") else "keeping their angle"
    heading(
        figure,
        f"Soundings in the water of {true}, corrected with {used}",
        f"Beams {keep}, transducer at {errors.attrs['transducer_depth']:.3g} m; "
        "positive: found too deep, or too far out." + (f"\n{remark}" if remark else ""),
    )
    return figure


def _share(errors: xarray.Dataset, name: str, order: Order) -> Any:
    """The error as a share of the limit, masked where there is none."""
    depth = errors["sounding_depth"].to_numpy()
    limit = np.asarray(order.tvu(depth) if name == "depth_error" else order.thu(depth))
    with np.errstate(divide="ignore"):
        return np.ma.masked_invalid(np.abs(errors[name].to_numpy()) / limit[:, None])


def _passed(errors: xarray.Dataset, name: str, order: Order) -> bool:
    """Whether the error is within the limit at one place and beyond it at another."""
    share = _share(errors, name, order)
    return bool(share.count() and share.max() > 1.0 > share.min())


def _draw_limit(axes: Axes, errors: xarray.Dataset, name: str, order: Order, dashes: Any) -> None:
    from matplotlib.patheffects import withStroke

    depth, angle = errors["sounding_depth"].to_numpy(), errors["angle"].to_numpy()
    line = axes.contour(
        angle, depth, _share(errors, name, order), levels=[1.0], colors=LINE, linewidths=1.8, linestyles=[dashes]
    )
    line.set_gid(order.name)
    line.set_path_effects([withStroke(linewidth=3.6, foreground="white")])


def _key(figure: Figure, drawn: Sequence[tuple[Order, Any]]) -> None:
    from matplotlib.lines import Line2D

    handles = {
        order.name: Line2D([], [], color=LINE, linewidth=1.8, linestyle=dashes,
                           label=f"as large as order {order.name} allows")
        for order, dashes in drawn
    }  # fmt: skip
    if handles:
        figure.legend(
            handles=list(handles.values()), loc="lower left", bbox_to_anchor=(0.06, 0.0), ncols=3, fontsize=SMALL,
            frameon=False, handlelength=3.4,
        )  # fmt: skip
