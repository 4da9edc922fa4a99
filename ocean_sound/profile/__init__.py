"""The sound-speed profile, its features and its uncertainty."""

from __future__ import annotations

from .accuracy import INSTRUMENTS, Accuracy
from .features import Duct, Features
from .profile import Profile
from .speeds import SpeedColumns, speeds_of_block

__all__ = ["INSTRUMENTS", "Accuracy", "Duct", "Features", "Profile", "SpeedColumns", "speeds_of_block"]
