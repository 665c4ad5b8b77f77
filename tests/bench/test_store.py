"""A store of a million runs: bytes, times, memory. Skipped unless asked for:

    pytest tests/bench --benchmark-only -s

Times are printed and mean something on a quiet machine alone; what is asserted does not depend on it.
"""

from __future__ import annotations

import statistics
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.executor import Processes
from rigbench.campaign.store import Store

SHAPES = {"8 sheets, 2 motions, 868 draws": (8, 2, 868), "1 sheet, 1 motion, 13 889 draws": (1, 1, 13_889)}
"""Ways to a million runs of 6 laws under 13 conditions."""

MEASURED = """
import resource, sys, time
from rigbench.cli import main
try:
    main()
finally:
    print(time.process_time(), resource.getrusage(resource.RUSAGE_SELF).ru_maxrss, file=sys.stderr)
"""


def command(*arguments: str) -> tuple[float, float, float]:
    """Run a command in a process of its own; return wall and CPU time [s] and its memory at most [MB]."""
    began = time.perf_counter()
    done = subprocess.run(
        [sys.executable, "-c", MEASURED, *arguments], capture_output=True, text=True, check=True
    )
    cpu, memory = map(float, done.stderr.split()[-2:])
    return time.perf_counter() - began, cpu, memory / 1e3


def added(store: Store, outcomes: list[Any]) -> float:
    """Return how long it takes to add a run [s], in the middle of several."""
    times = []
    for outcome in outcomes:
        began = time.perf_counter()
        store.add([outcome])
        times.append(time.perf_counter() - began)
    return statistics.median(times)


@pytest.mark.parametrize("shape", SHAPES)
def test_a_million_runs(
    tmp_path: Path, stand_ins: ModuleType, benchmark: Callable[..., Any], shape: str
) -> None:
    """No command needs a gigabyte, and adding a run costs what it costs in a small store."""
    path, small = tmp_path / "large.sqlite", tmp_path / "small.sqlite"
    runs = stand_ins.fill(path, *SHAPES[shape])
    stand_ins.fill(small, 1, 1, 2)
    size = path.stat().st_size
    print(f"\n{runs} runs ({shape}): {size / runs:.0f} bytes a run")
    plan = stand_ins.runs_of(500, 0.0)
    outcomes = [stand_ins.sleep(entry.run) for entry in plan.entries]
    began = time.perf_counter()
    with Store.open_for_writing(path, plan) as store:
        print(f"opened for writing in {time.perf_counter() - began:.2f} s")
        in_large = added(store, outcomes)
    with Store.open_for_writing(small, plan) as store:
        in_small = added(store, outcomes)
    print(f"a run is added in {1e3 * in_large:.2f} ms, in a small store in {1e3 * in_small:.2f} ms")
    picture, table = str(tmp_path / "m.png"), str(tmp_path / "runs.parquet")
    for arguments in (("status",), ("status", "--json"), ("matrix", "-o", picture), ("export", "-o", table)):
        seconds, cpu, memory = command(arguments[0], str(path), *arguments[1:])
        print(f"{' '.join(arguments[:2]):13} {seconds:5.1f} s, {cpu:5.1f} s of CPU, {memory:4.0f} MB")
        assert memory < 1000.0
    assert in_large < 3.0 * in_small
    with Store.open_for_reading(path) as reader:
        assert benchmark.pedantic(reader.counts).planned == runs


def done_with(stand_ins: ModuleType, path: Path, jobs: int, work: Any, runs: int) -> tuple[float, float]:
    """Do runs of 100 ms; return how many there are a second, and what share of a core this process needs.

    Both from the first outcome to the last, so that the start of the workers doesn't count.
    """
    plan = stand_ins.runs_of(runs, 0.1)
    marks: list[tuple[float, float]] = []
    with Store.open_for_writing(path, plan) as store:
        counts = run_campaign(
            plan,
            store,
            on_progress=lambda _: marks.append((time.perf_counter(), time.process_time())),
            executor=Processes(jobs, work),
        )
    assert counts.done == runs
    (began, used), (ended, spent) = marks[1], marks[-1]
    return (runs - 1) / (ended - began), (spent - used) / (ended - began)


def test_two_workers_and_what_the_parent_costs(
    tmp_path: Path, stand_ins: ModuleType, benchmark: Callable[..., Any]
) -> None:
    """Print how many times the runs of one worker two do, and the parent's share of a core at 100 ms a run."""
    one, _ = done_with(stand_ins, tmp_path / "one.sqlite", 1, stand_ins.work, 100)
    two, _ = benchmark.pedantic(done_with, (stand_ins, tmp_path / "two.sqlite", 2, stand_ins.work, 200))
    print(f"\ntwo workers do {two / one:.2f} times the runs of one ({one:.1f} and {two:.1f} runs a second)")
    rate, share = done_with(stand_ins, tmp_path / "slept.sqlite", 2, stand_ins.sleep, 200)
    print(
        f"the parent needs {100 * share:.1f} % of a core at 100 ms a run and two workers ({rate:.1f} a second)"
    )
