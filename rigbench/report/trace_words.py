"""What the page of a replayed run says in words."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping

import numpy as np

from rigbench.arm.arm import PRISMATIC, Floats
from rigbench.campaign.find import main_score_of
from rigbench.campaign.labels import Labels
from rigbench.campaign.replay import Replay
from rigbench.report.drawn import case_words
from rigbench.report.words import figure, level, quantity
from rigbench.scores.names import in_display_order, score_words

__all__ = [
    "ANGLE",
    "TOOL",
    "error_words",
    "head_lines",
    "limits_of",
    "run_words",
    "shortened",
    "tool_words",
    "torque_words",
]

TOOL, ANGLE = "tool_peak_mm", "tool_angle_peak_deg"
"""The scores whose course over time has a panel of its own."""

ALSO_TOLD = ("joint_peak_deg", "joint_peak_mm", "saturated_percent")
MOST_DIFFERENCES = 4

Limits = Mapping[str, float]


def limits_of(replay: Replay, labels: Labels) -> Limits:
    """Return the limits that hold in the run's motion."""
    return {} if labels.tolerance is None else labels.tolerance.limits_for(replay.record.row.motion)


def run_words(replay: Replay) -> str:
    """Name the run: its law, motion, condition and sheet."""
    row = replay.record.row
    return f"{row.law} on {row.motion}, {row.condition}" + (f" ({row.sheet})" if row.sheet else "")


def head_lines(replay: Replay, labels: Labels) -> tuple[str, str, str]:
    """Say which run it is, what came of it, and whether it is the stored one."""
    return _which(replay, labels), _outcome(replay, labels), _same(replay)


def _which(replay: Replay, labels: Labels) -> str:
    run, draw = replay.run, replay.record.row.draw
    parts = [labels.title, f"arm {labels.arm}"]
    if draw is not None:
        parts.append(f"draw {draw} at level {level(run.level)}" if run.level else f"draw {draw}")
    case = case_words(run)
    parts += [f"case: {case}"] if case else []
    return f"{'; '.join(parts)}; run {replay.record.key}."


def _outcome(replay: Replay, labels: Labels) -> str:
    if replay.log.outcome != "finished":
        return f"Ended early ({replay.log.outcome}): {replay.log.reason}."
    limits, said = limits_of(replay, labels), []
    for name in in_display_order([main_score_of(labels), *limits, *ALSO_TOLD]):
        if name in replay.scores:
            limit = f" (at most {limits[name]:g})" if name in limits else ""
            said.append(f"{score_words(name)[0]} {quantity(replay.scores[name], name)}{limit}")
    return f"Finished: {', '.join(said)}."


def _same(replay: Replay) -> str:
    if replay.identical:
        return "Replayed bit for bit: outcome and scores are the stored ones."
    names = [score_words(one.name)[0] for one in replay.differences]
    more = len(names) - MOST_DIFFERENCES
    said = ", ".join(names[:MOST_DIFFERENCES]) + (f" and {more} more" if more > 0 else "")
    return f"NOT the stored run ({said} came out otherwise): {'; '.join(replay.reasons)}."


def error_words(error: Floats, limit: float | None) -> str:
    """Say how large a joint's error gets, and may get."""
    peak = f"peak {figure(float(np.abs(error).max()))}" if error.size else ""
    return peak if limit is None else f"{peak}, at most {limit:g}"


def torque_words(replay: Replay, i: int) -> tuple[str, str]:
    """Return the title of the torque of joint i, and a note about its limit."""
    plant, limited = replay.log.plant, replay.log.limited[:, i]
    most = float(plant.drives.torque_limit[i])
    note = f"limit {figure(most)}" if math.isfinite(most) else "no limit"
    if limited.any():
        note += f", limited {figure(100 * float(limited.mean()))} % of the time"
    return f"torque [{'N' if plant.kinds[i] == PRISMATIC else 'N m'}]", note


def tool_words(name: str, values: Floats, limits: Limits) -> tuple[str, str]:
    """Return the title of the course of TOOL or ANGLE, and a note about its peak."""
    words, unit = score_words(name)
    note = f"peak {figure(float(values.max()))}" if values.size else ""
    if name in limits:
        note += f", at most {limits[name]:g}"
    return f"{words.removesuffix(' peak')} error [{unit}]", note


def shortened(text: str, width: float, measure: Callable[[str], float]) -> str:
    """Return the text, cut short with an ellipsis if it measures more than ``width``."""
    if measure(text) <= width:
        return text
    while text and measure(f"{text}\u2026") > width:
        text = text[:-1]
    return f"{text.rstrip()}\u2026"
