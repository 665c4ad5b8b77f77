"""``rigbench run --fresh``: an empty store, with what was stored so far kept aside."""

from __future__ import annotations

import sys
from pathlib import Path

import typer

from rigbench.campaign.plan import Plan
from rigbench.campaign.store import Store
from rigbench.cli.output import say
from rigbench.errors import InputFaults, Stopped, counted

__all__ = ["make_room"]


def make_room(path: Path, plan: Plan, sure: bool) -> None:
    """Set the store at ``path`` aside if it holds runs, once that is confirmed; else change nothing.

    It is asked at a terminal, unless ``sure``; exit code 3 if the answer is no. InputFaults where nobody
    can be asked. StoreBusy while another process writes to the store, StoreForeign if it belongs to another
    experiment; others as the disk has them.
    """
    if not path.exists():
        return
    with Store.open_for_writing(path, plan) as store:
        runs = store.held()
        if not runs:
            return
        if not sure:
            _confirm(plan, path, runs)
        aside = store.set_aside()
    say(f"the {counted(runs, 'run')} stored so far are kept in {path.with_name(aside.name)}")


def _confirm(plan: Plan, path: Path, runs: int) -> None:
    there = f"{counted(runs, 'run')} in {path}"
    if not (sys.stdin and sys.stdin.isatty() and sys.stderr.isatty()):
        problem = f"would set aside {there}, and there is no terminal to ask at"
        raise InputFaults.one(plan.experiment_path, "--fresh", problem, "--yes")
    try:
        agreed = typer.confirm(f"Set aside {there}, and do all anew?", err=True)
    except typer.Abort:  # Ctrl-C, or the terminal is gone
        agreed = False
    if not agreed:
        say(f"nothing is changed; '{plan.resume}' goes on with what is stored")
        raise typer.Exit(Stopped.exit_code)
