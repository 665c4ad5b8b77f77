"""Faults and notes collected while an experiment file is looked through."""

from __future__ import annotations

import stat
from collections.abc import Iterable
from pathlib import Path

from rigbench.errors import Fault
from rigbench.yamlfile import Document, KeyPath, key_text

__all__ = ["Findings", "entries", "unreadable"]


class Findings:
    """What is wrong (``faults``) and what is merely worth saying (``notes``), gathered to be told at once."""

    def __init__(self, document: Document, faults: Iterable[Fault] = ()) -> None:
        self.document = document
        self.faults: list[Fault] = list(faults)
        self.notes: list[Fault] = []

    def fault(self, path: KeyPath, problem: str, expected: str = "", near: str | None = None) -> None:
        """Add a fault with the address of ``path`` in the experiment file."""
        self.take([self.document.fault(path, problem, expected, near)])

    def note(self, path: KeyPath, text: str) -> None:
        """Add a note with the address of ``path`` in the experiment file."""
        self.notes.append(self.document.fault(path, text))

    def take(self, faults: Iterable[Fault]) -> None:
        """Add faults found elsewhere, each once."""
        self.faults += [fault for fault in faults if fault not in self.faults]

    def clean(self, *path: str | int) -> bool:
        """Tell whether no fault so far lies at ``path`` of the experiment file or below it."""
        text, own = key_text(path), self.document.file
        return not any(fault.file == own and _within(fault.key, text) for fault in self.faults)

    def in_order(self) -> list[Fault]:
        """Return all faults: those of the experiment file by line, then those of the other files."""
        own = self.document.file
        return sorted(self.faults, key=lambda fault: (fault.file != own, fault.file, fault.line or 0))


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
