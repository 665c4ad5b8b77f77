"""The work on one run: every way it can end is an outcome."""

from __future__ import annotations

import math
import pickle
from types import ModuleType, SimpleNamespace
from typing import Any

import pytest

from rigbench.campaign.executor import InProcess
from rigbench.campaign.plan import Entry
from rigbench.campaign.work import do, summary, this_host
from rigbench.errors import EngineError, InputFaults, LawError


@pytest.fixture
def rig(monkeypatch: pytest.MonkeyPatch) -> SimpleNamespace:
    """The rig and the scores, to be replaced by what a test needs."""
    log = SimpleNamespace(outcome="finished", reason="", residual=1e-9, law_us=2.0, in_doubt=False)
    stand_in = SimpleNamespace(simulate=lambda run: log, scores={"tool_peak_mm": 1.5, "law_us": 2.0}, log=log)
    monkeypatch.setattr("rigbench.rig.simulate", lambda run: stand_in.simulate(run))  # noqa: PLW0108
    monkeypatch.setattr("rigbench.scores.of_run.score_run", lambda log, motion, band: dict(stand_in.scores))
    return stand_in


@pytest.fixture
def run(doing: ModuleType) -> Any:
    made = doing.FakeRun("one")
    object.__setattr__(made, "settle_band_mm", 0.5)
    return made


def test_a_finished_run_has_its_scores_and_its_host_apart(rig: SimpleNamespace, run: Any) -> None:
    """What is reproducible stands in scores, what isn't in host_scores; both cross to another process."""
    rig.scores["settle_ms"] = math.inf
    outcome = pickle.loads(pickle.dumps(do(run)))
    assert (outcome.key, outcome.outcome, outcome.residual) == (run.key(), "finished", 1e-9)
    assert outcome.scores == {"tool_peak_mm": 1.5, "settle_ms": math.inf}
    assert outcome.host_scores == {"law_us": 2.0}
    assert outcome.wall_s > 0
    assert dict(outcome.host.versions).keys() >= {"python", "rigbench", "numpy", "numba", "pybullet"}


def test_a_verdict_of_the_machine_is_kept_with_its_reason(rig: SimpleNamespace, run: Any) -> None:
    """diverged and hit-stop carry what the rig says of them."""
    rig.log.outcome, rig.log.reason, rig.scores = "hit-stop", "j2 at 0.31 s", {}
    outcome = do(run)
    assert (outcome.outcome, outcome.reason, outcome.scores) == ("hit-stop", "j2 at 0.31 s", {})


@pytest.mark.parametrize(
    ("error", "outcome", "reason", "trace"),
    [
        (
            LawError("mine", "KeyError: 'x'", "their traceback"),
            "law-error",
            "KeyError: 'x'",
            "their traceback",
        ),
        (
            EngineError("stepping", "it broke"),
            "crashed",
            "engine failed while stepping: it broke",
            "EngineError",
        ),
        (SystemExit(2), "crashed", "SystemExit: 2", "Traceback"),
        (ZeroDivisionError("over\nnothing"), "crashed", "ZeroDivisionError: over nothing", "over\nnothing"),
    ],
)
def test_an_exception_is_an_outcome(
    rig: SimpleNamespace, run: Any, error: BaseException, outcome: str, reason: str, trace: str
) -> None:
    """The law's own is a law-error with its own traceback; any other is 'crashed', on the host's account."""

    def fail(run: Any) -> None:
        raise error

    rig.simulate = fail
    done = do(run)
    assert done.outcome == outcome
    assert reason in done.reason
    assert "\n" not in done.reason
    assert trace in done.trace


@pytest.mark.parametrize("in_a_law", [True, False])
def test_want_of_memory_is_raised_on(rig: SimpleNamespace, run: Any, in_a_law: bool) -> None:
    """Whoever does the runs can try again elsewhere; in this process it is a row with the law's traceback."""

    def fail(run: Any) -> None:
        try:
            raise MemoryError("no room")
        except MemoryError:
            if not in_a_law:
                raise
            raise LawError("mine", "MemoryError: no room", "their traceback") from None

    rig.simulate = fail
    with pytest.raises(MemoryError):
        do(run)
    [done] = InProcess().run_all([Entry("", "mine", "", "", 0.0, None, run)])
    assert (done.outcome, "MemoryError" in done.reason, "\n" in done.reason) == ("crashed", True, False)
    assert ("their traceback" if in_a_law else "no room") in done.trace


@pytest.mark.parametrize("outcome", ["finished", "hit-stop"])
def test_where_engine_and_drive_disagree_there_is_no_verdict(
    rig: SimpleNamespace, run: Any, outcome: str
) -> None:
    """The run is the host's trouble, says by how much, and has no scores."""
    rig.log.outcome, rig.log.residual, rig.log.in_doubt = outcome, 3e-5, True
    done = do(run)
    assert (done.outcome, done.scores, done.residual) == ("disagrees", {}, 3e-5)
    assert done.reason == "engine and drive disagree by 3e-05 rad/s (limit 1e-06)"
    assert done.host is not None


def test_a_run_that_ran_away_keeps_its_verdict(rig: SimpleNamespace, run: Any) -> None:
    """At its speeds the last digits alone are more than the limit."""
    rig.log.outcome, rig.log.residual, rig.log.in_doubt, rig.scores = "diverged", 3e-5, True, {}
    assert do(run).outcome == "diverged"


def test_a_plant_that_can_not_exist_is_said_in_its_own_words(rig: SimpleNamespace, run: Any) -> None:
    """Without a traceback: it is what was declared, and not a mistake of ours."""

    def refuse(run: Any) -> None:
        raise InputFaults.one("arm", "mismatch.payload", "link 'hand' can't exist", "less spread or level")

    rig.simulate = refuse
    done = do(run)
    assert (done.outcome, done.trace) == ("no-plant", "")
    assert done.reason == "arm: mismatch.payload: link 'hand' can't exist; expected less spread or level"


@pytest.mark.parametrize("value", [math.nan, -math.inf])
def test_a_score_that_is_no_score_is_a_mistake_of_ours(rig: SimpleNamespace, run: Any, value: float) -> None:
    """NaN never reaches the store: the run is 'crashed', and names the score."""
    rig.scores["chatter"] = value
    assert do(run).outcome == "crashed"
    assert "chatter" in do(run).reason


def test_ctrl_c_is_not_an_outcome(rig: SimpleNamespace, run: Any) -> None:
    """In one process, the campaign itself has to hear it."""

    def interrupt(run: Any) -> None:
        raise KeyboardInterrupt

    rig.simulate = interrupt
    with pytest.raises(KeyboardInterrupt):
        do(run)


def test_an_exception_without_a_text_has_a_summary() -> None:
    """Its name alone."""
    assert summary(ValueError()) == "ValueError"


def test_the_host_knows_the_law_s_package() -> None:
    """A built-in law comes from rigbench itself, and its version is listed."""
    assert "rigbench" in dict(this_host("computed-torque").versions)
    assert this_host("computed-torque").cpu
