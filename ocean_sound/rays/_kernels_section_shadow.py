"""Which depths the rays of a source reach at each range of a section, filled in between neighbouring rays.

In water whose speed is smooth the depth of a ray at a range is a continuous function of its launch angle, through turns
and through reflections: all depths between two neighbouring rays are reached. What a class of paths forbids (a bounce)
sets in at a range that changes continuously too, but for rays tangent to a boundary; so where one of two neighbours has
just touched a boundary, all is reached from the other one to that boundary. What must be found by finer angles is where
this ends abruptly, where rays fold back between two neighbours, and where they part beyond measure.
"""

# mypy: ignore-errors

from __future__ import annotations

from math import sqrt

import numpy as np

from .._numba import kernel

UNKNOWN, SURFACE, SEABED, LIMIT = 0, 1, 2, 3  # what ends a ray's belonging to a class of paths, if anything does
NO_BOUNCE, SURFACE_BOUNCES, ANY_BOUNCES = 0, 1, 2
STEP = 2  # ranges by which neighbouring rays may differ in where they touch a boundary, to count as continuous


@kernel
def parts(gap, x, width, cell, most):
    """Whether two rays, an angle `width` apart (rad) and `gap` apart at range x, have parted beyond measure."""
    return gap > cell and gap > most * x * width


@kernel
def overshoot(a, b, slope_a, slope_b):
    """How far the cubic through two values with slopes at both ends (per unit interval) leaves the span of the two."""
    rise = b - a
    # p' = A t² + B t + C
    first, second, third = 3.0 * (slope_a + slope_b - 2.0 * rise), 2.0 * (3.0 * rise - 2.0 * slope_a - slope_b), slope_a
    root = second * second - 4.0 * first * third
    if not root > 0.0:
        return 0.0
    low, high, beyond = min(a, b), max(a, b), 0.0
    far = -0.5 * (second + (sqrt(root) if second >= 0.0 else -sqrt(root)))
    for i in range(2):
        above, below = (far, first) if i == 0 else (third, far)
        if below == 0.0:
            continue
        t = above / below
        if 0.0 < t < 1.0:
            value = a + t * (third + t * (0.5 * second + t * first / 3.0))
            beyond = max(beyond, value - high, low - value)
    return beyond


@kernel
def judge(pairs, angles, depth, slope, until, why, targets, cell, most, finest, flags):
    """Set the flag of each pair (i, i + 1) of neighbouring rays between which a further one is needed.

    pairs: each i. angles (rays,): radians. depth, slope (rays, targets): m and m per radian, at a range. until
    (classes, rays): at how many targets the ray belongs to the class; why: what ended that. cell: m, the detail wanted.
    most: how much wider than straight rays two neighbours may be. finest: pairs nearer than this, rad, are left.
    """
    for m in range(pairs.size):
        i = pairs[m]
        flags[m] = False
        width = angles[i + 1] - angles[i]
        if width <= finest:
            continue
        for c in range(until.shape[0]):
            apart = abs(until[c, i] - until[c, i + 1]) > STEP
            flags[m] |= apart and why[c, i] != LIMIT and why[c, i + 1] != LIMIT
        if flags[m]:
            continue
        for j in range(min(until[SURFACE_BOUNCES, i], until[SURFACE_BOUNCES, i + 1])):
            a, b = depth[i, j], depth[i + 1, j]
            if (
                parts(abs(b - a), targets[j], width, cell, most)
                or overshoot(a, b, slope[i, j] * width, slope[i + 1, j] * width) > 0.5 * cell
            ):
                flags[m] = True
                break


@kernel
def light(grid, low, high, change):
    """Count one more interval of depths as reached: change is the difference of the counts from depth to depth."""
    first, last = np.searchsorted(grid, low - 1e-6), np.searchsorted(grid, high + 1e-6)
    if last > first:
        change[first] += 1
        change[last] -= 1


@kernel
def touching(counts, i, j):
    """Whether one of the rays i and i + 1 has just touched a boundary at range j and the other one is about to."""
    a, b = counts[i, j], counts[i + 1, j]
    if a == b:
        return False
    more, less = (i, i + 1) if a > b else (i + 1, i)
    before, after, last = j - STEP, j + STEP, counts.shape[1] - 1
    just = before < 0 or counts[more, before] <= counts[less, j]
    soon = after > last or counts[less, after] >= counts[more, j]
    return just and soon


@kernel
def fill(angles, depth, bounces, until, why, targets, bottoms, grid, cell, most, change):
    """Note what is reached; arguments as for `judge`.

    bounces (2, rays, targets): so far, off surface and seabed. bottoms (targets,): depth of the seabed, m. grid: depths
    asked for, increasing. change (classes, targets, depths + 1): what `light` changes.
    """
    last = angles.size - 1
    for c in range(until.shape[0]):
        for i in range(last):
            width = angles[i + 1] - angles[i]
            both, either = min(until[c, i], until[c, i + 1]), max(until[c, i], until[c, i + 1])
            direct = min(until[SURFACE_BOUNCES, i], until[SURFACE_BOUNCES, i + 1])
            for j in range(both):
                a, b = depth[i, j], depth[i + 1, j]
                if j >= direct or not parts(abs(b - a), targets[j], width, cell, most):
                    light(grid, min(a, b), max(a, b), change[c, j])
                    if touching(bounces[0], i, j):
                        light(grid, 0.0, max(a, b), change[c, j])
                    if touching(bounces[1], i, j):
                        light(grid, min(a, b), bottoms[j], change[c, j])
            longer, other = (i, i + 1) if until[c, i] > until[c, i + 1] else (i + 1, i)
            kind = why[c, other]
            if either - both <= STEP and kind in (SURFACE, SEABED):
                for j in range(both, either):
                    a, b = depth[longer, j], 0.0 if kind == SURFACE else bottoms[j]
                    light(grid, min(a, b), max(a, b), change[c, j])
        # Between the steepest rays and the vertical ones all is reached directly.
        for j in range(until[c, 0]):
            light(grid, 0.0, depth[0, j], change[c, j])
        for j in range(until[c, last]):
            light(grid, depth[last, j], bottoms[j], change[c, j])
