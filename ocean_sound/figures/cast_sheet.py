"""The sheet of a cast: what was measured, how far each value is trusted, and the speed of sound that follows."""

from __future__ import annotations

from textwrap import wrap
from typing import TYPE_CHECKING

import numpy as np

from ..casts import FAIL, MISSING, NOT_EVALUATED, SUSPECT
from ..water import depth_from_density
from ._look import GREY, INK, LINE, SMALL, draw_speed, heading, plain_axes, provenance, spread_apart
from .profile import _band_words, _draw_band, _labels

if TYPE_CHECKING:
    from collections.abc import Mapping

    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from numpy.typing import NDArray

    from ..casts import Cast, CheckReport
    from ..profile import Features, Profile

    Floats = NDArray[np.float64]
    Bools = NDArray[np.bool_]

_SIZE = (11.0, 8.0)  # inches
_LEFT, _RIGHT, _TOP, _BOTTOM = 0.065, 0.985, 0.845, 0.235
_LINE_HEIGHT = 1.35 * SMALL / 72.0  # inches
_LABELS = {
    "temperature": "temperature (°C)",
    "salinity": "practical salinity",
    "conductivity": "conductivity (S/m)",
    "sound_speed": "sound speed (m/s)",
}
# Told apart by shape first; the colours are of the palette of Okabe and Ito, which the colour-blind can tell apart.
_MARKS = {
    SUSPECT: ("^", "#e69f00", "none", "suspect (flag 3)"),
    FAIL: ("x", "#d55e00", "#d55e00", "fail (flag 4)"),
    NOT_EVALUATED: (".", GREY, GREY, "not evaluated (flag 2)"),
}
_OFF_WAY = ("|", GREY, "depth or pressure not used: way up, soak, loops")
_MARGIN = 0.12  # of the span of the values that are used, kept free on either side of them
_COLUMNS, _ROWS, _WIDTH = 3, 7, 54  # of the words below the panels, and letters in a line


def cast_sheet_figure(
    cast: Cast,
    profile: Profile,
    features: Features | None = None,
    report: CheckReport | None = None,
    *,
    remark: str = "",
) -> Figure:
    """Temperature, salinity and sound speed of a cast against depth on one page, with flags and uncertainty.

    Parameters
    ----------
    cast : Cast
        The cast, best checked.
    profile : Profile
        The profile of that cast. Its uncertainty, where known, is drawn as a band of two standard uncertainties.
    features : Features, optional
        From `profile.features()`; nothing is marked where not given.
    report : CheckReport, optional
        From `check_block`, of this one cast: what each test found stands below, before the flags of each variable.
    remark : str
        A few words to stand beside time, position and equation, such as "invented data".

    Returns
    -------
    matplotlib.figure.Figure
        Depth grows downward in all panels. Lines join the values that are used, dashed where they were added, not
        measured; each other value has a marker by its flag. The axes follow the values that are used: what lies beyond
        stands at their edge.

    Examples
    --------
    >>> from ocean_sound.casts import Cast, check_cast
    >>> from ocean_sound.profile import Profile
    >>> values = {"depth": [0.0, 10.0, 20.0, 30.0], "temperature": [12.0, 11.9, 31.0, 9.0], "salinity": [35.0] * 4}
    >>> cast = check_cast(Cast(id="A1", values=values))
    >>> figure = cast_sheet_figure(cast, Profile.from_cast(cast))
    >>> [axes.get_label() for axes in figure.axes]
    ['temperature', 'salinity', 'speed', 'marks']
    """
    from matplotlib.figure import Figure

    direct = not profile.equation and "sound_speed" in cast.values
    measured = [] if direct else [name for name in ("temperature", "salinity", "conductivity") if name in cast.values]
    if "salinity" in measured and "conductivity" in measured:
        measured.remove("conductivity")
    figure = Figure(figsize=_SIZE)
    grid = figure.add_gridspec(
        1,
        len(measured) + 2,
        width_ratios=[*[1.0] * len(measured), 1.25, 0.72],
        wspace=0.1,
        left=_LEFT,
        right=_RIGHT,
        top=_TOP,
        bottom=_BOTTOM,
    )
    every: list[Axes] = []
    for place, label in enumerate([*measured, "speed", "marks"]):
        every.append(figure.add_subplot(grid[place], label=label, sharey=every[0] if every else None))
    *panels, speed, marks = every
    depth = _depth_of_levels(cast)
    kinds: dict[str, str] = {}
    for name, axes in zip(measured, panels, strict=True):
        _draw_values(axes, cast, name, depth, kinds)
        plain_axes(axes, x_label=_LABELS[name])
    _draw_band(speed, profile)
    draw_speed(speed, profile)
    if direct:
        speed.autoscale_view()
        _draw_flagged(speed, cast, "sound_speed", depth, kinds)
    plain_axes(speed, x_label=_LABELS["sound_speed"])
    _arrange([*panels, speed], profile, depth)
    marks.set_axis_off()
    marks.set_xlim(0.0, 1.0)
    if features is not None:
        _mark(speed, marks, profile, features)
    heading(figure, f"Cast {cast.id}" if cast.id else "Cast", provenance(profile, remark))
    figure.text(_LEFT, 0.905, _band_words(profile), ha="left", va="top", fontsize=SMALL, color=INK)
    _key(figure, kinds)
    _tell(figure, _found(cast, report))
    return figure


def _depth_of_levels(cast: Cast) -> Floats:
    """Depth of every level as the profile has it: by the cast's own density where there is pressure."""
    pressure = cast.pressure
    if pressure is None or not np.isfinite(pressure).any():
        return np.asarray(cast.depth)

    def usable(name: str) -> Floats:
        return (
            np.where(cast.good(name), cast.values[name], np.nan) if name in cast.values else np.full(len(cast), np.nan)
        )

    level = np.flatnonzero(cast.good("pressure"))
    if not level.size:
        level = np.flatnonzero(np.isfinite(pressure))
    level = level[np.unique(pressure[level], return_index=True)[1]]
    depth = depth_from_density(
        pressure[level],
        usable("temperature")[level],
        usable("salinity")[level],
        latitude=cast.latitude,
        longitude=cast.longitude,
    )
    found: Floats = np.interp(pressure, pressure[level], depth)
    return np.where(np.isfinite(pressure), found, np.nan)


def _used(cast: Cast, name: str) -> tuple[Bools, Bools]:
    """Which values are used, and which levels lie on the way that is used."""
    vertical = "pressure" if cast.pressure is not None and np.isfinite(cast.pressure).any() else "depth"
    on_way = cast.good(vertical)
    return cast.good(name) & on_way, on_way


def _draw_values(axes: Axes, cast: Cast, name: str, depth: Floats, kinds: dict[str, str]) -> None:
    """A line through the values that are used, dashed where they were added, and a marker on each other value."""
    used, _ = _used(cast, name)
    order = np.flatnonzero(used)
    order = order[np.argsort(depth[order], kind="stable")]
    values, down = cast.values[name][order], depth[order]
    origin = cast.origins.get(name)
    added = np.zeros(order.size, dtype=bool) if origin is None else origin[order] != 0
    axes.plot(np.where(added, np.nan, values), down, color=LINE, linewidth=1.1, gid="used")
    if added.any():
        beside = added.copy()
        beside[1:] |= added[:-1]
        beside[:-1] |= added[1:]
        axes.plot(np.where(beside, values, np.nan), down, color=LINE, linewidth=1.1, linestyle="--", gid="added")
        kinds["added"] = "added, not measured"
    if order.size:
        low, high = float(values.min()), float(values.max())
        margin = _MARGIN * (high - low) or 0.05 * max(abs(high), 1.0)
        axes.set_xlim(low - margin, high + margin)
    _draw_flagged(axes, cast, name, depth, kinds)


def _draw_flagged(axes: Axes, cast: Cast, name: str, depth: Floats, kinds: dict[str, str]) -> None:
    """Markers by flag, at the edge of the axes where the value lies beyond; values that pass have none."""
    values, flag = cast.values[name], cast.flags.get(name)
    _, on_way = _used(cast, name)
    there = np.isfinite(values) & np.isfinite(depth)
    low, high = axes.get_xlim()
    shown = np.clip(values, low, high)
    off = there & ~on_way
    if off.any():
        marker, colour, words = _OFF_WAY
        axes.plot(
            shown[off], depth[off], linestyle="none", marker=marker, color=colour, markersize=4, gid="off the way"
        )
        kinds["off the way"] = words
    for kind, (marker, colour, face, words) in _MARKS.items():
        chosen = there & on_way & (flag == kind) if flag is not None else np.zeros(len(cast), dtype=bool)
        if chosen.any():
            axes.plot(
                shown[chosen],
                depth[chosen],
                linestyle="none",
                marker=marker,
                color=colour,
                markerfacecolor=face,
                markersize=3 if kind == NOT_EVALUATED else 7,
                markeredgewidth=1.4,
                clip_on=False,
                gid=words,
            )
            kinds[words] = words
            beyond = chosen & (shown != values)
            if beyond.any():
                kinds["beyond"] = "at the edge of a panel: the value lies beyond it"
    axes.set_xlim(low, high)


def _arrange(panels: list[Axes], profile: Profile, depth: Floats) -> None:
    """One scale of depth for all, named at the left only."""
    finite = depth[np.isfinite(depth)]
    deepest = max(float(profile.depth[-1]), float(np.max(finite, initial=0.0)))
    panels[0].set_ylim(deepest * 1.01, -deepest * 0.01)
    panels[0].set_ylabel("depth (m)", fontsize=SMALL + 1.0)
    for axes in panels:
        axes.locator_params(axis="x", nbins=4)
    for axes in panels[1:]:
        axes.tick_params(labelleft=False)


def _mark(speed: Axes, marks: Axes, profile: Profile, features: Features) -> None:
    """The features on the speed, a thin line to the right, and the words there, pushed apart where needed."""
    labels = _labels(features)
    low, high = sorted(speed.get_ylim())
    inch = (high - low) / (_SIZE[1] * (_TOP - _BOTTOM))  # depth for an inch of paper
    heights = np.array([inch * _LINE_HEIGHT * (1.4 + words.count("\n")) for _, _, words in labels])
    centres = spread_apart(np.array([depth for depth, _, _ in labels]), heights, low, high)
    left, right = speed.get_xlim()
    speed.set_xlim(left, right)
    for (depth, marker, words), centre in zip(labels, centres, strict=True):
        here = profile.at(min(max(depth, float(profile.depth[0])), float(profile.depth[-1])))
        speed.plot([here, right], [depth, depth], color=GREY, linewidth=0.6, zorder=1.5)
        speed.plot([here], [depth], marker=marker, color=INK, markeredgecolor="white", markersize=6.5, clip_on=False)
        marks.plot([-0.15, 0.06], [depth, centre], color=GREY, linewidth=0.6, clip_on=False)
        marks.text(0.09, centre, words, ha="left", va="center", fontsize=SMALL, color=INK, linespacing=1.15)


def _key(figure: Figure, kinds: dict[str, str]) -> None:
    """What the lines and markers mean, in one row above the panels; only those that occur."""
    from matplotlib.lines import Line2D

    entries = [Line2D([], [], color=LINE, linewidth=1.1, label="used")]
    if "added" in kinds:
        entries.append(Line2D([], [], color=LINE, linewidth=1.1, linestyle="--", label=kinds["added"]))
    for marker, colour, face, words in _MARKS.values():
        if words in kinds:
            entries.append(
                Line2D([], [], linestyle="none", marker=marker, color=colour, markerfacecolor=face, label=words)
            )
    if "off the way" in kinds:
        marker, colour, words = _OFF_WAY
        entries.append(Line2D([], [], linestyle="none", marker=marker, color=colour, label=words))
    if "beyond" in kinds:
        entries.append(Line2D([], [], linestyle="none", label=kinds["beyond"]))
    figure.legend(
        handles=entries,
        loc="upper left",
        bbox_to_anchor=(_LEFT - 0.008, 0.888),
        ncols=len(entries),
        fontsize=SMALL,
        frameon=False,
        borderaxespad=0.0,
        columnspacing=1.2,
        handlelength=1.6,
    )


def _found(cast: Cast, report: CheckReport | None) -> list[str]:
    """A line for each test that found something, and for each variable its flags, whoever gave them."""
    tests = {} if report is None else report.counts()
    lines = [
        f"{test.replace('_', ' ')}, {name.replace('_', ' ')}: {_counts(count)}"
        for test, by_name in tests.items()
        for name, count in by_name.items()
        if "suspect" in count or "fail" in count
    ]
    for name, flag in cast.flags.items():
        count = {words: int((flag == kind).sum()) for kind, words in ((SUSPECT, "suspect"), (FAIL, "fail"))}
        count["missing"] = int((flag == MISSING).sum())
        if any(count.values()):
            lines.append(f"all flags of {name.replace('_', ' ')}: {_counts(count)} of {flag.size}")
    if report is not None:
        head = f"Found by {len(tests)} tests with the thresholds {report.thresholds!r}"
    else:
        head = "Flags of the source and of checks" if cast.flags else "This cast has no flags: it was not checked"
    return [head, *(lines or ["nothing suspect, failed or missing"] * bool(cast.flags))]


def _counts(count: Mapping[str, int]) -> str:
    return ", ".join(f"{count[word]} {word}" for word in ("suspect", "fail", "missing") if count.get(word))


def _tell(figure: Figure, lines: list[str]) -> None:
    """The words below the panels, in columns; how many more there would be where there is no room."""
    head, *rest = [part for line in lines for part in wrap(line, 3 * _WIDTH if line is lines[0] else _WIDTH)]
    room = _COLUMNS * _ROWS
    if len(rest) > room:
        rest = [*rest[: room - 1], f"and {len(rest) - room + 1} more"]
    line = _LINE_HEIGHT / _SIZE[1]
    top = _BOTTOM - 0.085
    figure.text(_LEFT, top + 1.2 * line, head, ha="left", va="top", fontsize=SMALL, color=INK, fontweight="bold")
    for index, words in enumerate(rest):
        column, row = divmod(index, _ROWS)
        x = _LEFT + column * (_RIGHT - _LEFT) / _COLUMNS
        figure.text(x, top - row * line, words, ha="left", va="top", fontsize=SMALL, color=INK)
