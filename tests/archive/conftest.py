"""Casts to build archives from, and what of an archive must be equal however it was built."""

from __future__ import annotations

from types import SimpleNamespace

import netCDF4
import numpy as np
import pytest


def make_cast(path, *, seed=0, levels=40, time="2024-01-01T00:00:00", latitude=40.0, longitude=-30.0, name=None):
    """An invented cast as CSV; returned are its columns as written."""
    draw = np.random.default_rng(seed)
    pressure = np.round(np.arange(levels) * 5.0 + 1.0 + draw.uniform(0.0, 1.0), 2)
    temperature = np.round(4.0 + 12.0 * np.exp(-pressure / 100.0) + draw.normal(0.0, 0.002, levels), 4)
    salinity = np.round(35.0 + 0.3 * np.exp(-pressure / 200.0), 4)
    lines = [f"# id: {name or path.stem}", f"# time: {time}Z", f"# latitude: {latitude}", f"# longitude: {longitude}"]
    lines += ["pressure [dbar],temperature [degC],salinity [PSS-78]"]
    lines += [f"{p},{t},{s}" for p, t, s in zip(pressure, temperature, salinity, strict=True)]
    path.write_text("\n".join(lines) + "\n")
    return {"pressure": pressure, "temperature": temperature, "salinity": salinity}


def make_folder(folder, count, **options):
    """A folder of invented casts, an hour and a degree apart."""
    folder.mkdir(parents=True, exist_ok=True)
    start = np.datetime64("2024-01-01T00:00:00")
    return {
        f"c{number:04d}": make_cast(
            folder / f"c{number:04d}.csv",
            seed=number,
            time=start + np.timedelta64(number, "h"),
            latitude=-60.0 + number % 120,
            longitude=-180.0 + (7 * number) % 360,
            **options,
        )
        for number in range(count)
    }


def content(path):
    """All that an archive holds, but for when it was made."""
    found = {}

    def walk(group, place):
        for name in group.ncattrs():
            if name not in ("date_created", "history"):
                found[f"{place}@{name}"] = group.getncattr(name)
        for name, variable in group.variables.items():
            found[place + name] = np.asarray(variable[:])
            found.update({f"{place}{name}@{key}": variable.getncattr(key) for key in variable.ncattrs()})
        for name, inner in group.groups.items():
            walk(inner, f"{place}{name}/")

    with netCDF4.Dataset(path) as file:
        file.set_auto_mask(False)
        walk(file, "")
    return found


def differences(one, other):
    """Names of what differs between two archives."""

    def same(a, b):
        a, b = np.asarray(a), np.asarray(b)
        return a.dtype.kind == b.dtype.kind and np.array_equal(a, b, equal_nan=a.dtype.kind == "f")

    a, b = content(one), content(other)
    return sorted(key for key in {*a, *b} if key not in a or key not in b or not same(a[key], b[key]))


@pytest.fixture(scope="session")
def invent():
    """What makes casts, and compares archives."""
    return SimpleNamespace(cast=make_cast, folder=make_folder, content=content, differences=differences)


@pytest.fixture
def casts(tmp_path):
    """A folder of twelve invented casts, and their columns by id."""
    return tmp_path / "casts", make_folder(tmp_path / "casts", 12)
