"""Which column of the matrix is meant."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from rigbench.scores.results import Column

__all__ = ["condition_of", "telling_column"]


def telling_column(columns: Iterable[Column]) -> Column | None:
    """Return the condition that tells most of laws at a glance: all sources together, nearest to level 1.

    Else any that is random, else any at all.
    """

    def distance(column: Column) -> tuple[bool, bool, float]:
        level = 0.0 if column.level is None else column.level
        return not column.random, not column.ladder, abs(level - 1.0)

    return min(columns, key=distance, default=None)


def condition_of(columns: Sequence[Column], condition: str | None, level: float | None) -> str:
    """Return the ``condition`` that is named, or that of all sources together at a ``level``, run as it is.

    Without either it is the telling one.
    """
    if condition is not None:
        return condition
    if level is not None:
        return next(column.name for column in columns if column.ladder and (column.level or 0.0) == level)
    column = telling_column(columns)
    return "" if column is None else column.name
