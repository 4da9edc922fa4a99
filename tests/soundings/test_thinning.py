"""Thinning: every beam stays within the tolerance, few levels are kept, and a limit on their number is obeyed."""

from __future__ import annotations

import importlib.util
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings import largest_shift, thin

_spec = importlib.util.spec_from_file_location("random_beams", Path(__file__).with_name("random_beams.py"))
random_beams = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(random_beams)

SYNTHETIC = random_beams.synthetic()
# The most levels that may be left of each; some were half as many again with measured speeds only.
FEW = {"isovelocity": 2, "one gradient": 2, "thermocline": 14, "noisy thermocline": 14, "surface duct": 18, "Munk": 36,
       "polar": 28, "fresh over salt": 20}  # fmt: skip

pytestmark = pytest.mark.long


@pytest.mark.parametrize("name", SYNTHETIC)
def test_thousand_levels_to_five_millimetres(name):
    water = SYNTHETIC[name]
    thinned = thin(water)
    largest, beams = random_beams.moved(water, thinned.profile)
    assert beams == 10_000
    assert largest - 1e-9 <= thinned.guarantee.distance <= 0.005  # 1e-9 m: the arithmetic
    assert thinned.holds
    assert len(thinned.profile) <= FEW[name]
    # The guarantee is that of the independent measure too, and no wide one.
    assert thinned.guarantee.distance <= largest_shift(water, thinned.profile).distance + 2e-5


@pytest.mark.parametrize("name", ["noisy thermocline", "surface duct", "polar"])
def test_measured_levels_only(name):
    water = SYNTHETIC[name]
    thinned = thin(water, measured=True)
    assert (thinned.levels >= 0).all()
    assert (thinned.profile.depth == water.depth[thinned.levels]).all()
    assert (thinned.profile.speed == water.speed[thinned.levels]).all()
    assert random_beams.moved(water, thinned.profile)[0] <= thinned.guarantee.distance <= 0.005
    assert len(thin(water).profile) <= len(thinned.profile)


def test_at_most_so_many_levels():
    water = SYNTHETIC["polar"]
    shifts = []
    for most in (3, 8, 14):
        thinned = thin(water, max_levels=most)
        assert 2 <= len(thinned.profile) <= most
        assert not thinned.holds
        assert random_beams.moved(water, thinned.profile)[0] <= thinned.guarantee.distance
        shifts.append(thinned.guarantee.distance)
    assert shifts == sorted(shifts, reverse=True)
    plenty = thin(water, max_levels=500)
    assert plenty.holds
    assert len(plenty.profile) == len(thin(water).profile)


def test_the_level_at_the_transducer_keeps_its_speed():
    water = SYNTHETIC["noisy thermocline"]
    thinned = thin(water, transducer_depth=4.4)
    assert thinned.profile.depth[:2].tolist() == [0.0, 4.4]
    assert thinned.profile.at(4.4) == pytest.approx(water.at(4.4), abs=1e-12)
    assert thinned.levels[:2].tolist() == [0, -1]
    assert random_beams.moved(water, thinned.profile, transducer_depth=4.4)[0] <= thinned.guarantee.distance <= 0.005


def test_a_profile_from_below_the_surface_and_what_is_known_of_its_levels():
    water = Profile(
        np.arange(3.0, 60.0), np.linspace(1500.0, 1480.0, 57) + np.sin(np.arange(57.0)), np.full(57, 0.1), id="K"
    )
    before = water.speed.copy()
    thinned = thin(water)
    assert thinned.profile.depth[[0, -1]].tolist() == [0.0, 59.0]
    assert thinned.levels[0] == -1
    assert thinned.profile.uncertainty == pytest.approx(0.1)
    assert thinned.profile.id == "K"
    assert "no beam within 65 degrees" in thinned.profile.notes[-1]
    assert (water.speed == before).all()


@settings(max_examples=15)
@given(
    st.lists(st.floats(1430.0, 1560.0), min_size=2, max_size=25),
    st.sampled_from([0.001, 0.02, 0.5]),
    st.sampled_from([30.0, 65.0, 80.0]),
)
def test_any_profile(speeds, tolerance, max_angle):
    water = Profile(np.linspace(0.0, 300.0, len(speeds)), speeds)
    thinned = thin(water, tolerance=tolerance, max_angle=max_angle)
    assert thinned.holds
    assert 2 <= len(thinned.profile) <= len(water)
    assert thinned.profile.depth[[0, -1]].tolist() == [0.0, 300.0]


def test_very_many_levels():
    rng = np.random.default_rng(3)
    depth = np.linspace(0.0, 500.0, 6000)
    water = Profile(depth, 1500.0 - 10.0 * np.tanh((depth - 40.0) / 5.0) + rng.normal(0.0, 0.05, depth.size))
    thinned = thin(water)
    assert thinned.holds
    assert len(thinned.profile) < 40
    assert random_beams.moved(water, thinned.profile)[0] <= thinned.guarantee.distance


def test_refusals():
    water = SYNTHETIC["thermocline"]
    with pytest.raises(InputError, match="tolerance is 0 m: from 1e-06 to 1e\\+06 m would be right"):
        thin(water, tolerance=0.0)
    with pytest.raises(InputError, match="max_levels is 1: a profile needs at least 2"):
        thin(water, max_levels=1)
    with pytest.raises(InputError, match="max_levels is 2: surface, transducer and deepest level"):
        thin(water, max_levels=2, transducer_depth=5.0)
    with pytest.raises(InputError, match="transducer depth is -1 m"):
        thin(water, transducer_depth=-1.0)
