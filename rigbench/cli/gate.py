"""``rigbench gate``: whether named laws are good enough to go on, for a script to ask."""

from __future__ import annotations

import datetime
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

from rigbench.campaign.store import Store
from rigbench.cli.matrix import changes_against
from rigbench.cli.naming import level_fault, name_fault
from rigbench.cli.output import print_json, show
from rigbench.cli.stored import check_output
from rigbench.errors import Fault, InputFaults
from rigbench.scores.columns import condition_of
from rigbench.scores.gating import judge
from rigbench.scores.results import Results

__all__ = ["REFUSED", "Asked", "gate_store"]

REFUSED = 4
"""The exit code where a check fails."""

STATES = {"passed": "passes", "failed": "fails", "skipped": "skipped"}


@dataclass(frozen=True)
class Asked:
    """What is asked of a store: the options of the command."""

    laws: tuple[str, ...]
    level: float | None = None
    condition: str | None = None
    sheets: tuple[str, ...] = ()
    baseline: str | None = None
    allow_open: bool = False
    junit: str | None = None


def gate_store(path: str, asked: Asked, as_json: bool) -> None:
    """Print what each check finds, and leave with exit code 4 if any fails."""
    with Store.open_for_reading(path) as store:
        results = store.results(brief=True)
    faults = list(_faults(path, results, asked))
    if faults:
        raise InputFaults(faults)
    baseline = None
    if asked.baseline is not None:
        baseline = changes_against(path, asked.baseline, results, None, "--baseline")
    condition = condition_of(results.columns, asked.condition, asked.level)
    laws, sheets = tuple(dict.fromkeys(asked.laws)), asked.sheets or results.sheets
    checks = judge(results, laws, condition, sheets, asked.allow_open, baseline)
    failed = any(check.state == "failed" for check in checks)
    from rigbench.report.gate_words import check_json, check_words
    from rigbench.report.json_form import plain_values

    if asked.junit is not None:
        from rigbench.report.junit import write_junit

        for store_file in filter(None, (path, asked.baseline)):
            check_output(Path(asked.junit), store_file)
        write_junit(Path(asked.junit), checks, results, datetime.datetime.now())
    if as_json:
        told = [check_json(check, results) for check in checks]
        document = {"store": path, "baseline": asked.baseline, "condition": condition, "passed": not failed}
        print_json(plain_values(document | {"checks": told}))
    else:
        show("\n".join(f"{STATES[check.state]}: {check_words(check, results)}" for check in checks))
    if failed:
        raise SystemExit(REFUSED)


def _faults(path: str, results: Results, asked: Asked) -> Iterator[Fault]:
    for law in asked.laws:
        yield from name_fault(path, "--law", "law", law, results.laws)
    for sheet in asked.sheets:
        yield from name_fault(path, "--sheet", "sheet", sheet, results.sheets)
    if asked.level is not None and asked.condition is not None:
        yield Fault(path, None, "--level --condition", "both name a column", "one of them")
    elif asked.condition is not None:
        yield from name_fault(path, "--condition", "condition", asked.condition, _names(results))
    elif asked.level is not None:
        yield from level_fault(path, asked.level, results.columns)
    if results.tolerance is None and asked.baseline is None:
        problem = "the experiment declares no tolerance, so no law can miss one"
        yield Fault(path, None, "", problem, "--baseline OLD, or a tolerance in the experiment file")


def _names(results: Results) -> Sequence[str]:
    return [column.name for column in results.columns]
