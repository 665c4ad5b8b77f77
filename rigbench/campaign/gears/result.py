"""What each gear ratio does to the joints of an arm."""

from __future__ import annotations

import math
from dataclasses import asdict, dataclass
from typing import Any

__all__ = ["Course", "Geared", "Gears", "JointGears", "Tracked"]


@dataclass(frozen=True)
class Geared:
    """One joint at one gear ratio G; for a prismatic joint m, N and kg for rad, N m and kg m^2 at the joint.

    ``inertia_least`` and ``inertia_largest`` [kg m^2] as the motor feels it, M_jj(q)/G^2 + Jm over the
    workspace; ``damping_least`` and ``damping_largest``: of the closed loop at gains for the middle inertia;
    ``disturbance`` [N m] at the motor, the largest size of h_j/G, and its share of the motor's own torque
    limit; ``reflected`` = G^2 Jm; ``speed_limit`` [rad/s] at the joint; ``speed_used`` and ``torque_used``:
    the largest share of its limits that the motion takes, inf where there is nothing left; ``error_peak``
    [rad] in the engine. None for what no limit is declared for, and for the error of a run that came to
    nothing.
    """

    ratio: float
    inertia_least: float
    inertia_largest: float
    damping_least: float
    damping_largest: float
    disturbance: float
    disturbance_share: float | None
    reflected: float
    speed_limit: float | None
    speed_used: float | None
    torque_used: float | None
    error_peak: float | None

    @property
    def variation(self) -> float:
        """Largest over least inertia at the motor."""
        return self.inertia_largest / self.inertia_least

    @property
    def possible(self) -> bool:
        """Whether the motion stays within the limits that are declared."""
        return max(self.speed_used or 0.0, self.torque_used or 0.0) <= 1.0


@dataclass(frozen=True)
class JointGears:
    """One joint: what is declared of its drive, its links' inertia over the workspace, and every ratio.

    ``floor`` [rad]: peak acceleration of the reference over w^2, the error that is left to independent-joint
    control where the links are no disturbance.
    """

    joint: str
    prismatic: bool
    declared_ratio: float
    rotor_inertia: float
    gear_efficiency: float
    motor_torque_limit: float | None
    motor_speed_limit: float | None
    link_least: float
    link_largest: float
    floor: float
    ratios: tuple[Geared, ...]


@dataclass(frozen=True)
class Course:
    """The motion: one quintic leg between the quarter points of the joints' ranges, then a rest [s]."""

    start: tuple[float, ...]
    end: tuple[float, ...]
    leg_s: float
    rest_s: float


@dataclass(frozen=True)
class Tracked:
    """The run in the engine at one ratio: the tool's largest error, None with a reason if there is none."""

    ratio: float
    outcome: str
    reason: str
    tool_peak_mm: float | None


@dataclass(frozen=True)
class Gears:
    """All joints that were asked for, each ratio in turn for all of them at once.

    ``poses`` were sampled within the joints' ranges from ``seed``.
    """

    path: str
    name: str
    joints: tuple[JointGears, ...]
    ratios: tuple[float, ...]
    tracked: tuple[Tracked, ...]
    course: Course
    poses: int
    seed: int
    natural_hz: float
    damping: float
    control_hz: float

    def document(self) -> dict[str, Any]:
        """Return all of it, JSON-able; what is infinite is null."""
        document: dict[str, Any] = _finite(asdict(self))
        for joint, shown in zip(self.joints, document["joints"], strict=True):
            for geared, row in zip(joint.ratios, shown["ratios"], strict=True):
                row |= {"inertia_variation": geared.variation, "possible": geared.possible}
        return document


def _finite(value: Any) -> Any:
    if isinstance(value, dict):
        return {name: _finite(inner) for name, inner in value.items()}
    if isinstance(value, list | tuple):
        return [_finite(inner) for inner in value]
    return None if isinstance(value, float) and not math.isfinite(value) else value
