"""Building an archive: nothing lost, nothing corrupted, the same whoever does the work."""

from __future__ import annotations

import os
import subprocess
import sys
import zipfile

import netCDF4
import numpy as np
import pytest

from ocean_sound.archive import build_archive, building, inputs, open_archive
from ocean_sound.archive.journal import journal_folder, locked
from ocean_sound.casts import Cast, CastBlock, read_casts
from ocean_sound.errors import CastFileError, InputError, OutputError
from ocean_sound.profile import Profile


@pytest.fixture
def small_blocks(monkeypatch):
    monkeypatch.setattr(inputs, "MOST_FILES", 5)


def leftovers(folder):
    return [path.name for path in folder.iterdir() if path.name.startswith(".")]


# --- what is in it


def test_every_value_is_read_back(tmp_path, casts, small_blocks):
    folder, written = casts
    built = build_archive([folder], tmp_path / "a.nc", workers=0)
    assert (built.casts, built.levels, built.files, built.left_out) == (12, 12 * 40, 12, ())
    with open_archive(tmp_path / "a.nc") as archive:
        assert archive.id == tuple(written)
        for cast in archive:
            for name, column in written[cast.id].items():
                assert np.array_equal(cast.values[name], column)
        assert list(archive.time) == [np.datetime64("2024-01-01", "ns") + np.timedelta64(n, "h") for n in range(12)]
    assert leftovers(tmp_path) == []


def test_a_cast_comes_back_as_it_was_read_and_its_profile_as_it_would_be_made(tmp_path, casts):
    folder, _ = casts
    build_archive([folder], tmp_path / "a.nc", workers=0, check=False)
    with open_archive(tmp_path / "a.nc") as archive:
        for path, back in zip(sorted(folder.iterdir()), archive, strict=True):
            (cast,) = read_casts(path)
            assert {name: list(column) for name, column in back.values.items()} == {
                name: list(column) for name, column in cast.values.items()
            }
            assert (back.time, back.latitude, back.longitude) == (cast.time, cast.latitude, cast.longitude)
            assert (back.notes, dict(back.attributes)) == (cast.notes, dict(cast.attributes))
        profile, made = archive.profile(3), Profile.from_cast(archive[3])
        measured = slice(1 if made.surface_assumed else 0, None)
        assert np.array_equal(profile.depth, made.depth[measured])
        assert np.array_equal(profile.speed, made.speed[measured])
        assert np.allclose(profile.uncertainty, made.uncertainty[measured], rtol=1e-12)
        assert archive.column("sonic_layer_depth")[3] == made.features().sonic_layer_depth


def test_flags_are_kept_and_a_bad_value_has_no_speed(tmp_path):
    (tmp_path / "a.csv").write_text(
        "depth [m],temperature [degC],salinity [PSS-78]\n0,12,35\n5,99.9,35\n10,11.9,35\n20,11.8,35\n30,11.7,35\n"
    )
    build_archive([tmp_path / "a.csv"], tmp_path / "a.nc", workers=0)
    with open_archive(tmp_path / "a.nc") as archive:
        assert archive[0].values["temperature"][1] == 99.9
        assert archive[0].flags["temperature"][1] == 4
        assert np.isfinite(archive.columns(0)["sound_speed"]).tolist() == [True, False, True, True, True]
        assert "temperature" in archive.texts(0)["notes"]


def test_a_measured_speed_stands_beside_the_computed_one_and_depths_beside_pressures(tmp_path):
    (tmp_path / "both.csv").write_text(
        "pressure [dbar],depth [m],temperature [degC],salinity [PSS-78],sound speed [m/s]\n"
        "0,0,12,35,1500\n50,49,11.9,35,1501\n100,99,11.8,35,1502\n"
    )
    (tmp_path / "speed.csv").write_text("depth [m],sound speed [m/s]\n0,1500\n10,1499.5\n20,1499\n")
    (tmp_path / "warm.csv").write_text("pressure [dbar],temperature [degC]\n0,15\n10,14.9\n1000,4\n")
    built = build_archive([tmp_path], tmp_path / "a.nc", workers=0)
    with open_archive(tmp_path / "a.nc") as archive:
        both, speed, warm = (archive.columns(index) for index in range(3))
        assert both["measured_sound_speed"].tolist() == [1500, 1501, 1502]
        assert np.allclose(both["sound_speed"], [1496.9, 1497.4, 1497.8], atol=0.6)
        assert both["depth"].tolist() == [0, 49, 99]
        assert np.allclose(both["depth_from_pressure"][1:], [49.6, 99.2], atol=0.2)
        assert np.allclose(archive.profile(0).depth[1:], both["depth_from_pressure"][1:])
        assert speed["sound_speed"].tolist() == speed["measured_sound_speed"].tolist() == [1500, 1499.5, 1499]
        assert archive[1].values["sound_speed"].tolist() == [1500, 1499.5, 1499]
        # without a salinity there is no speed, but it is there, with the reason and a depth
        assert np.isnan(warm["sound_speed"]).all()
        assert "salinity" in archive.texts(2)["speed_notes"]
        assert archive.deepest[2] == pytest.approx(990.2, abs=1.5)
        assert "depth" not in archive[2].values
        assert archive.column("depth_source").tolist() == [0, 0, 2]
        assert archive.column("equation").tolist() == ["teos10", "", ""]
    assert built.without_speed == 1


def test_what_cannot_be_read_is_named_and_counts_add_up(tmp_path, casts, small_blocks):
    folder, _ = casts
    (folder / "notes.txt").write_text("dear diary\n")
    (folder / "c0003.csv").write_bytes(b"")
    (folder / "broken.nc").write_bytes(b"\x89HDF\r\n\x1a\n" + b"\0" * 100)
    with zipfile.ZipFile(folder / "some.zip", "w") as packed:
        packed.write(folder / "c0001.csv", "in/zipped.csv")
        packed.writestr("in/readme.txt", "hello")
    built = build_archive([folder], tmp_path / "a.nc", workers=0)
    named = {(which, cast): why for which, cast, why in built.left_out}
    assert built.casts == 12
    assert set(named) == {
        ("casts/notes.txt", ""), ("casts/c0003.csv", ""), ("casts/broken.nc", ""), ("casts/some.zip", "in/readme.txt")
    }  # fmt: skip
    assert named["casts/c0003.csv", ""] == "the file is empty"
    assert "cut short or damaged" in named["casts/broken.nc", ""]
    with open_archive(tmp_path / "a.nc") as archive:
        assert "casts/some.zip/in/zipped.csv" in archive.source
        assert set(map(tuple, archive.left_out())) == {(*key, why) for key, why in named.items()}
        heard = {source.partition(".csv")[0].removesuffix("/in/zipped") for source in archive.source}
        assert len(heard) == 12


def test_files_of_one_name_in_several_folders_are_told_apart(tmp_path, invent):
    for number in range(3):
        (tmp_path / "in" / f"s{number}").mkdir(parents=True)
        invent.cast(tmp_path / "in" / f"s{number}" / "ctd.csv", seed=number, time=f"2024-01-0{number + 1}T00:00:00")
    built = build_archive([tmp_path / "in"], tmp_path / "a.nc", workers=0)
    with open_archive(tmp_path / "a.nc") as archive:
        assert archive.source == ("in/s0/ctd.csv", "in/s1/ctd.csv", "in/s2/ctd.csv")
        assert archive.id == ("ctd", "ctd (2)", "ctd (3)")
    assert len(set(built.duplicates)) == 0


def test_settings_beside_a_cast_are_obeyed_and_are_no_input(tmp_path):
    (tmp_path / "a.csv").write_text("depth [m],temperature [degC],salinity [PSS-78]\n0,12,35\n10,11,35\n")
    (tmp_path / "a.csv.toml").write_text("latitude = 54.5\nlongitude = 7.0\n")
    built = build_archive([tmp_path], tmp_path / "a.nc", workers=0)
    assert (built.files, built.left_out) == (1, ())
    with open_archive(tmp_path / "a.nc") as archive:
        assert archive.latitude.tolist() == [54.5]


def test_checksums_are_those_of_the_files(tmp_path, casts):
    folder, _ = casts
    build_archive([folder], tmp_path / "a.nc", workers=0)
    digests = subprocess.run(
        ["sha256sum", *sorted(map(str, folder.iterdir()))], capture_output=True, text=True, check=True
    ).stdout.split()[::2]
    with open_archive(tmp_path / "a.nc") as archive:
        assert archive.column("source_checksum").tolist() == digests


def test_a_large_file_is_parted(tmp_path, casts, monkeypatch, invent):
    from ocean_sound.archive import working

    folder, _ = casts
    build_archive([folder], tmp_path / "a.nc", workers=0)
    monkeypatch.setattr(working, "MOST_LEVELS", 100)
    build_archive([folder], tmp_path / "b.nc", workers=0)
    assert invent.differences(tmp_path / "a.nc", tmp_path / "b.nc") == []


def test_no_value_depends_on_which_casts_are_worked_on_together(tmp_path, casts, monkeypatch, invent):
    """Casts with flags of depth, of pressure, of both or of neither: each alone, in twos, and all at once."""
    from ocean_sound.archive import working

    folder, _ = casts
    rows = "".join(f"{level},{12 - level / 50},35.1,{4 if level % 3 == 2 else 1}\n" for level in range(1, 40))
    for number, of in enumerate(("depth_flag", "pressure_flag", "temperature_flag")):
        first = "pressure [dbar]" if of == "pressure_flag" else "depth [m]"
        head = f"# latitude: 4{number}\n# longitude: 5\n{first},temperature [degC],salinity [PSS-78],{of}\n"
        (folder / f"c000{number}a.csv").write_text(head + rows)
    build_archive([folder], tmp_path / "a.nc", workers=0)
    for number, most in enumerate((1, 80, 130)):
        monkeypatch.setattr(working, "MOST_LEVELS", most)
        build_archive([folder], tmp_path / f"{number}.nc", workers=0)
        assert invent.differences(tmp_path / "a.nc", tmp_path / f"{number}.nc") == []
    with open_archive(tmp_path / "a.nc") as archive:
        flags = {name: archive.columns(index).get("depth_flag") for index, name in enumerate(archive.column("cast_id"))}
    assert set(flags["c0000a"]) == set(flags["c0001a"]) == {1, 4}


def test_a_cast_that_trips_the_code_does_not_cost_the_others(tmp_path, casts, monkeypatch):
    from ocean_sound.archive import working

    folder, _ = casts
    whole = working.speeds_of_block

    def trips(block: CastBlock, **options):
        if "c0005" in block.id:
            raise ZeroDivisionError("a trap")
        return whole(block, **options)

    monkeypatch.setattr(working, "speeds_of_block", trips)
    built = build_archive([folder], tmp_path / "a.nc", workers=0)
    assert built.casts == 11
    assert built.left_out == (("casts/c0005.csv", "c0005", "a fault of ocean_sound: ZeroDivisionError: a trap"),)


def test_a_file_that_trips_a_reader_does_not_cost_the_others(tmp_path, casts, monkeypatch):
    from ocean_sound.archive import working

    folder, _ = casts
    alone = working.read_blocks

    def many(files):
        raise KeyError("a trap")
        yield

    def one(path):
        if path.endswith("c0005.csv"):
            raise KeyError("a trap")
        return alone(path)

    monkeypatch.setattr(working, "read_contents", many)
    monkeypatch.setattr(working, "read_blocks", one)
    built = build_archive([folder], tmp_path / "a.nc", workers=0)
    assert built.casts == 11
    assert built.left_out == (("casts/c0005.csv", "", "a fault of ocean_sound itself: KeyError: 'a trap'"),)


# --- duplicates


def test_duplicates_are_marked_and_near_ones_listed(tmp_path, invent):
    folder = tmp_path / "in"
    folder.mkdir()
    invent.cast(folder / "a.csv", seed=1)
    invent.cast(folder / "b.csv", seed=1, time="2024-01-01T00:00:40", latitude=40.0005)  # the same, passed on
    invent.cast(folder / "c.csv", seed=2)  # another at the same place and time
    invent.cast(folder / "d.csv", seed=1, time="2024-01-01T00:02:00")  # later
    invent.cast(folder / "e.csv", seed=1, latitude=40.01)  # elsewhere
    built = build_archive([folder], tmp_path / "a.nc", workers=0)
    assert built.duplicates == (("b", "a"),)
    assert built.near == (("c", "a"),)
    with open_archive(tmp_path / "a.nc") as archive:
        assert archive.column("duplicate_of").tolist() == [-1, 0, -1, -1, -1]
        assert archive.column("near_duplicate_of").tolist() == [-1, -1, 0, -1, -1]


def test_duplicates_are_found_across_the_date_line(tmp_path, invent):
    folder = tmp_path / "in"
    folder.mkdir()
    invent.cast(folder / "a.csv", seed=1, longitude=179.9998)
    invent.cast(folder / "b.csv", seed=1, longitude=-179.9998)
    assert build_archive([folder], tmp_path / "a.nc", workers=0).duplicates == (("b", "a"),)


# --- who does it


def test_the_content_does_not_depend_on_workers(tmp_path, casts, small_blocks, invent):
    folder, _ = casts
    (folder / "notes.txt").write_text("dear diary\n")
    for number in (0, 1, 2):
        build_archive([folder], tmp_path / f"{number}.nc", workers=number)
    assert invent.differences(tmp_path / "0.nc", tmp_path / "1.nc") == []
    assert invent.differences(tmp_path / "0.nc", tmp_path / "2.nc") == []


def test_a_dask_cluster_by_its_address_gives_the_same(tmp_path, casts, small_blocks, invent):
    distributed = pytest.importorskip("distributed")
    folder, _ = casts
    build_archive([folder], tmp_path / "0.nc", workers=0)
    with distributed.LocalCluster(
        n_workers=1, threads_per_worker=2, processes=False, protocol="tcp", dashboard_address=None
    ) as cluster:
        assert cluster.scheduler_address.startswith("tcp://")
        build_archive([folder], tmp_path / "1.nc", scheduler=cluster.scheduler_address)
    assert invent.differences(tmp_path / "0.nc", tmp_path / "1.nc") == []


def test_compressed_is_the_same_but_smaller(tmp_path, invent):
    folder = tmp_path / "casts"
    invent.folder(folder, 5, levels=2000)
    build_archive([folder], tmp_path / "0.nc", workers=0)
    build_archive([folder], tmp_path / "1.nc", workers=0, compression=4)
    assert invent.differences(tmp_path / "0.nc", tmp_path / "1.nc") == ["@plan_checksum"]
    assert (tmp_path / "1.nc").stat().st_size < (tmp_path / "0.nc").stat().st_size
    with netCDF4.Dataset(tmp_path / "1.nc") as file:
        assert file.variables["temperature"].filters()["complevel"] == 4


def test_progress_is_told(tmp_path, casts, small_blocks):
    folder, _ = casts
    steps = []
    build_archive([folder], tmp_path / "a.nc", workers=0, progress=steps.append)
    assert [step.stage for step in steps] == ["casts"] * 3 + ["archive"] * 3
    assert [step.share for step in steps][2::3] == [1.0, 1.0]
    assert steps[-1].casts == 12


# --- an existing archive


def test_an_existing_archive_is_replaced_only_when_told(tmp_path, casts, invent):
    folder, _ = casts
    build_archive([folder / "c0000.csv"], tmp_path / "a.nc", workers=0)
    before = (tmp_path / "a.nc").read_bytes()
    with pytest.raises(OutputError, match="exists already"):
        build_archive([folder], tmp_path / "a.nc", workers=0)
    assert (tmp_path / "a.nc").read_bytes() == before
    assert build_archive([folder], tmp_path / "a.nc", workers=0, replace=True).casts == 12


def test_appending_gives_what_one_build_would(tmp_path, casts, invent):
    folder, _ = casts
    first, second = sorted(folder.iterdir())[:5], sorted(folder.iterdir())[5:]
    (tmp_path / "diary.txt").write_text("dear diary\n")
    build_archive([*first, tmp_path / "diary.txt"], tmp_path / "a.nc", workers=0, title="Mine")
    built = build_archive(second, tmp_path / "a.nc", workers=0, append=True)
    assert (built.casts, built.files, len(built.left_out)) == (12, 7, 1)
    build_archive([*first, tmp_path / "diary.txt", *second], tmp_path / "b.nc", workers=0, title="Mine")
    differ = invent.differences(tmp_path / "a.nc", tmp_path / "b.nc")
    assert differ == ["@plan_checksum"]
    with netCDF4.Dataset(tmp_path / "a.nc") as file:
        assert len(file.history.splitlines()) == 2


def test_appending_what_is_there_marks_it(tmp_path, casts):
    folder, _ = casts
    build_archive([folder], tmp_path / "a.nc", workers=0)
    built = build_archive([folder / "c0002.csv"], tmp_path / "a.nc", workers=0, append=True)
    assert built.casts == 13
    assert built.duplicates == (("c0002 (2)", "c0002"),)


def test_the_archive_itself_is_no_input(tmp_path, casts):
    folder, _ = casts
    build_archive([folder], folder / "a.nc", workers=0)
    assert build_archive([folder], folder / "a.nc", workers=0, replace=True).files == 12


# --- interruptions


class StopError(Exception):
    pass


def interrupted(folder, output, after, **options):
    """A build that ends in the middle."""

    def stop(step):
        if step.casts >= after:
            raise StopError

    with pytest.raises(StopError):
        build_archive([folder], output, workers=0, progress=stop, **options)


def test_finished_work_is_not_done_again(tmp_path, casts, small_blocks, invent, monkeypatch):
    folder, _ = casts
    build_archive([folder], tmp_path / "whole.nc", workers=0)
    interrupted(folder, tmp_path / "a.nc", 10)
    assert not (tmp_path / "a.nc").exists()
    parts = sorted(journal_folder(tmp_path / "a.nc").glob("*.part"))
    assert len(parts) == 2
    changed = [part.stat().st_mtime_ns for part in parts]
    seen = []

    def look(step):
        if step.stage == "archive" and not seen:
            seen.extend(part.stat().st_mtime_ns for part in parts)

    build_archive([folder], tmp_path / "a.nc", workers=0, resume=True, progress=look)
    assert seen == changed
    assert invent.differences(tmp_path / "a.nc", tmp_path / "whole.nc") == []
    assert leftovers(tmp_path) == []


def test_a_part_that_was_damaged_is_made_again(tmp_path, casts, small_blocks, invent):
    folder, _ = casts
    build_archive([folder], tmp_path / "whole.nc", workers=0)
    interrupted(folder, tmp_path / "a.nc", 10)
    part = next(journal_folder(tmp_path / "a.nc").glob("*.part"))
    part.write_bytes(part.read_bytes()[:1000])
    build_archive([folder], tmp_path / "a.nc", workers=0, resume=True)
    assert invent.differences(tmp_path / "a.nc", tmp_path / "whole.nc") == []


def test_resume_wants_the_same_inputs_and_settings(tmp_path, casts, small_blocks):
    folder, _ = casts
    interrupted(folder, tmp_path / "a.nc", 10)
    with pytest.raises(OutputError, match="other inputs or settings"):
        build_archive([folder], tmp_path / "a.nc", workers=0, resume=True, equation="mackenzie")
    os.utime(folder / "c0000.csv", (1, 1))
    with pytest.raises(OutputError, match="other inputs or settings"):
        build_archive([folder], tmp_path / "a.nc", workers=0, resume=True)
    assert build_archive([folder], tmp_path / "a.nc", workers=0).casts == 12


def test_resume_with_nothing_to_go_on_with_begins(tmp_path, casts):
    folder, _ = casts
    assert build_archive([folder], tmp_path / "a.nc", workers=0, resume=True).casts == 12
    # and says what there is where all is done
    assert build_archive([folder], tmp_path / "a.nc", workers=0, resume=True).casts == 12


def test_a_journal_left_by_a_build_that_was_done_is_removed(tmp_path, casts, monkeypatch):
    folder, _ = casts
    with monkeypatch.context() as patched:
        patched.setattr(building.Journal, "remove", lambda _: None)
        build_archive([folder], tmp_path / "a.nc", workers=0)
    assert journal_folder(tmp_path / "a.nc").exists()
    assert build_archive([folder], tmp_path / "a.nc", workers=0, resume=True).casts == 12
    assert leftovers(tmp_path) == []


def test_two_builds_of_one_archive_do_not_meet(tmp_path, casts):
    folder, _ = casts
    with locked(tmp_path / "a.nc"), pytest.raises(OutputError, match="being built by another process"):
        build_archive([folder], tmp_path / "a.nc", workers=0)
    assert build_archive([folder], tmp_path / "a.nc", workers=0).casts == 12


def test_an_input_that_vanishes_is_left_out(tmp_path, casts, small_blocks, monkeypatch):
    folder, _ = casts
    (folder / "loose.csv").symlink_to(folder / "nowhere.csv")

    def vanish(step):
        (folder / "c0011.csv").unlink(missing_ok=True)

    built = build_archive([folder], tmp_path / "a.nc", workers=0, progress=vanish)
    assert built.casts == 11
    left = {which: why for which, _, why in built.left_out}
    assert set(left) == {"casts/c0011.csv", "casts/loose.csv"}
    assert "No such file" in left["casts/c0011.csv"]


def test_a_worker_that_dies_is_told_and_its_build_resumed(tmp_path, casts, small_blocks, invent):
    folder, _ = casts
    build_archive([folder], tmp_path / "whole.nc", workers=0)
    (tmp_path / "build.py").write_text(
        "import os, sys\n"
        "from ocean_sound import cli\n"
        "from ocean_sound.archive import inputs\n"
        "inputs.MOST_FILES = 5\n"
        "if __name__ == '__main__':\n"
        "    sys.exit(cli.run(sys.argv[1:]))\n"
        "else:  # a worker, which meets its end\n"
        "    from ocean_sound.archive import working\n"
        "    whole = working.read_contents\n"
        "    def trap(files):\n"
        "        files = list(files)\n"
        "        if any('c0005' in path for path, _ in files):\n"
        "            os._exit(9)\n"
        "        return whole(files)\n"
        "    working.read_contents = trap\n"
    )
    arguments = ["archive", "build", folder, "-o", tmp_path / "a.nc", "--workers", "1"]
    done = subprocess.run(
        [sys.executable, *map(str, [tmp_path / "build.py", *arguments])], capture_output=True, text=True, check=False
    )
    assert done.returncode == 1
    assert "a worker died at block 2" in done.stderr
    assert "--resume goes on with it" in done.stderr
    assert done.stderr.count("\n") == 1
    assert not (tmp_path / "a.nc").exists()
    build_archive([folder], tmp_path / "a.nc", workers=0, resume=True)
    assert invent.differences(tmp_path / "a.nc", tmp_path / "whole.nc") == []


@pytest.mark.parametrize(("limit", "workers"), [(20_000, 0), (20_000, 1), (60_000, 0)])
def test_a_full_disk_is_told_and_leaves_the_old_archive(tmp_path, casts, small_blocks, limit, workers):
    """The disk is full for a part (two processes), or only for the archive: files may not grow beyond a limit."""
    folder, _ = casts
    build_archive([folder / "c0000.csv"], tmp_path / "a.nc", workers=0)
    before = (tmp_path / "a.nc").read_bytes()
    code = (
        "import resource, signal, sys\n"
        "from ocean_sound import cli\n"
        "from ocean_sound.archive import inputs\n"
        "inputs.MOST_FILES = 5\n"
        "if __name__ == '__main__':\n"
        "    signal.signal(signal.SIGXFSZ, signal.SIG_IGN)\n"
        f"    resource.setrlimit(resource.RLIMIT_FSIZE, ({limit}, {limit}))\n"
        "    sys.exit(cli.run(sys.argv[1:]))\n"
    )
    (tmp_path / "build.py").write_text(code)
    arguments = ["archive", "build", folder, "-o", tmp_path / "a.nc", "--replace", "--workers", workers]
    done = subprocess.run(
        [sys.executable, *map(str, [tmp_path / "build.py", *arguments])], capture_output=True, text=True, check=False
    )
    assert done.returncode == 1, done.stderr
    assert "can't be written" in done.stderr
    assert done.stderr.count("\n") == 1, done.stderr
    assert (tmp_path / "a.nc").read_bytes() == before
    built = build_archive([folder], tmp_path / "a.nc", workers=0, replace=True, resume=True)
    assert built.casts == 12
    assert leftovers(tmp_path) == []


# --- what is refused


def test_impossible_options_are_told_before_any_work(tmp_path, casts):
    folder, _ = casts
    for options, match in (
        ({"equation": "teos"}, "teos"),
        ({"thresholds": "pond"}, "pond"),
        ({"salinity": -1.0}, "salinity is -1"),
        ({"compression": 11}, "compression is 11"),
        ({"workers": -1}, "-1 workers"),
        ({"replace": True, "append": True}, "one of --replace and --append"),
        ({"attributes": {"history": "x"}}, "'history' follows from the archive"),
    ):
        with pytest.raises(InputError, match=match):
            build_archive([folder], tmp_path / "a.nc", **{"workers": 0, **options})
    with pytest.raises(InputError, match=r"must end in \.nc"):
        build_archive([folder], tmp_path / "a.csv", workers=0)
    with pytest.raises(CastFileError, match="no such file or folder"):
        build_archive([tmp_path / "nowhere"], tmp_path / "a.nc", workers=0)
    (tmp_path / "empty").mkdir()
    with pytest.raises(CastFileError, match="no file to read there"):
        build_archive([tmp_path / "empty"], tmp_path / "a.nc", workers=0)
    (tmp_path / "empty" / "diary.txt").write_text("dear diary")
    with pytest.raises(InputError, match="nothing to write: none of 1 files gave a cast"):
        build_archive([tmp_path / "empty"], tmp_path / "a.nc", workers=0)
    assert leftovers(tmp_path) == []


def test_real_casts_are_all_there(tmp_path, real_data):
    folders = [real_data / name for name in ("argo", "exchange", "csv")]
    built = build_archive(folders, tmp_path / "a.nc", workers=0)
    files = [path for folder in folders for path in folder.rglob("*") if path.is_file()]
    assert built.files == len(files)
    assert all(which and cast and why for which, cast, why in built.left_out)  # no file as a whole
    expected = {}
    for path in files:
        for cast in read_casts(path):
            expected[cast.id, cast.source] = cast
    with open_archive(tmp_path / "a.nc") as archive:
        assert len(archive) == len(expected)
        for cast in archive:
            known = expected[cast.id.partition(" (")[0], cast.source.partition("/")[2]]
            assert set(cast.values) == set(known.values)
            assert all(np.array_equal(cast.values[name], known.values[name], equal_nan=True) for name in known.values)
            assert abs(cast.time - known.time) <= np.timedelta64(1, "us") or np.isnat(known.time)


def test_all_that_a_cast_can_hold_comes_back(tmp_path, casts, monkeypatch):
    """Flags, uncertainties, origins, attributes and notes, beside casts in other parts that have none of them."""
    from ocean_sound.archive import working

    folder, _ = casts
    monkeypatch.setattr(inputs, "MOST_FILES", 1)
    rich = Cast(
        id="Ä/1",
        values={"depth": [0.0, 5.0, 4.0], "temperature": [12.0, 11.0, np.nan], "sound_speed": [1500.0, 1499.0, 1498.0]},
        flags={"temperature": [1, 3, 9], "sound_speed": [2, 4, 1]},
        uncertainties={"depth": [0.1, np.nan, 0.3]},
        origins={"sound_speed": [1, 0, 2]},
        source="c0001.csv",
        attributes={"platform": 'R/V "Nobody"\n', "fall rate": "ü"},
        notes=("one", "two"),
        time="1999-12-31T23:59:59.123456",
        latitude=-0.125,
        longitude=179.75,
    )
    many = working.read_contents

    def mixed(files):
        files = list(files)
        yield from [CastBlock.from_casts([rich])] if "c0001" in files[0][0] else many(files)

    monkeypatch.setattr(working, "read_contents", mixed)
    build_archive([folder / "c0000.csv", folder / "c0001.csv"], tmp_path / "a.nc", workers=0, check=False)
    with open_archive(tmp_path / "a.nc") as archive:
        plain, back = archive
    for kind in ("values", "flags", "uncertainties", "origins"):
        given, found = getattr(rich, kind), getattr(back, kind)
        for name, column in given.items():
            assert np.array_equal(found[name], column, equal_nan=True), (kind, name)
        assert set(found) - set(given) <= ({"depth"} if kind == "flags" else set())
    for name in ("id", "time", "latitude", "longitude", "notes"):
        assert getattr(back, name) == getattr(rich, name)
    assert dict(back.attributes) == dict(rich.attributes)
    assert set(plain.values) == {"pressure", "temperature", "salinity"}
    assert {int(flag) for column in plain.flags.values() for flag in column} == {2}
    assert (dict(plain.uncertainties), dict(plain.origins)) == ({}, {})
