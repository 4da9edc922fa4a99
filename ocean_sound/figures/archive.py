"""The picture of an archive: where and when its casts were taken, and between which speeds they lie."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..profile.features import SURFACE_REACH
from ._look import GREY, INK, LINE, PALE, SMALL, east_or_west, heading, north_or_south, plain_axes

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from ..archive import Archive

_SIZE = (9.0, 6.5)  # inches
_MAP_SHAPE = 1.6  # width to height of the map
_BINS = 60  # of depth
_MOST_CASTS = 2000  # whose levels are read for the envelope, spread over the archive
_LEAST = 3  # casts that make an envelope


def archive_figure(archive: Archive) -> Figure:
    """Positions of the casts, how many there are in each month, and the envelope of their speed by depth.

    Parameters
    ----------
    archive : Archive
        An open archive.

    Returns
    -------
    matplotlib.figure.Figure
        Positions lie on plain axes of longitude and latitude, centred so that casts on both sides of the date line lie
        together. The envelope is the median and the range from 5 to 95 % of the speeds in each of 60 layers, of at most
        2000 casts spread over the archive; a layer that fewer than three casts reach has none.

    Examples
    --------
    >>> import tempfile
    >>> from pathlib import Path
    >>> from ocean_sound.archive import build_archive, open_archive
    >>> from ocean_sound.files import packaged_profile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     output = Path(folder) / "ostray.nc"
    ...     _ = build_archive([packaged_profile("invented/ostray_edge.csv")], output, workers=0)
    ...     with open_archive(output) as archive:
    ...         [axes.get_label() for axes in archive_figure(archive).axes]
    ['positions', 'months', 'speed']
    """
    from matplotlib.figure import Figure

    figure = Figure(figsize=_SIZE)
    grid = figure.add_gridspec(
        2, 2, width_ratios=[1.9, 1.0], height_ratios=[2.1, 1.0], left=0.075, right=0.975, top=0.87, bottom=0.085,
        wspace=0.24, hspace=0.34,
    )  # fmt: skip
    _draw_positions(figure.add_subplot(grid[0, 0], label="positions"), archive)
    _draw_months(figure.add_subplot(grid[1, 0], label="months"), archive.time)
    _draw_envelope(figure.add_subplot(grid[:, 1], label="speed"), archive)
    title = archive.attribute("title") or archive.path.name
    heading(
        figure, title, f"{archive.path.name}: {len(archive)} casts, {int(archive.starts[-1])} levels{_span(archive)}"
    )
    return figure


def _span(archive: Archive) -> str:
    known = archive.time[~np.isnat(archive.time)]
    if not known.size:
        return ", time unknown"
    first, last = (np.datetime_as_string(moment, unit="D") for moment in (known.min(), known.max()))
    return f", {first}" if first == last else f", {first} to {last}"


def _draw_positions(axes: Axes, archive: Archive) -> None:
    from matplotlib.ticker import MaxNLocator

    known = np.isfinite(archive.latitude) & np.isfinite(archive.longitude)
    longitude, latitude = archive.longitude[known], archive.latitude[known]
    plain_axes(axes, x_label="longitude (degrees)", y_label="latitude (degrees)")
    if not known.any():
        axes.text(0.5, 0.5, "no cast has a position", ha="center", transform=axes.transAxes, fontsize=SMALL, color=INK)
        return
    longitude = _together(longitude)
    size = float(np.clip(60.0 / np.sqrt(longitude.size), 3.0, 18.0))
    axes.scatter(longitude, latitude, s=size, color=LINE, alpha=0.6, linewidths=0.0, gid="casts")
    (west, east), (south, north) = _limits(longitude, latitude)
    axes.set_xlim(west, east)
    axes.set_ylim(south, north)
    for axis in (axes.xaxis, axes.yaxis):
        axis.set_major_locator(MaxNLocator(nbins=7, steps=[1, 1.5, 3, 6, 9, 10]))
    axes.xaxis.set_major_formatter(east_or_west)
    axes.yaxis.set_major_formatter(north_or_south)
    missing = int((~known).sum())
    if missing:
        axes.set_title(f"{missing} casts without a position", loc="right", fontsize=SMALL, color=INK)


def _together(longitude: NDArray[np.float64]) -> NDArray[np.float64]:
    """Longitudes counted on from the widest gap between them, so that no neighbours are torn apart."""
    turned = np.sort(longitude % 360.0)
    gaps = np.diff(turned, append=turned[0] + 360.0)
    start = turned[(int(gaps.argmax()) + 1) % turned.size]
    counted: NDArray[np.float64] = start + (longitude - start) % 360.0
    return counted - 360.0 if counted.mean() > 200.0 else counted


def _limits(
    longitude: NDArray[np.float64], latitude: NDArray[np.float64]
) -> tuple[tuple[float, float], tuple[float, float]]:
    """Limits that hold all casts, a degree of longitude as long as it is there, if the poles are not in the way."""
    west, east = _padded(longitude)
    south, north = _padded(latitude)
    shape = _MAP_SHAPE / max(float(np.cos(np.radians((south + north) / 2.0))), 0.2)  # degrees: longitude to latitude
    wide = max(east - west, (north - south) * shape)
    more = (min(wide, 360.0) - (east - west)) / 2.0, (wide / shape - (north - south)) / 2.0
    west, east = west - max(more[0], 0.0), east + max(more[0], 0.0)
    return (west, east), (max(south - more[1], -90.0), min(north + more[1], 90.0))


def _padded(values: NDArray[np.float64]) -> tuple[float, float]:
    low, high = float(values.min()), float(values.max())
    pad = max((high - low) * 0.03, 0.5)
    return low - pad, high + pad


def _draw_months(axes: Axes, time: NDArray[np.datetime64]) -> None:
    from matplotlib import dates
    from matplotlib.ticker import MaxNLocator

    plain_axes(axes, x_label="", y_label="casts per month")
    known = time[~np.isnat(time)].astype("datetime64[M]")
    if not known.size:
        axes.text(0.5, 0.5, "no cast has a time", ha="center", transform=axes.transAxes, fontsize=SMALL, color=INK)
        return
    months, counts = np.unique(known, return_counts=True)
    starts = months.astype("datetime64[D]")
    widths = ((months + 1).astype("datetime64[D]") - starts) / np.timedelta64(1, "D")
    days = starts.astype(np.float64)  # days since 1970, as matplotlib counts
    axes.bar(days, counts, width=0.94 * widths, align="edge", color=LINE, linewidth=0.0, gid="months")
    pad = max(30.0, 0.02 * float(days[-1] - days[0]))
    axes.set_xlim(float(days[0]) - pad, float(days[-1] + widths[-1]) + pad)
    untyped: Any = dates
    locator = untyped.AutoDateLocator(minticks=3, maxticks=8)
    axes.xaxis.set_major_locator(locator)
    axes.xaxis.set_major_formatter(untyped.ConciseDateFormatter(locator))
    axes.yaxis.set_major_locator(MaxNLocator(nbins=5, integer=True))
    missing = int(np.isnat(time).sum())
    if missing:
        axes.set_title(f"{missing} casts without a time", loc="right", fontsize=SMALL, color=INK)


def _draw_envelope(axes: Axes, archive: Archive) -> None:
    plain_axes(axes, x_label="sound speed (m/s)", y_label="depth (m)")
    found = envelope(archive)
    if found is None:
        axes.text(0.5, 0.5, "no cast has a speed", ha="center", transform=axes.transAxes, fontsize=SMALL, color=INK)
        return
    depth, low, median, high = found
    axes.fill_betweenx(depth, low, high, color=PALE, linewidth=0.0, gid="envelope")
    axes.plot(low, depth, color=GREY, linewidth=0.6)
    axes.plot(high, depth, color=GREY, linewidth=0.6)
    axes.plot(median, depth, color=LINE, linewidth=1.4, gid="median")
    axes.set_ylim(float(depth[-1]) * 1.02, 0.0)
    axes.locator_params(axis="x", nbins=5)
    axes.set_title("median and 5 to 95 %", loc="right", fontsize=SMALL, color=INK)


def envelope(archive: Archive) -> tuple[NDArray[np.float64], ...] | None:
    """Depths, and the 5, 50 and 95 % quantiles of the speed there over casts; None where no cast has a speed.

    The speed of a cast in a layer is that of its profile at the middle of the layer.
    """
    deepest = archive.deepest[np.isfinite(archive.column("harmonic_mean_speed"))]
    if not deepest.size:
        return None
    # finer near the surface, where the speed changes most
    depth = float(deepest.max()) * np.linspace(0.0, 1.0, _BINS) ** 2
    wanted = np.flatnonzero(np.isfinite(archive.column("harmonic_mean_speed")))
    chosen = wanted[np.unique(np.linspace(0, wanted.size - 1, min(wanted.size, _MOST_CASTS)).astype(int))]
    speeds = np.full((chosen.size, depth.size), np.nan)
    for row, position in enumerate(chosen.tolist()):
        levels, speed, _ = archive.speed(position)
        above = speed[0] if levels[0] <= SURFACE_REACH else np.nan
        speeds[row] = np.interp(depth, levels, speed, left=above, right=np.nan)
    enough = np.isfinite(speeds).sum(axis=0) >= min(_LEAST, chosen.size)
    low, median, high = np.nanquantile(speeds[:, enough], [0.05, 0.5, 0.95], axis=0)
    return depth[enough], low, median, high
