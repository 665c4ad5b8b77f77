"""Reading a store: what is planned, what is done, and what came of it."""

from __future__ import annotations

import contextlib
import json
import sqlite3
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from rigbench.campaign.blocks import SIZE, Block, blocks, layouts, stored_scores
from rigbench.campaign.closable import Closable
from rigbench.campaign.connection import connect, owner, speaking_plainly
from rigbench.campaign.counts import IN_PLAY, Counts, counts_of, ends_of
from rigbench.campaign.kept import Kept, NotKept, restored
from rigbench.campaign.labels import Labels
from rigbench.campaign.owner import Owner
from rigbench.campaign.places import Place, places_of
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.studied import Studied, stored_studies
from rigbench.campaign.study_runs import StudyRuns
from rigbench.campaign.tabling import tabled
from rigbench.campaign.work import Host
from rigbench.errors import StoreError
from rigbench.scores.names import main_score
from rigbench.scores.results import Results
from rigbench.scores.row import MACHINE_OUTCOMES, SETTLED_TROUBLES, Row

if TYPE_CHECKING:
    from rigbench.scores.searched import Searched  # not at run time: it brings scipy

__all__ = ["Counts", "Reader", "Record"]

PLANNED = "plan CROSS JOIN runs USING (id) CROSS JOIN keys USING (id) CROSS JOIN places ON places.id = place"
IN_STUDIES = "studied CROSS JOIN runs USING (id) CROSS JOIN keys USING (id)"
"""Where the runs of the plan and those of the studies are found; either may be asked for the same columns."""

SETTLED = (*MACHINE_OUTCOMES, *SETTLED_TROUBLES)
"""Outcomes that the same run would have again. The others are tried anew by the next campaign."""


@dataclass(frozen=True)
class Record:
    """A row with what the store knows beyond it."""

    row: Row
    key: str
    trace: str
    sources: tuple[str, ...]  # the mismatch sources that act
    residual: float | None  # rad/s
    wall_s: float | None


class Reader(Closable):
    """An open store, to be read. Use it in a ``with``."""

    def __init__(self, path: Path, connection: sqlite3.Connection) -> None:
        self.path = path
        self._connection = connection

    @staticmethod
    def open_for_reading(path: str | Path) -> Reader:
        """Open a store that holds a campaign; StoreError if there is none at ``path``."""
        path = Path(path).resolve()
        with speaking_plainly(path):
            connection = connect(path, writing=False)
            try:
                if owner(connection) is None:
                    raise StoreError(str(path), "holds no campaign yet; 'rigbench run' puts one in")
            except BaseException:
                connection.close()
                raise
        return Reader(path, connection)

    def close(self) -> None:
        """Close the file."""
        self._connection.close()

    @contextlib.contextmanager
    def one_moment(self) -> Iterator[None]:
        """Read all that is read within as it was at one moment, however a writer goes on meanwhile.

        Within another such moment it is that one.
        """
        if self._connection.in_transaction:
            yield
            return
        with speaking_plainly(self.path):
            self._connection.execute("BEGIN DEFERRED")
        try:
            yield  # an error of the disk in here need not be this file's
        finally:
            with contextlib.suppress(sqlite3.Error):
                self._connection.execute("ROLLBACK")

    @contextlib.contextmanager
    def _transaction(self) -> Iterator[sqlite3.Connection]:
        """Do all that is done within, or nothing."""
        with speaking_plainly(self.path):
            self._connection.execute("BEGIN IMMEDIATE")
            try:
                yield self._connection
                self._connection.execute("COMMIT")
            except BaseException:
                if self._connection.in_transaction:
                    self._connection.execute("ROLLBACK")
                raise

    def missing(self, plan: Plan) -> list[Entry]:
        """Return the entries to run, in order, one for each key.

        What has the machine's verdict is not run again, nor is what would come again likewise (another
        text of a law is another key), unless it was put down to be run anew, see :meth:`Store.run_anew`.
        What timed out or crashed is tried again.
        """
        marks = ", ".join("?" * len(SETTLED))
        with speaking_plainly(self.path):
            query = self._connection.execute(
                f"SELECT key FROM runs JOIN keys USING (id) WHERE NOT anew AND outcome IN ({marks})", SETTLED
            )
            seen = {key for (key,) in query}
        missing = []
        for entry in plan.entries:
            if entry.key not in seen:
                seen.add(entry.key)
                missing.append(entry)
        return missing

    @property
    def labels(self) -> Labels:
        """The names and limits that the campaign is shown with."""
        with speaking_plainly(self.path):
            return Labels.from_json(self._connection.execute("SELECT labels FROM campaign").fetchone()[0])

    @property
    def owner(self) -> Owner | None:
        """The experiment that the store belongs to, None if it has none yet."""
        with speaking_plainly(self.path):
            return owner(self._connection)

    @property
    def experiment(self) -> tuple[str, str]:
        """Path and text of the experiment file."""
        with speaking_plainly(self.path):
            query = self._connection.execute("SELECT experiment_path, experiment_text FROM campaign")
            path, text = query.fetchone()
        return path, text

    @property
    def history(self) -> tuple[int | None, str, str]:
        """Seed of the draws (None if nothing is random), and when the plan was first and last recorded."""
        with speaking_plainly(self.path):
            query = self._connection.execute("SELECT seed, created, updated FROM campaign")
            seed, created, updated = query.fetchone()
        return None if seed is None else int(seed), created, updated

    @property
    def files(self) -> list[tuple[str, str]]:
        """Paths and texts of the arm, URDF and law files that the present plan is made of."""
        with speaking_plainly(self.path):
            query = self._connection.execute("SELECT path, text FROM files WHERE planned ORDER BY path")
            return query.fetchall()

    def counts(self) -> Counts:
        """Count the planned runs, and of those the ones that are done and those that failed."""
        return counts_of(self.outcomes())

    def outcomes(self) -> dict[str, int]:
        """Count the planned runs by their outcome, '' for those without one or put down to be run anew."""
        with speaking_plainly(self.path):
            return dict(
                self._connection.execute(
                    "SELECT CASE WHEN anew THEN '' ELSE coalesce(outcome, '') END, count(*)"
                    f" FROM {IN_PLAY} LEFT JOIN runs USING (id) GROUP BY 1",
                    (self._ends(),),
                )
            )

    def _ends(self) -> str:
        labels = self.labels
        return ends_of(labels, self.places() if labels.settled else {})

    def records(self) -> Iterator[Record]:
        """Yield what is stored of the planned runs, in the order of the plan."""
        return self._records()

    def records_of(self, law: str, condition: str) -> Iterator[Record]:
        """Yield those of one law under one condition, in every sheet and motion."""
        within = "WHERE place IN (SELECT id FROM places WHERE law = ? AND condition = ?)"
        return self._records(within, law, condition)

    def records_with(self, outcomes: Sequence[str]) -> Iterator[Record]:
        """Yield those that came to one of these outcomes, then the runs of studies that did, each once."""
        within = f"outcome IN ({', '.join('?' * len(outcomes))})"
        yield from self._records(f"WHERE {within}", *outcomes)
        beside = f"WHERE {within} AND studied.id NOT IN (SELECT id FROM plan)"
        yield from {r.key: r for r in self._records(beside, *outcomes, within=IN_STUDIES)}.values()

    def record(self, key: str) -> Record | None:
        """Return what is stored of a planned run, as the first of the entries that it stands for."""
        for within, of_key in ((PLANNED, "plan.id"), (IN_STUDIES, "studied.id")):
            where = f"WHERE {of_key} = (SELECT id FROM keys WHERE key = ?)"
            for record in self._records(where, key, within=within):
                return record
        return None

    def row_of(self, entry: Entry) -> Row | None:
        """Return what is stored of an entry's run, planned or not; None if nothing, or to be anew."""
        place = entry.sheet, entry.law, entry.motion, entry.condition, entry.level, entry.draw
        with speaking_plainly(self.path):
            found = self._connection.execute(
                "SELECT outcome, layout, scores, reason FROM keys JOIN runs USING (id)"
                " WHERE key = ? AND NOT anew",
                (entry.key,),
            ).fetchone()
            if found is None:
                return None
            outcome, layout, scores, reason = found
            return Row(*place, outcome, layouts(self._connection)[layout].scores_of(scores), reason)

    def begun(self) -> dict[str, bool]:
        """Return the names of the studies that the campaign has begun, and whether each is finished."""
        with speaking_plainly(self.path):
            return {name: whole for name, (_, whole) in stored_studies(self._connection).items()}

    def unfinished(self) -> tuple[str, ...]:
        """Return the names of the declared studies of which not every run is stored, in their order."""
        begun = self.begun()
        return tuple(name for name in self.labels.studies if not begun.get(name))

    def study(self, name: str) -> Studied | None:
        """Return a study and the runs of it that are stored, in its order; None if it has not begun."""
        with speaking_plainly(self.path):
            found = stored_studies(self._connection).get(name)
        if found is None:
            return None
        declared, finished = found
        records = tuple(self._records("WHERE study = ?", name, within=IN_STUDIES))
        return Studied(name, declared, records, finished)

    def _records(self, where: str = "", *values: str, within: str = PLANNED) -> Iterator[Record]:
        with speaking_plainly(self.path):
            known = layouts(self._connection)
            query = self._connection.execute(
                "SELECT sheet, law, motion, condition, level, draw, outcome, layout, scores, reason, key,"
                f" trace, sources, residual_rad_s, wall_s FROM {within} {where} ORDER BY position",
                values,
            )
            for *place, outcome, layout, scores, reason, key, trace, sources, residual, wall_s in query:
                sheet, law, motion, condition, level, draw = place
                every = known[layout].scores_of(scores)
                row = Row(sheet, law, motion, condition, level, draw, outcome, every, reason)
                yield Record(row, key, trace, tuple(filter(None, sources.split(","))), residual, wall_s)

    def keys(self, beginning: str) -> tuple[list[str], list[str]]:
        """Return the keys that begin so: of the planned runs, and of those stored for older plans alone."""
        within = "key >= ? AND key < ?"  # hexadecimal digits all come before 'g'
        with speaking_plainly(self.path):
            planned, stored = (
                {key for (key,) in self._connection.execute(query, (beginning, f"{beginning}g"))}
                for query in (
                    f"SELECT key FROM keys WHERE {within}"
                    " AND (id IN (SELECT id FROM plan) OR id IN (SELECT id FROM studied))",
                    f"SELECT key FROM keys JOIN runs USING (id) WHERE {within}",
                )
            )
        return sorted(planned), sorted(stored - planned)

    def kept(self, key: str) -> Kept:
        """Return a planned run itself, made from the store alone; StoreError if that can't be done."""
        with speaking_plainly(self.path):
            found = self._connection.execute(
                "SELECT run, draw FROM keys JOIN plan USING (id) JOIN places ON places.id = place"
                " WHERE key = ?1 UNION ALL"
                " SELECT run, draw FROM keys JOIN studied USING (id) WHERE key = ?1 LIMIT 1",
                (key,),
            ).fetchone()
            if found is None:
                raise StoreError(str(self.path), f"run {key} is not planned any more")
            digest, draw = found
            if digest is None:
                problem = "was filled by an older rigbench, which did not keep what a replay needs"
                raise StoreError(str(self.path), f"{problem}; 'rigbench run' adds it, and runs nothing anew")
            try:
                return restored(self.text(digest), self.text, draw)
            except NotKept as reason:
                raise StoreError(str(self.path), f"run {key} can't be replayed: {reason}") from None

    def text(self, digest: str) -> str:
        """Return the text of a run or of a part of one; NotKept if it is missing."""
        found = self._connection.execute("SELECT text FROM parts WHERE digest = ?", (digest,)).fetchone()
        if found is None:
            raise NotKept("a part of it is missing from the store")
        return str(found[0])

    def host(self, key: str) -> Host | None:
        """Return the host that did a stored run."""
        with speaking_plainly(self.path):
            found = self._connection.execute(
                "SELECT cpu, versions FROM keys JOIN runs USING (id) JOIN hosts ON hosts.id = host"
                " WHERE key = ?",
                (key,),
            ).fetchone()
        return None if found is None else Host(found[0], tuple(json.loads(found[1]).items()))

    def hosts(self) -> dict[int, Host]:
        """Return the hosts that did the planned runs, by the numbers that the runs have for them."""
        with speaking_plainly(self.path):
            query = self._connection.execute(
                "SELECT id, cpu, versions FROM hosts WHERE id IN"
                " (SELECT host FROM plan CROSS JOIN runs USING (id)) ORDER BY id"
            )
            return {number: Host(cpu, tuple(json.loads(text).items())) for number, cpu, text in query}

    def planned(self) -> int:
        """Count the planned runs."""
        with speaking_plainly(self.path):
            number: int = self._connection.execute("SELECT count(*) FROM plan").fetchone()[0]
        return number

    def places(self) -> dict[int, Place]:
        """Return where the planned runs stand, by the numbers that the runs have for it."""
        with speaking_plainly(self.path):
            return places_of(self._connection)

    def scores(self) -> tuple[str, ...]:
        """Return the scores that any stored run of the plan has, in display order."""
        with speaking_plainly(self.path):
            return stored_scores(self._connection)

    def blocks(self, names: Sequence[str], more: Sequence[str] = (), size: int = SIZE) -> Iterator[Block]:
        """Yield the stored runs of the plan as columns, a block at a time; see :func:`blocks`."""
        with speaking_plainly(self.path):
            yield from blocks(self._connection, names, more, size)

    def study_runs(self) -> StudyRuns:
        """Return the runs of all studies, to be read as columns."""
        return StudyRuns(self.path, self._connection)

    def rows(self) -> list[Row]:
        """Return the rows of the planned runs that are stored, in the order of the plan."""
        return [record.row for record in self.records()]

    def draw_values(self) -> dict[int, dict[str, float]]:
        """Return the stored factors u of the campaign's seed, by draw and parameter."""
        values: dict[int, dict[str, float]] = {}
        with speaking_plainly(self.path):
            for draw, name, u in self._connection.execute(
                "SELECT draw, parameter, u FROM draw_values WHERE seed = (SELECT seed FROM campaign)"
            ):
                values.setdefault(draw, {})[name] = u
        return values

    def results(self, brief: bool = False, also: Sequence[str] = ()) -> Results:
        """Return the cells and standings of all that is stored, as of one moment.

        If ``brief``, the cells have the measures of the main score and of those with a limit alone: all that
        a text shows, at a small part of the time. The scores named by ``also`` come besides, and their draws
        are kept for comparisons as those of the main score are.
        """
        from rigbench.scores.summary import summarise  # scipy: slow to import

        with self.one_moment():
            labels = self.labels
            limited = () if labels.tolerance is None else labels.tolerance.limited
            names = tuple(dict.fromkeys([main_score(limited), *limited, *also])) if brief else None
            names = self.scores() if names is None else names
            table, outcomes = tabled(self.blocks(names, ("anew",)), self.places(), self.planned(), names)
            counts = self.counts() if labels.settled else counts_of(outcomes)
            search = self._searched(labels)
        return summarise(
            table,
            title=labels.title,
            arm=labels.arm,
            model=labels.model,
            motions=labels.motions,
            tolerance=labels.tolerance,
            draws=labels.draws,
            sheets=labels.sheets,
            laws=labels.laws,
            columns=labels.columns,
            planned=counts.planned,
            done=counts.done,
            failed=counts.failed,
            absent=labels.absent,
            also=also,
            search=search,
            stop_early=labels.stop_early,
            settled={(sheet, condition): after for sheet, condition, after in labels.settled},
        )

    def _searched(self, labels: Labels) -> Searched | None:
        """Return what the study find_level has shown, once it is finished."""
        from rigbench.campaign.studies.find_level import NAME, searched_of

        study = self.study(NAME)
        if study is None or not study.finished or labels.tolerance is None:
            return None
        return searched_of(study, labels.tolerance)
