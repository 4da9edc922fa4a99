"""The sonar equation, joint detection, telemetry and range tests against closed forms and enumeration."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import brentq
from scipy.stats import multivariate_normal, norm

from ocean_sound.errors import InputError
from ocean_sound.sensors.hearing import Receiver, detection_probability, detection_range, signal_excess
from ocean_sound.sensors.range_test import fit_range_test
from ocean_sound.sensors.telemetry import code_probability, codes_needed, no_collision
from ocean_sound.sensors.together import at_least


def test_range_is_that_of_the_closed_form():
    """20 log r + a r = allowed loss, solved apart."""
    receiver = Receiver(detection_threshold=10.0, bandwidth=1000.0, directivity_index=3.0)
    level = {"source_level": 160.0, "noise_spectrum_level": 45.0}
    r = np.linspace(100.0, 30_000.0, 5001)
    excess = signal_excess(20 * np.log10(r) + 1e-3 * r, receiver=receiver, **level)
    reach = detection_range(r, detection_probability(excess))
    allowed = 160.0 - (45.0 + 30.0) + 3.0 - 10.0
    expected = brentq(lambda x: 20 * np.log10(x) + 1e-3 * x - allowed, 10.0, 1e5)
    assert reach.unbroken == pytest.approx(expected, rel=1e-3)
    assert reach.unbroken == reach.farthest
    assert not reach.cut


def test_own_noise_adds_as_power_and_is_not_reduced_by_directivity():
    receiver = Receiver(detection_threshold=0.0, bandwidth=1.0, directivity_index=10.0, self_noise=40.0)
    assert receiver.noise_level(50.0) == pytest.approx(40.0 + 10 * np.log10(2.0))


def test_convergence_zones_are_kept_apart():
    r = np.arange(1.0, 101.0)
    p = np.where(r <= 10, 0.9, np.where((r >= 60) & (r <= 70), 0.8, 0.0))
    reach = detection_range(r, p)
    assert 10.0 < reach.unbroken < 11.0
    assert 70.0 < reach.farthest < 71.0
    assert 0.25 < reach.share < 0.35


def enumerated(probabilities, most):
    totals = np.zeros(most)
    for heard in itertools.product([0, 1], repeat=len(probabilities)):
        chance = np.prod([p if yes else 1 - p for yes, p in zip(heard, probabilities, strict=True)])
        totals[: min(sum(heard), most)] += chance
    return totals


@given(st.lists(st.floats(-20.0, 20.0), min_size=1, max_size=6), st.integers(1, 5))
def test_independent_sensors_by_enumeration(excess, most):
    found = at_least(np.array(excess), most=most, fluctuation=6.0)
    assert found == pytest.approx(enumerated(norm.cdf(np.array(excess) / 6.0), most), abs=1e-12)


@pytest.mark.parametrize("correlation", [0.2, 0.5, 0.8])
def test_correlated_sensors_by_the_multivariate_normal(correlation):
    excess, sigma = np.array([3.0, -4.0, 1.0]), 6.0
    covariance = sigma**2 * (correlation * np.ones((3, 3)) + (1 - correlation) * np.eye(3))
    # all three: every excess plus its fluctuation above 0; none: all below
    everyone = multivariate_normal(cov=covariance).cdf(excess, rng=np.random.default_rng(0))
    nobody = multivariate_normal(cov=covariance).cdf(-excess, rng=np.random.default_rng(0))
    found = at_least(excess, most=3, fluctuation=sigma, correlation=correlation)
    assert found[0] == pytest.approx(1 - nobody, abs=2e-4)
    assert found[2] == pytest.approx(everyone, abs=2e-4)


@given(st.lists(st.floats(-15.0, 15.0), min_size=2, max_size=6), st.floats(0.0, 1.0))
def test_more_sensors_at_once_are_never_likelier(excess, correlation):
    found = at_least(np.array(excess), fluctuation=5.0, correlation=correlation)
    assert np.all(np.diff(found) <= 1e-12)
    assert np.all((found >= 0.0) & (found <= 1.0))


def test_as_one_or_without_fluctuation():
    excess = np.array([3.0, -2.0, np.nan])
    assert at_least(excess, most=3, fluctuation=6.0, correlation=1.0) == pytest.approx(
        [norm.cdf(0.5), norm.cdf(-1 / 3), 0.0]
    )
    assert at_least(excess, most=2, fluctuation=0.0).tolist() == [1.0, 0.0]


def test_a_code_arrives_whole():
    assert code_probability(4.0, pulses=5, fluctuation=5.0) == pytest.approx(norm.cdf(0.8) ** 5)
    assert code_probability(4.0, pulses=5, fluctuation=5.0, correlation=1.0) == pytest.approx(norm.cdf(0.8))


def test_collisions_by_simulation():
    rng = np.random.default_rng(3)
    duration, interval, others = 3.0, 90.0, 6
    starts = rng.uniform(0.0, interval, (200_000, others))
    alone = np.mean(np.all(np.abs(starts - interval / 2) > duration, axis=1))
    assert no_collision(others + 1, duration=duration, interval=interval) == pytest.approx(alone, abs=0.005)


def test_codes_needed_by_the_geometric_distribution():
    count = codes_needed(0.2, confidence=0.9)
    assert 1 - 0.8**count >= 0.9 > 1 - 0.8 ** (count - 1)


def test_range_test_finds_what_made_it_within_its_uncertainty():
    rng = np.random.default_rng(11)
    loss, trials = np.linspace(50.0, 80.0, 9), np.full(9, 60)
    errors = []
    for _ in range(300):
        heard = rng.binomial(trials, norm.cdf((66.0 - loss) / 5.0))
        test = fit_range_test(loss, heard, trials)
        plain = np.sqrt(max(test.overdispersion, 1.0))
        errors.append(
            [
                (test.allowed_loss - 66.0) / (test.allowed_loss_uncertainty / plain),
                (test.fluctuation - 5.0) / (test.fluctuation_uncertainty / plain),
            ]
        )
    assert np.mean(errors, axis=0) == pytest.approx([0.0, 0.0], abs=0.3)
    assert np.std(errors, axis=0) == pytest.approx([1.0, 1.0], abs=0.15)


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda: Receiver(8.0, 0.0), "bandwidth of the receiver is 0 Hz"),
        (lambda: Receiver(np.nan, 100.0), "detection_threshold of the receiver is nan"),
        (lambda: detection_probability(0.0, fluctuation=-1.0), "fluctuation is -1"),
        (lambda: detection_range([1.0, 2.0], [0.5]), "2 ranges and 1 probabilities"),
        (lambda: detection_range([1.0, 2.0], [0.5, 0.4], level=1.0), "level is 1"),
        (lambda: at_least([], fluctuation=6.0), "no sensor is given"),
        (lambda: at_least([1.0], fluctuation=6.0, correlation=2.0), "correlation is 2"),
        (lambda: no_collision(3, duration=60.0, interval=90.0), "twice the duration"),
        (lambda: code_probability(1.0, pulses=0, fluctuation=6.0), "0 pulses"),
        (lambda: codes_needed(0.0), "both between 0 and 1"),
        (lambda: fit_range_test([60.0, 70.0], [1, 0], [2, 2]), "2 distances"),
        (lambda: fit_range_test([60.0, 70.0, 80.0], [5, 3, 4], [4, 4, 4]), "place 1: loss 60 dB, 5 heard of 4"),
        (lambda: fit_range_test([60.0, 70.0, 80.0], [4, 4, 4], [4, 4, 4]), "12 of 12 signals were heard"),
        (lambda: fit_range_test([60.0, 70.0, 80.0], [4, 4, 0], [4, 4, 4]), "tells no spread"),
        (lambda: fit_range_test([60.0, 70.0, 80.0], [1, 2, 3], [4, 4, 4]), "not heard less often"),
    ],
)
def test_bad_input(call, words):
    with pytest.raises(InputError, match=words):
        call()
