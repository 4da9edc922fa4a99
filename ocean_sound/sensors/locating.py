"""Where something is, by travel times to stations whose places are known.

Unknown are east and north, and where asked the depth and the offset of one clock. Errors of the clock, the depth and
the sound speed are shared by all stations, so that the times' errors correlate; least squares takes them as they are.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .direct import Direct, joined
from .stations import FEW, Stations, ellipse, inverse, only, tables
from .timing import Timing

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray
    from numpy.typing import ArrayLike, NDArray

    from ..profile import Profile
    from .direct import DirectRays, Tabulated
    from .sites import Site

    Floats = NDArray[np.float64]

_STARTS = 6  # around the stations, for where to begin
_BENT = 3e-3  # share of a range by which straight lines may be off, for which places to try
_AMBIGUOUS = 9.0  # chi squared by which another place must be worse to be ruled out
_STEPS, _STILL = 40, 1e-6  # m: a step not worth another one


def locate(
    water: Profile,
    stations: Sequence[Site],
    times: ArrayLike,
    *,
    target_depth: float,
    timing: Timing | None = None,
    elapsed: float = 0.0,
    target_depth_uncertainty: float = 0.0,
    station_uncertainty: float = 0.0,
    unknown_offset: bool = False,
    unknown_depth: bool = False,
    start: tuple[float, float] | None = None,
) -> xarray.Dataset:
    """Where something is, by travel times to stations whose places are known.

    Parameters
    ----------
    water : Profile
    stations : sequence of Site
        With the depth of each.
    times : array_like, shape (stations,) or (fixes, stations)
        As the clock shows them, s; NaN where a station was not heard.
    target_depth : float
        m; where the depth is unknown, about.
    timing : Timing, optional
        Two ways without delay where not given. The clock is that of the target.
    elapsed : float
        s since the clock's offset was found.
    target_depth_uncertainty, station_uncertainty : float
        m (k = 1); of each station to any side, independent of the others.
    unknown_offset, unknown_depth : bool
        Whether the offset of the clock (one way only), and the depth, are found too.
    start : tuple of (latitude, longitude), optional
        Where it is, about, degrees: with stations on a line, or as many as unknowns, two places may fit.

    Returns
    -------
    xarray.Dataset
        On `fix`: `latitude`, `longitude`, the half axes of the 95 % ellipse and its bearing, `misfit` (chi squared over
        its degrees of freedom, about 1 if uncertainties hold; NaN without any to spare), `ambiguous`, where asked for
        `clock_offset` and `target_depth` with their uncertainties (k = 1), and `residual` on (`fix`, `station`).

    Raises
    ------
    InputError
        If there are fewer times than unknowns, no place fits, or no direct ray comes from a station to the place found.

    Notes
    -----
    Least squares with the covariance of all errors of the times. A first place comes from straight lines at mean
    speeds, begun at several points around the stations.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.sensors.sites import Site
    >>> stations = [Site("A", 0.0, 0.0, 50.0), Site("B", 0.0, 0.02, 50.0), Site("C", 0.02, 0.0, 50.0)]
    >>> water = Profile([0, 100], [1500, 1500])
    >>> found = locate(water, stations, [2.0927, 2.0927, 2.0856], target_depth=50.0)
    >>> found["latitude"].values.round(3), found["longitude"].values.round(3)
    (array([0.01]), array([0.01]))
    """
    clock = Timing() if timing is None else timing
    group = Stations(
        water, stations, clock, target_depth, target_depth_uncertainty, station_uncertainty, unknown_offset,
        unknown_depth,
    )  # fmt: skip
    shown = np.atleast_2d(np.asarray(times, dtype=np.float64))
    if shown.ndim != 2 or shown.shape[1] != len(group.sites):
        raise InputError(f"times have the shape {shown.shape}: one for each of {len(group.sites)} stations is right")
    time = clock.one_way(shown, elapsed=elapsed)
    search = _Search(group, time, elapsed, start)
    return _labelled(group, search)


@dataclass(frozen=True, eq=False)
class _Fixes:
    unknown: Floats  # (n, unknowns): east, north, offset, depth
    covariance: Floats
    residual: Floats  # (n, stations)
    chi2: Floats


class _Search:
    """Least squares for all fixes."""

    def __init__(self, group: Stations, time: Floats, elapsed: float, start: tuple[float, float] | None) -> None:
        self.group, self.time, self.elapsed = group, time, np.asarray(elapsed, dtype=np.float64)
        self.start = None if start is None else np.array(group.plane(start[1], start[0]))
        self.exact = [Direct(group.water, site.depth, group.target_depth) for site in group.sites]
        self.finders: list[Direct | Tabulated] = [*self.exact]
        self.heard = np.isfinite(time)
        for i, count in enumerate(self.heard.sum(axis=1).tolist()):
            if count < group.unknowns:
                raise InputError(
                    f"fix {i}: {count} times for {group.unknowns} unknowns: as many or more would be right"
                )
        if time.shape[0] > FEW and not group.unknown_depth:
            self._tabulate()

    def _tabulate(self) -> None:
        if self.group.unknown_offset:
            far = 3.0 * float(np.max(np.ptp(self.group.places, axis=0)))
        else:
            far = 1.05 * max(one.mean_speed for one in self.exact) * float(np.nanmax(self.time))
        self.finders = tables(self.exact, far + 100.0)

    def run(self) -> tuple[_Fixes, NDArray[np.bool_]]:
        """The fixes, and which of them might as well be elsewhere."""
        begun = [self._begin(i) for i in range(self.time.shape[0])]
        every = np.arange(len(begun))
        best = self._refined(np.array([starts[0] for starts in begun]), every)
        ambiguous = np.zeros(len(begun), dtype=bool)
        for i, starts in enumerate(begun):
            if len(starts) < 2:
                continue
            try:
                other = self._refined(starts[1][None], every[i : i + 1])
            except InputError:
                continue
            apart = float(np.hypot(*(other.unknown[0] - best.unknown[i])[:2]))
            size = float(ellipse(best.covariance[i, :2, :2])[0])
            if apart < 4.0 * size:
                continue
            ambiguous[i] = abs(other.chi2[0] - best.chi2[i]) < _AMBIGUOUS
            if other.chi2[0] < best.chi2[i]:
                for f in fields(_Fixes):
                    getattr(best, f.name)[i] = getattr(other, f.name)[0]
        return best, ambiguous

    def _begin(self, number: int) -> list[Floats]:
        """Places that fit about, by straight lines, the best first; more than one where others are not ruled out."""
        from scipy.optimize import least_squares

        group, heard = self.group, np.flatnonzero(self.heard[number])
        time = self.time[number, heard]
        line = _Lines(group, heard, np.array([self.exact[s].mean_speed for s in heard]), time)
        reach = line.reach()
        turn = 2.0 * np.pi * np.arange(_STARTS) / _STARTS + 0.1
        ring = reach * np.stack([np.cos(turn), np.sin(turn)], axis=1) + line.places.mean(axis=0)
        starts = [self.start] if self.start is not None else [line.places.mean(axis=0) + 1.0, *ring]
        ends: list[tuple[float, Floats]] = []
        for one in starts:
            ended = least_squares(line.missing, line.begin(one), jac=line.slope, x_scale=line.scale, method="lm")
            if all(np.hypot(*(ended.x - x)[:2]) > 1e-3 * reach for _, x in ends):
                ends.append((2.0 * float(ended.cost), ended.x))
        ends.sort(key=lambda end: end[0])
        # how far straight lines and timing may be off, m2
        doubt = (group.timing.own * line.speed.mean()) ** 2 + (_BENT * reach) ** 2
        return [x for cost, x in ends if cost <= ends[0][0] + _AMBIGUOUS * doubt * heard.size]

    def _refined(self, begin: Floats, which: NDArray[np.intp]) -> _Fixes:
        """Gauss and Newton's steps with rays, from places that are nearly right, for some of the fixes."""
        group, heard, time = self.group, self.heard[which], self.time[which]
        unknown, near = begin.copy(), np.full(time.shape, np.nan)
        weight = whole = jacobian = None
        steps, followed = 0, True
        while True:
            finders, rays, toward = self._rays(unknown, which, near)
            jacobian = group.jacobian(rays, toward)
            whole, _ = group.covariance(finders, rays, self.elapsed)
            jacobian, whole = only(heard, jacobian, whole)
            weight = np.linalg.inv(whole) if weight is None else weight
            modelled = np.stack([ray.time for ray in rays], axis=1)
            modelled = modelled + (unknown[:, 2:3] if group.unknown_offset else 0.0)
            residual = np.where(heard, time - modelled, 0.0)
            turned = np.swapaxes(jacobian, 1, 2) @ weight
            move = (inverse(turned @ jacobian) @ turned @ residual[..., None])[..., 0]
            steps += 1
            if not np.all(np.isfinite(move)) or steps > _STEPS:
                bad = int(which[np.argmin(np.all(np.isfinite(move), axis=1))])
                raise InputError(f"fix {bad}: no one place fits: other stations, or more of them, are needed")
            if np.max(np.abs(move[:, :2])) < _STILL:
                if not followed:
                    break
                # rays were followed from step to step: does any come before them?
                near, followed = np.full(time.shape, np.nan), False
                continue
            unknown, followed = unknown + move, True
            near = np.stack([ray.launch_angle for ray in rays], axis=1)
        covariance = inverse(np.swapaxes(jacobian, 1, 2) @ np.linalg.inv(whole) @ jacobian)
        chi2 = np.einsum("ns,nst,nt->n", residual, weight, residual)
        return _Fixes(unknown, covariance, np.where(heard, residual, np.nan), chi2)

    def _rays(
        self, unknown: Floats, which: NDArray[np.intp], near: Floats
    ) -> tuple[list[Direct], list[DirectRays], Floats]:
        """Rays from the stations to places, and the directions there."""
        group = self.group
        longitude, latitude = group.plane(unknown[:, 0], unknown[:, 1], inverse=True)
        distance, toward = group.lines(np.asarray(latitude), np.asarray(longitude))
        rays = []
        for s, site in enumerate(group.sites):
            if group.unknown_depth:
                deepest = float(self.exact[s].column.depth[-1])
                depths = np.clip(unknown[:, -1], 0.0, deepest).tolist()
                ray = joined(
                    Direct(group.water, site.depth, z).at(distance[i, s], near=near[i, s]) for i, z in enumerate(depths)
                )
            else:
                ray = self.finders[s].at(distance[:, s], near=near[:, s])
            lost = np.flatnonzero(self.heard[which, s] & np.isnan(ray.time))
            if lost.size:
                raise InputError(
                    f"fix {which[lost[0]]}: no direct ray from station {site.name} over {distance[lost[0], s]:.0f} m: "
                    "leave its time out (NaN), or give another start"
                )
            rays.append(ray)
        return self.exact, rays, toward


class _Lines:
    """Straight lines at mean speeds from the stations of one fix."""

    def __init__(self, group: Stations, heard: NDArray[np.intp], speed: Floats, time: Floats) -> None:
        self.group, self.speed, self.time = group, speed, time
        self.places = group.places[heard]
        self.depth = np.array([group.sites[s].depth for s in heard])
        self.scale = np.ones(group.unknowns)
        if group.unknown_offset:
            self.scale[2] = 1.0 / float(speed.mean())

    def reach(self) -> float:
        """How far away it may be, m."""
        # an unknown offset says nothing of that
        extent = float(np.max(np.hypot(*(self.places - self.places.mean(axis=0)).T)))
        far = extent if self.group.unknown_offset else float(np.median(np.abs(self.time)) * self.speed.mean())
        return max(far, 1.0)

    def begin(self, place: Floats) -> Floats:
        """Unknowns to start with at a place."""
        found = np.zeros(self.group.unknowns)
        found[:2] = place
        if self.group.unknown_depth:
            found[-1] = self.group.target_depth
        if self.group.unknown_offset:
            found[2] = -float(np.mean(self.missing(found) / self.speed))
        return found

    def _straight(self, u: Floats) -> tuple[Floats, Floats]:
        depth = u[-1] if self.group.unknown_depth else self.group.target_depth
        away = np.column_stack((u[:2] - self.places, depth - self.depth))
        return away, np.maximum(np.sqrt(np.sum(away**2, axis=1)), 1e-6)

    def missing(self, u: Floats) -> Floats:
        """Computed less measured, m."""
        offset = u[2] if self.group.unknown_offset else 0.0
        found: Floats = self._straight(u)[1] + (offset - self.time) * self.speed
        return found

    def slope(self, u: Floats) -> Floats:
        """Its change with each unknown."""
        away, straight = self._straight(u)
        columns = [away[:, 0] / straight, away[:, 1] / straight]
        columns += [self.speed] if self.group.unknown_offset else []
        columns += [away[:, 2] / straight] if self.group.unknown_depth else []
        return np.stack(columns, axis=1)


def _labelled(group: Stations, search: _Search) -> xarray.Dataset:
    import xarray as xr

    from ..files import attributes

    found, ambiguous = search.run()
    unknown, covariance = found.unknown, found.covariance
    longitude, latitude = group.plane(unknown[:, 0], unknown[:, 1], inverse=True)
    major, minor, azimuth = ellipse(covariance[:, :2, :2])
    spare = search.heard.sum(axis=1) - group.unknowns
    columns = {
        "latitude": np.asarray(latitude),
        "longitude": np.asarray(longitude),
        "error_major_95": major,
        "error_minor_95": minor,
        "error_azimuth": azimuth,
        "misfit": np.divide(found.chi2, spare, out=np.full(spare.size, np.nan), where=spare > 0),
    }
    if group.unknown_offset:
        columns |= {"clock_offset": unknown[:, 2], "clock_offset_uncertainty": np.sqrt(covariance[:, 2, 2])}
    if group.unknown_depth:
        columns |= {"target_depth": unknown[:, -1], "target_depth_uncertainty": np.sqrt(covariance[:, -1, -1])}
    variables: dict[str, Any] = {name: ("fix", values, attributes(name)) for name, values in columns.items()}
    variables["residual"] = (("fix", "station"), found.residual, attributes("residual"))
    variables["ambiguous"] = (
        "fix",
        ambiguous.astype(np.int8),
        {
            "long_name": "whether another place fits as well",
            "flag_values": np.array((0, 1), np.int8),
            "flag_meanings": "no yes",
        },
    )
    names = ("station", [site.name for site in group.sites], {"long_name": "name of the station"})
    title = {"title": "places by travel times", "cast_id": group.water.id}
    return xr.Dataset(variables, {"station": names}, title)
