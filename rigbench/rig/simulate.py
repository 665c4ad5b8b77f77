"""One run: the law against the plant, from start to end."""

from __future__ import annotations

import contextlib
from functools import lru_cache

import numpy as np

from rigbench.arm.arm import Arm
from rigbench.arm.collision import collision
from rigbench.arm.mismatch import believed
from rigbench.errors import EngineError
from rigbench.laws.law import Setup
from rigbench.laws.model import Model
from rigbench.rig.engine import Engine
from rigbench.rig.law_call import StartedLaw, start_law
from rigbench.rig.log import Log
from rigbench.rig.loop import Loop, Setting, sampled
from rigbench.rig.run import Run

__all__ = ["simulate", "worker_engine"]


@lru_cache(maxsize=1)
def worker_engine() -> Engine:
    """Return this process's engine, connected once."""
    return Engine()


def simulate(run: Run, engine: Engine | None = None) -> Log:
    """Do one run and return its log.

    A function of the run alone: the same bits in any process, in any order, on one type of CPU and one
    set of package versions. Raises LawError if the law raises or returns nonsense, SceneError if the
    scene does, EngineError if the engine fails. A run with a scene has an engine of its own, unless it
    is given one.
    """
    if engine is None and run.scene is not None:
        with contextlib.closing(Engine()) as own:
            return simulate(run, own)
    if engine is None:
        try:
            return simulate(run, worker_engine())
        except EngineError:
            # a plug-in may have closed our engine behind our back: one more try with a fresh one
            worker_engine().close()
            worker_engine.cache_clear()
            return simulate(run, worker_engine())
    arm = run.arm.arm()
    setting = Setting(
        plant=run.plant(),
        gravity=run.plant_gravity,
        rates=run.rates,
        sensing=run.sensing,
        timing=run.timing,
        delay_ms=run.plant_delay_ms,
        seed=run.seed,
        draw=run.draw or 0,
        contacts=run.scene is not None,
    )
    _, reference = sampled(run.motion, run.rates.control_hz)
    # a run starts at rest, where the engine's reading of the position is our own
    start, rest = reference[0, 0] + np.array(run.start_offset or [0.0] * arm.n), np.zeros(arm.n)
    loop = Loop(setting, _started_law(run, arm), run.motion, start, rest)
    shapes = () if run.scene is None else collision(run.arm).shapes
    dt = 1.0 / run.rates.physics_hz
    engine.load(setting.plant, start, rest, setting.gravity, dt, shapes, run.scene)
    loop.go(engine)
    return loop.log()


def _started_law(run: Run, arm: Arm) -> StartedLaw:
    declared = arm if run.model is None else run.model.arm()
    setup = Setup(
        joints=declared.joints,
        model=Model(believed(declared, run.mismatch), run.gravity),
        control_hz=run.rates.control_hz,
        gain_pose=np.array(run.gain_pose),
        torque_limit=declared.drives.torque_limit,
        speed_limit=declared.drives.speed_limit,
    )
    return start_law(run.law.plugin, run.law.make(), setup)
