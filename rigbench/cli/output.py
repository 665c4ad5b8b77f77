"""What every command has in common: where its words go, and how it ends when something is wrong."""

from __future__ import annotations

import contextlib
import json
import os
import shutil
import sys
import textwrap
import traceback
from collections.abc import Iterable, Iterator
from dataclasses import asdict
from typing import Any

import typer

from rigbench.errors import Fault, InputFaults, RigbenchError, Stopped, StoreError

__all__ = ["paragraph", "pipes_may_break", "print_json", "say", "show", "tell_notes", "telling", "width"]


def show(text: str) -> None:
    """Print a result."""
    print(text)


def say(text: str) -> None:
    """Print what is not the result itself: progress, notes, faults."""
    print(text, file=sys.stderr, flush=True)


def print_json(document: Any) -> None:
    """Print one JSON document; ValueError if there is anything infinite in it."""
    print(json.dumps(document, indent=2, allow_nan=False))


def tell_notes(notes: Iterable[Fault]) -> None:
    """Print what the user should know but need not change."""
    for note in notes:
        say(f"note: {note}")


def paragraph(text: str) -> str:
    """Break a text into lines that fit the terminal."""
    return textwrap.fill(text, max(width(), 40))


def width() -> int:
    """Return the width of the terminal, 100 where there is none."""
    return shutil.get_terminal_size((100, 24)).columns


@contextlib.contextmanager
def telling(as_json: bool) -> Iterator[None]:
    """Turn whatever ends a command early into words (or JSON) and an exit code."""
    try:
        yield
    except (typer.Exit, typer.Abort, typer.BadParameter):
        raise
    except BrokenPipeError:
        _close_stdout()
        raise typer.Exit(0) from None  # the reader has all that it wanted
    except KeyboardInterrupt:
        say("stopped")
        raise typer.Exit(Stopped.exit_code) from None
    except InputFaults as error:
        _tell([asdict(fault) for fault in error.faults], str(error), as_json)
        if len(error.faults) > 1:
            say(f"{len(error.faults)} faults")
        raise typer.Exit(error.exit_code) from None
    except RigbenchError as error:
        file, problem = (error.path, error.problem) if isinstance(error, StoreError) else ("", str(error))
        _tell([asdict(Fault(file, None, "", problem))], str(error), as_json)
        raise typer.Exit(error.exit_code) from None
    except Exception as error:
        said = f"an error that nobody foresaw, a bug in rigbench: {type(error).__name__}: {error}"
        _tell([asdict(Fault("", None, "", said))], f"{traceback.format_exc()}{said}", as_json)
        raise typer.Exit(1) from None


def _tell(faults: list[dict[str, Any]], text: str, as_json: bool) -> None:
    say(text)
    if as_json:
        print_json({"faults": faults})


@contextlib.contextmanager
def pipes_may_break() -> Iterator[None]:
    """Let whoever reads our output stop reading: `rigbench export STORE | head` ends quietly."""
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    try:
        yield
    finally:
        try:
            sys.stdout.flush()
        except BrokenPipeError:
            _close_stdout()


def _close_stdout() -> None:
    """Send what is still to be written nowhere, so that the interpreter doesn't stumble over it."""
    with contextlib.suppress(OSError, ValueError):
        sink = os.open(os.devnull, os.O_WRONLY)
        os.dup2(sink, sys.stdout.fileno())
        os.close(sink)
