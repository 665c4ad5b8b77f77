"""What a campaign of a hundred million runs on a cluster would do to its parts. Skipped unless asked for:

    pytest tests/bench/test_hundred_million.py -s --benchmark-only

A simulation of queues, event by event: chunks of runs go from the campaign's process through the scheduler to
a core and back, two for each core, and the campaign's process stores the rows. What a row costs is measured
here; what a chunk costs was measured on loopback, see CHUNK. No network is simulated beyond its bytes.
"""

from __future__ import annotations

import heapq
import pickle
import time
import tracemalloc
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from rigbench.campaign.plan import Plan
from rigbench.campaign.store import Store
from rigbench.campaign.work import do
from rigbench.experiment import load_experiment

ROOT = Path(__file__).resolve().parents[2]
RUNS = 1e8
IN_HAND = 2
SPAN_S = 60.0
ROWS = 900

SCHEDULER_S = 1.3e-3
"""Of the scheduler's CPU for a chunk: 2,000 chunks of 30 kB, one dask worker, dask 2026.8, loopback, two cores."""
CLIENT_S = 0.7e-3
"""Of the campaign process's CPU for a chunk, in the same measurement: giving it out and taking it back."""


@dataclass(frozen=True)
class Costs:
    """A row's: time to do, to read and store [s]; bytes on the way, of the store, of the plan in memory."""

    run_s: float
    row_s: float
    grouped_row_s: float
    result_bytes: float
    chunk_bytes: float
    store_bytes: float
    plan_bytes: float
    key_s: float


def measured(folder: Path) -> Costs:
    """Measure the costs on the first experiment, one core and this disk."""
    tracemalloc.start()
    before = tracemalloc.get_traced_memory()[0]
    kept = plan_of_first_look()
    plan_bytes = (tracemalloc.get_traced_memory()[0] - before) / len(kept.entries)
    tracemalloc.stop()
    plan = plan_of_first_look()
    began = time.perf_counter()
    keys = [entry.key for entry in plan.entries]
    key_s = (time.perf_counter() - began) / len(keys)
    some = plan.entries[500:530]
    do(some[0].run)
    began = time.perf_counter()
    rows = [pickle.dumps(do(entry.run)) for entry in some]
    run_s = (time.perf_counter() - began) / len(some)
    spent = {}
    with Store.open_for_writing(folder / "a.sqlite", plan) as store:
        store.record_plan(plan)
        empty = pages(store)
        for group in (1, 50):
            began = time.perf_counter()
            for first in range(0, ROWS, group):
                outcomes = [pickle.loads(rows[i % len(rows)]) for i in range(first, first + group)]
                store.add([replace(outcome, key=keys[first + i]) for i, outcome in enumerate(outcomes)])
            spent[group] = (time.perf_counter() - began) / ROWS
        store_bytes = (pages(store) - empty) / ROWS + empty / len(keys)
    chunk = len(pickle.dumps([entry.run for entry in some]))
    return Costs(run_s, spent[1], spent[50], float(len(rows[0])), chunk, store_bytes, plan_bytes, key_s)


def plan_of_first_look() -> Plan:
    return load_experiment(str(ROOT / "experiments/first-look.yaml")).plan(None)


def pages(store: Store) -> int:
    """Return the bytes of the store's file, with what is still in the log."""
    one = store._connection.execute
    return int(one("PRAGMA page_count").fetchone()[0] * one("PRAGMA page_size").fetchone()[0])


@dataclass(frozen=True)
class Load:
    """What comes out: runs a second, and the share of the time that each part is busy."""

    rate: float
    cores: float
    scheduler: float
    writer: float


def simulate(cores: int, run_s: float, row_s: float, chunk_s: float, writers: int = 1, seed: int = 1) -> Load:
    """Simulate SPAN_S seconds of a campaign in full swing; times of chunks spread by 20 %.

    ``writers``: campaigns side by side, each with a scheduler, a store and its share of the cores.
    """
    rng = np.random.default_rng(seed)
    share = cores // writers
    rows = max(1, round(chunk_s / run_s))
    begin, end = 5 * chunk_s, 5 * chunk_s + SPAN_S  # what happens before it is in full swing does not count
    free_scheduler = free_writer = 0.0
    free_core = np.zeros(share)
    busy = dict.fromkeys(("core", "scheduler", "writer", "stored"), 0.0)

    def spend(part: str, free: float, now: float, cost: float) -> float:
        """Let a part do something once it is free; return when it has done it."""
        start = max(now, free)
        busy[part] += max(0.0, min(start + cost, end) - max(start, begin))
        return start + cost

    # events: (time, whether it is done, core): a chunk is given out; it comes back
    events = [(rng.random() * chunk_s, False, core) for core in range(share) for _ in range(IN_HAND)]
    heapq.heapify(events)
    while events[0][0] < end:
        now, is_done, core = heapq.heappop(events)
        if is_done:  # the campaign's process stores it and gives out the next
            free_writer = spend("writer", free_writer, now, CLIENT_S + rows * row_s)
            busy["stored"] += rows * (begin < free_writer < end)
            heapq.heappush(events, (free_writer, False, core))
        else:  # the scheduler takes it, then the core
            free_scheduler = spend("scheduler", free_scheduler, now, SCHEDULER_S)
            work = rows * run_s * rng.lognormal(-0.02, 0.2)
            free_core[core] = spend("core", free_core[core], free_scheduler, work)
            heapq.heappush(events, (free_core[core], True, core))
    used = {part: spent / SPAN_S for part, spent in busy.items()}
    return Load(writers * used["stored"], used["core"] / share, used["scheduler"], used["writer"])


def test_a_hundred_million_runs(tmp_path, benchmark):
    """Print where a campaign of 10^8 runs bends first, and what each change would bring."""
    costs = benchmark.pedantic(measured, args=(tmp_path,), rounds=1)
    print(
        f"\na run {costs.run_s * 1e3:.1f} ms; reading and storing a row {costs.row_s * 1e6:.0f} us, ", end=""
    )
    print(
        f"in transactions of 50 {costs.grouped_row_s * 1e6:.0f} us; a chunk {SCHEDULER_S * 1e3:.1f} ms ",
        end="",
    )
    print(f"of the scheduler and {CLIENT_S * 1e3:.1f} ms of the campaign's process")
    print(
        f"{'':44}{'cores':>6}{'runs/s':>9}{'cores busy':>12}{'scheduler':>11}{'writer':>8}{'10^8 runs':>11}"
    )
    row, group = costs.row_s, costs.grouped_row_s
    ways = {
        "as it is": (row, 1.0, 1),
        "chunks of 10 s": (row, 10.0, 1),
        "... and 50 rows a transaction": (group, 10.0, 1),
        "... and 4 campaigns of a part each, merged": (group, 10.0, 4),
    }
    loads = {}
    for name, (row_s, chunk_s, writers) in ways.items():
        for cores in (100, 300, 1000) if name == "as it is" else (1000,):
            load = loads[name] = simulate(cores, costs.run_s, row_s, chunk_s, writers)
            hours = RUNS / load.rate / 3600
            busy = f"{load.cores:>11.0%} {load.scheduler:>10.0%} {load.writer:>7.0%}"
            print(f"{name:44}{cores:>6}{load.rate:>9,.0f} {busy}{hours:>9.1f} h")
    rate = 1000 / costs.run_s
    mega = rate * costs.result_bytes / 1e6, 1000 * costs.chunk_bytes / 1e6
    print(f"1,000 busy cores: {rate:,.0f} rows a second, {mega[0]:.0f} MB/s back, {mega[1]:.0f} MB/s out")
    print(f"the store {costs.store_bytes:.0f} bytes a run: {RUNS * costs.store_bytes / 1e9:.0f} GB; ", end="")
    print(
        f"the plan {costs.plan_bytes:.0f} bytes a run in memory: {RUNS * costs.plan_bytes / 1e9:.0f} GB, ",
        end="",
    )
    print(f"and {RUNS * costs.key_s / 3600:.1f} h to work out the keys")
    assert loads["... and 4 campaigns of a part each, merged"].rate > loads["as it is"].rate


def test_the_simulation_keeps_to_its_limits():
    """Few cores are all busy; a writer alone bounds the rate at one over its cost of a row."""
    few = simulate(10, 0.03, 1e-5, 1.0)
    assert few.cores > 0.95
    slow = simulate(1000, 0.03, 1e-3, 1.0)
    assert abs(slow.rate / (1 / (1e-3 + CLIENT_S / 33)) - 1) < 0.05
    assert slow.writer > 0.95
