"""How large type and cells are: three styles, each for more cells than the one before."""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["DENSE", "ROOMY", "SHEET_SIZE", "STYLES", "TIGHT", "Style"]


@dataclass(frozen=True)
class Style:
    """Sizes of type and widths [pt] of a matrix.

    ``cell_least`` and ``cell_most`` bound the width of a cell's text, ``law_most`` that of a law's name
    before it is broken; ``strip`` is the least width of the strip of levels. ``full`` names the main score
    in every cell.
    """

    figure: float
    small: float
    head: float
    law: float
    cell_least: float
    cell_most: float
    law_most: float
    strip: float
    pad: float
    full: bool


ROOMY = Style(17, 8.5, 9.5, 11, cell_least=40, cell_most=118, law_most=130, strip=130, pad=5, full=True)
TIGHT = Style(15, 7.5, 8.5, 10, cell_least=40, cell_most=54, law_most=120, strip=130, pad=4, full=False)
DENSE = Style(13, 7.0, 7.5, 8.5, cell_least=36, cell_most=46, law_most=92, strip=92, pad=2.2, full=False)
STYLES = (ROOMY, TIGHT, DENSE)

SHEET_SIZE = 12.0
"""Type of a sheet's name."""
