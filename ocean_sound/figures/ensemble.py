"""The picture of an ensemble: how many members leave a point in shadow, and mean and spread of their loss."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from ._look import INK, NORMAL, SEABED, SMALL, heading, plain_axes

if TYPE_CHECKING:
    import xarray
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_WIDTH, _ROW, _REST = 9.5, 2.6, 1.2  # inches
# What can be drawn: variable, words, map, whether low values are the dark ones.
_PANELS = (
    ("shadow_share_no_bounce", "share in shadow,\nno bounce", "cividis_r"),
    ("shadow_share_surface_bounces", "share in shadow,\nsurface bounces", "cividis_r"),
    ("transmission_loss_mean", "mean loss\n(dB re 1 m)", "viridis_r"),
    ("transmission_loss_spread", "spread of loss\n(dB)", "cividis_r"),
)
_METRES_PER_KM = 1000.0


def ensemble_figure(found: xarray.Dataset, *, title: str = "", remark: str = "") -> Figure:
    """Shares in shadow, and mean and spread of loss, over range and depth.

    Parameters
    ----------
    found : xarray.Dataset
        What `ensemble` gives.
    title : str
        The first line; "Ensemble" where not given.
    remark : str
        A few words to stand in the second line, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        One panel for each result; depth grows downward, range in km. Colours are those of perceptually uniform maps,
        darker where more members lie in shadow, where loss is greater or spreads more.

    Raises
    ------
    InputError
        If there is nothing to draw.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.rays import ensemble
    >>> waters = [Profile([0, 100], [surface, 1500.0]) for surface in (1520.0, 1510.0)]
    >>> grid = {"ranges": [0.0, 2500.0, 5000.0], "depths": [10.0, 50.0, 90.0]}
    >>> found = ensemble(waters, source_depth=20.0, workers=0, **grid)
    >>> [axes.get_label() for axes in ensemble_figure(found).axes if axes.get_label() != "<colorbar>"]
    ['shadow_share_no_bounce', 'shadow_share_surface_bounces']
    """
    from matplotlib.figure import Figure

    panels = [panel for panel in _PANELS if panel[0] in found]
    if not panels or found.sizes["depth"] < 2 or found.sizes["range"] < 2:
        raise InputError("the ensemble holds nothing to draw on a grid of two ranges and two depths at least")
    figure = Figure(figsize=(_WIDTH, _REST + _ROW * len(panels)))
    height = figure.get_figheight()
    grid = figure.add_gridspec(len(panels), 1, hspace=0.16, left=0.085, right=0.945, top=1.0 - 0.62 / height,
                               bottom=0.5 / height)  # fmt: skip
    for place, (name, words, colours) in enumerate(panels):
        axes = figure.add_subplot(grid[place], label=name)
        _draw(axes, found, name, words, colours)
        last = place == len(panels) - 1
        plain_axes(axes, x_label="range (km)" if last else "", y_label="depth (m)")
        axes.grid(visible=False)
        axes.tick_params(labelbottom=last)
    members = ", ".join(map(str, found.member_name.to_numpy()[:4])) + (", ..." if found.sizes["member"] > 4 else "")
    heading(figure, title or "Ensemble", f"{found.sizes['member']} members: {members}{f', {remark}' if remark else ''}")
    for text, inches in zip(figure.texts[-2:], (0.1, 0.33), strict=True):
        text.set_y(1.0 - inches / height)
    return figure


def _draw(axes: Axes, found: xarray.Dataset, name: str, words: str, colours: str) -> None:
    values = found[name].transpose("depth", "range").to_numpy()
    share = name.startswith("shadow_share")
    known = values[np.isfinite(values)]
    low, high = (0.0, 1.0) if share else (tuple(np.quantile(known, (0.02, 0.98))) if known.size else (0.0, 1.0))
    axes.set_facecolor(SEABED)  # where no member has water
    mesh = axes.pcolormesh(
        found.range.to_numpy() / _METRES_PER_KM, found.depth.to_numpy(), np.ma.masked_invalid(values), cmap=colours,
        vmin=float(low), vmax=max(float(high), float(low) + 1e-3), shading="nearest", rasterized=True, gid=name,
    )  # fmt: skip
    axes.set_ylim(float(found.depth[-1]), float(found.depth[0]))
    axes.set_xlim(float(found.range[0]) / _METRES_PER_KM, float(found.range[-1]) / _METRES_PER_KM)
    figure = axes.figure
    bar = figure.colorbar(mesh, ax=axes, pad=0.015, fraction=0.03)
    bar.set_label(words, fontsize=NORMAL, color=INK)
    bar.ax.tick_params(labelsize=SMALL)
