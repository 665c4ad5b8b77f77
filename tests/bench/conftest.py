"""The stand-ins of this folder, under a name that worker processes can import too."""

from __future__ import annotations

import importlib
from pathlib import Path
from types import ModuleType

import pytest


@pytest.fixture
def stand_ins(monkeypatch: pytest.MonkeyPatch) -> ModuleType:
    """The module stand_ins.py: worker processes inherit sys.path."""
    monkeypatch.syspath_prepend(Path(__file__).parent)
    return importlib.import_module("stand_ins")
