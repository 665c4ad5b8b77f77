"""A document: the data of a YAML file and the line of everything in it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from rigbench.errors import Fault, InputFaults

__all__ = ["Document", "KeyPath", "at", "key_text", "read_text"]

KeyPath = tuple[str | int, ...]
"""Where a value stands in a document: keys of mappings and indices of lists, outermost first."""


def key_text(path: Sequence[str | int]) -> str:
    """Print a path as ``laws.joint pd.natural_hz`` or ``via_deg[0]``."""
    text = ""
    for step in path:
        text += f"[{step}]" if isinstance(step, int) else (f".{step}" if text else step)
    return text


def has(data: Any, step: str | int) -> bool:
    """Tell whether ``data`` is a mapping or list that holds something at ``step``."""
    if isinstance(data, dict):
        return step in data
    return isinstance(data, list) and isinstance(step, int) and 0 <= step < len(data)


def at(data: Any, path: Sequence[str | int]) -> Any:
    """Return what stands at ``path`` of ``data``; None where nothing does."""
    for step in path:
        if not has(data, step):
            return None
        data = data[step]
    return data


@dataclass(frozen=True, eq=False)
class Document:
    """A YAML file that was read: ``data`` in plain dicts, lists, texts, numbers, bools and None.

    ``file`` is its name as the user gave it; ``lines`` the line (from 1) of each key and list item,
    by path. What an alias repeats has the lines of where it is written.
    """

    file: str
    data: Any
    lines: Mapping[KeyPath, int] = field(repr=False)

    def holds(self, key: str) -> bool:
        """Tell whether it is a mapping with this key, whatever is wrong with it."""
        return isinstance(self.data, dict) and key in self.data

    def line(self, path: Sequence[str | int]) -> int | None:
        """Return the line of ``path`` or of the nearest thing around it."""
        steps = tuple(path)
        for length in range(len(steps), -1, -1):
            if steps[:length] in self.lines:
                return self.lines[steps[:length]]
        return None

    def fault(
        self, path: Sequence[str | int], problem: str, expected: str = "", near: str | None = None
    ) -> Fault:
        """Build a fault with the address of ``path``."""
        return Fault(self.file, self.line(path), key_text(path), problem, expected, near)


def read_text(path: Path, file: str, what: str = "the file") -> str:
    """Return the text of ``path`` (UTF-8), which the user knows as ``file``.

    Raises InputFaults where it is missing, a folder, not readable or not UTF-8.
    """
    try:
        return path.read_bytes().decode("utf-8")
    except (FileNotFoundError, NotADirectoryError):
        problem = f"{what} does not exist"
    except IsADirectoryError:
        problem = f"{what} is a folder"
    except UnicodeDecodeError as error:
        line = error.object.count(b"\n", 0, error.start) + 1
        raise InputFaults.one(file, "", f"{what} is not UTF-8 text", "a text file", line) from None
    except (OSError, ValueError) as error:  # ValueError: a name that no file can have
        reason = error.strerror if isinstance(error, OSError) else str(error)
        problem = f"{what} can't be read ({reason})"
    raise InputFaults.one(file, "", problem, "a file that can be read")
