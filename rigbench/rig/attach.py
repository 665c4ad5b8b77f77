"""A rig on a world that somebody else built: law, drive and log for an arm in a pybullet simulation."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.errors import Fault, InputFaults
from rigbench.laws.law import Law, Setup
from rigbench.laws.model import Model
from rigbench.motion.motion import Motion
from rigbench.rig.law_call import start_law
from rigbench.rig.log import Log
from rigbench.rig.loop import Loop, Setting, sampled
from rigbench.rig.run import Rates
from rigbench.rig.sampled import Sensing, Timing
from rigbench.rig.world import World

__all__ = ["Rig"]


class Rig:
    """Law, drives and log, plugged into the arm of a world that is already there.

    ::

        rig = Rig.attach(client, body, arm, law=law, motion=motion, rates=Rates(1000, 1000))
        log = rig.run()          # or, between things of your own: while rig.step(): ...

    The rig steps the world. Of the world it changes the arm's joints alone: their motors, damping and
    speed clamp go off, the drives of ``arm`` stand in for them.
    """

    def __init__(self, loop: Loop, world: World) -> None:
        self._loop, self._world = loop, world

    @classmethod
    def attach(
        cls,
        client: int,
        body: int,
        arm: Arm,
        *,
        law: Law,
        motion: Motion,
        rates: Rates,
        model: Arm | None = None,
        gain_pose: Floats | None = None,
        sensing: Sensing | None = None,
        timing: Timing | None = None,
        seed: int = 0,
    ) -> Rig:
        """Attach a rig to ``body`` in the world of ``client`` (its physicsClientId).

        ``arm`` is the machine: its joints are those of the body by name, its links weigh what the body's
        do, its drives act. ``model`` is what the law believes, the machine itself by default.
        ``gain_pose`` (n,) [rad]: where the motion starts by default. Gravity is the world's, turned into
        the frame of the arm's base. The run begins where the arm stands now; where that isn't the start
        of the motion, the law has the difference to make up for.

        Raises InputFaults, addressed to the arguments, see :class:`rigbench.rig.world.World`; LawError if
        the law can't start.
        """
        faults = list(_faults(arm, model, law, motion, rates))
        if faults:
            raise InputFaults(faults)
        world = World(client, body, arm, rates.physics_hz)
        timing = Timing() if timing is None else timing
        gravity = world.gravity()
        setting = Setting(
            plant=arm,
            gravity=gravity,
            rates=rates,
            sensing=Sensing() if sensing is None else sensing,
            timing=timing,
            delay_ms=timing.delay_ms,
            seed=seed,
            draw=0,
            contacts=True,
        )
        believed = arm if model is None else model
        _, reference = sampled(motion, rates.control_hz)
        setup = Setup(
            joints=believed.joints,
            model=Model(believed, gravity),
            control_hz=rates.control_hz,
            gain_pose=reference[0, 0].copy() if gain_pose is None else np.array(gain_pose, dtype=float),
            torque_limit=believed.drives.torque_limit,
            speed_limit=believed.drives.speed_limit,
        )
        started = start_law(type(law).__name__, law, setup)
        loop = Loop(setting, started, motion, *world.state())
        world.release()
        return cls(loop, world)

    def step(self) -> bool:
        """Go on by one control tick, all its physics steps; return whether there is more to come.

        LawError if the law raises, EngineError if the engine refuses.
        """
        self._loop.go(self._world, 1)
        return not self._loop.over

    def run(self) -> Log:
        """Go on to the end and return the log, for :func:`rigbench.scores.of_run.score_run`."""
        self._loop.go(self._world)
        return self._loop.log()

    @property
    def log(self) -> Log:
        """The log up to here."""
        return self._loop.log()

    @property
    def contact_torque(self) -> Floats:
        """What contacts, and whatever else the drives don't know of, gave the joints in the last step,
        (n,) [N m]."""
        return self._loop.contact_torque


def _faults(arm: Arm, model: Arm | None, law: Law, motion: Motion, rates: Rates) -> Iterator[Fault]:
    joints = motion.reference(np.zeros(1))[0].shape[1]
    if joints != arm.n:
        yield Fault("Rig.attach", None, "motion", f"it moves {joints} joints", f"{arm.n}")
    if model is not None and model.joints != arm.joints:
        said = ", ".join(model.joints)
        yield Fault("Rig.attach", None, "model", f"its joints are {said}", ", ".join(arm.joints))
    model_hz = getattr(law, "model_hz", None) or rates.control_hz
    for name, ratio in (
        ("physics_hz / control_hz", rates.physics_hz / rates.control_hz),
        ("control_hz / model_hz", rates.control_hz / model_hz),
    ):
        if round(ratio) < 1 or abs(ratio - round(ratio)) > 1e-9 * ratio:
            yield Fault("Rig.attach", None, "rates", f"{name} is {ratio:g}", "a whole number")
