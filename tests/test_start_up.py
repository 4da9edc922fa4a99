"""What each way into the package may import, and that compiled kernels need no writable home."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

HEAVY = ("numba", "xarray", "matplotlib", "pandas", "scipy", "dask", "netCDF4", "h5py", "pyproj", "pydantic")


def loaded_after(code):
    """Which heavy libraries a fresh interpreter has loaded after running some code."""
    report = f"\nimport sys; print(*[name for name in {HEAVY} if name in sys.modules], file=sys.stderr)"
    done = subprocess.run([sys.executable, "-c", code + report], capture_output=True, text=True, check=True)
    return set(done.stderr.split("\n")[-2].split()), done.stdout


def command(*arguments):
    return f"from ocean_sound.cli import run; assert run({list(arguments)!r}) == 0"


def test_importing_the_package_loads_nothing_heavy():
    assert loaded_after("import ocean_sound, sys; assert 'numpy' not in sys.modules")[0] == set()


@pytest.mark.parametrize(
    "arguments",
    [["--help"], ["rays", "--help"], ["sensors", "--help"], ["cast", "-h"], ["speed", "--help"], ["--version"]],
)
def test_help_loads_nothing_heavy(arguments):
    assert loaded_after(command(*arguments))[0] == set()


def test_speed_loads_nothing_heavy():
    state = ["--temperature", "10", "--salinity", "35", "--depth", "100", "--latitude", "45"]
    assert loaded_after(command("speed", *state))[0] == set()


def test_cast_loads_nothing_heavy(tmp_path):
    (tmp_path / "a.csv").write_text("depth [m],temperature [degC],salinity [PSS-78]\n0,10,35\n50,9,35\n")
    assert loaded_after(command("cast", str(tmp_path / "a.csv")))[0] == set()


def test_rays_load_only_the_compiler(tmp_path):
    (tmp_path / "a.csv").write_text("depth [m],sound_speed [m/s]\n0,1500\n50,1490\n")
    arguments = ["rays", str(tmp_path / "a.csv"), "--source-depth", "10", "--max-range", "500", "--shadow"]
    assert loaded_after(command(*arguments))[0] <= {
        "numba",
        "scipy",
    }  # scipy itself is light; numba looks at its version


def test_kernels_work_where_nothing_is_writable(tmp_path):
    """Root may write anywhere, so the cache folder is put where a file is in the way."""
    blocked = tmp_path / "home"
    blocked.write_text("a file, not a folder")
    code = (
        "from ocean_sound import _numba\n"
        "assert _numba.CACHE_FOLDER is None\n"
        "from ocean_sound.rays._kernels import asinh_ratio\n"
        "print(asinh_ratio(1e-9))"
    )
    surroundings = os.environ | {"HOME": str(blocked), "XDG_CACHE_HOME": str(blocked / "cache")}
    surroundings.pop("NUMBA_CACHE_DIR", None)
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, env=surroundings, check=False)
    assert done.returncode == 0, done.stderr
    assert float(done.stdout) == 1.0


def test_kernels_are_cached_by_their_source_and_lane(tmp_path):
    code = "from ocean_sound import _numba; print(_numba.CACHE_FOLDER)"

    def folder(**extra):
        surroundings = os.environ | {"XDG_CACHE_HOME": str(tmp_path)} | extra
        surroundings.pop("NUMBA_BOUNDSCHECK", None) if not extra else None
        return subprocess.run(
            [sys.executable, "-c", code], capture_output=True, text=True, env=surroundings, check=True
        ).stdout.strip()

    plain, checked = folder(), folder(NUMBA_BOUNDSCHECK="1")
    assert plain != checked
    assert plain == folder()
    assert Path(plain).is_dir()
