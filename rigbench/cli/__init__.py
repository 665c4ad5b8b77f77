"""The command line: parse, call, print. The commands stand in three modules, in the order of the help."""

from __future__ import annotations

import sys

from rigbench.cli import campaign_commands, store_commands, other_commands  # isort: skip
from rigbench.cli.app import app
from rigbench.cli.output import streams_may_fail

__all__ = ["app", "campaign_commands", "main", "other_commands", "store_commands"]


def main() -> None:
    """Run the command line and leave the process with its exit code."""
    with streams_may_fail():
        app()
    sys.exit(1)  # pragma: no cover - app() leaves by SystemExit
