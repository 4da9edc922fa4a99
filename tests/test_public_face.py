"""The names the package hands on."""

from __future__ import annotations

import pytest

import ocean_sound


@pytest.mark.parametrize("name", ocean_sound.__all__)
def test_each_public_name_is_there(name):
    assert getattr(ocean_sound, name) is not None
    assert name in dir(ocean_sound)


def test_an_unknown_name_is_told():
    with pytest.raises(AttributeError, match="has no attribute 'sond_speed'"):
        _ = ocean_sound.sond_speed
