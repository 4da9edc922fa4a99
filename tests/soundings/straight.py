"""Files of invented soundings, and a stand-in for what corrects them: straight beams at 1500 m/s."""

from __future__ import annotations

import numpy as np
import xarray as xr

from ocean_sound.soundings.columns import FLAG_OF_REASON, REASON

SPEED = 1500.0


class Straight:
    """Beams that go straight at one speed."""

    def correct(self, block):
        shape = block.shape
        angle = np.radians(np.broadcast_to(block.of("across_track_angle"), shape))
        way = 0.5 * SPEED * np.broadcast_to(block.of("two_way_travel_time"), shape)
        depth = block.of("transducer_depth") + way * np.cos(angle)
        reason = np.where(np.isnan(way), REASON["no_travel_time"], 0)
        reason = np.where(np.isnan(angle), REASON["no_angle"], reason)
        if block.impossible is not None:
            reason = np.where(block.impossible, REASON["impossible_value"], reason)
        depth = np.where(reason > 0, np.nan, depth)
        return {
            "depth": depth,
            "across_track_distance": np.where(reason > 0, np.nan, way * np.sin(angle)),
            "cast_used": np.zeros(shape, np.int16),
            "depth_uncertainty": (1e-3 * depth).astype(np.float32),
            "tvu_95": (1.96e-3 * depth).astype(np.float32),
            "thu_95": (3e-3 * depth).astype(np.float32),
            "orders_held_by_sound_speed": np.where(depth < 40.0, 3, 1).astype(np.int16),
            "sounding_flag": FLAG_OF_REASON[reason],
            "sounding_reason": reason.astype(np.int16),
        }


def survey(pings=40, beams=9, seed=1):
    """Pings of a fan over a flat bottom, on `ping` and `beam`, with attributes, and things that are none of ours."""
    rng = np.random.default_rng(seed)
    angle = np.broadcast_to(np.linspace(-60.0, 60.0, beams), (pings, beams)) + rng.normal(0.0, 0.1, (pings, beams))
    heave = rng.normal(0.0, 0.3, pings)
    time = 2.0 * (35.0 + heave[:, None]) / np.cos(np.radians(angle)) / SPEED
    both = ("ping", "beam")
    return xr.Dataset(
        {
            "two_way_travel_time": (both, time, {"units": "s", "long_name": "time there and back"}),
            "across_track_angle": (both, angle, {"units": "degrees"}),
            "transducer_depth": ("ping", 4.0 - heave, {"units": "m", "positive": "down"}),
            "time": ("ping", np.datetime64("2026-05-04T10:00:00", "ns") + np.arange(pings) * np.timedelta64(250, "ms")),
            "latitude": ("ping", 60.0 + np.arange(pings) * 1e-5, {"units": "degrees_north"}),
            "longitude": ("ping", np.full(pings, 5.0), {"units": "degrees_east"}),
            "heading": ("ping", np.full(pings, 10.0), {"units": "degrees"}),
            "surface_sound_speed": ("ping", np.full(pings, 1501.0), {"units": "m s-1"}),
            "backscatter": (both, rng.normal(-30.0, 3.0, (pings, beams)), {"units": "dB", "note": "not ours"}),
            "line": ("ping", np.arange(pings, dtype=np.int32) // 10),
            "mean_square": ((), 2.5, {"units": "1"}),
        },
        attrs={"title": "invented", "history": "made by hand"},
    )


def as_sounding(dataset):
    """The same, one row a sounding."""
    n, m = dataset.sizes["ping"], dataset.sizes["beam"]
    columns = {
        name: (
            "sounding",
            np.broadcast_to(one.values if one.ndim == 2 else one.values[:, None], (n, m)).ravel(),
            one.attrs,
        )
        for name, one in dataset.data_vars.items()
        if one.ndim
    }
    return xr.Dataset(columns, attrs=dataset.attrs)
