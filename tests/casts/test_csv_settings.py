"""What a person says of a CSV: the TOML beside it, settings from Python, and what they do."""

from pathlib import Path

import gsw
import numpy as np
import pytest

from ocean_sound.casts import read_blocks, read_casts
from ocean_sound.casts.plain_csv import read_plain
from ocean_sound.casts.settings import Settings
from ocean_sound.casts.units import conductivity_in_situ
from ocean_sound.errors import CastFileError, InputError


def parse(text, **said):
    (cast,) = read_plain(text.encode(), "f.csv", source="f.csv", name="f", settings=Settings(**said))
    return cast


@pytest.fixture
def beside(tmp_path):
    """Reads a CSV with a TOML beside it."""

    def read(text, toml, **options):
        (tmp_path / "a.csv").write_text(text, encoding="utf-8")
        (tmp_path / "a.csv.toml").write_text(toml, encoding="utf-8")
        (cast,) = read_casts(tmp_path / "a.csv", **options)
        return cast

    return read


def test_all_that_a_toml_may_say(beside):
    cast = beside(
        "Z;T;C;when\n10,5;8,25;-5,5;x\n",
        """
delimiter = ";"
decimal = ","
missing = [-5.5, "void"]
temperature_scale = "IPTS-68"
latitude = "34 07.5 S"
longitude = 151.5
time = 2015-08-13T06:38:00Z
id = "morning"
[columns]
depth = "Z [ft]"
temperature = "T [degC]"
conductivity = "C [mS/cm]"
""",
    )
    assert (cast.id, cast.latitude, cast.longitude) == ("morning", -34.125, 151.5)
    assert cast.time == np.datetime64("2015-08-13T06:38")
    assert cast.depth[0] == pytest.approx(10.5 * 0.3048, rel=1e-15)
    assert cast.temperature[0] == 8.25 / 1.00024
    assert cast.conductivity is None
    assert cast.notes[0] == "settings taken from a.csv.toml"
    assert "temperature converted from degC IPTS-68" in cast.notes


def test_python_and_map_go_before_the_toml(beside):
    toml = 'date_order = "day-first"\n[columns]\ntemperature = "T1"\n'
    text = "date: 03/04/2026\ndepth,T1,T2\n0,1,2\n"
    cast = beside(text, toml)
    assert (cast.time, cast.temperature[0]) == (np.datetime64("2026-04-03"), 1.0)
    cast = beside(text, toml, settings={"date_order": "month-first"}, mapping={"temperature": "T2"})
    assert (cast.time, cast.temperature[0]) == (np.datetime64("2026-03-04"), 2.0)


@pytest.mark.parametrize(
    ("toml", "message"),
    [
        ('date_oder = "day-first"', r"a\.csv\.toml: field 'date_oder' is unknown: did you mean 'date_order'\?"),
        ('date_order = "dmy"', r"a\.csv\.toml: field 'date_order' is 'dmy': give 'day-first' or 'month-first'"),
        ("in_air_pressure = 99", r"field 'in_air_pressure' is 99: give a number at least -20 and at most 50"),
        ("missing = 3", r"field 'missing' is 3: give a list, each a number or a text"),
        ('columns.depht = "Z"', r"field 'columns.depht' is unknown: known here: depth, height"),
        ("columns.depth = 3", r"field 'columns.depth' is 3: give a text"),
        ("flag_codes.G = 7", r"field 'flag_codes' has 7: give QARTOD flags, 1, 2, 3, 4, 9"),
        ('encoding = "klingon"', r"field 'encoding' is 'klingon': give one such as 'utf-8'"),
        ('decimal = ","\ndelimiter = ","', r"'decimal' and 'delimiter' are both ','"),
        (
            "in_air_pressure = 1\nsurface_air_pressure = 8",
            r"'in_air_pressure' and 'surface_air_pressure' are both given",
        ),
        ('pressure_kind = "sea"\nsurface_air_pressure = 8', r"sea pressure is zero at the surface whatever"),
        ("latitude = [1]", r"field 'latitude' is \[1\]: give a number or a text"),
        ("x", r"a\.csv\.toml: is not TOML: "),
    ],
)
def test_a_wrong_toml_is_told_field_by_field(beside, toml, message):
    with pytest.raises(InputError, match=message) as caught:
        beside("depth,temp\n0,1\n", toml)
    assert "\n" not in str(caught.value)


def test_several_faults_are_told_together(beside):
    with pytest.raises(InputError, match=r"(?s)'decimal' is 'x'.*\n.*'latidude' is unknown: did you mean 'latitude'"):
        beside("depth,temp\n0,1\n", 'decimal = "x"\nlatidude = 5\n')


def test_settings_from_python_are_checked_too(tmp_path):
    (tmp_path / "a.csv").write_text("depth,temp\n0,1\n")
    with pytest.raises(InputError, match=r"^settings: field 'datum' is unknown"):
        read_blocks(tmp_path / "a.csv", settings={"datum": 1})
    with pytest.raises(CastFileError, match=r"a\.csv: field 'latitude': latitude is '95.0'"):
        list(read_blocks(tmp_path / "a.csv", settings={"latitude": 95.0}))


def test_settings_beside_a_file_that_speaks_for_itself(tmp_path):
    (tmp_path / "e.csv").write_text("CTD,x\nNUMBER_HEADERS = 1\nCTDPRS,CTDTMP\nDBAR,ITS-90\n1,10\nEND_DATA\n")
    (tmp_path / "e.csv.toml").write_text('decimal = ","\n')
    with pytest.raises(InputError, match=r"e\.csv: e\.csv\.toml is for plain CSV"):
        list(read_casts(tmp_path / "e.csv"))


def test_encoding_and_delimiter_are_obeyed(tmp_path):
    (tmp_path / "a.csv").write_bytes("depth,temp\n1,2\nd\u00e9p,3\n".encode("cp1252"))
    with pytest.raises(CastFileError, match="'d\u00e9p': it is not a number"):
        list(read_casts(tmp_path / "a.csv", settings={"encoding": "cp1252"}))
    cast = parse('"depth","temp"\n"1,5","2,25"\n', decimal=",")
    assert (cast.depth[0], cast.temperature[0]) == (1.5, 2.25)
    assert parse("depth temp\n1 2\n", delimiter="space").depth.tolist() == [1.0]


# --- pressure ------------------------------------------------------------------------------------------------------

PRESSURE = "pressure [kPa],temp [degC]\n{}\n"


def test_the_kind_of_pressure_is_asked_and_obeyed():
    text = PRESSURE.format("201.325,5")
    with pytest.raises(CastFileError, match="may be sea pressure or absolute pressure"):
        parse(text)
    assert parse(text, pressure_kind="sea").pressure[0] == pytest.approx(20.1325)
    # TEOS-10: sea pressure is absolute pressure less one standard atmosphere of 10.1325 dbar
    assert parse(text, pressure_kind="absolute").pressure[0] == pytest.approx(10.0)


def test_a_mountain_lake():
    """At 2000 m the standard atmosphere (ISO 2533) has 79.5 kPa: 7.95 dbar."""
    absolute = parse("absolute pressure [dbar],temp\n17.95,5\n", surface_air_pressure=7.95)
    assert absolute.pressure[0] == pytest.approx(10.0)
    above = parse(
        "pressure [dbar],temp\n7.8175,5\n", surface_air_pressure=7.95, pressure_kind="above-standard-atmosphere"
    )
    assert above.pressure[0] == pytest.approx(10.0)
    assert any("7.95 dbar of air" in note for note in above.notes)


def test_an_offset_in_air_is_taken_off():
    assert parse("pressure [dbar],temp\n10.4,5\n", in_air_pressure=0.4).pressure[0] == pytest.approx(10.0)
    cast = parse("absolute pressure [dbar],temp\n20.1,5\n", in_air_pressure=10.1)
    assert cast.pressure[0] == pytest.approx(10.0)
    assert any("less 10.1 dbar, what the sensor read in air" in note for note in cast.notes)


def test_levels_in_air_are_flagged():
    cast = parse(
        "sea pressure [dbar],temp [degC],cond [S/m]\n-0.6,20,0\n-0.1,20,0.00001\n-0.1,15,3\n0.2,15,3\n5,15,3\n"
    )
    assert cast.flags["pressure"].tolist() == [4, 4, 2, 2, 2]
    assert any(note.startswith("2 levels in air") for note in cast.notes)
    assert cast.good("pressure").tolist() == [False, False, True, True, True]


# --- flags ---------------------------------------------------------------------------------------------------------


def test_flags_of_a_code_that_is_told():
    text = "depth,temp,temp QC,sal,QC_sal\n0,1,1,35,0\n1,2,4,35,3\n2,3,9,35,2\n"
    cast = parse(text, columns={"temperature_flag": "temp QC [argo]", "salinity_flag": "QC_sal [seadatanet]"})
    assert cast.flags["temperature"].tolist() == [1, 4, 4]  # 'missing' beside a value: not to be used
    assert cast.flags["salinity"].tolist() == [2, 3, 1]
    cast = parse(text, flag_codes={"0": 2, "1": 1, "2": 1, "3": 4, "4": 4, "9": 9})
    assert cast.flags["salinity"].tolist() == [2, 4, 1]


def test_flags_of_letters_and_of_whole_levels():
    text = "depth,temp,sal,QC\n0,1,35,G\n1,2,35,b\n2,3,35,\n"
    cast = parse(text, columns={"flag": "QC [own]"}, flag_codes={"G": 1, "B": 4})
    for name in ("depth", "temperature", "salinity"):
        assert cast.flags[name].tolist() == [1, 4, 2]
    assert "flags ignored as told: QC" in parse(text, columns={"flag": "QC [ignored]"}).notes


def test_the_worst_of_two_flags_counts():
    cast = parse("depth,temp,temperature_flag,QC\n0,1,1,4\n1,2,3,1\n2,3,2,1\n", columns={"flag": "QC [qartod]"})
    assert cast.flags["temperature"].tolist()[:2] == [4, 3]


def test_flags_that_cannot_be_translated_are_told():
    with pytest.raises(InputError, match=r"no code of flags is named 'mine'; use one of qartod, argo"):
        parse("depth,temp,q\n0,1,1\n", columns={"temperature_flag": "q [mine]"})
    with pytest.raises(CastFileError, match=r"line 3, column 'q': flag 6; .*flags.* are 0, 1, 2"):
        parse("depth,temp,q\n0,1,1\n1,2,6\n", columns={"temperature_flag": "q [argo]"})
    with pytest.raises(InputError, match="there is no column of salinity"):
        parse("depth,temp,q\n0,1,1\n", columns={"salinity_flag": "q [argo]"})


# --- salinity and conductivity -------------------------------------------------------------------------------------


def test_absolute_salinity_becomes_practical():
    """Against the check cast of TEOS-10 that the gsw package carries: its SA_from_SP, turned round."""
    with np.load(Path(gsw.__file__).parent / "tests" / "gsw_cv_v3_0.npz") as values:
        absolute, practical = values["SA_from_SP"][:, 0], values["SP_chck_cast"][:, 0]
        pressure, position = values["p_chck_cast"][:, 0], (values["lat_chck_cast"], values["long_chck_cast"])
    latitude, longitude = (float(np.ravel(value)[0]) for value in position)
    rows = [f"{p!r},5,{s!r}" for p, s in zip(pressure.tolist(), absolute.tolist(), strict=True) if s == s]  # noqa: PLR0124
    text = f"lat: {latitude}\nlon: {longitude}\nsea pressure [dbar],temp,SA [g/kg]\n" + "\n".join(rows)
    cast = parse(text, columns={"absolute_salinity": "SA"})
    np.testing.assert_allclose(cast.salinity, practical[np.isfinite(absolute)], rtol=0, atol=1e-9)
    assert any("TEOS-10 atlas" in note for note in cast.notes)
    text = "depth [m],absolute salinity [g/kg],temp\n0,35.16504,5\n"  # the definition of Reference Salinity
    assert parse(text).salinity[0] == pytest.approx(35.0, abs=1e-12)
    with pytest.raises(CastFileError, match=r"absolute_salinity=COLUMN \[g/kg\]"):
        parse("depth,temp,sal (g/kg)\n0,1,35\n")


def test_absolute_salinity_below_a_depth_only():
    cast = parse("lat: 58\nlon: 20\ndepth [m],temp,absolute salinity\n100,5,8\n")
    pressure = gsw.p_from_z(-100.0, 58.0)
    assert cast.salinity[0] == pytest.approx(gsw.SP_from_SA(8.0, pressure, 20.0, 58.0), rel=1e-12)


def test_specific_conductance_is_taken_back_to_the_conductivity_in_situ():
    """Standard Methods 2510 B: specific conductance = conductivity / (1 + 0.0191 (t - 25))."""
    cast = parse("depth,temp [degC],specific conductance [uS/cm]\n0,25,1412\n1,15,1412\n")
    np.testing.assert_allclose(cast.conductivity, np.array([1412.0, 1412.0 * (1.0 - 0.191)]) / 1e4, rtol=1e-14)
    assert any("1.91 % per degC (Standard Methods 2510 B; from memory)" in note for note in cast.notes)
    assert parse("depth,temp,ec25 [mS/cm]\n0,15,1\n", percent_per_degree=2.0).conductivity[0] == pytest.approx(0.08)
    back = conductivity_in_situ(np.array([3.0]), np.array([10.0])) / (1.0 + 0.0191 * (10.0 - 25.0))
    assert back[0] == pytest.approx(3.0, rel=1e-15)
