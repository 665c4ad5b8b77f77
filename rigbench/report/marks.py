"""How each law's curve is told from the others: by marker, dash and tone, each enough in grey print."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from rigbench.report.paper import Paper, Point

__all__ = ["Mark", "band_opacity", "mark_of"]

SHAPES = ("o", "s", "^", "D", "v", "P", "X", "p", "<", ">", "d", "h")
DASHES: tuple[tuple[float, ...], ...] = (
    (), (4, 2), (1.2, 1.4), (6, 1.6, 1.2, 1.6), (8, 2.5), (3, 1.4, 1.2, 1.4, 1.2, 1.4), (2, 3.2),
)  # fmt: skip
TONES = ("#1d4a75", "#9a5b13", "#4f5d68", "#6a4c93")
SIZES = {"o": 7.0, "s": 6.2, "D": 5.6, "P": 7.4, "X": 7.2}
LINE_WIDTH, BAR_WIDTH = 1.2, 1.1
PALER = 0.45
BAND, BANDS = 0.13, 0.5
"""Opacity of one band, and of all bands on top of each other, at most."""


@dataclass(frozen=True)
class Mark:
    """A law's marker shape, dashes and tone."""

    shape: str
    dashes: tuple[float, ...]
    tone: str

    def point(self, paper: Paper, x: float, y: float, filled: bool, name: str = "") -> None:
        """Draw the marker, hollow unless ``filled``."""
        size, fill = SIZES.get(self.shape, 7.0), self.tone if filled else "white"
        paper.marker(x, y, size, self.shape, fill=fill, edge=self.tone, name=name)

    def line(self, paper: Paper, start: Point, end: Point, name: str = "") -> None:
        """Draw a piece of the curve."""
        paper.stroke(start, end, color=self.tone, line=LINE_WIDTH, dashes=self.dashes, order=1.9, name=name)

    def path(self, paper: Paper, points: Sequence[Point], name: str = "") -> None:
        """Draw a curve that goes through points."""
        paper.path(points, color=self.tone, line=LINE_WIDTH, dashes=self.dashes, name=name)

    def bar(self, paper: Paper, x: float, ends: Point, open_end: bool) -> None:
        """Draw the interval from its low end up to its high one: with a stop there, or open with an arrow."""
        (low, high), pale = ends, _paler(self.tone)
        paper.stroke((x, low), (x, high), color=pale, line=BAR_WIDTH, order=1.8)
        paper.stroke((x - 3, low), (x + 3, low), color=pale, line=BAR_WIDTH, order=1.8)
        if open_end:
            paper.shape([(x - 3.4, high + 5.5), (x, high - 1), (x + 3.4, high + 5.5)], pale)
        else:
            paper.stroke((x - 3, high), (x + 3, high), color=pale, line=BAR_WIDTH, order=1.8)


def mark_of(number: int) -> Mark:
    """Return the mark of law number ``number``, from 0; the first 84 differ in shape or dashes."""
    return Mark(SHAPES[number % len(SHAPES)], DASHES[number % len(DASHES)], TONES[number % len(TONES)])


def band_opacity(bands: int) -> float:
    """Return how opaque each of so many bands is: so little that curves show where all lie on each other."""
    return float(min(BAND, 1.0 - (1.0 - BANDS) ** (1.0 / max(bands, 1))))


def _paler(tone: str) -> str:
    parts = (int(tone[at : at + 2], 16) for at in (1, 3, 5))
    return "#" + "".join(f"{round(part + (255 - part) * PALER):02x}" for part in parts)
