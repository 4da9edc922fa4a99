"""Sections as datasets."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..files.cf import attributes

if TYPE_CHECKING:
    import xarray
    from numpy.typing import NDArray

    from .section import Section

    Floats = NDArray[np.float64]


def dataset_of_section(section: Section, ranges: Floats, depths: Floats) -> xarray.Dataset:
    """The section as a dataset: see `Section.to_dataset`."""
    import xarray as xr

    seabed = section.seabed.depth_at(ranges)
    inside = np.minimum(depths, section.deepest)
    speed = np.asarray(section.speed_at(ranges[:, None], inside[None, :]))
    speed = np.where(depths[None, :] <= seabed[:, None], speed, np.nan)
    variables: dict[str, Any] = {
        "sound_speed": (("range", "depth"), speed, attributes("sound_speed")),
        "seabed_depth": ("range", seabed, attributes("seabed_depth")),
    }
    along = {**attributes("range"), "long_name": "distance along the track"}
    coordinates: dict[str, Any] = {
        "range": ("range", ranges, along),
        "depth": ("depth", depths, {**attributes("depth"), "axis": "Z"}),
    }
    if section.track is not None:
        for name, values in zip(("latitude", "longitude"), section.track.at(ranges), strict=True):
            coordinates[name] = ("range", values, attributes(name))
    if section.profiles:
        names = np.array([profile.id for profile in section.profiles], dtype=object)
        variables["cast_id"] = ("cast", names, attributes("cast_id") | {"cf_role": "profile_id"})
        variables["cast_range"] = (
            "cast",
            section.places.copy(),
            along | {"long_name": "place of the cast along the track"},
        )
    about: dict[str, Any] = {
        "seabed_kinds": "; ".join(
            f"{'absorbs all' if kind is None else kind.name or kind} from {start:g} m"
            for start, kind in section.seabed.kinds
        ),
        "wind_speed": section.surface.wind_speed,
    }
    if section.fit is not None:
        about |= {
            "overshoot": section.fit.overshoot,
            "departure": section.fit.departure,
            "between": section.fit.between,
        }
    if section.radius is not None:
        about["earth_radius"] = section.radius
    if section.notes:
        about["notes"] = "\n".join(section.notes)
    return xr.Dataset(variables, coordinates, about)
