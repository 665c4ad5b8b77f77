"""Work for a cluster's workers: what doing.py has, and what reaches beyond the process of the run."""

from __future__ import annotations

import os
import signal
import time
from pathlib import Path
from typing import Any

import doing


def work(run: doing.FakeRun) -> Any:
    return kill_the_dask_worker(run) if run.act == "kill the dask worker" else doing.work(run)


def kill_the_dask_worker(run: doing.FakeRun) -> Any:
    """The parent of this process is the server that forked it, whose parent is the dask worker."""
    server = Path(f"/proc/{os.getppid()}/stat").read_text().rpartition(") ")[2]
    os.kill(int(server.split()[1]), signal.SIGKILL)
    time.sleep(30)
