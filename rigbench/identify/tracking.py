"""What an identified model is worth: how well the hidden machine tracks with it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path

from rigbench.arm.files import ArmFiles
from rigbench.identify.identified import identified_files
from rigbench.identify.procedure import Identification, Simulated, Tracked, practice_run
from rigbench.identify.regressor import Terms
from rigbench.motion.motion import Motion
from rigbench.rig import Run, simulate
from rigbench.scores.of_run import score_run

__all__ = ["tracked"]

EVERY = Terms()


def tracked(done: Identification, simulated: Simulated, motions: Mapping[str, Motion]) -> tuple[Tracked, ...]:
    """Run motions on the hidden machine under computed torque with the declared and the identified model.

    And with one whose links, rotors and friction are the machine's own. Sensors are exact here, so that what
    is left is the model's and the law's: how much noise adds is a question for an experiment.
    """
    terms, truth = done.settings.terms, done.truth
    if truth is None:
        raise ValueError("there is a hidden machine in practice alone")

    exact = replace(simulated, noise_deg=0.0)
    models: dict[str, ArmFiles | None] = {
        "declared_mm": None,
        "identified_mm": identified_files(done.files, terms, done.result.arm, Path(), "identified"),
        "exact_mm": identified_files(done.files, EVERY, truth, Path(), "exact"),
    }
    return tuple(
        Tracked(
            name,
            **{
                whose: _error(practice_run(done.files, done.settings, exact, motion, 0, believed))
                for whose, believed in models.items()
            },
        )
        for name, motion in motions.items()
    )


def _error(run: Run) -> float | None:
    """Return the largest tool error of a run [mm]; None if it did not finish."""
    log = simulate(run)
    scores = score_run(log, run.motion, run.settle_band_mm)
    return scores.get("tool_peak_mm")
