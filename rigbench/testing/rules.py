"""The rules for laws, in words, and what is found against them."""

from __future__ import annotations

from dataclasses import dataclass, field

from rigbench.errors import BrokenRule

__all__ = ["Findings"]

RULES = {
    "form": (
        "start(self, setup) and torque(self, t, q, v, ref, held), by these names; options that can be read",
        "define the methods as rigbench.laws.Law does, and options by option(...)",
    ),
    "options": (
        "plain values (numbers, texts, true or false, lists of them) that keep their own bounds and survive "
        "pickling, since a run carries them to other processes",
        "declare each option with a type, a unit and a plain default, and build what is not plain in start",
    ),
    "raises": (
        "no exception, on arms of 1 to 7 joints, turning and sliding, with limits and without",
        "take the number of joints from setup.n and what else depends on the arm from setup",
    ),
    "shape": (
        "a torque of shape (n,) and a flat model term whose size stays the same, both of real numbers",
        "return an array with one number for each joint, n = setup.n",
    ),
    "finite": (
        "finite numbers, also at rest, at the limits of speed and where a drive has no limits (they are inf)",
        "look for a division by an error, a speed or a limit that may be 0 or inf",
    ),
    "inputs": (
        "q, v, ref, held and setup as they were before the call",
        "work on copies: q = q.copy(), or q - x in place of q -= x",
    ),
    "references": (
        "the same torques when the arrays handed in are used for other things after the call",
        "keep copies: self.last = q.copy()",
    ),
    "determinism": (
        "the same torques from the same calls, bit for bit, whatever ran before",
        "no clock, no unseeded random numbers, nothing kept in the class or the module",
    ),
    "start": (
        "after start the torques of a new law, bit for bit",
        "set all that the law remembers in start, and nowhere else first",
    ),
    "kernels": (
        "kernels of the form that rigbench.laws.Compiled states, which write io[TAU] and held alone",
        "keep memory in own, as float64 of shape (rows, n), and give held_size",
    ),
    "compiled torque": (
        "the torque of the plain method, to 1e-9 of its size",
        "compare the two line by line; both must keep the same memory",
    ),
    "compiled model term": (
        "the numbers of the plain method, to 1e-9 of their size",
        "compare the two line by line; a law with model_term needs both as kernels",
    ),
    "closed loop": (
        "an arm that moves by 0.3 rad (0.1 m) in 0.4 s and stays within ten times its speed limit for 0.5 s",
        "look at the signs of the feedback (reference minus sensed) and at the size of the gains",
    ),
}
"""What is expected, and what to do, by rule."""


@dataclass
class Findings:
    """What was found, rule by rule: on which arms, and what on the first of them."""

    arms: int = 1
    first: dict[str, str] = field(default_factory=dict)
    where: dict[str, list[str]] = field(default_factory=dict)

    def add(self, rule: str, found: str, arm: str = "") -> None:
        """Keep what was found against a rule, on an arm where it is one's own fault."""
        self.first.setdefault(rule, found)
        arms = self.where.setdefault(rule, [])
        if arm and arm not in arms:
            arms.append(arm)

    def broken(self) -> tuple[BrokenRule, ...]:
        """Return the broken rules in their order."""
        return tuple(
            BrokenRule(rule, self._words(rule), expected, remedy)
            for rule, (expected, remedy) in RULES.items()
            if rule in self.first
        )

    def _words(self, rule: str) -> str:
        arms, found = self.where[rule], self.first[rule]
        if not arms:
            return found
        others = f" (and on {len(arms) - 1} more of {self.arms} arms)" if len(arms) > 1 else ""
        only = f" (on this one of {self.arms} arms alone)" if len(arms) == 1 and self.arms > 1 else ""
        return f"on an arm of {arms[0]}, {found}{others}{only}"
