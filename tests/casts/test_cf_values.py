"""Units, pressure, fill values, flags and times of CF files, on invented files of one cast."""

import netCDF4
import numpy as np
import pytest

from ocean_sound.casts import read_casts
from ocean_sound.casts.cf_time import NoTimeError, times_since
from ocean_sound.casts.flag_codes import meaning_of
from ocean_sound.errors import CastFileError, InputError

DEPTH = {"z": ([10.0, 20.0, 300.0], {"standard_name": "depth", "units": "m", "positive": "down"})}
TEMP = {"t": ([12.0, 11.0, 10.0], {"standard_name": "sea_water_temperature", "units": "degree_Celsius"})}


def write(path, variables, kind="NETCDF4", **attributes):
    with netCDF4.Dataset(path, "w", format=kind) as dataset:
        dataset.setncatts(attributes)
        dataset.createDimension("level", 3)
        for name, (given, said) in variables.items():
            values, about = np.asarray(given), dict(said)
            variable = dataset.createVariable(
                name, values.dtype, ("level",) if values.ndim else (), fill_value=about.pop("fill", None)
            )
            variable.set_auto_maskandscale(False)
            variable.setncatts(about)
            variable[...] = values
    return path


def read(tmp_path, variables, *, mapping=None, settings=None, kind="NETCDF4", **attributes):
    (cast,) = read_casts(write(tmp_path / "a.nc", variables, kind, **attributes), mapping=mapping, settings=settings)
    return cast


def pressure(values, **about):
    return {"p": (np.asarray(values, float), {"standard_name": "sea_water_pressure", **about})}


# --- pressure -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("variables", "expected", "note"),
    [
        # no absolute pressure in water is below 5 dbar, which is the air at 5500 m (standard atmosphere)
        (pressure([0.5, 10, 20], units="dbar"), [0.5, 10, 20], "it begins at 0.5 dbar, less than any air"),
        (pressure([50, 1000, 2000], units="10000.0 Pa") | DEPTH, [50, 1000, 2000], "pressure taken as sea pressure"),
        (pressure([20.3, 30.4, 312], units="dbar") | DEPTH, [10.1675, 20.2675, 301.8675], "pressure taken as absolute"),
        (pressure([10.0, 20.1, 302], units="dbar") | DEPTH, [10.0, 20.1, 302], "agrees with the depth beside it"),
        (pressure([2e5, 3e5, 4e5], units="Pa", long_name="Absolute pressure"), [9.8675, 19.8675, 29.8675], "absolute"),
        (
            pressure([1e5, 2e5, 3e5], units="Pa", comment="relative to the atmosphere"),
            [10, 20, 30],
            "converted from Pa",
        ),
        (pressure([10, 20, 30], units="dbar"), [10, 20, 30], "pressure taken as sea pressure"),
    ],
)
def test_which_pressure_it_is(tmp_path, variables, expected, note):
    if "10000.0 Pa" in str(variables):  # as dbar with another name; 50 dbar at 10 m would be nonsense
        variables["p"] = (np.array([10.05, 20.1, 302.0]), variables["p"][1])
        expected = [10.05, 20.1, 302.0]
    cast = read(tmp_path, variables | TEMP)
    np.testing.assert_allclose(cast.pressure, expected, rtol=1e-12)
    assert any(note in line for line in cast.notes), cast.notes


def test_pressure_that_nothing_decides_is_not_guessed(tmp_path):
    with pytest.raises(
        CastFileError, match=r'variable p: pressure in Pa may be sea pressure or absolute .*--map "sea_'
    ):
        read(tmp_path, pressure([1e5, 2e5, 3e5], units="Pa") | TEMP)
    cast = read(tmp_path, pressure([1e5, 2e5, 3e5], units="Pa") | TEMP, mapping={"sea_pressure": "p"})
    assert cast.pressure.tolist() == [10, 20, 30]
    cast = read(tmp_path, pressure([2e5, 3e5, 4e5], units="Pa") | TEMP, mapping={"absolute_pressure": "p [Pa]"})
    np.testing.assert_allclose(cast.pressure, [9.8675, 19.8675, 29.8675])
    cast = read(tmp_path, pressure([8, 18, 28], units="dbar") | TEMP, settings={"in_air_pressure": 8.0})
    assert cast.pressure.tolist() == [0, 10, 20]


def test_relative_pressure_of_its_own_name(tmp_path):
    own = {"PRES_REL": ([60.0, 70.0, 80.0], {"standard_name": "sea_water_pressure_due_to_sea_water", "units": "dbar"})}
    assert read(tmp_path, own | TEMP).pressure.tolist() == [60, 70, 80]


# --- units ----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ["NETCDF4", "NETCDF3_CLASSIC"])
@pytest.mark.parametrize(
    ("unit", "given", "expected"),
    [
        ("?C (ITS-90)", 10.0, 10.0),
        ("\ufffdC", 10.0, 10.0),
        ("°C", 10.0, 10.0),
        ("degrees_Celsius", 10.0, 10.0),
        ("Celsius", 10.0, 10.0),
        ("ITS-90", 10.0, 10.0),
        ("K", 283.15, 10.0),
        ("degF", 50.0, 10.0),
        ("?F", 50.0, 10.0),
        ("0.01 degC", 1000.0, 10.0),
        # t90 = t68 / 1.00024 (Saunders 1990)
        ("degC (IPTS-68)", 10.0024, 10.0),
        ("?C (IPTS-68)", 10.0024, 10.0),
    ],
)
def test_units_of_temperature(tmp_path, unit, given, expected, kind):
    own = {"t": ([given] * 3, {"standard_name": "sea_water_temperature", "units": unit})}
    np.testing.assert_allclose(read(tmp_path, DEPTH | own, kind=kind).temperature, expected, rtol=1e-12)


def test_a_scale_in_an_attribute_of_its_own(tmp_path):
    own = {
        "t": ([10.0024] * 3, {"standard_name": "sea_water_temperature", "units": "degC", "reference_scale": "ITS-68"})
    }
    np.testing.assert_allclose(read(tmp_path, DEPTH | own).temperature, 10.0, rtol=1e-12)


@pytest.mark.parametrize(
    ("about", "expected"),
    [
        ({"standard_name": "sea_water_practical_salinity", "units": "1"}, 35.0),
        ({"standard_name": "sea_water_practical_salinity", "units": "g kg-1"}, 35.0),  # its name says which salinity
        ({"standard_name": "sea_water_salinity", "units": "1e-3"}, 35.0),
        ({"standard_name": "sea_water_salinity", "units": "0.001"}, 35.0),
        ({"standard_name": "sea_water_salinity", "units": "psu"}, 35.0),
        ({"standard_name": "sea_water_salinity"}, 35.0),
        # Reference salinity: S_R = 35.16504/35 S_P (TEOS-10 manual); without a position no atlas is asked
        ({"standard_name": "sea_water_absolute_salinity", "units": "g kg-1"}, 35.0 * 35.0 / 35.16504),
    ],
)
def test_units_of_salinity(tmp_path, about, expected):
    cast = read(tmp_path, DEPTH | TEMP | {"s": ([35.0] * 3, about)})
    np.testing.assert_allclose(cast.salinity, expected, rtol=1e-10)


def test_grams_per_kilogram_are_not_guessed(tmp_path):
    own = {"s": ([35.0] * 3, {"standard_name": "sea_water_salinity", "units": "g/kg"})}
    with pytest.raises(CastFileError, match=r"variable s: salinity in g/kg may be absolute salinity or practical"):
        read(tmp_path, DEPTH | TEMP | own)
    cast = read(tmp_path, DEPTH | TEMP | own, mapping={"salinity": "s [PSS-78]"})
    assert cast.salinity.tolist() == [35.0] * 3


@pytest.mark.parametrize(("unit", "given"), [("S m-1", 4.0), ("mS/cm", 40.0), ("mhos/m", 4.0), ("?S/cm", 4e4)])
def test_units_of_conductivity(tmp_path, unit, given):
    own = {"c": ([given] * 3, {"standard_name": "sea_water_electrical_conductivity", "units": unit})}
    np.testing.assert_allclose(read(tmp_path, DEPTH | TEMP | own).conductivity, 4.0, rtol=1e-12)


@pytest.mark.parametrize(
    ("name", "about", "values", "expected"),
    [
        ("DEPTH", {}, [1, 2, 3], [1, 2, 3]),
        ("z", {"units": "m", "positive": "down", "standard_name": "altitude"}, [1, 2, 3], [1, 2, 3]),  # as WOD does
        ("z", {"units": "m", "positive": "up"}, [-1, -2, -3], [1, 2, 3]),
        ("alt", {"units": "m", "standard_name": "height"}, [-1, -2, -3], [1, 2, 3]),
        ("DEPTH", {"units": "fathoms"}, [1, 2, 3], [1.8288, 3.6576, 5.4864]),  # the international fathom
    ],
)
def test_depth_by_name_and_direction(tmp_path, name, about, values, expected):
    cast = read(tmp_path, {name: (np.array(values, float), about)} | TEMP)
    np.testing.assert_allclose(cast.depth, expected, rtol=1e-12)


def test_depths_above_the_surface_are_refused(tmp_path):
    with pytest.raises(
        CastFileError, match=r"'z' has depths from -10 to -30, none below the surface.*--map \"height=z"
    ):
        read(tmp_path, {"z": ([-10.0, -20.0, -30.0], DEPTH["z"][1])} | TEMP)
    cast = read(tmp_path, {"z": ([-10.0, -20.0, -30.0], DEPTH["z"][1])} | TEMP, mapping={"height": "z"})
    assert cast.depth.tolist() == [10, 20, 30]


@pytest.mark.parametrize(
    ("name", "about", "ours"),
    [
        ("TEMP", {}, "temperature"),
        ("CTDTMP", {"units": "ITS-90"}, "temperature"),
        ("x", {"WHPO_Variable_Name": "CTDTMP"}, "temperature"),
        ("y", {"long_name": "Sea Water Temperature"}, "temperature"),
        ("PSAL", {}, "salinity"),
        ("sound_velocity", {"units": "m/s"}, "sound_speed"),
        ("SVEL", {"units": "m s-1"}, "sound_speed"),
    ],
)
def test_found_by_well_known_names(tmp_path, name, about, ours):
    assert read(tmp_path, DEPTH | {name: ([3.0, 2.0, 1.0], about)}).values[ours].tolist() == [3, 2, 1]


def test_a_standard_name_goes_before_a_name_and_the_rest_is_told(tmp_path):
    cast = read(tmp_path, {"TEMP": ([1.0, 1, 1], {"units": "degC"})} | DEPTH | TEMP)
    assert cast.temperature.tolist() == [12, 11, 10]
    assert "TEMP holds temperature too; t taken" in cast.notes
    other = {"TEMP": ([1.0, 1, 1], {"standard_name": "air_temperature", "units": "degC"})}
    assert "TEMP" not in " ".join(read(tmp_path, other | DEPTH | TEMP).notes)


# --- fill values ----------------------------------------------------------------------------------------------------


FILLS = [-999.0, -99.9, 99999.0, 999999.0, -9999.0, 1e35, 9.96921e36, -1e10, np.nan, np.inf]


@pytest.mark.parametrize("kind", ["f4", "f8"])
@pytest.mark.parametrize(
    ("fill", "how"),
    [(fill, how) for fill in (*FILLS, 1e20, 77.0) for how in ("_FillValue", "missing_value")]
    + [(fill, "undeclared") for fill in FILLS],
)
def test_fill_values_of_every_sort(tmp_path, kind, fill, how):
    values = np.array([12.0, fill, 10.0], kind)
    about = {"standard_name": "sea_water_temperature", "units": "degC"}
    if how != "undeclared":
        about["fill" if how == "_FillValue" else how] = values.dtype.type(fill)
    cast = read(tmp_path, DEPTH | {"t": (values, about)})
    assert np.isnan(cast.temperature).tolist() == [False, True, False]
    assert cast.flags["temperature"].tolist() == [2, 9, 2]


@pytest.mark.parametrize(("kind", "fill"), [("i2", -32767), ("i4", -2147483647), ("u2", 65535)])
def test_default_fill_values_of_packed_integers(tmp_path, kind, fill):
    about = {"standard_name": "sea_water_temperature", "units": "degC", "scale_factor": 0.01, "add_offset": 5.0}
    cast = read(tmp_path, DEPTH | {"t": (np.array([700, fill, 500], kind), about)})
    np.testing.assert_allclose(cast.temperature, [12.0, np.nan, 10.0])


def test_the_sentinel_of_expendable_probes(tmp_path):
    about = {"standard_name": "sea_water_temperature", "units": "degC"}
    cast = read(tmp_path, DEPTH | {"t": (np.array([12.0, 99.9, 99.9], "f4"), about)})
    assert cast.flags["temperature"].tolist() == [2, 4, 4]
    assert "2 temperatures of 99.9, which stands for no value: flagged 4" in cast.notes


def test_the_valid_range_of_the_file(tmp_path):
    about = {"standard_name": "sea_water_temperature", "units": "degC", "valid_min": -2.5, "valid_max": 11.5}
    cast = read(tmp_path, DEPTH | {"t": ([12.0, 11.0, -3.0], about)})
    assert cast.flags["temperature"].tolist() == [3, 2, 3]


# --- flags ----------------------------------------------------------------------------------------------------------

IMOS = (
    "No_QC Good Probably_good Bad_data_that_are_potentially_correctable Bad Changed Not_used Not_used Interpolated "
    "Missing"
)
WOD = "accepted range_out inversion gradient anomaly gradient+inversion range+inversion range+gradient range+anomaly"


@pytest.mark.parametrize(
    ("codes", "about", "expected"),
    [
        ([1, 3, 4], {"flag_values": range(10), "flag_meanings": IMOS}, [1, 3, 4]),
        ([0, 5, 9], {"flag_values": range(10), "flag_meanings": IMOS}, [2, 1, 4]),  # 9 beside a value: there is none
        ([0, 1, 3], {"flag_values": range(9), "flag_meanings": WOD}, [1, 4, 3]),
        ([0, 1, 2], {"flag_values": [0, 1, 2], "flag_meanings": "good, bad, suspect"}, [1, 4, 3]),
        ([2, 6, 4], {"units": "woce_flags"}, [1, 2, 4]),
        ([1, 2, 4], {"quality_control_conventions": "IMOS standard flags"}, [1, 1, 4]),
        ([1, 2, 3], {"flag_values": "1b, 2b, 3b", "flag_meanings": "pass fail blue"}, [1, 4, 3]),
        (
            [1, 7, 4],
            {"flag_values": [1, 2, 3, 4, 9], "flag_meanings": "pass not_evaluated suspect fail missing"},
            [1, 3, 4],
        ),
        (
            [1, -127, 4],
            {"flag_values": [1, 2, 3, 4, 9], "flag_meanings": "pass not_evaluated suspect fail missing"},
            [1, 2, 4],
        ),
        ([0, 1, 6], {"flag_masks": [1, 2, 4], "flag_meanings": "spike_suspect range_fail other_suspect"}, [1, 3, 4]),
    ],
)
@pytest.mark.parametrize("kind", ["NETCDF4", "NETCDF3_CLASSIC"])
def test_flags_of_other_schemes(tmp_path, codes, about, expected, kind):
    about = {
        key: np.array(value, np.int8) if isinstance(value, range | list) else value for key, value in about.items()
    }
    own = {
        "t": (TEMP["t"][0], {**TEMP["t"][1], "ancillary_variables": "t_flags"}),
        "t_flags": (np.array(codes, "i1"), about),
    }
    if "flag_values" not in about and "flag_masks" not in about:
        about["standard_name"] = "sea_water_temperature status_flag"
    cast = read(tmp_path, DEPTH | own, kind=kind)
    assert cast.flags["temperature"].tolist() == expected
    if "7" in str(codes) and expected[1] == 3:
        assert any("t_flags holds 7, of no meaning in its scheme: taken as suspect" in line for line in cast.notes)


def test_flags_as_characters_by_suffix_and_the_worst_of_several(tmp_path):
    conventions = {"Conventions": "CF-1.6 OceanSITES-1.3"}
    cast = read(tmp_path, DEPTH | {"TEMP": TEMP["t"], "TEMP_QC": (np.array(list("143"), "S1"), {})}, **conventions)
    assert cast.flags["temperature"].tolist() == [1, 4, 3]
    meanings = {
        "flag_values": np.array([1, 2, 3, 4, 9], np.int8),
        "flag_meanings": "pass not_evaluated suspect fail missing",
    }
    about = {**TEMP["t"][1], "ancillary_variables": "gross spike t_error"}
    own = {
        "t": (TEMP["t"][0], about),
        "gross": (np.array([1, 1, 4], "i1"), {**meanings, "standard_name": "gross_range_test_quality_flag"}),
        "spike": (np.array([2, 3, 1], "i1"), {**meanings, "standard_name": "spike_test_quality_flag"}),
        "t_error": (
            [0.1, 0.2, 0.3],
            {"standard_name": "sea_water_temperature standard_error", "units": "degree_Celsius"},
        ),
    }
    cast = read(tmp_path, DEPTH | own)
    assert cast.flags["temperature"].tolist() == [1, 3, 4]
    assert cast.uncertainties["temperature"].tolist() == [0.1, 0.2, 0.3]


def test_flags_that_nothing_explains(tmp_path):
    own = {"t": TEMP["t"], "t_qc": (np.array([1, 0, 0], "i1"), {})}
    with pytest.raises(
        CastFileError, match=r'the flags of t \(t_qc\) are of an unknown scheme .*"temperature_flag=t_qc \['
    ):
        read(tmp_path, DEPTH | own)
    told = read(tmp_path, DEPTH | own, mapping={"temperature_flag": "t_qc [argo]"})
    assert told.flags["temperature"].tolist() == [1, 2, 2]
    told = read(tmp_path, DEPTH | own, mapping={"temperature_flag": "t_qc [ignored]"})
    assert "flags t_qc ignored as told" in told.notes
    told = read(tmp_path, DEPTH | own, settings={"flag_codes": {"0": 1, "1": 4}})
    assert told.flags["temperature"].tolist() == [4, 1, 1]
    with pytest.raises(InputError, match=r"a\.nc: --map temperature_flag=nothing: there is no such variable"):
        read(tmp_path, DEPTH | own, mapping={"temperature_flag": "nothing"})
    with pytest.raises(InputError, match=r"--map temperature=heat: there is no such variable; it holds z, t, t_qc"):
        read(tmp_path, DEPTH | own, mapping={"temperature": "heat"})


@pytest.mark.parametrize(
    ("word", "flag"),
    [
        ("good_data", 1),
        ("acceptable_measurement", 1),
        ("despiked", 1),
        ("not_calibrated", 2),
        ("interpolated_over_a_pressure_interval_larger_than_2_dbar", 2),
        ("no_qc_performed", 2),
        ("questionable_measurement", 3),
        ("probably_bad_data", 3),
        ("bad_measurement", 4),
        ("unacceptable", 4),
        ("incorrect", 4),
        ("not_good", 4),
        ("spike", 4),
        ("range_out", 4),
        ("not_reported", 9),
        ("not_sampled", 9),
        ("missing_value", 9),
        ("purple", None),
    ],
)
def test_meanings_in_words(word, flag):
    assert meaning_of(word) == flag


# --- position and time ----------------------------------------------------------------------------------------------


def test_positions_that_are_not_on_the_earth_and_doubtful_ones(tmp_path):
    lat = {"standard_name": "latitude", "units": "degrees_north", "ancillary_variables": "lat_qc"}
    own = {
        "lat": (np.array(95.0), lat),
        "lat_qc": (np.array(4, "i1"), {"flag_values": np.array([1, 4], "i1"), "flag_meanings": "good bad"}),
        "lon": (np.array(200.0), {"standard_name": "longitude"}),
    }
    cast = read(tmp_path, DEPTH | TEMP | own)
    assert np.isnan(cast.latitude)
    assert cast.longitude == -160.0
    assert "latitude 95 is not on the Earth: position taken as unknown" in cast.notes
    assert "latitude is doubtful: its flag in the file says so" in cast.notes
    cast = read(tmp_path, DEPTH | TEMP | own, settings={"latitude": "54.5 N"})
    assert cast.latitude == 54.5


@pytest.mark.parametrize(
    ("value", "units", "calendar", "expected"),
    [
        (75026.5, "days since 1770-01-01 00:00:00", "", "1975-06-02T12:00:00"),  # as WOD counts
        (1.0, "hours since 2020-01-01 00:00:00 +02:00", "gregorian", "2019-12-31T23:00:00"),
        (60.5, "seconds since 1970-01-01T00:00:00Z", "standard", "1970-01-01T00:01:00.5"),
        (1.25, "minutes since 2000-1-1", "proleptic_gregorian", "2000-01-01T00:01:15"),
        # 1 January of the year 1 in the Julian calendar is day 1721424 (1721423.5), 2000-01-01 is 2451544.5
        (2451544.5 - 1721423.5, "days since 0001-01-01 00:00:00", "standard", "2000-01-01T00:00:00"),
        (1e12, "days since 1950-01-01", "", "NaT"),
        (np.nan, "days since 1950-01-01", "", "NaT"),
    ],
)
def test_times(value, units, calendar, expected):
    found = times_since(np.array([value]), units, calendar)[0]
    assert str(found.astype("datetime64[ms]")).removesuffix(".000") == expected.replace("00.5", "00.500")


@pytest.mark.parametrize(
    ("units", "calendar", "message"),
    [
        ("days", "", "not a number of days or seconds since a date"),
        ("days since yesterday", "", "which is not a date"),
        ("days since 2020-13-01", "", "which is not a date"),
        ("fortnights since 2020-01-01", "", "not a number of days"),
        ("days since 2020-01-01", "360_day", "is not that of real days"),
    ],
)
def test_times_that_are_none(tmp_path, units, calendar, message):
    with pytest.raises(NoTimeError, match=message):
        times_since(np.array([1.0]), units, calendar)
    own = {"time": (np.array(1.0), {"standard_name": "time", "units": units, "calendar": calendar})}
    cast = read(tmp_path, DEPTH | TEMP | own)
    assert np.isnat(cast.time)
    assert any("time unknown" in note for note in cast.notes)


def test_what_is_not_numbers_where_numbers_are_due(tmp_path):
    own = {"t": (np.array(list("abc"), "S1"), {"standard_name": "sea_water_temperature"})}
    with pytest.raises(CastFileError, match="no temperature, salinity, conductivity or sound speed; it holds z, t"):
        read(tmp_path, DEPTH | own)
    own = {"t": (TEMP["t"][0], {**TEMP["t"][1], "scale_factor": "two"})}
    with pytest.raises(CastFileError, match=r"variable t: its attribute scale_factor is 'two'; it must be one number"):
        read(tmp_path, DEPTH | own)
