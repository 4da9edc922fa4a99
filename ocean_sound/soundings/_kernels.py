"""The exact march of a sounding beam: straight down from the transducer, layer by layer, to a one-way travel time.

A beam leaves at an angle from the vertical. With u its sine and k its cosine, u = p c keeps the ray parameter p, and in
the arrays of a side of the medium (`rays._kernels`, seen from the transducer downward) k at node j follows from that at
the transducer without cancellation:

    k[j]² = k0² - u0² excess[j]

The way across a layer is that of `rays._kernels`. Inside a layer of gradient g, entered with k1, u1 at speed c1, let
tau be the time since and y = g tau. From dk/dt = -g u² and dc/dt = g c k (both by Snell's law) follow

    D = cosh y - k1 sinh y,   c = c1/D,   u = u1/D,   k = (k1 cosh y - sinh y)/D,
    dx = c1 u1 tau shc(y)/D,   dz = c1 tau (k1 shc(y) - (y/2) shc(y/2)²)/D,   shc(y) = sinh(y)/y,

with no special case at zero gradient or for a vertical beam, and through a turning point too. A beam turns in a layer
where k would vanish before its lower node, a time atanh(k1)/g after entering it.

Below its last node a side goes on at the gradient of its last layer, so that a beam can be followed a little beyond.
"""

# mypy: ignore-errors

from __future__ import annotations

from math import atanh, exp, inf, nan, sqrt

from .._numba import kernel
from ..rays._kernels import asinh_ratio, sinh_ratio

HIT, TURNED, BEYOND, BAD = 0, 1, 2, 3  # what became of a beam


@kernel
def within(tau, c1, u1, k1, g):
    """A time tau after entering a layer: distance across, distance down, speed, sine and cosine from the vertical."""
    half = 0.5 * g * tau
    a = sinh_ratio(half)
    b = half * a
    cosh_half = sqrt(1.0 + b * b)
    shc = a * cosh_half
    d = 1.0 + 2.0 * b * (b - k1 * cosh_half)
    along = c1 * tau / d
    return (
        along * u1 * shc,
        along * (k1 * shc - b * a),
        c1 / d,
        u1 / d,
        (k1 * (1.0 + 2.0 * b * b) - 2.0 * b * cosh_half) / d,
    )


@kernel
def enter(j, t, x, k, u0, rise, side):
    """What is known of a beam as it enters layer j: where, when, and when, where and how steep it leaves.

    rise: k² at the transducer (negative for a beam that only exists farther down). State: layer; time, distance across
    and cosine at entry; the same at exit; whether the beam turns in the layer, at the exit time then.
    """
    _, thickness, gradient, inverse, excess, ratio, _, _ = side
    if j >= gradient.size:
        g = gradient[gradient.size - 1]
        bends = g > 0.0 and u0 > 0.0 and k < 1.0
        return j, t, x, k, (t + atanh(k) / g if bends else inf), x, 0.0, bends
    rest = rise - u0 * u0 * excess[j + 1]
    if rest <= 0.0:
        return j, t, x, k, t + atanh(min(k, 1.0)) / gradient[j], x, 0.0, True
    out = sqrt(rest)
    m = u0 * (ratio[j] + ratio[j + 1]) / (k + out)
    q = thickness[j] * sqrt(1.0 + m * m) * inverse[j]
    return j, t, x, k, t + 2.0 * q * asinh_ratio(gradient[j] * q), x + thickness[j] * m, out, False


@kernel
def position(time, state, u0, speed, side):
    """Distance below the transducer, distance across, speed, sine and cosine of a beam at a time in its layer."""
    away, _, gradient, _, _, ratio, _, _ = side
    j, t, x, k = state[0], state[1], state[2], state[3]
    g = gradient[min(j, gradient.size - 1)]
    dx, dz, c, u, k2 = within(time - t, speed * ratio[j], u0 * ratio[j], k, g)
    return away[j] + dz, x + dx, c, u, k2


@kernel
def follow(u0, k0, times, speed, side, downs, acrosses, statuses):
    """Positions of one beam at ascending times: distance below the transducer, distance across (signed as u0), status.

    A time at which the beam has turned gives NaN; one at which it is below the last node gives where it would be in
    water that goes on at the last gradient, and the status says so.
    """
    sign = -1.0 if u0 < 0.0 else 1.0
    u = abs(u0)
    for i in range(times.size):
        downs[i], acrosses[i], statuses[i] = nan, nan, BAD
    if not (u < 1.0 and k0 > 0.0):
        return
    state = enter(0, 0.0, 0.0, k0, u, k0 * k0, side)
    for i in range(times.size):
        if not (0.0 <= times[i] < inf):
            continue
        while times[i] > state[4] and not state[7]:
            state = enter(state[0] + 1, state[4], state[5], state[6], u, k0 * k0, side)
        if times[i] > state[4]:
            statuses[i] = TURNED
            continue
        down, across, _, _, _ = position(times[i], state, u, speed, side)
        downs[i], acrosses[i] = down, sign * across
        statuses[i] = BEYOND if state[0] >= side[2].size else HIT


@kernel
def trace_beams(u0, k0, times, speed, side, downs, acrosses, statuses):
    """Where each of many beams is at its own time; as `follow`."""
    for i in range(times.size):
        one = slice(i, i + 1)
        follow(u0[i], k0[i], times[one], speed, side, downs[one], acrosses[one], statuses[one])


@kernel
def time_down(u0, k0, down, speed, side):
    """One-way travel time and distance across of a beam that has come so far below the transducer, and its status."""
    away, _, gradient, _, excess, ratio, _, _ = side
    u = abs(u0)
    if not (u < 1.0 and k0 > 0.0 and down >= 0.0):
        return nan, nan, BAD
    state = enter(0, 0.0, 0.0, k0, u, k0 * k0, side)
    while state[0] < gradient.size and not state[7] and away[state[0] + 1] <= down:
        state = enter(state[0] + 1, state[4], state[5], state[6], u, k0 * k0, side)
    j, k = state[0], state[3]
    dz = down - away[j]
    if dz <= 0.0:
        return state[1], (-state[2] if u0 < 0.0 else state[2]), HIT
    if j >= gradient.size:
        return nan, nan, BEYOND
    g, c1 = gradient[j], speed * ratio[j]
    c2 = c1 + g * dz
    rest = k0 * k0 - u * u * (excess[j] + g * dz * (c1 + c2) / (speed * speed))
    if rest <= 0.0:
        return nan, nan, TURNED
    m = u * (c1 + c2) / speed / (k + sqrt(rest))
    q = 0.5 * dz * sqrt((1.0 + m * m) / (c1 * c2))
    x = state[2] + dz * m
    return state[1] + 2.0 * q * asinh_ratio(g * q), (-x if u0 < 0.0 else x), HIT


@kernel
def times_down(u0, k0, downs, speed, side, times, acrosses, statuses):
    """As `time_down`, for many beams, each to its own distance."""
    for i in range(downs.size):
        times[i], acrosses[i], statuses[i] = time_down(u0[i], k0[i], downs[i], speed, side)


@kernel
def apart(u0, k0, speed_a, side_a, speed_b, side_b, least, allowance):
    """The farthest that two beams of equal angle come apart at equal times, in water a and in water b.

    They are followed until the beam in a reaches the last node of its side, or comes as near to the horizontal as no
    sounding does (its cosine from the vertical falls to `least`). Both waters are marched at once,
    from one crossing of a node of either to the next, so that between two samples each beam stays in one layer. In a
    layer a beam's velocity v has the length c, and its acceleration is g v²/|v| (v as a complex number, and mirrored):
    of length g c, and changing by at most 2 g |δv| where v changes by δv. So the difference of the accelerations in the
    two layers is, over a time h in which the beam in a is nowhere faster than c,

        A <= |g_a - g_b| c + 2 |g_b| (|v_a - v_b| + |g_a - g_b| c h) exp(2 |g_b| h),

    and the beams come at most h² A/8 farther apart than at the ends of the interval (the error of a chord). The
    interval is divided until that is within the allowance, and what is returned is the bound, not the largest sample.

    Returned: the bound, and the distance below the transducer and the time at which it is found; inf if the beam in b
    has turned and left the layer upward before.
    """
    a = enter(0, 0.0, 0.0, k0, u0, k0 * k0, side_a)
    b = enter(0, 0.0, 0.0, k0, u0, k0 * k0, side_b)
    layers_a, layers_b = side_a[2].size, side_b[2].size
    t, before = 0.0, 0.0
    largest, at, when = 0.0, 0.0, 0.0
    while a[0] < layers_a:
        g_a, g_b = side_a[2][a[0]], side_b[2][min(b[0], layers_b - 1)]
        # The arc of a beam that turns is left upward where it was entered: as long after the turn as before it.
        leaves_b = 2.0 * b[4] - b[1] if b[7] else b[4]
        flattens = a[7] or a[6] < least
        end = a[4]
        if flattens:
            end = a[1] + (atanh(a[3]) - atanh(least)) / g_a if a[3] > least else a[1]
        until = min(end, leaves_b)
        h = max(until - t, 0.0)
        z_a, x_a, c_a, u_a, k_a = position(t, a, u0, speed_a, side_a)
        z_b, x_b, c_b, u_b, k_b = position(t, b, u0, speed_b, side_b)
        dv = sqrt((c_a * u_a - c_b * u_b) ** 2 + (c_a * k_a - c_b * k_b) ** 2)
        fastest = speed_a / u0 if a[7] else speed_a * max(side_a[5][a[0]], side_a[5][a[0] + 1])
        bend = abs(g_a - g_b) * fastest
        sway = bend + 2.0 * abs(g_b) * (dv + bend * h) * exp(2.0 * abs(g_b) * h)
        parts = 1 + int(h * sqrt(sway / (8.0 * allowance)))
        step = h / parts
        beyond = step * step * sway / 8.0
        for i in range(1, parts + 1):
            now = until if i == parts else t + i * step
            z_a, x_a, _, _, _ = position(now, a, u0, speed_a, side_a)
            z_b, x_b, _, _, _ = position(now, b, u0, speed_b, side_b)
            distance = sqrt((z_a - z_b) ** 2 + (x_a - x_b) ** 2)
            bound = max(before, distance) + beyond
            if bound > largest:
                largest, at, when = bound, z_a, now
            before = distance
        t = until
        if t >= end:
            if flattens:
                return largest, at, when
            a = enter(a[0] + 1, a[4], a[5], a[6], u0, k0 * k0, side_a)
        if t >= leaves_b and a[0] < layers_a:
            if b[7]:
                return inf, z_a, t
            b = enter(b[0] + 1, b[4], b[5], b[6], u0, k0 * k0, side_b)
    return largest, at, when


@kernel
def apart_at(u0, k0, speed_a, side_a, speed_b, side_b, least, allowance, found):
    """As `apart` for many angles; the three results in the rows of a (3, angles) array."""
    for i in range(u0.size):
        found[0, i], found[1, i], found[2, i] = apart(u0[i], k0[i], speed_a, side_a, speed_b, side_b, least, allowance)
