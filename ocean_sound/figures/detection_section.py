"""The picture of one bearing of a sensor: loss over range and depth, and where a signal is heard."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ._look import INK, NORMAL, SEABED, SMALL, heading, plain_axes
from ._map import edges, light

if TYPE_CHECKING:
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from ..sensors.planning import SensorPlan

    Floats = NDArray[np.float64]

_SIZE = (9.5, 4.8)  # inches
_METRES_PER_KM = 1000.0
_SPAN = 60.0  # dB of the scale, at most
_NOTHING = 300.0  # dB: no sound at all


def detection_section_figure(
    plan: SensorPlan,
    *,
    sensor: int = 0,
    bearing: float | None = None,
    water: int = 0,
    title: str = "",
    remark: str = "",
) -> Figure:
    """Loss along one bearing of a sensor, and the line within which half of all signals are heard.

    Parameters
    ----------
    plan : SensorPlan
    sensor : int
        Of the plan's sensors.
    bearing : float, optional
        Degrees, the nearest that was computed; where not given that with the median of all detection ranges.
    water : int
        Of the plan's waters.
    title, remark : str
        A line of one's own, and a few words to stand in the second line.

    Returns
    -------
    matplotlib.figure.Figure
        By reciprocity a source anywhere in the picture is heard at the sensor, on the left, with the loss shown there;
        lighter is louder, grey is the seabed, white was not computed. The heavy line is the loss allowed at the median
        noise, the dashed one that in a calm sea.

    Raises
    ------
    InputError
        If the sensor or the water is none of the plan's.
    """
    from matplotlib.figure import Figure

    task, losses = plan.task, plan.losses
    for name, value, count in (("sensor", sensor, len(plan.sensors)), ("water", water, len(task.members))):
        if not 0 <= value < count:
            raise InputError(f"{name} is {value}: 0 to {count - 1} would be right")
    there = len(plan.chosen)
    place = plan.chosen[sensor] if sensor < there else len(task.candidates) + sensor - there
    settings, site = losses.settings, plan.sensors[sensor]
    which = _bearing(plan, sensor, bearing)
    loss = losses.of(water, place)[which].T
    figure = Figure(figsize=_SIZE)
    axes = figure.add_axes((0.08, 0.2, 0.78, 0.64), label="loss")
    bar = figure.add_axes((0.885, 0.2, 0.018, 0.64), label="scale")
    distance, depth = settings.distances / _METRES_PER_KM, settings.depths
    heard = np.where(np.isfinite(loss) & (loss < _NOTHING), loss, np.nan)
    low = float(np.nanmin(heard)) if np.isfinite(heard).any() else 0.0
    allowed = task.hearing.allowed(task.hearing.noise.middle), task.hearing.allowed(task.hearing.noise.calm)
    high = max(
        min(float(np.nanmax(heard)) if np.isfinite(heard).any() else 1.0, low + _SPAN), allowed[0] + 5.0, low + 1.0
    )
    colours = light().reversed().with_extremes(bad=SEABED)
    mesh = axes.pcolormesh(
        np.concatenate(([0.0], edges(distance)[1:])), _layers(depth), np.ma.masked_invalid(np.minimum(loss, high)),
        cmap=colours, vmin=low, vmax=high, rasterized=True, gid="loss",
    )  # fmt: skip
    _draw_allowed(axes, distance, depth, np.where(np.isnan(loss), _NOTHING, loss), allowed)
    axes.plot(
        [0.0], [site.depth], marker="^", markersize=8, color=INK, markeredgecolor="white", clip_on=False, zorder=6
    )
    figure.colorbar(mesh, cax=bar)
    bar.set_ylabel("transmission loss (dB re 1 m)", fontsize=NORMAL)
    bar.tick_params(labelsize=SMALL)
    bar.invert_yaxis()
    plain_axes(axes, x_label="range (km)", y_label="depth (m)")
    axes.grid(visible=False)
    axes.set_xlim(0.0, distance[-1])
    axes.set_ylim(float(max(depth[-1], 1.05 * site.depth)), 0.0)
    if axes.get_legend_handles_labels()[0]:
        figure.legend(loc="lower left", bbox_to_anchor=(0.07, 0.0), ncols=2, fontsize=SMALL, frameon=False)
    words = [
        f"sensor at {site.depth:g} m", f"bearing {settings.azimuths[which]:g}°", f"{settings.frequency:g} Hz",
        task.members[water].name, *([remark] if remark else []),
    ]  # fmt: skip
    heading(figure, title or f"Loss around {site.name}", ", ".join(words))
    return figure


def _bearing(plan: SensorPlan, sensor: int, bearing: float | None) -> int:
    azimuths = plan.losses.settings.azimuths
    if bearing is not None:
        away = (azimuths - bearing + 180.0) % 360.0 - 180.0
        return int(np.argmin(np.abs(away)))
    middle = plan.reach["detection_range"].sel(percentile=50.0).values[sensor]
    return int(np.argsort(middle, kind="stable")[middle.size // 2])


def _layers(depth: Floats) -> Floats:
    """Edges between depths that may be unevenly apart."""
    if depth.size == 1:
        return np.array([max(depth[0] - 0.5, 0.0), depth[0] + 0.5])
    middle = 0.5 * (depth[1:] + depth[:-1])
    return np.concatenate(([max(1.5 * depth[0] - 0.5 * depth[1], 0.0)], middle, [1.5 * depth[-1] - 0.5 * depth[-2]]))


def _draw_allowed(axes: Any, distance: Floats, depth: Floats, loss: Floats, allowed: tuple[float, float]) -> None:
    styles = (
        (allowed[0], "-", 2.0, "half are heard, median noise"),
        (allowed[1], (0, (4, 2)), 1.2, "half are heard, calm sea"),
    )
    for value, style, width, label in styles:
        if min(loss.shape) > 1 and loss.min() < value < loss.max():
            axes.contour(
                distance, depth, loss, levels=[value], colors=INK, linestyles=[style], linewidths=[width], zorder=4
            )
            axes.plot([], [], color=INK, linestyle=style, linewidth=width, label=f"{label} ({value:.1f} dB)")
