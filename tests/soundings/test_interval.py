"""When the next cast is due: growth in closed form, tides seen and not seen, and too little to tell."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings.choosing import Scales
from ocean_sound.soundings.interval import _LEAST, _bins, _first_past, _quantiles, cast_interval
from ocean_sound.soundings.orders import Order, read_orders

START = np.datetime64("2026-05-01T00:00", "ns")
HOUR = 3600.0
M2 = 12.4206012  # h: 360 degrees at 28.9841042 an hour (from memory)
INF, NAN = math.inf, math.nan
# Depth error of a beam of 65 degrees for 1 m/s in the upper 10 m of 1500 m/s, to first order: (tan2 - 1) h/c.
PER_SPEED = (math.tan(math.radians(65.0)) ** 2 - 1.0) * 10.0 / 1500.0


def cast(speed, hours, **about):
    time = START + np.timedelta64(round(hours * HOUR * 1e9), "ns")
    return Profile([0.0, 10.0, 10.001, 50.0], [1500 + speed, 1500 + speed, 1500, 1500], time=time, **about)


def series(speed, hours):
    return [cast(s, h) for s, h in zip(speed, hours, strict=True)]


def drawn(seed, apart):
    correlation = np.exp(-apart) + 1e-10 * np.eye(len(apart))
    return np.linalg.cholesky(correlation) @ np.random.default_rng(seed).normal(size=len(apart))


def forgetful(seed, size=150, scale=5.0):
    hours = np.arange(float(size))
    return 0.5 * drawn(seed, np.abs(hours[:, None] - hours) / scale), hours


def growth_in_closed_form(hours, scale=5.0):
    return 1.96 * 0.5 * PER_SPEED * np.sqrt(2.0 * (1.0 - np.exp(-np.asarray(hours) / scale)))


# --- growth


def test_growth_in_forgetful_water_in_closed_form():
    limit = growth_in_closed_form(3.0)
    seen = []
    for seed in range(4):
        found = cast_interval(series(*forgetful(seed)), tolerance=limit)
        growth = found.by_time
        assert growth.pairs.sum() == 150 * 149 // 2
        expected = growth_in_closed_form(growth.separation / HOUR)
        # The series is 30 decorrelation times long: the spread of each is known within some 25 %.
        assert growth.error_95[0] == pytest.approx(expected, rel=0.65)
        assert growth.error_95[0, :3] == pytest.approx(expected[:3], rel=0.35)
        assert (growth.low <= growth.error_95).all()
        assert (growth.error_95 <= growth.high).all()
        assert growth.due_low[0] < growth.due[0] < growth.due_high[0]
        seen.append((growth.due[0], growth.due_low[0] <= 3 * HOUR <= growth.due_high[0]))
    dues, held = zip(*seen, strict=True)
    assert sum(held) >= 3
    assert np.median(dues) == pytest.approx(3 * HOUR, rel=0.25)


def test_growth_with_distance():
    places = np.arange(0.0, 150.0)  # km northward, all at one time
    speed = 0.5 * drawn(3, np.abs(places[:, None] - places) / 5.0)
    casts = [cast(s, 0.0, latitude=60.0 + place / 111.4, longitude=5.0) for s, place in zip(speed, places, strict=True)]
    found = cast_interval(casts, tolerance=growth_in_closed_form(3.0))
    growth = found.by_distance
    assert growth.due_low[0] < 3000.0 < growth.due_high[0]
    assert growth.due[0] == pytest.approx(3000.0, rel=0.4)
    assert found.by_time.pairs.size == 0
    assert np.isnan(found.by_time.due).all()
    assert "time: 0 pairs of casts are apart by time alone; 40 are needed to say how it counts" in found.notes
    assert "decorrelation" not in " ".join(found.notes)


def test_time_and_distance_are_told_apart():
    rng = np.random.default_rng(7)
    hours, place = np.sort(rng.uniform(0.0, 400.0, 160)), rng.choice([0.0, 60.0], 160)
    apart = np.hypot((hours[:, None] - hours) / 10.0, (place[:, None] - place) / 20.0)
    speed = 0.5 * drawn(8, apart)
    casts = [cast(s, h, latitude=60.0 + p / 111.4, longitude=5.0) for s, h, p in zip(speed, hours, place, strict=True)]
    found = cast_interval(casts, tolerance=growth_in_closed_form(4.0, 10.0), scales=Scales(10 * HOUR, 20e3))
    assert found.by_time.due_low[0] < 4 * HOUR < found.by_time.due_high[0]
    # 60 km are three scales: water from there is unlike already, and no nearer pair tells more.
    assert found.by_distance.separation == pytest.approx(60e3, rel=0.01)
    assert found.by_distance.error_95[0, 0] == pytest.approx(growth_in_closed_form(60.0, 20.0), rel=0.3)
    time = found.by_time
    assert time.pairs.sum() < 160 * 159 // 2  # not those across, unless far apart in time


def test_an_order_and_its_name_at_several_depths():
    speed, hours = forgetful(0, 60)
    by_name = cast_interval(series(8 * speed, hours), order="Special", depth=[20.0, 45.0])
    special = read_orders()["Special"]
    assert by_name.limit == pytest.approx(special.tvu([20.0, 45.0]))
    assert by_name.limited_by == "the TVU of order Special"
    as_order = cast_interval(series(8 * speed, hours), order=special, depth=[20.0, 45.0])
    assert as_order.by_time.due.tolist() == by_name.by_time.due.tolist()
    # The error comes from the upper 10 m alone, and the order allows more at depth.
    assert by_name.by_time.due[0] < by_name.by_time.due[1]
    assert by_name.by_time.error_95[0] == pytest.approx(by_name.by_time.error_95[1], rel=0.05)
    free = cast_interval(series(speed, hours), order=Order("wide", thu_fixed=2.0))
    assert free.by_time.due.tolist() == [INF]
    assert free.by_time.due_high.tolist() == [INF]


def test_the_same_casts_in_any_order_give_the_same():
    speed, hours = forgetful(5, 50)
    casts = series(speed, hours)
    one = cast_interval(casts, tolerance=0.03)
    shuffled = [casts[which] for which in np.random.default_rng(0).permutation(50)]
    other = cast_interval(shuffled, tolerance=0.03)
    for name in ("error_95", "low", "high", "due", "due_low", "due_high"):
        assert getattr(other.by_time, name) == pytest.approx(getattr(one.by_time, name), rel=1e-9)
    again = cast_interval(casts, tolerance=0.03, seed=1)
    assert again.by_time.due[0] == one.by_time.due[0]
    assert again.by_time.low.tolist() != one.by_time.low.tolist()
    narrower = cast_interval(casts, tolerance=0.03, confidence=0.5).by_time
    assert (narrower.low >= one.by_time.low).all()
    assert (narrower.high <= one.by_time.high).all()


# --- tides


def tidal(hours):
    return 0.5 * np.cos(2.0 * np.pi * np.asarray(hours) / M2 + 0.4)


def test_an_internal_tide_that_the_casts_follow():
    hours = np.arange(0.0, 150.0)
    found = cast_interval(series(tidal(hours), hours), tolerance=0.02)
    assert not [note for note in found.notes if "alias" in note or "M2" in note]
    growth = found.by_time
    single = growth.pairs > 0
    hourly = growth.separation / HOUR
    single &= np.abs(hourly - np.round(hourly)) < 1e-9
    # |difference| is 2 A |sin(pi dt/P)| times the size of a sine, which 95 % of the time is under sin(0.95 pi/2).
    expected = PER_SPEED * np.abs(np.sin(np.pi * hourly / M2)) * math.sin(0.95 * math.pi / 2.0)
    assert single.sum() >= 3
    assert growth.error_95[0, single] == pytest.approx(expected[single], rel=0.02)
    due = math.asin(0.02 / PER_SPEED / math.sin(0.95 * math.pi / 2.0)) / math.pi * M2 * HOUR
    assert growth.due[0] == pytest.approx(due, rel=0.1)


@pytest.mark.parametrize(("step", "phases"), [(M2, "the same phase"), (M2 / 2, "the same or opposite phases")])
def test_an_internal_tide_at_its_own_period_is_not_seen_and_said_so(step, phases):
    hours = np.arange(40) * step
    trend = 1e-4 * np.random.default_rng(1).normal(size=40)
    found = cast_interval(series(tidal(hours) + trend, hours), tolerance=0.02)
    assert any(
        note.startswith(f"the casts alias the tide M2 (12.42 h): all fall near {phases} of it") for note in found.notes
    )
    if step == M2:
        assert found.by_time.due[0] == INF
        assert any("12.4 h apart, more than half of the period of M2" in note for note in found.notes)


def test_casts_at_the_same_time_of_day_do_not_see_the_day():
    rng = np.random.default_rng(2)
    hours = np.arange(40) * 24.0 + rng.uniform(-1.0, 1.0, 40)
    notes = cast_interval(series(rng.normal(size=40), hours), tolerance=0.02).notes
    assert any(note.startswith("the casts alias the day: all fall near the same phase") for note in notes)
    assert any(note.startswith("the casts are 24") for note in notes)
    assert not any("alias the tide" in note for note in notes)  # 40 days at 24 h meet M2 at every phase


def test_a_short_series_says_so():
    hours = np.arange(12.0) / 2.0
    notes = cast_interval(series(0.1 * hours, hours), tolerance=0.02).notes
    assert any(note.startswith("the casts cover 5.5 h, less than the tide M2") for note in notes)
    assert any(note.startswith("the casts cover 5.5 h, less than the day") for note in notes)
    few = cast_interval(series(0.1 * hours, hours), tolerance=0.02, scales=Scales(HOUR, INF)).notes
    assert any(note.startswith("the casts cover 5.5 decorrelation times: with fewer than 12") for note in few)


# --- too little


def test_too_few_pairs_are_not_stretched():
    hours = np.arange(0.0, 8.0)
    found = cast_interval(series(np.sin(hours), hours), tolerance=0.02)
    assert found.by_time.separation.size == 0
    assert np.isnan(found.by_time.due).all()
    assert np.isnan(found.by_time.due_high).all()
    assert "time: 28 pairs of casts are apart by time alone; 40 are needed to say how it counts" in found.notes


def test_a_limit_passed_before_the_nearest_casts_is_a_guess():
    speed, hours = forgetful(1, 60)
    found = cast_interval(series(50 * speed, hours), tolerance=0.05)
    assert found.by_time.due[0] < HOUR
    assert any(
        note.startswith("time: at 50 m depth the limit is passed before the nearest casts, 1 h apart")
        for note in found.notes
    )


def test_casts_that_do_not_differ_are_never_due():
    found = cast_interval([cast(1.0, h) for h in range(30)], tolerance=0.01)
    assert found.by_time.due.tolist() == [INF]
    assert found.by_time.error_95 == pytest.approx(0.0, abs=1e-8)


@pytest.mark.parametrize(
    ("casts", "options", "message"),
    [
        (4, {"tolerance": 0.1}, "4 casts are too few: at least 5"),
        (9, {}, "give an order, or a tolerance in metres, and not both"),
        (9, {"tolerance": 0.1, "order": "1a"}, "give an order, or a tolerance in metres, and not both"),
        (9, {"tolerance": -0.1}, "tolerance is -0.1 m: a number above 0"),
        (9, {"order": "1c"}, "order '1c' is unknown: .*1a.* are known"),
        (9, {"tolerance": 0.1, "confidence": 95}, "confidence is 95: between 0 and 1"),
        (9, {"tolerance": 0.1, "depth": 90.0}, "0 casts serve a beam at 65 degrees down to 90 m: at least 5"),
    ],
)
def test_what_cannot_be_answered(casts, options, message):
    with pytest.raises(InputError, match=message):
        cast_interval(series(np.arange(casts), np.arange(casts)), **options)


def test_casts_that_end_above_are_counted():
    speed, hours = forgetful(1, 30)
    casts = [*series(speed, hours), Profile([0.0, 20.0], [1500.0, 1500.0], time=START)]
    assert (
        "1 of 31 casts can't serve a beam at 65 degrees down to 40 m"
        in cast_interval(casts, tolerance=0.1, depth=40.0).notes
    )


def test_as_a_dataset():
    speed, hours = forgetful(1, 40)
    found = cast_interval(series(speed, hours), tolerance=0.03)
    dataset = found.to_dataset()
    assert dict(dataset.sizes) == {"depth": 1, "time_apart": found.by_time.pairs.size, "distance_apart": 0}
    assert dataset["due_after_time"].to_numpy() == pytest.approx(found.by_time.due)
    assert dataset["depth_error_95_by_time_high"].to_numpy() == pytest.approx(found.by_time.high)
    assert dataset["due_after_distance"].attrs["units"] == "m"
    assert dataset["time_apart"].attrs["units"] == "s"
    assert dataset.attrs["limited_by"] == "a tolerance of 0.03 m"
    assert "no cast has a position" in dataset.attrs["notes"]
    assert all("long_name" in dataset[name].attrs and "units" in dataset[name].attrs for name in dataset.variables)


# --- parts


@given(
    st.lists(st.tuples(st.integers(-20, 20), st.integers(0, 3)), min_size=1, max_size=60),
)
def test_weighted_quantiles_are_those_of_values_repeated(pairs):
    values, weights = np.array(pairs, dtype=float).T
    found = _quantiles(values, weights[None, :])[0]
    repeated = np.repeat(values, weights.astype(int))
    expected = np.quantile(repeated, 0.95, method="inverted_cdf") if repeated.size else NAN
    assert found == pytest.approx(expected, nan_ok=True)


@given(st.lists(st.floats(1.0, 1e4), min_size=0, max_size=400))
def test_bins_hold_all_pairs_in_order(values):
    separation = np.array(values)
    bins = _bins(separation, np.arange(separation.size))
    assert bool(bins) == (separation.size >= _LEAST)
    if bins:
        assert sorted(np.concatenate(bins).tolist()) == list(range(separation.size))
        assert all(which.size >= _LEAST for which in bins)
    for one, other in pairwise(bins):
        assert separation[one].max() < separation[other].min()


@given(st.lists(st.floats(0.0, 5.0), min_size=1, max_size=8), st.floats(0.1, 5.0), st.floats(0.1, 5.0))
def test_a_wider_limit_is_never_passed_earlier(errors, one, other):
    separation = np.arange(1.0, len(errors) + 1)
    low, high = (_first_past(separation, np.array(errors), limit) for limit in sorted((one, other)))
    assert low <= high
    assert low > 0.0


def test_where_the_limit_is_passed():
    # The square grows along straight lines: 0, 4, 16 at 0, 10, 20.
    separation, error = np.array([10.0, 20.0]), np.array([2.0, 4.0])
    assert _first_past(separation, error, 1.0) == pytest.approx(2.5)
    assert _first_past(separation, error, math.sqrt(10.0)) == pytest.approx(15.0)
    assert _first_past(separation, error, 4.0) == INF
    assert _first_past(separation, np.array([NAN, 4.0]), 2.0) == pytest.approx(5.0)
    assert math.isnan(_first_past(separation, np.array([NAN, NAN]), 2.0))
