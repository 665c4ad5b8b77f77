"""The whole of it: from an arm file and recordings to an identified arm, checked on another motion."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch
from rigbench.errors import InputFaults
from rigbench.identify.base import base_of
from rigbench.identify.consistent import SPREAD, Consistent, consistent
from rigbench.identify.estimate import Estimate, TorqueError, estimate, torque_error
from rigbench.identify.filtering import CORNER_HZ, Rows, rows_of
from rigbench.identify.recording import Recording, of_run
from rigbench.identify.regressor import Terms, parameter_values
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.motion import Motion
from rigbench.rig import Rates, Run, simulate
from rigbench.rig.sampled import Sensing, noise_of

__all__ = ["Identification", "Settings", "Simulated", "identify", "record"]


LAW = "computed-torque"


@dataclass(frozen=True)
class Settings:
    """What is identified, and how: gravity [m/s^2], corner of the filters, spread of the declared values."""

    terms: Terms = field(default_factory=Terms)
    gravity: tuple[float, float, float] = (0.0, 0.0, -9.81)
    corner_hz: float = CORNER_HZ
    spread: float = SPREAD


@dataclass(frozen=True, eq=False)
class Identification:
    """What came out. ``rows`` are those of the check where there is one, else of the first recording."""

    files: ArmFiles
    settings: Settings
    found: Estimate
    result: Consistent
    rows: Rows
    checked: bool  # whether ``rows`` were not fitted
    truth: Arm | None = None  # the hidden machine, where it was simulated

    @property
    def declared_values(self) -> Floats:
        """Base parameters of the declared arm, (b,)."""
        return self._base_of(self.files.arm())

    @property
    def identified_values(self) -> Floats:
        """Base parameters of the identified arm, (b,)."""
        return self._base_of(self.result.arm)

    @property
    def true_values(self) -> Floats | None:
        """Base parameters of the hidden machine, (b,); None where there is none."""
        return None if self.truth is None else self._base_of(self.truth)

    @property
    def torque_errors(self) -> dict[str, TorqueError]:
        """How far torques are from those in ``rows``, by whose parameters they are predicted."""
        values = {"declared": self.declared_values, "identified": self.identified_values}
        return {name: torque_error(each, self.rows) for name, each in values.items()}

    def _base_of(self, arm: Arm) -> Floats:
        values = parameter_values(arm, self.settings.terms)
        if self.settings.terms.offset and arm is self.result.arm:
            values[-arm.n :] = self.result.offset
        combined: Floats = self.found.base.combination @ values
        return combined


@dataclass(frozen=True)
class Simulated:
    """A machine to practise on: the declared arm with a hidden mismatch at level 1, and noisy sensors."""

    mismatch: Mismatch
    sources: tuple[str, ...]
    seed: int = 0
    noise_deg: float = 0.0
    torque_noise_nm: float = 0.0


def identify(
    files: ArmFiles,
    settings: Settings,
    recordings: Sequence[Recording],
    check: Recording | None = None,
    truth: Arm | None = None,
) -> Identification:
    """Return the arm that recordings of it show, near the declared one; InputFaults where they can't."""
    arm = files.arm()
    base = base_of(arm, settings.gravity, settings.terms)

    def rows(recording: Recording) -> Rows:
        return rows_of(arm, settings.gravity, settings.terms, base, recording, settings.corner_hz)

    fitted = [rows(recording) for recording in recordings]
    found = estimate(base, fitted)
    result = consistent(arm, settings.terms, found, settings.spread)
    shown = fitted[0] if check is None else rows(check)
    return Identification(files, settings, found, result, shown, check is not None, truth)


def record(
    files: ArmFiles, settings: Settings, simulated: Simulated, motion: Motion, name: str, draw: int
) -> tuple[Recording, Arm]:
    """Run a motion on the hidden machine and return what its sensors recorded, and the machine.

    Computed torque with the declared arm as its model, natural frequency 5 Hz, at 1 kHz. ``draw`` numbers
    the noise on torques; the machine is the same for all. Raises InputFaults if the run does not finish.
    """
    options = options_model(registered().laws[LAW].cls)  # type: ignore[arg-type]  # classes are hashable
    law = choose(LAW, options(natural_hz=5.0))
    start = tuple(motion.reference(np.zeros(1))[0][0].tolist())
    sensing = Sensing(noise_deg=simulated.noise_deg)
    run = Run(
        files, law, motion, Rates(), start, 0.5, simulated.seed, mismatch=simulated.mismatch, level=1.0,
        sources=simulated.sources, draw=0, gravity=settings.gravity, sensing=sensing,
    )  # fmt: skip
    log = simulate(run)
    if log.outcome != "finished":
        problem = f"the hidden machine did not follow {name}: {log.reason or log.outcome}"
        raise InputFaults.one(files.path, "", problem, "a lower limit_percent, or less mismatch")
    seen = noise_of(sensing, len(log.t), files.arm(), simulated.seed, 0)
    rng = np.random.default_rng([simulated.seed, draw])
    return of_run(log, name, seen, simulated.torque_noise_nm * rng.normal(size=log.torque.shape)), log.plant
