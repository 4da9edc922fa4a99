"""Joint hearing against enumeration and plain simulation; reach by bearing with percentiles; codes and collisions."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import brentq
from scipy.stats import norm

from ocean_sound.errors import InputError
from ocean_sound.sensors.coverage import Hearing, Noise, Target, alone, detection_ranges, joint, weighted_percentiles
from ocean_sound.sensors.hearing import Receiver
from ocean_sound.sensors.noise import NoiseSpectrum, ambient_noise
from ocean_sound.sensors.sites import Site
from ocean_sound.sensors.waters import Member

from .conftest import ALPHA

RECEIVER = Receiver(8.0, 100.0)  # allowed loss = source level - noise - 28


def hearing(levels=(50.0,), shares=None, **more):
    return Hearing(Target(150.0), RECEIVER, Noise(levels, shares), **more)


def by_enumeration(probabilities, most):
    """Probability that at least 1, 2, ... of independent sensors hear, over all ways in which they may."""
    found = np.zeros(most)
    for ways in itertools.product((False, True), repeat=len(probabilities)):
        chance = np.prod([p if heard else 1.0 - p for p, heard in zip(probabilities, ways, strict=True)])
        for k in range(most):
            found[k] += chance * (sum(ways) > k)
    return found


@given(st.lists(st.floats(50.0, 100.0), min_size=1, max_size=6))
def test_joint_hearing_equals_enumeration(losses):
    found = hearing().heard(np.array(losses)[:, None])[:, 0]
    alone = norm.cdf((72.0 - np.array(losses)) / 6.0)
    assert found == pytest.approx(by_enumeration(alone, 4), abs=1e-12)


def test_states_of_the_noise_are_those_of_all_sensors_at_once():
    both = hearing((45.0, 60.0), (1.0, 3.0)).heard([[70.0], [72.0], [60.0]])[:, 0]
    expected = np.zeros(4)
    for level, share in ((45.0, 0.25), (60.0, 0.75)):
        expected += share * by_enumeration(norm.cdf((122.0 - level - np.array([70.0, 72.0, 60.0])) / 6.0), 4)
    assert both == pytest.approx(expected, abs=1e-12)


def test_correlated_codes_equal_simulation():
    """Two sensors, codes of three pulses: what all share, what a code shares, and what each pulse has of its own."""
    code = Target(150.0, pulses=3, pulse_correlation=0.4, calls=2, duration=2.0, interval=60.0, transmitters=3)
    found = Hearing(code, RECEIVER, Noise([50.0]), correlation=0.3).heard([[66.0], [70.0]], most=2)[:, 0]
    draw = np.random.default_rng(5)
    n = 400_000
    shared, of_code, own = draw.normal(size=(n, 1, 1)), draw.normal(size=(n, 2, 1)), draw.normal(size=(n, 2, 3))
    level = np.sqrt(0.3) * shared + np.sqrt(0.7) * (np.sqrt(0.4) * of_code + np.sqrt(0.6) * own)
    excess = 72.0 - np.array([66.0, 70.0])[None, :, None] + 6.0 * level
    heard = (excess >= 0.0).all(axis=2).sum(axis=1)
    clear = (1.0 - 2.0 * 2.0 / 60.0) ** 2
    for k in range(2):
        one = clear * np.mean(heard > k)
        # four standard errors of the simulation, twice for two calls
        assert found[k] == pytest.approx(1.0 - (1.0 - one) ** 2, abs=8 * np.sqrt(one * (1 - one) / n))


@pytest.mark.parametrize("pulses", [1, 3])
def test_one_sensor_alone_is_the_same_with_what_it_shares_with_others(pulses):
    code = Target(150.0, pulses=pulses, pulse_correlation=0.4, calls=2)
    both = Hearing(code, RECEIVER, Noise([45.0, 55.0]), correlation=0.3)
    loss = np.linspace(50.0, 90.0, 21)
    assert both.heard_alone(loss) == pytest.approx(both.heard(loss[None], most=1)[0], abs=1e-4)


def test_deaf_sensors_count_for_nothing():
    heard = hearing().heard([[70.0], [np.nan], [np.inf], [300.0]])[:, 0]
    assert heard == pytest.approx([norm.cdf(2.0 / 6.0), 0.0, 0.0, 0.0])


def test_moorings_pushed_down_count_by_their_share():
    up, down = np.full((2, 3, 5), 70.0), np.full((2, 3, 5), 80.0)
    found = joint([(up, 0.8), (down, 0.2)], hearing())
    parts = [by_enumeration(np.full(3, norm.cdf((72.0 - loss) / 6.0)), 4) for loss in (70.0, 80.0)]
    assert found == pytest.approx(np.broadcast_to((0.8 * parts[0] + 0.2 * parts[1])[:, None, None], (4, 2, 5)))
    shares = np.array([1.0, 3.0])
    one = alone([(up, 0.8), (down, 0.2)], shares, hearing())
    assert one == pytest.approx(0.8 * norm.cdf(2.0 / 6.0) + 0.2 * norm.cdf(-8.0 / 6.0))


def test_reach_has_percentiles_over_winds(losses_of):
    losses = losses_of([Site("A", 30.0, -60.0, 40.0)], bearings=3)
    noisy = hearing((40.0, 50.0, 55.0), (0.2, 0.5, 0.3))
    reach = detection_ranges(losses, noisy, depths=[40.0], percentiles=(10.0, 50.0, 90.0))
    ranges = [brentq(lambda r, a=122.0 - n: 20 * np.log10(r) + ALPHA * r - a, 1.0, 1e5) for n in (55.0, 50.0, 40.0)]
    assert reach["detection_range"].values[0] == pytest.approx(np.broadcast_to(ranges, (3, 3)), rel=0.01)


def test_reach_that_ends_with_the_computation_says_so(losses_of):
    losses = losses_of([Site("A", 30.0, -60.0, 40.0)], bearings=3, max_range=1e3)
    reach = detection_ranges(losses, hearing(), depths=[40.0])
    assert reach["cut"].values.all()
    assert np.all(reach["detection_range"] == 1e3)


def test_members_count_by_their_shares(losses_of, still):
    members = [Member("a", still.profiles, share=1.0), Member("b", still.profiles, share=3.0)]
    losses = losses_of([Site("A", 30.0, -60.0, 40.0)], members=members, bearings=3)
    assert losses.computed == 3  # the same water is computed once
    assert detection_ranges(losses, hearing(), depths=[40.0])["detection_range"].shape == (1, 3, 3)


@given(st.lists(st.tuples(st.floats(-5, 5), st.integers(1, 4)), min_size=1, max_size=8), st.floats(1.0, 100.0))
def test_percentiles_equal_those_of_repeated_values(values, percentile):
    x, w = np.array([v for v, _ in values]), np.array([float(k) for _, k in values])
    repeated = np.repeat(x, w.astype(int))
    expected = np.percentile(repeated, percentile, method="inverted_cdf")
    assert weighted_percentiles(x, w, [percentile])[0] == expected


def test_noise_of_a_band_and_of_a_measured_spectrum():
    one = Noise.of(5e3, 5e3, wind_speeds=[3.0, 8.0])
    assert one.levels == pytest.approx(ambient_noise(5e3, wind_speed=np.array([3.0, 8.0])))
    assert one.calm < one.levels.min()
    narrow = Noise.of(4999.0, 5001.0, wind_speeds=[3.0])
    assert narrow.levels == pytest.approx(one.levels[:1], abs=0.01)
    measured = Noise.of(1e3, 2e3, spectrum=NoiseSpectrum([500.0, 5000.0], [61.0, 61.0]))
    assert measured.levels == pytest.approx([61.0])
    assert measured.calm == pytest.approx(61.0)
    assert Noise([60.0, 40.0, 50.0], [0.2, 0.3, 0.5]).middle == 50.0


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: Target(float("nan")), "source_level is nan"),
        (lambda: Target(150.0, calls=0), "calls is 0"),
        (lambda: Target(150.0, pulses=2, pulse_correlation=1.2), "pulse_correlation is 1.2"),
        (lambda: Target(150.0, transmitters=2), "several transmitters collide"),
        (lambda: Noise([np.inf]), "a level is missing"),
        (lambda: Noise([50.0], [1.0, 1.0]), "2 shares for 1 levels"),
        (lambda: hearing(correlation=1.5), "correlation is 1.5"),
        (lambda: hearing(fluctuation=-1.0), "fluctuation is -1"),
    ],
)
def test_what_makes_no_sense_is_refused(make, message):
    with pytest.raises(InputError, match=message):
        make()
