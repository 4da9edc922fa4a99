"""CF grids on disk: climatologies of temperature and salinity, and bathymetry, at a point and along a track."""

from __future__ import annotations

from .bathymetry import Bathymetry, open_bathymetry
from .climatology import Climatology, WaterColumn, open_climatology

__all__ = ["Bathymetry", "Climatology", "WaterColumn", "open_bathymetry", "open_climatology"]
