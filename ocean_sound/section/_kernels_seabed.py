"""The seabed along a section: cubic Hermite pieces, level beyond the first and last node.

The arrays of a seabed, in this order (`Seabed.kernel_arrays`):

    frame    [first node, last node, bins per metre, the last number below the last node]
    nodes    ranges of the nodes, m, shape (n + 1,)
    inverse  1 / length of each piece, shape (n,)
    guess    for each bin of range the piece that holds its start, int32
    pieces   depth = a[0] + t (a[1] + t (a[2] + t a[3])), t from 0 to 1 along the piece, shape (n, 4)
"""

# mypy: ignore-errors

from __future__ import annotations

from .._numba import kernel

FIRST, LAST, BINS_PER_METRE, INSIDE = 0, 1, 2, 3


@kernel
def seabed(x, arrays):
    """Depth of the seabed (m), its slope dz/dx and its second derivative d²z/dx² (1/m) at range x.

    The curvature of the curve is the second derivative over (1 + slope²)^1.5. Both are 0 beyond the nodes.
    """
    frame, nodes, inverse, guess, pieces = arrays
    inside = min(max(frame[FIRST], x), frame[INSIDE])
    k = guess[int((inside - frame[FIRST]) * frame[BINS_PER_METRE])]
    k += inside >= nodes[k + 1]
    here = min(max(frame[FIRST], x), frame[LAST])
    r = inverse[k] * (here == x)  # nothing changes beyond the nodes
    t = (here - nodes[k]) * inverse[k]
    a1, a2, a3 = pieces[k, 1], pieces[k, 2], pieces[k, 3]
    depth = pieces[k, 0] + t * (a1 + t * (a2 + t * a3))
    return depth, (a1 + t * (2.0 * a2 + t * (3.0 * a3))) * r, (2.0 * a2 + 6.0 * t * a3) * r * r


@kernel
def seabeds(x, arrays, out):
    """The three numbers of `seabed` at many ranges: out has shape (ranges, 3)."""
    for j in range(x.size):
        out[j, 0], out[j, 1], out[j, 2] = seabed(x[j], arrays)
