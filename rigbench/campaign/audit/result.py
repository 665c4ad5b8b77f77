"""What an audit of an arm finds."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import asdict, dataclass
from typing import Any

from rigbench.rig.log import RESIDUAL_LIMIT

__all__ = [
    "ACCELERATION_LIMIT",
    "Accelerations",
    "Audit",
    "Convergence",
    "Momentum",
    "Rest",
    "Slide",
    "Swing",
    "order_of",
]

ACCELERATION_LIMIT = 1e-6
"""A larger relative difference of accelerations means that engine and model are not the same machine: far
more than rounding leaves in an ill-conditioned chain (1e-9), far less than any data sheet knows (1e-3)."""

Series = tuple[float, ...]


@dataclass(frozen=True)
class Accelerations:
    """The engine's acceleration against the model's in random states.

    ``differences``: by joint, the largest over the states, as a share of the RMS of the acceleration
    asked of that joint.
    """

    states: int
    joints: tuple[str, ...]
    differences: Series

    @property
    def worst(self) -> float:
        """The largest difference."""
        return max(self.differences)

    @property
    def worst_joint(self) -> str:
        """The joint that has it."""
        return self.joints[self.differences.index(self.worst)]


@dataclass(frozen=True)
class Swing:
    """A free swing without friction, rotors included: how far its energy strays, by physics_hz.

    ``drifts``: largest departure from the energy at the start, over the peak kinetic energy. ``traces``:
    that departure over time, at ``times`` [s], for the picture.
    """

    seconds: float
    physics_hz: Series
    drifts: Series
    order: float | None
    peak_kinetic_j: float
    times: Series
    traces: tuple[Series, ...]


@dataclass(frozen=True)
class Momentum:
    """Momentum along the first joint in the same swing, where gravity can't change it.

    ``why`` says why it applies or does not; ``drifts``, by physics_hz, over the largest momentum there.
    """

    applies: bool
    why: str
    physics_hz: Series = ()
    drifts: Series = ()


@dataclass(frozen=True)
class Convergence:
    """Runs of one law along the reference motion at ever finer steps, against what they converge to.

    ``against`` is 'ode' (a tight ODE solution of the same sampled loop) or 'finest' (the engine at 16
    steps a control tick). ``errors``, by physics_hz: largest position error of any joint [rad or m].
    ``used``: the worst score's difference over what is allowed, which is 1 % of the score, or 0.001 mm or
    1e-4 deg where that is more; ``worst``: that score's name. ``note`` says why nothing could be judged.
    """

    law: str
    natural_hz: float
    dry: bool  # as declared, with dry friction and limits; else what an ODE solver can take
    against: str
    physics_hz: Series
    errors: Series
    used: Series
    worst: tuple[str, ...]
    order: float | None
    note: str = ""

    @property
    def needed_hz(self) -> float | None:
        """The smallest physics_hz from which on all finer steps are good; None where there is none."""
        needed = None
        for hz, used in zip(reversed(self.physics_hz), reversed(self.used), strict=True):
            if not used <= 1.0:
                break
            needed = hz
        return needed


@dataclass(frozen=True)
class Rest:
    """Joints at rest, loaded below breakaway; ``how`` says which, ``drift`` [rad or m] how far they came."""

    how: str
    seconds: float
    drift: float | None


@dataclass(frozen=True)
class Slide:
    """A joint that slides to a stop by its own dry and viscous friction, against the closed form.

    ``speed`` [rad/s] at the start, ``stop_s`` and ``travel`` [rad] as measured, ``exact_*`` from the form.
    """

    joint: str
    speed: float
    stop_s: float
    exact_stop_s: float
    travel: float
    exact_travel: float

    @property
    def stop_off(self) -> float:
        """The stopping time's error, as a share."""
        return abs(self.stop_s / self.exact_stop_s - 1.0)

    @property
    def travel_off(self) -> float:
        """The stopping angle's error, as a share."""
        return abs(self.travel / self.exact_travel - 1.0)


@dataclass(frozen=True)
class Audit:
    """The whole audit. ``unit``: of positions, 'rad', 'm', or 'rad or m' where the arm has both."""

    path: str
    name: str
    joints: tuple[str, ...]
    unit: str
    accelerations: Accelerations
    swing: Swing
    momentum: Momentum
    convergences: tuple[Convergence, ...]
    rest: Rest
    slides: tuple[Slide, ...]
    residual: float  # [rad/s], the largest in all of the above

    @property
    def agrees(self) -> bool:
        """Whether engine and model are the same machine, by accelerations and by residual."""
        return self.accelerations.worst <= ACCELERATION_LIMIT and self.residual <= RESIDUAL_LIMIT

    @property
    def physics_hz(self) -> float | None:
        """The physics_hz that every run which could be judged needs; None if none is fine enough."""
        needed = [convergence.needed_hz for convergence in self.convergences if not convergence.note]
        if not needed or None in needed:
            return None
        return max(hz for hz in needed if hz is not None)

    @property
    def verdict(self) -> str:
        """The two answers in words."""
        if not self.agrees:
            return (
                "engine and model do NOT agree: what the rig measures on this arm is not the declared machine"
            )
        agree = "engine and model agree"
        judged = [convergence for convergence in self.convergences if not convergence.note]
        if not judged:
            return f"{agree}; which physics_hz this arm needs can't be told, for no run got to its end"
        if self.physics_hz is None:
            finest = max(judged[0].physics_hz)
            return f"{agree}; not even physics_hz {finest:g} gives scores good to 1 % on this arm"
        return f"{agree}; scores good to 1 % need physics_hz {self.physics_hz:g} on this arm"

    def document(self) -> dict[str, Any]:
        """Return everything as plain values for JSON; what is infinite or not a number is None."""
        found = asdict(self)
        for convergence, plain in zip(self.convergences, found["convergences"], strict=True):
            plain["needed_hz"] = convergence.needed_hz
        for slide, plain in zip(self.slides, found["slides"], strict=True):
            plain |= {"stop_off": slide.stop_off, "travel_off": slide.travel_off}
        for name in ("times", "traces"):
            del found["swing"][name]
        found["accelerations"] |= {
            "worst": self.accelerations.worst,
            "worst_joint": self.accelerations.worst_joint,
        }
        found |= {"agrees": self.agrees, "physics_hz": self.physics_hz, "verdict": self.verdict}
        plain_found: dict[str, Any] = _plain(found)
        return plain_found


def order_of(steps: Series, errors: Series, floor: float = 0.0) -> float | None:
    """Return the order at which errors fall with the step: the slope between coarsest and finest, in logs.

    ``steps`` as rates [Hz]. Only errors above ``floor``, below which rounding rules, count; None with
    fewer than two of them.
    """
    kept = [(hz, error) for hz, error in zip(steps, errors, strict=True) if floor < error < math.inf]
    if len(kept) < 2:
        return None
    (low, coarse), (high, fine) = kept[0], kept[-1]
    return math.log(coarse / fine) / math.log(high / low)


def _plain(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value
