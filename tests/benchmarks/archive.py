"""Archives: casts a second from CSV and netCDF-4, the ratio to the script a user would write, and memory.

Run as `python tests/benchmarks/archive.py [CASTS]`. Invented casts of 1000 levels are made in a temporary folder and
read once before, so that the disk does not count; correctness is asserted on the way. The script (pandas or xarray to
read, gsw for the speed, xarray.concat and to_netcdf) checks nothing, and gives no uncertainty, checksum, flag or
feature. Processor time is printed beside the rates: on a machine that is shared it is what can be compared. What only
the script needs is imported where it is used, since each worker imports this file anew.
"""

from __future__ import annotations

import resource
import sys
import tempfile
from pathlib import Path
from time import perf_counter

import numpy as np

from ocean_sound.archive import build_archive, open_archive
from ocean_sound.archive.working import make_ready
from ocean_sound.casts import check_block, read_many
from ocean_sound.parallel import in_order, workers
from ocean_sound.profile import speeds_of_block

LEVELS = 1000
SCRIPT_CASTS = 150  # of the script, which is slow


def invent(number):
    draw = np.random.default_rng(number)
    pressure = np.arange(LEVELS) + 0.5
    temperature = 4.0 + 14.0 * np.exp(-pressure / draw.uniform(150.0, 450.0)) + draw.normal(0.0, 0.003, LEVELS)
    salinity = 35.0 + 0.3 * np.exp(-pressure / 200.0) + draw.normal(0.0, 0.002, LEVELS)
    time = np.datetime64("2024-01-01T00:00:00") + np.timedelta64(number, "h")
    return pressure, temperature, salinity, time, draw.uniform(-60.0, 60.0), draw.uniform(-180.0, 180.0)


def write_csv(path, number):
    pressure, temperature, salinity, time, latitude, longitude = invent(number)
    head = f"# id: C{number:05d}\n# time: {time}Z\n# latitude: {latitude:.4f}\n# longitude: {longitude:.4f}\n"
    rows = "\n".join(map("%.2f,%.4f,%.4f".__mod__, zip(pressure, temperature, salinity, strict=True)))
    path.write_text(f"{head}pressure [dbar],temperature [degC],salinity [PSS-78]\n{rows}\n")


def write_netcdf(path, number):
    import netCDF4

    pressure, temperature, salinity, time, latitude, longitude = invent(number)
    with netCDF4.Dataset(path, "w") as file:
        file.Conventions, file.featureType, file.id = "CF-1.8", "profile", f"C{number:05d}"
        file.createDimension("z", LEVELS)
        for name, values, standard_name, units in (
            ("pressure", pressure, "sea_water_pressure_due_to_sea_water", "dbar"),
            ("temperature", temperature, "sea_water_temperature", "degree_Celsius"),
            ("salinity", salinity, "sea_water_practical_salinity", "1"),
        ):
            variable = file.createVariable(name, "f8", ("z",))
            variable.standard_name, variable.units = standard_name, units
            variable[:] = np.round(values, 4)
        for name, value, units in (
            ("latitude", latitude, "degrees_north"),
            ("longitude", longitude, "degrees_east"),
            ("time", time.astype(np.int64), "seconds since 1970-01-01T00:00:00Z"),
        ):
            variable = file.createVariable(name, "f8", ())
            variable.standard_name, variable.units = name, units
            variable[:] = value


def make(folder, count, write, ending):
    folder.mkdir()
    for number in range(count):
        write(folder / f"c{number:05d}{ending}", number)
    for path in folder.iterdir():
        path.read_bytes()
    return folder


def read_by_pandas(path):
    import pandas as pd
    import xarray as xr

    lines = path.read_text().split("\n", 4)
    about = dict(line[2:].split(": ", 1) for line in lines[:4])
    table = pd.read_csv(path, comment="#")
    table.columns = ["pressure", "temperature", "salinity"]
    return xr.Dataset.from_dataframe(table).assign_coords(
        latitude=float(about["latitude"]), longitude=float(about["longitude"]), time=pd.Timestamp(about["time"][:-1])
    )


def read_by_xarray(path):
    import xarray as xr

    with xr.open_dataset(path) as dataset:
        return dataset.load().rename(z="index").set_coords(["latitude", "longitude", "time"])


def script(paths, output, read):
    """What a user would write."""
    import gsw
    import xarray as xr

    casts = []
    for path in paths:
        cast = read(path)
        latitude, longitude = float(cast.latitude), float(cast.longitude)
        absolute = gsw.SA_from_SP(cast.salinity.values, cast.pressure.values, longitude, latitude)
        conservative = gsw.CT_from_t(absolute, cast.temperature.values, cast.pressure.values)
        cast["sound_speed"] = ("index", gsw.sound_speed(absolute, conservative, cast.pressure.values))
        cast["depth"] = ("index", -gsw.z_from_p(cast.pressure.values, latitude))
        casts.append(cast)
    xr.concat(casts, "cast", coords="different", compat="equals").to_netcdf(output)
    return casts


def timed(work, *arguments, **options):
    """Seconds that pass, seconds of processors in this process and the workers it has ended, and the result."""

    def used():
        each = (resource.getrusage(who) for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN))
        return sum(one.ru_utime + one.ru_stime for one in each)

    start, before = perf_counter(), used()
    result = work(*arguments, **options)
    return perf_counter() - start, used() - before, result


def check(output, count, theirs):
    """All casts are there, and the speeds are those of the script."""
    with open_archive(output) as archive:
        assert len(archive) == count
        assert not archive.left_out()
        for index, cast in enumerate(theirs):
            assert np.nanmax(np.abs(archive.columns(index)["sound_speed"] - cast.sound_speed.values)) < 2e-3


def rates(folder, name, count, read):
    inputs, output = folder / name, folder / f"{name}.nc"
    paths = sorted(inputs.iterdir())[:SCRIPT_CASTS]
    script(paths[:5], output, read)  # warm
    seconds, busy, theirs = timed(script, paths, output, read)
    script_rate, script_busy = len(paths) / seconds, 1e6 * busy / len(paths)
    build_archive(paths[:5], output, workers=0, replace=True)
    one, busy, _ = timed(build_archive, [inputs], output, workers=0, replace=True)
    two, shared, _ = timed(build_archive, [inputs], output, workers=2, replace=True)
    small, _, _ = timed(build_archive, [inputs], output, workers=2, replace=True, compression=1)
    check(output, count, theirs)
    own = 1e6 * busy / count
    print(f"{name}: {count} casts of {LEVELS} levels, the whole job, starting of workers included")
    print(f"  this process                {count / one:10,.0f} casts/s, {own:8,.0f} us of processor each")
    busy = 1e6 * shared / count
    print(f"  2 workers                   {count / two:10,.0f} casts/s, {busy:8,.0f} us of all processors each")
    print(f"  2 workers, zlib level 1     {count / small:10,.0f} casts/s")
    print(f"  the script, one process     {script_rate:10,.0f} casts/s, {script_busy:8,.0f} us of processor each")
    print(f"  ratio of processor time     {script_busy / own:10,.1f}")


def plain_rate(folder, count):
    """Casts read, checked and given their speed by 2 workers; no checksum, features or assembly."""
    blocks = [paths.tolist() for paths in np.array_split(sorted(map(str, (folder / "csv").iterdir())), count // 100)]
    with workers(2, make_ready=make_ready) as (executor, number):
        list(in_order(speeds_only, blocks[:2], executor=executor, number=number))  # the workers have started
        start = perf_counter()
        done = sum(casts for _, casts in in_order(speeds_only, blocks, executor=executor, number=number))
        seconds = perf_counter() - start
    assert done == count
    print(f"csv, read + check + speed and its uncertainty, nothing written, 2 workers: {count / seconds:,.0f} casts/s")


def speeds_only(paths):
    done = 0
    for block in read_many(paths):
        columns = speeds_of_block(check_block(block)[0])
        done += int((columns.row_size > 0).sum())
    return done


def memory(folder, count):
    """Peak memory of the largest worker so far, MB."""
    build_archive([folder / "csv"], folder / "memory.nc", workers=2, replace=True)
    worker = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024
    parent = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(f"peak memory with {count} casts: a worker {worker:,.0f} MB, this process {parent:,.0f} MB")


def main():
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 10_000
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place)
        make(folder / "csv", count // 10, write_csv, ".csv")
        memory(folder, count // 10)
        for number in range(count // 10, count):
            write_csv(folder / "csv" / f"c{number:05d}.csv", number)
        memory(folder, count)
        plain_rate(folder, count)
        rates(folder, "csv", count, read_by_pandas)
        make(folder / "netcdf", count, write_netcdf, ".nc")
        rates(folder, "netcdf", count, read_by_xarray)


if __name__ == "__main__":
    main()
