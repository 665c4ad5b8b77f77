"""A score against the level of the mismatch, one curve a law, as the coordinates of an SVG picture."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from rigbench.report.axis import LevelAxis
from rigbench.report.cells import Grid
from rigbench.report.marks import TONES, band_opacity, mark_of
from rigbench.report.spreading import spread
from rigbench.report.words import level
from rigbench.report.wrapping import wrap_name
from rigbench.scores.levels import ladder
from rigbench.scores.names import score_words
from rigbench.scores.results import Measure

__all__ = ["Chart", "Curve", "charts"]

WIDTH, LEFT, RIGHT, TOP, FOOT = 820.0, 52.0, 212.0, 14.0, 48.0
LEAST_HEIGHT, LABEL, LINE = 250.0, 17.0, 14.0
"""A name of one line takes LABEL, each further line LINE."""
SPAN = 30.0
"""A logarithmic axis stands where the largest value is so many times the smallest."""
NAME = 27
"""Characters of a line of a law's name, beside its curve."""
MARKED = 8
"""So many break-even levels are marked at most; more are in the table alone."""

PATHS = {
    "o": "M-4 0a4 4 0 1 0 8 0a4 4 0 1 0 -8 0z",
    "s": "M-3.5 -3.5h7v7h-7z",
    "^": "M0 -4.5L4.3 3.3h-8.6z",
    "v": "M0 4.5L4.3 -3.3h-8.6z",
    "D": "M0 -4.6L4.6 0L0 4.6L-4.6 0z",
    "d": "M0 -5L3 0L0 5L-3 0z",
    "<": "M-4.5 0L3.3 -4.3v8.6z",
    ">": "M4.5 0L-3.3 -4.3v8.6z",
    "P": "M-1.5 -4.5h3v3h3v3h-3v3h-3v-3h-3v-3h3z",
    "X": "M-4 -2l2 -2l2 2l2 -2l2 2l-2 2l2 2l-2 2l-2 -2l-2 2l-2 -2l2 -2z",
    "p": "M0 -4.5L4.3 -1.4L2.6 3.6h-5.2L-4.3 -1.4z",
    "h": "M0 -4.5L3.9 -2.2v4.5L0 4.5L-3.9 2.2v-4.5z",
}
"""The shapes of the laws' marks, about their middle."""


@dataclass(frozen=True)
class Curve:
    """One law: ``line`` and ``band`` are the points of polylines, broken where there is no value."""

    law: str
    names: Sequence[str]  # the law's name, line by line
    tone: int
    dashes: str
    shape: str
    lines: Sequence[str]
    bands: Sequence[str]
    spots: Sequence[tuple[float, float]]
    beyond: Sequence[tuple[float, float]]  # where the median did not finish
    label: float = 0.0  # the middle of the name
    end: tuple[float, float] | None = None

    @property
    def labels(self) -> Sequence[tuple[float, str]]:
        """The lines of the name, each with the height of its middle."""
        top = self.label - LINE * (len(self.names) - 1) / 2.0
        return [(top + LINE * place, line) for place, line in enumerate(self.names)]


@dataclass(frozen=True)
class Chart:
    """One score of one sheet; all places are in the picture's own units."""

    title: str
    height: float
    curves: Sequence[Curve]
    ticks: Sequence[tuple[float, str]]
    levels: Sequence[tuple[float, str]]
    limits: Sequence[tuple[float, str]]
    crossings: Sequence[Mapping[str, float]] = field(default_factory=tuple)
    left: float = LEFT
    right: float = WIDTH - RIGHT
    top: float = TOP
    width: float = WIDTH

    @property
    def opacity(self) -> float:
        """How opaque each band is."""
        return round(band_opacity(len(self.curves)), 3)

    @property
    def endless(self) -> bool:
        """Whether any median is infinite."""
        return any(curve.beyond for curve in self.curves)

    @property
    def bottom(self) -> float:
        """Where the level axis lies."""
        return self.height - FOOT


def charts(grid: Grid, sheet: str, laws: Sequence[str], scores: Sequence[str]) -> Iterator[Chart]:
    """Yield the chart of each score of a sheet; none where there is no level beyond nominal."""
    for score in scores:
        chart = _Drawing(grid, sheet, laws, score).chart()
        if chart is not None:
            yield chart


class _Drawing:
    """Measures the axes first and places the curves then."""

    def __init__(self, grid: Grid, sheet: str, laws: Sequence[str], score: str) -> None:
        self.grid, self.sheet, self.score, results = grid, sheet, score, grid.results
        self.steps = ladder(results.columns)
        self.axis = LevelAxis(results)
        self.found: dict[str, list[tuple[float, Measure]]] = {}
        for law in laws:
            cells = (
                (step.level or 0.0, grid.cell(sheet, law, step).measures.get(score)) for step in self.steps
            )
            known = [(at, measure) for at, measure in cells if measure is not None]
            if known:
                self.found[law] = known
        self.numbers = {law: number for number, law in enumerate(laws)}
        every = (each for known in self.found.values() for _, m in known for each in _ends(m))
        self.finite = [value for value in every if math.isfinite(value)] + self._limits()
        self.names = {law: wrap_name(law, NAME, len) for law in self.found}
        self.heights = [LABEL + LINE * (len(lines) - 1) for lines in self.names.values()]
        self.height = max(LEAST_HEIGHT, sum(self.heights)) + TOP + FOOT

    def _limits(self) -> list[float]:
        tolerance = self.grid.results.tolerance
        if tolerance is None:
            return []
        every = (tolerance.limits, *tolerance.motions.values())
        return sorted({limits[self.score] for limits in every if self.score in limits})

    def chart(self) -> Chart | None:
        """Return the chart; None without two levels, or without a finite value."""
        if self.axis.steps == 0 or not self.finite or not self.found:
            return None
        least, most = min(self.finite), max(self.finite)
        self.log = least > 0 and most > SPAN * least
        if self.log:
            self.low, self.high = math.log10(least) - 0.05, math.log10(most) + 0.08
        else:
            self.low, self.high = 0.0, 1.08 * most or 1.0
        words, unit = score_words(self.score)
        curves = [self._curve(law, known) for law, known in self.found.items()]
        labels = spread(
            [curve.end[1] if curve.end else TOP for curve in curves],
            self.heights,
            TOP - 6,
            self._bottom + 6,
        )
        return Chart(
            title=f"{words} [{unit}]" if unit else words,
            height=self.height,
            curves=[Curve(**(vars(curve) | {"label": at})) for curve, at in zip(curves, labels, strict=True)],
            ticks=[(self._y(value), f"{value:g}") for value in self._ticks()],
            levels=[(self._x(at), level(at)) for at in self.axis.levels],
            limits=[(self._y(limit), f"{limit:g}") for limit in self._limits()],
            crossings=list(self._crossings()),
        )

    @property
    def _bottom(self) -> float:
        return self.height - FOOT

    def _x(self, at: float) -> float:
        share = min(self.axis.place(at), self.axis.steps) / self.axis.steps
        return round(LEFT + 14 + share * (WIDTH - RIGHT - LEFT - 28), 1)

    def _y(self, value: float) -> float:
        """Return the height of a value; what is infinite lies at the upper edge."""
        if math.isinf(value):
            return TOP
        at = math.log10(max(value, 1e-300)) if self.log else value
        share = min(max((at - self.low) / (self.high - self.low), 0.0), 1.0)
        return round(self._bottom - share * (self._bottom - TOP), 1)

    def _ticks(self) -> list[float]:
        """Return the round numbers on the axis: 1, 2 and 5 of each decade, or fewer where there are many."""
        if self.log:
            decades = range(math.floor(self.low), math.ceil(self.high) + 1)
            parts = (1, 2, 5) if self.high - self.low < 2 else (1,) if self.high - self.low > 4 else (1, 3)
            every = [part * 10.0**decade for decade in decades for part in parts]
            return [value for value in every if self.low <= math.log10(value) <= self.high]
        step = 10.0 ** math.floor(math.log10(self.high / 4))
        step *= next(part for part in (1, 2, 5, 10) if self.high / (part * step) <= 6)
        return [k * step for k in range(int(self.high / step) + 1)]

    def _curve(self, law: str, known: Sequence[tuple[float, Measure]]) -> Curve:
        mark = mark_of(self.numbers[law])
        pieces: list[list[tuple[float, Measure]]] = [[]]
        for at, measure in known:
            if math.isfinite(measure.median):
                pieces[-1].append((at, measure))
            elif pieces[-1]:
                pieces.append([])
        spots = [(self._x(at), self._y(m.median)) for piece in pieces for at, m in piece]
        lost = [(self._x(at), TOP) for at, m in known if math.isinf(m.median)]
        ends = sorted([*spots, *lost])
        return Curve(
            law=law,
            names=self.names[law],
            tone=TONES.index(mark.tone),
            dashes=" ".join(f"{1.8 * part:.1f}" for part in mark.dashes),
            shape=PATHS[mark.shape],
            lines=[
                _points((self._x(at), self._y(m.median)) for at, m in piece)
                for piece in pieces
                if len(piece) > 1
            ],
            bands=[self._band(piece) for piece in pieces if len(piece) > 1],
            spots=spots,
            beyond=lost,
            end=ends[-1] if ends else None,
        )

    def _band(self, piece: Sequence[tuple[float, Measure]]) -> str:
        upper = [(self._x(at), self._y(m.median_high)) for at, m in piece]
        lower = [(self._x(at), self._y(m.median_low)) for at, m in reversed(piece)]
        return _points([*upper, *lower])

    def _crossings(self) -> Iterator[dict[str, float]]:
        """Yield the numbered break-even levels of the sheet and score, if they are few."""
        numbered = enumerate(self.grid.results.break_even, 1)
        found: list[tuple[int, Any]] = [
            (number, one)
            for number, one in numbered
            if one["sheet"] == self.sheet and one["score"] == self.score
        ]
        for place, (number, one) in enumerate(found if len(found) <= MARKED else ()):
            low, value, high = (self._x(one["level"][end]) for end in ("low", "value", "high"))
            yield {"number": number, "x": value, "low": low, "high": high, "y": self._bottom - 7 - 12 * place}


def _ends(measure: Measure) -> tuple[float, float, float]:
    return measure.median, measure.median_low, measure.median_high


def _points(places: Any) -> str:
    return " ".join(f"{x:g},{y:g}" for x, y in places)
