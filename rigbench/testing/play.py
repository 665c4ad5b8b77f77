"""Calling a law tick by tick, by its plain methods or by its kernels, and watching what it does."""

from __future__ import annotations

import textwrap
import time
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.laws.law import A_REF, CLOCK, Q_REF, SEES, TAU, V_REF, Compiled, Law, Q, Reference, Setup, V
from rigbench.laws.plugins import own_trace
from rigbench.rig.fused import no_term
from rigbench.testing.rules import Findings
from rigbench.testing.ticks import Tick

__all__ = ["Played", "Stage"]


@dataclass
class Played:
    """What a law answered: torques, the model terms that were held, and how long each tick took [ns]."""

    torques: list[Floats] = field(default_factory=list)
    terms: list[Floats] = field(default_factory=list)
    times_ns: list[int] = field(default_factory=list)

    def same(self, other: Played) -> bool:
        """Whether the answers are the same, bit for bit."""
        pairs = ((self.torques, other.torques), (self.terms, other.terms))
        return all(
            len(ours) == len(theirs) and all(_same(*pair) for pair in zip(ours, theirs, strict=True))
            for ours, theirs in pairs
        )


def _same(one: Floats, other: Floats) -> bool:
    return one.shape == other.shape and one.tobytes() == other.tobytes()


@dataclass(frozen=True, eq=False)
class Stage:
    """One arm's setup and calls; what goes against a rule is added to ``findings``, once an arm."""

    arm: str
    setup: Setup
    ticks: Sequence[Tick]
    findings: Findings

    def blame(self, rule: str, found: str) -> None:
        """Add what was found on this arm."""
        self.findings.add(rule, found, self.arm)

    def start(self, law: Law) -> bool:
        """Start the law; return whether it did not raise."""
        before = _bits(*_parts(self.setup))
        try:
            law.start(self.setup)
        except Exception as problem:
            self._raised("start", problem)
            return False
        if _bits(*_parts(self.setup)) != before:
            self.blame("inputs", "start changes the setup it is given")
        return True

    def plain(self, law: Law, every: int = 1, spoil: bool = False) -> Played | None:
        """Start the law and call its plain methods; the model term at every so many ticks.

        ``spoil``: use each array that was handed in for something else, once its call is over. None if it
        raises.
        """
        if not self.start(law):
            return None
        played, held = Played(), np.empty(0)
        for number, tick in enumerate(self.ticks):
            t, q, v, ref = _copy(tick)
            inputs = (q, v, *ref)
            before, begin = _bits(*inputs), time.perf_counter_ns()
            what = "model_term"
            try:
                if number % every == 0:
                    old, held = held, self._term(law.model_term(t, q, v, ref), t, played)
                    if spoil:
                        old.fill(np.nan)
                what, kept = "torque", held.copy()
                torque = self._torque(law.torque(t, q, v, ref, held), t)
            except Exception as problem:
                self._raised(f"{what} at t = {t:g} s", problem)
                return None
            played.times_ns.append(time.perf_counter_ns() - begin)
            played.torques.append(torque)
            played.terms.append(kept)
            for name, changed in (("q, v or ref", _bits(*inputs) != before), ("held", not _same(held, kept))):
                if changed:
                    self.blame("inputs", f"model_term or torque changes {name} in place")
            if spoil:
                for array in inputs:
                    array.fill(np.nan)
        return played

    def kernels(self, law: Law, every: int = 1) -> Played | None:
        """Start the law and call its kernels; None if it has none or something raises."""
        if not self.start(law):
            return None
        try:
            compiled = law.compiled()
        except Exception as problem:
            self._raised("compiled", problem)
            return None
        if compiled is None or not self._formed(compiled):
            return None
        played, held, own = Played(), np.zeros(compiled.held_size), np.ascontiguousarray(compiled.own)
        chain, io = self.setup.model.chain, np.zeros((SEES, self.setup.n))
        model_term = compiled.model_term or no_term
        for number, (t, q, v, ref) in enumerate(self.ticks):
            io[Q], io[V], io[Q_REF], io[V_REF], io[A_REF], io[CLOCK, 0] = q, v, *ref, t
            before, chained = _bits(np.delete(io, TAU, 0)), _bits(chain)
            begin = time.perf_counter_ns()
            try:
                if number % every == 0:
                    model_term(io, held, chain, own)
                kept = held.copy()
                io[TAU] = np.nan
                compiled.torque(io, held, chain, own)
            except Exception as problem:
                self._raised(f"a kernel at t = {t:g} s", problem)
                return None
            played.times_ns.append(time.perf_counter_ns() - begin)
            if _bits(np.delete(io, TAU, 0)) != before or _bits(chain) != chained or not _same(kept, held):
                self.blame(
                    "kernels", "a kernel writes rows of io besides TAU, or chain, or held in its torque"
                )
            played.torques.append(io[TAU].copy())
            played.terms.append(kept)
        return played

    def _formed(self, compiled: Any) -> bool:
        if not isinstance(compiled, Compiled):
            self.blame("kernels", f"compiled returns {type(compiled).__name__}")
            return False
        own: Any = compiled.own
        if not isinstance(own, np.ndarray) or own.dtype != np.float64 or own.ndim != 2:
            shown = f"{own.dtype} of shape {own.shape}" if isinstance(own, np.ndarray) else repr(own)
            self.blame("kernels", f"own is {shown}")
            return False
        return True

    def _torque(self, given: object, t: float) -> Floats:
        torque = self._real("torque", given, t)
        if torque.shape != (self.setup.n,):
            self.blame("shape", f"torque returns shape {torque.shape} at t = {t:g} s")
        self._finite("torque", torque, t)
        return torque

    def _term(self, given: object, t: float, played: Played) -> Floats:
        term = self._real("model_term", given, t)
        if term.ndim != 1:
            self.blame("shape", f"model_term returns shape {term.shape} at t = {t:g} s")
        elif played.terms and term.shape != played.terms[0].shape:
            was, now = played.terms[0].size, term.size
            self.blame("shape", f"model_term returns {now} numbers at t = {t:g} s and {was} before")
        self._finite("model_term", term, t)
        return term

    def _finite(self, what: str, array: Floats, t: float) -> None:
        if not np.isfinite(array).all():
            self.blame("finite", f"{what} returns {array} at t = {t:g} s")

    def _real(self, what: str, given: object, t: float) -> Floats:
        array = np.array(given)
        if array.dtype.kind not in "fiu":
            self.blame("shape", f"{what} returns {type(given).__name__} of {array.dtype} at t = {t:g} s")
            raise _NotNumbersError
        return array.astype(float)

    def _raised(self, what: str, problem: Exception) -> None:
        if isinstance(problem, _NotNumbersError):
            return  # it is told as such
        trace = textwrap.indent(own_trace(problem, Path(__file__).parent).rstrip(), " " * 6)
        self.blame("raises", f"{what} raises {type(problem).__name__}: {problem}\n{trace}")


class _NotNumbersError(Exception):
    """What a law returned can't be gone on with."""


def _copy(tick: Tick) -> Tick:
    t, q, v, ref = tick
    return t, q.copy(), v.copy(), Reference(*(part.copy() for part in ref))


def _parts(setup: Setup) -> tuple[Floats, ...]:
    model = setup.model
    return (setup.gain_pose, setup.torque_limit, setup.speed_limit, model.chain, model.reflected)


def _bits(*arrays: Floats) -> bytes:
    return b"".join(np.ascontiguousarray(array).tobytes() for array in arrays)
