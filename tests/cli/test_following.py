"""Following a campaign: its progress as it runs, and `rigbench status --watch` beside it."""

from __future__ import annotations

import json
import signal
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest
from typer.testing import Result

from rigbench.campaign.progress import Progress
from rigbench.campaign.tally import SoFar, Standing
from rigbench.cli import progress as shown
from rigbench.cli import watch

Process = subprocess.CompletedProcess[str]

STANDING = Standing(
    "all at 1",
    (SoFar("a", 3, 6), SoFar("b", 6, 6), SoFar("c", 0, 0), SoFar("d", 0, 6), SoFar("e", 1, 6), SoFar("f", 0, 5)),
)  # fmt: skip


def test_the_standing_in_words() -> None:
    """Those that keep most come first, laws without a draw are left out, of many the rest is counted."""
    words = "draws that keep under 'all at 1': b 6 of 6, a 3 of 6, e 1 of 6, d 0 of 6, 1 more"
    assert shown.standing_words(STANDING) == words
    two = Standing("all at 1", (SoFar("a", 1, 2),), sheets=3)
    assert shown.standing_words(two) == "draws that keep under 'all at 1', all 3 sheets: a 1 of 2"
    assert "under 'all at 1', both sheets: a 1" in shown.standing_words(replace(two, sheets=2))
    assert shown.standing_words(None) == ""


def test_lines_are_few(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    """Not at a terminal: of 1000 runs in 25 s two are told, with rate, time left, failures and the standing."""
    clock = [0.0]
    monkeypatch.setattr(shown.time, "monotonic", lambda: clock[0])
    with shown.progress_shown() as on_progress:
        for number in range(1000):
            clock[0] = number / 40
            on_progress(Progress(2000, number - 1, 1, 40.0, (2000 - number) / 40, 30.0, STANDING))
    first, second = capsys.readouterr().err.splitlines()
    assert first.startswith(
        "399 of 2000 runs done, 40 runs a second, 40 s left, stops in 30 s, 1 failed; draws that"
    )
    assert second.startswith("799 of 2000 runs done, 40 runs a second, 30 s left, 1 failed; draws that")


def test_the_bar_at_a_terminal(at_terminal: Callable[..., object], trial_text: str, trial: Path) -> None:
    """Runs, rate, time left, failures and the standing; Ctrl-C is answered at once, the end says how to go on."""
    trial.write_text(trial_text.replace("draws: 3", "draws: 4000"), encoding="utf-8")
    terminal = at_terminal("run", "trial.yaml", "--jobs", "0")
    terminal.wait_for("draws that keep under 'all at 1':")
    terminal.wait_for("runs a second")
    for words in ("/8002", "left", "0 failed", "computed torque"):
        terminal.wait_for(words)
    terminal.process.send_signal(signal.SIGTERM)
    terminal.wait_for("stopping after the runs in hand; asked once more, it drops them")
    assert terminal.end() == 3
    assert "stopped as asked, with" in terminal.said
    assert "'rigbench run trial.yaml' goes on from here" in terminal.said


def watched_campaign(call: Callable[..., Result]) -> Result:
    """Run trial.yaml to its end in a process of its own, watched by `status --watch`."""
    campaign = subprocess.Popen(
        [sys.executable, "-m", "rigbench", "run", "trial.yaml", "--jobs", "0"],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    )
    try:
        watched = call("status", "results/trial.sqlite", "--watch")
        assert campaign.wait(timeout=60) == 0
    finally:
        campaign.kill()
        campaign.wait(timeout=60)
    return watched


def test_watching_until_it_is_complete(
    call: Callable[..., Result],
    run_here: Callable[..., Result],
    trial_text: str,
    trial: Path,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Not at a terminal: a line whenever runs were stored, then the status as it is in the end."""
    monkeypatch.setattr(watch, "LINE_EVERY_S", 0.2)
    trial.write_text(trial_text.replace("draws: 3", "draws: 80"), encoding="utf-8")
    run_here("trial.yaml", "--draws", "1")
    watched = watched_campaign(call)
    assert watched.exit_code == 0
    lines = [line for line in watched.stdout.splitlines() if " of 162 runs done, 0 failed. " in line]
    assert lines[-1].startswith("162 of 162 runs done, 0 failed. Take 'computed torque'")
    assert len(lines) == len(set(lines)) >= 2
    assert watched.stdout.endswith(call("status", "results/trial.sqlite").stdout)
    assert "not a safety case" in watched.stderr


def test_watching_until_its_studies_are_finished(
    call: Callable[..., Result],
    run_here: Callable[..., Result],
    trial_text: str,
    trial: Path,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """A matrix that is whole is not the end where a study follows; the status says which is not finished."""
    monkeypatch.setattr(watch, "LINE_EVERY_S", 0.1)
    trial.write_text(trial_text + "find_level: {steps: 3}\n", encoding="utf-8")
    done = run_here("trial.yaml", "--draws", "3")
    assert (
        "the first 3 of 3 draws are done, as asked; 'rigbench run trial.yaml' does find_level" in done.stderr
    )
    assert "Not finished: find_level." in call("status", "results/trial.sqlite").stdout
    assert json.loads(call("status", "results/trial.sqlite", "--json").stdout)["notes"] == [
        "Not finished: find_level."
    ]
    watched = watched_campaign(call)
    first, *_, last = [line for line in watched.stdout.splitlines() if "8 of 8 runs done, 0 failed. " in line]
    assert first.endswith("Not finished: find_level.")
    assert "Not finished" not in last
    assert watched.stdout.endswith(call("status", "results/trial.sqlite").stdout)


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_watching_at_a_terminal(
    at_terminal: Callable[..., object],
    run_here: Callable[..., Result],
    trial: Path,
    number: signal.Signals,
) -> None:
    """Redrawn on a screen of its own, no higher than the terminal; afterwards the last status stands."""
    run_here("trial.yaml", "--draws", "1")
    terminal = at_terminal("status", "results/trial.sqlite", "--watch")
    terminal.wait_for("Ctrl-C ends this")
    drawn = terminal.said.split(watch.FROM_THE_TOP)
    assert drawn[0].endswith(watch.OTHER_SCREEN)
    assert drawn[1].count("\n") < 24
    terminal.process.send_signal(number)
    assert terminal.end() == 3
    screen, after = terminal.said.split(watch.BACK)
    assert "8 runs planned, 4 done, none failed." in screen
    assert "8 runs planned, 4 done, none failed." in after
    assert "are still to do." in " ".join(after.split())
    assert "Traceback" not in after


def test_a_status_that_is_higher_than_the_terminal(
    run_here: Callable[..., Result], trial: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """What doesn't fit is counted, and the whole is printed in the end."""
    run_here("trial.yaml", "--draws", "1")
    parts: list[str] = []
    monkeypatch.setattr(watch, "put", parts.append)
    monkeypatch.setattr(watch, "show", parts.append)
    monkeypatch.setattr(watch, "height", lambda: 8)
    with watch.Store.open_for_reading("results/trial.sqlite") as store, watch._screen() as draw:
        draw(store.results(), [])
    _, drawn, _, whole = parts
    lines = drawn.removeprefix(watch.FROM_THE_TOP).splitlines()
    assert len(lines) == 7
    hidden = len(whole.splitlines()) - 5
    assert lines[5] == f"({hidden} lines more)"
    assert lines[:5] == whole.splitlines()[:5]


@pytest.mark.parametrize(
    ("arguments", "code", "words"),
    [(("nope.sqlite", "--watch"), 5, "no such store"), (("nope.sqlite", "--watch", "--json"), 2, "--watch")],
)
def test_watching_what_can_not_be_watched(
    call: Callable[..., Result], trial: Path, arguments: tuple[str, ...], code: int, words: str
) -> None:
    """No store; or one JSON document was asked for, which can't come again and again."""
    result = call("status", *arguments)
    assert result.exit_code == code
    assert words in result.stderr
