"""The picture of shadow and convergence zones over range and depth, with the seabed."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ._look import INK, LINE, NORMAL, SEABED, SMALL, heading, plain_axes

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from ..rays import Shadow

_SIZE = (9.5, 5.4)  # inches
# For each class of paths how its shadow looks: face, hatch, words.
_LOOKS = {
    "no_bounce": ("#e4e4e4", None, "shadow: no ray without a bounce"),
    "surface_bounces": ("none", "////", "shadow even with surface bounces"),
    "any_bounces": ("#6b6b6b", None, "shadow for any ray"),
}
_HATCH_INK = "#a8a8a8"
_CAUTION = "Shadow is not silence: sound still arrives by the seabed, by diffraction and by scattering."
_METRES_PER_KM = 1000.0


def shadow_figure(shadow: Shadow, depths: Sequence[float] = (), *, title: str = "", remark: str = "") -> Figure:
    """Shadow over range and depth for each class of paths, and convergence zones at some depths.

    Parameters
    ----------
    shadow : Shadow
        Of a profile or of a section.
    depths : sequence of float
        Depths of the shadow's grid, m, at which convergence zones are drawn as bars with their numbers.
    title : str
        The first line; "Shadow zones" and the depth of the source where not given.
    remark : str
        A few words to stand in the second line, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        Depth grows downward; range in km. Light grey without any bounce, hatched even with surface bounces, dark grey
        for any ray of a section.

    Raises
    ------
    InputError
        If a depth is not one of the grid.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.rays import find_shadow
    >>> shadow = find_shadow(Profile([0, 100], [1520, 1500]), source_depth=20, max_range=5000)
    >>> [axes.get_label() for axes in shadow_figure(shadow).axes]
    ['shadow']
    """
    from matplotlib.figure import Figure

    figure = Figure(figsize=_SIZE)
    axes = figure.add_axes((0.08, 0.2, 0.89, 0.65), label="shadow")
    keys = _draw_masks(axes, shadow)
    keys += _draw_zones(axes, shadow, depths)
    keys += _draw_ends(axes, shadow)
    plain_axes(axes, x_label="range (km)", y_label="depth (m)")
    axes.grid(visible=False)
    axes.set_xlim(0.0, float(shadow.range[-1]) / _METRES_PER_KM)
    axes.set_ylim(shadow.seabed_depth * 1.03, 0.0)
    figure.legend(handles=keys, loc="lower center", bbox_to_anchor=(0.5, 0.0), ncols=3, fontsize=SMALL, frameon=False,
                  handlelength=2.4, columnspacing=2.0)  # fmt: skip
    told = ", ".join(f"{share:.0%} {_words(name)}" for name, share in shadow.summary().items())
    words = told.replace("%", "% of the water to that range is reached by no ray", 1)
    figure.text(0.97, 0.875, _CAUTION, ha="right", va="center", fontsize=SMALL, color=INK)
    heading(
        figure, title or f"Shadow zones, source at {shadow.source_depth:g} m", words + (f", {remark}" if remark else "")
    )
    return figure


def _words(name: str) -> str:
    return {"no_bounce": "without a bounce", "surface_bounces": "by none with surface bounces either"}.get(
        name, "by none at all"
    )


def _draw_masks(axes: Axes, shadow: Shadow) -> list[Artist]:
    from matplotlib.patches import Patch

    across = shadow.range / _METRES_PER_KM
    keys: list[Artist] = []
    for order, (name, mask) in enumerate(shadow.masks.items()):
        if not mask.any() or min(mask.shape) < 2:
            continue
        face, hatch, words = _LOOKS[name]
        drawn = axes.contourf(
            across, shadow.depth, mask.astype(float), levels=[0.5, 1.5], colors="none" if hatch else [face],
            hatches=[hatch], zorder=0.5 + 0.1 * order,
        )  # fmt: skip
        drawn.set_gid(name)
        if hatch:
            drawn.set_edgecolor(_HATCH_INK)
            drawn.set_linewidth(0.0)
        keys.append(
            Patch(facecolor=_LOOKS["no_bounce"][0] if hatch else face, edgecolor=_HATCH_INK, hatch=hatch,
                  linewidth=0.0, label=words)
        )  # fmt: skip
    return keys


def _draw_zones(axes: Axes, shadow: Shadow, depths: Sequence[float]) -> list[Artist]:
    """A bar with the zone's number for each convergence zone."""
    keys: list[Artist] = []
    for depth in depths:
        for number, start, end in shadow.convergence_zones(depth):
            bar = axes.plot(
                np.array([start, end]) / _METRES_PER_KM, [depth, depth], color=LINE, linewidth=3.0,
                marker="|", markersize=9, solid_capstyle="butt", zorder=5, label="convergence zones", gid="zone",
            )  # fmt: skip
            axes.annotate(
                f"{int(number)}", (0.5 * (start + end) / _METRES_PER_KM, depth), xytext=(0, -11),
                textcoords="offset points", ha="center", fontsize=NORMAL, color=LINE, zorder=6, annotation_clip=True,
            )  # fmt: skip
            keys = keys or list(bar)
    return keys


def _draw_ends(axes: Axes, shadow: Shadow) -> list[Artist]:
    """The seabed, and the source."""
    section: Any = getattr(shadow, "section", None)
    bottom = shadow.seabed_depth
    ranges = np.linspace(0.0, float(shadow.range[-1]), 1001)
    depth = np.full(ranges.size, bottom) if section is None else np.asarray(section.seabed.depth_at(ranges))
    x = ranges / _METRES_PER_KM
    axes.plot(x, depth, color=INK, linewidth=1.2, zorder=4, gid="seabed")
    floor = axes.fill_between(x, depth, bottom * 1.2, color=SEABED, linewidth=0.0, zorder=3, label="seabed")
    source = axes.plot(
        [0.0], [shadow.source_depth], marker="o", markersize=8, color=INK, markeredgecolor="white", linestyle="none",
        clip_on=False, zorder=7, label=f"source, {shadow.source_depth:g} m", gid="source",
    )  # fmt: skip
    return [*source, floor]
