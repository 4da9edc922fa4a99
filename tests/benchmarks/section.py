"""Rays through a section, one thread: rays a second, and ratios to scipy's integrator in the same run.

Run as `python tests/benchmarks/section.py`. Water that changes with range over a rough seabed, 100 km, launch angles
within 20 degrees, so that many rays bounce. Errors are against our own rays at tolerances a thousand times finer, which
are themselves compared with DOP853 at rtol 1e-11; correctness is asserted on the way.
"""

from __future__ import annotations

import sys
from pathlib import Path
from time import perf_counter

import numpy as np
from scipy.interpolate import RectBivariateSpline

from ocean_sound.profile import Profile
from ocean_sound.rays import find_arrivals, trace_fan
from ocean_sound.section import Seabed, Section

sys.path.insert(0, str(Path(__file__).parents[1] / "rays"))
from section_oracles import integrate

RANGE, SOURCE = 100_000.0, 1000.0


def section():
    """Eleven Munk profiles, the axis rising by 300 m, over hills."""
    depth = np.linspace(0.0, 5000.0, 501)
    ranges = np.linspace(0.0, RANGE, 11)
    profiles = []
    for x in ranges:
        eta = 2.0 * (depth - 1300.0 + 300.0 * x / RANGE) / 1300.0
        profiles.append(Profile(depth, 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta)))))
    nodes = np.linspace(0.0, RANGE, 101)
    hills = 4800.0 + 60.0 * np.sin(nodes / 9000.0) + 20.0 * np.sin(nodes / 4100.0 + 1.0)
    return Section.from_casts(
        profiles, ranges=ranges, seabed=Seabed(nodes, hills), max_range=RANGE, flatten=False, complete=False
    )


def rate(work, items, runs=60):
    """Items a second: the best of many short runs after a warm-up, since the machine may be shared."""
    work()
    times = []
    for _ in range(runs):
        start = perf_counter()
        work()
        times.append(perf_counter() - start)
    return items / min(times)


def by_spline(water):
    """A right-hand side as one would write it with scipy: a bicubic spline of speed and its derivatives."""
    ranges, depths = np.linspace(0.0, RANGE, 101), np.linspace(0.0, water.deepest, 201)
    spline = RectBivariateSpline(ranges, depths, water.speed_at(ranges[:, None], depths[None, :]))

    def slope(_, y):
        x, z = y[0], y[1]
        c = float(spline.ev(x, z))
        return np.array(
            [
                c * y[2],
                c * y[3],
                -float(spline.ev(x, z, dx=1)) / c**2,
                -float(spline.ev(x, z, dy=1)) / c**2,
                1.0 / c,
            ]
        )

    return slope


class Few:
    """Each n-th ray of a fan."""

    def __init__(self, fan, n):
        self.depth, self.travel_time = fan.depth[::n], fan.travel_time[::n]


def integrator(water, angles, fan, **options):
    """Rays a second by DOP853, and how far its ends are from those of a fan at the same angles, by depth and time."""
    start = perf_counter()
    rays = [integrate(water, SOURCE, angle, RANGE, **options) for angle in angles]
    elapsed = perf_counter() - start
    return (
        len(angles) / elapsed,
        np.array([abs(ray[0] - depth) for ray, depth in zip(rays, fan.depth, strict=True)]),
        np.array([abs(ray[1] - time) for ray, time in zip(rays, fan.travel_time, strict=True)]),
    )


def errors(fan, fine, calm):
    """99 % of the errors of a calm fan, in metres and seconds."""
    return [np.percentile(np.abs(a - b)[calm], 99) for a, b in zip(fan, fine, strict=True)]


def main():
    water = section()
    arguments = {"source_depth": SOURCE, "max_range": RANGE}
    angles = np.linspace(-20.0, 20.0, 2001)
    fine = trace_fan(water, launch_angles=angles, depth_tolerance=1e-6, time_tolerance=1e-11, **arguments)
    calm = np.abs(fine.spreading) < 2.0 * RANGE
    print(f"{water}")
    print(
        f"{angles.size} rays within 20 degrees, {RANGE / 1000:g} km, one thread; {calm.mean():.0%} of them not chaotic"
    )
    ours = {}
    for label, choice in (("bouncing", angles), ("refracted, within 10 degrees", angles[np.abs(angles) <= 10.0])):
        kept = np.abs(angles) <= np.abs(choice).max()
        for tolerance in ((0.03, 3e-6), (0.01, 1e-6)):
            options = {"depth_tolerance": tolerance[0], "time_tolerance": tolerance[1], **arguments}
            fan = trace_fan(water, launch_angles=choice, **options)
            depth, time = errors((fan.depth, fan.travel_time), (fine.depth[kept], fine.travel_time[kept]), calm[kept])
            part = {"launch_angles": choice[::10], **options}
            speed = rate(lambda part=part: trace_fan(water, **part), choice[::10].size)
            ours[label, tolerance] = speed
            print(
                f"  {label:30s} aim {tolerance[1]:.0e} s {speed:10,.0f} rays/s, 99 % within {depth:.1e} m, {time:.1e} s"
            )
    assert time < 1e-6
    some = np.flatnonzero(calm)[:: calm.sum() // 12]
    sparse = trace_fan(water, launch_angles=angles[some], depth_tolerance=1e-6, time_tolerance=1e-11, **arguments)
    integrate(water, SOURCE, 1.0, 1000.0)
    best = ours["bouncing", (0.01, 1e-6)]
    for rtol in (1e-9, 1e-11):
        theirs, depth, time = integrator(water, angles[some], sparse, rtol=rtol)
        print(
            f"  DOP853, rtol {rtol:.0e}, compiled right-hand side {theirs:8,.1f} rays/s, "
            f"median and worst {np.median(depth):.0e}, {depth.max():.0e} m, {np.median(time):.0e}, {time.max():.0e} s; "
            f"ratio {best / theirs:,.0f}"
        )
    assert np.median(depth) < 1e-3
    assert np.median(time) < 1e-7
    theirs, depth, time = integrator(
        water, angles[some][::6], Few(sparse, 6), rtol=1e-9, right_hand_side=by_spline(water)
    )
    print(f"  the same with a scipy spline, rtol 1e-09 {theirs:8,.2f} rays/s; ratio {best / theirs:,.0f}")
    start = perf_counter()
    arrivals = find_arrivals(water, source_depth=SOURCE, receiver_depth=1200.0, receiver_range=RANGE, max_bounces=6)
    print(f"  {len(arrivals)} arrivals with up to 6 bounces at {RANGE / 1000:g} km in {perf_counter() - start:.2f} s")


if __name__ == "__main__":
    main()
