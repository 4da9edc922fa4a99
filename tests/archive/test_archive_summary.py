"""The lean summary of many casts says what `Profile.features` says of each."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.archive import _kernels
from ocean_sound.archive.blocks import cut, in_pieces, joined
from ocean_sound.archive.summary import summaries
from ocean_sound.casts import Cast, CastBlock, read_casts
from ocean_sound.profile.speeds import speeds_of_block

pytestmark = pytest.mark.kernels

# a walk of speeds whose swings lie on both sides of the prominence of 0.1 m/s, and often at 0
walks = st.lists(st.sampled_from([-0.25, -0.06, -0.03, 0.0, 0.03, 0.06, 0.25]), min_size=1, max_size=30)


def cast_of(steps, first, name="A"):
    depth = first + 3.0 * np.arange(len(steps) + 1)
    return Cast(id=name, values={"depth": depth, "sound_speed": 1500.0 + np.concatenate(([0.0], np.cumsum(steps)))})


@given(st.lists(st.tuples(walks, st.sampled_from([0.0, 2.0, 49.0, 80.0])), min_size=1, max_size=4))
def test_it_agrees_with_the_features_of_each_profile(casts):
    made = [cast_of(steps, first, str(number)) for number, (steps, first) in enumerate(casts)]
    lone = Cast(id="lone", values={"depth": [5.0], "sound_speed": [1500.0]})  # too few levels for a profile
    speeds = speeds_of_block(CastBlock.from_casts([lone, *made, lone]))
    found = summaries(speeds)
    for index in range(1, len(made) + 1):
        features = speeds.profile(index).features()
        for name, column in found.items():
            expected = getattr(features, name)
            if name == "surface_speed" and features.sonic_layer_depth is None and expected is None:
                assert np.isnan(column[index])
            elif expected is None:
                assert np.isnan(column[index]), name
            else:
                assert column[index] == pytest.approx(expected, rel=1e-12), name
    assert all(np.isnan(column[[0, -1]]).all() for column in found.values())


def test_a_block_without_a_profile():
    lone = Cast(id="lone", values={"depth": [5.0], "sound_speed": [1500.0]})
    assert all(np.isnan(column).all() for column in summaries(speeds_of_block(CastBlock.from_casts([lone]))).values())


def test_a_layer_down_to_the_first_measured_level_counts_only_if_the_surface_was_measured():
    starts, depth = np.array([0, 4, 8, 8]), np.tile([0.0, 49.0, 60.0, 70.0], 2)
    speed = np.tile([1500.0, 1500.8, 1500.2, 1500.1], 2)
    found = _kernels.sonic_layer_depths(starts, depth, speed, np.array([True, False, False]), 0.1)
    assert found.tolist() == [0.0, 49.0, 0.0]


def test_real_casts(real_data):
    casts = [cast for path in sorted((real_data / "argo").glob("*.nc")) for cast in read_casts(path)][::7]
    speeds = speeds_of_block(CastBlock.from_casts(casts))
    found = summaries(speeds)
    for index, reason in enumerate(speeds.reasons):
        if not reason:
            features = speeds.profile(index).features()
            for name, column in found.items():
                expected = np.nan if getattr(features, name) is None else getattr(features, name)
                assert column[index] == pytest.approx(expected, rel=1e-12, nan_ok=True), (casts[index].id, name)


# --- blocks


def mixed():
    return [
        Cast(id="A", values={"depth": [0.0, 5.0], "temperature": [12.0, 11.0]}, flags={"temperature": [1, 3]}),
        Cast(
            id="B",
            values={"depth": [0.0], "sound_speed": [1500.0]},
            uncertainties={"sound_speed": [0.1]},
            attributes={"platform": "X"},
            notes=("a note",),
        ),
        Cast(id="C", values={"pressure": [1.0, 2.0, 3.0], "temperature": [1.0, 2.0, 3.0]}, latitude=3.0),
    ]


def same(one, other):
    assert (one.id, one.notes, tuple(map(dict, one.attributes))) == (
        other.id,
        other.notes,
        tuple(map(dict, other.attributes)),
    )
    assert one.row_size.tolist() == other.row_size.tolist()
    for kind in ("values", "flags", "uncertainties", "origins"):
        a, b = getattr(one, kind), getattr(other, kind)
        assert list(a) == list(b), kind
        assert all(np.array_equal(a[name], b[name], equal_nan=True) for name in a)


def test_blocks_join_as_their_casts_do():
    casts = mixed()
    whole = CastBlock.from_casts(casts)
    same(joined([CastBlock.from_casts(casts[:1]), CastBlock.from_casts(casts[1:])]), whole)
    same(joined([CastBlock.from_casts([cast]) for cast in casts]), whole)
    same(joined([whole]), whole)


def test_a_block_is_cut_into_its_casts():
    whole = CastBlock.from_casts(mixed())
    assert list(in_pieces(whole, 3)) == [(0, 2), (2, 3)]
    assert list(in_pieces(whole, 1)) == [(0, 1), (1, 2), (2, 3)]
    assert list(in_pieces(whole, 100)) == [(0, 3)]
    piece = cut(whole, 1, 3)
    assert piece.id == ("B", "C")
    same(joined([cut(whole, 0, 1), piece]), whole)
