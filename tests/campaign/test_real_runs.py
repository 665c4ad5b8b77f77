"""Real runs of the demo arm through the whole campaign: what a run yields depends on the run alone."""

from __future__ import annotations

import signal
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch
from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.executor import InProcess, Processes
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.store import Store
from rigbench.campaign.work import do
from rigbench.laws.options import options_model
from rigbench.laws.registry import LawChoice, choose, load_file_law, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run
from rigbench.scores.results import Column, Tolerance

ROOT = Path(__file__).resolve().parents[2]

FRAGILE_LAW = """
import numpy as np
from rigbench.laws.law import Law

class Fragile(Law):
    def start(self, setup):
        self.n = setup.n

    def torque(self, t, q, v, ref, held):
        if t > 0.01:
            raise ValueError("I can't go on")
        return np.zeros(self.n)
"""


LEAVING_LAW = """
import builtins
from rigbench.laws.law import Law, option

class Leaving(Law):
    error: str = option("SystemExit", "", "what is raised")
    when: str = option("torque", "", "where")

    def leave(self, here):
        if self.when == here:
            raise getattr(builtins, self.error)

    def start(self, setup):
        self.leave("start")

    def torque(self, t, q, v, ref, held):
        self.leave("torque")
"""


def entry(law: str, choice: LawChoice, draw: int | None, level: float = 1.0, **spreads: float) -> Entry:
    arm = ArmFiles.read(ROOT / "robots_demo" / "planar2" / "arm.yaml")
    n = arm.arm().n
    mismatch = Mismatch(**(spreads or {"link_mass_percent": 20.0, "coulomb_percent": 50.0}))
    random: dict[str, Any] = (
        {} if draw is None else {"level": level, "sources": mismatch.sources, "draw": draw}
    )
    run = Run(
        arm=arm,
        law=choice,
        motion=ViaMotion(((0.0,) * n, (0.3,) * n), leg_s=0.3, rest_s=0.1),
        rates=Rates(500.0, 1000.0),
        gain_pose=(0.0,) * n,
        settle_band_mm=0.5,
        seed=3,
        mismatch=mismatch,
        **random,
    )
    condition = "nominal" if draw is None else "all at 1"
    return Entry("", law, "short", condition, 0.0 if draw is None else 1.0, draw, run)


@pytest.fixture
def plan(tmp_path: Path) -> Plan:
    """Two built-in laws and one that raises, nominal and two draws."""
    path = tmp_path / "fragile.py"
    path.write_text(FRAGILE_LAW)
    cls, files = load_file_law(path, "Fragile")
    choices = {name: choose(name, options_model(registered().laws[name].cls)()) for name in (PD, CT)}
    choices["fragile"] = choose("fragile.py:Fragile", options_model(cls)(), files)
    entries = tuple(entry(law, choice, draw) for draw in (None, 0, 1) for law, choice in choices.items())
    return Plan(
        "Short", "planar2", "", "short.yaml", ("",), tuple(choices), ("short",),
        (Column("nominal", 0.0, False, True), Column("all at 1", 1.0, True, True)),
        2, Tolerance({"tool_peak_mm": 50.0}), entries, "rigbench run short.yaml",
    )  # fmt: skip


PD, CT = "independent-joint", "computed-torque"


def test_a_row_is_the_same_whoever_does_the_run(tmp_path: Path, plan: Plan) -> None:
    """In this process, in workers, in reverse order: the same bits, but for what tells of the host."""
    here = {o.key: o for o in InProcess().run_all(plan.entries)}
    there = {o.key: o for o in Processes(2).run_all(reversed(plan.entries))}
    for one in plan.entries:
        mine, theirs = here[one.key], there[one.key]
        assert mine.outcome == theirs.outcome == ("law-error" if one.law == "fragile" else "finished")
        assert mine.scores == theirs.scores
        assert (mine.reason, mine.residual, mine.host) == (theirs.reason, theirs.residual, theirs.host)
        assert set(mine.host_scores) == set(theirs.host_scores)


def test_a_campaign_ends_in_results(tmp_path: Path, plan: Plan) -> None:
    """Rows become cells; the law that raises is incomplete in each of its cells, and keeps its own traceback."""
    with Store.open_for_writing(tmp_path / "short.sqlite", plan) as store:
        counts = run_campaign(plan, store, jobs=2)
        results = store.results()
        traces = {record.trace for record in store.records() if record.row.law == "fragile"}
    assert (counts.planned, counts.done, counts.failed) == (9, 6, 3)
    assert (results.planned, results.done, results.failed) == (9, 6, 3)
    for law in plan.laws:
        for column, draws in (("nominal", 1), ("all at 1", 2)):
            cell = results.cell("", law, column)
            expected = (0, draws) if law == "fragile" else (draws, 0)
            assert (cell.draws, cell.incomplete) == expected
    [trace] = traces
    assert "fragile.py" in trace
    assert "I can't go on" in trace
    assert "rigbench/rig" not in trace


def test_draws_beyond_all_reason_come_to_no_verdict(tmp_path: Path) -> None:
    """Links 1e80 times as heavy, which the engine can't carry, and inertias that no body has; settled both."""
    ct = choose(CT, options_model(registered().laws[CT].cls)())
    heavy = do(entry(CT, ct, 1, level=100.0, link_mass_percent=1000.0).run)
    assert heavy.outcome == "disagrees"
    assert heavy.residual is not None
    assert heavy.residual > 1e-6
    thin = do(entry(CT, ct, 1, level=100.0, link_inertia_percent=1000.0).run)
    assert (thin.outcome, thin.trace) == ("no-plant", "")
    assert "mismatch.link_inertia_percent: link 'upper' can't exist" in thin.reason


@pytest.fixture
def leaving(tmp_path: Path) -> Callable[..., Run]:
    path = tmp_path / "leaving.py"
    path.write_text(LEAVING_LAW)
    cls, files = load_file_law(path, "Leaving")
    return lambda **given: (
        entry("leaving", choose("leaving.py:Leaving", options_model(cls)(**given), files), None).run
    )


@pytest.mark.parametrize("when", ["start", "torque"])
@pytest.mark.parametrize("error", ["SystemExit", "KeyboardInterrupt", "GeneratorExit"])
def test_a_law_can_not_leave_by_the_back_door(leaving: Callable[..., Run], error: str, when: str) -> None:
    """What is no Exception is the law's error all the same, with its own traceback alone."""
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)  # as in a worker
    try:
        outcome = do(leaving(error=error, when=when))
    finally:
        signal.signal(signal.SIGINT, before)
    assert outcome.outcome == "law-error"
    assert outcome.reason.startswith(error)
    assert "leaving.py" in outcome.trace
    assert "rigbench/rig" not in outcome.trace


def test_ctrl_c_in_a_law_is_still_heard(leaving: Callable[..., Run]) -> None:
    """Where Ctrl-C raises, as in `check` and a notebook, it goes through; where a campaign takes it, it doesn't."""
    assert signal.getsignal(signal.SIGINT) is signal.default_int_handler
    with pytest.raises(KeyboardInterrupt):
        do(leaving(error="KeyboardInterrupt"))
