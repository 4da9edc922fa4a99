"""Stations at known places: how times to them change with place, how their errors correlate, and what follows."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .direct import Direct, Tabulated
from .ranging import speed_errors, speed_noise

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from ..profile import Profile
    from .direct import DirectRays
    from .sites import Site
    from .timing import Timing

    Floats = NDArray[np.float64]

ELLIPSE = float(np.sqrt(-2.0 * np.log(0.05)))
"""2.4477: half axes of the ellipse that holds 95 % of a bivariate normal, in standard deviations."""
FEW = 4  # places or fixes: for more, rays are tabulated
_FLAT = 1e-12  # share of the largest eigenvalue below which nothing is known in a direction


@dataclass(frozen=True, eq=False)
class Stations:
    """Stations at known places, and what is known of times to them.

    Parameters
    ----------
    water : Profile
    sites : sequence of Site
    timing : Timing
    target_depth : float
        m.
    target_depth_uncertainty, station_uncertainty : float
        m (k = 1); of each station to any side, independent of the others.
    unknown_offset, unknown_depth : bool
        What is to be found beside east and north.

    Raises
    ------
    InputError
        If there are fewer stations than unknowns, or numbers make no sense.
    """

    water: Profile
    sites: Sequence[Site]
    timing: Timing
    target_depth: float
    target_depth_uncertainty: float = 0.0
    station_uncertainty: float = 0.0
    unknown_offset: bool = False
    unknown_depth: bool = False

    def __post_init__(self) -> None:
        object.__setattr__(self, "sites", tuple(self.sites))
        if len(self.sites) < self.unknowns:
            raise InputError(
                f"{len(self.sites)} stations for {self.unknowns} unknowns: as many stations or more would be right"
            )
        for name in ("target_depth_uncertainty", "station_uncertainty"):
            value = getattr(self, name)
            if not (np.isfinite(value) and value >= 0.0):
                raise InputError(f"{name} is {value:g} m: 0 or more would be right")
        if not self.timing.own > 0.0:
            raise InputError("timing_uncertainty is 0 s: one above 0 would be right, since times are weighed by it")
        if self.unknown_offset and self.timing.two_way:
            raise InputError("a clock's offset is unknown one way only: give a timing with two_way=False")

    @property
    def unknowns(self) -> int:
        """How many."""
        return 2 + self.unknown_offset + self.unknown_depth

    @cached_property
    def plane(self) -> Any:
        """A plane that keeps distances and bearings from the middle of the stations."""
        from pyproj import Proj

        lon = np.array([site.longitude for site in self.sites])
        east = (lon - lon[0] + 180.0) % 360.0 - 180.0
        middle = (lon[0] + float(east.mean()) + 180.0) % 360.0 - 180.0
        latitude = float(np.mean([site.latitude for site in self.sites]))
        return Proj(proj="aeqd", ellps="WGS84", lat_0=latitude, lon_0=middle)

    @cached_property
    def places(self) -> Floats:
        """East and north of each station, m."""
        x, y = self.plane([site.longitude for site in self.sites], [site.latitude for site in self.sites])
        return np.stack([np.asarray(x), np.asarray(y)], axis=1)

    def lines(self, latitude: Floats, longitude: Floats) -> tuple[Floats, Floats]:
        """Distance (m) from each station to places, and direction there (east, north): (n, stations, ...)."""
        from pyproj import Geod

        shape = (latitude.size, len(self.sites))
        lat = np.array([site.latitude for site in self.sites])
        lon = np.array([site.longitude for site in self.sites])
        _, back, distance = Geod(ellps="WGS84").inv(
            np.broadcast_to(lon, shape), np.broadcast_to(lat, shape),
            np.broadcast_to(longitude[:, None], shape), np.broadcast_to(latitude[:, None], shape),
        )  # fmt: skip
        azimuth = np.radians(np.asarray(back) + 180.0)
        return np.asarray(distance), np.stack([np.sin(azimuth), np.cos(azimuth)], axis=-1)

    def jacobian(self, rays: Sequence[DirectRays], toward: Floats) -> Floats:
        """Change of each time with each unknown: (n, stations, unknowns)."""
        along = np.stack([ray.along for ray in rays], axis=1)
        columns = [along * toward[..., 0], along * toward[..., 1]]
        if self.unknown_offset:
            columns.append(np.ones(along.shape))
        if self.unknown_depth:
            columns.append(np.stack([ray.down for ray in rays], axis=1))
        return np.stack(columns, axis=-1)

    def covariance(
        self, finders: Sequence[Direct], rays: Sequence[DirectRays], elapsed: Floats
    ) -> tuple[Floats, Floats]:
        """Of the times' errors, and the part of it from the sound speed, s2: (n, stations, stations)."""
        speed = np.stack([speed_errors(f, ray) for f, ray in zip(finders, rays, strict=True)], axis=-1)
        from_speed = np.einsum("kns,knt->nst", speed, speed)
        noise = np.stack([speed_noise(f, ray) for f, ray in zip(finders, rays, strict=True)], axis=1)
        from_speed = from_speed + noise @ np.swapaxes(noise, 1, 2)
        time = np.stack([ray.time for ray in rays], axis=1)
        along = np.stack([ray.along for ray in rays], axis=1)
        shared = self.timing.shared(time, elapsed=elapsed)
        if not self.unknown_depth:
            down = np.stack([ray.down for ray in rays], axis=1) * self.target_depth_uncertainty
            shared = np.concatenate((shared, down[None]))
        own = self.timing.own**2 + (along * self.station_uncertainty) ** 2
        whole = from_speed + np.einsum("kns,knt->nst", shared, shared)
        whole += own[..., None] * np.eye(len(self.sites))
        return whole, from_speed


def ellipse(covariance: Floats) -> tuple[Floats, Floats, Floats]:
    """Half axes of the 95 % ellipse of (..., 2, 2), m, and the bearing of the long one, degrees."""
    a, b, c = covariance[..., 0, 0], covariance[..., 1, 1], covariance[..., 0, 1]
    middle, half = 0.5 * (a + b), np.hypot(0.5 * (a - b), c)
    bearing = np.degrees(0.5 * np.arctan2(2.0 * c, b - a)) % 180.0
    return ELLIPSE * np.sqrt(middle + half), ELLIPSE * np.sqrt(np.maximum(middle - half, 0.0)), bearing


def tables(exact: Sequence[Direct], far: float) -> list[Direct | Tabulated]:
    """A table for each, one for all of the same depth."""
    by_depth: dict[float, Tabulated] = {}
    for one in exact:
        if one.source_depth not in by_depth:
            by_depth[one.source_depth] = Tabulated(one, far)
    return [by_depth[one.source_depth] for one in exact]


def only(heard: NDArray[np.bool_], jacobian: Floats, whole: Floats) -> tuple[Floats, Floats]:
    """Stations that are not heard say nothing: no slope, and an error of their own."""
    both = heard[:, :, None] & heard[:, None, :]
    return np.where(heard[..., None], jacobian, 0.0), np.where(both, whole, np.eye(heard.shape[1]))


def solved(jacobian: Floats, whole: Floats, from_speed: Floats) -> tuple[Floats, Floats]:
    """Covariance of the unknowns, and the part of it from the sound speed: (n, unknowns, unknowns); NaN where open."""
    weight = np.linalg.inv(whole)
    turned = np.swapaxes(jacobian, 1, 2) @ weight
    covariance = inverse(turned @ jacobian)
    gain = covariance @ turned
    return covariance, gain @ from_speed @ np.swapaxes(gain, 1, 2)


def inverse(normal: Floats) -> Floats:
    """Inverses of symmetric matrices, scaled to ones on the diagonal; NaN where there is none."""
    size = np.sqrt(np.einsum("nii->ni", normal))
    outer = size[:, :, None] * size[:, None, :]
    scaled = np.divide(normal, outer, out=np.zeros(normal.shape), where=outer > 0.0)
    values, vectors = np.linalg.eigh(scaled)
    good = (values[:, 0] > _FLAT) & np.all(size > 0.0, axis=1)
    inner = (vectors / np.where(good[:, None], values, 1.0)[:, None, :]) @ np.swapaxes(vectors, 1, 2)
    found: Floats = np.divide(inner, outer, out=np.full(normal.shape, np.nan), where=good[:, None, None])
    return found
