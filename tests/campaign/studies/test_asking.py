"""Searches that are replayed from what is known."""

from __future__ import annotations

from types import SimpleNamespace
from typing import Any

from rigbench.campaign.plan import Entry
from rigbench.campaign.studies.asking import Ask, in_step, replayed
from rigbench.scores.row import Row


def entry(name: str) -> Entry:
    run: Any = SimpleNamespace(key=lambda: name)
    return Entry("", name, "lift", "searched", None, None, run)


def counting(name: str, rounds: int) -> Any:
    """A search of so many batches, one entry more each time; it returns the number of rows that it got."""

    def search(ask: Ask) -> int:
        return sum(len(ask([entry(f"{name}{k}{i}") for i in range(k)])) for k in range(1, rounds + 1))

    return search


def knowing(*names: str) -> Any:
    """What is known: the runs whose names begin so."""

    def known(asked: Entry) -> Row | None:
        place = asked.sheet, asked.law, asked.motion, asked.condition, asked.level, asked.draw
        return Row(*place, "finished") if asked.law.startswith(names) else None

    return known


def names_of(batches: Any) -> list[list[str]]:
    return [[asked.law for asked in batch] for batch in batches]


def test_a_search_goes_as_far_as_is_known() -> None:
    """The batches that are known, the first that is not, and what it found when all are."""
    batches, found = replayed(counting("a", 3), knowing("a1", "a20"))
    assert (names_of(batches), found) == ([["a10"], ["a20", "a21"]], None)
    batches, found = replayed(counting("a", 3), knowing("a"))
    assert (len(batches), found) == (3, 6)


def test_searches_go_on_in_step() -> None:
    """A round is a batch of each; none goes ahead of a round that is not done, and a short one ends before."""
    searches = [counting("a", 1), counting("b", 3)]
    assert names_of(in_step(searches, knowing("none"))) == [["a10", "b10"]]
    assert names_of(in_step(searches, knowing("b"))) == [["a10", "b10"]]
    assert names_of(in_step(searches, knowing("a", "b1"))) == [["a10", "b10"], ["b20", "b21"]]
    whole = names_of(in_step(searches, knowing("a", "b")))
    assert whole == [["a10", "b10"], ["b20", "b21"], ["b30", "b31", "b32"]]
    assert in_step([], knowing("a")) == []
