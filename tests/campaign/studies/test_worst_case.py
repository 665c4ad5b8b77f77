"""worst_case as a campaign does it, on stand-in work whose worst machine is known."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import pytest

from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.executor import InProcess
from rigbench.campaign.part import Part
from rigbench.campaign.plan import Plan
from rigbench.campaign.progress import Progress
from rigbench.campaign.store import Store
from rigbench.campaign.studies.worst_case import HALVINGS, Subject, WorstCase, least_runs, worst_found
from rigbench.campaign.studies.worst_direction import departures
from rigbench.campaign.work import Outcome
from rigbench.errors import Stopped
from rigbench.rig.run import Run
from rigbench.scores.results import Tolerance

NAMES = tuple(f"link_mass_percent.{link}" for link in ("upper", "fore"))
TOLERANCE = Tolerance({"tool_peak_mm": 3.0})
WEIGHTS = {"short": (1.0, -2.0), "long": (0.5, 0.25)}
"""The peak [mm] is level times abs(w u): at level 1 the worst is 3.0 in 'short', at u = (1, -1) or its opposite."""


@dataclass(frozen=True)
class Work:
    """Does a run by a formula; ``done`` counts, and what ``breaks`` is decided by level and directions."""

    motions: dict[Any, str]
    breaks: Callable[[float, tuple[float, ...]], str] = lambda level, u: "finished"
    done: list[Run] = None  # type: ignore[assignment]

    def __call__(self, run: Run) -> Outcome:
        self.done.append(run)
        u = tuple(u for _, u in run.directions or ())
        outcome = self.breaks(run.level, u)
        weights = WEIGHTS[self.motions[run.motion]]
        peak = run.level * abs(sum(w * each for w, each in zip(weights, u, strict=True)))
        scores = {"tool_peak_mm": peak} if outcome == "finished" else {}
        return Outcome(run.key(), outcome, scores=scores, wall_s=0.0)


@pytest.fixture
def study(run_of: Callable[..., Run], registered_law: Callable[..., Any], folder: Path) -> WorstCase:
    """A search of one law in two motions, levels 0.5 and 2."""
    run = run_of(folder, registered_law("computed-torque"))
    runs = {
        "short": replace(run, sources=("link_mass_percent",)),
        "long": replace(run, sources=("link_mass_percent",), motion=run.motion.paced(0.5)),
    }
    return WorstCase((Subject("", "ct", runs, NAMES),), (0.5, 2.0), 200, TOLERANCE, 3)


def work_for(study: WorstCase, **given: Any) -> Work:
    return Work({run.motion: name for name, run in study.subjects[0].runs.items()}, done=[], **given)


def plan_of(study: WorstCase) -> Plan:
    return Plan("Worst", "planar2", "", "worst.yaml", ("",), ("ct",), ("short", "long"), (), 1, TOLERANCE, (), "rigbench run worst.yaml", studies=(study,))  # fmt: skip


def searched(study: WorstCase, path: Path, work: Work, **given: Any) -> Store:
    store = Store.open_for_writing(path, plan_of(study))
    try:
        run_campaign(plan_of(study), store, executor=InProcess(work), **given)
    except BaseException:
        store.close()
        raise
    return store


def test_the_worst_machine_and_the_smallest_level_that_fails_are_found(
    tmp_path: Path, study: WorstCase
) -> None:
    """The peak is level * 3 at the worst, so level 1 is the smallest that reaches the limit of 3 mm.

    Found is within the last halving's (2 - 0.5) / 2^6 above it; nothing below misses.
    """
    work = work_for(study)
    with searched(study, tmp_path / "s.sqlite", work) as store:
        stored = store.study("worst_case")
        assert stored is not None
        assert stored.finished
        found = worst_found(stored, TOLERANCE)
        levels = {one.level: one for one in found}
        assert [one.level for one in found] == sorted(levels)
        assert [one.level for one in found if one.searched] == [0.5, 2.0]
        for level in (0.5, 2.0):
            one = levels[level]
            assert one.used is not None
            assert one.record is not None
            assert (one.used.share, one.used.score, one.misses) == (level, "tool_peak_mm", level > 1)
            assert one.record.row.motion == "short"
            assert one.record.row.condition == f"worst case at {level:g}"
            u = dict(store.kept(one.record.key).run.directions or ())
            assert sorted(map(abs, u.values())) == [1.0, 1.0]
            assert u[NAMES[0]] == -u[NAMES[1]]
        smallest = min(one.level for one in found if one.misses)
        below = max(one.level for one in found if not one.misses)
        assert 1.0 < smallest <= 1.0 + 1.5 / 2**HALVINGS
        assert smallest - below == pytest.approx(1.5 / 2**HALVINGS, rel=1e-3)  # levels have six digits
        assert len(stored.records) <= study.most_runs
        assert len({run.key() for run in work.done}) == len(work.done)


def test_the_direction_says_what_matters(tmp_path: Path, study: WorstCase) -> None:
    """From abs(1 + 2) = 3 mm at the worst either parameter turned round leaves 1 mm: 2 of the limit's 3 mm."""
    with searched(replace(study, levels=(1.0,)), tmp_path / "s.sqlite", work_for(study)) as store:
        stored = store.study("worst_case")
        assert stored is not None
        (one,) = [one for one in worst_found(stored, TOLERANCE) if one.searched]
        found = departures(store, stored, one, TOLERANCE)
        assert {each.parameter for each in found} == set(NAMES)
        for each in found:
            assert each.difference == pytest.approx(2.0 / 3.0)


def test_what_decides_whether_a_run_finishes_comes_first(tmp_path: Path, study: WorstCase) -> None:
    """Machines that diverge by the second parameter alone: it makes all the difference, the first none."""
    work = work_for(study, breaks=lambda level, u: "diverged" if u[1] > 0.99 else "finished")
    with searched(replace(study, levels=(1.0,)), tmp_path / "s.sqlite", work) as store:
        stored = store.study("worst_case")
        assert stored is not None
        one = worst_found(stored, TOLERANCE)[-1]
        first, second = departures(store, stored, one, TOLERANCE)
        assert (first.parameter, first.difference) == (NAMES[1], math.inf)
        assert (second.parameter, second.difference) == (NAMES[0], 0.0)


def test_one_that_was_stopped_finds_the_same(tmp_path: Path, study: WorstCase) -> None:
    """Stopped after each few runs and gone on with, the search asks for the same runs and finds the same."""
    whole, parts = work_for(study), work_for(study)
    searched(study, tmp_path / "whole.sqlite", whole).close()
    for _ in range(100):
        end = len(parts.done) + 17

        def stop(progress: Progress, end: int = end) -> None:
            if progress.study and len(parts.done) >= end:
                raise KeyboardInterrupt

        again = replace(study)  # a new value, as in another process
        try:
            searched(again, tmp_path / "parts.sqlite", parts, on_progress=stop).close()
            break
        except (KeyboardInterrupt, Stopped):
            continue
    assert [run.key() for run in parts.done] == [run.key() for run in whole.done]


def test_a_run_that_does_not_finish_is_the_worst(tmp_path: Path, study: WorstCase) -> None:
    """A machine that diverges ends the search at its level at once, and is told as such."""
    work = work_for(study, breaks=lambda level, u: "diverged" if level > 1 and u[0] > 0 else "finished")
    with searched(study, tmp_path / "s.sqlite", work) as store:
        stored = store.study("worst_case")
        assert stored is not None
        worst = worst_found(stored, TOLERANCE)[-1]
        assert worst.level == 2.0
        assert worst.used is not None
        assert worst.record is not None
        assert (worst.used.share, worst.record.row.outcome) == (math.inf, "diverged")
        assert worst.runs <= 15 * 2  # one generation of evolution, in two motions


def test_machines_without_verdict_are_passed_over(tmp_path: Path, study: WorstCase) -> None:
    """Where half of the machines can't exist, the worst of the others is found, and they are counted."""
    work = work_for(study, breaks=lambda level, u: "no-plant" if u[0] > 0 else "finished")
    with searched(study, tmp_path / "s.sqlite", work) as store:
        stored = store.study("worst_case")
        assert stored is not None
        assert stored.finished
        for one in worst_found(stored, TOLERANCE):
            if one.searched:
                assert one.used is not None
                assert one.used.share == one.level
                assert 0 < one.dropped < one.runs
    nothing = work_for(study, breaks=lambda level, u: "law-error")
    with searched(study, tmp_path / "none.sqlite", nothing) as store:
        stored = store.study("worst_case")
        assert stored is not None
        for one in worst_found(stored, TOLERANCE):
            assert (one.used, one.record, one.misses) == (None, None, False)
            assert departures(store, stored, one, TOLERANCE) == ()


def test_a_law_that_holds_takes_no_halvings(tmp_path: Path, study: WorstCase) -> None:
    """Where nothing misses, the declared levels are all that is run."""
    with searched(replace(study, levels=(0.2, 0.4)), tmp_path / "s.sqlite", work_for(study)) as store:
        stored = store.study("worst_case")
        assert stored is not None
        assert {one.level for one in worst_found(stored, TOLERANCE)} == {0.2, 0.4}


def test_a_level_begins_with_what_was_worst_below(tmp_path: Path, study: WorstCase) -> None:
    """The first machines run at a level are among them those that were found worst at the level before."""
    with searched(replace(study, levels=(0.2, 0.4)), tmp_path / "s.sqlite", work_for(study)) as store:
        stored = store.study("worst_case")
        assert stored is not None
        below, above = (
            [record for record in stored.records if record.row.level == level] for level in (0.2, 0.4)
        )
        worst = max(below, key=lambda record: record.row.scores["tool_peak_mm"])
        first = above[0]
        assert store.kept(first.key).run.directions == store.kept(worst.key).run.directions


def test_it_waits_for_all_draws(tmp_path: Path, study: WorstCase) -> None:
    """Nothing of it is run where the first draws alone are asked for."""
    with searched(study, tmp_path / "s.sqlite", work_for(study), part=Part(draws=1)) as store:
        assert store.study("worst_case") is None


def test_the_smallest_budget_is_one(tmp_path: Path, study: WorstCase) -> None:
    """With the least number of runs there is a search, within them."""
    small = replace(study, runs=least_runs(2, 2))
    work = work_for(small)
    with searched(small, tmp_path / "s.sqlite", work):
        assert 0 < len(work.done) <= small.most_runs
    with pytest.raises(ValueError, match="trials"):
        replace(small, runs=small.runs - 4).rounds(lambda entry: None)
