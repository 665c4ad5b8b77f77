"""The command line's app, and the arguments that several commands take."""

from __future__ import annotations

from typing import Annotated

import typer

from rigbench import __version__
from rigbench.cli.usage import Commands

__all__ = ["ArmFile", "Experiment", "Json", "Picture", "StoreFile", "app"]

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
ArmFile = Annotated[str, typer.Argument(metavar="ARM", help="the arm file (YAML)")]
StoreFile = Annotated[str, typer.Argument(metavar="STORE", help="the store that 'run' filled")]
Picture = Annotated[str | None, typer.Option("--output", "-o", help="draw it too: a .png, .svg or .pdf file")]
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
