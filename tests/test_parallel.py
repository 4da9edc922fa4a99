"""Blocks of work: in order, bounded, and over when their parent is."""

from __future__ import annotations

import math
import operator
import os
import signal
import subprocess
import sys
import time
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress

import pytest

from ocean_sound.errors import InputError, WorkerError
from ocean_sound.parallel import AHEAD, in_order, workers


def test_results_come_in_the_order_of_the_blocks_however_long_each_takes():
    def slow(number):
        time.sleep(0.002 * ((number * 7) % 5))
        return -number

    with ThreadPoolExecutor(4) as threads:
        assert list(in_order(slow, range(40), executor=threads, number=4)) == [(i, -i) for i in range(40)]


def test_blocks_are_drawn_no_further_than_the_window():
    drawn = 0

    def blocks():
        nonlocal drawn
        for i in range(1000):
            drawn += 1
            yield i

    with ThreadPoolExecutor(2) as threads:
        results = in_order(operator.neg, blocks(), executor=threads, number=2)
        for taken in range(1, 100):
            next(results)
            assert drawn <= taken + 2 * AHEAD
        results.close()
    assert drawn < 120


def test_no_blocks_no_results():
    with ThreadPoolExecutor(1) as threads:
        assert list(in_order(abs, [], executor=threads, number=1)) == []


def test_an_error_comes_at_the_turn_of_its_block_and_the_rest_is_given_up():
    done = []

    def gather(threads):
        for _, result in in_order(math.sqrt, [4.0, 9.0, -1.0, *range(100)], executor=threads, number=1):
            done.append(result)

    with ThreadPoolExecutor(1) as threads, pytest.raises(ValueError, match=r"math domain error|nonnegative"):
        gather(threads)
    assert done == [2.0, 3.0]


@pytest.mark.parametrize("number", [1, 2])
def test_local_processes_give_the_same_as_a_loop(number):
    with workers(number) as (pool, count):
        assert count == number
        assert list(in_order(math.factorial, range(20), executor=pool, number=count)) == [
            (i, math.factorial(i)) for i in range(20)
        ]


def test_a_worker_that_dies_is_told():
    with workers(1) as (pool, count), pytest.raises(WorkerError, match="a worker died at block 1"):
        list(in_order(os._exit, [3], executor=pool, number=count))


def test_a_worker_that_is_killed_with_the_lock_of_the_results_keeps_nobody_waiting():
    """It takes the lock when its work is done, and is killed while the pool is shutting down."""
    code = (
        "import os, sys, threading\n"
        "lock = sys._getframe().f_back.f_locals['result_queue']._wlock\n"
        "threading.Timer(0.2, lock.acquire).start()\n"
        "threading.Timer(1.0, os.kill, (os.getpid(), 9)).start()\n"
    )
    with workers(2) as (pool, count):
        list(in_order(exec, [code, "pass", "pass", "pass"], executor=pool, number=count))
        time.sleep(0.5)
        begun = time.monotonic()
    assert time.monotonic() - begun < 15.0


def test_workers_leave_when_their_parent_is_killed():
    """The parent is killed outright while its workers wait for work."""
    code = (
        "import time\n"
        "from ocean_sound.parallel import workers, in_order\n"
        "if __name__ == '__main__':\n"
        "    with workers(2) as (pool, count):\n"
        "        list(in_order(abs, range(8), executor=pool, number=count))\n"
        "        print(*pool._processes, flush=True)\n"
        "        time.sleep(60)\n"
    )
    with subprocess.Popen([sys.executable, "-c", code], stdout=subprocess.PIPE, text=True) as parent:
        children = [int(word) for word in parent.stdout.readline().split()]
        assert children
        parent.send_signal(signal.SIGKILL)
    deadline = time.monotonic() + 10.0
    while children and time.monotonic() < deadline:
        time.sleep(0.1)
        for child in list(children):
            with suppress(ProcessLookupError):
                os.kill(child, 0)
                continue
            children.remove(child)
    assert not children


def test_a_dask_cluster_by_its_address_gives_the_same():
    distributed = pytest.importorskip("distributed")
    with (
        distributed.LocalCluster(
            n_workers=1, threads_per_worker=2, processes=False, protocol="tcp", dashboard_address=None
        ) as cluster,
        workers(scheduler=cluster.scheduler_address) as (pool, count),
    ):
        assert cluster.scheduler_address.startswith("tcp://")
        assert count == 2
        assert [result for _, result in in_order(math.factorial, range(20), executor=pool, number=count)] == [
            math.factorial(i) for i in range(20)
        ]


def test_impossible_numbers_and_addresses_are_told():
    with pytest.raises(InputError, match="0 workers: at least one"), workers(0):
        pass
    pytest.importorskip("distributed")
    with pytest.raises(InputError, match="no dask scheduler answers at 'nonsense'"), workers(scheduler="nonsense"):
        pass
