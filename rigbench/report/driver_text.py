"""Which source's draws go with a law's score, or with its failures: as a table, and as JSON."""

from __future__ import annotations

from typing import Any

import numpy as np
from rich.cells import cell_len

from rigbench.errors import counted
from rigbench.report.drawn import UNITS, parameter_words
from rigbench.report.driver_data import DriverStrip, SourceStrip
from rigbench.report.table import Lines, blocks
from rigbench.report.wrapping import wrap
from rigbench.scores.drivers import Driver
from rigbench.scores.names import score_words

__all__ = ["MATTERS", "driver_json", "driver_text", "driver_words", "source_words", "strength_words"]

MATTERS = 0.05
"""The chance below which a source is shown to matter."""


def source_words(source: str) -> str:
    """Return 'link mass' for link_mass_percent: the unit says nothing about a draw."""
    base, _, unit = source.rpartition("_")
    return (base if unit in UNITS else source).replace("_", " ")


def driver_words(strip: DriverStrip) -> str:
    """Say in a sentence what drives the score."""
    sheet, law, condition = strip.key
    where = f"'{law}' under '{condition}'" + (f" ({sheet})" if sheet else "")
    name = score_words(strip.score)[0]
    if not len(strip.draws):
        return f"No draw of {where} counts yet, so nothing shows what drives its {name}."
    shown = [
        source_words(one.by_score.source)
        for one in strip.sources
        if one.by_score.strength is not None and one.by_score.chance < MATTERS
    ]
    failed = int(np.sum(~strip.passed))
    draws = f"over {counted(len(strip.draws), 'draw')}, of which {failed or 'none'} fail"
    if not shown:
        return f"No source is shown to drive the {name} of {where}, {draws}."
    order = " (strongest first)" if len(shown) > 1 else ""
    return f"The {name} of {where} goes with {', '.join(shown)}{order}, {draws}."


def strength_words(driver: Driver | None) -> str:
    """Say how strongly a source goes with something: '0.83', '0.12, not shown', '-' if nothing is known."""
    if driver is None or driver.strength is None:
        return "-"
    said = f"{driver.strength:.2f}"
    return said if driver.chance < MATTERS else f"{said}, not shown"


def parameter_said(strip: SourceStrip) -> str:
    """Say which parameter goes with the score most, and how: 'payload mass, size: +0.71'."""
    one = strip.by_score
    if one.parameter is None:
        return "-"
    return f"{parameter_words(one.parameter)}{', size' if one.by_size else ''}: {one.correlation:+.2f}"


def driver_text(strip: DriverStrip, width: int) -> str:
    """Return sentence and table, no wider than ``width``: sources down, the strongest first."""
    name = score_words(strip.score)[0]
    parts = ["\n".join(wrap(driver_words(strip), width, cell_len))]
    if strip.sources and len(strip.draws):
        columns: list[Lines] = [
            [[f"with the {name}"], *([strength_words(one.by_score)] for one in strip.sources)],
            [["with failing"], *([strength_words(one.by_failing)] for one in strip.sources)],
            [["strongest parameter: rank correlation"], *([parameter_said(one)] for one in strip.sources)],
        ]
        first: Lines = [[""], *([source_words(one.by_score.source)] for one in strip.sources)]
        parts += blocks(first, columns, width)
        said = (
            "0 to 1: multiple correlation of ranks, adjusted; 'not shown' where more than 5 % of random "
            "orders go with the source as strongly; 'size': departures to either side do alike."
        )
        parts.append("\n".join(wrap(said, width, cell_len)))
    return "\n\n".join(parts)


def driver_json(strip: DriverStrip) -> dict[str, Any]:
    """Return the strip as values for the JSON form; None where there is nothing to tell."""
    return {
        "sheet": strip.key[0],
        "law": strip.key[1],
        "condition": strip.key[2],
        "score": strip.score,
        "draws": len(strip.draws),
        "failed": int(np.sum(~strip.passed)),
        "sources": [
            {
                "source": one.by_score.source,
                "with_score": _driver(one.by_score),
                "with_failing": None if one.by_failing is None else _driver(one.by_failing),
            }
            for one in strip.sources
        ],
    }


def _driver(driver: Driver) -> dict[str, Any]:
    return {name: value for name, value in vars(driver).items() if name != "source"}
