"""How figures, scores and verdicts are put into words, the same in picture and terminal."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping

from rigbench.scores import names
from rigbench.scores.names import score_words
from rigbench.scores.results import Column, Results, Tolerated

__all__ = [
    "NOT_POSSIBLE",
    "any_random",
    "arm_words",
    "figure",
    "has_levels",
    "interval",
    "level",
    "level_words",
    "limits_of",
    "main_score",
    "percent",
    "quantity",
    "runs_words",
    "signed",
    "tolerance_words",
    "tolerated_words",
]

MOST_DIGITS = 6
NOT_POSSIBLE = "not possible"


def _digits_that_agree(write: Callable[[int], str], first: int, agrees: Callable[[float], bool]) -> str:
    """Write with the fewest digits, from ``first`` on, whose reading still ``agrees`` with the value."""
    for digits in range(first, first + MOST_DIGITS):
        if agrees(float(write(digits))):
            return write(digits)
    return write(first)


def figure(value: float, *limits: float) -> str:
    """Return a finite number to 2 significant digits, 3 from 100 on: 0.064, 1.8, 12, 140, 1230.

    An exponent stands only below 1e-4 and from 1e6 on. With ``limits`` it gets as many digits as it
    takes to be read on its own side of each: 3.004 against 3 is not written 3.0.
    """
    if value == 0:
        return "0"

    def write(digits: int) -> str:
        rounded = float(f"{value:.{digits - 1}e}")
        if not 1e-4 <= abs(rounded) < 1e6:
            return f"{value:.{digits - 1}e}"
        return f"{rounded:.{max(digits - 1 - math.floor(math.log10(abs(rounded))), 0)}f}"

    first = 3 if abs(value) >= 99.5 else 2
    return _digits_that_agree(
        write, first, lambda read: all((read <= limit) == (value <= limit) for limit in limits)
    )


def percent(share: float, required: float | None = None, exact: bool = False) -> str:
    """Return a share (0 to 1) in percent, without decimals unless they matter.

    They matter where the rounded figure would stand on the other side of the ``required`` share, and,
    if ``exact``, where it would hide a draw: 511 of 512 is 99.8 and not 100.
    """
    value = 100 * share

    def agrees(read: float) -> bool:
        hides = exact and ((read == 0) != (share == 0) or (read == 100) != (share == 1))
        return not hides and (required is None or (read >= 100 * required) == (share >= required))

    return _digits_that_agree(lambda decimals: f"{value:.{decimals}f}", 0, agrees)


def quantity(value: float, score: str, *limits: float) -> str:
    """Return a score's value with its unit, or what an infinite one means; ``limits`` as for a figure."""
    if math.isnan(value):
        return "no value"
    if math.isinf(value):
        return "did not settle" if score.startswith("settle") else "did not finish"
    unit = score_words(score)[1]
    return f"{figure(value, *limits)} {unit}".rstrip()


def signed(value: float) -> str:
    """Return a difference with its sign: '+1.2', '-0.3', '0', 'no end' where it is infinite."""
    if math.isinf(value):
        return "no end"
    return "0" if value == 0 else f"{'+' if value > 0 else '-'}{figure(abs(value))}"


def interval(low: float, high: float) -> str:
    """Return an interval of figures, '1.6 to 2.1'; an infinite end is 'no end'."""
    return " to ".join("no end" if math.isinf(end) else figure(end) for end in (low, high))


def level(value: float) -> str:
    """Return a level to 3 significant digits: 0.25, 1, 1.37."""
    return f"{value:.3g}"


def main_score(results: Results) -> str:
    """Return the score that the cells show: the one by which laws are compared."""
    return names.main_score(results.tolerance.limited if results.tolerance else ())


def limits_of(results: Results, score: str) -> tuple[float, ...]:
    """Return the limits of a score, in whichever motion; () if it has none."""
    if results.tolerance is None:
        return ()
    every = (results.tolerance.limits, *results.tolerance.motions.values())
    return tuple(limits[score] for limits in every if score in limits)


def any_random(results: Results) -> bool:
    """Tell whether anything is random in any condition."""
    return any(column.random for column in results.columns)


def arm_words(results: Results) -> str:
    """Say which arm moves, what all laws believe where that is another one, and how it moves."""
    believed = f" The laws believe {results.model}." if results.model else ""
    motions = f"Motion{'s' if len(results.motions) > 1 else ''}: {', '.join(results.motions)}."
    return f"Arm: {results.arm}.{believed} {motions}"


def tolerance_words(results: Results) -> str:
    """Say what a run must keep, and on which share of the draws; limits of single motions come after."""
    tolerance = results.tolerance
    if tolerance is None:
        return "No tolerance is declared."
    parts = [_limit_words(tolerance.limits)] if tolerance.limits else []
    parts += [f"{motion}: {_limit_words(limits)}" for motion, limits in tolerance.motions.items() if limits]
    limits = f"Tolerance: {'; '.join(parts)}"
    motions = ", in every motion" if len(results.motions) > 1 else ""
    if not any_random(results):
        return f"{limits}{motions}."
    return f"{limits}. {percent(tolerance.required_share)} % of the draws must keep it{motions}."


def _limit_words(limits: Mapping[str, float]) -> str:
    said = ((score_words(name), limit) for name, limit in limits.items())
    return ", ".join(f"{words} at most {limit:g} {unit}".rstrip() for (words, unit), limit in said)


def runs_words(results: Results) -> str:
    """Say how many draws there are, and how many of the planned runs are done and failed."""
    draws = f"{results.draws} draw{'s' if results.draws != 1 else ''}. " if any_random(results) else ""
    if draws and results.stop_early:
        stopped = len({(cell.sheet, cell.condition) for cell in results.cells if cell.settled})
        draws = f"At most {draws.removesuffix('. ')} (columns settled before that: {stopped or 'none'}). "
    runs = f"{results.planned} run{'s' if results.planned != 1 else ''} planned"
    done = "all done" if results.done == results.planned else f"{results.done} done"
    return f"{draws}{runs}, {done}, {results.failed or 'none'} failed."


def level_words(column: Column) -> str:
    """Return a condition's level in words; '' for level 0, or where its name carries the level already."""
    if not column.level or any(
        _number(part) == column.level for part in re.split(r"[\s,;:=()]+", column.name)
    ):
        return ""
    return f"level {level(column.level)}"


def _number(text: str) -> float | None:
    try:
        return float(text)
    except ValueError:
        return None


def has_levels(results: Results) -> bool:
    """Tell whether there is a tolerated level to show: a tolerance and a level beyond nominal."""
    higher = any(column.ladder and column.level for column in results.columns)
    return results.tolerance is not None and (higher or results.level_search is not None)


def tolerated_words(tolerated: Tolerated) -> str:
    """Say a tolerated level: '0.7 (0.5 to 1)', '2 or more', 'below 0.25', 'not shown yet'."""
    low, high, value = tolerated.low, tolerated.high, tolerated.value
    if high == 0:
        return "none: misses at level 0"
    if value is None:
        if math.isinf(high):
            return f"{level(low)} or more" if low > 0 else "not shown yet"
        return f"{level(low)} to {level(high)}" if low > 0 else f"below {level(high)}"
    return f"{value:.2g} ({level(low)} to {'no end' if math.isinf(high) else level(high)})"
