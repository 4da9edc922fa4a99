"""Thinning, one thread: casts a second, levels kept, and ratios to simpler ways in the same run.

Run as `python tests/benchmarks/thinning.py`. Every way has to keep all beams within 65 degrees to 5 mm, as exact
tracing of 10,000 random beams confirms.
"""

from __future__ import annotations

import sys
from pathlib import Path
from statistics import median
from time import perf_counter

import numpy as np

from ocean_sound.profile import Profile
from ocean_sound.soundings import beam_times, largest_shift, thin
from ocean_sound.soundings.beams import below_transducer, carried_on

sys.path.insert(0, str(Path(__file__).parents[1] / "soundings"))
from random_beams import moved, synthetic

TOLERANCE = 0.005  # m


def timed(work, runs=3):
    """The result, and the median of several times, s."""
    work()
    times = []
    for _ in range(runs):
        start = perf_counter()
        result = work()
        times.append(perf_counter() - start)
    return result, median(times)


def even_steps(water):
    """The usual way: every n-th level, with the largest n that the exact measure allows (bisection)."""
    few, many = 2, len(water)
    while many - few > 1:
        middle = (few + many) // 2
        kept = np.unique(np.linspace(0, len(water) - 1, middle).round().astype(int))
        holds = largest_shift(water, Profile(water.depth[kept], water.speed[kept])).distance <= TOLERANCE
        few, many = (few, middle) if holds else (middle, many)
    return many


def largest_departure(water):
    """Another usual way: split where speed departs most from the straight line (Ramer; Douglas and Peucker)."""
    kept = [0, len(water) - 1]
    while True:
        chosen = Profile(water.depth[kept], water.speed[kept])
        if largest_shift(water, chosen).distance <= TOLERANCE or len(kept) == len(water):
            return len(kept)
        kept = sorted({*kept, int(np.argmax(np.abs(water.speed - chosen.at(water.depth))))})


def main():
    print(f"1000 levels, {1000 * TOLERANCE:g} mm at 65 degrees, one thread: levels kept")
    print(f"{'':20}{'ours':>6}{'measured':>10}{'by departure':>14}{'even steps':>12}{'time':>10}")
    times, kept = [], []
    for name, water in synthetic().items():
        thinned, seconds = timed(lambda water=water: thin(water))
        assert thinned.guarantee.distance <= TOLERANCE
        assert moved(water, thinned.profile)[0] <= thinned.guarantee.distance + 1e-9
        measured = thin(water, measured=True)
        times.append(seconds)
        kept.append(len(thinned.profile))
        print(
            f"{name:20}{kept[-1]:6d}{len(measured.profile):10d}{largest_departure(water):14d}{even_steps(water):12d}"
            f"{1000 * seconds:7.0f} ms"
        )
    print(f"median: {median(kept):g} levels, {1000 * median(times):.0f} ms a cast")
    water, other = synthetic()["noisy thermocline"], thin(synthetic()["noisy thermocline"]).profile
    shift, seconds = timed(lambda: largest_shift(water, other))
    angles, depths = np.meshgrid(np.linspace(0.0, 65.0, 200), np.linspace(1.0, 999.0, 500))

    def sampled():
        there = beam_times(water, angles, depths)
        found = carried_on(below_transducer(other, 0.0), angles, there.time)
        return float(np.hypot(there.depth - found.depth, there.across - found.across).max())

    largest, slow = timed(sampled, runs=1)
    assert largest <= shift.distance
    print(f"guarantee: {1000 * seconds:.1f} ms, a bound; 100,000 beams one by one: {1000 * slow:.0f} ms, a sample; "
          f"ratio {slow / seconds:.0f}")  # fmt: skip


if __name__ == "__main__":
    main()
