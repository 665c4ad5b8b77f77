"""One run: the law against the plant, from start to end."""

from __future__ import annotations

import struct
import time
import traceback
from collections.abc import Callable
from functools import lru_cache

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.dynamics import gravity_torque
from rigbench.arm.mismatch import believed, plant
from rigbench.errors import LawError
from rigbench.laws.law import A_REF, CLOCK, Q_REF, TAU, V_REF, Law, Q, Reference, Setup, V
from rigbench.laws.model import Model
from rigbench.motion.motion import Motion
from rigbench.rig.engine import Engine
from rigbench.rig.log import Log
from rigbench.rig.rows import (
    DELAYED,
    ERROR,
    Q_ENGINE,
    Q_ROTOR,
    Q_TRUE,
    TAU_ENGINE,
    V_TRUE,
    delay_rows,
    machine_array,
)
from rigbench.rig.run import Run, tilted
from rigbench.rig.sampled import noise_of, ticks_of
from rigbench.rig.sensing import BEYOND_BOUNDS, HIT_STOP, OK
from rigbench.rig.tick import LOG_ROWS, begin_step, end_step

__all__ = ["simulate", "worker_engine"]

LAW_SEES = CLOCK + 1
TIMED_EVERY = 16  # the law's time is taken at one tick in so many: a clock costs more than some laws


@lru_cache(maxsize=1)
def worker_engine() -> Engine:
    """Return this process's engine, connected once."""
    return Engine()


@lru_cache(maxsize=32)
def sampled(motion: Motion, control_hz: float) -> tuple[Floats, Floats]:
    """Return times (N,) and the reference (N, 3, n) at every control tick from 0 to the motion's end."""
    count = int(np.floor(motion.duration_s * control_hz + 1e-6)) + 1
    t = np.arange(count) / control_hz
    reference = np.ascontiguousarray(np.stack(motion.reference(t), axis=1))
    for array in (t, reference):
        array.flags.writeable = False
    return t, reference


def simulate(run: Run, engine: Engine | None = None) -> Log:
    """Do one run and return its log.

    A function of the run alone: the same bits in any process, in any order, on one type of CPU and one
    set of package versions. Raises LawError if the law raises or returns nonsense, EngineError if the
    engine fails.
    """
    engine = worker_engine() if engine is None else engine
    arm = run.arm.arm()
    machine = plant(arm, run.mismatch, run.level, run.sources, run.seed, run.draw or 0, run.case)
    t, reference = sampled(run.motion, run.rates.control_hz)
    start = reference[0, 0] + np.array(run.start_offset or [0.0] * arm.n)
    loop = _Loop(run, machine, _started_law(run, arm), engine, start)
    draw = run.draw or 0
    noise = noise_of(run.sensing, len(t), machine, run.seed, draw)
    calls = ticks_of(run.timing, len(t), round(run.rates.physics_hz / run.rates.control_hz), run.seed, draw)
    status, ticks = loop.go(t, reference, noise, calls)
    log = loop.log[:ticks]
    outcome, reason = _verdict(status, machine, t[min(ticks, len(t) - 1)], loop.io)
    return Log(
        t=t[:ticks],
        q_ref=reference[:ticks, 0],
        v_ref=reference[:ticks, 1],
        q=log[:, 0],
        v=log[:, 1],
        torque=log[:, 2],
        limited=log[:, 3] > 0,
        plant=machine,
        outcome=outcome,
        reason=reason,
        residual=loop.residual,
        law_us=float(np.median(loop.law_ns)) / 1000.0 if loop.law_ns else 0.0,
        control_hz=run.rates.control_hz,
        gravity=tilted(run.gravity, run.base_tilt),
    )


def _started_law(run: Run, arm: Arm) -> tuple[Law, Model]:
    declared = arm if run.model is None else run.model.arm()
    model = Model(believed(declared, run.mismatch), run.gravity)
    law = run.law.make()
    setup = Setup(
        joints=declared.joints,
        model=model,
        control_hz=run.rates.control_hz,
        gain_pose=np.array(run.gain_pose),
        torque_limit=declared.drives.torque_limit,
        speed_limit=declared.drives.speed_limit,
    )
    try:
        law.start(setup)
    except Exception as problem:
        raise _law_error(run.law.plugin, problem) from None
    return law, model


def _law_error(name: str, problem: Exception) -> LawError:
    """Turn whatever a law raised into a LawError that carries the law's own traceback, without ours."""
    if isinstance(problem, LawError):
        return problem
    frames = problem.__traceback__
    while frames is not None and frames.tb_frame.f_code.co_filename == __file__ and frames.tb_next:
        frames = frames.tb_next
    trace = "".join(traceback.format_exception(type(problem), problem, frames))
    return LawError(name, f"{type(problem).__name__}: {problem}", trace)


def _verdict(status: int, machine: Arm, t: float, io: Floats) -> tuple[str, str]:
    """Put the status of the last reading into an outcome and a reason in words."""
    if status == OK:
        return "finished", ""
    q, v = io[Q_TRUE], io[V_TRUE]
    if status == HIT_STOP:
        i = int(np.argmax(np.maximum(machine.lower - q, q - machine.upper)))
        return "hit-stop", f"joint {machine.joints[i]} met its limit at {t:.3f} s"
    if status == BEYOND_BOUNDS:
        i = int(np.argmax(np.abs(v)))
        return "diverged", f"joint {machine.joints[i]} ran away at {t:.3f} s"
    return "diverged", f"the state was no longer finite at {t:.3f} s"


def _no_term(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    """Stand for the model term of a law that has none."""


class _Loop:
    """The hot loop: read, law, drive, apply, step."""

    def __init__(
        self, run: Run, machine: Arm, started: tuple[Law, Model], engine: Engine, start: Floats
    ) -> None:
        law, model = started
        n, rates, timing = machine.n, run.rates, run.timing
        dt = 1.0 / rates.physics_hz
        delay = timing.delay_ms / 1000.0
        gravity = tilted(run.gravity, run.base_tilt)
        self._chain = machine.chain(gravity)
        self.io = np.zeros((DELAYED + delay_rows(delay / dt), n))
        self.io[Q_ROTOR] = start + gravity_torque(self._chain, start) / machine.drives.stiffness
        self.law_ns: list[int] = []
        self._substeps = round(rates.physics_hz / rates.control_hz)
        model_hz = getattr(law, "model_hz", None) or rates.control_hz
        self._every = max(1, round(rates.control_hz / model_hz))
        self._late = timing.model_late
        self._machine = machine_array(
            machine,
            dt,
            delay=delay,
            control_period=1.0 / rates.control_hz,
            velocity_corner_hz=run.sensing.corner_hz(machine),
            link_encoder=run.sensing.encoder == "link",
        )
        self._engine = engine
        self._name = run.law.plugin
        self._tick = self._law_tick(law, model)
        # a run starts at rest, where the engine's reading of the position is our own
        engine.load(machine, start, np.zeros(n), gravity, dt)

    @property
    def residual(self) -> float:
        """The largest difference between foreseen and reached velocity [rad/s]."""
        return float(self.io[ERROR, 0])

    def go(self, t: Floats, reference: Floats, noise: Floats, calls: list[int]) -> tuple[int, int]:
        """Run to the end or to where it breaks off; return the status and the number of ticks logged.

        ``calls`` says at which physics step of each tick the law is called (-1: not at all).
        """
        io, chain, machine, law_tick = self.io, self._chain, self._machine, self._tick
        read, apply, step = self._engine.read, self._engine.apply, self._engine.step
        n, count = io.shape[1], len(t)
        pack, fill = struct.Struct(f"{2 * n}d").pack_into, io.data.cast("B")
        offset = Q_ENGINE * n * io.itemsize
        self.log = log = np.empty((count, LOG_ROWS, n))
        torque, clock, times = io[TAU_ENGINE], io[CLOCK], t.tolist()
        substeps, last = range(self._substeps), count - 1
        for k in range(count):
            call = calls[k]
            for substep in substeps:
                states = read()
                pack(fill, offset, *[s[0] for s in states], *[s[1] for s in states])
                status = begin_step(machine, io, reference, noise, k if substep == call else -1)
                if status != OK:
                    return status, k + (substep > 0)
                if substep == call:
                    clock[0] = times[k]
                    try:
                        law_tick(k)
                    except Exception as problem:
                        raise _law_error(self._name, problem) from None
                if not end_step(chain, machine, io, log, k if substep == 0 else -1):
                    raise LawError(self._name, "a torque that is not a number", f"at t = {times[k]:.4f} s")
                if k == last:
                    break
                apply(torque.tolist())
                step()
        return OK, count

    def _law_tick(self, law: Law, model: Model) -> Callable[[int], None]:
        compiled = law.compiled()
        if compiled is None:
            return self._plain_tick(law)
        seen, held = self.io[:LAW_SEES], np.zeros(compiled.held_size)
        own, chain, every = np.ascontiguousarray(compiled.own), model.chain, self._every
        torque, model_term = compiled.torque, compiled.model_term or _no_term
        keep, now, late = self.law_ns.append, time.perf_counter_ns, self._late

        def tick(k: int) -> None:
            before = now() if k % TIMED_EVERY == 0 else 0
            due = k % every == 0
            if due and (not late or k == 0):
                model_term(seen, held, chain, own)
            torque(seen, held, chain, own)
            if due and late and k > 0:
                model_term(seen, held, chain, own)
            if before:
                keep(now() - before)

        return tick

    def _plain_tick(self, law: Law) -> Callable[[int], None]:
        io, every, name, n = self.io, self._every, self._name, self.io.shape[1]
        held, keep, now, late = np.empty(0), self.law_ns.append, time.perf_counter_ns, self._late

        def tick(k: int) -> None:
            nonlocal held
            before = now()
            t, q, v = float(io[CLOCK, 0]), io[Q].copy(), io[V].copy()
            ref = Reference(io[Q_REF].copy(), io[V_REF].copy(), io[A_REF].copy())
            due = k % every == 0
            if due and (not late or k == 0):
                held = np.array(law.model_term(t, q, v, ref), dtype=float)
            torque = np.asarray(law.torque(t, q, v, ref, held), dtype=float)
            if torque.shape != (n,):
                raise LawError(
                    name, f"a torque of shape {torque.shape}; expected ({n},)", f"at t = {t:.4f} s"
                )
            if due and late and k > 0:
                held = np.array(law.model_term(t, q, v, ref), dtype=float)
            io[TAU] = torque
            keep(now() - before)

        return tick
