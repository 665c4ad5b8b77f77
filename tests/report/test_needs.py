"""The needs in words and as a picture: nothing overlaps, whatever is in it."""

from __future__ import annotations

import datetime
import math
from itertools import combinations
from pathlib import Path

import pytest
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle

from rigbench.errors import InputFaults
from rigbench.report.needs_picture import needs_figure, needs_picture
from rigbench.report.needs_text import needs_text
from rigbench.report.needs_words import advice, kept_words, notes, own_unit, share_words
from rigbench.report.paper import text_boxes
from rigbench.scores.limit_search import LADDER
from rigbench.scores.needs import Alone, LawNeeds, SourceNeed
from rigbench.scores.needs_design import Group, NeedsDesign, Subject
from rigbench.scores.own_limits import FoundLevel
from rigbench.scores.results import Tolerated

DAY = datetime.date(2026, 1, 2)

PERCENT = {"grows": "factor", "unit": "%", "values": {"all": 5.0, "upper wrist of the second arm": 25.0}}
LOAD = {
    "grows": "load", "unit": "kg",
    "values": {"believed_kg": 1.5, "least_kg": 0.0, "most_kg": 3.0, "cog_mm": 30.0},
}  # fmt: skip
SHIFT = {"grows": "shift", "unit": "mm", "values": {"all": 5.0}}

LEVELS = (
    Tolerated(0.9, 0.63, 1.25), Tolerated(None, 5.0, math.inf), Tolerated(0.1, 0.0, 0.2),
    Tolerated(None, 0.0, math.inf), Tolerated(4.5, 2.0, math.inf),
)  # fmt: skip


def group(number: int, spread: dict[str, object] | None = None) -> Group:
    names = ("link mass", "payload", "torque constant of the_left_gripper_finger_joint", "x" * 60)
    return Group(
        f"{names[number % 4]} {number}",
        "link_mass_percent",
        "",
        ("a",),
        spread or (PERCENT, LOAD, SHIFT)[number % 3],
    )


def law_needs(sources: int, law: str = "computed torque", **changes: object) -> LawNeeds:
    found = tuple(
        SourceNeed(
            group(k),
            (1.1 / (k + 1), 0.9 / (k + 1) - 0.1, 1.3 / (k + 1)),
            (1.2 / (k + 1), 1.0 / (k + 1), 1.5 / (k + 1)),
            Alone(FoundLevel(LEVELS[k % 5], 73, 0, 0), 0, True),
        )
        for k in range(sources)
    )
    together = Alone(FoundLevel(LEVELS[0], 73, 0, 0), 0, True)
    values = {"points": 128, "planned": 128, "dropped": 0, "unfinished": 0, "missing": 0, "scale": "score"}
    values["together"] = together
    return LawNeeds("", law, found, **(values | changes))  # type: ignore[arg-type]


def design_of(*found: LawNeeds, level: float = 1.0) -> NeedsDesign:
    subjects = tuple(
        Subject("", needs.law, ("swing",), tuple(need.group for need in needs.sources)) for needs in found
    )
    return NeedsDesign("tool_peak_mm", level, 128, 73, 0.95, subjects)


def assert_clear(figure: Figure) -> None:
    """No text meets another, or the page's edge; none is smaller than 7 pt."""
    wide, high = (72 * inches for inches in figure.get_size_inches())
    boxes = text_boxes(figure)
    for text, box in boxes:
        assert text.get_size() >= 7.0
        assert box.x0 >= 0
        assert box.x1 <= wide, text.get_text()
        assert box.y0 >= 0
        assert box.y1 <= high
    for (one, box), (other, beside) in combinations(boxes, 2):
        apart = box.x1 <= beside.x0 or beside.x1 <= box.x0 or box.y1 <= beside.y0 or beside.y1 <= box.y0
        assert apart, (one.get_text(), other.get_text())


@pytest.mark.parametrize("sources", [1, 3, 13, 40])
@pytest.mark.parametrize("level", [1.0, 0.05])
def test_nothing_overlaps(sources: int, level: float) -> None:
    """With many sources and long names, of several laws, finished or not."""
    one = law_needs(sources)
    other = law_needs(
        sources, "a law whose name is as long as any that a user may think of " * 2, missing=7, dropped=3
    )
    assert_clear(needs_figure([one, other], design_of(one, other, level=level), "A title " * 12, DAY))


def test_bars_are_as_long_as_the_shares() -> None:
    """Within 0 and 100 % of the axis, whatever the estimates."""
    needs = law_needs(4)
    figure = needs_figure([needs], design_of(needs), "T", DAY)
    bars: dict[str, list[float]] = {}
    for patch in figure.findobj(Rectangle):
        if str(patch.get_gid()).startswith("need-"):
            bars.setdefault(patch.get_gid(), []).append(patch.get_width())
    full = max(width for widths in bars.values() for width in widths)
    for k, need in enumerate(needs.sources):
        total, first = bars[f"need-0-{k}"]
        assert total == pytest.approx(full * min(need.total[0], 1.0))
        assert first == pytest.approx(full * min(need.first[0], 1.0))


@pytest.mark.parametrize("suffix", ["png", "svg", "pdf"])
def test_the_same_bytes_again(tmp_path: Path, suffix: str) -> None:
    """In every format; another suffix is refused."""
    needs = law_needs(3)
    files = [tmp_path / f"{name}.{suffix}" for name in "ab"]
    for file in files:
        needs_picture([needs], design_of(needs), "T", file, DAY)
    assert files[0].read_bytes() == files[1].read_bytes()
    with pytest.raises(InputFaults):
        needs_picture([needs], design_of(needs), "T", tmp_path / "c.txt", DAY)


def test_a_spread_in_its_own_unit() -> None:
    """1.05^0.8 - 1 = 3.98 %; a load never leaves its range; a shift grows in proportion."""
    whole = Group("m", "link_mass_percent", "", ("a",), PERCENT)
    assert own_unit(whole, 0.8) == "3.98 %, upper wrist of the second arm 19.5 %"
    assert own_unit(Group("c", "link_cog_mm", "", ("a",), SHIFT), 0.8) == "4 mm"
    load = Group("p", "payload", "", ("a",), LOAD)
    assert own_unit(load, 0.4) == "0.9 to 2.1 kg, cog 12 mm"
    assert own_unit(load, 2.0) == "0 to 3 kg, cog 60 mm"
    part = Group("m of w", "link_mass_percent", "w", ("a",), {**PERCENT, "values": {"w": 25.0}})
    assert own_unit(part, 1.0) == "25 %"


def test_the_advice_names_what_leads_and_what_is_easy() -> None:
    """What to identify first, how well, and what need not be known better."""
    needs = law_needs(2)
    said = advice(needs, design_of(needs))
    assert said.startswith(
        "Identify first, by total share of the variance of the tool peak: link mass 0 100 % (100-100)"
    )
    assert "up to 0.63 times the declared spread (3.12 %" in said
    assert "to miss from 1.25" in said
    assert said.endswith(f"at {LADDER[-1]:g} times the declared spread, still no trouble: payload 1.")


def test_words_for_what_has_no_value() -> None:
    """Nothing that varies, nothing that counts, nothing that is shown."""
    nothing = (math.nan,) * 3
    assert share_words(nothing) == "no value"
    need = SourceNeed(group(0), nothing, nothing, Alone(FoundLevel(LEVELS[3], 0, 0, 0), 0, False))
    needs = LawNeeds("", "law", (need,), need.alone, 0, 128, 0, 0, 384, "score")
    assert kept_words(need) == "-"
    assert (
        advice(needs, design_of(needs)) == "Nothing can be shared out, for no row of the design counts yet."
    )
    said = " ".join(notes(needs, design_of(needs)))
    assert "384 runs of the shares are missing; 0 of 128 rows count" in said
    assert "2 of the 2 searches" in said
    assert_clear(needs_figure([needs], design_of(needs), "T", DAY))


@pytest.mark.parametrize("width", [60, 100, 200])
def test_text_keeps_within_the_width(width: int) -> None:
    """And names every source."""
    needs = law_needs(13)
    text = needs_text([needs], design_of(needs), width)
    assert max(map(len, text.splitlines())) <= width
    assert text.count("payload") >= 3


@pytest.mark.parametrize(
    ("level", "said"),
    [
        (LEVELS[0], "All together: 0.9 (0.63 to 1.25) times the declared spreads."),
        (LEVELS[3], "All together: not shown yet."),
        (Tolerated(None, 0.0, 0.0), "All together: none: misses at level 0."),
    ],
)
def test_all_together_is_a_multiple_only_where_one_is_known(level: Tolerated, said: str) -> None:
    """What is not known has no unit."""
    needs = law_needs(1, together=Alone(FoundLevel(level, 73, 0, 0), 0, True))
    assert said in needs_text([needs], design_of(needs), 100)
