"""From the engine's joint states, tuples of Python numbers, into an array of ours."""

from __future__ import annotations

import struct
from collections.abc import Callable, Sequence
from functools import lru_cache
from typing import Any

from rigbench.arm.arm import Floats

__all__ = ["filler"]

Fill = Callable[[Sequence[Sequence[Any]]], None]


def filler(target: Floats) -> Fill:
    """Return a function that copies joint states into ``target`` (2, n): positions, then velocities.

    It takes n states, each of four entries with position and velocity first, as the engine gives them.
    """
    n = target.shape[1]
    pack_into, buffer = struct.Struct(f"{2 * n}d").pack_into, target.data.cast("B")
    fill: Fill = _unpacking(n)(pack_into, buffer)
    return fill


@lru_cache
def _unpacking(n: int) -> Callable[..., Any]:
    """Return the maker of a filler that names every number of n states.

    Written out it takes half the time of the loop that it stands for, and it runs at every physics step.
    """
    states = ", ".join(f"(q{i}, v{i}, _, _)" for i in range(n))
    numbers = ", ".join([f"q{i}" for i in range(n)] + [f"v{i}" for i in range(n)])
    fill = f"def fill(states):\n  {states}, = states\n  pack(into, 0, {numbers})"
    source = f"def make(pack, into):\n {fill}\n return fill"
    space: dict[str, Any] = {}
    exec(source, space)
    made: Callable[..., Any] = space["make"]
    return made
