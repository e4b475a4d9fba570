"""The one decorator for hot loops, and the folder its compiled code is kept in."""

from __future__ import annotations

import hashlib
import os
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numba
import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]
Flags = npt.NDArray[np.bool_]

PACKAGE = Path(__file__).resolve().parent.parent
KERNEL_FILES = sorted(path for path in PACKAGE.rglob("*.py") if "kernel" in path.name or path.name == "elementary.py")


def sources_digest(files: list[Path]) -> str:
    """SHA-256 over the contents of the kernel sources, in the order of their names."""
    digest = hashlib.sha256()
    for path in files:
        digest.update(path.relative_to(PACKAGE).as_posix().encode())
        digest.update(path.read_bytes())
    return digest.hexdigest()


def user_cache_folder() -> Path:
    """The user's own cache folder: compiled code is pickled, so a shared temporary folder is not safe."""
    if sys.platform == "win32":
        return Path(os.environ.get("LOCALAPPDATA", Path.home() / "AppData" / "Local"))
    if sys.platform == "darwin":
        return Path.home() / "Library" / "Caches"
    return Path(os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache")


def usable(folder: Path) -> bool:
    """Whether compiled kernels can be written there; makes the folder."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe = folder / f".probe-{os.getpid()}"
        probe.write_bytes(b"")
        probe.unlink()
    except (OSError, RuntimeError):
        return False
    return True


KERNELS_DIGEST = sources_digest(KERNEL_FILES)


def choose_cache() -> bool:
    """Points the compiler at the folder of these sources; False when nothing can be written (then nothing is kept)."""
    try:
        folder = user_cache_folder() / "projector" / "numba" / KERNELS_DIGEST[:16]
    except RuntimeError:  # no home folder at all
        return False
    if os.environ.get("NUMBA_CACHE_DIR"):  # the user's own choice stands
        return usable(Path(os.environ["NUMBA_CACHE_DIR"]))
    if not usable(folder):
        return False
    setattr(numba.config, "CACHE_DIR", str(folder))  # noqa: B010 (the attribute exists only at run time)
    return True


CACHED = choose_cache()


def inlined(function: Callable[..., Any]) -> Callable[..., Any]:
    """As `kernel`, for small formulas inside lane loops: put in place by the compiler, so lanes run side by side."""
    compiled: Callable[..., Any] = numba.njit(
        cache=CACHED, nogil=True, fastmath=False, error_model="numpy", forceinline=True
    )(function)
    return compiled


def kernel(function: Callable[..., Any]) -> Callable[..., Any]:
    """Compiles a hot loop: no fastmath, no parallel reductions, the interpreter lock released (C15)."""
    compiled: Callable[..., Any] = numba.njit(
        cache=CACHED, nogil=True, fastmath=False, parallel=False, error_model="numpy", boundscheck=None
    )(function)
    return compiled
