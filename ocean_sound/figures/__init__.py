"""Pictures of results: one function for each, which takes results and returns a matplotlib figure.

Nothing here touches matplotlib's global state; a figure goes to a file by `save_figure`.
"""

from __future__ import annotations

from .fan import fan_figure
from .profile import profile_figure
from .saving import check_picture, figure_format, save_figure

__all__ = ["check_picture", "fan_figure", "figure_format", "profile_figure", "save_figure"]
