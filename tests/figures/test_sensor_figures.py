"""Figures of sensor plans and of ranging: what lies on the axes is what the results say."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.errors import InputError
from ocean_sound.figures import (
    coverage_map_figure,
    detection_range_figure,
    detection_section_figure,
    dilution_figure,
    gain_figure,
    save_figure,
)
from ocean_sound.profile import Profile
from ocean_sound.sensors.area import Area
from ocean_sound.sensors.coverage import Hearing, Noise, Target
from ocean_sound.sensors.dilution import dilution_map
from ocean_sound.sensors.hearing import Receiver
from ocean_sound.sensors.losses import LossSettings
from ocean_sound.sensors.planning import Task, Wanted, place_sensors
from ocean_sound.sensors.sites import Site
from ocean_sound.sensors.waters import Member


def spherical(section, *, source_depth, frequency, ranges, depths, **_):
    slant = np.hypot(np.asarray(ranges)[:, None], np.asarray(depths)[None, :] - source_depth)
    return 20.0 * np.log10(slant) + 2e-3 * slant


def make(wanted=Wanted(2), bearings=8, existing=True):  # noqa: B008  # frozen
    """A plan across the date line in water of one speed."""
    area = Area.box(-17.1, -17.0, 179.93, -179.93, spacing=1000.0, depths=[10.0, 60.0], bathymetry=100.0)
    water = Profile([0.0, 100.0], [1500.0, 1500.0], id="still")
    task = Task(
        area=area,
        members=(Member("still", (water,)),),
        bathymetry=100.0,
        hearing=Hearing(Target(155.0), Receiver(10.0, 500.0), Noise([45.0, 50.0, 55.0])),
        settings=LossSettings(12e3, 8000.0, np.array([5.0, 30.0, 60.0, 90.0]), bearings=bearings, ranges=40, kind=None),
        candidates=[Site(f"P$1_{i}", -17.05, east, 50.0) for i, east in enumerate((179.96, 180.0, -179.96))],
        existing=[Site("old", -17.02, -179.99, 40.0)] if existing else [],
        wanted=wanted,
    )
    return place_sensors(task, engine=spherical)


@pytest.fixture(scope="module")
def plan():
    return make()


def drawn(axes, name):
    return next(line for line in axes.get_lines() if line.get_gid() == name)


def words(figure):
    return " ".join(text.get_text() for text in figure.texts)


def test_coverage_map_holds_sites_across_the_date_line(plan):
    result = plan.to_dataset()
    figure = coverage_map_figure(result, level=plan.level, remark="invented data")
    axes = figure.axes[0]
    x, y = drawn(axes, "sensor").get_data()
    np.testing.assert_allclose((x - result["site_longitude"].values[:2]) % 360.0, 0.0, atol=1e-9)
    np.testing.assert_allclose(y, result["site_latitude"].values[:2])
    west, east = axes.get_xlim()
    assert (west, east) == pytest.approx((179.93, 180.07))
    figure.draw_without_rendering()  # the map fills its room, though it is wider than high
    np.testing.assert_allclose(axes.get_position().bounds, axes.get_position(original=True).bounds, atol=1e-6)
    assert drawn(axes, "was there before").get_xdata() == pytest.approx([180.01])
    labels = [label.get_text() for label in axes.get_xticklabels()]
    assert any("E" in text for text in labels)
    assert any("W" in text for text in labels)
    mesh = next(mesh for mesh in axes.collections if mesh.get_gid() == "coverage")
    mean = result["heard_probability"].sel(at_once=1).mean("depth").values
    np.testing.assert_allclose(np.asarray(mesh.get_array()).reshape(mean.shape), mean, atol=1e-12)
    assert "invented data" in words(figure)


def test_coverage_at_one_depth_and_of_several_at_once(plan):
    result = plan.to_dataset()
    figure = coverage_map_figure(result, at_once=2, depth=58.0)
    mesh = next(mesh for mesh in figure.axes[0].collections if mesh.get_gid() == "coverage")
    expected = result["heard_probability"].sel(at_once=2, depth=60.0).values
    np.testing.assert_allclose(np.asarray(mesh.get_array()).reshape(expected.shape), expected, atol=1e-12)
    assert "at least 2 hear one, at 60 m" in words(figure)
    with pytest.raises(InputError, match="at_once is 9: the result holds 1, 2, 3"):
        coverage_map_figure(result, at_once=9)


def test_roses_show_medians_in_km(plan):
    figure = detection_range_figure(plan.reach)
    assert [axes.get_label() for axes in figure.axes] == [site.name for site in plan.sensors]
    axes = figure.axes[0]
    angle, reach = drawn(axes, "median").get_data()
    np.testing.assert_allclose(np.degrees(angle)[:-1], plan.reach["bearing"])
    np.testing.assert_allclose(reach[:-1], plan.reach["detection_range"].sel(percentile=50.0).values[0] / 1000.0)
    assert axes.get_theta_direction() == -1
    assert axes.get_theta_offset() == pytest.approx(np.pi / 2.0)
    assert "probability 0.5" in words(figure)


def test_few_bearings_are_drawn_plainly():
    figure = detection_range_figure(make(wanted=None, bearings=2).reach, sites=[1])
    assert [axes.name for axes in figure.axes] == ["rectilinear"]
    assert "1 of 4 sensors" in words(figure)
    with pytest.raises(InputError, match="sites: 7: 0 to 3 would be right"):
        detection_range_figure(make(wanted=None, bearings=2).reach, sites=[7])


def test_gains_add_up(plan):
    axes = gain_figure(plan).axes[0]
    heights = [bar.get_height() for bar in axes.patches]
    total = plan.task.area.weight.sum()
    np.testing.assert_allclose(heights, 100.0 * plan.choice.gains / total)
    reached = drawn(axes, "reached").get_ydata()
    np.testing.assert_allclose(np.diff(reached), heights, atol=1e-9)
    assert reached[-1] == pytest.approx(100.0 * plan.choice.value / total)
    with pytest.raises(InputError, match="no site was chosen"):
        gain_figure(make(wanted=None))


def test_section_shows_the_loss_and_where_half_is_heard(plan):
    figure = detection_section_figure(plan, sensor=2, bearing=91.0)
    axes = figure.axes[0]
    assert "sensor at 40 m, bearing 90°, 12000 Hz, still" in words(figure)
    mesh = next(mesh for mesh in axes.collections if mesh.get_gid() == "loss")
    settings = plan.losses.settings
    expected = spherical(None, source_depth=40.0, frequency=None, ranges=settings.distances, depths=settings.depths).T
    np.testing.assert_allclose(
        np.asarray(mesh.get_array()).reshape(expected.shape), np.minimum(expected, mesh.norm.vmax), atol=1e-4
    )
    allowed = plan.task.hearing.allowed(50.0)
    assert any(f"({allowed:.1f} dB)" in text.get_text() for text in figure.legends[0].get_texts())
    with pytest.raises(InputError, match="sensor is 5: 0 to 2 would be right"):
        detection_section_figure(plan, sensor=5)


def test_dilution_map(tmp_path):
    water = Profile([0.0, 200.0], [1500.0, 1500.0])
    stations = [
        Site(f"T{i}", *place, 180.0) for i, place in enumerate([(-17.0, 179.99), (-17.02, 179.99), (-17.0, -179.99)])
    ]
    result = dilution_map(
        water, stations, latitude=np.linspace(-17.03, -16.99, 9), longitude=np.linspace(179.98, 180.02, 9),
        target_depth=10.0,
    )  # fmt: skip
    figure = dilution_figure(result, remark="invented data")
    assert [axes.get_label() for axes in figure.axes if axes.get_label() != "colours"] == ["dilution", "error_major_95"]
    x, _ = drawn(figure.axes[0], "station").get_data()
    np.testing.assert_allclose(x, [179.99, 179.99, 180.01])
    assert "target at 10 m; two ways, timing 0.0001 s (k=1); unknown: position; invented data" in words(figure)
    save_figure(figure, tmp_path / "dilution.png")
    assert (tmp_path / "dilution.png").stat().st_size > 10_000


def test_dilution_where_no_place_is_told():
    deep = Profile([0.0, 200.0], [1540.0, 1500.0])
    stations = [Site("A", 0.0, 0.0, 190.0), Site("B", 0.0, 0.01, 190.0)]
    result = dilution_map(deep, stations, latitude=[0.9, 1.0], longitude=[0.9, 1.0], target_depth=5.0)
    assert int(result["stations_heard"].max()) == 0
    figure = dilution_figure(result)
    assert next(text.get_text() for text in figure.axes[0].texts) == "no place is told"
