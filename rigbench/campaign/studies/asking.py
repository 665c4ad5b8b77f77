"""Searches within a study: plain code that asks for runs, replayed from the known ones each time.

As the same runs are asked for again and again, their entries are made once: :class:`MakesOnce`.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable, Iterable, Sequence
from functools import cached_property
from itertools import zip_longest
from typing import Any, TypeVar

from rigbench.campaign.plan import Entry
from rigbench.campaign.study import Known
from rigbench.scores.row import Row

__all__ = ["Ask", "MakesOnce", "in_step", "replayed"]

Ask = Callable[[Sequence[Entry]], list[Row]]
"""Gives what came of a batch of runs. It does not return where one of them is to be done."""

T = TypeVar("T")


class MakesOnce:
    """A study that makes its entries once, so that their keys are worked out once."""

    @cached_property
    def _made(self) -> dict[Hashable, Any]:
        return {}

    def _once(self, mark: Hashable, make: Callable[[], T]) -> T:
        """Return what was made under a ``mark``, as it is or made now."""
        if mark not in self._made:
            self._made[mark] = make()
        found: T = self._made[mark]
        return found


class _ToDoError(Exception):
    """A batch holds a run that is to be done."""


def replayed(search: Callable[[Ask], T], known: Known) -> tuple[list[Sequence[Entry]], T | None]:
    """Return the batches that a search asks for, up to the first with a run to do, and what it found.

    None instead of that as long as there is a run to do. The search must ask for the same again when it gets
    the same answers.
    """
    batches: list[Sequence[Entry]] = []

    def ask(entries: Sequence[Entry]) -> list[Row]:
        batches.append(entries)
        rows = [row for entry in entries if (row := known(entry)) is not None]
        if len(rows) < len(entries):
            raise _ToDoError
        return rows

    try:
        return batches, search(ask)
    except _ToDoError:
        return batches, None


def in_step(searches: Iterable[Callable[[Ask], object]], known: Known) -> list[list[Entry]]:
    """Return the rounds of searches that go on side by side: the first batches of all, the second, and so on.

    It ends with the first round that has a run to do.
    """
    batches = [replayed(search, known)[0] for search in searches]
    found: list[list[Entry]] = []
    for together in zip_longest(*batches, fillvalue=()):
        found.append([entry for entries in together for entry in entries])
        if any(known(entry) is None for entry in found[-1]):
            break
    return found
