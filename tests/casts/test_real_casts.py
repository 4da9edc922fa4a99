"""Real open casts against an independent reading by xarray or pandas; OCEAN_SOUND_DATA says where they lie."""

import io
import os
import zipfile
from fractions import Fraction
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from ocean_sound.casts import read_blocks, read_casts
from ocean_sound.errors import CastFileError

DATA = Path(os.environ.get("OCEAN_SOUND_DATA", "nowhere"))
pytestmark = pytest.mark.skipif(
    "OCEAN_SOUND_DATA" not in os.environ, reason="OCEAN_SOUND_DATA does not say where the real casts are"
)


def files(folder, pattern):
    return [pytest.param(path, id=path.name) for path in sorted((DATA / folder).glob(pattern))] or [
        pytest.param(None, id="none")
    ]


def letters(values):
    return np.array([v.decode("ascii", "replace") if isinstance(v, bytes) else str(v) for v in np.ravel(values)])


@pytest.mark.parametrize("path", files("argo", "*.nc"))
def test_argo_agrees_with_xarray(path):
    assert path is not None, "no Argo file in the folder"
    with xr.open_dataset(path, decode_times=False, mask_and_scale=True) as dataset:
        dataset.load()
    modes = letters(dataset["DATA_MODE"].values)

    def best(name):
        """By the user's manual: adjusted in modes A and D; as received where no adjustment saved it, and then bad."""
        raw, better = dataset[name].values.astype(float), dataset[f"{name}_ADJUSTED"].values.astype(float)
        wanted = np.isin(modes, ["A", "D"])[:, None] & np.ones_like(raw, bool)
        lost = np.isnan(better) & (letters(dataset[f"{name}_ADJUSTED_QC"].values).reshape(raw.shape) == "4")
        used = wanted & (np.isfinite(better) | lost).any(axis=1)[:, None]
        return np.where(used, np.where(lost, raw, better), raw), used & lost & np.isfinite(raw)

    found = {name: best(name) for name in ("PRES", "TEMP", "PSAL") if name in dataset}
    lost = {name: bad for name, (_, bad) in found.items()}
    pressure, temperature = found["PRES"][0], found["TEMP"][0]
    salinity = found["PSAL"][0] if "PSAL" in found else np.full_like(pressure, np.nan)
    measured = np.isfinite(temperature) | np.isfinite(salinity)
    kept = (np.isfinite(pressure) & measured).any(axis=1)
    rows = np.isfinite(pressure) | measured
    casts = list(read_casts(path))
    assert len(casts) == kept.sum()
    assert [len(cast) for cast in casts] == rows[kept].sum(axis=1).tolist()
    for cast, index in zip(casts, np.flatnonzero(kept), strict=True):
        row = rows[index]
        np.testing.assert_array_equal(cast.pressure, pressure[index][row])
        for ours, theirs in ((cast.temperature, temperature), (cast.salinity, salinity)):
            if ours is None:
                assert not np.isfinite(theirs[index]).any()
            else:
                np.testing.assert_array_equal(ours, theirs[index][row])
        for name, ours in (("PRES", "pressure"), ("TEMP", "temperature"), ("PSAL", "salinity")):
            if name in lost and ours in cast.values:
                assert (cast.flags[ours][lost[name][index][row]] == 4).all()
        assert cast.latitude == dataset["LATITUDE"].values[index]
        days = dataset["JULD"].values[index]
        assert abs((cast.time - np.datetime64("1950-01-01", "ns")) / np.timedelta64(1, "D") - days) < 1e-8
    (block,) = read_blocks(path)
    assert len(block) + len(block.left_out) == dataset.sizes["N_PROF"]


def test_argo_flags_as_the_manifest_counts_them():
    """The MANIFEST counts TEMP_QC of this file: 5667 levels flagged 1 and 13 flagged 4, adjusted to fill."""
    casts = list(read_casts(DATA / "argo" / "5900865_prof.nc"))
    flags = np.concatenate([cast.flags["temperature"] for cast in casts])
    assert [(flags == flag).sum() for flag in (1, 4)] == [5667, 13]
    assert not any(cast.good("temperature")[cast.flags["temperature"] == 4].any() for cast in casts)


def test_optics_without_temperature_are_left_out_by_name():
    """The MANIFEST: six profiles, T and S in three of them, of 201, 2 and 31 levels."""
    (block,) = read_blocks(DATA / "argo" / "R6903247_001.nc")
    assert block.row_size.tolist() == [201, 2, 31]
    assert [where.split(": ")[1] for where, _ in block.left_out] == [
        f"profile {number} of 6 (6903247_001_ascending_{number})" for number in (3, 4, 5)
    ]


# --- World Ocean Database --------------------------------------------------------------------------------------------


@pytest.mark.parametrize("path", files("wod", "*.nc"))
def test_wod_agrees_with_xarray(path):
    assert path is not None, "no file of the World Ocean Database in the folder"
    with xr.open_dataset(path, decode_times=False) as dataset:
        dataset.load()
    (block,) = read_blocks(path)
    many = "casts" in dataset.sizes
    ends = {
        key: np.cumsum(np.nan_to_num(dataset[f"{key}_row_size"].values)).astype(int) if many else [dataset.sizes["z"]]
        for key in ("z", "Temperature", "Salinity")
        if key in dataset
    }
    sizes = {key: np.diff(end, prepend=0) for key, end in ends.items()}
    held = np.flatnonzero(sizes["z"] > 0)
    assert len(block) == held.size
    assert len(block.left_out) == sizes["z"].size - held.size
    for cast, index in zip(block, held, strict=True):
        assert cast.id == str(np.ravel(dataset["wod_unique_cast"].values)[index])
        for ours, key in (("depth", "z"), ("temperature", "Temperature"), ("salinity", "Salinity")):
            size = sizes[key][index] if key in sizes else 0
            if not size:
                assert ours not in cast.values
                continue
            column = dataset[key].values[ends[key][index] - size : ends[key][index]].astype(float)
            np.testing.assert_array_equal(cast.values[ours], column)
            profile = f"{key}_WODprofileflag"
            whole = np.ravel(dataset[profile].values)[index] > 0 if profile in dataset else False
            for code in ("_WODflag", "_IQUODflag"):
                if f"{key}{code}" in dataset:
                    stated = dataset[f"{key}{code}"].values[ends[key][index] - size : ends[key][index]]
                    np.testing.assert_array_equal(cast.good(ours), (stated <= 0) & np.isfinite(column) & (not whole))
        days = np.ravel(dataset["time"].values)[index]
        assert abs((cast.time - np.datetime64("1770-01-01", "ns")) / np.timedelta64(1, "D") - days) < 1e-8
        assert cast.latitude == np.ravel(dataset["lat"].values)[index].astype(float)
        assert abs(cast.longitude) <= 180.0
    (other,) = read_blocks(path)
    assert other.row_size.sum() == sizes["z"].sum()


# levels flagged by file, as the MANIFEST counts them
@pytest.mark.parametrize(
    ("number", "levels", "flagged", "sentinels"),
    [("7274385", 433, 5, 2), ("7274446", 419, 6, 2), ("7274411", 6, 1, 0), ("7274387", 1222, 0, 0)],
)
def test_flagged_levels_of_expendable_probes(number, levels, flagged, sentinels):
    (cast,) = read_casts(DATA / "wod" / f"wod_00{number}O.nc")
    assert len(cast) == levels
    assert (~cast.good("temperature")).sum() == flagged
    assert (cast.temperature[cast.flags["temperature"] == 4] > 99.0).sum() == sentinels
    assert cast.salinity is None
    assert "Hanawa" in cast.attributes["depth_correction"]
    assert any("not corrected here" in note for note in cast.notes)


def test_row_sizes_of_their_own():
    """The MANIFEST: 105 casts, 5 without levels, 10 in which the row sizes of depth and salinity differ."""
    (block,) = read_blocks(DATA / "wod" / "ocldb1570984477.6279_OSD.nc")
    assert (len(block), len(block.left_out)) == (100, 5)
    assert {why for _, why in block.left_out} == {"has no level"}
    assert sum(cast.salinity is None for cast in block) == 10
    assert block.uncertainties["temperature"].size == 666
    assert sum(any("flags the whole profile of temperature" in note for note in notes) for notes in block.notes) == 3


# --- other CF files --------------------------------------------------------------------------------------------------


GLIDER = [141, 129, 128, 189, 203, 236, 251, 241, 201, 202, 192, 195, 198, 195, 183, 173, 166]  # its own rowSize


def test_every_cf_file_is_read():
    paths = sorted((DATA / "cf_profiles").glob("*.nc"))
    assert paths
    assert {path.name: [len(cast) for cast in read_casts(path)] for path in paths} == {
        "33HQ20150809_00001_00002_ctd.nc": [744],
        "33HQ20150809_00034_00001_ctd.nc": [4290],
        "imos_maria_island_20140703_ctd.nc": [76],
        "imos_px02_20160106_xbt.nc": [1577],
        "profile_om-single.nc": [98],
        "trajectoryProfile_cr-single.nc": GLIDER,
    }


@pytest.mark.parametrize("path", files("cf_profiles", "33HQ*.nc"))
def test_damaged_units_and_woce_flags(path):
    assert path is not None, "no such file in the folder"
    (cast,) = read_casts(path)
    with xr.open_dataset(path, decode_times=False) as dataset:
        for ours in ("pressure", "temperature", "salinity"):
            np.testing.assert_array_equal(cast.values[ours], dataset[ours].values)
            stated = dataset[f"{ours}_QC"].values
            np.testing.assert_array_equal(cast.flags[ours] == 1, (stated == 2) | (stated == 7))
        assert cast.latitude == float(dataset["latitude"].values[0])
        minutes = (cast.time - np.datetime64("1980-01-01", "ns")) / np.timedelta64(1, "m")
        assert minutes == dataset["time"].values[0]
    assert any("damaged in the file (?C (ITS-90)), read as degC (ITS-90)" in note for note in cast.notes)


def test_imos_flags_as_the_manifest_counts_them():
    """PX02: flags 2 on 721 levels, 4 on 851, 5 (changed, to the fill value) on 5."""
    (cast,) = read_casts(DATA / "cf_profiles" / "imos_px02_20160106_xbt.nc")
    assert [(cast.flags["temperature"] == flag).sum() for flag in (1, 4, 9)] == [721, 851, 5]
    assert cast.good("temperature").sum() == 721
    assert "value: 052" in cast.attributes["fall_rate_equation"]
    (cast,) = read_casts(DATA / "cf_profiles" / "imos_maria_island_20140703_ctd.nc")
    with xr.open_dataset(DATA / "cf_profiles" / "imos_maria_island_20140703_ctd.nc") as dataset:
        np.testing.assert_array_equal(cast.pressure, dataset["PRES_REL"].values.astype(float))
        np.testing.assert_array_equal(cast.conductivity, dataset["CNDC"].values.astype(float))
        assert abs(cast.time - dataset["TIME"].values) < np.timedelta64(1, "ms")


def test_millibars_and_gliders():
    (cast,) = read_casts(DATA / "cf_profiles" / "profile_om-single.nc")
    with xr.open_dataset(DATA / "cf_profiles" / "profile_om-single.nc") as dataset:
        np.testing.assert_array_equal(cast.pressure, dataset["pressure"].values.astype(float) / 100.0)  # 1 mbar = 1 hPa
        assert cast.time == dataset["time"].values
    assert "pressure taken as sea pressure: it begins at 0 dbar, less than any air" in cast.notes
    casts = list(read_casts(DATA / "cf_profiles" / "trajectoryProfile_cr-single.nc"))
    with xr.open_dataset(DATA / "cf_profiles" / "trajectoryProfile_cr-single.nc") as dataset:
        for ours in ("pressure", "depth", "temperature", "salinity", "conductivity"):
            np.testing.assert_array_equal(
                np.concatenate([cast.values[ours] for cast in casts]), dataset[ours].values.astype(float)
            )
        np.testing.assert_array_equal([cast.latitude for cast in casts], dataset["latitude"].values)
        assert [cast.id for cast in casts] == [f"{number:g}" for number in dataset["profile_id"].values]
        times = np.array([cast.time for cast in casts])
        assert (abs(times - dataset["time"].values) < np.timedelta64(1, "ms")).all()
    assert casts[0].attributes["trajectory"] == "sp025-20141125T1730"


@pytest.mark.parametrize("path", [*files("climatology", "*.nc"), *files("bathymetry", "*.nc")])
def test_grids_are_refused_as_grids(path):
    assert path is not None, "no grid in the folder"
    with pytest.raises(CastFileError, match=r"holds a grid|no temperature|no variable with the standard name of depth"):
        list(read_casts(path))


# --- WHP-Exchange ----------------------------------------------------------------------------------------------------


def numbers(column):
    """Text to the nearest float by exact rationals, not the way of the package; -999 is 'no value' in Exchange."""
    exact = np.array([float(Fraction(text.strip())) for text in column])
    return np.where(exact == -999.0, np.nan, exact)


def ctd_members(path):
    with zipfile.ZipFile(path) as archive:
        return {name: archive.read(name).decode() for name in archive.namelist()}


@pytest.mark.parametrize("path", files("exchange", "*.zip"))
def test_exchange_zips_agree_with_pandas(path):
    assert path is not None, "no Exchange ZIP in the folder"
    casts = {cast.source.split("/")[-1]: cast for cast in read_casts(path)}
    members = ctd_members(path)
    assert set(casts) == set(members)
    for name, text in members.items():
        lines = text.splitlines()
        start = next(i for i, line in enumerate(lines) if line.startswith("CTDPRS"))
        table = pd.read_csv(
            io.StringIO("\n".join([lines[start], *lines[start + 2 : lines.index("END_DATA")]])),
            dtype=str,
        )
        cast = casts[name]
        assert len(cast) == len(table)
        np.testing.assert_array_equal(cast.pressure, numbers(table["CTDPRS"]))
        np.testing.assert_array_equal(cast.temperature, numbers(table["CTDTMP"]))
        np.testing.assert_array_equal(cast.salinity, numbers(table["CTDSAL"]))


def test_exchange_zip_casts_as_the_manifest_counts_them():
    casts = list(read_casts(DATA / "exchange" / "BIOS20160414_ct1.zip"))
    assert len(casts) == 22
    assert [cast.pressure.tolist() for cast in casts if len(cast) == 1] == [[3.7]]
    assert max(cast.pressure.max() for cast in casts) == 4585.0
    assert len(list(read_casts(DATA / "exchange" / "BIOS20160721_ct1.zip"))) == 2


def test_bottles_agree_with_pandas():
    path = DATA / "exchange" / "33RR20080204_mini_hy1.csv"
    table = pd.read_csv(path, skiprows=1, comment="#", dtype=str).iloc[1:]
    table = table[table["EXPOCODE"] != "END_DATA"]
    groups = table.groupby(["STNNBR", "CASTNO"], sort=False)
    casts = list(read_casts(path))
    assert len(casts) == len(groups)
    for cast, (_, group) in zip(casts, groups, strict=True):
        pressure = numbers(group["CTDPRS"])
        order = np.argsort(pressure, kind="stable")
        np.testing.assert_array_equal(cast.pressure, pressure[order])
        salinity = numbers(group["CTDSAL"])[order]
        np.testing.assert_array_equal(cast.salinity, salinity)
        bad = (group["CTDSAL_FLAG_W"].astype(int) == 4).to_numpy()[order] & np.isfinite(salinity)
        np.testing.assert_array_equal(cast.flags["salinity"] == 4, bad)


def test_the_xbt_csv_agrees_with_pandas():
    path = DATA / "csv" / "imos_xbt_20150813.csv"
    lines = path.read_text().splitlines()
    table = pd.read_csv(io.StringIO("\n".join(lines[lines.index("Depth,Temperature") :])), dtype=str)
    (cast,) = read_casts(path)
    np.testing.assert_array_equal(cast.depth, numbers(table["Depth"]))
    np.testing.assert_array_equal(cast.temperature, numbers(table["Temperature"]))
    assert cast.time == np.datetime64("2015-08-13T06:38")
    assert (cast.latitude, cast.longitude) == (-34.1206896552, 151.49862069)
    assert cast.salinity is None
    assert cast.attributes["xbt_probe_type_fallrate_equation"].startswith("52")
