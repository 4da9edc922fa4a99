"""The sheet of a cast: every value and flag where it belongs, nothing overlapping, nothing off the paper."""

from __future__ import annotations

import numpy as np
import pytest
from matplotlib.text import Text

from ocean_sound.casts import Cast, CastBlock, check_block
from ocean_sound.figures.cast_sheet import cast_sheet_figure
from ocean_sound.profile import Profile


def axes_named(figure, name):
    (axes,) = (axes for axes in figure.axes if axes.get_label() == name)
    return axes


def drawn(axes, gid):
    return [one for one in axes.lines if one.get_gid() == gid]


def words(figure):
    return [text.get_text() for text in figure.findobj(Text) if text.get_text()]


def made(count=60, *, down_and_up=False, **others):
    depth = np.linspace(0.0, 300.0, count)
    if down_and_up:
        depth = np.concatenate((depth, depth[::-1][1:]))
    temperature, salinity = 6.0 + 12.0 * np.exp(-depth / 60.0), 34.0 + 0.003 * depth
    temperature[10], temperature[20], salinity[30], salinity[40] = 99.0, temperature[20] + 3.0, 36.0, np.nan
    values = {"pressure": depth, "temperature": temperature, "salinity": salinity}
    where = {"time": "2025-06-01T10:11", "latitude": 54.1, "longitude": 8.2}
    return Cast(id="K7", values=values, **where, **others)


def sheet(cast, *, report=True, **options):
    block, found = check_block(CastBlock.from_casts([cast]), now=np.datetime64("2026-01-01", "ns"))
    profile = Profile.from_cast(block[0], **options)
    return cast_sheet_figure(block[0], profile, profile.features(), found if report else None), block[0], profile


def test_panels_share_the_depth_which_grows_downward():
    figure, _, profile = sheet(made())
    assert [axes.get_label() for axes in figure.axes] == ["temperature", "salinity", "speed", "marks"]
    limits = {axes.get_ylim() for axes in figure.axes}
    assert len(limits) == 1
    bottom, top = limits.pop()
    assert bottom > profile.depth[-1]
    assert top <= 0.0


def test_the_line_is_what_is_used_at_the_depths_of_the_profile():
    figure, cast, profile = sheet(made())
    (line,) = drawn(axes_named(figure, "temperature"), "used")
    np.testing.assert_array_equal(line.get_xdata(), cast.temperature[cast.good("temperature")])
    both = cast.good("temperature") & cast.good("salinity")
    np.testing.assert_allclose(line.get_ydata()[both[cast.good("temperature")]], profile.depth, rtol=0.0, atol=1e-3)


def test_flags_are_marked_by_shape_and_beyond_the_axis_at_its_edge():
    figure, cast, _ = sheet(made())
    axes = axes_named(figure, "temperature")
    (fails,) = drawn(axes, "fail (flag 4)")
    assert fails.get_marker() == "x"
    assert fails.get_xdata().tolist() == [axes.get_xlim()[1]]
    (suspects,) = drawn(axes, "suspect (flag 3)")
    assert suspects.get_marker() == "^"
    assert suspects.get_xdata().tolist() == [cast.temperature[20]]
    (fails,) = drawn(axes_named(figure, "salinity"), "fail (flag 4)")
    assert fails.get_xdata().size == 1
    assert "at the edge of a panel: the value lies beyond it" in words(figure)


def test_every_value_is_drawn_once():
    figure, cast, _ = sheet(made(down_and_up=True))
    for name in ("temperature", "salinity"):
        axes = axes_named(figure, name)
        count = sum(int(np.isfinite(line.get_xdata()).sum()) for line in axes.lines if line.get_gid())
        assert count == np.isfinite(cast.values[name]).sum()
    (off,) = drawn(axes_named(figure, "salinity"), "off the way")
    assert off.get_xdata().size == 59
    assert "depth or pressure not used: way up, soak, loops" in words(figure)


def test_what_was_found_stands_below():
    figure, _, _ = sheet(made())
    text = words(figure)
    assert "Found by 10 tests with the thresholds 'ocean'" in text
    assert "gross range, temperature: 1 fail" in text
    assert "all flags of temperature: 1 suspect, 1 fail of 60" in text
    assert "all flags of salinity: 1 fail, 1 missing of 60" in text
    without, _, _ = sheet(made(), report=False)
    assert "Flags of the source and of checks" in words(without)
    bare = Cast(id="B", values={"depth": [0.0, 9.0], "temperature": [9.0, 8.0]})
    figure = cast_sheet_figure(bare, Profile.from_cast(bare, salinity=35.0))
    assert "This cast has no flags: it was not checked" in words(figure)


def test_added_levels_are_dashed():
    cast = made(origins={"temperature": np.where(np.arange(60) > 50, 4, 0)})
    figure, _, _ = sheet(cast)
    (added,) = drawn(axes_named(figure, "temperature"), "added")
    assert added.get_linestyle() == "--"
    assert np.isfinite(added.get_xdata()).sum() == 10  # the nine and the last measured one
    assert "added, not measured" in words(figure)


def test_a_cast_of_sound_speed_has_its_flags_on_the_speed():
    depth = np.arange(0.0, 200.0, 2.0)
    speed = 1500.0 - 15.0 * (1.0 - np.exp(-depth / 30.0)) + 0.016 * depth
    speed[40] += 20.0
    figure, _, _ = sheet(Cast(id="S", values={"depth": depth, "sound_speed": speed}))
    assert [axes.get_label() for axes in figure.axes] == ["speed", "marks"]
    (fails,) = drawn(axes_named(figure, "speed"), "fail (flag 4)")
    assert fails.get_ydata().tolist() == [80.0]


@pytest.mark.parametrize("down_and_up", [False, True])
@pytest.mark.parametrize("count", [12, 60, 2000])
def test_nothing_overlaps_or_leaves_the_paper(count, down_and_up, assert_readable):
    cast = made(max(count, 42), down_and_up=down_and_up)
    assert_readable(sheet(cast)[0])


def test_nothing_overlaps_with_many_findings_and_a_long_name(assert_readable):
    cast = made(origins={"temperature": np.where(np.arange(60) > 50, 4, 0)})
    block, report = check_block(CastBlock.from_casts([cast]), thresholds="lake")
    profile = Profile.from_cast(block[0])
    levels = {f"test_number_{i}": report.levels["gross_range"] for i in range(20)}
    many = type(report)(
        "/a/long/path/to/a/persons/own/thresholds/of/the/northern/lake.toml", report.id, report.row_size, levels,
        report.casts, report.notes,
    )  # fmt: skip
    figure = cast_sheet_figure(block[0], profile, profile.features(), many, remark="invented data")
    assert any(text.startswith("and ") and text.endswith(" more") for text in words(figure))
    assert_readable(figure)
