"""The picture of transmission loss over range and depth, above the seabed."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ._look import INK, NORMAL, SEABED, SMALL, heading, plain_axes

if TYPE_CHECKING:
    import xarray
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

_SIZE = (9.5, 5.2)  # inches
_METRES_PER_KM = 1000.0
_MAP, _STEP = "viridis", 5.0  # perceptually uniform, for all eyes; dB of one shade
_SPAN, _LEAST = 50.0, 5.0  # dB that colours span from the least loss on, which all but this part (%) is above
_BELOW = 1.03
_SMOOTHED = 0.02  # part of the range and of the depth over which intensity is averaged for a contour


def loss_figure(loss: xarray.Dataset, *, contour: float | None = None, remark: str = "") -> Figure:
    """Transmission loss over range and depth.

    Parameters
    ----------
    loss : xarray.Dataset
        As `rays.loss` returns it on a grid: `transmission_loss` on (`range`, `depth`), `seabed_depth` on `range`.
    contour : float, optional
        A loss, dB, to be drawn as a line, such as the one up to which a receiver detects: of the intensity averaged
        over a fiftieth of the range and of the depth, since the loss at a point jumps.
    remark : str
        A few words to stand in the second line, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        Depth grows downward; range in km; lighter where more sound arrives. A triangle marks the source. White where
        no loss is given.

    Raises
    ------
    InputError
        If the loss is not on a grid of two ranges and two depths at least, or nowhere finite.
    """
    from matplotlib.figure import Figure

    if loss["transmission_loss"].dims != ("range", "depth") or min(loss["transmission_loss"].shape) < 2:
        raise InputError("a picture of loss wants a grid of two ranges and two depths at least")
    ranges = np.asarray(loss["range"], dtype=np.float64) / _METRES_PER_KM
    depths = np.asarray(loss["depth"], dtype=np.float64)
    values = np.asarray(loss["transmission_loss"], dtype=np.float64).T
    seabed = np.asarray(loss["seabed_depth"], dtype=np.float64)
    low, high = _limits(values)
    figure = Figure(figsize=_SIZE)
    axes = figure.add_axes((0.08, 0.18, 0.78, 0.68), label="loss")
    bar = figure.add_axes((0.885, 0.18, 0.018, 0.68), label="scale")
    mesh = _draw_loss(axes, ranges, depths, values, (low, high))
    figure.colorbar(mesh, cax=bar, extend="both")
    bar.set_ylabel("transmission loss (dB re 1 m)", fontsize=NORMAL)
    bar.tick_params(labelsize=SMALL)
    bar.invert_yaxis()
    keys: list[Artist] = []
    if contour is not None:
        keys += _draw_contour(axes, ranges, depths, values, float(contour))
    keys.append(_draw_source(axes, float(loss.attrs["source_depth"])))
    keys.append(_draw_seabed(axes, ranges, seabed, depths, str(loss.attrs.get("seabed_kinds", ""))))
    plain_axes(axes, x_label="range (km)", y_label="depth (m)")
    axes.grid(visible=False)
    axes.set_xlim(0.0, ranges[-1])
    axes.set_ylim(max(depths[-1], min(seabed.max(), depths[-1] * 1.2)) * _BELOW, min(depths[0], 0.0))
    figure.legend(
        handles=keys, loc="lower center", bbox_to_anchor=(0.47, 0.0), ncols=3, fontsize=SMALL, frameon=False,
        handlelength=2.6, columnspacing=2.2,
    )  # fmt: skip
    heading(figure, f"Transmission loss at {_hertz(float(loss.attrs['frequency']))}", _words(loss, remark))
    return figure


def _limits(values: Floats) -> tuple[float, float]:
    """From the least loss up, in whole shades."""
    known = values[np.isfinite(values)]
    if known.size == 0:
        raise InputError("no loss is finite: there is nothing to draw")
    low = float(np.floor(np.percentile(known, _LEAST) / _STEP) * _STEP)
    return low, low + _SPAN


def _draw_loss(axes: Axes, ranges: Floats, depths: Floats, values: Floats, limits: tuple[float, float]) -> Any:
    import matplotlib as mpl
    from matplotlib.colors import BoundaryNorm

    levels = np.arange(limits[0], limits[1] + 0.5 * _STEP, _STEP)
    colours = mpl.colormaps[f"{_MAP}_r"]
    shown = np.ma.masked_invalid(np.where(np.isposinf(values), limits[1] + _SPAN, values))
    norm = BoundaryNorm(levels, colours.N, extend="both")
    return axes.pcolormesh(
        ranges, depths, shown, cmap=colours, norm=norm, shading="nearest", rasterized=True, zorder=0.5, gid="loss"
    )


def _draw_contour(axes: Axes, ranges: Floats, depths: Floats, values: Floats, level: float) -> list[Artist]:
    from matplotlib.lines import Line2D
    from scipy.ndimage import uniform_filter

    size = (max(1, round(_SMOOTHED * depths.size)), max(1, round(_SMOOTHED * ranges.size)))
    wet = np.isfinite(values)
    intensity = uniform_filter(np.where(wet, 10.0 ** (-0.1 * np.where(wet, values, 0.0)), 0.0), size)
    share = uniform_filter(wet.astype(np.float64), size)
    with np.errstate(divide="ignore", invalid="ignore"):
        smooth = np.where(wet, -10.0 * np.log10(intensity / share), np.nan)
    finite = np.ma.masked_invalid(np.minimum(smooth, 1e3))
    drawn = axes.contour(ranges, depths, finite, levels=[level], colors=[INK], linewidths=1.0, zorder=2)
    drawn.set_gid("contour")
    return [Line2D([], [], color=INK, linewidth=1.0, label=f"{level:g} dB, averaged")]


def _draw_source(axes: Axes, depth: float) -> Artist:
    return axes.plot(
        [0.0], [depth], linestyle="none", marker=">", markersize=8, color=INK, markeredgecolor="white", clip_on=False,
        zorder=5, label=f"source at {depth:g} m", gid="source",
    )[0]  # fmt: skip


def _draw_seabed(axes: Axes, ranges: Floats, seabed: Floats, depths: Floats, kinds: str) -> Artist:
    x, y = np.concatenate(([0.0], ranges)), np.concatenate((seabed[:1], seabed))
    axes.plot(x, y, color=INK, linewidth=1.2, zorder=4, gid="seabed")
    names = ", ".join(dict.fromkeys(part.rsplit(" from ", 1)[0] for part in kinds.split("; ") if part))
    lowest = max(float(seabed.max()), float(depths[-1])) * 1.2
    return axes.fill_between(
        x, y, lowest, color=SEABED, linewidth=0.0, zorder=3, label=f"seabed ({names})" if names else "seabed"
    )


def _hertz(frequency: float) -> str:
    return f"{frequency / 1000.0:g} kHz" if frequency >= 1000.0 else f"{frequency:g} Hz"


def _words(loss: xarray.Dataset, remark: str) -> str:
    """By which method, with which phases."""
    about = loss.attrs
    count = f"{about['modes']} modes" if about.get("modes") else ""
    beams = f"{about['beams']} beams" if about.get("beams") else ""
    parts = [
        "by " + " and ".join(part for part in (count, beams) if part),
        f"phases {about['phases']}" if about["phases"] != "surface" else "phases of the surface alone",
    ]
    if about.get("wind_speed"):
        parts.append(f"wind {about['wind_speed']:g} m/s")
    return ", ".join([*parts, remark] if remark else parts)
