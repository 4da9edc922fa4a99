"""The synthetic survey: its truth by other ways, its errors as stated, and its water."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from pyproj import Proj
from scipy.integrate import solve_ivp
from scipy.signal import argrelmax

from ocean_sound.demo.survey import ORIGIN, START, only_casts, synthetic_survey
from ocean_sound.demo.water_model import KINDS, water_model
from ocean_sound.errors import InputError
from ocean_sound.profile import Accuracy
from ocean_sound.soundings import beam_positions, beam_times
from ocean_sound.soundings.positions import flat_depth, flattened, true_depth
from ocean_sound.water import sound_speed

PLANE = Proj(proj="aeqd", lat_0=ORIGIN[0], lon_0=ORIGIN[1], ellps="WGS84")


@pytest.fixture(scope="module", params=KINDS)
def survey(request):
    return synthetic_survey(seed=4, kind=request.param, pings=12, beams=13, max_angle=70.0, along_track_angle=3.0)


def sines(survey):
    """Sines from the vertical in the water at the transducer, of a level flat face, and the share across."""
    across = np.sin(np.radians(survey.soundings["across_track_angle"].to_numpy()))
    ahead = np.sin(np.radians(survey.soundings["along_track_angle"].to_numpy()))
    truth = survey.truth["true_surface_speed"].to_numpy()[:, None]
    ratio = truth / survey.soundings["surface_sound_speed"].to_numpy()[:, None]
    return np.hypot(across, ahead) * ratio, across / np.hypot(across, ahead)


def test_corrected_with_the_true_water_each_beam_is_where_it_was(survey):
    assert np.isfinite(survey.soundings["two_way_travel_time"]).all()
    sine, share = sines(survey)
    for ping, profile in enumerate(survey.true_profiles()):
        below = float(survey.soundings["transducer_depth"][ping])
        water = flattened(profile, survey.radius)
        time = 0.5 * survey.soundings["two_way_travel_time"].to_numpy()[ping]
        angle = np.degrees(np.arcsin(sine[ping]))
        found = beam_positions(water, angle, time, transducer_depth=float(flat_depth(below, survey.radius)))
        truth = survey.truth.isel(ping=ping)
        assert true_depth(found.depth, survey.radius) == pytest.approx(truth["depth"].to_numpy(), abs=1e-4)
        assert found.across * share[ping] == pytest.approx(truth["across_track_distance"].to_numpy(), abs=1e-4)


def test_the_true_time_by_an_independent_integrator(survey):
    # In polar coordinates about the Earth's centre, so neither layers nor the flattening are used.
    sine, _ = sines(survey)
    truth, radius = survey.truth, survey.radius
    for ping, beam in ((0, 0), (7, 11)):
        place = (survey.soundings[name].to_numpy()[ping] for name in ("time", "latitude", "longitude"))
        profile = survey.true_profile(*place)
        below = float(survey.soundings["transducer_depth"][ping])
        deep = float(truth["depth"][ping, beam])
        p = (radius - below) * sine[ping, beam] / float(truth["true_surface_speed"][ping])

        def rates(z, _state, profile=profile, p=p):
            speed = np.interp(z, profile.depth, profile.speed)
            sine_here = p * speed / (radius - z)
            cosine = np.sqrt(1.0 - sine_here**2)
            return [1.0 / (speed * cosine), radius / (radius - z) * sine_here / cosine]

        knots = [below, *(level for level in survey.levels if below < level < deep), deep]
        state = [0.0, 0.0]
        for top, bottom in pairwise(knots):
            state = solve_ivp(rates, (top, bottom), state, method="DOP853", rtol=1e-12, atol=1e-14).y[:, -1]
        assert 2.0 * state[0] == pytest.approx(float(survey.soundings["two_way_travel_time"][ping, beam]), abs=1e-9)
        distance = np.hypot(truth["across_track_distance"][ping, beam], truth["along_track_distance"][ping, beam])
        assert state[1] == pytest.approx(float(distance), abs=1e-5)


def test_echoes_come_from_the_seabed_where_their_positions_say(survey):
    east, north = PLANE(survey.truth["sounding_longitude"].to_numpy(), survey.truth["sounding_latitude"].to_numpy())
    assert survey.truth["reduced_depth"].to_numpy() == pytest.approx(survey.seabed(east, north), abs=1e-3)
    above = survey.soundings["water_level"].to_numpy()[:, None]
    assert survey.truth["depth"].to_numpy() == pytest.approx(survey.seabed(east, north) + above, abs=1e-3)


def test_the_seabed_is_met_once(survey):
    # By the steepest beam, 71 degrees: no slope as steep as 19 degrees, on a fine grid around the lines.
    x, y = np.meshgrid(np.arange(-8e3, 8e3, 40.0), np.arange(-8e3, 8e3, 40.0))
    depth = survey.seabed(x, y)
    steepest = max(np.abs(np.diff(depth, axis=axis)).max() for axis in (0, 1)) / 40.0
    assert steepest < 0.1


def test_the_same_seed_gives_the_same_survey():
    one, two = (synthetic_survey(seed=9, pings=3, beams=3) for _ in range(2))
    other = synthetic_survey(seed=10, pings=3, beams=3)
    assert one.soundings.identical(two.soundings)
    assert np.array_equal(one.profiles[1].speed, two.profiles[1].speed)
    assert not np.allclose(one.soundings["two_way_travel_time"], other.soundings["two_way_travel_time"], atol=1e-6)


def test_errors_of_casts_are_as_large_as_they_say():
    # 60 casts in water that stays as it is; each level over its uncertainty, the equation's share (0.07) common to all.
    accuracy = Accuracy(temperature=0.05, salinity=0.05, pressure=0.3, temperature_noise=0.02, pressure_noise=0.0)
    survey = synthetic_survey(
        seed=1, kind="internal tide", height=0.0, pings=1, beams=1, cast_every=0.3, accuracy=accuracy
    )
    wrong, stated = [], []
    for profile in survey.profiles:
        truth = survey.true_profile(profile.time, profile.latitude, profile.longitude)
        wrong.append(profile.speed + survey.water.speed_error - truth.speed)
        stated.append(np.sqrt(profile.uncertainty**2 - profile.shapes["equation"] ** 2))
    assert len(wrong) > 60
    ratio = np.std(wrong, axis=0)[1:] / np.mean(stated, axis=0)[1:]
    assert 0.75 < ratio.min() < ratio.max() < 1.3  # 60 draws: 9 % each


def test_errors_of_the_equation_are_as_large_as_stated():
    errors = [synthetic_survey(seed=seed, pings=1, beams=1, cast_every=9.0).water.speed_error for seed in range(60)]
    assert np.std(errors) == pytest.approx(0.07, rel=0.2)


def test_the_speed_is_that_of_the_equation():
    survey = synthetic_survey(pings=2, beams=3)
    place = tuple(survey.soundings[name].to_numpy()[1] for name in ("time", "latitude", "longitude"))
    seconds = float((place[0] - START) / np.timedelta64(1, "s"))
    temperature, salinity = survey.water.state(seconds, *PLANE(place[2], place[1]), survey.levels)
    speed = sound_speed(temperature, salinity, depth=survey.levels, latitude=ORIGIN[0], longitude=ORIGIN[1])
    assert survey.true_profile(*place).speed == pytest.approx(np.asarray(speed) + survey.water.speed_error, abs=1e-6)


def test_the_front_is_crossed_and_no_thermocline_is_doubled():
    survey = synthetic_survey(kind="front", pings=9, beams=3)
    speeds = np.array([profile.speed for profile in survey.true_profiles()])
    assert speeds[0, 5] - speeds[-1, 5] > 5.0
    for speed in speeds:
        assert argrelmax(-np.diff(speed))[0].size == 1  # of steep falls there is one


def test_the_internal_tide_comes_again():
    hour = 3600.0
    water = water_model(
        "internal tide", np.random.default_rng(3), bottom=120.0, latitude=56.0, longitude=-11.0, height=6.0
    )
    time = np.arange(0.0, 400 * hour, 0.25 * hour)
    lift = water._lift(time, np.zeros(time.size), np.zeros(time.size))
    assert 6.0 < np.abs(lift).max() <= 6.0 * 1.65
    spectrum = np.abs(np.fft.rfft(lift * np.hanning(time.size)))
    assert 1.0 / np.fft.rfftfreq(time.size, 0.25)[spectrum.argmax()] == pytest.approx(12.42, rel=0.04)
    top, bottom = water.speed(time[:200, None], 0.0, 0.0, np.array([0.0, 120.0])).T
    assert np.ptp(top) < 1e-9
    assert np.ptp(bottom) < 1e-9


@pytest.mark.parametrize("away", [(1.0, 0.0), (0.0, 1.0), (0.6, 0.8)])
def test_wandering_water_forgets_as_stated(away):
    # Over many waters the correlation of the field at a distance r (in scales) is exp(-r).
    here, there = [], []
    for seed in range(300):
        water = water_model(
            "wandering", np.random.default_rng(seed), bottom=120.0, latitude=56.0, longitude=-11.0,
            scales=(3600.0, 5000.0),
        )  # fmt: skip
        here.append(water._amplitudes(np.zeros(1), np.zeros(1), np.zeros(1)))
        there.append(water._amplitudes(np.array([3600.0 * away[0]]), np.array([5000.0 * away[1]]), np.zeros(1)))
    here, there = np.ravel(here), np.ravel(there)
    assert here.var() == pytest.approx(1.0, rel=0.15)
    assert np.mean(here * there) == pytest.approx(np.exp(-np.hypot(*away)), abs=0.12)


def test_fewer_casts():
    survey = synthetic_survey(pings=1, beams=1)
    fewer = only_casts(survey, [0, 2])
    assert [cast.id for cast in fewer.casts] == [profile.id for profile in fewer.profiles] == ["OB-01", "OB-03"]
    assert len(survey.casts) == 7


def test_casts_may_end_early():
    survey = synthetic_survey(pings=1, beams=1, cast_reach=80.0)
    assert {float(profile.depth[-1]) for profile in survey.profiles} == {80.0}
    assert beam_times(survey.true_profiles()[0], 0.0, 110.0).status == 0


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"kind": "still"}, "kind of water is 'still': one of front, internal tide, wandering would be right"),
        ({"pings": 0}, "pings is 0: more than 0 would be right"),
        ({"max_angle": 80.0}, "max_angle is 80: above 0 and up to 75 degrees would be right"),
        ({"depth": 5.0}, "depth is 5: 30 to 2000 m would be right"),
        ({"cast_every": 0.0}, "cast_every is 0: more than 0 would be right"),
    ],
)
def test_what_makes_no_survey(changes, message):
    with pytest.raises(InputError, match=message):
        synthetic_survey(**changes)


def test_other_casts_leave_the_truth_as_it_is():
    few, many = (synthetic_survey(pings=2, beams=3, cast_every=hours) for hours in (1.0, 0.1))
    assert len(many.casts) > len(few.casts)
    assert few.soundings.identical(many.soundings)
    assert few.truth.identical(many.truth)
    assert np.array_equal(few.casts[0].values["temperature"], many.casts[0].values["temperature"])
