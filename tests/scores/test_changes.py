"""What changed between two stores: shown on the same draws, or not shown."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from rigbench.scores.changes import changes_since
from rigbench.scores.results import Column, Results, Tolerance
from rigbench.scores.row import Row
from rigbench.scores.summary import summarise

NOMINAL = Column("nominal", None, random=False, ladder=True)
ALL = Column("all at 1", 1.0, random=True, ladder=True)


def results_of(
    peak: Callable[[float, int], float],
    draws: int = 40,
    columns: tuple[Column, ...] = (NOMINAL, ALL),
    **given: Any,
) -> Results:
    """One law 'pd'; ``peak`` of level and draw [mm], inf for a run that diverged; settling is 100 of it."""
    rows = []
    for column in columns:
        for draw in range(draws) if column.random else (None,):
            value = peak(column.level or 0.0, draw or 0)
            done = np.isfinite(value)
            scores = {"tool_peak_mm": value, "settle_ms": 100 * value} if done else {}
            outcome = "finished" if done else "diverged"
            rows.append(Row("", "pd", "load", column.name, column.level, draw, outcome, scores))
    values: dict[str, Any] = {
        "title": "Trays",
        "arm": "tray6",
        "motions": ["load"],
        "tolerance": Tolerance({"tool_peak_mm": 3.0}),
        "draws": draws,
        "sheets": [""],
        "laws": ["pd"],
        "columns": columns,
        "planned": len(rows),
        "done": len(rows),
        "failed": 0,
        "also": ("settle_ms",),
    }
    return summarise(rows, **(values | given))


def spread(level: float, draw: int) -> float:
    """Widely spread over the draws: intervals of two medians that differ by 5 % overlap by far."""
    return 1.0 + 1.5 * level * ((7 * draw) % 40) / 40


def test_a_small_change_shows_on_the_same_draws() -> None:
    """5 % less on every draw is better, 5 % more worse, the same unchanged; nominal by the 1 % rule."""
    before = results_of(spread)
    for factor, kind in ((0.95, "better"), (1.05, "worse"), (1.0, "unchanged"), (1.005, "unchanged")):
        after = results_of(lambda level, draw, factor=factor: factor * spread(level, draw))
        changes = changes_since(before, after)
        nominal = changes.cells["", "pd", "nominal"]
        assert nominal.kind == kind
        cell = changes.cells["", "pd", "all at 1"]
        assert cell.kind == (kind if factor != 1.005 else "worse")
        assert cell.difference is not None
        assert cell.difference.draws == 40
    assert changes.count("unchanged") == 1


def test_shares_come_first_unless_a_score_is_named() -> None:
    """Ten draws that now diverge are worse, though the others improved; by settling time it is better."""
    before = results_of(spread)
    after = results_of(lambda level, draw: np.inf if level and draw < 10 else 0.5 * spread(level, draw))
    assert changes_since(before, after).cells["", "pd", "all at 1"].kind == "worse"
    by_score = changes_since(before, after, "settle_ms").cells["", "pd", "all at 1"]
    assert by_score.kind == "better"
    assert by_score.difference is not None
    assert by_score.difference.value < -40


def test_what_can_not_be_compared_is_said() -> None:
    """No result in one store; random in one alone; no draw in common; a cell that is new."""
    full, key = results_of(spread), ("", "pd", "all at 1")
    assert changes_since(results_of(spread, draws=0), full).cells[key].kind == "no result"
    assert changes_since(full, results_of(spread, draws=0)).cells[key].kind == "no result"
    exact = results_of(spread, columns=(NOMINAL, Column("all at 1", 1.0, random=False, ladder=True)))
    assert changes_since(exact, full).cells[key].kind == "not comparable"
    alone = results_of(spread, columns=(NOMINAL,))
    assert changes_since(alone, full).cells[key].kind == "new"
    assert changes_since(alone, full).only_after == {"condition": ("all at 1",)}
    assert changes_since(full, alone).only_before == {"condition": ("all at 1",)}


def test_few_draws_show_nothing() -> None:
    """With 4 draws no change of a random cell is shown, however large: a median takes six."""
    before, after = (
        results_of(lambda level, draw, f=f: f * spread(level, draw), draws=4) for f in (1.0, 0.1)
    )
    cells = changes_since(before, after).cells
    assert cells["", "pd", "all at 1"].kind == "unchanged"
    assert cells["", "pd", "nominal"].kind == "better"


@pytest.mark.parametrize("seed", range(5))
def test_what_did_not_change_is_rarely_shown(seed: int) -> None:
    """Two campaigns on other machines of the same kind: 60 cells, of which at most 14 are called changed.

    Each is wrong with 5 % for the score, and no more for the share: at most 0.1. Of 60 that is 6 on average and
    more than 14 with probability 0.001 (binomial).
    """
    rng = np.random.default_rng(seed)
    columns = tuple(Column(f"level {k}", float(k), random=True, ladder=True) for k in range(1, 61))
    runs = [
        results_of(lambda level, draw, t=table: t[int(level) - 1, draw], draws=40, columns=columns)
        for table in rng.lognormal(0.8, 0.5, size=(2, 60, 40))
    ]
    changes = changes_since(*runs)
    assert changes.count("better") + changes.count("worse") <= 14
    assert changes.count("unchanged") >= 46
