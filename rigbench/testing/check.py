"""The check of a law against the rules that the rig relies on."""

from __future__ import annotations

import json
import pickle
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
import pydantic

from rigbench.arm.arm import PRISMATIC, Arm
from rigbench.errors import LawError, RulesBroken, counted
from rigbench.laws.form import check_class, notes_on
from rigbench.laws.law import Law
from rigbench.laws.options import describe_options, options_model, per_joint_options
from rigbench.motion.via import ViaMotion
from rigbench.rig.fused import fused
from rigbench.testing.arms import make_arm
from rigbench.testing.play import Played, Stage
from rigbench.testing.rules import Findings
from rigbench.testing.simulated import run_law, setup_of
from rigbench.testing.ticks import CONTROL_HZ, ticks_for

__all__ = ["CheckedLaw", "check_law"]

ARMS = (
    *(("R" * n, True) for n in range(1, 8)),
    ("P", True), ("RP", True), ("PRR", True), ("RPRRRR", True), ("RR", False), ("PP", False),
)  # fmt: skip
"""Joints and whether drives have limits."""

SHOWN = 6
"""Times are those of the largest arm of at most so many joints."""

RARELY = 3
"""How many ticks a model term is held, where it is not worked out at each."""

CLOSE = 1e-9
"""By how much kernels may differ from the plain methods, as a share of the largest number: sums in another
order, and no more."""


@dataclass(frozen=True)
class CheckedLaw:
    """What a law that keeps all rules showed: times a tick [us] on six joints, and what is worth a thought.

    ``plain_us`` of the plain methods, ``compiled_us`` of the kernels called from Python, None without.
    """

    law: str
    arms: int
    plain_us: float
    compiled_us: float | None
    notes: tuple[str, ...]

    def __str__(self) -> str:
        plain = f"; {self.plain_us:.3g} us a tick in plain Python"
        kernels = "" if self.compiled_us is None else f", {self.compiled_us:.3g} us by its kernels"
        notes = "".join(f"\nnote: {note}" for note in self.notes)
        return f"{self.law} keeps all rules on {counted(self.arms, 'arm')}{plain}{kernels}{notes}"


def check_law(cls: type[Law], /, **options: Any) -> CheckedLaw:
    """Check a law, with these options, against every rule that the rig relies on.

    The law is called, tick by tick and in a closed loop of 0.5 s, on made-up arms of 1 to 7 joints, turning
    and sliding, with limits and without; no engine is started. With an option that has one entry a joint,
    on the arms with so many joints. Times are told and not judged: they are those of this machine.

    Raises RulesBroken, an AssertionError, with every rule that is broken: what was found, what is expected
    and what to do.
    """
    try:
        check_class(cls)
    except TypeError as problem:
        raise _alone(getattr(cls, "__name__", repr(cls)), "form", str(problem)) from None
    findings = Findings()
    resolved = _resolved(cls, options, findings)
    if resolved is None:
        raise RulesBroken(cls.__name__, findings.broken())
    arms = [make_arm(*declared) for declared in ARMS]
    lengths = {len(resolved[name]) for name in per_joint_options(cls) if resolved[name] is not None}
    arms = [arm for arm in arms if not lengths or {arm.n} == lengths]
    if not arms:
        shown = " and ".join(f"{length}" for length in sorted(lengths))
        raise _alone(cls.__name__, "options", f"lists for {shown} joints; expected one length of 1 to 7")
    findings.arms = len(arms)

    def make() -> Law:
        return cls(**resolved)

    timed = max((arm for arm in arms if arm.n <= SHOWN), key=lambda arm: arm.n, default=arms[0])
    plain_us, compiled_us = 0.0, None
    for arm in arms:
        times = _check_on(arm, make, findings)
        if times is not None and arm is timed:
            plain_us, compiled_us = times
    broken = findings.broken()
    if broken:
        raise RulesBroken(cls.__name__, broken)
    return CheckedLaw(
        cls.__name__, len(arms), plain_us, compiled_us, tuple(_notes(cls, make, arms[0], plain_us))
    )


def _alone(name: str, rule: str, found: str) -> RulesBroken:
    findings = Findings()
    findings.add(rule, found)
    return RulesBroken(name, findings.broken())


def _resolved(cls: type[Law], options: dict[str, Any], findings: Findings) -> dict[str, Any] | None:
    """Return the options with their defaults; None, with what is wrong added, where they can't be used."""
    model = options_model(cls)  # type: ignore[arg-type]  # mypy takes the instances' __hash__ for the class's
    for about in describe_options(cls):
        if about.default is not None:
            for where, problem in _problems(model, {about.name: about.default}):
                if where == about.name:
                    findings.add("options", f"the default {about.default!r} of '{about.name}': {problem}")
    for where, problem in _problems(model, options):
        findings.add("options", f"check_law was given {options}; {where + ': ' if where else ''}{problem}")
    if findings.first:
        return None
    resolved: dict[str, Any] = model(**options).model_dump()
    for name, value in resolved.items():
        try:
            json.dumps(value, allow_nan=False)
            pickle.loads(pickle.dumps(value))
        except Exception as problem:  # whatever is in an option may fail in its own way
            findings.add("options", f"'{name}' is {value!r}: {problem}")
    return None if findings.first else resolved


def _problems(model: type[pydantic.BaseModel], given: dict[str, Any]) -> Iterator[tuple[str, str]]:
    try:
        model(**given)
    except pydantic.ValidationError as problem:
        for error in problem.errors():
            yield ".".join(map(str, error["loc"][:1])), error["msg"]


def _check_on(arm: Arm, make: Callable[[], Law], findings: Findings) -> tuple[float, float | None] | None:
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
    if stage.findings.where.get("raises") and stage.arm in stage.findings.where["raises"]:
        return
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


def _notes(cls: type[Law], make: Callable[[], Law], arm: Arm, plain_us: float) -> Iterator[str]:
    yield from notes_on(cls)
    for about in describe_options(cls):
        if not about.doc:
            yield f"option '{about.name}' has no words on what it means: option(default, unit, words)"
    law = make()
    law.start(setup_of(arm, CONTROL_HZ, np.zeros(arm.n)))
    compiled = law.compiled()
    if compiled is not None and fused(compiled) is None:
        yield "compiled() makes kernels anew for each run, so they are called one by one, which takes longer"
    period_us = 1e6 / CONTROL_HZ
    if compiled is None and plain_us > period_us:
        yield (
            f"{plain_us:.0f} us a tick on this machine is more than the control period of {period_us:.0f} us "
            f"at {CONTROL_HZ:.0f} Hz: runs take long, and a real controller could not keep up"
        )
