import pickle

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts import VARIABLES, Cast
from ocean_sound.errors import InputError
from ocean_sound.files import attributes


def example(**changes):
    fields = {
        "id": "A1",
        "values": {"pressure": [0.0, 10.0, 20.0], "temperature": [12.0, np.nan, 11.0], "salinity": [35.0, 35.1, 35.2]},
        "flags": {"temperature": np.array([1, 9, 4], np.int8)},
        "time": "2026-01-31T12:00:00Z",
        "latitude": 54.0,
        "longitude": 352.0,
        "source": "a.csv",
        "attributes": {"station": "7"},
        "notes": ("invented",),
    }
    return Cast(**(fields | changes))


def test_fields_are_as_promised():
    cast = example()
    assert len(cast) == 3
    assert cast.time == np.datetime64("2026-01-31T12:00:00", "ns")
    assert cast.time.dtype == np.dtype("datetime64[ns]")
    assert cast.longitude == -8.0
    assert cast.depth is None
    assert cast.conductivity is None
    assert cast.sound_speed is None
    np.testing.assert_array_equal(cast.salinity, [35.0, 35.1, 35.2])
    assert cast.flags["temperature"].dtype == np.int8
    assert np.isnat(Cast(id="x", values={"depth": [0.0]}).time)


def test_nothing_can_be_changed_and_the_caller_keeps_its_own():
    depth = np.array([0.0, 1.0])
    given_values = {"depth": depth}
    cast = Cast(id="x", values=given_values)
    with pytest.raises(ValueError, match="read-only"):
        cast.depth[0] = 5.0
    with pytest.raises(TypeError, match="does not support item assignment"):
        cast.values["depth"] = depth
    depth[0] = 7.0  # still writable for its owner
    given_values["temperature"] = depth
    assert set(cast.values) == {"depth"}


def test_good_masks_gaps_and_flags():
    cast = example(
        values={"depth": np.arange(6.0), "temperature": [1.0, 1.0, 1.0, 1.0, np.nan, np.inf]},
        flags={"temperature": [1, 2, 3, 4, 9, 1]},
    )
    assert cast.good("temperature").tolist() == [True, True, False, False, False, False]
    assert cast.good("depth").all()
    with pytest.raises(InputError, match="has no salinity; it has depth, temperature"):
        cast.good("salinity")


def test_repr_is_helpful():
    assert repr(example()) == (
        "<Cast A1: 3 levels, pressure 0 to 20 dbar, temperature, salinity; 54.0000 N 8.0000 W, 2026-01-31T12:00:00Z>"
    )
    assert repr(Cast(id="x", values={"depth": [np.nan]})) == (
        "<Cast x: 1 level, no depth, nothing measured; position unknown, time unknown>"
    )


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"values": {"temperature": [1.0]}}, "cast 'A1': has neither pressure nor depth; it has temperature"),
        ({"values": {}, "flags": {}}, "has neither pressure nor depth; it has nothing"),
        ({"values": {"depth": [1.0], "colour": [1.0]}}, "no variable is named 'colour'"),
        ({"values": {"depth": [1.0, 2.0], "salinity": [1.0]}}, "equally long; found depth .2,., salinity .1,."),
        ({"values": {"depth": [[1.0]]}}, "one-dimensional"),
        ({"values": {"depth": ["deep"]}}, "its values must be columns of numbers: could not convert string"),
        ({"values": {"depth": []}, "flags": {}}, "has no level"),
        ({"flags": {"depth": [1, 1, 1]}}, "flags of 'depth', of which there are no values"),
        ({"flags": {"salinity": [1, 1]}}, "salinity has 3 levels but flags of shape .2,."),
        ({"flags": {"salinity": [1, 5, 1]}}, "flag 5 of salinity; QARTOD flags are 1, 2, 3, 4, 9"),
        ({"flags": {"salinity": np.array([1, -1, 1], np.int8)}}, "flag -1 of salinity"),
        ({"latitude": 91.0}, "latitude is 91.0; it must lie in -90 to 90"),
        ({"longitude": 361.0}, "longitude is 361.0"),
        ({"time": "0001-01-01"}, "time is '0001-01-01'; it must be a date"),
        ({"time": "yesterday"}, "time is 'yesterday'; it must be a date"),
    ],
)
def test_what_is_no_cast_is_refused(changes, message):
    with pytest.raises(InputError, match=message):
        example(**changes)


@given(st.floats(-360, 360))
def test_longitudes_are_normalised(longitude):
    cast = Cast(id="x", values={"depth": [0.0]}, longitude=longitude)
    assert -180.0 <= cast.longitude < 180.0
    turns = (cast.longitude - longitude) / 360.0
    assert abs(turns - round(turns)) < 1e-12
    if -180.0 <= longitude < 180.0:
        assert cast.longitude == longitude


def test_pickling_keeps_all():
    cast = example()
    back = pickle.loads(pickle.dumps(cast))  # noqa: S301
    assert repr(back) == repr(cast)
    assert back.attributes == cast.attributes
    assert back.notes == cast.notes
    np.testing.assert_array_equal(back.temperature, cast.temperature)
    assert not back.temperature.flags.writeable


def test_dataset_follows_the_layout():
    cast = example()
    dataset = cast.to_dataset()
    assert set(dataset.dims) == {"level"}
    assert {"time", "latitude", "longitude", "cast_id", "pressure"} <= set(dataset.coords)
    assert set(dataset.data_vars) == {"temperature", "salinity", "temperature_flag"}
    assert dataset.temperature.attrs == attributes("temperature") | {"ancillary_variables": "temperature_flag"}
    assert dataset.temperature_flag.dtype == np.int8
    assert dataset.attrs["featureType"] == "profile"
    for name in VARIABLES:
        assert (name in dataset.variables) == (name in cast.values)
