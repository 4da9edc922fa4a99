"""The profile against closed forms, an independent integrator and invariants, and what it refuses."""

from __future__ import annotations

import copy
import itertools
import pickle

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad

from ocean_sound.casts import read_casts
from ocean_sound.errors import InputError
from ocean_sound.files import write_csv, write_dataset
from ocean_sound.profile import Profile

EPS = np.finfo(float).eps


@st.composite
def profiles(draw):
    levels = draw(st.integers(2, 12))
    steps = draw(st.lists(st.floats(0.01, 500.0), min_size=levels, max_size=levels))
    speed = draw(st.lists(st.floats(1400.0, 1700.0), min_size=levels, max_size=levels))
    return Profile(np.cumsum(steps), speed)


def fractions():
    return st.floats(0.0, 1.0)


def depth_at(profile, fraction):
    return min(float(profile.depth[0] + fraction * (profile.depth[-1] - profile.depth[0])), float(profile.depth[-1]))


class TestClosedForms:
    # One-way times of a linear speed, ln(1 + g z / c0) / g, as exact as the digits given (closed form).
    @pytest.mark.parametrize(
        ("speed", "gradient", "depth", "time"),
        [(1500.0, 0.017, 1000.0, 0.6629171916606361), (1520.0, -0.1, 100.0, 0.06600684031352058)],
        ids=["echo.lin.c1500.g0.017.z1000", "echo.lin.c1520.g-0.1.z100"],
    )
    def test_travel_time_of_a_linear_speed(self, speed, gradient, depth, time):
        profile = Profile([0.0, depth], [speed, speed + gradient * depth])
        assert profile.travel_time() == pytest.approx(time, abs=1e-13)
        assert profile.harmonic_mean_speed() == pytest.approx(depth / time, rel=1e-12)

    @pytest.mark.parametrize("gradient", [0.0, 1e-16, 1e-12, -1e-9, 1e-6, 1e-3, -0.5, 2.0])
    def test_no_cancellation_at_any_gradient(self, gradient):
        profile = Profile([0.0, 100.0], [1500.0, 1500.0 + gradient * 100.0])
        with mpmath.workdps(40):
            c1, c2 = (mpmath.mpf(float(c)) for c in profile.speed)
            exact = 100 / c1 if c1 == c2 else 100 / (c2 - c1) * mpmath.log(c2 / c1)
            assert abs(profile.travel_time() / exact - 1) < 4 * EPS

    def test_uniform_water(self):
        profile = Profile([0.0, 10.0, 1000.0], [1480.0] * 3)
        assert profile.travel_time(100.0, 248.0) == pytest.approx(0.1, rel=1e-15)
        assert profile.mean_speed() == 1480.0
        assert profile.harmonic_mean_speed() == pytest.approx(1480.0, rel=4 * EPS)

    def test_mean_speed_is_the_integral(self):
        profile = Profile([0.0, 50.0, 200.0], [1500.0, 1490.0, 1520.0])
        # from 20 m (1496 m/s) to 50 m, then to 125 m (1505 m/s): two trapezia
        assert profile.mean_speed(20.0, 125.0) == pytest.approx((30 * 1493.0 + 75 * 1497.5) / 105, rel=1e-15)

    def test_gradient_of_each_layer(self):
        assert Profile([5.0, 10.0, 30.0], [1500.0, 1501.0, 1499.0]).gradient == pytest.approx([0.2, -0.1])


class TestInvariants:
    @given(profiles(), fractions(), fractions())
    def test_travel_time_equals_quadrature(self, profile, one, other):
        top, bottom = sorted((depth_at(profile, one), depth_at(profile, other)))
        nodes = [top, *profile.depth[(profile.depth > top) & (profile.depth < bottom)], bottom]
        slow = sum(quad(lambda z: 1.0 / profile.at(z), a, b)[0] for a, b in itertools.pairwise(nodes))
        assert profile.travel_time(top, bottom) == pytest.approx(slow, rel=1e-10, abs=1e-15)

    @given(profiles(), fractions(), fractions(), fractions())
    def test_times_add_up_and_run_both_ways(self, profile, one, two, three):
        a, b, c = sorted(depth_at(profile, f) for f in (one, two, three))
        whole = profile.travel_time(a, c)
        assert profile.travel_time(a, b) + profile.travel_time(b, c) == pytest.approx(whole, rel=1e-12, abs=1e-16)
        assert profile.travel_time(c, a) == whole

    @given(profiles(), fractions(), fractions())
    def test_harmonic_mean_below_mean_within_speeds(self, profile, one, other):
        a, b = depth_at(profile, one), depth_at(profile, other)
        harmonic, mean = profile.harmonic_mean_speed(a, b), profile.mean_speed(a, b)
        slack = 1e-9 * mean
        assert profile.speed.min() - slack <= harmonic <= mean + slack <= profile.speed.max() + 2 * slack

    @given(profiles(), st.floats(0.01, 0.99))
    def test_splitting_a_layer_changes_nothing(self, profile, fraction):
        extra = float(profile.depth[0] + fraction * (profile.depth[1] - profile.depth[0]))
        depth = np.insert(profile.depth, 1, extra)
        split = Profile(depth, profile.at(depth))
        assert split.travel_time() == pytest.approx(profile.travel_time(), rel=1e-14)
        assert split.mean_speed() == pytest.approx(profile.mean_speed(), rel=1e-14)

    @given(profiles())
    def test_speed_at_a_level_is_the_speed_of_the_level(self, profile):
        assert np.array_equal(profile.at(profile.depth), profile.speed)
        assert profile.harmonic_mean_speed(profile.depth[1], profile.depth[1]) == profile.speed[1]

    def test_scalar_equals_array(self):
        profile = Profile([0.0, 7.0, 31.0], [1500.0, 1493.0, 1499.0])
        depths = np.linspace(0.0, 31.0, 12)
        assert [profile.at(z) for z in depths] == list(profile.at(depths))
        assert isinstance(profile.at(3), float)
        assert profile.at(depths.reshape(3, 4)).shape == (3, 4)


class TestValue:
    def test_columns_are_copies_and_read_only(self):
        depth, speed = np.array([0.0, 10.0]), np.array([1500.0, 1490.0])
        profile = Profile(depth, speed, [0.1, 0.2])
        depth[0] = 5.0
        assert profile.depth[0] == 0.0
        for column in (profile.depth, profile.speed, profile.uncertainty, profile.gradient):
            with pytest.raises(ValueError, match="read-only"):
                column[0] = 1.0

    def test_survives_pickling_and_copying(self):
        profile = Profile([0.0, 10.0], [1500.0, 1490.0], id="a", time=np.datetime64("2024-05-01T12:00"), notes=["x"])
        for twin in (pickle.loads(pickle.dumps(profile)), copy.deepcopy(profile)):  # noqa: S301
            assert np.array_equal(twin.speed, profile.speed)
            assert (twin.id, twin.time, twin.notes) == ("a", np.datetime64("2024-05-01T12:00:00", "ns"), ("x",))

    def test_says_what_it_is(self):
        profile = Profile([0.0, 10.0], [1500.0, 1490.0], id="K7")
        assert repr(profile) == "<Profile K7: 2 levels, 0 to 10 m, 1490.0 to 1500.0 m/s>"
        assert len(profile) == 2

    def test_to_surface(self):
        profile = Profile([3.0, 10.0], [1500.0, 1490.0], [0.1, 0.2], id="K7", notes=("before",))
        carried = profile.to_surface()
        assert list(carried.depth) == [0.0, 3.0, 10.0]
        assert list(carried.speed) == [1500.0, 1500.0, 1490.0]
        assert list(carried.uncertainty) == [0.1, 0.1, 0.2]
        assert carried.notes[0] == "before"
        assert "3 m" in carried.notes[1]
        assert carried.id == "K7"
        assert carried.to_surface() is carried
        assert (profile.surface_assumed, carried.surface_assumed) == (False, True)

    def test_to_dataset(self):
        profile = Profile(
            [0.0, 10.0],
            [1500.0, 1490.0],
            [0.1, 0.2],
            id="K7",
            time=np.datetime64("2024-05-01"),
            latitude=54.0,
            longitude=-20.0,
            equation="teos10",
            notes=("salinity assumed",),
        )
        dataset = profile.to_dataset()
        assert dict(dataset.sizes) == {"level": 2}
        assert dataset["sound_speed"].attrs["standard_name"] == "speed_of_sound_in_sea_water"
        assert dataset["sound_speed"].attrs["units"] == "m s-1"
        assert dataset["sound_speed"].attrs["ancillary_variables"] == "sound_speed_uncertainty"
        assert dataset["sound_speed"].attrs["equation"] == "teos10"
        assert dataset["sound_speed_uncertainty"].attrs["units"] == "m s-1"
        assert dataset["depth"].attrs["positive"] == "down"
        assert float(dataset["latitude"]) == 54.0
        assert dataset["cast_id"].item() == "K7"
        assert dataset.attrs["notes"] == "salinity assumed"
        assert "sound_speed_uncertainty" not in Profile([0, 1], [1500, 1500]).to_dataset()

    def test_columns_and_what_it_is_about(self):
        profile = Profile([0, 9], [1500, 1490], [0.1, 0.2], id="K7", time=np.datetime64("2024-05-01"), notes=("a", "b"))
        assert list(profile.columns()) == ["depth", "sound_speed", "sound_speed_uncertainty"]
        assert profile.about() == {
            "cast_id": "K7",
            "time": "2024-05-01T00:00:00Z",
            "latitude": None,
            "longitude": None,
            "equation": None,
            "notes": "a; b",
        }

    def test_written_files_are_read_back(self, tmp_path):
        profile = Profile([0.1, 9.0], [1500.25, 1490.0], id="K7", time=np.datetime64("2024-05-01T06:00"), latitude=54.5,
                          longitude=-20.0)  # fmt: skip
        write_csv(tmp_path / "p.csv", profile.columns(), preamble=profile.about())
        write_dataset(profile.to_dataset(), tmp_path / "p.nc")
        for name in ("p.csv", "p.nc"):
            (cast,) = read_casts(tmp_path / name)
            back = Profile.from_cast(cast)
            assert np.array_equal(back.depth[1:], profile.depth)
            assert np.array_equal(back.speed[1:], profile.speed)
            assert (back.time, back.latitude, back.longitude) == (profile.time, 54.5, -20.0)


class TestRefusals:
    @pytest.mark.parametrize(
        ("depth", "speed", "message"),
        [
            ([0.0], [1500.0], r"profile 'K7': 1 level; a profile needs at least 2"),
            ([], [], r"0 levels"),
            ([0.0, 10.0], [1500.0], r"2 depths and 1 values of speed"),
            ([0.0, np.nan], [1500.0, 1500.0], r"depth at level 1 .* is nan m; a finite depth of 0 m or more"),
            ([-1.0, 5.0], [1500.0, 1500.0], r"depth at level 0 .* is -1 m"),
            ([0.0, np.inf], [1500.0, 1500.0], r"depth at level 1 .* is inf m"),
            ([0.0, 5.0, 5.0], [1500.0] * 3, r"level 2 .* lies at 5 m, not below the level before it at 5 m"),
            ([0.0, 5.0], [1500.0, 150.0], r"speed at level 1 .* is 150 m/s; 1000 to 3000 m/s would be right"),
            ([0.0, 5.0], [1500.0, np.nan], r"speed at level 1 .* is nan m/s"),
            (np.ma.masked_array([0.0, 5.0], [False, True]), [1500.0, 1500.0], r"depth at level 1 .* is nan"),
            ([[0.0, 5.0]], [1500.0, 1500.0], r"depth has 2 dimensions"),
            (["a", "b"], [1500.0, 1500.0], r"depth is not a list of numbers"),
        ],
    )
    def test_columns(self, depth, speed, message):
        with pytest.raises(InputError, match=message):
            Profile(depth, speed, id="K7")

    @pytest.mark.parametrize(
        ("uncertainty", "message"),
        [
            ([0.1], "2 depths and 1 values of uncertainty"),
            ([0.1, -0.1], r"uncertainty at level 1 .* is -0.1 m/s; 0 m/s"),
        ],
    )
    def test_uncertainty(self, uncertainty, message):
        with pytest.raises(InputError, match=message):
            Profile([0.0, 5.0], [1500.0, 1500.0], uncertainty)

    @pytest.mark.parametrize("depth", [0.5, 10.5, np.nan])
    def test_depths_outside(self, depth):
        profile = Profile([1.0, 10.0], [1500.0, 1500.0], id="K7")
        for ask in (profile.at, profile.travel_time, profile.mean_speed, profile.harmonic_mean_speed):
            with pytest.raises(InputError, match=rf"depth {depth:g} m lies outside the profile; .*from 1 to 10 m"):
                ask(depth)
