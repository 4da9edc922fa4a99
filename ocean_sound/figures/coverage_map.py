"""The map of what sensors hear: probability over an area, the seabed, and where the sensors are."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ._look import SMALL, heading, lift_heading
from ._map import colour_bar, draw_places, draw_seabed, edges, fit_height, light, map_axes, near

if TYPE_CHECKING:
    import xarray
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

_SIZE = (7.6, 6.8)  # inches


def coverage_map_figure(
    result: xarray.Dataset,
    *,
    at_once: int = 1,
    depth: float | None = None,
    level: float = 0.5,
    title: str = "",
    remark: str = "",
) -> Figure:
    """How likely sensors hear something, over an area.

    Parameters
    ----------
    result : xarray.Dataset
        Of a sensor plan (`SensorPlan.to_dataset`).
    at_once : int
        Least number of sensors that hear it.
    depth : float, optional
        Of what is heard, m, the nearest that was computed; where not given the mean over all, by the time spent there.
    level : float
        Probability along which a heavy line is drawn.
    title, remark : str
        A line of one's own, and a few words to stand in the second line, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        Plain axes of longitude and latitude, also across the date line; lighter is likelier, thin lines are depths of
        the seabed, triangles are sensors chosen, squares those that were there.

    Raises
    ------
    InputError
        If the result does not hold so many at once.
    """
    from matplotlib.figure import Figure

    counts = result["at_once"].values.tolist()
    if at_once not in counts:
        raise InputError(f"at_once is {at_once}: the result holds {', '.join(map(str, counts))}")
    figure = Figure(figsize=_SIZE)
    axes = figure.add_axes((0.11, 0.12, 0.76, 0.76), label="coverage")
    longitude, latitude = result["longitude"].values, result["latitude"].values
    probability, at = _probability(result.sel(at_once=at_once), depth)
    middle = float(longitude.mean())
    places = near(result["site_longitude"].values, middle), result["site_latitude"].values
    map_axes(axes, longitude, latitude, places)
    fit_height(figure, axes)
    mesh = axes.pcolormesh(
        edges(longitude),
        edges(latitude),
        probability,
        cmap=light(),
        vmin=0.0,
        vmax=1.0,
        rasterized=True,
        gid="coverage",
    )
    draw_seabed(axes, longitude, latitude, result["seabed_depth"].values)
    _draw_level(axes, longitude, latitude, probability, level)
    there = result["existing"].values.astype(bool)
    names = result["site_id"].values
    for chosen, label, marker in ((~there, "sensor", "^"), (there, "was there before", "s")):
        draw_places(
            axes, places[0][chosen], places[1][chosen], names[chosen].tolist(), label=label, marker=marker,
            hollow=marker == "s",
        )  # fmt: skip
    colour_bar(figure, axes, mesh, "probability")
    handles, labels = axes.get_legend_handles_labels()
    figure.legend(
        handles, labels, loc="lower left", bbox_to_anchor=(0.1, 0.005), ncols=3, fontsize=SMALL, frameon=False
    )
    hear = "hears" if at_once == 1 else "hear"
    words = [
        f"probability that at least {at_once} {hear} one, {at}",
        f"heavy line: {level:g}",
        *([remark] if remark else []),
    ]
    heading(figure, title or "What sensors hear", "; ".join(words))
    lift_heading(figure)
    return figure


def _probability(result: xarray.Dataset, depth: float | None) -> tuple[Floats, str]:
    """On the map, and where in the water."""
    found = result["heard_probability"]
    if depth is not None:
        layer = found.sel(depth=depth, method="nearest")
        return np.asarray(layer.values), f"at {float(layer['depth']):g} m"
    depths = result["depth"].values.tolist()
    if len(depths) == 1:
        return np.asarray(found.isel(depth=0).values), f"at {depths[0]:g} m"
    weight = result["weight"].fillna(0.0)
    total = weight.sum("depth")
    mean = (found.fillna(0.0) * weight).sum("depth") / total.where(total > 0.0)
    return np.asarray(mean.values), f"mean over {depths[0]:g} to {depths[-1]:g} m"


def _draw_level(axes: Axes, longitude: Floats, latitude: Floats, probability: Floats, level: float) -> None:
    known: Any = np.ma.masked_invalid(probability)
    if min(known.shape) < 2 or not known.count() or not known.min() < level < known.max():
        return
    axes.contour(longitude, latitude, known, levels=[level], colors="white", linewidths=3.2, zorder=3)
    axes.contour(longitude, latitude, known, levels=[level], colors="black", linewidths=1.8, zorder=3.1)
