"""Limits that excitation keeps: of joints, speeds, torques and of the tool's place."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.arm.dynamics import tool_path

__all__ = ["SHARE", "Bounds", "bounds_of"]

SHARE = 0.9
"""Default share of the arm's own limits that excitation may use (our choice): the rest is the law's."""


@dataclass(frozen=True, eq=False)
class Bounds:
    """What a motion must stay within; arrays (n,) in SI units, inf where nothing limits.

    ``tool_least`` and ``tool_most`` (3,) [m] are two corners of a box in the base frame.
    """

    lower: Floats
    upper: Floats
    speed: Floats
    torque: Floats
    tool_least: Floats
    tool_most: Floats

    def excess(self, q: Floats, v: Floats, torque: Floats, chain: Floats) -> Floats:
        """Return by which share each limit is passed at each of N states, (N, limits); 0 or below within it.

        Positions count in shares of the range, the tool's distance from its box in units of 0.1 m.
        """
        room = self.upper - self.lower
        parts = [(self.lower - q) / room, (q - self.upper) / room]
        parts += [np.abs(v) / self.speed - 1, np.abs(torque) / self.torque - 1]
        if np.isfinite(self.tool_least).any() or np.isfinite(self.tool_most).any():
            tool = tool_path(chain, np.ascontiguousarray(q))[0]
            parts += [(self.tool_least - tool) / 0.1, (tool - self.tool_most) / 0.1]
        return np.concatenate(parts, axis=1)


def bounds_of(
    arm: Arm,
    share: float = SHARE,
    tool_least: tuple[float, float, float] | None = None,
    tool_most: tuple[float, float, float] | None = None,
) -> Bounds:
    """Return ``share`` of the arm's limits: of each joint's range about its middle, of speeds and of torques.

    A joint without limits of position may turn by 180 degrees, or move by 1 m, to either side.
    """
    turn = np.where(arm.kinds == PRISMATIC, 1.0, np.pi)
    lower = np.where(
        np.isfinite(arm.lower), arm.lower, np.where(np.isfinite(arm.upper), arm.upper, turn) - 2 * turn
    )
    upper = np.where(np.isfinite(arm.upper), arm.upper, lower + 2 * turn)
    middle, half = (lower + upper) / 2, share * (upper - lower) / 2
    return Bounds(
        lower=middle - half,
        upper=middle + half,
        speed=share * arm.drives.speed_limit,
        torque=share * arm.drives.torque_limit,
        tool_least=np.full(3, -np.inf) if tool_least is None else np.array(tool_least, float),
        tool_most=np.full(3, np.inf) if tool_most is None else np.array(tool_most, float),
    )
