"""Studies: what a campaign asks after its matrix, by runs that depend on how others came out."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from typing import Any, Protocol

from rigbench.campaign.plan import Entry
from rigbench.scores.row import Row

__all__ = ["Known", "Study"]

Known = Callable[[Entry], Row | None]
"""What came of an entry's run: None as long as it is to be done. A host's trouble is a row as well."""


class Study(Protocol):
    """A question that takes runs of its own: a bisection, a design, a search.

    ``name`` is its key in the experiment file. It is a value: all that it does follows from what was declared
    and from the runs, so a study that was stopped goes on where it was, by asking again.
    """

    @property
    def name(self) -> str: ...  # noqa: D102

    @property
    def most_runs(self) -> int:
        """How many runs it takes at most."""
        ...

    def examples(self) -> Sequence[tuple[int, Iterable[Entry]]]:
        """Return its kinds of runs: how many of each it takes at most, and runs of that kind.

        Kinds stand in the order in which they are taken. There may be fewer examples, or no end to them;
        sheets, laws and motions have their parts in the first of them already, for whoever asks what time and
        room all take.
        """
        ...

    def declared(self) -> Mapping[str, Any]:
        """Return what a reader of the store must know to make sense of the runs, in JSON's types."""
        ...

    def rounds(self, known: Known) -> Sequence[Sequence[Entry]]:
        """Return its rounds of runs: those whose runs are all known, and the first that has one to do.

        Asked again once that is done, it returns the same rounds and the next; when every run of all rounds
        is known, the study is over. The sheet, law, motion, condition, level and draw of an entry say where
        it belongs, as in the matrix; the condition may be any text.
        """
        ...
