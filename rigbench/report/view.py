"""Which number the cells of the matrix show."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from rigbench.errors import Fault, InputFaults, nearest
from rigbench.report.words import main_score
from rigbench.scores.names import score_info
from rigbench.scores.results import Cell, Results

__all__ = ["MEDIAN", "P95", "RATIO", "SHARE", "SHOWS", "Shown", "View", "check_score"]

SHARE, MEDIAN, P95, RATIO = SHOWS = ("share", "median", "p95", "ratio")


@dataclass(frozen=True)
class Shown:
    """A number of a cell with its 95 % interval; values may be inf."""

    value: float
    low: float
    high: float


@dataclass(frozen=True)
class View:
    """What is shown: the ``share`` that keeps the tolerance, or of a ``score`` the ``median``, the 95th
    percentile ``p95`` or the median ``ratio`` to nominal. Without a ``score`` it is the main one."""

    show: str = SHARE
    score: str = ""

    def score_of(self, results: Results) -> str:
        """Return the score that is shown."""
        return self.score or main_score(results)

    def shares(self, results: Results) -> bool:
        """Tell whether shares are shown: without a tolerance there are none, and the median stands in."""
        return self.show == SHARE and results.tolerance is not None

    def of(self, cell: Cell, score: str) -> Shown | None:
        """Return a cell's number; where shares are shown, the score's median. None where there is none."""
        if self.show == RATIO:
            ratio = cell.ratios.get(score)
            return None if ratio is None else Shown(ratio.value, ratio.low, ratio.high)
        measure = cell.measures.get(score)
        if measure is None or math.isnan(measure.median):
            return None
        if self.show == P95:
            return Shown(measure.p95, measure.p95_low, measure.p95_high)
        return Shown(measure.median, measure.median_low, measure.median_high)


def check_score(file: str, score: str, stored: Sequence[str], results: Results) -> None:
    """Raise InputFaults for a score that no run has: the nearest that there is is named.

    Where no run is stored yet, any score that runs can have will do.
    """
    known = list(dict.fromkeys([*stored, main_score(results)]))
    if score in known or (not stored and score_info(score) is not None):
        return
    near = nearest(score, known)
    expected = "" if near else f"one of {', '.join(name for name in known if '.' not in name)}"
    problem = f"no run has a score called '{score}'"
    raise InputFaults([Fault(file, None, "--score", problem, expected, near)])
