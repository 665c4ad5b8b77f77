"""The run: one law, one motion, one plant, from start to end, as a value that any worker can do."""

from __future__ import annotations

import hashlib
import json
from dataclasses import astuple, dataclass, field
from typing import Any

import numpy as np

from rigbench.arm.arm import Arm
from rigbench.arm.collision import collision
from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Case, Mismatch, delay_of, draw_values, plant, tilt_of
from rigbench.laws.registry import LawChoice
from rigbench.motion.motion import Motion
from rigbench.rig.sampled import Sensing, Timing, inputs_of
from rigbench.rig.scene import SceneChoice

__all__ = ["NUMERICS", "Rates", "Run", "tilted"]

NUMERICS = 2
"""Raised by hand whenever a change of ours alters the numbers that a run yields: stored rows of the
old number are then not taken for the new. Golden rows in the tests tell when that has happened."""


@dataclass(frozen=True)
class Rates:
    """How often the law is called and how finely the engine steps [Hz]; physics_hz / control_hz is whole."""

    control_hz: float = 1000.0
    physics_hz: float = 2000.0


@dataclass(frozen=True)
class Run:
    """Everything that a run's result depends on, frozen and picklable.

    It carries the texts of arm and law files, so it can be done on a machine that has none of them.
    ``sources`` are the mismatch sources that act, at ``level``, in the direction of draw number
    ``draw`` (None where nothing is random), or in ``directions``, the u in [-1, 1] of every parameter that
    acts, by name; ``case`` is what is stated of the plant on top of that.
    Angles in rad, lengths in m unless the name says otherwise.
    """

    arm: ArmFiles
    law: LawChoice
    motion: Motion
    rates: Rates
    gain_pose: tuple[float, ...]
    settle_band_mm: float
    seed: int = 0
    model: ArmFiles | None = None  # what the law believes; None: the arm itself
    mismatch: Mismatch = field(default_factory=Mismatch)
    level: float = 0.0
    sources: tuple[str, ...] = ()
    draw: int | None = None
    start_offset: tuple[float, ...] = ()
    gravity: tuple[float, float, float] = (0.0, 0.0, -9.81)
    case: Case | None = None
    sensing: Sensing = field(default_factory=Sensing)
    timing: Timing = field(default_factory=Timing)
    base_tilt: tuple[float, float] = (0.0, 0.0)  # of the plant alone, about the base's x and y axes
    directions: tuple[tuple[str, float], ...] | None = None
    scene: SceneChoice | None = None  # what else is in the world; contacts are then on

    @property
    def noisy(self) -> bool:
        """Whether sensing or timing is random, so that draws differ whatever the plant."""
        return self.sensing.noise_deg > 0 or self.timing.random

    @property
    def plant_delay_ms(self) -> float:
        """The delay from tick to torque [ms] with what mismatch and case make of it."""
        return delay_of(self.timing.delay_ms, *self._departure)

    @property
    def plant_gravity(self) -> tuple[float, float, float]:
        """Gravity in the frame of the plant's base [m/s^2], tilted by what is declared, drawn and stated."""
        return tilted(self.gravity, tilt_of(self.base_tilt, *self._departure))

    @property
    def _departure(self) -> tuple[Any, ...]:
        """The arguments, from the mismatch on, of :func:`rigbench.arm.mismatch.plant` and its like."""
        directions = None if self.directions is None else dict(self.directions)
        return self.mismatch, self.level, self.sources, self.seed, self.draw or 0, self.case, directions

    def factors(self) -> dict[str, float]:
        """Return the u in [-1, 1] of every parameter that acts, by name; nothing where none does."""
        if self.level == 0 or (self.draw is None and self.directions is None):
            return {}
        values = draw_values(self.arm.arm(), self.mismatch, self.sources, self.seed, self.draw or 0)
        return values if self.directions is None else {name: dict(self.directions)[name] for name in values}

    def plant(self) -> Arm:
        """Return the arm that the engine plays."""
        return plant(self.arm.arm(), *self._departure)

    def inputs(self) -> dict[str, Any]:
        """Return the canonical inputs, defaults included, of which the key is the digest.

        Only what acts is in it: a source that is declared but not active here does not count, nor
        does the seed where nothing is random, nor a case where there is none. So another source,
        condition, law or draw in the experiment changes no key of the runs that were there before.
        """
        acts = self.level > 0 and self.sources != ()
        inputs: dict[str, Any] = {
            "numerics": NUMERICS,
            "arm": self.arm.digest,
            "model": None if self.model is None else self.model.digest,
            "law": self.law.inputs(),
            "motion": self.motion.inputs(),
            "rates": [self.rates.control_hz, self.rates.physics_hz],
            "gain_pose": list(self.gain_pose),
            "settle_band_mm": self.settle_band_mm,
            "start_offset": list(self.start_offset),
            "gravity": list(self.gravity),
            "mismatch": self.mismatch.inputs(self.sources if acts else ()),
            "level": self.level if acts else 0.0,
            "draw": [self.seed, self.draw] if (acts and self.directions is None) or self.noisy else None,
        }
        others = {
            "case": None if self.case is None else self.case.inputs(),
            "sensing": inputs_of(self.sensing),
            "timing": inputs_of(self.timing),
            "directions": sorted(self.directions) if acts and self.directions is not None else None,
            "base_tilt": list(self.base_tilt) if any(self.base_tilt) else None,
            "scene": None if self.scene is None else self._scene_inputs(self.scene),
        }
        return inputs | {name: value for name, value in others.items() if value is not None}

    def _scene_inputs(self, scene: SceneChoice) -> dict[str, Any]:
        """Return the scene's inputs, and the arm's shapes, which count only where they can be touched."""
        return scene.inputs() | {"shapes": [astuple(shape) for shape in collision(self.arm).shapes]}

    def key(self) -> str:
        """Return the run's key: a digest of all that its row depends on (hex, 40 digits)."""
        text = json.dumps(self.inputs(), sort_keys=True, separators=(",", ":"), allow_nan=False)
        return hashlib.blake2b(text.encode(), digest_size=20).hexdigest()


def tilted(gravity: tuple[float, float, float], tilt: tuple[float, float]) -> tuple[float, float, float]:
    """Return gravity [m/s^2] in the frame of a base tilted by ``tilt`` [rad] about its x, then its y axis."""
    if not any(tilt):
        return gravity
    (cx, sx), (cy, sy) = ((np.cos(angle), np.sin(angle)) for angle in tilt)
    about_x = np.array([[1, 0, 0], [0, cx, -sx], [0, sx, cx]])
    about_y = np.array([[cy, 0, sy], [0, 1, 0], [-sy, 0, cy]])
    x, y, z = (about_y @ about_x).T @ np.array(gravity)
    return float(x), float(y), float(z)
