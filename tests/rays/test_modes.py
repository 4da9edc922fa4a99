"""Normal modes against closed forms, complex roots, another eigenvalue solver, and invariants."""

from __future__ import annotations

import cmath

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.linalg import eigh_tridiagonal
from scipy.optimize import brentq

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.rays.modes import normal_modes
from ocean_sound.section.sediments import SEDIMENTS, Sediment

pytestmark = pytest.mark.kernels

SPEED, DEPTH = 1500.0, 100.0
GUIDE = Profile([0.0, DEPTH], [SPEED, SPEED])
SAND = SEDIMENTS["sand"].below(SPEED)
LOSSLESS = Sediment(SAND.speed, SAND.density, 0.0)


def munk():
    depth = np.linspace(0.0, 5000.0, 501)
    eta = 2.0 * (depth - 1300.0) / 1300.0
    return Profile(depth, 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta))))


def pekeris_roots(frequency):
    """Wavenumbers of an isovelocity guide over a fluid half-space: m g cos(g D) + gamma sin(g D) = 0 (Pekeris 1948)."""
    water, below = 2 * np.pi * frequency / SPEED, 2 * np.pi * frequency / SAND.speed
    ratio = SAND.density / 1000.0

    def condition(g):
        return ratio * g * np.cos(g * DEPTH) + np.sqrt(max(water**2 - g**2 - below**2, 0.0)) * np.sin(g * DEPTH)

    places = np.linspace(1e-9, np.sqrt(water**2 - below**2), 40_001)
    values = [condition(g) for g in places]
    pairs = zip(places, places[1:], values, values[1:], strict=False)
    return np.array([np.sqrt(water**2 - brentq(condition, a, b, xtol=1e-15) ** 2) for a, b, x, y in pairs if x * y < 0])


def complex_root(guess, frequency, below):
    """Newton's method on the same condition with a seabed of complex wavenumber."""
    water, ratio = 2 * np.pi * frequency / SPEED, SAND.density / 1000.0

    def condition(k):
        g = cmath.sqrt(water**2 - k**2)
        return ratio * g * cmath.cos(g * DEPTH) + cmath.sqrt(k**2 - below**2) * cmath.sin(g * DEPTH)

    k, step = complex(guess), 1e-7
    for _ in range(50):
        k -= condition(k) * 2 * step / (condition(k + step) - condition(k - step))
    return k


@pytest.mark.parametrize("frequency", [50.0, 200.0, 1000.0])
def test_pekeris_wavenumbers(frequency):
    expected = pekeris_roots(frequency)
    found = normal_modes(GUIDE, frequency=frequency, sediment=LOSSLESS, water_absorption=0.0)
    assert len(found) == expected.size
    # next to cut-off the slope of psi at the seabed changes fast with the wavenumber
    errors = np.abs(found.wavenumber.real - expected)
    assert errors[-1] < 1e-5
    assert errors[:-1].max() < 1e-6
    assert np.all(found.wavenumber.imag == 0.0)


def test_decay_by_an_absorbing_seabed_is_that_of_the_complex_roots():
    frequency = 200.0
    found = normal_modes(GUIDE, frequency=frequency, sediment=SAND, water_absorption=0.0)
    loss = SAND.attenuation * np.log(10) / (40 * np.pi)
    below = 2 * np.pi * frequency / SAND.speed * (1 + 1j * loss)
    exact = np.array([complex_root(k + 1e-5j, frequency, below) for k in found.wavenumber.real])
    assert found.wavenumber.imag == pytest.approx(exact.imag, rel=0.01)
    assert found.wavenumber.real == pytest.approx(exact.real, abs=1e-5)


def test_munk_wavenumbers_by_another_solver_on_a_fine_mesh():
    water, frequency, number = munk(), 50.0, 40_000
    found = normal_modes(water, frequency=frequency, water_absorption=0.0)
    h = 5000.0 / number
    depth = h * np.arange(1, number)
    squares = (2 * np.pi * frequency / np.interp(depth, water.depth, water.speed)) ** 2
    top = eigh_tridiagonal(
        squares - 2 / h**2, np.full(number - 2, 1 / h**2), select="i", select_range=(number - 31, number - 2),
        eigvals_only=True,
    )  # fmt: skip
    assert found.wavenumber.real[:30] == pytest.approx(np.sqrt(top[::-1]), abs=3e-8)


def test_shapes_are_orthonormal_the_seabed_included():
    found = normal_modes(GUIDE, frequency=200.0, sediment=LOSSLESS, water_absorption=0.0)
    k, h = found.wavenumber.real, found.depth[1]
    inside = h * (found.shape @ found.shape.T - 0.5 * np.outer(found.shape[:, -1], found.shape[:, -1]))
    gamma = np.sqrt(k**2 - (2 * np.pi * 200.0 / SAND.speed) ** 2)
    tails = np.outer(found.shape[:, -1], found.shape[:, -1]) / (1.9 * np.add.outer(gamma, gamma))
    assert inside + tails == pytest.approx(np.eye(len(found)), abs=2e-3)


def test_group_speed_is_the_slope_of_frequency_over_wavenumber():
    options = {"sediment": LOSSLESS, "water_absorption": 0.0, "most": 8}
    below, here, above = (normal_modes(GUIDE, frequency=f, **options) for f in (199.9, 200.0, 200.1))
    slope = 2 * np.pi * 0.2 / (above.wavenumber.real - below.wavenumber.real)
    assert here.group_speed == pytest.approx(slope, rel=1e-5)


def test_absorption_of_the_water_decays_all_modes_as_it_would_plane_waves():
    found = normal_modes(GUIDE, frequency=200.0, sediment=LOSSLESS, water_absorption=0.01, most=1)
    per_metre = 0.01 * np.log(10) / 20
    assert found.wavenumber.imag[0] == pytest.approx(per_metre, rel=2e-3)


def test_a_rough_surface_takes_from_each_mode_what_its_bounces_lose():
    """psi = A sin(g z) brings to the surface (A/2)² g of each k that it carries along; R² of it comes back."""
    options = {"sediment": LOSSLESS, "water_absorption": 0.0, "frequency": 200.0}
    rough = normal_modes(GUIDE, wind_speed=10.0, **options)
    k = rough.wavenumber.real
    g = np.sqrt((2 * np.pi * 200.0 / SPEED) ** 2 - k**2)
    gamma = np.sqrt(k**2 - (2 * np.pi * 200.0 / SAND.speed) ** 2)
    inside = DEPTH / 2 - np.sin(2 * g * DEPTH) / (4 * g)
    amplitude2 = 1.0 / (inside + np.sin(g * DEPTH) ** 2 / (2 * 1.9 * gamma))
    height = np.sqrt(0.0081 / (4 * 0.74)) * 100.0 / 9.81  # Pierson and Moskowitz 1964
    decay = 2.0 * (g * height) ** 2 * g * amplitude2 / (4 * k)
    assert rough.wavenumber.imag == pytest.approx(decay, rel=0.01)


@given(st.floats(1.0, 99.0), st.floats(1.0, 99.0))
def test_source_and_receiver_exchanged(one, other):
    found = sand_at_200_hz()
    there = found.pressure(one, [5000.0, 9000.0], other)
    assert there == pytest.approx(found.pressure(other, [5000.0, 9000.0], one), abs=1e-15)


_KEPT = []


def sand_at_200_hz():
    if not _KEPT:
        _KEPT.append(normal_modes(GUIDE, frequency=200.0, sediment=SAND, water_absorption=0.0))
    return _KEPT[0]


def test_intensity_is_the_mean_of_pressure_squared_over_range():
    found = sand_at_200_hz()
    ranges = np.linspace(8000.0, 12_000.0, 8001)
    coherent = np.mean(np.abs(found.pressure(36.0, ranges, 46.0)) ** 2 * ranges)
    assert np.mean(found.intensity(36.0, ranges, 46.0) * ranges) == pytest.approx(coherent, rel=0.03)


def test_a_guide_between_mirrors_agrees_with_its_image_sources():
    """Free surface above, nearly rigid seabed below: images at 2 D n ± zs, closed form; modes far from the source."""
    frequency, source, receiver = 60.0, 31.0, 57.0
    rigid = Sediment(9e3, 1e4, 0.0)
    found = normal_modes(GUIDE, frequency=frequency, sediment=rigid, water_absorption=0.0)
    ranges = np.linspace(2000.0, 4000.0, 401)
    k = 2 * np.pi * frequency / SPEED
    total = np.zeros(ranges.size, dtype=complex)
    for n in range(-400, 401):
        for sign in (1, -1):
            height = 2 * DEPTH * n + sign * source - receiver
            distance = np.hypot(ranges, height)
            total += sign * (-1.0) ** n * np.exp(1j * k * distance) / distance * np.exp(-((n / 200.0) ** 2))
    levels = (
        10 * np.log10(np.mean(np.abs(total) ** 2)),
        10 * np.log10(np.mean(np.abs(found.pressure(source, ranges, receiver)) ** 2)),
    )
    assert levels[0] == pytest.approx(levels[1], abs=0.5)


def test_no_trapped_mode_is_said():
    found = normal_modes(GUIDE, frequency=5.0, sediment=SAND)
    assert len(found) == 0
    assert "no mode is trapped at 5 Hz" in found.notes[0]
    assert np.all(found.pressure(10.0, [1000.0], [10.0, 20.0]) == 0.0)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"frequency": 0.0}, "frequency is 0 Hz"),
        ({"seabed_depth": 200.0}, "seabed depth 200 m is outside the profile"),
        ({"sediment": SEDIMENTS["basalt"].below(SPEED)}, "carries shear waves"),
        ({"wind_speed": -1.0}, "wind speed is -1"),
        ({"frequency": 1e5}, "too many for this method"),
    ],
)
def test_bad_input(change, words):
    with pytest.raises(InputError, match=words):
        normal_modes(GUIDE, **{"frequency": 100.0, "sediment": SAND, **change})
