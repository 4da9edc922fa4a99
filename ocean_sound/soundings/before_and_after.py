"""A stretch of a survey line before and after its correction, for a figure."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..profile import Profile
from .carrying import DEEPEST
from .correcting import Corrector
from .reading import open_soundings
from .streaming import corrector_for, transducer_depths

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping
    from os import PathLike

    import xarray
    from numpy.typing import NDArray

    from .columns import PingBlock
    from .streaming import Job

PINGS = 300
"""How many pings a stretch has."""


def before_and_after(
    source: str | PathLike[str] | xarray.Dataset, job: Job, *, pings: int = PINGS
) -> tuple[xarray.Dataset, xarray.Dataset, str]:
    """The middle of a line before and after its correction.

    Parameters
    ----------
    source : path-like or xarray.Dataset
        As for `open_soundings`, with pings of several beams.
    job : Job
    pings : int
        How many pings, at most.

    Returns
    -------
    before, after : xarray.Dataset
        `depth` and `across_track_distance`, m, on (`ping`, `beam`), with `latitude` and `longitude` of pings where they
        are known. Before is what the file holds where it was corrected already; else what straight beams would give at
        one speed, the harmonic mean of the first cast.
    what : str
        What "before" is, in words.

    Raises
    ------
    InputError
        If a ping has one beam only, and as for `correct_file`.

    Examples
    --------
    >>> import xarray as xr
    >>> from ocean_sound.soundings.streaming import Job
    >>> beams = xr.Dataset(
    ...     {"two_way_travel_time": (("ping", "beam"), [[0.1, 0.1]]), "across_track_angle": ("beam", [-50.0, 50.0]),
    ...      "transducer_depth": ("ping", [2.0])}
    ... )
    >>> before, after, what = before_and_after(beams, Job([Profile([0, 100], [1500, 1500], [0.1, 0.1], id="A")]))
    >>> what, bool(abs(before["depth"] - after["depth"]).max() < 1e-3)
    ('straight beams at 1500.0 m/s', True)
    """
    with open_soundings(source, case=job.case) as soundings:
        n, m = soundings.shape
        if m < 2:
            raise InputError(f"{soundings.where}: has one beam a ping; a swath before and after needs several")
        block = _middle(soundings.blocks(), n // 2, pings)
        after = _dataset(block, corrector_for(soundings, job).correct(block))
        if job.case == "corrected":
            return _dataset(block, dict(block.beams)), after, "as it was corrected before"
        first = job.profiles[0]
        speed = first.harmonic_mean_speed()
        constant = Profile(np.array([0.0, DEEPEST]), np.array([speed, speed]), id="one speed")
        plain = Corrector(
            [constant],
            replace(job.options, array="curved"),
            transducer_depth_range=transducer_depths(soundings),
        )
        return _dataset(block, plain.correct(block)), after, f"straight beams at {speed:.1f} m/s"


def _middle(blocks: Iterable[PingBlock], at: int, pings: int) -> PingBlock:
    for block in blocks:
        length = block.shape[0]
        if block.start <= at < block.start + length:
            first = max(min(at - block.start - pings // 2, length - pings), 0)
            return block.part(first, min(first + pings, length))
    raise InputError("the file ends before its middle")


def _dataset(block: PingBlock, found: Mapping[str, NDArray[Any]]) -> xarray.Dataset:
    import xarray as xr

    columns = {name: (("ping", "beam"), found[name]) for name in ("depth", "across_track_distance")}
    place = {name: ("ping", block.pings[name]) for name in ("latitude", "longitude") if name in block.pings}
    return xr.Dataset({**columns, **place})
