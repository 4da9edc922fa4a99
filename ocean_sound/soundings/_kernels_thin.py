"""The fewest levels that keep the error of a profile's integral within a limit.

To first order, thinning moves a beam by sec²(angle) E/c, where E(z) is the integral, from the transducer to z, of the
thinned speed minus the true one. So levels are chosen such that the weighted integral

    E(z) = ∫ w (thinned - true) dz

stays within ±limit at every level. Between two kept levels i and j the thinned speed is a straight line, so all E needs
are three running integrals over depth, of w, w z and w c. Errors of one sign may follow those of the other, so it
matters where E stands when a line begins: a label is kept for each level and each of some bins of E, with the fewest
levels that lead there (dynamic programming). The error in a label is the exact one, not that of its bin.
"""

# mypy: ignore-errors

from __future__ import annotations

from .._numba import kernel

NONE = 1 << 30  # levels of a label that nothing leads to
_SAMPLES = 24  # levels looked at between the ends of a line
_PATIENCE = 48  # lines in a row that may fail before no longer ones are tried


@kernel
def strayed(i, m, slope, depth, speed, running):
    """How much E grows from level i to level m along a line that begins at i."""
    w, wz, wc = running
    across = w[m] - w[i]
    return speed[i] * across + slope * (wz[m] - wz[i] - depth[i] * across) - (wc[m] - wc[i])


@kernel
def fewest(depth, speed, running, limit, count, error, from_level, from_bin):
    """Fill the labels: arrays of shape (levels, bins), of which `count` says how many levels lead to a label.

    The first level is kept, with E = 0; so is the last. Returned: the best bin of the last level, -1 if nothing leads
    there.
    """
    levels, bins = count.shape
    count[:] = NONE
    count[0, bins // 2], error[0, bins // 2] = 1, 0.0
    for i in range(levels - 1):
        if count[i].min() == NONE:
            continue
        failed = 0
        for j in range(i + 1, levels):
            slope = (speed[j] - speed[i]) / (depth[j] - depth[i])
            end = strayed(i, j, slope, depth, speed, running)
            low, high = min(end, 0.0), max(end, 0.0)
            step = max((j - i) // _SAMPLES, 1)
            m = i + step
            while m < j and high - low <= 2.0 * limit:
                between = strayed(i, m, slope, depth, speed, running)
                low, high = min(low, between), max(high, between)
                m += step
            if high - low > 2.0 * limit:
                failed += 1
                if failed > _PATIENCE:
                    break
                continue
            failed = 0
            for b in range(bins):
                if count[i, b] == NONE:
                    continue
                start = error[i, b]
                if start + low < -limit or start + high > limit:
                    continue
                now, total = start + end, count[i, b] + 1
                to = min(max(int((now / limit + 1.0) * 0.5 * bins), 0), bins - 1)
                if total < count[j, to] or (total == count[j, to] and abs(now) < abs(error[j, to])):
                    count[j, to], error[j, to] = total, now
                    from_level[j, to], from_bin[j, to] = i, b
    best = -1
    for b in range(bins):
        if count[levels - 1, b] < NONE and (best < 0 or count[levels - 1, b] < count[levels - 1, best]):
            best = b
    return best
