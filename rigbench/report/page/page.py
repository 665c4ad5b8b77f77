"""The report page: everything that is known of a campaign, put into one HTML file."""

from __future__ import annotations

import base64
import datetime
import hashlib
import shlex
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from importlib.resources import files
from pathlib import Path
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined, Template
from markupsafe import Markup

from rigbench import __version__
from rigbench.campaign.reading import Reader
from rigbench.campaign.work import Host
from rigbench.report.cautions import BEFORE_A_REAL_ARM, CAUTION, NOT_MODELLED
from rigbench.report.cells import Grid
from rigbench.report.gains_words import aim_words
from rigbench.report.limits_words import limits_words, tolerated_reading
from rigbench.report.order import laws_in_order
from rigbench.report.output_file import write_whole
from rigbench.report.page.curve import charts
from rigbench.report.page.data import NAMED, TRACE_LENGTH, cell_data, embedded, run_data
from rigbench.report.page.gains import FoundGains, found_gains, gains_rows
from rigbench.report.page.needs import KEY, READING, FoundNeeds, found_needs, needs_tables
from rigbench.report.page.pairs import pairs_tables
from rigbench.report.page.runs import CellRuns, NamedRun, read_runs, shown_scores
from rigbench.report.page.sections import STEPS, break_even_rows, evidence, heads, matrix_rows, overview
from rigbench.report.page.traces import Trace, chosen, traced
from rigbench.report.page.worst import FoundWorst, found_worst, worst_laws_told
from rigbench.report.shades import shade
from rigbench.report.words import any_random, arm_words, has_levels, percent, runs_words, tolerance_words
from rigbench.report.worst_words import READING as WORST_READING
from rigbench.scores.gather import CellKey
from rigbench.scores.results import Results

__all__ = ["Facts", "Findings", "gathered", "page_html", "write_page"]

DARK = (26, 36, 47), (42, 88, 136)
"""The scale's two ends on a dark screen, where light type stays readable on both."""

Tracebacks = dict[tuple[str, str, str], str]
"""A traceback by law, outcome and reason."""

PRINTED = 2
"""On paper the deciding cells of so many laws stand with their details."""


@dataclass(frozen=True)
class Facts:
    """What is known of a campaign beside its results."""

    store: str  # as the user names it
    experiment: tuple[str, str]  # path and text of the file
    seed: int | None
    resume: str  # the command that goes on with it
    recorded: tuple[str, str]  # when its plan was first and last recorded, UTC
    hosts: tuple[Host, ...]
    date: datetime.date


@dataclass(frozen=True, eq=False)
class Findings:
    """All that goes on the page. ``details`` hold what the cells' panels show, in the cells' order."""

    facts: Facts
    results: Results
    details: tuple[dict[str, Any], ...]
    tracebacks: tuple[str, ...]  # each once; the details have their numbers
    needs: FoundNeeds | None
    worst: FoundWorst | None
    gains: FoundGains | None
    named: int  # runs that the panels name
    replayed: int


def gathered(
    store: Reader,
    path: str,
    date: datetime.date,
    most: int | None = None,
    tell: Callable[[int, int], None] = lambda replays, named: None,
) -> Findings:
    """Read a store and replay the named runs, at most ``most`` (None: as many as once took 20 s together).

    All is read as of one moment, but for the replays, which come after it. ``tell`` is called before them
    with their number and that of the named runs.
    """
    with store.one_moment():
        results = store.results()
        runs = read_runs(store, results)
        facts = _facts(store, path, date)
        needs = found_needs(store.study(KEY), results.tolerance)
        worst, gains = found_worst(store, results.tolerance), found_gains(store)
    named = list(_in_order(results, runs))
    wanted = chosen(named, most)
    tell(len(wanted), len(named))
    traces = {run.key: traced(store, run) for run in wanted}
    tracebacks = _tracebacks(store, runs)
    numbers = {of: number for number, of in enumerate(tracebacks)}
    told = {run.key for run in named[:NAMED]}
    details = tuple(_details(store, path, results, runs, traces, told, numbers))
    replayed = sum(bool(one.error_mm) for one in traces.values())
    return Findings(
        facts, results, details, tuple(tracebacks.values()), needs, worst, gains, len(named), replayed
    )


def write_page(findings: Findings, path: Path) -> None:
    """Write the page, whole or not at all. StoreError if the disk refuses.

    The same findings give the same bytes.
    """
    page = page_html(findings).encode()
    write_whole(path, lambda stream: stream.write(page))


def page_html(findings: Findings) -> str:
    """Return the page. It asks for nothing from anywhere; what users named is text in it, never markup."""
    results, facts = findings.results, findings.facts
    grid = Grid(results)
    laws, levels, scores = laws_in_order(grid), has_levels(results), shown_scores(results)
    script, deciding, commands = _own("page.js"), evidence(grid, laws, levels), _commands(facts)
    data = {
        "cells": findings.details,
        "tracebacks": [text[-TRACE_LENGTH:] for text in findings.tracebacks],
        "deciding": [number for one in deciding[:PRINTED] for number, _ in one.cells],
        "commands": {"draws": commands["export"], "scores": commands["json"]},
    }
    return _template().render(
        results=results,
        facts=facts,
        findings=findings,
        version=__version__,
        grid=grid,
        laws=laws,
        heads=heads(grid),
        tight=len(results.columns) > 8,
        levels=levels,
        random=any_random(results),
        required=percent(results.tolerance.required_share) if results.tolerance else "",
        tolerated_reading=tolerated_reading(results),
        limits=limits_words(results),
        about=(arm_words(results), tolerance_words(results), runs_words(results)),
        rows={sheet: list(matrix_rows(grid, sheet, laws, levels)) for sheet in results.sheets},
        overview=overview(grid, laws, levels),
        evidence=deciding,
        charts={sheet: list(charts(grid, sheet, laws, scores)) for sheet in results.sheets},
        break_even=list(break_even_rows(grid)),
        pairs=list(pairs_tables(grid, laws)),
        needs=list(needs_tables(findings.needs)),
        needs_reading=READING,
        worst=None if findings.worst is None else list(worst_laws_told(findings.worst, facts.store)),
        worst_reading=WORST_READING,
        gains_aim="" if findings.gains is None else aim_words(findings.gains.aim),
        gains=None if findings.gains is None else list(gains_rows(findings.gains)),
        cautions=(CAUTION, BEFORE_A_REAL_ARM, NOT_MODELLED),
        commands=commands,
        steps=[(step, shade(step / STEPS), _dark(step / STEPS)) for step in range(STEPS + 1)],
        style=Markup(_own("page.css")),
        script=Markup(script),
        script_digest=base64.b64encode(hashlib.sha256(script.encode()).digest()).decode(),
        data=Markup(embedded(data)),
    )


def _template() -> Template:
    """Return the page's template, which escapes all that is set into it."""
    return Environment(
        loader=PackageLoader("rigbench.report.page"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    ).get_template("page.html")


def _commands(facts: Facts) -> dict[str, str]:
    """Return the commands that print what the page shows."""
    store, experiment = shlex.quote(facts.store), shlex.quote(facts.experiment[0])
    return {
        "status": f"rigbench status {store}",
        "json": f"rigbench status {store} --json",
        "matrix": f"rigbench matrix {store}",
        "pairs": f"rigbench matrix {store} --text",
        "export": f"rigbench export {store}",
        "needs": f"rigbench needs {store}",
        "worst": f"rigbench worst {store}",
        "gains": f"rigbench gains {store}",
        "check": f"rigbench check {experiment}",
    }


def _facts(store: Reader, path: str, date: datetime.date) -> Facts:
    seed, first, last = store.history
    hosts = tuple(store.hosts().values())
    return Facts(path, store.experiment, seed, store.labels.resume, (first, last), hosts, date)


def _in_order(results: Results, runs: dict[CellKey, CellRuns]) -> Iterator[NamedRun]:
    """Yield the named runs, each once, law by law as the matrix has them: the first are replayed first."""
    laws, seen = laws_in_order(Grid(results)), set()
    for sheet in results.sheets:
        for law in laws:
            for column in results.columns:
                for run in runs[sheet, law, column.name].named:
                    if run.key not in seen:
                        seen.add(run.key)
                        yield run


def _details(
    store: Reader,
    path: str,
    results: Results,
    runs: dict[CellKey, CellRuns],
    traces: dict[str, Trace],
    told: set[str],
    tracebacks: Mapping[tuple[str, str, str], int],
) -> Iterator[dict[str, Any]]:
    grid = Grid(results)
    for cell in results.cells:
        own = runs[cell.sheet, cell.law, cell.condition]
        shown = [
            run_data(store, path, run, grid.score, traces.get(run.key), run.key in told) for run in own.named
        ]
        yield cell_data(grid, cell, own, shown, tracebacks) if cell.planned else {}


def _tracebacks(store: Reader, runs: dict[CellKey, CellRuns]) -> Tracebacks:
    """Return the traceback of the first run of each law that came to each trouble for each reason."""
    first: dict[tuple[str, str, str], str] = {}
    for (_, law, _), own in runs.items():
        for trouble in own.troubles:
            first.setdefault((law, trouble.outcome, trouble.reason), trouble.key)
    records = {of: store.record(key) for of, key in first.items()}
    return {of: record.trace for of, record in records.items() if record is not None and record.trace}


def _own(name: str) -> str:
    return (files("rigbench.report.page") / name).read_text("utf-8")


def _dark(share: float) -> str:
    low, high = DARK
    return "#" + "".join(f"{round(a + (b - a) * share):02x}" for a, b in zip(low, high, strict=True))
