"""Invented results of any extent, for the tests of what reports them."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Collection, Sequence
from dataclasses import replace

import numpy as np
import pytest
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.text import Text
from matplotlib.transforms import Bbox

from rigbench.report.matrix import text_boxes
from rigbench.scores.cell import CountedDraws
from rigbench.scores.comparison import Comparison
from rigbench.scores.results import (
    Cell,
    Column,
    LawStanding,
    Measure,
    MotionCell,
    Results,
    Tolerance,
    Tolerated,
)

LAWS = (
    "computed torque",
    "feedforward (model_hz 100)",
    "pd + gravity",
    "joint pd",
    "feedforward (model_hz 50)",
    "feedforward (model_hz 500)",
    "mine",
    "sliding",
    "computed torque (natural_hz 8, damping 0.7)",
    "passive",
    "adaptive",
    "robust",
)
SOURCES = ("link mass", "link cog", "link inertia", "payload", "coulomb", "viscous", "rotor inertia")
CASES = ("full tray", "cold morning", "worn gearbox", "two trays", "oven door")
LEVELS = (0.25, 0.5, 1, 1.5, 2, 3, 4)
LIMITS = {"tool_peak_mm": 3.0, "tool_angle_peak_deg": 0.5, "settle_ms": 250.0, "joint_peak_deg.j1": 0.05}


def wilson(passed: int, draws: int) -> tuple[float, float]:
    """The Wilson interval at 95 %, as in Wilson (1927)."""
    z2 = 1.959964**2 / draws
    share = passed / draws
    half = math.sqrt(z2 * (share * (1 - share) + z2 / 4))
    return max((share + z2 / 2 - half) / (1 + z2), 0.0), min((share + z2 / 2 + half) / (1 + z2), 1.0)


def columns_of(count: int) -> tuple[Column, ...]:
    nominal = Column("nominal", 0.0, random=False, ladder=True)
    alone = [Column(name, 1.0, random=True, ladder=False) for name in SOURCES]
    together = [Column(f"together {level:g}", level, random=True, ladder=True) for level in LEVELS]
    cases = [
        Column(name, 1.0 if number % 2 else None, random=bool(number % 2), ladder=False)
        for number, name in enumerate(CASES)
    ]
    if count <= len(LEVELS) + 1:
        return (nominal, *together)[:count]
    return (nominal, *alone, *together, *cases)[:count]


def cell_of(
    sheet: str,
    law: str,
    column: Column,
    *,
    passed: int,
    draws: int,
    incomplete: int = 0,
    median: float = 1.8,
    tolerance: bool = True,
    best: bool = False,
    unfinished: int = 0,
) -> Cell:
    low, high, share, verdict = None, None, None, "open" if tolerance else ""
    if tolerance and draws:
        share = passed / draws
        low, high = wilson(passed, draws) if column.random else (share, share)
        verdict = "keeps" if low >= 0.95 else "misses" if high < 0.95 else "open"
    if column.random:
        peak = Measure(median, median * 0.9, median * 1.2, median * 2, median * 1.6, math.inf)
        settle = Measure(120.0, 110.0, 130.0, 200.0, 180.0, math.inf)
    else:
        peak, settle = Measure(*[median] * 6), Measure(*[120.0] * 6)
    measures = {"tool_peak_mm": peak, "settle_ms": settle} if draws else {}
    motions = {"load tray": MotionCell(passed, draws, measures)}
    times = Comparison(median / 0.7, median / 0.8, median / 0.6, draws, False)
    return Cell(
        sheet, law, column.name, column.level, draws, incomplete, passed, share, low, high, verdict,
        measures, motions, best, unfinished, ratios={"tool_peak_mm": times} if draws else {},
    )  # fmt: skip


def counted_draws(cell: Cell) -> CountedDraws:
    """Draws that count, of which the first pass; the main score rises with the draw's number."""
    draws = np.arange(cell.draws)
    worst = np.full(cell.draws, math.inf)
    if cell.draws and math.isfinite(cell.measures["tool_peak_mm"].median):
        worst = cell.measures["tool_peak_mm"].median * np.linspace(0.5, 1.5, cell.draws)
    return CountedDraws(draws, np.isfinite(worst), draws < cell.passed, worst[:, None])


def not_possible(sheet: str, law: str, column: Column, tolerance: bool) -> Cell:
    cell = cell_of(sheet, law, column, passed=0, draws=0, tolerance=tolerance)
    return replace(cell, planned=0)


def build(
    laws: int | Sequence[str] = 4,
    columns: int | Sequence[Column] = 8,
    *,
    draws: int = 128,
    incomplete: int = 0,
    tolerance: bool = True,
    sheets: Sequence[str] = ("",),
    title: str = "Trays of unknown mass",
    unstable: bool = False,
    best: bool = True,
    impossible: Collection[tuple[str, str]] = (),
) -> Results:
    """Results in which laws get worse down the list, and all of them with the level; sheets differ.

    ``incomplete`` draws lack in every third cell; ``unstable``: the last law mostly does not finish;
    ``impossible``: pairs of sheet and law.
    """
    names = LAWS[:laws] if isinstance(laws, int) else tuple(laws)
    heads = columns_of(columns) if isinstance(columns, int) else tuple(columns)
    cells, standings = [], []
    for number, sheet in enumerate(sheets):
        for row, law in enumerate(names):
            ladder = []
            if (sheet, law) in impossible:
                cells += [not_possible(sheet, law, column, tolerance) for column in heads]
                standings.append(
                    LawStanding(sheet, law, Tolerated(None, 0.0, math.inf) if tolerance else None)
                )
                continue
            for place, column in enumerate(heads):
                harm = (column.level or 0.2) * (1 + 0.4 * row) * (1.0 if column.ladder else 0.4)
                harm *= 1 + 0.5 * math.sin(number * (1 + row / 3))
                planned = draws if column.random else 1
                missing = min(incomplete, planned) if (row + place) % 3 == 2 else 0
                counted = planned - missing
                passed = round(counted / (1 + math.exp(4 * harm - 7)))
                bad = unstable and row == len(names) - 1 and counted > 0
                cell = cell_of(
                    sheet, law, column, passed=0 if bad else passed, draws=counted, incomplete=missing,
                    median=math.inf if bad else 0.6 * (1 + harm) ** 1.5, tolerance=tolerance,
                    best=best and row == 0 and place % 3 == 1, unfinished=(3 * counted + 3) // 4 if bad else 0,
                )  # fmt: skip
                cells.append(cell)
                if column.ladder:
                    ladder.append(cell)
            high = min((c.level or 0.0 for c in ladder if c.verdict == "misses"), default=math.inf)
            kept = [c.level or 0.0 for c in ladder if c.verdict == "keeps" and (c.level or 0.0) < high]
            low = max(kept, default=0.0)
            value = None if math.isinf(high) else (low + high) / 2
            standings.append(LawStanding(sheet, law, Tolerated(value, low, high) if tolerance else None))
    planned = sum(c.draws + c.incomplete for c in cells)
    missing = sum(c.incomplete for c in cells)
    return Results(
        title=title,
        arm="tray6",
        motions=("load tray", "rim"),
        tolerance=Tolerance(LIMITS, 0.95) if tolerance else None,
        draws=draws,
        sheets=tuple(sheets),
        laws=names,
        columns=heads,
        cells=tuple(cells),
        standings=tuple(standings),
        planned=planned,
        done=planned - missing,
        failed=min(missing, 2),
        advice="Computed torque is shown to keep the tolerance up to level 1; feedforward is too close to call.",
        counted={cell.key: counted_draws(cell) for cell in cells if cell.planned},
        compared=("tool_peak_mm",),
    )


@pytest.fixture
def make_results() -> Callable[..., Results]:
    return build


@pytest.fixture
def make_cell() -> Callable[..., Cell]:
    return cell_of


class Look:
    """What can be seen on a figure."""

    @staticmethod
    def said(figure: Figure) -> str:
        """All text on the figure, in reading order of drawing."""
        return " ".join(text.get_text() for text, _ in text_boxes(figure))

    @staticmethod
    def texts(figure: Figure, prefix: str) -> dict[str, tuple[str, Bbox]]:
        """The texts whose name begins so, with their extents in points, by name."""
        named = ((str(text.get_gid() or ""), text.get_text(), box) for text, box in text_boxes(figure))
        return {name: (said, box) for name, said, box in named if name.startswith(prefix)}

    @staticmethod
    def rectangles(figure: Figure, prefix: str) -> dict[str, Rectangle]:
        """The rectangles whose name begins so, by name."""
        found = figure.findobj(lambda a: isinstance(a, Rectangle) and (a.get_gid() or "").startswith(prefix))
        return {str(patch.get_gid()): patch for patch in found if isinstance(patch, Rectangle)}

    @staticmethod
    def lines(figure: Figure, prefix: str) -> dict[str, list[Line2D]]:
        """The lines and markers whose name begins so, by name, in points from the upper left corner."""
        found: dict[str, list[Line2D]] = {}
        for line in figure.findobj(Line2D):
            if (line.get_gid() or "").startswith(prefix):
                found.setdefault(str(line.get_gid()), []).append(line)
        return found

    @staticmethod
    def extent(figure: Figure, patch: Rectangle) -> Bbox:
        """A rectangle's extent in points, as text_boxes gives those of text."""
        x, y, width, height = patch.get_x(), patch.get_y(), patch.get_width(), patch.get_height()
        top = figure.get_size_inches()[1] * 72
        return Bbox([[x, top - y - height], [x + width, top - y]])

    @staticmethod
    def clear(figure: Figure) -> list[tuple[Text, Bbox]]:
        """No two texts overlap, none leaves the figure, and none is under 7 pt; return them."""
        boxes = text_boxes(figure)
        width, height = figure.get_size_inches() * 72
        edges = np.array([box.extents for _, box in boxes])
        assert edges[:, :2].min() >= 0
        assert edges[:, 2].max() <= width
        assert edges[:, 3].max() <= height
        assert min(text.get_fontsize() for text, _ in boxes) >= 7
        meeting = [(boxes[i][0].get_text(), boxes[j][0].get_text()) for i, j in _meeting(edges)]
        assert not meeting
        return boxes

    @classmethod
    def tidy(cls, figure: Figure) -> None:
        """It is clear, and no two cells overlap; no text leaves its cell."""
        boxes = cls.clear(figure)
        cells = {name: cls.extent(figure, cell) for name, cell in cls.rectangles(figure, "cell-").items()}
        assert cells
        assert not _meeting(np.array([cell.extents for cell in cells.values()]))
        for text, box in boxes:
            place = re.match(r"text-(\d+-\d+-\d+)-", str(text.get_gid()))
            if place:
                cell = cells[f"cell-{place[1]}"]
                assert cell.x0 <= box.x0
                assert box.x1 <= cell.x1
                assert cell.y0 <= box.y0
                assert box.y1 <= cell.y1


def _meeting(boxes: np.ndarray) -> list[tuple[int, int]]:
    """Which of the boxes (left, low, right, high) overlap."""
    left, low, right, high = boxes.T
    meet = (left[:, None] < right) & (left < right[:, None]) & (low[:, None] < high) & (low < high[:, None])
    return [(int(i), int(j)) for i, j in np.argwhere(np.triu(meet, 1))]


@pytest.fixture
def look() -> type[Look]:
    return Look
