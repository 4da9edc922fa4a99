"""Many blocks of work over worker processes or a dask cluster: in order, in bounded memory, and over when we are.

Work goes through the interface of `concurrent.futures`, whichever engine lies behind it. Blocks are drawn from their
iterator only as results are taken, so that a run over any number of them holds a few at a time; results come in the
order of the blocks, so that nothing depends on how many workers there were.
"""

from __future__ import annotations

import os
import threading
import time
from collections import deque
from concurrent.futures import BrokenExecutor, CancelledError, Executor, Future, ProcessPoolExecutor
from contextlib import contextmanager
from multiprocessing import get_context
from typing import TYPE_CHECKING, Any, TypeVar

from .errors import InputError, WorkerError

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator

Block = TypeVar("Block")
Result = TypeVar("Result")

# Blocks at work or waiting for each worker: enough that none is idle while the results are written.
AHEAD = 3
# How often a worker looks whether the process that started it is still there, s.
_WATCH = 0.5
# How long an ended worker may take to go before it is killed, s.
_PATIENCE = 5.0


def usable_processors() -> int:
    """How many processors this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


@contextmanager
def workers(
    number: int | None = None, *, scheduler: str | None = None, make_ready: Callable[[], None] | None = None
) -> Iterator[tuple[Executor, int]]:
    """An executor, and how many workers it has, for as long as the block lasts.

    Parameters
    ----------
    number : int, optional
        Worker processes on this machine; by default one for each usable processor.
    scheduler : str, optional
        Address of a dask scheduler, such as ``tcp://10.0.0.5:8786``, whose workers do the work instead. They must have
        this package installed.
    make_ready : callable, optional
        Called in each local worker when it starts; it must survive pickling.

    Yields
    ------
    executor : concurrent.futures.Executor
    number : int
        Of its workers.

    Raises
    ------
    InputError
        If the number is not positive, or no cluster can be reached at the address.

    Notes
    -----
    Local workers start as fresh processes and exit when the process that started them is gone, however it went.
    """
    if scheduler is not None:
        with _cluster(scheduler) as reached:
            yield reached
        return
    count = usable_processors() if number is None else number
    if count < 1:
        raise InputError(f"{count} workers: at least one is needed")
    pool = ProcessPoolExecutor(
        count, mp_context=get_context("spawn"), initializer=_begin, initargs=(os.getpid(), make_ready)
    )
    try:
        yield pool, count
    finally:
        _end(pool)


def _end(pool: ProcessPoolExecutor) -> None:
    """End the workers, whose results are taken or no longer wanted.

    They are not asked to leave one by one: where one was killed while it held the lock of the queue of results, the
    others would wait for that lock for ever, and we for them.
    """
    processes = list((pool._processes or {}).values())  # noqa: SLF001 - public only from Python 3.14 on
    pool.shutdown(wait=False, cancel_futures=True)
    for process in processes:
        process.terminate()
    for process in processes:
        process.join(_PATIENCE)
        if process.is_alive():
            process.kill()


@contextmanager
def _cluster(scheduler: str) -> Iterator[tuple[Executor, int]]:
    try:
        import distributed
    except ImportError:
        raise InputError("a cluster needs dask: install ocean_sound[cluster]") from None
    dask: Any = distributed
    try:
        client = dask.Client(scheduler, timeout=10, set_as_default=False)
    except (OSError, ValueError, TimeoutError) as error:
        raise InputError(f"no dask scheduler answers at {scheduler!r}: {error}") from error
    with client:
        threads: int = sum(client.nthreads().values())
        if threads == 0:
            raise InputError(f"the dask scheduler at {scheduler!r} has no workers: start some")
        with client.get_executor(pure=False) as executor:
            yield executor, threads


def _begin(parent: int, make_ready: Callable[[], None] | None) -> None:
    """Exit when the process that started this one is gone: a pool's worker would wait for work for ever."""

    def watch() -> None:
        while os.getppid() == parent:
            time.sleep(_WATCH)
        os._exit(1)

    threading.Thread(target=watch, daemon=True).start()
    if make_ready is not None:
        make_ready()


def in_order(
    function: Callable[[Block], Result],
    blocks: Iterable[Block],
    *,
    executor: Executor,
    number: int,
) -> Iterator[tuple[Block, Result]]:
    """Each block with its result, in the order of the blocks.

    Parameters
    ----------
    function : callable
        What is done to a block; it, the blocks and the results must survive pickling.
    blocks : iterable
        Drawn only as far as `AHEAD` blocks for each worker beyond the results taken.
    executor : concurrent.futures.Executor
    number : int
        Workers of the executor.

    Yields
    ------
    block, result

    Raises
    ------
    WorkerError
        If a worker process died; the message says at which block.
    Exception
        What the function raised, at the turn of its block; blocks not yet begun are then given up.

    Examples
    --------
    >>> from concurrent.futures import ThreadPoolExecutor
    >>> with ThreadPoolExecutor(2) as threads:
    ...     [result for _, result in in_order(abs, [-1, 2, -3], executor=threads, number=2)]
    [1, 2, 3]
    """
    waiting: deque[tuple[Block, Future[Result]]] = deque()
    source = iter(blocks)
    position = 0
    try:
        while True:
            while len(waiting) < AHEAD * number:
                block = next(source, _NOTHING)
                if block is _NOTHING:
                    break
                waiting.append((block, executor.submit(function, block)))  # type: ignore[arg-type]
            if not waiting:
                return
            block, future = waiting.popleft()
            position += 1
            yield block, future.result()
    except (BrokenExecutor, CancelledError) as error:
        raise WorkerError(
            f"a worker died at block {position} or one being worked on beside it: out of memory, or killed; "
            "try again with fewer workers"
        ) from error
    finally:
        for _, future in waiting:
            future.cancel()


_NOTHING = object()
