import pickle

import numpy as np
import pytest

from ocean_sound.casts import Cast, CastBlock
from ocean_sound.errors import InputError


def casts():
    return [
        Cast(
            id="A",
            values={"depth": [0.0, 5.0], "temperature": [10.0, 9.0]},
            latitude=1.0,
            time="2026-01-01",
            notes=("n",),
        ),
        Cast(id="B", values={"pressure": [1.0], "sound_speed": [1500.0]}, longitude=2.0, attributes={"station": "7"}),
        Cast(
            id="C",
            values={"depth": [0.0, 1.0, 2.0], "temperature": [1.0, 2.0, np.nan]},
            flags={"temperature": [1, 4, 9]},
            source="c.csv",
        ),
    ]


def test_what_goes_in_comes_out():
    block = CastBlock.from_casts(casts(), left_out=[("D", "empty")])
    assert len(block) == 3
    assert block.row_size.tolist() == [2, 1, 3]
    assert block.left_out == (("D", "empty"),)
    for before, after in zip(casts(), block, strict=True):
        assert repr(after) == repr(before)
        assert set(after.values) == set(before.values)
        assert (after.source, after.notes, after.attributes) == (before.source, before.notes, before.attributes)
        for name, column in before.values.items():
            np.testing.assert_array_equal(after.values[name], column)


def test_gaps_between_casts_are_flagged_missing():
    block = CastBlock.from_casts(casts())
    assert block.flags["temperature"].tolist() == [2, 2, 9, 1, 4, 9]
    assert block.flags["pressure"].tolist() == [9, 9, 2, 9, 9, 9]
    assert np.isnan(block.values["sound_speed"]).tolist() == [True, True, False, True, True, True]


def test_a_cast_is_a_view():
    block = CastBlock.from_casts(casts())
    assert np.shares_memory(block[0].temperature, block.values["temperature"])
    assert np.shares_memory(block[2].flags["temperature"], block.flags["temperature"])
    assert block[-1].id == "C"
    assert [cast.id for cast in block[1:]] == ["B", "C"]
    with pytest.raises(IndexError, match="cast 3 of a block of 3"):
        block[3]


def test_pickling():
    block = pickle.loads(pickle.dumps(CastBlock.from_casts(casts())))  # noqa: S301
    assert repr(block) == "<CastBlock: 3 casts, 6 levels, pressure depth temperature sound_speed>"
    assert block[1].attributes == {"station": "7"}


def test_what_is_no_block():
    fields = {"id": ("A",), "time": ["NaT"], "latitude": [0.0], "longitude": [0.0]}
    with pytest.raises(InputError, match="at least one cast"):
        CastBlock.from_casts([])
    with pytest.raises(InputError, match=r"depth has shape \(3,\); the row sizes add up to 2 levels"):
        CastBlock(row_size=[2], values={"depth": [1.0, 2.0, 3.0]}, **fields)
    with pytest.raises(InputError, match="cast 0 of the block has no level"):
        CastBlock(row_size=[0], values={"depth": []}, **fields)
    with pytest.raises(InputError, match="2 of id for 1 casts"):
        CastBlock(row_size=[1], values={"depth": [1.0]}, **(fields | {"id": ("A", "B")}))
