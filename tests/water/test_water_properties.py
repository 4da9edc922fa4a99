"""Density, compressibility, impedance, derivatives, absorption at the door, waves."""

from __future__ import annotations

import subprocess
import sys

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.water import (
    OutOfRangeWarning,
    absorption,
    absorption_formulas,
    compressibility,
    density,
    depth_from_pressure,
    equations,
    impedance,
    period,
    pressure_from_depth,
    sound_speed,
    speed_derivative,
    speed_derivatives,
    speed_of_columns,
    wave_number,
    wavelength,
)

NAMES = list(equations())
NEED_VERTICAL = [name for name in NAMES if equations()[name].vertical != "none"]


@settings(max_examples=40, deadline=None)
@given(st.floats(-1.5, 38), st.floats(0.1, 41), st.floats(0, 7900), st.booleans())
def test_newton_laplace(t, s, p, exact):
    """c = 1/sqrt(rho kappa) to 1e-14."""
    speed = speed_of_columns(np.float64(t), np.float64(s), pressure=p, equation="teos10-exact" if exact else "teos10")
    product = density(t, s, pressure=p, exact=exact) * compressibility(t, s, pressure=p, exact=exact)
    assert speed * np.sqrt(product) == pytest.approx(1.0, abs=1e-14)


def test_density_of_standard_sea_water():
    """1027.68 kg/m3 at 5 degC and 35, 1 atmosphere: Fofonoff and Millard (1983), UNESCO 44 (1027.67547, from memory).

    TEOS-10 is about 0.01 kg/m3 from the older equation of state there.
    """
    assert density(5.0, 35.0, pressure=0.0) == pytest.approx(1027.675, abs=0.02)
    assert density(5.0, 35.0, depth=0.0, exact=True) == pytest.approx(1027.675, abs=0.02)


def test_impedance_is_density_times_speed():
    where = {"depth": 500.0, "latitude": 40.0, "longitude": -30.0}
    for name in ("mackenzie", "unesco", "teos10"):
        expected = density(10.0, 35.0, **where) * sound_speed(10.0, 35.0, **where, equation=name)
        assert impedance(10.0, 35.0, **where, equation=name) == pytest.approx(expected, rel=1e-14)
    expected = density(10.0, 35.0, **where, exact=True) * sound_speed(10.0, 35.0, **where, equation="teos10-exact")
    assert impedance(10.0, 35.0, **where, equation="teos10-exact") == pytest.approx(expected, rel=1e-14)


# Derivatives


def numeric(name, by, t, s, vertical, value):
    """Richardson-extrapolated central difference of the speed itself."""
    step = {"temperature": 0.02, "salinity": 0.02, "pressure": 20.0, "depth": 20.0}[by]

    def speed(offset):
        where = {vertical: np.float64(value + offset if by == vertical else value)}
        return speed_of_columns(
            np.float64(t + (offset if by == "temperature" else 0.0)),
            np.float64(s + (offset if by == "salinity" else 0.0)),
            latitude=30.0,
            equation=name,
            **where,
        )

    def central(h):
        return (speed(h) - speed(-h)) / (2.0 * h)

    return (4.0 * central(step / 2.0) - central(step)) / 3.0


@settings(max_examples=40, deadline=None)
@given(
    st.sampled_from(NEED_VERTICAL),
    st.sampled_from(["temperature", "salinity", "pressure", "depth"]),
    st.floats(1, 30),
    st.floats(2, 40),
    st.floats(50, 6000),
)
def test_derivatives_against_differences(name, by, t, s, p):
    depth = depth_from_pressure(p, 30.0)
    vertical, value = ("depth", depth) if by == "depth" else ("pressure", p)
    slope = speed_derivative(t, s, by=by, latitude=30.0, equation=name, **{vertical: value})
    assert slope == pytest.approx(numeric(name, by, t, s, vertical, value), rel=2e-7, abs=2e-9)


@pytest.mark.parametrize("name", ["unesco", "del-grosso"])
@pytest.mark.parametrize(("t", "s", "p"), [(2.0, 35.0, 4000.0), (29.5, 38.0, 0.0), (0.0, 30.0, 9800.0)])
def test_complex_step_is_exact_to_rounding(name, t, s, p):
    """The published polynomials in 40-digit arithmetic, differentiated by mpmath."""
    function = equations()[name].function

    with mpmath.workdps(40):
        exact = mpmath.diff(lambda x: _in_mpmath(function, x, s, p), t)
        salinity = mpmath.diff(lambda x: _in_mpmath(function, t, x, p), s)
    assert speed_derivative(t, s, pressure=p, by="temperature", equation=name) == pytest.approx(float(exact), rel=1e-13)
    assert speed_derivative(t, s, pressure=p, by="salinity", equation=name) == pytest.approx(float(salinity), rel=1e-13)


def _in_mpmath(function, t, s, p):
    """The package's own polynomial on mpmath numbers; numpy's square root is swapped for mpmath's."""
    from unittest import mock

    with mock.patch("ocean_sound.water.unesco.np.sqrt", mpmath.sqrt):
        return function(mpmath.mpf(t), mpmath.mpf(s), mpmath.mpf(p))


def test_derivatives_by_hand():
    """Mackenzie (1981), differentiated by hand; per ITS-90 degree, hence the factor 1.00024."""
    t = 1.00024 * 12.0
    by_temperature = 4.591 - 2 * 5.304e-2 * t + 3 * 2.374e-4 * t**2 - 1.025e-2 * (-1.0) - 7.139e-13 * 1000.0**3
    slopes = speed_derivatives(12.0, 34.0, depth=1000.0, equation="mackenzie")
    assert slopes.temperature == pytest.approx(1.00024 * by_temperature, rel=1e-13)
    assert slopes.salinity == pytest.approx(1.340 - 1.025e-2 * t, rel=1e-13)
    assert slopes.depth == pytest.approx(1.630e-2 + 2 * 1.675e-7 * 1e3 - 3 * 7.139e-13 * t * 1e6, rel=1e-13)
    pressure = pressure_from_depth(1000.0, 45.0)
    metres = depth_from_pressure(pressure + 0.5, 45.0) - depth_from_pressure(pressure - 0.5, 45.0)
    assert slopes.pressure / slopes.depth == pytest.approx(metres, rel=1e-7)


def test_polynomial_and_gibbs_function_slope_alike():
    """Two independent routes to nearly the same water: 1 % in temperature and salinity, 0.5 % in pressure."""
    state = {"pressure": np.linspace(0.0, 5000.0, 11), "latitude": 30.0, "longitude": -40.0}
    near, exact = (speed_derivatives(6.0, 35.0, **state, equation=name) for name in ("teos10", "teos10-exact"))
    np.testing.assert_allclose(near.temperature, exact.temperature, rtol=0.015)
    np.testing.assert_allclose(near.salinity, exact.salinity, rtol=0.03)
    np.testing.assert_allclose(near.pressure, exact.pressure, rtol=0.005)


@pytest.mark.parametrize("name", ["teos10", "teos10-exact", "unesco"])
@pytest.mark.parametrize("salinity", [0.0, 1e-4, 5e-3])
def test_salinity_slope_down_to_fresh_water(name, salinity):
    """One-sided differences of a small step, within the 4e-4 that the docstring grants."""
    h = 1e-5
    ahead, here = (
        speed_of_columns(np.float64(10.0), np.float64(salinity + x), pressure=np.float64(100.0), equation=name)
        for x in (h, 0.0)
    )
    slope = speed_derivative(10.0, salinity, pressure=100.0, by="salinity", equation=name)
    assert slope == pytest.approx((ahead - here) / h, abs=4e-4)


def test_derivative_refusals():
    with pytest.raises(InputError, match="by: 'density' is unknown; known are temperature"):
        speed_derivative(10.0, 35.0, by="density", pressure=0.0)
    with pytest.raises(InputError, match="marczak holds at atmospheric pressure only and has no derivative by depth"):
        speed_derivative(10.0, 0.0, by="depth", pressure=0.0, equation="marczak")
    with pytest.raises(InputError, match="neither pressure"):
        speed_derivatives(10.0, 35.0)
    assert speed_derivative(10.0, 0.0, by="temperature", equation="marczak") == pytest.approx(3.97, abs=0.03)
    assert speed_derivative(10.0, 0.0, by="salinity", equation="marczak") == 0.0


# Waves and absorption


def test_waves():
    assert wavelength(1500.0, 100e3) == 0.015
    assert period(100e3) == 1e-5
    assert wave_number([1500.0, 1450.0], 750.0) == pytest.approx([np.pi, 2 * np.pi * 750 / 1450])
    with pytest.raises(InputError, match="frequency: 0 is impossible"):
        period(0.0)
    with pytest.raises(InputError, match="speed: -3 is impossible"):
        wavelength(-3.0, 10.0)


def test_absorption_at_the_door():
    assert absorption(1e5, 10.0, 35.0, pressure=0.0) == absorption(1e5, 10.0, 35.0, depth=0.0)
    table = absorption([[1e4], [1e5]], [5.0, 10.0, np.nan], 35.0, depth=100.0, formula="thorp")
    assert table.shape == (2, 3)
    assert np.isnan(table[:, 2]).all()
    with pytest.raises(InputError, match="formula: 'guess' is unknown; known are francois-garrison"):
        absorption(1e5, 10.0, 35.0, depth=0.0, formula="guess")
    with pytest.raises(InputError, match="absorption by francois-garrison: neither pressure"):
        absorption(1e5, 10.0, 35.0)
    with pytest.raises(InputError, match="frequency: -1 is impossible"):
        absorption(-1.0, 10.0, 35.0, depth=0.0)
    with pytest.raises(InputError, match="ph: 15 is impossible"):
        absorption(1e5, 10.0, 35.0, depth=0.0, ph=15.0)
    with pytest.warns(OutOfRangeWarning, match="francois-garrison: frequency 38 Hz is outside its range 200 to 1e"):
        absorption(38.0, 10.0, 35.0, depth=0.0)
    assert set(absorption_formulas()) == {"francois-garrison", "ainslie-mccolm", "thorp", "thorp-metric"}


@settings(max_examples=40, deadline=None)
@given(
    st.floats(200, 1e6), st.floats(0, 30), st.floats(5, 40), st.floats(0, 6000),
    st.sampled_from(["francois-garrison", "ainslie-mccolm", "thorp", "thorp-metric"]),
)  # fmt: skip
def test_absorption_is_positive_and_grows_with_frequency(f, t, s, z, formula):
    here = absorption(f, t, s, depth=z, formula=formula)
    assert here > 0.0
    assert absorption(min(f * 1.01, 1e6), t, s, depth=z, formula=formula) >= here


def test_absorption_anchor():
    """Thorp's fit for the deep sea at 4 degC and Francois and Garrison's formula agree within a third from 1 to 20 kHz.

    Common practice takes the one for the other there; a slip of units would be a factor of 9 or 1000.
    """
    f = np.geomspace(1e3, 2e4, 9)
    ratio = absorption(f, 4.0, 35.0, depth=1000.0, formula="thorp") / absorption(f, 4.0, 35.0, depth=1000.0)
    assert (np.abs(np.log(ratio)) < np.log(1.35)).all()


def test_importing_water_is_light():
    code = (
        "import sys, ocean_sound.water as w; w.sound_speed(10.0, 35.0, pressure=0.0);"
        "print([m for m in ('xarray', 'pandas', 'scipy', 'matplotlib', 'numba', 'dask') if m in sys.modules])"
    )
    result = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert result.stdout.strip() == "[]"
