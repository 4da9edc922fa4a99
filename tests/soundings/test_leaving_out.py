"""Casts left out one by one: closed forms, an exhaustive search of its own, and errors that were foreseen."""

from __future__ import annotations

import math
from itertools import combinations

import numpy as np
import pytest

from ocean_sound.demo.survey import synthetic_survey
from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings import beam_positions, beam_times
from ocean_sound.soundings.choosing import Scales, choose_casts
from ocean_sound.soundings.leaving_out import leave_one_out
from ocean_sound.soundings.orders import Order, read_orders

START = np.datetime64("2026-07-01T06:00", "ns")
HOUR = np.timedelta64(3600, "s")
C, H, DEPTH = 1500.0, 20.0, 80.0


def cast(hour, faster, name=None, **more):
    """Water of one speed but for a top layer that is faster; beams that keep their slowness."""
    levels = [0.0, H, H + 1e-6, 100.0]
    time = START + np.timedelta64(int(3600 * hour), "s")
    return Profile(levels, [C + faster, C + faster, C, C], id=name or f"K{hour:g}", time=time, **more)


def series(*faster, **more):
    return [cast(hour, each, **more) for hour, each in enumerate(faster)]


@pytest.mark.parametrize("angle", [0.0, 30.0, 45.0, 65.0])
def test_against_first_order(angle):
    # Depth error (1 - tan²) h e/c and across error 2 tan h e/c, e the blend's error of speed (see `directions`).
    left = leave_one_out(
        series(0.0, 0.01, 0.03), scales=Scales(1.9 * 3600, 1e4), angle=angle, depth=DEPTH, tolerance=1.0
    )
    tan = math.tan(math.radians(angle))
    for row, wrong in enumerate((0.01, 0.005, -0.02)):  # the middle one is half of each neighbour
        assert left.depth_error[row] == pytest.approx((1 - tan**2) * H * wrong / C, rel=2e-3, abs=1e-8)
        assert left.across_error[row] == pytest.approx(2 * tan * H * wrong / C, rel=2e-3, abs=1e-8)


def test_water_that_changes_evenly_is_met_between_its_casts():
    left = leave_one_out(series(0, 1, 2, 3, 4), scales=Scales(1.9 * 3600, 1e4), depth=DEPTH, tolerance=0.001)
    assert np.abs(left.depth_error[1:-1]).max() < 5e-4  # of second order
    assert np.abs(left.depth_error[[0, -1]]).min() > 0.04
    assert list(left.holds) == [False, True, True, True, False]


def test_by_hand_with_public_functions():
    rng = np.random.default_rng(5)
    casts = series(*rng.normal(0.0, 2.0, 7), latitude=50.0, longitude=-5.0)
    scales = Scales(2.6 * 3600, 1e4)
    left = leave_one_out(casts, scales=scales, angle=62.0, depth=DEPTH, transducer_depth=4.0, tolerance=0.1)
    for row, omitted in enumerate(casts):
        others = [each for each in casts if each is not omitted]
        choice = choose_casts(others, [omitted.time], [50.0], [-5.0], scales=scales)
        beam = beam_times(omitted, 62.0, DEPTH, transducer_depth=4.0)
        depth = across = 0.0
        for index, weight in zip(choice.index[0], choice.weight[0], strict=True):
            if index >= 0:
                found = beam_positions(
                    others[index], 62.0, beam.time, transducer_depth=4.0, surface_speed=omitted.at(4.0)
                )
                depth, across = depth + weight * found.depth, across + weight * found.across
        assert left.depth_error[row] == pytest.approx(depth - DEPTH, abs=1e-9)
        assert left.across_error[row] == pytest.approx(across - beam.across, abs=1e-9)


class Damage:
    """Largest depth error at the casts not kept, each corrected from those kept; by public functions alone."""

    def __init__(self, casts, scales):
        self.casts, self.scales = casts, scales
        times = [float(beam_times(cast, 65.0, DEPTH).time) for cast in casts]
        speeds = [cast.at(0.0) for cast in casts]
        self.depth = np.array([beam_positions(cast, 65.0, times, surface_speed=speeds).depth for cast in casts]).T

    def __call__(self, kept):
        omitted = sorted(set(range(len(self.casts))) - set(kept))
        if not omitted:
            return 0.0
        place = [np.full(len(omitted), value) for value in (50.0, -5.0)]
        times = [self.casts[each].time for each in omitted]
        choice = choose_casts([self.casts[each] for each in kept], times, *place, scales=self.scales)
        if (choice.index[:, 0] < 0).any():
            return math.inf
        found = self.depth[np.array(omitted)[:, None], np.array(kept)[choice.index]]
        return float(np.abs((choice.weight * found).sum(axis=1) - DEPTH).max())


@pytest.mark.parametrize("seed", range(2))
def test_no_smaller_schedule_would_do(seed):
    rng = np.random.default_rng(seed)
    casts, scales = series(*np.cumsum(rng.normal(0.0, 2.0, 8))), Scales(3.4 * 3600, 1e4)
    damage, limit = Damage(casts, scales), 0.05
    left = leave_one_out(casts, scales=scales, depth=DEPTH, tolerance=limit)
    assert left.fewest
    assert damage(left.kept) <= limit
    assert np.abs(left.spared_error).max() == pytest.approx(damage(left.kept), abs=1e-9)
    assert 1 < len(left.kept) < 8
    for smaller in combinations(range(len(casts)), len(left.kept) - 1):
        assert damage(smaller) > limit


def test_of_many_casts_none_more_can_be_spared():
    rng = np.random.default_rng(8)
    casts, scales = series(*np.cumsum(rng.normal(0.0, 0.4, 40))), Scales(3.4 * 3600, 1e4)
    damage = Damage(casts, scales)
    left = leave_one_out(casts, scales=scales, depth=DEPTH, tolerance=0.05)
    assert not left.fewest
    assert 6 < len(left.kept) < 30
    assert np.nanmax(np.abs(left.spared_error)) == pytest.approx(damage(left.kept), abs=1e-9)
    assert damage(left.kept) <= 0.05
    for each in left.kept:
        assert damage([one for one in left.kept if one != each]) > 0.05


def test_errors_are_as_large_as_was_foreseen():
    # Water as the model has it, casts well apart; over two surveys of 37 casts.
    scales = (5 * 3600.0, 8_000.0)
    score = []
    for seed in (1, 2):
        survey = synthetic_survey(seed=seed, kind="wandering", pings=1, beams=1, cast_every=0.5, scales=scales)
        left = leave_one_out(
            survey.profiles, scales=Scales(*scales), depth=115.0, transducer_depth=4.0, order="Special"
        )
        assert left.served.all()
        score.append(left.depth_error / left.depth_uncertainty)
        assert np.array_equal(left.foreseen, np.abs(score[-1]) <= 1.96)
    assert np.sqrt(np.mean(np.square(score))) == pytest.approx(1.0, abs=0.25)
    assert np.mean(np.abs(score) <= 1.96) > 0.88


def test_uncertainty_of_instruments_alone():
    # Equal casts know nothing of change: the shape moves a beam by (1 - tan²) h s/c, in the one and in the others.
    shapes = {"sound_speed": np.array([0.3, 0.3, 0.0, 0.0]), "equation": np.full(4, 0.07)}
    casts = [cast(hour, 0.0, shapes=shapes) for hour in range(3)]
    left = leave_one_out(casts, scales=Scales(1.9 * 3600, 1e4), depth=DEPTH, tolerance=1.0)
    one = (math.tan(math.radians(65.0)) ** 2 - 1.0) * H * 0.3 / C
    assert left.depth_uncertainty == pytest.approx(np.full(3, one * math.sqrt(2.0)), rel=1e-3)
    assert left.foreseen.all()


def test_a_beam_that_keeps_its_angle():
    # Where the speed is wrong all the way down, depth below the transducer and distance are in proportion to it.
    shapes = {"sound_speed": np.full(2, 0.3)}
    casts = [
        Profile([0.0, 100.0], [C + e, C + e], id=f"K{n}", time=START + n * HOUR, shapes=shapes)
        for n, e in enumerate((0, 1, 5))
    ]
    left = leave_one_out(
        casts, scales=Scales(1.9 * 3600, 1e4), depth=DEPTH, transducer_depth=4.0, tolerance=1.0, flat_array=False
    )
    slant = DEPTH - 4.0
    for row, (wrong, true) in enumerate(((1.0, 0.0), (2.5, 1.0), (1.0, 5.0))):
        share = (wrong - true) / (C + true)
        assert left.depth_error[row] == pytest.approx(slant * share, abs=1e-9)
        assert left.across_error[row] == pytest.approx(slant * math.tan(math.radians(65.0)) * share, abs=1e-9)
    # casts that differ alike at all depths: a single shape of change, alike at all depths too
    change = np.std([casts[1].speed[0], casts[2].speed[0]], ddof=1) ** 2 / (1 - math.exp(-1 / 1.9))
    since = 2 - 2 * math.exp(-1 / 1.9)
    sigma = math.sqrt(2 * 0.3**2 + since * change)
    assert left.depth_uncertainty[0] == pytest.approx(slant / C * sigma, rel=2e-3)


def test_casts_alone_late_or_short():
    casts = [*series(0, 1, 2), cast(50, 1.0)]
    left = leave_one_out(casts, scales=Scales(1.9 * 3600, 1e4), depth=DEPTH, tolerance=1.0)
    assert list(left.served) == [True, True, True, False]
    assert 3 in left.kept
    assert any("1 casts have no other near enough" in note for note in left.notes)
    earlier = leave_one_out(series(0, 1, 2), scales=Scales(1.9 * 3600, 1e4), depth=DEPTH, tolerance=1.0, as_it_was=True)
    assert list(earlier.served) == [False, True, True]
    assert earlier.kept[0] == 0
    short = Profile([0.0, 40.0], [C, C], id="short", time=START + 3 * HOUR)
    mixed = leave_one_out([*series(0, 1, 2), short], scales=Scales(1.2 * 3600, 1e4), depth=DEPTH, tolerance=1.0)
    assert list(np.isnan(mixed.depth_error)) == [False, False, True, True]
    assert any(
        "2 casts can't be judged: they or those near them do not reach the depth" in note for note in mixed.notes
    )
    assert leave_one_out([*series(0, 1), short], scales=Scales(9 * 3600, 1e4), tolerance=1.0).depth == 40.0


def test_casts_are_put_in_order_of_time_and_not_changed():
    casts = series(0, 1, 4)
    back = leave_one_out(casts[::-1], scales=Scales(9 * 3600, 1e4), depth=DEPTH, tolerance=1.0)
    assert back.ids == ("K0", "K1", "K2")
    assert [each.id for each in casts] == ["K0", "K1", "K2"]


def test_limits_of_an_order():
    special = read_orders()["Special"]
    for order in ("Special", special):
        left = leave_one_out(series(0, 1, 2), scales=Scales(9 * 3600, 1e4), depth=DEPTH, order=order)
        assert left.largest_depth_error == pytest.approx(math.hypot(0.25, 0.0075 * DEPTH))
        assert left.largest_across_error == 2.0
    narrow = Order("narrow", thu_fixed=1e-6)
    left = leave_one_out(series(0, 1, 2), scales=Scales(9 * 3600, 1e4), depth=DEPTH, order=narrow)
    assert not left.holds.any()
    assert left.kept == (0, 1, 2)


def test_as_a_dataset_and_in_words():
    left = leave_one_out(series(0, 1, 4), scales=Scales(9 * 3600, 1e4), depth=DEPTH, tolerance=0.2)
    dataset = left.to_dataset()
    assert dataset["depth_error"].values == pytest.approx(left.depth_error)
    assert list(dataset["cast_id"].values) == ["K0", "K1", "K2"]
    assert dataset["kept"].values.sum() == len(left.kept)
    assert dataset["kept"].attrs["flag_meanings"] == "spared needed"
    assert all(dataset[name].attrs["long_name"] for name in dataset.data_vars)
    assert dataset.attrs["largest_depth_error"] == 0.2
    lines = "\n".join(left.lines())
    assert "3 casts left out one by one: beam of 65 degrees to 80 m" in lines
    assert "largest" in lines
    assert "the fewest that do" in lines


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"profiles": series(0, 1)}, "2 casts: 3 or more would be right"),
        ({"angle": 90.0}, "angle is 90 degrees: from 0 to less than 90"),
        ({"depth": 300.0}, "depth is 300 m: no cast reaches it; up to 100 m all of them do"),
        ({"transducer_depth": 90.0}, "the beam would go from 90 m, the transducer, to 80 m"),
        ({"tolerance": None}, "give an order, or a tolerance"),
        ({"order": "Special"}, "give an order, or a tolerance in metres, and not both"),
        ({"tolerance": -1.0}, "tolerance is -1 m: a number above 0"),
        ({"tolerance": None, "order": "9"}, "order '9' is unknown: 2, 1b, 1a, Special, Exclusive are known"),
    ],
)
def test_bad_input(changes, message):
    given = {"profiles": series(0, 1, 2), "scales": Scales(9 * 3600, 1e4), "depth": DEPTH, "tolerance": 1.0} | changes
    with pytest.raises(InputError, match=message):
        leave_one_out(given.pop("profiles"), **given)
