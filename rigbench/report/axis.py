"""The axis of levels that strips, curves and the order of the rows share."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.scores.results import Results

__all__ = ["LevelAxis"]


class LevelAxis:
    """The levels of the matrix, and the highest of a search, stand at equal distances.

    Others stand between them in proportion.

    Levels mostly double from one to the next and would crowd at the low end of a linear axis.
    """

    def __init__(self, results: Results) -> None:
        levels = {column.level or 0.0 for column in results.columns if column.ladder} | {0.0}
        if results.level_search is not None:
            levels.add(results.level_search.most)
        self.levels = sorted(levels)
        self.steps = len(self.levels) - 1

    def place(self, level: float) -> float:
        """Return where a level lies, in steps from level 0; what lies beyond all is one step further."""
        return float(self.places([level])[0])

    def places(self, levels: Sequence[float]) -> Floats:
        """Return where each level lies."""
        found: Floats = np.interp(levels, self.levels, range(self.steps + 1), right=self.steps + 1)
        return found
