"""Exact rays in layers of constant gradient: arcs of circles, summed without cancellation.

A medium is described from its source, one side at a time (below it, above it), so that up and down are the same code.
On a side, node 0 is the source and node j the j-th layer boundary met on the way out:

    away[j]                     distance of the node from the source
    thickness[j], gradient[j]   of the layer from node j to j+1; positive where speed rises on the way out
    inverse[j]                  1 / (2 sqrt(c[j] c[j+1]))
    excess[j]                   (c[j]² - c0²) / c0², from differences: nearly equal speeds lose no digits
    ratio[j]                    c[j] / c0
    peak[j]                     the largest excess at nodes 1..j; peak[0] = -inf
    doubt[j]                    relative standard uncertainty of speed in the layer

A ray has the parameter p = cos(launch)/c0. With u = p c, the cosine of its angle from the horizontal, the sine

    k[j]² = sin²(launch) - cos²(launch) excess[j]

follows at every node to rounding of the launch angle, however grazing the ray. In a layer of thickness h crossed from
k1 to k2,

    dx = h m,  m = (u1 + u2)/(k1 + k2),  chord = h sqrt(1 + m²),  dt = 2 q asinh(g q)/(g q),  q = chord/(2 sqrt(c1 c2)),

which needs no special case at zero gradient or for a vertical ray. The time is that between two points of a medium of
constant gradient (the distance in the hyperbolic half-plane), so it holds for arcs through a turning point as well.

Out and back on a side are mirror images, so a ray repeats the cycle: out on its first side, back, out on the other
side, back.
"""

# mypy: ignore-errors

from __future__ import annotations

from math import asin, asinh, atan2, atanh, cos, degrees, floor, inf, radians, sin, sinh, sqrt

from .._numba import kernel

TURN, BOUNCE, SPLIT = 0, 1, 2  # how a leg ends
REACHED, SPLIT_AT_MAXIMUM, SURFACE_LIMIT, SEABED_LIMIT = 0, 1, 2, 3  # how a ray ends
UP, DOWN = 0, 1

# A ray is tangent at a node if its launch angle is within 1e-14 rad of the tangent one; this is relative, in tan².
TANGENT = 3e-14


@kernel
def asinh_ratio(y):
    """asinh(y)/y, by its series where y is small."""
    if abs(y) > 0.03:
        return asinh(y) / y
    a = y * y
    return 1.0 - a * (1 / 6 - a * (3 / 40 - a * (5 / 112 - a * (35 / 1152 - a * (63 / 2816)))))


@kernel
def asin_ratio(y):
    """asin(y)/y, by its series where y is small; y a little beyond 1 by rounding counts as 1."""
    if abs(y) > 0.03:
        return asin(min(max(y, -1.0), 1.0)) / y
    a = y * y
    return 1.0 + a * (1 / 6 + a * (3 / 40 + a * (5 / 112 + a * (35 / 1152 + a * (63 / 2816)))))


@kernel
def sinh_ratio(y):
    """sinh(y)/y, by its series where y is small."""
    if abs(y) > 0.3:
        return sinh(y) / y
    a = y * y
    return 1.0 + a / 6.0 * (1.0 + a / 20.0 * (1.0 + a / 42.0 * (1.0 + a / 72.0 * (1.0 + a / 110.0))))


@kernel
def first_at_least(peak, target):
    """Index of the first node at which the running maximum reaches the target; peak.size where none does."""
    low, high = 1, peak.size
    while low < high:
        middle = (low + high) // 2
        if peak[middle] >= target:
            high = middle
        else:
            low = middle + 1
    return low


@kernel
def leg_end(sine2, cosine2, gradient, excess, peak):
    """How a ray's way out ends: the last node reached, turn, bounce or split, and whether inside the layer beyond."""
    layers = gradient.size
    level = sine2 / cosine2
    node = first_at_least(peak, level * (1.0 - TANGENT))
    if node > layers:
        return layers, BOUNCE, False
    if excess[node] > level * (1.0 + TANGENT):
        return node - 1, TURN, True
    if node == layers or gradient[node] > 0.0:
        return node, TURN, False
    return node, SPLIT, False


@kernel
def march(sine2, cosine2, speed, side, table):
    """Lay a ray out on one side: sine, range, time and path at each node; then the same at the end of the leg.

    side = (away, thickness, gradient, inverse, excess, ratio, peak, doubt); table = (k, x, t, s, v), work arrays with a
    value for each node, v being the time weighted by the relative uncertainty of speed. Returned: the last node
    reached, how the leg ends, whether it ends inside the layer beyond that node, and range, time, path and weighted
    time at its end.
    """
    _, thickness, gradient, inverse, excess, ratio, peak, doubt = side
    k, x, t, s, v = table
    last, kind, inside = leg_end(sine2, cosine2, gradient, excess, peak)
    cosine = sqrt(cosine2)
    for j in range(last + 1):
        k[j] = sqrt(max(sine2 - cosine2 * excess[j], 0.0))
    if kind != BOUNCE and not inside:
        k[last] = 0.0
    # First each layer's own share, in a loop that the compiler can turn into vector instructions ...
    for j in range(last):
        m = cosine * (ratio[j] + ratio[j + 1]) / (k[j] + k[j + 1])
        chord = thickness[j] * sqrt(1.0 + m * m)
        q = chord * inverse[j]
        y = gradient[j] * q
        a = y * y
        x[j + 1] = thickness[j] * m
        t[j + 1] = 2.0 * q * (1.0 - a * (1 / 6 - a * (3 / 40 - a * (5 / 112 - a * (35 / 1152 - a * (63 / 2816))))))
        s[j + 1] = chord
        v[j + 1] = y
    # ... then the few layers too thick for the series, and the sums.
    x[0] = t[0] = s[0] = v[0] = 0.0
    bend = 0.5 * cosine / speed
    for j in range(last):
        dx, dt, chord, y = x[j + 1], t[j + 1], s[j + 1], v[j + 1]
        if abs(y) > 0.03:
            q = chord * inverse[j]
            dt = 2.0 * q * asinh_ratio(y)
        x[j + 1] = x[j] + dx
        t[j + 1] = t[j] + dt
        s[j + 1] = s[j] + chord * asin_ratio(bend * chord * gradient[j])
        v[j + 1] = v[j] + dt * doubt[j]
    if not inside:
        return last, kind, inside, x[last], t[last], s[last], v[last]
    # The arc from the last node to the turning point: there the sine vanishes.
    g, sine = gradient[last], k[last]
    radius = speed / (cosine * g)
    dt = atanh(sine) / g
    return (
        last,
        kind,
        inside,
        x[last] + radius * sine,
        t[last] + dt,
        s[last] + radius * asin(sine),
        v[last] + dt * doubt[last],
    )


@kernel
def node_before(cumulative, last, inside, target):
    """The node from which the layer holding the target is entered."""
    low, high = 0, last if inside else last - 1
    while low < high:
        middle = (low + high + 1) // 2
        if cumulative[middle] <= target:
            low = middle
        else:
            high = middle - 1
    return max(low, 0)


@kernel
def state_at_range(cosine, speed, side, table, last, inside, distance):
    """Where a leg is after a horizontal distance: out from the source, time, path, weighted time, sine, cosine."""
    away, thickness, gradient, _, _, ratio, _, doubt = side
    k, x, t, s, v = table
    if last == 0 and not inside:
        return 0.0, 0.0, 0.0, 0.0, k[0], cosine
    j = node_before(x, last, inside, distance)
    dx, g, k1, u1 = max(distance - x[j], 0.0), gradient[j], k[j], cosine * ratio[j]
    k2 = k1 - cosine / speed * g * dx
    u2 = sqrt(max((1.0 - k2) * (1.0 + k2), 0.0))
    dz = min(max(dx * (k1 + k2) / (u1 + u2), 0.0), thickness[j])
    chord = sqrt(dx * dx + dz * dz)
    c1 = speed * ratio[j]
    c2 = c1 + g * dz
    q = 0.5 * chord / sqrt(c1 * c2)
    dt = 2.0 * q * asinh_ratio(g * q)
    ds = chord * asin_ratio(0.5 * cosine / speed * g * chord)
    return away[j] + dz, t[j] + dt, s[j] + ds, v[j] + dt * doubt[j], k2, cosine * c2 / speed


@kernel
def sample_leg(leg, side, table, ray, clock, back, i, place, path):
    """Set all points from i on that fall on one way along a leg; returned: the first point that does not.

    clock is the time at which the ray is at the source's end of the leg: behind it on the way out, ahead of it on the
    way back. Inside a layer, a time tau after entering it, with y = g tau, D = cosh y - k1 sinh y, shc(y) = sinh(y)/y:
    dx = c1 u1 tau shc(y)/D and dz = c1 tau (k1 shc(y) - (y/2) shc(y/2)²)/D.
    """
    away, thickness, gradient, _, _, ratio, _, _ = side
    k, x, t, _, _ = table
    last, _, inside, _, duration, _, _ = leg
    cosine, speed, step, points = ray
    offset, depth, sign = place
    ranges, depths = path
    direction = -1.0 if back else 1.0
    top = last if inside else last - 1
    j = max(top, 0) if back else 0
    while i < points:
        elapsed = direction * (i * step - clock)
        if (elapsed < 0.0) if back else (elapsed > duration):
            break
        while j < top and t[j + 1] <= elapsed:
            j += 1
        while j > 0 and t[j] > elapsed:
            j -= 1
        out, along = 0.0, 0.0
        if top >= 0:
            k1, c1, tau = k[j], speed * ratio[j], max(elapsed - t[j], 0.0)
            half = 0.5 * gradient[j] * tau
            a = sinh_ratio(half)
            b = half * a
            shc = a * sqrt(1.0 + b * b)
            ahead = c1 * tau / (1.0 + 2.0 * (b * b - k1 * half * shc))
            out = away[j] + min(max(ahead * (k1 * shc - b * a), 0.0), thickness[j])
            along = x[j] + ahead * cosine * ratio[j] * shc
        ranges[i] = offset + direction * along
        depths[i] = depth + sign * out
        i += 1
    return i


@kernel
def events_before(position, first, cycle):
    """How many of the events at first, first + cycle, ... lie strictly before a position."""
    if position <= first:
        return 0
    if cycle <= 0.0:
        return 1
    return int(floor((position - first) / cycle)) + 1


@kernel
def stop_of(kind, first, cycle, limit):
    """The range at which a leg's end stops the ray: at once if it splits, after `limit` bounces, never if it turns."""
    if kind == SPLIT:
        return first
    if kind == BOUNCE:
        return first + limit * cycle
    return inf


@kernel
def sample_path(cosine, speed, source_depth, first, sides, tables, legs, end, path):
    """Positions at equal steps of travel time, but for the last point, the end of the ray, which the caller sets."""
    near, far = legs[first], legs[1 - first]
    cycle, period = 2.0 * (near[3] + far[3]), 2.0 * (near[4] + far[4])
    points = path[0].size
    step = end / (points - 1)
    ray = (cosine, speed, step, points - 1)
    i = 0
    while i < points - 1:
        # Whole cycles between two points are passed over, not walked.
        cycles = floor(i * step / period)
        begin, offset = cycles * period, cycles * cycle
        entered = i
        for half in range(2):
            which = first if half == 0 else 1 - first
            leg, side, table = legs[which], sides[which], tables[which]
            sign = 1.0 if which == DOWN else -1.0
            i = sample_leg(leg, side, table, ray, begin, False, i, (offset, source_depth, sign), path)
            begin, offset = begin + 2.0 * leg[4], offset + 2.0 * leg[3]
            i = sample_leg(leg, side, table, ray, begin, True, i, (offset, source_depth, sign), path)
        if i == entered:
            # The point lies at the seam of two cycles, lost between them by rounding: it is at the source.
            path[0][i], path[1][i] = offset, source_depth
            i += 1


@kernel
def level_path(speed, source_depth, end, path):
    """A ray that stays level: straight ahead at the speed of its depth."""
    ranges, depths = path
    for i in range(ranges.size):
        ranges[i] = speed * end * i / max(ranges.size - 1, 1)
        depths[i] = source_depth


@kernel
def first_side(sine, sides):
    """The side a ray goes to first; a level one goes where it bends to, or stays level (-1), or splits (-2)."""
    if sine > 0.0:
        return DOWN
    if sine < 0.0:
        return UP
    up = sides[UP][2].size > 0 and sides[UP][2][0] < 0.0
    down = sides[DOWN][2].size > 0 and sides[DOWN][2][0] < 0.0
    if up and down:
        return -2
    if up:
        return UP
    return DOWN if down else -1


@kernel
def trace_one(angle, speed, source_depth, sides, tables, max_range, limits, path):
    """Trace one ray to its end.

    Returned: range, depth, time, path length, arrival angle, weighted time; turns, surface and seabed bounces, status.
    """
    theta = radians(angle)
    sine, cosine = sin(theta), cos(theta)
    sine2, cosine2 = sine * sine, cosine * cosine
    first = first_side(sine, sides)
    if first < 0:
        ends_at = max_range if first == -1 else 0.0
        beside = sides[DOWN][7] if sides[DOWN][7].size else sides[UP][7]
        time = ends_at / speed
        level_path(speed, source_depth, time, path)
        status = REACHED if first == -1 else SPLIT_AT_MAXIMUM
        return (ends_at, source_depth, time, ends_at, 0.0, time * beside[0]), (0, 0, 0, status)
    near = march(sine2, cosine2, speed, sides[first], tables[first])
    if sine == 0.0:
        tables[1 - first][0][0] = 0.0
        far = (0, TURN, False, 0.0, 0.0, 0.0, 0.0)
    else:
        far = march(sine2, cosine2, speed, sides[1 - first], tables[1 - first])
    legs = (near, far) if first == 0 else (far, near)
    # A cycle is out and back on the first side, then out and back on the other.
    cycle, period = 2.0 * (near[3] + far[3]), 2.0 * (near[4] + far[4])
    length, doubt = 2.0 * (near[5] + far[5]), 2.0 * (near[6] + far[6])
    near_event, far_event = near[3], 2.0 * near[3] + far[3]
    near_stop = stop_of(near[1], near_event, cycle, limits[first])
    far_stop = stop_of(far[1], far_event, cycle, limits[1 - first])
    ends_at = min(max_range, near_stop, far_stop)
    near_events = events_before(ends_at, near_event, cycle)
    far_events = events_before(ends_at, far_event, cycle)
    if min(near_stop, far_stop) <= max_range:
        # Stopped at the end of a leg: all is known there.
        which = first if near_stop <= far_stop else 1 - first
        kind, node, leg = legs[which][1], legs[which][0], legs[which]
        limit = limits[which] if kind == BOUNCE else 0
        near_events = limit if which == first else limit + 1
        far_events = limit
        before = 0.0 if which == first else 1.0
        time = limit * period + 2.0 * before * near[4] + leg[4]
        travelled = limit * length + 2.0 * before * near[5] + leg[5]
        weighted = limit * doubt + 2.0 * before * near[6] + leg[6]
        out, out_sine, out_cosine = sides[which][0][node], tables[which][0][node], cosine * sides[which][5][node]
        status = SPLIT_AT_MAXIMUM if kind == SPLIT else (SURFACE_LIMIT if which == UP else SEABED_LIMIT)
        back = False
    else:
        cycles = floor(ends_at / cycle)
        phase = min(max(ends_at - cycles * cycle, 0.0), cycle)
        which = first if phase <= 2.0 * near[3] else 1 - first
        before = 0.0 if which == first else 1.0
        leg = legs[which]
        phase -= 2.0 * before * near[3]
        back = phase > leg[3]
        if back:
            phase = 2.0 * leg[3] - phase
        out, dt, ds, dv, out_sine, out_cosine = state_at_range(
            cosine, speed, sides[which], tables[which], leg[0], leg[2], min(max(phase, 0.0), leg[3])
        )
        if back:
            dt, ds, dv, out_sine = 2.0 * leg[4] - dt, 2.0 * leg[5] - ds, 2.0 * leg[6] - dv, -out_sine
        time = cycles * period + 2.0 * before * near[4] + dt
        travelled = cycles * length + 2.0 * before * near[5] + ds
        weighted = cycles * doubt + 2.0 * before * near[6] + dv
        status = REACHED
    downward = 1.0 if which == DOWN else -1.0
    depth = source_depth + downward * out
    turns = (near_events if near[1] == TURN else 0) + (far_events if far[1] == TURN else 0)
    bounces_near = near_events if near[1] == BOUNCE else 0
    bounces_far = far_events if far[1] == BOUNCE else 0
    surface, seabed = (bounces_near, bounces_far) if first == UP else (bounces_far, bounces_near)
    if path[0].size:
        sample_path(cosine, speed, source_depth, first, sides, tables, legs, time, path)
        path[0][-1], path[1][-1] = ends_at, depth
    arrival = degrees(atan2(downward * out_sine, out_cosine))
    return (ends_at, depth, time, travelled, arrival, weighted), (turns, surface, seabed, status)


@kernel
def trace_fan(angles, speed, source_depth, sides, tables, max_range, limits, values, counts, path_ranges, path_depths):
    """Trace each angle.

    values: range, depth, time, path length, arrival angle, weighted time in the rows of a (6, rays) array; counts:
    turns, surface bounces, seabed bounces, status in the rows of a (4, rays) array.
    """
    for i in range(angles.size):
        path = (path_ranges[i], path_depths[i])
        (
            (values[0, i], values[1, i], values[2, i], values[3, i], values[4, i], values[5, i]),
            (counts[0, i], counts[1, i], counts[2, i], counts[3, i]),
        ) = trace_one(angles[i], speed, source_depth, sides, tables, max_range, limits, path)
