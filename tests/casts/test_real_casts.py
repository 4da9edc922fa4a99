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
        """Row by row: the adjusted values in modes A and D unless they are all missing."""
        raw, better = dataset[name].values.astype(float), dataset[f"{name}_ADJUSTED"].values.astype(float)
        return np.array(
            [b if mode in "AD" and np.isfinite(b).any() else r for r, b, mode in zip(raw, better, modes, strict=True)]
        )

    found = {name: best(name) for name in ("PRES", "TEMP", "PSAL") if name in dataset}
    pressure, temperature = found["PRES"], found["TEMP"]
    salinity = found.get("PSAL", np.full_like(pressure, np.nan))
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
        assert cast.latitude == dataset["LATITUDE"].values[index]
        days = dataset["JULD"].values[index]
        assert abs((cast.time - np.datetime64("1950-01-01", "ns")) / np.timedelta64(1, "D") - days) < 1e-8
    (block,) = read_blocks(path)
    assert len(block) + len(block.left_out) == dataset.sizes["N_PROF"]


def test_argo_flags_as_the_manifest_counts_them():
    """The MANIFEST counts TEMP_QC of this file: 5667 levels flagged 1 and 13 flagged 4, adjusted to fill."""
    casts = list(read_casts(DATA / "argo" / "5900865_prof.nc"))
    flags = np.concatenate([cast.flags["temperature"] for cast in casts])
    values = np.concatenate([cast.temperature for cast in casts])
    assert [(flags == flag).sum() for flag in (1, 9)] == [5667, 13]
    assert np.isnan(values).sum() == 13


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
