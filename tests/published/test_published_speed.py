"""Section 1: the speed of sound. Sources stand with each value in values.json."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.water import equations, sound_speed, t90_from_t68
from ocean_sound.water.bilaniuk_wong import bilaniuk_wong
from ocean_sound.water.del_grosso import DBAR_PER_KG_CM2
from ocean_sound.water.leroy import leroy_as_printed

EQUATIONS = equations()
# Extrapolated on purpose, or beyond the range: the values are still the formula's.
pytestmark = pytest.mark.filterwarnings("ignore::ocean_sound.water.OutOfRangeWarning")


def through_the_door(name, t68, salinity, **vertical):
    """The same through `sound_speed`, which takes ITS-90."""
    return sound_speed(t90_from_t68(t68), salinity, equation=name, **vertical)


@pytest.mark.published("ss.unesco44.svel", "ss.unesco44.tab")
def test_unesco(check):
    check.agrees(EQUATIONS["unesco-ipts68"].function(check["T"], check["S"], check["P"]))
    check.agrees(through_the_door("unesco-ipts68", check["T"], check["S"], pressure=check["P"]))


@pytest.mark.published("ss.unesco44.trap")
def test_unesco_given_its90(check):
    check.agrees(sound_speed(check["T"], check["S"], pressure=check["P"], equation="unesco-ipts68"))


@pytest.mark.published("ss.wz_unesco")
def test_wong_zhu_unesco(check):
    check.agrees(sound_speed(check["T"], check["S"], pressure=check["P"], equation="unesco"))


@pytest.mark.published("ss.delgrosso68")
def test_del_grosso(check):
    pressure = check["P"] * DBAR_PER_KG_CM2
    check.agrees(EQUATIONS["del-grosso-ipts68"].function(check["T"], check["S"], pressure))
    check.agrees(through_the_door("del-grosso-ipts68", check["T"], check["S"], pressure=pressure))


@pytest.mark.published("ss.wz_delgrosso")
def test_wong_zhu_del_grosso(check):
    pressure = check["P"] * DBAR_PER_KG_CM2
    check.agrees(sound_speed(check["T"], check["S"], pressure=pressure, equation="del-grosso"))


@pytest.mark.published("ss.wz.vs.orig.unesco")
def test_wong_zhu_follows_the_unesco_original(check):
    s, t, p = np.meshgrid(np.linspace(0, 40, 41), np.linspace(0, 40, 41), np.linspace(0, 10000, 51), indexing="ij")
    difference = EQUATIONS["unesco"].function(t, s, p) - EQUATIONS["unesco-ipts68"].function(1.00024 * t, s, p)
    check.agrees(np.abs(difference).max())


@pytest.mark.published("ss.wz.vs.orig.delgrosso")
def test_wong_zhu_follows_the_del_grosso_original(check):
    s, t, p = np.meshgrid(np.linspace(30, 40, 21), np.linspace(0, 30, 31), np.linspace(0, 9806.65, 51), indexing="ij")
    difference = EQUATIONS["del-grosso"].function(t, s, p) - EQUATIONS["del-grosso-ipts68"].function(1.00024 * t, s, p)
    check.agrees(np.abs(difference).max())


@pytest.mark.published("ss.mackenzie")
def test_mackenzie(check):
    check.agrees(EQUATIONS["mackenzie"].function(check["T"], check["S"], check["D"]))
    check.agrees(through_the_door("mackenzie", check["T"], check["S"], depth=check["D"]))


@pytest.mark.published("ss.coppens")
def test_coppens(check):
    check.agrees(through_the_door("coppens", check["T"], check["S"], depth=check["D"]))


@pytest.mark.published("ss.medwin")
def test_medwin(check):
    check.agrees(through_the_door("medwin", check["T"], check["S"], depth=check["D"]))


@pytest.mark.published("ss.leroy08")
def test_leroy(check):
    check.agrees(leroy_as_printed(check["T"], check["S"], check["Z"], check["latitude"]))
    through = sound_speed(check["T"], check["S"], depth=check["Z"], latitude=check["latitude"], equation="leroy")
    if check["latitude"] >= 0:
        check.agrees(through)
    else:  # the value keeps the sign of a southern latitude; we take gravity to be alike on both hemispheres
        term = 1.2e-6 * check["Z"] * 2.0 * abs(check["latitude"])
        check.agrees(through - term)


@pytest.mark.published("ss.teos10.poly75")
def test_teos10_polynomial(check):
    # The table gives Absolute Salinity and Conservative Temperature; we take practical salinity and in-situ
    # temperature.
    import gsw

    temperature = gsw.t_from_CT(check["SA"], check["CT"], check["p"])
    value = sound_speed(temperature, gsw.SP_from_SR(check["SA"]), pressure=check["p"], equation="teos10")
    check.agrees(value)


@pytest.mark.published("ss.teos10.exact")
def test_teos10_exact(check):
    import gsw

    value = sound_speed(check["t"], gsw.SP_from_SR(check["SA"]), pressure=check["p"], equation="teos10-exact")
    check.agrees(value)


@pytest.mark.published("pw.bw112", "pw.bw148", "pw.bw36")
def test_bilaniuk_wong(check):
    points = int(check.id.split(".")[1].removeprefix("bw"))
    check.agrees(bilaniuk_wong(check["T"], points=points))
    if points == 148:
        check.agrees(sound_speed(check["T"], 0.0, equation="bilaniuk-wong"))


@pytest.mark.published("pw.marczak")
def test_marczak(check):
    check.agrees(sound_speed(check["T"], 0.0, equation="marczak"))


@pytest.mark.published("pw.belogolskii")
def test_belogolskii(check):
    pressure = (check["P"] - 0.101325) * 100.0
    check.agrees(sound_speed(check["T"], 0.0, pressure=pressure, equation="belogolskii"))


@pytest.mark.published("pw.cross")
def test_pure_water_equations_agree(check):
    t = np.linspace(0, 40, 4001)
    check.agrees(np.abs(EQUATIONS["bilaniuk-wong"].function(t) - EQUATIONS["marczak"].function(t)).max())


@pytest.mark.published("pw.iapws95.1atm")
def test_fresh_water_against_iapws95(check):
    """IAPWS-95 is not ours: a band only. Fits to measurements lie within 0.03 m/s of it, Marczak's 0.01 higher.

    The Gibbs function of TEOS-10 has a simpler part for pure water, 0.015 m/s from it.
    """
    for name, band in {"bilaniuk-wong": 0.03, "marczak": 0.04, "unesco": 0.03, "teos10-exact": 0.015}.items():
        value = sound_speed(check["T"], 0.0, pressure=0.0, equation=name)
        assert value == pytest.approx(check.expected, abs=band), name


@pytest.mark.published("pw.iapws95.T300")
def test_fresh_water_against_the_iapws95_release(check):
    """Table 7 of the release: 300 K, 996.556 kg/m3: the pressure of the atmosphere within 0.003 MPa (0.004 m/s)."""
    assert sound_speed(check["T"] - 273.15, 0.0, equation="bilaniuk-wong") == pytest.approx(check.expected, abs=0.03)
    value = sound_speed(check["T"] - 273.15, 0.0, pressure=0.0, equation="teos10-exact")
    assert value == pytest.approx(check.expected, abs=0.015)


@pytest.mark.published("ss.lovett78")
def test_teos10_against_lovett(check):
    check.agrees(sound_speed(check["T"], check["S"], pressure=check["P"]))


def test_equations_side_by_side(cross_model):
    columns = cross_model["columns"]
    names = columns[2:]
    for row in cross_model["rows"]:
        state = dict(zip(columns, row, strict=True))
        for name in names:
            temperature = state["temperature"]
            if name == "mackenzie":  # the table puts its temperature into the formula as it is, for IPTS-68
                temperature = t90_from_t68(temperature)
            value = sound_speed(temperature, 35.0, pressure=state["pressure"], latitude=45.0, equation=name)
            assert value == pytest.approx(state[name], abs=0.51e-4), (name, state)


def test_unesco_runs_fast_at_depth(cross_model):
    """0.5 to 1.3 m/s fast against Del Grosso and TEOS-10 from 2000 dbar down: the sign and size, not equality."""
    deep = [row for row in cross_model["rows"] if row[1] >= 2000]
    assert len(deep) == 4
    for temperature, pressure, *_ in deep:
        unesco = sound_speed(temperature, 35.0, pressure=pressure, equation="unesco-ipts68")
        for other in ("del-grosso", "teos10", "teos10-exact"):
            bias = unesco - sound_speed(temperature, 35.0, pressure=pressure, equation=other)
            assert 0.4 < bias < 1.35, (other, pressure)


def test_millero_li_takes_the_bias_away(cross_model):
    for temperature, pressure, *_ in cross_model["rows"]:
        if pressure >= 2000:
            corrected = sound_speed(temperature, 35.0, pressure=pressure, equation="unesco-millero-li")
            assert abs(corrected - sound_speed(temperature, 35.0, pressure=pressure, equation="del-grosso")) < 0.25


def test_standards_for_fresh_water_under_pressure_disagree():
    """TEOS-10 is 0.8 to 1.2 m/s above Belogol'skii at 0 degC, 10 to 30 MPa; 0.24 at 10 degC and 30 MPa."""
    for pressure in (1000.0, 2000.0, 3000.0):
        difference = sound_speed(0.0, 0.0, pressure=pressure, equation="teos10-exact") - sound_speed(
            0.0, 0.0, pressure=pressure, equation="belogolskii"
        )
        assert 0.7 < difference < 1.3
    difference = sound_speed(10.0, 0.0, pressure=3000.0, equation="teos10-exact") - sound_speed(
        10.0, 0.0, pressure=3000.0, equation="belogolskii"
    )
    assert difference == pytest.approx(0.24, abs=0.03)


def test_millero_li_overcorrects_warm_water():
    """By 1.9 m/s against Belogol'skii at 40 degC and 300 bar; hence 'cold water only'."""
    warm = {"temperature": 39.99, "salinity": 0.0, "pressure": 3000.0}
    difference = sound_speed(**warm, equation="belogolskii") - sound_speed(**warm, equation="unesco-millero-li")
    assert difference == pytest.approx(1.9, abs=0.15)


def test_wong_zhu_in_fresh_water_follows_bilaniuk_wong():
    t = np.linspace(0, 40, 401)
    difference = sound_speed(t, 0.0, pressure=0.0, equation="unesco") - sound_speed(t, 0.0, equation="bilaniuk-wong")
    assert np.abs(difference).max() < 0.001 + 5e-4
