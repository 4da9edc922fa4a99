"""Correct a survey line with the casts taken on the way, and see how far it can be trusted.

The survey is invented (a line across a front that moves), so that the truth is known. Casts are blended by a
decorrelation time and length; the other uncertainties of the boat come from boat.toml beside this file.
"""

from pathlib import Path

import numpy as np

import ocean_sound as sound
from ocean_sound.demo.survey import synthetic_survey

SCALES = sound.Scales(time=1.5 * 3600.0, length=30_000.0)
DEPTH = 110.0

survey = synthetic_survey(kind="front", pings=40, beams=15, max_angle=65.0)
components = sound.read_components(Path(__file__).with_name("boat.toml"))
found = sound.correct_soundings(survey.soundings, survey.profiles, scales=SCALES, components=components)

error = (found.depth - survey.truth.depth).values
inside = float((np.abs(error) <= found.tvu_95).mean())
print(f"invented survey: {found.depth.size} soundings, {len(survey.profiles)} casts")
print(f"  depth error {100 * np.sqrt(np.mean(error**2)):.1f} cm rms; {inside:.0%} within the TVU by sound speed alone")
flags = dict(zip(*np.unique(found.sounding_flag, return_counts=True), strict=True))
print(f"  flags: {', '.join(f'{count} of {flag}' for flag, count in flags.items())} (1 pass, 3 suspect, 4 fail)")

order = sound.read_orders()["Special"]
change = sound.water_change(survey.profiles, scales=SCALES)
for when, changed in (("at a cast", 0.0), ("once the water has changed by its standard deviation", 1.0)):
    table = sound.uncertainty_by_angle(
        survey.profiles[0], depths=[60.0, DEPTH], change=change, changed=changed, components=components
    )
    reach = sound.largest_angle(order, table.angle, table.depth, table.tvu_95, table.thu_95)
    angles = ", ".join(
        f"{angle:.0f} degrees to {depth:.0f} m" for depth, angle in zip(table.depth.values, reach.angle, strict=True)
    )
    print(f"  order {order.name}, {when}: beams hold it out to {angles}")

left = sound.leave_one_out(survey.profiles, scales=SCALES, depth=DEPTH, order=order)
print(*(f"  {line}" for line in left.lines()), sep="\n")
