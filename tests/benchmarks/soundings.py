"""Soundings from netCDF to netCDF: nanoseconds a beam of all, of reading and writing alone, and memory, in one run.

Run as `python tests/benchmarks/soundings.py [BEAMS] [FOLDER]`; by default 3 million beams in a folder of its own that
is removed. "Reading and writing alone" reads the same columns and writes as many of the same types, without correction,
through the same code; "plain" does so with netCDF4 alone, a slab at a time, as one would write it by hand.
"""

from __future__ import annotations

import resource
import sys
import tempfile
from pathlib import Path
from time import perf_counter

import netCDF4
import numpy as np

from ocean_sound.profile import Profile
from ocean_sound.soundings.beams import beam_times
from ocean_sound.soundings.choosing import Scales
from ocean_sound.soundings.columns import OUTPUTS
from ocean_sound.soundings.orders import read_orders
from ocean_sound.soundings.reading import open_soundings
from ocean_sound.soundings.streaming import Job, correct_file, stream

BEAMS, ACROSS, DEPTH, SLAB = 3_000_000, 256, 150.0, 400
CHOICE = {"scales": Scales(4 * 3600.0, 10e3), "orders": read_orders()}


def casts():
    """A thermocline that deepens over six hours."""
    depth = np.linspace(0.0, 250.0, 251)
    return [
        Profile(
            depth,
            1500.0 - 18.0 / (1.0 + np.exp((40.0 + 4.0 * at - depth) / 4.0)),
            np.full(depth.size, 0.3),
            id=f"cast {at}",
            time=np.datetime64("2026-05-04T06:00") + np.timedelta64(3 * at, "h"),
            latitude=60.0 + 0.02 * at,
            longitude=5.0,
        )
        for at in range(3)
    ]


def write_beams(path, pings, water):
    """Pings of a fan within 65 degrees over a seabed that rises and falls, with the usual columns."""
    angle = np.linspace(-65.0, 65.0, ACROSS)
    time = beam_times(water, angle, np.full(ACROSS, DEPTH), transducer_depth=4.0).time
    with netCDF4.Dataset(path, "w") as file:
        file.createDimension("ping", pings)
        file.createDimension("beam", ACROSS)
        both, units = ("ping", "beam"), {"time": "seconds since 2026-05-04T06:00:00"}
        units |= {"two_way_travel_time": "s", "across_track_angle": "degree", "transducer_depth": "m"}
        units |= {"surface_sound_speed": "m s-1", "latitude": "degrees_north", "longitude": "degrees_east"}
        units |= {"heading": "degree", "water_level": "m"}
        made = {}
        for name, unit in units.items():
            made[name] = file.createVariable(
                name, "f8", both if name in {"two_way_travel_time", "across_track_angle"} else both[:1]
            )
            made[name].units = unit
        for first in range(0, pings, SLAB):
            ping = np.arange(first, min(first + SLAB, pings))
            part = slice(first, first + ping.size)
            made["two_way_travel_time"][part] = 2.0 * time * (1.0 + 0.1 * np.sin(ping / 300.0))[:, None]
            made["across_track_angle"][part] = np.broadcast_to(angle, (ping.size, ACROSS))
            for name, values in {
                "time": ping * 6.0 * 3600.0 / pings,
                "transducer_depth": 4.0 + 0.5 * np.sin(ping / 8.0),
                "surface_sound_speed": 1500.0 + 0.2 * np.sin(ping / 900.0),
                "latitude": 60.0 + ping * 0.04 / pings,
                "longitude": np.full(ping.size, 5.0),
                "heading": np.full(ping.size, 0.0),
                "water_level": 0.5 * np.sin(ping / 4000.0),
            }.items():
                made[name][part] = values


class Nothing:
    """Columns of the right types without a thought."""

    def __init__(self, names):
        self.names = names

    def correct(self, block):
        found = {name: np.zeros(block.shape, OUTPUTS[name].dtype) for name in self.names}
        for name in self.names:
            if OUTPUTS[name].dtype.startswith("f"):
                found[name] += 1.0
        return found


def plain(source, goal, names):
    """The same slabs with netCDF4 alone: everything read, everything and as much again as is new written."""
    with netCDF4.Dataset(source) as file, netCDF4.Dataset(goal, "w") as copy:
        file.set_auto_maskandscale(False)
        copy.set_fill_off()
        for name, dimension in file.dimensions.items():
            copy.createDimension(name, len(dimension))
        kept = {name: copy.createVariable(name, one.dtype, one.dimensions) for name, one in file.variables.items()}
        new = {name: copy.createVariable(name, OUTPUTS[name].dtype, ("ping", "beam")) for name in names}
        pings = len(file.dimensions["ping"])
        for first in range(0, pings, SLAB):
            part = slice(first, min(first + SLAB, pings))
            for name, variable in kept.items():
                variable[part] = file[name][part]
            for variable in new.values():
                variable[part] = np.ones((part.stop - part.start, ACROSS), variable.dtype)


def peak():
    """The largest resident size so far, MB."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0


def main(beams, folder):
    """All of it, once warm."""
    water = casts()
    pings = max(beams // ACROSS, SLAB)
    source, goal = folder / "beams.nc", folder / "out.nc"
    write_beams(folder / "warm.nc", SLAB, water[0])
    correct_file(folder / "warm.nc", Job(water, choice=CHOICE), goal)
    with netCDF4.Dataset(goal) as file:
        names = [name for name in file.variables if name in OUTPUTS]
    write_beams(source, pings, water[0])
    beams, before = pings * ACROSS, peak()
    print(f"{beams:,} beams, {source.stat().st_size / 1e6:,.0f} MB, {len(names)} new columns")

    start = perf_counter()
    done = correct_file(source, Job(water, choice=CHOICE, replace=True), goal)
    whole = (perf_counter() - start) / beams * 1e9
    memory = peak()
    check(goal, done, beams)
    start = perf_counter()
    with open_soundings(source) as soundings:
        stream(soundings, Nothing(names), goal, replace=True)
    alone = (perf_counter() - start) / beams * 1e9
    start = perf_counter()
    plain(source, folder / "plain.nc", names)
    by_hand = (perf_counter() - start) / beams * 1e9
    print(f"netCDF to netCDF      {whole:7.0f} ns a beam")
    print(f"read and write alone  {alone:7.0f} ns a beam, ratio {whole / alone:.2f} (goal 2)")
    print(f"plain netCDF4 slabs   {by_hand:7.0f} ns a beam, ratio {whole / by_hand:.2f}")
    print(f"peak memory           {memory:7.0f} MB, {before:.0f} of it before (goal 4000)")


def check(goal, done, beams):
    """Whether what was written is what should be there."""
    told = done.to_dict()
    if told["soundings"] != beams or told["flags"]["pass"] < 0.99 * beams:
        raise SystemExit(f"not all soundings were corrected: {told}")
    with netCDF4.Dataset(goal) as file:
        depth = file["depth"][:: max(len(file.dimensions["ping"]) // 50, 1)]
    if not (np.isfinite(depth).all() and 0.8 * DEPTH < depth.min() < depth.max() < 1.2 * DEPTH):
        raise SystemExit(f"depths from {depth.min()} to {depth.max()} m can't be")


if __name__ == "__main__":
    number = int(float(sys.argv[1])) if len(sys.argv) > 1 else BEAMS
    if len(sys.argv) > 2:
        main(number, Path(sys.argv[2]))
    else:
        with tempfile.TemporaryDirectory() as own:
            main(number, Path(own))
