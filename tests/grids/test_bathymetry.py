"""Bathymetry grids: bilinear against scipy and closed forms, any convention of longitude, and what is refused."""

from __future__ import annotations

from contextlib import contextmanager

import numpy as np
import pytest
import xarray as xr
from hypothesis import given
from hypothesis import strategies as st
from scipy.interpolate import RegularGridInterpolator

from ocean_sound.errors import InputError
from ocean_sound.grids import open_bathymetry, window

HEIGHT = {"standard_name": "height_above_mean_sea_level", "units": "m"}


def write(path, latitude, longitude, values, attributes=HEIGHT, dims=("lat", "lon"), **encoding):
    data = xr.Dataset(
        {"z": (dims, values, attributes)},
        {"lat": ("lat", latitude, {"units": "degrees_north"}), "lon": ("lon", longitude, {"units": "degrees_east"})},
    )
    data.to_netcdf(path, encoding={"z": encoding} if encoding else None)
    return path


def plane(latitude, longitude):
    return 10.0 * latitude[:, None] + longitude[None, :] - 3000.0


@pytest.fixture(scope="module")
def ring(tmp_path_factory):
    """A grid all the way round, at cell centres from -179.5, whose value goes with the cosine of longitude."""
    latitude, longitude = np.arange(-80.0, 81.0, 10.0), np.arange(-179.5, 180.0, 1.0)
    values = np.cos(np.deg2rad(longitude))[None, :] * 1000.0 + latitude[:, None] - 4000.0
    return write(tmp_path_factory.mktemp("ring") / "ring.nc", latitude, longitude, values)


@given(latitude=st.floats(-3.0, 4.0), longitude=st.floats(170.0, 190.0))
def test_a_plane_is_met_exactly_by_any_way_of_naming_a_place(tmp_path_factory, latitude, longitude):
    axes = np.arange(-3.0, 4.1), np.arange(170.0, 190.1)
    for name, lon, lat in (
        ("up", axes[1], axes[0]),
        ("west", (axes[1] + 180.0) % 360.0 - 180.0, axes[0]),  # 170 ... 179, -180 ... -170 in the file
        ("down", axes[1], axes[0][::-1]),
    ):
        path = tmp_path_factory.getbasetemp() / f"plane-{name}.nc"
        if not path.exists():
            write(path, lat, lon, plane(lat, axes[1]))
        seabed = open_bathymetry(path)
        exact = 3000.0 - 10.0 * latitude - longitude
        for same in (longitude, longitude - 360.0):
            assert seabed.depth_at(latitude, same) == pytest.approx(exact, abs=1e-9)


@given(latitude=st.floats(-80.0, 80.0), longitude=st.floats(-360.0, 360.0))
def test_across_the_seam_of_a_ring(ring, latitude, longitude):
    found = open_bathymetry(ring).depth_at(latitude, longitude)
    # Linear interpolation over one degree of a cosine of 1000 m errs by at most 1000 (pi/180)^2 / 8 m.
    assert found == pytest.approx(4000.0 - latitude - 1000.0 * np.cos(np.deg2rad(longitude)), abs=0.0381)
    assert open_bathymetry(ring).depth_at(latitude, -longitude) == pytest.approx(found, abs=1e-6)


class Watched:
    """A dataset whose variables tell how much of them was read."""

    def __init__(self, dataset, read):
        self.variables = {"z": self}
        self.variable, self.read = dataset.variables["z"], read

    def __getitem__(self, index):
        values = self.variable[index]
        self.read.append(values.size)
        return values


def test_a_track_equals_its_points_and_reads_its_window_only(ring, monkeypatch):
    seabed, read = open_bathymetry(ring), []
    plain = window.opened

    @contextmanager
    def watched(path):
        with plain(path) as dataset:
            yield Watched(dataset, read)

    monkeypatch.setattr(window, "opened", watched)
    latitude, longitude = np.linspace(-20.0, 20.0, 9), np.linspace(176.0, 184.0, 9)
    together = seabed.depth_at(latitude, longitude)
    assert sum(read) <= 6 * 10  # of 17 x 360: the rows from -20 to 30, the columns from 175.5 over 180 to -175.5
    one_by_one = [seabed.depth_at(*place) for place in zip(latitude, longitude, strict=True)]
    np.testing.assert_array_equal(together, one_by_one)
    assert seabed.depth_at(latitude.reshape(3, 3), longitude.reshape(3, 3)).shape == (3, 3)


def test_gaps_leave_the_weight_to_the_neighbours(tmp_path):
    values = np.array([[-100.0, np.nan], [-300.0, np.nan]])
    seabed = open_bathymetry(write(tmp_path / "gap.nc", [0.0, 1.0], [0.0, 1.0], values))
    assert seabed.depth_at(0.5, 0.5) == pytest.approx(200.0)
    assert np.isnan(seabed.depth_at(0.5, 1.0))


def test_integers_with_fill_and_scale(tmp_path):
    values = np.array([[-100.0, np.nan], [-300.5, -400.0]])
    path = write(tmp_path / "i.nc", [0.0, 1.0], [0.0, 1.0], values, dtype="int16", scale_factor=0.5, _FillValue=-32768)
    seabed = open_bathymetry(path)
    assert seabed.depth_at([0.0, 1.0], 0.0).tolist() == [100.0, 300.5]
    assert seabed.depth_at(0.0, 0.5) == 100.0


def test_depths_and_heights(tmp_path):
    cases = (
        ({"standard_name": "sea_floor_depth_below_mean_sea_level", "units": "m"}, None, -1.0),
        ({"positive": "down", "units": "metres"}, None, -1.0),
        ({"units": "meters"}, "depth", -1.0),
        ({"units": "meters"}, "height", 1.0),
        (HEIGHT, "height", 1.0),
    )
    for number, (attributes, kind, sign) in enumerate(cases):
        path = write(tmp_path / f"{number}.nc", [0.0, 1.0], [0.0, 1.0], np.full((2, 2), -50.0), attributes)
        assert open_bathymetry(path, kind=kind).depth_at(0.5, 0.5) == 50.0 * sign


def test_half_a_cell_beyond_the_edge_is_the_grids(tmp_path):
    seabed = open_bathymetry(write(tmp_path / "e.nc", [0.0, 1.0], [10.0, 11.0], [[-1.0, -2.0], [-1.0, -2.0]]))
    assert seabed.depth_at(-0.4, 11.5) == 2.0
    assert seabed.depth_at(1.5, 9.5) == 1.0
    with pytest.raises(InputError, match=r"longitude 9.4 lies outside the grid of z, which reaches from 10 to 11"):
        seabed.depth_at(0.0, 9.4)
    with pytest.raises(InputError, match=r"latitude 1.6 lies outside the grid of z"):
        seabed.depth_at([0.5, 1.6], [10.0, 10.0])
    with pytest.raises(InputError, match=r"latitude is 91; a number from -90 to 90"):
        seabed.depth_at(91.0, 10.0)
    with pytest.raises(InputError, match=r"longitude is nan"):
        seabed.depth_at(0.0, np.nan)


def test_what_is_no_bathymetry(tmp_path):
    def refused(message, attributes=HEIGHT, values=((0.0, 1.0), (2.0, 3.0)), latitude=(0.0, 1.0), **options):
        path = write(tmp_path / "refused.nc", list(latitude), [0.0, 1.0], np.array(values), attributes)
        with pytest.raises(InputError, match=message):
            open_bathymetry(path, **options)

    refused(r"nothing says whether z holds heights .* or depths; give kind='height' or kind='depth'", {"units": "m"})
    refused(r"z is in fathoms; metres would be right", {"units": "fathoms", "positive": "up"})
    refused(r"z holds heights by its attributes, not depths", kind="depth")
    refused(r"kind is 'up'; 'height' or 'depth' would be right", kind="up")
    refused(r"has no gridded variable 'depth'; it has z", variable="depth")
    refused(r"the axis lat does not go steadily", latitude=(1.0, 1.0))
    (tmp_path / "text.nc").write_text("no grid")
    with pytest.raises(InputError, match=r"text.nc: can't be opened as netCDF"):
        open_bathymetry(tmp_path / "text.nc")
    xr.Dataset({"a": ("n", [1.0])}).to_netcdf(tmp_path / "flat.nc")
    with pytest.raises(InputError, match="holds no grid"):
        open_bathymetry(tmp_path / "flat.nc")
    xr.Dataset({"a": (("n", "m"), [[1.0, 2.0], [1.0, 2.0]], HEIGHT)}).to_netcdf(tmp_path / "bare.nc")
    with pytest.raises(InputError, match="what the dimension n of a counts can't be told"):
        open_bathymetry(tmp_path / "bare.nc")
    both = {"a": (("lat", "lon"), np.ones((2, 2)), HEIGHT), "b": (("lat", "lon"), np.ones((2, 2)), HEIGHT)}
    axes = {"lat": ("lat", [0.0, 1.0]), "lon": ("lon", [0.0, 1.0])}
    xr.Dataset(both, axes).to_netcdf(tmp_path / "both.nc")
    with pytest.raises(InputError, match=r"several gridded variables \(a, b\); say which by variable="):
        open_bathymetry(tmp_path / "both.nc")
    assert open_bathymetry(tmp_path / "both.nc", variable="b").depth_at(0.0, 0.0) == -1.0


@pytest.mark.parametrize(
    ("name", "kind"),
    [("gebco2025_6min_bermuda.nc", None), ("gebco2025_6min_mariana.nc", None), ("etopo5_hawaii.nc", "height")],
)
def test_real_grids_against_scipy(real_data, name, kind):
    path = real_data / "bathymetry" / name
    if kind is not None:
        with pytest.raises(InputError, match="nothing says whether ROSE holds heights"):
            open_bathymetry(path)
    seabed = open_bathymetry(path, kind=kind)
    with xr.open_dataset(path) as data:
        values = data["ROSE" if kind else "Height"]
        lat, lon = (data[dim].to_numpy().astype(float) for dim in values.dims)
        oracle = RegularGridInterpolator((lat, lon), values.to_numpy().astype(float))
    draw = np.random.default_rng(1)
    places = np.column_stack([draw.uniform(lat[0], lat[-1], 200), draw.uniform(lon[0], lon[-1], 200)])
    np.testing.assert_allclose(seabed.depth_at(places[:, 0], places[:, 1] - 360.0 * (lon[0] > 180)), -oracle(places),
                               atol=1e-6)  # fmt: skip


def test_the_trench_is_deep(real_data):
    # The Challenger Deep, 11 deg 22 min N 142 deg 35 min E, lies below 10900 m (many surveys; from memory); points 6
    # arc minutes apart blunt it.
    seabed = open_bathymetry(real_data / "bathymetry" / "gebco2025_6min_mariana.nc")
    around = np.linspace(-0.2, 0.2, 21)
    assert 10000.0 < seabed.depth_at(11.37 + around, np.full(21, 142.59)).max() < 11000.0
