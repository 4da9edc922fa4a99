"""Many files at once: the kernel's numbers against Python's correctly rounded float, and files against one by one."""

import math
import subprocess
import sys
from decimal import Decimal, localcontext
from fractions import Fraction

import numpy as np
import pytest
import xarray as xr
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts import CastBlock, read_blocks, read_many
from ocean_sound.casts import _kernels as kernels
from ocean_sound.casts.many import _joined, _Reader
from ocean_sound.errors import CastFileError, InputError

pytestmark = pytest.mark.kernels


def number(text, point="."):
    data = np.frombuffer(text.encode(), np.uint8)
    return kernels.number(data, 0, data.size, ord(point))


def parse(text, kinds, delimiter=",", point=".", label_kinds=()):
    """The kernel on a text: status, numbers, odd cells, first levels of casts, their labels."""
    data = np.frombuffer(text.encode("latin-1"), np.uint8)
    width = max([*kinds, -1]) + 1
    numbers = np.full((width, 64), -7.0)
    odd, groups = np.zeros((16, 4), np.int64), np.zeros(8, np.int64)
    cells = np.zeros((8, len(label_kinds), 2), np.int64)
    status, end, odds, casts = kernels.parse_rows(
        data,
        0,
        ord(delimiter),
        ord(point),
        np.array(kinds, np.int64),
        np.array(label_kinds, np.int64),
        numbers,
        0,
        odd,
        groups,
        cells,
        np.zeros((len(label_kinds), 2), np.int64),
    )
    labels = [[text[a:b] for a, b in one] for one in cells[:casts].tolist()]
    return status, numbers[:, :end].tolist(), odd[:odds].tolist(), groups[:casts].tolist(), labels


# --- numbers -------------------------------------------------------------------------------------------------------

DECIMAL = st.from_regex(r"[-+]?[0-9]{1,17}(\.[0-9]{0,17})?([eE][-+]?[0-9]{1,2})?", fullmatch=True)


@given(DECIMAL)
def test_a_number_is_what_python_makes_of_it_or_is_left_to_python(text):
    """Python's float rounds correctly (David Gay); the sign of zero counts too."""
    found = number(text)
    assert math.isnan(found) or found.hex() == float(text).hex()


@given(st.floats(allow_nan=False, allow_infinity=False, min_value=-1e15, max_value=1e15).map(repr))
def test_the_shortest_form_of_any_float_comes_back(text):
    found = number(text)
    mantissa = text.lower().lstrip("-").split("e")[0]
    digits = mantissa.replace(".", "").lstrip("0")
    power = Decimal(text).as_tuple().exponent
    if len(digits) <= 18 and abs(power) <= 22:
        assert found.hex() == float(text).hex()
    else:
        assert math.isnan(found) or found.hex() == float(text).hex()


@given(st.integers(2**53 + 1, 10**18 - 1), st.integers(-22, 22))
def test_long_integers_are_scaled_to_the_nearest_float_or_not_at_all(whole, power):
    """Against exact rationals: no other float lies nearer."""
    found = kernels.scaled(whole, power)
    if not math.isnan(found):
        assert found == float(Fraction(whole) * Fraction(10) ** power)


@given(st.integers(2**52, 2**53 - 1), st.integers(0, 2))
def test_halves_between_two_floats_are_not_guessed(mantissa, power):
    """The middle between two neighbours, which only rounding to even decides; float() is right."""
    with localcontext() as context:
        context.prec = 60
        middle = (Decimal(mantissa) + Decimal("0.5")) * 4 * 10**power
        text = str(int(middle))
    found = number(text)
    assert math.isnan(found) or found == float(text)


@pytest.mark.parametrize(
    "text", ["", "-", ".", "-.", "1.2.3", "1-2", "--1", "1e", "1e+", "e5", "nan", "inf", "0x1", "1_0", "1 2", "1e1234"]
)
def test_what_is_no_number_is_left_to_python(text):
    assert math.isnan(number(text + " ")) if not text else math.isnan(number(text))


def test_edges_of_the_fast_way():
    for text in ["0", "-0", "-0.0", "000", "5.", ".5", "+5", "999999999999999999", "0." + "0" * 30, "1e22", "1e-22"]:
        assert number(text).hex() == float(text).hex()
    for text in ["1e23", "9" * 19, "1e-23", "0." + "0" * 30 + "1"]:
        assert math.isnan(number(text))


# --- rows ----------------------------------------------------------------------------------------------------------


def test_rows_of_numbers():
    fine = kernels.FINE
    assert parse("1,2\n3,4\n", [0, 1]) == (fine, [[1.0, 3.0], [2.0, 4.0]], [], [0], [[]])
    assert parse("1,2\r\n3,4", [0, 1])[1] == [[1.0, 3.0], [2.0, 4.0]]
    assert parse("1,x,2\n3,,4\n", [1, -1, 0])[1] == [[2.0, 4.0], [1.0, 3.0]]
    assert parse(" 1 , -2.5 \n\n# note\n3,4,,\n,\n", [0, 1])[1] == [[1.0, 3.0], [-2.5, 4.0]]
    assert parse("1;2,5\n3;,5\n", [0, 1], ";", ",")[1] == [[1.0, 3.0], [2.5, 0.5]]
    status, numbers, odd, _, _ = parse("1,nan\n1e3,\n", [0, 1])
    assert (status, odd, numbers[0]) == (fine, [[0, 1, 2, 5]], [1.0, 1000.0])
    assert np.isnan(numbers[1]).all()


def test_labels_part_the_casts():
    text = "A,1\nA,2\nB ,3\nA,4\n"
    status, _, _, groups, labels = parse(text, [-2, 0], label_kinds=[kernels.GROUPS])
    assert (status, groups, labels) == (kernels.FINE, [0, 2, 3], [["A"], ["B"], ["A"]])
    assert parse(text, [-2, 0], label_kinds=[kernels.FIRST])[3:] == ([0], [["A"]])
    assert parse(text, [-2, 0], label_kinds=[kernels.CONSTANT])[0] == kernels.NOT_PLAIN
    both = "A,5,1\nA,5,2\nB,6,3\n"
    assert parse(both, [-2, -3, 0], label_kinds=[1, 2])[3:] == ([0, 2], [["A", "5"], ["B", "6"]])


CELL = (
    st.sampled_from(["1", "-2.5", " 3.25", "--4", "- 5", "6 ", "7.", ".5", ".", "-", "", "1e3", "+8", "1.2.3", "x"])
    | DECIMAL
)
END = st.sampled_from(["\n", "\r\n"])


@given(st.lists(st.tuples(st.lists(CELL, min_size=1, max_size=3), END), max_size=30), st.sampled_from(".,"))
def test_rows_of_short_numbers_are_read_as_all_others(rows, point):
    """A column of text in front turns the short way off, which must change nothing."""
    lines = [";".join(cells).replace(".", point) + end for cells, end in rows]
    short = parse("".join(lines), [0, 1], ";", point)
    long = parse("".join(f"A;{line}" for line in lines), [-2, 0, 1], ";", point, label_kinds=[kernels.FIRST])
    if "" in {line.strip("\r\n;") for line in lines}:
        return  # with a label it would no longer be an empty line
    assert short[0] == long[0]
    assert np.array_equal(short[1], long[1], equal_nan=True)
    assert [odd[:2] for odd in short[2]] == [odd[:2] for odd in long[2]]


def test_short_rows_between_others():
    rows = [f"{number},{number / 8}\n" for number in range(40)]
    for place in (3, 4, 17, 39):
        rows[place] = f"# a comment\n+{place},{place / 8}e0\n"
    status, numbers, odd, groups, _ = parse("".join(rows), [0, 1])
    assert (status, odd, groups) == (kernels.FINE, [], [0])
    assert numbers == [[float(number) for number in range(40)], [number / 8 for number in range(40)]]


@pytest.mark.parametrize(
    "text", ["1\n", "1,2,3\n", "1,2\r3,4\n", "1,2\n\x00,1\n", "1,\t2\n", "# a\x00\n1,2\n", "1,2\n3\n4,5\n"]
)
def test_what_is_not_plain_is_said(text):
    assert parse(text, [0, 1])[0] == kernels.NOT_PLAIN


def test_outputs_that_are_too_small_are_said():
    assert parse("1\n" * 65, [0])[0] == kernels.TOO_MANY
    assert parse("x\n" * 17, [0])[0] == kernels.NOT_PLAIN
    assert parse("".join(f"{i},1\n" for i in range(9)), [-2, 0], label_kinds=[kernels.GROUPS])[0] == kernels.NOT_PLAIN


# --- files ---------------------------------------------------------------------------------------------------------

HEADS = "depth [m],temperature [degC],salinity [PSS-78]\n"
LEVELS = "0,12.5,35.0\n10,11.25,35.1\n20,9.125,35.2\n"
FLAGGED = "depth [m],temperature [degC],temperature_flag\n0,12.5,1\n1,9,4\n2,8,\n"
FILES = {
    "plain": HEADS + LEVELS,
    "again": HEADS + LEVELS.replace("12.5", "13.5"),
    "no end": (HEADS + LEVELS).rstrip("\n"),
    "crlf": (HEADS + LEVELS).replace("\n", "\r\n"),
    "cr": (HEADS + LEVELS).replace("\n", "\r"),
    "gaps": HEADS + LEVELS.replace("11.25", "").replace("35.1", "-999"),
    "words": HEADS + LEVELS.replace("11.25", "NaN").replace("35.2", "n/a"),
    "first missing": HEADS + LEVELS.replace("12.5", ""),
    "comments": HEADS + "# calibrated\n" + LEVELS + "\n% end\n,,\n",
    "long": HEADS + "0.10000000000000001,12.499999999999998,35.000000000000007\n",
    "powers": HEADS + "1e1,1.25E1,3.5e+1\n2D1,1,3\n",
    "minus": HEADS + LEVELS.replace("9.125", "−1.5"),
    "quotes": HEADS + LEVELS.replace("12.5", '"12.5"'),
    "semicolon": (HEADS + LEVELS).replace(",", ";"),
    "comma": (HEADS + LEVELS).replace(",", ";").replace(".", ","),
    "mixed": "depth [m];temperature [degC]\n0,5;1.5\n1,5;2.5\n",
    "blanks": HEADS + LEVELS.replace(",", " , "),
    "spaces": (HEADS + LEVELS).replace(",", "  "),
    "tabs": (HEADS + LEVELS).replace(",", "\t"),
    "latin": (HEADS + LEVELS).replace("degC", "°C").encode("latin-1"),
    "utf-8": (HEADS + LEVELS).replace("degC", "°C"),
    "bom": "\ufeff" + HEADS + LEVELS,
    "utf-16": (HEADS + LEVELS).encode("utf-16"),
    "units row": "depth,temp,sal\nm,degC,PSU\n" + LEVELS,
    "units row 1": "depth [m],temp [degC],sal\n0,10,1\n1,10,1\n",
    "feet": HEADS.replace("[m]", "[ft]") + LEVELS,
    "preamble A": "cast_id: A\nlatitude: 54.5\nlongitude: 352\ntime: 2026-01-31T12:00Z\nship: none\n" + HEADS + LEVELS,
    "preamble B": "cast_id: B\nlatitude: 55 30.5 N\nlongitude: 8 W\ntime: 31 Jan 2026 6:00\n" + HEADS + LEVELS,
    "preamble C": "cast_id: C\nlatitude: -3\nlongitude: 8 E\ntime: 20260131\nship: depth, temp\n" + HEADS + LEVELS,
    "preamble D": "cast_id: D\nlatitude: 91\nlongitude: 8 E\ntime: 20260131\nship: none\n" + HEADS + LEVELS,
    "preamble E": "cast_id: depth temp sal\nlatitude: 1\nlongitude: 8\ntime:\nship: \n" + HEADS + LEVELS,
    "many rows": "cast_id: F\nlatitude: 1\nlongitude: 8\ntime: 20260131\nship: x\n" + HEADS + LEVELS * 20,
    "many rows, units": "cast_id: F\nlatitude: 1\n\n\nship: x\ndepth,temp,sal\nm,degC,PSU\n" + LEVELS * 20,
    "long preamble": "".join(f"key {number}: value {number}\n" for number in range(400)) + HEADS + LEVELS * 20,
    "gap below heads": HEADS + "# nothing\n" * 19 + LEVELS * 200,
    "gap of words": HEADS + "none,none,none\n" * 19 + LEVELS * 200,
    "latin rows": (HEADS + LEVELS + "# 5 °C\n").encode("latin-1"),
    "cr above": "ship: x\rlatitude: 5\ndepth [m],temp [degC]\n0,1\n1,2\n2,3\n",
    "heads of utf-8": "ship: x\ndepth [m],temp [°C]\n" + "0,1\n1,2\n",
    "heads of both": "ship: \u00b0\n".encode("latin-1") + "depth [m],temp [°C]\n0,1\n1,2\n".encode(),
    "units told": "depth units: ft\ndepth,temp [degC]\n0,1\n1,2\n",
    "other units told": "depth units: m\ndepth,temp [degC]\n0,1\n1,2\n",
    "names of values above": "pressure sensor: 7\nlatitude: 5\n" + HEADS + LEVELS,
    "columns": "cast,lat,lon,time,depth,temp\nA,54,-8,2026-01-31T12:00Z,0,1\nA,54,-8,2026-01-31T12:01Z,1,2\n"
    "B,55,-9,2026-02-01,0,3\n",
    "not together": "cast,depth,temp\nA,0,1\nB,0,2\nA,1,3\n",
    "no ids": "cast,depth,temp\nA,0,1\n,1,2\nB,0,3\n",
    "drifts": "lat,depth,temp\n54.5,0,1\n54.501,1,2\n",
    "seconds": "time,depth,temp\n0.5,0,1\n1.5,1,2\n",
    "flags": FLAGGED,
    "flags of text": FLAGGED.replace(",\n", ",nan\n"),
    "wrong flags": FLAGGED.replace(",4", ",7"),
    "air": HEADS.replace("depth [m]", "pressure [dbar]") + "-1,12.5,0\n" + LEVELS,
    "speed": "depth [m],sound speed [m/s]\n0,1500.5\n10,1499.25\n",
    "empty cast": "cast,depth,temp\nA,0,1\nB,0,\nC,0,5\n",
    "upwards": "depth,temp\n-1,5\n-2,4\n",
    "bad cell": HEADS + LEVELS.replace("11.25", "cold"),
    "bad row": HEADS + LEVELS + "1,2\n",
    "bad date": "date: 03/04/2026\n" + HEADS + LEVELS,
    "no heads": LEVELS,
    "heads only": HEADS,
    "nothing": "",
    "binary": bytes(range(256)),
    "nothing usable": HEADS + ",,35\n1,,\n",
    "infinite": HEADS + LEVELS + "30,1e999,35\n40,inf,35\n",
    "huge": HEADS + LEVELS + "30,1e308,35\n",
    "exchange": "CTD,20260131INV\nNUMBER_HEADERS = 2\nSTNNBR = 7\nCTDPRS,CTDTMP\nDBAR,ITS-90\n1,10\nEND_DATA\n",
}


def one_by_one(paths, **options):
    """The casts and what was left out, from the reader of single files."""
    casts, left_out = [], []
    for path in paths:
        try:
            for block in read_blocks(path, **options):
                casts += block
                left_out += block.left_out
        except (CastFileError, InputError) as error:
            left_out.append((str(path), str(error).removeprefix(f"{path}: ")))
    return casts, left_out


def assert_same(blocks, casts, left_out):
    found = [cast for block in blocks for cast in block]
    assert [out for block in blocks for out in block.left_out] == left_out
    assert [cast.id for cast in found] == [cast.id for cast in casts]
    if not casts:
        return
    ours, theirs = CastBlock.from_casts(found), CastBlock.from_casts(casts)
    assert list(ours.values) == list(theirs.values)
    for name, column in theirs.values.items():
        assert ours.values[name].tobytes() == column.tobytes(), name
        flags = theirs.flags.get(name, np.where(np.isnan(column), 9, 2).astype(np.int8))
        np.testing.assert_array_equal(
            ours.flags.get(name, np.where(np.isnan(column), 9, 2).astype(np.int8)), flags, err_msg=name
        )
    for name in ("row_size", "latitude", "longitude", "time"):
        np.testing.assert_array_equal(getattr(ours, name), getattr(theirs, name))
    for name in ("source", "attributes", "notes"):
        assert list(map(str, getattr(ours, name))) == list(map(str, getattr(theirs, name)))


def write(folder, contents):
    paths = []
    for number, content in enumerate(contents):
        path = folder / f"{number:03d}.csv"
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        paths.append(path)
    return paths


def test_each_kind_of_file_alone_is_read_as_by_itself(tmp_path):
    for path, name in zip(write(tmp_path, FILES.values()), FILES, strict=True):
        blocks = list(read_many([path]))
        assert_same(blocks, *one_by_one([path]))
        assert len(blocks) == 1, name


@given(st.lists(st.sampled_from(sorted(FILES)), min_size=1, max_size=12), st.integers(1, 5))
def test_any_mixture_of_files_is_read_as_one_by_one(tmp_path_factory, names, size):
    paths = write(tmp_path_factory.mktemp("mixed"), [FILES[name] for name in names])
    assert_same(list(read_many(paths, casts_per_block=size)), *one_by_one(paths))


@pytest.mark.parametrize(
    "names",
    [
        ["latin rows", "plain"],
        ["heads of utf-8", "heads of both", "heads of utf-8"],
        ["units told", "other units told", "units told"],
        ["preamble A", "plain", "preamble C", "preamble D", "preamble E", "many rows", "names of values above"],
        ["cr above", "cr above"],
    ],
)
def test_what_was_learnt_of_one_file_is_not_said_of_another(tmp_path, names):
    paths = write(tmp_path, [FILES[name] for name in names])
    assert_same(list(read_many(paths)), *one_by_one(paths))


EDITS = st.lists(
    st.tuples(
        st.integers(0, 90),
        st.integers(0, 4),
        st.sampled_from(
            ["", ",", ";", "\n", "\r\n", ".", "-", "+", "e", " ", "\t", "nan", "-999", "#", "1", "_", '"', "\x00", "°"]
        ),
    ),
    max_size=5,
)


@given(st.lists(EDITS, min_size=1, max_size=6), st.sampled_from(["plain", "comma", "columns", "flags", "crlf"]))
def test_edited_files_are_read_as_one_by_one(tmp_path_factory, edits, name):
    contents = []
    for edit in edits:
        text = FILES[name]
        for place, removed, added in edit:
            text = text[:place] + added + text[place + removed :]
        contents.append(text)
    paths = write(tmp_path_factory.mktemp("edited"), contents)
    assert_same(list(read_many(paths)), *one_by_one(paths))


def test_settings_and_sidecars_hold_here_too(tmp_path):
    paths = write(tmp_path, [FILES["plain"], FILES["plain"], FILES["comma"], FILES["columns"]])
    (tmp_path / "001.csv.toml").write_text('temperature_scale = "IPTS-68"\n')
    assert_same(list(read_many(paths)), *one_by_one(paths))
    options = {"settings": {"latitude": 54.5, "missing": [11.25], "id": "X"}}
    blocks = list(read_many(paths, **options))
    assert_same(blocks, *one_by_one(paths, **options))
    assert blocks[0].latitude.tolist() == [54.5] * 4
    mapped = {"mapping": {"temperature": "salinity [PSS-78] [degC]"}}
    assert_same(list(read_many(paths[:2], **mapped)), *one_by_one(paths[:2], **mapped))


def test_the_fast_way_is_taken(tmp_path, monkeypatch):
    """Files that differ only in their numbers, positions and names never go the slow way."""
    names = ["plain", "again", "no end", "crlf", "gaps", "words", "comments", "long", "semicolon", "comma", "utf-8"]
    names += [
        "bom",
        "units row",
        "feet",
        "preamble A",
        "preamble B",
        "many rows",
        "columns",
        "seconds",
        "flags",
        "air",
        "latin",
    ]
    paths = write(tmp_path, [FILES[name] for name in names])
    alone = []
    monkeypatch.setattr(_Reader, "read_alone", lambda _reader, path, _settings: alone.append(path))
    list(read_many(map(str, paths)))
    assert [names[paths.index(type(paths[0])(path))] for path in alone] == []


def test_blocks_come_in_the_asked_size_and_own_their_columns(tmp_path):
    paths = write(tmp_path, [HEADS + f"{number},1,35\n" for number in range(7)])
    blocks = list(read_many(paths, casts_per_block=3))
    assert [len(block) for block in blocks] == [3, 3, 1]
    assert np.concatenate([block.values["depth"] for block in blocks]).tolist() == list(range(7))
    with pytest.raises(InputError, match="casts_per_block is 0; it must be at least 1"):
        read_many(paths, casts_per_block=0)
    with pytest.raises(InputError, match="nothing is named 'heat'"):
        read_many(paths, mapping={"heat": "x"})


def test_no_file_at_all_and_only_bad_ones(tmp_path):
    assert list(read_many([])) == []
    (block,) = read_many([tmp_path / "none.csv", tmp_path])
    assert len(block) == 0
    assert [why for _, why in block.left_out] == ["no such file; check the name", "is a folder; name a file in it"]
    assert len(_joined([])) == 0


@given(st.lists(st.floats(-1e6, 1e6), min_size=1, max_size=30))
def test_every_float_written_is_read_bit_for_bit(tmp_path_factory, values):
    rows = "".join(f"{index},{value!r}\n" for index, value in enumerate(values))
    (path,) = write(tmp_path_factory.mktemp("floats"), ["depth [m],sound speed [m/s]\n" + rows])
    (block,) = read_many([path])
    fills = np.isnan(block.values["sound_speed"])
    np.testing.assert_array_equal(block.values["sound_speed"][~fills], np.array(values)[~fills])


def test_reading_one_file_does_not_load_the_compiler(tmp_path):
    (tmp_path / "a.csv").write_text(FILES["plain"])
    code = (
        "import sys, ocean_sound.casts as c\n"
        f"list(c.read_casts({str(tmp_path / 'a.csv')!r}))\n"
        "print([m for m in 'numba pydantic pandas scipy xarray'.split() if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


# --- netCDF --------------------------------------------------------------------------------------------------------


def write_netcdf(path, draw, number):
    """A CF file of one cast or two: with gaps, flags, uncertainties, other units, or nothing usable, by its number."""
    size = int(draw.integers(2, 9))
    shape = ("cast", "z") if number % 7 == 6 else ("z",)
    sizes = (2, size) if len(shape) == 2 else (size,)
    values = {
        "pressure": np.broadcast_to(np.arange(size, dtype=float) - (0.6 if number % 5 == 4 else 0.0), sizes),
        "temperature": draw.uniform(1.0, 20.0, sizes),
        "salinity": draw.uniform(30.0, 36.0, sizes),
    }
    if number % 3 == 1:
        values["temperature"][..., 0] = np.nan
    if number % 8 == 3:
        values["temperature"][:], values["salinity"][:] = np.nan, np.nan
    about = {
        "pressure": {"standard_name": "sea_water_pressure_due_to_sea_water", "units": "dbar"},
        "temperature": {"standard_name": "sea_water_temperature", "units": "degree_Celsius"},
        "salinity": {"standard_name": "sea_water_practical_salinity", "units": "1"},
    }
    if number % 6 == 5:
        values["temperature"], about["temperature"]["units"] = values["temperature"] + 273.15, "K"
    variables = {name: (shape, column, about[name]) for name, column in values.items()}
    if number % 4 == 2:
        meanings = {"flag_values": np.int8([1, 4]), "flag_meanings": "good bad", "standard_name": "status_flag"}
        variables["temperature"][2]["ancillary_variables"] = "doubt"
        variables["doubt"] = (shape, draw.choice(np.int8([1, 4]), sizes), meanings)
    if number % 9 == 7:
        variables["temperature_uncertainty"] = (shape, np.full(sizes, 0.01), {"units": about["temperature"]["units"]})
    where = {"latitude": draw.uniform(-80, 80), "longitude": draw.uniform(-180, 180), "time": 86400.0 * number}
    units = {"latitude": "degrees_north", "longitude": "degrees_east", "time": "seconds since 2020-01-01"}
    for name, value in where.items():
        variables[name] = (shape[:-1], np.full(sizes[:-1], value), {"standard_name": name, "units": units[name]})
    xr.Dataset(variables, attrs={"Conventions": "CF-1.11", "featureType": "profile"}).to_netcdf(path)


def test_netcdf_files_are_read_together_as_one_by_one(tmp_path):
    draw = np.random.default_rng(11)
    paths = []
    for number in range(40):
        paths.append(tmp_path / f"{number:02d}.nc")
        if number % 10 == 9:
            paths[-1].write_text("depth [m],temperature [degC]\n0,9.5\n10,8.25\n")
        else:
            write_netcdf(paths[-1], draw, number)
    (tmp_path / "99.nc").write_bytes(b"\x89HDF\r\n\x1a\n and no more")
    paths.append(tmp_path / "99.nc")
    casts, left_out = one_by_one(paths)
    assert len(casts) > 30
    assert len(left_out) > 4
    assert_same(list(read_many(paths)), casts, left_out)
    assert_same(list(read_many(paths, casts_per_block=7)), casts, left_out)
