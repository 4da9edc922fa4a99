"""Which casts serve a ping: against the rule written out slowly, continuity along tracks, and what is not known."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from pyproj import Geod

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings.choosing import Chooser, Scales, choose_casts

START = np.datetime64("2026-05-01T00:00", "ns")
HOUR = 3600.0
SCALES = Scales(6 * HOUR, 20e3)
GEOD = Geod(ellps="WGS84")


def at(seconds):
    return START + np.round(np.asarray(seconds, float) * 1e9).astype("timedelta64[ns]")


def cast(seconds=0.0, latitude=60.0, longitude=5.0, **changes):
    time = at(seconds) if np.isfinite(seconds) else np.datetime64("NaT")
    about = {"time": time, "latitude": latitude, "longitude": longitude} | changes
    return Profile([0.0, 9.0], [1500.0, 1500.0], **about)


def spread(choice, casts):
    """Weights with one column for each cast."""
    whole = np.zeros((choice.weight.shape[0], casts))
    for row, (index, weight) in enumerate(zip(choice.index, choice.weight, strict=True)):
        for one, part in zip(index, weight, strict=True):
            assert (one >= 0) == (part > 0.0)
            if one >= 0:
                whole[row, one] += part
    return whole


def slowly(casts, ping, scales, most=4, as_it_was=False):
    """The rule by itself for one ping: weights of all casts, and the variance of the change."""

    def apart(one, other):
        seconds = (one[0] - other[0]) / np.timedelta64(1, "ns") / 1e9
        metres = GEOD.inv(one[2], one[1], other[2], other[1])[2]
        return math.hypot(seconds / scales.time, metres / scales.length)

    places = [(each.time, each.latitude, each.longitude) for each in casts]
    raw = []
    for place in places:
        r = apart(ping, place)
        late = as_it_was and place[0] > ping[0]
        raw.append(0.0 if r >= 1.0 or late else (1.0 - r) / max(r, 1e-12))
    cut = sorted(raw, reverse=True)[most] if len(raw) > most else 0.0
    weight = [max(value - cut, 0.0) for value in raw]
    if sum(weight) == 0.0:
        return np.zeros(len(casts)), math.nan
    weight = np.array(weight) / sum(weight)
    ping_to = np.array([math.exp(-apart(ping, place)) for place in places])
    among = np.array([[math.exp(-apart(one, other)) for other in places] for one in places])
    return weight, 1.0 - 2.0 * weight @ ping_to + weight @ among @ weight


places = st.tuples(st.floats(0.0, 12 * HOUR), st.floats(59.9, 60.1), st.floats(4.8, 5.2))


@settings(max_examples=60)
@given(st.lists(places, min_size=1, max_size=8), st.lists(places, min_size=1, max_size=4), st.integers(1, 5))
def test_as_the_rule_written_out(casts, pings, most):
    water = [cast(*place) for place in casts]
    time, latitude, longitude = np.array(pings).T
    for as_it_was in (False, True):
        choice = choose_casts(water, at(time), latitude, longitude, scales=SCALES, most=most, as_it_was=as_it_was)
        found = spread(choice, len(casts))
        assert choice.weight.shape == choice.index.shape == (len(pings), most)
        assert (np.diff(choice.weight, axis=1) <= 0.0).all()
        for row in range(len(pings)):
            weight, change = slowly(
                water, (at(time[row]), latitude[row], longitude[row]), SCALES, most=most, as_it_was=as_it_was
            )
            if not weight.any() and found[row].any():  # more than `most` alike
                assert len(casts) > most
                continue
            assert found[row] == pytest.approx(weight, abs=1e-6)
            assert choice.change[row] == pytest.approx(max(change, 0.0), abs=1e-6, nan_ok=True)
            assert found[row].sum() == pytest.approx(float(found[row].any()))


@settings(max_examples=40)
@given(st.lists(places, min_size=1, max_size=9, unique=True), places, places, st.integers(2, 4))
def test_weights_and_change_have_no_step_anywhere_on_a_track(casts, begin, end, most):
    chooser = Chooser([cast(*place) for place in casts], scales=SCALES, most=most)

    def along(part):
        time, latitude, longitude = (np.outer(1.0 - part, begin) + np.outer(part, end)).T
        choice = chooser.choose(at(time), latitude, longitude)
        return np.column_stack((spread(choice, len(casts)), np.where(choice.change >= 0.0, choice.change, -1.0)))

    def largest(part):
        """The pair of neighbours with the largest step in the weights, and that step."""
        whole = along(part)
        served = (whole[:-1, :-1].any(axis=1)) & (whole[1:, :-1].any(axis=1))
        steps = np.where(served, np.abs(np.diff(whole, axis=0)).max(axis=1), 0.0)
        first = int(np.argmax(steps))
        return part[first], part[first + 1], steps[first]

    low, high, step = largest(np.linspace(0.0, 1.0, 201))
    for _ in range(9):  # ten times closer each time: what is continuous flattens out
        low, high, step = largest(np.linspace(low, high, 11))
    # Times are of 1 ns, so the last of these steps are 1e-11 of the track.
    assert step < 1e-3


def test_with_the_nearest_alone_there_is_a_step():
    water = [cast(0.0), cast(2 * HOUR)]
    choice = choose_casts(water, at([HOUR - 0.001, HOUR + 0.001]), [60.0] * 2, [5.0] * 2, scales=SCALES, most=1)
    assert choice.index.ravel().tolist() == [0, 1]
    assert choice.weight.ravel().tolist() == [1.0, 1.0]


@settings(max_examples=30)
@given(st.lists(places, min_size=2, max_size=7, unique=True), st.lists(places, min_size=1, max_size=3), st.randoms())
def test_the_order_of_casts_and_turns_of_longitude_change_nothing(casts, pings, random):
    shuffled = list(range(len(casts)))
    random.shuffle(shuffled)
    water = [cast(*place) for place in casts]
    time, latitude, longitude = np.array(pings).T
    one = choose_casts(water, at(time), latitude, longitude, scales=SCALES)
    assume(not any(row.any() and len(set(row[row > 0])) < (row > 0).sum() for row in one.weight))
    other = choose_casts([water[which] for which in shuffled], at(time), latitude, longitude + 360.0, scales=SCALES)
    assert spread(other, len(casts)) == pytest.approx(spread(one, len(casts))[:, shuffled], abs=1e-6)
    assert other.change == pytest.approx(one.change, abs=1e-6, nan_ok=True)


def test_at_a_cast_it_is_that_casts_alone_and_the_water_has_not_changed():
    water = [cast(0.0), cast(HOUR, 60.02), cast(2 * HOUR, 60.04, 5.1)]
    choice = choose_casts(
        water,
        [each.time for each in water],
        [each.latitude for each in water],
        [each.longitude for each in water],
        scales=SCALES,
    )
    assert choice.index[:, 0].tolist() == [0, 1, 2]
    assert choice.weight[:, 0] == pytest.approx(1.0, abs=1e-9)
    assert choice.change == pytest.approx(0.0, abs=1e-9)
    assert choice.nearest_time.tolist() == [0.0, 0.0, 0.0]
    assert choice.nearest_distance == pytest.approx(0.0, abs=1e-6)


def test_the_variance_of_the_change_against_draws_of_such_water():
    # Water at four casts and one ping, drawn with the correlations of the model; errors of the blend are counted.
    rng = np.random.default_rng(5)
    hours, pinged = np.array([0.0, 1.5, 4.0, 5.0]), 2.5
    every = np.append(hours, pinged)
    correlation = np.exp(-np.abs(every[:, None] - every) / 6.0)
    draws = rng.multivariate_normal(np.zeros(5), correlation, size=200_000)
    choice = choose_casts(
        [cast(hour * HOUR) for hour in hours], at([pinged * HOUR]), [60.0], [5.0], scales=Scales(6 * HOUR, 1e4)
    )
    errors = draws[:, 4] - draws[:, :4] @ spread(choice, 4)[0]
    # Variance of 200,000 draws is known within 0.3 % (k = 1).
    assert choice.change[0] == pytest.approx(errors.var(), rel=0.015)


def test_too_far_in_either_scale_is_not_used():
    _, north, _ = GEOD.fwd(5.0, 60.0, 0.0, 20e3)
    time = at([6 * HOUR - 1, 6 * HOUR + 1, 0.0, 0.0])
    latitude = 60.0 + (north - 60.0) * np.array([0.0, 0.0, 0.9999, 1.0001])
    _, latitude[2], _ = GEOD.fwd(5.0, 60.0, 0.0, 20e3 - 1)
    _, latitude[3], _ = GEOD.fwd(5.0, 60.0, 0.0, 20e3 + 1)
    choice = choose_casts([cast()], time, latitude, [5.0] * 4, scales=SCALES)
    assert choice.index[:, 0].tolist() == [0, -1, 0, -1]
    assert choice.weight[:, 0].tolist() == [1.0, 0.0, 1.0, 0.0]
    assert np.isnan(choice.change).tolist() == [False, True, False, True]
    assert choice.nearest_time[0] == pytest.approx(6 * HOUR - 1)
    assert choice.nearest_distance[2] == pytest.approx(20e3 - 1, abs=1e-3)
    assert np.isnan(choice.nearest_distance[3])


def test_past_casts_only():
    water = [cast(0.0), cast(2 * HOUR)]
    times = at([HOUR, 2 * HOUR, -1.0])
    choice = choose_casts(water, times, [60.0] * 3, [5.0] * 3, scales=SCALES, as_it_was=True)
    assert choice.index[:, :2].tolist()[0] == [0, -1]
    assert choice.index[1, 0] == 1
    assert choice.index[2].tolist() == [-1] * 4


def test_many_pings_are_as_each_by_itself():
    rng = np.random.default_rng(3)
    water = [cast(*place) for place in zip(
        rng.uniform(0, 90 * HOUR, 60), rng.uniform(59.5, 60.5, 60), rng.uniform(4.0, 6.0, 60), strict=True
    )]  # fmt: skip
    part = np.linspace(0.0, 1.0, 10_000)
    time, latitude, longitude = at(part * 90 * HOUR), 59.6 + 0.8 * part, 5.0 + np.cos(40 * part)
    latitude[7000] = np.nan
    choice = choose_casts(water, time, latitude, longitude, scales=SCALES)
    chosen = rng.integers(0, part.size, 60)
    for row in [*chosen, 7000]:
        one = choose_casts(water, time[[row]], latitude[[row]], longitude[[row]], scales=SCALES)
        assert one.index[0].tolist() == choice.index[row].tolist()
        assert one.weight[0] == pytest.approx(choice.weight[row], abs=1e-9)
    for row in chosen[:20]:
        weight, _ = slowly(water, (time[row], latitude[row], longitude[row]), SCALES)
        assert spread(choice, 60)[row] == pytest.approx(weight, abs=1e-9)


@pytest.mark.parametrize("latitude", [-89.9, 0.0, 45.0, 89.9])
def test_what_is_left_out_early_is_too_far(latitude):
    # All the way round and over the pole: no cast within the length may be missed.
    rng = np.random.default_rng(8)
    water = [cast(0.0, latitude, longitude) for longitude in rng.uniform(-180, 180, 40)]
    scales = Scales(math.inf, 50e3)
    longitude = rng.uniform(-180, 180, 50)
    choice = choose_casts(water, None, np.full(50, latitude), longitude, scales=scales)
    far = GEOD.inv(*np.broadcast_arrays(longitude[:, None], latitude, [each.longitude for each in water], latitude))[2]
    assert ((choice.weight > 0).any(axis=1) == (far < 50e3).any(axis=1)).all()


# --- what is not known


def test_a_single_cast_without_time_or_position_is_used_and_said_so():
    nowhere = cast(math.nan, math.nan, math.nan)
    choice = choose_casts([nowhere], at([0.0]), [60.0], [5.0], scales=SCALES)
    assert choice.index[0].tolist() == [0, -1, -1, -1]
    assert choice.change[0] == pytest.approx(2.0)
    assert np.isnan(choice.nearest_time[0])
    assert np.isnan(choice.nearest_distance[0])
    assert [note.split(":")[0] for note in choice.notes] == [
        "the cast has no time",
        "1 of 1 casts (without a name first) have no position",
    ]


def test_without_a_position_only_time_counts():
    water = [cast(0.0), cast(2 * HOUR, math.nan, math.nan, id="B")]
    choice = choose_casts(water, at([HOUR]), [70.0], [5.0], scales=SCALES)
    assert choice.weight[0, :2] == pytest.approx([0.5, 0.5])
    assert choice.notes == ("1 of 2 casts (B first) have no position: only time counts",)
    # A ping that lacks its own.
    choice = choose_casts([cast(0.0), cast(2 * HOUR)], at([HOUR, HOUR]), [70.0, 91.0], [5.0, 5.0], scales=SCALES)
    assert choice.weight[:, :2].tolist() == [[0.0, 0.0], [0.5, 0.5]]
    assert choice.notes == ("1 of 2 pings have no position: only time counts for them",)


def test_a_ping_without_a_time():
    when = np.array([START, "NaT"], dtype="datetime64[ns]")
    several = choose_casts([cast(0.0), cast(1.0)], when, [60.0] * 2, [5.0] * 2, scales=SCALES)
    assert several.index[1].tolist() == [-1] * 4
    assert several.notes == ("1 of 2 pings have no time: no cast can be chosen for them",)
    single = choose_casts([cast(0.0)], when, [60.0] * 2, [5.0] * 2, scales=SCALES)
    assert single.index[:, 0].tolist() == [0, 0]
    assert single.change.tolist() == [0.0, 2.0]
    assert single.notes == ("1 of 2 pings have no time: the cast is used for them whatever its age",)


def test_a_scale_may_be_infinite():
    water = [cast(0.0, 60.0), cast(math.nan, 60.1)]
    choice = choose_casts(water, None, [60.05], [5.0], scales=Scales(math.inf, 20e3))
    assert choice.weight[0, :2] == pytest.approx([0.5, 0.5], abs=1e-4)
    assert choice.notes == ()


@pytest.mark.parametrize(
    ("casts", "options", "message"),
    [
        ([], {}, "there is no cast: give at least one"),
        ([cast(), cast(math.nan, id="B7")], {}, r"cast 2 of 2 \(B7\) has no time, which choosing among several"),
        ([cast(math.nan)], {"as_it_was": True}, r"cast 1 of 1 \(without a name\) has no time, which past casts only"),
        ([cast(), cast()], {"scales": Scales(math.inf, math.inf)}, "neither scale is finite"),
        ([cast()], {"most": 0}, "most is 0: 1 or more"),
    ],
)
def test_what_cannot_be_chosen_from(casts, options, message):
    with pytest.raises(InputError, match=message):
        choose_casts(casts, at([0.0]), [60.0], [5.0], **{"scales": SCALES, **options})


def test_rows_that_do_not_fit():
    with pytest.raises(InputError, match=r"have the shapes \(1,\), \(2,\), \(2,\): one row each, alike"):
        choose_casts([cast()], at([0.0]), [60.0, 60.0], [5.0, 5.0], scales=SCALES)
    with pytest.raises(InputError, match="have the shapes none"):
        choose_casts([cast()], None, None, None, scales=SCALES)


@pytest.mark.parametrize(("time", "length", "name"), [(0.0, 1.0, "time"), (1.0, -2.0, "length"), (math.nan, 1, "time")])
def test_scales_are_above_nothing(time, length, name):
    with pytest.raises(InputError, match=f"scale of {name} is"):
        Scales(time, length)


def test_inputs_are_not_changed():
    time, latitude, longitude = at([0.0, 1.0]), np.array([60.0, 95.0]), np.array([365.0, 5.0])
    kept = time.copy(), latitude.copy(), longitude.copy()
    choose_casts([cast()], time, latitude, longitude, scales=SCALES)
    for one, other in zip((time, latitude, longitude), kept, strict=True):
        assert (one == other).all()
