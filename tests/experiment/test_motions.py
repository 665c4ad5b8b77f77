"""Motions of the tool point, chains and repeats, as an experiment file declares them."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rigbench.arm.dynamics import tool_path
from rigbench.errors import Fault
from rigbench.experiment import Experiment
from rigbench.motion.motion import Motion

Load = Callable[..., Experiment]
Faults = Callable[..., list[Fault]]

ROOT = Path(__file__).resolve().parents[2]
TRAY6 = str(ROOT / "robots_demo" / "tray6" / "arm.yaml")

VIA = {"via_deg": [[0, 30], [20, 60]], "leg_s": 0.4, "rest_s": 0.1}
CIRCLE = {"centre_m": [0.45, 0, 0.4], "radius_m": 0.05, "normal": [0, 0, 1], "turn_s": 2.0}
START = [[0, -60, 90, 0, 60, 0], [5, -60, 90, 0, 60, 0]]
LINE = {"to_m": [0.45, 0, 0.2], "from_m": [0.4, 0, 0.25], "near_deg": [0, 30]}


def motions(load: Load, arm: str = TRAY6, **declared: Any) -> dict[str, Motion]:
    experiment = load(
        arm=arm, motions=declared, tolerance={"tool_peak_mm": 3}, mismatch=None, conditions=None
    )
    return dict(experiment.sheets[0].motions)


def positions(motion: Motion, arm: str = TRAY6) -> np.ndarray:
    """Where the tool point is at 200 times from start to end (N, 3)."""
    from rigbench.arm.files import load_arm

    q, _, _ = motion.reference(np.linspace(0, motion.duration_s, 200))
    built = load_arm(arm)
    return tool_path(built.chain(np.zeros(3)), q)[0]


def test_a_circle_is_followed_as_declared(load: Load) -> None:
    """The tool stays on it to a nanometre or so, once around in turn_s, and rests as declared."""
    circle = motions(load, rim={"circle": CIRCLE, "rest_s": 0.2})["rim"]
    away = positions(circle) - [0.45, 0, 0.4]
    np.testing.assert_allclose(np.hypot(away[:, 0], away[:, 1]), 0.05, atol=1e-8)
    np.testing.assert_allclose(away[:, 2], 0, atol=1e-8)
    assert circle.duration_s == pytest.approx(2.2, rel=1e-12)
    assert circle.rests == ((pytest.approx(2.0), pytest.approx(2.2)),)


def test_the_keys_of_a_circle_reach_it(load: Load) -> None:
    """Half a turn from the base's y, at twice the pace: it starts and ends where that says."""
    keys = CIRCLE | {"turns": 0.5, "start_deg": 90, "tool_rpy_deg": None}
    circle = motions(
        load, rim={"circle": {k: v for k, v in keys.items() if v is not None}, "pace_percent": 200}
    )["rim"]
    found = positions(circle)
    np.testing.assert_allclose(found[0], [0.45, 0.05, 0.4], atol=1e-8)
    np.testing.assert_allclose(found[-1], [0.45, -0.05, 0.4], atol=1e-8)
    assert circle.duration_s == pytest.approx(0.5 + 0.3, rel=1e-12)


def test_a_circle_starts_near_what_is_declared(load: Load) -> None:
    """near_deg, else gain_pose_deg, else the first via point, chooses among the poses of an arm."""
    elbow = {"arm": "arm.yaml", "tolerance": {"tool_peak_mm": 3}, "mismatch": None, "conditions": None}
    line = {k: v for k, v in LINE.items() if k != "near_deg"}

    def second(**changes: Any) -> float:
        q, _, _ = load(**elbow, **changes).sheets[0].motions["m"].reference(np.zeros(1))
        return float(q[0, 1])

    up, down = {"via_deg": [[0, 40], [0, 50]]}, {"via_deg": [[60, -20], [60, -25]]}
    assert second(motions={"m": {"line": line}, "v": up}) > 0.3
    assert second(motions={"m": {"line": line | {"near_deg": [10, 60]}}, "v": down}) > 0.3
    assert second(motions={"m": {"line": line}, "v": down}, gain_pose_deg=[10, 60]) > 0.3


def test_a_line_goes_straight(load: Load) -> None:
    """From one point to the other, in leg_s."""
    line = motions(load, arm="arm.yaml", m={"line": LINE, "leg_s": 0.8, "rest_s": 0})["m"]
    assert line.duration_s == pytest.approx(0.8)
    assert line.rests == ()


def test_a_chain_does_its_parts_in_order(load: Load) -> None:
    """One after the other, each where it stands alone, with legs of join_s between them; the whole repeated."""
    one, other = VIA, VIA | {"via_deg": [[-10, 10], [0, 30]]}
    made = motions(
        load, arm="arm.yaml", both={"chain": ["a", "b", "a"], "join_s": 0.5, "repeat": 2}, a=one, b=other
    )
    assert list(made) == ["both", "a", "b"]
    # a -> b by a leg, b ends where a starts, and a -> a by a leg for the repeat
    assert made["both"].duration_s == pytest.approx(2 * (3 * 0.5 + 0.5) + 0.5, rel=1e-12)
    q, _, _ = made["both"].reference(np.array([0.25, 1.0 + 0.25]))
    np.testing.assert_allclose(q[0], made["a"].reference(np.array([0.25]))[0][0], atol=1e-12)
    np.testing.assert_allclose(q[1], made["b"].reference(np.array([0.25]))[0][0], atol=1e-12)


def test_a_chain_of_chains(load: Load) -> None:
    """A chain may name others, whatever the order in the file."""
    there, back = VIA, VIA | {"via_deg": [[20, 60], [0, 30]]}
    made = motions(
        load, arm="arm.yaml", twice={"chain": ["once", "once"]}, once={"chain": ["a", "b"]}, a=there, b=back
    )
    assert made["twice"].duration_s == pytest.approx(2.0, rel=1e-12)


def test_repeats_and_pace(load: Load) -> None:
    """A motion that ends where it starts is repeated without a leg; pace shortens its legs and joins, not its rests."""
    round_trip = VIA | {"via_deg": [[0, 30], [20, 60], [0, 30]]}
    assert motions(load, arm="arm.yaml", m=round_trip | {"repeat": 3})["m"].duration_s == pytest.approx(3.0)
    one_way = VIA | {"repeat": 2, "join_s": 0.6, "pace_percent": 50}
    made = motions(load, arm="arm.yaml", m=one_way, c={"chain": ["m"], "pace_percent": 50})
    assert made["m"].duration_s == pytest.approx(2 * (0.8 + 0.1) + 1.2, rel=1e-12)
    assert made["c"].duration_s == pytest.approx(2 * (1.6 + 0.1) + 2.4, rel=1e-12)


AT_FAULT: list[tuple[dict[str, Any], str, str]] = [
    ({}, "", "its kind is not given"),
    ({"line": LINE, "via_deg": VIA["via_deg"]}, "", "both via_deg and line are given"),
    ({"line": {}}, ".line.to_m", "missing"),
    ({"line": LINE | {"to_m": [1, 2]}}, ".line.to_m", "2 entries given"),
    ({"line": LINE | {"orientation": "hold"}}, ".line.orientation", "'hold' is not a valid choice"),
    ({"line": LINE | {"near_deg": [1]}}, ".line.near_deg", "1 entry given"),
    ({"line": LINE | {"near_deg": [0, 170]}}, ".line.near_deg", "170 deg is beyond the limit of joint j2"),
    ({"line": LINE | {"orientation": "free", "tool_rpy_deg": [0, 0, 0]}}, ".line.tool_rpy_deg", "does not go with"),
    ({"line": LINE | {"to_m": [3, 0, 0]}}, "", " s"),
    ({"line": LINE | {"to_m": LINE["from_m"]}}, "", "the line ends where it begins, at 0.000 s"),
    ({"circle": {}}, ".circle.centre_m", "missing"),
    ({"circle": CIRCLE | {"radius_m": 0}}, ".circle.radius_m", "0 is out of range"),
    ({"circle": CIRCLE | {"normal": [0, 0, 0]}}, ".circle.normal", "points nowhere"),
    ({"circle": CIRCLE, "leg_s": 1}, ".leg_s", "does not go with circle"),
    ({"line": LINE, "join_s": 1}, ".join_s", "joins nothing here"),
    ({"chain": ["v"], "rest_s": 1}, ".rest_s", "does not go with chain"),
    ({"chain": []}, ".chain", "no entries"),
    ({"chain": ["v", "w"]}, ".chain[1]", "no motion is called 'w'"),
    ({"chain": ["v", "m"]}, ".chain[1]", "'m' would contain itself"),
    ({"chain": ["v", "v"]}, "", "'v' starts"),
    (VIA | {"repeat": 2}, "", "can't be repeated"),
    (VIA | {"repeat": 0}, ".repeat", "0 is out of range"),
    (VIA | {"repeat": 1.5}, ".repeat", "1.5 is not a whole number"),
]  # fmt: skip


@pytest.mark.parametrize(("keys", "key", "problem"), AT_FAULT, ids=[f"{k}-{p}" for _, k, p in AT_FAULT])
def test_one_slip_in_a_motion(faults: Faults, keys: dict[str, Any], key: str, problem: str) -> None:
    """Told at its key, with the value given; where the arm can't follow, with the time at which it happens."""
    found = faults(motions={"v": VIA, "m": keys}, tolerance={"tool_peak_mm": 3})
    assert {fault.key for fault in found} <= {f"motions.m{key}", *(f"motions.m.circle.{k}" for k in CIRCLE)}
    assert found[0].key == f"motions.m{key}"
    assert problem in found[0].problem


def test_a_chain_of_faulty_parts_is_told_of_once(faults: Faults) -> None:
    """What is wrong with a part is told there, and not again at the chain."""
    bad = VIA | {"via_deg": [[0, 30], [0, 170]]}
    found = faults(
        motions={"c": {"chain": ["bad", "bad"], "join_s": 1}, "bad": bad}, tolerance={"tool_peak_mm": 3}
    )
    assert [fault.key for fault in found] == ["motions.bad.via_deg[1]"]


def test_chains_that_contain_each_other(faults: Faults) -> None:
    """A cycle is told where it closes."""
    found = faults(motions={"a": {"chain": ["b"]}, "b": {"chain": ["a"]}}, tolerance={"tool_peak_mm": 3})
    assert [(fault.key, "contain itself" in fault.problem) for fault in found] == [
        ("motions.b.chain[0]", True)
    ]


def test_a_way_beyond_a_joint_limit_is_told_with_the_time(faults: Faults) -> None:
    """A line that the arm could follow but for its first joint's stop at 2 rad."""
    way = {"from_m": [0.3, 0, 0.55], "to_m": [-0.55, 0, 0.2], "near_deg": [30, 60]}
    found = faults(arm="arm.yaml", motions={"m": {"line": way, "leg_s": 9}}, tolerance={"tool_peak_mm": 3})
    assert [fault.key for fault in found] == ["motions.m"]
    assert "joint j1 passes its upper limit 114.6 deg at " in found[0].problem


def test_too_fast_a_circle_is_told_with_the_time(faults: Faults) -> None:
    """A circle that takes a joint beyond its speed limit."""
    via = {"via_deg": START, "leg_s": 0.5}
    found = faults(
        arm=TRAY6,
        motions={"v": via, "m": {"circle": CIRCLE | {"turn_s": 0.1}}},
        tolerance={"tool_peak_mm": 3},
    )
    assert {fault.key for fault in found} == {"motions.m"}
    assert all("passes its speed limit" in fault.problem and " s " in fault.problem for fault in found)
