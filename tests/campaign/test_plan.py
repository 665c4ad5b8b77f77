"""The plan's order and keys."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from types import ModuleType

import pytest

from rigbench.campaign.plan import Entry, Plan, fair_order


def test_every_prefix_of_the_order_is_fair(make_plan: Callable[..., Plan]) -> None:
    """Stopped after any number of runs, no two random cells differ by more than one draw."""
    plan = make_plan(draws=5)
    for length in range(len(plan.entries) + 1):
        draws = Counter({(e.law, e.condition): 0 for e in plan.entries if e.draw is not None})
        draws.update((e.law, e.condition) for e in plan.entries[:length] if e.draw is not None)
        assert max(draws.values()) - min(draws.values()) <= 1


def test_what_is_not_random_comes_first_and_ties_keep_their_order(make_plan: Callable[..., Plan]) -> None:
    """Nominal runs of every law lead; within a draw the order is the one they were given in."""
    plan = make_plan(draws=2)
    assert [e.draw for e in plan.entries] == [None] * 2 + [0] * 4 + [1] * 4
    assert [e.law for e in plan.entries[2:6]] == ["pd", "pd", "feedforward", "feedforward"]
    assert fair_order(plan.entries) == plan.entries


def test_a_key_is_worked_out_once(doing: ModuleType, monkeypatch: pytest.MonkeyPatch) -> None:
    """Entry.key asks its run a single time, and is the run's own key."""
    asked = []
    monkeypatch.setattr(doing.FakeRun, "key", lambda run: asked.append(run.name) or "k" * 40)
    entry = Entry("", "pd", "lift", "nominal", 0.0, None, doing.FakeRun("one"))
    assert (entry.key, entry.key, asked) == ("k" * 40, "k" * 40, ["one"])


def test_the_seed_is_that_of_the_random_runs(make_plan: Callable[..., Plan]) -> None:
    """A plan in which nothing is random has no seed."""
    plan = make_plan()
    assert plan.seed == 7
    assert make_plan(entries=plan.entries[:2]).seed is None
