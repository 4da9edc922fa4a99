"""Sections: a vertical plane of water along a track, a seabed below, a surface above."""

from __future__ import annotations

from .columns import Fit
from .field import SpeedField
from .seabed import Seabed
from .section import Section
from .sediments import SEDIMENTS, Sediment, SedimentKind
from .surface import Surface
from .track import Track

__all__ = ["SEDIMENTS", "Fit", "Seabed", "Section", "Sediment", "SedimentKind", "SpeedField", "Surface", "Track"]
