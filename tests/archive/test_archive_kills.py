"""Killed outright at random moments, parent and workers, and resumed: the same archive, and the old one until then."""

from __future__ import annotations

import os
import random
import signal
import subprocess
import sys
import time
from contextlib import suppress
from pathlib import Path

import pytest

from ocean_sound.archive import build_archive
from ocean_sound.archive.journal import journal_folder

KILLS = int(os.environ.get("OCEAN_SOUND_KILLS", "10"))
CASTS, FILES_A_BLOCK = 48, 3
BLOCKS = CASTS // FILES_A_BLOCK
# What a build says in its course, one line for each block read and one for each put into the archive.
LINES = 1 + 2 * BLOCKS

SCRIPT = f"""
import sys
from ocean_sound.archive import build_archive, building, inputs
from ocean_sound.errors import OceanSoundError
if __name__ == "__main__":
    inputs.MOST_FILES = {FILES_A_BLOCK}
    source, output, workers = sys.argv[1:]
    print("begun", flush=True)
    try:
        build_archive([source], output, workers=int(workers), resume=True, replace=True,
                      progress=lambda step: print(step.stage, flush=True))
    except OceanSoundError as error:
        print(error, file=sys.stderr)
        sys.exit(1)
"""


@pytest.fixture(scope="module")
def place(tmp_path_factory, invent):
    folder = tmp_path_factory.mktemp("kills")
    invent.folder(folder / "casts", CASTS, levels=300)
    invent.folder(folder / "old", 3)
    build_archive([folder / "old"], folder / "old.nc", workers=0)
    (folder / "build.py").write_text(SCRIPT)
    with run(folder, folder / "whole.nc", 2) as process:
        said, told = process.communicate(timeout=120)
    assert process.returncode == 0, told
    assert len(said.split()) == LINES
    return folder


def run(folder, output, workers):
    command = [sys.executable, folder / "build.py", folder / "casts", output, str(workers)]
    return subprocess.Popen(
        list(map(str, command)), stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, start_new_session=True
    )


def children(pid):
    """Processes that a process started: the workers, and what tracks them."""
    with suppress(OSError):
        return [int(word) for word in Path(f"/proc/{pid}/task/{pid}/children").read_text().split()]
    return []


@pytest.mark.parametrize("number", range(KILLS))
def test_the_content_is_the_same_after_a_kill(place, invent, number):
    folder = place
    draw = random.Random(number)  # noqa: S311
    output = folder / f"killed-{number}.nc"
    output.write_bytes((folder / "old.nc").read_bytes())
    workers = number % 3
    process = run(folder, output, workers)
    with process:
        for _ in range(draw.randrange(1, LINES + 1)):
            process.stdout.readline()
        time.sleep(draw.uniform(0.0, 0.02))
        victims = children(process.pid)
        victim = draw.choice([process.pid, *victims]) if victims else process.pid
        with suppress(ProcessLookupError):
            os.kill(victim, signal.SIGKILL)
        process.stdout.read()
        process.wait(60)
    assert process.returncode in {0, 1, -signal.SIGKILL}
    # until the end the old archive is there, whole
    now = "old.nc" if invent.differences(output, folder / "old.nc") == [] else "whole.nc"
    assert invent.differences(output, folder / now) == []
    with run(folder, output, 2 - workers) as again:
        _, told = again.communicate(timeout=120)
    assert again.returncode == 0, told
    assert invent.differences(output, folder / "whole.nc") == []
    assert not journal_folder(output).exists()
    assert [path.name for path in folder.iterdir() if path.name.startswith(f".killed-{number}.")] == []
