"""The base class of control laws, and what a law is told when it starts."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any, NamedTuple, dataclass_transform

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.laws.model import Model

__all__ = [
    "A_REF",
    "CLOCK",
    "Q_REF",
    "SEES",
    "TAU",
    "V_REF",
    "Compiled",
    "Law",
    "Q",
    "Reference",
    "Setup",
    "V",
    "option",
]

Q, V, Q_REF, V_REF, A_REF, TAU, CLOCK = range(7)
"""Rows of ``io``, shape (7, n), by which a compiled law reads its inputs and writes its torque:
position, velocity, the reference's three, the torque it commands; ``io[CLOCK, 0]`` is the time [s]."""

SEES = CLOCK + 1
"""How many rows that are."""


class Reference(NamedTuple):
    """Where the motion wants the joints now: position [rad], velocity [rad/s], acceleration [rad/s^2]."""

    q: Floats
    v: Floats
    a: Floats


@dataclass(frozen=True, eq=False)
class Setup:
    """What a law knows when it starts: its believed model, its rates and the drives' limits."""

    joints: tuple[str, ...]
    model: Model
    control_hz: float
    gain_pose: Floats  # (n,) [rad]: gains given as frequencies are worked out here
    torque_limit: Floats  # (n,) [N m], inf for none
    speed_limit: Floats  # (n,) [rad/s], inf for none

    @property
    def n(self) -> int:
        """Number of joints."""
        return len(self.joints)


@dataclass(frozen=True, eq=False)
class Compiled:
    """A law's two functions as numba kernels, for the rig to call without Python in between.

    ``torque(io, held, chain, own)`` writes ``io[TAU]``; ``model_term(io, held, chain, own)`` writes
    ``held``; both return nothing and must not keep state but in ``own``. ``io`` (7, n) as above,
    ``held`` (held_size,), ``chain`` (n + 1, 26) the believed chain, ``own`` (rows, n) whatever the law
    put there: gains, believed friction, memory. All float64, C-ordered.
    """

    torque: Callable[[Floats, Floats, Floats, Floats], None]
    own: Floats
    model_term: Callable[[Floats, Floats, Floats, Floats], None] | None = None
    held_size: int = 0


def option(
    default: Any,
    unit: str = "",
    doc: str = "",
    *,
    above: float | None = None,
    at_least: float | None = None,
    choices: Sequence[str] = (),
    per_joint: bool = False,
) -> Any:
    """Declare an option of a law: a typed class attribute that the experiment file may set.

    ``unit`` and ``doc`` are shown by ``rigbench laws NAME``; ``above`` and ``at_least`` bound a number
    (or each number of a list), ``choices`` the texts allowed, ``per_joint`` says that a list needs one
    entry for each joint.
    """
    about = {
        "unit": unit, "doc": doc, "above": above, "at_least": at_least, "choices": tuple(choices),
        "per_joint": per_joint,
    }  # fmt: skip
    return field(default=default, metadata=about)


@dataclass_transform(kw_only_default=True, eq_default=False, field_specifiers=(option, dataclasses.field))
@dataclass(kw_only=True, eq=False)
class Law:
    """A control law: options as typed fields, ``start`` and ``torque``; the rest is optional.

    A subclass becomes a keyword-only data class of its options; it must not write its own
    ``__init__``. ``start`` is called before every run and must leave nothing of the run before.
    Between ticks the rig holds the torque; at a limit the drive cuts it.
    """

    def __init_subclass__(cls, **kwargs: Any) -> None:
        super().__init_subclass__(**kwargs)
        if "__init__" in cls.__dict__:
            raise TypeError(f"law {cls.__name__} must not define __init__: options are class attributes")
        documented = cls.__doc__
        dataclass(kw_only=True, eq=False)(cls)
        cls.__doc__ = documented  # a data class without a docstring is given its signature for one

    @classmethod
    def conflict(cls, given: frozenset[str]) -> str | None:
        """Return why the options named in ``given`` can't be set together, or None if they can."""
        del given
        return None

    def start(self, setup: Setup) -> None:
        """Take the setup and reset all state."""
        raise NotImplementedError

    def torque(self, t: float, q: Floats, v: Floats, ref: Reference, held: Floats) -> Floats:
        """Return the torque (n,) [N m] at the joints, rotors included, for this control tick.

        ``t`` [s]; ``q``, ``v`` (n,) as sensed; ``held`` the last result of ``model_term``, or an empty
        array for a law without one.
        """
        raise NotImplementedError

    def model_term(self, t: float, q: Floats, v: Floats, ref: Reference) -> Floats:
        """Return what may run slower, a flat array of any size.

        Called at the law's option ``model_hz`` where it has one, else at every control tick.
        """
        del t, q, v, ref
        return np.empty(0)

    def compiled(self) -> Compiled | None:
        """Return the law's kernels after ``start``, or None for a law in plain Python."""
        return None
