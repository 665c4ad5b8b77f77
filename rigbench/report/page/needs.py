"""Which sources must be known, and how well, where the experiment asked for it."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from rigbench.campaign.studied import Studied
from rigbench.report.needs_words import (
    READING,
    advice,
    kept_words,
    notes,
    share_words,
    subject_words,
    together_words,
)
from rigbench.report.words import tolerated_words
from rigbench.scores.needs import LawNeeds, needs_of
from rigbench.scores.needs_design import NeedsDesign
from rigbench.scores.results import Tolerance

__all__ = ["KEY", "READING", "FoundNeeds", "found_needs", "needs_tables"]

KEY = "needs"
"""The name of the study."""


@dataclass(frozen=True)
class FoundNeeds:
    """What the study shows of each law and sheet, and what it set out to do."""

    laws: Sequence[LawNeeds]
    design: NeedsDesign


def found_needs(studied: Studied | None, tolerance: Tolerance | None) -> FoundNeeds | None:
    """Return what the study shows; None where there is none, or none yet."""
    if studied is None:
        return None
    design = NeedsDesign.of(studied.declared)
    rows = [record.row for record in studied.records]
    return FoundNeeds(needs_of(design, rows, tolerance or Tolerance({}, design.required_share)), design)


def needs_tables(found: FoundNeeds | None) -> Iterator[dict[str, Any]]:
    """Yield a table for each law and sheet, what to identify first standing first, and what it says."""
    if found is None:
        return
    for needs in found.laws:
        sources = [
            (
                need.group.name,
                share_words(need.total),
                share_words(need.first),
                tolerated_words(need.alone.found.tolerated),
                kept_words(need),
            )
            for need in needs.sources
        ]
        yield {
            "subject": subject_words(needs),
            "sources": sources,
            "together": together_words(needs),
            "notes": list(notes(needs, found.design)),
            "advice": advice(needs, found.design),
        }
