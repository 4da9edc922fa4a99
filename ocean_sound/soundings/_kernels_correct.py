"""Beams of a block of pings through each of their casts, added up by weight; `_kernels_finish` makes soundings of that.

Columns of a block have the shape (pings, beams), (pings, 1) for what belongs to pings, or (1, 1) for what is the same
everywhere. Beams are taken in chunks in their order, whatever the number of beams of a ping.
"""

# mypy: ignore-errors

from __future__ import annotations

from math import nan, sqrt

import numpy as np

from .._numba import kernel
from ._kernels import BAD, BEYOND, HIT, TURNED
from ._kernels_carry import CARRY_ROWS, carry_chunk, down_chunk, node_above
from ._kernels_directions import NOT_DOWNWARD, USABLE, measured, turned, why_none
from ._kernels_table import CHUNK

# What was found of a sounding; up to 6 as `_kernels_directions`.
FOUND_TURNED, FOUND_BEYOND, NO_TIME = 7, 8, 9
BELOW, ABOVE, IN_PART, SPEED_DIFFERS, NO_PLACE, NO_DOUBT = 14, 15, 16, 17, 18, 19

# The casts that serve a beam must hold at least this part of the weight. At a half the sounding moves no farther, where
# a cast drops out, than the casts are apart.
LEAST_PART = 0.5
WHOLE = 1.0 - 1e-9

TIED = 1e-3  # relative step of derivatives by differences: a thousandth, far wider than a table's error
NADIR = 1e-4  # sine below which derivatives are those of this sine: they are even functions of it


@kernel
def spread(column, begin, m, out):
    """A column's values for the beams from one on."""
    rows, wide = column.shape
    if rows == 1 and wide == 1:
        out[:] = column[0, 0]
    elif wide == m:
        flat = column.ravel()
        for i in range(out.size):
            out[i] = flat[begin + i]
    else:
        i, row, left = 0, begin // m, m - begin % m
        while i < out.size:
            end = min(i + left, out.size)
            value = column[row, 0]
            for each in range(i, end):
                out[each] = value
            i, row, left = end, row + 1, m


@kernel
def direct_chunk(begin, m, columns, switches, speeds, work, forward, starboard, by_speed, by_steering):
    """Directions of beams in the water at the transducer, and how their ray parameter changes with speeds.

    speeds: of sound at the transducers. by_speed: with that; by_steering: with the speed of steering; s2/m2.
    """
    fan, turns, level, direct = switches[0], switches[1], switches[2], switches[3]
    n = speeds.size
    first, second, ratio = work[0, :n], work[1, :n], work[2, :n]
    spread(columns[1], begin, m, first)
    spread(columns[2], begin, m, second)
    if direct:
        forward[:], starboard[:] = second, first
    else:
        for i in range(n):
            forward[i], starboard[i] = measured(first[i], second[i], fan)
    if not turns:
        for i in range(n):
            by_speed[i] = -sqrt(forward[i] * forward[i] + starboard[i] * starboard[i]) / (speeds[i] * speeds[i])
            by_steering[i] = by_speed[i]  # of a flat array whose speed of steering is taken from the cast
        return
    spread(columns[3], begin, m, ratio)
    for i in range(n):
        ratio[i] = speeds[i] / ratio[i]
    if level:
        for i in range(n):
            flat = forward[i] * forward[i] + starboard[i] * starboard[i] < 1.0
            forward[i] = ratio[i] * forward[i] if flat else nan
            starboard[i] *= ratio[i]
            by_speed[i] = 0.0
            by_steering[i] = -ratio[i] * sqrt(forward[i] * forward[i] + starboard[i] * starboard[i])
            by_steering[i] /= speeds[i] * speeds[i]
        return
    for c in range(4):
        spread(columns[4 + c], begin, m, work[3 + c, :n])
    for i in range(n):
        sin_r, cos_r, sin_q, cos_q = work[3, i], work[4, i], work[5, i], work[6, i]
        before_f, before_s, c2 = forward[i], starboard[i], speeds[i] * speeds[i]
        f, s, status = turned(before_f, before_s, ratio[i], sin_r, cos_r, sin_q, cos_q)
        f = f if before_f * before_f + before_s * before_s < 1.0 else nan
        forward[i], starboard[i] = f if status == USABLE else nan, s
        # The slowness along the face is fixed by the speed of steering; what is left, n/c, goes along the normal, whose
        # horizontal part along the beam is `lean`: d(n/c)/dc = -1/(n c²), and d(n/c)/dcs = (1 - n²)/(n c cs).
        u = max(sqrt(f * f + s * s), 1e-12)
        n_f, n_s = cos_r * sin_q, -sin_r
        normal = max(n_f * f + n_s * s + cos_r * cos_q * sqrt(max(1.0 - f * f - s * s, 0.0)), 1e-6)
        lean = (n_f * f + n_s * s) / u
        by_speed[i] = -lean / (normal * c2)
        by_steering[i] = ratio[i] * (lean * (1.0 / normal) - u) / c2


@kernel
def midway_chunk(ws, aways, times, f, s, moved_s, moved_f, speed, side, table, work, counts, statuses):
    """Directions, squared sines and times changed so that they lead from midway between transmission and reception.

    See `geometry.seen_from_midpoint`; f and s are cosines at z0.
    """
    n = ws.size
    top = table[0][table[0].size - 1]
    base = CARRY_ROWS
    was_f, was_s, was_t = work[base, :n], work[base + 1, :n], work[base + 2, :n]
    u, less, more = work[base + 3, :n], work[base + 4, :n], work[base + 5, :n]
    downs, reaches, nodes_above = work[base + 6, :n], work[base + 7, :n], work[base + 8, :n]
    passing, x_less, x_more = work[base + 9, :n], work[base + 10, :n], work[base + 11, :n]
    was_f[:], was_s[:], was_t[:] = f, s, times
    for _ in range(2):
        for i in range(n):
            u[i] = max(sqrt(f[i] * f[i] + s[i] * s[i]), NADIR)
            ws[i] = u[i] * u[i]
            more[i] = (u[i] * (1.0 + TIED)) ** 2 if ws[i] * (1.0 + TIED) ** 2 < top else ws[i]
            less[i] = (u[i] * (1.0 - TIED)) ** 2
        carry_chunk(ws, aways, times, speed, side, table, work, counts, downs, reaches, statuses)
        for i in range(n):
            nodes_above[i] = node_above(downs[i], table[7])
        down_chunk(less, aways, downs, nodes_above, speed, side, table, work, passing, x_less)
        down_chunk(more, aways, downs, nodes_above, speed, side, table, work, passing, x_more)
        for i in range(n):
            if statuses[i] != HIT or not x_more[i] > 0.0:
                continue
            low, high = sqrt(less[i]), sqrt(more[i])
            outward = (high - low) / (high * x_more[i] - low * x_less[i])
            sideways = 1.0 / reaches[i]
            h = sqrt(f[i] * f[i] + s[i] * s[i])
            along_f, along_s = (f[i] / h, s[i] / h) if h > 0.0 else (1.0, 0.0)
            y, x = 0.5 * moved_f[i], 0.5 * moved_s[i]
            radial = outward * (y * along_f + x * along_s)
            side_on = sideways * (x * along_f - y * along_s)
            q_f, q_s = radial * along_f - side_on * along_s, radial * along_s + side_on * along_f
            f[i], s[i] = was_f[i] - q_f, was_s[i] + q_s
            times[i] = was_t[i] - 0.5 * (y * q_f + x * q_s) / speed
    for i in range(n):
        ws[i] = f[i] * f[i] + s[i] * s[i]


@kernel
def through_cast(pings, m, columns, cast, switches, numbers, weights, speed, side, table, sums, doubts):
    """Beams of the pings from one to before another through one cast, added by weight to the sums.

    columns: two-way time, across- and along-track angle (or, with switches[3], cosines to starboard and forward),
    speed of steering, sine and cosine of the face's roll and pitch, their sum, way moved to reception to starboard and
    forward, depth of the transducer. cast: speed at the transducers, their distance below the table's top. switches:
    fan, turns, level, direct, moved, whether to refuse what is beyond the cast. numbers: depth of the table's top (of
    flattened water), 1 over the Earth's radius, first and last depth described. weights: of the cast, by ping.

    sums: weight, depth, across, along, weight of the heaviest cast that failed, why, bits of what was completed; each
    for all beams of the block. doubts: sine at the table's top, depth below the transducer, change of the ray parameter
    with the speed there and with that of steering; each for the beams of these pings.
    """
    refuse, moves = switches[5], switches[4]
    z0, bend, highest, lowest = numbers[0], numbers[1], numbers[2], numbers[3]
    total, depths, acrosses, alongs, failed, why, bits = sums
    sines, belows, by_speed, by_steering = doubts
    work, counts = np.empty((CARRY_ROWS + 26, CHUNK)), np.empty((2, CHUNK), dtype=np.int64)
    found = np.empty(CHUNK, dtype=np.int8)
    own = work[CARRY_ROWS + 12 :]
    for begin in range(pings[0] * m, pings[1] * m, CHUNK):
        n = min(CHUNK, pings[1] * m - begin)
        at = begin - pings[0] * m
        f, s, ws, times, aways = own[0, :n], own[1, :n], own[2, :n], own[3, :n], own[4, :n]
        speeds, downs, reaches, weight, source = own[5, :n], own[6, :n], own[7, :n], own[8, :n], own[9, :n]
        moved_s, moved_f = own[10, :n], own[11, :n]
        statuses = found[:n]
        spread(weights, begin, m, weight)
        spread(cast[0], begin, m, speeds)
        spread(cast[1], begin, m, aways)
        spread(columns[0], begin, m, times)
        spread(columns[11], begin, m, source)
        part = slice(at, at + n)
        direct_chunk(begin, m, columns, switches, speeds, work, f, s, by_speed[part], by_steering[part])
        sine, below = sines[part], belows[part]
        for i in range(n):
            w = f[i] * f[i] + s[i] * s[i]
            q = speed / speeds[i]
            sine[i] = sqrt(w) * q
            ws[i] = w * q * q if w < 1.0 else nan
            f[i], s[i], times[i] = f[i] * q, s[i] * q, 0.5 * times[i]
        if moves:
            spread(columns[9], begin, m, moved_s)
            spread(columns[10], begin, m, moved_f)
            midway_chunk(ws, aways, times, f, s, moved_s, moved_f, speed, side, table, work, counts, statuses)
        carry_chunk(ws, aways, times, speed, side, table, work, counts, downs, reaches, statuses)
        for i in range(n):
            e = (z0 + downs[i]) * bend
            downs[i] = (z0 + downs[i]) * (1.0 - e / 2.0 * (1.0 - e / 3.0 * (1.0 - e / 4.0)))
            below[i] = downs[i] - source[i]
        for i in range(n):
            b = begin + i
            code = 0
            if statuses[i] == TURNED:
                code = FOUND_TURNED
            elif statuses[i] == BAD:
                code = BAD_BEAM
            elif statuses[i] == BEYOND or (refuse and (downs[i] > lowest or source[i] < highest)):
                code = FOUND_BEYOND
            if code != 0:
                below[i] = nan
            if code == 0:
                share = weight[i]
                total[b] += share
                depths[b] += share * downs[i]
                acrosses[b] += share * s[i] * reaches[i]
                alongs[b] += share * f[i] * reaches[i]
                if share > 0.0:
                    bits[b] |= (1 if downs[i] > lowest else 0) | (2 if source[i] < highest else 0)
            elif weight[i] > failed[b]:
                failed[b] = weight[i]
                why[b] = code


BAD_BEAM = 20  # a time or a direction that can't be: `reasons` finds out which


@kernel
def reasons(m, columns, switches, speeds, why):
    """Why beams can't be traced: puts the reason in the place of `BAD_BEAM`. speeds: of sound at the transducers."""
    row = np.empty((11, 1))
    for b in range(why.size):
        if why[b] != BAD_BEAM:
            continue
        for c in range(4):
            spread(columns[c], b, m, row[c])
        spread(columns[8], b, m, row[4])
        if not row[0, 0] >= 0.0:
            why[b] = NO_TIME
        elif switches[3]:
            why[b] = 2
        else:
            why[b] = why_none(row[1, 0], row[2, 0], switches[0], switches[1], row[3, 0], row[4, 0])
            if why[b] == 5 and not switches[2]:
                for c in range(4):
                    spread(columns[4 + c], b, m, row[5 + c])
                spread(speeds, b, m, row[9])
                f, s = measured(row[1, 0], row[2, 0], switches[0])
                ratio = row[9, 0] / row[3, 0]
                _, _, status = turned(f, s, ratio, row[5, 0], row[6, 0], row[7, 0], row[8, 0])
                why[b] = NOT_DOWNWARD if status == NOT_DOWNWARD else 5


@kernel
def add_covariances(pings, m, weights, belows, found, sums):
    """Add variances of depth and of the distance across, found for the beams of some pings through one cast."""
    zz, xx = found
    for row in range(pings[0], pings[1]):
        weight, to, of = weights[row, 0], row * m, (row - pings[0]) * m
        if not weight > 0.0:
            continue
        for i in range(m):
            if belows[of + i] == belows[of + i]:
                sums[0][to + i] += weight * zz[of + i]
                sums[1][to + i] += weight * xx[of + i]
