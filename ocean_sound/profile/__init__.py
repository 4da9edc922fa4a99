"""The sound-speed profile, its features and its uncertainty."""

from __future__ import annotations

from .features import Duct, Features
from .profile import Profile

__all__ = ["Duct", "Features", "Profile"]
