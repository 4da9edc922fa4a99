"""How the water changes: depth errors of pairs, scales of drawn water, and shapes against pairs one by one."""

from __future__ import annotations

import math
from itertools import combinations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pyproj import Geod

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings import refraction_errors
from ocean_sound.soundings.changing import (
    Pairs,
    estimate_scales,
    pairs_of,
    scales_of_pairs,
    water_change,
)
from ocean_sound.soundings.choosing import Scales
from ocean_sound.soundings.exchanging import depth_errors, differ_most

START = np.datetime64("2026-05-01T00:00", "ns")
HOUR = 3600.0
INF = math.inf


def cast(speed=0.0, hours=0.0, *, bottom=50.0, **about):
    """A layer of 10 m whose speed differs, over water that does not."""
    time = START + np.timedelta64(round(hours * HOUR * 1e9), "ns")
    return Profile([0.0, 10.0, 10.001, bottom], [1500 + speed, 1500 + speed, 1500, 1500], time=time, **about)


def drawn(rng, correlation):
    return np.linalg.cholesky(correlation + 1e-10 * np.eye(len(correlation))) @ rng.normal(size=len(correlation))


# --- depth errors


def test_depth_errors_are_those_of_two_casts_compared():
    casts = [Profile([0, 20, 40, 90], [1500 + s, 1498, 1490 - s, 1491]) for s in (-3.0, 0.0, 4.0)]
    for flat in (False, True):
        errors = depth_errors(casts, depths=[30.0, 80.0], angle=60.0, transducer_depth=4.0, flat_array=flat)
        for used, true in np.ndindex(3, 3):
            alone = refraction_errors(
                casts[used], casts[true], angles=[60.0], depths=[30.0, 80.0], transducer_depth=4.0, flat_array=flat
            )
            assert errors[used, true] == pytest.approx(alone["depth_error"].to_numpy()[:, 0], abs=1e-12)


@pytest.mark.parametrize("angle", [0.0, 45.0, 65.0])
def test_depth_error_of_a_layer_in_closed_form(angle):
    # To first order (1 - tan2) h e/c for a level flat face steered with the true speed: derived from Snell's law.
    errors = depth_errors([cast(0.0), cast(0.1)], depths=[50.0], angle=angle)[:, :, 0]
    first_order = (1.0 - math.tan(math.radians(angle)) ** 2) * 10.0 * 0.1 / 1500.0
    assert errors[1, 0] == pytest.approx(first_order, abs=2e-6)
    assert errors[0, 1] == pytest.approx(-first_order, abs=2e-6)
    assert np.diag(errors) == pytest.approx(0.0, abs=1e-9)


def test_what_turns_or_does_not_reach_is_not_judged():
    up = Profile([0.0, 50.0], [1450.0, 1700.0])
    errors = depth_errors([cast(), up, cast(bottom=30.0), cast(bottom=48.0)], depths=[50.0], angle=65.0)[:, :, 0]
    # No beam of 65 degrees reaches 50 m in the second (1450/sin 65 = 1600 m/s); the third is too short to be used or
    # to be the truth, the fourth may be used.
    assert np.isnan(errors).tolist() == [
        [False, True, True, True],
        [False, True, True, True],
        [True, True, True, True],
        [False, True, True, True],
    ]


def test_the_two_that_differ_most():
    short = cast(9.0, bottom=30.0)  # does not reach
    casts = [cast(0.0), cast(1.0), cast(-3.0), short]
    errors = depth_errors(casts, depths=[50.0], angle=65.0)
    # 2 is the farthest from 1; by Snell's law the slower water moves a beam of 65 degrees a little more
    assert set(differ_most(errors)) == {1, 2}
    assert abs(errors[differ_most(errors)]) == pytest.approx(np.nanmax(np.abs(errors)))
    with pytest.raises(InputError, match="no two casts can be compared"):
        differ_most(depth_errors([cast(), short], depths=[50.0]))


def test_an_angle_or_transducer_that_cannot_be():
    with pytest.raises(InputError, match="angle is 90 degrees: between -90 and 90"):
        depth_errors([cast()], depths=[20.0], angle=90.0)
    with pytest.raises(InputError, match="transducer depth is 60 m"):
        depth_errors([cast()], depths=[20.0], transducer_depth=60.0)


# --- pairs


def test_pairs_use_the_earlier_in_the_water_of_the_later():
    casts = [
        cast(2.0, 5.0, latitude=60.0, longitude=5.0),
        cast(0.0, 1.0, latitude=60.1, longitude=5.0),
        cast(1.0, 3.0, latitude=60.0, longitude=365.2),
    ]
    errors = depth_errors(casts, depths=[50.0])
    pairs = pairs_of(casts, errors)
    assert list(zip(pairs.first.tolist(), pairs.second.tolist(), strict=True)) == [(1, 2), (1, 0), (2, 0)]
    assert pairs.time.tolist() == [2 * HOUR, 4 * HOUR, 2 * HOUR]
    geod = Geod(ellps="WGS84")
    expected = [
        geod.inv(casts[i].longitude, casts[i].latitude, casts[j].longitude, casts[j].latitude)[2]
        for i, j in ((1, 2), (1, 0), (2, 0))
    ]
    assert pairs.distance == pytest.approx(expected)
    assert pairs.error[:, 0].tolist() == [errors[1, 2, 0], errors[1, 0, 0], errors[2, 0, 0]]


def test_pairs_need_times_and_all_positions_or_none():
    nothing = np.zeros((2, 2, 1))
    timeless = Profile([0.0, 9.0], [1500.0, 1500.0], id="B2")
    with pytest.raises(InputError, match=r"cast 2 of 2 \(B2\) has no time: give it, or leave the cast out"):
        pairs_of([cast(), timeless], nothing)
    with pytest.raises(InputError, match=r"cast 1 of 2 \(without a name\) has no position, though others have one"):
        pairs_of([cast(), cast(latitude=60.0, longitude=5.0)], nothing)
    assert pairs_of([cast(), cast()], nothing).distance.tolist() == [0.0]


# --- scales


def ou_pairs(rng, hours, place, time, length):
    apart = np.hypot((hours[:, None] - hours) / time, (place[:, None] - place) / length)
    water = drawn(rng, np.exp(-apart))
    first, second = np.triu_indices(hours.size, 1)
    return Pairs(
        first, second, hours[second] - hours[first], np.abs(place[second] - place[first]),
        (water[first] - water[second])[:, None],
    )  # fmt: skip


def test_the_scale_of_time_of_drawn_water():
    # Water that forgets in 5 h, 25 series of 100 h. A single one scatters by a factor of 1.6 or so: so does the best
    # estimate there is, in theory by exp(sqrt(2/(100/5))) = 1.4. The mean of 25 is then known within a factor of 1.1.
    rng = np.random.default_rng(11)
    hours = np.arange(100.0)
    found = [
        scales_of_pairs(ou_pairs(rng, hours, np.zeros(100), 5.0, 1.0), length=INF).time for _ in range(25)
    ]  # fmt: skip
    assert np.median(found) == pytest.approx(5.0, rel=0.25)
    assert np.std(np.log(np.minimum(found, 100.0))) < math.log(2.2)


def test_both_scales_of_drawn_water():
    rng = np.random.default_rng(12)
    found = []
    for _ in range(12):
        hours = np.sort(rng.uniform(0.0, 240.0, 80))
        found.append(scales_of_pairs(ou_pairs(rng, hours, rng.uniform(0.0, 60.0, 80), 20.0, 8.0)))
    assert np.median([scales.time for scales in found]) == pytest.approx(20.0, rel=0.35)
    assert np.median([scales.length for scales in found]) == pytest.approx(8.0, rel=0.35)


def test_estimated_scales_with_spread_range_and_count():
    rng = np.random.default_rng(0)
    hours = np.arange(150.0)
    speed = 0.5 * drawn(rng, np.exp(-np.abs(hours[:, None] - hours) / 5.0))
    casts = [cast(s, h) for s, h in zip(speed, hours, strict=True)]
    found = estimate_scales(casts, length=INF)
    assert (found.casts, found.pairs, found.notes) == (150, 150 * 149 // 2, ())
    assert found.time_range[0] < 5.0 * HOUR < found.time_range[1]
    # What the autocorrelation of the speeds one hour on says of the same series.
    assert found.scales.time == pytest.approx(-HOUR / math.log(np.corrcoef(speed[1:], speed[:-1])[0, 1]), rel=0.3)
    assert found.time_range[0] < found.scales.time < found.time_range[1]
    assert found.scales.length == INF
    assert math.isnan(found.length_range[0])
    per_speed = abs(1.0 - math.tan(math.radians(65.0)) ** 2) * 10.0 / 1500.0
    assert found.spread == pytest.approx(0.5 * per_speed, rel=0.25)
    assert found.noise < 0.1 * found.spread
    # A cast gone wild moves it little, and so does the order of the casts nothing.
    wild = [*casts[:70], cast(15.0, 70.0), *casts[71:]]
    assert estimate_scales(wild, length=INF).scales.time == pytest.approx(found.scales.time, rel=0.35)
    order = rng.permutation(150)
    again = estimate_scales([casts[which] for which in order], length=INF)
    assert again.scales.time == pytest.approx(found.scales.time, rel=1e-4)


def test_noise_of_the_casts_is_told_from_change():
    rng = np.random.default_rng(4)
    hours = np.repeat(np.arange(50.0), 3) + np.tile([0.0, 0.01, 0.02], 50)
    water = drawn(rng, np.exp(-np.abs(hours[:, None] - hours) / 5.0)) + rng.normal(0.0, 0.5, 150)
    casts = [cast(s, h) for s, h in zip(water, hours, strict=True)]
    found = estimate_scales(casts, length=INF)
    assert found.noise / found.spread == pytest.approx(0.5, rel=0.4)
    assert found.time_range[0] < 5.0 * HOUR < found.time_range[1]


def test_doubtful_scales_say_so():
    rng = np.random.default_rng(1)
    along = [cast(i * 0.1, i, latitude=60.0 + 0.001 * i, longitude=5.0) for i in range(12)]
    found = estimate_scales(along)
    text = " | ".join(found.notes)
    assert "time and distance grow together" in text
    assert "time: casts up to 11 h apart are still alike; the scale may be longer" in text
    assert found.scales.time == 11 * HOUR
    assert found.time_range[1] == INF
    for _ in range(4):  # no cast knows the one before
        white = estimate_scales([cast(s, h) for h, s in enumerate(rng.normal(size=40))], length=INF)
        assert white.scales.time <= HOUR
        assert "not resolved" in " ".join(white.notes)
        assert white.time_range[0] < HOUR
    short = [cast(s, h, bottom=50.0 if h else 20.0) for h, s in enumerate(rng.normal(size=8))]
    assert (
        "1 of 8 casts left out: no beam of 40 m depth in them" in estimate_scales(short, length=INF, depth=40.0).notes
    )


def test_no_scales_from_too_little():
    few = [cast(h, h) for h in range(4)]
    with pytest.raises(InputError, match=r"^4 casts are too few .*at least 5 are needed.: give decorrelation time"):
        estimate_scales(few)
    with pytest.raises(
        InputError,
        match=r"^4 casts, of those whose beam of 65 degrees reaches 40 m, are too few .*: give decorrelation",
    ):
        estimate_scales([*few, cast(9.0, 9.0, bottom=20.0)], depth=40.0, length=INF)
    with pytest.raises(InputError, match="all casts are from one place, which says nothing of the scale of length"):
        estimate_scales([cast(h, h) for h in range(6)])
    with pytest.raises(InputError, match="all casts are taken at one time, which says nothing of the scale of time"):
        estimate_scales([cast(h, latitude=60.0, longitude=h / 10) for h in range(6)])
    with pytest.raises(InputError, match="the casts do not differ at all"):
        estimate_scales([cast(0.0, h) for h in range(6)], length=INF)


# --- shapes


def covariance_by_pairs(casts, depth, unlike):
    """Over each pair of casts and of depths that both reach, one by one."""
    speed = np.array([np.interp(depth, each.depth, each.speed) for each in casts])
    above, below = np.zeros((2, depth.size, depth.size))
    for one, other in combinations(range(len(casts)), 2):
        both = depth <= min(casts[one].depth[-1], casts[other].depth[-1])
        difference = np.where(both, speed[one] - speed[other], 0.0)
        above += np.outer(difference, difference)
        below += np.outer(both, both) * 2.0 * unlike(one, other)
    return above / below


@settings(max_examples=10)
@given(st.integers(3, 9), st.integers(0, 2**31), st.booleans())
def test_shapes_carry_the_variance_of_the_pairs(count, seed, scaled):
    rng = np.random.default_rng(seed)
    casts = [
        Profile(
            [0.0, *np.sort(rng.uniform(1.0, bottom, 8)), bottom + 1.0],
            rng.normal(1500.0, 2.0, 10),
            time=START + np.timedelta64(int(rng.integers(0, 86_400)), "s"),
        )
        for bottom in rng.uniform(60.0, 100.0, count)
    ]
    scales = Scales(4 * HOUR, INF) if scaled else None

    def unlike(one, other):
        elapsed = abs(casts[one].time - casts[other].time) / np.timedelta64(1, "s")
        return 1.0 - math.exp(-elapsed / (4 * HOUR)) if scaled else 1.0

    change = water_change(casts, scales=scales)
    if not len(change):
        assert change.notes == ("the casts are too near each other to tell how the water changes",)
        return
    depth = change["change_1"][0]
    shapes = np.array([shape for _, shape in change.values()])
    covariance = covariance_by_pairs(casts, depth, unlike)
    assert np.allclose(covariance, covariance.T)
    # The leading ones are those of the covariance, weighed by the thickness around each depth.
    thickness = np.sqrt(np.gradient(depth) / (depth[-1] - depth[0]))
    variance = np.linalg.eigvalsh(thickness[:, None] * covariance * thickness)[::-1]
    whole = variance[variance > 0.0].sum()
    assert (shapes**2 * thickness**2).sum() == pytest.approx(whole, rel=1e-9)
    assert change.share == pytest.approx(variance[: len(change)].sum() / whole, rel=1e-9)
    assert change.share >= 0.95
    assert variance[: len(change) - 1].sum() < 0.95 * whole
    independent = (shapes * thickness) @ (shapes * thickness).T
    assert independent == pytest.approx(np.diag(np.diag(independent)), abs=1e-9 * whole)


def test_a_single_way_of_changing_comes_out_as_it_is():
    depth = np.array([0.0, 20.0, 30.0, 35.0, 60.0, 300.0])
    shape = np.array([0.0, 0.0, 4.0, 5.0, 0.0, 0.0])
    amounts = np.array([-1.2, 0.3, 1.9, -0.4, 0.8])
    change = water_change([Profile(depth, 1500.0 + amount * shape) for amount in amounts])
    assert list(change) == ["change_1"]
    at, found = change["change_1"]
    assert (at[0], at[-1]) == (0.0, 300.0)
    assert found == pytest.approx(amounts.std(ddof=1) * np.interp(at, depth, shape), abs=1e-9)
    assert np.interp(33.0, at, found) == pytest.approx(amounts.std(ddof=1) * 4.6, rel=0.01)
    assert change.notes == ()
    with pytest.raises(ValueError, match="read-only"):
        found[0] = 1.0


def test_shapes_of_little_or_nothing():
    alone = water_change([cast()])
    assert len(alone) == 0
    assert alone.notes == ("a single cast does not tell how the water changes",)
    assert water_change([cast(), cast()]).notes == ("the casts do not differ",)
    two = water_change([cast(-1.0), cast(1.0, bottom=30.0)])
    assert two.notes == ("two casts only: their difference stands for all change of the water",)
    assert two["change_1"][0][-1] == 30.0
    assert two["change_1"][1][0] == pytest.approx(math.sqrt(2.0))
    near = water_change([cast(-1.0), cast(1.0, 0.1)], scales=Scales(5 * HOUR, INF))
    assert near.notes == ("the casts are too near each other to tell how the water changes",)
    with pytest.raises(InputError, match="there is no cast"):
        water_change([])
