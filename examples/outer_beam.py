"""Show how wrong an outer beam is if one speed is used for the whole water column.

The cast is invented (a shelf edge in summer, see profiles/README.md). A beam at 65 degrees from the vertical is traced
to the seabed through the profile, and again straight, with the harmonic mean speed and the same travel time.
"""

import math

import ocean_sound as sound
from ocean_sound.files import packaged_profile

SOUNDER_DEPTH, FROM_VERTICAL = 4.0, 65.0

cast = next(sound.read_casts(packaged_profile("ostray_edge")))
profile = sound.Profile.from_cast(cast)
beam = sound.trace(
    profile,
    source_depth=SOUNDER_DEPTH,
    launch_angles=90.0 - FROM_VERTICAL,
    max_range=5000.0,
    max_seabed_bounces=0,
).isel(ray=0)

mean_speed = profile.harmonic_mean_speed(SOUNDER_DEPTH)
slant = mean_speed * float(beam.travel_time)
depth = SOUNDER_DEPTH + slant * math.cos(math.radians(FROM_VERTICAL))
across = slant * math.sin(math.radians(FROM_VERTICAL))

print(f"{cast.id} (invented): beam at {FROM_VERTICAL:.0f} degrees from the vertical, {float(beam.travel_time):.4f} s")
print(f"  traced:   depth {float(beam.depth):7.2f} m, across {float(beam.range):7.2f} m")
print(f"  straight: depth {depth:7.2f} m, across {across:7.2f} m, at the harmonic mean of {mean_speed:.1f} m/s")
print(f"  wrong by  {depth - float(beam.depth):+7.2f} m, across {across - float(beam.range):+7.2f} m")
