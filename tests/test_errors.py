"""Errors survive the way back from another process."""

from __future__ import annotations

import pickle

import pytest

from ocean_sound import errors

CLASSES = [item for item in vars(errors).values() if isinstance(item, type) and issubclass(item, Exception)]


@pytest.mark.parametrize("kind", CLASSES, ids=lambda kind: kind.__name__)
def test_pickling_keeps_kind_and_message(kind):
    error = pickle.loads(pickle.dumps(kind("what, where, value, remedy")))  # noqa: S301
    assert type(error) is kind
    assert str(error) == "what, where, value, remedy"
    assert isinstance(error, errors.OceanSoundError)
