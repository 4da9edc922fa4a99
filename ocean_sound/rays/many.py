"""Many waters at once: mean and spread of loss, and the share of members whose rays leave a point in shadow."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError, OceanSoundError, WorkerError
from ..parallel import in_order, usable_processors
from ..parallel import workers as pool_of
from .shadow import CAUTION, find_shadow

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence

    import xarray
    from numpy.typing import ArrayLike, NDArray

    from ..profile import Profile
    from ..section import Section

    Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class _Job:
    """One member of an ensemble, and what is asked of it."""

    name: str
    water: Profile | Section
    source_depth: float
    ranges: Floats
    depths: Floats
    shadow: bool
    loss: dict[str, Any] | None


@dataclass(frozen=True, eq=False)
class _Done:
    """What one member gives, on (depths, ranges)."""

    loss: Floats | None
    masks: dict[str, NDArray[np.bool_]]
    wet: NDArray[np.bool_]
    trouble: str = ""


class _Sums:
    """Count, mean and sum of squares of what is known at each point (Welford), member by member."""

    def __init__(self, shape: tuple[int, int]) -> None:
        self.count = np.zeros(shape, dtype=np.int32)
        self.mean, self.squares = np.zeros(shape), np.zeros(shape)

    def add(self, values: Floats) -> None:
        known = np.isfinite(values)
        self.count += known
        off = np.where(known, values - self.mean, 0.0)
        self.mean += off / np.maximum(self.count, 1)
        self.squares += np.where(known, off * (values - self.mean), 0.0)

    def results(self) -> tuple[Floats, Floats]:
        """Mean, and standard deviation of the members; NaN where none, or only one, is known."""
        spread = np.sqrt(self.squares / np.maximum(self.count - 1, 1))
        return np.where(self.count > 0, self.mean, np.nan), np.where(self.count > 1, spread, np.nan)


def ensemble(
    waters: Sequence[Profile | Section],
    *,
    source_depth: float | Sequence[float],
    ranges: ArrayLike,
    depths: ArrayLike,
    shadow: bool = True,
    frequency: float | None = None,
    names: Sequence[str] | None = None,
    workers: int | None = None,
    scheduler: str | None = None,
    progress: Callable[[int, int], None] = lambda _done, _of: None,
    **loss_options: Any,
) -> xarray.Dataset:
    """Loss and shadow over many waters: casts, times or bearings; or over many sources.

    Parameters
    ----------
    waters : sequence of Profile or Section
        The members. For many sources in one water repeat it.
    source_depth : float or sequence of float
        m; one for all members, or one for each.
    ranges, depths : array_like
        The grid, m, increasing, the same for all.
    shadow : bool
        Whether shadow zones are asked for.
    frequency : float, optional
        Hz, for the loss; no loss is asked for where not given.
    names : sequence of str, optional
        Of the members; their ids where not given.
    workers : int, optional
        Worker processes: by default one for each usable processor, 0 for none but this one.
    scheduler : str, optional
        Address of a dask scheduler whose workers do the work instead.
    progress : callable
        Told how many members of how many are done.
    **loss_options
        Further options of `loss`, such as method and phases.

    Returns
    -------
    xarray.Dataset
        On (`depth`, `range`): `transmission_loss_mean` and `transmission_loss_spread` (dB; mean and standard deviation
        of the members' loss in dB) with `transmission_loss_members` (how many have one there); for each class of paths
        `shadow_share_...`, the part of the members that have water there and lie in shadow there; `water_members`. On
        `member`: `member_name`, `source_depth`. Members are worked in order, so that nothing depends on the number of
        workers.

    Raises
    ------
    InputError
        No member, a length that does not fit, nothing asked for, or a member that does not bear what is asked; the
        message names it.
    WorkerError
        If a worker died.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> warm, mild = (Profile([0, 100], [surface, 1500.0]) for surface in (1520.0, 1501.0))
    >>> found = ensemble([warm, mild], source_depth=20.0, ranges=[0.0, 900.0, 2500.0], depths=[10.0], workers=0)
    >>> found.shadow_share_no_bounce.values.tolist()
    [[0.0, 0.0, 0.5]]

    """
    jobs = _jobs(waters, source_depth, names, (ranges, depths), shadow, frequency, loss_options)
    if workers is not None and workers < 0:
        raise InputError(f"{workers} workers: 0 or more would be right")
    shape = jobs[0].depths.size, jobs[0].ranges.size
    loss, wet = _Sums(shape), np.zeros(shape, dtype=np.int32)
    shares: dict[str, NDArray[np.int32]] = {}
    for done, (job, found) in enumerate(_worked(jobs, workers, scheduler), start=1):
        if found.trouble:
            raise InputError(f"member {done}, {job.name}: {found.trouble}")
        wet += found.wet
        for name, mask in found.masks.items():
            shares[name] = shares.get(name, np.zeros(shape, dtype=np.int32)) + mask
        if found.loss is not None:
            loss.add(found.loss)
        progress(done, len(jobs))
    return _dataset(jobs, loss, wet, shares)


def _jobs(
    waters: Sequence[Profile | Section],
    source_depth: float | Sequence[float],
    names: Sequence[str] | None,
    grid: tuple[ArrayLike, ArrayLike],
    shadow: bool,  # noqa: FBT001
    frequency: float | None,
    loss_options: dict[str, Any],
) -> list[_Job]:
    if not waters:
        raise InputError("an ensemble of no members: give one water at least")
    if not shadow and frequency is None:
        raise InputError("an ensemble needs something to find: shadow=True, or a frequency for the loss")
    if loss_options and frequency is None:
        raise InputError(f"{', '.join(loss_options)}: goes with a loss; give its frequency")
    sources = np.broadcast_to(np.asarray(source_depth, dtype=np.float64), len(waters)) if np.ndim(
        source_depth) == 0 else np.asarray(source_depth, dtype=np.float64)  # fmt: skip
    if sources.shape != (len(waters),):
        raise InputError(f"{sources.size} source depths for {len(waters)} members: give one, or one for each")
    told = [water.id or f"water {j}" for j, water in enumerate(waters, start=1)] if names is None else list(names)
    if len(told) != len(waters):
        raise InputError(f"{len(told)} names for {len(waters)} members: give one for each")
    axes = []
    for name, values in zip(("ranges", "depths"), grid, strict=True):
        axis = np.atleast_1d(np.asarray(values, dtype=np.float64))
        if axis.ndim != 1 or not axis.size or not np.all(np.diff(axis) > 0.0) or not axis[0] >= 0.0:
            raise InputError(f"{name} must be a list of increasing numbers of metres from 0 on")
        axes.append(axis)
    if not axes[0][-1] > 0.0:
        raise InputError("ranges must go beyond 0 m")
    options = None if frequency is None else {"frequency": float(frequency), **loss_options}
    return [
        _Job(name, water, float(depth), axes[0], axes[1], shadow, options)
        for name, water, depth in zip(told, waters, sources, strict=True)
    ]


def _worked(jobs: list[_Job], workers: int | None, scheduler: str | None) -> Iterator[tuple[_Job, _Done]]:
    if scheduler is None and (workers == 0 or len(jobs) == 1):
        yield from ((job, _work(job)) for job in jobs)
        return
    # not more workers than members: each takes its time to start
    number = min(len(jobs), usable_processors() if workers is None else workers)
    with pool_of(number, scheduler=scheduler) as (executor, count):
        yield from in_order(_work, jobs, executor=executor, number=count)


def _work(job: _Job) -> _Done:
    """What one member gives; what is wrong with it comes back as text, so that it can be told with its name."""
    from ..profile import Profile

    shape = job.depths.size, job.ranges.size
    try:
        if isinstance(job.water, Profile):
            wet = np.broadcast_to((job.depths <= job.water.depth[-1])[:, None], shape)
        else:
            wet = job.depths[:, None] <= np.asarray(job.water.seabed.depth_at(job.ranges)) + 1e-6
        inside = job.depths[wet.any(axis=1)]
        if not inside.size:
            raise InputError(f"has no water at the depths asked for, from {job.depths[0]:g} m on")
        masks: dict[str, NDArray[np.bool_]] = {}
        if job.shadow:
            zones = find_shadow(
                job.water, source_depth=job.source_depth, max_range=float(job.ranges[-1]), depths=inside,
                ranges=job.ranges,
            )  # fmt: skip
            for name, mask in zones.masks.items():
                masks[name] = np.zeros(shape, dtype=bool)
                masks[name][: inside.size] = mask
        return _Done(None if job.loss is None else _loss(job, wet), masks, np.asarray(wet))
    except WorkerError:
        raise
    except OceanSoundError as error:
        return _Done(None, {}, np.zeros(shape, dtype=bool), trouble=str(error))


def _loss(job: _Job, wet: NDArray[np.bool_]) -> Floats:
    from .loss import loss

    far, down = job.ranges > 0.0, wet.any(axis=1)
    found = np.full(wet.shape, np.nan)
    result = loss(
        job.water, source_depth=job.source_depth, ranges=job.ranges[far], depths=job.depths[down], **(job.loss or {})
    )
    found[np.ix_(down, far)] = result.transmission_loss.transpose("depth", "range").to_numpy()
    return np.where(wet, found, np.nan)


def _dataset(
    jobs: list[_Job], loss: _Sums, wet: NDArray[np.int32], shares: dict[str, NDArray[np.int32]]
) -> xarray.Dataset:
    import xarray

    from ..files import attributes

    grid = ("depth", "range")
    variables: dict[str, Any] = {
        "water_members": (grid, wet, {"long_name": "members that have water here", "units": "1"}),
        "member_name": ("member", np.array([job.name for job in jobs], dtype=object), {"long_name": "name"}),
        "source_depth": ("member", np.array([job.source_depth for job in jobs]), attributes("source_depth")),
    }
    for name, count in shares.items():
        words = f"part of the members with water here that lie in shadow: {name.replace('_', ' ')}"
        part = np.where(wet > 0, count / np.maximum(wet, 1), np.nan)
        variables[f"shadow_share_{name}"] = (grid, part, {"long_name": words, "units": "1"})
    if jobs[0].loss is not None:
        mean, spread = loss.results()
        about = {"units": "1", "comment": "dB re 1 m"}
        variables["transmission_loss_mean"] = (
            grid, mean, {"long_name": "mean over the members of the transmission loss in dB", **about}
        )  # fmt: skip
        variables["transmission_loss_spread"] = (
            grid, spread, {"long_name": "standard deviation over the members of the transmission loss in dB", **about}
        )  # fmt: skip
        variables["transmission_loss_members"] = (
            grid, loss.count, {"long_name": "members with a transmission loss here", "units": "1"}
        )  # fmt: skip
    attrs: dict[str, Any] = {"title": "Sound over an ensemble of waters", "members": len(jobs)}
    if shares:
        attrs["comment"] = CAUTION
    if jobs[0].loss is not None:
        attrs |= {f"loss_{key}": value for key, value in jobs[0].loss.items() if not isinstance(value, bool)}
    return xarray.Dataset(
        variables,
        coords={
            "depth": ("depth", jobs[0].depths, attributes("depth")),
            "range": ("range", jobs[0].ranges, attributes("range")),
        },
        attrs=attrs,
    )
