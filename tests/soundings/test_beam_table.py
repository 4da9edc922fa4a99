"""The table of travel times against exact marches, over the waters that are hard on it."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.casts import read_blocks
from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.profile.speeds import speeds_of_block
from ocean_sound.soundings import beam_positions, beam_times
from ocean_sound.soundings.table import beam_table

pytestmark = pytest.mark.kernels


def waters():
    """The waters that issue tables have to serve; all invented."""
    random = np.random.default_rng(3)
    fine = np.linspace(0.0, 500.0, 501)
    deep = np.linspace(0.0, 6000.0, 1000)
    polar = np.linspace(0.0, 1000.0, 1000)
    binned = np.arange(0.0, 1000.0)
    return {
        "thermocline": (fine, 1500.0 + 25.0 / (1.0 + np.exp((fine - 40.0) / 2.0))),
        "surface duct": (fine, 1500.0 + 0.016 * np.minimum(fine, 80.0) - 0.08 * np.clip(fine - 80.0, 0.0, 150.0)),
        "isovelocity": ([0.0, 500.0], [1500.0, 1500.0]),
        "noisy": (binned, 1500.0 + 15.0 * np.exp(-binned / 100.0) + random.normal(0.0, 0.05, binned.size)),
        "deep": (
            deep,
            1500.0 + 20.0 * np.exp(-deep / 300.0) + 0.016 * deep - 8.0 * np.exp(-(((deep - 1000.0) / 500.0) ** 2)),
        ),
        "fresh over salt": (fine, 1450.0 + 30.0 / (1.0 + np.exp(-(fine - 6.0) / 0.8)) + 0.016 * fine),
        "polar": (polar, 1435.0 + 60.0 * (1.0 - np.exp(-polar / 60.0)) + 0.016 * polar),
    }


def random_beams(water, transducer_depth, count, seed=7, largest=75.0):
    """Angles, and times at which a beam is somewhere in the water; some turn before, some run out of it."""
    random = np.random.default_rng(seed)
    angles = random.uniform(-largest, largest, count)
    depths = random.uniform(transducer_depth, water.depth[-1], count)
    times = beam_times(water, angles, depths, transducer_depth=transducer_depth).time
    turned = np.isnan(times)
    times[turned] = random.uniform(0.0, 4.0 * water.depth[-1] / 1500.0, turned.sum())
    return angles, times


def agree(water, angles, times, transducer_depth, tolerance, **options):
    table = beam_table(water, transducer_depth=transducer_depth, tolerance=tolerance)
    exact = beam_positions(water, angles, times, transducer_depth=transducer_depth, **options)
    found = table.positions(angles, times, **options)
    np.testing.assert_array_equal(found.status, exact.status)
    hit = exact.status == 0
    np.testing.assert_array_equal(np.isnan(found.depth), ~hit)
    error = np.hypot(found.depth - exact.depth, found.across - exact.across)[hit]
    assert table.error <= tolerance
    assert error.max() < tolerance
    return table, hit


@pytest.mark.long
@pytest.mark.parametrize("name", waters())
@pytest.mark.parametrize("tolerance", [0.001, 0.05])
def test_random_beams_agree_with_exact_marches(name, tolerance):
    water = Profile(*waters()[name])
    angles, times = random_beams(water, 3.0, 20_000)
    _, hit = agree(water, angles, times, 3.0, tolerance)
    assert hit.mean() > 0.5


@pytest.mark.parametrize("name", ["isovelocity", "thermocline"])
def test_a_few_beams_agree_uncompiled_too(name):
    depth, speed = (np.asarray(column)[:: 50 if len(column) > 10 else 1] for column in waters()[name])
    water = Profile(depth, speed)
    angles, times = random_beams(water, 0.0, 60)
    agree(water, angles, times, 0.0, 0.001)


@pytest.mark.long
def test_polar_water_has_beams_that_turn_and_none_is_invented():
    water = Profile(*waters()["polar"])
    angles, times = random_beams(water, 3.0, 20_000)
    _, hit = agree(water, angles, times, 3.0, 0.001)
    assert (~hit).sum() > 100


@pytest.mark.long
def test_steering_with_another_speed_and_angles_beyond_the_table():
    water = Profile(*waters()["thermocline"])
    angles, times = random_beams(water, 3.0, 5000, largest=88.0)
    agree(water, angles, times, 3.0, 0.001, surface_speed=np.full(5000, 1496.0))


def test_impossible_beams_are_told_from_the_rest():
    table = beam_table(Profile([0.0, 100.0], [1500.0, 1490.0]))
    found = table.positions([np.nan, 90.0, 10.0, 10.0, 10.0, 10.0], [0.01, 0.01, -1.0, np.nan, 0.5, 0.01])
    assert found.status.tolist() == [3, 3, 3, 3, 2, 0]
    assert np.isnan(found.depth[:5]).all()


def test_times_at_nodes_and_at_the_transducer():
    water = Profile([0.0, 10.0, 30.0, 100.0], [1500.0, 1510.0, 1480.0, 1490.0])
    depths = np.array([2.0, 10.0, 30.0, 99.999999])
    times = beam_times(water, 40.0, depths, transducer_depth=2.0).time
    found = beam_table(water, transducer_depth=2.0).positions(40.0, times)
    np.testing.assert_allclose(found.depth, depths, atol=1e-3)


@pytest.mark.long
def test_real_casts(real_data):
    """Every real Argo and Exchange cast at hand, 1000 beams each."""
    served = 0
    for path in sorted((real_data / "argo").glob("*.nc")) + sorted((real_data / "exchange").glob("*.zip")):
        for block in read_blocks(path):
            columns = speeds_of_block(block)
            for index in range(0, len(block), 9):
                if columns.reasons[index]:
                    continue
                water = columns.profile(index).to_surface()
                angles, times = random_beams(water, 0.0, 1000, seed=index)
                agree(water, angles, times, 0.0, 0.001)
                served += 1
    assert served > 60


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"tolerance": 0.0}, "tolerance is 0 m"),
        ({"max_angle": 90.0}, "max_angle is 90 degrees"),
        ({"transducer_depth": 200.0}, "transducer depth is 200 m"),
    ],
)
def test_impossible_tables_are_refused(change, message):
    with pytest.raises(InputError, match=message):
        beam_table(Profile([0.0, 100.0], [1500.0, 1490.0]), **change)
