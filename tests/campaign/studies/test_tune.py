"""tune as a campaign does it, on stand-in work whose best gains are known."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from rigbench.campaign.campaign import run_campaign, run_first
from rigbench.campaign.executor import InProcess
from rigbench.campaign.plan import Plan
from rigbench.campaign.progress import Progress
from rigbench.campaign.store import Store
from rigbench.campaign.studies.tune import Aim, Gain, Subject, Tune, gains_found, least_runs, with_gains
from rigbench.campaign.work import Outcome
from rigbench.errors import Stopped
from rigbench.rig.run import Run
from rigbench.scores.row import Row

GAINS = (Gain("natural_hz", 1.0, 30.0), Gain("damping", 0.3, 2.0))
AIM = Aim("tool_rms_mm", {"torque_peak_percent": 80.0})


class Work:
    """Does a run by a formula: the bottom, 1 mm, is at 12 Hz and 0.7; torque rises with the frequency.

    With more delay d [ms] the error is (1 + natural_hz d / 10) times as large.
    """

    def __init__(self, outcome: str = "finished", factor: float = 1.0) -> None:
        self.outcome, self.factor, self.done = outcome, factor, []

    def __call__(self, run: Run) -> Outcome:
        self.done.append(run)
        options = dict(run.law.options)
        hz, damping = options["natural_hz"], options["damping"]
        error = self.factor * (1.0 + math.log(hz / 12.0) ** 2 + math.log(damping / 0.7) ** 2)
        error *= 1.0 + hz * run.timing.delay_ms / 10.0
        scores = {"tool_rms_mm": error, "tool_peak_mm": 3.0 * error, "torque_peak_percent": 10.0 * hz}
        return Outcome(run.key(), self.outcome, scores=scores if self.outcome == "finished" else {})


@pytest.fixture
def tune(run_of: Callable[..., Run], registered_law: Callable[..., Any], folder: Path) -> Tune:
    """A search for one law in two motions, without a delay margin."""
    run = run_of(folder, registered_law("computed-torque", natural_hz=4.0, damping=1.5))
    runs = {"short": run, "long": replace(run, motion=run.motion.paced(0.5))}
    subject = Subject("", "ct", runs, (4.0, 1.5), {"law": "computed-torque", "natural_hz": 4, "damping": 1.5})
    return Tune((subject,), GAINS, AIM, 100, 3)


def plan_of(tune: Tune) -> Plan:
    return Plan("Tune", "planar2", "", "tune.yaml", ("",), ("ct",), ("short", "long"), (), 1, None, (), "rigbench run tune.yaml", first=tune)  # fmt: skip


def tuned(tune: Tune, path: Path, work: Work, **given: Any) -> Store:
    store = Store.open_for_writing(path, plan_of(tune))
    try:
        run_first(plan_of(tune), store, executor=InProcess(work), **given)
    except BaseException:
        store.close()
        raise
    return store


def test_the_best_gains_within_the_limits_are_found(tmp_path: Path, tune: Tune) -> None:
    """The bottom at 12 Hz takes 120 % of the torque; the best with 80 % is (8, 0.7), 1 + log(1.5)^2 = 1.164 mm."""
    work = Work()
    with tuned(tune, tmp_path / "s.sqlite", work) as store:
        gains = tune.found(store.row_of)
        assert gains is not None
        found = gains["", "ct"]
        assert 6.5 <= found["natural_hz"] <= 8.0
        assert found["damping"] == pytest.approx(0.7, rel=0.25)
        assert len(work.done) <= tune.runs
        study = store.study("tune")
        assert study is not None
        assert study.finished
        (told,) = gains_found(study)
        assert (told.sheet, told.law, told.gains, told.within) == ("", "ct", found, True)
        assert told.score == pytest.approx(
            1.0 + math.log(found["natural_hz"] / 12) ** 2 + math.log(found["damping"] / 0.7) ** 2
        )
        assert told.score < 1.25 < (told.score_declared or 0.0)
        assert told.within_declared
        assert (told.declared, told.runs) == ({"natural_hz": 4.0, "damping": 1.5}, len(work.done))
        assert told.given["law"] == "computed-torque"


def test_the_delay_margin_holds_the_gains_down(tmp_path: Path, tune: Tune) -> None:
    """With 2 ms more the error is 1 + hz / 5 times as large, so a factor of 2 allows 5 Hz at most."""
    work, strict = Work(), replace(tune, aim=replace(AIM, delay_margin_ms=2.0), runs=200)
    with tuned(strict, tmp_path / "s.sqlite", work) as store:
        found = (strict.found(store.row_of) or {})["", "ct"]
        assert 4.0 <= found["natural_hz"] <= 5.0
        assert {run.timing.delay_ms for run in work.done} == {0.0, 2.0}
        assert len(work.done) <= 200


def test_what_keeps_the_tolerance_with_more_delay_is_good_enough(tmp_path: Path, tune: Tune) -> None:
    """An error that grows to a multiple of next to nothing is no fault while the tolerance is kept."""
    limits = {"short": {"tool_peak_mm": 3.0}, "long": {"tool_peak_mm": 3.0}}
    aim = replace(AIM, delay_margin_ms=2.0, tolerance=limits)
    eased = replace(tune, aim=aim, runs=200)
    with tuned(eased, tmp_path / "s.sqlite", Work(factor=1e-3)) as store:
        assert (eased.found(store.row_of) or {})["", "ct"]["natural_hz"] > 6.5


@pytest.mark.parametrize("outcome", ["diverged", "law-error", "crashed"])
def test_no_gains_within_the_limits_are_none(tmp_path: Path, tune: Tune, outcome: str) -> None:
    """Where no run finishes the search ends, and there are no gains to take."""
    with tuned(tune, tmp_path / "s.sqlite", Work(outcome)) as store:
        assert tune.found(store.row_of) == {}
        study = store.study("tune")
        assert study is not None
        (told,) = gains_found(study)
        assert (told.within, told.score_declared, told.within_declared) == (False, None, False)
    hard = replace(tune, aim=Aim("tool_rms_mm", {"torque_peak_percent": 1.0}))
    with tuned(hard, tmp_path / "hard.sqlite", Work()) as store:
        assert hard.found(store.row_of) == {}
        study = store.study("tune")
        assert study is not None
        (told,) = gains_found(study)
        assert not told.within
        assert told.gains["natural_hz"] < 1.5  # towards the limit


def test_one_that_was_stopped_finds_the_same(tmp_path: Path, tune: Tune) -> None:
    """Stopped after each few runs it is not found; in the end the same runs were done and the same is found."""
    whole, parts = Work(), Work()
    with tuned(tune, tmp_path / "whole.sqlite", whole) as store:
        expected = tune.found(store.row_of)
    for _ in range(100):
        end = len(parts.done) + 13

        def stop(progress: Progress, end: int = end) -> None:
            if len(parts.done) >= end:
                raise KeyboardInterrupt

        again = replace(tune)
        try:
            store = tuned(again, tmp_path / "parts.sqlite", parts, on_progress=stop)
            break
        except (KeyboardInterrupt, Stopped):
            continue
    with store:
        assert again.found(store.row_of) == expected
    assert [run.key() for run in parts.done] == [run.key() for run in whole.done]


def test_what_was_found_stays_in_the_store_of_the_plan_that_follows(tmp_path: Path, tune: Tune) -> None:
    """The campaign that follows runs nothing of it, records it whole, and has the best nominal run already."""
    with tuned(tune, tmp_path / "s.sqlite", Work()) as store:
        gains = (tune.found(store.row_of) or {})["", "ct"]
        work, before = Work(), store.study("tune")
        run_campaign(plan_of(tune), store, executor=InProcess(work))
        assert work.done == []
        assert store.study("tune") == before
        best = with_gains(tune.subjects[0].runs["short"].law, gains)
        assert store.record(replace(tune.subjects[0].runs["short"], law=best).key()) is not None


def test_all_laws_have_the_same_budget_side_by_side(tmp_path: Path, tune: Tune) -> None:
    """Two laws are searched from the same start, round by round together, neither with more runs than stated."""
    one = tune.subjects[0]
    slower = {name: replace(run, motion=run.motion.paced(0.7)) for name, run in one.runs.items()}
    both = replace(tune, subjects=(one, replace(one, law="other", runs=slower)))
    first = both.rounds(lambda entry: None)[0]
    assert {entry.law for entry in first} == {"ct", "other"}
    with tuned(both, tmp_path / "s.sqlite", Work()) as store:
        study = store.study("tune")
        assert study is not None
        counts = [told.runs for told in gains_found(study)]
        assert len(counts) == 2
        assert max(counts) <= both.runs
        assert len(study.records) <= both.most_runs


def test_merit_adds_up_what_is_missed() -> None:
    """90 % of 80 allowed misses by 0.125; twice the allowed growth by 1; a run without result by inf."""
    aim = Aim("tool_rms_mm", {"torque_peak_percent": 80.0}, delay_margin_ms=1.0)

    def row(later: bool, rms: float, outcome: str = "finished") -> Row:
        condition = "natural_hz 5.0, 1 ms later" if later else "natural_hz 5.0"
        scores = {"tool_rms_mm": rms, "torque_peak_percent": 90.0} if outcome == "finished" else {}
        return Row("", "ct", "short", condition, 0.0, None, outcome, scores)

    assert aim.merit([row(False, 2.0), row(True, 3.0)]) == (pytest.approx(0.125), 2.0)
    assert aim.merit([row(False, 2.0), row(True, 8.0)]) == (pytest.approx(1.125), 2.0)
    assert aim.merit([row(False, 2.0), row(True, 0.0, "diverged")]) == (math.inf, 2.0)
    assert aim.merit([row(False, 0.0, "timed-out"), row(True, 1.0)]) == (math.inf, math.inf)


def test_the_smallest_budget_is_one(tmp_path: Path, tune: Tune) -> None:
    """With the least number of runs there is a search, within them."""
    small = replace(tune, runs=least_runs(AIM, 2))
    work = Work()
    with tuned(small, tmp_path / "s.sqlite", work) as store:
        assert small.found(store.row_of) is not None
        assert 0 < len(work.done) <= small.runs
