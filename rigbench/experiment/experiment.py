"""The experiment: an experiment file that was read, checked and found in order."""

from __future__ import annotations

import shlex
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from itertools import chain
from pathlib import Path

from rigbench.campaign.plan import Plan, fair_order
from rigbench.campaign.reading import Reader
from rigbench.campaign.studies.tune import Tune, with_gains
from rigbench.campaign.study import Study
from rigbench.errors import Fault, InputFaults
from rigbench.experiment.across import Skipped, faults_across, notes_across, skipped_of
from rigbench.experiment.combinations import combinations
from rigbench.experiment.expand import Sheet, entries_of, spreading
from rigbench.experiment.file_kind import EXPERIMENT, check_kind
from rigbench.experiment.find_level import stop_early_notes
from rigbench.experiment.read_vary import read_sweep
from rigbench.experiment.schema import ExperimentKeys
from rigbench.experiment.sheet import Checked, check_sheet
from rigbench.experiment.studies import studies_of
from rigbench.experiment.tune import tune_study
from rigbench.scores.intervals import draws_needed, misses_allowed
from rigbench.scores.results import Column, Tolerance
from rigbench.yamlfile import Document, load, partial, read_text

__all__ = ["Experiment", "load_experiment", "store_path"]

MOST_RUNS = 1_000_000
"""Runs that an experiment may declare; each of them has to be held in memory."""


@dataclass(frozen=True)
class Experiment:
    """All that an experiment file declares, defaults included.

    ``path`` as the user named it; ``laws`` the rows, variants included, and ``columns`` what is possible in
    any sheet; ``draws`` the machines drawn in each random condition; ``skipped`` the
    combinations that can't be; ``law_lines`` where the laws stand in the file; ``notes`` what the user
    should know but need not change; ``studies`` what is asked after the matrix; ``tune`` the search for gains
    before it, if one is declared; ``model`` the file of another arm that the laws of all sheets believe, ''
    where it is the arm itself or swept; ``studies_of`` gives the studies of changed sheets.
    """

    path: str
    text: str
    title: str
    arm: str
    sheets: tuple[Sheet, ...]
    laws: tuple[str, ...]
    motions: tuple[str, ...]
    columns: tuple[Column, ...]
    draws: int
    tolerance: Tolerance | None
    law_lines: Mapping[str, int | None]
    skipped: tuple[Skipped, ...] = ()
    notes: tuple[Fault, ...] = ()
    studies: tuple[Study, ...] = ()
    stop_early: bool = False
    tune: Tune | None = None
    model: str = ""
    studies_of: Callable[[Sequence[Sheet]], tuple[Study, ...]] = field(
        default=lambda _: (), repr=False, compare=False
    )

    @property
    def random(self) -> bool:
        """Whether any condition is random."""
        return any(column.random for column in self.columns)

    @property
    def runs(self) -> int:
        """How many runs are declared: one a sheet, law, motion and column, or draw where that is random."""
        return sum(
            len(sheet.laws) * len(sheet.motions) * (self.draws if condition.column.random else 1)
            for sheet in self.sheets
            for condition in sheet.conditions
        )

    @property
    def absent(self) -> tuple[tuple[str, str, str], ...]:
        """The cells without runs: (sheet, law, condition) that can't be combined."""
        return tuple(
            (sheet.name, law, column.name)
            for sheet in self.sheets
            for law in self.laws
            for column in self.columns
            if law not in sheet.laws or column not in [own.column for own in sheet.conditions]
        )

    def tuned(self, gains: Mapping[tuple[str, str], Mapping[str, float]]) -> Experiment:
        """Return the experiment with these gains, by sheet and law, in place of those declared."""
        sheets = tuple(
            replace(
                sheet,
                laws={
                    law: with_gains(choice, gains.get((sheet.name, law), {}))
                    for law, choice in sheet.laws.items()
                },
            )
            for sheet in self.sheets
        )
        return replace(self, sheets=sheets, studies=self.studies_of(sheets))

    def with_stored_gains(self, store: Reader) -> Experiment:
        """Return the experiment with the gains that a store holds; itself where none are, or not all yet."""
        gains = None if self.tune is None else self.tune.found(store.row_of)
        return self if gains is None else self.tuned(gains)

    def plan(self, store: str | None = None) -> Plan:
        """Return every run, in order; ``store`` is the store's path if the user named one."""
        resume = ["rigbench", "run", self.path, *(() if store is None else ("--store", store))]
        return Plan(
            title=self.title,
            arm=self.arm,
            experiment_text=self.text,
            experiment_path=self.path,
            sheets=tuple(sheet.name for sheet in self.sheets),
            laws=self.laws,
            motions=self.motions,
            columns=self.columns,
            draws=self.draws,
            tolerance=self.tolerance,
            entries=fair_order(chain.from_iterable(entries_of(sheet, self.draws) for sheet in self.sheets)),
            resume=shlex.join(resume),
            absent=self.absent,
            studies=self.studies,
            stop_early=self.stop_early,
            first=self.tune,
            model=self.model,
        )


def store_path(file: str, store: str | Path | None = None) -> Path:
    """Return where the runs of an experiment file are stored, unless the user names a ``store``."""
    return Path("results") / f"{Path(file).stem}.sqlite" if store is None else Path(store)


def load_experiment(path: str | Path) -> Experiment:
    """Read and check an experiment file.

    InputFaults with every fault of the file, of its arm files, motion files and law files, at once. A
    second look is taken at whatever parsed, so a fault in one place hides none elsewhere.
    """
    file = str(path)
    text = read_text(Path(path), file, "the experiment file")
    document = load(file, text)
    check_kind(document, EXPERIMENT)
    keys, faults = partial(document, ExperimentKeys)
    if keys is None:
        raise InputFaults(faults)
    sweep, more = read_sweep(document)
    made, collisions = combinations(document, sweep)
    axes = (*sweep.sheets, *sweep.variants)
    checked = [check_sheet(one, axes, Path(path).parent) for one in made]
    faults += [*more, *collisions, *faults_across(document, sweep, checked)]
    if not faults:
        experiment = _assembled(document, text, keys, checked)
        variants, tolerance = made[0].variants, experiment.tolerance
        studies, too_large = studies_of(document, keys, experiment.sheets, variants, tolerance)
        rows = {row: law for each in checked if each.keys for row, law in (each.keys.laws or {}).items()}
        experiment = replace(
            experiment,
            studies=studies,
            tune=tune_study(document, keys, rows, experiment.sheets, variants, axes, tolerance),
            studies_of=lambda sheets: studies_of(document, keys, sheets, variants, tolerance)[0],
        )
        faults += [*_size_faults(document, experiment), *too_large]
    if faults:
        once = dict.fromkeys(faults)
        raise InputFaults(sorted(once, key=lambda fault: (fault.file != file, fault.file, fault.line or 0)))
    notes = [*notes_across(document, sweep, checked), *_looked_over(document, keys, experiment)]
    return replace(experiment, notes=tuple(dict.fromkeys(notes)))


def _assembled(document: Document, text: str, keys: ExperimentKeys, checked: list[Checked]) -> Experiment:
    """Put the sheets together, all of which are in order."""
    whole = [each for each in checked if each.sheet is not None and each.sheet.laws]
    sheets = _drawn_alike([each.sheet for each in whole if each.sheet is not None])
    rows = dict.fromkeys(row for each in whole for row in (each.keys and each.keys.laws) or ())
    lines = whole[0].combination.document
    models = {each.keys.model for each in whole if each.keys is not None}
    return Experiment(
        path=document.file,
        text=text,
        title=keys.title or Path(document.file).stem,
        arm=", ".join(dict.fromkeys(each.arm.name for each in whole if each.arm is not None)),
        sheets=sheets,
        laws=tuple(row for row in rows if any(row in sheet.laws for sheet in sheets)),
        motions=tuple(sheets[0].motions),
        columns=_columns(sheets),
        draws=keys.draws,
        tolerance=whole[0].tolerance,
        law_lines={row: lines.line(("laws", row)) for row in rows},
        skipped=tuple(skipped_of(checked)),
        stop_early=keys.stop_early,
        model=(models.pop() or "") if len(models) == 1 else "",
    )


def _drawn_alike(sheets: Sequence[Sheet]) -> tuple[Sheet, ...]:
    """Return the sheets with every column random that is so in any of them, as in a sweep of noise from 0.

    Then one rule judges a law in all of them.
    """
    random = {
        condition.column.name for sheet in sheets for condition in sheet.conditions if condition.column.random
    }
    return tuple(
        replace(sheet, conditions=tuple(one.drawn(one.column.name in random) for one in sheet.conditions))
        for sheet in sheets
    )


def _columns(sheets: Iterable[Sheet]) -> tuple[Column, ...]:
    """Return the columns of all sheets in the order of those of one: what one lacks, another may have."""
    found: list[Column] = []
    for sheet in sheets:
        at = 0
        for column in (condition.column for condition in sheet.conditions):
            if column in found:
                at = found.index(column) + 1
            else:
                found.insert(at, column)
                at += 1
    return tuple(found)


def _size_faults(document: Document, experiment: Experiment) -> Iterator[Fault]:
    if experiment.runs > MOST_RUNS:
        yield document.fault(("draws",), f"{experiment.runs} runs in all", f"at most {MOST_RUNS}")


def _looked_over(document: Document, keys: ExperimentKeys, experiment: Experiment) -> Iterator[Fault]:
    """Look at the experiment as a whole: what is allowed, but may not be what was meant."""
    if experiment.tolerance is None and not keys.tolerance:
        yield document.fault((), "no tolerance is declared: the matrix will show scores, but no verdicts")
    sources = any(spreading(sheet.first.mismatch) for sheet in experiment.sheets)
    acting = any(condition.sources for sheet in experiment.sheets for condition in sheet.conditions)
    if sources and not acting:
        said = "no condition uses it: declare each_alone or together under conditions, or a case's level"
        yield document.fault(("mismatch",), said)
    if experiment.stop_early:
        yield from stop_early_notes(document, keys, experiment.random)
        return
    tolerance = experiment.tolerance
    if tolerance is None or not experiment.random:
        return
    if misses_allowed(tolerance.required_share, experiment.draws) is None:
        needed = draws_needed(tolerance.required_share)
        yield document.fault(
            ("draws",),
            f"{experiment.draws} draws can't show a required share of {tolerance.required_share:g}; "
            f"it takes {needed} without a miss",
        )
