"""``rigbench schema``: what may stand in a file, for editors."""

from __future__ import annotations

from rigbench.cli.output import print_json
from rigbench.errors import Fault, InputFaults, nearest
from rigbench.experiment.json_schema import arm_schema, experiment_schema, identification_schema

__all__ = ["print_schema"]

SCHEMAS = {"experiment": experiment_schema, "arm": arm_schema, "identify": identification_schema}


def print_schema(of: str) -> None:
    """Print the JSON Schema of an experiment, arm or identification file."""
    if of not in SCHEMAS:
        near = nearest(of, SCHEMAS)
        expected = "" if near else " or ".join(SCHEMAS)
        raise InputFaults([Fault("rigbench schema", None, "", f"'{of}' has no schema", expected, near)])
    print_json(SCHEMAS[of]())
