"""xarray in, xarray out; dask stays lazy."""

from __future__ import annotations

import dask.array
import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st

from ocean_sound.errors import InputError
from ocean_sound.water import (
    OutOfRangeWarning,
    absorption,
    density,
    depth_from_pressure,
    equations,
    sound_speed,
    speed_derivative,
    t68_from_t90,
    wavelength,
)


@pytest.fixture
def cast():
    level = np.arange(6)
    return xr.Dataset(
        {
            "temperature": ("level", 20.0 - level, {"units": "degree_Celsius"}),
            "salinity": ("level", np.full(6, 35.0)),
            "pressure": ("level", 100.0 * level),
        },
        coords={"level": level, "latitude": 30.0, "longitude": -40.0, "cast_id": "invented"},
    )


def test_coordinates_are_kept_and_attributes_set(cast):
    speed = sound_speed(
        cast.temperature, cast.salinity, pressure=cast.pressure, latitude=cast.latitude, longitude=cast.longitude
    )
    assert isinstance(speed, xr.DataArray)
    assert speed.name == "sound_speed"
    assert speed.dims == ("level",)
    assert set(speed.coords) == {"level", "latitude", "longitude", "cast_id"}
    assert speed.attrs["standard_name"] == "speed_of_sound_in_sea_water"
    assert speed.attrs["units"] == "m s-1"
    assert speed.attrs["equation"] == "teos10"
    assert "Roquet" in speed.attrs["citation"]
    assert speed.attrs["assumptions"] == ""
    assert cast.temperature.attrs == {"units": "degree_Celsius"}
    plain = sound_speed(cast.temperature.values, 35.0, pressure=cast.pressure.values, latitude=30.0, longitude=-40.0)
    np.testing.assert_array_equal(speed.values, plain)


def test_assumptions_stand_in_the_attributes(cast):
    speed = sound_speed(cast.temperature, cast.salinity, pressure=cast.pressure, equation="mackenzie")
    assert "latitude 45 degrees" in speed.attrs["assumptions"]
    assert "Reference Salinity" in sound_speed(cast.temperature, 35.0, pressure=0.0).attrs["assumptions"]


def test_a_bare_number_beside_a_labelled_array(cast):
    assert sound_speed(10.0, cast.salinity, depth=5.0).dims == ("level",)
    assert isinstance(sound_speed(xr.Variable("level", [4.0, 5.0]), 35.0, depth=5.0), xr.Variable)


class Counting:
    """An array that counts how often it is read."""

    def __init__(self, values):
        self.values, self.reads = values, 0
        self.shape, self.dtype, self.ndim = values.shape, values.dtype, values.ndim

    def __getitem__(self, key):
        self.reads += 1
        return self.values[key]


def test_dask_stays_lazy_until_computed():
    source = Counting(np.array([4.0, 8.0, -99.0]))
    lazy = xr.DataArray(dask.array.from_array(source, chunks=1, asarray=False), dims="level")
    before = source.reads
    speed = sound_speed(lazy, 35.0, depth=10.0)
    assert source.reads == before
    assert isinstance(speed.data, dask.array.Array)
    assert speed.attrs["equation"] == "teos10"
    with pytest.raises(InputError, match="temperature: -99 at index 0 is impossible"):
        speed.compute(scheduler="synchronous")
    assert np.isfinite(speed[:2].compute(scheduler="synchronous")).all()


def test_dask_warns_when_it_computes():
    lazy = xr.DataArray([4.0, 35.0], dims="level").chunk(level=1)
    speed = sound_speed(lazy, 35.0, depth=10.0, equation="mackenzie")
    with pytest.warns(OutOfRangeWarning, match="temperature 35 degC"):
        speed.compute(scheduler="synchronous")


@settings(max_examples=20, deadline=None)
@given(
    st.sampled_from(list(equations())),
    st.lists(st.floats(2, 29), min_size=6, max_size=6),
    st.integers(1, 6),
)
def test_dask_equals_numpy(name, temperatures, chunk):
    t = xr.DataArray(temperatures, dims="level", coords={"level": range(6)})
    options = {"depth": 10.0, "latitude": 30.0, "equation": name, "outside": "mask"}
    plain = sound_speed(t, 0.0 if equations()[name].vertical == "none" else 35.0, **options)
    lazy = sound_speed(t.chunk(level=chunk), 0.0 if equations()[name].vertical == "none" else 35.0, **options)
    xr.testing.assert_allclose(lazy.compute(scheduler="synchronous"), plain, rtol=1e-15)
    assert lazy.attrs == plain.attrs


def test_levels_that_do_not_line_up(cast):
    other = cast.salinity.assign_coords(level=cast.level + 1).isel(level=slice(0, 3))
    with pytest.raises(InputError, match="temperature, salinity, pressure do not line up") as caught:
        sound_speed(cast.temperature, other, pressure=cast.pressure, equation="unesco")
    assert "\n" not in str(caught.value)


def test_the_other_functions_label_too(cast):
    depth = depth_from_pressure(cast.pressure, cast.latitude)
    assert (depth.name, depth.attrs["units"], depth.attrs["positive"]) == ("depth", "m", "down")
    assert density(cast.temperature, cast.salinity, pressure=cast.pressure).attrs["units"] == "kg m-3"
    loss = absorption(50e3, cast.temperature, cast.salinity, pressure=cast.pressure)
    assert loss.attrs["units"] == "dB km-1"
    assert "kilometre" in loss.attrs["long_name"]
    slope = speed_derivative(cast.temperature, cast.salinity, pressure=cast.pressure, by="depth")
    assert slope.attrs["units"] == "s-1"
    assert wavelength(sound_speed(cast.temperature, 35.0, depth=0.0), 100.0).attrs["units"] == "m"
    assert t68_from_t90(cast.temperature).attrs["long_name"] == "temperature on IPTS-68"


def test_lazy_results_travel_to_workers(cast):
    import cloudpickle

    lazy = sound_speed(cast.temperature.chunk(level=3), 35.0, depth=10.0)
    there = cloudpickle.loads(cloudpickle.dumps(lazy))
    xr.testing.assert_identical(there.compute(scheduler="synchronous"), lazy.compute(scheduler="synchronous"))
