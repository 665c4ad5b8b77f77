"""The one decorator for numba kernels: compiled once, cached on disk under a key that can be trusted."""

from __future__ import annotations

import hashlib
import os
import tempfile
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import Any, TypeVar, cast

import numba

__all__ = ["kernel", "kernel_cache"]

Function = TypeVar("Function", bound=Callable[..., Any])


@cache
def kernel_cache() -> Path:
    """Return the folder of the compiled kernels.

    numba's own cache looks at one file's date and misses a change in another file that is compiled
    into it. So the folder's name is a digest of the source of every room that holds kernels. Where
    the user's cache folder can't be written, a temporary one serves for as long as the machine is up.
    """
    package = Path(__file__).resolve().parent.parent
    digest = hashlib.blake2b(numba.__version__.encode(), digest_size=8)
    for room in ("arm", "laws", "rig", "scores"):
        for source in sorted((package / room).glob("*.py")):
            digest.update(source.read_bytes())
    home = Path(os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache")
    folder = home / "rigbench" / f"kernels-{digest.hexdigest()}"
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryFile(dir=folder):
            return folder
    except OSError:
        return Path(tempfile.mkdtemp(prefix="rigbench-kernels-"))


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
