"""What an identification's page draws, in numbers: torques and their errors, parameters by their effect."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.identify.estimate import TorqueError
from rigbench.identify.procedure import Identification

__all__ = ["Departures", "Shown"]

LEAST_VARIED = 1e-12
"""Below this [N m; N] a joint's torque does not vary, and nothing can be a share of that."""


@dataclass(frozen=True, eq=False)
class Departures:
    """How far from the estimate other base parameters are, by what that does to torque.

    Each (b,) [%]: the distance times the rms of the parameter's column along the shown motion, over how
    much the torque of the ``joint`` (b,) varies for which that is most. ``half`` is half the 95 % interval.
    """

    joint: NDArray[np.intp]
    half: Floats
    declared: Floats
    identified: Floats
    true: Floats | None

    @property
    def order(self) -> list[int]:
        """The parameters from the least well known to the best."""
        order: list[int] = np.argsort(-self.half, kind="stable").tolist()
        return order


class Shown:
    """An identification with what is worked out of it for the page, once."""

    def __init__(self, done: Identification) -> None:
        self.done, self.rows = done, done.rows
        self.arm: Arm = done.files.arm()
        self.predicted = {
            "declared": self.rows.y @ done.declared_values,
            "identified": self.rows.y @ done.identified_values,
        }
        """(S, n) [N m; N], by whose parameters."""
        self.errors: dict[str, TorqueError] = done.torque_errors

    @property
    def joints(self) -> tuple[str, ...]:
        """The joints' names."""
        return self.arm.joints

    @property
    def left_out(self) -> bool:
        """Whether samples were left out because a joint stood or turned back."""
        return not bool(self.rows.usable.all())

    @property
    def units(self) -> list[str]:
        """Unit of each joint's torque."""
        return ["N" if kind == PRISMATIC else "N m" for kind in self.arm.kinds]

    @property
    def unit(self) -> str:
        """Unit of all of them."""
        return "; ".join(sorted(set(self.units), reverse=True))

    @property
    def varied(self) -> Floats:
        """How much each joint's torque varies, rms (n,) [N m; N]."""
        return self.errors["declared"].measured_nm

    @cached_property
    def shares(self) -> dict[str, Floats]:
        """Errors and the fit's noise (n,) [%] of how much a torque varies; nan where it does not."""
        sizes = {name: error.rms_nm for name, error in self.errors.items()}
        return {
            name: self._percent(size) for name, size in (sizes | {"noise": self.done.found.noise}).items()
        }

    def residual(self, whose: str, i: int) -> Floats:
        """Return measured less predicted torque of joint i (S,), nan where the sample is left out."""
        rest = self.rows.torque[:, i] - self.predicted[whose][:, i]
        return np.where(self.rows.usable[:, i], rest, np.nan)

    @cached_property
    def departures(self) -> Departures:
        """The base parameters by what they do to torques."""
        done, usable = self.done, self.rows.usable
        count = np.maximum(1, usable.sum(axis=0))[:, None]
        columns = np.sqrt((self.rows.y**2 * usable[:, :, None]).sum(axis=0) / count)
        shares = np.nan_to_num(self._percent(columns))
        joint = shares.argmax(axis=0)
        scale = shares.max(axis=0)
        values, (low, high), true = done.found.values, done.found.interval(), done.true_values
        return Departures(
            joint=joint,
            half=scale * (high - low) / 2,
            declared=scale * np.abs(done.declared_values - values),
            identified=scale * np.abs(done.identified_values - values),
            true=None if true is None else scale * np.abs(true - values),
        )

    def _percent(self, sizes: Floats) -> Floats:
        """Return sizes of torques (n, ...) in percent of how much they vary."""
        varied = np.where(self.varied > LEAST_VARIED, self.varied, np.nan)
        percent: Floats = 100 * (sizes.T / varied).T
        return percent
