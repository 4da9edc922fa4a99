"""The picture of a swath before and after: what another correction does, over across- and along-track."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ._look import GREY, INK, LINE, NORMAL, PALE, SMALL, heading, plain_axes

if TYPE_CHECKING:
    import xarray
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

_SIZE = (10.5, 7.4)  # inches
_DEPTHS, _DIFFERENCES = "cividis_r", "PuOr_r"
_IN_CENTIMETRES = 1.0  # m: differences smaller than this are given in centimetres
_METRES_PER_KM = 1000.0
_MOST_PINGS, _ACROSS = 800, 201  # what is drawn of a swath: pings spread over it, on a grid across it
_OUTLYING = 99.5  # per cent of the differences that the scale of colours holds


def swath_figure(
    before: xarray.Dataset,
    after: xarray.Dataset,
    *,
    truth: xarray.Dataset | None = None,
    names: tuple[str, str] = ("before", "after"),
    title: str = "A swath before and after",
    remark: str = "",
) -> Figure:
    """The depths of a swath before and after, their difference, and its mean across the track.

    Parameters
    ----------
    before, after : xarray.Dataset
        The same soundings corrected in two ways, on (`ping`, `beam`): `depth` and `across_track_distance`, m, and for
        the distance along the track the `latitude` and `longitude` of each ping; without them pings are counted.
    truth : xarray.Dataset, optional
        With the true `depth`, where it is known: then errors are drawn in place of depths.
    names : pair of str
        What the two are called.
    title, remark : str
        For the two lines above.

    Returns
    -------
    matplotlib.figure.Figure
        From above: depth (or its error) before, the same after, and after minus before, each over the distance along
        the track and across it (positive to starboard); beside differences and errors their mean over all pings for
        each beam, with the band that holds 95 % of them.

    Raises
    ------
    InputError
        If they are not the same soundings, or lack a column.

    Examples
    --------
    >>> import xarray as xr
    >>> across = np.tile(np.linspace(-50, 50, 11), (4, 1))
    >>> one = xr.Dataset({"depth": (("ping", "beam"), np.full((4, 11), 30.0)),
    ...                   "across_track_distance": (("ping", "beam"), across)})
    >>> [axes.get_label() for axes in swath_figure(one, one).axes]
    ['before', 'after', 'key of depths', 'difference', 'key of differences', 'mean difference']
    """
    from matplotlib.figure import Figure

    x, x_label, across, depths = _checked(before, after, truth)
    difference = depths[1] - depths[0]
    figure = Figure(figsize=_SIZE)
    grid = figure.add_gridspec(
        3, 5, width_ratios=[5.2, 0.02, 0.13, 0.45, 1.3], left=0.07, right=0.985, top=0.87, bottom=0.075, wspace=0.02,
        hspace=0.34,
    )  # fmt: skip
    scale = _scale(*(depths if truth is not None else ()), difference)
    what = f"error of depth ({scale.unit})" if truth is not None else "depth (m)"
    for row, (depth, name, label) in enumerate(zip(depths, names, ("before", "after"), strict=True)):
        axes = figure.add_subplot(grid[row, 0], label=label)
        if truth is None:
            mesh = _draw_mesh(axes, x, across, depth, cmap=_DEPTHS, limits=_range(depths))
        else:
            mesh = _draw_mesh(axes, x, across, scale.factor * depth, cmap=_DIFFERENCES, limits=scale.limits)
            beside = figure.add_subplot(grid[row, 4], label=f"mean {label}", sharey=axes)
            _draw_mean(beside, across, scale.factor * depth, scale)
        axes.set_title(f"{what}, {name}", fontsize=NORMAL, color=INK, loc="left")
        axes.tick_params(labelbottom=False)
    _key(figure, mesh, figure.add_subplot(grid[:2, 2], label="key of depths"), inverted=truth is None)
    axes = figure.add_subplot(grid[2, 0], label="difference")
    mesh = _draw_mesh(axes, x, across, scale.factor * difference, cmap=_DIFFERENCES, limits=scale.limits)
    axes.set_title(f"{names[1]} minus {names[0]} ({scale.unit}); positive: now deeper", fontsize=NORMAL, color=INK,
                   loc="left")  # fmt: skip
    axes.set_xlabel(x_label, fontsize=NORMAL)
    _key(figure, mesh, figure.add_subplot(grid[2, 2], label="key of differences"))
    _draw_mean(figure.add_subplot(grid[2, 4], label="mean difference", sharey=axes), across, scale.factor * difference,
               scale)  # fmt: skip
    heading(figure, title, remark)
    return figure


@dataclass(frozen=True)
class _Scale:
    factor: float
    unit: str
    limits: tuple[float, float]


def _scale(*values: Floats) -> _Scale:
    """Centimetres or metres, and a scale of colours that holds nearly all."""
    known = np.concatenate([np.abs(each[np.isfinite(each)]) for each in values])
    largest = float(np.percentile(known, _OUTLYING)) if known.size else 0.0
    factor, unit = (100.0, "cm") if largest < _IN_CENTIMETRES else (1.0, "m")
    limit = factor * largest or 1.0
    return _Scale(factor, unit, (-limit, limit))


def _range(values: tuple[Floats, ...]) -> tuple[float, float]:
    known = np.concatenate([each[np.isfinite(each)] for each in values])
    return (float(known.min()), float(known.max())) if known.size else (0.0, 1.0)


def _checked(
    before: xarray.Dataset, after: xarray.Dataset, truth: xarray.Dataset | None
) -> tuple[Floats, str, Floats, tuple[Floats, Floats]]:
    """Distance along the track, what it is, distance across it, and the two depths or their errors."""
    for name in ("depth", "across_track_distance"):
        for which, each in (("before", before), ("after", after)):
            if name not in each or each[name].dims != ("ping", "beam"):
                raise InputError(f"{which}: {name} on (ping, beam) is missing, which the picture of a swath needs")
    depths = before["depth"].to_numpy(), after["depth"].to_numpy()
    if depths[0].shape != depths[1].shape:
        raise InputError(f"before has {depths[0].shape} pings and beams, after {depths[1].shape}: give the same ones")
    if truth is not None:
        known = truth["depth"].to_numpy() if "depth" in truth else np.empty(0)
        if known.shape != depths[0].shape:
            raise InputError(f"truth: depth of {depths[0].shape} pings and beams is needed; found {known.shape}")
        depths = depths[0] - known, depths[1] - known
    across = after["across_track_distance"].to_numpy()
    if "latitude" not in after or "longitude" not in after:
        return np.arange(depths[0].shape[0], dtype=np.float64), "ping", across, depths
    return _along(after) / _METRES_PER_KM, "distance along the track (km)", across, depths


def _along(dataset: xarray.Dataset) -> Floats:
    from pyproj import Geod

    latitude, longitude = (dataset[name].to_numpy().astype(float) for name in ("latitude", "longitude"))
    steps = np.nan_to_num(Geod(ellps="WGS84").inv(longitude[:-1], latitude[:-1], longitude[1:], latitude[1:])[2])
    return np.concatenate(([0.0], np.cumsum(steps)))


def _gridded(across: Floats, values: Floats, grid: Floats) -> Floats:
    """Values of each ping on even distances across the track: linear between beams, nothing beyond or at gaps."""
    found = np.full((values.shape[0], grid.size), np.nan)
    for row, (sides, column) in enumerate(zip(across, values, strict=True)):
        known = np.isfinite(sides)
        if np.count_nonzero(known) > 1:
            order = np.argsort(sides[known])
            found[row] = np.interp(grid, sides[known][order], column[known][order], left=np.nan, right=np.nan)
    return found


def _draw_mesh(axes: Axes, x: Floats, across: Floats, values: Floats, *, cmap: str, limits: tuple[float, float]) -> Any:
    shown = np.unique(np.linspace(0, x.size - 1, min(x.size, _MOST_PINGS)).round().astype(int))
    known = across[np.isfinite(across)]
    low_side, high_side = (float(known.min()), float(known.max())) if known.size else (0.0, 1.0)
    grid = np.linspace(low_side, high_side, _ACROSS)
    mesh = axes.pcolormesh(
        _edges(x[shown]), _edges(grid), np.ma.masked_invalid(_gridded(across[shown], values[shown], grid).T), cmap=cmap,
        vmin=limits[0], vmax=limits[1], rasterized=True, linewidth=0.0,
    )  # fmt: skip
    plain_axes(axes, x_label="", y_label="across-track (m)")
    axes.grid(visible=False)
    axes.locator_params(axis="y", nbins=5)
    axes.set_ylim(low_side, high_side)
    return mesh


def _edges(middles: Floats) -> Floats:
    """Half-way between places, and as far beyond the first and the last."""
    if middles.size == 1:
        return np.array([middles[0] - 0.5, middles[0] + 0.5])
    half = 0.5 * (middles[1:] + middles[:-1])
    edges: Floats = np.concatenate(([2.0 * middles[0] - half[0]], half, [2.0 * middles[-1] - half[-1]]))
    return np.maximum.accumulate(edges)


def _key(figure: Figure, mesh: Any, axes: Axes, *, inverted: bool = False) -> None:
    figure.colorbar(mesh, cax=axes)
    axes.tick_params(labelsize=SMALL)
    axes.locator_params(axis="y", nbins=6)
    if inverted:
        axes.invert_yaxis()  # depth grows downward


def _draw_mean(axes: Axes, across: Floats, values: Floats, scale: _Scale) -> None:
    """Mean over all pings of each beam, and what holds 95 % of them, across the track."""
    plain_axes(axes, x_label=f"mean and 95 % ({scale.unit})")
    axes.tick_params(labelleft=False)
    axes.locator_params(axis="x", nbins=3)
    axes.axvline(0.0, color=GREY, linewidth=0.8)
    known = np.isfinite(across) & np.isfinite(values)
    rows = [
        (np.median(sides[here]), column[here].mean(), *np.percentile(column[here], [2.5, 97.5]))
        for sides, column, here in zip(across.T, values.T, known.T, strict=True)
        if here.any()
    ]
    if rows:
        middle, mean, low, high = np.array(sorted(rows)).T
        axes.fill_betweenx(middle, low, high, color=PALE, linewidth=0.0, gid="band")
        axes.plot(mean, middle, color=LINE, linewidth=1.4, gid="mean")
    axes.set_xlim(*(1.15 * limit for limit in scale.limits))
