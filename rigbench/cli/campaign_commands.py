"""Commands on an experiment and its campaign.

Each parses, calls and prints; what it does is in the module of its name. Heavy imports are made inside, so
that ``rigbench --help`` answers at once.
"""

from __future__ import annotations

from typing import Annotated

import typer

from rigbench.cli.app import Experiment, Json, StoreFile, app
from rigbench.cli.output import telling

__all__ = ["check", "run", "status"]


@app.command(epilog="Example: rigbench check experiments/first-look.yaml")
def check(file: Experiment, as_json: Json = False) -> None:
    """Validate an experiment and print its plan, the draws it needs, an estimated time and the store's size.

    Or validate an identification, its recordings included, and print what it takes.
    All faults of all its files are printed at once. A short run of each law is done to measure the time; it
    is given up after 60 s.
    """
    with telling(as_json):
        from rigbench.experiment.file_kind import IDENTIFICATION, kind_of_file

        if kind_of_file(file) == IDENTIFICATION:
            from rigbench.cli.check_identification import check_identification

            check_identification(file, as_json)
        else:
            from rigbench.cli.check import check_experiment

            check_experiment(file, as_json)


@app.command(epilog="Example: rigbench run experiments/first-look.yaml --jobs 2")
def run(
    file: Experiment,
    jobs: Annotated[
        int | None,
        typer.Option(min=0, max=4096, help="worker processes; one a core if left out; 0: in this process"),
    ] = None,
    store: Annotated[
        str | None,
        typer.Option(help="where the runs are stored; results/NAME_OF_FILE.sqlite if left out"),
    ] = None,
    again: Annotated[
        list[str] | None,
        typer.Option(metavar="LAW", help="do all runs of this law anew; may be given several times"),
    ] = None,
    span: Annotated[
        str | None,
        typer.Option(
            "--for",
            metavar="SPAN",
            help="begin no run after this time, as in 8h, 90m, 1h30m or 45s, from the start of the command",
        ),
    ] = None,
    clock: Annotated[
        str | None,
        typer.Option(
            "--until",
            metavar="HH:MM",
            help="begin no run after the local clock next shows this; with --for the earlier counts",
        ),
    ] = None,
    draws: Annotated[
        int | None,
        typer.Option(min=1, help="only the first so many draws of every cell; the next command may do more"),
    ] = None,
    limit: Annotated[
        str | None,
        typer.Option(
            metavar="SPAN",
            help="give up a run that takes longer than this, as in 10m or 45s, what compiling its law takes "
            "included; a minute and 50 ms for each control tick if left out",
        ),
    ] = None,
    fresh: Annotated[
        bool,
        typer.Option(
            "--fresh", help="start from nothing; asks first, and keeps the old store under its date"
        ),
    ] = False,
    yes: Annotated[bool, typer.Option("--yes", help="with --fresh: don't ask")] = False,
    cluster: Annotated[
        str | None,
        typer.Option(
            metavar="tcp://HOST:PORT", help="have the runs done by the workers of this dask scheduler"
        ),
    ] = None,
    as_json: Json = False,
) -> None:
    """Do the runs that are not stored yet; print the results matrix and draw it beside the store.

    Ctrl-C (or SIGTERM), and time that is up, let the runs in hand end; a second Ctrl-C drops them. The exit
    code is then 3, and the same command goes on from there. Times are measured by the system's monotonic
    clock: setting the clock doesn't move them, and on Linux time in which the machine sleeps doesn't count.
    """
    with telling(as_json):
        from rigbench.cli.run import run_experiment
        from rigbench.cli.wishes import Wishes

        wishes = Wishes(jobs, store, tuple(again or ()), span, clock, draws, fresh, yes, cluster, limit)
        run_experiment(file, wishes, as_json)


@app.command(epilog="Example: rigbench status results/first-look.sqlite")
def status(
    store: StoreFile,
    watch: Annotated[
        bool, typer.Option("--watch", help="again every few seconds until the campaign is complete or Ctrl-C")
    ] = False,
    as_json: Json = False,
) -> None:
    """Print how far a campaign is and how the laws stand so far, also while it runs."""
    if watch and as_json:
        raise typer.BadParameter("--json prints one document, so it can't be given with --watch")
    with telling(as_json):
        from rigbench.cli.stored import print_status
        from rigbench.cli.watch import watch_status

        if watch:
            watch_status(store)
        else:
            print_status(store, as_json)
