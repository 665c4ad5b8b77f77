"""How the law meets the machine: what it senses, and when it is called."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any, Literal

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.mismatch import uniform

__all__ = ["DEFAULT_CORNER_HZ", "Sensing", "Timing", "noise_of", "ticks_of"]

DEFAULT_CORNER_HZ = 100.0
"""Corner of the velocity filter [Hz] where positions are counted or noisy and none is declared (our
choice: well above the usual natural frequencies, well below 1 kHz)."""


@dataclass(frozen=True)
class Sensing:
    """What the law sees of the state; scores always use the truth.

    ``encoder`` says on which side of an elastic joint encoders sit; ``noise_deg`` is the standard
    deviation of white noise on each sensed position, tick by tick [deg; mm for a prismatic joint];
    ``velocity_corner_hz`` the corner of the first-order filter on the difference of sensed positions
    [Hz], None for exact velocities, unless counts or noise make the default apply. Counts and zero
    offsets belong to the drives.
    """

    encoder: Literal["motor", "link"] = "motor"
    noise_deg: float = 0.0
    velocity_corner_hz: float | None = None

    def corner_hz(self, arm: Arm) -> float | None:
        """Return the corner that acts on ``arm``, None for exact velocities."""
        if self.velocity_corner_hz is None and (self.noise_deg > 0 or np.any(arm.drives.encoder_step > 0)):
            return DEFAULT_CORNER_HZ
        return self.velocity_corner_hz


@dataclass(frozen=True)
class Timing:
    """When the law is called, and when its torque acts.

    ``delay_ms``: from the tick to the torque, in whole and part physics steps [ms]. ``jitter_percent``: a
    tick comes late by up to this share of the control period, uniformly, in whole physics steps.
    ``dropped_percent``: share of ticks that are skipped at random, the torque held on. ``model_late``: the
    model term is handed on one model tick late, as if worked out beside the loop.
    """

    delay_ms: float = 0.0
    jitter_percent: float = 0.0
    dropped_percent: float = 0.0
    model_late: bool = False

    @property
    def random(self) -> bool:
        """Whether calls of the law come by chance."""
        return self.jitter_percent > 0 or self.dropped_percent > 0


def inputs_of(declared: Sensing | Timing) -> dict[str, Any] | None:
    """Return what differs from the default, for a run's key; None if nothing does."""
    default = asdict(type(declared)())
    return {name: value for name, value in asdict(declared).items() if value != default[name]} or None


def _random(seed: int, draw: int, what: str) -> np.random.Generator:
    """Return a generator of its own for each (seed, draw, purpose)."""
    return np.random.default_rng([int((uniform(seed, what, draw) + 1.0) * 2**51)])


def noise_of(sensing: Sensing, ticks: int, arm: Arm, seed: int, draw: int) -> Floats:
    """Return the noise on sensed positions, (ticks, n) [rad or m]; zeros where there is none."""
    if sensing.noise_deg == 0:
        return np.zeros((ticks, arm.n))
    scale = sensing.noise_deg * np.where(arm.kinds == 0.0, np.pi / 180, 1e-3)
    noise: Floats = _random(seed, draw, "sensing.noise").standard_normal((ticks, arm.n)) * scale
    return noise


def ticks_of(timing: Timing, ticks: int, substeps: int, seed: int, draw: int) -> list[int]:
    """Return for each tick the physics step within it at which the law is called; -1 for a dropped one.

    The first tick comes in time: a controller starts with a command.
    """
    if not timing.random:
        return [0] * ticks
    random = _random(seed, draw, "timing")
    late = np.floor(random.random(ticks) * (timing.jitter_percent / 100 * substeps + 1)).astype(int)
    late = np.minimum(late, substeps - 1)
    dropped = random.random(ticks) < timing.dropped_percent / 100
    late[0], dropped[0] = 0, False
    calls: list[int] = np.where(dropped, -1, late).tolist()
    return calls
