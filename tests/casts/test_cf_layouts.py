"""The same invented casts in every layout of CF's chapter 9 and appendix H; each must come back the same."""

import netCDF4
import numpy as np
import pytest

from ocean_sound.casts import read_blocks, read_casts
from ocean_sound.errors import CastFileError

SIZES = [3, 1, 4]
DEPTHS = [np.array([1.0, 5.0, 9.0]), np.array([2.0]), np.array([1.0, 2.0, 3.0, 4.0])]
TEMPS = [np.array([10.0, 9.5, 9.0]), np.array([8.0]), np.array([7.0, 6.5, 6.25, 6.0])]
LATS, LONS, TIMES = [10.0, 20.0, 30.0], [350.0, 5.0, -20.0], [0.0, 1.5, 2.0]
NAMES = ["first", "second", "third"]
UNITS = {
    "time": {"standard_name": "time", "units": "days since 2020-01-01"},
    "lat": {"standard_name": "latitude", "units": "degrees_north"},
    "lon": {"standard_name": "longitude", "units": "degrees_east"},
    "z": {"standard_name": "depth", "units": "m", "positive": "down", "axis": "Z"},
    "temp": {"standard_name": "sea_water_temperature", "units": "degree_Celsius", "coordinates": "time lat lon z"},
}


def put(dataset, name, dimensions, values, kind="f8", **attributes):
    variable = dataset.createVariable(name, kind, dimensions, fill_value=attributes.pop("fill", None))
    variable.setncatts({**UNITS.get(name, {}), **attributes})
    variable.set_auto_maskandscale(False)
    variable[...] = np.asarray(values)
    return variable


def places(dataset, instance):
    for name, values in (("time", TIMES), ("lat", LATS), ("lon", LONS)):
        put(dataset, name, (instance,), values)


def identifiers(dataset, instance, role="profile_id"):
    dataset.createDimension("strlen", 8)
    texts = np.array([list(name.ljust(8)) for name in NAMES], "S1")
    put(dataset, "profile", (instance, "strlen"), texts, "S1", cf_role=role)


def contiguous(dataset):
    dataset.createDimension("obs", 8)
    dataset.createDimension("profile", 3)
    places(dataset, "profile")
    identifiers(dataset, "profile")
    put(dataset, "rowSize", ("profile",), SIZES, "i4", sample_dimension="obs")
    put(dataset, "z", ("obs",), np.concatenate(DEPTHS))
    put(dataset, "temp", ("obs",), np.concatenate(TEMPS))


def indexed(dataset):
    dataset.createDimension("obs", None)
    dataset.createDimension("profile", 3)
    places(dataset, "profile")
    identifiers(dataset, "profile")
    mixed = np.random.default_rng(1).permutation(np.repeat([0, 1, 2], SIZES))
    put(dataset, "parentIndex", ("obs",), mixed, "i4", instance_dimension="profile")
    z, temp = np.empty(8), np.empty(8)
    for cast in range(3):
        z[mixed == cast], temp[mixed == cast] = DEPTHS[cast], TEMPS[cast]
    put(dataset, "z", ("obs",), z)
    put(dataset, "temp", ("obs",), temp)


def incomplete(dataset, order=("profile", "z")):
    dataset.createDimension("profile", 3)
    dataset.createDimension("z", 4)
    places(dataset, "profile")
    identifiers(dataset, "profile")
    for name, columns in (("z", DEPTHS), ("temp", TEMPS)):
        full = np.full((3, 4), -999.0)
        for cast, column in enumerate(columns):
            full[cast, : column.size] = column
        key = "depth" if name == "z" else name
        own = UNITS[name] if name == "z" else {}
        put(dataset, key, order, full if order[0] == "profile" else full.T, fill=-999.0, **own)


def turned(dataset):
    incomplete(dataset, ("z", "profile"))


def by_name(dataset):
    """No counts and no dimension of casts: each level carries the name of its cast."""
    dataset.createDimension("obs", 8)
    dataset.createDimension("strlen", 8)
    owner = np.repeat([0, 1, 2], SIZES)
    texts = np.array([list(NAMES[cast].ljust(8)) for cast in owner], "S1")
    put(dataset, "profile", ("obs", "strlen"), texts, "S1", cf_role="profile_id")
    for name, values in (("time", TIMES), ("lat", LATS), ("lon", LONS)):
        put(dataset, name, ("obs",), np.array(values)[owner])
    put(dataset, "z", ("obs",), np.concatenate(DEPTHS))
    put(dataset, "temp", ("obs",), np.concatenate(TEMPS))


def of_stations(dataset):
    """timeSeriesProfile, ragged: profiles counted, each naming its station by an index (appendix H.5.3)."""
    dataset.createDimension("obs", 8)
    dataset.createDimension("profile", 3)
    dataset.createDimension("station", 3)
    for name, values in (("lat", LATS), ("lon", LONS)):
        put(dataset, name, ("station",), [values[2], values[0], values[1]])
    put(dataset, "time", ("profile",), TIMES)
    put(dataset, "station_index", ("profile",), [1, 2, 0], "i4", instance_dimension="station")
    put(dataset, "row_size", ("profile",), SIZES, "i4", sample_dimension="obs")
    identifiers(dataset, "profile")
    put(dataset, "z", ("obs",), np.concatenate(DEPTHS))
    put(dataset, "temp", ("obs",), np.concatenate(TEMPS))


LAYOUTS = [contiguous, indexed, incomplete, turned, by_name, of_stations]


@pytest.mark.parametrize("kind", ["NETCDF4", "NETCDF3_CLASSIC"])
@pytest.mark.parametrize("layout", LAYOUTS)
def test_every_layout_gives_the_same_casts(tmp_path, layout, kind):
    path = tmp_path / "a.nc"
    with netCDF4.Dataset(path, "w", format=kind) as dataset:
        dataset.featureType = "profile"
        layout(dataset)
    casts = list(read_casts(path))
    assert [cast.id for cast in casts] == NAMES
    for cast, depth, temp, lat, lon, days in zip(casts, DEPTHS, TEMPS, LATS, LONS, TIMES, strict=True):
        np.testing.assert_array_equal(cast.depth, depth)
        np.testing.assert_array_equal(cast.temperature, temp)
        assert cast.latitude == lat
        assert cast.longitude == (lon if lon < 180 else lon - 360.0)
        assert cast.time == np.datetime64("2020-01-01") + np.timedelta64(int(days * 24), "h")


def test_orthogonal_time_series_of_profiles(tmp_path):
    """One station, times and depths as axes (appendix H.5.1): one cast for each time; position from the station."""
    with netCDF4.Dataset(tmp_path / "a.nc", "w") as dataset:
        dataset.featureType = "timeSeriesProfile"
        for name, size in (("time", 4), ("z", 3)):
            dataset.createDimension(name, size)
        put(dataset, "time", ("time",), [0, 1, 2, 3])
        put(dataset, "z", ("z",), [0.0, 10.0, 20.0])
        put(dataset, "lat", (), 54.5)
        put(dataset, "lon", (), 8.5)
        station = dataset.createVariable("station", str, ())
        station.cf_role = "timeseries_id"
        station[...] = np.array("buoy", object)
        temp = np.arange(12.0).reshape(4, 3)
        temp[2] = -99.0
        put(dataset, "temp", ("time", "z"), temp, fill=-99.0)
    (block,) = read_blocks(tmp_path / "a.nc")
    assert block.id == ("buoy_1", "buoy_2", "buoy_4")
    assert [where.rsplit(": ", 1)[1] for where, _ in block.left_out] == ["cast buoy_3"]
    assert "no level holds both" in block.left_out[0][1]
    assert block.row_size.tolist() == [3, 3, 3]
    assert block.values["temperature"].tolist() == [0, 1, 2, 3, 4, 5, 9, 10, 11]
    assert block.latitude.tolist() == [54.5] * 3
    assert block[0].attributes["station"] == "buoy"


def test_stations_times_and_depths(tmp_path):
    """timeSeriesProfile as a full array, and trajectoryProfile: all dimensions but that of levels count casts."""
    with netCDF4.Dataset(tmp_path / "a.nc", "w") as dataset:
        for name, size in (("station", 2), ("time", 3), ("z", 2)):
            dataset.createDimension(name, size)
        put(dataset, "time", ("station", "time"), [[0, 1, 2], [3, 4, 5]])
        put(dataset, "lat", ("station",), [10, 20])
        put(dataset, "lon", ("station",), [30, 40])
        put(dataset, "station_name", ("station",), [7, 8], "i4", cf_role="timeseries_id")
        put(
            dataset, "alt", ("station", "time", "z"), np.tile([0.0, -5.0], (2, 3, 1)), standard_name="height", units="m"
        )
        put(dataset, "temp", ("station", "time", "z"), np.arange(12.0).reshape(2, 3, 2))
    (block,) = read_blocks(tmp_path / "a.nc")
    assert block.id == ("7_1", "7_2", "7_3", "8_4", "8_5", "8_6")
    assert block.latitude.tolist() == [10, 10, 10, 20, 20, 20]
    assert block.values["depth"].tolist() == [0, 5] * 6
    assert np.diff(block.time).astype("timedelta64[D]").astype(int).tolist() == [1] * 5


def test_casts_of_one_level_each_and_one_cast_with_a_time_at_each_level(tmp_path):
    with netCDF4.Dataset(tmp_path / "many.nc", "w") as dataset:
        dataset.createDimension("profile", 3)
        dataset.createDimension("level", 1)
        places(dataset, "profile")
        put(dataset, "depth", ("profile", "level"), [[1], [2], [3]], **UNITS["z"])
        put(dataset, "temp", ("profile", "level"), [[1], [2], [3]])
    assert [len(cast) for cast in read_casts(tmp_path / "many.nc")] == [1, 1, 1]
    with netCDF4.Dataset(tmp_path / "one.nc", "w") as dataset:
        dataset.createDimension("obs", 3)
        put(dataset, "time", ("obs",), [0, 0.001, 0.002])
        put(dataset, "lat", ("obs",), [10, 10.001, 10.002])
        put(dataset, "z", ("obs",), [1, 2, 3])
        put(dataset, "temp", ("obs",), [1, 2, 3])
    (cast,) = read_casts(tmp_path / "one.nc")
    assert (len(cast), cast.latitude) == (3, 10.0)
    assert "latitude changes with the levels; that of the first is kept" in cast.notes


def test_rows_that_belong_to_no_cast_and_casts_without_rows(tmp_path):
    with netCDF4.Dataset(tmp_path / "a.nc", "w") as dataset:
        dataset.createDimension("obs", 8)
        dataset.createDimension("profile", 4)
        put(dataset, "n", ("profile",), [2, 0, -9, 3], "i4", sample_dimension="obs", fill=-9)
        put(dataset, "z", ("obs",), np.arange(8.0))
        put(dataset, "temp", ("obs",), np.arange(8.0))
    (block,) = read_blocks(tmp_path / "a.nc")
    assert block.row_size.tolist() == [2, 3]
    assert [why for _, why in block.left_out] == ["has no level", "has no level"]
    assert "3 levels behind the last cast belong to none; left out" in block.notes[0]


def test_each_variable_with_a_row_size_of_its_own(tmp_path):
    """As in the World Ocean Database; a variable with some values, but not one for each level, can't be laid."""
    with netCDF4.Dataset(tmp_path / "a.nc", "w") as dataset:
        dataset.createDimension("casts", 3)
        for key, sizes in (("z", [2, 3, 2]), ("temp", [2, 3, 0]), ("sal", [2, 2, 2])):
            dataset.createDimension(f"{key}_obs", sum(sizes))
            put(dataset, f"{key}_row_size", ("casts",), sizes, "i4", sample_dimension=f"{key}_obs")
        put(dataset, "z", ("z_obs",), [1, 2, 1, 2, 3, 1, 2])
        put(dataset, "temp", ("temp_obs",), [10, 11, 12, 13, 14])
        put(dataset, "sal", ("sal_obs",), [30, 31, 32, 33, 34, 35], standard_name="sea_water_practical_salinity")
    first, second, third = read_casts(tmp_path / "a.nc")
    assert (first.temperature.tolist(), first.salinity.tolist()) == ([10, 11], [30, 31])
    assert (second.temperature.tolist(), second.salinity) == ([12, 13, 14], None)
    assert any("sal has not as many values as the cast has levels" in note for note in second.notes)
    assert (third.temperature, third.salinity.tolist()) == (None, [34, 35])


def grid(dataset):
    for name, size in (("z", 2), ("lat", 3), ("lon", 3)):
        dataset.createDimension(name, size)
        put(dataset, name, (name,), np.arange(float(size)))
    put(dataset, "temp", ("z", "lat", "lon"), np.zeros((2, 3, 3)))


def drifter(dataset):
    dataset.createDimension("obs", 3)
    put(dataset, "time", ("obs",), [0, 1, 2])
    put(dataset, "lat", ("obs",), [10, 11, 12])
    put(dataset, "z", ("obs",), [1, 2, 1])
    put(dataset, "temp", ("obs",), [1, 2, 3])


def mooring(dataset):
    dataset.createDimension("time", 3)
    put(dataset, "time", ("time",), [0, 1, 2])
    put(dataset, "z", (), 30.0)
    put(dataset, "press", ("q",) if "q" in dataset.dimensions else ("time",), [1, 1, 1], long_name="nothing")
    put(dataset, "temp", ("time",), [1, 2, 3])
    dataset.featureType = "timeSeries"


def counted_too_far(dataset):
    dataset.createDimension("obs", 4)
    dataset.createDimension("profile", 2)
    put(dataset, "n", ("profile",), [3, 3], "i4", sample_dimension="obs")
    put(dataset, "z", ("obs",), [1, 2, 3, 4])
    put(dataset, "temp", ("obs",), [1, 2, 3, 4])


def counted_backwards(dataset):
    counted_too_far(dataset)
    dataset["n"][:] = [-2, 3]


def index_beyond(dataset):
    dataset.createDimension("obs", 3)
    dataset.createDimension("profile", 2)
    put(dataset, "of", ("obs",), [0, 1, 2], "i4", instance_dimension="profile")
    put(dataset, "z", ("obs",), [1, 2, 3])
    put(dataset, "temp", ("obs",), [1, 2, 3])


def in_a_group(dataset):
    drifter(dataset.createGroup("inside"))


def potential(dataset):
    dataset.createDimension("obs", 3)
    put(dataset, "z", ("obs",), [1, 2, 3])
    put(dataset, "temp", ("obs",), [1, 2, 3], standard_name="sea_water_potential_temperature")


@pytest.mark.parametrize(
    ("layout", "message"),
    [
        (grid, r"a\.nc: holds a grid \(z 2, lat 3, lon 3\), not casts"),
        (drifter, r"position changes along obs, the dimension of depth: a trajectory, not casts"),
        (mooring, r"holds a feature type 'timeseries', not casts"),
        (counted_too_far, r"n counts 6 levels in all, but there are 4 along obs"),
        (counted_backwards, r"n counts -2 levels in a cast; it must be a whole number from 0 up"),
        (index_beyond, r"of says that a level belongs to cast 2; there are 2 along profile, counted from 0"),
        (in_a_group, r"its variables lie in groups \(inside\); only the root of a file is read"),
        (potential, r"its only temperature \(temp\) is potential temperature; sound needs temperature in situ"),
    ],
)
def test_what_holds_no_casts_is_refused_for_the_true_reason(tmp_path, layout, message):
    with netCDF4.Dataset(tmp_path / "a.nc", "w") as dataset:
        layout(dataset)
    with pytest.raises(CastFileError, match=message):
        list(read_casts(tmp_path / "a.nc"))
