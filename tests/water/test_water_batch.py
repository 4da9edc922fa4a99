"""TEOS-10 for many casts at once, held to gsw over the whole oceanographic range and the whole atlas."""

from __future__ import annotations

import gsw
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.water import _kernels_teos10 as kernels
from ocean_sound.water import depth_from_density, speed_of_columns
from ocean_sound.water.batch import ATLAS_PRESSURES, Batch

pytestmark = pytest.mark.kernels

# Rounding: gsw does the same operations in the same order, and only a compiler that fuses some of them can differ.
EXACT = 1e-13


def water(count, seed=1):
    """Absolute Salinity or practical salinity, temperature, pressure: all that the ocean and its margins hold."""
    draw = np.random.default_rng(seed)
    return draw.uniform(0.0, 42.0, count), draw.uniform(-2.0, 40.0, count), draw.uniform(0.0, 8000.0, count)


def casts(seed, latitude, longitude, most=40, deepest=8000.0):
    """Rows of casts at these places, each with pressures that grow, many of them those of the atlas."""
    draw = np.random.default_rng(seed)
    row_size = draw.integers(0, most, len(latitude))
    pressure = [
        np.sort(np.where(draw.random(size) < 0.2, draw.choice(ATLAS_PRESSURES, size), draw.uniform(0.0, deepest, size)))
        for size in row_size
    ]
    salinity, temperature, _ = water(int(row_size.sum()), seed)
    return temperature, salinity, np.concatenate(pressure), row_size


def positions(seed, count):
    """Places all over the Earth, the Baltic and both sides of Panama among them, and some that are not known."""
    draw = np.random.default_rng(seed)
    latitude, longitude = draw.uniform(-90.0, 90.0, count), draw.uniform(-400.0, 400.0, count)
    some = count // 5
    latitude[:some], longitude[:some] = draw.uniform(52.0, 67.0, some), draw.uniform(8.0, 32.0, some)
    latitude[some : 2 * some], longitude[some : 2 * some] = draw.uniform(3.0, 20.0, some), draw.uniform(-101, -67, some)
    latitude[-3], longitude[-2], latitude[-1] = np.nan, np.nan, -88.0
    return latitude, longitude


def by_gsw(temperature, salinity, pressure, row_size, latitude, longitude):
    latitude, longitude = np.repeat(latitude, row_size), np.repeat(longitude, row_size)
    speed = speed_of_columns(temperature, salinity, pressure=pressure, latitude=latitude, longitude=longitude)
    depth = depth_from_density(
        pressure, temperature, salinity, latitude=latitude, longitude=longitude, row_size=row_size
    )
    return depth, speed


def test_conservative_temperature():
    absolute, temperature, pressure = water(2000)
    found = np.empty(2000)
    kernels.conservative_temperatures(absolute, temperature, pressure, found)
    np.testing.assert_allclose(found, gsw.CT_from_t(absolute, temperature, pressure), rtol=EXACT, atol=1e-12)


def test_volume_and_speed():
    absolute, conservative, pressure = water(2000)
    volume, speed = np.empty((2, 2000))
    kernels.volumes_and_speeds(absolute, conservative, pressure, volume, speed)
    np.testing.assert_allclose(volume, gsw.specvol(absolute, conservative, pressure), rtol=EXACT)
    np.testing.assert_allclose(speed, gsw.sound_speed(absolute, conservative, pressure), rtol=EXACT)


def test_printed_check_values():
    # TEOS-10 function pages of gsw_CT_from_t and gsw_sound_speed (version 3.05, 2015).
    absolute, warmth = np.array([34.7118, 34.8915, 35.0256]), np.array([28.7856, 28.4329, 22.8103])
    pressure, found = np.array([10.0, 50.0, 125.0]), np.empty(3)
    kernels.conservative_temperatures(absolute, warmth, pressure, found)
    np.testing.assert_allclose(found, [28.809919826700281, 28.439227816091140, 22.786176893078498], rtol=1e-14)
    volume, speed = np.empty((2, 3))
    kernels.volumes_and_speeds(absolute, warmth, pressure, volume, speed)  # the page takes these as conservative
    np.testing.assert_allclose(speed, [1542.426412426373, 1542.558891663385, 1530.801535436184], rtol=1e-14)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_depth_and_speed_are_those_of_gsw_all_over_the_atlas(seed):
    latitude, longitude = positions(seed, 60)
    columns = casts(seed, latitude, longitude)
    depth, speed = Batch(latitude, longitude).depth_and_speed(*columns)
    expected_depth, expected_speed = by_gsw(*columns, latitude, longitude)
    np.testing.assert_allclose(speed, expected_speed, rtol=EXACT)
    np.testing.assert_allclose(depth, expected_depth, rtol=EXACT, atol=1e-12)


@given(
    st.integers(0, 10**6),
    st.floats(-90.0, 90.0) | st.just(np.nan),
    st.floats(-180.0, 360.0) | st.just(np.nan),
    st.floats(0.5, 11000.0),
)
def test_one_cast_anywhere(seed, latitude, longitude, deepest):
    latitude, longitude = np.array([latitude]), np.array([longitude])
    columns = casts(seed, latitude, longitude, most=6, deepest=deepest)
    depth, speed = Batch(latitude, longitude).depth_and_speed(*columns)
    expected_depth, expected_speed = by_gsw(*columns, latitude, longitude)
    np.testing.assert_allclose(speed, expected_speed, rtol=EXACT)
    np.testing.assert_allclose(depth, expected_depth, rtol=EXACT, atol=1e-12)


def test_a_cast_does_not_depend_on_those_beside_it():
    latitude, longitude = positions(4, 30)
    temperature, salinity, pressure, row_size = casts(4, latitude, longitude)
    depth, speed = Batch(latitude, longitude).depth_and_speed(temperature, salinity, pressure, row_size)
    end = 0
    for index, size in enumerate(row_size.tolist()):
        own, end = slice(end, end + size), end + size
        alone = Batch(latitude[[index]], longitude[[index]]).depth_and_speed(
            temperature[own], salinity[own], pressure[own], row_size[[index]]
        )
        assert np.array_equal(alone[0], depth[own])
        assert np.array_equal(alone[1], speed[own])


def test_gaps_take_the_density_of_the_level_before():
    latitude, longitude = np.array([10.0, 50.0, -30.0]), np.array([-30.0, 20.0, 5.0])
    row_size = np.array([6, 3, 4])
    pressure = np.concatenate([np.arange(1.0, size + 1.0) * 50.0 for size in row_size])
    temperature, salinity = np.full(13, 10.0), np.full(13, 20.0)
    temperature[[0, 3, 12]], salinity[[4, 6, 7, 8]] = np.nan, np.nan
    columns = temperature, salinity, pressure, row_size
    depth, speed = Batch(latitude, longitude).depth_and_speed(*columns)
    expected_depth, expected_speed = by_gsw(*columns, latitude, longitude)
    np.testing.assert_allclose(depth, expected_depth, rtol=EXACT)
    np.testing.assert_allclose(speed, expected_speed, rtol=EXACT, equal_nan=True)
    assert np.isnan(speed).sum() == 7


def test_impossible_values_have_no_speed():
    batch = Batch([45.0], [-20.0])
    temperature = np.array([10.0, 101.0, 10.0, 10.0])
    salinity = np.array([35.0, 35.0, -1.0, 35.0])
    speed = batch.speed(temperature, salinity, np.array([0.0, 0.0, 0.0, 13000.0]), np.array([4]))
    assert np.isfinite(speed).tolist() == [True, False, False, False]


def test_levels_need_not_go_down():
    up = np.array([900.0, 400.0, 20.0, 700.0])
    speed = Batch([45.0], [-20.0]).speed(np.full(4, 9.0), np.full(4, 35.0), up, np.array([4]))
    np.testing.assert_allclose(
        speed,
        speed_of_columns(np.full(4, 9.0), np.full(4, 35.0), pressure=up, latitude=45.0, longitude=-20.0),
        rtol=EXACT,
    )
