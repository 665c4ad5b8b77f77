"""The check of a law against the rules that the rig relies on."""

from __future__ import annotations

import json
import pickle
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
import pydantic

from rigbench.arm.arm import Arm
from rigbench.errors import RulesBroken, counted
from rigbench.laws.form import check_class, notes_on
from rigbench.laws.law import Law
from rigbench.laws.options import describe_options, options_model, per_joint_options
from rigbench.rig.fused import fused
from rigbench.testing.arms import make_arm
from rigbench.testing.on_arm import check_on
from rigbench.testing.rules import Findings
from rigbench.testing.simulated import setup_of
from rigbench.testing.ticks import CONTROL_HZ

__all__ = ["CheckedLaw", "check_law"]

ARMS = (
    *(("R" * n, True) for n in range(1, 8)),
    ("P", True), ("RP", True), ("PRR", True), ("RPRRRR", True), ("RR", False), ("PP", False),
)  # fmt: skip
"""Joints and whether drives have limits."""

SHOWN = 6
"""Times are those of the largest arm of at most so many joints."""


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
        times = check_on(arm, make, findings)
        if times is not None and arm is timed:
            plain_us, compiled_us = times
    broken = findings.broken()
    if broken:
        raise RulesBroken(cls.__name__, broken)
    return CheckedLaw(
        cls.__name__,
        len(arms),
        plain_us,
        compiled_us,
        tuple(_notes(cls, make, arms[0], compiled_us or plain_us)),
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


def _notes(cls: type[Law], make: Callable[[], Law], arm: Arm, tick_us: float) -> Iterator[str]:
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
    if tick_us > period_us:
        yield (
            f"{tick_us:.0f} us a tick on this machine is more than the control period of {period_us:.0f} us "
            f"at {CONTROL_HZ:.0f} Hz: runs take long, and a real controller could not keep up"
        )
