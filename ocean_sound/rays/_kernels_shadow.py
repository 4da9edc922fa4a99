"""Which ranges the rays of a source reach at each depth, as intervals between neighbouring rays.

Rays are ordered by launch angle and grouped into families: within one family the legs end alike (turning before the
same speed maximum, or at surface or seabed), so the range at which the n-th crossing of a depth takes place is a
continuous function of angle. Then all ranges between its smallest and its largest value are reached. Families end
exactly at the angles where a ray is tangent to a speed maximum, surface or seabed; between those the caller's fan is
only as fine as it needs to be to see each fold.
"""

# mypy: ignore-errors

from __future__ import annotations

from .._numba import kernel
from ._kernels import BOUNCE, DOWN, UP, march


@kernel
def lay_out(tangents2, speed, sides, tables, nodes, splits, crossings, extents, families):
    """March each ray, given by tan² of its angle, on both sides.

    nodes[side]: node of each grid depth on that side, or -1; splits[side][j]: how many speed maxima lie at nodes 1..j.
    Set are crossings (depth, ray): range on the way out, NaN where not reached; extents (side, ray): range at the end
    of the leg; families (side, ray): how many maxima were passed, or -1 - that many where the leg ends at surface or
    seabed.
    """
    for i in range(tangents2.size):
        cosine2 = 1.0 / (1.0 + tangents2[i])
        sine2 = tangents2[i] * cosine2
        for which in range(2):
            last, kind, _, extent, _, _, _ = march(sine2, cosine2, speed, sides[which], tables[which])
            x = tables[which][1]
            extents[which, i] = extent
            passed = splits[which][last]
            families[which, i] = -1 - passed if kind == BOUNCE else passed
            for d in range(nodes[which].size):
                node = nodes[which][d]
                if 0 <= node <= last:
                    crossings[d, i] = x[node]


@kernel
def add_interval(intervals, count, kind, depth, low, high):
    """Note an interval if there is room; the count goes on regardless, so that the caller learns how much is needed."""
    if count < intervals.shape[0]:
        intervals[count, 0], intervals[count, 1] = kind, depth
        intervals[count, 2], intervals[count, 3] = low, high
    return count + 1


@kernel
def family_intervals(x, near, far, same_side, allowed, max_range, most_cycles, label, intervals, count):
    """Intervals of one family at one depth.

    x, near, far: crossing on the way out, and extents of the first and second leg, for each ray of the family that
    reaches the depth; allowed: how many ends of legs a ray may pass (0, 1, or 2 for any number).
    """
    rays = x.size
    for way in range(2):  # out, back
        passed = (0 if way == 0 else 1) if same_side else (1 if way == 0 else 2)
        if passed > allowed:
            continue
        for n in range(most_cycles if allowed == 2 else 1):
            low, high, next_low, next_high = 1e300, -1e300, 1e300, -1e300
            for i in range(rays):
                cycle = 2.0 * (near[i] + far[i])
                if same_side:
                    at = x[i] if way == 0 else 2.0 * near[i] - x[i]
                else:
                    at = 2.0 * near[i] + (x[i] if way == 0 else 2.0 * far[i] - x[i])
                at += n * cycle
                low, high = min(low, at), max(high, at)
                next_low, next_high = min(next_low, at + cycle), max(next_high, at + cycle)
            if low > max_range:
                break
            # Once each interval overlaps the next, all that follow do, for they only widen: reached without a gap from
            # here on.
            if allowed == 2 and next_low <= high and next_high - next_low >= high - low:
                count = add_interval(intervals, count, label[0], label[1], low, max_range)
                break
            count = add_interval(intervals, count, label[0], label[1], low, min(high, max_range))
    return count


@kernel
def legs_allowed(near_turns, far_turns, near_is_surface, surface_allowed):
    """How many ends of legs a ray may pass before one that its class of paths forbids: 0, 1, or 2 for any number."""
    near_free = near_turns or (near_is_surface and surface_allowed)
    far_free = far_turns or (not near_is_surface and surface_allowed)
    if not near_free:
        return 0
    return 2 if far_free else 1


@kernel
def reached(crossings, extents, families, side_of_depth, max_range, most_cycles, intervals):
    """All intervals of range reached, as rows of (class, depth index, from, to).

    Class 0 is without any bounce, 1 with surface bounces allowed. Returned: how many there are, which may be more than
    there is room for.
    """
    count = 0
    rays = extents.shape[1]
    begin = 0
    while begin < rays:
        end = begin + 1
        while end < rays and families[0, end] == families[0, begin] and families[1, end] == families[1, begin]:
            end += 1
        for depth in range(crossings.shape[0]):
            first = begin
            while first < end and not crossings[depth, first] >= 0.0:  # NaN: the shallow rays turn before this depth
                first += 1
            if first == end:
                continue
            x = crossings[depth, first:end]
            for near in (UP, DOWN):
                for kind in range(2):
                    allowed = legs_allowed(
                        families[near, begin] >= 0, families[1 - near, begin] >= 0, near == UP, kind == 1
                    )
                    count = family_intervals(
                        x,
                        extents[near, first:end],
                        extents[1 - near, first:end],
                        side_of_depth[depth] == near,
                        allowed,
                        max_range,
                        most_cycles,
                        (kind, depth),
                        intervals,
                        count,
                    )
        begin = end
    return count
