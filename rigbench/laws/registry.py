"""The registry of laws: entry points, and classes in a user's own file."""

from __future__ import annotations

import ast
import hashlib
import inspect
import linecache
import shutil
import sys
import tempfile
import traceback
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from importlib.metadata import EntryPoint, entry_points
from pathlib import Path
from types import ModuleType
from typing import Any

from pydantic import BaseModel

from rigbench.arm.kernel import kernel_cache
from rigbench.errors import InputFaults, LawError
from rigbench.laws.law import Law
from rigbench.laws.options import options_model

__all__ = ["LawChoice", "Registered", "Registry", "check_class", "choose", "load_file_law", "registered"]

GROUP = "rigbench.laws"

Files = tuple[tuple[str, str], ...]
"""Names, relative to the law's folder, and texts of a law's file and the files that it imports."""


@dataclass(frozen=True)
class Registered:
    """A law as the registry knows it."""

    name: str
    cls: type[Law]
    package: str
    version: str


@dataclass(frozen=True)
class Registry:
    """All laws that could be loaded, by name, and the names and reasons of those that could not."""

    laws: Mapping[str, Registered]
    broken: tuple[tuple[str, str], ...]


def check_class(cls: object) -> type[Law]:
    """Return ``cls`` if it is a complete law; TypeError says what is missing.

    Signatures are checked here, when a law is registered, not when it is first called in a run.
    """
    if not (inspect.isclass(cls) and issubclass(cls, Law)):
        raise TypeError(f"{cls!r} is not a subclass of rigbench.laws.Law")
    wanted = {"start": 2, "torque": 6, "model_term": 5, "compiled": 1}
    for name, count in wanted.items():
        given = inspect.signature(getattr(cls, name)).parameters
        if len(given) != count:
            theirs = ", ".join(inspect.signature(getattr(Law, name)).parameters)
            raise TypeError(f"{cls.__name__}.{name} takes ({', '.join(given)}); expected ({theirs})")
    for name in ("start", "torque"):
        if getattr(cls, name) is getattr(Law, name):
            raise TypeError(f"{cls.__name__} does not define '{name}'")
    options_model(cls)  # type: ignore[arg-type]  # mypy takes the instances' __hash__ for the class's
    return cls


@cache
def registered() -> Registry:
    """Load every law of the entry-point group ``rigbench.laws``; a broken one does not stop the others."""
    return registry_of(tuple(entry_points(group=GROUP)))


def registry_of(points: tuple[EntryPoint, ...]) -> Registry:
    """Build the registry of the given entry points; of two with one name, both are refused."""
    laws: dict[str, Registered] = {}
    broken: list[tuple[str, str]] = []
    for name in sorted({point.name for point in points}):
        same = [point for point in points if point.name == name]
        if len(same) > 1:
            who = " and ".join(sorted(_package(point)[0] for point in same))
            broken.append((name, f"the name is registered by more than one package: {who}"))
            continue
        try:
            laws[name] = Registered(name, check_class(same[0].load()), *_package(same[0]))
        except Exception as problem:  # a plugin may raise anything while it is imported
            broken.append((name, f"{type(problem).__name__}: {problem}"))
    return Registry(laws, tuple(broken))


def _package(point: EntryPoint) -> tuple[str, str]:
    if point.dist is None:
        return point.value.split(".")[0].split(":")[0], "unknown"
    return point.dist.name, point.dist.version


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
        digest = _digest(self.files) if self.files else _package_digest(self.plugin)
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


def _digest(files: Files) -> str:
    digest = hashlib.blake2b(digest_size=16)
    for name, text in files:
        digest.update(f"{name}\0{len(text)}\0{text}".encode())
    return digest.hexdigest()


@cache
def _package_digest(plugin: str) -> str:
    """Digest all sources of the package (or the one module) that a registered law lives in."""
    module = sys.modules[registered().laws[plugin].cls.__module__]
    path = Path(module.__file__ or "")
    sources = sorted(path.parent.glob("**/*.py")) if module.__package__ else [path]
    return _digest(tuple((str(p.relative_to(path.parent)), p.read_text("utf-8")) for p in sources))


def load_file_law(path: Path, class_name: str) -> tuple[type[Law], Files]:
    """Import ``class_name`` from a user's file; return the class and the texts that make it up.

    InputFaults if the file or the class is missing or is no law; LawError with the file's own
    traceback if importing it raises.
    """
    try:
        files = _collect(path)
    except (OSError, UnicodeDecodeError) as problem:
        raise InputFaults.one(path, "", f"can't be read: {problem}", "a Python file with a law") from None
    cls = _import_files(files, class_name, str(path))
    return cls, files


def _collect(path: Path) -> Files:
    """Return the file and, file by file, the neighbours that it imports, however indirectly."""
    folder, waiting, texts = path.parent, [path], dict[str, str]()
    while waiting:
        source = waiting.pop()
        name = source.relative_to(folder).as_posix()
        if name in texts:
            continue
        texts[name] = source.read_text("utf-8")
        waiting += _neighbours(texts[name], folder)
    first = path.name
    return ((first, texts.pop(first)), *sorted(texts.items()))


def _neighbours(text: str, folder: Path) -> list[Path]:
    try:
        tree = ast.parse(text)
    except SyntaxError:
        return []  # the import itself will say so, with its traceback
    wanted: set[str] = set()
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            wanted |= {alias.name.split(".")[0] for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module and node.level == 0:
            wanted.add(node.module.split(".")[0])
    found = [folder / f"{name}.py" for name in wanted if (folder / f"{name}.py").is_file()]
    for name in wanted:
        if (folder / name / "__init__.py").is_file():
            found += (folder / name).glob("**/*.py")
    return found


@cache
def _import_files(files: Files, class_name: str, shown: str) -> type[Law]:
    """Write the texts into a folder of their own and import the first.

    Neighbours are imported from that folder alone and then taken out of sys.modules again, so two laws
    may each have a ``helpers.py``. Importing from the carried texts, on every machine alike, is what
    makes the key's digest the truth about what ran.
    """
    folder = _written(files)
    module = _execute(folder, files[0][1], f"rigbench_law_{_digest(files)}", shown)
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


def _written(files: Files) -> Path:
    """Return a folder that holds the texts, named by their digest: workers and later runs share it."""
    folder = kernel_cache() / "laws" / _digest(files)
    if not folder.is_dir():
        folder.parent.mkdir(parents=True, exist_ok=True)
        fresh = Path(tempfile.mkdtemp(dir=folder.parent))
        for name, text in files:
            (fresh / name).parent.mkdir(parents=True, exist_ok=True)
            (fresh / name).write_text(text, "utf-8")
        try:
            fresh.rename(folder)
        except OSError:  # another process was first
            shutil.rmtree(fresh, ignore_errors=True)
    return folder


def _execute(folder: Path, text: str, name: str, shown: str) -> ModuleType:
    """Run ``text`` as a module under the path that the user knows, so that tracebacks name it."""
    module = ModuleType(name)
    module.__file__ = shown
    linecache.cache[shown] = (len(text), None, text.splitlines(keepends=True), shown)
    before = set(sys.modules)
    sys.path.insert(0, str(folder))
    sys.modules[name] = module
    try:
        exec(compile(text, shown, "exec"), module.__dict__)
    except Exception as problem:
        del sys.modules[name]
        ours = problem.__traceback__
        trace = "".join(traceback.format_exception(type(problem), problem, ours and ours.tb_next))
        raise LawError(shown, f"{type(problem).__name__}: {problem}", trace) from None
    finally:
        sys.path.remove(str(folder))
        for other in set(sys.modules) - before - {name}:
            origin = getattr(sys.modules[other], "__file__", None) or ""
            if origin.startswith(str(folder)):
                del sys.modules[other]
    return module
