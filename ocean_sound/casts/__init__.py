"""Casts: what was measured, at one place and time, with flags; and the block that holds many of them."""

from __future__ import annotations

from .block import CastBlock
from .cast import FAIL, MISSING, NOT_EVALUATED, PASS, SUSPECT, VARIABLES, Cast
from .reading import read_blocks, read_casts

__all__ = [
    "FAIL",
    "MISSING",
    "NOT_EVALUATED",
    "PASS",
    "SUSPECT",
    "VARIABLES",
    "Cast",
    "CastBlock",
    "read_blocks",
    "read_casts",
]
