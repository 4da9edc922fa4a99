"""A whole sensor plan: losses, the choice of sites, coverage by water and noise, reach by bearing, and cures."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .choosing import SiteChoice, choose_sites
from .coverage import alone, detection_ranges, joint, losses_at, weighted_percentiles
from .curing import CAUSES, PARTS, Cures, Deafness, cures, deafness
from .losses import Losses, LossSettings, compute_losses
from .outlines import cells_outline, point, reach_outline

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence
    from os import PathLike

    import xarray
    from numpy.typing import NDArray

    from ..grids import Bathymetry
    from .area import Area
    from .coverage import Hearing
    from .sites import Site
    from .waters import Member

    Floats = NDArray[np.floating[Any]]

CAUTION = (
    "A plan is as good as the water, the noise and the threshold it was given. Local rules (permits, marine mammals, "
    "navigation, protected areas) and licensed practice come first: ask before anything is moored or transmits."
)
_PERCENTILES = (10.0, 50.0, 90.0)


@dataclass(frozen=True)
class Knockdown:
    """Moorings that a current pushes down, all at once.

    Parameters
    ----------
    depth : float
        By how much, m.
    share : float
        Of the time.

    Raises
    ------
    InputError
        If a number makes no sense.
    """

    depth: float = 0.0
    share: float = 0.0

    def __post_init__(self) -> None:
        if not (np.isfinite(self.depth) and self.depth >= 0.0 and 0.0 <= self.share <= 1.0):
            raise InputError(
                f"knock-down of {self.depth:g} m for {self.share:g} of the time: 0 or more, and 0 to 1, would be right"
            )


@dataclass(frozen=True, eq=False)
class Wanted:
    """What is to be chosen: see `choose_sites`.

    Parameters
    ----------
    number : int
        How many sites at most.
    level : float
        Probability of hearing one from which on a cell is covered.
    at_once, budget, spacing, method, time_limit
        As for `choose_sites`; m and s.
    must_cover : sequence of (latitude, longitude)
        Places to be covered at all depths there.
    """

    number: int
    level: float = 0.5
    at_once: int = 1
    budget: float | None = None
    spacing: float = 0.0
    method: str = "auto"
    time_limit: float = 60.0
    must_cover: Sequence[tuple[float, float]] = ()

    def __post_init__(self) -> None:
        if not 0.0 < self.level < 1.0:
            raise InputError(f"level is {self.level:g}: a probability above 0 and below 1 would be right")


@dataclass(frozen=True, eq=False)
class Task:
    """What `place_sensors` is to do.

    Parameters
    ----------
    area : Area
    members : sequence of Member
    bathymetry : Bathymetry or float
    hearing : Hearing
    settings : LossSettings
    candidates : sequence of Site
        One for each place and depth.
    existing : sequence of Site
        Sensors that are there and stay.
    wanted : Wanted, optional
        Where not given all candidates are taken.
    knockdown : Knockdown
    why : bool
        Whether it is wanted why cells are deaf.
    """

    area: Area
    members: Sequence[Member]
    bathymetry: Bathymetry | float
    hearing: Hearing
    settings: LossSettings
    candidates: Sequence[Site]
    existing: Sequence[Site] = ()
    wanted: Wanted | None = None
    knockdown: Knockdown = Knockdown()
    why: bool = True


@dataclass(frozen=True, eq=False)
class SensorPlan:
    """The result of `place_sensors`.

    Parameters
    ----------
    task : Task
    sensors : tuple of Site
        Chosen ones first, in the order of what each adds, then those that were there.
    chosen : tuple of int
        Indices into the candidates.
    choice : SiteChoice, optional
        None where all were taken.
    losses : Losses
        Of candidates, then existing sensors.
    heard : numpy.ndarray, shape (at once, members, cells)
        Probability that at least 1, 2, 3, 4 sensors hear one.
    reach : xarray.Dataset
        Detection range by bearing of each sensor.
    deafness, cures : optional
    computed, kept : int
        Sections computed now, and taken from disk.
    notes : tuple of str
    """

    task: Task
    sensors: tuple[Site, ...]
    chosen: tuple[int, ...]
    choice: SiteChoice | None
    losses: Losses
    heard: Floats
    reach: xarray.Dataset
    deafness: Deafness | None
    cures: Cures | None
    computed: int
    kept: int
    notes: tuple[str, ...] = field(default=())

    @property
    def mean(self) -> Floats:
        """Probability over all waters: (at once, cells)."""
        shares = _shares(self.task.members)
        mean: Floats = np.einsum("kmc,m->kc", self.heard, shares)
        return mean

    @property
    def level(self) -> float:
        """Probability from which on a cell counts as covered."""
        return 0.5 if self.task.wanted is None else self.task.wanted.level

    def covered(self, at_once: int = 1) -> float:
        """Part of the weighted area where at least so many sensors hear one with the probability asked for."""
        weight = self.task.area.weight
        return float(weight[self.mean[at_once - 1] >= self.level].sum() / weight.sum())

    def to_dataset(self) -> xarray.Dataset:
        """The result with CF attributes: on (depth, latitude, longitude), by site, and by bearing."""
        from .tables import dataset_of_plan

        return dataset_of_plan(self)

    def to_geojson(self) -> dict[str, Any]:
        """Sensors, their reach and what is covered as GeoJSON, cut at 180 degrees."""
        from ..files.geojson import collection

        task = self.task
        there = len(self.chosen)
        features = []
        for s, site in enumerate(self.sensors):
            about: dict[str, Any] = {
                "what": "sensor", "name": site.name, "depth_m": site.depth, "existing": s >= there,
            }  # fmt: skip
            if self.choice is not None and s < there:
                about["adds_m2"] = float(self.choice.gains[s])
            features.append(point(site.latitude, site.longitude, about))
            middle = self.reach["detection_range"].sel(percentile=50.0).values[s]
            if task.settings.bearings >= 3:
                features.append(
                    reach_outline(
                        site, task.settings.azimuths, middle,
                        {"what": "median detection range", "name": site.name, "probability": self.level},
                    )
                )  # fmt: skip
        on_map = task.area.on_map(self.mean)
        for at_once in range(1, len(self.heard) + 1):
            for layer, depth in enumerate(task.area.depths.tolist()):
                covered = np.nan_to_num(on_map[at_once - 1, layer]) >= self.level
                if covered.any():
                    features.append(
                        cells_outline(
                            task.area, covered,
                            {"what": "covered", "at_once": at_once, "depth_m": depth, "probability": self.level},
                        )
                    )  # fmt: skip
        return collection(features)

    def summary(self) -> dict[str, Any]:
        """The result in a few numbers, in plain types."""
        task, weight = self.task, self.task.area.weight
        shares = weight / weight.sum()
        by_member = self.heard @ shares
        groups = list(dict.fromkeys(member.group for member in task.members if member.group))
        found: dict[str, Any] = {
            "cells": task.area.size,
            "area_km2": round(float(weight.sum()) / 1e6, 3),
            "waters": len(task.members),
            "candidates": len(task.candidates),
            "sensors": [
                {
                    "name": site.name, "latitude": site.latitude, "longitude": site.longitude, "depth": site.depth,
                    "existing": s >= len(self.chosen),
                    "gain": float(self.choice.gains[s] / weight.sum())
                    if self.choice is not None and s < len(self.chosen) else None,
                    "detection_range": self._range(s),
                }
                for s, site in enumerate(self.sensors)
            ],
            "probability": self.level,
            "covered": {str(k + 1): self.covered(k + 1) for k in range(len(self.heard))},
            "mean_probability": {str(k + 1): float(self.mean[k] @ shares) for k in range(len(self.heard))},
            "mean_probability_by_group": {
                name: float(np.average(
                    [by_member[0, m] for m, one in enumerate(task.members) if one.group == name],
                    weights=[one.share for one in task.members if one.group == name],
                ))
                for name in groups
            },
            "spread_over_waters": float(np.sqrt(np.average(
                (by_member[0] - by_member[0] @ _shares(task.members)) ** 2, weights=_shares(task.members)
            ))),
            "sections": {"computed": self.computed, "kept": self.kept},
        }  # fmt: skip
        if self.choice is not None:
            found["choice"] = {
                "method": self.choice.method, "gap": self.choice.gap, "value": self.choice.value / weight.sum(),
                "bound": self.choice.bound / weight.sum(), "notes": list(self.choice.notes),
            }  # fmt: skip
        if self.deafness is not None:
            found["why_deaf"] = self._why()
        found["notes"] = list(self.notes)
        found["caution"] = CAUTION
        return found

    def _range(self, sensor: int) -> dict[str, float]:
        """Detection range of a sensor, m: percentiles of the median over bearings."""
        values = self.reach["detection_range"].values[sensor]
        names = [f"{p:g}%" for p in self.reach["percentile"].values]
        return {name: float(np.median(values[:, k])) for k, name in enumerate(names)}

    def _why(self) -> dict[str, float]:
        """Weighted part of the area that is deaf by each main cause, and beyond the range computed."""
        assert_found = self.deafness
        if assert_found is None:
            return {}
        share = np.outer(_shares(self.task.members), self.task.area.weight / self.task.area.weight.sum())
        told = {name: float(share[assert_found.cause == k].sum()) for k, name in enumerate(CAUSES)}
        told["beyond the range computed"] = float(share[np.isnan(assert_found.missing)].sum())
        return told


def place_sensors(
    task: Task,
    *,
    folder: str | PathLike[str] | None = None,
    number: int | None = 1,
    scheduler: str | None = None,
    engine: Callable[..., Floats] | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> SensorPlan:
    """Choose sites and say what they hear.

    Parameters
    ----------
    task : Task
    folder, number, scheduler, engine, progress
        As for `compute_losses`.

    Returns
    -------
    SensorPlan

    Raises
    ------
    InputError
        As for `compute_losses` and `choose_sites`.
    """
    everyone = [*task.candidates, *task.existing]
    if not everyone:
        raise InputError("sensors: there is neither a candidate site nor an existing sensor: give one or more")
    run: dict[str, Any] = {
        "bathymetry": task.bathymetry, "folder": folder, "number": number, "scheduler": scheduler, "engine": engine,
        "progress": progress,
    }  # fmt: skip
    losses = compute_losses(everyone, task.members, settings=task.settings, **run)
    computed, kept = losses.computed, losses.kept
    states = [(losses_at(losses, task.area), 1.0)]
    if task.knockdown.share > 0.0 and task.knockdown.depth > 0.0:
        pushed = [
            replace(site, name=f"{site.name} (pushed down)", depth=site.depth + task.knockdown.depth)
            for site in everyone
        ]
        lower = compute_losses(pushed, task.members, settings=task.settings, **run)
        computed, kept = computed + lower.computed, kept + lower.kept
        share = task.knockdown.share
        states = [(states[0][0], 1.0 - share), (losses_at(lower, task.area), share)]
    chosen, choice = _choice(task, states)
    used = [*chosen, *range(len(task.candidates), len(everyone))]
    sensors = tuple(everyone[s] for s in used)
    heard = joint([(loss[:, used], share) for loss, share in states], task.hearing)
    level = 0.5 if task.wanted is None else task.wanted.level
    reach = detection_ranges(
        losses, task.hearing, depths=task.area.depths, shares=task.area.shares, sites=used, level=level,
        percentiles=_PERCENTILES,
    )  # fmt: skip
    deaf = cure = None
    if task.why:
        # of all candidates, so that a change of their number computes none again
        open_water = compute_losses(everyone, task.members, settings=replace(task.settings, boundaries=False), **run)
        computed, kept = computed + open_water.computed, kept + open_water.kept
        upright = states[0][0]
        deaf = deafness(
            upright[:, used], losses_at(open_water, task.area, sites=used), area=task.area, sensors=sensors,
            absorption=task.settings.absorption, hearing=task.hearing,
        )  # fmt: skip
        cure = cures(deaf, upright, candidates=everyone, sensors=sensors, hearing=task.hearing)
    notes = [*losses.notes, *_notes(task, reach)]
    return SensorPlan(
        task, sensors, tuple(chosen), choice, losses, heard, reach, deaf, cure, computed, kept, tuple(notes)
    )


def _choice(task: Task, states: Sequence[tuple[Floats, float]]) -> tuple[list[int], SiteChoice | None]:
    """Which candidates, in the order of what each adds."""
    count = len(task.candidates)
    if task.wanted is None or not count:
        return list(range(count)), None
    wanted, area = task.wanted, task.area
    heard = alone(states, _shares(task.members), task.hearing) >= wanted.level
    must: list[int] = []
    for latitude, longitude in wanted.must_cover:
        must += area.cells_at(latitude, longitude).tolist()
    costs = np.array([site.cost for site in task.candidates])
    xy = _metres([*task.candidates, *task.existing], area)
    # of the depths at one place only one can be taken
    several = len({(site.latitude, site.longitude) for site in task.candidates}) < count
    choice = choose_sites(
        heard[:count],
        number=wanted.number,
        weight=area.weight,
        cost=None if wanted.budget is None else costs,
        budget=wanted.budget,
        places=xy[:count],
        spacing=max(wanted.spacing, 1.0 if several else 0.0),
        must_cover=must,
        existing=heard[count:] if task.existing else None,
        existing_places=xy[count:] if task.existing else None,
        at_once=wanted.at_once,
        method=wanted.method,
        time_limit=wanted.time_limit,
    )
    return list(choice.sites), choice


def _metres(sites: Sequence[Site], area: Area) -> Floats:
    """X and y of sites on a plane that keeps distances from the middle of the area."""
    from pyproj import Proj

    lat, lon = float(np.mean(area.latitude)), (float(np.mean(area.longitude)) + 180.0) % 360.0 - 180.0
    plane = Proj(proj="aeqd", ellps="WGS84", lat_0=lat, lon_0=lon)
    x, y = plane([site.longitude for site in sites], [site.latitude for site in sites])
    return np.stack([np.asarray(x), np.asarray(y)], axis=1)


def _shares(members: Sequence[Member]) -> Floats:
    shares = np.array([member.share for member in members], dtype=np.float64)
    return np.asarray(shares / shares.sum(), dtype=np.float64)


def _notes(task: Task, reach: xarray.Dataset) -> list[str]:
    notes = []
    cut = int(reach["cut"].sum())
    if cut:
        notes.append(
            f"on {cut} of {reach['cut'].size} bearings hearing goes on where the computation ends, at "
            f"{task.settings.max_range / 1000.0:g} km: a longer max_range would show more"
        )
    if len(task.members) == 1:
        notes.append("one water only: nothing is said of how coverage changes over the year")
    return notes


def spread(heard: Floats, shares: Floats) -> tuple[Floats, Floats]:
    """Mean, and percentiles (10, 50, 90), over members of a probability on (..., members, cells).

    Examples
    --------
    >>> mean, percentiles = spread(np.array([[0.2], [0.4]]), np.array([0.5, 0.5]))
    >>> mean.round(3), percentiles[:, 0]
    (array([0.3]), array([0.2, 0.2, 0.4]))
    """
    mean: Floats = np.tensordot(np.moveaxis(heard, -2, 0), shares, axes=(0, 0))
    return mean, weighted_percentiles(np.moveaxis(heard, -2, 0), shares, _PERCENTILES)


__all__ = ["CAUTION", "PARTS", "Knockdown", "SensorPlan", "Task", "Wanted", "place_sensors", "spread"]
