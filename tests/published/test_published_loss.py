"""Section 7: the field below a surface that reflects all sound (Lloyd's mirror). Sources stand in values.json."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.profile import Profile
from ocean_sound.rays.loss import loss

pytestmark = [pytest.mark.kernels, pytest.mark.long]


@pytest.mark.published("lloyd.exact", "lloyd.far")
def test_lloyd_mirror(check):
    """The closed form to its printed digits; beams within what they may err by away from nulls."""
    k = 2.0 * np.pi * check["f"] / check["c"]
    near, far = (np.hypot(check["r"], check["zr"] + sign * check["zs"]) for sign in (-1, 1))
    exact = abs(np.exp(1j * k * near) / near - np.exp(1j * k * far) / far)
    approximate = 2.0 / check["r"] * abs(np.sin(k * check["zs"] * check["zr"] / check["r"]))
    check.agrees(-20.0 * np.log10(exact if check.id == "lloyd.exact" else approximate))
    found = loss(
        Profile([0.0, 1000.0], [check["c"]] * 2), source_depth=check["zs"], frequency=check["f"],
        ranges=[check["r"]], depths=[check["zr"]], absorption=0.0, method="beams",
    )  # fmt: skip
    assert float(found.transmission_loss[0, 0]) == pytest.approx(check.expected, abs=0.05)


def test_every_check_of_loss_is_claimed(all_checks, claimed_prefixes):
    found = [check for check in all_checks if check.id.startswith("lloyd.")]
    assert len(found) == 2
    for check in found:
        assert sum(check.id.startswith(prefix) for prefix in claimed_prefixes) == 1, check.id
