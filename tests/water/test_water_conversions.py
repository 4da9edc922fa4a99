"""Depth and pressure, salinities, temperature scales."""

from __future__ import annotations

import itertools

import gsw
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.water import (
    absolute_salinity,
    conductivity_from_salinity,
    conservative_temperature,
    depth_areas,
    depth_from_density,
    depth_from_pressure,
    depth_of_columns,
    pressure_from_depth,
    pressure_of_columns,
    salinity_from_conductivity,
    t68_from_t90,
    t90_from_t48,
    t90_from_t68,
)

latitudes = st.floats(-90, 90)


@settings(max_examples=60, deadline=None)
@given(st.floats(0, 11000), latitudes, st.sampled_from(["teos10", "unesco", "saunders"]))
def test_depth_and_back(depth, latitude, method):
    pressure = pressure_from_depth(depth, latitude, method=method)
    assert depth_from_pressure(pressure, latitude, method=method) == pytest.approx(depth, abs=1e-6)


@settings(max_examples=40, deadline=None)
@given(st.floats(0, 9990), latitudes, st.sampled_from(["teos10", "unesco", "saunders", "leroy-parthiot"]))
def test_depth_grows_with_pressure_and_shrinks_with_gravity(pressure, latitude, method):
    here = depth_from_pressure(pressure, latitude, method=method)
    assert depth_from_pressure(pressure + 1.0, latitude, method=method) > here
    assert depth_from_pressure(pressure, -latitude, method=method) == here
    assert (
        depth_from_pressure(pressure, 90.0, method=method) <= here <= depth_from_pressure(pressure, 0.0, method=method)
    )


def test_the_methods_agree_within_their_water():
    """All mean an ocean of 0 degC and 35; their equations of state differ (by 1.08 m at 10000 dbar, 30 degrees)."""
    pressure = np.linspace(0, 6000, 61)
    reference = depth_from_pressure(pressure, 30.0)
    for method, band in {"unesco": 0.25, "saunders": 0.5, "leroy-parthiot": 0.25}.items():
        assert np.abs(depth_from_pressure(pressure, 30.0, method=method) - reference).max() < band


def test_zero_is_zero():
    assert str(depth_from_pressure(0.0, 10.0)) == "0.0"
    assert str(pressure_from_depth(0.0, 10.0)) == "0.0"


def test_unknown_latitudes():
    assert depth_from_pressure(5000.0) == depth_from_pressure(5000.0, 45.0)
    here = depth_from_pressure([5000.0, 5000.0], [np.nan, 10.0])
    np.testing.assert_array_equal(here, [depth_from_pressure(5000.0), depth_from_pressure(5000.0, 10.0)])
    np.testing.assert_array_equal(depth_of_columns(np.array([5000.0, -1.0]))[:1], here[:1])
    assert depth_of_columns(np.array([-1.0]))[0] < 0.0
    assert pressure_of_columns(np.array([100.0]), np.array([np.nan]))[0] == pressure_from_depth(100.0, 45.0)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: depth_from_pressure(-0.1), "pressure: -0.1 is impossible"),
        (lambda: pressure_from_depth(-0.1), "depth: -0.1 is impossible"),
        (lambda: depth_from_pressure(10.0, 91.0), "latitude: 91 is impossible"),
        (lambda: depth_from_pressure(10.0, method="guess"), "method: 'guess' is unknown; known are teos10, unesco"),
        (lambda: depth_from_pressure(10.0, area="baltic"), "area: 'baltic' goes with method 'leroy-parthiot' only"),
        (lambda: depth_from_pressure(10.0, method="leroy-parthiot", area="pond"), "area: 'pond' is unknown; known are"),
        (
            lambda: depth_from_pressure(10.0, method="leroy-parthiot", area="mediterranean"),
            "depth correction of 'mediterranean' is not trustworthy .* depth_from_density",
        ),
        (lambda: salinity_from_conductivity(42.9, 15.0, 0.0), "conductivity: 42.9 is impossible .*mS/cm"),
        (lambda: absolute_salinity(-1.0, 0.0), "salinity: -1 is impossible"),
        (lambda: conservative_temperature(35.0, 150.0, 0.0), "temperature: 150 is impossible"),
    ],
)
def test_refusals(call, message):
    with pytest.raises(InputError, match=message):
        call()


def test_areas():
    assert "sea-of-japan" in depth_areas()
    here = depth_from_pressure(100.0, 58.0, method="leroy-parthiot", area="baltic")
    assert here == pytest.approx(depth_from_pressure(100.0, 58.0, method="leroy-parthiot") + 1.8, abs=1e-12)
    # The pressure of these two seas is sound, only their depth is not; a dynamic-height estimate sides with it
    # (-1.11 m, +1.51 m).
    for area, metres in {"mediterranean": -1.11, "sea-of-japan": 1.51}.items():
        standard, own = (
            pressure_from_depth(2000.0, 40.0, method="leroy-parthiot", area=name) for name in ("standard", area)
        )
        slope = (depth_from_pressure(2010.0, 40.0) - depth_from_pressure(2000.0, 40.0)) / 10.0
        assert (standard - own) * slope == pytest.approx(metres, abs=0.08)


# Depth by the cast's own density


def test_standard_ocean_is_the_standard_depth():
    """Water of 35.16504 g/kg and 0 degC (Conservative Temperature) is what the TEOS-10 depth assumes."""
    pressure = np.array([0.5, 3.0, 250.0, 1000.0, 5000.0])
    temperature = gsw.t_from_CT(35.16504, 0.0, pressure)
    depth = depth_from_density(pressure, temperature, np.full(5, 35.0), latitude=33.0)
    np.testing.assert_allclose(depth, depth_from_pressure(pressure, 33.0), atol=1e-9)


def test_uniform_fresh_water_against_quadrature():
    """Depth solves the integral of v dp = the integral of g dz, here by scipy's quadrature and root finder."""
    from scipy.integrate import quad
    from scipy.optimize import brentq

    latitude, temperature = 53.0, 4.0
    pressure = np.linspace(0.0, 1500.0, 301)
    depth = depth_from_density(pressure, np.full(301, temperature), np.zeros(301), latitude=latitude)

    def volume(p):
        return gsw.specvol(0.0, gsw.CT_from_t(0.0, temperature, p), p)

    surface = gsw.grav(latitude, 0.0)
    for index in (10, 100, 300):
        work = 1e4 * quad(volume, 0.0, pressure[index], epsabs=0, epsrel=1e-12)[0]
        # Gravity grows by 2.26e-7 of itself per metre of depth (TEOS-10 manual, appendix D).
        true = brentq(lambda z, work=work: surface * (z + 0.5 * 2.26e-7 * z * z) - work, 0.0, 3000.0, xtol=1e-10)
        assert depth[index] == pytest.approx(true, abs=2e-5)
    # Some 2.7 % deeper than the ocean would be: 40 m at the bottom of the deepest lake.
    assert depth[300] - depth_from_pressure(1500.0, latitude) == pytest.approx(40.0, abs=3.0)


def test_many_casts_are_as_one_cast_each():
    random = np.random.default_rng(5)
    rows = np.array([4, 0, 7, 1, 3])
    casts = [np.sort(random.uniform(0, 4000, n)) for n in rows]
    p = np.concatenate(casts)
    t, s = random.uniform(0, 25, p.size), random.uniform(0, 38, p.size)
    together = depth_from_density(p, t, s, latitude=20.0, row_size=rows)
    edges = np.concatenate([[0], np.cumsum(rows)])
    for begin, end in itertools.pairwise(edges):
        alone = depth_from_density(p[begin:end], t[begin:end], s[begin:end], latitude=20.0)
        np.testing.assert_allclose(together[begin:end], alone, rtol=1e-12)


def test_gaps_in_a_cast():
    p = np.array([10.0, 20.0, np.nan, 40.0, 50.0, 10.0, 20.0])
    t = np.array([np.nan, 8.0, 8.0, np.nan, 8.0, np.nan, np.nan])
    s = np.full(7, 10.0)
    depth = depth_from_density(p, t, s, latitude=50.0, row_size=[5, 2])
    full = depth_from_density(np.array([10.0, 20.0, 40.0, 50.0]), np.full(4, 8.0), np.full(4, 10.0), latitude=50.0)
    assert np.isnan(depth[2])
    np.testing.assert_allclose(depth[[0, 1, 3, 4]], full, atol=1e-4)
    np.testing.assert_allclose(depth[5:], depth_from_pressure([10.0, 20.0], 50.0), atol=1e-12)


def test_depth_from_density_refuses_columns_that_do_not_fit():
    p = np.arange(3.0)
    with pytest.raises(InputError, match="columns of one length"):
        depth_from_density(p, p[:2], p)
    with pytest.raises(InputError, match="the rows add up to 2, the columns have 3 levels"):
        depth_from_density(p, p, p, row_size=[1, 1])
    assert depth_from_density([], [], []).shape == (0,)


# Salinity and temperature


@settings(max_examples=40, deadline=None)
@given(st.floats(0.1, 41), st.floats(-1, 34), st.floats(0, 6000))
def test_conductivity_and_back(salinity, temperature, pressure):
    conductivity = conductivity_from_salinity(salinity, temperature, pressure)
    assert salinity_from_conductivity(conductivity, temperature, pressure) == pytest.approx(salinity, abs=1e-8)


def test_reference_salinity():
    """35.16504 g/kg at practical salinity 35: IOC et al. (2010), TEOS-10 manual, section 2.4."""
    assert absolute_salinity(35.0, 0.0) == pytest.approx(35.16504, abs=1e-12)
    assert absolute_salinity(35.0, 0.0, latitude=30.0) == absolute_salinity(35.0, 0.0)
    assert absolute_salinity(35.0, 2000.0, latitude=40.0, longitude=200.0) > absolute_salinity(35.0, 0.0) + 0.005


@given(st.floats(-2, 40))
def test_scales_and_back(temperature):
    assert t90_from_t68(t68_from_t90(temperature)) == pytest.approx(temperature, abs=1e-12)
    assert abs(t90_from_t48(temperature) - t90_from_t68(temperature)) < 0.012


def test_scales_take_raw_columns():
    np.testing.assert_array_equal(t90_from_t68([-999.0, np.nan]), [-999.0 / 1.00024, np.nan])
