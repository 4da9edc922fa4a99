"""Sections 2 and 6: c = 1/sqrt(rho kappa), and absorption."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.water import absorption, compressibility, density, sound_speed
from ocean_sound.water import absorption_formulas as formulas
from ocean_sound.water.absorption import _water_term

pytestmark = pytest.mark.filterwarnings("ignore::ocean_sound.water.OutOfRangeWarning")


def newton_laplace(*, exact):
    """Largest |c sqrt(rho kappa) - 1| over random water."""
    random = np.random.default_rng(1)
    n = 20_000
    water = (random.uniform(-1.5, 38, n), random.uniform(0.1, 42, n))
    pressure = random.uniform(0, 8000, n)
    speed = sound_speed(*water, pressure=pressure, equation="teos10-exact" if exact else "teos10")
    rho, kappa = (f(*water, pressure=pressure, exact=exact) for f in (density, compressibility))
    return np.abs(speed * np.sqrt(rho * kappa) - 1.0).max()


@pytest.mark.published("nl.75term")
def test_newton_laplace_of_the_polynomial(check):
    check.agrees(newton_laplace(exact=False))


@pytest.mark.published("nl.exact")
def test_newton_laplace_of_the_gibbs_function(check):
    check.agrees(newton_laplace(exact=True))


@pytest.mark.published("abs.fg.f")
def test_francois_garrison(check):
    water = (check["T"], check["S"])
    check.agrees(absorption(1000.0 * check["f"], *water, depth=check["D"], ph=check["pH"]))


@pytest.mark.published("abs.am")
def test_ainslie_mccolm(check):
    water = (check["T"], check["S"])
    depth = 1000.0 * check["z"]
    check.agrees(absorption(1000.0 * check["f"], *water, depth=depth, ph=check["pH"], formula="ainslie-mccolm"))


@pytest.mark.published("abs.thorp67")
def test_thorp(check):
    # The check is in dB per kiloyard, as in the paper; ours is dB/km.
    check.agrees(0.9144 * absorption(1000.0 * check["f"], 4.0, 35.0, depth=1000.0, formula="thorp"))


@pytest.mark.published("abs.thorpJ")
def test_thorp_metric(check):
    check.agrees(absorption(1000.0 * check["f"], 4.0, 35.0, depth=1000.0, formula="thorp-metric"))


@pytest.mark.published("abs.fg.water20")
def test_water_term_is_continuous(check):
    check.agrees(_water_term(np.nextafter(20.0, 21.0)) - _water_term(20.0))


@pytest.mark.published("abs.fresh20")
def test_fresh_water(check):
    check.agrees(absorption(1000.0 * check["f"], check["T"], check["S"], depth=0.0))


def test_ainslie_mccolm_stays_near_francois_garrison():
    """The paper claims 10 %; 9.3 % was found for salinity 35, 0 to 20 degC, 0 to 3000 m, 0.1 to 1000 kHz."""
    f, t, d = np.meshgrid(np.geomspace(200.0, 1e6, 41), np.linspace(0, 20, 11), np.linspace(0, 3000, 7))
    full = absorption(f, t, 35.0, depth=d)
    simple = absorption(f, t, 35.0, depth=d, formula="ainslie-mccolm")
    assert np.abs(simple / full - 1.0).max() < 0.10


# Misprints in circulation


def test_the_continuity_guard_catches_the_misprints():
    """4.397e-4 for 4.937e-4, and -4.9e-10 for -6.5e-10, break the joint at 20 degC (1.0e-7 as printed)."""
    assert abs(4.397e-4 - 4.937e-4) > 1e-5
    assert abs((-4.9e-10 + 6.5e-10) * 20.0**3) > 1e-6


def test_misprints_of_ainslie_mccolm_are_not_ours():
    """exp(-T/27 + z/17) would raise the water term with depth; exp(pH - 8)/0.56 is not 1 at pH 8."""
    shallow, deep = (absorption(1e6, 10.0, 0.0, depth=d, formula="ainslie-mccolm") for d in (0.0, 3000.0))
    assert deep == pytest.approx(shallow * np.exp(-3.0 / 17.0), rel=1e-12)
    function = formulas()["ainslie-mccolm"].function
    f1 = 0.78 * np.exp(10.0 / 26.0)
    boric = 0.106 * f1 / (f1**2 + 1.0)
    drop = function(1.0, 10.0, 35.0, 0.0, 8.0) - function(1.0, 10.0, 35.0, 0.0, 8.0 - 0.56)
    assert drop == pytest.approx(boric * (1.0 - np.exp(-1.0)), rel=1e-12)
