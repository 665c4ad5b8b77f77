"""Commands on an arm, on what is installed, and on the files' forms.

Each parses, calls and prints; what it does is in the module of its name. Heavy imports are made inside, so
that ``rigbench --help`` answers at once.
"""

from __future__ import annotations

from typing import Annotated

import typer

from rigbench.cli.app import ArmFile, Json, Picture, app
from rigbench.cli.output import telling

__all__ = ["audit", "demo", "gears", "identify", "laws", "schema"]


@app.command(epilog="Example: rigbench audit robots_demo/tray6/arm.yaml -o audit.png")
def audit(
    arm: ArmFile,
    output: Picture = None,
    as_json: Json = False,
) -> None:
    """Show whether engine and model agree on an arm, and which physics_hz it needs.

    Accelerations, energy, momentum, the error by step size, and dry friction are measured.
    """
    with telling(as_json):
        from rigbench.cli.audit import audit_arm

        audit_arm(arm, output, as_json)


@app.command(epilog="Example: rigbench gears robots_demo/tray6/arm.yaml --ratios 1,10,50,100 -o gears.png")
def gears(
    arm: ArmFile,
    ratios: Annotated[
        str | None,
        typer.Option(metavar="1,10,50", help="gear ratios, split by commas; from 1 to 200 if left out"),
    ] = None,
    joint: Annotated[
        list[str] | None,
        typer.Option(metavar="NAME", help="of this joint alone; may be given several times; all if left out"),
    ] = None,
    leg: Annotated[
        float | None,
        typer.Option(
            metavar="SECONDS", help="time of the motion's leg; half of the speed limits is taken if left out"
        ),
    ] = None,
    output: Picture = None,
    as_json: Json = False,
) -> None:
    """Show what each gear ratio does to inertia, disturbance, damping and tracking, and what it costs.

    A ratio G divides what the links are to a motor: their inertia by G^2, their torque by G. It costs
    speed, and brings in the rotor's inertia, times G^2.
    """
    with telling(as_json):
        from rigbench.cli.gears import tell_gears

        tell_gears(arm, ratios, tuple(joint or ()), leg, output, as_json)


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
    are predicted before and after, and every parameter with its interval. From further motions with a load
    also what that weighs and where, and an arm file that carries it.
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
