"""The comparison's picture: the data on its axes, and no words that overlap."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.casts import Cast
from ocean_sound.figures.comparison import comparison_figure
from ocean_sound.profile import Profile
from ocean_sound.soundings import compare

DEPTH = np.linspace(0.0, 60.0, 31)


def cast(name, middle, **place):
    temperature = 12.0 + 6.0 / (1.0 + np.exp((DEPTH - middle) / 2.0))
    return Cast(
        id=name,
        values={"depth": DEPTH, "temperature": temperature, "salinity": np.full(31, 34.0 + middle / 50)},
        **place,
    )


@pytest.fixture(scope="module")
def comparison():
    place = {"latitude": 50.0, "longitude": -5.0}
    first = cast("morning of the survey", 20.0, time="2026-07-01T06:00", **place)
    return compare(first, cast("noon", 25.0, time="2026-07-01T12:00", **place), transducer_depth=2.0)


def axes_named(figure, name):
    (axes,) = (axes for axes in figure.axes if axes.get_label() == name)
    return axes


def line(axes, gid):
    (found,) = (one for one in axes.lines if one.get_gid() == gid)
    return found


def test_the_data_are_on_the_axes(comparison):
    figure = comparison_figure(comparison)
    speed, difference = axes_named(figure, "speed"), axes_named(figure, "difference")
    for key in "ab":
        assert np.array_equal(line(speed, key).get_xdata(), comparison[f"speed_{key}"])
    assert np.array_equal(line(difference, "whole").get_xdata(), comparison["speed_difference"])
    for cause in ("temperature", "salinity", "pressure"):
        assert np.array_equal(line(difference, cause).get_xdata(), comparison[f"speed_difference_by_{cause}"])
    low, high = speed.get_ylim()
    assert low > high  # depth grows downward
    assert len({one.get_linestyle() for one in difference.lines if one.get_gid()}) >= 2
    for name in ("depth error", "across-track error"):
        axes = axes_named(figure, name)
        assert axes.get_xlim() == (0.0, 70.0)
        assert axes.get_ylim()[0] == float(comparison["sounding_depth"].max())
        filled = axes.collections[0]
        assert filled.norm.vmin == -filled.norm.vmax  # centred on no error


@pytest.mark.parametrize("remark", ["", "invented data"])
def test_no_words_overlap_or_leave_the_paper(comparison, remark, assert_readable):
    assert_readable(comparison_figure(comparison, remark=remark))


def test_profiles_without_parts_and_equal_ones():
    water = Profile([0.0, 10.0, 50.0], [1500.0, 1499.0, 1490.0], id="K")
    figure = comparison_figure(compare(water, water))
    assert [one.get_gid() for one in axes_named(figure, "difference").lines if one.get_gid()] == ["whole"]
    assert axes_named(figure, "depth error").texts[0].get_text() == "none"
