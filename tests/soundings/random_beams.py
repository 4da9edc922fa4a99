"""What the tests of thinning share: profiles, and how far random beams move, traced without what is tested."""

from __future__ import annotations

import numpy as np

from ocean_sound.profile import Profile
from ocean_sound.soundings import beam_times
from ocean_sound.soundings.beams import HIT, below_transducer, carried_on


def moved(water, other, *, max_angle=65.0, transducer_depth=0.0, beams=10_000, seed=1):
    """The farthest that random beams to random depths move at equal angle and travel time, m, and how many there were.

    Half of the beams are within two degrees of the largest angle, where the shift is largest.
    """
    rng = np.random.default_rng(seed)
    angles = np.concatenate((rng.uniform(0, max_angle, beams // 2), rng.uniform(max_angle - 2, max_angle, beams // 2)))
    bottom = min(water.depth[-1], other.depth[-1])
    there = beam_times(
        water, angles, rng.uniform(transducer_depth, bottom, angles.size), transducer_depth=transducer_depth
    )
    instead = carried_on(below_transducer(other, transducer_depth), angles, there.time)
    distance = np.hypot(there.depth - instead.depth, there.across - instead.across)
    hit = there.status == HIT
    return float(distance[hit].max()), int(hit.sum())


def synthetic():
    """Casts of 1000 levels of many kinds, by name."""
    rng = np.random.default_rng(0)
    z, deep = np.arange(1000.0), np.linspace(0.0, 6000.0, 1000)
    thermocline = 1490.0 + 25.0 / (1.0 + np.exp((z - 60.0) / 8.0)) + 0.017 * z
    below = -np.maximum(z - 100.0, 0.0)
    eta = 2.0 * (deep - 1300.0) / 1300.0
    return {
        "isovelocity": Profile(z, np.full(z.size, 1500.0)),
        "one gradient": Profile(z, 1500.0 + 0.017 * z),
        "thermocline": Profile(z, thermocline),
        "noisy thermocline": Profile(z, thermocline + rng.normal(0.0, 0.1, z.size)),
        "surface duct": Profile(z, 1490.0 + 0.017 * np.minimum(z, 100.0) - 15.0 * (1.0 - np.exp(below / 100.0))),
        "Munk": Profile(deep, 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta)))),
        "polar": Profile(deep, 1440.0 + 0.0165 * deep + rng.normal(0.0, 0.03, deep.size)),
        "fresh over salt": Profile(z, 1440.0 + 40.0 / (1.0 + np.exp(-(z - 8.0) / 0.7)) + 0.017 * z),
    }
