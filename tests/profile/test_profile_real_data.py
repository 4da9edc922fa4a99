"""Profiles of real casts: each cast gives a profile or a reason, and the speeds agree with gsw called directly."""

from __future__ import annotations

import os
from pathlib import Path

import gsw
import numpy as np
import pytest

from ocean_sound.casts import CastBlock, read_casts
from ocean_sound.errors import OceanSoundError
from ocean_sound.profile.speeds import speeds_of_block

DATA = os.environ.get("OCEAN_SOUND_DATA")
pytestmark = pytest.mark.skipif(DATA is None, reason="OCEAN_SOUND_DATA does not name the folder of real casts")
FILES = [
    path.relative_to(DATA)
    for folder in ("argo", "exchange", "csv")
    for path in sorted((Path(DATA) / folder).glob("*.*"))
] if DATA else []  # fmt: skip


@pytest.mark.parametrize("name", FILES, ids=str)
def test_every_cast_gives_a_profile_or_a_reason(name):
    try:
        block = CastBlock.from_casts(read_casts(Path(DATA) / name))
    except OceanSoundError as error:
        pytest.skip(f"not a file of casts: {error}")
    columns = speeds_of_block(block, salinity=35.0)
    given = 0
    for index, reason in enumerate(columns.reasons):
        if reason:
            assert columns.row_size[index] == 0
            continue
        profile = columns.profile(index)
        features = profile.features()
        assert 1400.0 < profile.speed.min() <= profile.speed.max() < 1600.0
        assert profile.speed.min() <= features.harmonic_mean_speed <= features.mean_speed <= profile.speed.max()
        given += 1
    assert given + sum(bool(reason) for reason in columns.reasons) == len(block)
    assert given > 0 or len(block) <= 2  # the degenerate cast of two bad levels is a file of its own


def test_speeds_and_depths_of_an_argo_file_against_gsw():
    block = CastBlock.from_casts(read_casts(Path(DATA) / "argo" / "5900446_prof.nc"))
    columns = speeds_of_block(block)
    cast = np.repeat(np.arange(len(block)), columns.row_size)
    level = columns.level
    real = level >= 0
    p, t, s = (block.values[name][level[real]] for name in ("pressure", "temperature", "salinity"))
    latitude, longitude = block.latitude[cast[real]], block.longitude[cast[real]]
    sa = gsw.SA_from_SP(s, p, longitude, latitude)
    assert columns.speed[real] == pytest.approx(gsw.sound_speed(sa, gsw.CT_from_t(sa, t, p), p), abs=1e-9)
    # The cast's own density against the standard ocean: dynamic height alone, at most about 2 m in the open ocean.
    assert np.abs(columns.depth[real] + gsw.z_from_p(p, latitude)).max() < 3.0
