"""How a cell looks: one hue whose ink grows with the figure, and a gauge whose filling tells the verdict."""

from __future__ import annotations

from rigbench.report.paper import Paper, Point

__all__ = ["ABSENT", "FULL", "GAUGE", "GAUGE_WIDTH", "NONE", "draw_gauge", "shade"]

NONE = (246, 248, 251)
FULL = (150, 187, 224)
"""The two ends of the scale. Dark type stays readable on both, and grey print keeps them apart, which
shades from white to black would not allow; a test holds them to it."""

ABSENT = "#f4f4f2"
"""Where a cell can't be: as pale as the scale's end, without its hue."""

GAUGE = "#1d4a75"
GAUGE_WIDTH = 5.0


def shade(ink: float | None) -> str:
    """Return the colour for ``ink`` from 0 to 1; white for None, where there is nothing to show."""
    if ink is None:
        return "#ffffff"
    share = min(max(ink, 0.0), 1.0)
    mixed = (round(low + (high - low) * share) for low, high in zip(NONE, FULL, strict=True))
    return "#" + "".join(f"{part:02x}" for part in mixed)


def draw_gauge(paper: Paper, corner: Point, height: float, verdict: str, name: str = "") -> None:
    """Draw a verdict's gauge: full for 'keeps', half full for 'open', empty for 'misses', none for ''."""
    filled = {"keeps": 1.0, "open": 0.5, "misses": 0.0}.get(verdict)
    if filled is None:
        return
    (x, y), inset = corner, 0.4
    full = height - 2 * inset
    left, wide = x + inset, GAUGE_WIDTH - 2 * inset
    paper.box(left, y + inset, wide, full, fill="white", edge=GAUGE, name=name, order=1.2)
    if filled:
        top = y + inset + full * (1 - filled)
        paper.box(left, top, wide, full * filled, fill=GAUGE, name=name and f"{name}-full", order=1.3)
