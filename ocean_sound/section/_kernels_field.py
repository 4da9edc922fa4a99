"""The speed field of a section and its derivatives: one cell of a tensor cubic spline.

The arrays of a field, in this order (`SpeedField.kernel_arrays`):

    frame         [first edge in range, 1 / width of a cell, bins per metre, the last number above the last edge in
                  depth, 1.0 if the field varies with range else 0.0]
    depths        edges of the cells in depth, m, from 0 down, shape (nz + 1,)
    inverse       1 / height of each cell, shape (nz,)
    guess         for each bin of depth the cell that holds its upper end, int32
    coefficients  of each cell, shape (nx, nz, 16)

Beyond the edges in range the field is that of the edge. Above the surface and below the last edge the polynomial of the
edge cell goes on for the height of that cell, then linearly: a step that ends a little outside sees the same smooth
water, and no cubic runs away. What is not a number stays so in depth, and counts as the first edge in range.
"""

# mypy: ignore-errors

from __future__ import annotations

from .._numba import kernel

START, PER_WIDTH, BINS_PER_METRE, DEEPEST, VARIES = 0, 1, 2, 3, 4


@kernel
def field(x, z, arrays):
    """At range x and depth z w = (c_ref/c)² and w_x, w_z, w_xx, w_xz, w_zz, in powers of 1/m."""
    frame, depths, inverse, guess, coefficients = arrays
    # Without a branch: a loop here costs as much as all the rest. A bin is thinner than a cell, so one step is enough.
    inside = min(max(0.0, z), frame[DEEPEST])
    k = guess[int(inside * frame[BINS_PER_METRE])]
    k += inside >= depths[k + 1]
    r = inverse[k]
    t = (z - depths[k]) * r
    beyond = 0.0  # in heights of the cell
    if t < -1.0:
        beyond, t = t + 1.0, -1.0
    elif t > 2.0:
        beyond, t = t - 2.0, 2.0

    if frame[VARIES] == 0.0:
        a0, a1 = coefficients[0, k, 0], coefficients[0, k, 1]
        a2, a3 = coefficients[0, k, 2], coefficients[0, k, 3]
        w = a0 + t * (a1 + t * (a2 + t * a3))
        w_z = a1 + t * (2.0 * a2 + t * (3.0 * a3))
        w_zz = 2.0 * a2 + 6.0 * t * a3
        if beyond != 0.0:
            w, w_zz = w + w_z * beyond, 0.0
        return w, 0.0, w_z * r, 0.0, 0.0, w_zz * r * r

    u = (x - frame[START]) * frame[PER_WIDTH]
    cells = coefficients.shape[0]
    held = 1.0
    if not u >= 0.0:
        u, held = 0.0, 0.0
    elif u > cells:
        u, held = float(cells), 0.0
    i = min(int(u), cells - 1)
    s = u - i
    # polynomials in depth at this range: the field's, its slope's and its curvature's along the range
    b0 = coefficients[i, k, 0] + s * (coefficients[i, k, 4] + s * (coefficients[i, k, 8] + s * coefficients[i, k, 12]))
    b1 = coefficients[i, k, 1] + s * (coefficients[i, k, 5] + s * (coefficients[i, k, 9] + s * coefficients[i, k, 13]))
    b2 = coefficients[i, k, 2] + s * (coefficients[i, k, 6] + s * (coefficients[i, k, 10] + s * coefficients[i, k, 14]))
    b3 = coefficients[i, k, 3] + s * (coefficients[i, k, 7] + s * (coefficients[i, k, 11] + s * coefficients[i, k, 15]))
    c0 = coefficients[i, k, 4] + s * (2.0 * coefficients[i, k, 8] + s * (3.0 * coefficients[i, k, 12]))
    c1 = coefficients[i, k, 5] + s * (2.0 * coefficients[i, k, 9] + s * (3.0 * coefficients[i, k, 13]))
    c2 = coefficients[i, k, 6] + s * (2.0 * coefficients[i, k, 10] + s * (3.0 * coefficients[i, k, 14]))
    c3 = coefficients[i, k, 7] + s * (2.0 * coefficients[i, k, 11] + s * (3.0 * coefficients[i, k, 15]))
    d0 = 2.0 * coefficients[i, k, 8] + 6.0 * s * coefficients[i, k, 12]
    d1 = 2.0 * coefficients[i, k, 9] + 6.0 * s * coefficients[i, k, 13]
    d2 = 2.0 * coefficients[i, k, 10] + 6.0 * s * coefficients[i, k, 14]
    d3 = 2.0 * coefficients[i, k, 11] + 6.0 * s * coefficients[i, k, 15]
    w = b0 + t * (b1 + t * (b2 + t * b3))
    w_z = b1 + t * (2.0 * b2 + t * (3.0 * b3))
    w_zz = 2.0 * b2 + 6.0 * t * b3
    w_x = c0 + t * (c1 + t * (c2 + t * c3))
    w_xz = c1 + t * (2.0 * c2 + t * (3.0 * c3))
    w_xx = d0 + t * (d1 + t * (d2 + t * d3))
    if beyond != 0.0:
        w, w_x, w_zz = w + w_z * beyond, w_x + w_xz * beyond, 0.0
        w_xx += beyond * (d1 + t * (2.0 * d2 + t * (3.0 * d3)))
    q = frame[PER_WIDTH] * held
    return w, w_x * q, w_z * r, w_xx * q * q, w_xz * q * r, w_zz * r * r


@kernel
def fields(x, z, arrays, out):
    """The six numbers of `field` at many points: out has shape (points, 6)."""
    for j in range(x.size):
        out[j, 0], out[j, 1], out[j, 2], out[j, 3], out[j, 4], out[j, 5] = field(x[j], z[j], arrays)
