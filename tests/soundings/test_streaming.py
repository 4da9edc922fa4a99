"""From file to file in threads: order, bounded memory, failures, and the counts."""

from __future__ import annotations

import os
import subprocess
import sys
import threading
import time
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from ocean_sound.errors import InputError, OutputError
from ocean_sound.profile import Profile
from ocean_sound.soundings.before_and_after import before_and_after
from ocean_sound.soundings.choosing import Scales
from ocean_sound.soundings.columns import REASON, PingBlock
from ocean_sound.soundings.orders import read_orders
from ocean_sound.soundings.reading import open_soundings
from ocean_sound.soundings.streaming import Job, correct_file, correct_files, corrector_for, stream, transducer_depths
from ocean_sound.soundings.tallying import Tally, tally

sys.path.insert(0, str(Path(__file__).parent))
from straight import Straight, as_sounding, survey


class Uneven(Straight):
    """Threads finish in another order than they began."""

    def correct(self, block):
        time.sleep(0.002 * (7 - block.start % 7))
        return super().correct(block)


def test_blocks_are_written_in_order_whichever_is_done_first(tmp_path):
    survey().to_netcdf(tmp_path / "a.nc")
    seen, progress = [], []
    with open_soundings(tmp_path / "a.nc", beams=18) as source:
        counts = stream(
            source, Uneven(), tmp_path / "out.nc", workers=4,
            watch=lambda block, found: seen.append((block.start, found["depth"].shape)), progress=progress.append,
        )  # fmt: skip
    assert [start for start, _ in seen] == list(range(0, 40, 2))
    assert sum(progress) == counts.soundings == 360
    with xr.open_dataset(tmp_path / "out.nc") as back:
        expected = Straight().correct(next(open_soundings(survey()).blocks()))["depth"]
        np.testing.assert_array_equal(back["depth"].values, expected)


def test_counting_needs_no_output():
    with open_soundings(survey(), beams=20) as source:
        assert stream(source, Straight(), None).soundings == 360


def test_only_a_few_blocks_are_held(tmp_path):
    """A thread that never ends would see no more than the blocks that are drawn ahead."""
    drawn, release = [], threading.Event()
    source = open_soundings(survey(pings=300), beams=9)
    whole = source.slabs

    def counted(**options):
        for slab in whole(**options):
            drawn.append(slab.block.start)
            yield slab

    class Waits(Straight):
        def correct(self, block):
            release.wait(20.0)
            return super().correct(block)

    source.slabs = counted
    threading.Timer(0.3, release.set).start()
    waited = []
    stream(source, Waits(), None, workers=2, watch=lambda block, _: waited.append(len(drawn) - block.start))
    assert len(drawn) == 300
    assert max(waited) <= 8


@pytest.mark.skipif(sys.platform != "linux", reason="the unit of the resident size is Linux's")
def test_memory_is_bounded(tmp_path):
    """Sixteen times the beams, hardly more memory: the largest resident size of a process of its own."""
    code = """
import resource, sys
sys.path.insert(0, sys.argv[2])
from ocean_sound.soundings.orders import read_orders
from ocean_sound.soundings.reading import open_soundings
from ocean_sound.soundings.streaming import Job, correct_file, correct_files, corrector_for, stream, transducer_depths
from straight import Straight
for name in ("small", "large"):
    with open_soundings(f"{sys.argv[1]}/{name}.nc", beams=5000) as source:
        stream(source, Straight(), f"{sys.argv[1]}/{name}-out.nc", workers=2)
    print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss)
"""
    for name, pings in (("small", 300), ("large", 5000)):
        survey(pings=pings, beams=100).to_netcdf(tmp_path / f"{name}.nc")
    done = subprocess.run(
        [sys.executable, "-c", code, str(tmp_path), str(Path(__file__).parent)],
        capture_output=True, text=True, check=True,
    )  # fmt: skip
    small, large = (int(peak) / 1024 for peak in done.stdout.split())  # in kB on Linux
    assert (tmp_path / "large-out.nc").stat().st_size > 25e6
    assert large - small < 15.0


def test_what_a_thread_raises_ends_all_and_leaves_nothing(tmp_path):
    class Fails(Straight):
        def correct(self, block):
            if block.start >= 20:
                raise InputError("a block that can't be")
            return super().correct(block)

    survey().to_netcdf(tmp_path / "a.nc")
    with (
        open_soundings(tmp_path / "a.nc", beams=20) as source,
        pytest.raises(InputError, match="a block that can't be"),
    ):
        stream(source, Fails(), tmp_path / "out.nc")
    assert [path.name for path in tmp_path.iterdir()] == ["a.nc"]
    assert threading.active_count() < 10


@pytest.mark.skipif(os.name == "nt", reason="signals are those of POSIX")
def test_an_interrupted_run_leaves_nothing(tmp_path):
    code = """
import signal, sys, time
signal.signal(signal.SIGINT, signal.default_int_handler)  # a shell may have it ignored
sys.path.insert(0, sys.argv[3])
from ocean_sound.soundings.reading import open_soundings
from ocean_sound.soundings.streaming import stream
from straight import Straight
class Slow(Straight):
    def correct(self, block):
        time.sleep(0.05 if block.start == 0 else 3.0)  # no end before the interrupt
        return super().correct(block)
with open_soundings(sys.argv[1], beams=9) as source:
    stream(source, Slow(), sys.argv[2], workers=1, progress=lambda n: print("going", flush=True))
"""
    survey().to_netcdf(tmp_path / "a.nc")
    arguments = [str(tmp_path / "a.nc"), str(tmp_path / "out.nc"), str(Path(__file__).parent)]
    with subprocess.Popen(
        [sys.executable, "-c", code, *arguments], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    ) as process:
        assert process.stdout.readline() == "going\n"
        process.send_signal(2)
        process.wait(timeout=30)
        assert "KeyboardInterrupt" in process.stderr.read()
    assert process.returncode != 0
    assert [path.name for path in tmp_path.iterdir()] == ["a.nc"]


def test_nothing_is_begun_for_an_output_that_can_not_be(tmp_path):
    class Never(Straight):
        def correct(self, block):
            raise AssertionError(f"no block should be corrected, not that from {block.start}")

    (tmp_path / "out.nc").write_text("mine")
    with open_soundings(survey()) as source:
        with pytest.raises(OutputError, match="exists already"):
            stream(source, Never(), tmp_path / "out.nc")
        with pytest.raises(InputError, match="0 workers: at least one is needed"):
            stream(source, Never(), tmp_path / "new.nc", workers=0)
    with (
        open_soundings(survey().isel(ping=slice(0, 0))) as source,
        pytest.raises(InputError, match="holds no soundings"),
    ):
        stream(source, Never(), tmp_path / "new.nc")


def test_the_transducer_depths_is_that_of_the_whole():
    dataset = survey()
    dataset["transducer_depth"].values[33] = 1.25
    dataset["transducer_depth"].values[34] = -4.0  # impossible
    dataset["transducer_depth"].values[35] = np.nan
    with open_soundings(dataset, beams=9) as source:
        assert transducer_depths(source)[0] == 1.25
    dataset["transducer_depth"].values[:] = np.nan
    with (
        open_soundings(dataset) as source,
        pytest.raises(InputError, match="transducer_depth is missing in every ping"),
    ):
        transducer_depths(source)


# --- whole files -----------------------------------------------------------------------------------------------------

WATER = [
    Profile(
        np.array([0.0, 20.0, 60.0]), np.array([1500.0, 1500.0 - at, 1490.0]), np.full(3, 0.2), id=f"cast {at}",
        time=np.datetime64("2026-05-04T09:00") + np.timedelta64(2 * at, "h"), latitude=60.0, longitude=5.0,
    )
    for at in range(2)
]  # fmt: skip
JOB = Job(WATER, choice={"scales": Scales(4 * 3600.0, 20e3), "orders": read_orders()})


@pytest.mark.kernels
@pytest.mark.long
def test_a_file_is_corrected_as_in_memory(tmp_path):
    dataset = survey(pings=60)
    dataset.to_netcdf(tmp_path / "a.nc")
    done = correct_file(tmp_path / "a.nc", JOB, tmp_path / "out.nc")
    block = next(open_soundings(dataset).blocks())
    with open_soundings(dataset) as source:
        expected = corrector_for(source, JOB).correct(block)
    with xr.open_dataset(tmp_path / "out.nc") as back:
        assert set(expected) <= set(back.variables)
        for name, values in expected.items():
            np.testing.assert_allclose(back[name].values, values, rtol=1e-12, atol=1e-7)
    told = done.to_dict()
    assert told["soundings"] == 540
    assert told["deepest_depth"] == pytest.approx(expected["depth"].max())
    assert 0.0 < told["arithmetic_error_of_tables"] <= 1e-3
    assert told["surface_sound_speed"]["pings_compared"] == 60
    assert [each["cast_id"] for each in told["soundings_by_cast"]] == ["cast 0", "cast 1"]
    assert correct_file(dataset, JOB).to_dict()["output"] is None


@pytest.mark.kernels
@pytest.mark.long
def test_many_files_by_threads_and_by_a_cluster_are_alike(tmp_path):
    distributed = pytest.importorskip("distributed")
    paths = [tmp_path / f"{name}.nc" for name in "abc"]
    for at, path in enumerate(paths):
        survey(pings=20, seed=at).to_netcdf(path)
    paths[1].write_bytes(b"CDF\x01cut")
    for name in ("one", "two"):
        (tmp_path / name).mkdir()
    steps = []
    done, lost = correct_files(paths, JOB, tmp_path / "one", progress=lambda *step: steps.append(step))
    with distributed.LocalCluster(
        n_workers=1, threads_per_worker=2, processes=False, protocol="tcp", dashboard_address=None
    ) as cluster:
        others, same = correct_files(paths, JOB, tmp_path / "two", scheduler=cluster.scheduler_address)
    assert lost == same == [(str(paths[1]), lost[0][1])]
    assert "is cut short or damaged" in lost[0][1]
    assert steps == [(1, 3), (2, 3), (3, 3)]
    for one, other, name in zip(done, others, "ac", strict=True):
        assert str(one.tally.to_dict()) == str(other.tally.to_dict())
        with (
            xr.open_dataset(tmp_path / "one" / f"{name}.nc") as a,
            xr.open_dataset(tmp_path / "two" / f"{name}.nc") as b,
        ):
            xr.testing.assert_equal(a, b)


def test_outputs_of_many_files_must_not_collide(tmp_path):
    (tmp_path / "sub").mkdir()
    for path in (tmp_path / "a.nc", tmp_path / "sub" / "a.nc"):
        path.write_bytes(b"")
    with pytest.raises(InputError, match=r"two inputs are called a\.nc"):
        correct_files([tmp_path / "a.nc", tmp_path / "sub" / "a.nc"], JOB, tmp_path)
    with pytest.raises(OutputError, match="exists already"):
        correct_files([tmp_path / "a.nc"], JOB, tmp_path)
    with pytest.raises(InputError, match="would be written over; give another folder"):
        correct_files([tmp_path / "a.nc"], replace(JOB, replace=True), tmp_path)


@pytest.mark.kernels
@pytest.mark.long
def test_before_and_after_of_soundings_corrected_already(tmp_path):
    dataset = survey(pings=20)
    dataset.to_netcdf(tmp_path / "a.nc")
    correct_file(tmp_path / "a.nc", Job(WATER[:1]), tmp_path / "b.nc")
    job = Job(WATER[1:], "corrected", choice={"corrected_with": WATER[0]})
    before, after, what = before_and_after(tmp_path / "b.nc", job, pings=8)
    assert what == "as it was corrected before"
    assert before.sizes == {"ping": 8, "beam": 9}
    with xr.open_dataset(tmp_path / "b.nc") as back:
        np.testing.assert_array_equal(before["depth"], back["depth"][6:14])
    direct = before_and_after(tmp_path / "a.nc", Job(WATER[1:]), pings=8)
    assert np.abs(after["depth"] - direct[1]["depth"]).max() < 0.002  # two tables of 1 mm
    with pytest.raises(InputError, match="has one beam a ping"):
        before_and_after(as_sounding(dataset), Job(WATER[1:]))


# --- the counts ------------------------------------------------------------------------------------------------------


def found(depth, reason, tvu, held=None):
    depth = np.atleast_2d(np.asarray(depth, float))
    columns = {
        "depth": depth,
        "sounding_reason": np.atleast_2d(np.asarray(reason, np.int16)),
        "tvu_95": np.atleast_2d(np.asarray(tvu, np.float32)),
        "cast_used": np.where(np.isnan(depth), -1, 1).astype(np.int16),
    }
    return columns | ({} if held is None else {"orders_held_by_sound_speed": np.atleast_2d(np.asarray(held, np.int16))})


def block(n, m, **columns):
    return PingBlock(columns, {"two_way_travel_time": np.full((n, m), 0.4)})


def test_counts_by_hand():
    one = tally(
        block(1, 5),
        found([10.0, 20.0, np.nan, 30.0, 5.0], [0, 11 - 1, 1, 0, 0], [0.1, 0.2, np.nan, 0.4, 0.05], [3, 1, 0, 2, 3]),
    )
    assert one.soundings == 5
    assert (one.shallowest, one.deepest) == (5.0, 30.0)
    assert one.flags() == {"pass": 3, "not_evaluated": 0, "suspect": 1, "fail": 0, "missing": 1}
    told = one.to_dict(orders=["a", "b"], casts=["first", "second", "third"])
    assert told["reasons"] == {"none": 3, "no_travel_time": 1, "completed_below_the_cast": 1}
    assert [tuple(each.values()) for each in told["soundings_by_cast"]] == [("first", 0), ("second", 4), ("third", 0)]
    assert told["orders_held_by_sound_speed"] == {"a": 3 / 4, "b": 3 / 4}
    assert told["tvu_95"]["largest"] == pytest.approx(0.4)
    assert 0.1 <= told["tvu_95"]["median"] <= 0.1021


def test_counts_of_parts_add_up_to_those_of_all():
    rng = np.random.default_rng(5)
    depth, tvu = rng.uniform(1.0, 100.0, (60, 7)), rng.lognormal(-2.0, 1.0, (60, 7)).astype(np.float32)
    reason, held = rng.choice([0, 1, 8, 10], (60, 7)), rng.integers(0, 8, (60, 7))
    depth[reason == 1] = np.nan
    tvu[reason == 1] = np.nan
    whole = tally(block(60, 7), found(depth, reason, tvu, held))
    parts = [
        tally(block(20, 7), found(depth[i : i + 20], reason[i : i + 20], tvu[i : i + 20], held[i : i + 20]))
        for i in (0, 20, 40)
    ]
    summed = parts[0] + parts[1] + parts[2]
    orders = ["a", "b", "c"]
    assert str((Tally() + summed).to_dict(orders=orders)) == str(whole.to_dict(orders=orders))
    for share in (0.5, 0.95):
        exact = np.quantile(tvu[np.isfinite(tvu)], share, method="inverted_cdf")
        assert exact <= whole.reached_by(share, "tvu_95") * (1 + 1e-6) <= exact * 1.0203


def test_the_error_of_a_position_midway():
    """Half the way made in between: 0.4 s at 5 m/s is 1 m."""
    pings = {
        "time": np.datetime64("2026-05-04T10:00", "ns") + np.arange(4) * np.timedelta64(1, "s"),
        # a second of latitude at 45 degrees is 30.87 m: 5 m/s is 5/30.87 seconds a second
        "latitude": 45.0 + np.arange(4) * 5.0 / 111_131.745,
        "longitude": np.full(4, 7.0),
    }
    nothing = found(np.ones((4, 2)), np.zeros((4, 2)), np.ones((4, 2)))
    assert tally(block(4, 2, **pings), nothing).midpoint == pytest.approx(1.0, rel=1e-4)
    assert tally(block(4, 2, speed_over_ground=np.full(4, 2.5)), nothing).midpoint == 0.5
    pings["reception_latitude"] = pings["latitude"]
    assert np.isnan(tally(block(4, 2, **pings), nothing).midpoint)
    del pings["reception_latitude"]
    pings["latitude"][2] += 1.0  # a jump of the positioning is no speed
    assert tally(block(4, 2, **pings), nothing).midpoint == pytest.approx(1.0, rel=1e-4)
    assert REASON["none"] == 0
