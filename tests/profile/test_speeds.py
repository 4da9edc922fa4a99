"""From casts to profiles: the numbers against gsw and simple integration, what is left out, assumed, refused."""

from __future__ import annotations

import gsw
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts import Cast, CastBlock
from ocean_sound.errors import InputError
from ocean_sound.profile import Accuracy, Profile, speeds_of_block
from ocean_sound.profile.ordering import downward
from ocean_sound.water import conductivity_from_salinity, sound_speed

PRESSURE = np.array([0.0, 10.0, 50.0, 100.0, 500.0, 1000.0, 2000.0])
TEMPERATURE = np.array([15.0, 14.8, 11.0, 10.0, 8.0, 5.0, 3.0])
SALINITY = np.array([35.1, 35.1, 35.2, 35.3, 35.2, 35.0, 34.95])


def make_cast(*, flags=None, latitude=50.0, longitude=-20.0, **values):
    if not values:
        values = {"pressure": PRESSURE, "temperature": TEMPERATURE, "salinity": SALINITY}
    return Cast(id="K7", values=values, flags=flags or {}, latitude=latitude, longitude=longitude)


def noted(profile, text):
    return any(text in note for note in profile.notes)


class TestNumbers:
    def test_speed_is_that_of_the_water(self):
        profile = Profile.from_cast(make_cast())
        sa = gsw.SA_from_SP(SALINITY, PRESSURE, -20.0, 50.0)
        expected = gsw.sound_speed(sa, gsw.CT_from_t(sa, TEMPERATURE, PRESSURE), PRESSURE)
        assert profile.speed == pytest.approx(expected, abs=1e-9)
        assert (profile.equation, profile.id, profile.latitude) == ("teos10", "K7", 50.0)

    @pytest.mark.parametrize(("salinity", "temperature"), [(35.0, 10.0), (0.2, 6.0), (7.0, 4.0)], ids=str)
    def test_depth_integrates_the_density_of_the_cast(self, salinity, temperature):
        # Independent integrator: dz = dp / (rho g) in steps of 0.5 dbar, density by the exact Gibbs function of gsw.
        pressure = np.arange(0.0, 400.1, 10.0)
        profile = Profile.from_cast(
            make_cast(
                pressure=pressure,
                temperature=np.full(pressure.size, temperature),
                salinity=np.full(pressure.size, salinity),
            )
        )
        middle = np.arange(0.25, 400.0, 0.5)
        sa = gsw.SA_from_SP(salinity, middle, -20.0, 50.0)
        density = gsw.rho_t_exact(sa, temperature, middle)
        depth = np.cumsum(0.5e4 / (density * gsw.grav(50.0, middle)))
        assert profile.depth[1:] == pytest.approx(depth[19::20], abs=0.01)

    def test_fresh_and_sea_water_differ_by_metres(self):
        fresh, salt = (
            Profile.from_cast(make_cast(pressure=[0.0, 400.0], temperature=[5.0, 5.0], salinity=[s, s]))
            for s in (0.1, 35.0)
        )
        assert 10.0 < fresh.depth[-1] - salt.depth[-1] < 12.0

    def test_depth_cast(self):
        profile = Profile.from_cast(make_cast(depth=[0.0, 1000.0], temperature=[15.0, 5.0], salinity=[35.0, 35.0]))
        assert list(profile.depth) == [0.0, 1000.0]
        assert profile.speed[1] == pytest.approx(
            sound_speed(5.0, 35.0, pressure=gsw.p_from_z(-1000.0, 50.0), latitude=50.0, longitude=-20.0), abs=1e-9
        )
        assert noted(profile, "pressure from depth for the standard ocean")

    def test_equation_of_depth_takes_the_depth_of_the_cast(self):
        profile = Profile.from_cast(make_cast(), equation="mackenzie")
        expected = sound_speed(TEMPERATURE, SALINITY, depth=profile.depth, equation="mackenzie")
        assert profile.speed == pytest.approx(expected, abs=1e-9)
        assert not noted(profile, "pressure from depth")

    def test_conductivity(self):
        conductivity = conductivity_from_salinity(SALINITY, TEMPERATURE, PRESSURE)
        made = Profile.from_cast(make_cast(pressure=PRESSURE, temperature=TEMPERATURE, conductivity=conductivity))
        assert made.speed == pytest.approx(Profile.from_cast(make_cast()).speed, abs=1e-6)
        assert noted(made, "salinity from conductivity (PSS-78)")

    def test_measured_speed_is_taken_as_it_is(self):
        profile = Profile.from_cast(make_cast(depth=[0.0, 10.0], sound_speed=[1500.0, 1490.0], temperature=[9.0, 9.0]))
        assert list(profile.speed) == [1500.0, 1490.0]
        assert profile.uncertainty is None
        assert profile.equation == ""
        assert noted(profile, "sound speed as measured")
        assert noted(profile, "no uncertainty")

    def test_measured_speed_with_its_uncertainty(self):
        cast = make_cast(depth=[0.0, 10.0], sound_speed=[1500.0, 1490.0])
        assert list(Profile.from_cast(cast, sound_speed_uncertainty=0.05).uncertainty) == [0.05, 0.05]

    def test_measured_speed_over_pressure(self):
        profile = Profile.from_cast(make_cast(pressure=[0.0, 1000.0], sound_speed=[1500.0, 1490.0]))
        assert profile.depth[1] == pytest.approx(-gsw.z_from_p(1000.0, 50.0), abs=1e-9)
        assert noted(profile, "depth from pressure for the standard ocean")

    def test_computed_speed_is_preferred_where_it_can_be(self):
        cast = make_cast(pressure=[0.0, 9.0], temperature=[9.0, 9.0], salinity=[35.0, 35.0], sound_speed=[1400.0] * 2)
        assert noted(Profile.from_cast(cast), "the sound speed in the file is not used")


class TestUncertainty:
    def test_is_the_root_sum_square_of_the_shares(self):
        # By central differences of gsw. The pressure is of no account by itself: it puts the water of 0 and of 10 dbar
        # at the wrong depth, so its share is the change of speed with that water, at one pressure, over 3 dbar.
        profile = Profile.from_cast(
            make_cast(), temperature_uncertainty=0.1, salinity_uncertainty=0.2, pressure_uncertainty=3.0
        )
        sa = gsw.SA_from_SP(35.1, 0.0, -20.0, 50.0)
        step = 1e-3
        by_t = (gsw.sound_speed_t_exact(sa, 15.0 + step, 0.0) - gsw.sound_speed_t_exact(sa, 15.0 - step, 0.0)) / (
            2 * step
        )
        by_s = (gsw.sound_speed_t_exact(sa + 0.01, 15.0, 0.0) - gsw.sound_speed_t_exact(sa, 15.0, 0.0)) / 0.01
        water = (gsw.sound_speed_t_exact(sa, 14.8, 0.0) - gsw.sound_speed_t_exact(sa, 15.0, 0.0)) / 10.0
        shares = np.array([by_t * 0.1, by_s * 0.2 * 35.16504 / 35.0, water * 3.0])
        from ocean_sound.water import equations

        expected = np.sqrt(equations()["teos10"].standard_error ** 2 + np.sum(shares**2))
        assert profile.uncertainty[0] == pytest.approx(expected, rel=0.005)

    def test_defaults_are_told(self):
        assert noted(Profile.from_cast(make_cast()), "0.002 degC, 0.01 of salinity and 2.4 dbar")

    def test_outside_the_range_it_is_unknown(self):
        cast = make_cast(pressure=[0.0, 10.0, 20.0], temperature=[31.0, 20.0, 10.0], salinity=[35.0] * 3)
        profile = Profile.from_cast(cast, equation="mackenzie")
        assert list(np.isnan(profile.uncertainty)) == [True, False, False]
        assert noted(profile, "mackenzie: temperature 31 degC is outside its range")

    def test_no_standard_error_no_uncertainty(self):
        cast = make_cast(pressure=[0.0, 0.5], temperature=[12.0, 10.0], salinity=[0.0, 0.0])
        profile = Profile.from_cast(cast, equation="bilaniuk-wong")
        assert profile.uncertainty is None
        assert noted(profile, "no standard error of bilaniuk-wong is known")

    def test_assumed_salinity_counts_for_more(self):
        values = {"depth": [0.0, 100.0], "temperature": [10.0, 9.0]}
        assumed = Profile.from_cast(make_cast(**values), salinity=35.0)
        measured = Profile.from_cast(make_cast(**values, salinity=[35.0, 35.0]))
        assert np.array_equal(assumed.speed, measured.speed)
        assert noted(assumed, "salinity assumed: 35")
        assert np.all(assumed.uncertainty > 1.0)
        assert np.all(measured.uncertainty < 0.2)

    @pytest.mark.parametrize("name", ["temperature", "salinity", "pressure", "sound_speed"])
    def test_negative_is_refused(self, name):
        with pytest.raises(InputError, match=rf"{name}_uncertainty is -1; a finite number of 0 or more"):
            Profile.from_cast(make_cast(), **{f"{name}_uncertainty": -1.0})


class TestLeftOut:
    def test_failed_and_missing_values_are_never_used(self):
        flags = {"temperature": [1, 4, 1, 9, 1, 2, 1]}
        profile = Profile.from_cast(
            make_cast(flags=flags, pressure=PRESSURE, temperature=TEMPERATURE, salinity=SALINITY)
        )
        assert len(profile) == 5
        assert noted(profile, "5 of 7 levels used; left out: 2 without usable temperature")

    def test_suspect_values_only_on_request(self):
        flags = {"salinity": [1, 1, 3, 1, 1, 1, 1]}
        cast = make_cast(flags=flags, pressure=PRESSURE, temperature=TEMPERATURE, salinity=SALINITY)
        assert len(Profile.from_cast(cast)) == 6
        assert noted(Profile.from_cast(cast), "1 suspect values (flag 3) were not used")
        assert len(Profile.from_cast(cast, use_suspect=True)) == 7

    def test_flags_of_what_is_not_needed_do_not_matter(self):
        cast = make_cast(
            flags={"conductivity": [9] * 7},
            pressure=PRESSURE,
            temperature=TEMPERATURE,
            salinity=SALINITY,
            conductivity=np.full(7, np.nan),
        )
        assert len(Profile.from_cast(cast)) == 7

    def test_impossible_values_are_not_used(self):
        temperature = TEMPERATURE.copy()
        temperature[2] = 999.0
        cast = make_cast(pressure=PRESSURE, temperature=temperature, salinity=SALINITY)
        assert noted(Profile.from_cast(cast), "1 without usable temperature")

    def test_levels_in_air(self):
        cast = make_cast(pressure=[-0.4, 0.0, 10.0], temperature=[20.0, 15.0, 14.0], salinity=[35.0] * 3)
        profile = Profile.from_cast(cast)
        assert profile.depth[0] == 0.0
        assert noted(profile, "1 above the surface")

    def test_caller_arrays_stay_as_they_are(self):
        temperature = TEMPERATURE.copy()
        Profile.from_cast(make_cast(pressure=PRESSURE, temperature=temperature, salinity=SALINITY))
        assert np.array_equal(temperature, TEMPERATURE)


class TestOrder:
    @pytest.mark.parametrize(
        ("vertical", "taken", "in_no_order"),
        [
            ([0, 1, 2], [0, 1, 2], False),
            ([2, 1, 0], [2, 1, 0], False),
            ([0, 5, 9, 6, 1], [0, 1, 2], False),  # down and up: the way down
            ([7, 9, 6, 4, 1], [4, 3, 2, 1], False),  # mostly the way up
            ([0, 4, 3, 4, 5, 8, 8], [0, 1, 4, 5], False),  # heave and doubled levels
            ([5, 1, 4, 2, 3, 2.5, 6], [1, 3, 5, 4, 2, 0, 6], True),  # in no order
            ([3], [0], False),
            ([], [], False),
        ],
    )
    def test_examples(self, vertical, taken, in_no_order):
        order, sorted_ = downward(np.array(vertical, dtype=float))
        assert (order.tolist(), sorted_) == (taken, in_no_order)

    @given(st.lists(st.integers(0, 40), max_size=60))
    def test_always_strictly_down_and_never_a_quarter_too_few(self, vertical):
        vertical = np.array(vertical, dtype=float)
        order, _ = downward(vertical)
        assert np.all(np.diff(vertical[order]) > 0)
        if vertical.size:
            assert vertical[order].max() == vertical.max()
            assert len(order) <= np.unique(vertical).size
            assert len(order) * 4 >= np.unique(vertical).size

    def test_notes_tell(self):
        cast = make_cast(pressure=[0.0, 9.0, 8.0, 20.0], temperature=[9.0] * 4, salinity=[35.0] * 4)
        assert noted(Profile.from_cast(cast), "3 of 4 levels used; left out: 1 not below the levels before")
        cast = make_cast(pressure=[5.0, 1.0, 4.0, 2.0, 3.0, 2.5, 6.0], temperature=[9.0] * 7, salinity=[35.0] * 7)
        assert noted(Profile.from_cast(cast), "the levels were in no order: sorted by depth")


class TestSurface:
    def test_level_added(self):
        cast = make_cast(pressure=[5.0, 50.0], temperature=[15.0, 12.0], salinity=[35.0, 35.0])
        profile = Profile.from_cast(cast)
        assert profile.depth[0] == 0.0
        assert profile.surface_assumed
        assert profile.speed[0] == pytest.approx(
            sound_speed(15.0, 35.0, pressure=0.0, latitude=50.0, longitude=-20.0), abs=1e-9
        )
        assert profile.speed[0] < profile.speed[1]  # the same water, under less pressure
        assert noted(profile, "a level added at 0 m with the temperature and salinity of the first level")

    def test_level_added_to_a_measured_speed(self):
        profile = Profile.from_cast(make_cast(depth=[2.0, 5.0], sound_speed=[1500.0, 1490.0]))
        assert list(profile.speed) == [1500.0, 1500.0, 1490.0]
        assert noted(profile, "with the sound speed of the first level")

    def test_too_deep_to_tell(self):
        profile = Profile.from_cast(make_cast(depth=[80.0, 100.0], temperature=[9.0, 9.0], salinity=[35.0, 35.0]))
        assert profile.depth[0] == 80.0
        assert noted(profile, "starts at 80.0 m")


class TestAssumptions:
    def test_no_position(self):
        profile = Profile.from_cast(make_cast(latitude=np.nan, longitude=np.nan, pressure=PRESSURE,
                                              temperature=TEMPERATURE, salinity=SALINITY))  # fmt: skip
        assert noted(profile, "at latitude 45 degrees (none is given)")
        assert noted(profile, "Reference Salinity")

    def test_notes_of_the_reader_come_first(self):
        cast = Cast(id="A", values={"depth": [0, 9], "sound_speed": [1500, 1490]}, notes=("pressure is sea pressure",))
        assert Profile.from_cast(cast).notes[0] == "pressure is sea pressure"

    def test_equation_of_fresh_water_needs_no_salinity(self):
        cast = make_cast(depth=[0.0, 50.0], temperature=[12.0, 5.0])
        profile = Profile.from_cast(cast, equation="belogolskii")
        assert noted(profile, "salinity assumed: 0")


class TestRefusals:
    @pytest.mark.parametrize(
        ("values", "message"),
        [
            (
                {"depth": [0.0, 9.0], "temperature": [9.0, 8.0]},
                r"cast 'K7': temperature but neither usable salinity nor usable conductivity; .*--salinity 35",
            ),
            ({"depth": [0.0, 9.0], "salinity": [35.0, 35.0]}, r"neither usable temperature nor usable sound speed"),
            (
                {"depth": [np.nan, np.nan], "temperature": [9.0, 8.0], "salinity": [35.0, 35.0]},
                r"no usable pressure and no usable depth; usable is temperature, salinity",
            ),
            ({"depth": [3.0], "sound_speed": [1500.0]}, r"cast 'K7': 1 usable level of 1; a profile needs 2$"),
            (
                {"depth": [3.0, 4.0, 5.0], "sound_speed": [1500.0, np.nan, np.nan]},
                r"1 usable level of 3; a profile needs 2 \(2 without usable sound speed\)",
            ),
            (
                {"depth": [3.0, 3.0, 3.0], "sound_speed": [1500.0] * 3},
                r"1 usable level of 3; a profile needs 2 \(2 not below the levels before\)",
            ),
        ],
    )
    def test_casts(self, values, message):
        with pytest.raises(InputError, match=message):
            Profile.from_cast(make_cast(**values))

    def test_all_suspect(self):
        cast = make_cast(flags={"temperature": [3, 3]}, depth=[0.0, 9.0], temperature=[9.0, 8.0], salinity=[35.0, 35.0])
        with pytest.raises(InputError, match=r"2 suspect values are not used: use_suspect takes them"):
            Profile.from_cast(cast)

    def test_unknown_equation(self):
        with pytest.raises(InputError, match="mackenzi' is unknown; did you mean 'mackenzie'"):
            Profile.from_cast(make_cast(), equation="mackenzi")

    def test_impossible_salinity(self):
        with pytest.raises(InputError, match="salinity is -1; a practical salinity from 0 to 500"):
            Profile.from_cast(make_cast(), salinity=-1.0)


class TestBlock:
    casts = (
        make_cast(),
        make_cast(depth=[2.0, 9.0], sound_speed=[1500.0, 1490.0]),
        make_cast(depth=[0.0, 9.0], temperature=[9.0, 8.0]),
        make_cast(depth=[0.0, 40.0, 90.0], temperature=[9.0, 8.0, 7.0], salinity=[34.0, 34.5, 35.0], latitude=np.nan),
        make_cast(pressure=[3.0, 1.0], temperature=[9.0, 8.0], conductivity=[3.6, 3.5]),
    )

    @pytest.mark.parametrize("equation", ["teos10", "mackenzie", "leroy"])
    def test_many_casts_equal_one_by_one(self, equation):
        columns = speeds_of_block(CastBlock.from_casts(self.casts), equation=equation)
        for index, cast in enumerate(self.casts):
            if columns.reasons[index]:
                with pytest.raises(InputError, match="neither usable salinity"):
                    columns.profile(index)
                continue
            one, many = Profile.from_cast(cast, equation=equation), columns.profile(index)
            assert np.array_equal(one.depth, many.depth)
            assert np.array_equal(one.speed, many.speed)
            assert (one.uncertainty is None) == (many.uncertainty is None)
            if one.uncertainty is not None:
                assert np.array_equal(one.uncertainty, many.uncertainty, equal_nan=True)
            assert one.notes == many.notes
        assert [bool(reason) for reason in columns.reasons] == [False, False, True, False, False]
        assert columns.row_size.tolist() == [7, 3, 0, 3, 3]

    @pytest.mark.kernels
    @pytest.mark.parametrize("kind", ["all", "by pressure", "by depth"])
    def test_compiled_or_not_the_numbers_are_the_same(self, kind):
        """gsw and the kernels do the same operations in the same order."""
        casts = {"all": self.casts, "by pressure": self.casts[:1] * 3, "by depth": self.casts[3:4] * 2}[kind]
        block = CastBlock.from_casts(casts)
        plain, compiled = (speeds_of_block(block, salinity=35.0, compiled=choice) for choice in (False, True))
        for name in ("depth", "speed", "uncertainty", "noise"):
            ours, theirs = getattr(compiled, name), getattr(plain, name)
            # a slope is a difference over a hundredth of a degree, so rounding counts a hundredfold
            np.testing.assert_allclose(ours, theirs, rtol=1e-13, atol=1e-11, equal_nan=True, err_msg=name)
        assert compiled.notes == plain.notes

    @pytest.mark.kernels
    def test_many_casts_are_compiled_and_equal_one_by_one(self):
        casts = [
            make_cast(pressure=PRESSURE + shift, temperature=TEMPERATURE - shift / 10.0, salinity=SALINITY)
            for shift in np.linspace(0.0, 4.0, 20)
        ]
        columns = speeds_of_block(CastBlock.from_casts(casts))
        for index, cast in enumerate(casts):
            one, many = Profile.from_cast(cast), columns.profile(index)
            assert many.depth == pytest.approx(one.depth, rel=1e-13)
            assert many.speed == pytest.approx(one.speed, rel=1e-13)
            assert many.uncertainty == pytest.approx(one.uncertainty, abs=1e-11)
            assert many.notes == one.notes

    def test_levels_point_back_into_the_block(self):
        block = CastBlock.from_casts(self.casts)
        columns = speeds_of_block(block)
        measured = columns.level >= 0
        assert (~measured).sum() == 2
        rows = slice(columns.starts[1], columns.starts[2])
        back = columns.level[rows]
        assert block.values["sound_speed"][back[back >= 0]].tolist() == [1500.0, 1490.0]

    def test_accuracy_defaults(self):
        assert Accuracy() == Accuracy(0.002, None, None, None)
