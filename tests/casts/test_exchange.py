import numpy as np
import pytest

from ocean_sound.casts.exchange import read_exchange
from ocean_sound.errors import CastFileError

HEADER = """CTD,20260131INVENTED
# a comment
NUMBER_HEADERS = 6
EXPOCODE = INV2026
STNNBR = 7
DATE = 20260131
TIME = 930
LATITUDE = -34.5
"""
CTD = (
    HEADER
    + """CTDPRS,CTDPRS_FLAG_W,CTDTMP,CTDTMP_FLAG_W,CTDSAL,CTDSAL_FLAG_W,CTDOXY
DBAR,,ITS-90,,PSS-78,,UMOL/KG
0.0,2,10.0,2,35.0,1,200
2.0,2,10.1,3,35.1,6,200
4.0,2,10.2,4,35.2,7,200
6.0,2,-999.0,9,-999.0,5,-999
END_DATA
"""
)
BOTTLE = """BOTTLE,20260131INVENTED
#comment
EXPOCODE,STNNBR,CASTNO,DATE,TIME,LATITUDE,LONGITUDE,CTDPRS,CTDTMP,CTDSAL,CTDSAL_FLAG_W,SALNTY,SALNTY_FLAG_W
,,,,,,,DBAR,IPTS-68,PSS-78,,PSS-78,
INV,1,1,20260131,0015,10,200,100.0,10.0024,35.1,2,35.2,2
INV,1,1,20260131,0016,10,200,5.0,20.0048,35.0,2,35.3,2
INV,2,1,20260131,1215,11,200,5.0,15.0,-999,9,35.3,6
INV,2,1,20260131,1215,11,200,9.0,15.0,-999,9,35.4,1
END_DATA
"""


def parse(text):
    return list(read_exchange(text.encode(), "f.csv", source="f.csv"))


def test_ctd_with_flags():
    (cast,) = parse(CTD)
    assert cast.id == "INV2026_7"
    assert cast.time == np.datetime64("2026-01-31T09:30")
    assert cast.latitude == -34.5
    assert np.isnan(cast.longitude)
    assert cast.pressure.tolist() == [0.0, 2.0, 4.0, 6.0]
    # WOCE codes (WHPO 91-1, CTD data): 1 not calibrated, 2 good, 3 questionable, 4 bad, 5 not reported, 6
    # interpolated, 7 despiked
    assert cast.flags["temperature"].tolist() == [1, 3, 4, 9]
    assert cast.flags["salinity"].tolist() == [2, 2, 1, 9]
    assert np.isnan(cast.temperature[3])
    assert cast.temperature[2] == 10.2  # flagged, not deleted
    assert cast.attributes == {"cruise": "INV2026", "station": "7"}


def test_bottles_are_grouped_ordered_and_on_its_90():
    first, second = parse(BOTTLE)
    assert (first.id, second.id) == ("INV_1_1", "INV_2_1")
    assert first.pressure.tolist() == [5.0, 100.0]
    # t90 = t68 / 1.00024 (Saunders 1990)
    np.testing.assert_allclose(first.temperature, [20.0, 10.0], rtol=1e-14)
    assert first.salinity.tolist() == [35.0, 35.1]
    assert "levels ordered by pressure" in first.notes
    assert "temperature converted from degC IPTS-68" in first.notes
    assert first.longitude == -160.0
    assert second.salinity.tolist() == [35.3, 35.4]  # of the samples, where the CTD has none
    assert second.flags["salinity"].tolist() == [1, 2]
    assert second.time == np.datetime64("2026-01-31T12:15")
    assert "levels ordered by pressure" not in second.notes


def test_missing_beside_a_value_is_bad_and_so_is_a_code_that_the_manual_lacks():
    (cast,) = parse(CTD.replace("10.1,3", "10.1,9").replace("35.0,1", "35.0,8").replace("35.1,6", "35.1,5"))
    assert cast.flags["temperature"].tolist() == [1, 4, 4, 9]
    assert cast.flags["salinity"].tolist() == [3, 4, 1, 9]


def test_levels_in_air_are_flagged():
    (cast,) = parse(CTD.replace("0.0,2,10.0", "-0.9,2,10.0"))
    assert cast.flags["pressure"].tolist() == [4, 1, 1, 1]
    assert "1 levels in air: flagged 4" in cast.notes


def test_a_time_that_is_none_is_noted():
    (cast,) = parse(CTD.replace("TIME = 930", "TIME = 9999"))
    assert cast.time == np.datetime64("2026-01-31")
    assert "time of day unknown; midnight stands for it" in cast.notes
    (cast,) = parse(CTD.replace("DATE = 20260131", "DATE = -999"))
    assert np.isnat(cast.time)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (CTD.replace("END_DATA\n", ""), r"f\.csv: the line END_DATA is missing: the file is cut short"),
        (CTD.replace("NUMBER_HEADERS = 6", "NUMBERS = 6"), r"line 3 must be 'NUMBER_HEADERS = n', found 'NUMBERS = 6'"),
        (CTD.replace("NUMBER_HEADERS = 6", "NUMBER_HEADERS = 9"), r"line 9 must be 'NAME = value'"),
        (CTD.replace("CTDPRS", "PRS"), r"line 9 names no CTDPRS column; found PRS"),
        (CTD.replace("10.1,", "warm,"), r"line 12, column 'CTDTMP': 'warm': it is not a number"),
        (CTD.replace("2.0,2,10.1,3", "2.0,2,10.1,x"), r"line 12, column 'CTDTMP_FLAG_W': 'x'"),
        (
            CTD.replace("2.0,2,10.1,3", "2.0,2,10.1,33"),
            r"line 12, column 'CTDTMP_FLAG_W': 33 is not a flag from 0 to 9",
        ),
        (CTD.replace("ITS-90", "DEG R"), r"column CTDTMP: unit 'DEG R' is not known for temperature"),
        (CTD.replace("-34.5", "-94.5"), r"LATITUDE: latitude is '-94.5'"),
        (CTD.replace("DATE = 20260131", "DATE = 20261331"), r"DATE: '20261331' is not a time"),
        (HEADER, r"ends before its line of column names"),
        ("CTD,x\n", r"line 3 must be 'NUMBER_HEADERS = n', found 'the end of the file'"),
        (BOTTLE.replace("STNNBR", "STN"), r"a bottle file needs a STNNBR column"),
        (HEADER + "CTDPRS,CTDTMP\nDBAR,ITS-90\nEND_DATA\n", r"no level between line 10 and END_DATA"),
        (HEADER + "CTDPRS,CTDTMP\nDBAR,ITS-90\n1,-999\nEND_DATA\n", r"nothing measured beside pressure"),
    ],
)
def test_what_is_broken_is_named(text, message):
    with pytest.raises(CastFileError, match=message):
        parse(text)
