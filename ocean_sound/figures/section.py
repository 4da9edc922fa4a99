"""The picture of a section: speed of sound over range and depth, the seabed, the casts, and rays."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ._look import INK, NORMAL, SEABED, SMALL, heading, plain_axes

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from ..section import Section

_SIZE = (9.5, 5.2)  # inches
_METRES_PER_KM = 1000.0
# The light part of a perceptually uniform map, so that black lines stay readable on it.
_MAP, _DARKEST, _COLOURS = "viridis", 0.3, 256
_ACROSS, _DOWN = 401, 301
# Kinds of rays by what they touched, told apart by the style of the line: name, style, width.
_KINDS = (("refracted only", "-", 0.8), ("surface bounces", "--", 0.7), ("seabed bounces", ":", 0.7))
_CROWDED, _THINNEST = 100, 0.3
# Beyond so many the marks of columns of a grid would be a bar; the heading says how many there are.
_MOST_MARKS = 40


def section_figure(section: Section, rays: Any = None, *, remark: str = "") -> Figure:
    """Speed of sound over range and depth, above the seabed.

    Parameters
    ----------
    section : Section
    rays : Fan or xarray.Dataset, optional
        Rays traced with `points`: `path_range` and `path_depth` of shape (rays, points), `surface_bounces` and
        `seabed_bounces`.
    remark : str
        A few words to stand in the second line, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        Depth grows downward; range in km. Colours are those of a perceptually uniform map, lighter where sound is
        faster. A triangle and a thin line down to its last level for each cast. Solid rays touched nothing, dashed ones
        the surface only, dotted ones the seabed.

    Raises
    ------
    InputError
        If the rays carry no paths.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.section import Section
    >>> section = Section.from_profile(Profile([0, 100, 500], [1500, 1490, 1495]), max_range=5000.0)
    >>> [axes.get_label() for axes in section_figure(section).axes]
    ['section', 'speed']
    """
    from matplotlib.figure import Figure

    figure = Figure(figsize=_SIZE)
    axes = figure.add_axes((0.08, 0.18, 0.78, 0.68), label="section")
    bar = figure.add_axes((0.885, 0.18, 0.018, 0.68), label="speed")
    mesh = _draw_water(axes, section)
    figure.colorbar(mesh, cax=bar)
    bar.set_ylabel("sound speed (m/s)", fontsize=NORMAL)
    bar.tick_params(labelsize=SMALL)
    keys: list[Artist] = []
    if rays is not None:
        keys += [*_draw_rays(axes, rays), *_draw_source(axes, rays)]
    keys += [*_draw_casts(axes, section), _draw_seabed(axes, section)]
    plain_axes(axes, x_label="range (km)", y_label="depth (m)")
    axes.grid(visible=False)
    axes.set_xlim(0.0, section.max_range / _METRES_PER_KM)
    axes.set_ylim(section.seabed.deepest * 1.03, 0.0)
    figure.legend(
        handles=keys, loc="lower center", bbox_to_anchor=(0.47, 0.0), ncols=3, fontsize=SMALL, frameon=False,
        handlelength=3.2, columnspacing=2.2,
    )  # fmt: skip
    heading(figure, f"Section{f' {section.id}' if section.id else ''}", _words(section, remark))
    return figure


def _words(section: Section, remark: str) -> str:
    """Where it is, of what, and how closely the field follows."""
    words = []
    if section.track is not None:
        ends = [section.track.at(x) for x in (0.0, section.max_range)]
        words.append(" to ".join(_place(float(lat), float(lon)) for lat, lon in ends))
    if len(section.profiles) > 1:
        words.append(f"{len(section.profiles)} casts or columns")
    if section.fit is not None:
        words.append(f"field within {section.fit.departure:.2g} m/s of the data's curves")
    return ", ".join([*words, remark] if remark else words)


def _place(latitude: float, longitude: float) -> str:
    east = (longitude + 180.0) % 360.0 - 180.0
    return f"{abs(latitude):.3f}° {'N' if latitude >= 0 else 'S'} {abs(east):.3f}° {'E' if east >= 0 else 'W'}"


def _draw_water(axes: Axes, section: Section) -> Any:
    import matplotlib as mpl
    from matplotlib.colors import ListedColormap

    colours = ListedColormap(mpl.colormaps[_MAP](np.linspace(_DARKEST, 1.0, _COLOURS)))
    ranges = np.linspace(0.0, section.max_range, _ACROSS if section.field.varies else 2)
    depths = np.linspace(0.0, section.seabed.deepest, _DOWN)
    speed = np.asarray(section.speed_at(ranges[:, None], depths[None, :])).T
    # below the seabed there is no water to scale the colours by
    wet = depths[:, None] <= section.seabed.depth_at(ranges)[None, :]
    low, high = float(speed[wet].min()), float(speed[wet].max())
    return axes.pcolormesh(
        ranges / _METRES_PER_KM, depths, speed, cmap=colours, vmin=low, vmax=max(high, low + 0.1), shading="gouraud",
        rasterized=True, zorder=0.5, gid="speed",
    )  # fmt: skip


def _draw_seabed(axes: Axes, section: Section) -> Artist:
    ranges = np.unique(np.concatenate((np.linspace(0.0, section.max_range, 1001), section.seabed.ranges)))
    ranges = ranges[(ranges >= 0.0) & (ranges <= section.max_range)]
    depth = section.seabed.depth_at(ranges)
    kinds = ", ".join(
        dict.fromkeys("absorbs all" if kind is None else kind.name or "own numbers" for _, kind in section.seabed.kinds)
    )
    x = ranges / _METRES_PER_KM
    axes.plot(x, depth, color=INK, linewidth=1.2, zorder=4, gid="seabed")
    return axes.fill_between(
        x, depth, section.seabed.deepest * 1.2, color=SEABED, linewidth=0.0, zorder=3, label=f"seabed ({kinds})"
    )


def _draw_casts(axes: Axes, section: Section) -> list[Artist]:
    if len(section.profiles) < 2:
        return []
    x = section.places / _METRES_PER_KM
    if x.size <= _MOST_MARKS:
        reach = [profile.depth[-1] for profile in section.profiles]
        axes.vlines(x, 0.0, reach, color=INK, linewidth=0.5, linestyle=(0, (1, 3)), zorder=2)
    return axes.plot(
        x, np.zeros(x.size), linestyle="none", marker="v", markersize=6, color=INK, markeredgecolor="white",
        clip_on=False, zorder=5, label="where the data are, down to the last level", gid="casts",
    )  # type: ignore[return-value]  # fmt: skip


def _draw_rays(axes: Axes, rays: Any) -> list[Artist]:
    """One line for each kind, its rays parted by gaps."""
    ranges, depths, surface, seabed = (_values(rays, name) for name in ("path_range", "path_depth", "surface_bounces",
                                                                        "seabed_bounces"))  # fmt: skip
    if ranges.ndim != 2 or not ranges.size:
        raise InputError("the rays carry no paths to draw; trace them with points, such as points=501")
    kinds = np.where(seabed > 0, 2, np.where(surface > 0, 1, 0))
    gap = np.full((ranges.shape[0], 1), np.nan)
    across, down = np.hstack((ranges / _METRES_PER_KM, gap)), np.hstack((depths, gap))
    keys: list[Artist] = []
    for kind, (name, style, width) in enumerate(_KINDS):
        mine = kinds == kind
        if mine.any():
            strokes = float((1 + surface + seabed)[mine].sum())
            thin = max(width * min(1.0, (_CROWDED / strokes) ** 0.5), _THINNEST)
            count = int(mine.sum())
            keys += axes.plot(
                across[mine].ravel(), down[mine].ravel(), linestyle=style, linewidth=thin, color=INK, zorder=2.5,
                label=f"{name} ({count} ray{'s' * (count != 1)})", gid=name,
            )  # fmt: skip
    return keys


def _draw_source(axes: Axes, rays: Any) -> list[Artist]:
    """A dot where the rays come from, if they say so."""
    depth = getattr(rays, "source_depth", None)
    if depth is None:
        return []
    return axes.plot(
        [0.0], [float(depth)], marker="o", markersize=8, color=INK, markeredgecolor="white", linestyle="none",
        clip_on=False, zorder=6, label=f"source, {float(depth):g} m", gid="source",
    )  # type: ignore[return-value]  # fmt: skip


def _values(rays: Any, name: str) -> NDArray[np.float64]:
    try:
        return np.asarray(getattr(rays, name), dtype=np.float64)
    except AttributeError:
        raise InputError("the rays carry no paths to draw; trace them with points, such as points=501") from None
