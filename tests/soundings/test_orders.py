"""Orders: limits from files, the 95 % radius against integrals, masks, summaries and the largest angle."""

from __future__ import annotations

import math
import subprocess
import sys
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import integrate, optimize, special

from ocean_sound.errors import InputError
from ocean_sound.soundings import radius as module
from ocean_sound.soundings.orders import (
    SWATH_NOTE,
    Order,
    holds,
    read_orders,
    summarise,
    summary_dataset,
)
from ocean_sound.soundings.radius import thu_95_from_covariance, tvu_95_from_sigma

ORDERS = read_orders()
NAN, INF = float("nan"), float("inf")


# --- limits


def test_depths_that_dry_count_as_none_and_shapes_are_kept():
    order = ORDERS["2"]
    depth = np.array([[-3.0, 0.0], [10.0, NAN]])
    kept = depth.copy()
    assert order.tvu(depth) == pytest.approx(np.array([[1.0, 1.0], [math.sqrt(1 + 0.23**2), NAN]]), nan_ok=True)
    assert order.thu(depth) == pytest.approx(np.array([[20.0, 20.0], [21.0, NAN]]), nan_ok=True)
    assert (depth[0] == kept[0]).all()
    assert isinstance(order.tvu(10.0), float)
    assert isinstance(order.thu(10), float)
    assert np.isnan(order.tvu(np.ma.masked_array([1.0, 2.0], [False, True]))[1])


def test_an_order_may_set_one_limit_only():
    order = Order("tide-gauge", tvu_share=0.01)
    assert order.tvu([0.0, 50.0]).tolist() == [0.0, 0.5]
    assert order.thu([5.0, NAN])[0] == INF
    assert np.isnan(order.thu([5.0, NAN])[1])
    assert Order("pipe", thu_fixed=1.0).tvu(3.0) == INF


@given(st.floats(0, 12_000), st.floats(0, 12_000))
def test_limits_grow_with_depth_and_are_stricter_from_order_to_order(one, other):
    low, high = min(one, other), max(one, other)
    each = list(ORDERS.values())
    for order in each:
        assert order.tvu(low) <= order.tvu(high)
        assert order.thu(low) <= order.thu(high)
    for wide, strict in pairwise(each):
        assert strict.tvu(one) <= wide.tvu(one)
        assert strict.thu(one) <= wide.thu(one)


@pytest.mark.parametrize(
    ("given", "message"),
    [
        ({}, "no limit is given: give at least one of tvu_fixed"),
        ({"tvu_fixed": -1.0}, "field 'tvu_fixed' is -1: give a number of at least 0"),
        ({"thu_share": NAN}, "field 'thu_share' is nan"),
        ({"tvu_fixed": 1.0, "thu_fixed": 0.0}, "the limit of THU is 0 m at every depth"),
    ],
)
def test_orders_that_can_not_be(given, message):
    with pytest.raises(InputError, match=message):
        Order("x", **given)


# --- files


def test_the_packaged_orders_say_where_they_are_from_and_can_not_be_changed():
    assert {order.source for order in ORDERS.values()} == {"IHO S-44, edition 6.0.0 (2020), section 3.2.3 and Table 1"}
    assert [order.title for order in ORDERS.values()][:2] == ["Order 2", "Order 1b"]
    with pytest.raises(TypeError, match="item assignment"):
        ORDERS["2"] = ORDERS["1a"]


def test_limits_of_ones_own(tmp_path):
    path = tmp_path / "limits.toml"
    path.write_text(
        'source = "Contract 7"\n[channel]\ntvu_fixed = 0.2\nthu_fixed = 1\nthu_share = 0.01\n'
        "[wreck]\ntvu_share = 0.02\n"
    )
    own = read_orders(path)
    assert list(own) == ["channel", "wreck"]
    assert own["channel"] == Order("channel", tvu_fixed=0.2, thu_fixed=1.0, thu_share=0.01, source="Contract 7")
    assert own["channel"].thu(50.0) == 1.5
    path.write_text("[channel]\ntvu_fixed = 0.2\n")
    assert read_orders(str(path))["channel"].source == str(path)


def test_each_field_at_fault_is_named(tmp_path):
    path = tmp_path / "limits.toml"
    path.write_text(
        "source = 3\nloose = 0.3\n[channel]\ntvu_fxed = 0.2\nthu_share = 5\n[b]\ntvu_fixed = 'x'\n[c]\n[d]\n"
        "thu_fixed = 0\n[e]\ntvu_fixed = inf\n[f]\ntvu_fixed = -0.1\n"
    )
    with pytest.raises(InputError, match="field 'source' is 3: give a text") as caught:
        read_orders(path)
    lines = str(caught.value).splitlines()
    assert all(line.startswith(f"{path}: ") for line in lines)
    wanted = [
        "field 'source' is 3: give a text",
        "field 'loose' is 0.3: give a table [loose] of limits",
        "order 'channel': field 'thu_share' is 5: give a number at least 0 and at most 1",
        "order 'channel': field 'tvu_fxed' is unknown: did you mean 'tvu_fixed'?",
        "order 'b': field 'tvu_fixed' is 'x': give a number at least 0",
        "order 'c': no limit is given",
        "order 'd': the limit of THU is 0 m at every depth",
        "order 'e': field 'tvu_fixed' is inf",
        "order 'f': field 'tvu_fixed' is -0.1: give a number at least 0",
    ]
    assert len(lines) == len(wanted)
    for line, start in zip(lines, wanted, strict=True):
        assert line.removeprefix(f"{path}: ").startswith(start)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("[a", "is not TOML"),
        ("", "no order is in it"),
        ("source = 'x'\n", "no order is in it"),
        (None, "can't be read"),
    ],
)
def test_files_that_hold_no_orders(tmp_path, text, message):
    path = tmp_path / "limits.toml"
    if text is not None:
        path.write_text(text)
    with pytest.raises(InputError, match=message):
        read_orders(path)


# --- 95 % of normal errors


def chance_within(radius, smaller):
    """Of a normal error with standard deviations 1 and `smaller`: an integral over the longer axis, by quadrature."""

    def strip(turn):
        x, half_width = radius * math.sin(turn), radius * math.cos(turn)
        inside = special.erf(half_width / (smaller * math.sqrt(2.0))) if smaller else 1.0
        return math.exp(-0.5 * x * x) / math.sqrt(2.0 * math.pi) * inside * half_width

    # where the width of the strip is like the smaller standard deviation the integrand bends most
    bend = [] if smaller == 0.0 else [math.acos(min(1.0, 3.0 * smaller / radius))]
    return 2.0 * integrate.quad(strip, 0.0, math.pi / 2, epsabs=1e-13, epsrel=1e-13, limit=200, points=bend or None)[0]


def radius_by_quadrature(smaller):
    return optimize.brentq(lambda radius: chance_within(radius, smaller) - 0.95, 1.9, 2.5, xtol=1e-13)


NODES = module._RADIUS_NODES - 1


@pytest.mark.parametrize(
    "squared",
    [0.0, 1e-6, 0.5 / NODES, 1.5 / NODES, 0.01, *((np.arange(40, NODES, 331) + 0.5) / NODES), 1 - 0.5 / NODES, 1],
)
def test_the_radius_against_quadrature(squared):
    radius = thu_95_from_covariance(1.0, squared)
    assert abs(radius - radius_by_quadrature(math.sqrt(squared))) < 1e-8


def test_the_radius_in_closed_form():
    assert thu_95_from_covariance(1.0, 1.0) == pytest.approx(math.sqrt(-2.0 * math.log(0.05)), abs=1e-14)
    assert thu_95_from_covariance(0.0, 1.0) == pytest.approx(-special.ndtri(0.025), abs=1e-14)
    assert thu_95_from_covariance(0.0, 0.0) == 0.0


def test_between_the_nodes_of_the_table_the_error_is_under_its_bound():
    """All midpoints, where straight lines err most: a step of Newton on the integral, finer in angle, says it."""
    table = module.radius_table()[0]
    middle = (np.arange(NODES) + 0.5) / NODES
    turn = (np.arange(200) + 0.5) * (0.5 * np.pi / 200)
    spread = np.cos(turn) ** 2 + middle[:, np.newaxis] * np.sin(turn) ** 2
    radius = 0.5 * (table[1:] + table[:-1])[:, np.newaxis]
    outside = np.exp(-0.5 * radius**2 / spread)
    error = (outside.mean(axis=1) - 0.05) / (radius / spread * outside).mean(axis=1)
    assert np.abs(error).max() < 1e-8
    assert np.abs(error).max() > 1e-10  # or the bound would say nothing


def test_the_radius_holds_95_per_cent_of_drawn_errors():
    covariance = np.array([[4.0, 1.5], [1.5, 1.0]])
    drawn = np.random.default_rng(5).multivariate_normal([0.0, 0.0], covariance, 400_000)
    radius = thu_95_from_covariance(4.0, 1.0, 1.5)
    share = np.mean(np.hypot(*drawn.T) <= radius)
    assert share == pytest.approx(0.95, abs=4.0 * math.sqrt(0.95 * 0.05 / 400_000))


@given(st.floats(0.001, 1000.0), st.floats(0.0, 1.0), st.floats(0.0, 180.0))
def test_the_radius_does_not_turn_with_the_axes_and_scales(sigma, ratio, turned):
    cosine, sine = math.cos(math.radians(turned)), math.sin(math.radians(turned))
    a, b = sigma**2, (ratio * sigma) ** 2
    radius = thu_95_from_covariance(a * cosine**2 + b * sine**2, a * sine**2 + b * cosine**2, (a - b) * sine * cosine)
    assert radius == pytest.approx(sigma * thu_95_from_covariance(1.0, ratio**2), rel=1e-12)
    assert 1.959963 <= radius / sigma <= 2.447747


def test_arrays_broadcast_and_what_is_unknown_stays_so():
    xx, yy = np.array([1.0, 4.0, NAN]), np.array([[0.0], [1.0]])
    kept = xx.copy()
    radius = thu_95_from_covariance(xx, yy)
    assert radius.shape == (2, 3)
    assert radius[1, 0] == pytest.approx(2.447747, abs=1e-6)
    assert radius[0, 1] == pytest.approx(2 * 1.959964, abs=1e-6)
    assert np.isnan(radius[:, 2]).all()
    assert np.isnan(thu_95_from_covariance(1.0, 1.0, NAN))
    np.testing.assert_array_equal(xx, kept)
    assert tvu_95_from_sigma(np.array([0.5, NAN])) == pytest.approx([0.98, NAN], nan_ok=True)
    assert thu_95_from_covariance([], []).shape == (0,)


@pytest.mark.parametrize(
    ("given", "message"),
    [
        (([1.0, 1.0], [1.0, 1.0], [0.0, 1.1]), r"xy: 1.1 is no covariance of variances 1 and 1 \(1 such of 2\)"),
        ((1.0, [2.0, -1.0]), "yy: -1 at index 1 is impossible"),
        ((INF, 1.0), "xx: inf is impossible"),
        (([1.0, 2.0], [1.0, 2.0, 3.0]), r"shapes do not broadcast: xx \(2,\), yy \(3,\)"),
        (("x", 1.0), "xx: numbers are needed"),
    ],
)
def test_what_is_no_covariance(given, message):
    with pytest.raises(InputError, match=message):
        thu_95_from_covariance(*given)


def test_rounding_makes_no_covariance_impossible():
    turned = np.radians(np.linspace(0.0, 180.0, 10_001))
    xx, yy, xy = np.cos(turned) ** 2, np.sin(turned) ** 2, np.sin(turned) * np.cos(turned)
    assert thu_95_from_covariance(xx, yy, xy) == pytest.approx(1.959964, abs=1e-6)


def test_negative_sigma():
    with pytest.raises(InputError, match=r"sigma: -0\.5 is impossible"):
        tvu_95_from_sigma(-0.5)


# --- which soundings hold


def test_masks_at_and_beyond_the_limit():
    order = Order("x", tvu_fixed=0.3, thu_fixed=2.0)
    held = holds(order, 10.0, [0.3, np.nextafter(0.3, 1), 0.1, NAN, 0.4, NAN], [2.0, 1.0, 2.1, 1.0, 3.0, 3.0])
    assert held.tvu.tolist() == [True, False, True, False, False, False]
    assert held.thu.tolist() == [True, True, False, True, False, False]
    assert held.tvu_fails.tolist() == [False, True, False, False, True, False]
    assert held.thu_fails.tolist() == [False, False, True, False, True, True]
    assert held.both.tolist() == [True, False, False, False, False, False]
    assert held.fails.tolist() == [False, True, True, False, True, True]


def test_without_a_limit_an_unknown_uncertainty_is_within_but_an_unknown_depth_is_not():
    held = holds(Order("x", tvu_fixed=0.3), [10.0, NAN], 0.2, NAN)
    assert held.both.tolist() == [True, False]
    assert not held.fails.any()


@given(st.floats(0.0, 5000.0), st.floats(0.0, 100.0), st.floats(0.0, 500.0))
def test_what_holds_an_order_holds_all_wider_ones(depth, tvu, thu):
    held = [bool(holds(order, depth, tvu, thu).both) for order in ORDERS.values()]
    assert held == sorted(held, reverse=True)


@pytest.mark.parametrize(
    ("given", "message"),
    [
        ((10.0, [0.1, -0.1], 1.0), "tvu_95: -0.1 at index 1 is impossible"),
        ((10.0, 0.1, -1.0), "thu_95: -1 is impossible"),
        ((INF, 0.1, 1.0), "depth: inf is impossible"),
        (([1.0, 2.0, 3.0], [0.1, 0.1], 1.0), r"shapes do not broadcast: depth \(3,\), tvu_95 \(2,\), thu_95 \(\)"),
    ],
)
def test_what_can_not_be_judged(given, message):
    with pytest.raises(InputError, match=message):
        holds(ORDERS["2"], *given)
    with pytest.raises(InputError, match=message):
        summarise(ORDERS, *given)


# --- summaries

FEW = (10.0, [0.3, 0.35, 0.1, NAN, 0.6, NAN], [2.0, 1.0, 2.1, 1.0, 3.0, 3.0])
LIMITS = Order("x", tvu_fixed=0.3, thu_fixed=2.0)


def test_counts_by_what_fails():
    (summary,) = summarise([LIMITS], *FEW)
    counts = (summary.held, summary.tvu_fails, summary.thu_fails, summary.both_fail, summary.not_judged)
    assert counts == (1, 1, 2, 1, 1)
    assert (summary.largest_tvu, summary.largest_thu) == (pytest.approx(2.0), 1.5)
    assert summary.share_held == 0.2
    assert not summary.holds
    assert str(summary) == (
        "x: 20.0 % of 5 soundings hold it; beyond TVU 1, THU 2, both 1; 1 can't be judged; largest TVU 2.00, THU 1.50 "
        "of its limit"
    )


def test_one_in_a_hundred_thousand_is_not_rounded_away():
    tvu = np.full(100_000, 0.1)
    tvu[7] = 0.5
    (summary,) = summarise([LIMITS], 10.0, tvu, 1.0)
    assert str(summary).startswith("x: 99.9 % of 100000 soundings hold it; beyond TVU 1,")
    (summary,) = summarise([LIMITS], 10.0, tvu[:7], 1.0)
    assert summary.holds
    assert str(summary).startswith("x: 100.0 % of 7 ")


@given(st.integers(0, 400), st.integers(0, 2**31))
def test_blocks_add_up(cut, seed):
    random = np.random.default_rng(seed)
    columns = [random.uniform(0, 100, 400), random.gamma(2, 0.3, 400), random.gamma(2, 3.0, 400)]
    for column in columns:
        column[random.random(400) < 0.1] = NAN
    whole = summarise(ORDERS, *columns)
    parts = zip(
        summarise(ORDERS, *(column[:cut] for column in columns)),
        summarise(ORDERS, *(column[cut:] for column in columns)),
        strict=True,
    )
    assert [one + other for one, other in parts] == list(whole)
    for summary in whole:
        counts = (summary.held, summary.tvu_fails, summary.thu_fails, summary.both_fail, summary.not_judged)
        assert sum(counts) == summary.soundings == 400
        held = holds(ORDERS[summary.order], *columns)
        assert summary.held == held.both.sum()
        assert summary.tvu_fails + summary.both_fail == held.tvu_fails.sum()


def test_a_set_of_none_and_one_all_unknown():
    (none,) = summarise([LIMITS], [], [], [])
    (unknown,) = summarise([LIMITS], [1.0, 2.0], NAN, NAN)
    assert (none.soundings, none.holds, unknown.not_judged, unknown.holds) == (0, False, 2, False)
    assert math.isnan(unknown.share_held)
    assert math.isnan(unknown.largest_tvu)
    assert str(none).startswith("x: none of 0 soundings hold it")


def test_summaries_of_two_orders_do_not_add():
    one, other = summarise([ORDERS["1a"], ORDERS["1b"]], *FEW)
    with pytest.raises(InputError, match="summaries of order '1a' and of '1b' do not add"):
        _ = one + other


def test_the_dataset_says_that_errors_shared_do_not_average_out():
    dataset = summary_dataset(summarise(ORDERS, *FEW))
    assert dataset.attrs["comment"] == SWATH_NOTE
    assert "does not average out" in SWATH_NOTE
    assert dataset["order"].values.tolist() == list(ORDERS)
    assert dataset["held"].values.tolist() == [each.held for each in summarise(ORDERS, *FEW)]
    assert all({"long_name", "units"} <= set(dataset[name].attrs) for name in dataset.data_vars)


def test_a_limit_of_0_at_the_shore():
    order = Order("x", tvu_share=0.01)
    (summary,) = summarise([order], 0.0, [0.0, 0.1], 1.0)
    assert (summary.held, summary.tvu_fails, summary.largest_tvu) == (1, 1, INF)


def test_importing_orders_does_not_load_the_checker_of_fields():
    code = "import sys; from ocean_sound.soundings import orders; sys.exit('pydantic' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
