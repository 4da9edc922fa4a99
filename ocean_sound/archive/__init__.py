"""Archives: thousands of casts in one CF netCDF file, each with its sound speed and its history."""

from __future__ import annotations

from .asking import Archive, Wanted, open_archive
from .building import Built, Progress, build_archive
from .extracting import extract

__all__ = ["Archive", "Built", "Progress", "Wanted", "build_archive", "extract", "open_archive"]
