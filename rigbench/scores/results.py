"""The results of a campaign, as everything that reports them reads them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rigbench.scores.cell import CountedDraws
    from rigbench.scores.comparison import Comparison
    from rigbench.scores.own_limits import FoundLevel, OwnLimits

__all__ = [
    "Cell",
    "CellKey",
    "Column",
    "LawComparison",
    "LawStanding",
    "LevelSearch",
    "Measure",
    "MotionCell",
    "Results",
    "Tolerance",
    "Tolerated",
    "level_name",
]

CellKey = tuple[str, str, str]
"""Sheet, law, condition."""


@dataclass(frozen=True)
class Tolerance:
    """The limits that a run must keep, each 'at most', and the share of draws that must keep them.

    ``limits`` maps a score's name (tool_peak_mm, settle_ms, joint_peak_deg.j1 ...) to its limit in
    the unit that the name carries. ``motions`` holds limits of single motions, by the motion's name: they
    come on top of ``limits``, and in place of those on the same score.
    """

    limits: Mapping[str, float]
    required_share: float = 0.95
    motions: Mapping[str, Mapping[str, float]] = field(default_factory=dict)

    def limits_for(self, motion: str) -> Mapping[str, float]:
        """Return the limits that hold in one motion."""
        return {**self.limits, **self.motions.get(motion, {})}

    @property
    def limited(self) -> tuple[str, ...]:
        """The names of all scores with a limit in any motion, each once."""
        return tuple(dict.fromkeys([*self.limits, *(name for own in self.motions.values() for name in own)]))


@dataclass(frozen=True)
class Column:
    """A condition: its name, its level (None for nominal's absence of one), whether draws differ in it.

    ``ladder`` is true for the columns in which all sources act together (and for nominal, level 0):
    they carry the tolerated level.
    """

    name: str
    level: float | None
    random: bool
    ladder: bool


@dataclass(frozen=True)
class Measure:
    """Median and 95th percentile of a score over draws, each with its 95 % interval.

    Values may be inf; ``p95_high`` is inf where the draws don't reach. In a cell where nothing is
    random all six are the one exact value.
    """

    median: float
    median_low: float
    median_high: float
    p95: float
    p95_low: float
    p95_high: float


@dataclass(frozen=True)
class MotionCell:
    """One motion's part of a cell."""

    passed: int
    draws: int
    measures: Mapping[str, Measure]


@dataclass(frozen=True)
class Cell:
    """One law under one condition.

    ``draws`` is the number of draws that count (every motion has a machine's verdict), ``incomplete``
    those that don't yet or can't, ``passed`` those that keep every motion's tolerance. ``verdict`` is
    'keeps', 'misses' or 'open'; without a tolerance it is '' and the shares are None.
    """

    sheet: str
    law: str
    condition: str
    level: float | None
    draws: int
    incomplete: int
    passed: int
    pass_share: float | None
    pass_low: float | None
    pass_high: float | None
    verdict: str
    measures: Mapping[str, Measure]  # per score, the worst motion of each draw
    motions: Mapping[str, MotionCell]
    best: bool = False  # better than every other law of its column beyond the interval
    unfinished: int = 0  # of the draws that count, those in which some motion did not finish
    planned: int = 1  # draws that the experiment plans here; 0: the law is not possible in this sheet
    settled: bool = False  # the column stopped after so many draws: its laws were settled
    ratios: Mapping[str, Comparison] = field(default_factory=dict)  # per score, the median ratio to nominal

    @property
    def key(self) -> CellKey:
        """Sheet, law and condition."""
        return self.sheet, self.law, self.condition


@dataclass(frozen=True)
class Tolerated:
    """Tolerated level: ``low`` shown to keep, ``high`` shown to miss (inf: none was), ``value`` between.

    ``value`` is None where the pass share does not cross the required share within the levels run.
    """

    value: float | None
    low: float
    high: float


@dataclass(frozen=True)
class LevelSearch:
    """A search for each draw's own limit: of how many draws, up to the level ``most``, and how finely."""

    draws: int
    most: float
    finest: float  # the width of the brackets in the end


@dataclass(frozen=True)
class LawStanding:
    """One law across the columns.

    ``tolerated`` is by the draws' own ``limits``, with what was ``found`` of them, where there was a search;
    else by the pass shares of the ladder.
    """

    sheet: str
    law: str
    tolerated: Tolerated | None  # None without a tolerance, and where the law is not possible in the sheet
    found: FoundLevel | None = None
    limits: OwnLimits | None = field(default=None, compare=False, repr=False)


@dataclass(frozen=True)
class LawComparison:
    """Two laws under one condition: the ``score`` of the first less that of the second, draw by draw."""

    sheet: str
    condition: str
    level: float
    laws: tuple[str, str]
    score: str
    difference: Comparison


@dataclass(frozen=True)
class Results:
    """Everything that the matrix, the terminal and the JSON show.

    ``comparisons`` are of each pair of laws at each level of all sources together. ``counted`` holds the
    draws that count in each cell that is possible, their ``worst`` the scores named by ``compared``.
    ``stop_early``: columns stop as soon as they are settled, and all shares have intervals that hold at any
    number of draws. ``model``: the file of what all laws believe, where that is another arm.
    """

    title: str
    arm: str
    motions: tuple[str, ...]
    tolerance: Tolerance | None
    draws: int
    sheets: tuple[str, ...]  # ('',) where nothing is swept
    laws: tuple[str, ...]
    columns: tuple[Column, ...]
    cells: tuple[Cell, ...]  # every sheet x law x column, in that order
    standings: tuple[LawStanding, ...]
    planned: int
    done: int
    failed: int
    advice: str
    break_even: tuple[Mapping[str, object], ...] = field(default_factory=tuple)
    comparisons: tuple[LawComparison, ...] = ()
    counted: Mapping[CellKey, CountedDraws] = field(default_factory=dict, compare=False, repr=False)
    compared: tuple[str, ...] = ()
    level_search: LevelSearch | None = None
    stop_early: bool = False
    model: str = ""

    def cell(self, sheet: str, law: str, condition: str) -> Cell:
        """Return the one cell of that name; KeyError if there is none."""
        for cell in self.cells:
            if (cell.sheet, cell.law, cell.condition) == (sheet, law, condition):
                return cell
        raise KeyError((sheet, law, condition))


def level_name(level: float) -> str:
    """Return the name of the condition in which all sources act at a level: 'all at 0.5'."""
    return f"all at {str(float(level)).removesuffix('.0')}"
