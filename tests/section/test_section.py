"""Sections: constant stays constant, monotone stays monotone, casts are met, and what is added is said."""

from __future__ import annotations

import pickle
from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st
from pyproj import Geod
from scipy.interpolate import PchipInterpolator

from ocean_sound.casts import Cast
from ocean_sound.errors import InputError
from ocean_sound.files import write_dataset
from ocean_sound.profile import Profile
from ocean_sound.section import Seabed, Section, Sediment, SpeedField, Surface, Track
from ocean_sound.section.columns import column_of, smoothed
from ocean_sound.water import sound_speed


def munk(depth):
    """Munk 1974, JASA 55:220; the usual numbers."""
    eta = 2.0 * (np.asarray(depth) - 1300.0) / 1300.0
    return 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta)))


def profile(depth, speed, name="", latitude=np.nan, longitude=np.nan, **more):
    return Profile(depth, speed, id=name, latitude=latitude, longitude=longitude, **more)


def three(**reach):
    """Casts an eighth of a degree apart on a meridian, warmer to the south; `reach` cuts them short."""
    made = []
    for name, latitude, warm in (("a", 60.0, 0.0), ("b", 59.875, 3.0), ("c", 59.75, 9.0)):
        depth = np.arange(0.0, reach.get(name, 2000.0) + 1.0, 50.0)
        made.append(profile(depth, munk(depth) + warm * np.exp(-depth / 300.0), name, latitude, -20.0))
    return made


def test_water_of_one_speed_has_it_everywhere():
    section = Section.from_profile(Profile([0.0, 40.0, 300.0], [1500.0] * 3), flatten=False)
    x, z = np.meshgrid(np.linspace(0.0, 1e5, 9), np.linspace(0.0, section.deepest, 301))
    assert np.abs(section.speed_at(x, z) - 1500.0).max() < 1e-9
    assert not np.abs(section.field.derivatives_at(x, z)[..., 1:]).max() > 1e-15
    assert section.overshoot < 1e-9
    many = Section.from_casts([Profile([0.0, d], [1500.0] * 2) for d in (100.0, 300.0, 200.0)], ranges=[0.0, 1e3, 9e3],
                              seabed=90.0, flatten=False)  # fmt: skip
    assert np.abs(many.speed_at(x / 10.0, np.minimum(z, 90.0)) - 1500.0).max() < 1e-9


def test_water_of_one_gradient_keeps_it():
    section = Section.from_profile(Profile([0.0, 60.0, 500.0], [1490.0, 1490.96, 1498.0]), flatten=False)
    z = np.linspace(0.0, 500.0, 1001)
    assert np.abs(section.speed_at(0.0, z) - (1490.0 + 0.016 * z)).max() < 1e-6


@settings(max_examples=30)
@given(st.lists(st.tuples(st.floats(1.0, 400.0), st.floats(0.0, 15.0)), min_size=2, max_size=25), st.booleans())
def test_a_monotone_profile_stays_monotone_within_the_overshoot(steps, down):
    depth = np.cumsum([0.0, *(step for step, _ in steps[1:])])
    speed = np.cumsum([0.0, *(more for _, more in steps[1:])])
    speed = 1500.0 + speed * (-1.0 if down else 1.0)
    section = Section.from_profile(Profile(depth, speed), flatten=False, tolerance=0.05, finest=0.01)
    z = np.linspace(0.0, depth[-1], 2001)
    found = section.speed_at(0.0, z)
    steps_found = np.diff(found) * (-1.0 if down else 1.0)
    assert steps_found.min() > -2.0 * section.fit.departure - 1e-9
    assert found.min() > speed.min() - section.overshoot - section.fit.departure - 1e-9
    assert found.max() < speed.max() + section.overshoot + section.fit.departure + 1e-9
    assert section.overshoot <= section.fit.departure + 1e-9
    assert section.fit.departure <= 0.06
    assert np.abs(section.speed_at(0.0, depth) - speed).max() <= section.fit.departure + 1e-9


def test_the_fit_is_what_a_finer_look_finds():
    rng = np.random.default_rng(3)
    depth = np.cumsum(rng.uniform(5.0, 60.0, 80)) - 5.0
    depth[0] = 0.0
    speed = munk(depth) + rng.normal(0.0, 0.3, depth.size)
    section = Section.from_profile(Profile(depth, speed), flatten=False, tolerance=0.02)
    z = np.linspace(0.0, depth[-2], 40001)  # the margin below the last level has its say in the last layer
    away = np.abs(section.speed_at(0.0, z) - PchipInterpolator(depth, speed)(z)).max()
    assert section.fit.departure <= 0.022
    assert away == pytest.approx(section.fit.departure, abs=0.003)


def test_refining_the_levels_meets_the_smooth_truth():
    z = np.linspace(0.0, 5000.0, 7919)
    errors = []
    for layers in (25, 50, 100, 200):
        depth = np.linspace(0.0, 5000.0, layers + 1)
        section = Section.from_profile(Profile(depth, munk(depth)), flatten=False, tolerance=1e-5)
        errors.append(np.abs(section.speed_at(0.0, z) - munk(z)).max())
    assert errors[-1] < 0.003
    assert all(after < before / 3.5 for before, after in pairwise(errors))


def test_a_profile_of_layers_out_of_the_field_meets_it_as_one_over_n_squared():
    section = Section.from_profile(Profile(np.arange(0.0, 5001.0, 50.0), munk(np.arange(0.0, 5001.0, 50.0))))
    z = np.linspace(0.0, 5000.0, 200001)
    slowness = 1.0 / section.speed_at(0.0, z)
    exact = float(np.sum(0.5 * (slowness[1:] + slowness[:-1]) * np.diff(z)))
    errors = [abs(section.profile_at(0.0, layers).travel_time() - exact) for layers in (40, 80, 160)]
    assert errors[0] / errors[1] == pytest.approx(4.0, rel=0.15)
    assert errors[1] / errors[2] == pytest.approx(4.0, rel=0.15)
    assert np.array_equal(section.profile_at(0.0, [0.0, 10.0]).depth, [0.0, 10.0])
    assert section.profile_at().depth[-1] == 5000.0


def test_casts_stand_where_the_geodesic_puts_them():
    section = Section.from_casts(three())
    geod = Geod(ellps="WGS84")
    exact = [0.0, *np.cumsum([geod.inv(-20, a, -20, b)[2] for a, b in ((60.0, 59.875), (59.875, 59.75))])]
    assert section.places == pytest.approx(exact, rel=1e-12)
    assert section.max_range == pytest.approx(exact[-1], rel=1e-12)
    assert section.track is not None
    for place, cast in zip(section.places, three(), strict=True):
        assert np.abs(section.speed_at(place, cast.depth) - cast.speed).max() < 2.5 * 0.01
    assert section.fit.departure < 0.02


def test_between_casts_the_speed_is_monotone_along_the_track():
    section = Section.from_casts(three(), tolerance=1e-3)
    x = np.linspace(0.0, section.max_range, 801)
    for z in (0.0, 33.0, 400.0, 1500.0):
        along = section.speed_at(x, z)
        assert np.diff(along).min() > -2.0 * section.fit.between
    # beyond the last cast it is the last cast's
    assert section.speed_at(1e9, 100.0) == section.speed_at(section.places[-1], 100.0)


def test_a_shallow_cast_is_lent_the_water_of_deeper_ones_without_a_step():
    full, cut = three(), three(b=400.0)
    section = Section.from_casts(cut, seabed=2000.0, flatten=False)
    note = "b reaches 400 m: below by a (13.9 km away) and c (13.9 km away)"
    assert note in section.notes
    x = section.places[1]
    z = np.linspace(380.0, 420.0, 401)
    assert np.abs(np.diff(section.speed_at(x, z))).max() < 0.01
    assert np.abs(section.speed_at(x, full[1].depth[:9]) - full[1].speed[:9]).max() < 0.03
    # the difference at the join dies away by e in 300 m, to the mean of the two (they are equally far)
    mean = 0.5 * (full[0].speed + full[2].speed)
    for depth in (400.0, 700.0, 1000.0):
        j = int(depth / 50.0)
        step = cut[1].speed[8] - mean[8]
        assert section.speed_at(x, depth) - mean[j] == pytest.approx(step * np.exp(-(depth - 400.0) / 300.0), abs=0.03)
    with pytest.raises(InputError, match="b reaches 400 m, the seabed there lies at 2000 m: complete it"):
        Section.from_casts(cut, seabed=2000.0, complete=False)
    # a cast that reaches the seabed where it stands needs nothing
    slope = Seabed([0.0, 13000.0, 14500.0, 28000.0], [1900.0, 390.0, 390.0, 1900.0])
    assert Section.from_casts(cut, seabed=slope, complete=False).varies


def test_water_below_all_that_is_known_grows_by_pressure_alone():
    section = Section.from_profile(Profile([0.0, 1000.0], [1480.0, 1490.0]), seabed=1080.0, flatten=False)
    assert "from 1000 m down to 1080 m the speed grows as by pressure alone" in section.notes
    water = sound_speed([2.0, 2.0], [35.0, 35.0], depth=[1000.0, 1080.0], latitude=45.0)
    # another equation than the one used, so to a tenth of what pressure does
    assert section.speed_at(0.0, 1080.0) - 1490.0 == pytest.approx(water[1] - water[0], rel=0.1)
    with pytest.raises(InputError, match="known down to 1000 m and the seabed lies down to 1500 m: complete a cast"):
        Section.from_profile(Profile([0.0, 1000.0], [1480.0, 1490.0]), seabed=1500.0)
    with pytest.raises(InputError, match="known down to 1000 m and the seabed lies down to 1001 m"):
        Section.from_profile(Profile([0.0, 1000.0], [1480.0, 1490.0]), seabed=1001.0, extend_down=False)
    assert (
        Section.from_profile(Profile([0.0, 1000.0], [1480.0, 1490.0]), seabed=1500.0, extend_down=True).deepest > 1500
    )


@given(st.lists(st.tuples(st.floats(1.0, 100.0), st.floats(0.0, 5.0)), min_size=3, max_size=20), st.floats(0.5, 200.0))
@settings(max_examples=40)
def test_smoothing_keeps_what_is_monotone_and_the_mean(steps, window):
    depth = np.cumsum([0.0, *(step for step, _ in steps[1:])])
    speed = 1500.0 + np.cumsum([0.0, *(more for _, more in steps[1:])])
    column, change = smoothed(column_of(Profile(depth, speed), 0.0), window)
    assert np.diff(column.speed).min() > -1e-9
    assert column.speed[[0, -1]] == pytest.approx(speed[[0, -1]], abs=1e-9)
    assert (column.depth[0], column.depth[-1]) == (0.0, depth[-1])
    # against a plain mean of many values in the window
    j = column.depth.size // 2
    half = min(0.5 * window, column.depth[j], depth[-1] - column.depth[j])
    around = np.interp(column.depth[j] + half * (np.arange(20000) + 0.5 - 10000.0) / 10000.0, depth, speed)
    assert column.speed[j] == pytest.approx(around.mean(), abs=1e-3)
    assert 0.0 <= change <= np.ptp(speed)


def test_smoothing_keeps_a_straight_line_and_is_said():
    straight = column_of(Profile([0.0, 30.0, 900.0], [1480.0, 1480.48, 1494.4]), 0.0)
    column, change = smoothed(straight, 50.0)
    assert column.speed == pytest.approx(1480.0 + 0.016 * column.depth, abs=1e-9)
    assert change < 1e-9
    noisy = [replace(cast, speed=cast.speed + 0.3 * np.cos(np.arange(cast.depth.size) * np.pi)) for cast in three()]
    section = Section.from_casts(noisy, smooth=100.0)
    x, z = section.places[1], np.arange(100.0, 1901.0, 50.0)
    assert np.abs(section.speed_at(x, z) - three()[1].at(z)).max() < 0.15
    assert any(
        note.startswith("speeds averaged over 100 m of depth, which changes them by 0.") for note in section.notes
    )
    with pytest.raises(InputError, match="smooth is -1 m; a height of 0 or more"):
        Section.from_casts(noisy, smooth=-1.0)


def test_the_surface_is_reached_and_said():
    section = Section.from_profile(Profile([4.0, 100.0], [1500.0, 1490.0]))
    assert section.speed_at(0.0, 0.0) == pytest.approx(1500.0, abs=0.01)
    assert any("carried from 4 m up to the surface" in note for note in section.notes)


def test_the_earth_is_flattened_beyond_twenty_kilometres():
    water = Profile(np.arange(0.0, 5001.0, 50.0), munk(np.arange(0.0, 5001.0, 50.0)), latitude=45.0)
    short, long = (Section.from_profile(water, max_range=length) for length in (20e3, 20.1e3))
    assert short.radius is None
    assert short.flat_seabed is short.seabed
    # Gauss's mean radius at 45 degrees (NIMA TR8350.2)
    assert long.radius == pytest.approx(6378101.0, abs=1.0)
    z = np.array([0.0, 700.0, 2222.0, 5000.0])
    assert np.abs(long.speed_at(0.0, z) - short.speed_at(0.0, z)).max() < 0.02
    # z_f = R ln(R/(R - z)), c_f = c R/(R - z)
    flat = -long.radius * np.log1p(-z / long.radius)
    assert long.flat_depth(z) == pytest.approx(flat, abs=1e-9)
    assert long.true_depth(flat) == pytest.approx(z, abs=1e-9)
    scaled = np.asarray(long.speed_at(0.0, z)) * long.radius / (long.radius - z)
    assert long.field.speed_at(0.0, flat) == pytest.approx(scaled, rel=1e-14)
    assert long.flat_seabed.depth_at(0.0) == pytest.approx(flat[-1], abs=1e-9)
    assert long.field.depths[-1] > flat[-1]
    assert any("the Earth's radius is 6378101 m" in note for note in long.notes)
    assert Section.from_profile(water, flatten=False).radius is None
    assert Section.from_profile(water, flatten=6.4e6, max_range=10.0).radius == 6.4e6
    nowhere = Section.from_profile(Profile([0.0, 100.0], [1500.0, 1500.0]))
    assert nowhere.radius == pytest.approx(6371008.8)  # the mean radius
    with pytest.raises(InputError, match="flatten is 10; True, False or a radius"):
        Section.from_profile(water, flatten=10)


def test_uncertainty_is_linear_between_casts_and_unknown_below_them():
    casts = [
        profile([0.0, 100.0], [1500.0, 1490.0], "a", 60.0, -20.0, uncertainty=[0.1, 0.3]),
        profile([0.0, 200.0], [1500.0, 1490.0], "b", 60.0, -19.9, uncertainty=[0.5, 0.5]),
        profile([0.0, 200.0], [1500.0, 1490.0], "c", 60.0, -19.8),
    ]
    section = Section.from_casts(casts)
    x = section.places
    assert section.uncertainty_at([0.0, x[1], 0.25 * x[1]], [0.0, 150.0, 50.0]) == pytest.approx([0.1, 0.5, 0.275])
    assert np.isnan(section.uncertainty_at([0.0, x[2], 1.5 * x[1]], [101.0, 10.0, 10.0])).all()
    one = Section.from_profile(casts[0], seabed=90.0)
    assert one.uncertainty_at(1e4, 50.0) == pytest.approx(0.2)
    bare = Section(SpeedField.from_speeds([0.0, 110.0], [1500.0, 1500.0]), Seabed.flat(100.0), max_range=1e3)
    assert np.isnan(bare.uncertainty_at(0.0, 50.0))
    assert np.isnan(bare.overshoot)


def test_the_sediment_takes_the_speed_of_the_water_at_the_seabed():
    own = Sediment(1700.0, 1800.0, 0.5)
    seabed = Seabed([0.0, 1e4], [100.0, 1000.0], kind=[(0.0, "sand"), (5e3, own)])
    section = Section.from_profile(Profile([0.0, 1000.0], [1480.0, 1500.0]), seabed=seabed)
    assert section.sediment_at(0.0).speed == pytest.approx(1.1 * 1482.0, abs=0.02)
    assert section.sediment_at(1e4) is own
    assert section.max_range == 1e4
    assert Section.from_profile(Profile([0.0, 100.0], [1480.0, 1500.0])).sediment_at(0.0) is None


def test_a_section_becomes_a_cf_dataset(tmp_path):
    section = Section.from_casts(three(), seabed=Seabed([0.0, 28000.0], [500.0, 1500.0]), surface=Surface(7.0))
    made = section.to_dataset(ranges=29, depths=31)
    speed = made["sound_speed"]
    assert speed.attrs["standard_name"] == "speed_of_sound_in_sea_water"
    assert made["depth"].attrs["positive"] == "down"
    assert made["seabed_depth"].attrs["standard_name"] == "sea_floor_depth_below_sea_surface"
    assert np.array_equal(np.isnan(speed), made["depth"].to_numpy() > made["seabed_depth"].to_numpy()[:, None])
    assert made["latitude"].to_numpy()[[0, -1]] == pytest.approx([60.0, 59.75])
    assert float(speed[3, 4]) == section.speed_at(float(made["range"][3]), float(made["depth"][4]))
    assert (made.attrs["wind_speed"], made.attrs["seabed_kinds"]) == (7.0, "sand from 0 m")
    write_dataset(made, tmp_path / "a.nc")
    with xr.open_dataset(tmp_path / "a.nc") as back:
        assert back["sound_speed"].attrs == speed.attrs
        assert list(back["cast_id"].to_numpy()) == ["a", "b", "c"]
        np.testing.assert_allclose(back["sound_speed"], speed)


def test_a_section_travels_between_processes():
    section = Section.from_casts(three(), seabed=Seabed([0.0, 28000.0], [500.0, 1500.0], kind="silt"))
    section.kernel_arrays()
    back = pickle.loads(pickle.dumps(section))  # noqa: S301  # our own bytes
    x, z = np.linspace(0.0, section.max_range, 50), np.linspace(0.0, 1500.0, 50)
    assert np.array_equal(back.speed_at(x, z), section.speed_at(x, z))
    assert np.array_equal(back.flat_seabed.depth_at(x), section.flat_seabed.depth_at(x))
    assert repr(back) == repr(section)
    with pytest.raises(ValueError, match="read-only"):
        section.field.coefficients[0, 0, 0] = 1.0


def test_casts_are_brought_to_a_track_in_any_order_and_never_changed():
    casts = [three()[j] for j in (2, 0, 1)]
    before = [cast.speed.copy() for cast in casts]
    section = Section.from_casts(casts, along=[(60.1, -20.05), (59.7, -20.05)])
    assert [cast.id for cast in section.profiles] == ["a", "b", "c"]
    assert np.diff(section.places) == pytest.approx(13925.0, rel=1e-3)
    assert section.places[0] == pytest.approx(11140.0, rel=1e-2)
    assert section.max_range == section.track.length > section.places[-1]
    assert all(np.array_equal(cast.speed, old) for cast, old in zip(casts, before, strict=True))


def test_of_casts_too_near_each_other_the_deepest_is_used():
    near = profile([0.0, 500.0], [1480.0, 1481.0], "near", 59.8751, -20.0)
    a, b, c = three()
    section = Section.from_casts([a, near, b, c], along=Track.between((60.0, -20.0), (59.75, -20.0)), apart=1000.0)
    assert [cast.id for cast in section.profiles] == ["a", "b", "c"]
    assert "cast near left out: b, 11 m along, reaches deeper" in section.notes
    with pytest.raises(InputError, match="of 2 casts 1 is left with apart=1e\\+06 m"):
        Section.from_casts([a, b], apart=1e6)


def test_casts_of_temperature_and_salinity_are_taken_too():
    values = {"pressure": [0.0, 50.0, 200.0], "temperature": [12.0, 11.0, 8.0], "salinity": [35.0, 35.1, 35.0]}
    casts = [Cast(id=name, values=values, latitude=50.0, longitude=lon) for name, lon in (("a", -5.0), ("b", -5.2))]
    section = Section.from_casts(casts, seabed=150.0, equation="unesco")
    exact = sound_speed(12.0, 35.0, pressure=0.0, equation="unesco")
    assert section.speed_at(0.0, 0.0) == pytest.approx(float(exact), abs=0.01)
    assert section.profiles[0].equation == "unesco"
    assert any("sand" in note for note in section.notes)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: Section.from_casts(three()[:1]), "1 casts; two or more"),
        (lambda: Section.from_casts([three()[0], profile([0, 9], [1500, 1500], "x")]), "'x' has no position"),
        (lambda: Section.from_casts(three(), ranges=[0.0, 1.0]), "ranges are no list of 3 distances"),
        (lambda: Section.from_casts(three(), ranges=[0.0, 5.0, 5.0]), "'b' and 'c' are at 5 m and 5 m along"),
        (lambda: Section.from_casts([three()[0]] * 2), "both at 60, -20: distances that increase"),
        (
            lambda: Section.from_casts(three(), along=[(60.0, -20.0), (60.0, -19.0)]),
            "cast 'b' lies 13.9 km off the track; up to 10 km",
        ),
        (
            lambda: Section.from_casts(three(), along=[(60.0, -20.0), (60.0, -19.0)], reach=1e6),
            "at 0 m and 0 m along the track; distances that increase",
        ),
        (
            lambda: Section.from_casts(three(), ranges=[0, 1e3, 2e3], seabed="grid.nc"),
            "a seabed from a grid needs a track",
        ),
        (lambda: Section.from_casts(three(), seabed="none.nc"), "none.nc: can't be opened"),
        (lambda: Section.from_casts(three(), apart=-1.0), "apart is -1 m"),
        (lambda: Section.from_casts(three(), tolerance=0.0), "tolerance is 0; a number of m/s above 0"),
        (lambda: Section.from_profile(three()[0], finest=np.nan), "finest is nan; a number of m above 0"),
        (lambda: Section.from_profile(three()[0], seabed=-5.0), "has the depth -5 m, land"),
        (lambda: Section.from_profile(three()[0], max_range=0.0), "max_range is 0 m"),
        (lambda: Section.from_profile(three()[0]).speed_at(0.0, [10.0, 9000.0]), "depth 9000 m; 0 to 20"),
        (lambda: Section.from_profile(three()[0]).speed_at(np.nan, 10.0), "a range is not a finite number"),
        (
            lambda: Section(SpeedField.from_speeds([0.0, 90.0], [1500.0] * 2), Seabed.flat(100.0), max_range=1.0),
            "the speed field ends at 90 m, above the seabed at 100 m",
        ),
        (
            lambda: Section(
                SpeedField.from_speeds([0.0, 90.0], [1500.0] * 2), Seabed.flat(10.0), max_range=1.0, profiles=three()
            ),
            "3 profiles and 0 places",
        ),
    ],
)
def test_bad_input_is_told_in_one_line(make, message):
    with pytest.raises(InputError, match=message) as told:
        make()
    assert "\n" not in str(told.value)
