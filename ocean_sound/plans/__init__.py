"""Plans in TOML, read field by field.

A plan says what is asked, in the words of the package; the same checks serve the options of the command line. An error
names the file, the field, the value found and what would be accepted, one line for each field at fault.
"""

from .rays import RaysPlan, read_rays_plan
from .sensors import SensorsPlan, read_sensors_plan
from .shared import ABSORBS

__all__ = ["ABSORBS", "RaysPlan", "SensorsPlan", "read_rays_plan", "read_sensors_plan"]
