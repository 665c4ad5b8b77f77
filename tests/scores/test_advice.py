"""One sentence of advice, for whatever the results show."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import pytest

from rigbench.scores.advice import advise
from rigbench.scores.results import Column, Results, Tolerance
from rigbench.scores.row import Row
from rigbench.scores.summary import summarise

NOMINAL = Column("nominal", None, random=False, ladder=True)
HALF, ONE = (Column(f"level {a:g}", a, random=True, ladder=True) for a in (0.5, 1.0))
TRAY = Column("full tray", None, random=False, ladder=False)
TOLERANCE = Tolerance({"tool_peak_mm": 3.0})
Peaks = Mapping[str, float | Sequence[float]]


def results_of(
    laws: Mapping[str, Peaks],
    columns: Sequence[Column] = (NOMINAL, HALF, ONE),
    tolerance: Tolerance | None = TOLERANCE,
    **given: Any,
) -> Results:
    """Results of laws whose tool peaks are given by condition: one, or one a draw."""
    rows, draws = [], 1
    for law, peaks in laws.items():
        for name, values in peaks.items():
            for draw, value in enumerate(values if isinstance(values, list | tuple) else [values]):
                rows.append(Row("", law, "load", name, None, draw, "finished", {"tool_peak_mm": value}))
                draws = max(draws, draw + 1)
    counts = {"planned": len(rows), "done": len(rows), "failed": 0, "draws": draws, "sheets": [""]}
    return summarise(
        rows, title="", arm="", motions=["load"], tolerance=tolerance, laws=tuple(laws), columns=columns,
        **(counts | given),
    )  # fmt: skip


def draws(good: int, of: int = 100, peak: float = 1.0) -> list[float]:
    """So many draws at the peak, the rest out of tolerance."""
    return [peak] * good + [9.0] * (of - good)


ROBUST: Peaks = {"nominal": 2.0, "level 0.5": draws(100), "level 1": draws(100)}
FRAIL: Peaks = {"nominal": 1.0, "level 0.5": draws(100), "level 1": draws(20)}


def test_the_law_that_keeps_most_is_taken_and_its_level_said() -> None:
    """The other is shown to miss where it keeps."""
    advice = results_of({"frail": FRAIL, "robust": ROBUST}).advice
    assert advice == "Take 'robust', which is shown to keep the tolerance up to level 1, the highest run."


def test_where_the_tolerance_ends_is_said() -> None:
    """Both ends of what is shown, and the law that is shown to be worse isn't mentioned."""
    hopeless = {"nominal": 1.0, "level 0.5": draws(20), "level 1": draws(0)}
    advice = results_of({"frail": FRAIL, "hopeless": hopeless}).advice
    assert advice == (
        "Take 'frail', which is shown to keep the tolerance up to level 0.5 and to miss it from level 1."
    )


def test_equal_laws_are_too_close_to_call() -> None:
    """Named both, with what both are shown to keep."""
    advice = results_of({"one": ROBUST, "other": ROBUST}).advice
    assert advice == (
        "Too close to call between 'one' and 'other', which are shown to keep the tolerance up to level 1, "
        "the highest run."
    )


def test_an_open_rival_is_too_close_to_call() -> None:
    """One keeps level 1; the other, with a few misses and no larger error, is open there: not ruled out."""
    rival = {"nominal": 2.0, "level 0.5": draws(100), "level 1": draws(97)}
    advice = results_of({"robust": ROBUST, "rival": rival}).advice
    assert advice.startswith("Too close to call between 'robust' and 'rival': 'robust' is shown to keep")
    assert "up to level 1" in advice
    assert "up to level 0.5 (higher ones are open)" in advice


def test_among_laws_that_keep_the_same_the_lower_error_decides_and_is_said_to() -> None:
    """At the highest level; that it was the other way round below the break-even level is said too."""
    flat = {"nominal": 2.0, "level 0.5": draws(100, peak=2.0), "level 1": draws(100, peak=2.0)}
    steep = {"nominal": 1.0, "level 0.5": draws(100, peak=1.5), "level 1": draws(100, peak=2.5)}
    advice = results_of({"steep": steep, "flat": flat}).advice
    assert advice == (
        "Take 'flat', which is shown to keep the tolerance up to level 1, the highest run; it is ahead of "
        "'steep' by tool peak alone, and behind 'steep' below level 0.75."
    )


def test_a_law_that_passes_clearly_more_is_ahead_though_all_is_open() -> None:
    """Too few draws to show 0.95, enough to tell 30 of 30 from 15 of 30, whatever nominal says."""
    good = {"nominal": 2.0, "level 0.5": draws(30, 30), "level 1": draws(30, 30)}
    poor = {"nominal": 1.0, "level 0.5": draws(30, 30), "level 1": draws(15, 30)}
    advice = results_of({"poor": poor, "good": good}).advice
    assert advice == (
        "Take 'good', which is shown to keep the tolerance at level 0 only (higher ones are open); "
        "about 73 draws would decide 'good' under 'level 0.5' (30 of 30 pass so far)."
    )


def test_no_number_of_draws_is_named_that_the_campaign_will_reach_anyway() -> None:
    """80 are declared, 30 done: what is missing is runs."""
    good = {"nominal": 2.0, "level 0.5": draws(30, 30), "level 1": draws(30, 30)}
    advice = results_of({"good": good}, draws=80, planned=161, done=61).advice
    assert "would decide" not in advice
    assert advice.endswith("; 100 of 161 runs are still to do.")


def test_one_law_is_described_and_not_chosen() -> None:
    """There is nothing to take it before."""
    advice = results_of({"frail": FRAIL}).advice
    assert advice == "'frail' is shown to keep the tolerance up to level 0.5 and to miss it from level 1."


def test_conditions_off_the_ladder_that_fail_are_named() -> None:
    """A law may bear every level and yet miss a case."""
    columns = (NOMINAL, HALF, ONE, TRAY)
    law = {**ROBUST, "full tray": 5.0}
    advice = results_of({"robust": law}, columns).advice
    assert advice == (
        "'robust' is shown to keep the tolerance up to level 1, the highest run; it misses under 'full tray'."
    )


def test_laws_that_each_keep_what_the_other_misses_are_too_close_to_call() -> None:
    """Neither is ahead, whichever has the lower error elsewhere."""
    columns = (NOMINAL, TRAY, replace(TRAY, name="cold"))
    one, other = (
        {"nominal": 1.0, "full tray": 1.0, "cold": 5.0},
        {"nominal": 2.0, "full tray": 5.0, "cold": 1.0},
    )
    advice = results_of({"one": one, "other": other}, columns).advice
    assert advice == (
        "Too close to call between 'one' and 'other', which are shown to keep the tolerance under 2 of 3 conditions."
    )


def test_without_levels_conditions_are_counted() -> None:
    """Nothing is said of levels that nobody ran."""
    assert results_of({"one": {"nominal": 1.0}}, (NOMINAL,)).advice == (
        "'one' is shown to keep the tolerance under 'nominal'."
    )
    both = {"nominal": 1.0, "full tray": 1.0}
    assert "under all 2 conditions" in results_of({"one": both}, (NOMINAL, TRAY)).advice


def test_when_every_law_misses_the_nearest_is_named() -> None:
    """With its score and the limit; no law is recommended."""
    bad = {
        name: {"nominal": peak, "level 0.5": draws(0), "level 1": draws(0)}
        for name, peak in (("a", 5.0), ("b", 4.0))
    }
    assert results_of(bad).advice == (
        "Every law misses the tolerance under every condition; nearest is 'b' with a tool peak of 4 mm under "
        "'nominal', where 3 mm is allowed."
    )


def test_the_nearest_is_named_where_motions_have_limits_of_their_own() -> None:
    """That in the motion in which it is farthest from its own limit: 2/1 for a, 5/4 for b; 'lift' has none."""
    peaks = {"a": {"pour": 2.0, "swing": 3.0, "lift": 99.0}, "b": {"pour": 0.9, "swing": 5.0, "lift": 99.0}}
    rows = [
        Row("", law, motion, "nominal", None, None, "finished", {"tool_peak_mm": peak})
        for law, own in peaks.items()
        for motion, peak in own.items()
    ]
    limits = {"pour": {"tool_peak_mm": 1.0}, "swing": {"tool_peak_mm": 4.0}}
    results = summarise(
        rows, title="", arm="", motions=["pour", "swing", "lift"], tolerance=Tolerance({}, 0.95, limits),
        draws=1, sheets=[""], laws=("a", "b"), columns=[NOMINAL], planned=6, done=6, failed=0,
    )  # fmt: skip
    assert results.advice == (
        "Every law misses the tolerance under every condition; nearest is 'b' with a tool peak of 5 mm in "
        "motion 'swing' under 'nominal', where 4 mm is allowed."
    )


def test_when_nothing_is_shown_yet_the_draws_that_would_show_it_are_named() -> None:
    """Without a nominal column, all open: 73 draws if none fails."""
    advice = results_of({"a": {"level 1": draws(8, 8)}, "b": {"level 1": draws(8, 8)}}, (ONE,)).advice
    assert advice == (
        "No law is shown to keep the tolerance yet; about 73 draws would decide 'a' under 'level 1' "
        "(8 of 8 pass so far)."
    )


def test_a_law_without_results_is_said_to_have_none() -> None:
    """It is neither beaten nor a rival; its failed runs are counted."""
    advice = results_of({"robust": ROBUST, "mine": {}}, failed=201, planned=402, done=201).advice
    assert advice == (
        "Take 'robust', which is shown to keep the tolerance up to level 1, the highest run; 'mine' has no "
        "result; 201 runs failed (law's code, the plant, time limit or crash), for or against no law."
    )


def test_no_result_no_advice() -> None:
    """Only what is left to do."""
    assert results_of({"a": {}}, planned=7).advice == (
        "No run has a result yet, so there is nothing to advise; 7 of 7 runs are still to do."
    )


def test_without_a_tolerance_nothing_is_kept_or_missed() -> None:
    """Laws are compared by the main score, where they can be told apart by it."""
    assert results_of({"a": ROBUST}, tolerance=None).advice == (
        "No tolerance is declared, so nothing is kept or missed."
    )
    assert "too close to call" in results_of({"a": ROBUST, "b": ROBUST}, tolerance=None).advice
    assert results_of({"frail": FRAIL, "robust": ROBUST}, tolerance=None).advice == (
        "No tolerance is declared, so nothing is kept or missed; by tool peak, better than every other law "
        "beyond the interval: 'frail' under 'nominal', 'robust' under 'level 1'."
    )


def sheets_of(*sheets: Mapping[str, Peaks], columns: Sequence[Column] = (NOMINAL, HALF, ONE)) -> Results:
    """One sheet for each set of laws, named by letters."""
    parts = [results_of(laws, columns) for laws in sheets]
    names = tuple("abcdefgh"[: len(sheets)])

    def named(part: str) -> tuple[Any, ...]:
        return tuple(replace(x, sheet=n) for n, r in zip(names, parts, strict=True) for x in getattr(r, part))

    return replace(parts[0], sheets=names, cells=named("cells"), standings=named("standings"), break_even=())


def test_sheets_that_agree_are_advised_at_once() -> None:
    """And those that don't by groups."""
    laws = {"frail": FRAIL, "robust": ROBUST}
    swapped = {"frail": ROBUST, "robust": FRAIL}
    assert advise(sheets_of(laws, laws, laws)).startswith("In all 3 sheets: take 'robust', which")
    assert advise(sheets_of(laws, laws)).startswith("In both sheets: take 'robust', which")
    advice = advise(sheets_of(laws, swapped, laws))
    assert advice.startswith("In 'a' and 'c': take 'robust'")
    assert "; in 'b': take 'frail'" in advice


def test_what_speaks_against_the_law_to_take_is_said_of_sheets_too() -> None:
    """Where it misses, and that only its score is lower; the sheets where neither is so stand apart."""
    columns = (NOMINAL, HALF, ONE, TRAY)
    robust, worse = {**ROBUST, "full tray": 5.0}, {"nominal": 2.5, "level 0.5": draws(100, peak=2.0)}
    worse |= {"level 1": draws(100, peak=2.0), "full tray": 5.5}
    fine, frail = {**ROBUST, "full tray": 1.0}, {**FRAIL, "full tray": 5.0}
    advice = advise(sheets_of({"a": robust, "b": worse}, {"a": fine, "b": frail}, columns=columns))
    taken = "take 'a', which is shown to keep the tolerance up to level 1, the highest run"
    assert advice == (
        f"In 'a': {taken}, but it misses under 'full tray', and it is ahead of others by tool peak alone; "
        f"in 'b': {taken}."
    )


def test_many_names_are_counted() -> None:
    """Three are spelled out."""
    advice = results_of(dict.fromkeys("abcde", ROBUST)).advice
    assert advice.startswith("Too close to call between 'a', 'b', 'c' and 2 more, which are shown")


@pytest.mark.parametrize("tolerance", [TOLERANCE, None])
def test_it_is_one_sentence(tolerance: Tolerance | None) -> None:
    """With one full stop, at its end."""
    for laws in ({"a": ROBUST}, {"a": ROBUST, "b": FRAIL}, {"a": {}}, {"a": FRAIL, "b": FRAIL, "c": {}}):
        advice = results_of(laws, tolerance=tolerance, failed=1, planned=999).advice
        assert advice.endswith(".")
        assert ". " not in advice
        assert "  " not in advice
