"""Rays in one profile, one thread: end points and paths a second, and the ratio to scipy's integrator in the same run.

Run as `python tests/benchmarks/rays.py`. Each rate is the median of several runs after a warm-up; correctness is
asserted on the way.
"""

from __future__ import annotations

import sys
from pathlib import Path
from statistics import median
from time import perf_counter

import numpy as np

from ocean_sound.profile import Profile
from ocean_sound.rays import find_shadow, trace_fan

sys.path.insert(0, str(Path(__file__).parents[1] / "rays"))
from oracles import integrate_ray

RANGE, SOURCE = 100_000.0, 1000.0


def munk(layers):
    depth = np.linspace(0.0, 5000.0, layers + 1)
    eta = 2.0 * (depth - 1300.0) / 1300.0
    return Profile(depth, 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta))))


def rate(work, items, runs=9):
    """Items a second: the median of several timed runs."""
    work()
    times = []
    for _ in range(runs):
        start = perf_counter()
        work()
        times.append(perf_counter() - start)
    return items / median(times)


def integrator_rate(water, fan, count=6):
    """Rays a second by DOP853 restarted at every node, and the largest difference of end depth and time from ours."""
    chosen = np.linspace(0, len(fan) - 1, count).astype(int)
    start = perf_counter()
    rays = [integrate_ray(water.depth, water.speed, SOURCE, fan.launch_angle[i], RANGE) for i in chosen]
    elapsed = perf_counter() - start
    return (
        count / elapsed,
        max(abs(ray[1] - fan.depth[i]) for ray, i in zip(rays, chosen, strict=True)),
        max(abs(ray[2] - fan.travel_time[i]) for ray, i in zip(rays, chosen, strict=True)),
    )


def main():
    water = munk(500)
    arguments = {"source_depth": SOURCE, "max_range": RANGE}
    many, some = np.linspace(-20, 20, 20_001), np.linspace(-20, 20, 1001)
    ends = rate(lambda: trace_fan(water, launch_angles=many, **arguments), many.size)
    paths = rate(lambda: trace_fan(water, launch_angles=some, points=1001, **arguments), some.size)
    shadow = rate(lambda: find_shadow(water, **arguments), 1)
    theirs, depth_off, time_off = integrator_rate(water, trace_fan(water, launch_angles=many, **arguments))
    assert depth_off < 1e-6, depth_off
    assert time_off < 1e-9, time_off
    print("Munk profile in 500 layers, 100 km, launch angles within 20 degrees, one thread")
    print(f"  end points          {ends:12,.0f} rays/s")
    print(f"  paths of 1001 points{paths:12,.0f} rays/s")
    print(f"  shadow, 201 x 501   {1e3 / shadow:12,.1f} ms")
    print(f"  DOP853, rtol 1e-12  {theirs:12,.2f} rays/s, off by at most {depth_off:.1e} m and {time_off:.1e} s")
    print(f"  ratio, end points to DOP853: {ends / theirs:,.0f}")


if __name__ == "__main__":
    main()
