"""From the sums over casts to what is written of each sounding: depth, position, uncertainty, orders, what to say."""

# mypy: ignore-errors

from __future__ import annotations

from math import atan2, inf, nan, sqrt

import numpy as np

from .._numba import kernel
from ._kernels_correct import (
    ABOVE,
    BELOW,
    IN_PART,
    LEAST_PART,
    NO_DOUBT,
    NO_PLACE,
    SPEED_DIFFERS,
    WHOLE,
    spread,
)
from ._kernels_positions import DEGREES, place_chunk
from ._kernels_table import CHUNK

FRAME = 9  # rows of a frame, see `_kernels_positions`
TVU_FACTOR = 1.96  # S-44 edition 6.0.0, section 2.6; and the radius of errors along one line


@kernel
def blend(base, sums, depths, acrosses, alongs, codes):
    """The mean over the casts of each sounding of a block, and what to say of it.

    base: what fails a sounding before any cast is looked at, else 0.
    """
    total, depth, across, along, _, why, bits = sums
    for b in range(total.size):
        part = total[b]
        code = base[b]
        if code == 0 and not part >= LEAST_PART:
            code = why[b]
        if code != 0:
            depths[b], acrosses[b], alongs[b], codes[b] = nan, nan, nan, code
            continue
        depths[b], acrosses[b], alongs[b] = depth[b] / part, across[b] / part, along[b] / part
        codes[b] = BELOW if bits[b] & 1 else ABOVE if bits[b] & 2 else IN_PART if part < WHOLE else 0


@kernel
def place(m, frame, one_minus_e2, acrosses, alongs, codes, latitudes, longitudes):
    """Positions of a block's soundings; frame: columns by ping, in the order of `_kernels_positions`."""
    work = np.empty((FRAME + 2, CHUNK))
    for begin in range(0, acrosses.size, CHUNK):
        end = min(begin + CHUNK, acrosses.size)
        n = end - begin
        for c in range(FRAME):
            spread(frame[c], begin, m, work[c, :n])
        latitude, longitude = latitudes[begin:end], longitudes[begin:end]
        place_chunk(
            acrosses[begin:end], alongs[begin:end], work[:, :n], one_minus_e2, work[FRAME, :n], work[FRAME + 1, :n],
            latitude, longitude,
        )  # fmt: skip
        for i in range(n):
            if codes[begin + i] == 0 and not abs(longitude[i] + latitude[i]) >= 0.0:
                codes[begin + i] = NO_PLACE


@kernel
def differ(m, apart, most, codes):
    """Mark soundings whose speed of steering is farther than `most` from that of the casts; apart: by how much."""
    value = np.empty(CHUNK)
    for begin in range(0, codes.size, CHUNK):
        n = min(CHUNK, codes.size - begin)
        spread(apart, begin, m, value[:n])
        for i in range(n):
            if codes[begin + i] == 0 and abs(value[i]) > most:
                codes[begin + i] = SPEED_DIFFERS


@kernel
def levels(m, source, height, level, depths, heights, reduced):
    """Heights above the ellipsoid from those of the transducers, and depths below the datum."""
    work = np.empty((3, CHUNK))
    for begin in range(0, depths.size, CHUNK):
        n = min(CHUNK, depths.size - begin)
        spread(source, begin, m, work[0, :n])
        if heights.size:
            spread(height, begin, m, work[1, :n])
            for i in range(n):
                heights[begin + i] = work[1, i] - (depths[begin + i] - work[0, i])
        if reduced.size:
            spread(level, begin, m, work[2, :n])
            for i in range(n):
                reduced[begin + i] = depths[begin + i] - work[2, i]


@kernel
def order_bits(depth, tvu, thu, orders):
    """One bit for each order whose limits both hold; orders (orders, 4): fixed part and share of TVU, of THU."""
    held, below = 0, max(depth, 0.0)
    for o in range(orders.shape[0]):
        share = orders[o, 1] * below
        vertical = orders[o, 0] == inf or tvu * tvu <= orders[o, 0] * orders[o, 0] + share * share
        horizontal = orders[o, 2] == inf or thu <= orders[o, 2] + orders[o, 3] * below
        if vertical and horizontal and abs(depth) < inf:
            held |= 1 << o
    return held


@kernel
def doubt(sums, total, depths, orders, codes, sigmas, tvus, thus, held):
    """Uncertainty from sound speed alone: the covariances of the casts by weight, which is never too small.

    (Whatever the correlation of the errors e of the casts, the variance of sum w e is at most sum w var e.) What one
    speed of sound does to a beam moves it in one vertical plane, so 95 % of the radius is 1.96 standard deviations.
    """
    for b in range(depths.size):
        part = total[b] if depths[b] == depths[b] else nan
        sigma = sqrt(sums[0][b] / part)
        sigmas[b], tvus[b] = sigma, TVU_FACTOR * sigma
        thus[b] = TVU_FACTOR * sqrt(sums[1][b] / part)
        if codes[b] == 0 and not sigma >= 0.0:
            codes[b] = NO_DOUBT
    for b in range(held.size):
        held[b] = order_bits(depths[b], tvus[b], thus[b], orders)


@kernel
def variance_by(polynomial, depth, angle):
    """The variance of components at a depth and an angle from the vertical, degrees; see the head of `components`."""
    p = polynomial
    return p[0] + angle * (p[1] + angle * p[2]) + depth * depth * (p[3] + angle * (p[4] + angle * p[5]))


@kernel
def all_doubt(m, source, sums, total, depths, acrosses, alongs, parts, radius, orders, tvus, thus, held):
    """Uncertainty of all components together.

    parts: polynomials of the other components' variances, vertical and horizontal, at the angle of the straight line to
    the sounding. radius: that of 95 % by the squared ratio of the axes, and its steps.
    """
    factors, steps = radius
    work = np.empty(CHUNK)
    for begin in range(0, depths.size, CHUNK):
        n = min(CHUNK, depths.size - begin)
        spread(source, begin, m, work[:n])
        for i in range(n):
            b = begin + i
            if not total[b] > 0.0 or depths[b] != depths[b]:
                tvus[b], thus[b] = nan, nan
                continue
            distance = sqrt(acrosses[b] * acrosses[b] + alongs[b] * alongs[b])
            angle = DEGREES * atan2(distance, depths[b] - work[i])
            vertical = variance_by(parts[0], max(depths[b], 0.0), angle)
            small = variance_by(parts[1], max(depths[b], 0.0), angle)
            tvus[b] = TVU_FACTOR * sqrt(sums[0][b] / total[b] + vertical)
            large = sums[1][b] / total[b] + small
            if not large > 0.0:
                thus[b] = large
                continue
            place = min(small / large, 1.0) * (factors.size - 1)
            node = int(place)
            thus[b] = sqrt(large) * (factors[node] + (place - node) * steps[node])
    for b in range(held.size):
        held[b] = order_bits(depths[b], tvus[b], thus[b], orders)
