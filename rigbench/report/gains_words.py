"""The gains that a search found, in words."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from rigbench.campaign.studies.tune import Aim, GainsFound
from rigbench.scores.names import score_words

__all__ = ["aim_words", "declared_words", "found_words", "gains_words", "law_words"]


def law_words(one: GainsFound) -> str:
    """Return the law, and its sheet where there are several."""
    return f"{one.law} ({one.sheet})" if one.sheet else one.law


def gains_words(gains: Mapping[str, float]) -> str:
    """Return gains: 'natural_hz 12.5, damping 0.8'."""
    return ", ".join(f"{name} {value:g}" for name, value in gains.items())


def aim_words(aim: Aim) -> str:
    """Say what was looked for: the least score, and within which limits."""
    return "; ".join([f"least {score_words(aim.score)[0]} on the nominal machine", *_limits(aim)])


def _limits(aim: Aim) -> Iterator[str]:
    for name, most in aim.most.items():
        words, unit = score_words(name)
        yield f"{words} at most {most:g} {unit}".rstrip()
    if aim.delay_margin_ms:
        yield f"{aim.delay_margin_ms:g} ms more delay borne"


def found_words(one: GainsFound, aim: Aim) -> str:
    """Return the score of gains found within the limits, and which of them are at an end of their range."""
    ends = [f"{name} at the end of its range" for name in one.at_ends]
    return "; ".join([f"{score_words(aim.score)[0]} {_score(one.score, aim)}", *ends])


def declared_words(one: GainsFound, aim: Aim) -> str:
    """Return the score of the declared gains, and whether it is outside the limits."""
    before = "not run" if one.score_declared is None else _score(one.score_declared, aim)
    return before if one.within_declared else f"{before}, outside the limits"


def _score(value: float, aim: Aim) -> str:
    return f"{value:.3g} {score_words(aim.score)[1]}".rstrip()
