"""A fan of rays: what tracing gives, as plain arrays; labelled on request."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, ClassVar

import numpy as np

if TYPE_CHECKING:
    import xarray

    from ..profile import Profile
    from .shadow import Shadow

# How a ray ends, in the order of the kernels' codes.
STATUSES = (
    "reached_maximum_range",
    "split_at_speed_maximum",
    "stopped_at_surface",
    "stopped_at_seabed",
    "turned_back",
    "absorbed_by_seabed",
    "stuck",
)

_COUNTED = ("turns", "surface_bounces", "seabed_bounces")
_MEASURED = ("launch_angle", "arrival_angle", "range", "depth", "travel_time", "path_length", "travel_time_uncertainty")


@dataclass(frozen=True, eq=False)
class Fan:
    """Rays from one source through one profile; each array has one value for each ray.

    Angles are degrees from the horizontal, positive downward, in the direction of travel; ranges, depths and lengths
    are metres, times seconds. `path_range` and `path_depth` are (rays, points), evenly spaced in travel time, empty
    without `points`. `travel_time_uncertainty` (k = 1) takes the profile's uncertainty as one shape, fully correlated
    over depth, on the traced path; it is None where the profile has none.
    """

    profile: Profile
    source_depth: float
    seabed_depth: float
    max_range: float
    launch_angle: np.ndarray
    arrival_angle: np.ndarray
    range: np.ndarray
    depth: np.ndarray
    travel_time: np.ndarray
    path_length: np.ndarray
    travel_time_uncertainty: np.ndarray | None
    turns: np.ndarray
    surface_bounces: np.ndarray
    seabed_bounces: np.ndarray
    status: np.ndarray
    path_range: np.ndarray
    path_depth: np.ndarray

    TITLE: ClassVar[str] = "Rays of sound through one profile"

    @property
    def comment(self) -> str:
        """How the numbers came about."""
        return "Exact arcs through layers of constant gradient; between its levels the sea is not linear."

    def __len__(self) -> int:
        return self.launch_angle.size

    def status_counts(self) -> dict[str, int]:
        """How many rays ended in each way, without the ways in which none did."""
        counts = np.bincount(self.status, minlength=len(STATUSES))
        return {name: int(count) for name, count in zip(STATUSES, counts, strict=True) if count}

    def about(self) -> dict[str, Any]:
        """What was traced: the cast, the equation, and the geometry."""
        return {
            "cast_id": self.profile.id,
            "equation": self.profile.equation,
            "source_depth": self.source_depth,
            "seabed_depth": self.seabed_depth,
            "max_range": self.max_range,
        }

    def columns(self) -> dict[str, np.ndarray]:
        """One column for each thing known of a ray, the status in words."""
        names = [name for name in (*_MEASURED, *_COUNTED) if getattr(self, name) is not None]
        return {name: getattr(self, name) for name in names} | {"status": np.array(STATUSES)[self.status]}

    def to_dataset(self, shadow: Shadow | None = None) -> xarray.Dataset:
        """The fan as a labelled dataset: dimension `ray`, and `point` along the paths where they were sampled.

        A shadow joins it with its grid renamed to `grid_depth` and `grid_range`.
        """
        import xarray

        from ..files import attributes

        columns = self.columns() | {"status": self.status}
        variables: dict[str, Any] = {name: ("ray", values, attributes(name)) for name, values in columns.items()}
        if self.path_range.shape[1]:
            for name in ("path_range", "path_depth"):
                variables[name] = (("ray", "point"), getattr(self, name), attributes(name))
        variables["status"][2].update(
            flag_values=np.arange(len(STATUSES), dtype=np.int8), flag_meanings=" ".join(STATUSES)
        )
        dataset = xarray.Dataset(
            variables,
            attrs={
                "title": self.TITLE,
                **self.about(),
                "comment": self.comment,
            },
        )
        if self.travel_time_uncertainty is None:
            dataset.travel_time.attrs["comment"] = "no uncertainty given, since the water carries none"
        if shadow is None:
            return dataset
        zones = shadow.to_dataset().rename(depth="grid_depth", range="grid_range")
        dataset.attrs["comment"] += " " + zones.attrs["comment"]
        return dataset.merge(zones, combine_attrs="override")
