"""How much memory a worker may take, so that no law can take the machine down with it.

Each worker may take, beyond what it has once the rig is loaded, an equal share of three quarters of the
memory that is free when the workers are started; the last quarter is for this process, the disk's cache
and whoever else works on the machine. What is asked for beyond that is refused by the system, as a
MemoryError in Python. Free is what the machine has, or what is left within the limits of the control
groups (containers, batch systems) that this process is in, whichever is less.
"""

from __future__ import annotations

import contextlib
import resource
from collections.abc import Iterator
from pathlib import Path

__all__ = ["free_bytes", "hold_to", "share_of"]

SHARED = 0.75
"""The part of the free memory that the workers share."""

USAGE = {
    "memory.max": ("memory.current", "inactive_file"),
    "memory.limit_in_bytes": ("memory.usage_in_bytes", "total_inactive_file"),
}
"""Control groups, version 2 and 1: the file of the limit, that of the usage, and what in memory.stat the
system gives back when it is asked for."""


def share_of(workers: int, free: int | None) -> int | None:
    """Return how many bytes each of so many workers may take of what is free, None for no limit."""
    return None if free is None else int(SHARED * free / workers)


def free_bytes(proc: Path = Path("/proc"), groups: Path = Path("/sys/fs/cgroup")) -> int | None:
    """Return how much memory can be had here, in bytes; None where the system doesn't say (not Linux)."""
    rooms = list(_rooms_of_groups(proc, groups))
    rooms += [1024 * kb for kb in _numbers(proc / "meminfo", "MemAvailable:")]
    return max(0, min(rooms)) if rooms else None


def hold_to(share: int) -> None:
    """Limit this process to ``share`` bytes beyond what it has now.

    Counted are its private pages that can be written (RLIMIT_DATA, Linux), touched or not.
    """
    has = 1024 * sum(_numbers(Path("/proc/self/status"), "VmData:"))
    hard = resource.getrlimit(resource.RLIMIT_DATA)[1]
    limit = has + share if hard == resource.RLIM_INFINITY else min(has + share, hard)
    resource.setrlimit(resource.RLIMIT_DATA, (limit, hard))


def _rooms_of_groups(proc: Path, groups: Path) -> Iterator[int]:
    """Yield what is left within the limit of each control group that this process is in."""
    try:
        lines = (proc / "self" / "cgroup").read_text().splitlines()
    except OSError:
        return
    for line in lines:
        _, controllers, path = line.split(":", 2)
        if controllers and "memory" not in controllers.split(","):
            continue
        root = groups if not controllers else groups / "memory"
        folder = root / path.lstrip("/")
        for group in (folder, *folder.parents):  # a limit of any group above holds as well
            if group.is_relative_to(root):
                yield from _room_of_group(group)


def _room_of_group(group: Path) -> Iterator[int]:
    for limit, (usage, given_back) in USAGE.items():
        with contextlib.suppress(OSError, ValueError):  # no such file, or 'max': no limit
            most = int((group / limit).read_text())
            used = int((group / usage).read_text())
            yield most - used + sum(_numbers(group / "memory.stat", given_back))


def _numbers(file: Path, name: str) -> Iterator[int]:
    """Yield the number after the name that a line begins with; nothing if there is no such line or file."""
    try:
        lines = file.read_text().splitlines()
    except OSError:
        return
    for line in lines:
        words = line.split()
        if words and words[0] == name:
            yield int(words[1])
