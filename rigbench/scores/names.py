"""The names of all scores, with their units and what they mean."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

__all__ = ["SCORES", "TOOL_SCORES", "ScoreInfo", "in_display_order", "main_score", "score_info"]


@dataclass(frozen=True)
class ScoreInfo:
    """What a score is.

    ``unit`` as it is written ('' for a ratio). ``per_joint``: a value for each joint exists too,
    named ``score.joint``. ``host``: it tells about the computer and not about the machine, so it is
    informative, never exact, and a run that did not finish says nothing about it.
    """

    unit: str
    doc: str
    per_joint: bool = False
    host: bool = False


SCORES: Mapping[str, ScoreInfo] = MappingProxyType(
    {
        "tool_peak_mm": ScoreInfo("mm", "largest distance between commanded and attained tool point"),
        "tool_rms_mm": ScoreInfo("mm", "RMS over time of the tool point's distance"),
        "tool_angle_peak_deg": ScoreInfo("deg", "largest angle between commanded and attained tool frame"),
        "path_peak_mm": ScoreInfo("mm", "largest distance of the tool point from the path, at any time"),
        "overshoot_mm": ScoreInfo("mm", "how far the tool point passes its target, worst rest"),
        "settle_ms": ScoreInfo("ms", "time until the tool point stays in its band, worst rest"),
        "joint_peak_deg": ScoreInfo("deg", "largest position error of any revolute joint", per_joint=True),
        "joint_rms_deg": ScoreInfo("deg", "RMS over time of the revolute joints' errors", per_joint=True),
        "joint_peak_mm": ScoreInfo("mm", "largest position error of any prismatic joint", per_joint=True),
        "joint_rms_mm": ScoreInfo("mm", "RMS over time of the prismatic joints' errors", per_joint=True),
        "torque_peak_percent": ScoreInfo(
            "percent", "largest torque over its limit, worst joint", per_joint=True
        ),
        "torque_rms_percent": ScoreInfo("percent", "RMS torque over its limit, worst joint", per_joint=True),
        "saturated_percent": ScoreInfo("percent", "share of ticks at which any joint's torque was limited"),
        "chatter": ScoreInfo("", "RMS of the tick-to-tick torque change over its limit, worst joint"),
        "energy_j": ScoreInfo("J", "integral of the positive mechanical power of the motors"),
        "law_us": ScoreInfo("us", "median time of the law per control tick, on this host", host=True),
        "law_share_percent": ScoreInfo("percent", "law_us over the control period", host=True),
    }
)
"""Every score, in display order. The value of joint j of a per-joint score is named ``score.j``."""

TOOL_SCORES = ("tool_peak_mm", "tool_rms_mm", "tool_angle_peak_deg", "path_peak_mm")
"""The scores by which laws are compared where the tolerance limits one of them."""


def score_info(name: str) -> ScoreInfo | None:
    """Return what ``name`` is, be it a whole score or one joint's; None if there is no such score."""
    if name in SCORES:
        return SCORES[name]
    base, dot, joint = name.partition(".")
    info = SCORES.get(base)
    return info if info is not None and info.per_joint and dot and joint else None


def in_display_order(names: Iterable[str]) -> tuple[str, ...]:
    """Return ``names`` without repeats: in the order of SCORES, a score before its joints' values.

    Joints keep the order in which they came; names that are no score of ours come last.
    """
    place = {name: index for index, name in enumerate(SCORES)}

    def key(name: str) -> tuple[int, bool]:
        base, dot, _ = name.partition(".")
        return place.get(base, len(place)), bool(dot)

    return tuple(sorted(dict.fromkeys(names), key=key))


def main_score(limited: Iterable[str] = ()) -> str:
    """Return the score by which laws are compared: the first limited one of the tool, else tool_peak_mm."""
    return next((name for name in limited if name in TOOL_SCORES), "tool_peak_mm")
