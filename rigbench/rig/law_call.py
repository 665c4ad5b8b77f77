"""Starting a law, and calling it at a tick: its kernels, or its plain methods with their results checked."""

from __future__ import annotations

import signal
import threading
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.errors import LawError
from rigbench.laws.law import A_REF, CLOCK, Q_REF, TAU, V_REF, Compiled, Law, Q, Reference, Setup, V
from rigbench.laws.plugins import own_trace

__all__ = ["LawCall", "StartedLaw", "law_error", "start_law"]

LAW_SEES = CLOCK + 1
TIMED_EVERY = 16  # the law's time is taken at one tick in so many: a clock costs more than some laws

LawCall = Callable[[int], None]
"""Takes the number of the tick; reads what the law sees from ``io`` and leaves its torque there."""


@dataclass(frozen=True, eq=False)
class StartedLaw:
    """A law that knows its setup; ``name`` as errors show it."""

    name: str
    law: Law
    setup: Setup

    def call(self, io: Floats, late: bool, law_ns: list[int]) -> LawCall:
        """Return the law's call at a tick; LawError if asking for its kernels raises.

        ``late``: its model term is handed on one model tick late. ``law_ns`` takes the times [ns].
        """
        control_hz = self.setup.control_hz
        model_hz = getattr(self.law, "model_hz", None) or control_hz
        every = max(1, round(control_hz / model_hz))
        try:
            compiled = self.law.compiled()
        except BaseException as problem:
            raise law_error(self.name, problem) from None
        if compiled is None:
            return _plain_call(self.name, self.law, io, every, late, law_ns)
        return _compiled_call(compiled, self.setup.model.chain, io, every, late, law_ns)


def start_law(name: str, law: Law, setup: Setup) -> StartedLaw:
    """Start a law; LawError if it raises."""
    try:
        law.start(setup)
    except BaseException as problem:
        raise law_error(name, problem) from None
    return StartedLaw(name, law, setup)


def law_error(name: str, problem: BaseException) -> LawError:
    """Turn whatever a law raised into a LawError that carries the law's own traceback, without ours.

    Where Ctrl-C raises KeyboardInterrupt, it is taken for that and raised on.
    """
    if isinstance(problem, LawError):
        return problem
    if isinstance(problem, KeyboardInterrupt) and _ctrl_c_raises():
        raise problem
    trace = own_trace(problem, Path(__file__).parent)
    return LawError(name, f"{type(problem).__name__}: {problem}", trace)


def _ctrl_c_raises() -> bool:
    """Whether Ctrl-C may come up as an exception here: not in a worker, nor where a campaign takes it."""
    main = threading.current_thread() is threading.main_thread()
    return main and signal.getsignal(signal.SIGINT) is signal.default_int_handler


def _no_term(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    """Stand for the model term of a law that has none."""


def _compiled_call(
    compiled: Compiled, chain: Floats, io: Floats, every: int, late: bool, law_ns: list[int]
) -> LawCall:
    seen, held = io[:LAW_SEES], np.zeros(compiled.held_size)
    own = np.ascontiguousarray(compiled.own)
    torque, model_term = compiled.torque, compiled.model_term or _no_term
    keep, now = law_ns.append, time.perf_counter_ns

    def call(k: int) -> None:
        before = now() if k % TIMED_EVERY == 0 else 0
        due = k % every == 0
        if due and (not late or k == 0):
            model_term(seen, held, chain, own)
        torque(seen, held, chain, own)
        if due and late and k > 0:
            model_term(seen, held, chain, own)
        if before:
            keep(now() - before)

    return call


def _real(name: str, what: str, given: object, t: float) -> Floats:
    """Return a copy of what a law gave as real numbers; LawError if it is anything else."""
    array = np.array(given)
    if array.dtype.kind not in "fiu":
        wrong = f"a {what} of type {array.dtype}; expected real numbers"
        raise LawError(name, wrong, f"at t = {t:.4f} s")
    return array.astype(float)


def _plain_call(name: str, law: Law, io: Floats, every: int, late: bool, law_ns: list[int]) -> LawCall:
    n, held = io.shape[1], np.empty(0)
    keep, now = law_ns.append, time.perf_counter_ns

    def call(k: int) -> None:
        nonlocal held
        before = now()
        t, q, v = float(io[CLOCK, 0]), io[Q].copy(), io[V].copy()
        ref = Reference(io[Q_REF].copy(), io[V_REF].copy(), io[A_REF].copy())
        due = k % every == 0
        if due and (not late or k == 0):
            held = _real(name, "model term", law.model_term(t, q, v, ref), t)
        torque = _real(name, "torque", law.torque(t, q, v, ref, held), t)
        if torque.shape != (n,):
            raise LawError(name, f"a torque of shape {torque.shape}; expected ({n},)", f"at t = {t:.4f} s")
        if due and late and k > 0:
            held = _real(name, "model term", law.model_term(t, q, v, ref), t)
        io[TAU] = torque
        keep(now() - before)

    return call
