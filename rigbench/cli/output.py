"""What every command has in common: where its words go, and how it ends when something is wrong."""

from __future__ import annotations

import contextlib
import errno
import json
import os
import signal
import sys
import textwrap
import threading
import traceback
from collections.abc import Iterable, Iterator
from contextvars import ContextVar
from dataclasses import asdict
from typing import Any, TextIO

import typer

from rigbench.errors import Fault, InputFaults, RigbenchError, Stopped, StoreError

__all__ = [
    "height",
    "interrupts_alike",
    "paragraph",
    "print_json",
    "put",
    "say",
    "show",
    "streams_may_fail",
    "tell_notes",
    "telling",
    "to_terminal",
    "width",
]

_RESULT: ContextVar[TextIO | None] = ContextVar("result", default=None)
"""Where a command's result goes, while sys.stdout is left to what the user's own code prints."""

DISK_ERRORS = (errno.ENOSPC, errno.EDQUOT, errno.EFBIG, errno.EROFS, errno.EIO)

STDOUT = "standard output"


class _ReaderGoneError(Exception):
    """Whoever reads the result has stopped."""


def put(text: str) -> None:
    """Write a part of the result, as it is; StoreError if it can't be written."""
    stream: TextIO | None = _RESULT.get() or sys.stdout
    if stream is None:
        raise StoreError(STDOUT, "is closed, so the result has nowhere to go")
    try:
        stream.write(text)
        stream.flush()
    except BrokenPipeError:
        _to_nowhere(stream)
        raise _ReaderGoneError from None
    except OSError as error:
        _to_nowhere(stream)
        raise StoreError(STDOUT, f"can't be written: {error.strerror or error}") from error


def show(text: str) -> None:
    """Print a result."""
    put(f"{text}\n")


def say(text: str) -> None:
    """Print what is not the result itself: progress, notes, faults. They may get lost."""
    try:
        print(text, file=sys.stderr, flush=True)
    except OSError:
        _to_nowhere(sys.stderr)


def print_json(document: Any) -> None:
    """Print one JSON document; ValueError if there is anything infinite in it."""
    show(json.dumps(document, indent=2, allow_nan=False))


def tell_notes(notes: Iterable[Fault]) -> None:
    """Print what the user should know but need not change."""
    for note in notes:
        say(f"note: {note}")


def paragraph(text: str) -> str:
    """Break a text into lines that fit the terminal."""
    return textwrap.fill(text, max(width(), 40))


def width() -> int:
    """Return the width of the terminal that the result goes to, 100 where it goes to none."""
    declared = os.environ.get("COLUMNS", "")
    if declared.isdecimal() and int(declared):
        return int(declared)
    with contextlib.suppress(OSError, ValueError):
        return os.get_terminal_size((_RESULT.get() or sys.stdout).fileno()).columns or 100
    return 100


def height() -> int:
    """Return the height of the terminal that the result goes to, 24 where it can't be told."""
    with contextlib.suppress(OSError, ValueError):
        return os.get_terminal_size((_RESULT.get() or sys.stdout).fileno()).lines or 24
    return 24


def to_terminal() -> bool:
    """Whether the result goes to a terminal."""
    return (_RESULT.get() or sys.stdout).isatty()


@contextlib.contextmanager
def interrupts_alike() -> Iterator[None]:
    """Let SIGTERM do here what Ctrl-C does, where signals can be taken: in a program's main thread."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = signal.signal(signal.SIGTERM, signal.default_int_handler)
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, before)


@contextlib.contextmanager
def telling(as_json: bool) -> Iterator[None]:
    """Turn whatever ends a command early into words (or JSON) and an exit code.

    Meanwhile stdout belongs to the result: what else is printed, by a law or a library, goes to stderr.
    """
    if sys.stdout is None:
        say(f"{STDOUT}: is closed, so the result has nowhere to go")
        raise typer.Exit(StoreError.exit_code)
    with _result_apart():
        try:
            yield
        except (typer.Exit, typer.Abort, typer.BadParameter):
            raise
        except _ReaderGoneError:
            raise typer.Exit(0) from None  # it has all that it wanted
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
            if isinstance(error, OSError) and error.errno in DISK_ERRORS:
                on_disk = StoreError(str(error.filename or "the disk"), error.strerror or str(error))
                _tell([asdict(Fault(on_disk.path, None, "", on_disk.problem))], str(on_disk), as_json)
                raise typer.Exit(on_disk.exit_code) from None
            said = f"an error that nobody foresaw, a bug in rigbench: {type(error).__name__}: {error}"
            _tell([asdict(Fault("", None, "", said))], f"{traceback.format_exc()}{said}", as_json)
            raise typer.Exit(1) from None


def _tell(faults: list[dict[str, Any]], text: str, as_json: bool) -> None:
    say(text)
    if as_json:
        with contextlib.suppress(StoreError, _ReaderGoneError):  # there are worse things to be told
            print_json({"faults": faults})


@contextlib.contextmanager
def _result_apart() -> Iterator[None]:
    """Keep stdout for the result, and send to stderr what else is written to it, in Python or in C."""
    own, is_stdout = sys.stdout, _descriptor(sys.stdout) == 1
    with contextlib.ExitStack() as undo:
        if is_stdout:
            own.flush()
            line_by_line = 1 if own.isatty() else -1
            result = open(os.dup(1), "w", line_by_line, own.encoding, own.errors)  # noqa: SIM115
            undo.callback(_put_back, own, result)
            os.dup2(2, 1)
        token = _RESULT.set(result if is_stdout else own)
        undo.callback(_RESULT.reset, token)
        with contextlib.redirect_stdout(sys.stderr):
            yield


def _put_back(own: TextIO, result: TextIO) -> None:
    with contextlib.suppress(OSError):
        own.flush()  # somebody else's words in its buffer: they are to go to stderr
    os.dup2(result.fileno(), 1)
    result.close()


def _descriptor(stream: TextIO | None) -> int | None:
    """Return the file descriptor that a stream writes to, if it is a file's."""
    with contextlib.suppress(AttributeError, OSError, ValueError):
        return stream.fileno() if stream is not None else None
    return None


@contextlib.contextmanager
def streams_may_fail() -> Iterator[None]:
    """Let stdout and stderr be closed, full, or not read to the end: `rigbench export STORE | head`.

    What is printed once the command has ended goes to stderr.
    """
    for descriptor in range(3):  # so that no file that is opened later is taken for one of them
        try:
            os.fstat(descriptor)
        except OSError:
            os.open(os.devnull, os.O_RDWR)  # takes the lowest that is free
    sys.stderr = sys.stderr or open(os.devnull, "w", encoding="utf-8")  # noqa: SIM115
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    try:
        try:
            yield
        finally:
            if sys.stdout is not None:
                sys.stdout.flush()
    except BrokenPipeError:
        _to_nowhere(sys.stdout)
        raise SystemExit(0) from None
    except OSError as error:
        _to_nowhere(sys.stdout)
        say(f"{STDOUT}: can't be written: {error.strerror or error}")
        raise SystemExit(StoreError.exit_code) from None
    finally:
        with contextlib.suppress(OSError):
            os.dup2(2, 1)


def _to_nowhere(stream: TextIO) -> None:
    """Send what is still to be written nowhere, so that the interpreter doesn't stumble over it."""
    descriptor = _descriptor(stream)
    if descriptor is not None:
        sink = os.open(os.devnull, os.O_WRONLY)
        os.dup2(sink, descriptor)
        os.close(sink)
        stream.flush()
