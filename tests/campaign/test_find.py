"""Finding a stored run: by the beginning of its key, or as the worst one of a cell."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from rigbench.campaign.find import run_by_key, worst_run
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.store import Store
from rigbench.campaign.work import Host, Outcome
from rigbench.errors import InputFaults
from rigbench.scores.results import Tolerance


def test_a_run_is_found_by_the_beginning_of_its_key(store: Store) -> None:
    """Any beginning that no other key shares, in either case of letters."""
    keys = sorted(record.key for record in store.records())
    for key in keys:
        others = [other for other in keys if other != key]
        shortest = next(n for n in range(1, 41) if not any(other.startswith(key[:n]) for other in others))
        for length in (shortest, 40):
            assert run_by_key(store, key[:length].upper()).key == key


def test_a_key_that_names_no_run(tmp_path: Path, make_plan: Callable[..., Plan]) -> None:
    """No digits, no such key, several, not run yet, not planned any more: each is said in its own words."""
    plan = make_plan(draws=3)
    with Store.open_for_writing(tmp_path / "a.sqlite", plan) as store:
        store.record_plan(plan)
        done, waiting = plan.entries[0].key, plan.entries[1].key
        store.add([Outcome(done, "finished"), Outcome("0" * 40, "finished")])
        assert run_by_key(store, done).row.law == plan.entries[0].law
        assert store.keys(done) == ([done], [])
        assert store.keys("0" * 40) == ([], ["0" * 40])
        twins = [entry.key for entry in plan.entries]
        first = max((key[0] for key in twins), key=lambda digit: sum(key.startswith(digit) for key in twins))
        for beginning, says in (
            ("xyz", "no hexadecimal number"),
            ("", "no hexadecimal number"),
            ("a%", "no hexadecimal number"),
            ("f" * 40, "no run's key begins"),
            (first, "is the beginning of [0-9]+ keys"),
            (waiting, "planned, but has not been run yet"),
            ("0" * 12, "no longer plans that run"),
        ):
            with pytest.raises(InputFaults, match=says):
                run_by_key(store, beginning)


@pytest.fixture
def worst_plan(doing: Any, make_plan: Callable[..., Plan]) -> Plan:
    """Two sheets, two motions, three draws of one law."""
    entries = tuple(
        Entry(
            sheet, "pd", motion, "all at 1", 1.0, draw, doing.FakeRun(f"{sheet} {motion} {draw}", draw=draw)
        )
        for draw in range(3)
        for sheet in ("slow", "fast")
        for motion in ("lift", "rim")
    )
    tolerance = Tolerance({"settle_ms": 1.0, "path_peak_mm": 3.0})
    return make_plan(sheets=("slow", "fast"), motions=("lift", "rim"), entries=entries, tolerance=tolerance)


def worst(
    tmp_path: Path, plan: Plan, came_out: Callable[[Entry, int], Outcome | None], *names: str | None
) -> Any:
    with Store.open_for_writing(tmp_path / "worst.sqlite", plan) as store:
        store.record_plan(plan)
        found = (came_out(entry, number) for number, entry in enumerate(plan.entries))
        store.add(outcome for outcome in found if outcome)
        row = worst_run(store, "pd", "all at 1", *names).row
    return row.sheet, row.motion, row.draw


def scored(entry: Entry, value: float) -> Outcome:
    return Outcome(entry.key, "finished", scores={"path_peak_mm": value, "tool_peak_mm": -value})


def test_the_worst_run_has_the_largest_main_score(tmp_path: Path, worst_plan: Plan) -> None:
    """The main score is the first limited one of the tool; a motion and a sheet narrow the choice."""
    assert worst(tmp_path, worst_plan, scored) == ("fast", "rim", 2)
    assert worst(tmp_path, worst_plan, scored, "lift") == ("fast", "lift", 2)
    assert worst(tmp_path, worst_plan, scored, "lift", "slow") == ("slow", "lift", 2)


def test_a_run_that_did_not_finish_is_the_worst(tmp_path: Path, worst_plan: Plan) -> None:
    """Whatever the others score; the first one of several."""

    def came_out(entry: Entry, number: int) -> Outcome:
        return Outcome(entry.key, "diverged") if number in (5, 7) else scored(entry, number)

    assert worst(tmp_path, worst_plan, came_out) == ("slow", "rim", 1)


def test_draws_that_do_not_count_are_passed_over(tmp_path: Path, worst_plan: Plan) -> None:
    """A draw lacks a motion, or came to nothing in one: not looked at, unless one motion alone is asked for."""

    def came_out(entry: Entry, number: int) -> Outcome | None:
        if number == 10:
            return None
        return Outcome(entry.key, "crashed") if number == 8 else scored(entry, number)

    assert worst(tmp_path, worst_plan, came_out) == ("fast", "rim", 1)
    assert worst(tmp_path, worst_plan, came_out, "rim") == ("fast", "rim", 2)


def test_without_a_draw_that_counts_there_is_no_worst(tmp_path: Path, worst_plan: Plan) -> None:
    """Nothing run yet, or all came to nothing: then with the first traceback."""
    with pytest.raises(InputFaults, match=r"verdict in every motion$"):
        worst(tmp_path, worst_plan, lambda entry, number: None)
    with pytest.raises(InputFaults, match=r"(?s)came to nothing \(crashed\): bang\nTraceback: mine"):
        worst(tmp_path, worst_plan, lambda e, n: Outcome(e.key, "crashed", "bang", trace="Traceback: mine"))


def test_names_of_nothing_are_all_told_with_the_nearest(store: Store) -> None:
    """Law, condition, motion and sheet at once."""
    with pytest.raises(InputFaults) as caught:
        worst_run(store, "compted", "nominl", "shrt", "fast")
    assert [(fault.key, fault.near) for fault in caught.value.faults] == [
        ("law", "computed"),
        ("condition", "nominal"),
        ("motion", "short"),
        ("sheet", None),
    ]


def test_the_host_of_a_run_comes_back(tmp_path: Path, make_plan: Callable[..., Plan]) -> None:
    """As it was stored, in the order of its versions; None where none was."""
    plan, host = make_plan(draws=1), Host("a CPU", (("python", "3"), ("numpy", "2")))
    with Store.open_for_writing(tmp_path / "a.sqlite", plan) as store:
        store.record_plan(plan)
        store.add([Outcome("a" * 40, "finished", host=host), Outcome("b" * 40, "finished")])
        assert store.host("a" * 40) == host
        assert store.host("b" * 40) is None
