"""The picture of a section: what is on its axes."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest

from ocean_sound.errors import InputError
from ocean_sound.figures import save_figure, section_figure
from ocean_sound.profile import Profile
from ocean_sound.section import Seabed, Section


@pytest.fixture(scope="module")
def section():
    casts = [
        Profile([0, 100, bottom], [1500 + warm, 1490, 1500], id=name, latitude=lat, longitude=179.9)
        for name, lat, warm, bottom in (("a", 10.0, 0.0, 800.0), ("b", 10.1, 4.0, 500.0), ("c", 10.2, 6.0, 900.0))
    ]
    return Section.from_casts(casts, seabed=Seabed([0.0, 11e3, 22e3], [700.0, 450.0, 880.0], kind="silt"))


def rays():
    path = np.linspace(0.0, 20e3, 5)
    return SimpleNamespace(
        path_range=np.tile(path, (3, 1)), path_depth=np.array([[50.0] * 5, [10.0] * 5, [300.0] * 5]),
        surface_bounces=np.array([0, 2, 1]), seabed_bounces=np.array([0, 0, 1]),
    )  # fmt: skip


def line(axes, name):
    return next(found for found in axes.lines if found.get_gid() == name)


def test_water_seabed_and_casts_are_where_they_are(section, tmp_path):
    figure = section_figure(section, remark="invented data")
    axes = figure.axes[0]
    x, depth = line(axes, "seabed").get_data()
    assert np.allclose(depth, section.seabed.depth_at(np.asarray(x) * 1000.0))
    assert np.allclose(line(axes, "casts").get_xdata(), section.places / 1000.0)
    mesh = next(found for found in axes.collections if found.get_gid() == "speed")
    assert mesh.get_clim() == pytest.approx((1490.0, 1506.0), abs=0.1)
    assert mesh.get_array().shape == (301, 401)
    low, high = axes.get_ylim()
    assert low > section.seabed.deepest > high == 0.0
    texts = [text.get_text() for text in figure.texts]
    assert "10.000° N 179.900° E to 10.200° N 179.900° E" in texts[1]
    assert "invented data" in texts[1]
    assert [text.get_text() for text in figure.legends[0].get_texts()][-1] == "seabed (silt)"
    save_figure(figure, tmp_path / "a.png")
    assert (tmp_path / "a.png").stat().st_size > 10_000


def test_rays_are_told_apart_by_line_style_alone(section):
    axes = section_figure(section, rays()).axes[0]
    lines = {name: line(axes, name) for name in ("refracted only", "surface bounces", "seabed bounces")}
    assert [found.get_linestyle() for found in lines.values()] == ["-", "--", ":"]
    assert len({found.get_color() for found in lines.values()}) == 1
    assert np.nanmax(lines["seabed bounces"].get_ydata()) == 300.0


def test_rays_without_paths_are_told(section):
    for bare in (SimpleNamespace(), SimpleNamespace(**{**vars(rays()), "path_range": np.empty((3, 0))})):
        with pytest.raises(InputError, match="the rays carry no paths to draw; trace them with points"):
            section_figure(section, bare)


def test_water_of_one_speed_is_drawn_too():
    axes = section_figure(Section.from_profile(Profile([0.0, 100.0], [1500.0, 1500.0]))).axes[0]
    assert [found.get_gid() for found in axes.lines] == ["seabed"]
