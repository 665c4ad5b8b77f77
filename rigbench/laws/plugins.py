"""Plug-ins: what packages register under entry points, and Python files of the user's own."""

from __future__ import annotations

import ast
import builtins
import hashlib
import shutil
import sys
import tempfile
import traceback
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from importlib.metadata import EntryPoint
from pathlib import Path
from types import ModuleType
from typing import Any, Generic, TypeVar

from rigbench.arm.kernel import kernel_cache
from rigbench.errors import PluginError

__all__ = [
    "Files",
    "Plugin",
    "being_imported",
    "collect",
    "digest_of",
    "import_files",
    "load_points",
    "own_trace",
    "package_digest",
]

Files = tuple[tuple[str, str], ...]
"""Names, relative to its folder, and texts of a user's file and of the files that it imports."""

Found = TypeVar("Found")

HERE = Path(__file__).parent

KNOWN_AS: dict[str, str] = {}
"""By the path under which a user's file runs here, the path that the user knows."""


@dataclass(frozen=True)
class Plugin(Generic[Found]):
    """What an entry point led to, and the package that registers it."""

    found: Found
    package: str
    version: str


def load_points(
    points: tuple[EntryPoint, ...], check: Callable[[object], Found], own: str = ""
) -> tuple[dict[str, Plugin[Found]], tuple[tuple[str, str], ...]]:
    """Load entry points; return what ``check`` lets pass, by name, and names and reasons of the others.

    ``check`` raises TypeError, in words, for what is no such plug-in. Of two with one name, both are
    refused, unless one is of the package ``own``, which keeps it.
    """
    loaded: dict[str, Plugin[Found]] = {}
    broken: list[tuple[str, str]] = []
    for name in sorted({point.name for point in points}):
        same = [point for point in points if point.name == name]
        ours = [point for point in same if _package(point)[0] == own]
        if len(same) > 1 and len(ours) != 1:
            who = " and ".join(sorted(_package(point)[0] for point in same))
            broken.append((name, f"the name is registered by more than one package: {who}"))
            continue
        if len(same) > 1:
            others = sorted(_package(point)[0] for point in same if point not in ours)
            broken += [(f"{name} of {other}", f"the name is {own}'s own; take another") for other in others]
        (point,) = ours if len(same) > 1 else same
        try:
            loaded[name] = Plugin(check(point.load()), *_package(point))
        except Exception as problem:  # a plugin may raise anything while it is imported
            broken.append((name, f"{type(problem).__name__}: {problem}"))
    return loaded, tuple(broken)


def _package(point: EntryPoint) -> tuple[str, str]:
    if point.dist is None:
        return point.value.split(".")[0].split(":")[0], "unknown"
    return point.dist.name, point.dist.version


def digest_of(files: Files) -> str:
    """Return a digest (hex, 32 digits) of names and texts."""
    digest = hashlib.blake2b(digest_size=16)
    for name, text in files:
        digest.update(f"{name}\0{len(text)}\0{text}".encode())
    return digest.hexdigest()


@cache
def package_digest(module_name: str) -> str:
    """Digest all sources that an imported module may be made of.

    That is its whole package, or the one module if it stands alone; of this package's own, the room.
    """
    module = sys.modules[module_name]
    path = Path(module.__file__ or "")
    if not module.__package__:
        return digest_of(((path.name, path.read_text("utf-8")),))
    folder = path.parent
    if not module_name.startswith("rigbench."):
        folder = path.parents[module.__package__.count(".")]
    return digest_of(
        tuple((str(p.relative_to(folder)), p.read_text("utf-8")) for p in sorted(folder.glob("**/*.py")))
    )


def collect(path: Path) -> Files:
    """Return the file and, file by file, the neighbours that it imports, however indirectly.

    Raises OSError or UnicodeDecodeError where one can't be read.
    """
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
def import_files(files: Files, shown: str, error: type[PluginError]) -> ModuleType:
    """Write the texts into a folder of their own, import the first and return it.

    Neighbours are imported from that folder alone, now or in a later call, and don't stay in sys.modules,
    so two files may each have a ``helpers.py``. Importing from the carried texts, on every machine alike,
    is what makes the key's digest the truth about what ran. ``shown`` is the path that the user knows. What
    the import raises comes out as ``error``, with the file's own traceback.
    """
    return _execute(_written(files), files, f"rigbench_plugin_{digest_of(files)}", shown, error)


def _written(files: Files) -> Path:
    """Return a folder that holds the texts, named by their digest: workers and later runs share it."""
    folder = kernel_cache() / "laws" / digest_of(files)
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


def _execute(folder: Path, files: Files, name: str, shown: str, error: type[PluginError]) -> ModuleType:
    """Run the first of ``files``, which stand in ``folder``, as a module of its own.

    It runs under its path there, where compilers find it on any machine; tracebacks are put back to
    ``shown`` (see :func:`own_trace`).
    """
    first, text = files[0]
    path = folder / first
    KNOWN_AS[str(path)] = shown
    module = ModuleType(name)
    module.__file__ = str(path)
    module.__dict__["__builtins__"] = vars(builtins) | {"__import__": _importer(folder, files)}
    sys.modules[name] = module
    try:
        exec(compile(text, str(path), "exec"), module.__dict__)
    except BaseException as problem:
        del sys.modules[name]
        if isinstance(problem, KeyboardInterrupt):
            raise
        raise error(shown, f"{type(problem).__name__}: {problem}", own_trace(problem, HERE)) from None
    return module


def _importer(folder: Path, files: Files) -> Callable[..., Any]:
    """Return the import function of a plug-in file: its neighbours come from ``folder``, whenever asked for.

    They are put into sys.modules for the time of an import alone.
    """
    own = {name.split("/")[0].removesuffix(".py") for name, _ in files[1:]}
    kept: dict[str, ModuleType] = {}

    def load(name: str, *rest: Any, **more: Any) -> Any:
        if name.split(".", maxsplit=1)[0] not in own:
            return builtins.__import__(name, *rest, **more)
        outside = {other: sys.modules.pop(other) for other in list(sys.modules) if other.split(".")[0] in own}
        sys.modules.update(kept)
        sys.path.insert(0, str(folder))
        try:
            return builtins.__import__(name, *rest, **more)
        finally:
            sys.path.remove(str(folder))
            for other in [other for other in sys.modules if other.split(".")[0] in own]:
                kept[other] = sys.modules.pop(other)
            sys.modules.update(outside)

    return load


def being_imported(thread: int) -> str | None:
    """Return the user's file, as the user knows it, that a thread is about to import; None if it does not."""
    frame = sys._current_frames().get(thread)
    while frame is not None:
        path = frame.f_code.co_filename
        if frame.f_code.co_name == "<module>" and path in KNOWN_AS:
            return KNOWN_AS[path]
        frame = frame.f_back
    return None


def own_trace(problem: BaseException, ours: Path) -> str:
    """Return what a plug-in raised as its own traceback, under the paths that the user knows.

    Left out are the frames of files in folder ``ours`` that led to it.
    """
    frames = problem.__traceback__
    while frames is not None and Path(frames.tb_frame.f_code.co_filename).parent == ours:
        frames = frames.tb_next
    trace = "".join(traceback.format_exception(type(problem), problem, frames))
    for path, shown in KNOWN_AS.items():
        trace = trace.replace(path, shown)
    return trace
