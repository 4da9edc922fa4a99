"""The seabed and what it is made of: against scipy's own curve, closed forms, and grids of every convention."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from hypothesis import given
from hypothesis import strategies as st
from scipy.interpolate import PchipInterpolator

from ocean_sound.errors import InputError
from ocean_sound.grids import open_bathymetry
from ocean_sound.section import SEDIMENTS, Seabed, Sediment, Surface, Track
from ocean_sound.section.sediments import kind_of

X = np.array([-500.0, 0.0, 130.0, 400.0, 4000.0, 4100.0, 9000.0])
Z = np.array([90.0, 100.0, 180.0, 150.0, 150.0, 700.0, 650.0])


@pytest.mark.kernels
def test_depth_slope_and_second_derivative_are_those_of_scipy():
    x = np.unique(np.concatenate((np.linspace(-500.0, 9000.0, 2000), X)))[:-1]
    found, exact = Seabed(X, Z).shape_at(x), PchipInterpolator(X, Z)
    for order in range(3):
        scale = np.abs(exact(x, order)).max()
        assert np.abs(found[:, order] - exact(x, order)).max() < 1e-9 * scale


@pytest.mark.kernels
def test_slope_and_second_derivative_are_those_of_finite_differences():
    seabed, x = Seabed(X, Z), np.random.default_rng(2).uniform(-400.0, 8900.0, 200)
    x = x[np.abs(x[:, None] - X).min(axis=1) > 1.0]
    here, up, down = (seabed.shape_at(x + step) for step in (0.0, 0.01, -0.01))
    assert np.allclose((up[:, 0] - down[:, 0]) / 0.02, here[:, 1], rtol=1e-5, atol=1e-8)
    assert np.allclose((up[:, 1] - down[:, 1]) / 0.02, here[:, 2], rtol=1e-5, atol=1e-8)


@pytest.mark.kernels
@given(
    st.lists(st.tuples(st.floats(1.0, 5000.0), st.floats(1.0, 6000.0)), min_size=2, max_size=30), st.floats(-0.2, 1.2)
)
def test_the_curve_never_leaves_the_points_around_it(points, part):
    x = np.cumsum([step for step, _ in points])
    z = np.array([depth for _, depth in points])
    seabed = Seabed(x, z)
    wanted = x[0] + part * (x[-1] - x[0])
    depth, slope, bend = seabed.shape_at(wanted)
    j = int(np.clip(np.searchsorted(x, wanted) - 1, 0, x.size - 2))
    low, high = sorted(z[j : j + 2]) if x[0] <= wanted <= x[-1] else [z[0 if part < 0.5 else -1]] * 2
    assert low - 1e-9 * high <= depth <= high * (1.0 + 1e-9)
    if not x[0] <= wanted <= x[-1]:
        assert slope == bend == 0.0
    assert np.allclose(seabed.depth_at(x), z, rtol=1e-12)


@pytest.mark.kernels
def test_a_straight_slope_is_straight_and_a_flat_seabed_flat():
    x = np.array([0.0, 1000.0, 1500.0, 8000.0])
    found = Seabed(x, 200.0 + 0.05 * x).shape_at(np.linspace(0.0, 8000.0, 77))
    assert np.allclose(found[:, 1], 0.05, rtol=1e-9)
    assert np.abs(found[:, 2]).max() < 1e-12
    flat = Seabed.flat(321.0)
    assert (flat.shape_at([-1e7, 0.0, 0.5, 1.0, 1e7]) == [321.0, 0.0, 0.0]).all()
    assert not flat.varies
    assert repr(flat) == "<Seabed: level at 321 m, sand>"
    assert np.isfinite(flat.shape_at(np.nan)[0])


def test_kinds_change_along_the_track():
    own = Sediment(1700.0, 1800.0, 0.5)
    seabed = Seabed(X, Z, kind=[(0.0, "clay"), (2000.0, own), (5000.0, None)])
    assert [seabed.kind_at(x) for x in (-1e3, 1999.0)] == [SEDIMENTS["clay"]] * 2
    assert seabed.kind_at(2000.0) is own
    assert seabed.kind_at(1e9) is None
    assert seabed.sediment_at(0.0, 1520.0).speed == 1520.0
    assert seabed.sediment_at(1e9, 1520.0) is None
    assert "clay, sediment of its own numbers, absorbs all" in repr(seabed)
    assert seabed.varies


@pytest.mark.parametrize(
    ("name", "density_ratio", "speed_ratio", "attenuation", "shear"),
    [
        # Jensen, Kuperman, Porter and Schmidt, Computational Ocean Acoustics, table 1.3, after Hamilton; seen in a
        # public transcription. Shear that the table gives as a law of depth stands as none here.
        ("clay", 1.5, 1.00, 0.2, (0.0, 0.0)),
        ("silt", 1.7, 1.05, 1.0, (0.0, 0.0)),
        ("sand", 1.9, 1.1, 0.8, (0.0, 0.0)),
        ("gravel", 2.0, 1.2, 0.6, (0.0, 0.0)),
        ("moraine", 2.1, 1.3, 0.4, (600.0, 1.0)),
        ("chalk", 2.2, 1.6, 0.2, (1000.0, 0.5)),
        ("limestone", 2.4, 2.0, 0.1, (1500.0, 0.2)),
        ("basalt", 2.7, 3.5, 0.1, (2500.0, 0.2)),
    ],
)
def test_the_table_is_the_published_one(name, density_ratio, speed_ratio, attenuation, shear):
    sediment = SEDIMENTS[name].below(1500.0)
    assert sediment.speed == pytest.approx(1500.0 * speed_ratio)
    assert sediment.density == pytest.approx(1000.0 * density_ratio)
    assert (sediment.attenuation, sediment.shear_speed, sediment.shear_attenuation) == (attenuation, *shear)
    assert sediment.without_shear().shear_speed == 0.0


def test_every_row_of_the_table_is_looked_at():
    assert list(SEDIMENTS) == ["clay", "silt", "sand", "gravel", "moraine", "chalk", "limestone", "basalt"]


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (([0.0], [1.0]), "1 ranges and 1 depths"),
        (([0.0, 1.0], [1.0]), "2 ranges and 1 depths"),
        (([0.0, np.nan], [1.0, 1.0]), "a range is not a finite number"),
        (([0.0, 5.0, 5.0], [1.0, 1.0, 1.0]), "point 2 .* is at 5 m, not beyond the one before it at 5 m"),
        (([0.0, 5.0], [1.0, -3.0]), "at 5 m, has the depth -3 m, land"),
        (([0.0, 5.0], [1.0, np.nan]), "has the depth nan m, no depth of the sea"),
        (([0.0, 5.0], [1.0, 13000.0]), "13000 m, no depth of the sea; above 0 and up to 12000"),
        (([0.0, 1e-3, 1e5], [1.0, 1.0, 1.0]), "points 0 and 1 .* are 0.001 m apart; 0.39 m or more"),
        (([0.0, 5.0], [1.0, 1.0], "mud"), "kind is 'mud'; clay, silt, sand"),
        (([0.0, 5.0], [1.0, 1.0], 7), "kind is 7; a name, a Sediment"),
        (([0.0, 5.0], [1.0, 1.0], ["sand"]), r"entry of kind is 'sand'; \(range in m, kind\)"),
        (([0.0, 5.0], [1.0, 1.0], [(0.0, "sand"), (0.0, "silt")]), "a kind starts at 0 m; ranges that increase"),
        (([0.0, 5.0], [1.0, 1.0], [(0.0, "sand"), (3.0, "ooze")]), "seabed from 3 m: kind is 'ooze'"),
    ],
)
def test_what_can_be_no_seabed_is_told(arguments, message):
    with pytest.raises(InputError, match=message):
        Seabed(*arguments)


@pytest.mark.parametrize(
    ("numbers", "message"),
    [
        ((50.0, 1900.0, 0.8), "speed is 50; 100 to 10000 m/s"),
        ((1650.0, 1.9, 0.8), "density is 1.9; 500 to 10000 kg/m3"),
        ((1650.0, 1900.0, -1.0), "attenuation is -1; 0 to 20 dB per wavelength"),
        ((1650.0, 1900.0, 0.8, 1500.0), "shear_speed is 1500 m/s; less than 1429 m/s"),
        ((1650.0, 1900.0, 0.8, 100.0, np.nan), "shear_attenuation is nan"),
    ],
)
def test_numbers_that_no_seabed_has_are_told(numbers, message):
    with pytest.raises(InputError, match=message):
        Sediment(*numbers)


def test_wind_and_water_that_are_none_are_told():
    with pytest.raises(InputError, match="wind_speed is -1; 0 to 100 m/s"):
        Surface(-1.0)
    with pytest.raises(InputError, match="bottom water is nan m/s"):
        Seabed.flat(10.0).sediment_at(0.0, np.nan)
    assert kind_of(None) is None


def write(path, longitude, depth, *, up):
    """A grid around the date line whose depth is linear in the longitude counted eastward from 170 E."""
    latitude = np.arange(-3.0, 3.1, 0.5)
    attributes = {"units": "m", "standard_name": "height_above_mean_sea_level" if up else "sea_floor_depth_below_geoid"}
    values = np.tile(-depth if up else depth, (latitude.size, 1))
    order = np.argsort(longitude)
    xr.Dataset(
        {"z": (("lat", "lon"), values[:, order], attributes)},
        {
            "lat": ("lat", latitude, {"units": "degrees_north"}),
            "lon": ("lon", longitude[order], {"units": "degrees_east"}),
        },
    ).to_netcdf(path)
    return path


@pytest.mark.parametrize("up", [True, False])
@pytest.mark.parametrize("convention", ["0 to 360", "-180 to 180"])
def test_a_line_over_the_date_line_in_any_grid(tmp_path, up, convention):
    east = np.arange(0.0, 360.0, 0.5)  # from 170 E, all the way round, so that -180 ... 180 has both sides of the seam
    depth = 2000.0 + 100.0 * np.minimum(east, 360.0 - east)
    longitude = (east + 170.0) % 360.0
    if convention == "-180 to 180":
        longitude = (longitude + 180.0) % 360.0 - 180.0
    path = write(tmp_path / "grid.nc", longitude, np.minimum(depth, 9000.0), up=up)
    for end in ((0.0, -172.0), (0.0, 188.0)):
        seabed = Seabed.from_bathymetry(path, (0.0, 172.0), end, kind="silt")
        track = Track.between((0.0, 172.0), end)
        # on the equator longitude is proportional to distance, and 16 degrees of it are 1781 km
        assert track.length == pytest.approx(np.radians(16.0) * 6378137.0, rel=1e-9)
        x = np.linspace(0.0, track.length, 33)
        assert seabed.depth_at(x) == pytest.approx(2200.0 + 1600.0 * x / track.length, rel=1e-9)
        assert 0.9 < seabed.ranges[1] / (0.5 * 111195.0) <= 1.0
        assert seabed.kinds == ((0.0, SEDIMENTS["silt"]),)
    coarse = Seabed.from_bathymetry(
        open_bathymetry(path), along=[(0.0, 172.0), (0.0, 179.0), (2.0, -178.0)], spacing=3e5
    )
    assert coarse.ranges[1] < 3e5


def test_land_gaps_and_the_edge_of_a_grid_are_told_with_the_place(tmp_path):
    longitude = np.arange(170.0, 190.1, 0.5)
    depth = np.full(longitude.size, 500.0)
    depth[longitude == 180.0] = -20.0
    depth[longitude == 185.0] = np.nan
    path = write(tmp_path / "grid.nc", longitude, depth, up=False)
    with pytest.raises(
        InputError, match=r"grid.nc: is land \(\d+.* m high\) at latitude 0.0000, longitude 179.9892, 889"
    ):
        Seabed.from_bathymetry(path, (0.0, 172.0), (0.0, 182.0), spacing=1000.0)
    wide = np.where(np.abs(longitude - 185.0) < 1.1, np.nan, 500.0)
    with pytest.raises(InputError, match=r"has no value at latitude 0\.0000, longitude -17"):
        Seabed.from_bathymetry(
            write(tmp_path / "gap.nc", longitude, wide, up=False), (0.0, 181.5), (0.0, 188.0), spacing=1000.0
        )
    with pytest.raises(InputError, match="lies outside the grid"):
        Seabed.from_bathymetry(path, (0.0, 172.0), (0.0, 150.0))
    with pytest.raises(InputError, match="either start and end"):
        Seabed.from_bathymetry(path, (0.0, 172.0))
    with pytest.raises(InputError, match="spacing is 0 m"):
        Seabed.from_bathymetry(path, (0.0, 172.0), (0.0, 173.0), spacing=0.0)
