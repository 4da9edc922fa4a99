"""The one kernel decorator, the one door to its arrays, and where compiled kernels are kept.

Compiled code is cached on disk in a folder of the user's cache. The folder's name is a hash of all kernel files and of
the lane (compiled plainly, or with bounds checking): numba itself does not notice when a function called from another
file has changed, and would mix the lanes. Where nothing is writable, kernels are compiled anew in each process and work
all the same.
"""

from __future__ import annotations

import hashlib
import importlib
import os
import sys
import tempfile
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numba
import numpy as np
import platformdirs

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import ArrayLike, NDArray

_PACKAGE = Path(__file__).parent


def _cache_key() -> str:
    digest = hashlib.sha256()
    for path in (Path(__file__), *sorted(_PACKAGE.glob("*/_kernels*.py"))):
        digest.update(path.name.encode())
        digest.update(path.read_bytes())
    lane = "checked" if numba.config.BOUNDSCHECK else "plain"
    return f"{lane}-{digest.hexdigest()[:16]}"


def _cache_folder() -> Path | None:
    """The folder for compiled kernels, or None where it can't be written."""
    folder = platformdirs.user_cache_path("ocean_sound") / "kernels" / _cache_key()
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryFile(dir=folder):
            return folder
    except OSError:
        return None


CACHE_FOLDER = _cache_folder()


def kernel(function: Callable[..., Any]) -> Any:
    """Compile a numbers-only function: nogil, cached, and IEEE arithmetic (1/0 gives inf, never an exception).

    Never fastmath (it makes isnan(nan) false) and never parallel (threads over nogil kernels are as fast, and can't
    abort).
    """
    options = {"error_model": "numpy", "nogil": True, "fastmath": False}
    compiled = numba.njit(cache=CACHE_FOLDER is not None, **options)
    if CACHE_FOLDER is None:
        return compiled(function)
    config: Any = numba.config
    before = config.CACHE_DIR
    config.CACHE_DIR = os.fspath(CACHE_FOLDER)  # read when the decorator runs, so set just for that moment
    try:
        return compiled(function)
    finally:
        config.CACHE_DIR = before


def kernel_array(values: ArrayLike) -> NDArray[np.float64]:
    """A C-contiguous, writable float64 array, so that each kernel compiles once; copied only where it must be."""
    return np.require(values, dtype=np.float64, requirements=["C", "A", "W"])


def spare_scipy() -> None:
    """Keep numba from loading scipy.linalg, which costs a third of a short command's time; for a process of our own.

    Numba looks there once for the matrix products that no kernel of ours has. In somebody else's process their kernels
    may want them, so only the command line calls this.
    """
    blas = "scipy.linalg.cython_blas"
    if blas in sys.modules or "numba.np.arraymath" in sys.modules:
        return
    sys.modules[blas] = None  # type: ignore[assignment]  # an import of it fails at once
    try:
        importlib.import_module("numba.np.arraymath")
    finally:
        del sys.modules[blas]
