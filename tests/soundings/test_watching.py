"""The surface sound speed against the casts, and absorption to depth."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts import Cast
from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings.columns import PingBlock
from ocean_sound.soundings.watching import SurfaceWatch, mean_absorption
from ocean_sound.water import absorption

CASTS = [Profile([0, 10, 50], [1500, 1510, 1510], id="A"), Profile([2, 50], [1490, 1490], id="B")]


def block(speed, depth=5.0, start=0, beams=1, time=None):
    speed = np.asarray(speed, float)
    pings = {"surface_sound_speed": speed, "transducer_depth": np.broadcast_to(np.asarray(depth, float), speed.shape)}
    if time is not None:
        pings["time"] = time
    return PingBlock(pings, {"two_way_travel_time": np.ones((speed.size, beams))}, start)


def used(values, beams=1):
    return np.repeat(np.asarray(values)[:, None], beams, axis=1)


def test_differences_are_those_at_the_depth_of_the_transducer():
    watch = SurfaceWatch(CASTS)
    # cast A has 1505 at 5 m and 1502.5 at 2.5 m, B 1490 at both: above its first level it is as there
    watch.add(
        block([1506.0, 1506.0, 1489.0, 1491.5, np.nan, 1500.0], [5.0, 2.5, 5.0, 1.0, 5.0, 5.0]),
        used([0, 0, 1, 1, 0, -1]),
    )
    told = watch.summary()
    assert told["pings_compared"] == 4
    assert told["pings_beyond"] == 1
    assert told["mean_difference"] == pytest.approx((1.0 + 3.5 - 1.0 + 1.5) / 4)
    assert told["rms_difference"] == pytest.approx(np.sqrt((1.0 + 3.5**2 + 1.0 + 1.5**2) / 4))
    assert told["largest_difference"] == pytest.approx(3.5)
    (run,) = watch.partings()
    assert (run.first, run.last, run.cast, run.largest) == (1, 1, "A", pytest.approx(3.5))
    assert "says nothing of the water below" in told["note"]


def test_runs_are_listed_with_their_times_and_go_over_blocks():
    moments = np.datetime64("2026-05-04T10:00", "ns") + np.arange(9) * np.timedelta64(1, "s")
    speed = 1505.0 + np.array([0, 3, 4, -3, np.nan, -2.5, 0.5, -2.0, 2.1])
    watch = SurfaceWatch(CASTS)
    watch.add(block(speed, time=moments), used([0] * 9))
    assert [(run.first, run.last, run.largest) for run in watch.partings()] == [
        (1, 5, pytest.approx(4.0)), (8, 8, pytest.approx(2.1))
    ]  # fmt: skip
    assert (
        str(watch.partings()[0]) == "pings 1 to 5, 2026-05-04T10:00:01 to 2026-05-04T10:00:05: +4.0 m/s against cast A"
    )


@given(
    st.lists(st.sampled_from([0.0, 3.0, -4.0, np.nan, 1.9]), min_size=1, max_size=30),
    st.lists(st.integers(1, 7), min_size=1, max_size=30),
)
def test_blocks_of_any_size_give_the_same_runs(differences, sizes):
    speed = 1505.0 + np.array(differences)
    whole = SurfaceWatch(CASTS)
    whole.add(block(speed), used([0] * speed.size))
    parts = SurfaceWatch(CASTS)
    start = 0
    for size in (sizes * 30)[: speed.size]:
        part = speed[start : start + size]
        if part.size:
            parts.add(block(part, start=start), used([0] * part.size))
        start += size
    assert str(parts.partings()) == str(whole.partings())
    ours, theirs = parts.summary(), whole.summary()
    assert str(ours.pop("partings", None)) == str(theirs.pop("partings", None))
    ours.pop("note", None), theirs.pop("note", None)
    assert ours == pytest.approx(theirs)


def test_a_difference_of_ones_own_and_one_that_can_not_be():
    watch = SurfaceWatch(CASTS, largest=0.5)
    watch.add(block([1505.6, 1505.4]), used([0, 0]))
    assert watch.summary()["pings_beyond"] == 1
    with pytest.raises(InputError, match="largest difference of the surface sound speed is 0 m/s: above 0"):
        SurfaceWatch(CASTS, largest=0.0)


def test_without_a_surface_speed_there_is_nothing_to_watch():
    watch = SurfaceWatch(CASTS)
    watch.add(PingBlock({"transducer_depth": np.ones(2)}, {"two_way_travel_time": np.ones((2, 1))}), used([0, 0]))
    assert watch.summary() == {}


def water(depth, temperature, salinity=35.0, **options):
    depth = np.asarray(depth, float)
    return Cast(
        id="T", values={"depth": depth, "temperature": np.broadcast_to(temperature, depth.shape),
                        "salinity": np.broadcast_to(salinity, depth.shape)}, **options
    )  # fmt: skip


def test_mean_absorption_against_fine_quadrature():
    depth = np.linspace(0.0, 200.0, 201)
    temperature = 15.0 - 0.05 * depth
    cast = water(depth, temperature)
    frequency = np.array([12e3, 100e3, 400e3])
    fine = np.linspace(4.0, 150.0, 20_001)
    local = absorption(frequency[:, None], 15.0 - 0.05 * fine, np.full(fine.size, 35.0), depth=fine)
    expected = 0.5 * (local[:, 1:] + local[:, :-1]).sum(axis=1) * (fine[1] - fine[0]) / 146.0
    np.testing.assert_allclose(
        mean_absorption(cast, frequency, transducer_depth=4.0, to_depth=150.0), expected, rtol=1e-6
    )


def test_uniform_water_has_its_own_absorption():
    # Francois and Garrison (1982) by the same formula at one place; over 2 m the depth hardly counts
    expected = absorption(200e3, 8.0, 34.0, depth=1.0)
    assert float(mean_absorption(water([0.0, 2.0], 8.0, 34.0), 200e3)) == pytest.approx(expected, rel=1e-6)


def test_pressure_will_do_and_flags_are_obeyed():
    depth = np.array([0.0, 50.0, 100.0])
    by_depth = mean_absorption(water(depth, [10.0, 9.0, 8.0]), 100e3, to_depth=99.0)
    from ocean_sound.water import pressure_from_depth

    values = {
        "pressure": pressure_from_depth(depth, latitude=45.0),
        "temperature": [10.0, 9.0, 8.0],
        "salinity": [35.0] * 3,
    }
    cast = Cast(id="P", values=values, latitude=45.0)
    assert float(mean_absorption(cast, 100e3, to_depth=99.0)) == pytest.approx(float(by_depth), rel=1e-4)
    flagged = water([0.0, 50.0, 60.0, 100.0], [10.0, 9.0, 99.0, 8.0], flags={"temperature": [1, 1, 4, 1]})
    assert float(mean_absorption(flagged, 100e3)) == pytest.approx(
        float(mean_absorption(water(depth, [10.0, 9.0, 8.0]), 100e3))
    )


@pytest.mark.parametrize(
    ("cast", "options", "match"),
    [
        (
            Cast(id="X", values={"depth": [0.0, 9.0], "sound_speed": [1500.0, 1500.0]}),
            {},
            "needs temperature and salinity",
        ),
        (water([0.0, 9.0], [10.0, np.nan]), {}, "needs two levels with temperature and salinity"),
        (water([0.0, 9.0], 10.0), {"to_depth": 20.0}, "down to 9 m, not to 20: complete it"),
        (water([0.0, 9.0], 10.0), {"transducer_depth": 9.0}, "from 9 to 9 m: a deeper second depth"),
    ],
)
def test_casts_that_say_too_little(cast, options, match):
    with pytest.raises(InputError, match=match):
        mean_absorption(cast, 100e3, **options)
