"""Beams of many transducer depths through one table: on the way to it, by it, and back from a depth.

A table begins at the least depth of the transducer, z0. A beam that leaves from farther down, with the same ray
parameter, is the one that left z0 earlier: by the time T, and farther back by the distance X, that it takes from z0 to
the transducer. Both are exact: they are summed over the few layers between. A beam that would not get from z0 to the
transducer (there is faster water above) is marched exactly from where it is.

`downs` are distances below z0 here, `aways` those of the transducers, `ws` squared sines at z0 (of 1 and more for a
beam that does not exist there); distances across are over the sine at z0.
"""

# mypy: ignore-errors

from __future__ import annotations

from math import atanh, inf, nan, sqrt

import numpy as np

from .._numba import kernel
from ..rays._kernels import asinh_ratio
from ._kernels import BAD, BEYOND, HIT, TURNED, time_down, within
from ._kernels_table import CHUNK, LOCATE_ROWS, VERTICAL, cell_of, cubic, locate_chunk, march_on

CARRY_ROWS = LOCATE_ROWS + 6  # work columns of `carry_chunk`


@kernel
def lead_chunk(ws, aways, speed, side, ks, times, reaches, leasts):
    """Time and distance across from z0 to the transducers, and the least k² on the way."""
    away, thickness, gradient, _, excess, ratio, _, _ = side
    most = 0.0
    for i in range(ws.size):
        rest = 1.0 - ws[i]
        ks[i], times[i], reaches[i], leasts[i] = sqrt(max(rest, 0.0)), 0.0, 0.0, rest
        most = max(most, aways[i])
    for j in range(gradient.size):
        if away[j] >= most:
            break
        for i in range(ws.size):
            h = max(min(aways[i] - away[j], thickness[j]), 0.0)
            r1 = ratio[j]
            rise = gradient[j] * h / speed
            r2 = r1 + rise
            rest = 1.0 - ws[i] * (1.0 + excess[j] + rise * (r1 + r2))
            k = sqrt(max(rest, 0.0))
            m = (r1 + r2) / max(ks[i] + k, 1e-150)
            q = 0.5 * h * sqrt((1.0 + ws[i] * m * m) / (r1 * r2)) / speed
            y = gradient[j] * q
            a = y * y
            times[i] += 2.0 * q * (1.0 - a * (1 / 6 - a * (3 / 40 - a * (5 / 112 - a * 35 / 1152))))
            reaches[i] += h * m
            leasts[i] = min(leasts[i], rest if h > 0.0 else inf)
            ks[i] = k


@kernel
def march_from(start, w, time, speed, side):
    """A beam marched exactly from a distance below z0: distance down from z0, distance across, status."""
    away, _, gradient, _, excess, ratio, _, _ = side
    j = 0
    while j < gradient.size and away[j + 1] <= start:
        j += 1
    layer = min(j, gradient.size - 1)
    g, d = gradient[layer], start - away[j]
    r = ratio[j] + g * d / speed
    u2 = w * r * r
    if not (u2 < 1.0 and r > 0.0 and 0.0 <= time < inf):
        return nan, nan, BAD
    u, k = sqrt(u2), sqrt(1.0 - u2)
    end, x, out = inf, 0.0, 0.0
    turns = j >= gradient.size or 1.0 - w * (1.0 + excess[j + 1]) <= 0.0
    if turns:
        end = atanh(k) / g if g > 0.0 and u > 0.0 else inf
    else:
        h, r2 = away[j + 1] - start, ratio[j + 1]
        out = sqrt(1.0 - w * (1.0 + excess[j + 1]))
        m = sqrt(w) * (r + r2) / (k + out)
        q = 0.5 * h * sqrt((1.0 + m * m) / (r * r2)) / speed
        end, x = 2.0 * q * asinh_ratio(g * q), h * m
    if time <= end:
        dx, dz, _, _, _ = within(time, speed * r, u, k, g)
        return start + dz, dx, BEYOND if j >= gradient.size else HIT
    if turns:
        return nan, nan, TURNED
    down, across, status, _ = march_on(j + 1, end, x, out, w, time, speed, side)
    return down, across, status


@kernel
def carry_chunk(ws, aways, times, speed, side, table, work, counts, downs, reaches, statuses):
    """Where beams are a time after they left their transducers: as `locate_chunk`, which see for the work arrays."""
    n = ws.size
    rest = work[LOCATE_ROWS:]
    ks, lead_times, lead_reaches, leasts, since = rest[0, :n], rest[1, :n], rest[2, :n], rest[3, :n], rest[4, :n]
    lead_chunk(ws, aways, speed, side, ks, lead_times, lead_reaches, leasts)
    for i in range(n):
        since[i] = times[i] + lead_times[i]
    locate_chunk(ws, since, speed, side, table, work, counts, downs, reaches, statuses)
    for i in range(n):
        reaches[i] -= lead_reaches[i]
        if not (leasts[i] > 0.0 and times[i] >= 0.0):
            downs[i], across, statuses[i] = march_from(aways[i], max(ws[i], VERTICAL), times[i], speed, side)
            reaches[i] = across / sqrt(max(ws[i], VERTICAL))


@kernel
def node_above(down, nodes):
    """The last node at or above a distance below z0."""
    low, high = 0, nodes.shape[0]
    while high - low > 1:
        middle = (low + high) // 2
        if nodes[middle, 0] <= down:
            low = middle
        else:
            high = middle
    return low


@kernel
def down_chunk(ws, aways, downs, nodes_above, speed, side, table, work, times, reaches):
    """Time and distance across of beams from their transducers to distances below z0.

    NaN where a beam turns before, or the water ends. nodes_above: by `node_above`; negative for beams to be left out.
    """
    n = ws.size
    ks, lead_times, lead_reaches, leasts = work[0, :n], work[1, :n], work[2, :n], work[3, :n]
    lead_chunk(ws, aways, speed, side, ks, lead_times, lead_reaches, leasts)
    edges, spans, rows, nodes = table[0], table[4], table[6], table[7]
    top, deepest = edges[edges.size - 1], nodes[nodes.shape[0] - 1, 0]
    for i in range(n):
        w, down, j = ws[i], downs[i], int(nodes_above[i])
        if j < 0:
            continue
        if not (leasts[i] > 0.0 and w < 1.0 and 0.0 <= down <= deepest):
            times[i], reaches[i] = nan, nan
            continue
        cell, s, last = 0, 0.0, -1
        if w < top:
            cell, s = cell_of(w, table)
            last = spans[cell, 0]
        if j > last:
            u = sqrt(max(w, VERTICAL))
            time, across, _ = time_down(u, sqrt(1.0 - w), down, speed, side)
            times[i], reaches[i] = time - lead_times[i], across / u - lead_reaches[i]
            continue
        r, h, g, r1 = spans[cell, 1] + j, down - nodes[j, 0], 2.0 * nodes[j, 2], nodes[j, 4]
        rise = g * h / speed
        r2 = r1 + rise
        before = 1.0 - w * nodes[j, 1]
        after = before - w * rise * (r1 + r2)
        if before < 0.0 or after <= 0.0:
            times[i], reaches[i] = nan, nan
            continue
        m = (r1 + r2) / (sqrt(before) + sqrt(after))
        q = 0.5 * h * sqrt((1.0 + w * m * m) / (r1 * r2)) / speed
        times[i] = cubic(rows, r, 0, s) + 2.0 * q * asinh_ratio(g * q) - lead_times[i]
        reaches[i] = cubic(rows, r, 4, s) + h * m - lead_reaches[i]


BACK_HIT, BACK_TURNED, BACK_BEYOND, BACK_BAD = 0, 1, 2, 3
MISSED, EXACT = 1e-6, 1e-7  # m: farther than the first a search has failed, nearer than the second it ends
STEEPENS, TRIES = 1e6, 60  # the largest tangent in the fastest water, and tries


@kernel
def aim_chunk(targets, downs, aways, speed, side, table, work, sines2, times, statuses):
    """Squared sines at z0, and times, of the beams that get from their transducers so far across at so far down.

    As `geometry.taken_back`, whose notes say why its secants need no safeguards, but by the table. BACK_TURNED where
    the search fails, for one reason or another. work: CARRY_ROWS + 10 rows.
    """
    n = targets.size
    rows = work[CARRY_ROWS:]
    tangents, before, x_before, fastest = rows[0, :n], rows[1, :n], rows[2, :n], rows[3, :n]
    nodes_above, ws, found, passing = rows[4, :n], rows[5, :n], rows[6, :n], rows[7, :n]
    active = rows[8, :n]
    nodes, excess, peak = table[7], side[4], side[6]
    deepest = nodes[nodes.shape[0] - 1, 0]
    for i in range(n):
        statuses[i], sines2[i], times[i] = BACK_BAD, nan, nan
        h, active[i] = downs[i] - aways[i], 0.0
        tangents[i], before[i], x_before[i], fastest[i], nodes_above[i] = 0.0, 0.0, 0.0, 0.0, -1.0
        if not (h > 0.0 and targets[i] >= 0.0):
            continue
        if downs[i] > deepest:
            statuses[i] = BACK_BEYOND
            continue
        j = min(node_above(downs[i], nodes), nodes.shape[0] - 2)
        rise = 2.0 * nodes[j, 2] * (downs[i] - nodes[j, 0]) / speed
        here = excess[j] + rise * (2.0 * nodes[j, 4] + rise)
        nodes_above[i], fastest[i] = j, max(here, peak[j], 0.0)
        tangents[i], statuses[i], active[i] = targets[i] / h, BACK_TURNED, 1.0
    for _ in range(TRIES):
        going = 0
        for i in range(n):
            s2 = tangents[i] * tangents[i]
            ws[i] = s2 / ((1.0 + s2) * (1.0 + fastest[i])) if active[i] > 0.0 else 0.0
        down_chunk(ws, aways, downs, nodes_above, speed, side, table, work, passing, found)
        for i in range(n):
            if active[i] == 0.0:
                continue
            x = sqrt(ws[i]) * found[i]
            short = targets[i] - x
            if abs(short) <= MISSED:
                sines2[i], times[i], statuses[i] = ws[i], passing[i], BACK_HIT
            rise, run = x - x_before[i], tangents[i] - before[i]
            if not (abs(short) > EXACT and rise > 0.0 and run > 0.0 and tangents[i] < STEEPENS):
                active[i], nodes_above[i] = 0.0, -1.0
                continue
            before[i], x_before[i] = tangents[i], x
            tangents[i] += short * run / rise
            going += 1
        if going == 0:
            break


@kernel
def aim(targets, downs, aways, speed, side, table, sines2, times, statuses):
    """As `aim_chunk`, for any number of beams."""
    work = np.empty((CARRY_ROWS + 10, CHUNK))
    for begin in range(0, targets.size, CHUNK):
        part = slice(begin, min(begin + CHUNK, targets.size))
        aim_chunk(
            targets[part], downs[part], aways[part], speed, side, table, work, sines2[part], times[part],
            statuses[part],
        )  # fmt: skip
