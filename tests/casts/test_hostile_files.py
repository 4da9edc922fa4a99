"""Broken and hostile netCDF, HDF5, ZIP and Exchange files, read in a few processes of their own.

Each must end in one clear line or in casts whose good values are numbers: no traceback, no crash, no hang, and never
more than a gigabyte of memory, which the process may not have.
"""

import io
import json
import subprocess
import sys
import warnings
import zipfile
from collections import Counter

import netCDF4
import numpy as np
import pytest

from ocean_sound.casts import Cast
from ocean_sound.files import write_dataset

READER = """
import json, resource, sys, time, traceback, warnings
resource.setrlimit(resource.RLIMIT_AS, (2**30, 2**30))
warnings.simplefilter("error")
import numpy as np
from ocean_sound.casts import read_blocks
from ocean_sound.errors import OceanSoundError
for path in sys.argv[1:]:
    print(json.dumps({"begins": path}), flush=True)
    start, said = time.monotonic(), {}
    try:
        blocks = list(read_blocks(path))
        said["casts"] = sum(map(len, blocks))
        for cast in (cast for block in blocks for cast in block):
            for name in cast.values:
                assert np.isfinite(cast.values[name][cast.good(name)]).all()
    except OceanSoundError as error:
        said["error"] = str(error)
    except BaseException:
        said["traceback"] = traceback.format_exc()
    said["seconds"] = time.monotonic() - start
    said["memory"] = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    print(json.dumps(said), flush=True)
"""

CAST = Cast(
    id="n",
    values={"pressure": np.arange(50.0), "temperature": np.linspace(20, 5, 50), "salinity": np.full(50, 35.0)},
    flags={"temperature": np.ones(50, np.int8)},
    time="2026-01-31T12:00",
    latitude=10.0,
    longitude=20.0,
    notes=("invented",),
)
EXCHANGE = """CTD,20260131INV
NUMBER_HEADERS = 6
EXPOCODE = INV2026
STNNBR = 7
DATE = 20260131
TIME = 0930
LATITUDE = -34.5
CTDPRS,CTDPRS_FLAG_W,CTDTMP,CTDTMP_FLAG_W,CTDSAL,CTDSAL_FLAG_W
DBAR,,ITS-90,,PSS-78,
1.0,2,10.0,2,35.0,2
2.0,2,9.0,3,35.0,2
3.0,2,8.0,4,35.0,9
END_DATA
"""
BOTTLE = """BOTTLE,20260131INV
EXPOCODE,STNNBR,CASTNO,DATE,TIME,LATITUDE,LONGITUDE,CTDPRS,CTDTMP,CTDSAL,CTDSAL_FLAG_W
,,,,,,,DBAR,ITS-90,PSS-78,
INV,1,1,20260131,0015,10,200,100.0,10.0,35.1,2
INV,1,1,20260131,0015,10,200,5.0,20.0,35.0,2
END_DATA
"""


# --- whole files, then damaged ---------------------------------------------------------------------------------------


def whole_files(folder):
    """By name, the bytes of sound files in each of the formats."""
    write_dataset(CAST.to_dataset(), folder / "whole")
    found = {"hdf5": (folder / "whole").read_bytes()}
    for name, kind in (("ragged4", "NETCDF4"), ("ragged3", "NETCDF3_CLASSIC"), ("ragged5", "NETCDF3_64BIT_DATA")):
        with netCDF4.Dataset(folder / "whole", "w", format=kind) as dataset:
            ragged(dataset)
        found[name] = (folder / "whole").read_bytes()
    (folder / "whole").unlink()
    return found


def damaged(folder):
    """Cut short at many places, and with bytes overwritten at many others."""
    draw = np.random.default_rng(20260131)
    for name, data in whole_files(folder).items():
        for part in (0.02, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 0.99):
            yield f"{name} cut at {part}", data[: int(part * len(data))]
        for count, junk in ((14, b"\xff" * 8), (6, bytes(16)), (6, b"\x7f\xff\xff\xfe")):
            for place in draw.integers(8, min(len(data), 6000) - 16, count):
                yield f"{name} with {junk[:1].hex()} at {place}", data[:place] + junk + data[place + len(junk) :]


# --- files that say strange things -----------------------------------------------------------------------------------


def put(dataset, name, dimensions, values, kind="f8", fill=None, **about):
    variable = dataset.createVariable(name, kind, dimensions, fill_value=fill)
    variable.set_auto_maskandscale(False)
    variable.setncatts(about)
    variable[...] = values
    return variable


def single(dataset, levels=3, **about):
    dataset.createDimension("z", levels)
    put(dataset, "depth", ("z",), np.arange(levels), standard_name="depth", units="m")
    about = {"standard_name": "sea_water_temperature", "units": "degC", **about}
    return put(dataset, "temp", ("z",), np.arange(levels) + 5.0, **about)


def ragged(dataset, counts=(2, 1, 3), kind="i4", **about):
    dataset.createDimension("obs", 6)
    dataset.createDimension("profile", len(counts))
    put(dataset, "n", ("profile",), counts, kind, **{"sample_dimension": "obs", **about})
    put(dataset, "depth", ("obs",), np.arange(6), standard_name="depth", units="m")
    put(dataset, "temp", ("obs",), np.arange(6), standard_name="sea_water_temperature", units="degC")


GOOD_BAD = {"flag_values": np.array([1, 4], "i1"), "flag_meanings": "good bad"}


def flagged(dataset, codes, kind="i1", **about):
    temp = single(dataset)
    temp.ancillary_variables = "qc nothing temp"
    put(dataset, "qc", ("z",), codes, kind, **about)


def timed(dataset, value, kind="f8", **about):
    single(dataset)
    put(dataset, "time", (), value, kind, **about)


def sparse(dataset, size, **about):
    """Values that were never written: the file is small, the promise is not."""
    dataset.createDimension("z", size)
    for name, standard in (("depth", "depth"), ("temp", "sea_water_temperature")):
        dataset.createVariable(name, "f8", ("z",), chunksizes=(2**16,), **about).standard_name = standard


def bomb(dataset):
    """As many values as will just be read, in half a megabyte."""
    dataset.createDimension("z", 2**24)
    for name, standard in (("depth", "depth"), ("temp", "sea_water_temperature")):
        variable = dataset.createVariable(name, "f4", ("z",), chunksizes=(2**20,), zlib=True)
        variable.standard_name = standard
        variable[:] = np.zeros(2**24, "f4")


def strings(dataset):
    dataset.createDimension("z", 2)
    put(dataset, "depth", ("z",), [1, 2], standard_name="depth")
    dataset.createVariable("temp", str, ("z",))[:] = np.array(["12", "warm"], object)
    dataset["temp"].standard_name = "sea_water_temperature"


def own_types(dataset):
    single(dataset)
    pair = dataset.createCompoundType(np.dtype([("a", "f4"), ("b", "f4")]), "pair")
    dataset.createVariable("salinity", pair, ("z",)).standard_name = "sea_water_salinity"
    many = dataset.createVLType("f8", "many")
    dataset.createVariable("pressure", many, ("z",)).standard_name = "sea_water_pressure"
    colours = dataset.createEnumType("i1", "colours", {"red": 0, "blue": 1})
    dataset.createVariable("conductivity", colours, ("z",)).standard_name = "sea_water_electrical_conductivity"


def in_a_group(dataset):
    single(dataset.createGroup("inside"))


def many_dimensions(dataset):
    for name in "abcdef":
        dataset.createDimension(name, 2)
    put(dataset, "depth", ("f",), [1, 2], standard_name="depth")
    put(dataset, "temp", tuple("abcdef"), np.zeros([2] * 6), standard_name="sea_water_temperature")


def same_dimension_twice(dataset):
    dataset.createDimension("z", 2)
    put(dataset, "depth", ("z",), [1, 2], standard_name="depth")
    put(dataset, "temp", ("z", "z"), np.zeros((2, 2)), standard_name="sea_water_temperature")


def nothing_fits(dataset):
    dataset.createDimension("a", 2)
    dataset.createDimension("b", 3)
    put(dataset, "depth", ("a",), [1, 2], standard_name="depth")
    put(dataset, "temp", ("b",), [1, 2, 3], standard_name="sea_water_temperature")


def argo(dataset, shape=("N_PROF", "N_LEVELS"), mode="R", kind="f4", **sizes):
    for name, size in {"N_PROF": 2, "N_LEVELS": 3, "N_PARAM": 2, "STRING16": 16, **sizes}.items():
        dataset.createDimension(name, size)
    put(dataset, "DATA_MODE", ("N_PROF",), np.array([mode] * len(dataset.dimensions["N_PROF"]), "S1"), "S1")
    for name in ("PRES", "TEMP"):
        full = [len(dataset.dimensions[dimension]) for dimension in shape]
        put(dataset, name, shape, np.ones(full) if kind != "S1" else np.full(full, b"x"), kind)


def argo_parts(dataset, name, dimensions, values, kind):
    argo(dataset)
    put(dataset, name, dimensions, values, kind)


def set_all(dataset, **about):
    single(dataset)
    for variable in dataset.variables.values():
        variable.setncatts(about)


TEMPERATURE = {"standard_name": "sea_water_temperature"}
FILLED = {**TEMPERATURE, "units": "degC"}
STRANGE = {
    "nothing": lambda d: d.setncatts({}),
    "only a dimension": lambda d: d.createDimension("z", 3),
    "no level": lambda d: single(d, 0),
    "one level": lambda d: single(d, 1),
    "unlimited and empty": lambda d: (d.createDimension("z", None), put(d, "temp", ("z",), [], **TEMPERATURE)),
    "no depth": lambda d: (d.createDimension("z", 3), put(d, "temp", ("z",), 1, **TEMPERATURE)),
    "no temperature": lambda d: (d.createDimension("z", 3), put(d, "depth", ("z",), 1, standard_name="depth")),
    "scalars only": lambda d: (put(d, "depth", (), 1, standard_name="depth"), put(d, "temp", (), 1, **TEMPERATURE)),
    "nan only": lambda d: single(d).__setitem__(slice(None), np.nan),
    "infinite": lambda d: single(d).__setitem__(slice(None), np.inf),
    "1e308": lambda d: single(d).__setitem__(slice(None), 1e308),
    "hot": lambda d: single(d).__setitem__(slice(None), 1e29),
    "a grid": lambda d: [
        *(d.createDimension(name, 3) for name in ("z", "lat", "lon")),
        *(put(d, name, (name,), [1, 2, 3], standard_name=standard)
          for name, standard in (("z", "depth"), ("lat", "latitude"), ("lon", "longitude"))),
        put(d, "temp", ("z", "lat", "lon"), 1, **TEMPERATURE),
    ],
    "nothing fits": nothing_fits,
    "same dimension twice": same_dimension_twice,
    "six dimensions": many_dimensions,
    "strings for numbers": strings,
    "types of its own": own_types,
    "in a group": in_a_group,
    "a thousand million levels": lambda d: sparse(d, 10**9),
    "2**40 levels": lambda d: sparse(d, 2**40),
    "packed bomb": bomb,
    "scale 1e308": lambda d: single(d, scale_factor=1e308, add_offset=1e308),
    "scale 0": lambda d: single(d, scale_factor=0.0),
    "scale nan": lambda d: single(d, scale_factor=np.nan),
    "scale of text": lambda d: single(d, scale_factor="two"),
    "scale of three": lambda d: single(d, scale_factor=np.array([1.0, 2.0, 3.0])),
    "offset infinite": lambda d: single(d, add_offset=np.inf),
    "fill of text": lambda d: single(d, missing_value="none at all"),
    "fill of many": lambda d: single(d, missing_value=np.arange(5.0)),
    "fill huge": lambda d: single(d, missing_value=1e300),
    "valid range of text": lambda d: single(d, valid_range="0 to 30"),
    "valid range turned": lambda d: single(d, valid_min=30.0, valid_max=-2.0),
    "valid range of one": lambda d: single(d, valid_range=np.array([1.0])),
    "units a number": lambda d: single(d, units=5),
    "units unknown": lambda d: single(d, units="cubits"),
    "units long": lambda d: single(d, units="m" * 20000),
    "units a trap": lambda d: single(d, units="1e999 degC"),
    "units with line ends": lambda d: single(d, units="deg\nC\n"),
    "units of control": lambda d: single(d, units="\x01\x02C"),
    "standard name a number": lambda d: single(d, standard_name=7),
    "ancillary a number": lambda d: single(d, ancillary_variables=7),
    "attributes everywhere": lambda d: set_all(d, units="", positive="sideways", cf_role="profile_id"),
    "positive up, depth down": lambda d: set_all(d, positive="up"),
    "samples nowhere": lambda d: ragged(d, sample_dimension="nowhere"),
    "samples of itself": lambda d: ragged(d, sample_dimension="profile"),
    "instance nowhere": lambda d: (single(d), put(d, "of", ("z",), 0, "i4", instance_dimension="no")),
    "index negative": lambda d: (single(d), put(d, "of", ("z",), -5, "i4", instance_dimension="z")),
    "index beyond": lambda d: (single(d), put(d, "of", ("z",), [0, 1, 2**31 - 1], "i4", instance_dimension="z")),
    "index of halves": lambda d: (single(d), put(d, "of", ("z",), [0, 0.5, np.nan], instance_dimension="z")),
    "counts negative": lambda d: ragged(d, (-1, 2, 3)),
    "counts too many": lambda d: ragged(d, (2, 2, 2**31 - 1)),
    "counts too few": lambda d: ragged(d, (1, 0, 0)),
    "counts none": lambda d: ragged(d, (0, 0, 0)),
    "counts halves": lambda d: ragged(d, (1.5, 2.5, 2.0), "f8"),
    "counts nan": lambda d: ragged(d, (np.nan, 3, 3), "f8"),
    "counts 1e300": lambda d: ragged(d, (1e300, 3, 3), "f8"),
    "counts of text": lambda d: ragged(d, np.array(list("123"), "S1"), "S1"),
    "flags out of range": lambda d: flagged(d, [100, -100, 77], **GOOD_BAD),
    "flags without meaning": lambda d: flagged(d, [1, 2, 3], flag_values=np.array([1, 4], "i1")),
    "meanings without flags": lambda d: flagged(d, [1, 2, 3], flag_meanings="good bad"),
    "meanings too many": lambda d: flagged(d, [1, 2, 3], flag_values=np.array([1], "i1"), flag_meanings="good bad"),
    "meanings strange": lambda d: flagged(d, [1, 1, 1], flag_values=np.array([1], "i1"), flag_meanings="purple"),
    "meanings a number": lambda d: flagged(d, [1, 1, 1], flag_values=np.array([1], "i1"), flag_meanings=3),
    "flag values of text": lambda d: flagged(d, [1, 1, 1], flag_values="one two", flag_meanings="good bad"),
    "flags of nan": lambda d: flagged(d, [np.nan, 1, 4], "f8", **GOOD_BAD),
    "masks negative": lambda d: flagged(d, -1, flag_masks=np.array([-128, 1], "i1"), flag_meanings="a_fail b_fail"),
    "masks of halves": lambda d: flagged(d, [1, 0, 1], flag_masks=np.array([0.5, 1]), flag_meanings="a_fail b_fail"),
    "flags of letters": lambda d: flagged(d, np.array(list("GB?"), "S1"), "S1", **{**GOOD_BAD, "flag_values": "G, B"}),
    "time 1e300": lambda d: timed(d, 1e300, standard_name="time", units="days since 1950-01-01"),
    "time before all": lambda d: timed(d, -1e7, standard_name="time", units="days since 1950-01-01"),
    "time since nothing": lambda d: timed(d, 1, standard_name="time", units="days since"),
    "time since the year 0": lambda d: timed(d, 1, standard_name="time", units="days since 0000-00-00"),
    "time in julian": lambda d: timed(d, 2e6, standard_name="time", units="days since -4712-01-01", calendar="julian"),
    "time of all leap": lambda d: timed(d, 1, standard_name="time", units="days since 2000-01-01", calendar="all_leap"),
    "time units a number": lambda d: timed(d, 1, standard_name="time", units=4),
    "time of text": lambda d: timed(d, b"x", "S1", standard_name="time", units="days since 2000-01-01"),
    "latitude 1e30": lambda d: (single(d), put(d, "lat", (), 1e29, standard_name="latitude")),
    "longitude 1e9": lambda d: (single(d), put(d, "lon", (), 1e9, standard_name="longitude")),
    "argo no profile": lambda d: argo(d, N_PROF=0),
    "argo no level": lambda d: argo(d, N_LEVELS=0),
    "argo turned": lambda d: argo(d, ("N_LEVELS", "N_PROF")),
    "argo flat": lambda d: argo(d, ("N_LEVELS",)),
    "argo of text": lambda d: argo(d, kind="S1"),
    "argo strange mode": lambda d: argo(d, mode="?"),
    "argo adjusted without": lambda d: argo(d, mode="D"),
    "argo long platform": lambda d: argo_parts(d, "PLATFORM_NUMBER", ("STRING16",), np.full(16, b"9"), "S1"),
    "argo number platform": lambda d: argo_parts(d, "PLATFORM_NUMBER", ("N_PROF",), 7, "i4"),
    "argo qc of halves": lambda d: argo_parts(d, "TEMP_QC", ("N_PROF", "N_LEVELS"), 1.5, "f4"),
    "argo qc flat": lambda d: argo_parts(d, "TEMP_QC", ("N_LEVELS",), b"1", "S1"),
    "argo cycle huge": lambda d: argo_parts(d, "CYCLE_NUMBER", ("N_PROF",), 1e20, "f8"),
    "argo juld flat": lambda d: argo_parts(d, "JULD", (), 1.0, "f8"),
    "argo position flat": lambda d: argo_parts(d, "LATITUDE", ("N_LEVELS",), 1.0, "f8"),
}  # fmt: skip


ONLY_HDF5 = {  # what the classic format can't say, or only in gigabytes
    *("a thousand million levels", "2**40 levels", "packed bomb", "strings for numbers", "types of its own"),
    *("in a group", "argo no level"),
}


def strange(folder):
    for name, build in STRANGE.items():
        for kind in ("NETCDF4", "NETCDF3_CLASSIC"):
            if kind != "NETCDF4" and name in ONLY_HDF5:
                continue
            path = folder / "strange"
            path.unlink(missing_ok=True)
            with warnings.catch_warnings(), netCDF4.Dataset(path, "w", format=kind) as dataset:
                warnings.simplefilter("ignore")
                build(dataset)
            yield f"{name} {kind}", path.read_bytes()


# --- Exchange and ZIP ------------------------------------------------------------------------------------------------

EDITS = [
    ("END_DATA\n", ""),
    ("NUMBER_HEADERS = 6", "NUMBER_HEADERS = 0"),
    ("NUMBER_HEADERS = 6", "NUMBER_HEADERS = 1"),
    ("NUMBER_HEADERS = 6", "NUMBER_HEADERS = 99999999999999999999"),
    ("NUMBER_HEADERS = 6", "NUMBER_HEADERS = -6"),
    ("NUMBER_HEADERS = 6", "NUMBER_HEADERS = ²"),
    ("NUMBER_HEADERS = 6", "NUMBER_HEADERS = six"),
    ("NUMBER_HEADERS = 6\n", ""),
    ("NUMBER_HEADERS = 6", "NUMBER_HEADERS = 5"),
    ("NUMBER_HEADERS = 6", "NUMBER_HEADERS = 7"),
    ("CTDPRS,CTDPRS_FLAG_W", "CTDPRS,CTDPRS"),
    ("CTDTMP,", "CTDPRS,"),
    ("CTDTMP,CTDTMP_FLAG_W", "CTDTMP,CTDTMP"),
    ("ITS-90", "ITS-90,ITS-90"),
    ("ITS-90", "\x00"),
    ("DBAR", "MBAR"),
    ("1.0,2,10.0", "1.0,2,1e308"),
    ("1.0,2,10.0", "1.0,2,−10.0"),
    ("1.0,2,10.0", "1.0,2,1e999"),
    ("1.0,2,10.0", "nan,2,10.0"),
    ("1.0,2,10.0", ",,"),
    ("1.0,2,10.0", "1.0,2,0x10"),
    ("1.0,2,10.0,2", "1.0,2,10.0,10"),
    ("1.0,2,10.0,2", "1.0,2,10.0,-2"),
    ("1.0,2,10.0,2", "1.0,2,10.0,2.5"),
    ("1.0,2,10.0,2", "1.0,2,10.0,nan"),
    ("1.0,2,10.0,2", "1.0,2,10.0,1e30"),
    ("1.0,2,10.0,2", '"1.0,2,10.0,2'),
    ("35.0,2\n2.0", "35.0\n2.0"),
    ("35.0,2\n2.0", "35.0,2,2\n2.0"),
    ("DATE = 20260131", "DATE = 00000000"),
    ("DATE = 20260131", "DATE = 99999999"),
    ("TIME = 0930", "TIME = 9999"),
    ("TIME = 0930", "TIME = ٣٤٥٦"),
    ("LATITUDE = -34.5", "LATITUDE = -934.5"),
    ("LATITUDE = -34.5", "LATITUDE = south"),
    ("LATITUDE = -34.5", "LATITUDE = 1e400"),
    ("LATITUDE = -34.5\n", "LATITUDE = -34.5\n" * 2),
    ("1.0,2,10.0", "1.0,2,\x00"),
    ("END_DATA", "END_DATA" + EXCHANGE),
    ("\n", "\r"),
    ("\n", "\n\n"),
    (",", ";"),
    ("CTD,", "BOTTLE,"),
]
BOTTLE_EDITS = [
    ("STNNBR", "STN"),
    ("CTDPRS", "DEPTH"),
    ("INV,1,1", ",,"),
    ("100.0,10.0", "-999,-999"),
    ("BOTTLE,", "CTD,"),
    ("20260131,0015", "-999,-999"),
    ("10,200", "10,2000"),
    ("END_DATA\n", "END_DATA\n1,2,3\n"),
]


def exchange(folder):
    for text, edits in ((EXCHANGE, EDITS), (BOTTLE, BOTTLE_EDITS)):
        for number, (old, new) in enumerate(edits):
            assert old in text
            yield f"exchange {text[:3]} {number}", text.replace(old, new).encode()
    for size in (4, 10, 30, 60, 150, 200, 250):
        yield f"exchange cut at {size}", EXCHANGE.encode()[:size]
    yield "exchange of one long line", b"CTD," + b"x" * 2_000_000
    yield "exchange in bytes that are no text", EXCHANGE.encode("utf-16")


def zipped(members, **options):
    data = io.BytesIO()
    with warnings.catch_warnings(), zipfile.ZipFile(data, "w", zipfile.ZIP_DEFLATED) as archive:
        warnings.simplefilter("ignore")
        for name, content in members:
            archive.writestr(name, content, **options)
    return data.getvalue()


def zips(folder):
    sound = zipped([("a.csv", EXCHANGE)])
    central = sound.rindex(b"PK\x01\x02")
    yield "zip bomb", zipped([("zeros", bytes(2**25))])
    yield "zip of many bombs", zipped([(f"{number}", b"1,2\n" * 2**17) for number in range(40)])
    yield "zip in zip", zipped([("a.zip", sound)])
    yield "zip in zip beside a cast", zipped([("a.zip", sound), ("b.csv", EXCHANGE)])
    yield "zip with a wrong checksum", sound.replace(sound[central + 16 : central + 20], b"\x01\x02\x03\x04")
    yield "zip that lies of its size", sound[: central + 24] + b"\xff\xff\xff\x7f" + sound[central + 28 :]
    yield "zip that says it is small", sound[: central + 24] + b"\x05\x00\x00\x00" + sound[central + 28 :]
    yield "zip that is locked", sound[: central + 8] + b"\x01\x00" + sound[central + 10 :]
    yield "zip of an unknown method", sound[: central + 10] + b"\x63\x00" + sound[central + 12 :]
    yield "zip with paths that climb", zipped([("../../a.csv", EXCHANGE), ("/etc/b.csv", EXCHANGE)])
    yield "zip with one name twice", zipped([("a.csv", EXCHANGE), ("a.csv", EXCHANGE)])
    yield "zip of nothing but folders", zipped([("a/", ""), ("b/", "")])
    yield "zip of nothing", zipped([])
    yield "zip of netCDF cut short", zipped([("a.nc", next(iter(whole_files(folder).values()))[:4000])])
    yield "zip with a name of control", zipped([("a\n\x07.csv", "nothing")])
    for part in (0.1, 0.5, 0.9, 0.99):
        yield f"zip cut at {part}", sound[: int(part * len(sound))]
    for place in range(0, len(sound), 23):
        yield f"zip with ff at {place}", sound[:place] + b"\xff\xff\xff" + sound[place + 3 :]


@pytest.mark.parametrize(("make", "least"), [(damaged, 120), (strange, 150), (exchange, 55), (zips, 30)])
def test_each_ends_in_one_clear_line_or_in_casts(tmp_path, make, least):
    names = {}
    for number, (name, data) in enumerate(make(tmp_path)):
        path = tmp_path / f"{number:03d}.dat"
        path.write_bytes(data)
        names[str(path)] = name
    environment = {"OPENBLAS_NUM_THREADS": "1", "PATH": "", "HDF5_USE_FILE_LOCKING": "FALSE"}
    done = subprocess.run(
        [sys.executable, "-c", READER, *names],
        capture_output=True,
        text=True,
        timeout=120,
        env=environment,
        check=False,
    )
    said = [json.loads(line) for line in done.stdout.splitlines()]
    last = names[said[-1]["begins"]] if "begins" in said[-1] else ""
    assert done.returncode == 0, f"died reading {last!r}: {done.stderr[-1000:]}"
    counts = Counter()
    for begins, ended in zip(said[::2], said[1::2], strict=True):
        path, name = begins["begins"], names[begins["begins"]]
        assert "traceback" not in ended, f"{name}: {ended['traceback']}"
        assert ended["seconds"] < 10.0, name
        assert ended["memory"] < 2**20, name  # kilobytes
        if "error" in ended:
            assert ended["error"].startswith(f"{path}: "), name
            assert ended["error"].isprintable(), f"{name}: {ended['error']!r}"
            assert len(ended["error"]) < 1500, name
        counts["refused" if "error" in ended else "read"] += 1
    assert counts["refused"] > 0
    assert sum(counts.values()) == len(names) >= least
