"""Scenes: what else is in the engine's world, put there by a function of the user's."""

from __future__ import annotations

import inspect
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache
from importlib.metadata import EntryPoint, entry_points
from pathlib import Path
from typing import Any

from rigbench.arm.arm import Arm
from rigbench.errors import Fault, InputFaults, SceneError, nearest
from rigbench.laws.plugins import (
    Files,
    Plugin,
    collect,
    digest_of,
    import_files,
    load_points,
    own_trace,
    package_digest,
)

__all__ = ["Build", "SceneChoice", "Scenes", "load_file_scene", "registered_scenes"]

GROUP = "rigbench.scenes"

Build = Callable[[int, int, Arm], None]
"""``build(client, body, arm)`` adds bodies and constraints to the engine's world.

``client`` is the engine's (physicsClientId), ``body`` the arm in it, joint i of ``arm`` (the plant) its
joint i, standing where the run starts. What the arm weighs and how it moves, gravity, the time step and
the arm's state are the rig's and must stay; how slippery the arm is may be set. It must depend on its
arguments alone: what it reads from files or draws at random is not in the run's key.
"""


@dataclass(frozen=True)
class Scenes:
    """All scenes that could be loaded, by name, and the names and reasons of those that could not."""

    scenes: Mapping[str, Plugin[Build]]
    broken: tuple[tuple[str, str], ...]


def check_build(found: object) -> Build:
    """Return ``found`` if it is a function of (client, body, arm); TypeError says what it is else."""
    if not inspect.isfunction(found):
        raise TypeError(f"{found!r} is not a function")
    given = inspect.signature(found).parameters
    if len(given) != 3:
        raise TypeError(f"{found.__name__} takes ({', '.join(given)}); expected (client, body, arm)")
    return found


@cache
def registered_scenes() -> Scenes:
    """Load every scene of the entry-point group ``rigbench.scenes``; a broken one stops no other."""
    return scenes_of(tuple(entry_points(group=GROUP)))


def scenes_of(points: tuple[EntryPoint, ...]) -> Scenes:
    """Load the scenes of the given entry points; of two with one name, both are refused."""
    return Scenes(*load_points(points, check_build))


@dataclass(frozen=True)
class SceneChoice:
    """A scene as a run carries it.

    ``plugin`` is a registered name or ``file.py:function``; for the latter ``files`` holds the texts of
    the file and of what it imports from its own folder.
    """

    plugin: str
    files: Files = ()

    def inputs(self) -> dict[str, Any]:
        """Return what the run's key covers: name and a digest of the scene's sources."""
        source = digest_of(self.files) if self.files else package_digest(self.function().__module__)
        return {"scene": self.plugin, "source": source}

    def function(self) -> Build:
        """Return the scene's function; SceneError if it isn't to be had here."""
        if self.files:
            shown, name = self.plugin.rsplit(":", 1)
            return _function(self.files, name, shown)
        found = registered_scenes().scenes.get(self.plugin)
        if found is None:
            raise SceneError(self.plugin, "no such scene is registered here", "")
        return found.found

    def build(self, client: int, body: int, arm: Arm) -> None:
        """Add to the world; SceneError, with the scene's own traceback, if it raises."""
        function = self.function()
        try:
            function(client, body, arm)
        except Exception as problem:
            trace = own_trace(problem, Path(__file__).parent)
            raise SceneError(self.plugin, f"{type(problem).__name__}: {problem}", trace) from None


def load_file_scene(path: Path, name: str) -> tuple[Build, Files]:
    """Import the function ``name`` from a user's file; return it and the texts that make it up.

    InputFaults if the file or the function is missing or takes other arguments; SceneError with the
    file's own traceback if importing it raises.
    """
    try:
        files = collect(path)
    except (OSError, UnicodeDecodeError) as problem:
        raise InputFaults.one(path, "", f"can't be read: {problem}", "a Python file with a scene") from None
    return _function(files, name, str(path)), files


def _function(files: Files, name: str, shown: str) -> Build:
    module = import_files(files, shown, SceneError)
    found = getattr(module, name, None)
    if found is None:
        own = [v for v in vars(module).values() if inspect.isfunction(v) and v.__module__ == module.__name__]
        names = [function.__name__ for function in own]
        expected = f"one of {', '.join(names)}" if names else "a function (client, body, arm)"
        fault = Fault(shown, None, name, "no such function in this file", expected, nearest(name, names))
        raise InputFaults([fault])
    try:
        return check_build(found)
    except TypeError as problem:
        raise InputFaults.one(shown, name, str(problem)) from None
