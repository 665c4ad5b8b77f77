"""Gains of proportional-derivative laws: as a frequency and a damping ratio, or joint by joint."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.laws.law import Law, Setup, option
from rigbench.laws.model import FrictionTerm

__all__ = ["PdLaw", "positive_damping", "positive_kd"]

KD_UNIT = "N m s/rad; s^-1 where feedback passes through the inertia matrix"
KD_DOC = "derivative gains, one for each joint, in place of damping"


def positive_damping() -> float:
    """Declare the option ``damping`` of a law that divides by the derivative gain."""
    ratio: float = option(1.0, "", "damping ratio of the closed loop", above=0)
    return ratio


def positive_kd() -> tuple[float, ...] | None:
    """Declare the option ``kd`` of a law that divides by it."""
    gains: tuple[float, ...] | None = option(None, KD_UNIT, KD_DOC, above=0, per_joint=True)
    return gains


class PdLaw(Law):
    """Options shared by the laws with proportional-derivative feedback.

    From ``natural_hz``: w = 2 pi natural_hz, and where feedback acts as torque kp = J' w^2,
    kd = 2 damping J' w with J' = G^2 Jm + M_jj of the model at the gain pose (its believed payload in
    it; viscous friction is not subtracted). Where feedback passes through the inertia matrix,
    kp = w^2 and kd = 2 damping w.
    """

    through_inertia: ClassVar[bool] = False

    natural_hz: float = option(5.0, "Hz", "natural frequency of the closed loop", above=0)
    damping: float = option(1.0, "", "damping ratio of the closed loop", at_least=0)
    kp: tuple[float, ...] | None = option(
        None,
        "N m/rad; s^-2 where feedback passes through the inertia matrix",
        "proportional gains, one for each joint, in place of natural_hz",
        at_least=0,
        per_joint=True,
    )
    kd: tuple[float, ...] | None = option(None, KD_UNIT, KD_DOC, at_least=0, per_joint=True)

    friction: FrictionTerm = option(
        "none",
        "",
        "believed friction to add, at the reference's velocity",
        choices=("none", "viscous", "full"),
    )

    @classmethod
    def conflict(cls, given: frozenset[str]) -> str | None:
        """Refuse half a set of explicit gains, and both sets at once."""
        explicit = given & {"kp", "kd"}
        if len(explicit) == 1:
            (one,), (other,) = explicit, {"kp", "kd"} - explicit
            return f"'{one}' needs '{other}' beside it"
        if explicit and given & {"natural_hz", "damping"}:
            return "gains are given twice: either natural_hz and damping, or kp and kd"
        return None

    def start(self, setup: Setup) -> None:
        """Take the model and work out the gains."""
        self._model = setup.model
        self._kp, self._kd = self._gains(setup)

    def own_rows(self) -> Floats:
        """Return what the kernels need, (6, n): kp, kd and the believed friction's four rows."""
        return np.vstack([self._kp, self._kd, self._model.friction_rows(self.friction)])

    def _gains(self, setup: Setup) -> tuple[Floats, Floats]:
        if self.kp is not None and self.kd is not None:
            return np.array(self.kp, dtype=float), np.array(self.kd, dtype=float)
        inertia = np.diag(setup.model.mass_matrix(setup.gain_pose))
        scale = np.ones(setup.n) if self.through_inertia else inertia
        w = 2.0 * np.pi * self.natural_hz
        return scale * w**2, 2.0 * self.damping * scale * w
