"""The whole of it: from an arm file and recordings to an identified arm, checked on another motion."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.case import Case
from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch, draw_values
from rigbench.errors import InputFaults
from rigbench.identify.base import Indices, base_of, base_of_load
from rigbench.identify.consistent import SPREAD, Consistent, consistent
from rigbench.identify.estimate import Estimate, TorqueError, estimate, torque_error
from rigbench.identify.filtering import CORNER_HZ, NONE, Rows, rows_of
from rigbench.identify.load import Load, carried_columns, identify_with_load
from rigbench.identify.recording import Recording, of_run
from rigbench.identify.regressor import Terms, parameter_values
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.motion import Motion
from rigbench.rig import Rates, Run, simulate
from rigbench.rig.sampled import Sensing, noise_of

__all__ = ["Identification", "Settings", "Simulated", "identify", "practice_run", "record"]


LAW = "computed-torque"


@dataclass(frozen=True)
class Settings:
    """What is identified, and how: gravity [m/s^2], corner of the filters, spread of the declared values."""

    terms: Terms = field(default_factory=Terms)
    gravity: tuple[float, float, float] = (0.0, 0.0, -9.81)
    corner_hz: float = CORNER_HZ
    spread: float = SPREAD


@dataclass(frozen=True)
class Tracked:
    """The largest tool error [mm] along a motion of the hidden machine, by model; None: it did not finish.

    ``exact_mm`` is that of a model equal to the machine: what the law's sampling leaves.
    """

    motion: str
    declared_mm: float | None
    identified_mm: float | None
    exact_mm: float | None


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
    load: Load | None = None  # what the last link carried in further recordings
    tracked: tuple[Tracked, ...] = ()  # what the identified model is worth, where that was asked

    @property
    def loaded_arm(self) -> Arm | None:
        """The identified arm whose last link carries the identified load; None where there is no load."""
        if self.load is None:
            return None
        parameters = self.result.arm.parameters.copy()
        parameters[-1] += self.load.parameters
        return self.result.arm.replaced(parameters)

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
    """A machine to practise on: the declared arm with a hidden mismatch at level 1, and noisy sensors.

    ``loaded`` states what it carries when it moves a second time; None where it does not.
    """

    mismatch: Mismatch
    sources: tuple[str, ...]
    seed: int = 0
    noise_deg: float = 0.0
    torque_noise_nm: float = 0.0
    loaded: Case | None = None


def identify(
    files: ArmFiles,
    settings: Settings,
    recordings: Sequence[Recording],
    check: Recording | None = None,
    truth: Arm | None = None,
    loaded: Sequence[Recording] = (),
    loaded_truth: Arm | None = None,
) -> Identification:
    """Return the arm that recordings of it show, near the declared one; InputFaults where they can't.

    ``loaded`` are recordings of the same arm with a load: then also what that is. ``truth`` and
    ``loaded_truth`` are the hidden machine without and with it.
    """
    arm, terms = files.arm(), settings.terms
    base = base_of(arm, settings.gravity, terms)

    def rows(recording: Recording, further: Indices = NONE) -> Rows:
        return rows_of(arm, settings.gravity, terms, base, recording, settings.corner_hz, further)

    fitted, load = [rows(recording) for recording in recordings], None
    if loaded:
        load_base = base_of_load(arm, settings.gravity)
        carrying = [rows(recording, carried_columns(arm, load_base)) for recording in loaded]
        bases = base, load_base
        found, result, load = identify_with_load(arm, terms, bases, fitted, carrying, settings.spread)
        if truth is not None and loaded_truth is not None:
            load = replace(load, truth=loaded_truth.parameters[-1] - truth.parameters[-1])
    else:
        found = estimate(base, fitted)
        result = consistent(arm, terms, found, settings.spread)
    shown = fitted[0] if check is None else rows(check)
    return Identification(files, settings, found, result, shown, check is not None, truth, load)


def record(
    files: ArmFiles,
    settings: Settings,
    simulated: Simulated,
    motion: Motion,
    name: str,
    draw: int,
    loaded: bool = False,
) -> tuple[Recording, Arm]:
    """Run a motion on the hidden machine and return what its sensors recorded, and the machine.

    As :func:`practice_run`, with the declared arm as the model. ``loaded``: it carries what is stated, of
    which the model knows nothing. Raises InputFaults if the run does not finish.
    """
    run = practice_run(files, settings, simulated, motion, draw)
    run = replace(run, case=simulated.loaded if loaded else None)
    log = simulate(run)
    if log.outcome != "finished":
        problem = f"the hidden machine did not follow {name}: {log.reason or log.outcome}"
        less = "load" if loaded else "mismatch or noise_deg"
        raise InputFaults.one(files.path, "", problem, f"a lower limit_percent, or less {less}")
    seen = noise_of(run.sensing, len(log.t), files.arm(), simulated.seed, draw)
    rng = np.random.default_rng([simulated.seed, draw])
    return of_run(log, name, seen, simulated.torque_noise_nm * rng.normal(size=log.torque.shape)), log.plant


def practice_run(
    files: ArmFiles,
    settings: Settings,
    simulated: Simulated,
    motion: Motion,
    draw: int,
    model: ArmFiles | None = None,
) -> Run:
    """Return the run of a motion on the hidden machine under computed torque, 5 Hz, at 1 kHz.

    ``model`` is what the law believes, None: the declared arm. ``draw`` numbers the noise of the sensors; the
    machine is the same for all.
    """
    options = options_model(registered().laws[LAW].cls)  # type: ignore[arg-type]  # classes are hashable
    law = choose(LAW, options(natural_hz=5.0))
    start = tuple(motion.reference(np.zeros(1))[0][0].tolist())
    machine = draw_values(files.arm(), simulated.mismatch, simulated.sources, simulated.seed, 0)
    return Run(
        files, law, motion, Rates(), start, 0.5, simulated.seed, model, simulated.mismatch, 1.0,
        simulated.sources, draw, gravity=settings.gravity, sensing=Sensing(noise_deg=simulated.noise_deg),
        directions=tuple(machine.items()),
    )  # fmt: skip
