import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts import read_casts
from ocean_sound.casts.plain_csv import read_plain
from ocean_sound.casts.settings import Settings
from ocean_sound.errors import CastFileError, InputError
from ocean_sound.files import write_csv

GOOD = "depth [m],temperature [degC],salinity [PSS-78]\n0,12.5,35.0\n10,11.0,35.1\n"


def parse(text, mapping=None):
    data = text if isinstance(text, bytes) else text.encode()
    (cast,) = read_plain(data, "f.csv", source="f.csv", name="f", settings=Settings(columns=mapping or {}))
    return cast


def columns(cast):
    return {name: column.tolist() for name, column in cast.values.items()}


def test_the_plain_case():
    cast = parse(GOOD)
    assert columns(cast) == {"depth": [0.0, 10.0], "temperature": [12.5, 11.0], "salinity": [35.0, 35.1]}
    assert cast.id == "f"
    assert cast.notes == ()
    assert not cast.flags
    assert cast.source == "f.csv"


@pytest.mark.parametrize(
    "text",
    [
        GOOD.replace(",", ";"),
        GOOD.replace(",", "\t"),
        GOOD.replace(",", "  "),
        "depth temperature salinity\n0 12.5 35.0\n10 11.0 35.1\n",
        "Depth (m)  Temp (degC)  Sal (PSU)\n 0.0  12.5  35.0\n10.0  11.0  35.1\n",
        "Depth (m) Temp (degC) Sal (PSU)\n0 12.5 35.0\n10 11.0 35.1\n",
        "depth;temp;sal\n0;12,5;35,0\n10;11,0;35,1\n",
        "depth\ttemp\tsal\n0\t12,5\t35,0\n10\t11,0\t35,1\n",
        GOOD.replace("\n", "\r\n"),
        GOOD.replace("\n", "\r"),
        GOOD + "\n\n  \n",
        GOOD.rstrip("\n"),
        "\ufeff" + GOOD,
        "\n\n" + GOOD,
        GOOD.replace("\n10", "\n\n# a remark\n10"),
        GOOD.replace("\n", ",\n"),
        GOOD.replace("12.5", " 12.5 ").replace("35.1", "+35.1"),
        "# depth temp sal\n0 12.5 35\n10 11 35.1\n",
        "depth,temp,sal\nm,degC,PSU\n0,12.5,35.0\n10,11.0,35.1\n",
        '"Depth, in metres [m]","temp","sal"\n"0","12.5","35.0"\n10,11.0,35.1\n'.replace("Depth, in metres", "Depth"),
        "oxygen,depth,temp,station,sal\n1,0,12.5,A,35.0\n2,10,11.0,A,35.1\n",
        "station, A7\ncast taken by, nobody\n\n" + GOOD,
        GOOD.encode("utf-16"),
    ],
)
def test_many_honest_ways_to_write_one_cast(text):
    assert columns(parse(text)) == columns(parse(GOOD))


def test_units_in_heads():
    cast = parse("Depth (ft);Temp °F;Conductivity mS/cm\n10;50;40\n")
    np.testing.assert_allclose(
        [cast.depth[0], cast.temperature[0], cast.conductivity[0]], [3.048, 10.0, 4.0], rtol=1e-14
    )
    assert cast.notes == (
        "depth converted from ft",
        "temperature converted from degF",
        "conductivity converted from mS/cm",
    )


def test_latin_1_is_noted():
    cast = parse("Depth (m),Temperature (°C)\n1,2\n".encode("latin-1"))
    assert cast.temperature[0] == 2.0
    assert "text is not UTF-8; read as Latin-1" in cast.notes


def test_preamble_gives_position_time_id_and_units():
    text = (
        "# cast_id: A7\nLatitude: 34 07.5 S\nLongitude = 151.5\nDate,13/08/2015\nTime: 06:38\nVessel Name:,Nobody's\n"
        "Depth Units:,Feet\n\n" + "Depth,Temperature\n10,5\n"
    )
    cast = parse(text)
    assert (cast.id, cast.latitude, cast.longitude) == ("A7", -34.125, 151.5)
    assert cast.time == np.datetime64("2015-08-13T06:38")
    assert cast.attributes["vessel_name"] == "Nobody's"
    assert cast.depth[0] == pytest.approx(3.048)


def test_position_and_time_in_columns():
    cast = parse("cast id,lat,lon,time,depth,temp\nA,54.5,-8,2026-01-31T12:00Z,0,1\nA,54.5,-8,2026-01-31T12:01Z,1,2\n")
    assert (cast.id, cast.latitude, cast.longitude) == ("A", 54.5, -8.0)
    assert cast.time == np.datetime64("2026-01-31T12:00")
    assert np.isnat(parse("time,depth,temp\n0.5,0,1\n").time)


def test_sound_speed_alone_and_one_level():
    cast = parse("depth m,sound speed m/s\n5,1500.5\n")
    assert columns(cast) == {"depth": [5.0], "sound_speed": [1500.5]}


def test_gaps_and_fills_are_flagged_missing():
    cast = parse("depth,temp,sal\n0,,35\n1,NaN,-999\n2,-999.0,n/a\n3,9.5,99999\n")
    assert cast.flags["temperature"].tolist() == [9, 9, 9, 2]
    assert cast.flags["salinity"].tolist() == [2, 9, 9, 9]
    assert np.isnan(cast.temperature[:3]).all()
    assert "depth" not in cast.flags


def test_flags_of_our_own_are_read():
    cast = parse("depth,temperature,temperature_flag\n0,1,1\n1,2,4\n2,,9\n3,4,9\n")
    assert cast.flags["temperature"].tolist() == [1, 4, 9, 4]  # 'missing' beside a value: not to be used
    with pytest.raises(CastFileError, match=r"line 3, column 'temperature_flag': flag 7; QARTOD"):
        parse("depth,temperature,temperature_flag\n0,1,1\n1,2,7\n")


def test_height_is_turned_and_deep_values_are_no_fills():
    cast = parse("height [m],temp\n-0.5,1\n-999,2\n-9999,3\n")
    assert cast.depth[:2].tolist() == [0.5, 999.0]
    assert np.isnan(cast.depth[2])
    assert "height above the surface turned into depth below it" in cast.notes


def test_depth_negative_downward_is_asked_about():
    text = "depth,temp\n-0,1\n-5,2\n-10,3\n"
    with pytest.raises(
        CastFileError, match=r"depths from -?0 to -10, none below the surface; .*--map \"height=depth\""
    ):
        parse(text)
    assert parse(text, {"height": "depth"}).depth.tolist() == [0.0, 5.0, 10.0]
    assert parse("depth,temp\n-0.3,1\n5,2\n").depth.tolist() == [-0.3, 5.0]  # a level in air is the checker's affair


def test_mapping_settles_what_names_do_not():
    text = "Z,T1,T2,S\n10,5,6,35\n"
    cast = parse(text, {"depth": "Z [ft]", "temperature": "T2", "salinity": "S [PSS-78]"})
    assert cast.depth[0] == pytest.approx(3.048)
    assert cast.temperature[0] == 6.0
    assert "columns not read: T1" in cast.notes
    assert parse("depth,sal (g/kg)\n1,35\n", {"salinity": "sal (g/kg) [PSU]"}).salinity[0] == 35.0
    assert parse("p [kPa],temp\n100,5\n", {"absolute_pressure": "p [kPa]"}).pressure[0] == pytest.approx(10.0 - 10.1325)


def test_unread_columns_are_named():
    assert parse("depth,temp,oxygen\n1,2,3\n").notes[-1] == "columns not read: oxygen"


BAD = [
    (
        "temperature,salinity\n1,2\n",
        r"f\.csv: no column of depth or pressure; the columns are: temperature, salinity; .*--map depth",
    ),
    (
        "Z,T\n1,2\n",
        r"no column of depth or pressure; the columns are: Z, T; say which is which with --map depth=COLUMN",
    ),
    (
        "depth,T,S\n1,2,3\n",
        r"no column of temperature, salinity, conductivity or sound speed; .*--map temperature=COLUMN",
    ),
    ("depth,temp\n0,1\n5,warm\n", r"f\.csv: line 3, column 'temp': 'warm': it is not a number"),
    ("depth;temp\n0;1,5\n5;1.5\n", r"line 3, column 'temp': '1\.5': the column has decimal commas and points"),
    ("depth,temp\n0,1_000\n", r"'1_000': it is not a number"),
    ("depth,temp\n0,1\n5\n", r"line 3 has 1 cells where the heads name 2 columns"),
    ("depth,temp\n0,1\n5,1,7\n", r"line 3 has 3 cells"),
    ("depth,temp\n0,1,2\n5\n7,8\n9,9\n", r"line 2 has 3 cells where the heads above it name 2 columns"),
    ("depth,temp\n", r"no level below the heads on line 1"),
    ("depth,temp\nnan,nan\n,\n", r"no usable level"),
    ("depth,temp\nnan,1\n2,nan\n", r"no usable level: no level holds both"),
    ("1,2,3\n4,5,6\n", r"line 1 has numbers but no line of column names"),
    ("just some words\nand more\n", r"no table found; a cast needs a line of column names such as"),
    ("depth [cubits],temp\n1,2\n", r"unit 'cubits' is not known for depth"),
    ("depth,sal (g/kg)\n1,35\n", r"absolute salinity or practical salinity"),
    ("pressure psi,temp\n1,35\n", r"may be sea pressure or absolute pressure"),
    (
        "depth,temp,temperature\n1,2,3\n",
        r"columns 'temp' and 'temperature' both look like temperature; choose with --map",
    ),
    ("depth,depth,temp\n1,2,3\n", r"both look like depth"),
    ("latitude: 95\ndepth,temp\n1,2\n", r"line 1: latitude is '95'"),
    ("date: 03/04/2026\ndepth,temp\n1,2\n", r"line 1: the date '03/04/2026' may be"),
    (
        "lat,depth,temp\n54,1,2\n55,1,2\n",
        r"latitude runs from 54 to 55: the rows are of several casts, .*--map id=COLUMN",
    ),
    ("depth,temp\n1,2\n3,4\ndepth,temp\n1,2\n", r"line 4, column 'depth': 'depth': the heads stand here again"),
    ("depth,temp,temp QC\n1,2,1\n", r"column 'temp QC' looks like flags, .*--map \"temperature_flag=temp QC \[CODE"),
    ("depth,temp,QC\n1,2,1\n", r"column 'QC' looks like flags, .*--map \"flag=QC \[CODE\]\", where CODE is qartod"),
    ("depth,spec cond [mS/cm]\n1,50\n", r"specific conductance says .* only beside a temperature"),
    ("depth,temp\n" + "1," * 2000 + "1\n", r"line 2 has 2001 cells where the heads above it name 2"),
    (",".join(f"c{i}" for i in range(5000)) + "\n1,2\n", r"line 1 has 5000 columns; at most 4096 are read"),
]


@pytest.mark.parametrize(("text", "message"), BAD)
def test_bad_input_gives_one_clear_line(text, message):
    with pytest.raises(CastFileError, match=message) as caught:
        parse(text)
    assert "\n" not in str(caught.value)
    assert str(caught.value).startswith("f.csv: ")


def test_a_mapped_column_must_be_there():
    with pytest.raises(InputError, match=r"no column is named 'T9' \(--map temperature=T9\); the columns are: depth"):
        parse(GOOD, {"temperature": "T9"})


NUMBERS = st.floats(allow_nan=False, allow_infinity=False, min_value=-90.0, max_value=9e4)


@given(
    st.lists(
        st.tuples(st.floats(0, 12000), NUMBERS, st.one_of(NUMBERS, st.just(float("nan")))), min_size=1, max_size=30
    )
)
def test_what_we_write_we_read_back_bit_for_bit(tmp_path_factory, rows):
    goal = tmp_path_factory.mktemp("csv") / "a.csv"
    depth, temperature, salinity = (np.array(column) for column in zip(*rows, strict=True))
    write_csv(goal, {"depth": depth, "temperature": temperature, "salinity": salinity}, preamble={"cast_id": "A 1"})
    (cast,) = read_casts(goal)
    assert cast.id == "A 1"
    assert cast.depth.tobytes() == depth.tobytes()
    assert cast.temperature.tobytes() == temperature.tobytes()
    if np.isnan(salinity).all():
        assert cast.salinity is None
    else:
        np.testing.assert_array_equal(cast.salinity, salinity)


@given(
    st.lists(
        st.from_regex(r"[-+]?[0-9]{1,20}(\.[0-9]{0,20})?([eE][-+]?[0-9]{1,2})?", fullmatch=True),
        min_size=1,
        max_size=20,
    )
)
def test_numbers_are_correctly_rounded(texts):
    rows = "".join(f"{index + 1},{text}\n" for index, text in enumerate(texts))
    cast = parse("depth,temp,sound speed\n" + rows.replace("\n", ",1500\n"))
    expected = np.array([float(text) for text in texts])  # Python's float rounds correctly (David Gay's algorithm)
    kept = np.isfinite(cast.temperature)
    assert cast.temperature[kept].tobytes() == expected[kept].tobytes()
