"""One step of a ray through a section, and how far a step may reach; see `_kernels_section` for the equations."""

# mypy: ignore-errors

from __future__ import annotations

from math import sqrt

import numpy as np

from .._numba import kernel
from ..section._kernels_field import BINS_PER_METRE, DEEPEST, PER_WIDTH, START, VARIES, field

# The state of a ray, and its derivatives: P' (two), tau' = w, length', v'' (two).
X, Z, PX, PZ, TAU, LENGTH, VX, VZ, QX, QZ = range(10)
STATE, DERIVATIVES, STAGES = 10, 6, 6

NODES = np.array([0.0, 1 / 10, 3 / 10, 7 / 10, 17 / 25, 1.0])
# Row i: the weights of the stages before stage i in its position; the last row gives the new position.
COUPLING = np.array(
    [
        [0.0, 0.0, 0.0, 0.0, 0.0],
        [1 / 200, 0.0, 0.0, 0.0, 0.0],
        [-1 / 2200, 1 / 22, 0.0, 0.0, 0.0],
        [637 / 6600, -7 / 110, 7 / 33, 0.0, 0.0],
        [225437 / 1968750, -30073 / 281250, 65569 / 281250, -9367 / 984375, 0.0],
        [151 / 2142, 5 / 116, 385 / 1368, 55 / 168, -6250 / 28101],
    ]
)
SLOPES = np.array([151 / 2142, 25 / 522, 275 / 684, 275 / 252, -78125 / 112404, 1 / 12])
POSITION_CHECK = np.array([1349 / 157500, 7873 / 50000, 192199 / 900000, 521683 / 2100000, -16 / 125, 0.0])
SLOPE_CHECK = np.array([1349 / 157500, 7873 / 45000, 27457 / 90000, 521683 / 630000, -2 / 5, 1 / 12])
POSITION_ERROR = np.append(COUPLING[5], 0.0) - POSITION_CHECK
SLOPE_ERROR = SLOPES - SLOPE_CHECK

MANY = 4  # cells that a step may cross
KINK = 0.02  # see before_kink


@kernel
def shrink(part):
    """exp(-part) for small parts: lengths in water are shorter than where a round Earth has been flattened."""
    return 1.0 - part * (1.0 - 0.5 * part * (1.0 - part / 3.0))


@kernel
def evaluate(x, z, vx, vz, water, bend, k):
    """The derivatives at a point, into k; bend is one over the radius of an Earth that was flattened, else 0."""
    w, w_x, w_z, w_xx, w_xz, w_zz = field(x, z, water)
    k[0], k[1], k[2], k[3] = 0.5 * w_x, 0.5 * w_z, w, sqrt(max(w, 0.0)) * shrink(bend * z)
    k[4], k[5] = 0.5 * (w_xx * vx + w_xz * vz), 0.5 * (w_xz * vx + w_zz * vz)


@kernel
def step(y, h, water, bend, k, out):
    """One step of the state y by h; k[0] is known, the other stages are set, the last of them at the step's end.

    Returned: errors of position, of P, and of tau. The sums over earlier stages are written out, with weights of zero
    for the later ones: a loop over them takes longer than all the rest.
    """
    x, z, px, pz = y[X], y[Z], y[PX], y[PZ]
    vx, vz, qx, qz = y[VX], y[VZ], y[QX], y[QZ]
    b, e, d = SLOPES[0], SLOPE_ERROR[0], POSITION_ERROR[0]
    f, g, w, n, r, s = k[0, 0], k[0, 1], k[0, 2], k[0, 3], k[0, 4], k[0, 5]
    sum_f, sum_g, sum_w, sum_n, sum_r, sum_s = b * f, b * g, b * w, b * n, b * r, b * s
    off_f, off_g, off_w, off_x, off_z = e * f, e * g, e * w, d * f, d * g
    xi, zi, vxi, vzi = x, z, vx, vz
    for i in range(1, STAGES):
        c = NODES[i]
        a0, a1, a2 = COUPLING[i, 0], COUPLING[i, 1], COUPLING[i, 2]
        a3, a4 = COUPLING[i, 3], COUPLING[i, 4]
        f = a0 * k[0, 0] + a1 * k[1, 0] + a2 * k[2, 0] + a3 * k[3, 0] + a4 * k[4, 0]
        g = a0 * k[0, 1] + a1 * k[1, 1] + a2 * k[2, 1] + a3 * k[3, 1] + a4 * k[4, 1]
        r = a0 * k[0, 4] + a1 * k[1, 4] + a2 * k[2, 4] + a3 * k[3, 4] + a4 * k[4, 4]
        s = a0 * k[0, 5] + a1 * k[1, 5] + a2 * k[2, 5] + a3 * k[3, 5] + a4 * k[4, 5]
        xi, zi = x + h * (c * px + h * f), z + h * (c * pz + h * g)
        vxi, vzi = vx + h * (c * qx + h * r), vz + h * (c * qz + h * s)
        w, w_x, w_z, w_xx, w_xz, w_zz = field(xi, zi, water)
        f, g, n = 0.5 * w_x, 0.5 * w_z, sqrt(max(w, 0.0)) * shrink(bend * zi)
        r, s = 0.5 * (w_xx * vxi + w_xz * vzi), 0.5 * (w_xz * vxi + w_zz * vzi)
        k[i, 0], k[i, 1], k[i, 2], k[i, 3], k[i, 4], k[i, 5] = f, g, w, n, r, s
        b, e, d = SLOPES[i], SLOPE_ERROR[i], POSITION_ERROR[i]
        sum_f += b * f
        sum_g += b * g
        sum_w += b * w
        sum_n += b * n
        sum_r += b * r
        sum_s += b * s
        off_f += e * f
        off_g += e * g
        off_w += e * w
        off_x += d * f
        off_z += d * g
    out[X], out[Z], out[VX], out[VZ] = xi, zi, vxi, vzi
    out[PX], out[PZ] = px + h * sum_f, pz + h * sum_g
    out[TAU], out[LENGTH] = y[TAU] + h * sum_w, y[LENGTH] + h * sum_n
    out[QX], out[QZ] = qx + h * sum_r, qz + h * sum_s
    return h * h * (abs(off_x) + abs(off_z)), h * (abs(off_f) + abs(off_g)), h * abs(off_w)


@kernel
def nudge(y, delta, k):
    """Move the state by a very small step, by Taylor's series, with the derivatives k at its start."""
    y[TAU] += delta * (k[2] + delta * (k[0] * y[PX] + k[1] * y[PZ]))
    y[LENGTH] += delta * k[3]
    y[X] += delta * (y[PX] + 0.5 * delta * k[0])
    y[Z] += delta * (y[PZ] + 0.5 * delta * k[1])
    y[VX] += delta * (y[QX] + 0.5 * delta * k[4])
    y[VZ] += delta * (y[QZ] + 0.5 * delta * k[5])
    y[PX] += delta * k[0]
    y[PZ] += delta * k[1]
    y[QX] += delta * k[4]
    y[QZ] += delta * k[5]


@kernel
def cell(z, water):
    """The cell of the field at a depth."""
    frame, depths, _, guess, _ = water
    inside = min(max(0.0, z), frame[DEEPEST])
    i = int(guess[int(inside * frame[BINS_PER_METRE])])
    return i + int(inside >= depths[i + 1])


@kernel
def reach(rate, bend, gap):
    """The step after which a depth that changes by rate h + bend h² has changed by a gap; endless if it never does."""
    root = rate + (1.0 if rate > 0.0 else -1.0) * sqrt(max(rate * rate + 4.0 * bend * gap, 0.0))
    size = 2.0 * gap / root if gap * rate > 0.0 else -0.5 * root / bend
    return size if size > 0.0 else 1e300


@kernel
def before_kink(y, k, h, water, kinks, limit):
    """The step h, or a shorter one to an edge of the field's cells across which P has too great a kink.

    Within a cell the field is as smooth as can be. An edge inside a step, at a distance d from the nearer end of it,
    leaves an error in P of KINK h d² times the jump in the second derivative of P'; it is borne where that is below
    limit times h, an edge counting for no more than its own cell. No step leaps over more than MANY cells: its stages
    might not see what lies between them.
    """
    frame, depths, inverse, _, _ = water
    down_jumps, along_jumps = kinks
    start, rate, bend = y[Z], y[PZ], 0.5 * k[0, 1]
    end = start + h * (rate + h * bend)
    i, j = cell(start, water), cell(end, water)
    way = 1 if j > i else -1
    if abs(j - i) > MANY:
        # more would be a leap over what the stages may not see: so many cells, and then as any other step
        j = i + way * MANY
        edge = j if way > 0 else j + 1
        h = min(h, reach(rate, bend, depths[edge] - start))
        end = depths[edge]
    while i != j:
        edge = i + 1 if way > 0 else i
        gap = depths[edge] - start
        near = min(abs(gap), abs(end - depths[edge]), 1.0 / inverse[i])
        if KINK * down_jumps[edge] * near * near > limit:
            h = min(h, reach(rate, bend, gap))
            break
        i += way
    if frame[VARIES] != 0.0:
        part = max((y[X] - frame[START]) * frame[PER_WIDTH], 0.0)
        end = (y[X] + h * y[PX] - frame[START]) * frame[PER_WIDTH]
        edge = int(part) + 1
        while edge < end and edge < along_jumps.size:
            near = min(edge - part, end - edge, 1.0) / frame[PER_WIDTH]
            if KINK * along_jumps[edge] * near * near > limit:
                return (edge - part) / (frame[PER_WIDTH] * y[PX])
            edge += 1
    return h


@kernel
def spreading(y):
    """The part across the ray of the neighbouring ray's offset, m per radian, positive to the right of travel."""
    return (y[PX] * y[VZ] - y[PZ] * y[VX]) / sqrt(y[PX] * y[PX] + y[PZ] * y[PZ])
