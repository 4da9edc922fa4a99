"""From file to file: blocks are read, corrected in threads, and written in their order; memory holds a few of them."""

from __future__ import annotations

from collections import Counter
from concurrent.futures import ThreadPoolExecutor
from dataclasses import asdict, dataclass, field, replace
from functools import partial
from pathlib import Path
from time import perf_counter
from typing import TYPE_CHECKING, Any, Protocol

import numpy as np

from ..errors import InputError
from ..files import check_output
from ..parallel import in_order, usable_processors, workers
from .carrying import DEEPEST
from .correcting import Corrector, Options
from .orders import SWATH_NOTE
from .reading import open_soundings
from .tallying import Tally, tally
from .watching import LARGEST_DIFFERENCE, SurfaceWatch
from .writing import About, check_ending, needs_kept, write_soundings

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping, Sequence
    from os import PathLike

    import xarray
    from numpy.typing import NDArray

    from ..profile import Profile
    from .columns import PingBlock
    from .reading import Slab, Soundings

    Found = Mapping[str, NDArray[Any]]

_FASTEST_SOUND = 1600.0  # m/s: no sound is faster on the way to the seabed and back
_RECORDED_SHORT = 1.15  # by how much a recorded depth may be too small: a nominal speed of 1400 for that fastest


@dataclass(frozen=True, eq=False)
class Corrected:
    """What became of a file of soundings.

    Parameters
    ----------
    source, output : str
        Names of the files; no output where only counts were asked for.
    tally : Tally
        Counts over all soundings.
    orders : tuple of str
        Names of the survey orders judged by.
    casts : tuple of str
        Ids of the casts, in the order of `cast_used`.
    transducer_depth : float
        The least, m.
    arithmetic_error : float
        Largest error of the tables of travel times against exact tracing, measured when they were built, m: a bound of
        the arithmetic, not the accuracy of any sounding. NaN without tables.
    surface : mapping
        Surface sound speed against the casts: see `watching.SurfaceWatch.summary`.
    notes : tuple of str
        One line for each thing that was assumed.
    seconds : float
        How long it took.
    """

    source: str
    output: str
    tally: Tally
    orders: tuple[str, ...]
    casts: tuple[str, ...]
    transducer_depth: float
    arithmetic_error: float
    surface: Mapping[str, Any]
    notes: tuple[str, ...]
    seconds: float

    def to_dict(self) -> dict[str, Any]:
        """All of it by name, for a summary."""
        return {
            "source": self.source,
            "output": self.output or None,
            **self.tally.to_dict(orders=self.orders, casts=self.casts),
            "least_transducer_depth": self.transducer_depth,
            "arithmetic_error_of_tables": self.arithmetic_error,
            "surface_sound_speed": dict(self.surface),
            "note_on_orders": SWATH_NOTE,
            "notes": list(self.notes),
            "seconds": self.seconds,
        }


class Corrects(Protocol):
    """What turns a block of pings into columns of `columns.OUTPUTS`; called from several threads at once."""

    def correct(self, block: PingBlock) -> Found:
        """The columns, each of shape (n, m)."""
        ...


def stream(
    source: Soundings,
    corrector: Corrects,
    output: str | PathLike[str] | None,
    about: About | None = None,
    *,
    workers: int | None = None,
    replace: bool = False,
    compression: int = 0,
    watch: Callable[[PingBlock, Found], None] | None = None,
    progress: Callable[[int], None] | None = None,
) -> Tally:
    """Correct all blocks of a source and write them, in their order.

    Parameters
    ----------
    source : Soundings
    corrector : object with a method `correct`
    output : path-like or None
        NetCDF or CSV, by its ending; None to count only.
    about : About, optional
        What the output says beside its soundings.
    workers : int, optional
        Threads that correct, beside the one that reads and writes; by default one for each usable processor. Their
        number changes nothing in the output.
    replace, compression
        As for `write_soundings`.
    watch : callable, optional
        Called with each block and what was found of it, in order, in this thread.
    progress : callable, optional
        Called with the number of soundings done since the last call.

    Returns
    -------
    Tally
        The counts over all soundings.

    Raises
    ------
    InputError
        The input has no soundings, or can't be read; or no thread is asked for.
    OutputError
        As for `write_soundings`.
    """
    number = usable_processors() if workers is None else workers
    if number < 1:
        raise InputError(f"{number} workers: at least one is needed")
    if source.shape[0] * source.shape[1] == 0:
        raise InputError(f"{source.where}: holds no soundings")
    keep = False
    if output is not None:
        path = Path(output)
        check_ending(path)
        check_output(path, replace=replace)
        keep = needs_kept(path, source)
    whole = Tally()

    def work(slab: Slab) -> tuple[Found, Tally]:
        found = corrector.correct(slab.block)
        return found, tally(slab.block, found)

    def results() -> Iterator[tuple[Slab, Found]]:
        nonlocal whole
        with ThreadPoolExecutor(number) as threads:
            for slab, (found, counts) in in_order(work, source.slabs(keep=keep), executor=threads, number=number):
                whole = whole + counts
                if watch is not None:
                    watch(slab.block, found)
                yield slab, found
                if progress is not None:
                    progress(counts.soundings)

    if output is None:
        for _ in results():
            pass
    else:
        write_soundings(output, source, results(), about, replace=replace, compression=compression)
    return whole


def transducer_depths(source: Soundings) -> tuple[float, float]:
    """The least and greatest depth of the transducer in all of a source, m: tables begin at the least.

    Raises
    ------
    InputError
        It is nowhere known.
    """
    least, greatest = source.extent("transducer_depth")
    if np.isnan(least):
        raise InputError(
            f"{source.where}: transducer_depth is missing in every ping; metres below the surface are needed"
        )
    return least, greatest


def deepest_sounding(source: Soundings) -> float:
    """How deep the soundings of a source can be at most, m: so far casts are completed."""
    if source.case in ("beams", "vertical"):
        _, longest = source.extent("two_way_travel_time")
        deepest = 0.5 * longest * _FASTEST_SOUND + source.extent("transducer_depth")[1]
    else:
        _, recorded = source.extent("recorded_depth" if source.case == "recorded" else "depth")
        deepest = recorded * _RECORDED_SHORT
    return float(min(deepest, DEEPEST)) if np.isfinite(deepest) else DEEPEST


@dataclass(frozen=True, eq=False)
class Job:
    """How files of soundings are corrected; it travels to other processes.

    Parameters
    ----------
    profiles : sequence of Profile
        The casts.
    case : str
        What the files hold: a key of `columns.CASES`.
    options : Options, optional
        How soundings are corrected.
    choice : mapping
        Further arguments of `Corrector`: scales, as_it_was, orders, components, change, corrected_with, deepest, most.
    sources : sequence of (str, str)
        File and checksum of each cast, where known, for the outputs.
    settings : mapping
        What the outputs say of how they came about, beside the options.
    workers : int, optional
        Threads; by default one for each usable processor.
    replace : bool
        Whether existing outputs may be replaced.
    compression : int
        zlib level of netCDF.
    surface_difference : float
        Surface sound speed and cast may differ by so much, m/s, before they are told to part.
    """

    profiles: Sequence[Profile]
    case: str = "beams"
    options: Options = field(default_factory=Options)
    choice: Mapping[str, Any] = field(default_factory=dict)
    sources: Sequence[tuple[str, str]] = ()
    settings: Mapping[str, Any] = field(default_factory=dict)
    workers: int | None = None
    replace: bool = False
    compression: int = 0
    surface_difference: float = LARGEST_DIFFERENCE


def corrector_for(soundings: Soundings, job: Job) -> Corrector:
    """What corrects the soundings of a source as a job says, its tables as deep as they need be.

    Raises
    ------
    InputError
        As for `Corrector` and `transducer_depths`.
    """
    steered = job.case != "beams" or "surface_sound_speed" in soundings.names
    choice = {"deepest": deepest_sounding(soundings), "steered": steered, **job.choice}
    return Corrector(job.profiles, job.options, transducer_depth_range=transducer_depths(soundings), **choice)


def correct_file(
    source: str | PathLike[str] | xarray.Dataset,
    job: Job | Sequence[Profile],
    output: str | PathLike[str] | None = None,
    *,
    progress: Callable[[int, int], None] | None = None,
) -> Corrected:
    """Correct a file of soundings of any size, and write it with what was found.

    Parameters
    ----------
    source : path-like or xarray.Dataset
        As for `open_soundings`.
    job : Job or sequence of Profile
        The casts, and how they are used.
    output : path-like, optional
        NetCDF or CSV, by its ending; without it the soundings are only counted.
    progress : callable, optional
        Called with how many soundings are done, and how many there are.

    Returns
    -------
    Corrected

    Raises
    ------
    InputError, OutputError
        As for `open_soundings`, `Corrector` and `stream`.
    """
    job = job if isinstance(job, Job) else Job(job)
    began = perf_counter()
    with open_soundings(source, case=job.case) as soundings:
        corrector = corrector_for(soundings, job)
        about = About(job.profiles, job.sources, tuple(corrector.orders), {**job.settings, **settings_of(corrector)})
        watch = SurfaceWatch(job.profiles, largest=job.surface_difference)
        total, done = soundings.shape[0] * soundings.shape[1], 0

        def step(count: int) -> None:
            nonlocal done
            done += count
            if progress is not None:
                progress(done, total)

        counts = stream(
            soundings,
            corrector,
            output,
            about,
            workers=job.workers,
            replace=job.replace,
            compression=job.compression,
            watch=lambda block, found: watch.add(block, found["cast_used"]),
            progress=step,
        )
        return Corrected(
            source=soundings.where,
            output="" if output is None else str(output),
            tally=counts,
            orders=tuple(corrector.orders),
            casts=tuple(profile.id for profile in job.profiles),
            transducer_depth=corrector.top,
            arithmetic_error=corrector.table_error,
            surface=watch.summary(),
            notes=(*soundings.notes, *corrector.notes),
            seconds=perf_counter() - began,
        )


def settings_of(corrector: Corrector) -> dict[str, Any]:
    """How a corrector works, in words and numbers, for the settings of an output."""
    scales = corrector.scales
    return {
        **asdict(corrector.options),
        "decorrelation_time": None if scales is None else scales.time,
        "decorrelation_length": None if scales is None else scales.length,
        "orders": {name: asdict(order) for name, order in corrector.orders.items()},
        "components": [part.name for part in corrector.components],
    }


def correct_files(
    sources: Sequence[str | PathLike[str]],
    job: Job,
    folder: str | PathLike[str] | None = None,
    *,
    scheduler: str | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> tuple[list[Corrected], list[tuple[str, str]]]:
    """Correct many files, one after another in threads, or a file a task on a dask cluster.

    Parameters
    ----------
    sources : sequence of path-like
    job : Job
    folder : path-like, optional
        An existing folder, where each output has the name of its input.
    scheduler : str, optional
        Address of a dask scheduler; its workers must see the files and the folder under the same paths. Each file is
        then corrected in one thread.
    progress : callable, optional
        Called with the number of files that are done, and of all.

    Returns
    -------
    list of Corrected, list of (str, str)
        What became of the files, in their order; and those that could not be corrected, with the reason.

    Raises
    ------
    InputError
        Two files have one name, or no cluster answers.
    OutputError
        An output can't be written.
    """
    paths = [Path(source) for source in sources]
    outputs = [None if folder is None else Path(folder) / path.name for path in paths]
    twice = [path.name for path, count in Counter(outputs).items() if path is not None and count > 1]
    if twice:
        raise InputError(f"two inputs are called {twice[0]}: correct them one by one, or to different folders")
    for path, goal in zip(paths, outputs, strict=True):
        if goal is not None:
            check_output(goal, replace=job.replace)
            if goal.resolve() == path.resolve():
                raise InputError(f"{path}: would be written over; give another folder")
    tasks = list(zip(paths, outputs, strict=True))
    done: list[Corrected] = []
    lost: list[tuple[str, str]] = []
    for at, (path, found) in enumerate(_each(tasks, job, scheduler), start=1):
        if isinstance(found, Corrected):
            done.append(found)
        else:
            lost.append((str(path), found))
        if progress is not None:
            progress(at, len(paths))
    return done, lost


def _each(
    tasks: Sequence[tuple[Path, Path | None]], job: Job, scheduler: str | None
) -> Iterator[tuple[Path, Corrected | str]]:
    if scheduler is None:
        for task in tasks:
            yield task[0], _one_file(task, job)
        return
    with workers(scheduler=scheduler) as (executor, number):
        work = partial(_one_file, job=replace(job, workers=1))
        for task, found in in_order(work, tasks, executor=executor, number=number):
            yield task[0], found


def _one_file(task: tuple[Path, Path | None], job: Job) -> Corrected | str:
    """What became of a file, or why it could not be corrected."""
    try:
        return correct_file(task[0], job, task[1])
    except InputError as error:
        return str(error).removeprefix(f"{task[0]}: ")
