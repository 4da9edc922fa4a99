"""What a beam adds to the field on the columns of a grid.

The field of a point source is a sum of beams over the launch angle a (Cerveny, Popov and Psencik 1982, Geophys. J. R.
astr. Soc. 70, 109; Porter and Bucker 1987, J. Acoust. Soc. Am. 82, 1349): near its ray each beam has the phase of the
paraxial ray theory with a complex curvature M of our choosing, Im M > 0. Of the two solutions of the dynamic ray
equations only that of the point source is needed if M is chosen anew on each column instead of at the source: there
the ray passes at the depth z(a) with the vertical slowness p(a) and the travel time t(a), and

    field = sum over a of  da A sqrt(i omega (p' - M z')/(2 pi)) exp(i omega (t + p dz + M dz²/2)),   dz = depth - z(a)

where A = sqrt(cos(a) c/(c_source r cos(angle))) and ' is d/da at fixed range. By stationary phase this is ray theory
wherever that holds, for any M; at caustics (z' = 0) it stays finite. Here M = 2 i/(omega w²): a beam of half-width w,
flat along the column. The square root is continuous along the ray: its argument falls by pi/2 with each caustic.

What lies beyond the surface or the seabed is folded back: the part that meets a boundary ahead of its ray has one
reflection more than the ray, the part that meets it behind its ray has one less.
"""

# mypy: ignore-errors

from __future__ import annotations

from math import ceil, cos, exp, pi, sin, sqrt

import numpy as np

from .._numba import kernel
from ._kernels_section import SEABED, SURFACE

# What is known of a beam on a column: depth; P (its horizontal and vertical part); tau; path length; how depth and P
# change with the launch angle on the column; caustics passed; the complex factor of all reflections, and that before
# the last one; which boundary that was at, if the ray has not turned since.
DEPTH, ALONG, DOWN, TIME, PATH, DEPTH_RATE, DOWN_RATE, CAUSTICS, RE, IM, BEFORE_RE, BEFORE_IM, LAST = range(13)
ROW = 13
# Of the settings: tolerances of position and tau, m; wavenumber at c_ref, 1/m; the modulus of a factor below which a
# beam counts for nothing; absorption, Np/m; how far apart rays may lie on a column before their beams are widened, in
# half-widths; how many times these at most; whether depths are evenly spaced.
METRES, TAUS, WAVENUMBER, FAINTEST, ABSORPTION, OVERLAP, WIDEST, EVEN = range(8)
CUT = 2.5  # half-widths beyond which a beam counts for nothing: exp(-CUT²) = 0.002
COARSE = 0.4  # steps of depth in half-widths above which each point gets an exponential of its own


@kernel
def look_up(mu, table, out):
    """From a table of reflection at even steps of mu: log of the modulus, phase, d phase/d mu, and its derivative."""
    last = table.shape[0] - 1
    place = min(max(mu, 0.0), 1.0) * last
    i = min(int(place), last - 1)
    t = place - i
    for m in range(4):
        out[m] = (1.0 - t) * table[i, m] + t * table[i + 1, m]


@kernel
def nth_depth(value, depths, even):
    """The number of the first depth at or below a value."""
    if even and depths.size > 1:
        step = (depths[depths.size - 1] - depths[0]) / (depths.size - 1)
        return int(min(max(ceil((value - depths[0]) / step - 1e-9), 0.0), float(depths.size)))
    return int(np.searchsorted(depths, value))


@kernel
def add_window(real, imag, depths, even, top, bottom, centre, width, rate, phase, size, energy):
    """Add size exp(i phase + i rate (z - centre) - (z - centre)²/width²) at the depths between top and bottom.

    With energy its square is added, to real alone. Where depths are evenly spaced and close, four neighbours go on
    together by multiplication: of four depths on, the turn is always the same, and the factor of the bell shape
    changes by the same factor.
    """
    first = nth_depth(max(top, centre - CUT * width), depths, even)
    end = nth_depth(min(bottom, centre + CUT * width) + 1e-9 * width, depths, even)
    if end <= first:
        return
    step = (depths[depths.size - 1] - depths[0]) / (depths.size - 1) if depths.size > 1 else 0.0
    inverse = 1.0 / width
    if energy:
        inverse *= sqrt(2.0)
        size *= size
    if not even or step * inverse > COARSE or end - first < 8:
        for i in range(first, end):
            t = (depths[i] - centre) * inverse
            bell = size * exp(-t * t)
            if energy:
                real[i] += bell
            else:
                turn = phase + rate * (depths[i] - centre)
                real[i] += bell * cos(turn)
                imag[i] += bell * sin(turn)
        return
    d = step * inverse
    t = (depths[first] - centre) * inverse
    whole = first + 4 * ((end - first) // 4)
    # the bell at four neighbours, and what takes each of them four depths on
    g0, near = size * exp(-t * t), exp(-2.0 * t * d)
    edge = exp(-d * d)
    edge4 = edge * edge * edge * edge
    g1 = g0 * near * edge
    g2 = g0 * near * near * edge4
    g3 = g0 * near * near * near * edge4 * edge4 * edge
    near4 = near * near * near * near
    edge8 = edge4 * edge4
    edge16 = edge8 * edge8
    h0 = near4 * edge16
    h1, h2, h3 = h0 * edge8, h0 * edge16, h0 * edge16 * edge8
    fall = edge16 * edge16
    if energy:
        for i in range(first, whole, 4):
            real[i] += g0
            real[i + 1] += g1
            real[i + 2] += g2
            real[i + 3] += g3
            g0 *= h0
            g1 *= h1
            g2 *= h2
            g3 *= h3
            h0 *= fall
            h1 *= fall
            h2 *= fall
            h3 *= fall
        for i in range(whole, end):
            t = (depths[i] - centre) * inverse
            real[i] += size * exp(-t * t)
        return
    turn = phase + rate * (depths[first] - centre)
    c0, s0 = cos(turn), sin(turn)
    c, s = cos(rate * step), sin(rate * step)
    c1, s1 = c0 * c - s0 * s, s0 * c + c0 * s
    c2, s2 = c1 * c - s1 * s, s1 * c + c1 * s
    c3, s3 = c2 * c - s2 * s, s2 * c + c2 * s
    c, s = c * c - s * s, 2.0 * c * s
    c, s = c * c - s * s, 2.0 * c * s
    for i in range(first, whole, 4):
        real[i] += g0 * c0
        real[i + 1] += g1 * c1
        real[i + 2] += g2 * c2
        real[i + 3] += g3 * c3
        imag[i] += g0 * s0
        imag[i + 1] += g1 * s1
        imag[i + 2] += g2 * s2
        imag[i + 3] += g3 * s3
        c0, s0 = c0 * c - s0 * s, s0 * c + c0 * s
        c1, s1 = c1 * c - s1 * s, s1 * c + c1 * s
        c2, s2 = c2 * c - s2 * s, s2 * c + c2 * s
        c3, s3 = c3 * c - s3 * s, s3 * c + c3 * s
        g0 *= h0
        g1 *= h1
        g2 *= h2
        g3 *= h3
        h0 *= fall
        h1 *= fall
        h2 *= fall
        h3 *= fall
    for i in range(whole, end):
        t = (depths[i] - centre) * inverse
        bell, turn = size * exp(-t * t), phase + rate * (depths[i] - centre)
        real[i] += bell * cos(turn)
        imag[i] += bell * sin(turn)


@kernel
def image_factor(row, kind, w, slope, table, found):
    """The factor of the part of a beam beyond a boundary where (c_ref/c)² is w, and its shift there times k."""
    px = row[ALONG]
    pz = sqrt(max(w - px * px, 0.0))
    mu = abs(pz - slope * px) / sqrt(w * (1.0 + slope * slope))
    look_up(mu, table, found)
    if row[LAST] == kind:
        return row[BEFORE_RE], row[BEFORE_IM], found[2]
    size = exp(found[0])
    c, s = size * cos(found[1]), size * sin(found[1])
    return row[RE] * c - row[IM] * s, row[RE] * s + row[IM] * c, found[2]


@kernel
def add_beam(rows, passed, angle, factor, level, start, columns, tables, settings, grid, energy, sums):
    """Add one beam on all columns that it passed.

    angle: da, rad; factor: of the source, for its intensity. level: the beam counts on columns whose coarseness is not
    above it, there standing for 2**coarseness of its like. start: P along the range at the source. grid: depths; of
    each column the depth and slope of the seabed, (c_ref/c)² at surface and seabed, number of its table, half-width,
    coarseness.
    """
    wavenumber, faintest, absorption = settings[WAVENUMBER], settings[FAINTEST], settings[ABSORPTION]
    even = settings[EVEN] != 0.0
    depths, bed, slopes, w_surface, w_bed, which, widths, coarseness = grid
    found = np.empty(4)
    for j in range(passed):
        if coarseness[j] > level:
            continue
        row = rows[j]
        z, px, pz = row[DEPTH], row[ALONG], row[DOWN]
        if not px > 0.0:
            continue
        width = widths[j] * sqrt(px * px + pz * pz) / px  # of the given width across the ray
        da = angle * 2.0 ** coarseness[j]
        apart = settings[OVERLAP] * da
        width = min(max(width, apart * abs(row[DEPTH_RATE])), settings[WIDEST] * width, bed[j] / CUT)
        m = row[CAUSTICS]
        odd = -1.0 if m % 2.0 == 1.0 else 1.0
        amplitude = da * sqrt(start / (columns[j] * px)) * exp(-absorption * row[PATH])
        phase = wavenumber * row[TIME]
        if energy:
            amplitude = sqrt(factor * da) * sqrt(start / (columns[j] * px)) * exp(-absorption * row[PATH])
            amplitude *= sqrt(sqrt(2.0 / pi) / width)
        else:
            a, b = odd * 2.0 * row[DEPTH_RATE] / (width * width), odd * wavenumber * row[DOWN_RATE]
            # rays next to one that grazes a boundary part so fast that the fan does not resolve them
            a = min(max(a, 0.0), 2.0 / (width * apart))
            b = min(max(b, -2.0 / (width * apart)), 2.0 / (width * apart))
            amplitude *= sqrt(sqrt(a * a + b * b) / (2.0 * pi))
            phase += 0.5 * np.arctan2(b, a) - 0.5 * pi * m
        real, imag = sums[0, j], sums[min(1, sums.shape[0] - 1), j]
        rate = wavenumber * pz
        re, im = row[RE], row[IM]
        if re != 0.0 or im != 0.0:
            size = sqrt(re * re + im * im)
            add_window(
                real, imag, depths, even, 0.0, bed[j], z, width, rate, phase + np.arctan2(im, re), amplitude * size,
                energy,
            )  # fmt: skip
        if z - CUT * width < 0.0:
            re, im, _ = image_factor(row, SURFACE, w_surface[j], 0.0, tables[0], found)
            size = sqrt(re * re + im * im)
            if size > faintest:
                add_window(
                    real, imag, depths, even, 0.0, bed[j], -z, width, -rate, phase + np.arctan2(im, re),
                    amplitude * size, energy,
                )  # fmt: skip
        if z + CUT * width > bed[j]:
            re, im, shift = image_factor(row, SEABED, w_bed[j], slopes[j], tables[which[j]], found)
            size = sqrt(re * re + im * im)
            if size > faintest:
                # depth z is folded to z + 2 (bed - z)/(1 + slope²), and as far along as the slope asks
                flat = 2.0 / (1.0 + slopes[j] * slopes[j])
                aside = -flat * slopes[j]
                tangent = pz / px
                shift /= wavenumber * sqrt(w_bed[j])
                # the window is centred where the folded point lies on the ray, moved back by the shift
                offset = flat * bed[j] - aside * bed[j] * tangent
                stretch = 1.0 - flat + aside * tangent
                if abs(stretch) > 1e-3:
                    centre = (z - shift - offset) / stretch
                    folded = flat * bed[j] + (1.0 - flat) * centre
                    along = aside * (bed[j] - centre)
                    turn = phase + np.arctan2(im, re) + wavenumber * (pz * (folded - z) + px * along)
                    add_window(
                        real, imag, depths, even, 0.0, bed[j], centre, width / abs(stretch),
                        wavenumber * (pz * (1.0 - flat) - px * aside), turn, amplitude * size, energy,
                    )  # fmt: skip
