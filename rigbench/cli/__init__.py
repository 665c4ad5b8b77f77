"""The command line: parse, call, print. What a command does is in the module of its name.

Heavy imports are made inside the commands, so that ``rigbench --help`` answers at once.
"""

from __future__ import annotations

import sys
from typing import Annotated

import typer

from rigbench import __version__
from rigbench.cli.output import streams_may_fail, telling
from rigbench.cli.usage import Commands

__all__ = ["app", "main"]

app = typer.Typer(
    name="rigbench",
    cls=Commands,
    help="A software test rig for the joint control of robot arms: which law still meets the tolerance on a "
    "machine that is not the one in the model?",
    epilog="Exit codes: 0 done; 1 an error that nobody foresaw; 2 the input is at fault; 3 a campaign "
    "stopped before its end and can be resumed; 4 'gate' says no; 5 the store or the disk.",
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
)

Experiment = Annotated[str, typer.Argument(metavar="FILE", help="the experiment file (YAML)")]
StoreFile = Annotated[str, typer.Argument(metavar="STORE", help="the store that 'run' filled")]
Json = Annotated[
    bool, typer.Option("--json", help="print the result, or the faults, as one JSON document on stdout")
]


def _version(wanted: bool) -> None:
    if wanted:
        print(f"rigbench {__version__}")
        raise typer.Exit


@app.callback()
def _root(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="print the version")
    ] = False,
) -> None:
    del version


@app.command(epilog="Example: rigbench check experiments/first-look.yaml")
def check(file: Experiment, as_json: Json = False) -> None:
    """Validate an experiment and print its plan, the draws it needs, an estimated time and the store's size.

    All faults of all its files are printed at once. A short run of each law is done to measure the time; it
    is given up after 60 s.
    """
    with telling(as_json):
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

        wishes = Wishes(jobs, store, tuple(again or ()), span, clock, draws, fresh, yes, cluster)
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


@app.command(
    epilog="Example: rigbench matrix results/first-look.sqlite --show p95 --score settle_ms -o matrix.svg"
)
def matrix(
    store: StoreFile,
    shown: Annotated[
        str,
        typer.Option(
            "--show",
            metavar="share|median|p95|ratio",
            help="in each cell the share of draws that keep the tolerance; or of a score the median, the "
            "95th percentile, or the median ratio to nominal",
        ),
    ] = "share",
    score: Annotated[
        str | None,
        typer.Option(metavar="NAME", help="of which score; by default the one by which laws are compared"),
    ] = None,
    against: Annotated[
        str | None,
        typer.Option(metavar="OLD", help="show what changed since another store of the same experiment"),
    ] = None,
    curves: Annotated[
        bool, typer.Option("--curves", help="draw curves against the level instead, with bands and tolerance")
    ] = False,
    limits: Annotated[
        bool,
        typer.Option("--limits", help="draw how the draws' own limits are spread, which find_level found"),
    ] = False,
    drivers: Annotated[
        str | None,
        typer.Option(
            metavar="LAW", help="show instead which source's draws drive this law's score and failures"
        ),
    ] = None,
    condition: Annotated[
        str | None,
        typer.Option(
            metavar="NAME",
            help="with --drivers: under which condition; all sources nearest to level 1 if left out",
        ),
    ] = None,
    sheet: Annotated[
        str | None, typer.Option(metavar="NAME", help="with --drivers: in which sheet; the first if left out")
    ] = None,
    text: Annotated[
        bool, typer.Option("--text", help="print instead of drawing, with the laws compared draw by draw")
    ] = False,
    output: Annotated[
        str | None,
        typer.Option(
            "--output",
            "-o",
            help="a .png, .svg or .pdf file; STORE's name and -matrix.png (or what else is drawn) if left out",
        ),
    ] = None,
    as_json: Json = False,
) -> None:
    """Draw the results matrix of what is stored, or what drives a law, or curves against the level.

    A score is any that 'export' writes, of a single joint too (joint_peak_deg.j1).
    """
    with telling(as_json):
        from rigbench.cli.matrix import Wanted, draw_matrix

        wanted = Wanted(shown, score, against, curves, limits, drivers, condition, sheet, text, output)
        draw_matrix(store, wanted, as_json)


@app.command(epilog="Example: rigbench gate results/first-look.sqlite --law 'computed torque' --level 1")
def gate(
    store: StoreFile,
    law: Annotated[
        list[str],
        typer.Option(metavar="NAME", help="the law that must be good enough; may be given several times"),
    ],
    level: Annotated[
        float | None,
        typer.Option(metavar="L", help="with all sources together at this level; nearest to 1 if left out"),
    ] = None,
    condition: Annotated[
        str | None, typer.Option(metavar="NAME", help="under this condition instead")
    ] = None,
    sheet: Annotated[
        list[str] | None,
        typer.Option(metavar="NAME", help="in this sheet alone; may be given several times; all if left out"),
    ] = None,
    baseline: Annotated[
        str | None,
        typer.Option(metavar="OLD", help="a store of the same experiment than which it must not be worse"),
    ] = None,
    allow_open: Annotated[
        bool, typer.Option("--allow-open", help="let pass what the draws show neither to keep nor to miss")
    ] = False,
    junit: Annotated[
        str | None, typer.Option(metavar="FILE", help="write the checks as JUnit XML too, for CI systems")
    ] = None,
    as_json: Json = False,
) -> None:
    """Leave with exit code 4 if a law misses its tolerance, is open, or got worse than a baseline; say why.

    Worse is what is shown on the same draws, beyond the 95 % interval: fewer draws pass, or with as many
    the main score is larger. A law of which nothing was run fails.
    """
    with telling(as_json):
        from rigbench.cli.gate import Asked, gate_store

        asked = Asked(tuple(law), level, condition, tuple(sheet or ()), baseline, allow_open, junit)
        gate_store(store, asked, as_json)


@app.command(epilog="Example: rigbench report results/first-look.sqlite -o first-look.html")
def report(
    store: StoreFile,
    output: Annotated[
        str | None,
        typer.Option("--output", "-o", help="an .html file; STORE's name and -report.html if left out"),
    ] = None,
    traces: Annotated[
        int | None,
        typer.Option(
            min=0, help="replay at most so many runs for their traces; as many as once took 20 s if left out"
        ),
    ] = None,
    as_json: Json = False,
) -> None:
    """Write all that is stored as one HTML page: decision, matrix, details of each cell, curves, experiment.

    The page needs no network, and asks for nothing. The worst and the median run of each cell are replayed for
    the tool's error over time, law by law from the best: a law of your own runs as your code.
    """
    with telling(as_json):
        from rigbench.cli.report import write_report

        write_report(store, output, traces, as_json)


@app.command(epilog="Example: rigbench export results/first-look.sqlite -o runs.csv")
def export(
    store: StoreFile,
    output: Annotated[
        str | None,
        typer.Option("--output", "-o", help="a .csv or .parquet file; CSV to standard output if left out"),
    ] = None,
    as_json: Annotated[bool, typer.Option("--json", help="say as JSON what was written; needs -o")] = False,
) -> None:
    """Write what is stored as CSV or Parquet, one row a run, with its scores and the values of its draw.

    Beside a file NAME.csv, NAME-columns.csv says what each column means, and its unit.
    """
    if as_json and output is None:
        raise typer.BadParameter("--json needs -o: without it the table itself goes to standard output")
    with telling(as_json):
        from rigbench.cli.stored import export_runs

        export_runs(store, output, as_json)


@app.command(epilog="Example: rigbench trace results/first-look.sqlite --worst 'pd + gravity' 'all at 1'")
def trace(
    store: StoreFile,
    run: Annotated[
        str | None,
        typer.Argument(
            metavar="[RUN]", help="the beginning of a run's key, as 'export' has it in column key"
        ),
    ] = None,
    worst: Annotated[
        tuple[str, str] | None,
        typer.Option(metavar="LAW CONDITION", help="take the worst run of a law under a condition"),
    ] = None,
    motion: Annotated[str | None, typer.Option(help="with --worst: among the runs of one motion")] = None,
    sheet: Annotated[str | None, typer.Option(help="with --worst: among the runs of one sheet")] = None,
    output: Annotated[
        str | None,
        typer.Option("--output", "-o", help="what the files' names begin with; STORE's name and -trace-KEY"),
    ] = None,
    animate: Annotated[str | None, typer.Option(help="draw the moving arm too, into a .gif file")] = None,
    as_json: Json = False,
) -> None:
    """Replay one stored run, bit for bit, into a data file (.npz) and a page of plots (.png).

    Nothing but the store is needed. The worst run is one that did not finish, or the one with the largest
    main score among the draws that count. A law of your own runs as your code: replay what you trust.
    """
    with telling(as_json):
        from rigbench.cli.trace import trace_run

        trace_run(store, run, worst, motion, sheet, output, animate, as_json)


@app.command(epilog="Example: rigbench audit robots_demo/tray6/arm.yaml -o audit.png")
def audit(
    arm: Annotated[str, typer.Argument(metavar="ARM", help="the arm file (YAML)")],
    output: Annotated[
        str | None,
        typer.Option("--output", "-o", help="draw it too: a .png, .svg or .pdf file"),
    ] = None,
    as_json: Json = False,
) -> None:
    """Show whether engine and model agree on an arm, and which physics_hz it needs.

    Accelerations, energy, momentum, the error by step size, and dry friction are measured.
    """
    with telling(as_json):
        from rigbench.cli.audit import audit_arm

        audit_arm(arm, output, as_json)


@app.command(epilog="Example: rigbench needs results/needs-tray6.sqlite -o needs.png")
def needs(
    store: StoreFile,
    law: Annotated[str | None, typer.Option(help="of this law alone")] = None,
    output: Annotated[
        str | None,
        typer.Option("--output", "-o", help="draw it too: a .png, .svg or .pdf file"),
    ] = None,
    as_json: Json = False,
) -> None:
    """Show which sources of mismatch must be known, and how well.

    The experiment asks for it by its key 'needs', and 'run' does the runs after those of the matrix. What to
    identify first stands first: the largest total share of the variance; then what tolerates least alone.
    """
    with telling(as_json):
        from rigbench.cli.needs import tell_needs

        tell_needs(store, law, output, as_json)


@app.command(epilog="Example: rigbench identify identify.yaml -o results")
def identify(
    file: Annotated[str, typer.Argument(metavar="FILE", help="the identification file (YAML)")],
    output: Annotated[
        str | None, typer.Option("--output", "-o", help="the folder to write to; results if left out")
    ] = None,
    as_json: Json = False,
) -> None:
    """Find an arm's parameters from recorded motions, or practise it on a machine with a hidden mismatch.

    Writes an arm file with its URDF, a file of what is known how well, and a picture; prints how well torques
    are predicted before and after, and every parameter with its interval.
    """
    with telling(as_json):
        from rigbench.cli.identify import identify_arm

        identify_arm(file, output, as_json)


@app.command(epilog="Example: rigbench schema > rigbench.schema.json")
def schema(
    of: Annotated[
        str, typer.Argument(metavar="[experiment|arm|identify]", help="which file's; experiment if left out")
    ] = "experiment",
) -> None:
    """Print the JSON Schema of an experiment, arm or identification file, for editors.

    Keys, types, ranges, units and defaults, with the options of the laws registered here.
    """
    with telling(as_json=False):
        from rigbench.cli.schema import print_schema

        print_schema(of)


@app.command(epilog="Example: rigbench demo bakery")
def demo(
    folder: Annotated[str, typer.Argument(metavar="DIR", help="the folder to fill; made if there is none")],
    as_json: Json = False,
) -> None:
    """Copy the demo arms and experiments into DIR; nothing that is there is overwritten."""
    with telling(as_json):
        from rigbench.cli.demo import copy_demo

        copy_demo(folder, as_json)


@app.command(epilog="Example: rigbench laws computed-torque")
def laws(
    name: Annotated[str | None, typer.Argument(metavar="[NAME]", help="a registered law")] = None,
    as_json: Json = False,
) -> None:
    """List the registered laws; with NAME print its equation and its options."""
    with telling(as_json):
        from rigbench.cli.laws import print_laws

        print_laws(name, as_json)


def main() -> None:
    """Run the command line and leave the process with its exit code."""
    with streams_may_fail():
        app()
    sys.exit(1)  # pragma: no cover - app() leaves by SystemExit
