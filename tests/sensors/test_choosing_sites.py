"""The choice of sites against exhaustive search, and greedy choices against what is promised of them."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.sensors.choosing import choose_sites


def sea(seed, sites=15, cells=300, radius=0.22):
    """Sites and cells strewn over a square; a site hears cells within a radius."""
    rng = np.random.default_rng(seed)
    places, cell = rng.uniform(0, 1, (sites, 2)), rng.uniform(0, 1, (cells, 2))
    distance = np.hypot(*(places[:, None] - cell[None]).transpose(2, 0, 1))
    return distance < radius, distance, rng.uniform(0.1, 2.0, cells), places


def exhaustive(heard, weight, number, allowed=lambda _: True):
    best = -1.0
    for sites in itertools.combinations(range(len(heard)), number):
        if allowed(sites):
            best = max(best, weight @ heard[list(sites)].any(axis=0))
    return best


@pytest.mark.parametrize("seed", range(5))
def test_the_exact_choice_of_four_of_fifteen_is_that_of_exhaustive_search(seed):
    heard, _, weight, _ = sea(seed)
    found = choose_sites(heard, number=4, weight=weight)
    assert found.method == "exact"
    assert found.value == pytest.approx(exhaustive(heard, weight, 4))
    assert found.gap == 0.0
    assert found.value == pytest.approx(found.gains.sum())
    assert weight @ heard[list(found.sites)].any(axis=0) == pytest.approx(found.value)


@pytest.mark.parametrize("seed", range(3))
def test_with_spacing_cost_and_cells_that_must_be_covered(seed):
    heard, _, weight, places = sea(seed)
    cost = np.random.default_rng(seed + 100).uniform(1.0, 3.0, 15)
    must = int(np.flatnonzero(heard.sum(axis=0) == 2)[0])

    def allowed(sites):
        gaps = [np.hypot(*(places[a] - places[b])) for a, b in itertools.combinations(sites, 2)]
        return min(gaps, default=1.0) >= 0.25 and cost[list(sites)].sum() <= 6.0 and heard[list(sites), must].any()

    best = max(exhaustive(heard, weight, n, allowed) for n in (1, 2, 3, 4))
    found = choose_sites(
        heard, number=4, weight=weight, cost=cost, budget=6.0, places=places, spacing=0.25, must_cover=[must]
    )
    assert found.value == pytest.approx(best)
    assert allowed(found.sites)


@given(st.integers(0, 10_000), st.integers(1, 5))
@settings(max_examples=30)
def test_greedy_keeps_its_promise_and_its_bound_holds(seed, number):
    heard, _, weight, _ = sea(seed, sites=10, cells=60)
    best = choose_sites(heard, number=number, weight=weight).value
    found = choose_sites(heard, number=number, weight=weight, method="greedy")
    assert (1 - 1 / np.e) * best <= found.value + 1e-9
    assert found.value <= best + 1e-9 <= found.bound + 2e-9
    assert np.all(np.diff(found.gains) <= 1e-9)


def test_probabilities_are_expected_weights():
    _, distance, weight, _ = sea(4, sites=8, cells=50)
    probability = np.exp(-((distance / 0.3) ** 2))
    found = choose_sites(probability, number=3, weight=weight)
    assert found.method == "greedy"
    silent = np.prod(1 - probability[list(found.sites)], axis=0)
    assert found.value == pytest.approx(weight @ (1 - silent))
    best = max(
        weight @ (1 - np.prod(1 - probability[list(sites)], axis=0)) for sites in itertools.combinations(range(8), 3)
    )
    assert (1 - 1 / np.e) * best <= found.value <= best + 1e-9 <= found.bound + 2e-9


def test_existing_sensors_stay_and_cost_nothing():
    heard, _, weight, _ = sea(2)
    found = choose_sites(heard[1:], number=2, weight=weight, existing=heard[:1])
    best = max(weight @ heard[[0, a + 1, b + 1]].any(axis=0) for a, b in itertools.combinations(range(14), 2))
    assert found.value == pytest.approx(best)
    assert found.existing_value == pytest.approx(weight @ heard[0])


def test_two_at_once_by_brute_force_count():
    heard, _, weight, _ = sea(3, sites=8, cells=80, radius=0.4)
    found = choose_sites(heard, number=4, weight=weight, at_once=2)
    assert found.value == pytest.approx(weight @ (heard[list(found.sites)].sum(axis=0) >= 2))
    assert found.bound == np.inf
    assert "nothing is promised" in found.notes[0]


def test_order_of_sites_and_scale_of_weights_change_nothing():
    heard, _, weight, _ = sea(6)
    plain = choose_sites(heard, number=3, weight=weight)
    turned = choose_sites(heard[::-1], number=3, weight=7.0 * weight)
    assert turned.value == pytest.approx(7.0 * plain.value)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"heard": [[0.5, 2.0]]}, "outside 0 to 1"),
        ({"weight": [1.0]}, "3 numbers of 0 or more"),
        ({"number": 0}, "number is 0"),
        ({"cost": [1.0, 1.0]}, "cost and budget go together"),
        ({"spacing": 10.0}, "needs the places"),
        ({"must_cover": [5]}, "names cell 5"),
        ({"must_cover": [2]}, "no choice within the limits"),
        ({"method": "best"}, "method is 'best'"),
        ({"method": "exact", "at_once": 2}, "use method='greedy'"),
        ({"existing": [[1.0]]}, "existing has shape"),
    ],
)
def test_bad_input(change, words):
    with pytest.raises(InputError, match=words):
        choose_sites(**{"heard": [[1, 0, 0], [0, 1, 0]], "number": 1, **change})
