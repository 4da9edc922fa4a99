"""Passports of soundings: they add up, agree with the corrected sounding, and the truth lies where they say."""

from __future__ import annotations

import math

import numpy as np
import pytest

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.soundings import beam_times
from ocean_sound.soundings.choosing import Scales
from ocean_sound.soundings.columns import REASON, PingBlock
from ocean_sound.soundings.components import Component
from ocean_sound.soundings.correcting import Corrector, Options
from ocean_sound.soundings.passport import CHANGE, NOISE, STEERING, passport, passport_of_file
from ocean_sound.soundings.radius import TVU_FACTOR, thu_95_from_covariance
from ocean_sound.soundings.streaming import Job

pytestmark = [pytest.mark.kernels, pytest.mark.long]

DEPTH = np.array([0.0, 8.0, 14.0, 30.0, 80.0])
SPEED = np.array([1512.0, 1511.5, 1497.0, 1492.0, 1493.0])
CHANGES = {"first": ([0.0, 10.0, 20.0], [2.0, 1.0, 0.0]), "second": ([0.0, 80.0], [-0.3, 0.4])}
ANGLES = np.array([-62.0, -20.0, 0.0, 35.0, 60.0])


def cast(name, offset=0.0, hours=0.0):
    shapes = {"equation": np.full(5, 0.1), "temperature": [0.3, 0.3, 0.1, -0.1, 0.1]}
    return Profile(
        DEPTH, SPEED + offset * np.exp(-DEPTH / 15.0), shapes=shapes, noise=np.full(5, 0.2), id=name, latitude=54.0,
        longitude=8.0, time=np.datetime64("2024-05-01T10:00", "ns") + np.timedelta64(int(3600 * hours), "s"),
    )  # fmt: skip


def block(start=0, hours=(0.5, 1.0, 1.5), depth=60.0, **more):
    """Pings of five beams that end at one depth in the first cast's water."""
    n = len(hours)
    time = 2.0 * beam_times(cast("first"), ANGLES, depth, transducer_depth=4.0).time
    begin = np.datetime64("2024-05-01T10:00", "ns")
    pings = {
        "time": begin + (np.array(hours) * 3.6e12).astype("timedelta64[ns]"),
        "latitude": np.full(n, 54.001), "longitude": np.full(n, 8.001), "heading": np.full(n, 30.0),
        "transducer_depth": np.full(n, 4.0), "surface_sound_speed": np.full(n, 1511.0), **more,
    }  # fmt: skip
    beams = {"two_way_travel_time": np.tile(time, (n, 1)), "across_track_angle": np.tile(ANGLES, (n, 1))}
    return PingBlock(pings, beams, start)


def corrector(*casts, options=None, **more):
    more = {"scales": Scales(4 * 3600.0, 20e3), "change": CHANGES} | more
    return Corrector(
        casts or (cast("first"), cast("second", 2.0, 2.0)), options, transducer_depth_range=(4.0, 4.0), **more
    )


OTHERS = (
    Component("tide", "vertical", fixed=0.1, level=95.0),
    Component("temperature", "vertical", share_per_degree=1e-5, k=1.0),
    Component("positioning", "horizontal", fixed=1.0, level=95.0),
)


@pytest.fixture(scope="module", params=["flat", "curved"])
def works(request):
    """A corrector of everything."""
    return corrector(options=Options(array=request.param, steering_speed_uncertainty=0.2), components=OTHERS)


@pytest.fixture(scope="module")
def plain():
    """One of one cast."""
    return corrector(cast("first"), scales=None)


@pytest.mark.parametrize("beam", range(5))
def test_a_passport_adds_up_and_agrees_with_the_corrected_sounding(works, beam):
    pings, array = block(start=70), works.options.array
    found = passport(works, pings, 71, beam, command="ocean-sound soundings line.nc")
    corrected = {name: column[1, beam] for name, column in works.correct(pings).items()}
    assert found.results == pytest.approx({name: float(value) for name, value in corrected.items()}, nan_ok=True)
    assert found.name == f"ping 71, beam {beam}"
    # of the table 2 %; of the exact sum nothing is left
    assert found.speed_tvu_95 == pytest.approx(corrected["tvu_95"], rel=0.02)
    assert found.speed_thu_95 == pytest.approx(corrected["thu_95"], rel=0.02, abs=1e-9)
    assert found.tvu_95 == pytest.approx(corrected["total_tvu_95"], rel=0.02)
    assert found.thu_95 == pytest.approx(corrected["total_thu_95"], rel=0.02)
    assert found.tvu_95 == pytest.approx(math.sqrt(sum(size**2 for size in found.causes.values())), rel=1e-12)
    along = sum(size**2 for size in found.distance_causes.values()) / TVU_FACTOR**2
    h = OTHERS[2].sigma(60.0)
    assert found.thu_95 == pytest.approx(thu_95_from_covariance(along, h * h), rel=1e-9)
    own = {"equation", "temperature", NOISE, CHANGE} | ({STEERING} if array == "flat" and ANGLES[beam] else set())
    tilted = {"temperature (component)"} if ANGLES[beam] else set()
    assert set(found.causes) == own | {"tide"} | tilted
    assert set(found.distance_causes) == {"positioning"} | (own if ANGLES[beam] else set())
    assert list(found.causes.values()) == sorted(found.causes.values(), reverse=True)


def test_the_ray_begins_at_the_transducer_and_ends_at_the_sounding(works):
    found = passport(works, block(), 1, 4)
    assert (found.ray_across[0], found.ray_along[0]) == (0.0, 0.0)
    assert found.ray_depth[0] == pytest.approx(4.0, abs=1e-6)
    assert (found.ray_across[-1], found.ray_depth[-1]) == (found.across, found.depth)
    assert np.all(np.diff(found.ray_depth) > 0.0)
    first, second = found.casts
    assert {first.id, second.id} == {"first", "second"}
    assert first.weight + second.weight == pytest.approx(1.0)
    assert found.depth == pytest.approx(first.weight * first.depth + second.weight * second.depth)
    assert first.time_apart == second.time_apart == 3600.0
    assert first.distance == pytest.approx(129.0, abs=1.0)  # 0.001 degrees each way at 54 north: 111.3 and 65.6 m


def test_contributions_are_signed_and_what_errors_do(plain):
    """A cast whose error is one standard uncertainty of a shape moves the sounding by what the passport says."""
    own = cast("first")
    exact = passport(plain, block(), 0, 4)
    right = passport(corrector(own, scales=None, change={}, options=Options(tolerance=1e-6)), block(), 0, 4)
    for cause, shape in own.shapes.items():
        small = 1e-3
        wrong = Profile(DEPTH, SPEED + small * shape, id="first", latitude=54.0, time=own.time, longitude=8.0)
        moved = passport(corrector(wrong, scales=None, change={}, options=Options(tolerance=1e-6)), block(), 0, 4)
        (part,) = (each for each in exact.contributions if each.cause == cause)
        assert part.share == 1.0
        assert (moved.depth - right.depth) / small == pytest.approx(part.depth, rel=0.01, abs=1e-3)
        assert (moved.across - right.across) / small == pytest.approx(part.distance, rel=0.01, abs=1e-3)


def test_a_tilted_face_and_the_way_to_reception(plain):
    away = {"reception_latitude": np.full(3, 54.001 + 2e-5), "reception_longitude": np.full(3, 8.001)}
    pings = block(face_roll=np.full(3, 25.0), face_pitch=np.full(3, -2.0), **away)
    found = passport(plain, pings, 2, 3)
    assert found.speed_tvu_95 == pytest.approx(found.results["tvu_95"], rel=0.021)
    assert (found.ray_across[-1], found.ray_depth[-1]) == (found.across, found.depth)


def test_failed_soundings_have_a_reason_and_nothing_invented(works):
    pings = block()
    pings.beams["two_way_travel_time"][1, 2] = np.nan
    found = passport(works, pings, 1, 2)
    assert found.reason == "the travel time, or the depth that stands for it, is missing"
    assert found.ray_depth.size == 0
    assert np.isnan([found.tvu_95, found.thu_95, found.speed_tvu_95]).all()
    assert found.contributions == ()
    assert "nan m deep" in found.lines()[0]
    late = passport(works, block(hours=(99.0,)), 0, 0)
    assert late.casts == ()
    assert int(late.results["sounding_reason"]) == REASON["no_cast_near_enough"]


def test_what_a_cast_does_not_know_is_not_known():
    bare = Profile(DEPTH, SPEED, id="bare")
    found = passport(corrector(bare, scales=None), block(), 0, 1)
    assert found.results["depth"] > 0.0
    assert np.isnan([found.tvu_95, *found.causes.values()]).all()
    assert any("says nothing of its uncertainty" in note for note in found.notes)


def test_the_passport_as_text_and_as_a_dataset(works):
    found = passport(works, block(), 2, 0, command="ocean-sound soundings a.nc --passport 2,0")
    lines = found.lines()
    assert lines[0].startswith("ping 2, beam 0 (counted from 0): ")
    assert "m to port" in lines[0]
    assert lines[-1] == "to reproduce it: ocean-sound soundings a.nc --passport 2,0"
    assert any(line.startswith("  change_of_the_water, first, second") for line in lines)
    dataset = found.to_dataset()
    total = float((dataset["share"] * dataset["depth_error"] ** 2).sum())
    assert TVU_FACTOR * math.sqrt(total) == pytest.approx(float(dataset["all_tvu_95"]), rel=1e-9)
    assert dataset["ray_depth"].attrs["units"] == "m"
    assert dataset["depth"].item() == found.depth
    assert dataset["sounding_flag"].dtype == np.int8
    assert dataset["cast"].values.tolist() == [each.id for each in found.casts]


def test_a_sounding_of_a_file_by_the_job_that_corrects_it(plain):
    import xarray as xr

    pings = block()
    dataset = xr.Dataset(
        {name: ("ping", values) for name, values in pings.pings.items()}
        | {name: (("ping", "beam"), values) for name, values in pings.beams.items()}
    )
    job = Job((cast("first"),), choice={"change": CHANGES})
    found = passport_of_file(dataset, job, 1, 3, command="again")
    expected = passport(plain, pings, 1, 3)
    assert (found.tvu_95, found.depth) == pytest.approx((expected.tvu_95, expected.depth), rel=1e-6)
    with pytest.raises(InputError, match=r"there is no ping 3, beam 0: pings 0 to 2 and beams 0 to 4"):
        passport_of_file(dataset, job, 3, 0)


@pytest.mark.parametrize(("ping", "beam"), [(9, 0), (13, 0), (10, 5), (10, -1)])
def test_soundings_that_are_not_there(plain, ping, beam):
    with pytest.raises(InputError, match=rf"no ping {ping}, beam {beam}: pings 10 to 12 and beams 0 to 4"):
        passport(plain, block(start=10), ping, beam)


@pytest.mark.parametrize("array", ["flat", "curved"])
def test_intervals_hold_the_truth(array):
    """Water drawn from what the cast says of itself, the transducer heaving: 95 % intervals hold 93 to 97 %."""
    count, random, own = 2000, np.random.default_rng(5), cast("first")
    angle, truth = random.uniform(-65.0, 65.0, count), random.uniform(20.0, 75.0, count)
    source, steering = random.uniform(3.8, 4.2, count), random.normal(1511.0, 2.0, count)
    time, across = np.empty(count), np.empty(count)
    for n in range(count):
        error = sum(random.normal() * shape for shape in own.shapes.values()) + own.noise * random.normal(size=5)
        there = beam_times(
            Profile(DEPTH, SPEED - error), angle[n], truth[n], transducer_depth=source[n],
            surface_speed=steering[n] if array == "flat" else None,
        )  # fmt: skip
        time[n], across[n] = 2.0 * there.time, there.across
    pings = PingBlock(
        {"transducer_depth": source, "surface_sound_speed": steering},
        {"two_way_travel_time": time[:, np.newaxis], "across_track_angle": angle[:, np.newaxis]},
    )
    works = Corrector((own,), Options(array=array, curvature=False), transducer_depth_range=(3.8, 4.2))
    found = {name: column[:, 0] for name, column in works.correct(pings).items()}
    assert np.isfinite(found["depth"]).all()
    assert 0.93 < np.mean(np.abs(found["depth"] - truth) <= found["tvu_95"]) < 0.97
    assert 0.93 < np.mean(np.abs(found["across_track_distance"] - across) <= found["thu_95"]) < 0.97
