"""What the study ``needs`` shows, in words that picture and terminal share."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from rigbench.errors import counted
from rigbench.report.words import level, tolerated_words
from rigbench.scores.limit_search import LADDER
from rigbench.scores.names import score_words
from rigbench.scores.needs import Alone, LawNeeds, SourceNeed
from rigbench.scores.needs_design import Group, NeedsDesign
from rigbench.scores.spread_at import LOAD, spread_at

__all__ = [
    "CUT",
    "READING",
    "advice",
    "cut",
    "kept_words",
    "notes",
    "own_unit",
    "share_words",
    "subject_words",
    "together_words",
]

READING = (
    "Total share: the part of the variance that stays as long as this source alone is unknown; first-order "
    "share: the part that goes once it alone is known (Sobol indices, cut to 0 to 100 %, with 95 % "
    "intervals). Tolerated level: the multiple of the declared spread up to which the required share of the "
    "draws keeps the tolerance (shown to keep at, shown to miss from)."
)

MOST_NAMED = 4
"""So many sources are named in a sentence; of the others the number is given."""

CUT = 0.05
"""A source whose total share is below this is not among those to identify first."""


def cut(share: float) -> float:
    """Return a share within 0 and 1: an estimate may lie outside by chance."""
    return min(max(share, 0.0), 1.0)


def share_words(share: tuple[float, float, float]) -> str:
    """Return a share with its interval, '94 % (74-100)'; 'none' where nothing varies."""
    if math.isnan(share[0]):
        return "no value"
    value, low, high = (f"{100 * cut(part):.0f}" for part in share)
    return f"{value} % ({low}-{high})"


def own_unit(group: Group, at: float) -> str:
    """Say a group's spread at a level in its own unit: '4.1 %, wrist 20 %', '0.9 to 2.1 kg, cog 12 mm'."""
    values, unit = spread_at(group.spread, at), group.spread["unit"]
    if group.spread["grows"] == LOAD:
        cog = f", cog {values['cog_mm']:.3g} mm" if values["cog_mm"] else ""
        return f"{values['least_kg']:.3g} to {values['most_kg']:.3g} kg{cog}"
    unnamed = ("all", group.part)  # what a part is called says the group's name
    return ", ".join(
        f"{value:.3g} {unit}" if name in unnamed else f"{name} {value:.3g} {unit}"
        for name, value in values.items()
    )


def kept_words(need: SourceNeed) -> str:
    """Say up to where a source is shown to keep alone, in its own unit; '-' if nowhere."""
    low = need.alone.found.tolerated.low
    return own_unit(need.group, low) if low > 0 else "-"


def subject_words(needs: LawNeeds) -> str:
    """Name the law, and its sheet if there are several."""
    return f"{needs.law}, {needs.sheet}" if needs.sheet else needs.law


def advice(needs: LawNeeds, design: NeedsDesign) -> str:
    """Say in a sentence or two what to identify first, and how well."""
    score = score_words(design.score)[0]
    shared = [need for need in needs.sources if not math.isnan(need.total[0])]
    if not shared:
        why = "no row of the design counts yet" if needs.points == 0 else f"the {score} does not vary"
        return f"Nothing can be shared out, for {why}."
    first = [need for need in shared if need.total[0] >= CUT] or shared[:1]
    named = _named([f"{need.group.name} {share_words(need.total)}" for need in first])
    said = f"Identify first, by total share of the variance of the {score}: {named}."
    leads = first[0]
    if leads.alone.finished:
        said += f" {_alone_words(leads)}"
    easy = [need.group.name for need in needs.sources if _keeps_everywhere(need.alone, design)]
    if easy:
        most = level(design.level * LADDER[-1])
        said += f" Alone, at {most} times the declared spread, still no trouble: {_named(easy)}."
    return said


def _named(names: Sequence[str]) -> str:
    more = f" and {len(names) - MOST_NAMED} more" if len(names) > MOST_NAMED else ""
    return f"{', '.join(names[:MOST_NAMED])}{more}"


def _alone_words(need: SourceNeed) -> str:
    tolerated = need.alone.found.tolerated
    name = f"{need.group.name[0].upper()}{need.group.name[1:]}"
    kept = f"is shown to keep up to {level(tolerated.low)} times the declared spread ({kept_words(need)})"
    missed = f"to miss from {level(tolerated.high)}"
    if tolerated.low > 0:
        return f"{name} alone {kept}{'' if math.isinf(tolerated.high) else f' and {missed}'}."
    if math.isinf(tolerated.high):
        return f"{name} alone is shown neither to keep nor to miss at any level tried."
    return f"{name} alone is shown {missed} times the declared spread, and to keep nowhere above 0."


def _keeps_everywhere(alone: Alone, design: NeedsDesign) -> bool:
    return alone.finished and alone.found.tolerated.low >= design.level * LADDER[-1] * (1 - 1e-9)


def together_words(needs: LawNeeds) -> str:
    """Say by which factor all spreads together may be scaled, if any is known."""
    tolerated = needs.together.found.tolerated
    known = tolerated.high > 0 and not (tolerated.low <= 0 and math.isinf(tolerated.high))
    return tolerated_words(tolerated) + (" times the declared spreads" if known else "")


def notes(needs: LawNeeds, design: NeedsDesign) -> Iterator[str]:
    """Yield what of it is not as it should be: what is missing, dropped, infinite."""
    rows = f"{needs.points} of {counted(needs.planned, 'row')}"
    if needs.missing:
        yield f"Not finished: {counted(needs.missing, 'run')} of the shares are missing; {rows} count."
    unfinished = [alone for alone in _searches(needs.sources, needs.together) if not alone.finished]
    if unfinished:
        yield (
            f"Not finished: {len(unfinished)} of the {len(needs.sources) + 1} searches for a tolerated "
            "level; until then it reads as not shown."
        )
    if needs.dropped:
        yield f"{counted(needs.dropped, 'row')} dropped: a run of it came to nothing on the host."
    if needs.unfinished:
        verb = "runs" if needs.unfinished > 1 else "run"
        yield (
            f"{needs.unfinished} {verb} of the shares did not finish, which is an infinite error: the shares "
            "are of the variance of the score's rank."
        )
    dropped = sum(alone.dropped for alone in _searches(needs.sources, needs.together))
    if dropped:
        yield (
            f"{counted(dropped, 'draw')} of the searches dropped, for the host's trouble: of {design.draws} "
            "draws all are needed to show that a level keeps."
        )


def _searches(sources: Sequence[SourceNeed], together: Alone) -> Iterator[Alone]:
    yield from (need.alone for need in sources)
    yield together
