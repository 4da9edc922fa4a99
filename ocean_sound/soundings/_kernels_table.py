"""Beams by a table of travel times, as good as the exact march to a tolerance that is measured when it is built.

At a fixed node the travel time T of a beam and its distance across X are smooth functions of its ray parameter; at a
fixed time they are not, because of the kinks at nodes. So the table holds, for each cell of w = u0² (u0 the sine of the
angle from the vertical at the transducer) and each node below the transducer, cubics for T and for X/u0, both even in
u0. A beam finds its cell, then its layer (a guess by its time, put right by the cubics), and goes on from the node by
the exact form within the layer. A cell serves the nodes at which its cubics agree with exact marches; below them, and
at angles beyond the table, a beam is marched exactly.

rows (cells, nodes, 8): coefficients of T and of X/u0, ascending, in s from -1 to 1 over the cell.
nodes (nodes, 5): distance below the transducer, (c/c0)², half the gradient below, c, c/c0.
"""

# mypy: ignore-errors

from __future__ import annotations

from math import inf, nan, sin, sqrt

from .._numba import kernel
from ._kernels import BAD, BEYOND, HIT, TURNED, enter, position

CUBIC = 4  # coefficients
RADIANS = 0.017453292519943295
# Half the gradient times the time within a layer, squared, up to which the series below are exact to rounding.
SMALL = 1e-3


@kernel
def march_nodes(w, side, time, reach):
    """Exact T and X/u0 of a beam at each node; returned: the last node it reaches."""
    _, thickness, gradient, inverse, excess, ratio, _, _ = side
    k = sqrt(1.0 - w)
    time[0], reach[0] = 0.0, 0.0
    for j in range(gradient.size):
        rest = 1.0 - w * (1.0 + excess[j + 1])
        if rest <= 0.0:
            return j
        out = sqrt(rest)
        slope = (ratio[j] + ratio[j + 1]) / (k + out)
        q = thickness[j] * sqrt(1.0 + w * slope * slope) * inverse[j]
        y = gradient[j] * q
        a = y * y
        # asinh(y)/y; beyond its reach this series is some 1e-9 off at most, far below any tolerance of a table
        time[j + 1] = time[j] + 2.0 * q * (1.0 - a * (1 / 6 - a * (3 / 40 - a * (5 / 112 - a * 35 / 1152))))
        reach[j + 1] = reach[j] + thickness[j] * slope
        k = out
    return gradient.size


@kernel
def fit_cell(low, high, side, places, inverse, rows, time, reach):
    """Cubics of one cell at every node, from exact marches; returned: the last node that all its beams reach.

    places: values of s at which to march; inverse: the matrix from values there to coefficients.
    """
    last = side[2].size
    rows[:] = 0.0
    for i in range(CUBIC):
        w = 0.5 * (low + high) + 0.5 * (high - low) * places[i]
        last = min(last, march_nodes(w, side, time, reach))
        for j in range(last + 1):
            for c in range(CUBIC):
                rows[j, c] += inverse[c, i] * time[j]
                rows[j, CUBIC + c] += inverse[c, i] * reach[j]
    # The steepest end may turn where the places inside do not.
    return min(last, march_nodes(high, side, time, reach))


@kernel
def served_nodes(low, high, last, speed, side, checks, rows, tolerance, time, reach, errors):
    """The last node down to which a cell's cubics agree with exact marches within a tolerance, m.

    errors: set to the largest disagreement at each node, in time at the local speed plus distance across.
    """
    errors[: last + 1] = 0.0
    for s in checks:
        w = 0.5 * (low + high) + 0.5 * (high - low) * s
        last = min(last, march_nodes(w, side, time, reach))
        u = sqrt(w)
        for j in range(1, last + 1):
            t = rows[j, 0] + s * (rows[j, 1] + s * (rows[j, 2] + s * rows[j, 3]))
            x = rows[j, 4] + s * (rows[j, 5] + s * (rows[j, 6] + s * rows[j, 7]))
            errors[j] = max(errors[j], abs(t - time[j]) * speed * side[5][j] + abs(x - reach[j]) * u)
    for j in range(1, last + 1):
        if errors[j] > tolerance:
            return j - 1
    return last


@kernel
def fill_guesses(last, rows, scale, guesses):
    """For bins of time, even from 0 on, the layer in which a beam in the middle of the cell is then."""
    j = 0
    for b in range(guesses.size):
        while j < last and rows[j + 1, 0] * scale <= b:
            j += 1
        guesses[b] = j


@kernel
def march_on(j, t, x, k, w, time, speed, side):
    """A beam marched exactly from a node that it enters at time t: distance down, distance across, status."""
    u, k0 = sqrt(w), sqrt(max(1.0 - w, 0.0))
    state = enter(j, t, x, k, u, k0, side)
    while time > state[4] and not state[7]:
        state = enter(state[0] + 1, state[4], state[5], state[6], u, k0, side)
    if time > state[4]:
        return nan, nan, TURNED
    down, across, _, _, _ = position(time, state, u, speed, side)
    return down, across, BEYOND if state[0] >= side[2].size else HIT


@kernel
def beams_by_table(angles, times, steering, speed, side, cells, layers, downs, acrosses, statuses):
    """Where many beams are: angles from the vertical in degrees, one-way times, c0 over the speed of steering.

    cells = (edges of w, 2/width, guess of the cell, bins a unit of w, last node served); layers = (bins a second for
    each cell, guess of the layer, rows, nodes).
    """
    edges, shrink, cell_guess, cell_bins, served = cells[0], cells[1], cells[2], cells[3][0], cells[4]
    time_bins, guesses, rows, nodes = layers
    top, bins = edges[edges.size - 1], guesses.shape[1]
    for i in range(angles.size):
        sine, time = sin(angles[i] * RADIANS) * steering[i], times[i]
        w = sine * sine
        if not (w < 1.0 and 0.0 <= time < inf):
            downs[i], acrosses[i], statuses[i] = nan, nan, BAD
            continue
        if w >= top:
            down, across, status = march_on(0, 0.0, 0.0, sqrt(1.0 - w), w, time, speed, side)
        else:
            cell = cell_guess[int(w * cell_bins)]
            while edges[cell + 1] <= w:
                cell += 1
            s = (w - edges[cell]) * shrink[cell] - 1.0
            last, row = served[cell], rows[cell]
            b = time * time_bins[cell]
            j = guesses[cell, int(b)] if b < bins else last
            t = row[j, 0] + s * (row[j, 1] + s * (row[j, 2] + s * row[j, 3]))
            while t > time and j > 0:
                j -= 1
                t = row[j, 0] + s * (row[j, 1] + s * (row[j, 2] + s * row[j, 3]))
            while j < last:
                after = row[j + 1, 0] + s * (row[j + 1, 1] + s * (row[j + 1, 2] + s * row[j + 1, 3]))
                if after > time:
                    break
                j += 1
                t = after
            u = abs(sine)
            x = u * (row[j, 4] + s * (row[j, 5] + s * (row[j, 6] + s * row[j, 7])))
            k = sqrt(max(1.0 - w * nodes[j, 1], 0.0))
            half = nodes[j, 2] * max(time - t, 0.0)
            a = half * half
            if j >= last or a > SMALL:
                down, across, status = march_on(j, t, x, k, w, time, speed, side)
            else:
                # `_kernels.within`, with the series of sinh and cosh in line
                shc = 1.0 + a * (1 / 6 + a * (1 / 120 + a / 5040))
                cosh = 1.0 + a * (1 / 2 + a * (1 / 24 + a / 720))
                sinh = half * shc
                along = nodes[j, 3] * max(time - t, 0.0) / (1.0 + 2.0 * sinh * (sinh - k * cosh))
                down = nodes[j, 0] + along * shc * (k * cosh - sinh)
                across = x + along * u * nodes[j, 4] * shc * cosh
                status = HIT
        downs[i], statuses[i] = down, status
        acrosses[i] = -across if sine < 0.0 else across


@kernel
def only_read_and_write(angles, times, downs, acrosses):
    """What a kernel over beams must do at the least: read two columns and write two."""
    for i in range(angles.size):
        downs[i], acrosses[i] = angles[i], times[i]
