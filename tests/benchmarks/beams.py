"""Beams by the table of travel times: nanoseconds a beam, and the ratio to exact marches, in one run.

Run as `python tests/benchmarks/beams.py`. Every beam is compared with its exact march on the way. "Marched" is the
exact march in a compiled kernel; "numpy" is the layer loop that one would write with numpy, over all beams at once;
"x march" and "x numpy" are what a table is faster by, in ping order; "bare" is a kernel that only reads two columns and
writes two, of so many beams that no cache holds them, and "x bare" what the table costs more for as many, both on two
threads. A second table is of whole soundings: depth, position, uncertainty, orders, flags.
"""

from __future__ import annotations

import sys
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from pathlib import Path
from time import perf_counter

import numpy as np

from ocean_sound.profile import Profile
from ocean_sound.soundings import beam_positions, beam_times
from ocean_sound.soundings._kernels_table import only_read_and_write
from ocean_sound.soundings.choosing import Scales
from ocean_sound.soundings.columns import PingBlock
from ocean_sound.soundings.correcting import Corrector, Options
from ocean_sound.soundings.orders import read_orders
from ocean_sound.soundings.sensitivity import beam_moves, path_uncertainty
from ocean_sound.soundings.table import beam_table

sys.path.insert(0, str(Path(__file__).parents[1] / "soundings"))
from test_beam_table import random_beams, waters
from test_correcting import integrated
from test_sensitivity import CHANGE, causes, exact_covariance, largest_miss

BEAMS, MARCHED, RUNS, TRANSDUCER = 200_000, 20_000, 7, 3.0
TILES = 40  # of these beams, for what no cache holds


def seconds(work):
    """The least of several timed runs after a warm-up: others share the machine."""
    work()
    times = []
    for _ in range(RUNS):
        start = perf_counter()
        work()
        times.append(perf_counter() - start)
    return min(times)


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


def threads(work, columns, out, number=2):
    """The same work parted over threads."""
    parts = np.array_split(np.arange(columns[0].size), number)
    spans = [slice(part[0], part[-1] + 1) for part in parts]
    with ThreadPoolExecutor(number) as pool:
        list(pool.map(lambda s: work(*(c[s] for c in columns), tuple(o[s] for o in out)), spans))


def bare_kernel(angles, times, out):
    """The least that a kernel over beams does."""
    only_read_and_write(angles, times, out[0], out[1])


def row(name, water):
    """One line of the report."""
    out = np.empty(BEAMS), np.empty(BEAMS), np.empty(BEAMS, dtype=np.int8)
    table = beam_table(water, transducer_depth=TRANSDUCER)
    ordered = (*in_ping_order(water), np.ones(BEAMS))
    mixed = (*random_beams(water, TRANSDUCER, BEAMS), np.ones(BEAMS))
    angles, times = (column[:MARCHED].copy() for column in mixed[:2])
    worst = max(checked(name, water, table, *columns[:2]) for columns in (ordered, mixed))
    many = tuple(np.tile(column, TILES) for column in ordered)
    places = np.empty(many[0].size), np.empty(many[0].size), np.empty(many[0].size, dtype=np.int8)
    random, in_order, two, bare, tiled, marched, looped = (
        seconds(lambda: table.locate(*mixed, out)) / BEAMS,
        seconds(lambda: table.locate(*ordered, out)) / BEAMS,
        seconds(lambda: threads(table.locate, ordered, out)) / BEAMS,
        seconds(lambda: threads(lambda a, t, o: only_read_and_write(a, t, o[0], o[1]), many[:2], places))
        / many[0].size,
        seconds(lambda: threads(table.locate, many, places)) / many[0].size,
        seconds(lambda: beam_positions(water, angles, times, transducer_depth=TRANSDUCER)) / MARCHED,
        seconds(lambda: numpy_loop(water, angles, times)) / MARCHED,
    )
    numbers = (random, in_order, two, marched, looped, bare)
    ratios = (marched / in_order, looped / in_order, tiled / bare)
    build = seconds(lambda: beam_table(water, transducer_depth=TRANSDUCER))
    cells = [f"{name:>16}", f"{len(water):>10}", *(f"{1e9 * number:10.1f}" for number in numbers)]
    cells += [f"{ratio:10.1f}" for ratio in ratios]
    by_integrator(water, table)
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
        "marched",
        "numpy",
        "bare",
        "x march",
        "x numpy",
        "x bare",
        "build ms",
        "MB",
        "worst mm",
    )
    print("ns a beam, one thread unless said; table to 1 mm up to 75 degrees")
    print("".join(f"{name:>16}" if not i else f"{name:>10}" for i, name in enumerate(head)))
    for name, (depth, speed) in waters().items():
        print(row(name, Profile(depth, speed)), flush=True)
    whole()
    uncertainty()


def by_integrator(water, table, count=200):
    """As many beams against an integrator that starts anew at every level."""
    random = np.random.default_rng(2)
    sines = np.sin(np.radians(random.uniform(-75.0, 75.0, count)))
    depths = random.uniform(TRANSDUCER + 1.0, water.depth[-1], count)
    fastest = np.array([max(water.at(z), water.speed[water.depth < z].max()) for z in depths])
    down = np.abs(sines) * fastest / water.at(TRANSDUCER) < 0.999
    time, across = integrated(water, TRANSDUCER, sines[down], depths[down])
    found = table.positions(np.degrees(np.arcsin(sines[down])), time)
    assert np.hypot(found.depth - depths[down], found.across - across).max() < table.tolerance


def whole():
    """Soundings with all that is written of them, 256 beams a ping, the transducer heaving; and their error."""
    print("\nwhole soundings, ns a beam: depth, position, uncertainty, orders, flags")
    head = ("1 cast", "2 threads", "2 casts", "2 threads", "back", "worst mm")
    print("".join([f"{'water':>16}", f"{'levels':>10}", *(f"{name:>10}" for name in head)]))
    n, m = BEAMS // 256, 256
    second = np.timedelta64(1_000_000_000, "ns")
    start = np.datetime64("2026-05-01T00:00", "ns")
    for name, (depth, speed) in waters().items():
        known = {"latitude": 45.0, "longitude": -30.0}
        casts = [
            replace(causes(Profile(depth, np.add(speed, error))), time=start + at * second, **known)
            for at, error in ((0, 0.0), (n, 0.5))
        ]
        water = casts[0]
        angles, times = (column[: n * m].reshape(n, m) for column in in_ping_order(water))
        pings = {
            "time": start + np.arange(n) * second,
            "transducer_depth": TRANSDUCER + 1.0 + np.sin(np.arange(n) / 3.0),
            "latitude": 45.0 + 2e-5 * np.arange(n),
            "longitude": np.full(n, -30.0),
            "heading": np.arange(n) % 360.0,
            "transducer_height": np.full(n, 41.0),
            "water_level": np.full(n, 1.0),
            "surface_sound_speed": np.full(n, water.at(TRANSDUCER)),
        }
        block = PingBlock(pings, {"two_way_travel_time": 2.0 * times, "across_track_angle": angles})
        blocks = [block.part(first, first + n // 4) for first in range(0, n, n // 4)]
        numbers = []
        options = Options(curvature=False, steering_speed_uncertainty=0.3)
        shared = {"transducer_depth_range": (TRANSDUCER, TRANSDUCER + 2.0), "deepest": float(water.depth[-1])}
        for these, scales in ((casts[:1], None), (casts, Scales(4.0 * n, np.inf))):
            corrector = Corrector(these, options, scales=scales, orders=read_orders(), **shared)
            numbers.append(seconds(lambda c=corrector, b=blocks: [c.correct(one) for one in b]) / (n * m))
            with ThreadPoolExecutor(2) as pool:
                numbers.append(seconds(lambda c=corrector, p=pool, b=blocks: list(p.map(c.correct, b))) / (n * m))
        corrector = Corrector(casts[:1], options, **shared)
        found = corrector.correct(block)
        old = PingBlock(pings, {key: found[key] for key in ("depth", "across_track_distance", "along_track_distance")})
        back = Corrector(casts[:1], options, corrected_with=casts[0], **shared)
        numbers.append(seconds(lambda c=back, o=old: c.correct(o)) / (n * m))
        worst = 0.0
        for row in range(0, n, 40):
            exact = beam_positions(
                water, angles[row], times[row], transducer_depth=pings["transducer_depth"][row],
                surface_speed=pings["surface_sound_speed"][row],
            )  # fmt: skip
            apart = np.hypot(found["depth"][row] - exact.depth, found["across_track_distance"][row] - exact.across)
            worst = max(worst, float(np.nanmax(apart)))
        again = back.correct(old)
        assert np.nanmax(np.abs(again["depth"] - found["depth"])) < 1e-3, name
        assert worst < options.tolerance, (name, worst)
        cells = [f"{name:>16}", f"{len(water):>10}", *(f"{1e9 * number:10.1f}" for number in numbers)]
        print("".join([*cells, f"{1e3 * worst:10.2f}"]), flush=True)


def uncertainty():
    """Covariances of soundings by their table, against exact derivatives."""
    head = ("random", "in order", "marched", "build ms", "MB", "worst %")
    print(
        "\ncovariance of depth and distance across by sound speed, ns a beam, one thread; table to 2 % of a deviation"
    )
    print("".join([f"{'water':>16}", f"{'levels':>10}", *(f"{name:>10}" for name in head)]))
    out = tuple(np.empty(BEAMS) for _ in range(3))
    nothing, random = np.zeros(BEAMS), np.random.default_rng(9)
    for name, (depth, speed) in waters().items():
        water = causes(Profile(depth, speed))
        table = path_uncertainty(water, transducer_depth=TRANSDUCER, change=CHANGE)
        angles, _ = in_ping_order(water)
        below = water.depth[-1] * (0.5 + 0.2 * np.sin(np.arange(BEAMS) / 5e4)) - TRANSDUCER
        ordered = np.sin(np.radians(angles)), below
        mixed = np.sin(np.radians(random.uniform(-75.0, 75.0, BEAMS))), random.uniform(0.0, below.max(), BEAMS)
        few = [column[:1000].copy() for column in mixed]
        exact = exact_covariance(water, *few, TRANSDUCER, np.zeros(1000), water.shapes.values(), water.noise)
        worst = largest_miss(table.covariance(*few, slowness_per_speed=0.0), exact)
        assert worst < 0.02, (name, worst)
        numbers = [
            *(
                1e9 / BEAMS * seconds(lambda c=c, t=table: t.fill(*c, nothing, nothing, nothing + 0.3, nothing, out))
                for c in (mixed, ordered)
            ),
            1e6 * seconds(lambda w=water, f=few: beam_moves(w, *f, transducer_depth=TRANSDUCER)),
            1e3 * seconds(lambda w=water: path_uncertainty(w, transducer_depth=TRANSDUCER, change=CHANGE)),
            table.nbytes / 1e6,
            100.0 * worst,
        ]
        print("".join([f"{name:>16}", f"{len(water):>10}", *(f"{number:10.1f}" for number in numbers)]), flush=True)


if __name__ == "__main__":
    main()
