"""The speed field: against FITPACK's own spline, finite differences, and across the edges of its cells."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.interpolate import CubicSpline, RectBivariateSpline

from ocean_sound.errors import InputError
from ocean_sound.section import SpeedField

pytestmark = pytest.mark.kernels

RNG = np.random.default_rng(8)
DEPTHS = np.concatenate(([0.0], np.cumsum(np.tile([3.0, 5.0, 9.0, 17.0, 30.0, 55.0, 40.0, 22.0], 6))))
RANGES = np.linspace(-2000.0, 43000.0, 16)


def water(x, z):
    return 1500.0 + 12.0 * np.sin(z / 170.0) * np.exp(-z / 900.0) + 4.0 * np.cos(x / 9000.0) * np.exp(-z / 300.0)


SPEEDS = water(RANGES[:, None], DEPTHS[None, :])


@pytest.fixture(scope="module")
def field():
    return SpeedField.from_speeds(DEPTHS, SPEEDS, RANGES)


def inside(count):
    return RNG.uniform(RANGES[0], RANGES[-1], count), RNG.uniform(0.0, DEPTHS[-1], count)


def test_the_field_and_its_derivatives_are_those_of_fitpack(field):
    """RectBivariateSpline lays the same not-a-knot spline by B-splines: another way to the same curve."""
    other = RectBivariateSpline(RANGES, DEPTHS, (field.reference_speed / SPEEDS) ** 2, kx=3, ky=3, s=0)
    x, z = inside(400)
    found = field.derivatives_at(x, z)
    for column, (dx, dz) in enumerate([(0, 0), (1, 0), (0, 1), (2, 0), (1, 1), (0, 2)]):
        exact = other.ev(x, z, dx=dx, dy=dz)
        assert np.abs(found[:, column] - exact).max() < 1e-9 * max(np.abs(exact).max(), 1e-30)


def test_the_field_goes_through_its_speeds(field):
    assert np.abs(field.speed_at(RANGES[:, None], DEPTHS[None, :]) - SPEEDS).max() < 1e-9


def test_derivatives_are_those_of_finite_differences(field):
    x, z = inside(300)
    hx, hz = 1.0, 0.02
    w, w_x, w_z, w_xx, w_xz, w_zz = field.derivatives_at(x, z).T

    def differences(column, dx, dz, step):
        above, below = field.derivatives_at(x + dx, z + dz), field.derivatives_at(x - dx, z - dz)
        return (above[:, column] - below[:, column]) / (2.0 * step)

    assert np.abs(differences(0, hx, 0.0, hx) - w_x).max() < 1e-5 * np.abs(w_x).max()
    assert np.abs(differences(0, 0.0, hz, hz) - w_z).max() < 1e-5 * np.abs(w_z).max()
    assert np.abs(differences(1, hx, 0.0, hx) - w_xx).max() < 1e-3 * np.abs(w_xx).max()
    assert np.abs(differences(1, 0.0, hz, hz) - w_xz).max() < 1e-3 * np.abs(w_xz).max()
    assert np.abs(differences(2, 0.0, hz, hz) - w_zz).max() < 1e-3 * np.abs(w_zz).max()
    assert np.all(w > 0.0)


@given(
    node=st.integers(1, DEPTHS.size - 2), column=st.integers(1, RANGES.size - 2),
    across=st.floats(-2000.0, 43000.0), down=st.floats(0.0, float(DEPTHS[-1])),
)  # fmt: skip
def test_second_derivatives_go_on_across_cells(field, node, column, across, down):
    scales = np.abs(field.derivatives_at(RANGES[:, None], DEPTHS[None, :])).reshape(-1, 6).max(axis=0)
    z, x = DEPTHS[node], RANGES[column]
    over = field.derivatives_at(across, [np.nextafter(z, 0.0), z])
    beside = field.derivatives_at([np.nextafter(x, -1e9), x], down)
    for pair in (over, beside):
        assert (np.abs(pair[1] - pair[0]) <= 1e-9 * scales).all()


@given(st.lists(st.floats(0.05, 400.0), min_size=1, max_size=40), st.floats(0.0, 1.0))
def test_the_cell_of_a_depth_is_found_however_uneven_the_cells(heights, part):
    depths = np.concatenate(([0.0], np.cumsum(heights)))
    speeds = 1500.0 + 3.0 * np.sin(np.arange(depths.size))
    field = SpeedField.from_speeds(depths, speeds, reference_speed=1500.0)
    wanted = np.unique(np.concatenate((depths, np.nextafter(depths, 0.0), [part * depths[-1]])))
    wanted = wanted[wanted >= 0.0]
    exact = CubicSpline(depths, (1500.0 / speeds) ** 2)
    found = field.derivatives_at(0.0, wanted)
    # a wrong cell would show in the third derivative only at its edges, anywhere inside in all
    assert np.allclose(found[:, 0], exact(wanted), rtol=1e-9, atol=1e-12)
    assert np.allclose(found[:, 2], exact(wanted, 1), rtol=1e-7, atol=1e-10)


def test_beyond_the_edges_in_range_the_field_is_that_of_the_edge(field):
    z = np.linspace(0.0, DEPTHS[-1], 50)
    for edge, beyond in ((RANGES[0], -1e6), (RANGES[-1], 1e6)):
        here, there = field.derivatives_at(edge, z), field.derivatives_at(beyond, z)
        assert np.array_equal(here[:, [0, 2, 5]], there[:, [0, 2, 5]])
        assert not there[:, [1, 3, 4]].any()


def test_above_and_below_the_field_goes_on_smoothly_then_linearly(field):
    height, deepest = DEPTHS[1], DEPTHS[-1]
    for edge, sign, cell in ((0.0, -1.0, height), (deepest, 1.0, DEPTHS[-1] - DEPTHS[-2])):
        just = field.derivatives_at(5000.0, [edge - sign * 1e-7, edge + sign * 1e-7])
        assert np.allclose(just[0], just[1], rtol=1e-6, atol=1e-15)
        end = edge + sign * cell
        pair = field.derivatives_at(5000.0, [end - sign * 1e-7, end + sign * 1e-7])
        assert np.allclose(pair[0, :5], pair[1, :5], rtol=1e-5, atol=1e-15)
        far = field.derivatives_at(5000.0, end + sign * np.array([1.0, 51.0]))
        assert far[1, 0] - far[0, 0] == pytest.approx(sign * 50.0 * far[0, 2], rel=1e-9)
        assert far[0, 5] == far[1, 5] == 0.0


def test_a_field_of_equal_columns_is_that_of_one(field):
    one = SpeedField.from_speeds(DEPTHS, SPEEDS[3], reference_speed=1500.0)
    many = SpeedField.from_speeds(
        DEPTHS, np.tile(SPEEDS[3], (5, 1)), np.linspace(0.0, 400.0, 5), reference_speed=1500.0
    )
    x, z = RNG.uniform(0.0, 400.0, 200), np.linspace(-50.0, DEPTHS[-1] + 90.0, 200)
    a, b = one.derivatives_at(x, z), many.derivatives_at(x, z)
    assert np.allclose(a[:, [0, 2, 5]], b[:, [0, 2, 5]], rtol=1e-9, atol=1e-15)
    assert not a[:, [1, 3, 4]].any()
    assert not one.varies
    assert many.varies


def test_what_is_no_number_does_no_harm(field):
    found = field.derivatives_at([np.nan, 0.0, 0.0, np.inf, -np.inf], [10.0, np.nan, np.inf, 10.0, 10.0])
    assert np.isfinite(found[0]).all()
    assert np.isnan(found[1, 0])
    assert np.isfinite(found[3:]).all()


def test_the_arrays_are_for_kernels_and_the_same_each_time(field):
    arrays = field.kernel_arrays()
    assert arrays is field.kernel_arrays()
    assert [a.dtype.name for a in arrays] == ["float64", "float64", "float64", "int32", "float64"]
    assert arrays[4].shape == (RANGES.size - 1, DEPTHS.size - 1, 16)
    assert repr(field) == f"<SpeedField: 15 cells in range to 43000 m, 48 cells in depth to {DEPTHS[-1]:g} m>"


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (([0.0], [1500.0]), "depths are no list of two"),
        (([1.0, 2.0], [1500.0, 1500.0]), "depths from 1 to 2 m; from 0 down"),
        (([0.0, 2.0, 1.0], [1500.0] * 3), "depths from 0 to 1 m"),
        (([0.0, 2.0], [1500.0, np.nan]), "a speed is nan m/s; 1000 to 3010"),
        (([0.0, 2.0], [1500.0, 15.0]), "a speed is 15 m/s"),
        (([0.0, 2.0], [1500.0] * 3), r"speeds of shape \(3,\); \(2,\) would be right"),
        (([0.0, 2.0], [[1500.0] * 2] * 2), "need ranges, one for each row"),
        (([0.0, 2.0], [[1500.0] * 2] * 3, [0.0, 1.0, 5.0]), "ranges go by 1 to 4 m; equal steps"),
        (([0.0, 2.0], [[1500.0] * 2] * 2, [0.0, np.nan]), "ranges are no list of two or more finite"),
        (([0.0, 1e-3, 5000.0], [1500.0] * 3), "a cell of 0.001 m is too thin; 0.019 m will do"),
    ],
)
def test_what_can_be_no_field_is_told(arguments, message):
    with pytest.raises(InputError, match=message):
        SpeedField.from_speeds(*arguments)


def test_coefficients_of_another_shape_are_told():
    with pytest.raises(InputError, match=r"coefficients of shape \(1, 1, 4\); \(1, 1, 16\) would be right"):
        SpeedField([0.0, 1.0], [0.0, 1.0], np.zeros((1, 1, 4)), 1500.0, False)
