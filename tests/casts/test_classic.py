import netCDF4
import numpy as np
import pytest

from ocean_sound.casts.classic import CutShortError, open_classic
from ocean_sound.casts.store import LARGEST, UnfitError

KINDS = ["NETCDF3_CLASSIC", "NETCDF3_64BIT_OFFSET", "NETCDF3_64BIT_DATA"]


def written(path, kind, records, record_variables):
    with netCDF4.Dataset(path, "w", format=kind) as dataset:
        dataset.title = "invented"
        dataset.numbers = np.array([1.5, -2.0])
        dataset.createDimension("x", 5)
        dataset.createDimension("time", None)
        dataset.createVariable("scalar", "f8", ())[...] = 1.0
        dataset.createVariable("text", "S1", ("x",))[:] = np.array(list("abcde"), "S1")
        for number in range(record_variables):
            variable = dataset.createVariable(f"r{number}", "i2", ("time", "x"))
            variable.units = "m"
            variable[:] = np.arange(records * 5).reshape(records, 5) + 100 * number
    return path.read_bytes()


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("records", [0, 1, 3])
@pytest.mark.parametrize("record_variables", [0, 1, 2])
def test_what_the_netcdf_library_wrote(tmp_path, kind, records, record_variables):
    """Against netCDF4 as the independent reader: dimensions, attributes, values; and not a byte may be missing."""
    data = written(tmp_path / "a.nc", kind, records, record_variables)
    store = open_classic(data)
    with netCDF4.Dataset(tmp_path / "a.nc") as dataset:
        dataset.set_auto_maskandscale(False)
        assert store.dimensions["x"] == 5
        assert list(store.variables) == list(dataset.variables)
        for name, variable in dataset.variables.items():
            ours = store.variables[name]
            assert (ours.dimensions, ours.shape) == (variable.dimensions, variable.shape)
            np.testing.assert_array_equal(ours.read(), variable[...])
            assert ours.names() == tuple(variable.ncattrs())
        assert store.text("title") == dataset.title
        np.testing.assert_array_equal(store.get("numbers"), dataset.numbers)
    for missing in (4, 5, 9):  # padding of less than four bytes at the end is not needed
        with pytest.raises(CutShortError, match=r"its header (promises|ends early)"):
            open_classic(data[:-missing])


@pytest.mark.parametrize("kind", KINDS)
def test_a_stream_counts_its_records_by_its_length(tmp_path, kind):
    data = bytearray(written(tmp_path / "a.nc", kind, 3, 2))
    width = 8 if kind.endswith("DATA") else 4
    data[4 : 4 + width] = b"\xff" * width
    assert open_classic(bytes(data)).variables["r1"].read().tolist()[2] == [110, 111, 112, 113, 114]


def test_a_header_cut_short_or_damaged(tmp_path):
    data = written(tmp_path / "a.nc", "NETCDF3_CLASSIC", 1, 1)
    for size in range(4, 200):
        with pytest.raises(CutShortError, match=r"ends early|promises"):
            open_classic(data[:size])
    with pytest.raises(CutShortError, match="damaged"):
        open_classic(data[:8] + b"\x00\x00\x00\x63" + data[12:])
    for place in range(0, 200, 4):  # a length of four thousand million in every place: an error, or read, but no hang
        broken = data[: 4 + place] + b"\xff\xff\xff\xfe" + data[8 + place :]
        try:
            open_classic(broken)
        except CutShortError as error:
            assert str(error)  # noqa: PT017


def test_latin_letters_in_an_attribute(tmp_path):
    data = written(tmp_path / "a.nc", "NETCDF3_CLASSIC", 1, 1)
    assert open_classic(data.replace(b"invented", b"\xb0C inven")).text("title") == "°C inven"


def test_more_than_can_be_held_is_refused(tmp_path):
    store = open_classic(written(tmp_path / "a.nc", "NETCDF3_CLASSIC", 3, 1))
    store.variables["r0"].budget.left = 20
    store.variables["r0"].read()
    with pytest.raises(UnfitError, match=rf"more than {LARGEST} values would have to be read; split it"):
        store.variables["r0"].read()
