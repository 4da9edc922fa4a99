"""Rays through a section: the ray equations with those of a neighbouring ray, in adaptive steps between boundaries.

With w = (c_ref/c)², position r and P = sqrt(w) times the direction of travel, over a parameter of which one unit is
about a metre of path,

    r'' = grad(w)/2,   r' = P,   tau' = w,   length' = sqrt(w),   v'' = H v/2,

where tau is c_ref times the travel time, H the matrix of second derivatives of w, and v the change of the ray with
its launch angle (m per radian at equal parameter): its part across the ray is the spreading q. All of these are of the
form y'' = f(position) or y' = f(position), so a method of Nystroem's kind does without half of the work of one for
first-order equations: six stages, the last one the next step's first, of order 6 with an error estimate of order 4
(Dormand, El-Mikkawy and Prince 1987, IMA J. Numer. Anal. 7, 235; the coefficients from memory, their order conditions
checked in exact fractions).

Between the ends of a step position is the polynomial of fifth degree that takes position, P and P' there. In Bernstein
form it lies within the hull of its six points: a boundary below all of them is not met. Where that can't be said the
interval is halved, so no crossing is missed; a crossing found is met again by a shorter step from the step's start.
"""

# mypy: ignore-errors

from __future__ import annotations

from math import asin, atan2, cos, degrees, radians, sin, sqrt

import numpy as np

from .._numba import kernel
from ..section._kernels_field import field
from ..section._kernels_seabed import seabed
from ._kernels_step import (
    DERIVATIVES,
    LENGTH,
    PX,
    PZ,
    QX,
    QZ,
    STAGES,
    STATE,
    TAU,
    VX,
    VZ,
    X,
    Z,
    before_kink,
    evaluate,
    nudge,
    spreading,
    step,
)

REACHED, AT_SURFACE, AT_SEABED, TURNED_BACK, ABSORBED, STUCK = 0, 2, 3, 4, 5, 6  # how a ray ends
# What a step meets; of numpy's type, since each function is compiled again for each number written out.
NOTHING, SURFACE, SEABED, TARGET = np.arange(4)

# The estimate is of order 4, the step of order 6 where the field is smooth: so much of the estimate is taken. It and
# KINK were set by runs against steps a thousand times finer.
PESSIMISM = 0.02
SAFETY, GROWTH = 0.85, 3.0
FIRST_STEP, SHORTEST_STEP, MOST_STEPS = 100.0, 1e-7, 1_000_000
FINEST = 2.0**-34  # part of a step below which a touch counts as none
SHORT = 1e-4  # m; see meet
NEAR = 0.5  # how near, m, a Taylor series to second order is exact enough
ON_BOUNDARY = 1e-9  # m
LEVEL = 1e-9  # sine of a grazing angle that no reflection can be told from
ADVANCE, MOST_IDLE = 1e-6, 16  # bounces that advance by less, m, and how many in a row are borne


@kernel
def hull(y, first, out, last, h, points):
    """The six points of the polynomial between the ends of a step: range in row 0, depth in row 1."""
    for i in range(2):
        a, b = y[i], out[i]
        da, db = 0.2 * h * y[PX + i], 0.2 * h * out[PX + i]
        points[i, 0], points[i, 5] = a, b
        points[i, 1], points[i, 4] = a + da, b - db
        points[i, 2] = a + 2.0 * da + 0.05 * h * h * first[i]
        points[i, 3] = b - 2.0 * db + 0.05 * h * h * last[i]


@kernel
def at_part(row, t):
    """The polynomial at a part t of its interval."""
    u = 1.0 - t
    a, b, c, d, e = (
        u * row[0] + t * row[1],
        u * row[1] + t * row[2],
        u * row[2] + t * row[3],
        u * row[3] + t * row[4],
        u * row[4] + t * row[5],
    )
    a, b, c, d = u * a + t * b, u * b + t * c, u * c + t * d, u * d + t * e
    a, b, c = u * a + t * b, u * b + t * c, u * c + t * d
    return u * (u * a + t * b) + t * (u * b + t * c)


@kernel
def cut(row, start, end, piece):
    """The points of the polynomial between two parts of its interval."""
    for i in range(6):
        piece[i] = row[i]
    for level in range(5, 0, -1):  # the first `end` of it ...
        for i in range(5, 5 - level, -1):
            piece[i] += (end - 1.0) * (piece[i] - piece[i - 1])
    t = start / end
    for level in range(5, 0, -1):  # ... and of that the rest after `start`
        for i in range(level):
            piece[i] += t * (piece[i + 1] - piece[i])


@kernel
def slope_bounds(start, end, floor):
    """The least and greatest slope of the seabed between two ranges; within a segment the slope is a parabola."""
    nodes = floor[0]
    i = np.searchsorted(nodes, start, side="right")
    _, before, _ = seabed(start, floor[1])
    low, high, position = before, before, start
    while position < end:
        upto = min(nodes[i], end) if i < nodes.size else end
        _, middle, _ = seabed(0.5 * (position + upto), floor[1])
        _, after, _ = seabed(upto, floor[1])
        over = 0.125 * abs(before + after - 2.0 * middle)  # a parabola goes no farther beyond three of its values
        low = min(low, middle - over, after)
        high = max(high, middle + over, after)
        position, before = upto, after
        i += 1
    return low, high


@kernel
def shallowest(start, end, frame, depths):
    """A depth that the seabed between two ranges is nowhere above."""
    last = depths.size - 1
    i = int(min(max((start - frame[0]) * frame[1], 0.0), last))
    j = int(min(max((end - frame[0]) * frame[1], 0.0), last))
    low = depths[i]
    for m in range(i + 1, j + 1):
        low = min(low, depths[m])
    return low


@kernel
def room(kind, x, z, target, floor):
    """How far a point is from what a ray may meet: positive before it, negative beyond."""
    if kind == SURFACE:
        return z
    if kind == TARGET:
        return target - x
    return seabed(x, floor[1])[0] - z


@kernel
def first_met(kind, points, target, floor, piece):
    """The part of a step after which the ray first meets a boundary; 2 if it does not.

    The lower bound of the room left is a polynomial with the points low[i]; room at the very start counts as none, so
    that a ray may leave a boundary.
    """
    start, size = 0.0, 1.0
    for _ in range(4000):
        end = min(start + size, 1.0)
        cut(points[0], start, end, piece[0])
        cut(points[1], start, end, piece[1])
        x, z = piece[0], piece[1]
        least, most, depth = 0.0, 0.0, 0.0
        if kind == SEABED:
            least, most = slope_bounds(x[0], max(x[5], x[0]), floor)
            depth = seabed(x[0], floor[1])[0]
        clear, falls, before = True, True, 0.0
        for i in range(6):
            if kind == SEABED:
                low = depth + min(least * (x[i] - x[0]), most * (x[i] - x[0])) - z[i]
            else:
                low = room(kind, x[i], z[i], target, floor)
            if i > 0:
                clear = clear and low > 0.0
                dx, dz = x[i] - x[i - 1], z[i] - z[i - 1]
                rise = max(least * dx, most * dx) - dz if kind == SEABED else low - before
                falls = falls and rise < 0.0
            before = low
        if clear:
            if end >= 1.0:
                return 2.0
            start, size = end, 2.0 * size
            continue
        beyond = room(kind, x[5], z[5], target, floor) <= 0.0
        if beyond and (falls or size <= FINEST):
            return root(kind, points, start, end, target, floor)
        if size <= FINEST:
            start = end
            if start >= 1.0:
                return 2.0
            continue
        size *= 0.5
    return 2.0


@kernel
def root(kind, points, start, end, target, floor):
    """Where the room left falls to nothing between two parts of a step, by false position with halved weights."""
    a, b = start, end
    left = room(kind, at_part(points[0], a), at_part(points[1], a), target, floor)
    right = room(kind, at_part(points[0], b), at_part(points[1], b), target, floor)
    if left <= 0.0:
        return a
    for _ in range(60):
        middle = b - right * (b - a) / (right - left)
        if not a < middle < b:
            break
        here = room(kind, at_part(points[0], middle), at_part(points[1], middle), target, floor)
        if abs(here) < ON_BOUNDARY:
            return middle
        if here > 0.0:
            a, left, right = middle, here, 0.5 * right
        else:
            b, right, left = middle, here, 0.5 * left
    return b


@kernel
def meet(kind, y, part, h, target, water, floor, k, out):
    """Step from y to what it meets after a part of the step h; returned: the size of that step, negative if lost."""
    # The field's slope breaks off at the end of a section: a target is stepped to from this side of it.
    short = SHORT if kind == TARGET else 0.0
    size = max(part * h - short, 0.0)
    met = False
    for _ in range(12):
        step(y, size, water, floor[5], k, out)
        for _ in range(2):
            left = room(kind, out[X], out[Z], target, floor)
            met = abs(left) < ON_BOUNDARY
            slope = seabed(out[X], floor[1])[1] if kind == SEABED else 0.0
            rate = out[PZ] if kind == SURFACE else (-out[PX] if kind == TARGET else slope * out[PX] - out[PZ])
            if met or not rate < 0.0:
                break
            delta = -left / rate
            if abs(delta) > NEAR or (kind == TARGET and delta < 0.0 < size):
                size = min(max(size + delta - short, 0.0), h)
                break
            size = min(max(size + delta, 0.0), h)
            nudge(out, delta, k[STAGES - 1])
            met = True
        if met:
            break
    if not met:
        return -1.0
    if kind == SURFACE:
        out[Z] = 0.0
    elif kind == TARGET:
        out[X] = target
    else:
        out[Z] = seabed(out[X], floor[1])[0]
    evaluate(out[X], out[Z], out[VX], out[VZ], water, floor[5], k[STAGES - 1])
    return size


@kernel
def reflect(y, k, slope, curvature):
    """Reflect a ray at a boundary of that slope and curvature, with k the derivatives there; the sine of its grazing.

    The neighbouring ray meets the boundary a little sooner or later, elsewhere, where the normal points otherwise.
    """
    length = sqrt(1.0 + slope * slope)
    nx, nz = -slope / length, 1.0 / length
    across = nx * y[PX] + nz * y[PZ]
    sine = abs(across) / sqrt(k[2])
    if not sine > LEVEL:
        return 0.0
    delta = -(nx * y[VX] + nz * y[VZ]) / across
    qx, qz = y[QX] + delta * k[0], y[QZ] + delta * k[1]
    turn = curvature / (length * length) * (y[VX] + delta * y[PX])  # of the normal, rad
    tx, tz = -nz * turn, nx * turn  # the change of the normal
    px, pz = y[PX] - 2.0 * across * nx, y[PZ] - 2.0 * across * nz
    along = nx * qx + nz * qz + tx * y[PX] + tz * y[PZ]
    qx -= 2.0 * (along * nx + across * tx)
    qz -= 2.0 * (along * nz + across * tz)
    y[VX] += delta * (y[PX] - px)
    y[VZ] += delta * (y[PZ] - pz)
    y[QX], y[QZ] = qx - delta * k[0], qz - delta * k[1]
    y[PX], y[PZ] = px, pz
    return sine


@kernel
def extremes(points):
    """Greatest and least depth of the hull of a step, the least without its start, which may lie on the surface."""
    lowest, highest = points[1, 0], points[1, 1]
    for i in range(1, 6):
        lowest, highest = max(lowest, points[1, i]), min(highest, points[1, i])
    return lowest, highest


@kernel
def near_boundary(points, frame, depths):
    """Whether the hull of a step can't rule out that it meets surface or seabed."""
    lowest, highest = extremes(points)
    return not (highest > 0.0 and lowest < shallowest(points[0, 0], points[0, 5], frame, depths))


@kernel
def next_event(points, floor, piece):
    """What a step meets first of surface and seabed, and after which part of it."""
    part, kind = 2.0, NOTHING
    lowest, highest = extremes(points)
    if not highest > 0.0:
        part = first_met(SURFACE, points, 0.0, floor, piece)
        if part <= 1.0:
            kind = SURFACE
    if not lowest < shallowest(points[0, 0], points[0, 5], floor[2], floor[3]):
        deep = first_met(SEABED, points, 0.0, floor, piece)
        if deep < part:
            return SEABED, deep
    return kind, part


@kernel
def sample(points, y, out, k, h, i, interval, path):
    """Set the points of a path, evenly spaced in time, that fall in a step; returned: the first that does not."""
    while i < path.shape[1] - 1 and i * interval <= out[TAU]:
        a, b = y[TAU], out[TAU]
        t = 0.0 if b <= a else (i * interval - a) / (b - a)
        da, db = 0.2 * h * k[0, 2], 0.2 * h * k[STAGES - 1, 2]
        bend_a = 0.1 * h * h * (k[0, 0] * y[PX] + k[0, 1] * y[PZ])
        bend_b = 0.1 * h * h * (k[STAGES - 1, 0] * out[PX] + k[STAGES - 1, 1] * out[PZ])
        row = points[2]
        row[0], row[1], row[2] = a, a + da, a + 2.0 * da + bend_a
        row[3], row[4], row[5] = b - 2.0 * db + bend_b, b - db, b
        if b > a:
            for _ in range(8):
                t -= (at_part(row, t) - i * interval) / (b - a)
            t = min(max(t, 0.0), 1.0)
        path[0, i], path[1, i] = at_part(points[0], t), at_part(points[1], t)
        i += 1
    return i


@kernel
def absorbs(x, floor):
    """Whether the seabed there sends nothing back."""
    edges = floor[4]
    found = False
    for i in range(edges.shape[0]):
        found |= edges[i, 0] <= x < edges[i, 1]
    return found


@kernel
def note(y, parity, counts, status, values, numbers):
    """What is known of a ray where it is: range, depth, tau, path length, angle, spreading; counts and status."""
    values[0], values[1], values[2], values[3] = y[X], y[Z], y[TAU], y[LENGTH]
    values[4], values[5] = degrees(atan2(y[PZ], y[PX])), parity * spreading(y)
    for i in range(4):
        numbers[i] = counts[i]
    numbers[4] = status


@kernel
def tally(y, heading, side, parity, counts):
    """Count a turn and a caustic where signs have changed; returned: the sign of spreading from here on."""
    if y[PZ] * heading < 0.0:
        counts[0] += 1
    if parity * spreading(y) * side < 0.0:
        counts[3] += 1
        return -side
    return side


@kernel
def pass_targets(target, y, size, targets, signs, water, floor, work, status, values, numbers):
    """Note the ray at each target within a step of that size; returned: the next target, and whether none was lost."""
    k, spare, out, beside, points, _, counts = work
    heading, side, parity = signs
    while target < targets.size and targets[target] <= out[X]:
        hull(y, k[0], out, k[STAGES - 1], size, points)
        part = root(TARGET, points, 0.0, 1.0, targets[target], floor)
        spare[0] = k[0]
        if meet(TARGET, y, part, size, targets[target], water, floor, spare, beside) < 0.0:
            return target, False
        turns, caustics = counts[0], counts[3]
        tally(beside, heading, side, parity, counts)
        note(beside, parity, counts, status, values[target], numbers[target])
        counts[0], counts[3] = turns, caustics
        target += 1
    return target, True


@kernel
def bounce(kind, y, k, floor, limits, counts, bounces):
    """Send a ray back from surface or seabed, if it may go on; returned: how it ends, REACHED if it does not."""
    which = 1 if kind == SURFACE else 2
    if counts[which] >= limits[which - 1] or counts[1] + counts[2] >= limits[2]:
        return AT_SURFACE if kind == SURFACE else AT_SEABED
    slope, curvature = 0.0, 0.0
    if kind == SEABED:
        if absorbs(y[X], floor):
            return ABSORBED
        _, slope, curvature = seabed(y[X], floor[1])
    sine = reflect(y, k[0], slope, curvature)
    if sine == 0.0:
        return STUCK
    i = counts[1] + counts[2]
    if i < bounces.shape[0]:
        bounces[i, 0], bounces[i, 1], bounces[i, 2] = kind, y[X], degrees(asin(min(sine, 1.0)))
    counts[which] += 1
    return REACHED


@kernel
def trace_one(y, targets, water, floor, tolerances, limits, work, values, numbers, bounces, interval, path):
    """Follow a ray past each target range; see `trace_fan`."""
    k, _, out, _, points, piece, counts = work
    metres, taus = tolerances
    last = targets.size - 1
    counts[:] = 0
    evaluate(y[X], y[Z], y[VX], y[VZ], water, floor[5], k[0])
    h, target, status, parity, idle, sampled, previous = FIRST_STEP, counts[0], REACHED, 1.0, 0, counts[0], y[X]
    heading, side = y[PZ], 1.0
    steps, most = 0, 1e300
    while status == REACHED:
        steps += 1
        ahead = targets[last] - y[X]
        ahead = min(ahead / y[PX] if y[PX] > 0.0 else 1e300, 100.0 * (targets[last] + 1.0))
        h = min(h, 1.01 * ahead + 1.0)
        wish = h
        h = before_kink(y, k, h, water, floor[6], metres / (ahead * (y[LENGTH] + ahead)))
        e_position, e_p, e_tau = step(y, h, water, floor[5], k, out)
        share = PESSIMISM * (y[LENGTH] + ahead) / h
        error = share * max((e_position + e_p * ahead) / metres, e_tau / taus)
        if not error <= 1.0:
            h *= max(0.2, SAFETY / sqrt(sqrt(error))) if error > 1.0 else 0.2
            most = h
            for i in range(1, STAGES):  # what is not a number must not stay
                for m in range(DERIVATIVES):
                    k[i, m] = 0.0
            if h < SHORTEST_STEP or steps > MOST_STEPS:
                status = STUCK
            continue
        grown = min(h * min(GROWTH, SAFETY / sqrt(sqrt(error)) if error > 0.0 else GROWTH), most)
        most = 1e300
        hull(y, k[0], out, k[STAGES - 1], h, points)
        kind, part, size = NOTHING, 2.0, h
        if near_boundary(points, floor[2], floor[3]):
            kind, part = next_event(points, floor, piece)
        if kind != NOTHING:
            size = meet(kind, y, part, h, 0.0, water, floor, k, out)
            if size < 0.0 and h > SHORTEST_STEP and steps <= MOST_STEPS:
                h *= 0.5  # too long for its polynomial to say where it meets the boundary
                most = h
                continue
        found = size >= 0.0
        # what is seldom needed is not called: the arrays handed over cost as much as a stage
        if found and targets[target] <= out[X]:
            signs = (heading, side, parity)
            target, found = pass_targets(target, y, size, targets, signs, water, floor, work, status, values, numbers)
        if not found:
            status = STUCK
            break
        if path.shape[1]:
            hull(y, k[0], out, k[STAGES - 1], size, points)
            sampled = sample(points, y, out, k, size, sampled, interval, path)
        if target > last:
            break
        for i in range(STATE):
            y[i] = out[i]
        for i in range(DERIVATIVES):
            k[0, i] = k[STAGES - 1, i]
        side = tally(y, heading, side, parity, counts)
        if kind != NOTHING:
            status = bounce(kind, y, k, floor, limits, counts, bounces)
            if status != REACHED:
                break
            parity = -parity
            idle = idle + 1 if y[X] - previous < ADVANCE and y[LENGTH] > 0.0 else 0
            previous = y[X]
            evaluate(y[X], y[Z], y[VX], y[VZ], water, floor[5], k[0])
        if y[PZ] != 0.0:
            heading = y[PZ]
        if not y[PX] > 0.0:
            status = TURNED_BACK
        h = grown if h == wish else max(grown, wish)
        if steps > MOST_STEPS or idle > MOST_IDLE:
            status = STUCK
    while target <= last:
        note(y, parity, counts, status, values[target], numbers[target])
        target += 1


@kernel
def trace_fan(angles, source, targets, water, floor, tolerances, limits, values, numbers, bounces, paths):
    """Trace each launch angle (degrees) past each of the target ranges (m, increasing).

    water: the arrays of the speed field. floor: nodes of the seabed, its arrays, [first range, bins per metre], the
    shallowest depth in each bin, the intervals of range that absorb, shape (n, 2), one over the radius of the Earth
    where it was flattened, else 0, and the kinks of the speed field in depth and in range. tolerances: metres of
    position, and metres of tau. limits: of surface bounces, of seabed bounces, of both together. values (rays, targets,
    6): range, depth, tau, path length, angle (degrees), spreading, signed by caustics. numbers (rays, targets, 5):
    turns, surface bounces, seabed bounces, caustics, status; a ray that ends before a target has there what it had
    where it ended. bounces (rays, n, 3): surface or seabed, range, grazing angle. paths (rays, 2, points): range and
    depth, evenly spaced in time up to the tau in `values`, which must have been set by a run without paths; none if
    there are no points.
    """
    work = (
        np.zeros((STAGES, DERIVATIVES)),
        np.zeros((STAGES, DERIVATIVES)),
        np.empty(STATE),
        np.empty(STATE),
        np.empty((3, 6)),
        np.empty((2, 6)),
        np.zeros(4, dtype=np.int64),
    )
    y = np.empty(STATE)
    speed = sqrt(field(source[0], source[1], water)[0])
    for i in range(angles.size):
        theta = radians(angles[i])
        sine, cosine = sin(theta), cos(theta)
        y[:] = 0.0
        y[X], y[Z] = source[0], source[1]
        y[PX], y[PZ] = speed * cosine, speed * sine
        y[QX], y[QZ] = -speed * sine, speed * cosine
        points = paths.shape[2]
        interval = values[i, 0, 2] / (points - 1) if points else 0.0
        trace_one(
            y, targets, water, floor, tolerances, limits, work, values[i], numbers[i], bounces[i], interval, paths[i]
        )
        if points:
            paths[i, 0, points - 1], paths[i, 1, points - 1] = values[i, 0, 0], values[i, 0, 1]
