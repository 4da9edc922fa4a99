"""Casts of 1000 levels read, checked and given their speed: casts a second on one core by format, and the shares.

Run as `python tests/benchmarks/casts.py`. Beside each rate stands the ratio to the script that a user would write with
pandas or xarray and gsw, which only reads and computes the speed, in the same run. The two must agree on the speeds.
"""

from __future__ import annotations

import tempfile
from pathlib import Path
from statistics import median
from time import process_time

import gsw
import numpy as np
import pandas as pd
import xarray as xr

from ocean_sound.casts import check_block, read_many
from ocean_sound.profile import speeds_of_block

CASTS, LEVELS, RUNS = 200, 1000, 5
LATITUDE, LONGITUDE = 45.0, -20.0


def make_files(folder):
    """The same invented casts as CSV, as CF netCDF-4 of one cast each, and as one WHP-Exchange file each."""
    random = np.random.default_rng(5)
    paths = {"CSV": [], "netCDF-4": [], "WHP-Exchange": []}
    pressure = np.arange(1.0, LEVELS + 1.0)
    for number in range(CASTS):
        depth = 40.0 + 40.0 * random.random()
        temperature = np.round(6.0 + 9.0 / (1.0 + np.exp((pressure - depth) / 15.0)) - 0.002 * pressure, 4)
        salinity = np.round(35.0 + 0.0004 * pressure + 0.05 * np.exp(-pressure / 300.0), 4)
        where = f"# latitude: {LATITUDE}\n# longitude: {LONGITUDE}\n# time: 2024-03-01T{number % 24:02d}:00:00Z\n"
        rows = [f"{p:.1f},{t:.4f},{s:.4f}" for p, t, s in zip(pressure, temperature, salinity, strict=True)]
        path = folder / f"cast{number:04d}.csv"
        path.write_text(f"{where}pressure [dbar],temperature [degC],salinity [PSS-78]\n" + "\n".join(rows) + "\n")
        paths["CSV"].append(path)
        head = (
            f"CTD,20240301INVENTED\nNUMBER_HEADERS = 7\nEXPOCODE = INVENTED\nSTNNBR = {number}\nCASTNO = 1\n"
            f"DATE = 20240301\nLATITUDE = {LATITUDE}\nLONGITUDE = {LONGITUDE}\n"
        )
        path = folder / f"cast{number:04d}_ct1.csv"
        path.write_text(head + "CTDPRS,CTDTMP,CTDSAL\nDBAR,ITS-90,PSS-78\n" + "\n".join(rows) + "\nEND_DATA\n")
        paths["WHP-Exchange"].append(path)
        dataset = xr.Dataset(
            {
                "temperature": (
                    "z",
                    temperature,
                    {"standard_name": "sea_water_temperature", "units": "degree_Celsius"},
                ),
                "salinity": ("z", salinity, {"standard_name": "sea_water_practical_salinity", "units": "1"}),
            },
            {
                "pressure": (
                    "z",
                    pressure,
                    {"standard_name": "sea_water_pressure_due_to_sea_water", "units": "dbar", "positive": "down"},
                ),
                "latitude": ((), LATITUDE, {"standard_name": "latitude", "units": "degrees_north"}),
                "longitude": ((), LONGITUDE, {"standard_name": "longitude", "units": "degrees_east"}),
                "time": ((), np.datetime64("2024-03-01T00:00:00", "ns"), {"standard_name": "time"}),
            },
            {"Conventions": "CF-1.11", "featureType": "profile", "id": f"cast{number:04d}"},
        )
        path = folder / f"cast{number:04d}.nc"
        dataset.to_netcdf(path)
        paths["netCDF-4"].append(path)
    return paths


def read_batch(paths):
    """All casts of some files in one block, as a batch reads them."""
    (block,) = read_many(paths)
    assert block.left_out == ()
    return block


def script(paths, reader):
    """What a user would write."""
    speeds = []
    for path in paths:
        pressure, temperature, salinity = reader(path)
        absolute = gsw.SA_from_SP(salinity, pressure, LONGITUDE, LATITUDE)
        conservative = gsw.CT_from_t(absolute, temperature, pressure)
        speeds.append(gsw.sound_speed(absolute, conservative, pressure))
        gsw.z_from_p(pressure, LATITUDE)
    return np.concatenate(speeds)


def by_pandas(path):
    table = pd.read_csv(path, comment="#")
    return (table[name].to_numpy() for name in table.columns)


def by_pandas_exchange(path):
    table = pd.read_csv(path, skiprows=[*range(8), 9], skipfooter=1, engine="python")
    return (table[name].to_numpy() for name in table.columns)


def by_xarray(path):
    with xr.open_dataset(path) as dataset:
        return dataset.pressure.to_numpy(), dataset.temperature.to_numpy(), dataset.salinity.to_numpy()


def timed(work):
    """Median processor time of some runs after a warm-up, and the last result."""
    work()
    times = []
    for _ in range(RUNS):
        start = process_time()
        result = work()
        times.append(process_time() - start)
    return median(times), result


def main():
    scripts = {"CSV": by_pandas, "netCDF-4": by_xarray, "WHP-Exchange": by_pandas_exchange}
    print(f"{CASTS} casts of {LEVELS} levels, one core, processor time")
    with tempfile.TemporaryDirectory() as folder:
        for name, paths in make_files(Path(folder)).items():
            reading, block = timed(lambda paths=paths: read_batch(paths))
            checking, (checked, report) = timed(lambda block=block: check_block(block))
            speeding, columns = timed(lambda checked=checked: speeds_of_block(checked))
            theirs, speeds = timed(lambda paths=paths, name=name: script(paths, scripts[name]))
            measured = columns.level >= 0
            assert measured.sum() == CASTS * LEVELS, (name, report.lines())
            assert np.abs(columns.speed[measured] - speeds).max() < 1e-9
            total = reading + checking + speeding
            shares = ", ".join(
                f"{what} {1e6 * part / CASTS:.0f} us ({part / total:.0%})"
                for what, part in (("read", reading), ("check", checking), ("speed and uncertainty", speeding))
            )
            print(f"  {name:<13} {CASTS / total:7,.0f} casts/s: {shares}; {theirs / total:.2f} x the script's rate")


if __name__ == "__main__":
    main()
