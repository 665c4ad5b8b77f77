"""The names of scores."""

from __future__ import annotations

import pytest

from rigbench.scores.names import SCORES, in_display_order, main_score, score_info, score_words


def test_every_name_ends_in_the_unit_it_is_given_in() -> None:
    """A name carries its unit, the only exception being a ratio."""
    for name, info in SCORES.items():
        tail = name.rpartition("_")[2]
        assert tail == info.unit.lower() if info.unit else tail == name, name
        assert info.doc


@pytest.mark.parametrize("name", ["joint_peak_deg.j1", "torque_rms_percent.wrist.left"])
def test_a_joint_s_value_is_known_by_its_score(name: str) -> None:
    """A score per joint has a value for each joint, whatever the joint's name."""
    assert score_info(name) is SCORES[name.partition(".")[0]]


@pytest.mark.parametrize("name", ["", "tool_peak", "tool_peak_mm.j1", "joint_peak_deg.", "nonsense.j1"])
def test_what_is_no_score_is_not_known(name: str) -> None:
    """Neither is a joint of a score that has none."""
    assert score_info(name) is None


def test_display_order_puts_a_score_before_its_joints_and_keeps_the_joints_order() -> None:
    """Each name comes once, those that are no score of ours last."""
    names = ["mine", "joint_rms_deg.j2", "joint_rms_deg.j1", "joint_rms_deg", "tool_peak_mm", "tool_peak_mm"]
    expected = ("tool_peak_mm", "joint_rms_deg", "joint_rms_deg.j2", "joint_rms_deg.j1", "mine")
    assert in_display_order(names) == expected


@pytest.mark.parametrize(
    ("limited", "main"),
    [
        ((), "tool_peak_mm"),
        (("settle_ms", "joint_peak_deg.j1"), "tool_peak_mm"),
        (("settle_ms", "tool_angle_peak_deg", "tool_rms_mm"), "tool_angle_peak_deg"),
        (("path_peak_mm",), "path_peak_mm"),
    ],
)
def test_laws_are_compared_by_the_first_limit_on_the_tool(limited: tuple[str, ...], main: str) -> None:
    """And by tool_peak_mm where none is limited."""
    assert main_score(limited) == main


@pytest.mark.parametrize(
    ("name", "said"),
    [
        ("tool_peak_mm", ("tool peak", "mm")),
        ("tool_angle_peak_deg", ("tool angle peak", "deg")),
        ("joint_peak_deg.j1", ("joint peak of j1", "deg")),
        ("joint_rms_mm.lift_mm", ("joint RMS of lift_mm", "mm")),
        ("settle_ms", ("settling time", "ms")),
        ("saturated_percent", ("saturated", "%")),
        ("energy_j", ("energy", "J")),
        ("chatter", ("chatter", "")),
        ("law_us", ("law's time per tick", "us")),
        ("no_score.of.ours", ("no score.of.ours", "")),
    ],
)
def test_scores_have_words_and_units(name: str, said: tuple[str, str]) -> None:
    """A score's name reads as words, its unit apart."""
    assert score_words(name) == said


def test_no_two_scores_read_alike() -> None:
    """By words and unit together."""
    assert len({score_words(name) for name in SCORES}) == len(SCORES)
