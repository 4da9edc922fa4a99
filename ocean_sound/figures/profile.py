"""The picture of a profile: speed and gradient against depth, with the features marked."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ._look import (
    GREY,
    INK,
    LINE,
    PALE,
    SMALL,
    draw_speed,
    heading,
    plain_axes,
    provenance,
    spread_apart,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from ..profile import Features, Profile

_SIZE = (7.5, 7.0)  # inches
_TOP, _BOTTOM = 0.86, 0.1  # of the height of the figure
_LINE_HEIGHT = 1.35 * SMALL / 72.0  # inches
_BAND = 2.0  # standard uncertainties


def profile_figure(profile: Profile, features: Features | None = None, *, remark: str = "") -> Figure:
    """Sound speed and its gradient against depth, with the features of the profile marked.

    Parameters
    ----------
    profile : Profile
        The profile. Its uncertainty, where known, is drawn as a band of two standard uncertainties on either side.
    features : Features, optional
        From `profile.features()`; nothing is marked where not given.
    remark : str
        A few words to stand beside time, position and equation, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        Depth grows downward. A level at the surface that was assumed, not measured, is joined by a dashed line.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> profile = Profile([0, 100, 200, 1000, 4500], [1500, 1501.6, 1490, 1480, 1530], id="example")
    >>> figure = profile_figure(profile, profile.features())
    >>> [axes.get_label() for axes in figure.axes]
    ['speed', 'marks', 'gradient']
    """
    from matplotlib.figure import Figure

    figure = Figure(figsize=_SIZE)
    grid = figure.add_gridspec(
        1, 3, width_ratios=[3.0, 1.75, 1.5], wspace=0.0, left=0.1, right=0.965, top=_TOP, bottom=_BOTTOM
    )
    speed = figure.add_subplot(grid[0], label="speed")
    marks = figure.add_subplot(grid[1], label="marks", sharey=speed)
    gradient = figure.add_subplot(grid[2], label="gradient", sharey=speed)
    _draw_band(speed, profile)
    draw_speed(speed, profile)
    plain_axes(speed, x_label="sound speed (m/s)", y_label="depth (m)")
    speed.locator_params(axis="x", nbins=6)
    marks.set_axis_off()
    marks.set_xlim(0.0, 1.0)
    gradient.stairs(profile.gradient, profile.depth, orientation="horizontal", baseline=None, color=LINE, linewidth=0.9)
    gradient.axvline(0.0, color=GREY, linewidth=0.8)
    plain_axes(gradient, x_label="gradient (1/s)")
    gradient.tick_params(labelleft=False)
    gradient.locator_params(axis="x", nbins=4)
    deepest = float(profile.depth[-1])
    speed.set_ylim(deepest * 1.01, -deepest * 0.01)
    if features is not None:
        _mark(speed, marks, profile, features)
    name = f" of {profile.id}" if profile.id else ""
    heading(figure, f"Sound speed{name}", provenance(profile, remark))
    figure.text(0.1, 0.895, _band_words(profile), ha="left", va="top", fontsize=SMALL, color=INK)
    return figure


def _draw_band(axes: Axes, profile: Profile) -> None:
    if profile.uncertainty is not None:
        half = _BAND * profile.uncertainty
        axes.fill_betweenx(
            profile.depth,
            profile.speed - half,
            profile.speed + half,
            where=list(np.isfinite(half)),
            color=PALE,
            linewidth=0.0,
            gid="uncertainty",
        )


def _band_words(profile: Profile) -> str:
    if profile.uncertainty is None:
        return "The uncertainty of the speed is not known."
    half = _BAND * np.nanmax(profile.uncertainty)
    words = f"Grey band: ± 2 standard uncertainties, at most ± {half:.2g} m/s"
    return f"{words}; unknown where it is missing." if np.isnan(profile.uncertainty).any() else f"{words}."


def _labels(features: Features) -> list[tuple[float, str, str]]:
    """Depth, marker and words of each feature that exists, from the surface down."""
    found: list[tuple[float, str, str]] = []
    if features.sonic_layer_depth is not None:
        words = f"sonic layer depth {features.sonic_layer_depth:.0f} m"
        if features.duct_cutoff_frequency is not None:
            words += f"\nduct above {_frequency(features.duct_cutoff_frequency)}"
        found.append((features.sonic_layer_depth, "o", words))
    if features.steepest_gradient:
        words = f"steepest, {features.steepest_gradient:.2g} /s,\nat {features.steepest_gradient_depth:.0f} m"
        found.append((features.steepest_gradient_depth, "D", words))
    if features.conjugate_depth is not None:
        found.append((features.conjugate_depth, "^", f"conjugate depth {features.conjugate_depth:.0f} m"))
    if features.axis_depth is not None:
        words = f"channel axis {features.axis_depth:.0f} m,\n{features.axis_speed:.1f} m/s"
        found.append((features.axis_depth, "s", words))
    if features.critical_depth is not None:
        words = f"critical depth {features.critical_depth:.0f} m"
        if features.depth_excess is not None:
            words += f"\ndepth excess {features.depth_excess:.0f} m"
        found.append((features.critical_depth, "v", words))
    return sorted(found)


def _frequency(hertz: float) -> str:
    return f"{hertz / 1000.0:.2g} kHz" if hertz >= 1000.0 else f"{hertz:.2g} Hz" if hertz < 100.0 else f"{hertz:.0f} Hz"


def _mark(speed: Axes, marks: Axes, profile: Profile, features: Features) -> None:
    """A marker on the curve, a thin line to the right, and the words there, pushed apart where they would overlap."""
    labels = _labels(features)
    low, high = sorted(speed.get_ylim())
    inch = (high - low) / (_SIZE[1] * (_TOP - _BOTTOM))  # depth for an inch of paper
    heights = np.array([inch * _LINE_HEIGHT * (1.4 + words.count("\n")) for _, _, words in labels])
    centres = spread_apart(np.array([depth for depth, _, _ in labels]), heights, low, high)
    right = speed.get_xlim()[1]
    speed.set_xlim(speed.get_xlim()[0], right)
    for (depth, marker, words), centre in zip(labels, centres, strict=True):
        # the mark of a level above the first one stands at the first
        here = profile.at(min(max(depth, float(profile.depth[0])), float(profile.depth[-1])))
        speed.plot([here, right], [depth, depth], color=GREY, linewidth=0.6, zorder=1.5)
        speed.plot([here], [depth], marker=marker, color=INK, markeredgecolor="white", markersize=6.5, clip_on=False)
        marks.plot([0.0, 0.1], [depth, centre], color=GREY, linewidth=0.6)
        marks.text(0.13, centre, words, ha="left", va="center", fontsize=SMALL, color=INK, linespacing=1.15)
