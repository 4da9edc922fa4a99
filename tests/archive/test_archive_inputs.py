"""What a build finds to read, and how it is parted."""

from __future__ import annotations

import os

import numpy as np
import pytest

from ocean_sound.archive import inputs
from ocean_sound.archive.inputs import Input, find_inputs, in_blocks
from ocean_sound.archive.parts import Part, PartFile, empty_part, text_column
from ocean_sound.errors import CastFileError, OutputError


def test_folders_are_walked_in_order_and_nothing_is_taken_twice(tmp_path):
    top = tmp_path / "top"
    for name in ("b/2.csv", "b/10.csv", "a/1.csv", ".hidden/x.csv", "b/.x.csv", "z.csv"):
        (top / name).parent.mkdir(parents=True, exist_ok=True)
        (top / name).write_text(name)
    (top / "b" / "again.csv").symlink_to(top / "b" / "2.csv")
    (top / "loop").symlink_to(top)
    os.mkfifo(top / "pipe.csv")
    found = find_inputs([top, top / "a" / "1.csv", top / "b"])
    assert [entry.name for entry in found] == ["top/z.csv", "top/a/1.csv", "top/b/10.csv", "top/b/2.csv"]
    assert found[0].size == len("z.csv")
    (single,) = find_inputs([top / "z.csv"])
    assert single.name == "z.csv"
    assert [entry.name for entry in find_inputs([top / "b"], apart_from=[top / "b" / "2.csv"])] == ["b/10.csv"]


def test_what_is_not_there_is_told(tmp_path):
    with pytest.raises(CastFileError, match="no such file or folder"):
        find_inputs([tmp_path / "x"])
    with pytest.raises(CastFileError, match="no file to read there"):
        find_inputs([tmp_path])


def test_blocks_hold_so_many_files_and_bytes(monkeypatch):
    monkeypatch.setattr(inputs, "MOST_FILES", 3)
    monkeypatch.setattr(inputs, "MOST_BYTES", 100)
    sizes = [10, 10, 10, 10, 95, 300, 10]
    blocks = in_blocks([Input(str(number), "", size, 0) for number, size in enumerate(sizes)])
    assert [[entry.size for entry in block] for block in blocks] == [[10, 10, 10], [10], [95], [300], [10]]


def test_a_part_is_read_back_whole_or_in_pieces(tmp_path):
    part = Part(
        {
            "row_size": np.array([2, 3], np.int32),
            "time": np.array(["2024-01-01", "NaT"], "datetime64[ns]"),
            "cast_id": text_column(["ä\nb", ""]),
        },
        {"depth": np.array([0.0, 1.0, np.nan, 3.0, 4.0]), "depth_flag": np.array([1, 2, 9, 3, 4], np.int8)},
        (("f", "", "why"),),
        7,
    )
    part.write(tmp_path / "a.part")
    file = PartFile(tmp_path / "a.part")
    assert file.outline == part.outline
    back = file.whole()
    for group in ("cast", "obs"):
        for name, column in getattr(part, group).items():
            found = getattr(back, group)[name]
            assert found.dtype == column.dtype
            if column.dtype.kind == "O":
                assert found.tolist() == column.tolist()
            else:
                assert np.array_equal(found, column, equal_nan=True)
    assert (back.left_out, back.files) == (part.left_out, 7)
    assert file.obs("depth", 3, 5).tolist() == [3.0, 4.0]
    empty_part().write(tmp_path / "b.part")
    assert PartFile(tmp_path / "b.part").outline.casts == 0


def test_a_damaged_part_is_told(tmp_path):
    empty_part((("a", "", "b"),)).write(tmp_path / "a.part")
    (tmp_path / "a.part").write_bytes((tmp_path / "a.part").read_bytes() + b"x")
    with pytest.raises(OutputError, match="it was damaged"):
        PartFile(tmp_path / "a.part")
    with pytest.raises(OutputError, match="can't be read back"):
        PartFile(tmp_path / "b.part")
