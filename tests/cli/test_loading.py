"""Files of the user's own that take for ever to import."""

from __future__ import annotations

import signal
import threading
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from rigbench.cli import loading
from rigbench.experiment import load_experiment


def test_an_import_without_end_is_named_and_can_be_ended(
    at_terminal: Callable[..., Any], trial_text: str, trial: Path
) -> None:
    """The note says which file, be it in a neighbour's loop; Ctrl-C ends in exit code 3, without a traceback."""
    Path("endless.py").write_text("import neighbour\n", encoding="utf-8")
    Path("neighbour.py").write_text("while True:\n    pass\n", encoding="utf-8")
    trial.write_text(trial_text.replace("law: computed-torque", "law: 'endless.py:Law'"), encoding="utf-8")
    terminals = [at_terminal("check", "trial.yaml"), at_terminal("run", "trial.yaml", "--jobs", "0")]
    for terminal in terminals:
        terminal.wait_for("note: endless.py is still being imported, for more than 3 s; Ctrl-C ends that")
    for terminal in terminals:
        terminal.process.send_signal(signal.SIGINT)
        assert terminal.end() == 3
        assert terminal.said.endswith("stopped\n")
        assert "Traceback" not in terminal.said
    assert not Path("results").exists()


def test_each_file_that_takes_long_is_named_once(
    trial_text: str, trial: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Not those that are imported at once; loading goes on, and leaves no thread."""
    said: list[str] = []
    monkeypatch.setattr(loading, "PATIENCE_S", 0.05)
    monkeypatch.setattr(loading, "say", said.append)
    for name, pause in (("slow", 0.5), ("quick", 0.0)):
        source = "import time\nfrom rigbench.laws.independent_joint import IndependentJoint\n"
        text = f"{source}class {name.title()}(IndependentJoint):\n    pass\ntime.sleep({pause})\n"
        Path(f"{name}.py").write_text(text, encoding="utf-8")
    text = trial_text.replace("law: computed-torque", "law: 'slow.py:Slow'")
    trial.write_text(text.replace("law: independent-joint", "law: 'quick.py:Quick'"), encoding="utf-8")
    before = threading.active_count()
    assert loading.loaded("trial.yaml").laws == load_experiment("trial.yaml").laws
    (note,) = said
    assert note.startswith("note: slow.py is still being imported")
    assert threading.active_count() == before
