"""Writing a file whole or not at all."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import BinaryIO

from rigbench.errors import StoreError

__all__ = ["write_whole"]


def write_whole(path: Path, write: Callable[[BinaryIO], object]) -> None:
    """Let ``write`` fill a file, which takes its name when it is whole; missing folders are made.

    StoreError if the disk refuses.
    """
    part = path.with_name(f"{path.name}.part")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        try:
            with part.open("wb") as stream:
                write(stream)
            part.replace(path)
        except BaseException:
            part.unlink(missing_ok=True)
            raise
    except OSError as error:
        raise StoreError(str(path), f"can't be written: {error.strerror or error}") from error
