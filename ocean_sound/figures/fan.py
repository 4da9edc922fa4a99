"""The picture of a fan of rays over range and depth, beside the profile that bends them."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from ._look import INK, SEABED, SMALL, draw_speed, heading, plain_axes, provenance

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from ..profile import Profile
    from ..rays import Fan, Shadow

_SIZE = (9.5, 5.6)  # inches
# Kinds of rays by what they touched, told apart by the style of the line and its weight: name, style, width, grey.
_KINDS = (
    ("refracted only", "-", 0.9, "#1a1a1a"),
    ("surface bounces", "--", 0.8, "#4d4d4d"),
    ("seabed bounces", ":", 0.7, "#808080"),
)
# Strokes from bounce to bounce that a kind of ray may have before its lines are drawn thinner, and how thin at most.
_CROWDED, _THINNEST = 100, 0.35
_SHADE, _HATCH, _HATCH_INK = "#e9e9e9", "////", "#b8b8b8"
_CAUTION = "Shadow is not silence: sound still arrives by the seabed, by diffraction and by scattering."
_METRES_PER_KM = 1000.0


def fan_figure(fan: Fan, profile: Profile | None = None, shadow: Shadow | None = None, *, remark: str = "") -> Figure:
    """Rays over range and depth, beside the sound speed; shadow shaded.

    Parameters
    ----------
    fan : Fan
        Traced with `points`, so that there are paths to draw.
    profile : Profile, optional
        The profile to draw beside the rays; that of the fan where not given.
    shadow : Shadow, optional
        Where no ray arrives: light grey without any bounce, hatched even with surface bounces.
    remark : str
        A few words to stand beside time, position and equation, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        Depth grows downward; range in km. Solid rays touched nothing, dashed ones the surface only, dotted ones the
        seabed.

    Raises
    ------
    InputError
        If the fan carries no paths.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.rays import trace_fan
    >>> water = Profile([0, 100, 500], [1500, 1490, 1495], id="example")
    >>> fan = trace_fan(water, source_depth=50, launch_angles=[-5, 0, 5, 20], max_range=5000, points=101)
    >>> [axes.get_label() for axes in fan_figure(fan).axes]
    ['speed', 'rays']
    """
    from matplotlib.figure import Figure

    if not fan.path_range.shape[1]:
        raise InputError("the fan carries no paths to draw; trace it with points, such as points=501")
    water = fan.profile if profile is None else profile
    figure = Figure(figsize=_SIZE)
    grid = figure.add_gridspec(1, 2, width_ratios=[1.0, 4.6], wspace=0.06, left=0.075, right=0.98, top=0.86, bottom=0.2)
    speed = figure.add_subplot(grid[0], label="speed")
    rays = figure.add_subplot(grid[1], label="rays", sharey=speed)
    draw_speed(speed, water)
    plain_axes(speed, x_label="sound speed (m/s)", y_label="depth (m)")
    speed.locator_params(axis="x", nbins=3)
    keys = _draw_shadow(rays, shadow) if shadow is not None else []
    keys = [*_draw_rays(rays, fan), *_draw_ends(rays, fan), *keys]
    plain_axes(rays, x_label="range (km)")
    rays.tick_params(labelleft=False)
    rays.set_xlim(0.0, fan.max_range / _METRES_PER_KM)
    bottom = max(fan.seabed_depth, float(water.depth[-1]))
    speed.set_ylim(bottom * 1.03, 0.0)
    figure.legend(
        handles=keys, loc="lower center", bbox_to_anchor=(0.5, 0.0), ncols=3, fontsize=SMALL, frameon=False,
        handlelength=3.2, columnspacing=2.2,
    )  # fmt: skip
    if shadow is not None:
        figure.text(0.98, 0.885, _CAUTION, ha="right", va="center", fontsize=SMALL, color=INK)
    name = f" through {water.id}" if water.id else ""
    heading(figure, f"Rays of sound{name}, source at {fan.source_depth:g} m", provenance(water, remark))
    return figure


def kinds_of_rays(fan: Fan) -> NDArray[np.int64]:
    """0 for rays that touched nothing, 1 for those that touched only the surface, 2 for those that met the seabed."""
    kinds: NDArray[np.int64] = np.where(fan.seabed_bounces > 0, 2, np.where(fan.surface_bounces > 0, 1, 0))
    return kinds


def _draw_rays(axes: Axes, fan: Fan) -> list[Artist]:
    """One line for each kind, its rays parted by gaps."""
    kinds = kinds_of_rays(fan)
    gap = np.full((len(fan), 1), np.nan)
    across = np.hstack((fan.path_range / _METRES_PER_KM, gap))
    down = np.hstack((fan.path_depth, gap))
    keys: list[Artist] = []
    for kind, (name, style, width, grey) in reversed(list(enumerate(_KINDS))):
        mine = kinds == kind
        if mine.any():
            strokes = int((1 + fan.surface_bounces + fan.seabed_bounces)[mine].sum())
            thin = max(width * min(1.0, (_CROWDED / strokes) ** 0.5), _THINNEST)
            label = f"{name} ({int(mine.sum())} ray{'s' * (int(mine.sum()) != 1)})"
            keys += axes.plot(
                across[mine].ravel(), down[mine].ravel(), linestyle=style, linewidth=thin, color=grey, label=label,
                gid=name,
            )  # fmt: skip
    return keys[::-1]


def _draw_ends(axes: Axes, fan: Fan) -> list[Artist]:
    """The seabed, and the source."""
    floor = axes.axhspan(fan.seabed_depth, fan.seabed_depth * 1.2, color=SEABED, linewidth=0.0, label="seabed")
    axes.axhline(fan.seabed_depth, color=INK, linewidth=1.2)
    source = axes.plot(
        [0.0], [fan.source_depth], marker="o", markersize=8, color=INK, markeredgecolor="white", linestyle="none",
        clip_on=False, zorder=5, label=f"source, {fan.source_depth:g} m", gid="source",
    )  # fmt: skip
    return [*source, floor]


def _draw_shadow(axes: Axes, shadow: Shadow) -> list[Artist]:
    """Grey where nothing arrives without a bounce; hatched where nothing arrives even with surface bounces."""
    from matplotlib.patches import Patch

    across = shadow.range / _METRES_PER_KM
    keys: list[Artist] = []
    if shadow.masks["no_bounce"].any():
        axes.contourf(across, shadow.depth, shadow.masks["no_bounce"].astype(float), levels=[0.5, 1.5],
                      colors=[_SHADE], zorder=0.5)  # fmt: skip
        keys.append(Patch(facecolor=_SHADE, label="shadow: no ray without a bounce"))
    if shadow.masks["surface_bounces"].any():
        hatched = axes.contourf(across, shadow.depth, shadow.masks["surface_bounces"].astype(float), levels=[0.5, 1.5],
                                colors="none", hatches=[_HATCH], zorder=0.6)  # fmt: skip
        hatched.set_edgecolor(_HATCH_INK)
        hatched.set_linewidth(0.0)
        keys.append(Patch(facecolor=_SHADE, edgecolor=_HATCH_INK, hatch=_HATCH, linewidth=0.0,
                          label="shadow even with surface bounces"))  # fmt: skip
    return keys
