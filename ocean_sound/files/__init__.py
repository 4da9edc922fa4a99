"""Files: what stands in them by convention, how they are written whole or not at all, and where our own lie."""

from __future__ import annotations

from .cf import FLAG_MEANINGS, FLAG_VALUES, attributes, header, unit_text
from .packaged import packaged_profile, packaged_profiles
from .toml import looks_like_toml
from .writing import (
    CONVENTIONS,
    HDF5_LOCK,
    check_output,
    checksum,
    replacing,
    write_csv,
    write_csv_blocks,
    write_dataset,
    write_text,
)

__all__ = [
    "CONVENTIONS",
    "FLAG_MEANINGS",
    "FLAG_VALUES",
    "HDF5_LOCK",
    "attributes",
    "check_output",
    "checksum",
    "header",
    "looks_like_toml",
    "packaged_profile",
    "packaged_profiles",
    "replacing",
    "unit_text",
    "write_csv",
    "write_csv_blocks",
    "write_dataset",
    "write_text",
]
