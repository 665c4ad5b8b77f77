"""A sheet of paper measured in points: text is measured before anything is placed, then drawn where it fits.

x runs to the right and y downwards from the upper left corner, both in points [1/72 inch]; sizes of
type are points too.
"""

from __future__ import annotations

import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import Any

import matplotlib
from matplotlib.artist import Artist
from matplotlib.backends.backend_agg import FigureCanvasAgg, RendererAgg
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties
from matplotlib.lines import Line2D
from matplotlib.patches import Polygon, Rectangle
from matplotlib.text import Text
from matplotlib.transforms import Affine2D, Bbox

from rigbench.report.wrapping import wrap

__all__ = ["INK", "LINE", "Paper", "Point", "steady_settings", "text_boxes"]

FONT = "DejaVu Sans"  # comes with matplotlib, so every machine draws and measures the same
INK = "#14202b"
QUIET = "#5b6873"
LEAST_SIZE = 7.0
Point = tuple[float, float]
LINE = 1.28
"""Height of a line of text in units of its size: an accented capital above a descender still fits."""
ASCENT = 0.98
PROBE = 20
"""Text is measured at this many times 72 dpi, where whole pixels no longer matter."""


@contextmanager
def steady_settings() -> Iterator[None]:
    """Draw by matplotlib's own defaults, not by the user's matplotlibrc, and the same bytes each time."""
    settings: dict[Any, Any] = {k: v for k, v in matplotlib.rcParamsDefault.items() if "backend" not in k}
    settings |= {"svg.hashsalt": "rigbench", "text.hinting": "no_hinting", "pdf.fonttype": 42}
    with warnings.catch_warnings(), matplotlib.rc_context(settings):
        warnings.filterwarnings("ignore", message="Glyph .* missing from", category=UserWarning)
        yield


class Paper:
    """Collects what is drawn and makes the figure when its extent is known."""

    def __init__(self) -> None:
        self._artists: list[Artist] = []
        self._widths: dict[tuple[str, float, bool], float] = {}
        self._probe: Any = RendererAgg(1, 1, 72 * PROBE)  # type: ignore[no-untyped-call]

    def width(self, text: str, size: float, bold: bool = False) -> float:
        """Return the width of one line of text."""
        key = (text, size, bold)
        if key not in self._widths:
            measured = self._probe.get_text_width_height_descent(text, _font(size, bold), ismath=False)
            self._widths[key] = measured[0] / PROBE
        return self._widths[key]

    def widest(self, lines: Sequence[str], size: float, bold: bool = False) -> float:
        """Return the width of the widest line, 0 for none."""
        return max((self.width(line, size, bold) for line in lines), default=0.0)

    def wrap(self, text: str, width: float, size: float, bold: bool = False) -> list[str]:
        """Break the text into lines no wider than ``width``."""
        return wrap(text, width, lambda line: self.width(line, size, bold))

    def text(
        self, x: float, top: float, line: str, size: float, *,
        bold: bool = False, at: str = "left", name: str = "", ink: str = INK,
    ) -> None:  # fmt: skip
        """Write one line with its upper edge at ``top``; ``at`` says which end, or its middle, is at x."""
        if not line:
            return
        artist = Text(
            x, top + ASCENT * size, line, color=ink, fontproperties=_font(max(size, LEAST_SIZE), bold),
            ha=at, va="baseline", parse_math=False, usetex=False,
        )  # fmt: skip
        self._add(artist, name, zorder=3)

    def lines(
        self, x: float, top: float, lines: Sequence[str], size: float, *,
        bold: bool = False, at: str = "left", name: str = "", ink: str = INK,
    ) -> float:  # fmt: skip
        """Write lines below each other and return where they end."""
        for number, line in enumerate(lines):
            y, called = top + number * LINE * size, name and f"{name}-{number}"
            self.text(x, y, line, size, bold=bold, at=at, name=called, ink=ink)
        return top + len(lines) * LINE * size

    def box(
        self, x: float, y: float, width: float, height: float, *, fill: str = "none", edge: str = "none",
        line: float = 0.8, name: str = "", order: float = 1,
    ) -> None:  # fmt: skip
        """Draw a rectangle whose upper left corner is at (x, y)."""
        patch = Rectangle((x, y), width, height, facecolor=fill, edgecolor=edge, linewidth=line)
        patch.set_joinstyle("miter")
        self._add(patch, name, zorder=order)

    def shape(self, corners: Sequence[Point], fill: str, *, opacity: float = 1.0, name: str = "") -> None:
        """Draw a filled polygon; one that is not opaque lies beneath all lines."""
        shape = Polygon(list(corners), closed=True, facecolor=fill, edgecolor="none", alpha=opacity)
        self._add(shape, name, zorder=2.2 if opacity == 1.0 else 1.1)

    def stroke(
        self, start: Point, end: Point, *, color: str, line: float,
        dashes: Sequence[float] = (), order: float = 1.5, name: str = "",
    ) -> None:  # fmt: skip
        """Draw a straight line; ``dashes`` are lengths of strokes and gaps in turn, in widths of the line."""
        (x0, y0), (x1, y1) = start, end
        drawn = Line2D([x0, x1], [y0, y1], color=color, linewidth=line, solid_capstyle="butt")
        if dashes:
            drawn.set_linestyle((0, tuple(dashes)))
        self._add(drawn, name, zorder=order)

    def path(
        self, points: Sequence[Point], *, color: str, line: float,
        dashes: Sequence[float] = (), name: str = "",
    ) -> None:  # fmt: skip
        """Draw straight lines from point to point; ``dashes`` as those of a stroke."""
        xs, ys = zip(*points, strict=True)
        drawn = Line2D(xs, ys, color=color, linewidth=line, solid_joinstyle="miter")
        if dashes:
            drawn.set_linestyle((0, tuple(dashes)))
        self._add(drawn, name, zorder=1.9)

    def marker(
        self, x: float, y: float, size: float, shape: str, *, fill: str, edge: str, name: str = ""
    ) -> None:
        """Draw a marker of one of matplotlib's shapes, edged."""
        drawn = Line2D([x], [y], marker=shape, markersize=size, color=fill)
        drawn.set_markeredgecolor(edge)
        drawn.set_markeredgewidth(1.0)
        self._add(drawn, name, zorder=2.5)

    def _add(self, artist: Artist, name: str = "", zorder: float = 1) -> None:
        artist.set_zorder(zorder)
        if name:
            artist.set_gid(name)
        self._artists.append(artist)

    def figure(self, width: float, height: float) -> Figure:
        """Return a figure of that extent with all that was drawn; call it once."""
        figure = Figure(figsize=(width / 72, height / 72), dpi=144, facecolor="white")
        FigureCanvasAgg(figure)
        points = Affine2D().scale(1, -1).translate(0, height).scale(1 / 72) + figure.dpi_scale_trans
        for artist in self._artists:
            artist.set_transform(points)
            figure.add_artist(artist)
        return figure


def _font(size: float, bold: bool) -> FontProperties:
    return FontProperties(family=FONT, size=size, weight="bold" if bold else "normal")


def text_boxes(figure: Figure) -> list[tuple[Text, Bbox]]:
    """Return each text drawn on the figure with its rendered extent [pt], y upwards from the lower edge."""
    renderer: Any = FigureCanvasAgg(figure).get_renderer()  # type: ignore[no-untyped-call]
    shrink = Affine2D().scale(72 / figure.dpi)
    with steady_settings():
        return [
            (text, Bbox(shrink.transform_bbox(text.get_window_extent(renderer))))
            for text in figure.findobj(Text)
            if text.get_text()
        ]
