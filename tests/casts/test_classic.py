import io

import netCDF4
import numpy as np
import pytest

from ocean_sound.casts.classic import CutShortError, needed_size


@pytest.mark.parametrize("kind", ["NETCDF3_CLASSIC", "NETCDF3_64BIT_OFFSET", "NETCDF3_64BIT_DATA"])
@pytest.mark.parametrize("records", [0, 1, 3])
@pytest.mark.parametrize("record_variables", [0, 1, 2])
def test_the_size_that_the_library_writes(tmp_path, kind, records, record_variables):
    """Against files that the netCDF library wrote: all is needed but for padding of less than four bytes."""
    path = tmp_path / "a.nc"
    with netCDF4.Dataset(path, "w", format=kind) as dataset:
        dataset.title = "invented"
        dataset.createDimension("x", 5)
        dataset.createDimension("time", None)
        dataset.createVariable("scalar", "f8", ())[...] = 1.0
        dataset.createVariable("text", "S1", ("x",))[:] = np.array(list("abcde"), "S1")
        for number in range(record_variables):
            variable = dataset.createVariable(f"r{number}", "i2", ("time", "x"))
            variable.units = "m"
            variable[:] = np.ones((records, 5), "i2")
    data = path.read_bytes()
    needed = needed_size(io.BytesIO(data))
    assert 0 <= len(data) - needed < 4


def test_a_header_cut_short_or_damaged(tmp_path):
    path = tmp_path / "a.nc"
    with netCDF4.Dataset(path, "w", format="NETCDF3_CLASSIC") as dataset:
        dataset.title = "invented"
        dataset.createDimension("x", 5)
        dataset.createVariable("text", "S1", ("x",))
    data = path.read_bytes()
    for size in range(4, 60):
        with pytest.raises(CutShortError, match="ends early"):
            needed_size(io.BytesIO(data[:size]))
    with pytest.raises(CutShortError, match="damaged"):
        needed_size(io.BytesIO(data[:8] + b"\x00\x00\x00\x63" + data[12:]))
