"""What is told and drawn of worst cases: found ones, none, machines without verdict, long names."""

from __future__ import annotations

import datetime
import math
from itertools import combinations
from typing import Any

import pytest

from rigbench.campaign.reading import Record
from rigbench.campaign.studies.worst_case import WorstFound
from rigbench.report.drawn import Drawn, parameter_words
from rigbench.report.paper import steady_settings, text_boxes
from rigbench.report.worst_picture import worst_figure
from rigbench.report.worst_words import Departing, LawWorst, by_law, share_words, worst_text
from rigbench.scores.limit_share import LimitShare
from rigbench.scores.row import Row

KEY = "0123456789abcdef" * 2 + "01234567"


def found(
    level: float, share: float | None, searched: bool = True, law: str = "pd", sheet: str = ""
) -> WorstFound:
    if share is None:
        return WorstFound(sheet, law, level, searched, 7, 7, None, None)
    ended = "diverged" if math.isinf(share) else "finished"
    row = Row(
        sheet, law, "lift", f"worst case at {level:g}", level, None, ended, {"tool_peak_mm": 3.0 * share}
    )
    used = LimitShare(share, "" if math.isinf(share) else "tool_peak_mm", 3.0 * share)
    return WorstFound(sheet, law, level, searched, 60, 2, Record(row, KEY, "", (), None, None), used)


def law_of(levels: list[WorstFound], parameters: int = 12, **given: Any) -> LawWorst:
    ((own, told),) = by_law(levels)
    names = [f"link_inertia_percent.a_link_with_quite_a_long_name_{k}.{k % 3 + 1}" for k in range(parameters)]
    departures = tuple(
        Departing(Drawn(name, parameter_words(name), (-1.0) ** k, f"{-k} %"), 0.5 if k < 4 else None)
        for k, name in enumerate(names)
    )
    return LawWorst(
        told.sheet, told.law, own, told, departures if told.record else (), given.get("drawn", {})
    )


MISSES = law_of(
    [
        found(0.25, 0.4),
        found(0.46, 0.99999, False),
        found(0.47, 1.00001, False),
        found(0.5, 1.1),
        found(1, 2.4),
    ],
    drawn={0.5: (0.55, 96)},
)
HOLDS = law_of(
    [found(0.5, 0.3, law="ct", sheet="control_hz 500"), found(1, 0.7, law="ct", sheet="control_hz 500")]
)
BREAKS = law_of([found(0.5, 0.9, law="own"), found(1, math.inf, law="own"), found(2, 7.5, law="own")], 1)
UNKNOWN = law_of([found(1, None, law="broken")])
ALL = [MISSES, HOLDS, BREAKS, UNKNOWN]


def test_the_words_claim_no_more_than_was_found() -> None:
    """Found, or not found; the smallest level with its run, and which were not reached."""
    text = worst_text(ALL, "results/x.sqlite")
    assert (
        "level 0.25: none found that misses; the worst: tool peak 1.2 mm, 40 % of its limit, in 'lift'"
        in text
    )
    assert "level 0.5: found to miss: tool peak 3.3 mm, 110 % of its limit" in text
    assert "60 runs (2 without verdict); the worst of 96 draws: 55 % of its limit" in text
    assert f"smallest level found to miss: 0.47 (run {KEY[:12]}); none found at 0.46" in text
    assert "no machine found that misses, up to level 1" in text
    assert "ct (control_hz 500)" in text
    assert "found to miss: a run that diverged in 'lift'" in text
    assert "nothing is known from 7 runs" in text
    assert f"replay: rigbench trace results/x.sqlite {KEY[:12]}" in text
    assert "the worst machine found at level 0.5 departs so" in text
    named = "link inertia 2, a_link_with_quite_a_long_name_1"
    assert f"{named} -1 (-1 %); by itself makes 50 % of the limit" in text
    assert "and 6 more" in text
    assert "the worst case" not in text


@pytest.mark.parametrize(
    ("share", "words"),
    [(0.5, "50 %"), (1.0, "100 %"), (1.00001, "100.001 %"), (0.999999, "100 %"), (1.0 + 1e-9, "100.0000001 %"), (7.5, "750 %")],
)  # fmt: skip
def test_a_share_is_never_rounded_onto_the_other_side_of_its_limit(share: float, words: str) -> None:
    """What misses reads as more than 100 %."""
    assert share_words(share) == f"{words} of its limit"


def test_nothing_overlaps() -> None:
    """Each text has its place, within the page and no smaller than 7 pt; a point for each level with a verdict."""
    with steady_settings():
        figure = worst_figure(
            ALL, "A title that is long enough to be broken, " * 5, datetime.date(2026, 1, 1)
        )
        boxes = text_boxes(figure)
    page = figure.bbox
    for text, box in boxes:
        assert text.get_fontsize() >= 7
        assert page.x0 <= box.x0 <= box.x1 <= page.x1, text.get_text()
        assert page.y0 <= box.y0 <= box.y1 <= page.y1, text.get_text()
    for (one, here), (other, there) in combinations(boxes, 2):
        apart = here.x1 <= there.x0 or there.x1 <= here.x0 or here.y1 <= there.y0 or there.y1 <= here.y0
        assert apart, (one.get_text(), other.get_text())
    points = [artist for artist in figure.findobj() if "-level-" in (artist.get_gid() or "")]
    assert len(points) == 5 + 2 + 3
