"""Pictures of results: one function for each, which takes results and returns a matplotlib figure.

Nothing here touches matplotlib's global state; a figure goes to a file by `save_figure`.
"""

from __future__ import annotations

from .archive import archive_figure
from .arrivals import arrivals_figure
from .cast_sheet import cast_sheet_figure
from .comparison import comparison_figure
from .coverage_map import coverage_map_figure
from .detection_range import detection_range_figure
from .detection_section import detection_section_figure
from .dilution import dilution_figure
from .fan import fan_figure
from .gain import gain_figure
from .interval import interval_figure
from .loss import loss_figure
from .orders import orders_figure
from .passport import passport_figure
from .profile import profile_figure
from .refraction import refraction_figure
from .saving import check_picture, figure_format, save_figure
from .section import section_figure
from .shadow import shadow_figure
from .swath import swath_figure

__all__ = [
    "archive_figure",
    "arrivals_figure",
    "cast_sheet_figure",
    "check_picture",
    "comparison_figure",
    "coverage_map_figure",
    "detection_range_figure",
    "detection_section_figure",
    "dilution_figure",
    "fan_figure",
    "figure_format",
    "gain_figure",
    "interval_figure",
    "loss_figure",
    "orders_figure",
    "passport_figure",
    "profile_figure",
    "refraction_figure",
    "save_figure",
    "section_figure",
    "shadow_figure",
    "swath_figure",
]
