"""The picture of loss: what is on its axes."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from ocean_sound.errors import InputError
from ocean_sound.figures import save_figure
from ocean_sound.figures.loss import loss_figure


@pytest.fixture
def spread():
    """Spherical spreading over a seabed that falls away."""
    ranges, depths = np.linspace(50.0, 5000.0, 100), np.linspace(0.0, 200.0, 81)
    x, z = np.meshgrid(ranges, depths, indexing="ij")
    seabed = 100.0 + 0.02 * ranges
    values = np.where(z <= seabed[:, None], 20.0 * np.log10(np.hypot(x, z - 50.0)), np.nan)
    values[:, 0] = np.inf
    return xr.Dataset(
        {"transmission_loss": (("range", "depth"), values), "seabed_depth": ("range", seabed)},
        {"range": ranges, "depth": depths},
        {
            "source_depth": 50.0, "frequency": 1500.0, "phases": "kept", "beams": 100, "modes": 12, "wind_speed": 5.0,
            "seabed_kinds": "sand from 0 m; silt from 2000 m",
        },
    )  # fmt: skip


def found(artists, name):
    return next(artist for artist in artists if artist.get_gid() == name)


def test_loss_seabed_source_and_contour_are_where_they_are(spread, tmp_path):
    before = spread.copy(deep=True)
    figure = loss_figure(spread, contour=66.0, remark="invented data")
    axes = figure.axes[0]
    assert np.allclose(found(axes.lines, "seabed").get_ydata()[1:], spread.seabed_depth)
    assert found(axes.lines, "source").get_ydata() == [50.0]
    mesh = found(axes.collections, "loss")
    low, high = mesh.norm.vmin, mesh.norm.vmax
    assert (low, high) == (50.0, 100.0)
    assert mesh.get_array().mask.any()
    line = np.concatenate([path.vertices for path in found(axes.collections, "contour").get_paths()])
    middle = line[(line[:, 1] > 5.0) & (line[:, 1] < 100.0)]
    # 66 dB of spherical spreading is 1995 m away
    assert np.hypot(middle[:, 0] * 1000.0, middle[:, 1] - 50.0) == pytest.approx(1995.0, abs=40.0)
    bottom, top = axes.get_ylim()
    assert bottom > 200.0 > top == 0.0
    texts = [text.get_text() for text in figure.texts]
    assert texts[0] == "Transmission loss at 1.5 kHz"
    assert texts[1] == "by 12 modes and 100 beams, phases kept, wind 5 m/s, invented data"
    keys = [text.get_text() for text in figure.legends[0].get_texts()]
    assert keys == ["66 dB, averaged", "source at 50 m", "seabed (sand, silt)"]
    save_figure(figure, tmp_path / "a.png")
    assert (tmp_path / "a.png").stat().st_size > 10_000
    xr.testing.assert_identical(spread, before)


def test_what_cannot_be_drawn_is_told(spread):
    with pytest.raises(InputError, match="a grid of two ranges and two depths at least"):
        loss_figure(spread.isel(range=[0]))
    with pytest.raises(InputError, match="no loss is finite"):
        loss_figure(spread.assign(transmission_loss=spread.transmission_loss * np.nan))
