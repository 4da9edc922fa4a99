"""Beams by the table of travel times: nanoseconds a beam, and the ratio to exact marches, in one run.

Run as `python tests/benchmarks/beams.py`. Every beam is compared with its exact march on the way. "Marched" is the
exact march in a compiled kernel; "numpy" is the layer loop that one would write with numpy, over all beams at once;
"bare" is a kernel that only reads two columns and writes two.
"""

from __future__ import annotations

import sys
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from statistics import median
from time import perf_counter

import numpy as np

from ocean_sound.profile import Profile
from ocean_sound.soundings import beam_positions, beam_times
from ocean_sound.soundings._kernels_table import only_read_and_write
from ocean_sound.soundings.table import beam_table

sys.path.insert(0, str(Path(__file__).parents[1] / "soundings"))
from test_beam_table import random_beams, waters

BEAMS, MARCHED, RUNS, TRANSDUCER = 400_000, 20_000, 7, 3.0


def seconds(work):
    """The median of several timed runs after a warm-up."""
    work()
    times = []
    for _ in range(RUNS):
        start = perf_counter()
        work()
        times.append(perf_counter() - start)
    return median(times)


def in_ping_order(water):
    """Pings of 256 beams within 65 degrees, over a seabed that rises and falls."""
    angles = np.tile(np.linspace(-65.0, 65.0, 256), BEAMS // 256 + 1)[:BEAMS]
    depths = water.depth[-1] * (0.5 + 0.2 * np.sin(np.arange(BEAMS) / 5e4))
    times = beam_times(water, angles, depths, transducer_depth=TRANSDUCER).time
    return angles, np.where(np.isnan(times), 0.1, times)


def numpy_loop(water, angles, times):
    """Layer by layer over all beams: what a user would write; beams that turn are not followed."""
    depth = np.concatenate(([TRANSDUCER], water.depth[water.depth > TRANSDUCER]))
    speed = water.at(depth)
    p = np.sin(np.radians(angles)) / speed[0]
    left, x, z = times.copy(), np.zeros(angles.size), np.full(angles.size, depth[0])
    with np.errstate(all="ignore"):
        for j in range(depth.size - 1):
            g = (speed[j + 1] - speed[j]) / (depth[j + 1] - depth[j])
            k1, k2 = np.sqrt(1 - (p * speed[j]) ** 2), np.sqrt(1 - (p * speed[j + 1]) ** 2)
            if g == 0.0:
                dt, dx = (depth[j + 1] - depth[j]) / (speed[j] * k1), (depth[j + 1] - depth[j]) * p * speed[j] / k1
            else:
                dt = np.log(speed[j + 1] / speed[j] * (1 + k1) / (1 + k2)) / g
                dx = (k1 - k2) / (p * g)
            part = np.clip(left / dt, 0.0, 1.0)
            x += part * dx
            z += part * (depth[j + 1] - depth[j])
            left -= part * dt
    return z, x


def threads(table, columns, out, number):
    """The same work parted over threads."""
    parts = np.array_split(np.arange(BEAMS), number)
    spans = [slice(part[0], part[-1] + 1) for part in parts]
    with ThreadPoolExecutor(number) as pool:
        list(pool.map(lambda s: table.locate(*(c[s] for c in columns), tuple(o[s] for o in out)), spans))


def row(name, water):
    """One line of the report."""
    out = np.empty(BEAMS), np.empty(BEAMS), np.empty(BEAMS, dtype=np.int8)
    table = beam_table(water, transducer_depth=TRANSDUCER)
    ordered = (*in_ping_order(water), np.ones(BEAMS))
    mixed = (*random_beams(water, TRANSDUCER, BEAMS), np.ones(BEAMS))
    angles, times = (column[:MARCHED].copy() for column in mixed[:2])
    worst = max(checked(name, water, table, *columns[:2]) for columns in (ordered, mixed))
    numbers = (
        seconds(lambda: table.locate(*mixed, out)) / BEAMS,
        seconds(lambda: table.locate(*ordered, out)) / BEAMS,
        seconds(lambda: threads(table, ordered, out, 2)) / BEAMS,
        seconds(lambda: only_read_and_write(ordered[0], ordered[1], out[0], out[1])) / BEAMS,
        seconds(lambda: beam_positions(water, angles, times, transducer_depth=TRANSDUCER)) / MARCHED,
        seconds(lambda: numpy_loop(water, angles, times)) / MARCHED,
    )
    build = seconds(lambda: beam_table(water, transducer_depth=TRANSDUCER))
    cells = [f"{name:>16}", f"{len(water):>10}", *(f"{1e9 * number:10.1f}" for number in numbers)]
    return "".join([*cells, f"{1e3 * build:10.1f}", f"{table.nbytes / 1e6:10.1f}", f"{1e3 * worst:10.2f}"])


def checked(name, water, table, angles, times):
    """The largest distance from exact marches, m, which must be within the tolerance; every status must be the same."""
    exact = beam_positions(water, angles, times, transducer_depth=TRANSDUCER)
    found = table.positions(angles, times)
    assert np.array_equal(found.status, exact.status), name
    worst = np.nanmax(np.hypot(found.depth - exact.depth, found.across - exact.across))
    assert worst < table.tolerance, (name, worst)
    return worst


def main():
    head = (
        "water",
        "levels",
        "random",
        "in order",
        "2 threads",
        "bare",
        "marched",
        "numpy",
        "build ms",
        "MB",
        "worst mm",
    )
    print("ns a beam, one thread unless said; table to 1 mm up to 75 degrees")
    print("".join(f"{name:>16}" if not i else f"{name:>10}" for i, name in enumerate(head)))
    for name, (depth, speed) in waters().items():
        print(row(name, Profile(depth, speed)), flush=True)


if __name__ == "__main__":
    main()
