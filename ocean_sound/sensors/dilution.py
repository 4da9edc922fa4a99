"""How well a set of stations would tell places over an area."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .direct import Direct
from .stations import FEW, Stations, ellipse, inverse, only, solved, tables
from .timing import Timing

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray
    from numpy.typing import ArrayLike, NDArray

    from ..profile import Profile
    from .direct import DirectRays, Tabulated
    from .sites import Site

    Floats = NDArray[np.float64]

_CHUNK = 512  # places at once


def dilution_map(
    water: Profile,
    stations: Sequence[Site],
    *,
    latitude: ArrayLike,
    longitude: ArrayLike,
    target_depth: float,
    timing: Timing | None = None,
    elapsed: float = 0.0,
    target_depth_uncertainty: float = 0.0,
    station_uncertainty: float = 0.0,
    unknown_offset: bool = False,
    unknown_depth: bool = False,
) -> xarray.Dataset:
    """How well a set of stations would tell places over an area.

    Parameters
    ----------
    water, stations, target_depth, timing, elapsed
        As for `locate`.
    target_depth_uncertainty, station_uncertainty, unknown_offset, unknown_depth
        Likewise.
    latitude, longitude : array_like, shapes (rows,) and (columns,)
        Degrees; beyond 180 across the date line.

    Returns
    -------
    xarray.Dataset
        On (`latitude`, `longitude`): `dilution` (the root of the sum of both horizontal variances, for one standard
        error of 1 m in each distance along its ray), the half axes of the 95 % ellipse of a place and its bearing,
        `sound_speed_error_95` (that from the sound speed alone) and `stations_heard`. NaN where too few stations have a
        direct ray or their lines cross too flatly.

    Raises
    ------
    InputError
        If numbers make no sense.

    Examples
    --------
    Four stations around a place have a dilution of 2/sqrt(4) there.

    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.sensors.sites import Site
    >>> stations = [Site(str(i), y, x, 50.0) for i, (y, x) in enumerate([(0, 0.02), (0, -0.02), (0.02, 0), (-0.02, 0)])]
    >>> water = Profile([0, 100], [1500, 1500])
    >>> dilution_map(water, stations, latitude=[0.0], longitude=[0.0], target_depth=50.0)["dilution"].values.round(6)
    array([[1.]])
    """
    clock = Timing() if timing is None else timing
    group = Stations(
        water, stations, clock, target_depth, target_depth_uncertainty, station_uncertainty, unknown_offset,
        unknown_depth,
    )  # fmt: skip
    rows, columns = (np.atleast_1d(np.asarray(axis, dtype=np.float64)) for axis in (latitude, longitude))
    if rows.ndim != 1 or columns.ndim != 1 or not (np.all(np.abs(rows) <= 90.0) and np.all(np.abs(columns) <= 540.0)):
        raise InputError("latitude, longitude: two lists of degrees would be right")
    lat, lon = (axis.ravel() for axis in np.meshgrid(rows, columns, indexing="ij"))
    distance, toward = group.lines(lat, lon)
    exact = [Direct(water, site.depth, target_depth) for site in group.sites]
    finders: list[Direct | Tabulated] = [*exact]
    if lat.size > FEW:
        finders = tables(exact, 1.001 * float(distance.max()) + 1.0)
    found = np.full((6, lat.size), np.nan)
    for begin in range(0, lat.size, _CHUNK):
        part = slice(begin, begin + _CHUNK)
        rays = [finder.at(distance[part, s]) for s, finder in enumerate(finders)]
        found[:, part] = _told(group, exact, rays, toward[part], np.asarray(elapsed, dtype=np.float64))
    return _map(group, found, rows, columns)


def _told(
    group: Stations, exact: Sequence[Direct], rays: Sequence[DirectRays], toward: Floats, elapsed: Floats
) -> Floats:
    """The six numbers of each place."""
    jacobian = group.jacobian(rays, toward)
    whole, from_speed = group.covariance(exact, rays, elapsed)
    heard = np.isfinite(np.stack([ray.time for ray in rays], axis=1))
    jacobian, whole = only(heard, jacobian, whole)
    from_speed = np.where(heard[:, :, None] & heard[:, None, :], from_speed, 0.0)
    place, by_speed = solved(jacobian, whole, from_speed)
    # distances along the rays, at the speed where they arrive
    scaled = jacobian.copy()
    speed = float(exact[0].column.at(group.target_depth))
    scaled *= speed
    if group.unknown_offset:
        scaled[..., 2] = heard
    geometry = inverse(np.swapaxes(scaled, 1, 2) @ scaled)
    dilution = np.sqrt(geometry[:, 0, 0] + geometry[:, 1, 1])
    return np.array([dilution, *ellipse(place), ellipse(by_speed)[0], heard.sum(axis=1)])


def _map(group: Stations, found: Floats, latitude: Floats, longitude: Floats) -> xarray.Dataset:
    import xarray as xr

    from ..files import attributes

    names = ("dilution", "error_major_95", "error_minor_95", "error_azimuth", "sound_speed_error_95")
    shape = (latitude.size, longitude.size)
    dims = ("latitude", "longitude")
    variables: dict[str, Any] = {
        name: (dims, values.reshape(shape), attributes(name)) for name, values in zip(names, found[:5], strict=True)
    }
    variables["stations_heard"] = (dims, found[5].reshape(shape).astype(np.int32), attributes("stations_heard"))
    sites = group.sites
    coordinates = {
        "latitude": ("latitude", latitude, attributes("latitude")),
        "longitude": ("longitude", longitude, attributes("longitude")),
        "station": ("station", [site.name for site in sites], {"long_name": "name of the station"}),
        "station_latitude": ("station", [site.latitude for site in sites], attributes("latitude")),
        "station_longitude": ("station", [site.longitude for site in sites], attributes("longitude")),
        "station_depth": ("station", [site.depth for site in sites], attributes("sensor_depth")),
    }
    about = {
        "title": "how well stations tell places", "cast_id": group.water.id, "target_depth": group.target_depth,
        "timing": "two ways" if group.timing.two_way else "one way",
        "timing_uncertainty": group.timing.timing_uncertainty,
        "unknown": " and ".join(
            ["position", *(["clock offset"] if group.unknown_offset else []),
             *(["depth"] if group.unknown_depth else [])]
        ),
    }  # fmt: skip
    return xr.Dataset(variables, coordinates, about)
