"""The worst cases found, in words: what was found, never what is the worst there is."""

from __future__ import annotations

import math
import shlex
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import groupby

from rigbench.campaign.studies.worst_case import WorstFound
from rigbench.errors import counted
from rigbench.report.drawn import Drawn
from rigbench.report.words import level, quantity
from rigbench.scores.names import score_words

__all__ = [
    "KEY_DIGITS",
    "READING",
    "Departing",
    "LawWorst",
    "by_law",
    "difference_words",
    "draws_words",
    "found_words",
    "more_words",
    "replay_command",
    "runs_words",
    "share_words",
    "smallest_words",
    "told_words",
    "used_words",
    "worst_text",
]

KEY_DIGITS = 12

SHOWN = 6
"""Parameters that are told of a direction."""

READING = (
    "A search finds machines that were run: where it finds one that misses, the law misses there; where it "
    "finds none, there may still be one. u is a parameter's place in its spread, from -1 to 1."
)


@dataclass(frozen=True)
class Departing:
    """A parameter of the worst machine, and the ``difference`` that it makes by itself: see Departure."""

    drawn: Drawn
    difference: float | None


@dataclass(frozen=True)
class LawWorst:
    """What was found of a law in a sheet, levels rising, and the direction of the worst machine to be told.

    ``told`` is of the smallest level searched at which one misses, or else of the largest; ``drawn`` the
    largest share of a limit among so many draws of the matrix, by level where it has such a condition.
    """

    sheet: str
    law: str
    levels: tuple[WorstFound, ...]
    told: WorstFound
    departures: tuple[Departing, ...]
    drawn: Mapping[float, tuple[float, int]]

    @property
    def shown(self) -> tuple[Departing, ...]:
        """The departures that are told: those that make the most difference."""
        return self.departures[:SHOWN]

    @property
    def smallest(self) -> WorstFound | None:
        """The smallest level at which a machine was found that misses."""
        return next((found for found in self.levels if found.misses), None)


def by_law(found: Sequence[WorstFound]) -> Iterator[tuple[tuple[WorstFound, ...], WorstFound]]:
    """Yield the levels of each law in a sheet, and the one whose direction is to be told."""
    for _, own in groupby(found, key=lambda one: (one.sheet, one.law)):
        levels = tuple(own)
        searched = [one for one in levels if one.searched]
        yield levels, next((one for one in searched if one.misses), searched[-1])


def share_words(share: float) -> str:
    """Return a share of a limit: '82 % of its limit', 'beyond all limits' where it is infinite."""
    return "beyond all limits" if math.isinf(share) else f"{_percent(share)} of its limit"


def _percent(share: float) -> str:
    """Return a share in percent with three digits, or as many as tell on which side of the limit it lies."""
    for digits in range(3, 16):
        text = f"{100.0 * share:.{digits}g}"
        if (float(text) > 100.0) == (share > 1.0):
            break
    return f"{float(text):g} %" if "e" in text else f"{text} %"


def used_words(found: WorstFound) -> str:
    """Say what the worst run came to, against its limit and in which motion; '' where none has a verdict."""
    used = found.used
    if used is None or found.record is None:
        return ""
    row = found.record.row
    if not used.score:
        return f"a run that {_outcome(row.outcome)} in '{row.motion}'"
    words = score_words(used.score)[0]
    return f"{words} {quantity(used.value, used.score)}, {share_words(used.share)}, in '{row.motion}'"


def _outcome(outcome: str) -> str:
    return {"diverged": "diverged", "hit-stop": "hit a stop"}.get(outcome, f"ended as {outcome}")


def difference_words(one: Departing) -> str:
    """Say what a parameter makes by itself, between one sign of its u and the other."""
    if one.difference is None:
        return ""
    if math.isinf(one.difference):
        return "by itself decides whether a run finishes"
    return f"by itself makes {100.0 * one.difference:.3g} % of the limit"


def worst_text(laws: Sequence[LawWorst], store: str) -> str:
    """Return everything as text: law by law its levels, the smallest that fails, direction and replay."""
    parts = ["\n".join(_law_lines(law, store)) for law in laws]
    return "\n\n".join([*parts, READING])


def _law_lines(law: LawWorst, store: str) -> Iterator[str]:
    yield f"{law.law} ({law.sheet})" if law.sheet else law.law
    for found in law.levels:
        if found.searched:
            yield f"  level {level(found.level)}: {_level_words(law, found)}"
    yield f"  {smallest_words(law)}"
    if law.told.record is None:
        return
    yield f"  {told_words(law)} (u, from -1 to 1):"
    for one in law.shown:
        said = difference_words(one)
        yield f"    {one.drawn.words} {one.drawn.u:+g} ({one.drawn.amount}){f'; {said}' if said else ''}"
    if more := more_words(law):
        yield f"    {more}"
    yield f"  replay: {replay_command(law.told.record.key, store)}"


def replay_command(key: str, store: str) -> str:
    """Return the command that replays a stored run."""
    return f"rigbench trace {shlex.quote(store)} {key[:KEY_DIGITS]}"


def told_words(law: LawWorst) -> str:
    """Say of which machine the departures are."""
    return f"the worst machine found at level {level(law.told.level)} departs so"


def more_words(law: LawWorst) -> str:
    """Say how many departures are not told; '' where all are."""
    more = len(law.departures) - len(law.shown)
    return f"and {more} more" if more else ""


def _level_words(law: LawWorst, found: WorstFound) -> str:
    drawn = draws_words(law, found)
    against = f"; the worst of {drawn}" if drawn else ""
    if found.used is None:
        return f"{found_words(found)} from {runs_words(found)}{against}"
    worst = "" if found.misses else "; the worst"
    return f"{found_words(found)}{worst}: {used_words(found)}; {runs_words(found)}{against}"


def found_words(found: WorstFound) -> str:
    """Say whether a machine that misses was found at a level."""
    if found.used is None:
        return "nothing is known"
    return "found to miss" if found.misses else "none found that misses"


def runs_words(found: WorstFound) -> str:
    """Return how many runs were looked at: '60 runs (2 without verdict)'."""
    without = f" ({found.dropped} without verdict)" if found.dropped else ""
    return f"{counted(found.runs, 'run')}{without}"


def draws_words(law: LawWorst, found: WorstFound) -> str:
    """Return what the matrix has at the same level: '96 draws: 55 % of its limit'; '' where it has none."""
    if found.level not in law.drawn:
        return ""
    share, draws = law.drawn[found.level]
    return f"{counted(draws, 'draw')}: {share_words(share)}"


def smallest_words(law: LawWorst) -> str:
    """Say which is the smallest level at which a machine was found that misses."""
    smallest = law.smallest
    if smallest is None:
        return f"no machine found that misses, up to level {level(law.levels[-1].level)}"
    below = [one.level for one in law.levels if one.level < smallest.level]
    kept = f"; none found at {level(below[-1])}" if below else ""
    run = "" if smallest.record is None else f" (run {smallest.record.key[:KEY_DIGITS]})"
    return f"smallest level found to miss: {level(smallest.level)}{run}{kept}"
