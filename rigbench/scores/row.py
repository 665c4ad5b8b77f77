"""What one finished run leaves behind: a row."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

__all__ = ["HOST_OUTCOMES", "MACHINE_OUTCOMES", "SETTLED_TROUBLES", "Row"]

MACHINE_OUTCOMES = ("finished", "diverged", "hit-stop")
"""The machine's verdicts: they count. A run that did not finish fails, with infinite error."""

SETTLED_TROUBLES = ("law-error", "no-plant", "disagrees")
"""The host's troubles that the same run would have again: the law's or scene's code raised; the draw makes
a plant that could not exist; engine and drive disagree about the machine (see Log.in_doubt)."""

HOST_OUTCOMES = (*SETTLED_TROUBLES, "timed-out", "crashed")
"""The host's troubles: they leave their cell incomplete and count neither for nor against a law."""


@dataclass(frozen=True)
class Row:
    """One run, named as the experiment names it, with its outcome and scores.

    ``draw`` is None where nothing is random. ``scores`` maps a score's name (joint_rms_deg,
    joint_rms_deg.j1, tool_peak_mm ...) to its value; it is empty unless the run finished. A value
    may be inf (it never settled); a score that the motion does not define is absent.
    """

    sheet: str
    law: str
    motion: str
    condition: str
    level: float | None
    draw: int | None
    outcome: str
    scores: Mapping[str, float] = field(default_factory=dict)
    reason: str = ""
