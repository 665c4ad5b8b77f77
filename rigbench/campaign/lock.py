"""The side file that keeps a second writer out of a store."""

from __future__ import annotations

import fcntl
import os
from pathlib import Path

from rigbench.errors import StoreBusy

__all__ = ["WriterLock"]


class WriterLock:
    """A lock of the operating system on the file ``<store>.lock``; it ends with its process."""

    def __init__(self, store: Path) -> None:
        """Take the lock of ``store``; StoreBusy if another process has it, OSError as the disk has it."""
        self._path = store.with_name(store.name + ".lock")
        self._file = self._taken(store)
        os.truncate(self._file, 0)
        os.write(self._file, f"{os.getpid()}\n".encode())

    def _taken(self, store: Path) -> int:
        while True:
            file = os.open(self._path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o666)
            try:
                fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
                if self._is_at_its_path(file):
                    return file
            except BlockingIOError:
                holder = os.pread(file, 32, 0).decode("ascii", "replace").strip() or "of unknown id"
                os.close(file)
                raise StoreBusy(
                    str(store), f"process {holder} is writing to it; wait until that ends, or stop it"
                ) from None
            except BaseException:
                os.close(file)
                raise
            os.close(file)  # its holder removed it between our opening and our locking it

    def _is_at_its_path(self, file: int) -> bool:
        try:
            return os.path.samestat(os.fstat(file), os.stat(self._path))
        except FileNotFoundError:
            return False

    def release(self) -> None:
        """Remove the side file, then let go: in this order nobody can lock a file that is removed."""
        self._path.unlink(missing_ok=True)
        os.close(self._file)
