"""Other components of uncertainty: arithmetic by hand, drawn errors, files at fault."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.soundings.components import (
    Component,
    Components,
    components_from_fields,
    read_components,
    together,
    variance_by,
)

FILE = """
source = "invented"

[heave]
kind = "vertical"
fixed = 0.05
share = 0.001
level = 95
title = "heave of the vessel"

[roll]
kind = "vertical"
share_per_degree = 2e-5
k = 2

[positioning]
kind = "horizontal"
fixed = 1.0
level = 95
"""


def written(tmp_path, text):
    path = tmp_path / "others.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_a_file_by_hand(tmp_path):
    others = read_components(written(tmp_path, FILE))
    assert [part.name for part in others.parts] == ["heave", "roll", "positioning"]
    assert others.source == "invented"
    heave, roll = math.hypot(0.05, 0.001 * 30.0) / 1.96, 2e-5 * 60.0 * 30.0 / 2.0
    assert others.vertical(30.0, -60.0) == pytest.approx(math.hypot(heave, roll))
    assert others.horizontal(30.0) == pytest.approx(1.0 / math.sqrt(-2.0 * math.log(0.05)))
    assert others.tvu_95(30.0, 60.0, 0.04) == pytest.approx(1.96 * math.sqrt(heave**2 + roll**2 + 0.04))
    assert others.thu_95(30.0, 60.0, 0.0) == pytest.approx(1.0, rel=1e-6)


def test_a_level_is_the_share_of_drawn_errors():
    errors = np.random.default_rng(1).normal(size=(2, 200_000))
    for level in (50.0, 90.0, 95.0, 99.0):
        depth = Component("a", "vertical", fixed=1.0, level=level)
        place = Component("a", "horizontal", fixed=1.0, level=level)
        assert np.mean(np.abs(errors[0]) * depth.sigma(0.0) < 1.0) == pytest.approx(level / 100.0, abs=0.003)
        assert np.mean(np.hypot(*errors) * place.sigma(0.0) < 1.0) == pytest.approx(level / 100.0, abs=0.003)


def test_position_and_refraction_together_hold_95_per_cent():
    others = Components((Component("positioning", "horizontal", fixed=0.7, k=1.0),))
    errors = np.random.default_rng(2).normal(size=(2, 200_000))
    radius = others.thu_95(50.0, 60.0, 1.2**2)
    assert np.mean(np.hypot(np.hypot(0.7, 1.2) * errors[0], 0.7 * errors[1]) < radius) == pytest.approx(0.95, abs=0.003)


@given(
    parts=st.lists(st.tuples(*(st.floats(0.0, 1.0) for _ in range(4)), st.floats(0.5, 3.0)), min_size=1, max_size=4),
    depth=st.floats(-5.0, 500.0),
    angle=st.floats(-80.0, 80.0),
)
def test_the_polynomial_is_the_sum_of_squares(parts, depth, angle):
    made, total = [], 0.0
    for number, (a, b, c, d, k) in enumerate(parts):
        part = Component(str(number), "vertical", fixed=a + 0.01, fixed_per_degree=b, share=c, share_per_degree=d, k=k)
        made.append(part)
        size = math.hypot(a + 0.01 + b * abs(angle), (c + d * abs(angle)) * max(depth, 0.0)) / k
        assert part.sigma(depth, angle) == pytest.approx(size)
        total += size**2
    assert Components(tuple(made)).vertical(depth, angle) == pytest.approx(math.sqrt(total))
    assert Components(tuple(made)).horizontal(depth, angle) == 0.0


def test_arrays_and_unknown_variances():
    others = Components((Component("tide", "vertical", fixed=0.1, k=1),))
    assert others.vertical(np.full((2, 3), 10.0)).shape == (2, 3)
    np.testing.assert_allclose(others.tvu_95(10.0, 0.0, [0.0, np.nan]), [0.196, np.nan])
    assert np.isnan(others.vertical(np.nan))
    assert variance_by(np.arange(6.0), 2.0, 3.0) == 0 + 3 * 1 + 9 * 2 + 4 * (3 + 3 * 4 + 9 * 5)


def test_the_table_for_kernels_is_as_good_as_said(tmp_path):
    others = read_components(written(tmp_path, FILE))
    tangents, depths, vertical, horizontal = together(others)
    angles = np.degrees(np.arctan(tangents))
    assert (angles[0], depths[0]) == (0.0, 0.0)
    for depth, angle in ((0.3, 1.0), (17.0, 33.0), (140.0, 61.0), (5000.0, 74.0)):
        tangent = math.tan(math.radians(angle))
        by_angle = np.array([np.interp(depth, depths, row) for row in vertical])
        found, exact = np.interp(tangent, tangents, by_angle), others.vertical(depth, angle)
        assert found == pytest.approx(exact, rel=0.003)
    np.testing.assert_allclose(horizontal, others.horizontal(1.0))


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("[tide]\nkind = 'vertical'\nfixed = 0.1", r"component 'tide': neither 'k' nor 'level' is given: give one"),
        ("[tide]\nkind = 'vertical'\nfixed = 0.1\nk = 1\nlevel = 95", "both 'k' and 'level' are given"),
        ("[tide]\nkind = 'upward'\nfixed = 0.1\nk = 1", "field 'kind' is 'upward': give 'vertical' or 'horizontal'"),
        ("[tide]\nkind = 'vertical'\nk = 1", "has no size: give at least one of fixed"),
        ("[tide]\nkind = 'vertical'\nfixed = -0.1\nk = 1", "field 'fixed' is -0.1: give a number at least 0"),
        ("[tide]\nkind = 'vertical'\nfixd = 0.1\nk = 1", "field 'fixd' is unknown: did you mean 'fixed'"),
        ("[tide]\nkind = 'vertical'\nshare = 2.0\nk = 1", "field 'share' is 2.0: give a number"),
        ("[tide]\nkind = 'vertical'\nfixed = 0.1\nlevel = 100", "field 'level' is 100"),
        ("[tide]\nkind = 'vertical'\nfixed = 0.1\nk = 0", "field 'k' is 0"),
        ("[tide]\nfixed = 0.1\nk = 1", "field 'kind' is missing: give 'vertical' or 'horizontal'"),
        ("tide = 0.1", r"field 'tide' is 0.1: give a table \[tide\]"),
        ("source = 1\n[tide]\nkind = 'vertical'\nfixed = 0.1\nk = 1", "field 'source' is 1: give a text"),
        ("source = 'x'", "no component is in it"),
    ],
)
def test_files_at_fault(tmp_path, text, message):
    with pytest.raises(InputError, match=message):
        read_components(written(tmp_path, text))


def test_all_faults_at_once():
    tables = {"a": {"kind": "vertical", "k": 1}, "b": {"fixed": 1.0, "k": 1}}
    with pytest.raises(InputError, match=r"(?s)here: component 'a': has no size.*\nhere: component 'b': field 'kind'"):
        components_from_fields(tables, "here")


@pytest.mark.parametrize(
    ("fields", "message"),
    [
        ({"kind": "sideways"}, "field 'kind' is 'sideways'"),
        ({"fixed": math.inf}, "field 'fixed' is inf"),
        ({"k": -1.0}, "field 'k' is -1"),
        ({"k": None, "level": 120.0}, "field 'level' is 120"),
    ],
)
def test_impossible_components(fields, message):
    with pytest.raises(InputError, match=message):
        Component("tide", **({"kind": "vertical", "fixed": 0.1, "k": 1.0} | fields))


def test_two_of_one_name():
    tide = Component("tide", "vertical", fixed=0.1, k=1.0)
    with pytest.raises(InputError, match="component 'tide' is given 2 times"):
        Components((tide, tide))
