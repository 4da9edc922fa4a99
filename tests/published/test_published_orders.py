"""Section 8: the orders of IHO S-44, edition 6.0.0 (2020)."""

from __future__ import annotations

import pytest

from ocean_sound.soundings.orders import read_orders
from ocean_sound.soundings.radius import TVU_FACTOR, thu_95_from_covariance, tvu_95_from_sigma


@pytest.mark.published("s44.tvu.")
def test_largest_tvu(check):
    order = read_orders()[check["order"]]
    check.agrees(order.tvu(check["d"]))
    assert (order.tvu_fixed, order.tvu_share) == (check["a"], check["b"])


@pytest.mark.published("s44.thu.")
def test_largest_thu(check):
    order = read_orders()[check["order"]]
    check.agrees(order.thu(check["d"]))
    assert (order.thu_fixed, 100.0 * (order.thu_share or 0.0)) == (check["fixed"], check["percent"])


def test_factors_of_95_per_cent():
    """Section 2.6 of the edition prints 1.96 standard deviations in one dimension and 2.45 in two."""
    assert TVU_FACTOR == tvu_95_from_sigma(1.0) == 1.96
    assert thu_95_from_covariance(1.0, 1.0) == pytest.approx(2.45, abs=0.005)
    assert thu_95_from_covariance(1.0, 0.0) == pytest.approx(1.96, abs=0.005)


def test_every_check_of_orders_is_claimed(all_checks, claimed_prefixes):
    found = [check for check in all_checks if check.id.startswith("s44.")]
    assert len(found) == 30
    for check in found:
        assert sum(check.id.startswith(prefix) for prefix in claimed_prefixes) == 1, check.id
    assert {check["order"] for check in found} == set(read_orders())
