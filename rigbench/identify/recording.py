"""What was recorded along a motion: time, positions, torques and, if measured, velocities."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.rig.log import Log

__all__ = ["Recording", "of_run"]


@dataclass(frozen=True, eq=False)
class Recording:
    """One motion of an arm as its sensors saw it, at equal steps of time, in SI units.

    ``torque`` is that of the motors, at the joint, at the same instants as the positions.
    """

    name: str  # the file, or what the user knows it by
    t: Floats  # (N,) [s]
    q: Floats  # (N, n) [rad or m]
    v: Floats | None  # (N, n) [rad/s or m/s]; None where only positions were recorded
    torque: Floats  # (N, n) [N m or N]

    @property
    def duration_s(self) -> float:
        """Time from the first sample to the last [s]."""
        return float(self.t[-1] - self.t[0])

    @property
    def rate_hz(self) -> float:
        """Samples a second [Hz]."""
        return (len(self.t) - 1) / self.duration_s


def of_run(
    log: Log, name: str, q_noise: Floats | float = 0.0, torque_noise: Floats | float = 0.0
) -> Recording:
    """Return what sensors with this noise, (N, n) [rad, N m], would have recorded of a run on the rig.

    Positions carry the zero offset and the counts of the plant's encoders. A torque is held from tick
    to tick: at the tick itself it is taken as the mean of that before and that after, which is right
    to the second order in the period.
    """
    drives = log.plant.drives
    q = log.q + q_noise + drives.encoder_offset
    counted = drives.encoder_step > 0
    step = np.where(counted, drives.encoder_step, 1.0)
    q = np.where(counted, np.round(q / step) * step, q)
    torque = log.torque.copy()
    torque[1:] = 0.5 * (log.torque[1:] + log.torque[:-1])
    return Recording(name, log.t, q, None, torque + torque_noise)
