"""`ocean-sound archive` as a person meets it."""

from __future__ import annotations

import json
import os
import pty
import subprocess
import sys

import pytest

from ocean_sound.archive import open_archive
from ocean_sound.cli import run


@pytest.fixture
def ask(capsys):
    """Run a command line in this process; returns status, standard output, standard error."""

    def asked(*arguments):
        capsys.readouterr()
        status = run([str(argument) for argument in arguments])
        told = capsys.readouterr()
        return status, told.out, told.err

    return asked


@pytest.fixture
def casts(tmp_path, invent):
    invent.folder(tmp_path / "casts", 4)
    return tmp_path / "casts"


@pytest.mark.parametrize("command", [[], ["build"], ["list"], ["extract"]])
def test_each_has_help_that_begins_with_examples(ask, command):
    status, out, err = ask("archive", *command, "--help")
    assert (status, err) == (0, "")
    assert "ocean-sound archive" in out
    assert "Examples:" in out
    assert out.index("Examples:") < out.index("Options:")


def test_build_says_what_came_of_it(ask, casts, tmp_path):
    output, figure = tmp_path / "a.nc", tmp_path / "a.png"
    status, out, err = ask(
        "archive", "build", casts, "-o", output, "--workers", 0, "--figure", figure, "--title", "Mine"
    )
    assert (status, err) == (0, "")
    assert "a.nc: 4 casts, 160 levels, from 4 files" in out
    assert figure.read_bytes().startswith(b"\x89PNG")
    with open_archive(output) as archive:
        assert archive.attribute("title") == "Mine"


def test_what_was_left_out_is_told_with_status_3(ask, casts, tmp_path):
    (casts / "diary.txt").write_text("dear diary\n")
    status, out, err = ask("archive", "build", casts, "-o", tmp_path / "a.nc", "--workers", 0)
    assert status == 3
    assert "left out: 1" in out
    heading, columns, row = err.splitlines()
    assert heading == "left out: 1"
    assert columns.split() == ["file", "cast", "reason"]
    assert row.startswith("casts/diary.txt  (all of it)  ")


def test_json_is_one_object(ask, casts, tmp_path):
    (casts / "diary.txt").write_text("dear diary\n")
    status, out, _ = ask("archive", "build", casts, "-o", tmp_path / "a.nc", "--workers", 0, "--json")
    found = json.loads(out)
    assert (status, found["exit_status"], found["casts"], found["files"]) == (3, 3, 4, 5)
    assert found["left_out"][0]["file"] == "casts/diary.txt"
    assert found["left_out"][0]["reason"]


def test_duplicates_are_told(ask, casts, tmp_path, invent):
    (casts / "again.csv").write_bytes((casts / "c0000.csv").read_bytes())
    status, _, err = ask("archive", "build", casts, "-o", tmp_path / "a.nc", "--workers", 0)
    assert status == 0
    assert err == "note: c0000 (2) repeats c0000\n"


def test_list_and_extract(ask, casts, tmp_path):
    output = tmp_path / "a.nc"
    ask("archive", "build", casts, "-o", output, "--workers", 0, "--compress", 2, "--thresholds", "none")
    status, out, _ = ask("archive", "list", output)
    assert status == 0
    lines = out.splitlines()
    assert len(lines) == 8
    assert lines[0].split("  ")[0] == "cast"
    assert lines[2].startswith("c0000  2024-01-01 00:00:00  -60.0000  -180.0000")
    assert lines[-1] == "4 of 4 casts"
    status, out, _ = ask("archive", "list", output, "--box", 170, -90, -170, 90, "--from", "2024-01-01T01", "--json")
    found = json.loads(out)
    assert [cast["cast_id"] for cast in found["casts"]] == ["c0001"]
    assert found["casts_in_archive"] == 4
    status, out, _ = ask(
        "archive", "extract", output, "--id", "c0001", "--id", "c0003", "-o", tmp_path / "b.nc", "--json"
    )
    assert (status, json.loads(out)["levels"]) == (0, 80)
    status, out, _ = ask("archive", "list", tmp_path / "b.nc", "--depth", 100)
    assert out.splitlines()[-1] == "2 of 2 casts"


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["build", "nowhere", "-o", "a.nc"], "nowhere: no such file or folder"),
        (["build", "casts"], "Missing option '-o'"),
        (["build", "casts", "-o", "a.csv"], "must end in .nc"),
        (["build", "casts", "-o", "a.nc", "--replace", "--append"], "give one of --replace and --append"),
        (["build", "casts", "-o", "a.nc", "--equation", "teos"], "teos"),
        (["build", "casts", "-o", "a.nc", "--figure", "a.gif"], "a.gif"),
        (["build", "casts", "-o", "a.nc", "--scheduler", "nonsense"], "no dask scheduler answers"),
        (["list", "nowhere.nc"], "nowhere.nc: no such file"),
        (["bild"], "No such command 'bild'"),
    ],
)
def test_bad_input_is_one_line_and_nothing_is_written(ask, casts, tmp_path, monkeypatch, arguments, message):
    monkeypatch.chdir(tmp_path)
    status, out, err = ask("archive", *arguments)
    assert (status, out) == (2, "")
    assert message in err
    assert err.count("\n") == 1
    assert [path.name for path in tmp_path.iterdir() if path.name != "casts"] == []


def test_an_existing_archive_is_not_written_over(ask, casts, tmp_path):
    ask("archive", "build", casts, "-o", tmp_path / "a.nc", "--workers", 0)
    status, _, err = ask("archive", "build", casts, "-o", tmp_path / "a.nc", "--workers", 0)
    assert status == 2
    assert "--replace to write over it" in err


def test_a_bar_shows_on_a_terminal_only(casts, tmp_path):
    command = [
        sys.executable,
        "-m",
        "ocean_sound",
        "archive",
        "build",
        casts,
        "-o",
        tmp_path / "a.nc",
        "--workers",
        "0",
    ]
    main, side = pty.openpty()
    done = subprocess.run(list(map(str, command)), stdout=subprocess.PIPE, stderr=side, check=False, text=True)
    os.close(side)
    shown = os.read(main, 100_000).decode()
    os.close(main)
    assert done.returncode == 0, shown
    assert "reading casts" in shown
    assert "4 casts" in shown
    assert "\x1b" not in done.stdout
