"""Figures: the data on their axes, labels that do not overlap, and nothing global touched."""

from __future__ import annotations

import subprocess
import sys

import matplotlib as mpl
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.text import Text

from ocean_sound.errors import InputError, OutputError
from ocean_sound.figures import check_picture, fan_figure, figure_format, profile_figure, save_figure
from ocean_sound.figures._look import spread_apart
from ocean_sound.figures.fan import kinds_of_rays
from ocean_sound.profile import Profile
from ocean_sound.rays import find_shadow, trace_fan

DEEP = Profile(
    [0.0, 30.0, 60.0, 120.0, 1000.0, 4500.0],
    [1510.0, 1510.5, 1495.0, 1492.0, 1484.0, 1536.0],
    [0.1, 0.1, 0.1, 0.1, 0.1, np.nan],
    id="K7",
    time=np.datetime64("2024-05-01T12:00"),
    latitude=-54.0,
    longitude=-20.5,
    equation="teos10",
)


def axes_named(figure, name):
    (axes,) = (axes for axes in figure.axes if axes.get_label() == name)
    return axes


def line(axes, gid):
    (found,) = (one for one in axes.lines if one.get_gid() == gid)
    return found


def words(figure):
    return [text.get_text() for text in figure.findobj(Text) if text.get_text()]


@pytest.fixture(scope="module")
def fan():
    return trace_fan(DEEP, source_depth=100.0, launch_angles=np.linspace(-20, 20, 21), max_range=60000.0, points=301)


@pytest.fixture(scope="module")
def shadow():
    return find_shadow(DEEP, source_depth=100.0, max_range=60000.0)


class TestProfileFigure:
    def test_curve_is_the_profile_and_depth_grows_downward(self):
        axes = axes_named(profile_figure(DEEP), "speed")
        assert np.array_equal(line(axes, "speed").get_xdata(), DEEP.speed)
        assert np.array_equal(line(axes, "speed").get_ydata(), DEEP.depth)
        bottom, top = axes.get_ylim()
        assert bottom > DEEP.depth[-1]
        assert top <= 0.0

    def test_gradient_is_that_of_the_layers(self):
        (steps,) = axes_named(profile_figure(DEEP), "gradient").patches
        assert np.array_equal(steps.get_data().values, DEEP.gradient)
        assert np.array_equal(steps.get_data().edges, DEEP.depth)

    def test_band_is_two_standard_uncertainties(self):
        figure = profile_figure(DEEP)
        (band,) = axes_named(figure, "speed").collections
        points = band.get_paths()[0].vertices
        at_surface = points[points[:, 1] == 0.0, 0]
        assert (at_surface.min(), at_surface.max()) == pytest.approx((1509.8, 1510.2))
        assert points[:, 1].max() == 1000.0  # none where it is unknown
        assert any(
            "± 2 standard uncertainties" in text and "unknown where it is missing" in text for text in words(figure)
        )

    def test_no_uncertainty_is_said(self):
        assert "The uncertainty of the speed is not known." in words(profile_figure(Profile([0, 9], [1500, 1490])))

    def test_features_are_marked_at_their_depths(self):
        features = DEEP.features(seabed_depth=4600.0)
        figure = profile_figure(DEEP, features)
        marks = {
            one.get_marker(): (one.get_xdata()[0], one.get_ydata()[0])
            for one in axes_named(figure, "speed").lines
            if one.get_marker() not in ("None", "")
        }
        assert marks["o"] == (features.sonic_layer_speed, features.sonic_layer_depth)
        assert marks["s"] == (features.axis_speed, features.axis_depth)
        assert marks["v"][1] == features.critical_depth
        text = "\n".join(words(figure))
        assert "sonic layer depth 30 m" in text
        assert "channel axis 1000 m" in text
        assert f"depth excess {features.depth_excess:.0f} m" in text

    def test_title_tells_cast_time_place_and_equation(self):
        text = words(profile_figure(DEEP, remark="invented data"))
        assert "Sound speed of K7" in text
        assert "2024-05-01 12:00 UTC, 54.000° S 20.500° W, equation teos10, invented data" in text

    def test_assumed_surface_is_dashed(self):
        axes = axes_named(profile_figure(Profile([5, 9], [1500, 1490]).to_surface()), "speed")
        assert line(axes, "assumed").get_linestyle() == "--"
        assert list(line(axes, "speed").get_ydata()) == [5.0, 9.0]

    @pytest.mark.parametrize(
        "profile",
        [
            DEEP,
            Profile([0, 10, 12, 14, 16, 20], [1500, 1500.4, 1490, 1489, 1489.4, 1490]),  # all features within 10 m
            Profile([0, 300, 3000], [1440.0, 1450.0, 1495.0]),
            Profile([0, 200], [1500.0, 1500.0]),
            Profile([300, 900, 3000], [1490.0, 1480.0, 1510.0]),
        ],
        ids=["deep", "crowded", "polar", "uniform", "no surface"],
    )
    def test_no_text_lies_on_another(self, profile, assert_readable):
        assert_readable(profile_figure(profile, profile.features(seabed_depth=4600.0)))


class TestFanFigure:
    def test_rays_are_told_apart_by_the_style_of_the_line(self, fan):
        axes = axes_named(fan_figure(fan), "rays")
        kinds = kinds_of_rays(fan)
        assert set(kinds) == {0, 1, 2}
        styles = {}
        for kind, gid in enumerate(("refracted only", "surface bounces", "seabed bounces")):
            drawn = line(axes, gid)
            across = np.asarray(drawn.get_xdata(), dtype=float)
            finite = np.isfinite(across)
            assert np.array_equal(across[finite], (fan.path_range[kinds == kind] / 1000.0).ravel())
            assert np.array_equal(np.asarray(drawn.get_ydata())[finite], fan.path_depth[kinds == kind].ravel())
            styles[drawn.get_linestyle()] = drawn.get_color()
        assert set(styles) == {"-", "--", ":"}
        assert all(len(set(mpl.colors.to_rgb(colour))) == 1 for colour in styles.values())  # greys only

    def test_kinds(self, fan):
        kinds = kinds_of_rays(fan)
        assert np.all(fan.seabed_bounces[kinds == 2] > 0)
        assert np.all((fan.seabed_bounces + fan.surface_bounces)[kinds == 0] == 0)

    def test_source_seabed_and_axes(self, fan):
        figure = fan_figure(fan)
        axes = axes_named(figure, "rays")
        assert list(line(axes, "source").get_ydata()) == [100.0]
        assert axes.get_xlim() == (0.0, 60.0)
        assert axes.get_ylim()[1] == 0.0
        assert axes.get_ylim()[0] > 4500.0
        assert "Rays of sound through K7, source at 100 m" in words(figure)
        assert np.array_equal(line(axes_named(figure, "speed"), "speed").get_ydata(), DEEP.depth)

    def test_shadow_is_shaded_and_said_not_to_be_silence(self, fan, shadow):
        plain, shaded = fan_figure(fan), fan_figure(fan, shadow=shadow)
        assert len(axes_named(shaded, "rays").collections) == len(axes_named(plain, "rays").collections) + 2
        assert any("Shadow is not silence" in text for text in words(shaded))
        assert not any("shadow" in text.lower() for text in words(plain))

    def test_no_text_lies_on_another(self, fan, shadow, assert_readable):
        assert_readable(fan_figure(fan, shadow=shadow))

    def test_without_paths(self):
        bare = trace_fan(DEEP, source_depth=100.0, launch_angles=[1.0], max_range=1000.0)
        with pytest.raises(InputError, match="carries no paths to draw; trace it with points"):
            fan_figure(bare)


class TestText:
    def test_nothing_is_smaller_than_8_points(self, fan, shadow):
        for figure in (fan_figure(fan, shadow=shadow), profile_figure(DEEP, DEEP.features())):
            FigureCanvasAgg(figure).draw()
            assert min(text.get_fontsize() for text in figure.findobj(Text) if text.get_text()) >= 8.0

    @given(st.lists(st.tuples(st.floats(0.0, 100.0), st.floats(1.0, 8.0)), max_size=10))
    def test_labels_are_pushed_apart_within_bounds(self, wanted):
        wanted.sort()
        middles, heights = (np.array([pair[i] for pair in wanted]) for i in (0, 1))
        centres = spread_apart(middles, heights, 0.0, 100.0)
        gaps = np.diff(centres) - (heights[1:] + heights[:-1]) / 2.0
        assert np.all(gaps >= -1e-9)
        assert np.all(centres - heights / 2.0 >= -1e-9)
        assert np.all(centres + heights / 2.0 <= 100.0 + 1e-9)


class TestSaving:
    @pytest.mark.parametrize(
        ("name", "start"), [("a.png", b"\x89PNG"), ("a.SVG", b"<?xml"), ("a.pdf", b"%PDF")], ids=["png", "svg", "pdf"]
    )
    def test_formats(self, tmp_path, name, start):
        save_figure(profile_figure(DEEP), tmp_path / name)
        assert (tmp_path / name).read_bytes().startswith(start)
        assert [path.name for path in tmp_path.iterdir()] == [name]

    @pytest.mark.parametrize("name", ["a.gif", "a", "a.tar.gz"])
    def test_other_endings(self, tmp_path, name):
        with pytest.raises(InputError, match=r"a figure can't be written as .*; name it \.png, \.svg or \.pdf"):
            save_figure(profile_figure(DEEP), tmp_path / name)
        assert list(tmp_path.iterdir()) == []

    def test_existing_file_stays_unless_told(self, tmp_path):
        path = tmp_path / "a.png"
        path.write_bytes(b"old")
        with pytest.raises(OutputError, match=r"exists already; .*--replace"):
            save_figure(profile_figure(DEEP), path)
        with pytest.raises(OutputError, match=r"exists already; .*--replace"):
            check_picture(path)
        check_picture(path, replace=True)
        assert path.read_bytes() == b"old"
        assert len(list(tmp_path.iterdir())) == 1
        save_figure(profile_figure(DEEP), path, replace=True)
        assert path.read_bytes() != b"old"
        assert figure_format(path) == "png"


def test_no_global_state_and_no_pyplot():
    script = (
        "import sys, ocean_sound.figures as f\n"
        "assert 'matplotlib' not in sys.modules\n"
        "from ocean_sound.profile import Profile\n"
        "import matplotlib\n"
        "before = matplotlib.rcParams.copy()  # asking for it as a dict would resolve the backend\n"
        "p = Profile([0, 50, 100], [1500, 1490, 1495])\n"
        "f.profile_figure(p, p.features())\n"
        "assert 'matplotlib.pyplot' not in sys.modules\n"
        "assert matplotlib.rcParams.copy() == before\n"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
