"""The motion: the reference that the arm tracks."""

from __future__ import annotations

from typing import Any, Protocol

from rigbench.arm.arm import Floats

__all__ = ["Motion"]


class Motion(Protocol):
    """What every motion offers; implementations are frozen, hashable, comparable and picklable.

    Positions are in rad (m for a prismatic joint), one column per joint in the chain's order.
    """

    def __hash__(self) -> int: ...

    @property
    def duration_s(self) -> float:
        """Time from the first point to the end of the last rest [s]."""
        ...

    @property
    def rests(self) -> tuple[tuple[float, float], ...]:
        """Where the reference stands still after a leg: (end of the leg, end of the rest) [s]."""
        ...

    def reference(self, t: Floats) -> tuple[Floats, Floats, Floats]:
        """Return position, velocity and acceleration (q, v, a), each (N, n), at the times t (N,) [s].

        Velocity and acceleration are the exact derivatives of the position. Outside
        [0, duration_s] the nearer end is held, at rest.
        """
        ...

    def paced(self, factor: float) -> Motion:
        """Return the same motion at ``factor`` (above 0) times its pace."""
        ...

    def inputs(self) -> dict[str, Any]:
        """Return what the reference depends on as a JSON-able dict, the same for equal motions."""
        ...
