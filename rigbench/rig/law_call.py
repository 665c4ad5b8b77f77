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
from rigbench.laws.law import A_REF, CLOCK, Q_REF, SEES, TAU, V_REF, Compiled, Law, Q, Reference, Setup, V
from rigbench.laws.plugins import own_trace
from rigbench.rig.fused import AFTER, BEFORE, NOT_DUE, FusedStep, fused, no_term

__all__ = ["TIMED_EVERY", "LawCall", "StartedLaw", "law_error", "start_law"]

TIMED_EVERY = 64
"""A compiled law's time is taken at one tick in so many: a clock costs more than some laws."""


@dataclass(frozen=True, eq=False)
class LawCall:
    """How to call a law in one run.

    ``at(k)`` calls it at tick k: it reads what the law sees from the rig's ``io`` and leaves its torque
    there. ``fused`` is the physics step around a compiled law, to be called with the ``believed`` chain,
    with ``arrays`` (held, the law's own) and, tick by tick, with ``due``; None for a law in plain Python.
    ``times_ns`` fills with what calls by ``at`` took, where they are timed.
    """

    at: Callable[[int], None]
    believed: Floats
    due: list[int]
    times_ns: list[int]
    fused: FusedStep | None = None
    arrays: tuple[Floats, ...] = ()


@dataclass(frozen=True, eq=False)
class StartedLaw:
    """A law that knows its setup; ``name`` as errors show it."""

    name: str
    law: Law
    setup: Setup

    def call(self, io: Floats, ticks: int, late: bool) -> LawCall:
        """Return the law's call in a run of so many ticks; LawError if asking for its kernels raises.

        ``late``: its model term is handed on one model tick late.
        """
        try:
            compiled = self.law.compiled()
        except BaseException as problem:
            raise law_error(self.name, problem) from None
        control_hz = self.setup.control_hz
        every = max(1, round(control_hz / (getattr(self.law, "model_hz", None) or control_hz)))
        due, chain = [NOT_DUE] * ticks, self.setup.model.chain
        due[::every] = [AFTER if late else BEFORE] * len(due[::every])
        due[:1] = [BEFORE] * len(due[:1])
        if compiled is None:
            return _plain_call(self.name, self.law, chain, io, due)
        return _compiled_call(compiled, chain, io, due)


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


def _compiled_call(compiled: Compiled, chain: Floats, io: Floats, due: list[int]) -> LawCall:
    seen, held = io[:SEES], np.zeros(compiled.held_size)
    own = np.ascontiguousarray(compiled.own)
    torque, model_term = compiled.torque, compiled.model_term or no_term
    times: list[int] = []
    keep, now = times.append, time.perf_counter_ns

    def at(k: int) -> None:
        before = now()
        if due[k] == BEFORE:
            model_term(seen, held, chain, own)
        torque(seen, held, chain, own)
        if due[k] == AFTER:
            model_term(seen, held, chain, own)
        if k % TIMED_EVERY == 0:
            keep(now() - before)

    return LawCall(at, chain, due, times, fused(compiled), (held, own))


def _real(name: str, what: str, given: object, t: float) -> Floats:
    """Return a copy of what a law gave as real numbers; LawError if it is anything else."""
    array = np.array(given)
    if array.dtype.kind not in "fiu":
        wrong = f"a {what} of type {array.dtype}; expected real numbers"
        raise LawError(name, wrong, f"at t = {t:.4f} s")
    return array.astype(float)


def _plain_call(name: str, law: Law, chain: Floats, io: Floats, due: list[int]) -> LawCall:
    n, held = io.shape[1], np.empty(0)
    times: list[int] = []
    keep, now = times.append, time.perf_counter_ns

    def at(k: int) -> None:
        nonlocal held
        before = now()
        t, q, v = float(io[CLOCK, 0]), io[Q].copy(), io[V].copy()
        ref = Reference(io[Q_REF].copy(), io[V_REF].copy(), io[A_REF].copy())
        if due[k] == BEFORE:
            held = _real(name, "model term", law.model_term(t, q, v, ref), t)
        torque = _real(name, "torque", law.torque(t, q, v, ref, held), t)
        if torque.shape != (n,):
            raise LawError(name, f"a torque of shape {torque.shape}; expected ({n},)", f"at t = {t:.4f} s")
        if due[k] == AFTER:
            held = _real(name, "model term", law.model_term(t, q, v, ref), t)
        io[TAU] = torque
        keep(now() - before)

    return LawCall(at, chain, due, times)
