"""How the law of an experiment meets the machine: sensing and timing, held against rates and arm."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Arm
from rigbench.experiment.findings import Findings
from rigbench.experiment.rig_keys import SensingKeys, TimingKeys
from rigbench.rig.run import Rates
from rigbench.rig.sampled import Sensing, Timing

__all__ = ["sensing_of", "timing_of"]


def sensing_of(keys: SensingKeys, arm: Arm, findings: Findings) -> Sensing:
    """Return what the law senses of ``arm``."""
    if keys.encoder == "link" and not np.isfinite(arm.drives.stiffness).any():
        findings.note(("sensing", "encoder"), "has no effect: every transmission is rigid")
    return Sensing(keys.encoder, keys.noise_deg, keys.velocity_corner_hz)


def timing_of(keys: TimingKeys, rates: Rates, findings: Findings) -> Timing | None:
    """Return when the law is called; None where it can't be called so at these rates."""
    steps = round(rates.physics_hz / rates.control_hz)
    late = keys.jitter_percent / 100 * steps
    path = ("timing", "jitter_percent")
    if late > 0 and steps == 1:
        problem = f"a tick can't come late by part of a step: physics_hz is control_hz, {rates.control_hz:g}"
        findings.clash(path, problem, "physics_hz above control_hz, or 0")
        return None
    if 0 < late < 1:
        said = f"less than a step of the engine, {100 / steps:g} percent: some ticks come late by a whole one"
        findings.note(path, said)
    return Timing(keys.delay_ms, keys.jitter_percent, keys.dropped_percent, keys.model_late)
