"""The one decorator for numba kernels: compiled once, cached on disk under a key that can be trusted."""

from __future__ import annotations

import contextlib
import hashlib
import os
import shutil
import tempfile
import time
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import Any, TypeVar, cast

import numba

__all__ = ["kernel", "kernel_cache", "kernel_of_this_process"]

MONTH = 30 * 86400.0
"""After so long without use [s] the kernels of other sources are removed."""

Function = TypeVar("Function", bound=Callable[..., Any])


@cache
def kernel_cache() -> Path:
    """Return the folder of the compiled kernels.

    numba's own cache looks at one file's date and misses a change in another file that is compiled
    into it. So the folder's name is a digest of the sources of the rooms whose numbers kernels are made
    of, and of every other file that makes kernels. Where
    the user's cache folder can't be written, a temporary one serves for as long as the machine is up.
    """
    package = Path(__file__).resolve().parent.parent
    digest = hashlib.blake2b(numba.__version__.encode(), digest_size=8)
    for room in ("arm", "laws", "motion", "rig", "scores", "identify"):
        for source in sorted((package / room).glob("*.py")):
            text = source.read_bytes()
            if room in ("arm", "laws", "rig") or b"rigbench.arm.kernel" in text:
                digest.update(text)
    home = Path(os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache")
    folder = home / "rigbench" / f"kernels-{digest.hexdigest()}"
    try:
        if not folder.is_dir():
            folder.mkdir(parents=True, exist_ok=True)
            _drop_unused(folder.parent)
        os.utime(folder)
        with tempfile.TemporaryFile(dir=folder):
            return folder
    except OSError:
        return _temporary(digest.hexdigest())


def _temporary(digest: str) -> Path:
    """Return a private folder in the temporary folder, the same for all processes of this user."""
    folder = Path(tempfile.gettempdir()) / f"rigbench-{os.getuid()}-{digest}"
    folder.mkdir(mode=0o700, exist_ok=True)
    if folder.stat().st_uid != os.getuid():  # somebody else's: what lies in it is not to be run
        return Path(tempfile.mkdtemp(prefix="rigbench-kernels-"))
    return folder


def _drop_unused(home: Path) -> None:
    """Remove kernel folders of other sources that nobody has used for a month."""
    for old in home.glob("kernels-*"):
        with contextlib.suppress(OSError):
            if time.time() - old.stat().st_mtime > MONTH:
                shutil.rmtree(old, ignore_errors=True)


def kernel(function: Function) -> Function:
    """Compile ``function`` with numba in nopython mode, without reordering of floating-point sums.

    Kernels are exempt from the house rule on clarity first: a plain numpy twin in the tests says what
    each computes.
    """
    config: Any = numba.config
    before = config.CACHE_DIR
    # The folder is read while the cache is enabled, so this setting does not reach other users of numba.
    config.CACHE_DIR = str(kernel_cache())
    try:
        return cast(Function, numba.njit(cache=True, error_model="numpy")(function))
    finally:
        config.CACHE_DIR = before


def kernel_of_this_process(function: Function) -> Function:
    """Compile ``function`` as :func:`kernel` does, and keep nothing on disk."""
    return cast(Function, numba.njit(error_model="numpy")(function))
