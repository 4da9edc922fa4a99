"""Profiles as datasets, and back."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..files.cf import SPEED_ERROR, attributes

if TYPE_CHECKING:
    import xarray

    from .profile import Profile

_SCALARS = ("time", "latitude", "longitude", "cast_id")


def dataset_of_profile(profile: Profile) -> xarray.Dataset:
    """The profile as a dataset: see `Profile.to_dataset`."""
    import xarray as xr

    columns = profile.columns()
    beside = [name for name in columns if name not in ("depth", "sound_speed")]
    variables: dict[str, Any] = {name: ("level", columns[name].copy(), attributes(name)) for name in columns}
    if profile.equation:
        variables["sound_speed"][2]["equation"] = profile.equation
    if beside:
        variables["sound_speed"][2]["ancillary_variables"] = " ".join(beside)
    scalars = (profile.time, profile.latitude, profile.longitude, profile.id)
    coordinates = {name: ((), value, attributes(name)) for name, value in zip(_SCALARS, scalars, strict=True)}
    coordinates["depth"] = variables.pop("depth")
    notes = {"notes": "\n".join(profile.notes)} if profile.notes else {}
    surface = {"surface_assumed": "yes"} if profile.surface_assumed else {}
    return xr.Dataset(variables, coordinates, {"featureType": "profile", **notes, **surface})


def profile_of_dataset(kind: type[Profile], dataset: xarray.Dataset) -> Profile:
    """The profile that a dataset holds: see `Profile.from_dataset`."""
    for name in ("depth", "sound_speed"):
        if name not in dataset.variables:
            held = ", ".join(map(str, dataset.variables)) or "nothing"
            raise InputError(f"dataset: has no {name}, so it is no profile; it holds {held}")

    def column(name: str) -> Any:
        return np.asarray(dataset[name].to_numpy(), dtype=np.float64) if name in dataset.variables else None

    def scalar(name: str, otherwise: Any) -> Any:
        return dataset[name].to_numpy()[()] if name in dataset.variables and dataset[name].ndim == 0 else otherwise

    names = [str(name) for name in dataset.variables if str(name).startswith(SPEED_ERROR)]
    notes = str(dataset.attrs.get("notes", ""))
    return kind(
        column("depth"),
        column("sound_speed"),
        column("sound_speed_uncertainty"),
        shapes={name.removeprefix(SPEED_ERROR): column(name) for name in names},
        noise=column("sound_speed_noise"),
        id=str(scalar("cast_id", "")),
        time=scalar("time", np.datetime64("NaT", "ns")),
        latitude=scalar("latitude", np.nan),
        longitude=scalar("longitude", np.nan),
        equation=str(dataset["sound_speed"].attrs.get("equation", "")),
        notes=tuple(line for line in notes.split("\n") if line),
        surface_assumed=dataset.attrs.get("surface_assumed") == "yes",
    )
