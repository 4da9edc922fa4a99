"""The demonstration: an invented survey and a real open cast, from casts to paths of sound."""

from .scenario import MARKER, run_demo

__all__ = ["MARKER", "run_demo"]
