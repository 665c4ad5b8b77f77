"""What the study ``needs`` shows, as text."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

from rigbench.report.needs_words import (
    READING,
    advice,
    kept_words,
    notes,
    share_words,
    subject_words,
    together_words,
)
from rigbench.report.table import blocks, laws_column
from rigbench.report.words import level, percent, tolerated_words
from rigbench.scores.names import score_words
from rigbench.scores.needs import LawNeeds
from rigbench.scores.needs_design import NeedsDesign

__all__ = ["needs_text"]


def needs_text(found: Sequence[LawNeeds], design: NeedsDesign, width: int) -> str:
    """Return a table for each law and sheet, no wider than ``width``, and what it says in a sentence."""
    parts = []
    for needs in found:
        parts += [_head(needs, design), *_table(needs, width)]
        parts += [f"All together: {together_words(needs)}."]
        parts += [*notes(needs, design), advice(needs, design)]
    parts.append(READING)
    broken = (part if "\n" in part else textwrap.fill(part, max(width, 40)) for part in parts)
    return "\n\n".join(broken)


def _head(needs: LawNeeds, design: NeedsDesign) -> str:
    score = score_words(design.score)[0]
    return (
        f"What must be known for {subject_words(needs)}, what to identify first standing first. Variance of "
        f"the {score} at level {level(design.level)}; {needs.points} rows, {design.draws} draws, of which "
        f"{percent(design.required_share)} % must keep the tolerance."
    )


def _table(needs: LawNeeds, width: int) -> Sequence[str]:
    sources = needs.sources
    columns = [
        [["total share"], *([share_words(need.total)] for need in sources)],
        [["first-order"], *([share_words(need.first)] for need in sources)],
        [["tolerated", "level alone"], *([tolerated_words(need.alone.found.tolerated)] for need in sources)],
        [["shown to keep", "up to"], *([kept_words(need)] for need in sources)],
    ]
    names = laws_column([need.group.name for need in sources], width)
    return list(blocks(names, columns, width))
