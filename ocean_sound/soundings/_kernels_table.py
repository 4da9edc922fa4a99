"""Beams by a table of travel times, as good as the exact march to a tolerance that is measured when it is built.

At a fixed node the travel time T of a beam and its distance across X are smooth functions of its ray parameter; at a
fixed time they are not, because of the kinks at nodes. So the table holds, for each cell of w = u0² (u0 the sine of the
angle from the vertical at the table's top) and each node below, cubics for T and for X/u0, both even in u0. A beam
finds its cell, then its layer (a guess by the part that its time is of the time to the last node served, put right by
the cubics), and goes on from the node by the exact form within the layer. A cell serves the nodes at which its cubics
agree with exact marches; below them, and at angles beyond the table, a beam is marched exactly.

Beams are worked in chunks, one step at a time for the whole chunk: loops without branches become vector instructions,
and what is rare is listed and done after.

A table is the tuple (edges, begins, bins, cells, spans, guesses, rows, nodes):

    edges (cells + 1,)      of the cells of w
    begins (many,)          the cell in which each even bin of w begins
    bins (3,)               such bins a unit of w; the tolerance, m; the time in which sound goes as far, s
    cells (cells, 2)        2/width; bins of time
    spans (cells, 3)        the last node served; where the cell's rows begin, and its guesses
    guesses (many,)         the node by bin of time
    rows (many, 8)          coefficients of T and of X/u0, ascending, in s from -1 to 1 over the cell
    nodes (nodes, 8)        distance below the top, (c/c0)², half the gradient below, c, c/c0, distance of the next node
"""

# mypy: ignore-errors

from __future__ import annotations

from math import inf, nan, sqrt

import numpy as np

from .._numba import kernel
from ._kernels import BAD, BEYOND, HIT, TURNED, enter, position
from ._kernels_directions import sine_of

CUBIC = 4  # coefficients
# Half the gradient times the time within a layer, squared, up to which the series below are exact to rounding.
SMALL = 1e-3
CHUNK = 256  # beams: what a step hands to the next stays in the nearest cache
LOCATE_ROWS = 6  # work columns of `locate_chunk`
# A vertical beam is taken as one with this w: what its distance across is over its sine has a limit, not a value.
VERTICAL = 1e-16
OUTSIDE = -1  # the node of a beam that the table does not serve


@kernel
def cubic(rows, r, c, s):
    """The cubic that begins at column c of a row."""
    return rows[r, c] + s * (rows[r, c + 1] + s * (rows[r, c + 2] + s * rows[r, c + 3]))


@kernel
def march_nodes(ws, side, ks, times, reaches):
    """Exact T and X/u0 of some beams at each node, side by side; returned: the last node that all reach."""
    _, thickness, gradient, inverse, excess, ratio, _, _ = side
    for b in range(ws.size):
        ks[b], times[0, b], reaches[0, b] = sqrt(1.0 - ws[b]), 0.0, 0.0
    steepest = ws.max()
    for j in range(gradient.size):
        if 1.0 - steepest * (1.0 + excess[j + 1]) <= 0.0:
            return j
        h, g, c, up, both = thickness[j], gradient[j], inverse[j], 1.0 + excess[j + 1], ratio[j] + ratio[j + 1]
        for b in range(ws.size):
            out = sqrt(1.0 - ws[b] * up)
            slope = both / (ks[b] + out)
            q = h * sqrt(1.0 + ws[b] * slope * slope) * c
            y = g * q
            a = y * y
            # asinh(y)/y; beyond its reach this series is some 1e-9 off at most, far below any tolerance of a table
            asinh_ratio = 1.0 - a * (1 / 6 - a * (3 / 40 - a * (5 / 112 - a * 35 / 1152)))
            times[j + 1, b] = times[j, b] + 2.0 * q * asinh_ratio
            reaches[j + 1, b] = reaches[j, b] + h * slope
            ks[b] = out
    return gradient.size


@kernel
def make_cell(low, high, speed, side, places, inverse, tolerance, ws, ks, times, reaches, rows):
    """Cubics of one cell at every node, from exact marches, and how good they are.

    places: values of s at which to march, first those to fit and then those to check. inverse: the matrix from values
    at the first to coefficients. ws, ks (places,), times and reaches (nodes, places): for use here.

    Returned: the last node that all the cell's beams reach; the last down to which the cubics agree with exact marches
    within the tolerance, m (in time at the local speed plus distance across); the largest disagreement down to there.
    """
    for p in range(places.size):
        ws[p] = 0.5 * (low + high) + 0.5 * (high - low) * places[p]
    last = march_nodes(ws, side, ks, times, reaches)
    for p in range(places.size):
        ks[p] = sqrt(ws[p])
    rows[0] = 0.0
    worst = 0.0
    for j in range(1, last + 1):
        for c in range(CUBIC):
            t, x = 0.0, 0.0
            for i in range(CUBIC):
                t += inverse[c, i] * times[j, i]
                x += inverse[c, i] * reaches[j, i]
            rows[j, c], rows[j, CUBIC + c] = t, x
        error, local = 0.0, speed * side[5][j]
        for p in range(CUBIC, places.size):
            t, x = cubic(rows, j, 0, places[p]) - times[j, p], cubic(rows, j, CUBIC, places[p]) - reaches[j, p]
            error = max(error, abs(t) * local + abs(x) * ks[p])
        if error > tolerance:
            return last, j - 1, worst
        worst = max(worst, error)
    return last, last, worst


@kernel
def fill_guesses(last, rows, bins, guesses):
    """The node that a beam in the middle of the cell has passed at the beginning of each bin of time."""
    j = 0
    for b in range(guesses.size):
        while j < last and rows[j + 1, 0] * bins <= b * rows[last, 0]:
            j += 1
        guesses[b] = j


@kernel
def cell_of(w, table):
    """The cell of a beam that the table serves, and where in it the beam is."""
    edges, begins, bins, cells = table[0], table[1], table[2], table[3]
    cell = begins[int(w * bins[0])]
    while edges[cell + 1] <= w:
        cell += 1
    return cell, (w - edges[cell]) * cells[cell, 0] - 1.0


@kernel
def march_on(j, t, x, k, w, time, speed, side):
    """A beam marched exactly from a node that it enters at time t: distance down, distance across, status.

    And how long from then it turns, s; infinite if it does not.
    """
    u = sqrt(w)
    state = enter(j, t, x, k, u, 1.0 - w, side)
    while time > state[4] and not state[7]:
        state = enter(state[0] + 1, state[4], state[5], state[6], u, 1.0 - w, side)
    left = state[4] - time if state[7] else inf
    if left < 0.0:
        return nan, nan, TURNED, left
    down, across, _, _, _ = position(time, state, u, speed, side)
    return down, across, BEYOND if state[0] >= side[2].size else HIT, left


@kernel
def march_from_top(w, time, speed, side):
    """The same from the table's top, but what counts from now on: distance down, across over the sine, status."""
    w = max(w, VERTICAL)
    down, across, status, _ = march_on(0, 0.0, 0.0, sqrt(1.0 - w), w, time, speed, side)
    return down, across / sqrt(w), status


@kernel
def layers_of(ws, times, table, js, taus, reaches, rests, odd):
    """The node that each beam has passed last, the time since, X/u0 and k² there; returned: how many are odd.

    odd: the beams that need more than one step within a layer of a small bend.
    """
    edges, cells, spans, guesses, rows, nodes = table[0], table[3], table[4], table[5], table[6], table[7]
    top, count = edges[edges.size - 1], 0
    for i in range(ws.size):
        w, time = ws[i], times[i]
        if not (w < top and 0.0 <= time < inf):
            js[i], taus[i], reaches[i], rests[i] = OUTSIDE, 0.0, 0.0, 1.0
            odd[count] = i
            count += 1
            continue
        cell, s = cell_of(w, table)
        last, first = spans[cell, 0], spans[cell, 1]
        whole = cubic(rows, first + last, 0, s)
        j = last if time >= whole else guesses[spans[cell, 2] + int(time / whole * cells[cell, 1])]
        r = first + j
        t = cubic(rows, r, 0, s)
        while t > time and j > 0:
            j -= 1
            r -= 1
            t = cubic(rows, r, 0, s)
        while j < last:
            after = cubic(rows, r + 1, 0, s)
            if after > time:
                break
            j += 1
            r += 1
            t = after
        js[i] = j
        taus[i] = max(time - t, 0.0)
        reaches[i] = cubic(rows, r, 4, s)
        rests[i] = 1.0 - w * nodes[j, 1]
        if j >= last or abs(nodes[j, 2] * taus[i]) > 0.03:
            odd[count] = i
            count += 1
    return count


@kernel
def within_layers(aways, gradients, speeds, ratios, taus, rests, downs, reaches):
    """From the nodes on: `_kernels.within`, with the series of sinh and cosh in line; gradients are half of them."""
    for i in range(taus.size):
        k = sqrt(max(rests[i], 0.0))
        half = gradients[i] * taus[i]
        a = half * half
        shc = 1.0 + a * (1 / 6 + a * (1 / 120 + a / 5040))
        cosh = 1.0 + a * (1 / 2 + a * (1 / 24 + a / 720))
        sinh = half * shc
        fall = k * cosh - sinh
        along = speeds[i] * taus[i] * shc / (1.0 - 2.0 * sinh * fall)
        downs[i] = aways[i] + along * fall
        reaches[i] += along * ratios[i] * cosh


@kernel
def stays_in_layer(j, tau, rest, down, nodes, instant):
    """Whether a beam is surely still in the layer in which `within_layers` has left it, and has not turned."""
    half = nodes[j, 2] * tau
    a = half * half
    if a > SMALL or down > nodes[j, 5] or rest <= 0.0:
        return False
    sinh = half * (1.0 + a * (1 / 6 + a * (1 / 120 + a / 5040)))
    cosh = 1.0 + a * (1 / 2 + a * (1 / 24 + a / 720))
    return sqrt(rest) * (1.0 + 2.0 * sinh * sinh) > 2.0 * sinh * cosh + 4.0 * abs(nodes[j, 2]) * instant


@kernel
def locate_chunk(ws, times, speed, side, table, work, counts, downs, reaches, statuses):
    """Where beams of one chunk are: distance below the top, distance across over the sine there, status.

    ws: squared sines at the top; times: since then. work (LOCATE_ROWS, CHUNK) and counts (2, CHUNK) are for use here.
    """
    n = ws.size
    nodes = table[7]
    js, odd = counts[0, :n], counts[1, :n]
    taus, rests = work[0, :n], work[1, :n]
    count = layers_of(ws, times, table, js, taus, reaches, rests, odd)
    nodes_at, speeds, gradients, ratios = work[2, :n], work[3, :n], work[4, :n], work[5, :n]
    for i in range(n):
        j = max(js[i], 0)
        nodes_at[i], gradients[i], speeds[i], ratios[i] = nodes[j, 0], nodes[j, 2], nodes[j, 3], nodes[j, 4]
        statuses[i] = HIT
    within_layers(nodes_at, gradients, speeds, ratios, taus, rests, downs, reaches)
    end, tolerance, instant = nodes[nodes.shape[0] - 1, 0], table[2][1], table[2][2]
    for c in range(count):
        i = odd[c]
        w, time, j = ws[i], times[i], js[i]
        if not (w < 1.0 and 0.0 <= time < inf):
            downs[i], reaches[i], statuses[i] = nan, nan, BAD
        elif j == OUTSIDE:
            downs[i], reaches[i], statuses[i] = march_from_top(w, time, speed, side)
        elif stays_in_layer(j, taus[i], rests[i], downs[i], nodes, instant):
            statuses[i] = HIT if j < nodes.shape[0] - 1 else BEYOND
        else:
            cell, s = cell_of(w, table)
            w = max(w, VERTICAL)
            x, k = sqrt(w) * cubic(table[6], table[4][cell, 1] + j, 4, s), sqrt(max(rests[i], 0.0))
            downs[i], across, statuses[i], left = march_on(j, time - taus[i], x, k, w, time, speed, side)
            reaches[i] = across / sqrt(w)
            if abs(left) < instant:
                downs[i], reaches[i], statuses[i] = march_from_top(w, time, speed, side)
    # so near to where the water ends the table can't tell on which side
    for i in range(n):
        if abs(downs[i] - end) < tolerance:
            downs[i], reaches[i], statuses[i] = march_from_top(ws[i], times[i], speed, side)


@kernel
def beams_by_table(angles, times, steering, speed, side, table, downs, acrosses, statuses):
    """Where many beams are: angles from the vertical in degrees, one-way times, c0 over the speed of steering."""
    work, counts = np.empty((LOCATE_ROWS + 2, CHUNK)), np.empty((2, CHUNK), dtype=np.int64)
    for begin in range(0, angles.size, CHUNK):
        end = min(begin + CHUNK, angles.size)
        n = end - begin
        sines, ws = work[LOCATE_ROWS, :n], work[LOCATE_ROWS + 1, :n]
        for i in range(n):
            sines[i] = sine_of(angles[begin + i]) * steering[begin + i]
            ws[i] = sines[i] * sines[i]
        across = acrosses[begin:end]
        locate_chunk(
            ws, times[begin:end], speed, side, table, work, counts, downs[begin:end], across, statuses[begin:end]
        )
        for i in range(n):
            across[i] *= sines[i]


@kernel
def only_read_and_write(angles, times, downs, acrosses):
    """What a kernel over beams must do at the least: read two columns and write two."""
    for i in range(angles.size):
        downs[i], acrosses[i] = angles[i], times[i]
