"""The tests of a cast, one by one, and what becomes of the flags; oracles are slow loops over the printed rules."""

from __future__ import annotations

import gsw
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts import Cast, CastBlock, checking, read_thresholds
from ocean_sound.casts.checking import check_block, check_cast
from ocean_sound.casts.checking_tests import Levels, inversions, way_of_cast
from ocean_sound.errors import InputError
from ocean_sound.profile import Profile

NOW = np.datetime64("2026-06-01T00:00", "ns")
WAY = {"spike": 50.0, "soak_depth": 30.0, "soak_return": 3.0}


def made(flags=None, **values):
    where = {name: values.pop(name) for name in ("time", "latitude", "longitude") if name in values}
    return Cast(id="A1", values=values, flags=flags or {}, **where)


def ocean(count=40, step=10.0):
    """A quiet sea: warm and fresher above, every step stable."""
    depth = np.arange(count) * step
    return {"depth": depth, "temperature": 4.0 + 14.0 * np.exp(-depth / 200.0), "salinity": 34.9 + 0.0004 * depth}


def checked(cast, **options):
    block, report = check_block(CastBlock.from_casts([cast]), now=NOW, **options)
    return block[0], report


def flags_of(cast, name, **options):
    return checked(cast, **options)[0].flags[name].tolist()


def test_a_quiet_cast_passes_everything():
    cast = made(**ocean(), time="2024-05-01T07:30", latitude=40.0, longitude=-30.0)
    seen, report = checked(cast)
    assert all((flag == 1).all() for flag in seen.flags.values())
    assert set(seen.flags) == {"depth", "temperature", "salinity"}
    assert seen.notes == ("checked with the thresholds 'ocean': nothing found",)
    assert {test: flag.tolist() for test, flag in report.casts.items()} == {
        "location": [1], "date": [1], "truncated": [1],
    }  # fmt: skip


def test_the_input_is_never_changed():
    values = ocean()
    values["temperature"][5] = 99.0
    own = {"temperature": np.full(40, 2, np.int8)}
    before = {name: column.copy() for name, column in values.items()}
    check_cast(made(flags=own, **values))
    assert (own["temperature"] == 2).all()
    for name, column in values.items():
        np.testing.assert_array_equal(column, before[name])


# ---- gross range


@pytest.mark.parametrize(
    ("sort", "salinity", "flag"),
    [
        ("ocean", 1.9, 4), ("ocean", 2.0, 1), ("ocean", 41.0, 1), ("ocean", 41.1, 4),
        ("coast", 0.2, 1), ("estuary", 0.0, 1), ("lake", 0.05, 1), ("lake", -0.01, 3), ("lake", -1.0, 4),
        ("coast", 80.0, 3), ("estuary", 80.0, 3), ("lake", 280.0, 3), ("lake", 400.0, 4),
    ],
)  # fmt: skip
def test_salinity_by_water(sort, salinity, flag):
    """Argo's 2 to 41 for the ocean; a river passes elsewhere; a salt lagoon is marked, not refused."""
    cast = made(depth=np.arange(6.0), temperature=np.full(6, 15.0), salinity=np.full(6, salinity))
    assert flags_of(cast, "salinity", thresholds=sort) == [flag] * 6


def test_exactly_at_a_limit_passes():
    cast = made(depth=np.arange(5.0), temperature=[40.0, 40.0, 40.0, np.nextafter(40.0, 41.0), -2.5])
    _, report = checked(cast)
    assert report.levels["gross_range"]["temperature"].tolist() == [1, 1, 1, 4, 1]


def test_missing_values_are_missing_not_judged():
    cast = made(depth=np.arange(5.0), temperature=[10.0, np.nan, 10.1, np.inf, 10.0])
    seen, report = checked(cast)
    assert report.levels["gross_range"]["temperature"].tolist() == [1, 9, 1, 9, 1]
    assert report.levels["spike"]["temperature"].tolist() == [2, 2, 1, 2, 2]
    assert seen.flags["temperature"].tolist() == [1, 9, 1, 9, 1]


def test_the_range_of_speed_grows_with_depth():
    """1620 m/s belongs to 8000 m, not to 100 m."""
    cast = made(depth=[0.0, 100.0, 200.0, 8000.0, 8100.0], sound_speed=[1500.0, 1620.0, 1501.0, 1620.0, 1622.0])
    _, report = checked(cast)
    assert report.levels["gross_range"]["sound_speed"].tolist() == [1, 4, 1, 1, 1]


# ---- spike and rate of change


def printed_spike(values, above, below, deep, depth):
    """Argo's rule level by level."""
    flags = [2] * len(values)
    for i in range(1, len(values) - 1):
        v1, v2, v3 = values[i - 1], values[i], values[i + 1]
        spike = abs(v2 - (v3 + v1) / 2) - abs((v3 - v1) / 2)
        suspect, fail = below if depth[i] > deep else above
        flags[i] = 4 if spike > fail else 3 if spike > suspect else 1
    return flags


@given(st.lists(st.floats(-2.0, 30.0), min_size=3, max_size=40), st.sampled_from([1.0, 20.0, 100.0]))
def test_spikes_by_the_printed_rule(values, step):
    depth = np.arange(len(values)) * step
    _, report = checked(made(depth=depth, temperature=values))
    expected = printed_spike(values, (2.0, 6.0), (1.0, 2.0), 500.0, depth)
    assert report.levels["spike"]["temperature"].tolist() == expected


def test_the_reference_of_a_spike_keeps_its_sign():
    """A cast that crosses 0 degC: with abs() around the mean of the neighbours the second level would be a spike."""
    values = [-1.8, -1.5, -1.7, -1.6, 0.4, -1.5, -1.4]
    _, report = checked(made(depth=np.arange(7) * 5.0, temperature=values))
    assert report.levels["spike"]["temperature"].tolist() == [2, 1, 1, 1, 1, 1, 2]
    values[4] = 5.0
    _, report = checked(made(depth=np.arange(7) * 5.0, temperature=values))
    assert report.levels["spike"]["temperature"].tolist() == [2, 1, 1, 1, 4, 1, 2]


def test_exactly_at_the_threshold_is_no_spike():
    """Published value: 5, 11, 5 has the spike value 6.0, which is not above 6.0; likewise 5, 7, 5 and 2.0."""
    for value, flag in ((11.0, 3), (7.0, 1)):
        _, report = checked(made(depth=np.arange(5) * 5.0, temperature=[5.0, 5.0, value, 5.0, 5.0]))
        assert report.levels["spike"]["temperature"].tolist() == [2, 1, flag, 1, 2]


def test_far_neighbours_say_nothing():
    """Bottles: one deep maximum among levels 200 m apart is not judged, among levels 50 m apart it is suspect."""
    salinity = [35.0, 35.1, 35.8, 35.1, 35.0]
    for step, flag in ((50.0, 3), (200.0, 2)):
        cast = made(depth=np.arange(5) * step, salinity=salinity)
        _, report = checked(cast)
        assert report.levels["spike"]["salinity"][2] == flag


def test_the_neighbour_of_a_spike_passes():
    values = ocean()
    values["temperature"][20] += 8.0
    seen, report = checked(made(**values))
    assert np.flatnonzero(seen.flags["temperature"] != 1).tolist() == [20]
    assert np.flatnonzero(report.levels["density_inversion"]["temperature"] != 1).tolist() == [20]
    assert report.levels["density_inversion"]["temperature"][20] == 2
    assert seen.notes[1] == "spike test: temperature fail on level 21"


def test_what_failed_is_no_neighbour():
    """The sentinels of a broken probe stand between good values; these are compared with each other."""
    cast = made(depth=np.arange(6) * 5.0, temperature=[12.0, 99.9, 12.1, 99.9, 12.2, 12.1])
    assert flags_of(cast, "temperature") == [1, 4, 1, 4, 1, 1]


def test_a_rate_of_change_is_suspect_at_most():
    values = [20.0, 20.0, 20.0, 1.0, 1.0, 1.0]
    seen, report = checked(made(depth=np.arange(6) * 2.0, temperature=values))
    assert report.levels["rate_of_change"]["temperature"].tolist() == [2, 1, 3, 3, 1, 2]
    assert report.levels["spike"]["temperature"].tolist() == [2, 1, 1, 1, 1, 2]
    assert seen.flags["temperature"].tolist() == [1, 1, 3, 3, 1, 1]


# ---- flat line, stuck, truncated


def test_a_flat_line_must_be_many_levels_and_long():
    depth = np.arange(100) * 5.0
    temperature = 20.0 - 0.01 * depth
    for count, flag in ((19, 1), (45, 3), (60, 4)):
        column = temperature.copy()
        column[20 : 20 + count] = column[20]
        _, report = checked(made(depth=depth, temperature=column))
        found = report.levels["flat_line"]["temperature"]
        assert (found[20 : 20 + count] == flag).all()
        assert (np.delete(found, np.arange(20, 20 + count)) == 1).all()
    _, report = checked(made(depth=depth / 10.0, temperature=column))  # a mixed layer of 30 m
    assert (report.levels["flat_line"]["temperature"] == 1).all()


def test_a_stuck_sensor_fails_the_whole_cast():
    values = ocean()
    values["salinity"] = np.full(40, 35.002)
    seen, report = checked(made(**values))
    assert (report.levels["stuck"]["salinity"] == 4).all()
    assert (seen.flags["salinity"] == 4).all()
    assert (seen.flags["temperature"] == 1).all()
    few = made(depth=[0.0, 50.0, 100.0, 150.0], temperature=[8.5, 8.5, 8.5, 8.5])  # mixed to the bottom, few digits
    assert flags_of(few, "temperature") == [1, 1, 1, 1]


@pytest.mark.parametrize(
    ("depth", "temperature", "flag", "words"),
    [
        ([0.4, 0.5], [10.0, 10.1], 3, "truncated cast: suspect: 2 usable levels over 0.1 m"),
        ([0.0, 5.0, 9.0, 12.0], [10.0, 99.0, 10.0, np.nan], 3, "truncated cast: suspect: 2 usable levels over 9.0 m"),
        ([0.0, 5.0, 9.0], [10.0, 10.0, 10.0], 1, None),
    ],
)
def test_truncated(depth, temperature, flag, words):
    seen, report = checked(made(depth=depth, temperature=temperature))
    assert report.casts["truncated"].tolist() == [flag]
    assert (words in seen.notes) == (words is not None)


# ---- location, date, climatology


@pytest.mark.parametrize(
    ("latitude", "longitude", "flag"),
    [(54.0, 8.0, 1), (0.0, 0.0, 3), (0.0, 8.0, 1), (np.nan, 8.0, 9), (91.0, 8.0, 4), (54.0, 400.0, 4)],
)
def test_location(latitude, longitude, flag):
    block = CastBlock(
        row_size=[3], values={"depth": [0.0, 5.0, 9.0], "temperature": [9.0, 9.0, 8.0]}, id=("A1",),
        time=np.array(["2024-01-01T10:00"], "datetime64[ns]"), latitude=[latitude], longitude=[longitude],
    )  # fmt: skip
    seen, report = check_block(block, now=NOW)
    assert report.casts["location"].tolist() == [flag]
    assert any("location test" in note for note in seen.notes[0]) == (flag in {3, 4})
    assert seen.flags["temperature"].tolist() == [1, 1, 1]


@pytest.mark.parametrize(
    ("time", "flag"),
    [
        ("2024-05-01T07:30", 1), ("NaT", 9), ("1970-01-01T00:00", 3), ("2000-01-01T00:00", 3), ("2000-01-01T00:01", 1),
        ("2026-06-01T20:00", 1), ("2026-06-02T00:01", 4), ("1771-12-31T00:00", 4), ("1873-02-15T12:00", 1),
    ],
)  # fmt: skip
def test_date(time, flag):
    seen, report = checked(made(**ocean(), time=time))
    assert report.casts["date"].tolist() == [flag]
    assert any("date test" in note for note in seen.notes) == (flag in {3, 4})


def test_climatology_makes_suspect_never_fail():
    values = ocean()
    mean, deviation = values["temperature"].copy(), np.full(40, 0.5)
    values["temperature"] = mean + np.where(np.arange(40) >= 30, 1.6, 1.4)
    cast = made(**values)
    by_arrays = {"temperature": (values["depth"], mean, deviation)}
    expected = [1] * 30 + [3] * 10
    seen, report = checked(cast, climatology=by_arrays)
    assert report.levels["climatology"]["temperature"].tolist() == expected
    assert seen.flags["temperature"].tolist() == expected
    assert "salinity" not in report.levels["climatology"]

    def known(variable, depth, latitude, longitude, time):
        assert depth.shape == latitude.shape == longitude.shape == time.shape
        nothing = np.full(depth.size, np.nan)
        return (np.interp(depth, values["depth"], mean), deviation) if variable == "temperature" else (nothing, nothing)

    _, report = checked(cast, climatology=known)
    assert report.levels["climatology"]["temperature"].tolist() == expected
    assert set(report.levels["climatology"]["salinity"].tolist()) == {2}
    with pytest.raises(InputError, match=r"climatology of temperature: mean has shape \(1,\)"):
        checked(cast, climatology=lambda *_: ([1.0], [1.0]))


# ---- density inversion


def denser_by_loop(depth, temperature, salinity):
    """Pair by pair with gsw, at the pressure midway."""
    found = []
    for i in range(len(depth) - 1):
        top, low = (i, i + 1) if depth[i] < depth[i + 1] else (i + 1, i)
        rho = []
        for j in (top, low):
            sa = gsw.SR_from_SP(salinity[j])
            ct = gsw.CT_from_t(sa, temperature[j], depth[j])
            rho.append(gsw.rho(sa, ct, (depth[top] + depth[low]) / 2.0))
        found.append(rho[0] - rho[1])
    return np.array(found)


@pytest.mark.parametrize("direction", [1, -1])
@pytest.mark.parametrize(("cold", "warm"), [(-2.0, 4.0), (4.0, 12.0), (12.0, 40.0)])
def test_no_inversion_is_missed_by_the_quick_look(direction, cold, warm):
    """Against gsw on every pair, over all salinities, fresh water near its densest and deep water included."""
    rng = np.random.default_rng(7)
    count = 2000
    depth = np.sort(rng.uniform(0.0, 6000.0, count))[::direction]
    temperature, salinity = rng.uniform(cold, warm, count), rng.uniform(0.0, 45.0, count)
    temperature[1::2] = temperature[::2] + rng.normal(0.0, 0.2, count // 2)
    salinity[1::2] = np.maximum(salinity[::2] + rng.normal(0.0, 0.05, count // 2), 0.0)
    excess = denser_by_loop(depth, temperature, salinity)
    levels = Levels.of(None, np.array([0, count]))
    at, found = inversions(depth, temperature, salinity, levels, 0.03)
    assert at.tolist() == np.flatnonzero(excess > 0.03).tolist()
    assert 0.1 * count < at.size < 0.9 * count
    np.testing.assert_allclose(found, excess[at], rtol=0.0, atol=1e-9)


def test_the_sign_of_a_density_inversion():
    """A mixed layer and a stable step pass, which the rule as QARTOD prints it would fail; a real inversion fails."""
    stable = made(depth=[0.0, 5.0, 10.0, 15.0], temperature=[15.0] * 4, salinity=[35.0, 35.0, 35.02, 36.0])
    _, report = checked(stable)
    assert report.levels["density_inversion"]["salinity"].tolist() == [1, 1, 1, 1]
    unstable = made(depth=[0.0, 5.0, 10.0, 15.0], temperature=[15.0] * 4, salinity=[35.0, 35.0, 34.9, 35.0])
    seen, report = checked(unstable)
    assert report.levels["density_inversion"]["salinity"].tolist() == [1, 4, 4, 1]
    assert seen.flags["temperature"].tolist() == [1, 4, 4, 1]
    small = made(depth=[0.0, 5.0, 10.0, 15.0], temperature=[15.0] * 4, salinity=[35.0, 35.0, 34.97, 35.0])
    _, report = checked(small)
    assert report.levels["density_inversion"]["salinity"].tolist() == [1, 1, 1, 1]  # 0.023 kg/m3


# ---- pressure increasing


def test_the_way_down_is_used_and_the_way_up_kept_and_flagged():
    down = np.arange(0.0, 100.0, 5.0)
    depth = np.concatenate((down, down[::-1][1:]))
    cast = made(depth=depth, temperature=20.0 - 0.05 * depth)
    seen, report = checked(cast)
    assert len(seen) == 39
    assert seen.flags["depth"].tolist() == [1] * 20 + [3] * 19
    assert (seen.flags["temperature"] == 1).all()
    assert report.levels["spike"]["temperature"].tolist() == [2] + [1] * 18 + [2] * 20
    words = "suspect are 19 of the way that is not used (up or down), of 39 levels"
    assert seen.notes[1] == f"pressure increasing test: {words}"
    assert Profile.from_cast(seen, salinity=35.0).depth.tolist() == down.tolist()


def test_the_way_down_is_used_though_the_way_up_has_more_levels():
    down, up = np.arange(0.0, 100.0, 10.0), np.arange(90.0, 0.0, -1.0)[1:]
    code, ordered = way_of_cast(np.concatenate((down, up)), **WAY)
    assert ordered
    assert code.tolist() == [0] * 10 + [1] * up.size


def test_a_cast_stored_from_the_bottom_is_all_used():
    code, ordered = way_of_cast(np.arange(500.0, 0.0, -5.0), **WAY)
    assert ordered
    assert not code.any()


def test_the_way_up_is_used_where_the_way_down_was_hardly_recorded():
    depth = np.concatenate((np.arange(450.0, 500.0, 10.0), np.arange(500.0, 0.0, -10.0)))
    code, _ = way_of_cast(depth, **WAY)
    assert code.tolist() == [1] * 5 + [0] * 50


def test_soak_and_loops():
    """To 12 m, a stop there, back to 1 m, then down with the heave of the ship."""
    soak = [0.5, 4.0, 8.0, 12.0, 12.1, 12.0, 11.9, 8.0, 4.0]
    cast_proper = [1.0, 3.0, 6.0, 9.0, 12.0, 15.0, 14.0, 13.5, 15.0, 18.0, 21.0, 24.0, 27.0, 30.0]
    code, ordered = way_of_cast(np.array(soak + cast_proper), **WAY)
    assert ordered
    assert code.tolist() == [2] * len(soak) + [0] * 6 + [3] * 3 + [0] * 5


def test_heave_below_the_surface_is_no_soak():
    """The ship lifts the probe by 4 m at 20 m: nothing above is lost."""
    depth = np.array([1.0, 5.0, 10.0, 15.0, 20.0, 16.0, 18.0, 22.0, 30.0, 40.0])
    code, _ = way_of_cast(depth, **WAY)
    assert code.tolist() == [0, 0, 0, 0, 0, 3, 3, 0, 0, 0]


def test_repeated_pressure_is_flagged_from_the_second_on():
    code, _ = way_of_cast(np.array([1.0, 2.0, 2.0, 2.0, 3.0, 4.0, 5.0]), **WAY)
    assert code.tolist() == [0, 0, 3, 3, 0, 0, 0]


def test_one_wild_pressure_does_not_condemn_the_rest():
    depth = np.arange(40) * 2.0
    depth[7] = 1000.0
    seen, _ = checked(made(pressure=depth, temperature=np.linspace(20.0, 15.0, 40)))
    assert np.flatnonzero(seen.flags["pressure"] != 1).tolist() == [7]
    assert seen.flags["pressure"][7] == 4
    assert "pressure increasing test: fail are 1 far from both their neighbours" in seen.notes


def test_levels_in_no_order_are_not_judged():
    rng = np.random.default_rng(3)
    depth = rng.permutation(np.arange(60.0) * 2.0)
    seen, report = checked(made(depth=depth, temperature=20.0 - 0.1 * depth))
    assert (seen.flags["depth"] == 1).all()
    assert set(report.levels["pressure_increasing"]["depth"].tolist()) == {2}
    assert "pressure increasing test: the levels are in no order; not judged" in seen.notes
    assert len(Profile.from_cast(seen, salinity=35.0).depth) == 60


def test_pressure_and_depth_are_flagged_together():
    z = np.array([0.0, 10.0, 20.0, 30.0, 25.0])
    cast = made(pressure=z, depth=z * 0.99, temperature=[10.0, 9.0, 8.0, 7.0, 7.5])
    seen, _ = checked(cast)
    assert seen.flags["pressure"].tolist() == seen.flags["depth"].tolist() == [1, 1, 1, 1, 3]


@given(
    st.lists(st.floats(0.0, 2000.0), min_size=1, max_size=60),
)
def test_what_is_used_goes_strictly_one_way(depth):
    code, ordered = way_of_cast(np.array(depth), **WAY)
    kept = np.array(depth)[code == 0]
    assert kept.size >= 1
    if ordered:
        steps = np.diff(kept)
        assert (steps > 0).all() or (steps < 0).all()
    else:
        assert set(code.tolist()) <= {0, 4}


# ---- flags together


def test_the_worst_of_source_and_tests():
    values = ocean(8)
    values["temperature"][6] += 10.0
    source = {"temperature": [1, 2, 3, 4, 1, 2, 1, 2]}
    seen, _ = checked(made(flags=source, **values))
    assert seen.flags["temperature"].tolist() == [1, 1, 3, 4, 1, 1, 4, 1]


def test_bad_at_the_source_stays_bad_and_is_no_neighbour():
    values = ocean(8)
    values["temperature"][3] = 0.0  # nothing the tests alone would leave unseen, but flagged at the source
    seen, report = checked(made(flags={"temperature": [1, 1, 1, 4, 1, 1, 1, 1]}, **values))
    assert seen.flags["temperature"].tolist() == [1, 1, 1, 4, 1, 1, 1, 1]
    assert report.levels["spike"]["temperature"].tolist() == [2, 1, 1, 2, 1, 1, 1, 2]


@given(st.data())
def test_no_flag_ever_gets_better(data):
    count = data.draw(st.integers(2, 30))
    value = st.one_of(st.floats(-5.0, 60.0), st.sampled_from([np.nan, np.inf, -1e308, 1e308, 1e-308]))
    column = st.lists(value, min_size=count, max_size=count)
    flag = st.lists(st.sampled_from([1, 2, 3, 4, 9]), min_size=count, max_size=count)
    names = ("depth", "temperature", "salinity")
    cast = made(flags={name: data.draw(flag) for name in names}, **{name: data.draw(column) for name in names})
    seen = check_cast(cast, thresholds=data.draw(st.sampled_from(["ocean", "coast", "estuary", "lake"])), now=NOW)
    for name in names:
        before, after = cast.flags[name], seen.flags[name]
        bad = np.isin(before, [3, 4, 9])
        assert (after[bad] >= before[bad]).all()
        assert (after[~np.isfinite(cast.values[name])] == 9).all()
        np.testing.assert_array_equal(cast.values[name], seen.values[name])
    assert set(np.concatenate(list(seen.flags.values())).tolist()) <= {1, 2, 3, 4, 9}


# ---- sound speed, and many at once


def test_a_cast_of_sound_speed_has_the_same_tests():
    depth = np.arange(60) * 5.0
    speed = 1520.0 - 20.0 * (1.0 - np.exp(-depth / 50.0)) + 0.016 * depth
    speed[10] += 20.0
    speed[30] = 1800.0
    seen, report = checked(made(depth=depth, sound_speed=speed))
    assert np.flatnonzero(seen.flags["sound_speed"] != 1).tolist() == [10, 30]
    assert report.levels["spike"]["sound_speed"][10] == 4
    assert report.levels["gross_range"]["sound_speed"][30] == 4
    assert "density_inversion" not in report.levels


def wild_casts():
    rng = np.random.default_rng(11)
    casts = []
    for index in range(60):
        count = int(rng.integers(1, 90))
        depth = np.sort(rng.uniform(0.0, 900.0, count))
        values = {
            "depth" if index % 3 else "pressure": depth if index % 5 else np.concatenate((depth, depth[::-1]))[:count],
            "temperature": rng.choice([10.0, 10.0, 10.1, 18.0, 99.0, np.nan], count),
        }
        if index % 2:
            values["salinity"] = rng.choice([35.0, 35.0, 35.4, 38.0, np.nan], count)
        if index % 7 == 0:
            values["sound_speed"] = rng.choice([1500.0, 1530.0, 1900.0], count)
        casts.append(Cast(id=f"W{index}", values=values, latitude=float(index % 2), longitude=0.0))
    return casts


@pytest.mark.parametrize("piece", [1, 100, 65536])
def test_many_at_once_are_as_each_alone(monkeypatch, piece):
    monkeypatch.setattr(checking, "_PIECE", piece)
    casts = wild_casts()
    block, report = check_block(CastBlock.from_casts(casts), now=NOW)
    assert len(block) == len(casts)
    for index, cast in enumerate(casts):
        alone = check_cast(cast, now=NOW)
        for name in alone.values:
            if np.isfinite(alone.values[name]).any():
                np.testing.assert_array_equal(block[index].flags[name], alone.flags[name], err_msg=f"{index} {name}")
        assert block.notes[index] == alone.notes
        assert report.of_cast(index).notes[0] == alone.notes


def test_turned_upside_down_the_flags_turn_too():
    """Storing the cast from the bottom changes no verdict."""
    rng = np.random.default_rng(5)
    values = ocean(80, 7.0)
    values["temperature"] += rng.choice([0.0, 0.0, 0.0, 3.0], 80)
    values["salinity"] += rng.choice([0.0, 0.0, 0.5], 80)
    seen, _ = checked(made(**values))
    turned, _ = checked(made(**{name: column[::-1] for name, column in values.items()}))
    for name, flag in seen.flags.items():
        np.testing.assert_array_equal(turned.flags[name], flag[::-1])
    assert (seen.flags["temperature"] > 1).any()


# ---- the report


def test_the_report_counts_and_saves():
    values = ocean()
    values["temperature"][20] += 8.0
    block = CastBlock.from_casts([made(**values), made(**ocean(10))])
    _, report = check_block(block, now=NOW)
    assert report.counts()["spike"]["temperature"] == {"pass": 45, "not_evaluated": 4, "fail": 1}
    assert report.of_cast(1).counts()["spike"]["temperature"] == {"pass": 8, "not_evaluated": 2}
    assert report.of_cast(-1).row_size.tolist() == [10]
    assert "spike, temperature: 46 judged, 0 suspect, 1 failed" in report.lines()
    assert "date, cast: not judged" in report.lines()
    dataset = report.to_dataset()
    assert dataset.sizes == {"obs": 50, "cast": 2}
    assert dataset["temperature_spike_flag"].dtype == np.int8
    assert dataset["temperature_spike_flag"].attrs["standard_name"] == "spike_test_quality_flag"
    assert dataset["temperature_stuck_flag"].attrs["standard_name"] == "quality_flag"
    assert dataset["temperature_stuck_flag"].attrs["flag_values"].tolist() == [1, 2, 3, 4, 9]
    assert report.of_cast(0).to_dataset().sizes["level"] == 40


# ---- thresholds


def test_a_persons_own_thresholds(tmp_path):
    path = tmp_path / "mine.toml"
    path.write_text('based_on = "lake"\n[gross_range]\ntemperature = [0, 1, 20, 25]\n[spike.above]\nsalinity = false\n')
    mine = read_thresholds(path)
    assert mine.of("gross_range", "temperature") == [0, 1, 20, 25]
    assert mine.of("gross_range", "salinity") == read_thresholds("lake").of("gross_range", "salinity")
    cast = made(depth=np.arange(5) * 2.0, temperature=[22.0, 19.0, 10.0, 6.0, 26.0], salinity=[0, 0, 30.0, 0, 0])
    seen, report = checked(cast, thresholds=path)
    assert report.levels["gross_range"]["temperature"].tolist() == [3, 1, 1, 1, 4]
    assert "salinity" not in report.levels["spike"]
    assert seen.notes[0].startswith(f"checked with the thresholds '{path}'")


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("based_on = 'river'", r"mine.toml: field 'based_on' is 'river': give one of ocean, coast, estuary, lake"),
        ("[spik]\ndeep = 1", r"field 'spik' is unknown: did you mean 'spike'\?"),
        ("spike = 3", r"field 'spike' is 3: give a table \[spike\]"),
        ("[spike]\nabove = 3", r"field 'spike.above' is 3: give a table \[spike.above\]"),
        (
            "[spike.above]\ntemprature = [1, 2]",
            r"field 'spike.above.temprature' is unknown: did you mean 'temperature'",
        ),
        ("[spike.above]\ntemperature = [2, 1]", r"'spike.above.temperature' is \[2, 1\]: give two ascending numbers"),
        ("[gross_range]\nsalinity = [0, 1, 2]", r"'gross_range.salinity' is \[0, 1, 2\]: give four ascending numbers"),
        ("[gross_range]\nsalinity = [0, 1, 2, inf]", r"give four ascending numbers"),
        ("[flat_line]\ntemperature = [2, 5]", r"give two ascending whole numbers of 3 or more"),
        ("[stuck]\nlevels = 0", r"field 'stuck.levels' is 0: give a whole number of 1 or more"),
        ("[date]\nearliest = 1900", r"field 'date.earliest' is 1900: give a date such as 1900-01-31"),
        ("[climatology]\ndeviations = true", r"field 'climatology.deviations' is True: give a number of 0 or more"),
        ("[spike\n", r"mine.toml: is not TOML"),
    ],
)
def test_faults_in_thresholds_are_named(tmp_path, text, message):
    path = tmp_path / "mine.toml"
    path.write_text(text)
    with pytest.raises(InputError, match=message):
        read_thresholds(path)


def test_every_fault_has_its_line(tmp_path):
    path = tmp_path / "mine.toml"
    path.write_text("[spike]\ndeep = -1\nreech = 2\n[stuck]\nspan = 'far'\n")
    with pytest.raises(InputError, match=r"(?s)spike.deep.*\n.*spike.reech.*\n.*stuck.span"):
        read_thresholds(path)


def test_no_such_thresholds(tmp_path):
    with pytest.raises(InputError, match=r"thresholds 'sea': no set and no file is called so; sets are ocean, coast"):
        check_cast(made(**ocean()), thresholds="sea")
    with pytest.raises(InputError, match=r"can't be read"):
        read_thresholds(tmp_path)
