"""The picture of an archive: what stands on its axes."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.archive import build_archive, open_archive
from ocean_sound.figures import save_figure
from ocean_sound.figures.archive import archive_figure, envelope


def write(folder, name, *, longitude, latitude=10.0, month=1, shift=0.0, levels=(0, 10, 50, 200)):
    speeds = [1500.0 + shift - 0.02 * level for level in levels]
    where = "" if longitude is None else f"# latitude: {latitude}\n# longitude: {longitude}\n"
    when = "" if month is None else f"# time: 2024-{month:02d}-10T00:00:00Z\n"
    rows = "".join(f"{level},{speed}\n" for level, speed in zip(levels, speeds, strict=True))
    (folder / f"{name}.csv").write_text(f"{when}{where}depth [m],sound speed [m/s]\n{rows}")


@pytest.fixture
def archive(tmp_path):
    for number in range(21):
        write(
            tmp_path, f"c{number:02d}", longitude=(170.0 + number + 180.0) % 360.0 - 180.0, month=1 + number % 3,
            shift=number - 10.0, levels=(0, 10, 50, 200) if number % 7 else (0, 10, 50, 200, 1000),
        )  # fmt: skip
    write(tmp_path, "unknown", longitude=None, month=None)
    build_archive([tmp_path], tmp_path / "a.nc", workers=0)
    with open_archive(tmp_path / "a.nc") as opened:
        yield opened


def axes_of(figure, label):
    return next(axes for axes in figure.axes if axes.get_label() == label)


def drawn(axes, gid):
    return next(child for child in axes.get_children() if child.get_gid() == gid)


def test_casts_on_both_sides_of_the_date_line_lie_together(archive):
    axes = axes_of(archive_figure(archive), "positions")
    longitude = drawn(axes, "casts").get_offsets()[:, 0]
    assert len(longitude) == 21
    assert longitude.max() - longitude.min() == pytest.approx(20.0)
    west, east = axes.get_xlim()
    assert east - west < 40.0
    assert axes.get_title(loc="right") == "1 casts without a position"
    form = axes.xaxis.get_major_formatter()
    assert [form(value) for value in (175.0, 180.0, 185.0, -175.0, 0.0)] == ["175°E", "180°", "175°W", "175°W", "0°"]


def test_casts_are_counted_by_month(archive):
    axes = axes_of(archive_figure(archive), "months")
    assert [bar.get_height() for bar in axes.patches] == [7, 7, 7]
    assert axes.get_title(loc="right") == "1 casts without a time"


def test_the_envelope_is_that_of_the_profiles(archive):
    depth, low, median, high = envelope(archive)
    assert depth[0] == 0.0
    assert depth[-1] == pytest.approx(1000.0)  # three casts reach it
    assert median[0] == pytest.approx(1500.0)
    shifts = np.concatenate((np.arange(21) - 10.0, [0.0]))
    assert low[0] == pytest.approx(1500.0 + np.quantile(shifts, 0.05))
    assert high[0] == pytest.approx(1500.0 + np.quantile(shifts, 0.95))
    inside = (depth > 0.0) & (depth < 200.0)
    assert np.allclose(median[inside], 1500.0 - 0.02 * depth[inside])


def test_it_is_drawn_whatever_is_missing(tmp_path):
    (tmp_path / "warm.csv").write_text("depth [m],temperature [degC]\n0,15\n10,14\n")
    build_archive([tmp_path / "warm.csv"], tmp_path / "a.nc", workers=0)
    with open_archive(tmp_path / "a.nc") as archive:
        figure = archive_figure(archive)
        save_figure(figure, tmp_path / "a.svg")
    texts = [text.get_text() for axes in figure.axes for text in axes.texts]
    assert texts == ["no cast has a position", "no cast has a time", "no cast has a speed"]
