"""Every error the package raises on purpose.

All descend from `OceanSoundError`, so that one `except` catches them, and from the built-in that fits, so that code
which knows nothing of this package still does the right thing. Each takes one message and nothing else: such errors
survive pickling, and so the way back from a worker process.

A message says what is wrong, where (file, cast, level, field), the value found, and what would be right.
"""

from __future__ import annotations


class OceanSoundError(Exception):
    """The root of all errors raised on purpose."""


class InputError(OceanSoundError, ValueError):
    """An argument, option or field that can't be used as it stands."""


class CastFileError(OceanSoundError, ValueError):
    """A file that can't be read as casts: missing, not of a known format, or broken at a named place."""


class PlanError(OceanSoundError, ValueError):
    """A TOML plan with a field that is missing, unknown or impossible."""


class OutputError(OceanSoundError, OSError):
    """An output that can't be written: it exists, or its folder does not, or the disk refused."""


class WorkerError(OceanSoundError, RuntimeError):
    """A worker process or a node of a cluster that went away before its work was done."""
