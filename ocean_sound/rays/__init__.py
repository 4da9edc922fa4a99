"""Paths of sound: rays through a profile, and where refraction lets none arrive."""

from .fan import STATUSES, Fan
from .shadow import CAUTION, CLASSES, GRID, Shadow, find_shadow, shadow_zones
from .tracing import even_angles, trace, trace_fan

__all__ = [
    "CAUTION",
    "CLASSES",
    "GRID",
    "STATUSES",
    "Fan",
    "Shadow",
    "even_angles",
    "find_shadow",
    "shadow_zones",
    "trace",
    "trace_fan",
]
