"""Accuracy and repeatability after ISO 9283, as a table and as JSON."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from typing import Any

from rich.cells import cell_len

from rigbench.campaign.accuracy import CYCLES, MotionAccuracy
from rigbench.errors import counted
from rigbench.report.table import Lines, blocks
from rigbench.report.words import figure
from rigbench.report.wrapping import wrap
from rigbench.scores.iso9283 import Accuracy
from rigbench.scores.results import CellKey

__all__ = ["accuracy_json", "accuracy_text"]


def accuracy_text(key: CellKey, found: Sequence[MotionAccuracy], width: int) -> str:
    """Return the table: a row for each pose and path, with accuracy and repeatability in mm."""
    sheet, law, condition = key
    where = f"'{law}' under '{condition}'" + (f", {sheet}" if sheet else "")
    rows = [row for one in found for row in _rows(one)]
    if not rows:
        why = (
            "no run has the machine's verdict" if not found else "no motion has a rest or leads along a path"
        )
        return "\n".join(wrap(f"Nothing to tell of {where}: {why}.", width, cell_len))
    runs = min(one.runs for one in found)
    said = (
        f"{where}, {counted(runs, 'run')} of one machine. After ISO 9283: accuracy AP of a pose, AT of a "
        "path; repeatability RP, RT. At the end of each rest; a path's are its worst."
    )
    if runs < CYCLES:
        said += f" The standard asks for {CYCLES} runs of poses, 10 of paths."
    otherwise = sum(one.otherwise for one in found)
    if otherwise:
        said += f" {counted(otherwise, 'replay')} came out otherwise than stored ('rigbench trace' says why)."
    first: Lines = [[""], *([name] for name, _, _ in rows)]
    columns: list[Lines] = [
        [["accuracy [mm]"], *([accuracy] for _, accuracy, _ in rows)],
        [["repeatability [mm]"], *([repeatability] for _, _, repeatability in rows)],
    ]
    return "\n\n".join(["\n".join(wrap(said, width, cell_len)), *blocks(first, columns, width)])


def _rows(one: MotionAccuracy) -> Iterator[tuple[str, str, str]]:
    for number, pose in enumerate(one.poses, 1):
        yield f"{one.motion}, pose {number}", *_both(pose)
    if one.path is not None:
        yield f"{one.motion}, path", *_both(one.path)


def _both(found: Accuracy) -> tuple[str, str]:
    return _mm(found.accuracy), _mm(found.repeatability)


def _mm(value: float | None) -> str:
    if value is None:
        return "-"
    return "did not finish" if math.isinf(value) else figure(value)


def accuracy_json(key: CellKey, found: Sequence[MotionAccuracy]) -> dict[str, Any]:
    """Return the same as values for the JSON form, in mm."""
    return {
        "sheet": key[0],
        "law": key[1],
        "condition": key[2],
        "motions": {
            one.motion: {
                "runs": one.runs,
                "poses": [{"ap_mm": pose.accuracy, "rp_mm": pose.repeatability} for pose in one.poses],
                "path": None
                if one.path is None
                else {"at_mm": one.path.accuracy, "rt_mm": one.path.repeatability},
                "not_as_stored": one.otherwise,
            }
            for one in found
        },
    }
