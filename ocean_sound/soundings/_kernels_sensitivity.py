"""What errors of sound speed do to the end of a beam at a fixed travel time, to first order and exactly.

A beam has the ray parameter p = u/c, u and k the sine and cosine of its angle from the vertical. At a fixed depth its
travel time T and distance across X follow from the slowness down and the slope,

    δT = ∫ (2 u² - 1)/(c² k³) δc dz,   δX = ∫ p/k³ δc dz,   ∂T/∂p = p ∂X/∂p,   ∂X/∂p = ∫ c/k³ dz,

and at a fixed time its end moves by

    δz = -c k δT,   δx = δX - u c δT,   ∂z/∂p = -u k ∂X/∂p,   ∂x/∂p = k² ∂X/∂p     (c, u, k at the end).

Over a layer of thickness h in which the speed is linear from c1 to c2, with m = (u1 + u2)/(k1 + k2) (the tangent of the
mean angle) dx = h m and dt = 2 asinh(y)/g with y = g q and q = (h/2) sqrt((1 + m²)/(c1 c2)): see `rays._kernels`. Since
the angle at a node changes by p/k with its speed and by c/k with p, these give, without a special case or cancellation
at zero gradient or for a vertical beam,

    ∂dx/∂c1 = h (1 + m²) p/(2 k1),   ∂dx/∂p = h (1 + m²) (c1/k1 + c2/k2)/2,
    ∂dt/∂c1 = q (m u1/k1 - 1)/(c1 s) - b,   ∂dt/∂c2 = q (m u2/k2 - 1)/(c2 s) + b,
    s = sqrt(1 + y²),   b = h (1 + m²) y B(y)/(2 c1 c2),   B(y) = (1/s - asinh(y)/y)/y².

A beam that ends within a layer ends at a node of its own, whose speed is a mean of those above and below. With u0 the
sine at the transducer everything is even in u0 once X has been divided by it, so that w = u0² serves both sides.

An error shape is one number for all depths: its δT and δX add up with their signs along the beam, and the squares of
the shapes add at its end. Noise is independent from level to level: the squares of what each level does add up. A level
has two layers at it, so what the upper one did is kept until the lower one is done.

sums (nodes, 2 S + 8): at each node δT and δX/u0 for each of S shapes; then of the noise the sums of squares and
products (TT, TX, XX) of all levels done, their covariance with the speed at the transducer (T, X), and what the upper
layer did by the level at the node (T, X); and ∂X/∂p.

doubt = (shapes (nodes, S), how many of them are of the cast itself (the rest are of the water's change), noise (nodes),
share of the second node in the speed at the transducer (which lies between two levels; the noise at the first node is
that of the upper level times the other share), variance of the speed at the transducer by the cast and by the change).

values (12): VALUES below; X always divided by u0.
"""

# mypy: ignore-errors

from __future__ import annotations

from math import asinh, inf, nan, sqrt

import numpy as np

from .._numba import kernel

# Of the cast: variance of z, covariance of z and x, variance of x, covariances of z and of x with the speed at the
# transducer; the same of the change; change of z and x with p.
ZZ, ZX, XX, ZC, XC, OF_CHANGE, ZP, XP, VALUES = 0, 1, 2, 3, 4, 5, 10, 11, 12
# What a table holds of these, see `pack`; the second width has the change, too, and two columns of nothing.
NARROW, WIDE = 8, 16
CUBIC, QUADRATIC = 4, 3  # coefficients over w and over depth
MOST_CHANGE = 2.0  # variance of the difference of two waters that have nothing to do with each other
SMALL = 0.1  # up to here a series for B is exact to rounding


@kernel
def bend(y):
    """(1/sqrt(1 + y²) - asinh(y)/y)/y², by its series where y is small."""
    a = y * y
    if abs(y) > SMALL:
        return (1.0 / sqrt(1.0 + a) - asinh(y) / y) / a
    return -1 / 3 + a * (3 / 10 - a * (15 / 56 - a * (35 / 144 - a * (315 / 1408 - a * (693 / 3328)))))


@kernel
def across_layer(w, h, r1, r2, k1, k2, gradient, speed):
    """Of one layer: ∂dt/∂c1, ∂dt/∂c2, ∂(dx/u0)/∂c1, ∂(dx/u0)/∂c2, ∂dx/∂p; r is c over that at the transducer."""
    c1, c2 = speed * r1, speed * r2
    m = (r1 + r2) / (k1 + k2)
    wide = h * (1.0 + w * m * m)
    q = 0.5 * sqrt(h * wide / (c1 * c2))
    y = gradient * q
    s = sqrt(1.0 + y * y)
    b = 0.5 * wide * y * bend(y) / (c1 * c2)
    return (
        q * (w * m * r1 / k1 - 1.0) / (c1 * s) - b,
        q * (w * m * r2 / k2 - 1.0) / (c2 * s) + b,
        0.5 * wide / (speed * k1),
        0.5 * wide / (speed * k2),
        0.5 * wide * (c1 / k1 + c2 / k2),
    )


@kernel
def march_sums(w, down, speed, side, doubt, sums):
    """Fill the sums of a beam at each node, as far as a distance below the transducer; returned: the last node."""
    away, thickness, gradient, _, excess, ratio, _, _ = side
    shapes, _, noise, share, _ = doubt
    count = shapes.shape[1]
    at = 2 * count
    k = sqrt(max(1.0 - w, 0.0))
    sums[0] = 0.0
    for j in range(gradient.size):
        rest = 1.0 - w * (1.0 + excess[j + 1])
        if rest <= 0.0 or away[j + 1] > down:
            return j
        out = sqrt(rest)
        t1, t2, x1, x2, p = across_layer(w, thickness[j], ratio[j], ratio[j + 1], k, out, gradient[j], speed)
        before, after = sums[j], sums[j + 1]
        for i in range(count):
            a, b = shapes[j, i], shapes[j + 1, i]
            after[i] = before[i] + t1 * a + t2 * b
            after[count + i] = before[count + i] + x1 * a + x2 * b
        add_noise(noise[j], t1 + before[at + 5], x1 + before[at + 6], before, after, at)
        after[at + 5], after[at + 6] = t2, x2
        if j == 0:
            after[at + 3], after[at + 4] = noise[0] * noise[0] * t1, noise[0] * noise[0] * x1
            after[at + 5] += share[0] * t1
            after[at + 6] += share[0] * x1
        else:
            after[at + 3], after[at + 4] = before[at + 3], before[at + 4]
            if j == 1:
                link = noise[1] * noise[1] * share[0]
                after[at + 3] += link * (t1 + before[at + 5])
                after[at + 4] += link * (x1 + before[at + 6])
        after[at + 7] = before[at + 7] + p
        k = out
    return gradient.size


@kernel
def add_noise(noise, t, x, before, after, at):
    """Put one more level's squares to those before it."""
    square = noise * noise
    after[at] = before[at] + square * t * t
    after[at + 1] = before[at + 1] + square * t * x
    after[at + 2] = before[at + 2] + square * x * x


@kernel
def values_at(w, down, j, speed, side, doubt, sums, values):
    """The values of a beam that ends in layer j, so far below the transducer; returned: whether it gets there."""
    away, thickness, gradient, _, excess, ratio, _, _ = side
    shapes, own, noise, share, _ = doubt
    count = shapes.shape[1]
    at = 2 * count
    g, c1 = gradient[j], speed * ratio[j]
    dz = min(max(down - away[j], 0.0), thickness[j])
    part = dz / thickness[j]
    c = c1 + g * dz
    rest = 1.0 - w * (1.0 + excess[j] + g * dz * (c1 + c) / (speed * speed))
    values[:] = nan
    if rest <= 0.0:
        return False
    k, r = sqrt(rest), c / speed
    k1 = sqrt(1.0 - w * (1.0 + excess[j]))
    t1, t2, x1, x2, p = across_layer(w, dz, ratio[j], r, k1, k, g, speed)
    here = sums[j]
    values[:] = 0.0
    for i in range(count):
        first = shapes[j, i]
        end = first + part * (shapes[j + 1, i] - first)
        t = here[i] + t1 * first + t2 * end
        z, x = -c * k * t, here[count + i] + x1 * first + x2 * end - r * c * t
        to = 0 if i < own[0] else OF_CHANGE
        at_top = shapes[0, i]
        values[to + ZZ] += z * z
        values[to + ZX] += z * x
        values[to + XX] += x * x
        values[to + ZC] += z * at_top
        values[to + XC] += x * at_top
    # What the level above the end and the one below it do by this layer; each level above them is done.
    t_a, x_a = t1 + (1.0 - part) * t2, x1 + (1.0 - part) * x2
    t_b, x_b = part * t2, part * x2
    n_a, n_b = noise[j] * noise[j], noise[j + 1] * noise[j + 1]
    if j == 0:
        t_b, x_b = t_b + share[0] * t_a, x_b + share[0] * x_a
        t_c, x_c = n_a * t_a + n_b * share[0] * t_b, n_a * x_a + n_b * share[0] * x_b
    else:
        t_a, x_a = t_a + here[at + 5], x_a + here[at + 6]
        t_c, x_c = here[at + 3], here[at + 4]
        if j == 1:
            t_c, x_c = t_c + n_a * share[0] * t_a, x_c + n_a * share[0] * x_a
    tt = here[at] + n_a * t_a * t_a + n_b * t_b * t_b
    tx = here[at + 1] + n_a * t_a * x_a + n_b * t_b * x_b
    xx = here[at + 2] + n_a * x_a * x_a + n_b * x_b * x_b
    ck, rc = c * k, r * c
    values[ZZ] += ck * ck * tt
    values[ZX] += ck * (rc * tt - tx)
    values[XX] += xx - 2.0 * rc * tx + rc * rc * tt
    values[ZC] -= ck * t_c
    values[XC] += x_c - rc * t_c
    slope = here[at + 7] + p
    values[ZP], values[XP] = -r * k * slope, rest * slope
    return True


@kernel
def values_down(w, downs, speed, side, doubt, sums, values):
    """Values of a beam at ascending distances below the transducer; returned: how many of these it reaches."""
    last = march_sums(w, downs[downs.size - 1], speed, side, doubt, sums)
    away, layers = side[0], side[2].size
    j = 0
    for i in range(downs.size):
        while j + 1 < layers and j < last and away[j + 1] <= downs[i]:
            j += 1
        if away[j + 1] < downs[i] or not values_at(w, downs[i], j, speed, side, doubt, sums, values[i]):
            return i
    return downs.size


@kernel
def values_of_beam(w, down, speed, side, doubt, values):
    """Values of one beam at one distance below the transducer, marched exactly; returned: whether it gets there."""
    sums = np.empty((side[0].size, 2 * doubt[0].shape[1] + 8))
    last = min(march_sums(w, down, speed, side, doubt, sums), side[2].size - 1)
    if side[0][last + 1] < down:
        return False
    return values_at(w, down, last, speed, side, doubt, sums, values)


@kernel
def moved_on(zz, zx, xx, zc, xc, dz, dx, variance):
    """Covariances of z and x if each unit of speed at the transducer moves the end by dz and dx more."""
    return (
        zz + dz * (2.0 * zc + dz * variance),
        zx + dz * xc + dx * zc + dz * dx * variance,
        xx + dx * (2.0 * xc + dx * variance),
    )


@kernel
def moved_of(values, to, u, dz, dx, variance):
    """As `moved_on`, of the values of a beam by the cast (to = 0) or by the change."""
    return moved_on(
        values[to + ZZ], u * values[to + ZX], u * u * values[to + XX], values[to + ZC], u * values[to + XC],
        dz, dx, variance,
    )  # fmt: skip


@kernel
def turned_by_speed(values, to, u, beta, variance, speed):
    """Covariances of z and x, of the cast (to = 0) or of the change, if p follows the speed at the transducer.

    beta = -c0² dp/dc0: 0 where the slowness is kept, the sine where the angle is.
    """
    scale = beta / (speed * speed)
    return moved_of(values, to, u, -scale * u * values[ZP], -scale * values[XP], variance)


@kernel
def pack(w, down, inner, speed, doubt, values, packed):
    """What a table holds of the values of one beam.

    Variances over the square of the distance down and what is left of the rest over the distance: ZZ, ZX, XX, what is
    added if p follows the speed at the transducer, ZP and XP; then the first six of the change. What is added: towards
    nadir (`inner`) the factors of beta; farther out, where it cancels most of what is there, the sums themselves at
    beta = u0, so that they are as good as the table.
    """
    shrink = 1.0 / down
    square = shrink * shrink
    u = sqrt(w)
    packed[:] = 0.0
    for way in range(2 if packed.size == WIDE else 1):
        to, base = way * OF_CHANGE, way * NARROW
        packed[base + ZZ], packed[base + ZX], packed[base + XX] = (
            square * values[to + ZZ], square * values[to + ZX], square * values[to + XX],
        )  # fmt: skip
        if inner:
            f = -square / (speed * speed)
            packed[base + 3] = 2.0 * f * values[ZP] * values[to + ZC]
            packed[base + 4] = f * (w * values[ZP] * values[to + XC] + values[XP] * values[to + ZC])
            packed[base + 5] = 2.0 * f * values[XP] * values[to + XC]
        else:
            zz, zx, xx = turned_by_speed(values, to, u, u, doubt[4][way], speed)
            packed[base + 3], packed[base + 4], packed[base + 5] = square * zz, square * zx / u, square * xx / w
    packed[6], packed[7] = shrink * values[ZP], shrink * values[XP]


@kernel
def unpack(packed, base, u, inner, beta, variance, speed):
    """Covariances over the square of the distance down, as by `turned_by_speed`."""
    w = u * u
    zz, zx, xx = packed[base], u * packed[base + 1], w * packed[base + 2]
    if beta == 0.0:
        return zz, zx, xx
    zp, xp = u * packed[6], packed[7]
    scale = variance / (speed * speed * speed * speed)
    if inner:
        f = beta * beta * scale
        return (
            zz + beta * u * packed[base + 3] + f * zp * zp,
            zx + beta * packed[base + 4] + f * zp * xp,
            xx + beta * u * packed[base + 5] + f * xp * xp,
        )
    part = beta / u
    f = (part - 1.0) * part * w * scale
    return (
        zz + part * (packed[base + 3] - zz) + f * zp * zp,
        zx + part * (u * packed[base + 4] - zx) + f * zp * xp,
        xx + part * (w * packed[base + 5] - xx) + f * xp * xp,
    )


@kernel
def links(packed, base, u, inner, variance, speed):
    """Covariances of z and of x with the speed at the transducer, over the distance down, from what is packed."""
    squared = speed * speed
    if inner:
        return -0.5 * squared * packed[base + 3] / packed[6], -0.5 * squared * u * packed[base + 5] / packed[7]
    dz, dx = -u * u * packed[6] / squared, -packed[7] / squared  # per unit of speed at beta = u; that of x over u
    z, x = (packed[base + 3] - packed[base]) / dz, (packed[base + 5] - packed[base + 2]) / dx
    return 0.5 * (z - dz * variance), 0.5 * u * (x - dx * variance)


@kernel
def without_top(u, heave, zp, xp, speed):
    """What a beam lacks that begins so much below the table's transducer.

    That is the share that is left of its change with p, and how each unit of speed in the layer that it does not cross
    would move its end, the other way. zp (over u) and xp: change of the whole beam's end with p, whose ratio is the
    tangent there.
    """
    slope = -zp / xp  # tangent at the end, over u
    w = u * u
    end2 = 1.0 / (1.0 + w * slope * slope)
    k = sqrt(1.0 - w)
    thin = heave / (k * k * k * speed)
    c = slope * end2 * thin * (2.0 * w - 1.0)  # speed at the end times its cosine is speed * slope * end2
    return 1.0 - thin * speed * speed * end2 / xp, c, u * (slope * c - thin)


@kernel
def alike(heave, side, doubt, way):
    """Errors of speed so far below the table's transducer as a part of those at it that go with them.

    Of the shapes of the cast (way 0) or of the change (1).
    """
    away, shapes, own = side[0], doubt[0], doubt[1][0]
    j, last = 0, away.size - 2
    while j < last and away[j + 1] < heave:
        j += 1
    part = min(max((heave - away[j]) / (away[j + 1] - away[j]), 0.0), 1.0)
    both, square = 0.0, 0.0
    for i in range(own if way == 1 else 0, shapes.shape[1] if way == 1 else own):
        top = shapes[0, i]
        both += top * (shapes[j, i] + part * (shapes[j + 1, i] - shapes[j, i]))
        square += top * top
    return both / square if square > 0.0 else 1.0


@kernel
def both_ways(here, dz, dx, follow_z, follow_x):
    """How the end moves with the speed at the table's transducer: by the layer not crossed, and by p that follows."""
    mean = 0.5 * (1.0 + here)
    return mean * dz + here * follow_z, mean * dx + here * follow_x


@kernel
def packed_down(w, downs, inner, speed, side, doubt, sums, values, packed):
    """As `values_down`, packed."""
    reached = values_down(w, downs, speed, side, doubt, sums, values)
    for i in range(reached):
        pack(w, downs[i], inner, speed, doubt, values[i], packed[i])
    return reached


@kernel
def steadiest(packed, base, u, inner, variance, speed):
    """The beta, between none and u, at which the depth is least uncertain."""
    there = unpack(packed, base, u, inner, u, variance, speed)[0]
    d = variance * (u * u * packed[6] / (speed * speed)) ** 2
    return u * min(max(0.5 * (d + packed[base] - there) / d, 0.0), 1.0) if d > 0.0 else u


@kernel
def with_change(own, change, part):
    """Covariances of the cast and of a part of the change together."""
    return own[0] + part * change[0], own[1] + part * change[1], own[2] + part * change[2]


@kernel
def misses(w, inner, speed, doubt, found, exact, floor):
    """By how much of the exact one standard deviations are wrong at most; those below a share of the whole count as it.

    Half the relative error of variances, which is the same to first order, but does not make much of nothing.
    found, exact (n, width): packed. Looked at where the slowness is kept, where the angle is, and between these where
    it is hardest; of the cast alone, and with all the change that there may be.
    """
    u = sqrt(w)
    worst = 0.0
    for i in range(found.shape[0]):
        for way in range(2 if found.shape[1] == WIDE else 1):
            base, variance = way * NARROW, doubt[4][way]
            middle = steadiest(exact[i], base, u, inner, variance, speed)
            for beta in (0.0, middle, u):
                a = unpack(found[i], base, u, inner, beta, variance, speed)
                b = unpack(exact[i], base, u, inner, beta, variance, speed)
                if way == 1:
                    a = with_change(unpack(found[i], 0, u, inner, beta, doubt[4][0], speed), a, MOST_CHANGE)
                    b = with_change(unpack(exact[i], 0, u, inner, beta, doubt[4][0], speed), b, MOST_CHANGE)
                least = floor * floor * (b[0] + b[2])
                if not least > 0.0:
                    continue
                z, x = max(b[0], least), max(b[2], least)
                error = max(abs(a[0] - b[0]) / z, abs(a[2] - b[2]) / x, abs(a[1] - b[1]) / sqrt(z * x))
                worst = max(worst, 0.5 * error)
        whole = sqrt(w * exact[i, 6] ** 2 + exact[i, 7] ** 2)
        worst = max(worst, u * abs(found[i, 6] - exact[i, 6]) / whole, abs(found[i, 7] - exact[i, 7]) / whole)
    return worst


@kernel
def interpolate(s, t, cell, packed):
    """The packed values at a place of a cell, s over w and t over depth from -1 to 1; cell (12, width)."""
    t2, s2 = t * t, s * s
    s3 = s2 * s
    st, s2t, s3t = s * t, s2 * t, s3 * t
    st2, s2t2, s3t2 = s * t2, s2 * t2, s3 * t2
    for f in range(packed.size):
        packed[f] = (
            cell[0, f] + s * cell[1, f] + s2 * cell[2, f] + s3 * cell[3, f]
            + t * cell[4, f] + st * cell[5, f] + s2t * cell[6, f] + s3t * cell[7, f]
            + t2 * cell[8, f] + st2 * cell[9, f] + s2t2 * cell[10, f] + s3t2 * cell[11, f]
        )  # fmt: skip


@kernel
def misses_of_cells(w, inner, speed, doubt, found, exact, floor, errors):
    """As `misses`, of each of many cells looked at in some places: found, exact (cells, places, width)."""
    for i in range(errors.size):
        errors[i] = max(errors[i], misses(w, inner, speed, doubt, found[i], exact[i], floor))


@kernel
def covariances(sines, belows, by_speed, by_itself, changes, heaves, speed, side, doubt, table, limits, zz, zx, xx):
    """Covariances of many beams: of depth, of depth and distance across, of distance across.

    heaves: how much deeper than the table's each transducer is; belows: how far below its own the beam ends; sines: at
    the table's transducer. In the layer that a beam does not cross shapes change evenly, in proportion to each other.
    by_speed: dp/dc0; by_itself: standard uncertainty of p by other causes; changes: variance of the change relative to
    that of the shapes of change. table = (edges of w, guess of the cell, edges of depth, guess of the cell by the root
    of depth, whether each cell is served, first cell of w that is not inner, cells). limits = (depth below
    which nothing is known, cells of w for a unit, cells of the root of depth for a unit).
    """
    edges, guess, depths, depth_guess, served, outer, cells = table
    known, w_bins, depth_bins = limits
    top, inner_end = edges[edges.size - 1], edges[outer[0]]
    width = cells.shape[3]
    packed, values = np.empty(WIDE), np.empty(VALUES)
    squared = speed * speed
    known_heave, here, here2 = 0.0, 1.0, 1.0
    for i in range(sines.size):
        u, heave = sines[i], heaves[i]
        if heave != known_heave:
            known_heave, here, here2 = heave, alike(heave, side, doubt, 0), alike(heave, side, doubt, 1)
        down = belows[i] + heave
        w = u * u
        zz[i] = zx[i] = xx[i] = nan
        beta, change, own = -squared * by_speed[i], changes[i], by_itself[i] * by_itself[i]
        if not (
            w < 1.0
            and belows[i] >= 0.0
            and 0.0 <= down <= known
            and abs(beta) < inf
            and abs(change) < inf
            and own < inf
        ):
            continue
        square = down * down
        found = False
        if w < top:
            column = guess[int(w * w_bins)]
            while edges[column + 1] <= w:
                column += 1
            row = depth_guess[int(sqrt(down) * depth_bins)]
            while depths[row + 1] < down:
                row += 1
            found = served[column, row]
        if found:
            low, high = edges[column], edges[column + 1]
            s = (w + w - low - high) / (high - low)
            low, high = depths[row], depths[row + 1]
            t = (down + down - low - high) / (high - low)
            interpolate(s, t, cells[column, row], packed[:width])
            inner = w < inner_end
            zp, xp = u * packed[6], packed[7]
            if heave == 0.0:
                a, b, c = unpack(packed, 0, u, inner, beta, doubt[4][0], speed)
            else:
                left, dz, dx = without_top(u, heave / down, packed[6], packed[7], speed)
                zp, xp = left * zp, left * xp
                follow_z, follow_x = -beta * zp / squared, -beta * xp / squared
                zc, xc = links(packed, 0, u, inner, doubt[4][0], speed)
                z, x = both_ways(here, dz, dx, follow_z, follow_x)
                a, b, c = moved_on(packed[0], u * packed[1], w * packed[2], zc, xc, z, x, doubt[4][0])
            if change != 0.0 and width == WIDE:
                if heave == 0.0:
                    more = unpack(packed, NARROW, u, inner, beta, doubt[4][1], speed)
                else:
                    zc, xc = links(packed, NARROW, u, inner, doubt[4][1], speed)
                    z, x = both_ways(here2, dz, dx, follow_z, follow_x)
                    more = moved_on(
                        packed[NARROW], u * packed[NARROW + 1], w * packed[NARROW + 2], zc, xc, z, x, doubt[4][1]
                    )
                a, b, c = with_change((a, b, c), more, change)
            a, b, c = square * (a + own * zp * zp), square * (b + own * zp * xp), square * (c + own * xp * xp)
        else:
            if not values_of_beam(w, down, speed, side, doubt, values):
                continue
            left, dz, dx = 1.0, 0.0, 0.0
            if heave != 0.0:
                left, dz, dx = without_top(u, heave, values[ZP], values[XP], speed)
            zp, xp = left * u * values[ZP], left * values[XP]
            follow_z, follow_x = -beta * zp / squared, -beta * xp / squared
            z, x = both_ways(here, dz, dx, follow_z, follow_x)
            a, b, c = moved_of(values, 0, u, z, x, doubt[4][0])
            if change != 0.0:
                z, x = both_ways(here2, dz, dx, follow_z, follow_x)
                a, b, c = with_change((a, b, c), moved_of(values, OF_CHANGE, u, z, x, doubt[4][1]), change)
            a, b, c = a + own * zp * zp, b + own * zp * xp, c + own * xp * xp
        a, c = max(a, 0.0), max(c, 0.0)
        if b * b > a * c:
            # No covariance is that large: the smaller variance, a near-zero of a polynomial, is the one that is off.
            if a < c:
                a = b * b / c
            else:
                c = b * b / max(a, 1e-300)
        zz[i], zx[i], xx[i] = a, b, c


@kernel
def slopes_of_nodes(w, down, speed, side, times, reaches):
    """Of one beam ending at a distance below the transducer: ∂T/∂c and ∂(X/u0)/∂c of each node at fixed depth.

    Returned: whether it gets there; and at the end the speed, speed over that at the transducer, cosine, and ∂X/∂p.
    """
    away, thickness, gradient, _, excess, ratio, _, _ = side
    times[:], reaches[:] = 0.0, 0.0
    k, slope = sqrt(max(1.0 - w, 0.0)), 0.0
    for j in range(gradient.size):
        dz = min(down - away[j], thickness[j])
        part = dz / thickness[j]
        ends = down <= away[j + 1]
        c1 = speed * ratio[j]
        c = c1 + gradient[j] * dz if ends else speed * ratio[j + 1]
        more = excess[j] + gradient[j] * dz * (c1 + c) / (speed * speed) if ends else excess[j + 1]
        rest = 1.0 - w * (1.0 + more)
        if rest <= 0.0:
            break
        out = sqrt(rest)
        t1, t2, x1, x2, p = across_layer(w, dz, ratio[j], c / speed, k, out, gradient[j], speed)
        times[j] += t1 + (1.0 - part) * t2
        reaches[j] += x1 + (1.0 - part) * x2
        times[j + 1] += part * t2
        reaches[j + 1] += part * x2
        k, slope = out, slope + p
        if ends:
            return True, c, c / speed, k, slope
    return False, nan, nan, nan, nan


@kernel
def move_of_nodes(sines, downs, speed, side, nodes, z, x, z_p, x_p):
    """Change of the end point of each beam with the speed at each node (n, nodes) and with p (n), at a fixed time."""
    times, reaches = nodes[0], nodes[1]
    for i in range(sines.size):
        u = sines[i]
        z[i], x[i], z_p[i], x_p[i] = nan, nan, nan, nan
        if not (abs(u) < 1.0 and downs[i] >= 0.0):
            continue
        there, c, r, k, slope = slopes_of_nodes(u * u, downs[i], speed, side, times, reaches)
        if not there:
            continue
        for j in range(times.size):
            z[i, j] = -c * k * times[j]
            x[i, j] = u * (reaches[j] - r * c * times[j])
        z_p[i], x_p[i] = -u * r * k * slope, k * k * slope
