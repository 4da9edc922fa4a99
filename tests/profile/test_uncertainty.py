"""What a profile's uncertainty is made of: against Monte Carlo over the sensors, closed forms, and round trips."""

from __future__ import annotations

import pickle

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts import Cast, CastBlock, read_casts
from ocean_sound.casts.completing import complete_cast
from ocean_sound.errors import InputError
from ocean_sound.files import write_csv, write_dataset
from ocean_sound.profile import INSTRUMENTS, Accuracy, Profile, speeds_of_block
from ocean_sound.profile.layered import _weights
from ocean_sound.water import conductivity_from_salinity, equations

DRAWS = 2500  # the spread of so many is itself known to 1.4 %
LIMIT = 0.05
PRESSURE = np.arange(0.0, 601.0, 10.0)
TEMPERATURE = 6.0 + 9.0 / (1.0 + np.exp((PRESSURE - 150.0) / 50.0))
SALINITY = 34.8 + 0.8 / (1.0 + np.exp((PRESSURE - 200.0) / 70.0))
INSIDE = slice(3, -3)  # away from the ends, where a cast that is moved has no level left


def make_cast(**values):
    return Cast(id="K7", values=values, latitude=50.0, longitude=-20.0)


def spread_of(draw, *, accuracy, equation="teos10", **options):
    """The true profile, and on its levels those of many casts, each with other errors of its sensors."""
    truth = Profile.from_cast(draw(), accuracy=accuracy, equation=equation, **options)
    chance = np.random.default_rng(7)
    casts = [draw(chance.standard_normal(3), chance.standard_normal((3, PRESSURE.size))) for _ in range(DRAWS)]
    columns = speeds_of_block(CastBlock.from_casts(casts), equation=equation, **options)
    rows = [slice(a, b) for a, b in zip(columns.starts[:-1], columns.starts[1:], strict=True)]
    speed = np.array([np.interp(truth.depth, columns.depth[own], columns.speed[own]) for own in rows])
    return truth, speed


def of_sensors(accuracy, *, conductivity=False):
    """A cast as the sensors would have it, whose calibration and noise err by so many standard uncertainties."""

    def draw(calibration=(0.0, 0.0, 0.0), noise=(0.0, 0.0, 0.0)):
        warm, salt, deep = calibration
        measured = {
            "pressure": PRESSURE + accuracy.pressure * deep + accuracy.pressure_noise * noise[2],
            "temperature": TEMPERATURE + accuracy.temperature * warm + accuracy.temperature_noise * noise[0],
        }
        if conductivity:
            cell = conductivity_from_salinity(SALINITY, TEMPERATURE, PRESSURE) + accuracy.conductivity * salt
            return make_cast(**measured, conductivity=cell)
        return make_cast(**measured, salinity=SALINITY + accuracy.salinity * salt + accuracy.salinity_noise * noise[1])

    return draw


def true_cast():
    return make_cast(pressure=PRESSURE, temperature=TEMPERATURE, salinity=SALINITY)


def without_equation(profile):
    return np.sqrt(profile.uncertainty**2 - profile.shapes["equation"] ** 2)


class TestMonteCarlo:
    @pytest.mark.parametrize(
        ("equation", "accuracy"),
        [
            ("teos10", Accuracy(temperature=0.05, salinity=0.03, pressure=3.0)),
            ("mackenzie", Accuracy(temperature=0.002, salinity=0.01, pressure=2.4)),
            ("teos10", Accuracy(0.02, 0.02, 0.1, temperature_noise=0.05, salinity_noise=0.04, pressure_noise=0.0)),
            # far less than the spacing of the levels: interpolating between them would average it
            ("teos10", Accuracy(0.001, 0.001, 0.02, temperature_noise=0.0, salinity_noise=0.0, pressure_noise=0.2)),
        ],
        ids=["calibration", "float", "noise", "noise of pressure"],
    )
    def test_level_by_level(self, equation, accuracy):
        truth, speed = spread_of(of_sensors(accuracy), accuracy=accuracy, equation=equation)
        found, stated = speed.var(axis=0)[INSIDE], (without_equation(truth) ** 2)[INSIDE]
        # five levels together, so that the chance of the draws counts for less
        ratio = np.convolve(stated, np.ones(5), "valid") / np.convolve(found, np.ones(5), "valid")
        assert np.abs(np.sqrt(ratio) - 1.0).max() < LIMIT

    def test_means_and_times_keep_the_correlation(self):
        accuracy = Accuracy(temperature=0.05, salinity=0.03, pressure=3.0, temperature_noise=0.1)
        truth, speed = spread_of(of_sensors(accuracy), accuracy=accuracy)
        top, bottom = truth.depth[3], truth.depth[-4]
        means = [Profile(truth.depth, own).harmonic_mean_speed(top, bottom) for own in speed]
        times = [Profile(truth.depth, own).travel_time(top, bottom) for own in speed]
        sensors = Profile(truth.depth, truth.speed, noise=truth.noise,
                          shapes={k: v for k, v in truth.shapes.items() if k != "equation"})  # fmt: skip
        assert sensors.mean_speed_uncertainty(top, bottom) == pytest.approx(np.std(means), rel=LIMIT)
        assert sensors.travel_time_uncertainty(top, bottom) == pytest.approx(np.std(times), rel=LIMIT)
        # Taken for independent from level to level, all this would seem seven times as sure as it is.
        alone = Profile(truth.depth, truth.speed, noise=sensors.uncertainty)
        assert alone.mean_speed_uncertainty(top, bottom) < 0.3 * np.std(means)

    def test_a_conductivity_cell_shares_its_temperature_and_pressure(self):
        accuracy = Accuracy(
            temperature=0.05, pressure=3.0, conductivity=0.002, temperature_noise=0.0, salinity_noise=0.0
        )
        truth, speed = spread_of(of_sensors(accuracy, conductivity=True), accuracy=accuracy)
        found = speed.std(axis=0)[INSIDE]
        assert np.abs(without_equation(truth)[INSIDE] / found - 1.0).max() < LIMIT
        # Too warm a reading makes the computed salinity too low: the two errors of the speed work against each other.
        plain = Profile.from_cast(true_cast(), accuracy=accuracy)
        assert (truth.shapes["temperature"][INSIDE] < 0.8 * plain.shapes["temperature"][INSIDE]).all()

    def test_depth_of_an_expendable_probe(self):
        depth = np.arange(0.0, 801.0, 4.0)
        temperature = 6.0 + 9.0 / (1.0 + np.exp((depth - 300.0) / 100.0))
        accuracy = INSTRUMENTS["xbt"]
        chance = np.random.default_rng(3)
        truth = Profile.from_cast(make_cast(depth=depth, temperature=temperature), salinity=35.0, accuracy=accuracy)
        casts = []
        for _ in range(DRAWS):
            # the probe at the depth named is truly elsewhere, and measures the temperature of that place
            place = depth - chance.standard_normal() * np.maximum(5.0, 0.02 * depth)
            casts.append(make_cast(depth=depth, temperature=6.0 + 9.0 / (1.0 + np.exp((place - 300.0) / 100.0))))
        columns = speeds_of_block(CastBlock.from_casts(casts), salinity=35.0)
        found = columns.speed.reshape(DRAWS, -1).std(axis=0)
        steep = (depth > 120.0) & (depth < 560.0)
        assert np.abs(np.abs(truth.shapes["depth"][steep]) / found[steep] - 1.0).max() < LIMIT
        assert truth.shapes["depth"][steep][5] > 0.0  # too deep a reading brings warm water down


class TestShapes:
    def test_names_and_signs(self):
        profile = Profile.from_cast(true_cast())
        assert set(profile.shapes) == {"equation", "temperature", "salinity", "pressure"}
        assert set(profile.shapes["equation"].tolist()) == {equations()["teos10"].standard_error}
        assert (profile.shapes["temperature"] > 0.0).all()
        assert (profile.shapes["salinity"] > 0.0).all()
        assert (profile.noise > 0.0).all()

    def test_no_error_of_pressure_matters_in_water_that_does_not_change(self):
        cast = make_cast(pressure=PRESSURE, temperature=np.full(61, 8.0), salinity=np.full(61, 35.0))
        shapes = Profile.from_cast(cast, pressure_uncertainty=10.0).shapes
        assert np.abs(shapes.get("pressure", np.zeros(1))).max() < 2e-3

    def test_over_a_layer_thinner_than_the_error_the_whole_step_counts_and_no_more(self):
        pressure = np.array([0.0, 50.0, 50.1, 100.0])
        cast = make_cast(pressure=pressure, temperature=[15.0, 15.0, 10.0, 10.0], salinity=[35.0] * 4)
        share = np.abs(Profile.from_cast(cast, pressure_uncertainty=2.0).shapes["pressure"])
        step = Profile.from_cast(cast).speed[1] - Profile.from_cast(cast).speed[2]
        assert share[1] == pytest.approx(step / np.sqrt(2.0), rel=0.02)  # only on one of its two sides
        assert share.max() < step

    def test_measured_speeds(self):
        cast = make_cast(depth=[0.0, 10.0, 20.0], sound_speed=[1500.0, 1490.0, 1480.0])
        plain = Profile.from_cast(cast, sound_speed_uncertainty=0.05)
        assert set(plain.shapes) == {"sound_speed"}
        moved = Profile.from_cast(cast, sound_speed_uncertainty=0.05, pressure_uncertainty=0.3)
        assert moved.shapes["depth"] == pytest.approx([0.3, 0.3, 0.3])  # 0.3 m of -1 m/s per metre
        assert moved.uncertainty == pytest.approx(np.hypot(0.05, 0.3))
        noisy = Profile.from_cast(cast, accuracy=Accuracy(sound_speed=0.05, sound_speed_noise=0.02))
        assert noisy.noise.tolist() == [0.02] * 3

    def test_what_the_cast_states_for_its_levels_goes_first(self):
        values = {"pressure": [0.0, 10.0], "temperature": [9.0, 9.0], "salinity": [35.0, 35.0]}
        stated = {"temperature": [0.5, np.nan], "salinity": [0.0, 0.0], "pressure": [0.0, 0.0]}
        cast = Cast(id="A", values=values, uncertainties=stated)
        shapes = Profile.from_cast(cast).shapes
        assert shapes["temperature"][0] / shapes["temperature"][1] == pytest.approx(0.5 / 0.002, rel=1e-3)
        assert not {"salinity", "pressure"} & set(shapes)
        direct = Cast(id="A", values={"depth": [0.0, 9.0], "sound_speed": [1500.0, 1490.0]},
                      uncertainties={"sound_speed": [0.1, 0.2]})  # fmt: skip
        assert Profile.from_cast(direct).uncertainty.tolist() == [0.1, 0.2]

    def test_added_levels_are_less_sure_by_their_own_shape(self):
        before = make_cast(depth=[5.0, 100.0], temperature=[12.0, 10.0], salinity=[35.0, 35.0])
        profile = Profile.from_cast(complete_cast(before, below="constant", to_depth=300.0))
        assert profile.depth.tolist() == [0.0, 5.0, 100.0, 300.0]
        shape = profile.shapes["completion_temperature"]
        assert shape[1:3].tolist() == [0.0, 0.0]
        assert shape[0] == pytest.approx(5.0 * 0.05 * 3.5, rel=0.1)  # common practice; dc/dT is about 3.5 m/s per degC
        assert shape[3] > 1.0
        assert profile.surface_assumed
        assert profile.uncertainty[3] > 5.0 * profile.uncertainty[2]

    def test_a_probe_that_says_what_it_is(self):
        said = {"fall_rate_equation": "not stated", "depth_uncertainty": "3 % of depth or 4.6 m"}
        values = {"depth": [0.0, 100.0, 400.0], "temperature": [15.0, 12.0, 8.0]}
        cast = Cast(id="X", values=values, latitude=50.0, attributes=said)
        profile = Profile.from_cast(cast, salinity=35.0)
        assert any("0.1 degC, 1 of salinity and 4.6 m or 3 % if greater" in note for note in profile.notes)
        assert abs(profile.shapes["depth"][2]) > abs(
            Profile.from_cast(cast, salinity=35.0, accuracy="ctd").shapes["depth"][2]
        )
        usual = Cast(id="X", values=dict(cast.values), attributes={"fall_rate_equation": "hanawa"})
        assert any("5 m or 2 % if greater" in note for note in Profile.from_cast(usual, salinity=35.0).notes)

    def test_casts_of_a_block_have_each_their_own(self):
        said = {"depth_uncertainty": "2 % of depth or 5 m, whichever is greater (common practice)"}
        values = {"depth": [0.0, 100.0, 400.0], "temperature": [15.0, 12.0, 8.0]}
        xbt = Cast(id="X", values=values, attributes=said)
        full = true_cast()
        columns = speeds_of_block(CastBlock.from_casts([full, xbt]), salinity=35.0)
        assert "completion_salinity" not in columns.profile(0).shapes
        for index, cast in enumerate((full, xbt)):
            one, many = Profile.from_cast(cast, salinity=35.0), columns.profile(index)
            assert set(one.shapes) == set(many.shapes)
            for name, shape in one.shapes.items():
                np.testing.assert_array_equal(many.shapes[name], shape)


class TestValue:
    def test_uncertainty_alone_is_one_shape(self):
        profile = Profile([0.0, 9.0], [1500.0, 1490.0], [0.1, 0.2])
        assert profile.shapes["stated"].tolist() == [0.1, 0.2]
        assert profile.noise is None
        assert Profile([0.0, 9.0], [1500.0, 1490.0]).uncertainty is None

    def test_shapes_and_noise_make_the_uncertainty(self):
        profile = Profile([0.0, 9.0], [1500.0, 1490.0], shapes={"a": [3.0, -3.0], "b": [0.0, 4.0]}, noise=[4.0, 12.0])
        assert profile.uncertainty.tolist() == [5.0, 13.0]
        with pytest.raises(TypeError, match="does not support item assignment"):
            profile.shapes["a"] = np.zeros(2)
        with pytest.raises(ValueError, match="read-only"):
            profile.shapes["a"][0] = 1.0
        twin = pickle.loads(pickle.dumps(profile))  # noqa: S301
        assert twin.shapes["a"].tolist() == [3.0, -3.0]
        carried = Profile([2.0, 9.0], [1500.0, 1490.0], shapes={"a": [3.0, -3.0]}).to_surface()
        assert carried.shapes["a"].tolist() == [3.0, 3.0, -3.0]

    def test_an_uncertainty_that_does_not_follow_from_the_shapes_stands_alone(self):
        from dataclasses import replace

        profile = Profile([0.0, 9.0], [1500.0, 1490.0], shapes={"a": [3.0, -3.0]}, noise=[4.0, 4.0])
        assert dict(replace(profile, speed=profile.speed + 1.0).shapes).keys() == {"a"}
        assert replace(profile, uncertainty=[1.0, 1.0]).shapes["stated"].tolist() == [1.0, 1.0]
        fewer = replace(profile, depth=[0.0, 5.0, 9.0], speed=[1500.0] * 3, uncertainty=[1.0] * 3)
        assert (set(fewer.shapes), fewer.noise) == ({"stated"}, None)

    @pytest.mark.parametrize(
        ("options", "message"),
        [
            ({"shapes": {"a": [1.0]}}, "2 depths and 1 values of shape 'a'"),
            ({"noise": [1.0, -1.0]}, r"noise at level 1 .* is -1 m/s"),
            ({"shapes": {"a": [1.0, np.inf]}}, r"shape 'a' at level 1 .* is inf m/s"),
        ],
    )
    def test_refusals(self, options, message):
        with pytest.raises(InputError, match=message):
            Profile([0.0, 9.0], [1500.0, 1490.0], **options)

    def test_unknown_instrument_and_impossible_numbers(self):
        cast = make_cast(depth=[0.0, 9.0], temperature=[9.0, 9.0], salinity=[35.0, 35.0])
        with pytest.raises(InputError, match="no instrument is named 'sonde'; known are float, ctd, xbt"):
            Profile.from_cast(cast, accuracy="sonde")
        with pytest.raises(InputError, match="temperature_noise is -1; a finite number of 0 or more"):
            Accuracy(temperature_noise=-1.0)

    def test_at_levels(self):
        profile = Profile([0.0, 10.0], [1500.0, 1490.0], shapes={"a": [1.0, 3.0]}, noise=[0.0, 2.0])
        between = profile.at_levels([0.0, 5.0, 10.0])
        assert between.shapes["a"].tolist() == [1.0, 2.0, 3.0]
        assert between.noise.tolist() == [0.0, 1.0, 2.0]
        assert between.speed.tolist() == [1500.0, 1495.0, 1490.0]
        with pytest.raises(InputError, match="depth 11 m lies outside the profile"):
            profile.at_levels([0.0, 11.0])


class TestMeans:
    def test_one_shape_of_one_sign_passes_whole(self):
        profile = Profile([0.0, 40.0, 100.0], [1500.0] * 3, shapes={"a": [0.3] * 3})
        assert profile.mean_speed_uncertainty() == pytest.approx(0.3)
        assert profile.mean_speed_uncertainty(10.0, 70.0) == pytest.approx(0.3)
        assert profile.mean_speed_uncertainty(10.0, 10.0) == pytest.approx(0.3)
        assert profile.travel_time_uncertainty() == pytest.approx(100.0 * 0.3 / 1500.0**2)

    def test_a_shape_that_changes_sign_cancels(self):
        profile = Profile([0.0, 50.0, 100.0], [1500.0] * 3, shapes={"a": [0.3, 0.0, -0.3]})
        assert profile.mean_speed_uncertainty() == pytest.approx(0.0, abs=1e-15)
        assert profile.mean_speed_uncertainty(0.0, 50.0) == pytest.approx(0.15)

    def test_noise_averages_away(self):
        count = 1001
        profile = Profile(np.linspace(0.0, 100.0, count), np.full(count, 1500.0), noise=np.full(count, 0.3))
        assert profile.mean_speed_uncertainty() == pytest.approx(0.3 / np.sqrt(count), rel=0.01)

    def test_unknown_stays_unknown(self):
        assert np.isnan(Profile([0.0, 9.0], [1500.0] * 2).mean_speed_uncertainty())
        assert np.isnan(Profile([0.0, 9.0], [1500.0] * 2).mean_speed_uncertainty(3.0, 3.0))
        partly = Profile([0.0, 5.0, 9.0], [1500.0] * 3, [0.1, 0.1, np.nan])
        assert np.isnan(partly.mean_speed_uncertainty())
        assert partly.mean_speed_uncertainty(0.0, 5.0) == pytest.approx(0.1)
        assert Profile([0.0, 9.0], [1500.0] * 2, [0.0, 0.0]).travel_time_uncertainty() == 0.0

    @given(st.lists(st.floats(0.1, 50.0), min_size=2, max_size=8), st.floats(0.0, 1.0), st.floats(0.0, 1.0))
    def test_weights_integrate_what_is_linear_between_levels(self, steps, one, other):
        depth = np.cumsum(steps)
        values = np.sin(depth)
        top, bottom = sorted(depth[0] + np.array([one, other]) * (depth[-1] - depth[0]))
        nodes = np.concatenate(([top], depth[(depth > top) & (depth < bottom)], [bottom]))
        heights = np.interp(nodes, depth, values)
        exact = np.sum(0.5 * (heights[1:] + heights[:-1]) * np.diff(nodes))
        assert np.dot(_weights(depth, top, bottom), values) == pytest.approx(exact, abs=1e-9)


class TestFiles:
    def profile(self):
        cast = make_cast(pressure=PRESSURE[1:], temperature=TEMPERATURE[1:], salinity=SALINITY[1:])
        return Profile.from_cast(cast)

    def test_columns(self):
        names = list(self.profile().columns())
        assert names[:3] == ["depth", "sound_speed", "sound_speed_uncertainty"]
        assert {"sound_speed_error_temperature", "sound_speed_error_completion_temperature", "sound_speed_noise"} < set(
            names
        )
        stated = Profile([0.0, 9.0], [1500.0, 1490.0], [0.1, 0.2])
        assert list(stated.columns()) == ["depth", "sound_speed", "sound_speed_uncertainty"]

    def test_dataset_and_netcdf_bring_everything_back(self, tmp_path):
        import xarray as xr

        profile = self.profile()
        dataset = profile.to_dataset()
        assert dataset["sound_speed_error_pressure"].attrs == {
            "long_name": "error of the speed of sound from one standard error of pressure",
            "units": "m s-1",
        }
        beside = dataset["sound_speed"].attrs["ancillary_variables"].split()
        assert beside[0] == "sound_speed_uncertainty"
        assert set(beside) <= set(dataset.data_vars)
        write_dataset(dataset, tmp_path / "p.nc")
        with xr.open_dataset(tmp_path / "p.nc") as opened:
            for back in (Profile.from_dataset(opened), Profile.from_dataset(dataset)):
                np.testing.assert_array_equal(back.speed, profile.speed)
                np.testing.assert_array_equal(back.uncertainty, profile.uncertainty)
                np.testing.assert_array_equal(back.noise, profile.noise)
                assert back.shapes.keys() == profile.shapes.keys()
                for name, shape in profile.shapes.items():
                    np.testing.assert_array_equal(back.shapes[name], shape)
                assert (back.id, back.equation, back.notes) == (profile.id, profile.equation, profile.notes)
                assert (back.latitude, back.surface_assumed) == (50.0, True)
        bare = Profile.from_dataset(xr.Dataset({"depth": ("z", [0.0, 1.0]), "sound_speed": ("z", [1500.0, 1501.0])}))
        assert bare.uncertainty is None
        with pytest.raises(InputError, match="dataset: has no depth, so it is no profile; it holds a"):
            Profile.from_dataset(xr.Dataset({"a": 1}))

    def test_read_as_a_cast_the_uncertainty_stays(self, tmp_path):
        profile = self.profile()
        write_dataset(profile.to_dataset(), tmp_path / "p.nc")
        (cast,) = read_casts(tmp_path / "p.nc")
        back = Profile.from_cast(cast)
        np.testing.assert_allclose(back.uncertainty, profile.uncertainty, rtol=1e-12)
        write_csv(tmp_path / "p.csv", profile.columns(), preamble=profile.about())
        (cast,) = read_casts(tmp_path / "p.csv")
        np.testing.assert_array_equal(Profile.from_cast(cast).speed, profile.speed)
