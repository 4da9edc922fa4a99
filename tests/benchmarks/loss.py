"""Loss on 500 x 1000 points by beams, one thread: seconds, and how it compares with normal modes.

Run as `python tests/benchmarks/loss.py`. The loss is that of the intensity averaged over half a kilometre (shallow) or
one kilometre (deep) of range, from 1 km or 20 km on. Times are the least of three after a warm-up. "modes, complex"
have theirs from complex roots of the even guide; the others take attenuation to first order. Where the seabed
absorbs all, modes lack what the water does not trap, so all but one of these rows count only where the loss is within
25 dB of the least.
"""

from __future__ import annotations

import sys
from pathlib import Path
from time import perf_counter

import numpy as np

from ocean_sound.profile import Profile
from ocean_sound.rays.loss import loss

sys.path.insert(0, str(Path(__file__).parents[1] / "rays"))
from test_loss import averaged, intensity, munk, pekeris, verdict

SHALLOW = Profile([0.0, 100.0], [1500.0, 1500.0])
CASES = (
    # name, water, seabed, frequency, farthest, nearest, average, within, median allowed
    ("Munk 50 Hz, absorbing", munk(), None, 50.0, 100e3, 20e3, 1000.0, 25.0, 0.8),
    ("Munk 50 Hz, absorbing, all", munk(), None, 50.0, 100e3, 20e3, 1000.0, np.inf, 0.8),
    ("Munk 50 Hz, sand", munk(), "sand", 50.0, 100e3, 20e3, 1000.0, np.inf, 0.5),
    ("Munk 200 Hz, absorbing", munk(), None, 200.0, 100e3, 20e3, 1000.0, 25.0, 0.2),
    ("Pekeris 50 Hz, sand", SHALLOW, "sand", 50.0, 20e3, 1e3, 500.0, np.inf, 0.2),
    ("Pekeris 200 Hz, sand", SHALLOW, "sand", 200.0, 20e3, 1e3, 500.0, np.inf, 0.2),
    ("Pekeris 1000 Hz, sand", SHALLOW, "sand", 1000.0, 20e3, 1e3, 500.0, np.inf, 0.2),
)


def timed(work, runs=3):
    """The result and the least of several times, s."""
    found, times = work(), []
    for _ in range(runs):
        start = perf_counter()
        found = work()
        times.append(perf_counter() - start)
    return found, min(times)


def main():
    head = f"{'500 ranges x 1000 depths':28} {'beams':>6} {'width m':>7} {'s':>6} {'modes s':>7}"
    print(f"{head}  {'against':16} {'median':>6} {'90 %':>6} {'bias':>6}  (dB)")
    for name, water, seabed, frequency, farthest, nearest, window, within, allowed in CASES:
        bottom = float(water.depth[-1])
        ranges = np.linspace(farthest / 500, farthest, 500)
        depths = np.linspace(bottom / 1001, bottom * 1000 / 1001, 1000)
        source = 1000.0 if bottom > 1000.0 else 36.0
        options = {
            "source_depth": source, "frequency": frequency, "ranges": ranges, "depths": depths, "seabed": seabed,
            "absorption": 0.0, "insist": True,
        }  # fmt: skip
        beams, seconds = timed(lambda options=options, water=water: loss(water, method="beams", **options))
        modes, modes_seconds = timed(lambda options=options, water=water: loss(water, method="modes", **options), 1)
        columns = max(1, round(window * 500 / farthest))
        far = ranges[: 501 - columns] >= nearest
        ours = averaged(intensity(beams), columns)[far]
        against = {"modes": intensity(modes)}
        if water is SHALLOW:
            against["modes, complex"] = np.abs(pekeris(source, ranges, depths, frequency)) ** 2
        for who, theirs in against.items():
            median, ninety, bias = verdict(ours, averaged(theirs, columns)[far], within)
            print(
                f"{name:28} {beams.attrs['beams']:6d} {beams.attrs['beam_half_width']:7.0f} {seconds:6.2f} "
                f"{modes_seconds:7.2f}  {who:16} {median:6.2f} {ninety:6.2f} {bias:+6.2f}"
            )
            assert median < allowed, (name, median)


if __name__ == "__main__":
    main()
