"""Commands on a store: what is stored of a campaign, seen and judged.

Each parses, calls and prints; what it does is in the module of its name. Heavy imports are made inside, so
that ``rigbench --help`` answers at once.
"""

from __future__ import annotations

from typing import Annotated

import typer

from rigbench.cli.app import Json, Picture, StoreFile, app
from rigbench.cli.output import telling

__all__ = ["export", "gains", "gate", "matrix", "needs", "report", "trace", "worst"]


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
    accuracy: Annotated[
        str | None,
        typer.Option(
            metavar="LAW",
            help="print instead accuracy and repeatability after ISO 9283, from replays of up to 30 runs "
            "that differ by noise alone",
        ),
    ] = None,
    condition: Annotated[
        str | None,
        typer.Option(
            metavar="NAME",
            help="with --drivers or --accuracy: under which condition; by default "
            "nominal for --accuracy, and all sources nearest to level 1 for --drivers",
        ),
    ] = None,
    sheet: Annotated[
        str | None, typer.Option(metavar="NAME", help="with these: in which sheet; the first if left out")
    ] = None,
    text: Annotated[
        bool, typer.Option("--text", help="print instead of drawing, with the laws compared draw by draw")
    ] = False,
    output: Annotated[
        str | None,
        typer.Option(
            "--output",
            "-o",
            help="a .png, .svg or .pdf file; if left out STORE's name and -matrix.png, or what else is drawn",
        ),
    ] = None,
    as_json: Json = False,
) -> None:
    """Draw the results matrix of what is stored, or what drives a law, or curves against the level.

    A score is any that 'export' writes, of a single joint too (joint_peak_deg.j1).
    """
    with telling(as_json):
        from rigbench.cli.matrix import Wanted, draw_matrix

        wanted = Wanted(
            shown, score, against, curves, limits, drivers, condition, sheet, text, output, accuracy
        )
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

    The page needs no network, and asks for nothing. The worst and the median run of each cell are replayed
    for the tool's error over time, law by law from the best: a law of your own runs as your code.
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
    studies: Annotated[
        bool,
        typer.Option(
            "--studies",
            help="the runs of the studies as well, after the matrix's; column study says of which",
        ),
    ] = False,
    as_json: Annotated[bool, typer.Option("--json", help="say as JSON what was written; needs -o")] = False,
) -> None:
    """Write what is stored as CSV or Parquet, one row a run, with its scores and the values of its draw.

    Beside a file NAME.csv, NAME-columns.csv says what each column means, and its unit.
    """
    if as_json and output is None:
        raise typer.BadParameter("--json needs -o: without it the table itself goes to standard output")
    with telling(as_json):
        from rigbench.cli.stored import export_runs

        export_runs(store, output, studies, as_json)


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


@app.command(epilog="Example: rigbench needs results/needs-tray6.sqlite -o needs.png")
def needs(
    store: StoreFile,
    law: Annotated[str | None, typer.Option(help="of this law alone")] = None,
    output: Picture = None,
    as_json: Json = False,
) -> None:
    """Show which sources of mismatch must be known, and how well.

    The experiment asks for it by its key 'needs', and 'run' does the runs after those of the matrix. What to
    identify first stands first: the largest total share of the variance; then what tolerates least alone.
    """
    with telling(as_json):
        from rigbench.cli.needs import tell_needs

        tell_needs(store, law, output, as_json)


@app.command(epilog="Example: rigbench worst results/best-gains.sqlite -o worst.png")
def worst(
    store: StoreFile,
    output: Picture = None,
    as_json: Json = False,
) -> None:
    """Print the worst machines found within the mismatch, and from which level on a law was found to miss.

    The experiment asks for the search by its key 'worst_case', and 'run' does it after the matrix. What it
    finds was run, and can be replayed; that it finds nothing does not show that there is nothing.
    """
    with telling(as_json):
        from rigbench.cli.worst import tell_worst

        tell_worst(store, output, as_json)


@app.command(epilog="Example: rigbench gains results/best-gains.sqlite")
def gains(store: StoreFile, as_json: Json = False) -> None:
    """Print the gains that were found for the laws, as YAML that can be pasted into an experiment.

    The experiment asks for the search by its key 'tune', and 'run' does it before the matrix.
    """
    with telling(as_json):
        from rigbench.cli.gains import print_gains

        print_gains(store, as_json)
