"""Files as the World Ocean Database gives them out, invented."""

import netCDF4
import numpy as np

from ocean_sound.casts import read_casts

MEANINGS = (
    "accepted range_out inversion gradient anomaly gradient+inversion range+inversion range+gradient range+anomaly "
    "range+inversion+gradient"
)


def probe(path, flags, temperatures, profile_flag=0):
    """One cast of an expendable probe: scalar position and time, `z` called an altitude, no salinity, no fill value."""
    with netCDF4.Dataset(path, "w", format="NETCDF3_CLASSIC") as dataset:
        dataset.createDimension("z", len(temperatures))
        dataset.createDimension("strnlen", 40)

        def put(name, kind, dimensions, values, **about):
            variable = dataset.createVariable(name, kind, dimensions)
            variable.setncatts(about)
            variable[...] = values

        def text(name, words):
            put(name, "S1", ("strnlen",), np.array(list(words.ljust(40, "\0")), "S1"))

        put("wod_unique_cast", "i4", (), 7000001, cf_role="profile_id")
        put("lat", "f4", (), -25.5, standard_name="latitude", units="degrees_north")
        put("lon", "f4", (), 200.25, standard_name="longitude", units="degrees_east")
        put("time", "f8", (), 82331.25, standard_name="time", units="days since 1770-01-01 00:00:00")
        put(
            "z",
            "f4",
            ("z",),
            np.arange(1.0, len(temperatures) + 1),
            standard_name="altitude",
            units="m",
            positive="down",
        )
        put("z_WODflag", "i2", ("z",), np.zeros(len(temperatures), "i2"), flag_definitions="WODfd")
        put("Temperature", "f4", ("z",), temperatures, standard_name="sea_water_temperature", units="degree_C")
        put("Temperature_WODflag", "i2", ("z",), flags, flag_definitions="WODf")
        put("Temperature_WODprofileflag", "i2", (), profile_flag, flag_definitions="WODfp")
        put("WODf", "i4", (), 0, flag_values=np.arange(10, dtype="i4"), flag_meanings=MEANINGS)
        put("WODfp", "i4", (), 0, flag_values=np.arange(3, dtype="i4"), flag_meanings="accepted annual_sd_out cruise")
        put("WODfd", "i4", (), 0, flag_values=np.arange(2, dtype="i4"), flag_meanings="accepted duplicate_or_inversion")
        text("dataset", "XBT")
        text("Temperature_Instrument", "XBT: INVENTED PROBE")
        text("depth_eq", "original")
        text("needs_z_fix", "needs some correction (XBT)")


def test_an_expendable_probe(tmp_path):
    probe(tmp_path / "a.nc", [0, 3, 0, 1, 7], [20.0, 19.0, 18.0, 99.9, 99.9])
    (cast,) = read_casts(tmp_path / "a.nc")
    assert (cast.id, cast.salinity) == ("7000001", None)
    assert (cast.latitude, cast.longitude) == (-25.5, -159.75)
    # 82331.25 days after 1 January 1770
    assert cast.time == np.datetime64("1770-01-01") + np.timedelta64(82331 * 24 + 6, "h")
    assert cast.depth.tolist() == [1, 2, 3, 4, 5]
    assert cast.flags["temperature"].tolist() == [1, 3, 1, 4, 4]
    assert cast.good("temperature").tolist() == [True, False, True, False, False]
    assert cast.attributes["probe"] == "XBT: INVENTED PROBE"
    assert cast.attributes["fall_rate_equation"] == "original"
    assert cast.attributes["depth_uncertainty"]
    assert "depths as in the file, whose probe needs some correction (XBT): not corrected here" in cast.notes


def test_a_sentinel_that_no_flag_tells_and_a_profile_that_is_flagged_whole(tmp_path):
    probe(tmp_path / "a.nc", [0, 0, 0], [20.0, 19.0, 99.9], profile_flag=1)
    (cast,) = read_casts(tmp_path / "a.nc")
    assert cast.flags["temperature"].tolist() == [3, 3, 4]
    assert "the database flags the whole profile of temperature: annual_sd_out" in cast.notes
