"""The hot loop of a run: read, law, drive, apply, step."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Protocol

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.dynamics import gravity_torque
from rigbench.errors import LawError
from rigbench.motion.motion import Motion
from rigbench.rig.engine import engine_errors
from rigbench.rig.joint_states import filler
from rigbench.rig.law_call import TIMED_EVERY, StartedLaw, law_error
from rigbench.rig.log import Log
from rigbench.rig.rows import (
    DELAYED,
    ENERGY,
    ERROR,
    EXTERNAL,
    MACHINE_ROWS,
    Q_ENGINE,
    Q_ROTOR,
    Q_TRUE,
    TAU_ENGINE,
    TORQUE_PEAK,
    V_ENGINE,
    V_NEXT,
    V_ROTOR,
    V_TRUE,
    delay_rows,
    machine_array,
)
from rigbench.rig.run import Rates
from rigbench.rig.sampled import Sensing, Timing, noise_of, ticks_of
from rigbench.rig.sensing import BEYOND_BOUNDS, HIT_STOP, OK
from rigbench.rig.tick import (
    LOGGED,
    NOISE,
    RECORD_ROWS,
    TORQUE_NOT_FINITE,
    WANTED,
    begin_step,
    end_step,
)  # fmt: skip

__all__ = ["Driven", "Loop", "Setting", "sampled"]


class Driven(Protocol):
    """The joints in the engine: joint states (position and velocity first), n torques [N m], one step."""

    @property
    def read(self) -> Callable[[], Sequence[Sequence[Any]]]: ...  # noqa: D102

    @property
    def apply(self) -> Callable[[list[float]], None]: ...  # noqa: D102

    @property
    def step(self) -> Callable[[], None]: ...  # noqa: D102


@dataclass(frozen=True, eq=False)
class Setting:
    """The machine, and how it meets the law.

    ``gravity`` [m/s^2] in the frame of the plant's base; ``delay_ms`` from tick to torque, which stands
    for that of ``timing``; ``contacts`` whether anything may touch the arm.
    """

    plant: Arm
    gravity: tuple[float, float, float]
    rates: Rates
    sensing: Sensing
    timing: Timing
    delay_ms: float
    seed: int
    draw: int
    contacts: bool


@lru_cache(maxsize=32)
def sampled(motion: Motion, control_hz: float) -> tuple[Floats, Floats]:
    """Return times (N,) and the reference (N, 3, n) at every control tick from 0 to the motion's end."""
    count = int(np.floor(motion.duration_s * control_hz + 1e-6)) + 1
    t = np.arange(count) / control_hz
    reference = np.ascontiguousarray(np.stack(motion.reference(t), axis=1))
    for array in (t, reference):
        array.flags.writeable = False
    return t, reference


class Loop:
    """One run in progress.

    ``q``, ``v`` (n,): where the engine stands, in its own reading. ``ticks``: how many are logged.
    """

    def __init__(self, setting: Setting, law: StartedLaw, motion: Motion, q: Floats, v: Floats) -> None:
        plant, rates = setting.plant, setting.rates
        dt, delay = 1.0 / rates.physics_hz, setting.delay_ms / 1000.0
        self._setting, self._name = setting, law.name
        self._t, reference = sampled(motion, rates.control_hz)
        self._times: list[float] = self._t.tolist()
        self._chain = plant.chain(setting.gravity)
        machine = machine_array(
            plant,
            dt,
            delay=delay,
            control_period=1.0 / rates.control_hz,
            velocity_corner_hz=setting.sensing.corner_hz(plant),
            link_encoder=setting.sensing.encoder == "link",
            contacts=setting.contacts,
        )
        self._bench = np.vstack([machine, np.zeros((DELAYED + delay_rows(delay / dt), plant.n))])
        self._machine, self._io = self._bench[:MACHINE_ROWS], self._bench[MACHINE_ROWS:]
        self._io[V_NEXT] = self._io[V_ROTOR] = v
        self._io[Q_ROTOR] = q + gravity_torque(self._chain, q) / plant.drives.stiffness
        count, draw = len(self._t), (setting.seed, setting.draw)
        self._substeps = round(rates.physics_hz / rates.control_hz)
        self._record = np.empty((count, RECORD_ROWS, plant.n))
        self._record[:, WANTED:NOISE] = reference
        self._record[:, NOISE] = noise_of(setting.sensing, count, plant, *draw)
        self._calls = ticks_of(setting.timing, count, self._substeps, *draw)
        self._law = law.call(self._io, count, setting.timing.model_late)
        self._status, self.ticks = OK, 0
        self._energy: float | None = None

    @property
    def over(self) -> bool:
        """Whether the run has come to its end, or broken off."""
        return self._status != OK or self.ticks == len(self._t)

    @property
    def contact_torque(self) -> Floats:
        """What contacts gave the joints in the last step, (n,) [N m]; 0 in a run without contacts."""
        torque: Floats = self._io[EXTERNAL].copy()
        return torque

    def go(self, engine: Driven, ticks: int | None = None) -> None:
        """Go on to the end or to where it breaks off, or by so many ticks.

        LawError if the law raises or returns nonsense, EngineError if the engine refuses.
        """
        if not self.over:
            last = len(self._t) if ticks is None else min(self.ticks + ticks, len(self._t))
            with engine_errors("stepping"):
                self._status, self.ticks = self._steps(engine, last)

    def _steps(self, engine: Driven, stop: int) -> tuple[int, int]:
        """Do the ticks before ``stop``; return the status and how many are logged."""
        read, apply, step, times = engine.read, engine.apply, engine.step, self._times
        fused, due, last = self._law.fused, self._law.due, len(times) - 1
        chains = np.stack([self._chain, self._law.believed])
        arrays = chains, self._bench, self._record, *self._law.arrays
        fill, torque = filler(self._io[Q_ENGINE : V_ENGINE + 1]), self._io[TAU_ENGINE]
        calls, substeps = self._calls, range(self._substeps)
        for k in range(self.ticks, stop):
            t, call, by_parts = times[k], calls[k], fused is None or k % TIMED_EVERY == 0 or k == last
            for substep in substeps:
                fill(read())
                tick, logged = k if substep == call else -1, -1 if substep else k
                try:
                    if by_parts:
                        status = self._parts(tick, t, logged)
                    else:
                        status = fused(*arrays, tick, t, due[k], logged)  # type: ignore[misc]
                except BaseException as problem:
                    raise law_error(self._name, problem) from None
                if status == TORQUE_NOT_FINITE:
                    raise LawError(self._name, "a torque that is not a number", f"at t = {t:.4f} s")
                if status != OK:
                    return status, k + (substep > 0)
                if k == last:
                    break
                apply(torque.tolist())
                step()
        return OK, stop

    def _parts(self, tick: int, t: float, logged: int) -> int:
        """Do what a fused step does, part by part: for laws in plain Python, and to time the others."""
        status = begin_step(self._machine, self._io, self._record, tick, t)
        if status != OK:
            return status
        if tick >= 0:
            self._law.at(tick)
        if logged == len(self._times) - 1:
            # the torque of the last tick is asked for and logged, but never acts
            self._energy = float(self._io[ENERGY].sum())
        return end_step(self._chain, self._machine, self._io, self._record, logged)

    def log(self) -> Log:
        """Return the log up to here; its outcome is 'running' where there is more to come."""
        setting, ticks = self._setting, self.ticks
        record = self._record[:ticks]
        log = record[:, LOGGED:]
        outcome, reason = self._verdict()
        return Log(
            t=self._t[:ticks],
            q_ref=record[:, WANTED],
            v_ref=record[:, WANTED + 1],
            q=log[:, 0],
            v=log[:, 1],
            torque=log[:, 2],
            limited=log[:, 3] > 0,
            plant=setting.plant,
            outcome=outcome,
            reason=reason,
            residual=float(self._io[ERROR, 0]),
            energy_j=float(self._io[ENERGY].sum()) if self._energy is None else self._energy,
            torque_peak=self._io[TORQUE_PEAK].copy(),
            law_us=float(np.median(self._law.times_ns)) / 1000.0 if self._law.times_ns else 0.0,
            control_hz=setting.rates.control_hz,
            gravity=setting.gravity,
            contacts=setting.contacts,
        )

    def _verdict(self) -> tuple[str, str]:
        """Put the status of the last reading into an outcome and a reason in words."""
        if self._status == OK:
            return ("finished" if self.over else "running"), ""
        q, v, plant = self._io[Q_TRUE], self._io[V_TRUE], self._setting.plant
        t = self._t[min(self.ticks, len(self._t) - 1)]
        if self._status == HIT_STOP:
            i = int(np.argmax(np.maximum(plant.lower - q, q - plant.upper)))
            return "hit-stop", f"joint {plant.joints[i]} met its limit at {t:.3f} s"
        if self._status == BEYOND_BOUNDS:
            i = int(np.argmax(np.abs(v)))
            return "diverged", f"joint {plant.joints[i]} ran away at {t:.3f} s"
        return "diverged", f"the state was no longer finite at {t:.3f} s"
