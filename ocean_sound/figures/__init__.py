"""Pictures of results: one function for each, which takes results and returns a matplotlib figure.

Nothing here touches matplotlib's global state; a figure goes to a file by `save_figure`.
"""

from __future__ import annotations

from .archive import archive_figure
from .cast_sheet import cast_sheet_figure
from .comparison import comparison_figure
from .fan import fan_figure
from .interval import interval_figure
from .orders import orders_figure
from .passport import passport_figure
from .profile import profile_figure
from .refraction import refraction_figure
from .saving import check_picture, figure_format, save_figure
from .swath import swath_figure

__all__ = [
    "archive_figure",
    "cast_sheet_figure",
    "check_picture",
    "comparison_figure",
    "fan_figure",
    "figure_format",
    "interval_figure",
    "orders_figure",
    "passport_figure",
    "profile_figure",
    "refraction_figure",
    "save_figure",
    "swath_figure",
]
