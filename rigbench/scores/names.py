"""The names of all scores, with their units and what they mean."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

__all__ = [
    "SCORES",
    "TOOL_SCORES",
    "ScoreInfo",
    "in_display_order",
    "main_score",
    "score_info",
    "score_words",
]


@dataclass(frozen=True)
class ScoreInfo:
    """What a score is.

    ``words`` is how a sentence calls it, ``unit`` as it is written ('' for a ratio). ``per_joint``: a
    value for each joint exists too, named ``score.joint``. ``host``: it tells about the computer and not
    about the machine, so it is informative, never exact, and a run that did not finish says nothing about it.
    """

    words: str
    unit: str
    doc: str
    per_joint: bool = False
    host: bool = False


def _joint(words: str, unit: str, doc: str) -> ScoreInfo:
    return ScoreInfo(words, unit, doc, per_joint=True)


def _host(words: str, unit: str, doc: str) -> ScoreInfo:
    return ScoreInfo(words, unit, doc, host=True)


SCORES: Mapping[str, ScoreInfo] = MappingProxyType(
    {
        "tool_peak_mm": ScoreInfo(
            "tool peak", "mm", "largest distance between commanded and attained tool point"
        ),
        "tool_rms_mm": ScoreInfo("tool RMS", "mm", "RMS over time of the tool point's distance"),
        "tool_angle_peak_deg": ScoreInfo(
            "tool angle peak", "deg", "largest angle between commanded and attained tool frame"
        ),
        "path_peak_mm": ScoreInfo(
            "path peak", "mm", "largest distance of the tool point from the path, at any time"
        ),
        "overshoot_mm": ScoreInfo("overshoot", "mm", "how far the tool point passes its target, worst rest"),
        "settle_ms": ScoreInfo(
            "settling time", "ms", "time until the tool point stays in its band, worst rest"
        ),
        "joint_peak_deg": _joint("joint peak", "deg", "largest position error of any revolute joint"),
        "joint_rms_deg": _joint("joint RMS", "deg", "RMS over time of the revolute joints' errors"),
        "joint_peak_mm": _joint("joint peak", "mm", "largest position error of any prismatic joint"),
        "joint_rms_mm": _joint("joint RMS", "mm", "RMS over time of the prismatic joints' errors"),
        "torque_peak_percent": _joint("torque peak", "percent", "largest torque over its limit, worst joint"),
        "torque_rms_percent": _joint("torque RMS", "percent", "RMS torque over its limit, worst joint"),
        "saturated_percent": ScoreInfo(
            "saturated", "percent", "share of ticks at which any joint's torque was limited"
        ),
        "chatter": ScoreInfo(
            "chatter", "", "RMS of the tick-to-tick torque change over its limit, worst joint"
        ),
        "energy_j": ScoreInfo("energy", "J", "integral of the positive mechanical power of the motors"),
        "law_us": _host("law's time per tick", "us", "median time of the law per control tick, on this host"),
        "law_share_percent": _host(
            "law's share of the control period", "percent", "law_us over the control period"
        ),
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


def score_words(name: str) -> tuple[str, str]:
    """Return a score's name in words and its unit ('' for none), as a sentence or a table has them.

    ``tool_peak_mm`` -> ('tool peak', 'mm'); ``joint_peak_deg.j1`` -> ('joint peak of j1', 'deg'). What
    is no score of ours keeps its name and has no unit.
    """
    info = score_info(name)
    if info is None:
        return name.replace("_", " "), ""
    joint = name.partition(".")[2]
    words = f"{info.words} of {joint}" if joint else info.words
    return words, info.unit.replace("percent", "%")


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
