import netCDF4
import numpy as np
import pytest
import xarray as xr

from ocean_sound.casts import Cast, read_casts
from ocean_sound.errors import CastFileError
from ocean_sound.files import attributes, write_dataset


def example():
    return Cast(
        id="A 1",
        values={
            "pressure": [0.1, 10.0, 20.5],
            "depth": [0.1, 9.9, 20.3],
            "temperature": [12.1, np.nan, 11.0 / 3],
            "salinity": [35.0, 35.1, 35.2],
        },
        flags={"temperature": np.array([1, 9, 4], np.int8), "salinity": np.array([1, 2, 3], np.int8)},
        time="2026-01-31T12:00:00.123456",
        latitude=54.125,
        longitude=-8.5,
        source="a.csv",
        attributes={"station": "7"},
        notes=("invented", "second line"),
    )


def read_one(path):
    (cast,) = read_casts(path)
    return cast


def test_round_trip_with_attributes(tmp_path):
    cast = example()
    write_dataset(cast.to_dataset(), tmp_path / "a.nc")
    back = read_one(tmp_path / "a.nc")
    for name, column in cast.values.items():
        np.testing.assert_array_equal(back.values[name], column)
    for name, flag in cast.flags.items():
        np.testing.assert_array_equal(back.flags[name], flag)
    assert set(back.flags) == set(cast.flags)
    assert (back.id, back.time, back.latitude, back.longitude) == (cast.id, cast.time, cast.latitude, cast.longitude)
    assert (back.attributes, back.notes) == (cast.attributes, cast.notes)
    with xr.open_dataset(tmp_path / "a.nc") as dataset:
        for name in ("pressure", "depth", "temperature", "salinity", "time", "latitude", "longitude", "cast_id"):
            assert attributes(name).items() <= dataset[name].attrs.items()
        assert dataset["temperature"].attrs["ancillary_variables"] == "temperature_flag"
        np.testing.assert_array_equal(dataset["temperature_flag"].attrs["flag_values"], [1, 2, 3, 4, 9])
        assert dataset.attrs["featureType"] == "profile"


def test_a_profile_without_position_or_flags(tmp_path):
    cast = Cast(id="p", values={"depth": [0.0, 5.0], "sound_speed": [1500.0, 1499.0]})
    write_dataset(cast.to_dataset(), tmp_path / "p.nc")
    back = read_one(tmp_path / "p.nc")
    assert back.sound_speed.tolist() == [1500.0, 1499.0]
    assert np.isnat(back.time)
    assert np.isnan(back.latitude)
    assert not back.flags


def test_round_trip_of_uncertainties_and_origins(tmp_path):
    cast = Cast(
        id="A",
        values={"depth": [0.0, 10.0], "temperature": [12.0, 11.0], "salinity": [35.0, 35.0]},
        uncertainties={"temperature": [0.002, np.nan], "depth": [0.1, 0.2]},
        origins={"salinity": np.array([1, 5], np.int8)},
    )
    write_dataset(cast.to_dataset(), tmp_path / "a.nc")
    back = read_one(tmp_path / "a.nc")
    assert set(back.uncertainties) == {"temperature", "depth"}
    for name, column in cast.uncertainties.items():
        np.testing.assert_array_equal(back.uncertainties[name], column)
    assert {name: origin.tolist() for name, origin in back.origins.items()} == {"salinity": [1, 5]}
    assert back.notes == ()


def small(path, **changes):
    """A file from elsewhere: names of its own, packed integers, a fill value, 0 to 360 degrees."""
    with netCDF4.Dataset(path, "w") as dataset:
        dataset.createDimension("z", 3)
        dataset.createDimension("station", changes.get("stations", 1))
        depth = dataset.createVariable("Z", "f4", ("z",))
        depth.setncatts(
            {"standard_name": "depth", "units": changes.get("units", "m"), "positive": changes.get("positive", "down")}
        )
        depth[:] = np.array(changes.get("depth", [1, 2, 3]), "f4")
        temp = dataset.createVariable("T", "i2", ("station", "z"), fill_value=-32768)
        temp.setncatts({"standard_name": changes.get("name", "sea_water_temperature"), "units": "K"})
        temp.setncatts({"scale_factor": 0.01, "add_offset": 273.15})
        temp.set_auto_maskandscale(False)
        temp[:] = [[1000, -32768, 1200]]
        lon = dataset.createVariable("x", "f8", ())
        lon.standard_name = "longitude"
        lon[...] = 352.0
        if "flags" in changes:
            temp.ancillary_variables = "T_qc"
            flag = dataset.createVariable("T_qc", "i1", ("z",))
            flag.flag_values = np.array(changes["flags"], np.int8)
            flag[:] = [1, 1, 4]
    return path


def test_found_by_standard_name_unpacked_and_converted(tmp_path):
    cast = read_one(small(tmp_path / "a.nc"))
    np.testing.assert_allclose(cast.temperature, [10.0, np.nan, 12.0], atol=1e-12)
    assert cast.flags["temperature"].tolist() == [2, 9, 2]
    assert cast.longitude == -8.0
    assert cast.id == "a"
    assert cast.notes == ("temperature converted from K",)


def test_depth_positive_up(tmp_path):
    cast = read_one(small(tmp_path / "a.nc", positive="up", depth=[-1, -2, -3]))
    assert cast.depth.tolist() == [1.0, 2.0, 3.0]


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"name": "air_temperature"}, r"no temperature, salinity, conductivity or sound speed; it holds Z, T, x"),
        ({"units": "cubit"}, r"variable Z: unit 'cubit' is not known for depth"),
        ({"flags": [0, 1, 2]}, r"the flags of T \(T_qc\) are of an unknown scheme .*say which with --map "),
        ({"depth": [np.nan] * 3}, r"no usable level"),
    ],
)
def test_refused_for_the_true_reason(tmp_path, changes, message):
    with pytest.raises(CastFileError, match=message):
        read_one(small(tmp_path / "a.nc", **changes))


def test_no_depth(tmp_path):
    xr.Dataset({"t": ("x", [1.0])}).to_netcdf(tmp_path / "a.nc")
    with pytest.raises(CastFileError, match=r"no variable with the standard name of depth .*it holds t"):
        read_one(tmp_path / "a.nc")


def test_cut_short(tmp_path):
    write_dataset(example().to_dataset(), tmp_path / "a.nc")
    data = (tmp_path / "a.nc").read_bytes()
    for size in (8, 100, len(data) // 2, len(data) - 1):
        (tmp_path / "b.nc").write_bytes(data[:size])
        with pytest.raises(CastFileError, match=r"b\.nc: .*(cut short|can't be read)"):
            read_one(tmp_path / "b.nc")
