"""The registry of laws: entry points, and classes in a user's own file."""

from __future__ import annotations

import inspect
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from importlib.metadata import EntryPoint, entry_points
from pathlib import Path
from typing import Any

from pydantic import BaseModel

from rigbench.errors import InputFaults, LawError
from rigbench.laws.form import check_class, notes_on
from rigbench.laws.law import Law
from rigbench.laws.plugins import Files, collect, digest_of, import_files, load_points, package_digest

__all__ = ["LawChoice", "Registered", "Registry", "choose", "load_file_law", "registered"]

GROUP = "rigbench.laws"


OWN = "rigbench"
"""The package whose laws keep their names, whoever else registers them."""


@dataclass(frozen=True)
class Registered:
    """A law as the registry knows it; ``notes`` say what it would be the better for."""

    name: str
    cls: type[Law]
    package: str
    version: str
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class Registry:
    """All laws that could be loaded, by name, and the names and reasons of those that could not."""

    laws: Mapping[str, Registered]
    broken: tuple[tuple[str, str], ...]


@cache
def registered() -> Registry:
    """Load every law of the entry-point group ``rigbench.laws``; a broken one does not stop the others."""
    return registry_of(tuple(entry_points(group=GROUP)))


def registry_of(points: tuple[EntryPoint, ...]) -> Registry:
    """Build the registry of the given entry points.

    Of two with one name both are refused, for a run could be of either; a name of this package's own stays
    its own.
    """
    loaded, broken = load_points(points, check_class, OWN)
    laws = {
        name: Registered(name, p.found, p.package, p.version, notes_on(p.found)) for name, p in loaded.items()
    }
    return Registry(laws, broken)


@dataclass(frozen=True)
class LawChoice:
    """A law with its options resolved, as a run carries it.

    ``plugin`` is a registered name or ``file.py:Class``; for the latter ``files`` holds the texts of
    the file and of what it imports from its own folder.
    """

    plugin: str
    options: tuple[tuple[str, Any], ...] = ()
    files: Files = ()

    def inputs(self) -> dict[str, Any]:
        """Return what the run's key covers: name, options and a digest of the law's sources."""
        digest = digest_of(self.files) if self.files else package_digest(_module_of(self.plugin))
        return {"law": self.plugin, "options": [list(pair) for pair in self.options], "source": digest}

    def law_class(self) -> type[Law]:
        """Return the law's class; LawError if a user's file can't be imported here."""
        if self.files:
            shown, name = self.plugin.rsplit(":", 1)
            return _import_files(self.files, name, shown)
        found = registered().laws.get(self.plugin)
        if found is None:
            raise LawError(self.plugin, "no such law is registered here", "")
        return found.cls

    def make(self) -> Law:
        """Return a new law with these options."""
        return self.law_class()(**dict(self.options))


def choose(plugin: str, options: BaseModel, files: Files = ()) -> LawChoice:
    """Return the choice of a law with its validated options, defaults included."""
    return LawChoice(plugin, tuple(sorted(options.model_dump().items())), files)


def _module_of(plugin: str) -> str:
    return registered().laws[plugin].cls.__module__


def load_file_law(path: Path, class_name: str) -> tuple[type[Law], Files]:
    """Import ``class_name`` from a user's file; return the class and the texts that make it up.

    InputFaults if the file or the class is missing or is no law; LawError with the file's own
    traceback if importing it raises.
    """
    try:
        files = collect(path)
    except (OSError, UnicodeDecodeError) as problem:
        raise InputFaults.one(path, "", f"can't be read: {problem}", "a Python file with a law") from None
    cls = _import_files(files, class_name, str(path))
    return cls, files


def _import_files(files: Files, class_name: str, shown: str) -> type[Law]:
    """Import the first of the texts, see :func:`rigbench.laws.plugins.import_files`; return its class."""
    module = import_files(files, shown, LawError)
    found = getattr(module, class_name, None)
    if found is None:
        names = [
            n for n, v in vars(module).items() if inspect.isclass(v) and issubclass(v, Law) and v is not Law
        ]
        raise InputFaults.one(
            shown, class_name, "no such class in this file", f"one of {names}" if names else "a Law"
        )
    try:
        return check_class(found)
    except TypeError as problem:
        raise InputFaults.one(shown, class_name, str(problem)) from None
