"""Pictures of arrivals, shadow and ensembles: what is on their axes."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest

from ocean_sound.errors import InputError
from ocean_sound.figures import arrivals_figure, save_figure, shadow_figure
from ocean_sound.figures.ensemble import ensemble_figure
from ocean_sound.profile import Profile
from ocean_sound.rays import ensemble, find_shadow
from ocean_sound.section import Seabed, Section


def arrivals():
    return SimpleNamespace(
        receiver=np.array([0, 0, 0, 0, 2]), receiver_depth=np.array([50.0] * 4 + [80.0]),
        receiver_range=np.array([9e3] * 4 + [12e3]), travel_time=np.array([6.0, 6.1, 6.3, 6.4, 8.0]),
        amplitude=np.array([1e-4, 1e-5, np.inf, 1e-9, 1e-3]), arrival_angle=np.array([-2.0, 5.0, 7.0, 9.0, 1.0]),
        surface_bounces=np.array([0, 1, 0, 2, 0]), seabed_bounces=np.array([0, 0, 1, 2, 1]),
    )  # fmt: skip


def by_name(axes, name):
    return next((line for line in axes.lines if line.get_gid() == name), None)


def test_arrivals_stand_at_their_time_and_level_in_the_marker_of_their_kind(tmp_path):
    figure = arrivals_figure(arrivals(), remark="invented data")
    assert [axes.get_label() for axes in figure.axes] == ["receiver 0", "receiver 2"]
    first, second = figure.axes
    kinds = {name: by_name(first, name) for name in ("refracted only", "surface bounces")}
    assert {name: line.get_marker() for name, line in kinds.items()} == {"refracted only": "o", "surface bounces": "^"}
    assert len({line.get_color() for line in kinds.values()}) == 1
    assert kinds["refracted only"].get_xydata().tolist() == [[6.0, -80.0]]
    assert kinds["surface bounces"].get_xydata().tolist() == [[6.1, -100.0]]
    # one on a caustic has no level, and one 120 dB below the strongest lies below the axis
    assert by_name(first, "seabed bounces") is None
    assert by_name(second, "seabed bounces").get_xydata().tolist() == [[8.0, -60.0]]
    assert first.get_ylim() == second.get_ylim()
    styles = {c.get_gid(): c.get_linestyle()[0] for c in first.collections}
    assert styles["refracted only stems"] != styles["surface bounces stems"]
    assert "invented data" in [text.get_text() for text in figure.texts][1]
    save_figure(figure, tmp_path / "a.png")
    only = arrivals_figure(arrivals(), receivers=[2])
    assert [axes.get_label() for axes in only.axes] == ["receiver 2"]
    with pytest.raises(InputError, match="nothing arrives at the receivers asked for"):
        arrivals_figure(arrivals(), receivers=[1])


def test_shadow_stands_where_its_masks_are_above_the_seabed(tmp_path):
    seabed = Seabed([0.0, 2000.0, 4000.0], [150.0, 190.0, 120.0], kind=None)
    section = Section.from_profile(Profile([0, 50, 200], [1520, 1500, 1490]), seabed=seabed, max_range=4000.0)
    shadow = find_shadow(section, source_depth=30.0, max_range=4000.0, grid=(20, 21))
    figure = shadow_figure(shadow, title="A title")
    axes = figure.axes[0]
    x, depth = by_name(axes, "seabed").get_data()
    assert np.allclose(depth, seabed.depth_at(np.asarray(x) * 1000.0))
    assert by_name(axes, "source").get_xydata().tolist() == [[0.0, 30.0]]
    drawn = {found.get_gid() for found in axes.collections}
    assert {name for name, mask in shadow.masks.items() if mask.any()} <= drawn
    assert figure.texts[0].get_text().startswith("Shadow is not silence")
    assert "A title" in [text.get_text() for text in figure.texts]
    low, high = axes.get_ylim()
    assert low > seabed.deepest > high == 0.0
    save_figure(figure, tmp_path / "a.png")


def test_convergence_zones_are_bars_with_numbers():
    depth = np.linspace(0.0, 5000.0, 51)
    eta = 2.0 * (depth - 1300.0) / 1300.0
    deep = Profile(depth, 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta))))
    shadow = find_shadow(deep, source_depth=100.0, max_range=70e3, depths=[20.0, 100.0, 2000.0], grid=(0, 51))
    zones = shadow.convergence_zones(100.0)
    assert len(zones) > 0
    axes = shadow_figure(shadow, [100.0]).axes[0]
    bars = [line.get_xydata() for line in axes.lines if line.get_gid() == "zone"]
    assert np.allclose([bar[:, 0] for bar in bars], zones[:, 1:] / 1000.0)
    assert [text.get_text() for text in axes.texts] == [f"{number:.0f}" for number in zones[:, 0]]
    with pytest.raises(InputError, match="depth 33 m is not one of the grid"):
        shadow_figure(shadow, [33.0])


def test_an_ensemble_has_a_panel_for_each_result():
    waters = [Profile([0, 100], [surface, 1500.0]) for surface in (1520.0, 1501.0)]
    grid = {"ranges": np.linspace(0.0, 4000.0, 9), "depths": np.linspace(0.0, 100.0, 5)}
    found = ensemble(waters, source_depth=20.0, workers=0, names=["warm", "mild"], **grid)
    figure = ensemble_figure(found, remark="invented data")
    panels = [axes for axes in figure.axes if axes.get_label().startswith("shadow")]
    mesh = panels[0].collections[0]
    assert np.array_equal(mesh.get_array().reshape(5, 9), found.shadow_share_no_bounce.values)
    assert mesh.get_clim() == (0.0, 1.0)
    assert panels[0].get_ylim() == (100.0, 0.0)
    assert "warm, mild, invented data" in figure.texts[1].get_text()
    with pytest.raises(InputError, match="holds nothing to draw"):
        ensemble_figure(found.isel(depth=[0]))
