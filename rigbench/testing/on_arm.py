"""One law on one arm against every rule that takes calls."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm
from rigbench.errors import LawError, counted
from rigbench.laws.law import Law
from rigbench.motion.via import ViaMotion
from rigbench.testing.play import Played, Stage
from rigbench.testing.rules import Findings
from rigbench.testing.simulated import run_law, setup_of
from rigbench.testing.ticks import CONTROL_HZ, ticks_for

__all__ = ["check_on"]

RARELY = 3
"""How many ticks a model term is held, where it is not worked out at each."""

CLOSE = 1e-9
"""By how much kernels may differ from the plain methods, as a share of the largest number: sums in another
order, and no more."""


def check_on(arm: Arm, make: Callable[[], Law], findings: Findings) -> tuple[float, float | None] | None:
    """Check the law on one arm; return its times a tick [us], None where it can't be called there."""
    ticks = ticks_for(arm)
    stage = Stage(_arm_words(arm), setup_of(arm, CONTROL_HZ, ticks[1][1]), ticks, findings)
    law = make()
    plain = stage.plain(law)
    if plain is None:
        return None
    again, anew = stage.plain(make()), stage.plain(law)
    if again is None or not plain.same(again):
        stage.blame("determinism", "a second law of the same class and options gives other torques")
    else:
        if anew is None or not plain.same(anew):
            stage.blame("start", "a law that is started once more gives other torques than at first")
        spoilt = stage.plain(make(), spoil=True)
        if spoilt is None or not plain.same(spoilt):
            stage.blame("references", "torques change with what becomes of the arrays of earlier calls")
    rare = stage.plain(make(), every=RARELY)
    kernels = _check_kernels(stage, make, plain, rare)
    _check_closed_loop(arm, stage, make())
    return _us(plain), None if kernels is None else _us(kernels)


def _check_kernels(
    stage: Stage, make: Callable[[], Law], plain: Played, rare: Played | None
) -> Played | None:
    law = make()
    kernels = stage.kernels(law)
    if kernels is None:
        return None
    _compare(stage, plain, kernels)
    anew = stage.kernels(law)
    if anew is None or not kernels.same(anew):
        stage.blame(
            "start", "the kernels of a law that is started once more give other torques than at first"
        )
    held = stage.kernels(make(), every=RARELY)
    if rare is not None and held is not None:
        _compare(stage, rare, held)
    return kernels


def _compare(stage: Stage, plain: Played, kernels: Played) -> None:
    pairs = (
        ("compiled model term", plain.terms, kernels.terms),
        ("compiled torque", plain.torques, kernels.torques),
    )
    for rule, one, other in pairs:
        for (t, *_), expected, found in zip(stage.ticks, one, other, strict=True):
            if expected.shape != found.shape:
                stage.blame(rule, f"{found.size} numbers by the kernel, {expected.size} by the method")
                return
            scale = np.abs(expected).max(initial=1.0)
            if not np.allclose(found, expected, rtol=0.0, atol=CLOSE * scale, equal_nan=True):
                stage.blame(rule, f"{found} by the kernel, {expected} by the method at t = {t:g} s")
                return  # what follows from a wrong term is not told as well


def _check_closed_loop(arm: Arm, stage: Stage, law: Law) -> None:
    if any(stage.arm in stage.findings.where.get(rule, ()) for rule in ("raises", "kernels")):
        return  # the rig would stumble over the same
    unit = np.where(arm.kinds == PRISMATIC, 0.1, 0.3)
    motion = ViaMotion(points=(tuple(0.0 * unit), tuple(unit)), leg_s=0.4, rest_s=0.1)
    try:
        with np.errstate(all="ignore"):
            log = run_law(law, arm, motion)
    except LawError as problem:
        stage.blame("closed loop", f"it raises {problem.summary} {problem.trace}".rstrip())
        return
    if log.outcome != "finished":
        stage.blame("closed loop", log.reason)


def _arm_words(arm: Arm) -> str:
    slides = int((arm.kinds == PRISMATIC).sum())
    parts = [(arm.n - slides, "turning"), (slides, "sliding")]
    words = " and ".join(counted(number, f"{kind} joint") for number, kind in parts if number)
    return words if np.isfinite(arm.drives.torque_limit).all() else f"{words} without limits"


def _us(played: Played) -> float:
    return float(np.median(played.times_ns)) / 1000.0
