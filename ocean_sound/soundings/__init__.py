"""Soundings: beams of an echo sounder; casts compared, and profiles thinned, by what that does to a beam."""

from __future__ import annotations

from .averaging import Averaged, bin_levels, smooth
from .beams import STATUSES, Beams, beam_positions, beam_times
from .comparing import compare, refraction_errors
from .handing_over import hand_over, to_exactly
from .shift import Shift, largest_shift
from .table import BeamTable, beam_table
from .template import Template, read_template
from .thinning import Thinned, thin

__all__ = [
    "STATUSES",
    "Averaged",
    "BeamTable",
    "Beams",
    "Shift",
    "Template",
    "Thinned",
    "beam_positions",
    "beam_table",
    "beam_times",
    "bin_levels",
    "compare",
    "hand_over",
    "largest_shift",
    "read_template",
    "refraction_errors",
    "smooth",
    "thin",
    "to_exactly",
]
