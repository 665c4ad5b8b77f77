"""One sentence of advice."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from math import inf, isfinite

from rigbench.errors import counted
from rigbench.scores.anytime import draws_to_settle
from rigbench.scores.intervals import draws_to_decide
from rigbench.scores.names import score_words
from rigbench.scores.results import Cell, Results
from rigbench.scores.standing import SheetStanding

__all__ = ["advise"]

MOST = 3
"""So many names are spelled out; of the others the number is given."""


def advise(results: Results) -> str:
    """Return what to take away from the results, in one sentence.

    The law to take is the one that keeps something and that no other law is shown to be ahead of (see
    :meth:`SheetStanding.ahead`); where there are several of these it is too close to call. What stays
    open is said too, with the number of draws that would decide it, and which runs are missing.
    """
    if not any(cell.draws for cell in results.cells):
        said = "no run has a result yet, so there is nothing to advise"
    elif len(results.sheets) == 1:
        said = "; ".join(_of_sheet(SheetStanding(results, results.sheets[0])))
    else:
        said = _of_sheets(results)
    said = "; ".join([said, *_missing(results)])
    return said[0].upper() + said[1:] + "."


def _missing(results: Results) -> Iterator[str]:
    """Yield what the campaign has not shown."""
    left = results.planned - results.done - results.failed
    if left > 0:
        yield f"{left} of {results.planned} runs are still to do"
    if results.failed:
        runs = counted(results.failed, "run")
        yield f"{runs} failed (law's code, the plant, time limit or crash), for or against no law"


def _of_sheets(results: Results) -> str:
    """Return the advice of several sheets, of which those that agree are named together."""
    groups: dict[str, list[str]] = {}
    for sheet in results.sheets:
        groups.setdefault(_in_brief(SheetStanding(results, sheet)), []).append(sheet)
    if len(groups) == 1:
        count = len(results.sheets)
        return f"in {'both' if count == 2 else f'all {count}'} sheets: {next(iter(groups))}"
    said = [f"in {_names(sheets)}: {head}" for head, sheets in list(groups.items())[:MOST]]
    rest = sum(len(sheets) for sheets in list(groups.values())[MOST:])
    return "; ".join([*said, *([f"{counted(rest, 'sheet')} more differ from these"] if rest else [])])


def _in_brief(sheet: SheetStanding) -> str:
    """Return the first clause of one sheet's advice, with what speaks against the law to take."""
    said, front = _of_sheet(sheet)[0], _front(sheet)
    if len(front) != 1:
        return said
    law = front[0]
    against = [*_elsewhere(sheet, law)]
    if _behind_by_score(sheet, law):
        against.append(f"it is ahead of others by {score_words(sheet.main)[0]} alone")
    close, _ = _not_behind(sheet, law)
    if close:
        against.append(f"against {_names(close)} it is too close to call")
    return f"{said}, but {', and '.join(against)}" if against else said


def _front(sheet: SheetStanding) -> list[str]:
    """Return the laws that keep something and that no other such law is ahead of; [] without a tolerance."""
    if sheet.tolerance is None:
        return []
    keepers = [law for law in sheet.laws if sheet.columns_that("keeps", law)]
    return [a for a in keepers if not any(sheet.ahead(b, a) for b in keepers)] or keepers


def _not_behind(sheet: SheetStanding, law: str) -> tuple[list[str], list[str]]:
    """Return the laws that one is not ahead of: those with a result, and those without."""
    others = [other for other in sheet.laws if other != law and not sheet.ahead(law, other)]
    close = [other for other in others if sheet.has_result(other)]
    return close, [other for other in others if other not in close]


def _of_sheet(sheet: SheetStanding) -> list[str]:
    """Return the clauses of one sheet's advice, the first of which can stand alone."""
    if sheet.tolerance is None:
        return _without_tolerance(sheet)
    front = _front(sheet)
    if not front:
        return _nothing_kept(sheet)
    if len(front) > 1:
        return [*_too_close(sheet, front), *_would_decide(sheet, front)]
    law = front[0]
    verb = f"'{law}'" if len(sheet.laws) == 1 else f"take '{law}', which"
    said = [f"{verb} {_shown(sheet, law)}", *_elsewhere(sheet, law), *_by_score(sheet, law)]
    close, silent = _not_behind(sheet, law)
    if close:
        said.append(f"against {_names(close)} it is too close to call")
    if silent:
        said.append(f"{_names(silent)} {'has' if len(silent) == 1 else 'have'} no result")
    return [*said, *_would_decide(sheet, [law, *close])]


def _behind_by_score(sheet: SheetStanding, law: str) -> list[str]:
    """Return the laws that one is ahead of by the main score alone."""
    behind = [other for other in sheet.laws if other != law and sheet.ahead(law, other)]
    return [other for other in behind if not sheet.told_apart_by_tolerance(law, other)]


def _by_score(sheet: SheetStanding, law: str) -> Iterator[str]:
    """Yield over which laws only the main score decides, and up to which level it is in their favour."""
    rivals = _behind_by_score(sheet, law)
    if not rivals:
        return
    levels = {rival: sheet.better_below(rival, law) for rival in rivals}
    behind = [f"'{rival}' below level {level:.2g}" for rival, level in levels.items() if level is not None]
    but = f", and behind {', '.join(behind[:MOST])}" if behind else ""
    yield f"it is ahead of {_names(rivals)} by {score_words(sheet.main)[0]} alone{but}"


def _too_close(sheet: SheetStanding, front: Sequence[str]) -> Iterator[str]:
    """Yield what is shown of laws of which none is ahead of all the others."""
    shown: dict[str, list[str]] = {}
    for law in front:
        shown.setdefault(_shown(sheet, law), []).append(law)
    if len(shown) == 1:
        yield f"too close to call between {_names(front)}, which {_plural(next(iter(shown)), len(front))}"
        return
    said = [f"{_names(laws)} {_plural(words, len(laws))}" for words, laws in list(shown.items())[:MOST]]
    yield f"too close to call between {_names(front)}: {', '.join(said)}"


def _nothing_kept(sheet: SheetStanding) -> list[str]:
    """Return the clauses for a sheet in which no cell keeps the tolerance."""
    one = len(sheet.laws) == 1
    known = [law for law in sheet.laws if sheet.has_result(law)]
    if not known:
        return ["there is no result yet"]
    if any(sheet.columns_that("open", law) for law in sheet.laws):
        who = f"'{sheet.laws[0]}' is not" if one else "no law is"
        return [f"{who} shown to keep the tolerance yet", *_would_decide(sheet, known)]
    who = f"'{sheet.laws[0]}'" if one else "every law"
    return [f"{who} misses the tolerance under every condition", *_nearest(sheet, known)]


def _nearest(sheet: SheetStanding, laws: Sequence[str]) -> Iterator[str]:
    """Yield which law comes nearest to the main score's limit in the first column.

    Where motions differ in the limit, a law is as near as in the motion in which it is farthest from its own.
    """
    column = sheet.columns[0]
    gaps = {law: gap for law in laws if (gap := _gap(sheet, sheet.cell(law, column))) is not None}
    if not gaps:
        return
    law = min(gaps, key=lambda law: gaps[law].ratio)
    gap = gaps[law]
    if isfinite(gap.median):
        who = "it has" if len(sheet.laws) == 1 else f"nearest is '{law}' with"
        words, unit = score_words(sheet.main)
        where = f"in motion '{gap.motion}' under '{column.name}'" if gap.motion else f"under '{column.name}'"
        yield f"{who} a {words} of {gap.median:.3g} {unit} {where}, where {gap.limit:g} {unit} is allowed"


@dataclass(frozen=True)
class _Gap:
    """A median of the main score and its limit; ``motion`` is '' where all motions have the same limit."""

    median: float
    limit: float
    motion: str = ""

    @property
    def ratio(self) -> float:
        return self.median / self.limit if self.limit > 0.0 else inf


def _gap(sheet: SheetStanding, cell: Cell) -> _Gap | None:
    """Return how far a cell is from the main score's limit; None where there is no such limit or score."""
    if sheet.tolerance is None:
        return None
    limits = {motion: sheet.tolerance.limits_for(motion).get(sheet.main) for motion in cell.motions}
    common = set(limits.values()) or {sheet.tolerance.limits.get(sheet.main)}
    if len(common) == 1:
        limit, measure = common.pop(), cell.measures.get(sheet.main)
        return None if limit is None or measure is None else _Gap(measure.median, limit)
    gaps = [
        _Gap(part.measures[sheet.main].median, limit, motion)
        for motion, part in cell.motions.items()
        if (limit := limits[motion]) is not None and sheet.main in part.measures
    ]
    return max(gaps, key=lambda gap: gap.ratio, default=None)


def _shown(sheet: SheetStanding, law: str) -> str:
    """Say what a law is shown to keep: 'is shown to keep the tolerance up to level 0.5 ...'."""
    if not sheet.has_levels:
        count, kept = len(sheet.columns), len(sheet.columns_that("keeps", law))
        under = f"{kept} of {count} conditions"
        if kept == count:
            under = f"all {count} conditions" if count > 1 else f"'{sheet.columns[0].name}'"
        return f"is shown to keep the tolerance under {under}"
    level = sheet.level(law)
    if level.high == 0.0:
        return "misses the tolerance at level 0 already"
    top = sheet.shown_to_keep(law)
    if top is None:
        said = "is not shown to keep the tolerance at any level"
    elif top > 0.0:
        said = f"is shown to keep the tolerance up to level {top:g}"
    else:
        said = "is shown to keep the tolerance at level 0 only"
    if isfinite(level.high):
        return f"{said} and to miss it from level {level.high:g}"
    return f"{said}, the highest run" if top == sheet.highest else f"{said} (higher ones are open)"


def _elsewhere(sheet: SheetStanding, law: str) -> Iterator[str]:
    """Yield under which conditions off the ladder the law misses or is open."""
    beside = sheet.has_levels
    for verdict, words in (("misses", "it misses under"), ("open", "it is open under")):
        columns = sheet.columns_that(verdict, law, beside_ladder=beside)
        if columns:
            yield f"{words} {_names(columns)}"


def _would_decide(sheet: SheetStanding, laws: Sequence[str]) -> Iterator[str]:
    """Yield how many draws would decide the first open cell that the declared draws will not."""
    steps = {column.name for column in sheet.steps}
    for column in (*sheet.steps, *(c for c in sheet.columns if c.name not in steps)):
        for law in laws:
            cell = sheet.cell(law, column)
            if sheet.tolerance is None or cell.verdict != "open" or cell.pass_share is None:
                continue
            share, required = cell.pass_share, sheet.tolerance.required_share
            needed = draws_to_decide(share, required)
            if sheet.stop_early:
                needed = draws_to_settle(required, share)
            if needed is not None and needed > sheet.draws:
                yield (
                    f"about {needed} draws would decide '{law}' under '{column.name}' "
                    f"({cell.passed} of {cell.draws} pass so far)"
                )
                return


def _without_tolerance(sheet: SheetStanding) -> list[str]:
    """Return the clauses for a campaign that declares no tolerance: laws by their main score alone."""
    said = "no tolerance is declared, so nothing is kept or missed"
    best = {
        law: [column.name for column in sheet.columns if sheet.cell(law, column).best] for law in sheet.laws
    }
    leaders = [law for law in sheet.laws if best[law]]
    if len(sheet.laws) == 1:
        return [said]
    if not leaders:
        return [f"{said}, and by {score_words(sheet.main)[0]} the laws are too close to call"]
    under = ", ".join(f"'{law}' under {_names(best[law])}" for law in leaders[:MOST])
    by = score_words(sheet.main)[0]
    return [f"{said}; by {by}, better than every other law beyond the interval: {under}"]


def _plural(words: str, count: int) -> str:
    """Turn 'is shown ...' or 'misses ...' to the plural where it speaks of several."""
    if count == 1:
        return words
    verb, _, rest = words.partition(" ")
    return f"{ {'is': 'are', 'misses': 'miss'}.get(verb, verb) } {rest}"


def _names(names: Sequence[str]) -> str:
    """Return 'a', 'b' and 'c', quoted; beyond MOST the number of the rest."""
    quoted = [f"'{name}'" for name in names[:MOST]]
    if len(names) > MOST:
        quoted.append(f"{len(names) - MOST} more")
    return quoted[0] if len(quoted) == 1 else f"{', '.join(quoted[:-1])} and {quoted[-1]}"
