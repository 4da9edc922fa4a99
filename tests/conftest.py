"""What all tests share."""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from hypothesis import settings

# The same examples in each run, so that a red run means a change; HYPOTHESIS_PROFILE=explore looks for new ones.
settings.register_profile("repeatable", derandomize=True, deadline=None)
settings.register_profile("explore", deadline=None)
settings.load_profile(os.environ.get("HYPOTHESIS_PROFILE", "repeatable"))


@pytest.fixture(scope="session")
def real_data() -> Path:
    """The folder of real open casts, which is not part of the repository: see DEVELOPERS.md."""
    folder = os.environ.get("OCEAN_SOUND_DATA")
    if not folder:
        pytest.skip("OCEAN_SOUND_DATA names no folder of real casts")
    return Path(folder)
