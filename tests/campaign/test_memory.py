"""The share of memory that a worker may take: of what is free, within whatever limits there are."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from rigbench.campaign.memory import free_bytes, share_of

GB = 2**30
MEMINFO = f"MemTotal: {16 * 2**20} kB\nMemFree: 1 kB\nMemAvailable: {8 * 2**20} kB\n"

GROUPS = {
    "none": ("", {}, 8),
    "version 2, no limit": ("0::/", {"memory.max": "max", "memory.current": str(GB)}, 8),
    "version 2": ("0::/a/b", {"a/b/memory.max": str(4 * GB), "a/b/memory.current": str(GB)}, 3),
    "version 2, of the group above": (
        "0::/a/b",
        {"a/memory.max": str(4 * GB), "a/memory.current": str(2 * GB), "a/b/memory.max": "max"},
        2,
    ),
    "version 2, most of it the disk's cache": (
        "0::/",
        {
            "memory.max": str(4 * GB),
            "memory.current": str(4 * GB),
            "memory.stat": f"file {3 * GB}\ninactive_file {2 * GB}\n",
        },
        2,
    ),
    "version 1": (
        "5:cpu:/\n4:memory:/x",
        {
            "memory/x/memory.limit_in_bytes": str(2 * GB),
            "memory/x/memory.usage_in_bytes": str(GB),
            "memory/x/memory.stat": f"inactive_file 5\ntotal_inactive_file {GB // 2}\n",
        },
        1.5,
    ),
    "version 1 in a container, which sees its own group as the root": (
        "4:memory:/docker/x",
        {"memory/memory.limit_in_bytes": str(2 * GB), "memory/memory.usage_in_bytes": str(GB)},
        1,
    ),
    "over its limit": ("0::/", {"memory.max": str(GB), "memory.current": str(2 * GB)}, 0),
    "another controller's path": ("4:cpu:/x", {"x/memory.max": "1", "x/memory.current": "0"}, 8),
}


@pytest.mark.parametrize("case", GROUPS)
def test_free_is_what_machine_and_groups_leave(tmp_path: Path, case: str) -> None:
    """The least of what the machine has available and what each control group above leaves."""
    groups, files, expected = GROUPS[case]
    (tmp_path / "proc" / "self").mkdir(parents=True)
    (tmp_path / "proc" / "meminfo").write_text(MEMINFO)
    (tmp_path / "proc" / "self" / "cgroup").write_text(groups)
    for name, text in files.items():
        file = tmp_path / "groups" / name
        file.parent.mkdir(parents=True, exist_ok=True)
        file.write_text(text)
    assert free_bytes(tmp_path / "proc", tmp_path / "groups") == expected * GB


def test_shares() -> None:
    """Workers share three quarters of it; where nothing is known, there is no limit; here something is."""
    assert share_of(3, 8 * GB) == 2 * GB
    assert share_of(3, None) is None
    assert free_bytes(Path("/nowhere"), Path("/nowhere")) is None
    if sys.platform == "linux":
        total = int(Path("/proc/meminfo").read_text().split()[1]) * 1024
        assert 0 < (free_bytes() or 0) <= total


@pytest.mark.skipif(sys.platform != "linux", reason="the limit is Linux's")
def test_a_process_is_held_to_its_share() -> None:
    """With 64 MiB, 48 more can be had and 80 more can't, and what is given back can be had again."""
    code = (
        "from rigbench.campaign.memory import hold_to\n"
        "hold_to(64 << 20)\n"
        "for _ in range(3): b'x' * (48 << 20)\n"
        "try: b'x' * (80 << 20)\n"
        "except MemoryError: print('refused')\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60
    )
    assert done.stdout == "refused\n"
