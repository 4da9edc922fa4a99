"""Published values of the tests by which casts are checked."""

from __future__ import annotations

import pytest

from ocean_sound.casts.checking_tests import gradient_value, spike_value


@pytest.mark.published("qc.argo.spike")
def test_spike_value(check):
    check.agrees(spike_value(check["V1"], check["V2"], check["V3"]))


@pytest.mark.published("qc.argo.gradient")
def test_gradient_value(check):
    check.agrees(gradient_value(check["V1"], check["V2"], check["V3"]))


def test_every_check_of_quality_control_is_claimed(all_checks, claimed_prefixes):
    found = [check for check in all_checks if check.id.startswith("qc.")]
    assert len(found) == 6
    for check in found:
        assert sum(check.id.startswith(prefix) for prefix in claimed_prefixes) == 1, check.id
