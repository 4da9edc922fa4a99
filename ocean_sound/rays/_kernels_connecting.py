"""How the end of a ray through layers moves with its launch angle, exactly, and the caustics it has touched.

The range at which a ray of parameter p passes a fixed depth changes with p by

    D = dx/dp = sum over layers crossed of  x_i/(p k_i k_i+1)  - 2/(p² |g| k) for each layer that turns the ray

with x_i the range within a layer, k the sines at its nodes (see `_kernels`), and k in the last term the sine where the
turning layer is entered. Between two turns D grows all the way, from minus to plus infinity, so the ray touches one
caustic; on the way from a turn to a bounce, or to its end, it does so if D has grown beyond zero.
"""

# mypy: ignore-errors

from __future__ import annotations

from math import cos, inf, radians, sin, sqrt

from .._numba import kernel
from ._kernels import DOWN, SPLIT, TURN, UP, first_side, march, node_before, state_at_range

LEVEL = 1e-9  # a launch nearer to the horizontal, rad, is moved so far from it
MOST_LEGS = 10_000  # of a ray whose spreading is worth knowing
LEAST = 1e-12  # and a sine at a node counts as no less


@kernel
def growth(table, last, p):
    """D from the source to node `last` on the way out."""
    k, x = table[0], table[1]
    total = 0.0
    for j in range(last):
        total += (x[j + 1] - x[j]) / (p * max(k[j], LEAST) * max(k[j + 1], LEAST))
    return total


@kernel
def part_growth(cosine, speed, side, table, leg, distance, p):
    """D from the source to a horizontal distance on the way out, and the sine there."""
    k, x = table[0], table[1]
    last, inside = leg[0], leg[2]
    if last == 0 and not inside:
        return 0.0, k[0]
    j = node_before(x, last, inside, distance)
    end = state_at_range(cosine, speed, side, table, last, inside, distance)[4]
    dx = max(distance - x[j], 0.0)
    return growth(table, j, p) + dx / (p * max(k[j], LEAST) * max(end, LEAST)), end


@kernel
def spread_one(angle, speed, sides, tables, distance):
    """Change of depth at a distance with launch angle (m per radian), spreading, caustics; for a ray that gets there.

    Spreading is signed by caustics, as for rays of a section.
    """
    theta = radians(angle)
    if abs(theta) < LEVEL:
        theta = -LEVEL if theta < 0.0 or first_side(0.0, sides) == UP else LEVEL
    sine, cosine = sin(theta), cos(theta)
    p = cosine / speed
    first = first_side(sine, sides)
    end, direction = 0.0, 1.0
    near = march(sine * sine, cosine * cosine, speed, sides[first], tables[first])
    far = march(sine * sine, cosine * cosine, speed, sides[1 - first], tables[1 - first])
    if near[1] == SPLIT or far[1] == SPLIT:
        return inf, inf, 0
    caustics, positive, total, which, begin = 0, True, 0.0, first, 0.0
    # whole legs, out to a turn or a bounce and back, up to the one in which the ray ends
    for legs in range(MOST_LEGS + 1):
        if legs == MOST_LEGS:
            return inf, inf, 0
        leg = near if which == first else far
        table = tables[which]
        whole = growth(table, leg[0], p)
        turning = 0.0
        if leg[1] == TURN:
            k = max(table[0][leg[0]], LEAST)
            turning = 1.0 / (p * p * abs(sides[which][2][leg[0]]) * k) if leg[2] else inf
        along = distance - begin
        if along <= leg[3]:
            grown, end = part_growth(cosine, speed, sides[which], table, leg, along, p)
            total += grown
            break
        if not positive and (leg[1] == TURN or total + whole > 0.0):
            caustics, positive = caustics + 1, True
        if leg[1] == TURN:
            positive = False
        back = 2.0 * leg[3] - along
        if back >= 0.0:
            grown, end = part_growth(cosine, speed, sides[which], table, leg, back, p)
            total += 2.0 * (whole - turning) - grown
            direction = -1.0
            break
        total += 2.0 * (whole - turning)
        if not positive and total > 0.0:
            caustics, positive = caustics + 1, True
        begin += 2.0 * leg[3]
        which = 1 - which
    if not positive and total > 0.0:
        caustics += 1
    end = min(max(end, -1.0), 1.0) * (direction if which == DOWN else -direction)
    across = sine / speed * total * end
    signed = abs(across) if caustics % 2 == 0 else -abs(across)
    return across / max(sqrt(1.0 - end * end), LEAST), signed, caustics


@kernel
def spread(angles, speed, sides, tables, distance, out, caustics):
    """For each angle (degrees) the change of depth with it and the spreading in out (2, n), and the caustics."""
    for i in range(angles.size):
        out[0, i], out[1, i], caustics[i] = spread_one(angles[i], speed, sides, tables, distance)
