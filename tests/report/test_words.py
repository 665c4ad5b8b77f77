"""Figures in words: few digits, and never on the wrong side of a limit."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigbench.report.words import (
    arm_words,
    figure,
    has_levels,
    interval,
    level,
    level_words,
    limits_of,
    main_score,
    percent,
    quantity,
    runs_words,
    tolerance_words,
    tolerated_words,
)
from rigbench.scores.results import Column, Results, Tolerance, Tolerated


@pytest.mark.parametrize(
    ("value", "said"),
    [
        (0.0637, "0.064"),
        (1.8, "1.8"),
        (2.0, "2.0"),
        (12.4, "12"),
        (99.4, "99"),
        (99.6, "99.6"),
        (140.4, "140"),
        (1234.0, "1230"),
        (999999.0, "1.00e+06"),
        (0.000012, "1.2e-05"),
        (-1.83, "-1.8"),
        (0.0, "0"),
        (-0.0, "0"),
    ],
)
def test_figures_are_written_as_people_write_them(value: float, said: str) -> None:
    """Two digits below 100 and three above, an exponent only where there are too many zeros."""
    assert figure(value) == said


@given(st.floats(1e-9, 1e12))
def test_a_figure_is_true_to_its_digits(value: float) -> None:
    """Two significant digits are never off by more than half a unit of the second: 5 % of the value."""
    assert float(figure(value)) == pytest.approx(value, rel=0.05)


@given(st.floats(0.01, 1e4), st.floats(-1e-3, 1e-3))
def test_a_figure_stands_on_its_own_side_of_a_limit(limit: float, off: float) -> None:
    """What misses a limit is not written as if it kept it, nor the other way round.

    Exempt is what six digits more than usual can't tell apart, a part in 10^7.
    """
    value = limit * (1 + off)
    if abs(off) > 1e-6:
        assert (float(figure(value, limit)) <= limit) == (value <= limit)


def test_a_figure_stands_on_its_own_side_of_each_limit() -> None:
    """Where one motion's limit is tighter than the others'."""
    assert figure(3.004, 1.0, 3.0) == "3.004"
    assert figure(1.0004, 3.0, 1.0) == "1.0004"


@given(st.integers(1, 20000), st.data())
def test_a_percentage_hides_no_draw(draws: int, data: st.DataObject) -> None:
    """100 % stands for all draws and 0 % for none, and what falls short of the required share looks so."""
    passed = data.draw(st.integers(0, draws))
    said = float(percent(passed / draws, 0.95, exact=True))
    assert (said == 100) == (passed == draws)
    assert (said == 0) == (passed == 0)
    assert (said >= 95) == (passed / draws >= 0.95)
    assert said == pytest.approx(100 * passed / draws, abs=0.5)


@pytest.mark.parametrize(
    ("share", "said"), [(0.9497, "94.97"), (0.95002, "95"), (0.9, "90"), (0.9992, "100"), (1.0, "100")]
)
def test_the_end_of_an_interval_stands_on_its_side_of_the_required_share(share: float, said: str) -> None:
    """94.97 % is not written 95 % where 95 % are required; elsewhere whole numbers do."""
    assert percent(share, 0.95) == said


def test_infinite_values_have_a_meaning() -> None:
    """Nobody reads 'inf mm': a run did not finish, or a tool did not settle."""
    assert quantity(math.inf, "tool_peak_mm") == "did not finish"
    assert quantity(math.inf, "settle_ms") == "did not settle"
    assert quantity(math.nan, "tool_peak_mm") == "no value"
    assert quantity(1.84, "tool_peak_mm") == "1.8 mm"
    assert quantity(0.5, "chatter") == "0.50"
    assert interval(1.2, math.inf) == "1.2 to no end"


@pytest.mark.parametrize(
    ("tolerated", "said"),
    [
        (Tolerated(0.71234, 0.5, 1.0), "0.71 (0.5 to 1)"),
        (Tolerated(1.3, 0.5, math.inf), "1.3 (0.5 to no end)"),
        (Tolerated(None, 2.0, math.inf), "2 or more"),
        (Tolerated(None, 0.0, math.inf), "not shown yet"),
        (Tolerated(None, 0.0, 0.25), "below 0.25"),
        (Tolerated(None, 0.5, 1.0), "0.5 to 1"),
        (Tolerated(0.0, 0.0, 0.0), "none: misses at level 0"),
    ],
)
def test_tolerated_levels_read_aloud(tolerated: Tolerated, said: str) -> None:
    """Each kind of tolerated level has its own words."""
    assert tolerated_words(tolerated) == said


def test_the_head_says_what_was_run(make_results: Callable[..., Results]) -> None:
    """Units, the required share and the counts are in it; singular and plural are right."""
    results = make_results(2, 3)
    said = tolerance_words(results)
    assert "tool peak at most 3 mm" in said
    assert "joint peak of j1 at most 0.05 deg" in said
    assert "95 % of the draws must keep it, in every motion" in said
    assert (
        runs_words(replace(results, planned=7, done=5, failed=2))
        == "128 draws. 7 runs planned, 5 done, 2 failed."
    )
    one = replace(make_results(1, 1), planned=1, done=1, failed=0, motions=("rim",))
    assert runs_words(one) == "1 run planned, all done, none failed."
    assert "draws" not in tolerance_words(one)
    assert arm_words(one) == "Arm: tray6. Motion: rim."


def test_the_main_score_is_the_first_limited_one_of_the_tool(make_results: Callable[..., Results]) -> None:
    """The cells show the score by which laws are compared, and its limit."""
    results = make_results(1, 1)
    angle = replace(results, tolerance=Tolerance({"settle_ms": 250.0, "tool_angle_peak_deg": 0.5}))
    assert (main_score(angle), limits_of(angle, main_score(angle))) == ("tool_angle_peak_deg", (0.5,))
    joint = replace(results, tolerance=Tolerance({"joint_peak_deg.j1": 0.05}))
    assert (main_score(joint), limits_of(joint, main_score(joint))) == ("tool_peak_mm", ())
    free = replace(results, tolerance=None)
    assert (main_score(free), limits_of(free, main_score(free))) == ("tool_peak_mm", ())


def test_limits_of_single_motions_are_said_after_the_others(make_results: Callable[..., Results]) -> None:
    """With the motion's name; they may be all that there is, and they take part in the choice of main score."""
    results = make_results(1, 2)
    rim = {"path_peak_mm": 1.0, "tool_angle_peak_deg": 0.25}
    both = replace(results, tolerance=Tolerance({"tool_peak_mm": 3.0}, 0.95, {"rim": rim}))
    assert tolerance_words(both) == (
        "Tolerance: tool peak at most 3 mm; rim: path peak at most 1 mm, tool angle peak at most 0.25 deg. "
        "95 % of the draws must keep it, in every motion."
    )
    alone = replace(both, tolerance=Tolerance({}, 0.95, {"rim": rim}))
    assert tolerance_words(alone).startswith("Tolerance: rim: path peak at most 1 mm, ")
    assert (main_score(alone), limits_of(alone, main_score(alone))) == ("path_peak_mm", (1.0,))
    tighter = replace(both, tolerance=Tolerance({"tool_peak_mm": 3.0}, 0.95, {"rim": {"tool_peak_mm": 1.0}}))
    assert limits_of(tighter, main_score(tighter)) == (3.0, 1.0)


def test_a_tolerated_level_takes_a_tolerance_and_levels(make_results: Callable[..., Results]) -> None:
    """With nominal alone, or without a tolerance, there is no tolerated level to show."""
    assert has_levels(make_results(1, 2))
    assert not has_levels(make_results(1, 1))
    assert not has_levels(make_results(1, 2, tolerance=False))
    assert level(0.25) == "0.25"


@pytest.mark.parametrize(
    ("name", "at", "said"),
    [
        ("link mass", 1.0, "level 1"),
        ("together 0.5", 0.5, ""),
        ("together 1.0", 1.0, ""),
        ("full tray (level 0.25)", 0.25, ""),
        ("full tray 2", 0.25, "level 0.25"),
        ("nominal", 0.0, ""),
        ("full tray", None, ""),
    ],
)
def test_a_level_is_said_once(name: str, at: float | None, said: str) -> None:
    """A condition's head tells its level, unless its name does already or there is none."""
    assert level_words(Column(name, at, random=True, ladder=False)) == said


def test_another_model_is_named_beside_the_arm(make_results: Callable[..., Results]) -> None:
    """Where the laws believe another arm than the one that moves, 'nominal' is not free of mismatch."""
    results = make_results(1, 1)
    assert "believe" not in arm_words(results)
    named = arm_words(replace(results, model="cad.yaml"))
    assert named.startswith(f"Arm: {results.arm}. The laws believe cad.yaml. Motion")
