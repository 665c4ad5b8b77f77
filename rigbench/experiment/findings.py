"""Faults and notes collected while an experiment file is looked through."""

from __future__ import annotations

import stat
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

from rigbench.errors import Fault
from rigbench.yamlfile import Document, KeyPath, key_text

__all__ = ["Clash", "Findings", "entries", "unreadable"]


@dataclass(frozen=True)
class Clash:
    """Values that can't be combined: a sweep leaves them out, elsewhere they are at fault.

    ``law`` is the only row that it concerns; None if it concerns the whole sheet.
    """

    fault: Fault
    law: str | None = None


class Findings:
    """What is wrong and what is merely worth saying, gathered to be told at once.

    ``faults``; ``notes``; ``clashes`` of values, which a sweep may leave out; ``passings`` of speed limits
    by the reference, which are the price of a combination where others don't have them.
    """

    def __init__(self, document: Document, faults: Iterable[Fault] = ()) -> None:
        self.document = document
        self.faults: list[Fault] = list(faults)
        self.notes: list[Fault] = []
        self.clashes: list[Clash] = []
        self.passings: list[Fault] = []

    def fault(self, path: KeyPath, problem: str, expected: str = "", near: str | None = None) -> None:
        """Add a fault with the address of ``path`` in the experiment file."""
        self.take([self.document.fault(path, problem, expected, near)])

    def note(self, path: KeyPath, text: str) -> None:
        """Add a note with the address of ``path`` in the experiment file."""
        self.notes.append(self.document.fault(path, text))

    def clash(self, path: KeyPath, problem: str, expected: str, law: str | None = None) -> None:
        """Add values that can't be combined, at ``path`` of the experiment file."""
        self.clashes.append(Clash(self.document.fault(path, problem, expected), law))

    def passing(self, path: KeyPath, problem: str, expected: str) -> None:
        """Add a motion's passing of a speed limit, at ``path`` of the experiment file."""
        self.passings.append(self.document.fault(path, problem, expected))

    def take(self, faults: Iterable[Fault]) -> None:
        """Add faults found elsewhere, each once."""
        self.faults += [fault for fault in faults if fault not in self.faults]

    def clean(self, *path: str | int) -> bool:
        """Tell whether no fault and no clash so far lies at ``path`` of the experiment file or below it."""
        text, own = key_text(path), self.document.file
        clashes = (clash.fault for clash in self.clashes)
        return not any(f.file == own and _within(f.key, text) for f in (*self.faults, *clashes))


def _within(key: str, path: str) -> bool:
    return key == path or key.startswith((f"{path}.", f"{path}["))


def unreadable(path: Path) -> str | None:
    """Say why ``path`` can't be a file to read; None if it is one."""
    try:
        if stat.S_ISDIR(path.stat().st_mode):
            return "is a folder"
    except (FileNotFoundError, NotADirectoryError):
        return "does not exist"
    except (OSError, ValueError) as error:  # ValueError: a name that no file can have
        return f"can't be read ({error.strerror if isinstance(error, OSError) else error})"
    return None


def entries(count: int) -> str:
    """Say how many entries a list has."""
    return "1 entry given" if count == 1 else f"{count or 'no'} entries given"
