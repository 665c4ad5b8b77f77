"""What the commands do, as one call each, for notebooks and scripts. Nothing is printed here.

What is at fault raises an error of :mod:`rigbench.errors`, as the commands tell it.
"""

from __future__ import annotations

import datetime
import time
from collections.abc import Callable, Iterable, Iterator, Sequence
from pathlib import Path

from rigbench.arm.files import ArmFiles
from rigbench.campaign.audit import Audit
from rigbench.campaign.audit import audit as audit_files
from rigbench.campaign.campaign import run_campaign, run_first
from rigbench.campaign.find import run_by_key
from rigbench.campaign.gears import RATIOS, Gears
from rigbench.campaign.gears import gears as gears_of
from rigbench.campaign.part import Part
from rigbench.campaign.progress import Progress
from rigbench.campaign.replay import Replay, replay
from rigbench.campaign.store import Store
from rigbench.campaign.studied import asked_study
from rigbench.campaign.studies.tune import GainsFound, gains_found
from rigbench.campaign.studies.worst_case import WorstFound, worst_found
from rigbench.errors import Fault, InputFaults, nearest
from rigbench.experiment import Experiment, store_path
from rigbench.report.level_curves import level_curves_picture
from rigbench.report.limits import limits_picture
from rigbench.report.matrix import matrix_picture
from rigbench.report.page.page import gathered, write_page
from rigbench.report.view import MEDIAN, SHARE, SHOWS, View
from rigbench.scores.changes import changes_since
from rigbench.scores.columns import condition_of
from rigbench.scores.gating import Check, judge
from rigbench.scores.levels import ladder
from rigbench.scores.needs import LawNeeds, needs_of
from rigbench.scores.needs_design import NeedsDesign
from rigbench.scores.results import Results, Tolerance

__all__ = [
    "audit",
    "draw_matrix",
    "gains",
    "gate",
    "gears",
    "needs",
    "run",
    "trace",
    "worst_case",
    "write_report",
]

File = str | Path


def run(
    experiment: Experiment,
    store: File | None = None,
    *,
    jobs: int | None = None,
    draws: int | None = None,
    seconds: float | None = None,
    limit_s: float | None = None,
    again: Sequence[str] = (),
    on_progress: Callable[[Progress], None] | None = None,
) -> Results:
    """Do what of an experiment is not stored yet, gains and studies included, and return the results.

    As ``rigbench run``: ``store`` is results/<the file's stem>.sqlite in the current folder by default;
    ``jobs`` worker processes (None: one a core; 0: none, and no limits on time and memory); the first
    ``draws`` of every cell alone; ``seconds`` after which no run is begun; ``limit_s`` after which a run is
    given up (None: 60 s and 50 ms for each control tick); laws to be run ``again``. A signal or the end of
    the time raises Stopped, with all that was done stored. InputFaults for what can't be had of this.
    """
    if faults := list(_wrong(experiment, jobs, draws, limit_s, again)):
        raise InputFaults(faults)
    path = store_path(experiment.path, store)
    part = Part(draws, None if seconds is None else time.monotonic() + seconds)
    named = None if store is None else str(store)
    plan = experiment.plan(named)
    with Store.open_for_writing(path, plan) as opened:
        for law in again:
            opened.studies_anew(law)
        if experiment.tune is not None:
            if experiment.tune.found(opened.row_of) is None:
                run_first(plan, opened, jobs, on_progress, part=part, limit_s=limit_s)
            plan = experiment.with_stored_gains(opened).plan(named)
        run_campaign(plan, opened, jobs, on_progress, again=again, part=part, limit_s=limit_s)
        return opened.results()


def _wrong(
    experiment: Experiment,
    jobs: int | None,
    draws: int | None,
    limit_s: float | None,
    again: Sequence[str],
) -> Iterator[Fault]:
    """Yield what of the wishes for a run can't be had."""
    file, laws = experiment.path, tuple(experiment.laws)
    for law in again:
        if law not in laws:
            known = f"one of {', '.join(laws)}"
            yield Fault(file, None, "again", f"there is no law '{law}'", known, nearest(law, laws))
    if draws is not None and not 1 <= draws <= experiment.draws:
        most = f"1 to the {experiment.draws} declared"
        yield Fault(file, None, "draws", f"{draws} are wished for", most)
    if jobs is not None and jobs < 0:
        yield Fault(file, None, "jobs", f"{jobs} are wished for", "0 or more")
    if limit_s is not None and not limit_s > 0:
        yield Fault(file, None, "limit_s", f"{limit_s:g} s are wished for", "more than 0 s")
    if limit_s is not None and jobs == 0:
        problem = "is kept by worker processes, and jobs=0 does without them"
        yield Fault(file, None, "limit_s", problem, "one of the two")


def draw_matrix(
    results: Results, picture: File, show: str = SHARE, score: str = "", against: Results | None = None
) -> None:
    """Draw what results show as .png, .svg or .pdf.

    ``show``: share, median, p95 or ratio in the cells of the matrix, of ``score`` (the main one if left out),
    or what changed ``against`` older results; 'curves': the share against the level, or the median of
    ``score``; 'limits': the draws' own limits that find_level found. InputFaults for another ``show``, and
    for a score that no cell of the results has.
    """
    scores = tuple(dict.fromkeys(name for cell in results.cells for name in cell.measures))
    _check(picture, "show", (show,), (*SHOWS, "curves", "limits"))
    _check(picture, "score", filter(None, (score,)), scores)
    path, today = Path(picture), datetime.date.today()
    if show == "curves":
        level_curves_picture(results, path, today, View(MEDIAN, score) if score else View(SHARE))
    elif show == "limits":
        limits_picture(results, path, today)
    else:
        changes = None if against is None else changes_since(against, results, score or None)
        matrix_picture(results, path, today, View(show, score), changes, "older results" if changes else "")


def write_report(store: File, page: File, traces: int | None = None) -> None:
    """Write the HTML page of a store; at most ``traces`` runs are replayed (None: 20 s of them)."""
    with Store.open_for_reading(store) as opened:
        write_page(gathered(opened, str(store), datetime.date.today(), traces), Path(page))


def gate(
    store: File,
    laws: Sequence[str],
    *,
    condition: str | None = None,
    level: float | None = None,
    sheets: Sequence[str] = (),
    baseline: File | None = None,
    allow_open: bool = False,
) -> tuple[Check, ...]:
    """Return whether laws keep the tolerance, and are no worse than in a ``baseline`` store.

    Under a ``condition`` (its column's name), or all sources together at a ``level``; by default together
    nearest to level 1. In the ``sheets`` named, or all. InputFaults for what the store doesn't have.
    """
    with Store.open_for_reading(store) as opened:
        results = opened.results(brief=True)
    names = tuple(column.name for column in results.columns)
    levels = {column.level or 0.0: column.name for column in ladder(results.columns)}
    if level is not None and level not in levels:
        known = ", ".join(f"{one:g}" for one in levels)
        raise InputFaults.one(store, "level", f"nothing was run at {level:g}", f"one of {known}")
    _check(store, "law", laws, results.laws)
    _check(store, "condition", () if condition is None else (condition,), names)
    _check(store, "sheet", sheets, results.sheets)
    changes = None
    if baseline is not None:
        with Store.open_for_reading(baseline) as older:
            changes = changes_since(older.results(brief=True), results)
    condition = condition_of(results.columns, condition, level)
    return judge(results, laws, condition, sheets or results.sheets, allow_open, changes)


def needs(store: File) -> tuple[LawNeeds, ...]:
    """Return what must be known, and how well, law by law; InputFaults where ``needs`` was not asked."""
    with Store.open_for_reading(store) as opened, opened.one_moment():
        studied, tolerance = asked_study(opened, "needs"), opened.labels.tolerance
    design = NeedsDesign.of(studied.declared)
    rows = [record.row for record in studied.records]
    return needs_of(design, rows, tolerance or Tolerance({}, design.required_share))


def worst_case(store: File) -> list[WorstFound]:
    """Return the worst machines found; InputFaults where ``worst_case`` was not asked."""
    with Store.open_for_reading(store) as opened, opened.one_moment():
        return worst_found(asked_study(opened, "worst_case"), opened.labels.tolerance or Tolerance({}))


def gains(store: File) -> list[GainsFound]:
    """Return the gains found, by law and sheet; InputFaults where ``tune`` was not asked."""
    with Store.open_for_reading(store) as opened, opened.one_moment():
        return gains_found(asked_study(opened, "tune"))


def trace(store: File, run: str) -> Replay:
    """Do a stored run again, bit for bit; ``run`` is its key or the beginning of it.

    The replay holds the log (reference, positions, speeds, torques by tick), the scores and whether all is
    as it was stored.
    """
    with Store.open_for_reading(store) as opened:
        return replay(opened, run_by_key(opened, run))


def audit(arm: File) -> Audit:
    """Measure whether the engine plays the arm of an arm file, and which physics_hz it needs."""
    return audit_files(ArmFiles.read(arm))


def gears(arm: File, joints: Sequence[str] = (), ratios: Sequence[float] = RATIOS) -> Gears:
    """Work out what each gear ratio does to the joints of an arm file (all where none is named)."""
    files = ArmFiles.read(arm)
    known = files.arm().joints
    _check(arm, "joint", joints, known)
    return gears_of(files, [joint for joint in known if joint in joints or not joints], ratios)


def _check(where: File, what: str, names: Iterable[str], known: Sequence[str]) -> None:
    """Raise InputFaults for all names that are not among those known."""
    expected = f"one of {', '.join(known)}"
    faults = [
        Fault(str(where), None, what, f"there is no {what} '{name}'", expected, nearest(name, known))
        for name in names
        if name not in known
    ]
    if faults:
        raise InputFaults(faults)
