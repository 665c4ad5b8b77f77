"""Doing runs and storing what comes of them: a list of them, or a study's rounds."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from contextlib import ExitStack, closing

from rigbench.arm.mismatch import draw_values
from rigbench.campaign.closable import Closable
from rigbench.campaign.executor import Executor, Processes, Standing, executor_for
from rigbench.campaign.plan import Entry
from rigbench.campaign.progress import Progress
from rigbench.campaign.reading import SETTLED
from rigbench.campaign.stopping import Stop
from rigbench.campaign.store import Store
from rigbench.campaign.study import Study
from rigbench.campaign.work import Outcome
from rigbench.scores.row import MACHINE_OUTCOMES, Row

__all__ = ["Doing", "Draws", "Studying", "record_known"]


class Doing(Closable):
    """Does runs until told to stop, by the given ``executor`` or else by ``jobs`` workers within ``limit_s``.

    Use it in a ``with``. Who does them stands by from one list of runs to the next; a longer one may bring
    more workers.
    """

    def __init__(
        self,
        store: Store,
        stop: Stop,
        jobs: int | None,
        executor: Executor | None,
        limit_s: float | None = None,
    ) -> None:
        self.stop = stop
        self._store, self._jobs, self._executor, self._limit_s = store, jobs, executor, limit_s
        self._draws = Draws()
        self._standing: Standing | None = None
        self._workers = 0
        self._crew = ExitStack()

    def close(self) -> None:
        """End what does the runs."""
        self._crew.close()

    def outcomes(
        self, entries: Sequence[Entry], wanted: Callable[[Entry], bool] = lambda _: True
    ) -> Iterator[Outcome]:
        """Do the entries' runs, those that are still ``wanted`` when it is their turn.

        Each outcome is yielded once it is stored.
        """
        by_key = {entry.key: entry for entry in entries}
        try:
            with closing(
                self._whoever_does(len(entries)).run_all(filter(wanted, self.stop.until(entries)))
            ) as outcomes:
                for outcome in outcomes:
                    if self.stop.at_once:  # a law may have swallowed the interrupt: its run is dropped too
                        break
                    self._store.add([outcome], self._draws.of(by_key[outcome.key]))
                    yield outcome
        except KeyboardInterrupt:
            self.stop.asked = True

    def _whoever_does(self, runs: int) -> Standing:
        """Return who stands by, if there are workers enough for so many runs, else more of them."""
        wanted = self._executor or executor_for(self._jobs, runs, self._limit_s)
        workers = wanted.jobs if isinstance(wanted, Processes) else 0
        if self._standing is None or self._workers < workers:
            self._crew.close()
            self._standing, self._workers = self._crew.enter_context(wanted.standing()), workers
        return self._standing


class Studying:
    """A study at work. ``asked``: runs that it has asked for so far; ``done``: those that are known."""

    def __init__(self, study: Study, store: Store, doing: Doing) -> None:
        self._study, self._store, self._doing = study, store, doing
        self._tried: set[str] = set()
        self._rows: dict[tuple[object, ...], Row] = {}  # by run and place: what is known stays so
        self.asked = self.done = 0

    def go(self, report: Callable[[Progress], None]) -> None:
        """Do rounds until the study is finished, or the campaign is to stop."""
        while True:
            asked = [entry for entries in self._study.rounds(self._known) for entry in entries]
            rows = [self._known(entry) for entry in asked]
            todo = {entry.key: entry for entry, row in zip(asked, rows, strict=True) if row is None}
            failed = sum(row is not None and row.outcome not in MACHINE_OUTCOMES for row in rows)
            self.asked, self.done = len(asked), len(asked) - rows.count(None)
            self._store.record_study(self._study, asked, finished=not todo)
            report(Progress(self.asked, self.done - failed, failed, study=self._study.name))
            if not todo or self._doing.stop.why:
                return
            for outcome in self._doing.outcomes(list(todo.values())):
                self._tried.add(outcome.key)
                self.done += 1
                failed += outcome.outcome not in MACHINE_OUTCOMES
                report(Progress(self.asked, self.done - failed, failed, study=self._study.name))

    def _known(self, entry: Entry) -> Row | None:
        """Return what came of a run, in this campaign if that is the host's and may pass."""
        place = entry.sheet, entry.law, entry.motion, entry.condition, entry.level, entry.draw
        mark = entry.key, *place
        if mark in self._rows:
            return self._rows[mark]
        row = self._store.row_of(entry)
        if row is not None and row.outcome not in SETTLED and entry.key not in self._tried:
            return None
        if row is not None:
            self._rows[mark] = row
        return row


def record_known(study: Study, store: Store) -> None:
    """Put down the runs that a study asks for as things are, and whether all of them are stored."""
    asked = [entry for entries in study.rounds(store.row_of) for entry in entries]
    store.record_study(study, asked, finished=all(store.row_of(entry) is not None for entry in asked))


class Draws:
    """The values of draws, each told once."""

    def __init__(self) -> None:
        self._told: set[tuple[object, ...]] = set()

    def of(self, entry: Entry) -> Iterator[tuple[int, int, dict[str, float]]]:
        """Yield (seed, draw, {parameter: u}) of what is drawn in an entry's run and was not told yet."""
        run = entry.run
        if run.draw is None or run.directions is not None:
            return
        for source in run.sources:
            mark = (run.arm, run.seed, run.draw, source, getattr(run.mismatch, source))  # sheets may differ
            if mark not in self._told:
                self._told.add(mark)
                values = draw_values(run.arm.arm(), run.mismatch, (source,), run.seed, run.draw)
                yield run.seed, run.draw, values
