"""What is wrong with the arguments themselves, as JSON for whoever asked for JSON."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from dataclasses import asdict
from typing import Any

import typer
from typer.core import TyperGroup

from rigbench.cli.output import print_json
from rigbench.errors import Fault, StoreError

__all__ = ["Commands"]

USAGE_ERROR: type[Exception] = typer.BadParameter.__mro__[1]
"""Root of all that is raised for arguments; typer does not export its name."""

ASKED = "--json"


class Commands(TyperGroup):
    """The commands, of which each tells its usage errors as JSON too if ``--json`` is among the arguments."""

    def make_context(self, info_name: str | None, args: list[str], *others: Any, **extra: Any) -> Any:
        """Read the arguments up to the command's name."""
        as_json = ASKED in args  # reading them takes them out of the list
        with _usage_told(as_json):
            context = super().make_context(info_name, args, *others, **extra)
        context.meta[ASKED] = as_json
        return context

    def invoke(self, ctx: Any) -> Any:
        """Read the command's own arguments, and do it."""
        with _usage_told(ctx.meta[ASKED]):
            return super().invoke(ctx)


@contextlib.contextmanager
def _usage_told(as_json: bool) -> Iterator[None]:
    """Print a usage error as JSON on its way to whoever prints it on stderr."""
    try:
        yield
    except USAGE_ERROR as error:
        if as_json:
            said = error.format_message()  # type: ignore[attr-defined]  # every usage error has it
            with contextlib.suppress(StoreError):
                print_json({"faults": [asdict(Fault("rigbench", None, "", said))]})
        raise
