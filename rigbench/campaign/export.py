"""The store as CSV: one row a run."""

from __future__ import annotations

import csv
import math
from collections.abc import Sequence
from typing import TextIO

from rigbench.campaign.reading import Reader, Record
from rigbench.scores.names import in_display_order

__all__ = ["export_csv"]

NAMES = ("sheet", "law", "motion", "condition", "level", "draw", "outcome", "reason", "key")


def export_csv(store: Reader, stream: TextIO) -> int:
    """Write the stored runs in the order of the plan, and return how many there are.

    Columns: sheet, law, motion, condition, level, draw, outcome, reason, key; every score (the unit is
    in its name); residual_rad_s, how far engine and drive disagree; draw.<parameter>, the factor u in
    [-1, 1) of each parameter that was random in the run; wall_s, how long the run took here.
    Infinite is 'inf', what there is not is empty, and numbers read back as exactly what they were.
    """
    out = csv.writer(stream, lineterminator="\n")
    written = 0
    with store.one_moment():
        draws = store.draw_values()
        scores = in_display_order(name for record in store.records() for name in record.row.scores)
        parameters = sorted({name for values in draws.values() for name in values})
        out.writerow([*NAMES, *scores, "residual_rad_s", *(f"draw.{name}" for name in parameters), "wall_s"])
        for record in store.records():
            out.writerow(_line(record, scores, parameters, draws))
            written += 1
    return written


def _line(
    record: Record, scores: Sequence[str], parameters: Sequence[str], draws: dict[int, dict[str, float]]
) -> list[object]:
    row = record.row
    acting = {} if row.draw is None else draws.get(row.draw, {})
    return [
        row.sheet, row.law, row.motion, row.condition, _number(row.level), row.draw,
        row.outcome, row.reason, record.key,
        *(_number(row.scores.get(name)) for name in scores),
        _number(record.residual),
        *(_number(acting.get(name)) if name.split(".")[0] in record.sources else None for name in parameters),
        _number(record.wall_s),
    ]  # fmt: skip


def _number(value: float | None) -> str | None:
    if value is None:
        return None
    return "inf" if value == math.inf else repr(float(value))
