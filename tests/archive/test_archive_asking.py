"""Asking an archive by place, time, depth and name, and taking casts out of it."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.archive import Wanted, build_archive, extract, open_archive
from ocean_sound.casts import read_casts
from ocean_sound.errors import CastFileError, InputError, OutputError


@pytest.fixture(scope="module")
def path(tmp_path_factory, invent):
    """Eight casts, 45 degrees apart from -180 on and a month apart, each 5 levels deeper than the one before."""
    folder = tmp_path_factory.mktemp("asking")
    (folder / "in").mkdir()
    for number in range(8):
        invent.cast(
            folder / "in" / f"c{number}.csv",
            seed=number,
            levels=10 + 5 * number,
            time=f"2024-0{number + 1}-15T12:00:00",
            latitude=10.0 * number - 40.0,
            longitude=-180.0 + 45.0 * number,
        )
    invent.cast(folder / "in" / "d.csv", seed=3, levels=25, time="2024-04-15T12:00:30", latitude=-10.0, longitude=-45.0)
    (folder / "in" / "nowhere.csv").write_text("depth [m],sound speed [m/s]\n0,1500\n10,1499\n")
    build_archive([folder / "in"], folder / "a.nc", workers=0)
    return folder / "a.nc"


@pytest.fixture
def archive(path):
    with open_archive(path) as opened:
        yield opened


def ids(archive, **wanted):
    return [archive.id[position] for position in archive.select(Wanted(**wanted))]


def test_all_and_one_by_one(archive):
    assert len(archive) == 10
    assert [cast.id for cast in archive] == list(archive.id)
    assert archive[-1].id == "nowhere"
    assert [cast.id for cast in archive[2:4]] == ["c2", "c3"]
    with pytest.raises(IndexError):
        archive[10]


def test_a_box_and_one_across_the_date_line(archive):
    assert ids(archive, box=(-100, -90, 10, 90)) == ["c2", "c3", "c4", "d"]
    assert ids(archive, box=(130, -90, -130, 90)) == ["c0", "c1", "c7"]
    assert ids(archive, box=(130, -90, -130, 0)) == ["c0", "c1"]
    assert ids(archive, box=(130, -90, 230, 90)) == ["c0", "c1", "c7"]
    assert len(ids(archive, box=(-180, -90, 180, 90))) == 9
    assert ids(archive, box=(0, -90, 0, 90)) == ["c4"]


def test_time_depth_and_names(archive):
    assert ids(archive, start="2024-07") == ["c6", "c7"]
    assert ids(archive, start="2024-02-15T12:00:00Z", end="2024-03-15T12:00") == ["c1", "c2"]
    assert ids(archive, end="2024-01-15T11:59") == []
    depths = dict(zip(archive.id, archive.deepest.tolist(), strict=True))
    assert ids(archive, depth=depths["c6"]) == ["c6", "c7"]
    assert ids(archive, ids=["c3", "nowhere"]) == ["c3", "nowhere"]
    with pytest.raises(InputError, match="no cast is named 'c9'"):
        ids(archive, ids=["c9"])


def test_what_is_asked_for_must_make_sense():
    with pytest.raises(InputError, match="south first"):
        Wanted(box=(0, 10, 10, -10))
    with pytest.raises(InputError, match="south first"):
        Wanted(box=(0, float("nan"), 10, 10))
    with pytest.raises(InputError, match="start is 'yesterday'"):
        Wanted(start="yesterday")
    with pytest.raises(InputError, match="comes after end"):
        Wanted(start="2024-02", end="2024-01")


def test_extracted_casts_are_an_archive_of_their_own(archive, tmp_path):
    positions = archive.select(Wanted(ids=["c3", "d", "c5"]))
    levels = extract(archive, positions, tmp_path / "some.nc")
    assert levels == 25 + 35 + 25
    with open_archive(tmp_path / "some.nc") as some:
        assert some.id == ("c3", "c5", "d")
        assert some.pairs("duplicate_of") == (("d", "c3"),)
        for cast, original in zip(some, (archive[int(position)] for position in positions), strict=True):
            assert all(np.array_equal(cast.values[name], column) for name, column in original.values.items())
        assert some.column("sonic_layer_depth").tolist() == archive.column("sonic_layer_depth")[positions].tolist()
        history = some.attribute("history").splitlines()
        assert "3 casts taken out of a.nc" in history[1]
    with open_archive(tmp_path / "some.nc") as some:
        extract(some, some.select(Wanted(ids=["d"])), tmp_path / "one.nc")
    with open_archive(tmp_path / "one.nc") as one:
        assert one.column("duplicate_of").tolist() == [-1]  # of a cast that is not in it


def test_extracted_tables_are_read_as_casts_again(archive, tmp_path):
    extract(archive, archive.select(Wanted(ids=["c1", "c2"])), tmp_path / "some.csv")
    lines = (tmp_path / "some.csv").read_text().splitlines()
    assert lines[0].startswith("cast_id,time,latitude [degrees_north],longitude [degrees_east],")
    assert len(lines) == 1 + 15 + 20
    back = list(read_casts(tmp_path / "some.csv"))
    assert [cast.id for cast in back] == ["c1", "c2"]
    for cast in back:
        original = archive[archive.id.index(cast.id)]
        assert np.array_equal(cast.values["temperature"], original.values["temperature"])
        assert cast.time == original.time


def test_extracting_nothing_or_to_nowhere_is_refused(archive, path, tmp_path):
    with pytest.raises(InputError, match="no cast is chosen"):
        extract(archive, np.empty(0, np.int64), tmp_path / "a.nc")
    with pytest.raises(InputError, match=r"must be \.nc or \.csv"):
        extract(archive, np.array([0]), tmp_path / "a.txt")
    with pytest.raises(OutputError, match="exists already"):
        extract(archive, np.array([0]), path)
    with pytest.raises(InputError, match="is the archive itself"):
        extract(archive, np.array([0]), path, replace=True)


def test_other_files_are_no_archives(tmp_path):
    import netCDF4

    with pytest.raises(CastFileError, match="no such file"):
        open_archive(tmp_path / "a.nc")
    (tmp_path / "text.nc").write_text("not netCDF")
    with pytest.raises(CastFileError, match="can't be read as netCDF"):
        open_archive(tmp_path / "text.nc")
    netCDF4.Dataset(tmp_path / "other.nc", "w").close()
    with pytest.raises(CastFileError, match="has no variable 'cast_id'"):
        open_archive(tmp_path / "other.nc")


def test_profiles_and_columns(archive):
    assert archive.profile(0).id == "c0"
    with pytest.raises(InputError, match="no column for each cast is named 'salt'"):
        archive.column("salt")
    assert archive.column("time").dtype == np.dtype("datetime64[ns]")
    assert np.isnat(archive.column("time")[-1])
