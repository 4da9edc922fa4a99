import hashlib
import os

import numpy as np
import pytest
import xarray as xr

from ocean_sound.errors import InputError, OutputError
from ocean_sound.files import attributes, checksum, replacing, write_csv, write_dataset, write_text


def small_dataset():
    return xr.Dataset(
        {"sound_speed": ("level", [1500.0, np.nan], attributes("sound_speed"))},
        {"depth": ("level", [0.0, 10.0], attributes("depth")), "time": np.datetime64("2026-01-31T12:00:00", "ns")},
        {"title": "invented"},
    )


def names(folder):
    return sorted(path.name for path in folder.iterdir())


def test_an_existing_output_is_kept_unless_told(tmp_path):
    goal = tmp_path / "a.txt"
    write_text(goal, "first")
    with pytest.raises(OutputError, match=r"a\.txt: exists already; .*--replace"):
        write_text(goal, "second")
    assert goal.read_text() == "first"
    write_text(goal, "second", replace=True)
    assert goal.read_text() == "second"
    assert names(tmp_path) == ["a.txt"]


def test_a_missing_folder_and_a_folder_as_output(tmp_path):
    with pytest.raises(OutputError, match=r"the folder .*nowhere does not exist"):
        write_text(tmp_path / "nowhere" / "a.txt", "x")
    with pytest.raises(OutputError, match="is a folder"):
        write_text(tmp_path, "x")


def test_a_failure_leaves_what_was_there_and_nothing_else(tmp_path):
    goal = tmp_path / "a.txt"
    goal.write_text("before")

    def fail():
        with replacing(goal, replace=True) as temporary:
            temporary.write_text("half")
            raise ZeroDivisionError("in the middle")

    with pytest.raises(ZeroDivisionError, match="in the middle"):
        fail()
    assert goal.read_text() == "before"
    assert names(tmp_path) == ["a.txt"]


def test_an_output_that_appears_meanwhile_is_not_overwritten(tmp_path):
    goal = tmp_path / "a.txt"

    def race():
        with replacing(goal) as temporary:
            temporary.write_text("ours")
            goal.write_text("theirs")

    with pytest.raises(OutputError, match="exists already"):
        race()
    assert goal.read_text() == "theirs"
    assert names(tmp_path) == ["a.txt"]


def test_a_disk_that_refuses_is_an_output_error(tmp_path):
    def refuse():
        with replacing(tmp_path / "a.txt"):
            raise OSError(28, "No space left on device")

    with pytest.raises(OutputError, match=r"a\.txt: can't be written: No space left on device"):
        refuse()


def test_the_temporary_name_keeps_the_ending(tmp_path):
    with replacing(tmp_path / "figure.png") as temporary:
        assert temporary.suffix == ".png"
        assert temporary.parent == tmp_path
        temporary.write_bytes(b"x")


@pytest.mark.skipif(os.name == "nt", reason="permissions are those of POSIX")
def test_permissions_are_those_of_any_new_file(tmp_path):
    (tmp_path / "plain").write_text("x")
    write_text(tmp_path / "ours", "x")
    assert (tmp_path / "ours").stat().st_mode == (tmp_path / "plain").stat().st_mode


def test_netcdf_carries_its_conventions_and_history(tmp_path):
    dataset = small_dataset()
    write_dataset(dataset, tmp_path / "a.nc")
    with xr.open_dataset(tmp_path / "a.nc") as back:
        assert back.attrs["Conventions"] == "CF-1.11 ACDD-1.3"
        assert "ocean_sound" in back.attrs["history"]
        assert back.attrs["date_created"].endswith("Z")
        assert back.attrs["title"] == "invented"
        for name in dataset.variables:
            np.testing.assert_array_equal(back[name].values, dataset[name].values)
            assert dict(back[name].attrs) == dict(dataset[name].attrs)
    assert dataset.attrs == {"title": "invented"}


def test_history_grows(tmp_path):
    write_dataset(small_dataset().assign_attrs(history="earlier"), tmp_path / "a.nc")
    with xr.open_dataset(tmp_path / "a.nc") as back:
        first, second = back.attrs["history"].split("\n")
    assert first == "earlier"
    assert "written by ocean_sound" in second


def test_a_netcdf_that_fails_leaves_nothing(tmp_path):
    with pytest.raises(OutputError, match="does not exist"):
        write_dataset(small_dataset(), tmp_path / "no" / "a.nc")
    bad = xr.Dataset({"x": ("level", [object(), object()])})
    with pytest.raises((TypeError, ValueError), match="object"):
        write_dataset(bad, tmp_path / "a.nc")
    assert names(tmp_path) == []


def test_csv_of_all_kinds(tmp_path):
    goal = tmp_path / "a.csv"
    write_csv(
        goal,
        {
            "depth": np.array([0.1, np.nan]),
            "turns": np.array([1, 2]),
            "shadow": np.array([True, False]),
            "time": np.array(["2026-01-31T12:00:00", "NaT"], "datetime64[s]"),
            "remark": ["plain", 'a "quoted", one'],
        },
        preamble={"cast_id": "A1", "latitude": np.nan, "longitude": 5.5},
    )
    assert goal.read_text() == (
        "# cast_id: A1\n# longitude: 5.5\n"
        "depth [m],turns,shadow,time,remark\n"
        "0.1,1,True,2026-01-31T12:00:00Z,plain\n"
        ',2,False,,"a ""quoted"", one"\n'
    )


@pytest.mark.parametrize("columns", [{}, {"depth": [1.0], "x": [1.0, 2.0]}, {"depth": [[1.0]]}])
def test_csv_needs_columns_of_one_length(tmp_path, columns):
    with pytest.raises(InputError, match="one-dimensional and equally long"):
        write_csv(tmp_path / "a.csv", columns)
    assert names(tmp_path) == []


def test_checksum(tmp_path):
    (tmp_path / "a").write_bytes(b"abc")
    # FIPS 180-2, appendix B.1: SHA-256 of 'abc'
    assert checksum(tmp_path / "a") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    assert checksum(tmp_path / "a") == hashlib.sha256(b"abc").hexdigest()
    with pytest.raises(InputError, match=r"missing: can't be read: No such file"):
        checksum(tmp_path / "missing")
