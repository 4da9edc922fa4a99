"""Section 7: reflection of plane waves at kinds of seabed. Sources and confirmations stand in values.json."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.section.reflection import seabed_reflection
from ocean_sound.section.sediments import SEDIMENTS, Sediment


def sediment(check, attenuation=0.0):
    return Sediment(check["c2"], check["rho_ratio"] * 1000.0, attenuation)


@pytest.mark.published("ray.R90")
def test_at_right_angles(check):
    check.agrees(abs(seabed_reflection(90.0, sediment(check), water_speed=check["c1"])))


@pytest.mark.published("ray.R45")
def test_at_45_degrees(check):
    check.agrees(abs(seabed_reflection(45.0, sediment(check), water_speed=check["c1"])))


@pytest.mark.published("ray.R10lossy")
def test_at_10_degrees_with_attenuation(check):
    check.agrees(abs(seabed_reflection(10.0, sediment(check, check["alpha"]), water_speed=check["c1"])))


@pytest.mark.published("ray.crit")
def test_critical_angle(check):
    """Below it all is reflected, just above no longer."""
    below, above = np.add(check.expected, [-1e-4, 1e-4])
    water = {"water_speed": check["c1"]}
    assert abs(seabed_reflection(below, sediment(check), **water)) == pytest.approx(1.0, abs=1e-12)
    assert abs(seabed_reflection(above, sediment(check), **water)) < 1.0 - 1e-5


@pytest.mark.parametrize("name", list(SEDIMENTS))
def test_the_table_is_the_published_one(name, all_checks):
    """By the ratios that stand beside the published reflection coefficients."""
    rows = [check for check in all_checks if check.id in {f"ray.R45.{name}", f"ray.R90.{name}", f"ray.R10lossy.{name}"}]
    assert rows
    for check in rows:
        assert SEDIMENTS[name].density_ratio == check["rho_ratio"]
        assert SEDIMENTS[name].speed_ratio == pytest.approx(check["c2"] / check["c1"])
        if "alpha" in check.inputs:
            assert SEDIMENTS[name].attenuation == check["alpha"]


def test_every_check_of_reflection_is_claimed(all_checks, claimed_prefixes):
    found = [check for check in all_checks if check.id.startswith(("ray.R10", "ray.R45", "ray.R90", "ray.crit"))]
    assert len(found) >= 20
    for check in found:
        assert sum(check.id.startswith(prefix) for prefix in claimed_prefixes) == 1, check.id
