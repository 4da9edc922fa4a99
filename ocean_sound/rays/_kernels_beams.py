"""Beams through a section: each ray of a fan as it passes the columns of a grid, and what it carries there.

The position and slowness of a ray on a column, and how both change there with its launch angle, make one beam; see
`_kernels_influence` for what a beam adds to the field. A ray is followed by the steps of `_kernels_section`; between
the ends of a step everything is the polynomial of fifth degree that takes values and two derivatives there.

A reflection from a seabed that sound enters moves a beam along it by Delta = -(d phase)/(d wavenumber along it), and
by as much later (Brekhovskikh, Waves in Layered Media, 1960): the ray goes on from there. With mu the sine of the
grazing angle and phase(mu), Delta = s sqrt(1 - mu²)/mu with s = (d phase/d mu)/k, k the wavenumber in the water: as if
the seabed lay s/2 deeper. On the columns passed over the ray goes straight on below the seabed, and comes back.
"""

# mypy: ignore-errors

from __future__ import annotations

from math import cos, exp, radians, sin, sqrt

import numpy as np

from .._numba import kernel
from ..section._kernels_field import field
from ..section._kernels_seabed import seabed
from ._kernels_influence import (
    ALONG,
    BEFORE_IM,
    BEFORE_RE,
    CAUSTICS,
    DEPTH,
    DEPTH_RATE,
    DOWN,
    DOWN_RATE,
    FAINTEST,
    IM,
    LAST,
    METRES,
    PATH,
    RE,
    ROW,
    TAUS,
    TIME,
    WAVENUMBER,
    add_beam,
    look_up,
)
from ._kernels_section import (
    DERIVATIVES,
    FIRST_STEP,
    GROWTH,
    LENGTH,
    MOST_STEPS,
    NOTHING,
    PESSIMISM,
    PX,
    PZ,
    QX,
    QZ,
    SAFETY,
    SEABED,
    SHORTEST_STEP,
    STAGES,
    STATE,
    TAU,
    VX,
    VZ,
    X,
    Z,
    before_kink,
    evaluate,
    hull,
    meet,
    next_event,
    reflect,
    spreading,
    step,
)

# How a beam ends; of numpy's type, so that no function is compiled twice.
REACHED, FADED, TURNED_BACK, LOST = np.arange(4)

LEAST_SINE = 1e-3  # of grazing angles, for the displacement
FRINGE = 0.3  # see `displace`; by the measure of normal modes a third to a tenth do alike, 1 a little worse


@kernel
def copy(one, other):
    """Copy numbers; numba compiles an assignment of slices for seconds, for the sake of its messages."""
    for i in range(one.size):
        other[i] = one[i]


@kernel
def between(f0, d0, s0, f1, d1, s1, t):
    """The polynomial of fifth degree with these values and first and second derivatives at 0 and 1, and its slope."""
    rise = f1 - f0
    c2 = 0.5 * s0
    c3 = 10.0 * rise - 6.0 * d0 - 4.0 * d1 - 1.5 * s0 + 0.5 * s1
    c4 = -15.0 * rise + 8.0 * d0 + 7.0 * d1 + 1.5 * s0 - s1
    c5 = 6.0 * rise - 3.0 * d0 - 3.0 * d1 - 0.5 * s0 + 0.5 * s1
    value = f0 + t * (d0 + t * (c2 + t * (c3 + t * (c4 + t * c5))))
    return value, d0 + t * (2.0 * c2 + t * (3.0 * c3 + t * (4.0 * c4 + t * 5.0 * c5)))


@kernel
def set_row(row, z, px, pz, tau, length, vx, vz, qz, fz, parity, bend):
    """Fill the first part of a row; fz is the downward part of P'. What moves with the launch angle is brought back.

    Where the Earth was flattened depths are turned into true ones, and slownesses with them.
    """
    delta = -vx / px
    depth_rate, down_rate = parity * (vz + delta * pz), parity * (qz + delta * fz)
    if bend != 0.0:
        shrunk = exp(-bend * z)
        z = (1.0 - shrunk) / bend
        depth_rate *= shrunk
        pz /= shrunk
        down_rate = down_rate / shrunk + pz * bend / shrunk * depth_rate
    row[DEPTH], row[ALONG], row[DOWN], row[TIME], row[PATH] = z, px, pz, tau, length
    row[DEPTH_RATE], row[DOWN_RATE] = depth_rate, down_rate


@kernel
def pass_columns(y, out, k, h, columns, j, parity, bend, rows):
    """Fill the rows of the columns that a step of size h passes, from number j on; returned: the next column."""
    last = STAGES - 1
    while j < columns.size and columns[j] <= out[X]:
        row = rows[j]
        width = out[X] - y[X]
        t = (columns[j] - y[X]) / width if width > 0.0 else 1.0
        px = y[PX]
        for _ in range(4):
            x, rate = between(y[X], h * y[PX], h * h * k[0, 0], out[X], h * out[PX], h * h * k[last, 0], t)
            px = rate / h if h > 0.0 else y[PX]
            change = (columns[j] - x) / rate if rate > 0.0 else 0.0
            t = min(max(t + change, 0.0), 1.0)
            if abs(change) * width < 1e-6:
                break
        z, pz = between(y[Z], h * y[PZ], h * h * k[0, 1], out[Z], h * out[PZ], h * h * k[last, 1], t)
        bend_a = 2.0 * (k[0, 0] * y[PX] + k[0, 1] * y[PZ])
        bend_b = 2.0 * (k[last, 0] * out[PX] + k[last, 1] * out[PZ])
        tau, _ = between(y[TAU], h * k[0, 2], h * h * bend_a, out[TAU], h * k[last, 2], h * h * bend_b, t)
        length = y[LENGTH] + t * (out[LENGTH] - y[LENGTH])
        vx, _ = between(y[VX], h * y[QX], h * h * k[0, 4], out[VX], h * out[QX], h * h * k[last, 4], t)
        vz, qz = between(y[VZ], h * y[QZ], h * h * k[0, 5], out[VZ], h * out[QZ], h * h * k[last, 5], t)
        fz = (1.0 - t) * k[0, 1] + t * k[last, 1]
        inverse = 1.0 / h if h > 0.0 else 0.0
        set_row(row, z, px, pz * inverse, tau, length, vx, vz, qz * inverse, fz, parity, bend)
        j += 1
    return j


@kernel
def pass_straight(y, w, upto, columns, j, parity, bend, rows):
    """Fill the rows of columns up to a range from a state going straight on (or back) through even water."""
    while j < columns.size and columns[j] <= upto:
        sigma = (columns[j] - y[X]) / y[PX]
        set_row(
            rows[j], y[Z] + sigma * y[PZ], y[PX], y[PZ], y[TAU] + sigma * w, y[LENGTH] + sigma * sqrt(w),
            y[VX] + sigma * y[QX], y[VZ] + sigma * y[QZ], y[QZ], 0.0, parity, bend,
        )  # fmt: skip
        j += 1
    return j


@kernel
def mark_rows(rows, first, end, caustics, side, factor, before, last):
    """Fill the second part of rows: what has happened to the beam so far; returned: caustics, and the side it is on."""
    for j in range(first, end):
        row = rows[j]
        if row[DEPTH_RATE] * side < 0.0:
            caustics += 1
            side = -side
        row[CAUSTICS] = caustics
        row[RE], row[IM] = factor.real, factor.imag
        row[BEFORE_RE], row[BEFORE_IM] = before.real, before.imag
        row[LAST] = last
    return caustics, side


@kernel
def table_at(x, edges):
    """Which table of reflection holds at a range; the first of all is that of the surface."""
    return 1 + np.searchsorted(edges, x, side="right")


@kernel
def displace(y, k, slope, wavenumber, found, w):
    """Move a ray just reflected along a seabed of a slope by what the reflection's phase asks; returned: how far.

    found: what `look_up` gave; k: the derivatives at the ray's place. Where the water bends rays, those whose mu is
    below (2 curvature/wavenumber)^(1/3) stay within a fringe of the seabed that no plane wave describes; well within it
    they are moved no farther than those at its edge.
    """
    length = sqrt(1.0 + slope * slope)
    tx, tz = 1.0 / length, slope / length
    n = sqrt(w)
    across = tx * y[PZ] - tz * y[PX]  # upward is negative
    mu = -across / n
    local = wavenumber * n
    bend = abs(tx * k[1] - tz * k[0]) / w
    least = max(FRINGE * (2.0 * bend / local) ** (1.0 / 3.0), LEAST_SINE)
    held = 1.0
    if mu < least:
        mu, held = least, 0.0
    cosine = sqrt(max(1.0 - mu * mu, 0.0))
    s, slope_of_s = found[2] / local, found[3] / local
    delta = s * cosine / mu
    # how the sine changes with the launch angle, on the seabed
    sigma = -(tx * y[VZ] - tz * y[VX]) / across if across != 0.0 else 0.0
    qx, qz = y[QX] + sigma * k[0], y[QZ] + sigma * k[1]
    rate = -(tx * qz - tz * qx) / n
    change = (slope_of_s * cosine / mu - s / (mu * mu * max(cosine, LEAST_SINE))) * rate * held
    along = tx * y[PX] + tz * y[PZ]
    y[X] += delta * tx
    y[Z] += delta * tz
    y[TAU] += delta * along
    y[VX] += change * tx
    y[VZ] += change * tz
    return delta


@kernel
def follow(y, columns, water, floor, edges, tables, settings, work, rows):
    """Follow one beam over the columns; see `sum_beams`. Returned: how many columns it passed, how it ended, steps."""
    k, out, points, piece, found = work
    metres, taus, wavenumber, faintest = settings[METRES], settings[TAUS], settings[WAVENUMBER], settings[FAINTEST]
    bend = floor[5]
    last_range = columns[columns.size - 1]
    evaluate(y[X], y[Z], y[VX], y[VZ], water, bend, k[0])
    h, j, parity, caustics, side, heading = FIRST_STEP, 0, 1.0, 0, 1.0, y[PZ]
    factor, before, last, most, steps = 1.0 + 0.0j, 1.0 + 0.0j, NOTHING, 1e300, 0
    while j < columns.size:
        steps += 1
        if steps > MOST_STEPS:
            return j, LOST, steps
        ahead = last_range - y[X]
        ahead = min(ahead / y[PX] if y[PX] > 0.0 else 1e300, 100.0 * (last_range + 1.0))
        h = min(h, 1.01 * ahead + 1.0)
        wish = h
        h = before_kink(y, k, h, water, floor[6], metres / (ahead * (y[LENGTH] + ahead)))
        e_position, e_p, e_tau = step(y, h, water, bend, k, out)
        share = PESSIMISM * (y[LENGTH] + ahead) / h
        error = share * max((e_position + e_p * ahead) / metres, e_tau / taus)
        if not error <= 1.0:
            h *= max(0.2, SAFETY / sqrt(sqrt(error))) if error > 1.0 else 0.2
            most = h
            for i in range(1, STAGES):  # what is not a number must not stay
                for m in range(DERIVATIVES):
                    k[i, m] = 0.0
            if h < SHORTEST_STEP:
                return j, LOST, steps
            continue
        grown = min(h * min(GROWTH, SAFETY / sqrt(sqrt(error)) if error > 0.0 else GROWTH), most)
        most = 1e300
        hull(y, k[0], out, k[STAGES - 1], h, points)
        kind, part = next_event(points, floor, piece)
        size = h
        if kind != NOTHING:
            size = meet(kind, y, part, h, 0.0, water, floor, k, out)
            if size < 0.0:  # a step too long for its polynomial to say where it meets the boundary
                h *= 0.5
                most = h
                if h < SHORTEST_STEP:
                    return j, LOST, steps
                continue
        first = j
        j = pass_columns(y, out, k, size, columns, j, parity, bend, rows)
        caustics, side = mark_rows(rows, first, j, caustics, side, factor, before, last)
        copy(out, y)
        copy(k[STAGES - 1], k[0])
        if y[PZ] * heading < 0.0:
            last = NOTHING  # it has turned, so what lies beyond the last boundary is before it again
            if abs(factor) < faintest:
                return j, FADED, steps
        if parity * spreading(y) * side < 0.0:
            caustics += 1
            side = -side
        if kind != NOTHING:
            if abs(factor) < faintest:
                return j, FADED, steps
            slope, curvature, which = 0.0, 0.0, 0
            if kind == SEABED:
                _, slope, curvature = seabed(y[X], floor[1])
                which = table_at(y[X], edges)
            copy(y, out)
            sine = reflect(y, k[0], slope, curvature)
            if sine == 0.0:
                return j, LOST, steps
            look_up(sine, tables[which], found)
            w = k[0, 2]
            before = factor
            factor *= exp(found[0]) * complex(cos(found[1]), sin(found[1]))
            if kind == SEABED and found[2] != 0.0:
                start = y[X]
                delta = displace(y, k[0], slope, wavenumber, found, w)
                if delta > 0.0:
                    first = j
                    j = pass_straight(out, w, start + 0.5 * delta, columns, j, parity, bend, rows)
                    caustics, side = mark_rows(rows, first, j, caustics, side, before, before, last)
                    first = j
                    j = pass_straight(y, w, y[X], columns, j, -parity, bend, rows)
                    caustics, side = mark_rows(rows, first, j, caustics, side, factor, before, kind)
                    y[Z] = seabed(y[X], floor[1])[0]
            last = kind
            parity = -parity
            evaluate(y[X], y[Z], y[VX], y[VZ], water, bend, k[0])
            if parity * spreading(y) * side < 0.0:
                caustics += 1
                side = -side
        if y[PZ] != 0.0:
            heading = y[PZ]
        if not y[PX] > 0.0:
            return j, TURNED_BACK, steps
        h = grown if h == wish else max(grown, wish)
    return j, REACHED, steps


@kernel
def sum_beams(fan, levels, source, columns, water, floor, edges, tables, settings, grid, energy, sums, ends):
    """Add up the beams of a fan over the columns of a grid.

    fan (3, beams): launch angles (degrees), the angle that each of them stands for (rad), and a factor of the source
    for its intensity. levels: how coarse a fan each ray belongs to, see `add_beam`. source: its range and depth.
    columns: ranges, m. water, floor: see `_kernels_section.trace_fan`. edges: ranges between the tables of seabed
    reflection; tables (1 + n, m, 4): of the surface and the seabed, see `look_up`. settings: see `_kernels_influence`.
    grid: see `add_beam`. energy: whether squares are added up. sums (2, columns, depths): real and imaginary part, or
    (1, ...) the squares. ends (beams, 3): columns passed, how it ended, steps.
    """
    work = (
        np.zeros((STAGES, DERIVATIVES)),
        np.empty(STATE),
        np.empty((3, 6)),
        np.empty((2, 6)),
        np.empty(4),
    )
    y = np.empty(STATE)
    rows = np.empty((columns.size, ROW))
    speed = sqrt(field(source[0], source[1], water)[0])
    for i in range(levels.size):
        theta = radians(fan[0, i])
        sine, cosine = sin(theta), cos(theta)
        for m in range(STATE):
            y[m] = 0.0
        y[X], y[Z] = source[0], source[1]
        y[PX], y[PZ] = speed * cosine, speed * sine
        y[QX], y[QZ] = -speed * sine, speed * cosine
        passed, status, steps = follow(y, columns, water, floor, edges, tables, settings, work, rows)
        ends[i, 0], ends[i, 1], ends[i, 2] = passed, status, steps
        add_beam(
            rows, passed, fan[1, i], fan[2, i], levels[i], speed * cosine, columns, tables, settings, grid, energy, sums
        )
