"""What changed from one store to another, in a sentence and as JSON."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from rigbench.errors import counted
from rigbench.scores.changes import KINDS, Changes
from rigbench.scores.results import Cell

__all__ = ["changes_json", "changes_words"]

MOST = 3


def changes_words(changes: Changes, other: str) -> str:
    """Say how many cells changed against the store named ``other``, and what only one of the stores has."""
    cells = ", ".join(f"{changes.count(kind)} {kind}" for kind in KINDS if changes.count(kind))
    of = f"Against {other}, on the same draws: of {counted(len(changes.cells), 'cell')}"
    said = [f"{of} {cells}".rstrip()]
    for where, only in ((f"only in {other}", changes.only_before), (f"not in {other}", changes.only_after)):
        if only:
            said.append(f"{where}: {', '.join(_named(only))}")
    return "; ".join(said) + "."


def _named(only: Mapping[str, tuple[str, ...]]) -> Iterator[str]:
    for what, names in only.items():
        shown = ", ".join(f"'{name}'" for name in names[:MOST])
        more = f" and {len(names) - MOST} more" if len(names) > MOST else ""
        yield f"{what if len(names) == 1 else f'{what}s'} {shown}{more}"


def changes_json(changes: Changes) -> dict[str, Any]:
    """Return the changes as values for the JSON form: every cell with its kind, and its numbers then and now.

    ``difference`` is that of ``score``, now less then, draw by draw; null without draws in common.
    """
    return {
        "score": changes.score,
        "cells": [
            {
                "sheet": key[0],
                "law": key[1],
                "condition": key[2],
                "change": change.kind,
                "before": None if change.before is None else _numbers(change.before, changes.score),
                "after": _numbers(change.after, changes.score),
                "difference": None if change.difference is None else vars(change.difference),
            }
            for key, change in changes.cells.items()
        ],
        "only_before": changes.only_before,
        "only_after": changes.only_after,
    }


def _numbers(cell: Cell, score: str) -> dict[str, Any]:
    measure = cell.measures.get(score)
    return {
        "draws": cell.draws,
        "pass_share": cell.pass_share,
        "pass_low": cell.pass_low,
        "pass_high": cell.pass_high,
        "verdict": cell.verdict or None,
        score: None if measure is None else vars(measure),
    }
