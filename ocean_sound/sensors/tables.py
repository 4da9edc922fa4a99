"""A sensor plan as a dataset with CF names, units and attributes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..files import attributes
from .curing import CAUSES, PARTS
from .planning import spread

if TYPE_CHECKING:
    import xarray

    from .planning import SensorPlan

_MAP = ("depth", "latitude", "longitude")


def dataset_of_plan(plan: SensorPlan) -> xarray.Dataset:
    """See `SensorPlan.to_dataset`."""
    import xarray as xr

    task, area = plan.task, plan.task.area
    shares = np.array([member.share for member in task.members], dtype=np.float64)
    shares /= shares.sum()
    mean, percentiles = spread(plan.heard, shares)
    heard = attributes("heard_probability")
    variables: dict[str, Any] = {
        "heard_probability": (("at_once", *_MAP), area.on_map(mean), heard),
        "heard_probability_percentile": (
            ("percentile", "at_once", *_MAP),
            area.on_map(percentiles),
            {**heard, "long_name": f"percentile over waters of the {heard['long_name']}"},
        ),
        "heard_probability_by_water": (
            ("at_once", "water", *_MAP),
            area.on_map(plan.heard),
            {**heard, "long_name": f"{heard['long_name']}, in each water"},
        ),
        "weight": (_MAP, area.on_map(area.weight), attributes("weight")),
        "seabed_depth": (_MAP[1:], np.where(area.inside, area.seabed, np.nan), attributes("seabed_depth")),
        "water_share": ("water", shares, {"long_name": "how much the water counts", "units": "1"}),
        **_of_deafness(plan),
    }
    coordinates: dict[str, Any] = {
        "depth": ("depth", area.depths, attributes("depth")),
        "latitude": ("latitude", area.latitude, attributes("latitude")),
        "longitude": ("longitude", area.longitude, attributes("longitude")),
        "at_once": (
            "at_once",
            np.arange(1, len(plan.heard) + 1),
            {"long_name": "least number of sensors that hear one signal", "units": "1"},
        ),
        "water_name": ("water", [member.name for member in task.members], {"long_name": "name of the water"}),
        "water_group": ("water", [member.group for member in task.members], {"long_name": "season or other group"}),
        **_of_sites(plan),
    }
    reach = {
        name: plan.reach[name] for name in ("detection_range", "farthest_detection", "cut", "bearing", "percentile")
    }
    dataset = xr.Dataset(variables, coordinates)
    dataset = dataset.assign_coords({name: reach.pop(name) for name in ("bearing", "percentile")}).assign(reach)
    hearing = task.hearing
    return dataset.assign_attrs(
        title="what sensors hear over an area",
        source_level=hearing.target.source_level,
        frequency=task.settings.frequency,
        detection_threshold=hearing.receiver.detection_threshold,
        bandwidth=hearing.receiver.bandwidth,
        fluctuation=hearing.fluctuation,
        correlation=hearing.correlation,
        noise_spectrum_levels=hearing.noise.levels,
        noise_shares=hearing.noise.shares,
        calls=hearing.target.calls,
        pulses=hearing.target.pulses,
        comment="levels in dB re 1 uPa (spectrum levels re 1 uPa2/Hz), losses in dB re 1 m",
    )


def _of_sites(plan: SensorPlan) -> dict[str, Any]:
    sensors = plan.sensors
    there = len(plan.chosen)
    gains = np.full(len(sensors), np.nan)
    if plan.choice is not None:
        gains[:there] = plan.choice.gains
    place = {"latitude": [s.latitude for s in sensors], "longitude": [s.longitude for s in sensors]}
    return {
        "site_id": ("site", [s.name for s in sensors], attributes("site_id")),
        "site_latitude": ("site", place["latitude"], attributes("latitude")),
        "site_longitude": ("site", place["longitude"], attributes("longitude")),
        "sensor_depth": ("site", [s.depth for s in sensors], attributes("sensor_depth")),
        "cost": ("site", [s.cost for s in sensors], attributes("cost")),
        "gain": ("site", gains, attributes("gain")),
        "existing": (
            "site",
            (np.arange(len(sensors)) >= there).astype(np.int8),
            {
                "long_name": "whether the sensor was there before",
                "flag_values": np.array((0, 1), np.int8),
                "flag_meanings": "no yes",
            },
        ),
    }


def _of_deafness(plan: SensorPlan) -> dict[str, Any]:
    found, cure, area = plan.deafness, plan.cures, plan.task.area
    if found is None or cure is None:
        return {}
    dims = ("water", *_MAP)

    def flags(values: Any) -> Any:
        whole = np.full((*values.shape[:-1], *area.wet.shape), -1, dtype=np.int32)
        whole[..., area.wet] = values
        return whole

    meanings = {
        "flag_values": np.arange(-1, len(CAUSES), dtype=np.int32),
        "flag_meanings": " ".join(("none", *CAUSES)),
    }
    return {
        "missing_excess": (dims, area.on_map(found.missing), attributes("missing_excess")),
        "missing_by_cause": (("cause", *dims), area.on_map(found.parts), attributes("missing_by_cause")),
        "cause_name": ("cause", list(PARTS), {"long_name": "cause; the budget is what may be lost in a calm sea"}),
        "main_cause": (dims, flags(found.cause), {"long_name": attributes("main_cause")["long_name"], **meanings}),
        "threshold_cure": (dims, area.on_map(cure.threshold), attributes("threshold_cure")),
        "depth_cure": (dims, area.on_map(cure.depth), attributes("depth_cure")),
        "place_cure": (dims, area.on_map(cure.place), attributes("place_cure")),
        "place_cure_site": (dims, flags(cure.site), attributes("place_cure_site")),
    }
