"""Motions one after the other, and over and over."""

from __future__ import annotations

import json
import pickle
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.files import load_arm
from rigbench.motion.chained import ChainMotion, chained
from rigbench.motion.limits import check_motion
from rigbench.motion.path import circle, line
from rigbench.motion.reach import Reach, Unreachable
from rigbench.motion.table import TableMotion
from rigbench.motion.via import ViaMotion

DEMO = Path(__file__).resolve().parents[2] / "robots_demo"
OUT = ViaMotion(((0.0, 0.5), (1.0, 1.0)), 0.8, 0.3)
BACK = ViaMotion(((1.0, 1.0), (0.3, -0.2), (0.0, 0.5)), 0.5, 0.2)
FAR = ViaMotion(((0.5, 0.5), (0.7, 0.9)), 0.4, 0.1)


@pytest.fixture(scope="module")
def planar2():
    return load_arm(DEMO / "planar2" / "arm.yaml")


def derivative(function, t, step):
    """Central difference of fourth order."""
    return (
        8 * (function(t + step) - function(t - step)) - function(t + 2 * step) + function(t - 2 * step)
    ) / (12 * step)


def test_parts_follow_one_another(planar2):
    """Where they meet, each part's reference and rests come in turn, shifted by what came before."""
    both = chained([("out", OUT), ("back", BACK)], planar2)
    assert both.duration_s == pytest.approx(1.1 + 1.4)
    np.testing.assert_allclose(both.rests, ((0.8, 1.1), (1.6, 1.8), (2.3, 2.5)))
    t = np.linspace(0, 1.1, 30, endpoint=False)
    for ours, theirs in zip(both.reference(t), OUT.reference(t), strict=True):
        np.testing.assert_array_equal(ours, theirs)
    t = np.linspace(0, 1.4, 30)
    for ours, theirs in zip(both.reference(1.1 + t), BACK.reference(t), strict=True):
        np.testing.assert_allclose(ours, theirs, atol=1e-12)


def test_repeats_come_back_to_back(planar2):
    """Three times there and back: the same reference in each, six legs and six rests."""
    both = chained([("out", OUT), ("back", BACK)], planar2)
    thrice = chained([("out", OUT), ("back", BACK)], planar2, repeats=3)
    assert thrice.duration_s == pytest.approx(7.5)
    assert len(thrice.rests) == 9
    t = np.linspace(0, 2.5, 60, endpoint=False)
    for cycle in range(3):
        for ours, theirs in zip(thrice.reference(2.5 * cycle + t), both.reference(t), strict=True):
            np.testing.assert_allclose(ours, theirs, atol=1e-12)
        np.testing.assert_allclose(
            thrice.rests[3 * cycle : 3 * cycle + 3], np.array(both.rests) + 2.5 * cycle
        )


def test_a_join_leads_from_end_to_start(planar2):
    """Where two parts don't meet, a quintic leg does, and between the last and the first of the repeats; but
    not after the last, nor where they do meet."""
    whole = chained([("out", OUT), ("far", FAR), ("far again", FAR)], planar2, repeats=2, join_s=0.6)
    # out, join, far, join, far, then a join back, out, ...
    cycle = 1.1 + 0.6 + 0.5 + 0.6 + 0.5 + 0.6
    assert whole.duration_s == pytest.approx(2 * cycle - 0.6)
    leg = ViaMotion(((1.0, 1.0), (0.5, 0.5)), 0.6)
    t = np.linspace(0, 0.6, 20)
    for start in (1.1, cycle + 1.1):
        for ours, theirs in zip(whole.reference(start + t), leg.reference(t), strict=True):
            np.testing.assert_allclose(ours, theirs, atol=1e-10)
    back = ViaMotion(((0.7, 0.9), (0.0, 0.5)), 0.6)
    np.testing.assert_allclose(whole.reference(cycle - 0.6 + t)[0], back.reference(t)[0], atol=1e-10)
    assert len(whole.rests) == 6  # joins have none
    np.testing.assert_allclose(whole.rests[1], (2.1, 2.2))
    np.testing.assert_allclose(whole.reference(np.array([whole.duration_s]))[0], [[0.7, 0.9]])
    met = chained([("out", OUT), ("back", BACK)], planar2, repeats=2, join_s=0.6)
    assert met.duration_s == pytest.approx(5.0)


def test_a_leg_back_joins_the_repeats_of_one_motion(planar2):
    """Twice out with a leg back in between, which has no rest."""
    twice = chained([("out", OUT)], planar2, repeats=2, join_s=0.4)
    assert twice.duration_s == pytest.approx(1.1 + 0.4 + 1.1)
    np.testing.assert_allclose(twice.rests, ((0.8, 1.1), (2.3, 2.6)))
    np.testing.assert_allclose(
        twice.reference(np.array([0, 1.1, 1.3, 1.5, 2.6]))[0],
        [(0, 0.5), (1, 1), (0.5, 0.75), (0, 0.5), (1, 1)],
        atol=1e-12,
    )


def test_velocity_and_acceleration_are_the_derivatives(planar2):
    """v and a of a chain of via points, a circle and joins agree with finite differences of q and v."""
    wheel = circle(planar2, (0.2, 1.0), centre_m=[0.5, 0, 0.2], radius_m=0.15, normal=[0, 1, 0], turn_s=1.5)
    whole = chained([("out", OUT), ("wheel", wheel)], planar2, repeats=2, join_s=0.7, pace=1.2)
    step = 2e-4
    t = np.linspace(2 * step, whole.duration_s - 2 * step, 1500)
    ends = np.concatenate([np.ravel(whole.rests), whole._starts, whole._starts + whole._starts[-1]])
    # clear of the legs' ends, where the quintic's third derivative jumps
    t = t[np.abs(t[:, None] - ends).min(axis=1) > 3 * step]
    assert len(t) > 1400
    _, v, a = whole.reference(t)
    # the fifth derivative of the legs is below 1e5 rad/s^5: step^4/30 of it, and rounding over the step
    np.testing.assert_allclose(v, derivative(lambda s: whole.reference(s)[0], t, step), atol=1e-9)
    np.testing.assert_allclose(a, derivative(lambda s: whole.reference(s)[1], t, step), atol=1e-7)
    # and across the legs' ends too q and v go on without a step
    fine = np.arange(0, whole.duration_s, 1e-3)
    q, v, a = whole.reference(fine)
    assert np.abs(np.diff(q, axis=0)).max() <= 1e-3 * np.abs(v).max() * 1.01
    assert np.abs(np.diff(v, axis=0)).max() <= 1e-3 * np.abs(a).max() * 1.01


def test_outside_its_time_it_is_held_at_rest(planar2):
    """Before the start the first pose, after the end the last, without velocity; also after joins."""
    whole = chained([("out", OUT), ("far", FAR)], planar2, repeats=2, join_s=0.6)
    q, v, a = whole.reference(np.array([-3.0, -1e-9, whole.duration_s, whole.duration_s + 0.3, 1e3]))
    np.testing.assert_allclose(q, [(0, 0.5)] * 2 + [(0.7, 0.9)] * 3, atol=1e-12)
    assert not v.any()
    assert not a.any()
    assert all(part.shape == (0, 2) for part in whole.reference(np.empty(0)))


def test_pace_is_that_of_every_part(planar2):
    """Legs and joins take half as long at twice the pace; rests stay."""
    whole = chained([("out", OUT), ("far", FAR)], planar2, join_s=0.6, pace=2.0)
    assert whole.duration_s == pytest.approx(0.4 + 0.3 + 0.3 + 0.2 + 0.1)
    np.testing.assert_allclose(whole.rests, ((0.4, 0.7), (1.2, 1.3)))
    assert whole == chained([("out", OUT), ("far", FAR)], planar2, join_s=0.6).paced(2.0)
    table = TableMotion((0.0, 1.0, 2.0), ((0.7, 0.9), (0.2, 0.1), (0.0, 0.5)))
    assert table.paced(2.0).duration_s == pytest.approx(1.0)


def test_a_chain_may_hold_chains(planar2):
    """A chain as a part of another one is as good as its parts, and a join leads to it."""
    inner = chained([("out", OUT), ("back", BACK)], planar2, repeats=2)
    outer = chained([("far", FAR), ("twice", inner)], planar2, join_s=0.4, repeats=2)
    assert outer.duration_s == pytest.approx(2 * (0.5 + 0.4 + 5.0) + 0.4)
    t = np.linspace(0, 5, 100)
    np.testing.assert_allclose(outer.reference(0.9 + t)[0], inner.reference(t)[0], atol=1e-10)


def test_what_does_not_meet_is_a_fault_with_joint_gap_and_time(planar2):
    """Without join_s: the joint that is farthest off, by how much, and when."""
    with pytest.raises(Unreachable) as caught:
        chained([("out", OUT), ("back", BACK), ("far", FAR)], planar2)
    text = "'far' starts 28.65 deg from where 'back' ends (joint shoulder)"
    assert (caught.value.problem, caught.value.at_s) == (text, pytest.approx(2.5))
    assert "join_s" in caught.value.expected
    turned = ViaMotion(((0.0, 0.5), (np.radians(70), 0.5)), 1.0, 0.3)
    with pytest.raises(Unreachable) as caught:
        chained([("swing", turned)], planar2, repeats=2)
    assert caught.value.problem == "can't be repeated: it ends 70 deg from where it starts (joint shoulder)"
    onward = ViaMotion(((1.0, 1.0), (0.4, 0.5)), 0.8, 0.3)
    with pytest.raises(Unreachable, match=r"'out' starts 22\.92 deg from where 'on' ends .*, at 2\.200 s"):
        chained([("out", OUT), ("on", onward)], planar2, repeats=2)
    chained([("swing", turned)], planar2)  # once is no repeat


def test_the_times_of_faults_count_the_joins(planar2):
    """A part in motion is met after parts and joins: at 1.1 + 0.6 + 0.5 s."""
    moving = TableMotion((0.0, 0.5, 1.0), ((0.0, 0.0), (0.5, 0.1), (1.0, 0.2)))
    with pytest.raises(
        Unreachable, match=r"'ramp' starts in motion \(joint shoulder at 57\.3 deg/s\)"
    ) as caught:
        chained([("out", OUT), ("far", FAR), ("ramp", moving)], planar2, join_s=0.6)
    assert caught.value.at_s == pytest.approx(2.2)
    with pytest.raises(Unreachable, match=r"'ramp' ends in motion .*, at 1\.000 s"):
        chained([("ramp", moving), ("out", OUT)], planar2, join_s=0.6)
    chained([("ramp", moving)], planar2)  # alone it meets nothing


def test_what_all_but_meets_meets(planar2):
    """A gap of 1e-7 rad, as a solved path leaves it, is none; 1e-5 rad is one."""
    close = ViaMotion(((1.0 + 1e-7, 1.0), (0.5, 0.5)), 0.4, 0.1)
    assert chained([("out", OUT), ("close", close)], planar2, join_s=0.4).duration_s == pytest.approx(1.6)
    chained([("out", OUT), ("close", close)], planar2)
    with pytest.raises(Unreachable, match=r"0\.000573 deg"):
        chained([("out", OUT), ("off", ViaMotion(((1.0 + 1e-5, 1.0), (0.5, 0.5)), 0.4))], planar2)


def test_a_table_from_rest_to_rest_can_be_joined(planar2):
    """The spline through a plan sampled at 50 Hz ends on a trace of velocity, which is no motion."""
    t = np.arange(0, 1.0001, 0.02)
    rows = OUT.reference(0.8 * t)[0]
    table = TableMotion(tuple(t.tolist()), tuple(map(tuple, rows.tolist())))
    assert np.abs(table.reference(np.zeros(1))[1]).max() > 0
    both = chained([("planned", table), ("back", BACK)], planar2)
    assert both.duration_s == pytest.approx(2.4)


def test_joins_keep_to_the_limits_of_position_and_may_pass_those_of_speed(planar2):
    """A join is straight between two poses; made too quick it is found by the check of all motions."""
    quick = chained([("out", OUT), ("far", FAR)], planar2, join_s=0.05)
    assert {passing.limit for passing in check_motion(quick, planar2, 1000)} == {"speed limit"}
    assert check_motion(chained([("out", OUT), ("far", FAR)], planar2, join_s=0.5), planar2, 1000) == []


def test_a_line_from_the_end_of_another_motion_needs_no_join(planar2):
    """A line that begins where the tool is in its near pose starts in that pose, to the last bit."""
    near = (1.0, 1.0)
    start = Reach.of(planar2).tool(np.array(near)).position
    away = line(planar2, near, to_m=(start + np.array([0.05, 0, -0.05])).tolist(), leg_s=0.5)
    both = chained([("out", OUT), ("away", away)], planar2)
    assert both.duration_s == pytest.approx(1.1 + 0.8)


def test_a_wheel_around_the_base_winds_up(planar2):
    """A circle around the base turns the shoulder by 360 deg, so it can't be repeated as it is."""
    around = {"centre_m": [0, 0, 0], "radius_m": 0.6, "normal": [0, -1, 0], "turn_s": 3.0}
    wide = replace(planar2, lower=np.full(2, -10.0), upper=np.full(2, 10.0))
    with pytest.raises(Unreachable, match=r"ends 360 deg from where it starts \(joint shoulder\)"):
        chained([("around", circle(wide, (0.0, 1.0), **around))], wide, repeats=2)


def test_it_is_a_value(planar2):
    """Equal chains are equal, hash alike, survive pickling without what is cached, and have the same JSON."""
    whole = chained([("out", OUT), ("far", FAR)], planar2, repeats=2, join_s=0.6)
    text = pickle.dumps(whole)
    whole.reference(np.zeros(1))
    assert pickle.dumps(whole) == text
    again = pickle.loads(text)
    assert again == whole
    assert hash(again) == hash(whole)
    assert json.dumps(again.inputs()) == json.dumps(whole.inputs())
    for other in (
        replace(whole, repeats=3), replace(whole, join_s=0.7), replace(whole, parts=(OUT, BACK)), whole.paced(1.1),
    ):  # fmt: skip
        assert other != whole
        assert other.inputs() != whole.inputs()


@pytest.mark.parametrize(
    "nonsense", [{"parts": ()}, {"repeats": 0}, {"join_s": 0.0}, {"join_s": float("inf")}]
)
def test_nonsense_is_refused(nonsense):
    """What the declaration should have caught is a mistake of the caller."""
    with pytest.raises(ValueError, match=r"a chain has|join_s"):
        ChainMotion(**({"parts": (OUT,), "repeats": 1, "join_s": 0.5} | nonsense))
