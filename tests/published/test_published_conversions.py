"""Sections 3, 4 and 5: pressure and depth, practical salinity, temperature scales."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.water import (
    conductivity_from_salinity,
    depth_from_pressure,
    pressure_from_depth,
    salinity_from_conductivity,
    sound_speed,
    t90_from_t48,
    t90_from_t68,
)
from ocean_sound.water.vertical import gravity_unesco


@pytest.mark.published("z.unesco44")
def test_unesco_depth(check):
    check.agrees(depth_from_pressure(check["P"], check["latitude"], method="unesco"))


@pytest.mark.published("z.saunders81")
def test_saunders_depth(check):
    check.agrees(depth_from_pressure(check["P"], check["latitude"], method="saunders"))


@pytest.mark.published("z.lp98.consistency")
def test_leroy_parthiot_depth(check):
    check.agrees(depth_from_pressure(100.0 * check["P"], check["latitude"], method="leroy-parthiot"))


@pytest.mark.published("p.lp98.Z")
def test_leroy_parthiot_pressure(check):
    check.agrees(pressure_from_depth(check["Z"], check["latitude"], method="leroy-parthiot") / 100.0)


@pytest.mark.published("p.lp98.roundtrip")
def test_leroy_parthiot_closes(check):
    latitude, depth = np.meshgrid(np.linspace(-90, 90, 37), np.linspace(0, 10000, 201))
    pressure = pressure_from_depth(depth, latitude, method="leroy-parthiot")
    check.agrees(np.abs(depth_from_pressure(pressure, latitude, method="leroy-parthiot") - depth).max())


@pytest.mark.published("z.gsw")
def test_teos10_depth(check):
    # The library's heights are negative downward; a check of ours is a depth.
    sign = np.sign(check.expected)
    check.agrees(sign * depth_from_pressure(check["p"], check["latitude"]))


@pytest.mark.published("p.gsw")
def test_teos10_pressure(check):
    check.agrees(pressure_from_depth(-check["z"], check["latitude"]))


@pytest.mark.published("sp.gsw")
def test_salinity_from_conductivity(check):
    check.agrees(salinity_from_conductivity(check["C"] / 10.0, check["t"], check["p"]))


@pytest.mark.published("sp.c3515")
def test_conductivity_of_standard_sea_water(check):
    check.agrees(10.0 * conductivity_from_salinity(check["SP"], check["T"], check["p"]))


@pytest.mark.parametrize(
    ("ratio", "temperature", "pressure", "expected"),
    [(1.0, 15.0, 0.0, 35.0), (1.2, 20.0, 2000.0, 37.245628), (0.65, 5.0, 1500.0, 27.995347)],
)
def test_practical_salinity_of_the_unesco_report(ratio, temperature, pressure, expected):
    """Fofonoff and Millard (1983), UNESCO 44: conductivity ratios at IPTS-68 (inputs from memory, results printed).

    One copy prints 29.995347 for the third.
    """
    value = salinity_from_conductivity(ratio * 4.2914, t90_from_t68(temperature), pressure)
    assert value == pytest.approx(expected, abs=6e-7)


@pytest.mark.published("t.48to90")
def test_its90_from_ipts48(check):
    check.agrees(t90_from_t48(check["t48"]))


@pytest.mark.published("t.68to90")
def test_its90_from_ipts68(check):
    check.agrees(t90_from_t68(check["t68"]))


@pytest.mark.published("t.effect20")
def test_effect_of_the_temperature_scale(check):
    given_its90 = sound_speed(20.0, 35.0, pressure=0.0, equation="unesco-ipts68")
    check.agrees(given_its90 - sound_speed(t90_from_t68(20.0), 35.0, pressure=0.0, equation="unesco-ipts68"))


# Misprints in circulation


def test_the_two_gravities_are_one():
    """5.3024e-3 s2 - 5.9e-6 sin2(2 lat) is 5.2788e-3 s2 + 2.36e-5 s4, exactly; a minus there is a sign error."""
    latitude = np.deg2rad(np.linspace(-90, 90, 181))
    s2 = np.sin(latitude) ** 2
    other = 9.780318 * (1.0 + 5.3024e-3 * s2 - 5.9e-6 * np.sin(2.0 * latitude) ** 2)
    np.testing.assert_allclose(gravity_unesco(np.rad2deg(latitude)), other, rtol=1e-15)
    misprint = 9.780318 * (1.0 + 5.2788e-3 * s2 - 2.36e-5 * s2**2)
    assert np.abs(misprint - other).max() > 4e-4


def test_leroy_parthiot_is_the_unesco_depth_in_megapascal():
    """With -2.2512e-1; the widely copied -2.512e-1 is 26.6 m wrong at 100 MPa and 30 degrees."""
    pressure = np.linspace(0, 10000, 101)
    for latitude in (0.0, 30.0, -60.0, 90.0):
        np.testing.assert_allclose(
            depth_from_pressure(pressure, latitude, method="leroy-parthiot"),
            depth_from_pressure(pressure, latitude, method="unesco"),
            rtol=1e-13,
        )
    misprint = (-2.512e-1 + 2.2512e-1) * 100.0**2 / (gravity_unesco(30.0) + 1.092e-2)
    assert misprint == pytest.approx(-26.6, abs=0.05)


@pytest.mark.parametrize(
    ("area", "latitude", "deepest", "closes"),
    [
        ("common-ocean", 30.0, 10000.0, 0.075),
        ("north-east-atlantic", 32.0, 5000.0, 0.2),
        ("antarctic", -60.0, 8000.0, 0.175),
        ("red-sea", 20.0, 3000.0, 0.06),
        ("arctic", 80.0, 5500.0, 0.06),
        ("sulu-sea", 8.0, 5500.0, 0.165),
        ("halmahera", 1.0, 2100.0, 0.035),
        ("celebes-weber", 4.0, 5500.0, 0.025),
        ("black-sea", 43.0, 2200.0, 0.185),
        ("baltic", 58.0, 460.0, 0.035),
    ],
)
def test_area_corrections_close(area, latitude, deepest, closes):
    """Leroy and Parthiot (1998): depth and pressure of an area are two formulas; they close within a known spread.

    At a latitude of the area and over the depths it has (from memory, rounded): elsewhere a correction means nothing.
    """
    depth = np.linspace(0, deepest, 101)
    pressure = pressure_from_depth(depth, latitude, method="leroy-parthiot", area=area)
    back = depth_from_pressure(pressure, latitude, method="leroy-parthiot", area=area)
    assert np.abs(back - depth).max() <= closes
