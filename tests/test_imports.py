"""The rooms of the package import one way only, from the errors up to the command line."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from pathlib import Path

import pytest

import rigbench

ROOMS = (
    "errors",
    "yamlfile",
    "arm",
    "motion",
    "laws",
    "rig",
    "testing",
    "scores",
    "campaign",
    "identify",
    "report",
    "experiment",
    "calls",
    "cli",
    "__main__",
)
PACKAGE = Path(rigbench.__file__).parent


def room_of(module: str) -> str | None:
    """Name the room of a dotted module, None for the package itself (which holds the version alone)."""
    parts = module.split(".")
    return parts[1] if len(parts) > 1 else None


def imported(source: str, module: str, is_package: bool) -> Iterator[tuple[int, str]]:
    """Yield line and dotted name of every import from the package, wherever in the text it stands."""
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            base = node.module or ""
            if node.level:
                package = module.split(".") if is_package else module.split(".")[:-1]
                package = package[: len(package) - (node.level - 1)]
                base = ".".join([*package, base] if base else package)
            names = [f"{base}.{alias.name}" for alias in node.names] if base == "rigbench" else [base]
        else:
            continue
        for name in names:
            if name.split(".")[0] == "rigbench":
                yield node.lineno, name


def offences(source: str, module: str, is_package: bool = False) -> list[str]:
    """List the imports of a module that point to its right in ROOMS, or to a room that isn't there."""
    own = room_of(module)
    found = []
    for line, name in imported(source, module, is_package):
        other = room_of(name)
        if other is None or other == "__version__":
            continue
        if own is None or other not in ROOMS or ROOMS.index(other) > ROOMS.index(own):
            found.append(f"{module}:{line} imports {name}")
    return found


def modules() -> Iterator[tuple[str, Path]]:
    for path in sorted(PACKAGE.rglob("*.py")):
        parts = list(path.relative_to(PACKAGE.parent).with_suffix("").parts)
        if "demo" in parts:
            continue
        yield ".".join(parts[:-1] if parts[-1] == "__init__" else parts), path


def test_rooms_import_one_way() -> None:
    """No module imports from a room to its right, not even inside a function."""
    found = []
    for module, path in modules():
        found += offences(path.read_text(encoding="utf-8"), module, path.name == "__init__.py")
    assert not found, "\n".join(found)


def test_every_module_stands_in_a_room() -> None:
    """A new room has to be given its place in the order before it can be used."""
    strangers = {room_of(module) for module, _ in modules()} - {*ROOMS, None}
    assert not strangers


@pytest.mark.parametrize(
    ("source", "module", "is_package"),
    [
        ("from rigbench.cli import main", "rigbench.arm.files", False),
        ("import rigbench.campaign.store", "rigbench.scores.summary", False),
        ("def f():\n    from rigbench import report", "rigbench.campaign.plan", False),
        ("from ..experiment import expand", "rigbench.report.text", False),
        ("from ..laws.law import Law", "rigbench.motion", True),
        ("from rigbench.nowhere import x", "rigbench.cli", False),
        ("from rigbench.errors import Fault", "rigbench", True),
    ],
)
def test_an_import_against_the_order_is_found(source: str, module: str, is_package: bool) -> None:
    """Each way of writing a forbidden import is seen."""
    assert len(offences(source, module, is_package)) == 1


@pytest.mark.parametrize(
    ("source", "module", "is_package"),
    [
        ("from rigbench import __version__\nfrom rigbench.errors import Fault", "rigbench.cli", False),
        (
            "from . import schema\nfrom .checks import x\nfrom ..rig.run import Run",
            "rigbench.experiment",
            True,
        ),
        ("import numpy\nfrom rigbench.laws.law import Law", "rigbench.laws.registry", False),
    ],
)
def test_an_import_along_the_order_passes(source: str, module: str, is_package: bool) -> None:
    """Imports to the left, inside a room and from outside are free."""
    assert offences(source, module, is_package) == []
