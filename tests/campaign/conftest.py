"""Plans of stand-in runs."""

from __future__ import annotations

import importlib
import os
import tempfile
from collections.abc import Callable, Iterator
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from rigbench.campaign.plan import Entry, Plan, fair_order
from rigbench.scores.results import Column, Tolerance


@pytest.fixture
def doing(monkeypatch: pytest.MonkeyPatch) -> ModuleType:
    """The module doing.py, under a name that worker processes can import too: they inherit sys.path."""
    monkeypatch.syspath_prepend(Path(__file__).parent)
    return importlib.import_module("doing")


@pytest.fixture
def surroundings() -> Iterator[dict[str, str]]:
    """The environment of a program that will be killed: what it can't tidy up goes with this fixture."""
    with tempfile.TemporaryDirectory(prefix="t") as folder:  # short: it takes a socket, whose path is limited
        yield os.environ | {"TMPDIR": folder}


@pytest.fixture
def make_entries(doing: ModuleType) -> Callable[..., list[Entry]]:
    """Build one entry a name, each of which does the act given for it."""

    def build(**acts: Any) -> list[Entry]:
        return [
            Entry("", "pd", "lift", "nominal", 0.0, None, doing.FakeRun(name, **({"act": act} | more)))
            for name, (act, more) in acts.items()
        ]

    return build


@pytest.fixture
def make_plan(doing: ModuleType) -> Callable[..., Plan]:
    """Build a plan of two laws under three conditions: nominal, one source alone, and both together."""

    def build(draws: int = 3, title: str = "Trays", seconds: float = 0.0, **given: Any) -> Plan:
        conditions = [
            ("nominal", 0.0, None, ()),
            *(("coulomb_percent alone", 1.0, d, ("coulomb_percent",)) for d in range(draws)),
            *(("all at 1", 1.0, d, ("coulomb_percent", "viscous_percent")) for d in range(draws)),
        ]
        entries = [
            Entry(
                "", law, "lift", condition, level, draw,
                doing.FakeRun(f"{law} {condition} {draw}", seconds=seconds, draw=draw, sources=sources),
            )
            for law in ("pd", "feedforward")
            for condition, level, draw, sources in conditions
        ]  # fmt: skip
        values: dict[str, Any] = {
            "title": title,
            "arm": "two link",
            "experiment_text": "rigbench: 1\n",
            "experiment_path": "trays.yaml",
            "sheets": ("",),
            "laws": ("pd", "feedforward"),
            "motions": ("lift",),
            "columns": (
                Column("nominal", None, False, True),
                Column("coulomb_percent alone", 1.0, True, False),
                Column("all at 1", 1.0, True, True),
            ),
            "draws": draws,
            "tolerance": Tolerance({"tool_peak_mm": 3.0, "settle_ms": 250.0}, 0.9),
            "entries": fair_order(entries),
            "resume": "rigbench run trays.yaml",
        }
        return Plan(**(values | given))

    return build
