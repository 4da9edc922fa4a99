"""Noise of the sea against physics, against Wenz's own rule, and against closed forms of bands."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.errors import InputError
from ocean_sound.sensors.noise import NoiseSpectrum, ambient_noise, ambient_noise_parts, band_level, power_sum


def test_thermal_part_is_that_of_mellen():
    """4 pi K T rho f²/c (Mellen 1952, JASA 24:478), here at 10 degC: molecules alone set it."""
    f = np.array([1e4, 1e5, 5e5])
    pressure2 = 4 * np.pi * 1.380649e-23 * 283.15 * 1027.0 * f**2 / 1490.0 * 1e12
    found = ambient_noise_parts(f, wind_speed=0.0)["thermal"]
    assert found == pytest.approx(10 * np.log10(pressure2), abs=0.5)


def test_wind_part_lies_a_little_above_the_rule_of_fives():
    """Wenz (1962, JASA 34:1936; from memory): 51 dB at 1 kHz and 5 knots, 5 dB more for each doubling of the wind from
    2.5 to 40 knots, 5 dB less for each octave from 500 Hz to 5 kHz. The fit is known to be above it, by 2 to 10 dB
    up to 20 knots."""
    for knots in (5.0, 10.0, 20.0):
        for f in (500.0, 1000.0, 2000.0, 5000.0):
            rule = 51.0 + 5.0 * np.log2(knots / 5.0) - 5.0 * np.log2(f / 1000.0)
            found = float(ambient_noise_parts(f, wind_speed=knots * 0.514444)["wind"])
            assert 1.5 < found - rule < 9.5


def test_each_part_leads_where_it_should():
    """Turbulence below 10 Hz, shipping to some hundred Hz, wind to 100 kHz, thermal above (Wenz 1962)."""
    for f, name in ((3.0, "turbulence"), (60.0, "shipping"), (5000.0, "wind"), (5e5, "thermal")):
        parts = ambient_noise_parts(f, wind_speed=5.0)
        assert max(parts, key=lambda part: float(parts[part])) == name


def test_the_whole_is_the_sum_of_powers():
    parts = ambient_noise_parts([10.0, 300.0, 2e4], wind_speed=[0.0, 8.0, 15.0], shipping=0.2)
    whole = 10 * np.log10(sum(10 ** (part / 10) for part in parts.values()))
    assert ambient_noise([10.0, 300.0, 2e4], wind_speed=[0.0, 8.0, 15.0], shipping=0.2) == pytest.approx(whole)


def test_band_of_a_spectrum_that_falls_with_frequency_squared():
    """The integral of A/f² is A (1/low - 1/high)."""
    f = np.geomspace(10.0, 1e5, 200)
    red = NoiseSpectrum(f, 100.0 - 20.0 * np.log10(f))
    expected = 100.0 + 10 * np.log10(1 / 200.0 - 1 / 5000.0)
    assert band_level(200.0, 5000.0, spectrum=red) == pytest.approx(expected, abs=1e-4)


def test_equal_powers_add_three_decibels():
    assert float(power_sum(70.0, 70.0)) == pytest.approx(70.0 + 10 * np.log10(2.0))


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda: ambient_noise(0.5, wind_speed=5.0), "frequency is 0.5: 1 to 1e"),
        (lambda: ambient_noise(100.0, wind_speed=-1.0), "wind speed is -1"),
        (lambda: ambient_noise(100.0, wind_speed=5.0, shipping=2.0), "shipping is 2"),
        (lambda: band_level(2000.0, 1000.0), "runs from 2000 to 1000 Hz"),
        (lambda: NoiseSpectrum([1.0, 2.0], [50.0]), "2 frequencies and 1 levels"),
        (lambda: NoiseSpectrum([2.0, 1.0], [50.0, 40.0]), "do not increase"),
        (lambda: NoiseSpectrum([10.0, 20.0], [50.0, 40.0]).at(5.0), "as measured"),
    ],
)
def test_bad_input(call, words):
    with pytest.raises(InputError, match=words):
        call()
