"""Casts: what was measured, at one place and time, with flags; and the block that holds many of them."""

from __future__ import annotations

from .block import CastBlock
from .cast import FAIL, MISSING, NOT_EVALUATED, PASS, SUSPECT, VARIABLES, Cast
from .checking import check_block, check_cast
from .checking_report import CheckReport
from .checking_thresholds import Thresholds, read_thresholds, threshold_sets
from .completing import complete_cast
from .many import read_many
from .reading import read_blocks, read_casts
from .settings import Settings
from .verdicts import Verdict, apply_verdicts, read_verdicts

__all__ = [
    "FAIL",
    "MISSING",
    "NOT_EVALUATED",
    "PASS",
    "SUSPECT",
    "VARIABLES",
    "Cast",
    "CastBlock",
    "CheckReport",
    "Settings",
    "Thresholds",
    "Verdict",
    "apply_verdicts",
    "check_block",
    "check_cast",
    "complete_cast",
    "read_blocks",
    "read_casts",
    "read_many",
    "read_thresholds",
    "read_verdicts",
    "threshold_sets",
]
