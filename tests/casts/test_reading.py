import subprocess
import sys
import zipfile

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts import Cast, read_blocks, read_casts, zipped
from ocean_sound.errors import CastFileError, InputError
from ocean_sound.files import write_dataset

PLAIN = "depth [m],temp [degC],sal [PSU]\n0,12.5,35.0\n10,11.0,35.1\n"
EXCHANGE = """CTD,20260131INV
NUMBER_HEADERS = 2
STNNBR = 7
CTDPRS,CTDTMP,CTDSAL
DBAR,ITS-90,PSS-78
1,10,35
2,9,35
END_DATA
"""


@pytest.fixture
def netcdf(tmp_path):
    path = tmp_path / "a.nc"
    write_dataset(Cast(id="n", values={"depth": [0.0], "sound_speed": [1500.0]}).to_dataset(), path)
    return path.read_bytes()


@pytest.mark.parametrize("name", ["a.csv", "a.nc", "a.zip", "a", "a.txt"])
def test_the_format_is_told_by_content_not_by_name(tmp_path, name, netcdf):
    for content, ident in ((PLAIN.encode(), "a"), (EXCHANGE.encode(), "7"), (netcdf, "n")):
        (tmp_path / name).write_bytes(content)
        (cast,) = read_casts(tmp_path / name)
        assert cast.id == ident
        assert cast.source == name


def test_a_zip_of_everything(tmp_path, netcdf):
    path = tmp_path / "all.zip"
    with zipfile.ZipFile(path, "w") as archive:
        archive.writestr("one/plain.csv", PLAIN)
        archive.writestr("exchange.csv", EXCHANGE)
        archive.writestr("binary.nc", netcdf)
        archive.writestr("README.txt", "words only")
        archive.writestr("broken.csv", PLAIN.replace("11.0", "cold"))
        archive.writestr("empty.csv", "")
        archive.writestr("folder/", "")
    (block,) = read_blocks(path)
    assert block.id == ("plain", "7", "n")
    assert block.source == ("all.zip/one/plain.csv", "all.zip/exchange.csv", "all.zip/binary.nc")
    assert [where.rsplit(": ")[-1] for where, _ in block.left_out] == ["README.txt", "broken.csv", "empty.csv"]
    reasons = [why for _, why in block.left_out]
    assert reasons[0].startswith("no table found")
    assert reasons[1].startswith("line 3, column 'temp [degC]': 'cold'")
    assert reasons[2] == "the file is empty"


def test_a_large_zip_comes_in_several_blocks(tmp_path, monkeypatch):
    monkeypatch.setattr(zipped, "_BLOCK_SIZE", 2)
    with zipfile.ZipFile(tmp_path / "a.zip", "w") as archive:
        for number in range(7):
            archive.writestr(f"{number}.csv", PLAIN)
        archive.writestr("last.txt", "words")
    blocks = list(read_blocks(tmp_path / "a.zip"))
    assert len(blocks) > 1
    assert [cast.id for block in blocks for cast in block] == [str(number) for number in range(7)]
    assert [len(block.left_out) for block in blocks] == [0] * (len(blocks) - 1) + [1]


def test_bombs_are_refused_before_they_are_opened(tmp_path, monkeypatch):
    path = tmp_path / "bomb.zip"
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("zeros.csv", bytes(5 * 2**20))
    with pytest.raises(CastFileError, match=r"bomb\.zip: member zeros\.csv would unpack to 5242880 bytes"):
        list(read_casts(path))
    monkeypatch.setattr(zipped, "LARGEST_TOTAL", 1000)
    with pytest.raises(CastFileError, match="would unpack to 5 MB; at most"):
        list(read_casts(path))


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"", "the file is empty"),
        (b" \n\t\n", "the file is empty"),
        (bytes(range(256)) * 4, "is neither text nor a format that is known; casts are read from plain CSV"),
        (b"depth,temp\n1,2\n\x00\x00\n", "is neither text nor a format"),
        (PLAIN.encode("utf-16-le"), "looks like UTF-16 without a byte order mark; save it as UTF-8"),
        (b"\x1f\x8b\x08\x00", "is packed with gzip; unpack it first"),
        (b"\x89HDF\r\n\x1a\n" + bytes(100), "can't be opened as netCDF, it is cut short or damaged"),
        (b"CDF\x01" + bytes(3), "is cut short or damaged, its header ends early"),
        (b"PK\x03\x04" + bytes(100), "can't be opened as ZIP, it is cut short or damaged"),
        (b"PK\x05\x06" + bytes(18), "the ZIP file is empty"),
    ],
)
def test_what_is_no_cast_file(tmp_path, content, message):
    path = tmp_path / "x.csv"
    path.write_bytes(content)
    with pytest.raises(CastFileError, match=message) as caught:
        list(read_casts(path))
    assert str(caught.value).startswith(f"{path}: ")
    assert "\n" not in str(caught.value)


def test_missing_and_folder_are_told_at_once(tmp_path):
    with pytest.raises(CastFileError, match=r"nothing\.csv: no such file"):
        read_casts(tmp_path / "nothing.csv")
    with pytest.raises(CastFileError, match="is a folder; name a file in it"):
        read_casts(tmp_path)


def test_mapping_only_where_it_makes_sense(tmp_path):
    (tmp_path / "a.csv").write_text(PLAIN)
    with pytest.raises(InputError, match=r"--map heat=...: nothing is named 'heat'; use one of depth"):
        read_casts(tmp_path / "a.csv", mapping={"heat": "temp [degC]"})
    (tmp_path / "e.csv").write_text(EXCHANGE)
    with pytest.raises(InputError, match=r"e\.csv: --map is for plain CSV"):
        list(read_casts(tmp_path / "e.csv", mapping={"temperature": "CTDTMP"}))
    (cast,) = read_casts(tmp_path / "a.csv", mapping={"temperature": "temp [degC]"})
    assert cast.temperature.tolist() == [12.5, 11.0]


def test_a_nested_or_hopeless_zip(tmp_path):
    with zipfile.ZipFile(tmp_path / "inner.zip", "w") as archive:
        archive.writestr("a.csv", PLAIN)
    with zipfile.ZipFile(tmp_path / "outer.zip", "w") as archive:
        archive.write(tmp_path / "inner.zip", "inner.zip")
    with pytest.raises(
        CastFileError, match=r"none of its 1 members is a cast; .*a ZIP file inside a ZIP file is not read"
    ):
        list(read_casts(tmp_path / "outer.zip"))


def test_reading_csv_loads_nothing_heavy(tmp_path):
    (tmp_path / "a.csv").write_text(PLAIN)
    code = (
        "import sys, ocean_sound as s\n"
        f"list(s.read_casts({str(tmp_path / 'a.csv')!r}))\n"
        "print([m for m in 'xarray pandas scipy matplotlib netCDF4 h5py numba'.split() if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_nothing_is_left_of_an_array_but_what_was_read(tmp_path):
    (tmp_path / "a.csv").write_text(PLAIN)
    (block,) = read_blocks(tmp_path / "a.csv")
    np.testing.assert_array_equal(block.values["temperature"], [12.5, 11.0])
    assert not block.values["temperature"].flags.writeable


SEEDS = [PLAIN.encode(), EXCHANGE.encode(), b"Latitude: 34 S\nDate,13/08/2015\n\nDepth (m);Temp\n0;1,5\n2;1,25\n"]
INSERTS = st.sampled_from(
    [
        b'"',
        b",",
        b";",
        b"\t",
        b"\n",
        b"\x00",
        b"nan",
        b"1e999",
        b"-999",
        b"#",
        b"(",
        b"]",
        b"\xff",
        b"_",
        b"inf",
        b"depth",
        b" ",
    ]
)


@given(
    st.sampled_from(SEEDS),
    st.lists(st.tuples(st.integers(0, 120), st.integers(0, 5), INSERTS), max_size=6),
    st.integers(1, 200),
)
def test_whatever_is_done_to_a_file_it_is_read_or_refused_in_one_line(tmp_path_factory, seed, edits, kept):
    data = bytearray(seed[:kept])
    for place, removed, added in edits:
        data[place : place + removed] = added
    path = tmp_path_factory.mktemp("edited") / "x"
    path.write_bytes(data)
    refused = ""
    try:
        (cast,) = read_casts(path)
    except CastFileError as error:
        refused = str(error)
    if refused:
        assert refused.startswith(f"{path}: ")
        assert "\n" not in refused
    else:
        assert len(cast) >= 1
