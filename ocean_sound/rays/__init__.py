"""Paths of sound: rays through a profile or a section, arrivals, and where refraction lets none arrive."""

from .connecting import Arrivals, connect, find_arrivals
from .fan import STATUSES, Fan
from .loss import loss
from .many import ensemble
from .shadow import CAUTION, CLASSES, GRID, Shadow, find_shadow, shadow_zones
from .tracing import even_angles, trace, trace_fan

__all__ = [
    "CAUTION",
    "CLASSES",
    "GRID",
    "STATUSES",
    "Arrivals",
    "Fan",
    "Shadow",
    "connect",
    "ensemble",
    "even_angles",
    "find_arrivals",
    "find_shadow",
    "loss",
    "shadow_zones",
    "trace",
    "trace_fan",
]
