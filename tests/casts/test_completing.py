"""Completed casts: joins without a step, values by closed forms and gsw, every added value marked, sources refused."""

from __future__ import annotations

import pickle
from types import SimpleNamespace

import gsw
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts import Cast, CastBlock, read_casts
from ocean_sound.casts.completing import complete_cast
from ocean_sound.casts.donors import Donor
from ocean_sound.casts.extending import carried_up_uncertainty
from ocean_sound.errors import InputError
from ocean_sound.files import write_dataset
from ocean_sound.grids import Climatology, open_climatology
from ocean_sound.profile import Profile
from ocean_sound.water import conductivity_from_salinity, sound_speed

PLACE = {"latitude": 40.0, "longitude": -30.0, "time": "2026-01-31"}


def cast(name="A", place=PLACE, flags=None, **values):
    return Cast(id=name, values=values, flags=flags or {}, **place)


def shallow(**changes):
    depth = np.array([5.0, 50.0, 100.0, 200.0, 300.0])
    return cast(**({"depth": depth, "temperature": 18.0 - depth / 50.0, "salinity": 36.0 - depth / 1000.0} | changes))


def deep(name="B"):
    depth = np.array([0.0, 100.0, 250.0, 500.0, 1000.0, 2000.0, 4000.0])
    return cast(
        name, depth=depth, temperature=3.0 + 14.0 * np.exp(-depth / 600.0), salinity=35.0 + 0.8 * np.exp(-depth / 500)
    )


class Fixed(Climatology):
    """A climatology that holds one column of water everywhere."""

    def __init__(self, depth, temperature, salinity, name="fixed.nc"):
        water = (np.asarray(depth, float), np.asarray(temperature, float), salinity)
        for key, value in {"name": name, "water": water, "asked": []}.items():
            object.__setattr__(self, key, value)

    def at(self, latitude, longitude, time=None):
        self.asked.append((latitude, longitude, time))
        return self.water


def fixed(offset=0.0):
    donor = deep()
    return Fixed(donor.depth, donor.temperature + offset, donor.salinity)


class TestBelow:
    def test_measured_levels_stay_and_added_ones_are_marked(self):
        before = shallow()
        after = complete_cast(before, below=deep())
        count = len(before)
        for name in ("depth", "temperature", "salinity"):
            np.testing.assert_array_equal(after.values[name][:count], before.values[name])
        assert after.depth[-1] == 4000.0
        assert np.all(np.diff(after.depth) > 0.0)
        assert after.origins["temperature"].tolist() == [0] * count + [3] * (len(after) - count)
        assert after.origins["salinity"].tolist() == after.origins["temperature"].tolist()
        assert after.added.tolist() == [False] * count + [True] * (len(after) - count)
        assert set(after.flags["temperature"].tolist()) == {2}
        assert "levels below 300.00 m from cast B (0 km and 0 days away), joined over 300 m" in after.notes[-1]
        assert not before.origins

    def test_the_difference_at_the_join_dies_away_by_the_stated_scale(self):
        before, donor = shallow(), deep()
        after = complete_cast(before, below=donor, scale=200.0)
        added = after.depth > 300.0
        lent = np.interp(after.depth[added], donor.depth, donor.temperature)
        offset = before.temperature[-1] - np.interp(300.0, donor.depth, donor.temperature)
        expected = lent + offset * np.exp(-(after.depth[added] - 300.0) / 200.0)
        assert after.temperature[added] == pytest.approx(expected, abs=1e-12)
        # Without a step: the line from the last level to the first added one is no steeper than the lent water and the
        # offset's own decay together.
        first = np.flatnonzero(added)[0]
        slope = (after.temperature[first] - before.temperature[-1]) / (after.depth[first] - 300.0)
        steepest = np.abs(np.diff(donor.temperature) / np.diff(donor.depth)).max() + abs(offset) / 200.0
        assert abs(slope) <= steepest

    def test_uncertainty_grows_from_the_join_to_that_of_the_lent_water(self):
        after = complete_cast(
            shallow(), below=deep(), scale=100.0, temperature_uncertainty=0.4, salinity_uncertainty=2.0
        )
        added = after.depth > 300.0
        away = (after.depth[added] - 300.0) / 100.0
        offset = 12.0 - np.interp(300.0, deep().depth, deep().temperature)
        far = max(0.4, abs(offset))
        assert after.uncertainties["temperature"][added] == pytest.approx(far * np.sqrt(1 - np.exp(-2 * away)))
        assert after.uncertainties["salinity"][added][-1] == pytest.approx(2.0)
        assert np.isnan(after.uncertainties["temperature"][~added]).all()
        assert after.uncertainties["depth"][added].tolist() == [0.0] * added.sum()

    def test_constant_water_follows_the_pressure_alone(self):
        after = complete_cast(shallow(), below="constant", to_depth=2000.0)
        assert after.temperature[-1] == 12.0
        assert after.salinity[-1] == pytest.approx(35.7)
        assert set(after.origins["temperature"].tolist()) == {0, 2}
        profile = Profile.from_cast(after)
        # Linear in depth between levels 200 m apart, against the equation in between.
        between = np.linspace(310.0, 1990.0, 57)
        exact = sound_speed(12.0, 35.7, depth=between, latitude=40.0, longitude=-30.0)
        assert profile.at(between) == pytest.approx(exact, abs=2e-3)

    def test_a_climatology_is_asked_for_the_place_and_time(self):
        climatology = fixed()
        after = complete_cast(shallow(), below=climatology)
        assert climatology.asked == [(40.0, -30.0, np.datetime64("2026-01-31", "ns"))]
        assert set(after.origins["temperature"].tolist()) == {0, 4}
        assert "from climatology fixed.nc" in after.notes[-1]
        with pytest.raises(InputError, match="cast 'A': has no position, so no climatology"):
            complete_cast(shallow(place={}), below=climatology)

    def test_sources_go_on_where_the_one_before_ended(self):
        after = complete_cast(shallow(), below=[deep(), "constant"], to_depth=5000.0)
        assert after.depth[-1] == 5000.0
        assert set(after.origins["temperature"].tolist()) == {0, 2, 3}
        assert complete_cast(shallow(), below=deep(), to_depth=250.0).notes == ()
        cut = complete_cast(shallow(), below=deep(), to_depth=700.0)
        assert cut.depth[-1] == 700.0
        with pytest.raises(
            InputError, match=r"the water below reaches to 4000 m, not to 5000 m; add a source that goes"
        ):
            complete_cast(shallow(), below=deep(), to_depth=5000.0)

    @pytest.mark.parametrize("salinity", [35.0, 5.0])
    def test_the_profile_of_a_cast_of_pressures_reaches_the_depth_asked_for(self, salinity):
        pressure = np.arange(0.0, 500.0, 10.0)
        before = cast(pressure=pressure, temperature=15.0 - pressure / 50.0, salinity=np.full(50, salinity))
        after = complete_cast(before, below=deep() if salinity == 35.0 else "constant", to_depth=4000.0)
        assert Profile.from_cast(after).depth[-1] == pytest.approx(4000.0, abs=2e-3)
        assert Profile.from_cast(after).depth[-1] >= 4000.0
        np.testing.assert_array_equal(after.pressure[:50], pressure)

    def test_bad_levels_at_the_end_do_not_count(self):
        before = shallow(flags={"temperature": [1, 1, 1, 1, 4]})
        after = complete_cast(before, below=deep())
        first = np.flatnonzero(after.origins["temperature"])[0]
        assert after.depth[first - 1] == 200.0
        assert after.flags["temperature"].tolist().count(4) == 1
        assert np.all(np.diff(Profile.from_cast(after).depth) > 0.0)

    @pytest.mark.parametrize("order", ["up", "down and up", "up and down"])
    def test_whichever_way_the_cast_went(self, order):
        down = np.array([5.0, 50.0, 100.0, 200.0, 300.0])
        depth = {
            "up": down[::-1],
            "down and up": np.append(down, [210.0, 99.0, 60.0, 30.0, 20.0, 10.0, 3.0]),
            "up and down": np.append(down[:2], down[::-1]),
        }[order]
        after = complete_cast(
            cast(depth=depth, temperature=18.0 - depth / 50.0, salinity=np.full(depth.size, 35.5)),
            above="first",
            below=deep(),
        )
        profile = Profile.from_cast(after)
        assert (profile.depth[0], profile.depth[-1]) == (0.0, 4000.0)
        measured = profile.depth[(profile.depth > 0) & (profile.depth <= 300.0)]
        assert set(measured.tolist()) <= set(depth.tolist())
        assert measured.size >= 5


class TestAbove:
    def test_the_first_level_carried_up(self):
        after = complete_cast(shallow(), above="first")
        assert after.depth[0] == 0.0
        assert after.temperature[0] == after.temperature[1]
        assert after.origins["temperature"].tolist() == [1, 0, 0, 0, 0, 0]
        assert after.uncertainties["temperature"][0] == pytest.approx(0.25)
        assert "(5.00 m) carried up to the surface" in after.notes[-1]
        assert [float(u) for u in carried_up_uncertainty(np.array(1000.0))] == [1.0, 0.3]
        whole = Profile.from_cast(after)
        alone = Profile.from_cast(shallow())
        np.testing.assert_array_equal(whole.speed, alone.speed)
        np.testing.assert_allclose(whole.uncertainty, alone.uncertainty, rtol=1e-12)
        assert complete_cast(after, above="first") is after

    def test_lent_water(self):
        before = cast(depth=[80.0, 300.0], temperature=[15.0, 12.0], salinity=[36.0, 35.8])
        after = complete_cast(before, above=deep())
        assert after.depth[0] == 0.0
        assert np.all(np.diff(after.depth) > 0.0)
        offset = 15.0 - np.interp(80.0, deep().depth, deep().temperature)
        assert after.temperature[0] == pytest.approx(17.0 + offset * np.exp(-80.0 / 50.0))

    def test_with_pressure(self):
        before = cast(pressure=[20.0, 300.0], temperature=[15.0, 12.0], conductivity=[4.6, 4.2])
        after = complete_cast(before, above=deep(), below="constant", to_depth=400.0)
        assert after.pressure[0] == 0.0
        assert np.isfinite(after.conductivity).all()
        salt = gsw.SP_from_C(10.0 * after.conductivity, after.temperature, after.pressure)
        assert salt[-1] == pytest.approx(gsw.SP_from_C(42.0, 12.0, 300.0), abs=1e-9)
        assert len(Profile.from_cast(after)) == len(after)


def some_casts():
    """Casts of every kind, in and out of order, with gaps and flags, and ways to complete them."""
    draw = np.random.default_rng(0)

    def one(kind, count, deepest):
        z = np.sort(draw.uniform(0.0, deepest, count))
        z = [z, z[::-1], draw.permutation(z), np.concatenate((z, z[::-1][: count // 2]))][draw.integers(4)]
        t, s = 4.0 + 14.0 * np.exp(-z / 400.0) + draw.normal(0.0, 0.05, z.size), 35.0 + 0.5 * np.exp(-z / 300.0)
        values = {
            "depth": {"depth": z, "temperature": t, "salinity": s},
            "pressure": {"pressure": z, "temperature": t, "salinity": s},
            "both": {"pressure": z, "depth": 0.99 * z, "temperature": t, "salinity": s},
            "conductivity": {"pressure": z, "temperature": t, "conductivity": conductivity_from_salinity(s, t, z)},
            "probe": {"depth": z, "temperature": t},
            "speed": {"depth": z, "sound_speed": 1450.0 + 4.0 * t + 0.016 * z},
        }[kind]
        flags = {name: draw.choice([1, 2, 3, 4, 9], z.size) for name in values if draw.random() < 0.2}
        values = {
            name: np.where(draw.random(z.size) < draw.choice([0.0, 0.1]), np.nan, v) for name, v in values.items()
        }
        return cast(place=PLACE if draw.random() < 0.7 else {}, flags=flags, **values)

    for number in range(300):
        kind = ["depth", "pressure", "both", "conductivity", "probe", "speed"][number % 6]
        lender = deep()
        options = [
            {"above": "first"},
            {"above": lender, "below": lender},
            {"below": "constant", "to_depth": 1500.0},
            {"above": "first", "below": [lender, "constant"], "to_depth": 5000.0},
        ][draw.integers(4)]
        yield one(kind, int(draw.integers(1, 40)), draw.uniform(5.0, 900.0)), options


def test_whatever_the_cast_it_is_completed_or_refused_in_words():
    done = 0
    for before, options in some_casts():
        try:
            after = complete_cast(before, salinity=35.0, **options)
            profile = Profile.from_cast(after)
        except InputError as error:
            assert "usable" in str(error)  # noqa: PT017
            continue
        done += 1
        if "above" in options:
            assert profile.depth[0] == 0.0
        if "to_depth" in options:
            assert options["to_depth"] - 3.0 < profile.depth[-1] < options["to_depth"] + 3.0
        measured = np.flatnonzero(~after.added)
        for name, column in before.values.items():
            if before.good(name).any():  # a salinity without one usable value was replaced
                np.testing.assert_array_equal(after.values[name][measured], column)
    assert done > 250


class TestSpeedCasts:
    def test_constant_water_below(self):
        depth = np.array([5.0, 100.0, 300.0])
        speed = sound_speed(8.0, 35.0, depth=depth, latitude=40.0, longitude=-30.0)
        after = complete_cast(cast(depth=depth, sound_speed=speed), above="first", below="constant", to_depth=2000.0)
        # The water that made these speeds, at the added depths.
        exact = sound_speed(8.0, 35.0, depth=after.depth, latitude=40.0, longitude=-30.0)
        assert after.sound_speed == pytest.approx(exact, abs=2e-3)
        assert set(after.origins["sound_speed"].tolist()) == {0, 1, 2}
        fresh = sound_speed(8.0, 0.0, depth=depth, latitude=40.0, equation="unesco")
        below = complete_cast(cast(depth=depth, sound_speed=fresh), below="constant", to_depth=800.0)
        exact = sound_speed(8.0, 0.0, depth=800.0, latitude=40.0, equation="unesco")
        assert below.sound_speed[-1] == pytest.approx(exact, abs=0.05 * (exact - fresh[-1]))

    def test_lent_water_below(self):
        water = deep()
        lent = sound_speed(water.temperature, water.salinity, depth=water.depth, latitude=40.0, longitude=-30.0)
        after = complete_cast(cast(depth=[0.0, 500.0], sound_speed=[1510.0, lent[3] + 2.0]), below=water, scale=500.0)
        assert after.sound_speed[-1] == pytest.approx(lent[-1] + 2.0 * np.exp(-7.0), abs=1e-9)
        assert after.uncertainties["sound_speed"][-1] > 0.1
        assert Profile.from_cast(after, sound_speed_uncertainty=0.05).uncertainty[-1] > 0.1


class TestSalinity:
    def test_constant(self):
        after = complete_cast(cast(depth=[0.0, 9.0], temperature=[9.0, np.nan]), salinity=35.0)
        assert after.salinity.tolist()[0] == 35.0
        assert np.isnan(after.salinity[1])
        assert after.flags["salinity"].tolist() == [2, 9]
        assert after.origins["salinity"].tolist() == [5, 0]
        assert after.uncertainties["salinity"].tolist()[0] == 1.0
        assert not after.added.any()
        assert after.notes == ("salinity assumed: 35",)

    def test_the_profile_is_that_of_an_assumed_salinity(self):
        before = cast(depth=[0.0, 100.0], temperature=[9.0, 8.0])
        one, other = Profile.from_cast(complete_cast(before, salinity=35.0)), Profile.from_cast(before, salinity=35.0)
        np.testing.assert_array_equal(one.speed, other.speed)
        np.testing.assert_allclose(one.uncertainty, other.uncertainty, rtol=1e-12)

    def test_relation_of_a_neighbour(self):
        donor = deep()
        temperature = np.array([16.0, 12.0, 6.0])
        after = complete_cast(cast(depth=[10.0, 300.0, 900.0], temperature=temperature), salinity=donor)
        # Monotonic: the relation is a function, met by plain interpolation.
        assert after.salinity == pytest.approx(np.interp(temperature, donor.temperature[::-1], donor.salinity[::-1]))
        assert after.uncertainties["salinity"].tolist() == [0.1] * 3
        assert "T-S relation of cast B" in after.notes[-1]

    def test_beyond_its_temperatures_the_end_serves_and_it_is_said(self):
        donor = deep()
        after = complete_cast(cast(depth=[0.0, 100.0], temperature=[25.0, 1.0]), salinity=donor)
        assert after.salinity.tolist() == [donor.salinity[0], donor.salinity[-1]]
        assert after.uncertainties["salinity"].tolist() == [0.3, 0.3]
        assert "2 levels outside its temperatures take the end's" in after.notes[-1]

    def test_of_several_depths_with_a_temperature_the_nearest_counts(self):
        depth = np.array([0.0, 100.0, 200.0, 300.0])
        donor = Donor(depth, np.array([4.0, 2.0, 2.0, 6.0]), np.array([32.0, 33.0, 34.0, 35.0]), 3, "")
        found, outside = donor.salinity_of(np.array([3.0, 3.0, 2.0, 2.0]), np.array([10.0, 260.0, 130.0, 900.0]))
        assert found == pytest.approx([32.5, 34.25, 33.3, 34.0])
        assert not outside.any()

    @given(
        st.lists(st.floats(0.0, 20.0), min_size=2, max_size=8),
        st.lists(st.floats(-2.0, 25.0), min_size=1, max_size=300),
    )
    def test_a_salinity_linear_in_temperature_is_met_whatever_the_depths(self, own, wanted):
        own, wanted = np.array(own), np.array(wanted)
        donor = Donor(np.arange(own.size) * 50.0, own, 30.0 + own / 10.0, 3, "")
        found, outside = donor.salinity_of(wanted, np.full(wanted.size, 60.0))
        assert found == pytest.approx(30.0 + np.clip(wanted, own.min(), own.max()) / 10.0, abs=1e-9)
        np.testing.assert_array_equal(outside, (wanted < own.min()) | (wanted > own.max()))

    def test_climatology(self):
        after = complete_cast(cast(depth=[50.0, 300.0], temperature=[16.0, 12.0]), salinity=fixed())
        assert after.salinity == pytest.approx(np.interp([50.0, 300.0], deep().depth, deep().salinity))
        assert after.origins["salinity"].tolist() == [4, 4]
        assert after.uncertainties["salinity"] == pytest.approx(0.01 + 0.3 * np.exp(-np.array([50.0, 300.0]) / 400.0))

    def test_casts_that_have_salinity_or_conductivity_are_left_alone(self):
        assert complete_cast(shallow(), salinity=30.0).salinity[0] == shallow().salinity[0]
        with_c = cast(depth=[0.0, 9.0], temperature=[9.0, 9.0], conductivity=[3.6, 3.6])
        assert complete_cast(with_c, salinity=30.0) is with_c

    def test_a_salinity_without_one_usable_value_is_replaced_and_it_is_said(self):
        bad = shallow(flags={"salinity": [4] * 5})
        after = complete_cast(bad, salinity=35.0)
        assert set(after.salinity.tolist()) == {35.0}
        assert "that in the file has no usable value" in after.notes[-1]


class TestValue:
    def whole(self):
        before = cast(depth=[5.0, 300.0], temperature=[18.0, 12.0])
        return complete_cast(before, salinity=35.5, above="first", below="constant", to_depth=500.0)

    def test_survives_pickling_blocks_and_datasets(self):
        one = self.whole()
        block = CastBlock.from_casts([shallow(), one, deep()])
        for twin in (pickle.loads(pickle.dumps(one)), block[1], pickle.loads(pickle.dumps(block))[1]):  # noqa: S301
            for kind in ("values", "flags", "origins", "uncertainties"):
                own, other = getattr(one, kind), getattr(twin, kind)
                for name, column in own.items():
                    np.testing.assert_array_equal(other[name], column)
        assert not block[0].origins
        assert not block[2].uncertainties
        dataset = one.to_dataset()
        assert dataset["salinity_origin"].attrs["flag_meanings"].split()[5] == "assumed"
        assert dataset["salinity_origin"].to_numpy().tolist() == [1, 5, 5, 2]
        assert dataset["salinity"].attrs["ancillary_variables"] == "salinity_flag salinity_uncertainty salinity_origin"
        assert dataset["temperature_uncertainty"].attrs["units_metadata"] == "temperature: difference"

    def test_flags_stay_in_netcdf(self, tmp_path):
        one = self.whole()
        write_dataset(one.to_dataset(), tmp_path / "one.nc")
        (back,) = read_casts(tmp_path / "one.nc")
        for name, flag in one.flags.items():
            np.testing.assert_array_equal(back.flags[name], flag)
        np.testing.assert_array_equal(Profile.from_cast(back).uncertainty, Profile.from_cast(one).uncertainty)

    def test_written_as_netcdf_and_read_back(self, tmp_path):
        one = self.whole()
        write_dataset(one.to_dataset(), tmp_path / "one.nc")
        (back,) = read_casts(tmp_path / "one.nc")
        for kind in ("values", "origins", "uncertainties"):
            own, other = getattr(one, kind), getattr(back, kind)
            assert set(other) == set(own)
            for name, column in own.items():
                np.testing.assert_array_equal(other[name], column)

    def test_inputs_are_not_changed(self):
        before = shallow()
        kept = {name: column.copy() for name, column in before.values.items()}
        complete_cast(before, above="first", below=deep())
        for name, column in kept.items():
            np.testing.assert_array_equal(before.values[name], column)

    @pytest.mark.parametrize(
        ("fields", "message"),
        [
            ({"origins": {"salinity": [0, 0]}}, "origins of 'salinity', of which there are no values"),
            ({"origins": {"temperature": [0, 9]}}, "origin 9 of temperature; origins are 0, 1, 2, 3, 4, 5"),
            ({"origins": {"temperature": [0]}}, r"temperature has 2 levels but origins of shape \(1,\)"),
            ({"uncertainties": {"temperature": [0.1, -0.1]}}, "uncertainty -0.1 of temperature; it must be 0 or more"),
        ],
    )
    def test_companions_are_checked(self, fields, message):
        with pytest.raises(InputError, match=message):
            Cast(id="A", values={"depth": [0.0, 1.0], "temperature": [1.0, 2.0]}, **fields)


class TestRefusals:
    @pytest.mark.parametrize(
        ("options", "message"),
        [
            ({"below": "constant"}, "below='constant' has no end of its own; give to_depth="),
            ({"to_depth": 500.0}, "to_depth is 500, but nothing to put below is given; give below="),
            ({"below": "deeper"}, "below is 'deeper'; 'constant', a cast or a climatology"),
            ({"below": 35.0}, "below is 35.0; 'constant', a cast or a climatology"),
            ({"above": "constant"}, "above is 'constant'; 'first', a cast or a climatology"),
            ({"below": "constant", "to_depth": -1.0}, "to_depth is -1; a number of metres above 0"),
            ({"above": "first", "scale": 0.0}, "scale is 0; a number of metres"),
            ({"above": "first", "temperature_uncertainty": -1.0}, "temperature_uncertainty is -1; a finite number"),
        ],
    )
    def test_options(self, options, message):
        with pytest.raises(InputError, match=message):
            complete_cast(shallow(), **options)

    def test_sources(self):
        lone = cast("L", depth=[0.0], temperature=[9.0], salinity=[35.0])
        with pytest.raises(InputError, match="cast 'L': 1 usable levels; to lend water it needs two"):
            complete_cast(shallow(), below=lone)
        warm = cast("W", depth=[0.0, 900.0], temperature=[9.0, 4.0])
        with pytest.raises(InputError, match=r"cast W .* has no salinity to lend with its temperature"):
            complete_cast(shallow(), below=warm)
        with pytest.raises(InputError, match=r"cast W .* has no salinity to lend"):
            complete_cast(cast(depth=[0.0, 9.0], temperature=[9.0, 8.0]), salinity=warm)
        with pytest.raises(InputError, match="salinity is -1; a practical salinity from 0 to 500"):
            complete_cast(cast(depth=[0.0, 9.0], temperature=[9.0, 8.0]), salinity=-1.0)
        with pytest.raises(InputError, match="cast 'A': has no usable level"):
            complete_cast(cast(depth=[np.nan], temperature=[9.0]), below=deep())


class TestRealData:
    def test_a_deep_cast_cut_short_and_completed(self, real_data):
        """What the station itself shows below stays within 3 of the stated uncertainties of what was put there."""
        casts = sorted(read_casts(real_data / "exchange" / "BIOS20160414_ct1.zip"), key=lambda c: np.nanmax(c.pressure))
        whole, neighbour = casts[-1], next(c for c in casts[-2::-1] if np.nanmax(c.pressure) > 2000.0)
        top = whole.pressure <= 700.0
        cut = Cast(
            id="cut",
            values={name: column[top] for name, column in whole.values.items()},
            latitude=whole.latitude,
            longitude=whole.longitude,
            time=whole.time,
        )
        levitus = open_climatology(
            real_data / "climatology" / "levitus_annual_north_atlantic.nc", temperature="in-situ", salinity="practical"
        )
        truth = Profile.from_cast(whole)
        for source, limit in ((levitus, 1.5), (neighbour, 2.5)):
            after = complete_cast(cut, below=source)
            profile = Profile.from_cast(after)
            reach = min(profile.depth[-1], truth.depth[-1])
            below = profile.depth[(profile.depth > 701.0) & (profile.depth < reach)]
            error = truth.at(below) - profile.at(below)
            doubt = np.interp(below, profile.depth, profile.uncertainty)
            assert np.abs(error).max() < 6.0
            assert np.sqrt(np.mean((error / doubt) ** 2)) < limit
            assert np.abs(error[below < 730.0]).max() < 1.0

    def test_expendable_probes_get_the_salinity_of_the_climatology(self, real_data):
        levitus = open_climatology(
            real_data / "climatology" / "levitus_annual_north_atlantic.nc", temperature="in-situ", salinity="practical"
        )
        place = SimpleNamespace(latitude=33.0, longitude=-50.0)
        (probe,) = read_casts(real_data / "csv" / "imos_xbt_20150813.csv")
        moved = Cast(id="m", values=dict(probe.values), flags=dict(probe.flags), time=probe.time, **vars(place))
        after = complete_cast(moved, salinity=levitus, below=levitus)
        assert after.depth[-1] >= 4000.0
        assert 34.0 < np.nanmin(after.salinity) < np.nanmax(after.salinity) < 37.0
        assert len(Profile.from_cast(after)) >= len(probe)
