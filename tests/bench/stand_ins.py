"""Stand-ins for runs, and a store of any size filled with them, in a module that workers can import."""

from __future__ import annotations

import hashlib
import time
from dataclasses import dataclass, field, replace
from itertools import product
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import numpy as np

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch
from rigbench.campaign.packing import VALUE, Layout
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.store import Store
from rigbench.campaign.work import Outcome, this_host
from rigbench.scores.names import SCORES
from rigbench.scores.results import Column, Tolerance

JOINTS = 6
LAWS = ("joint pd", "pd + gravity", "feedforward", "stiffer", "computed torque", "adaptive")
FLOORS = dict(zip(LAWS, (20.0, 11.0, 0.6, 0.9, 0.2, 0.3), strict=True))
SLOPES = dict(zip(LAWS, (0.5, 1.0, 2.4, 0.8, 2.6, 1.3), strict=True))
"""A law's peak [mm] at level 0, and by how much it grows to level 1: some of them cross."""

SOURCES = ("mass", "cog", "inertia", "payload", "rotor", "coulomb", "viscous", "torque")
COLUMNS = (
    Column("nominal", 0.0, False, True),
    *(Column(f"{source} alone", 1.0, True, False) for source in SOURCES),
    *(Column(f"all at {level:g}", level, True, True) for level in (0.25, 0.5, 1.0, 2.0)),
)
NAMES = tuple(
    name
    for score, info in SCORES.items()
    if not score.endswith(("peak_mm", "rms_mm")) or not info.per_joint
    for name in [score, *(f"{score}.j{j}" for j in range(1, JOINTS + 1) if info.per_joint)]
)
OWN = tuple(name for name in NAMES if not (name in SCORES and SCORES[name].host))
LAYOUT = Layout(OWN, tuple(name for name in NAMES if name not in OWN))


@dataclass(frozen=True)
class Stub:
    """Stands for a law, a motion or the files of an arm."""

    plugin: str = "computed-torque"
    path: str = "arm.yaml"
    text: str = "drives: {}"
    urdf_path: str = "arm.urdf"
    urdf_text: str = "<robot/>"
    files: tuple[tuple[str, str], ...] = ()
    duration_s: float = 4.0
    control_hz: float = 1000.0

    def arm(self) -> Any:
        return SimpleNamespace(joints=tuple(f"j{j}" for j in range(1, JOINTS + 1)), links=())


STUB = Stub()


@dataclass(frozen=True)
class StubRun:
    """What the campaign knows of a run."""

    name: str
    draw: int | None = None
    sources: tuple[str, ...] = ()
    seconds: float = 0.0
    arm: Any = STUB
    model: None = None
    directions: None = None
    law: Stub = STUB
    motion: Stub = STUB
    rates: Stub = STUB
    seed: int = 7
    mismatch: Mismatch = field(default=Mismatch(coulomb_percent=30.0))

    def inputs(self) -> dict[str, Any]:
        return {"name": self.name}

    def key(self) -> str:
        return hashlib.blake2b(f"{self.name} {self.draw}".encode(), digest_size=20).hexdigest()


def sleep(run: StubRun) -> Outcome:
    """A run that takes its time and none of the machine's."""
    time.sleep(run.seconds)
    return _finished(run)


def work(run: StubRun) -> Outcome:
    """A run that keeps a core busy for its time."""
    end = time.process_time() + run.seconds
    while time.process_time() < end:
        pass
    return _finished(run)


def _finished(run: StubRun) -> Outcome:
    scores, host_scores = dict.fromkeys(LAYOUT.scores, 1.0), dict.fromkeys(LAYOUT.host_scores, 1.0)
    return Outcome(
        run.key(), "finished", scores=scores, host_scores=host_scores, residual=0.0, wall_s=run.seconds
    )


def runs_of(number: int, seconds: float) -> Plan:
    """A plan of so many runs of one law on the demo arm, each of which takes so long."""
    files = ArmFiles.read(Path(__file__).resolve().parents[2] / "robots_demo" / "tray6" / "arm.yaml")
    entries = tuple(
        Entry(
            "", LAWS[0], "load tray", "all at 1", 1.0, draw,
            StubRun("run", draw, ("coulomb_percent",), seconds, arm=files),
        )
        for draw in range(number)
    )  # fmt: skip
    return plan_of(entries, ("",), ("load tray",), number)


def plan_of(
    entries: tuple[Entry, ...], sheets: tuple[str, ...], motions: tuple[str, ...], draws: int
) -> Plan:
    """A plan of these entries."""
    limits = Tolerance({"tool_peak_mm": 3.0, "settle_ms": 250.0}, 0.95)
    texts = ("Large", "tray6", "rigbench: 1\n", "large.yaml")
    return Plan(*texts, sheets, LAWS, motions, COLUMNS, draws, limits, entries, "rigbench run large.yaml")


def _values(rng: np.random.Generator, law: str, level: float, rows: int) -> np.ndarray:
    """Scores of as many runs as a real campaign has them: all alike in size, one in a hundred never settles."""
    values = rng.gamma(9.0, 1.0 / 9.0, (rows, len(LAYOUT.names)))
    peak, settle = LAYOUT.names.index("tool_peak_mm"), LAYOUT.names.index("settle_ms")
    values[:, peak] *= FLOORS[law] + SLOPES[law] * level
    values[:, settle] = np.where(rng.random(rows) < 0.01, np.inf, 100.0 * values[:, settle])
    return values.astype(VALUE)


def fill(path: Path, sheets: int, motions: int, draws: int) -> int:
    """Make a store of sheets x 6 laws x motions x (nominal and 12 x draws) runs; return how many there are.

    The plan of the first draw is recorded by the Store's own code, and its first run added. All else is put
    in by SQL, for speed.
    """
    sheet_names = tuple(f"control_hz {500 + i}" for i in range(sheets)) if sheets > 1 else ("",)
    motion_names = tuple(f"load tray {i}" for i in range(motions))
    places = list(product(sheet_names, LAWS, motion_names, COLUMNS))
    first = tuple(
        Entry(
            sheet, law, motion, column.name, column.level, 0 if column.random else None,
            StubRun(f"{sheet} {law} {motion} {column.name}", 0 if column.random else None, (column.name,)),
        )
        for sheet, law, motion, column in places
    )  # fmt: skip
    plan = plan_of(first, sheet_names, motion_names, draws)
    rng = np.random.default_rng(1)
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(replace(plan, entries=first))
        host = this_host("computed-torque")
        store.add([Outcome(first[0].key, "finished", scores=dict.fromkeys(LAYOUT.scores, 1.0),
                           host_scores=dict.fromkeys(LAYOUT.host_scores, 1.0), host=host)])  # fmt: skip
        connection = store._connection
        connection.execute("BEGIN")
        for table in ("plan", "runs", "keys"):
            connection.execute(f"DELETE FROM {table}")
        connection.execute("DROP INDEX plan_id")
        numbers = [
            connection.execute("SELECT id FROM places WHERE (sheet, law, motion, condition) = (?, ?, ?, ?)",
                               (sheet, law, motion, column.name)).fetchone()[0]
            for sheet, law, motion, column in places
        ]  # fmt: skip
        total = 0
        for draw in range(-1, draws):
            here = [i for i, (*_, column) in enumerate(places) if column.random is (draw >= 0)]
            rows = []
            for i in here:
                values = _values(rng, places[i][1], places[i][3].level or 0.0, 1)[0]
                total += 1
                rows.append((total, numbers[i], None if draw < 0 else draw, values.tobytes()))
            connection.executemany(
                "INSERT INTO keys VALUES (?, ?)", ((number, rng.bytes(20).hex()) for number, *_ in rows)
            )
            connection.executemany(
                "INSERT INTO plan VALUES (?, ?, ?, ?)", ((n, n, place, drawn) for n, place, drawn, _ in rows)
            )
            connection.executemany(
                "INSERT INTO runs VALUES (?, 'finished', 0, 1, ?, 1e-12, 0.1, 1, '2026-01-01T00:00:00+00:00', '', '')",
                ((number, values) for number, *_, values in rows),
            )
        connection.executemany(
            "INSERT INTO draw_values VALUES ('7', ?, ?, ?)",
            ((d, f"{s}.j{j}", u) for d in range(draws)
             for s, j, u in zip(np.repeat(SOURCES, JOINTS), list(range(1, JOINTS + 1)) * len(SOURCES),
                                rng.uniform(-1, 1, JOINTS * len(SOURCES)).tolist(), strict=True)),
        )  # fmt: skip
        connection.execute("CREATE INDEX plan_id ON plan (id)")
        connection.execute("COMMIT")
    return total
