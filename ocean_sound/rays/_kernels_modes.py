"""Normal modes of water over a seabed that is one half-space, by finite differences.

On a mesh of spacing h from the surface (where a mode vanishes) to the seabed the equation psi'' + (w²/c² - x) psi = 0,
x the squared wavenumber, becomes the symmetric tridiagonal system of second order

    psi[j-1] + (h² (q[j] - x) - 2) psi[j] + psi[j+1] = 0,   q = w²/c²,

and its last row holds the half-space below: psi' = -g psi with g = (rho/rho_b) sqrt(x - w²/c_b²), which makes it

    sqrt(2) psi[n-1] + (h² (q[n] - x) - 2 - 2 h g(x)) (psi[n]/sqrt(2)) = 0.

How many of its eigenvalues lie above x is the number of positive pivots of the factorisation (Sturm's sequence), which
stays monotone although g depends on x. Each eigenvalue is bracketed so, then found by Newton's method on the pivot of
the twisted factorisation, where top-down and bottom-up pivots meet (Parlett and Dhillon 1997, Linear Algebra and its
Applications 267:247): it converges for modes that are nothing at the seabed too, and gives the mode's shape. The mesh
is halved once, and both extrapolated to h = 0 (Richardson), as Porter and Reiss (1984, JASA 76:244) do.
"""

# mypy: ignore-errors

from __future__ import annotations

from math import sqrt

from .._numba import kernel

TINY = 1e-300  # stands for a pivot of exactly zero
SEARCHES, STEPS = 200, 60


@kernel
def seabed_slope(x, seabed):
    """The slope -psi'/psi at the seabed of a mode of squared wavenumber x, and its derivative over x.

    seabed: squared wavenumber in the half-space, density of water over that of the seabed.
    """
    rest = max(x - seabed[0], 0.0)
    root = sqrt(rest)
    return seabed[1] * root, 0.5 * seabed[1] / max(root, 1e-12)


@kernel
def count_above(x, squares, h, seabed):
    """How many modes have a squared wavenumber above x; squares: q at the nodes from the first below the surface."""
    n = squares.size
    number = 0
    pivot = 1.0 / TINY
    for j in range(n - 1):
        pivot = h * h * (squares[j] - x) - 2.0 - 1.0 / pivot
        if pivot == 0.0:
            pivot = TINY
        if pivot > 0.0:
            number += 1
    slope, _ = seabed_slope(x, seabed)
    last = h * h * (squares[n - 1] - x) - 2.0 - 2.0 * h * slope - 2.0 / pivot
    return number + (1 if last > 0.0 else 0)


@kernel
def bracket(lowest, highest, number, squares, h, seabed, lows, highs):
    """Brackets of the squared wavenumbers, one mode in each, for the modes by falling wavenumber.

    lows, highs: (2, modes): the ends, and how many modes lie above them.
    """
    lows[0, :], lows[1, :] = lowest, count_above(lowest, squares, h, seabed)
    highs[0, :], highs[1, :] = highest, 0
    for m in range(number):
        for _ in range(SEARCHES):
            if lows[1, m] == m + 1 and highs[1, m] == m:
                break
            middle = 0.5 * (lows[0, m] + highs[0, m])
            if middle <= lows[0, m] or middle >= highs[0, m]:
                break
            count = count_above(middle, squares, h, seabed)
            for other in range(m, number):
                if other < count:
                    if middle > lows[0, other]:
                        lows[0, other], lows[1, other] = middle, count
                elif middle < highs[0, other]:
                    highs[0, other], highs[1, other] = middle, count


@kernel
def shape_at(x, squares, h, seabed, down, up, shape):
    """The shape that belongs to x with 1 where it is largest, and Newton's step to the eigenvalue.

    down, up: work arrays of a node each. The shape is psi at the nodes from the first below the surface.
    """
    n = squares.size
    slope, steep = seabed_slope(x, seabed)
    last = h * h * (squares[n - 1] - x) - 2.0 - 2.0 * h * slope
    pivot = h * h * (squares[0] - x) - 2.0
    down[0] = pivot if pivot != 0.0 else TINY
    for j in range(1, n):
        coupling = 2.0 if j == n - 1 else 1.0
        own = last if j == n - 1 else h * h * (squares[j] - x) - 2.0
        pivot = own - coupling / down[j - 1]
        down[j] = pivot if pivot != 0.0 else TINY
    up[n - 1] = last if last != 0.0 else TINY
    for j in range(n - 2, -1, -1):
        coupling = 2.0 if j == n - 2 else 1.0
        pivot = h * h * (squares[j] - x) - 2.0 - coupling / up[j + 1]
        up[j] = pivot if pivot != 0.0 else TINY
    twist, least = 0, 1.0 / TINY
    for j in range(n):
        own = last if j == n - 1 else h * h * (squares[j] - x) - 2.0
        meeting = abs(down[j] + up[j] - own)
        if meeting < least:
            twist, least = j, meeting
    own = last if twist == n - 1 else h * h * (squares[twist] - x) - 2.0
    meeting = down[twist] + up[twist] - own
    shape[twist] = 1.0
    for j in range(twist - 1, -1, -1):
        shape[j] = -(1.4142135623730951 if j == n - 2 else 1.0) * shape[j + 1] / down[j]
    for j in range(twist + 1, n):
        shape[j] = -(1.4142135623730951 if j == n - 1 else 1.0) * shape[j - 1] / up[j]
    # The pivot falls with x by h² times the squared length of the shape, and by what the seabed adds at its last node.
    fall = 2.0 * h * steep * shape[n - 1] * shape[n - 1]
    for j in range(n):
        fall += h * h * shape[j] * shape[j]
    shape[n - 1] *= 1.4142135623730951  # back from the symmetric form
    return meeting / fall


@kernel
def find_modes(lows, highs, squares, h, seabed, down, up, values, shapes):
    """Squared wavenumbers and shapes of the modes in their brackets; returned: how many did not converge."""
    lost = 0
    for m in range(values.size):
        low, high = lows[0, m], highs[0, m]
        x = 0.5 * (low + high)
        found = False
        for _ in range(STEPS):
            step = shape_at(x, squares, h, seabed, down, up, shapes[m])
            following = x + step
            if abs(step) <= 1e-15 * x:
                found = True
                break
            if low <= following <= high:
                x = following
                continue
            # off the bracket: Newton's step is of another mode yet; halve by Sturm's count
            if count_above(x, squares, h, seabed) > m:
                low = x
            else:
                high = x
            x = 0.5 * (low + high)
        values[m] = x
        if not found and abs(step) > 1e-11 * x:
            lost += 1
    return lost


@kernel
def follow_modes(squares, h, seabed, down, up, values, shapes):
    """As `find_modes`, from values near the wanted ones; returned: how many ended elsewhere, told by their nodes."""
    n = squares.size
    lost = 0
    for m in range(values.size):
        x = values[m]
        step = x
        for _ in range(STEPS):
            step = shape_at(x, squares, h, seabed, down, up, shapes[m])
            x += step
            if not x > seabed[0] or abs(step) <= 1e-15 * x:
                break
        values[m] = x
        nodes = 0
        before = shapes[m, 0]
        for j in range(1, n):
            here = shapes[m, j]
            if here != 0.0:
                if before * here < 0.0:
                    nodes += 1
                before = here
        if nodes != m or abs(step) > 1e-11 * x:
            lost += 1
    return lost
