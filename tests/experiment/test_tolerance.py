"""The tolerance of the experiment and of single motions, with the band of each."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from rigbench.errors import Fault
from rigbench.experiment import Experiment

Load = Callable[..., Experiment]
Faults = Callable[..., list[Fault]]

VIA = [[0, 0], [30, 40]]
MOTIONS = {"swing": {"via_deg": VIA, "leg_s": 0.4}, "pass": {"via_deg": VIA, "leg_s": 0.4, "rest_s": 0}}


def with_own(**tolerance: Any) -> dict[str, Any]:
    """Two motions, of which swing has a tolerance of its own."""
    return MOTIONS | {"swing": MOTIONS["swing"] | {"tolerance": tolerance}}


def test_limits_of_a_motion_come_on_top_and_in_place(load: Load) -> None:
    """Those of its own score replace, others are added; the other motion keeps what is common."""
    motions = with_own(tool_peak_mm=1, joint_peak_deg={"j2": 0.1})
    tolerance = load(motions=motions, tolerance={"tool_peak_mm": 3, "tool_angle_peak_deg": 1}).tolerance
    assert tolerance is not None
    assert tolerance.limits_for("swing") == {
        "tool_peak_mm": 1, "tool_angle_peak_deg": 1, "joint_peak_deg.j2": 0.1,
    }  # fmt: skip
    assert tolerance.limits_for("pass") == {"tool_peak_mm": 3, "tool_angle_peak_deg": 1}


def test_a_motion_may_have_the_only_tolerance(load: Load) -> None:
    """Nothing is limited elsewhere, and nobody is told that there is no tolerance."""
    experiment = load(motions=with_own(settle_ms=200), tolerance=None)
    assert experiment.tolerance is not None
    assert experiment.tolerance.limits == {}
    assert experiment.tolerance.limits_for("swing") == {"settle_ms": 200}
    assert experiment.notes == ()


def test_the_band_is_the_motion_s_own_or_the_common_one(load: Load) -> None:
    """Each run is scored with the band of its motion; it is part of its key."""
    motions = with_own(settle_ms=200, settle_band_mm=2)
    for common, expected in ((None, 0.5), (1.0, 1.0)):
        tolerance = {"tool_peak_mm": 3} | ({} if common is None else {"settle_band_mm": common})
        entries = load(motions=motions, tolerance=tolerance).plan().entries
        bands = {entry.motion: entry.run.settle_band_mm for entry in entries}
        assert bands == {"swing": 2, "pass": expected}


FAULTS: list[tuple[dict[str, Any], str, str, str | None]] = [
    ({"tool_peek_mm": 1}, "tool_peek_mm", "is not a score", "tool_peak_mm"),
    ({"tool_peak_mm": 0}, "tool_peak_mm", "0 is out of range", None),
    ({"joint_peak_deg": {"j11": 1}}, "joint_peak_deg.j11", "the arm has no joint 'j11'", "j1"),
    ({"joint_peak_mm": 1}, "joint_peak_mm", "every joint is revolute", None),
    ({"law_us": 1}, "law_us", "tells about this computer", None),
    ({"settle_band_mm": -1}, "settle_band_mm", "-1 is out of range", None),
]


@pytest.mark.parametrize(
    ("tolerance", "key", "problem", "near"), FAULTS, ids=[f"{k}-{p}" for _, k, p, _ in FAULTS]
)
def test_one_slip_in_a_motion_s_tolerance(
    faults: Faults, tolerance: dict[str, Any], key: str, problem: str, near: str | None
) -> None:
    """One fault, at its key in the motion."""
    (fault,) = faults(motions=with_own(**tolerance), tolerance={"tool_peak_mm": 3})
    assert fault.key == f"motions.swing.tolerance.{key}"
    assert problem in fault.problem
    assert fault.near == near


def test_a_limit_on_what_the_motion_lacks(faults: Faults, load: Load) -> None:
    """A motion without a rest has no settling: at fault as its own limit, noted as a common one, at fault if none has it."""
    motions = MOTIONS | {"pass": MOTIONS["pass"] | {"tolerance": {"settle_ms": 100}}}
    (fault,) = faults(motions=motions, tolerance={"tool_peak_mm": 3})
    assert fault.key == "motions.pass.tolerance.settle_ms"
    assert "does not have a rest" in fault.problem
    (note,) = load(motions=MOTIONS, tolerance={"settle_ms": 100}).notes
    assert "not measured in pass" in note.problem
    (fault,) = faults(motions={"pass": MOTIONS["pass"]}, tolerance={"settle_ms": 100})
    assert fault.key == "tolerance.settle_ms"


def test_an_empty_tolerance_of_a_motion_is_at_fault(faults: Faults) -> None:
    """It would say nothing."""
    (fault,) = faults(motions=with_own(), tolerance={"tool_peak_mm": 3})
    assert (fault.key, fault.problem) == ("motions.swing.tolerance", "no entries given")
