"""Soundings: beams of an echo sounder; casts compared, and profiles thinned, by what that does to a beam."""

from __future__ import annotations

from .averaging import Averaged, bin_levels, smooth
from .beams import STATUSES, Beams, beam_positions, beam_times
from .changing import EstimatedScales, WaterChange, estimate_scales, water_change
from .choosing import Choice, Scales, choose_casts
from .comparing import compare, refraction_errors
from .components import Component, Components, read_components
from .correcting import Corrector, Options
from .handing_over import hand_over, to_exactly
from .in_memory import correct_soundings
from .interval import CastInterval, Growth, cast_interval
from .leaving_out import LeftOut, leave_one_out
from .orders import Order, read_orders
from .reach import Reach, largest_angle, uncertainty_by_angle
from .sensitivity import PathUncertainty, path_uncertainty
from .shift import Shift, largest_shift
from .streaming import Corrected, Job, correct_file
from .table import BeamTable, beam_table
from .template import Template, read_template
from .thinning import Thinned, thin

__all__ = [
    "STATUSES",
    "Averaged",
    "BeamTable",
    "Beams",
    "CastInterval",
    "Choice",
    "Component",
    "Components",
    "Corrected",
    "Corrector",
    "EstimatedScales",
    "Growth",
    "Job",
    "LeftOut",
    "Options",
    "Order",
    "PathUncertainty",
    "Reach",
    "Scales",
    "Shift",
    "Template",
    "Thinned",
    "WaterChange",
    "beam_positions",
    "beam_table",
    "beam_times",
    "bin_levels",
    "cast_interval",
    "choose_casts",
    "compare",
    "correct_file",
    "correct_soundings",
    "estimate_scales",
    "hand_over",
    "largest_angle",
    "largest_shift",
    "leave_one_out",
    "path_uncertainty",
    "read_components",
    "read_orders",
    "read_template",
    "refraction_errors",
    "smooth",
    "thin",
    "to_exactly",
    "uncertainty_by_angle",
    "water_change",
]
