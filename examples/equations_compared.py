"""Compare the equations on one real cast, each where it holds.

The cast comes with the gsw package (source and licence in profiles/observed/README.md).
"""

import numpy as np

import ocean_sound as sound
from ocean_sound.files import packaged_profile
from ocean_sound.water import range_report

cast = next(sound.read_casts(packaged_profile("gsw_check_cast_1")))
state = {"temperature": cast.temperature, "salinity": cast.salinity, "pressure": cast.pressure}
place = {"latitude": cast.latitude, "longitude": cast.longitude}
reference = sound.sound_speed(**state, **place, equation="teos10-exact")

print(f"{cast.id}: {len(cast)} levels; speed less that of the exact TEOS-10 form, m/s")
for name, equation in sound.equations().items():
    inside = ~range_report(name, **state, latitude=cast.latitude).outside
    if not inside.any():
        print(f"  {name:<20} holds at none of these levels")
        continue
    speed = sound.sound_speed(**state, **place, equation=name, outside="mask")
    difference = (speed - reference)[inside]
    print(f"  {name:<20} {np.mean(difference):+7.3f} on average over {inside.sum()} levels ({equation.title})")
