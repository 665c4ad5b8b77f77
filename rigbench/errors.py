"""Every error of rigbench, one tree.

::

    RigbenchError              exit code 1
    ├── InputFaults            2  what the user declared is at fault; carries every Fault found
    ├── PluginError               the user's own code raised an exception; ends as a row, not as an exit
    │   ├── LawError              a law did
    │   └── SceneError            a scene did, or did what a scene must not
    ├── RulesBroken               check_law found rules broken; carries every one; an AssertionError too
    ├── EngineError               the physics engine refused or died; ends as a row
    ├── Stopped                3  a campaign stopped before its end and can be resumed
    ├── ClusterLost            3  the machines that did its runs went away, and it can be resumed
    └── StoreError             5  the store or the disk
        ├── StoreBusy             another process writes to it
        └── StoreForeign          it belongs to another experiment, or isn't a store at all

Arguments go to ``super().__init__`` and the sentence is built in ``__str__``, so that an error
survives pickling on its way out of a worker.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from pathlib import Path

__all__ = [
    "BrokenRule",
    "ClusterLost",
    "EngineError",
    "Fault",
    "InputFaults",
    "LawError",
    "PluginError",
    "RigbenchError",
    "RulesBroken",
    "SceneError",
    "Stopped",
    "StoreBusy",
    "StoreError",
    "StoreForeign",
    "counted",
    "listed",
    "nearest",
]


def nearest(name: str, valid: Iterable[str]) -> str | None:
    """Return the valid name closest to ``name``, or None if none resembles it."""
    found = get_close_matches(name, list(valid), n=1, cutoff=0.55)
    return found[0] if found else None


def counted(number: int, noun: str) -> str:
    """Return '1 run', '2 runs'."""
    return f"{number} {noun}" if number == 1 else f"{number} {noun}s"


def listed(names: Sequence[str]) -> str:
    """Return 'a', 'a and b', 'a, b and c'."""
    return " and ".join(filter(None, (", ".join(names[:-1]), *names[-1:])))


@dataclass(frozen=True)
class Fault:
    """One fault in a file, with its address.

    ``file`` as the user named it; ``line`` from 1, or None where no line can be named; ``key`` the
    path of keys joined by dots; ``problem`` what is wrong, with the value given; ``expected`` what
    would be right; ``near`` the nearest valid name.
    """

    file: str
    line: int | None
    key: str
    problem: str
    expected: str = ""
    near: str | None = None

    def __str__(self) -> str:
        where = self.file if self.line is None else f"{self.file}:{self.line}"
        text = f"{where}: {self.key}: {self.problem}" if self.key else f"{where}: {self.problem}"
        if self.expected:
            text += f"; expected {self.expected}"
        if self.near is not None:
            text += f" (did you mean '{self.near}'?)"
        return text


class RigbenchError(Exception):
    """Root of all errors that rigbench raises on purpose."""

    exit_code = 1


class InputFaults(RigbenchError):
    """The declared input is at fault; ``faults`` holds every fault found, in file order."""

    exit_code = 2

    def __init__(self, faults: Iterable[Fault]) -> None:
        self.faults: tuple[Fault, ...] = tuple(faults)
        super().__init__(self.faults)

    def __str__(self) -> str:
        return "\n".join(str(fault) for fault in self.faults)

    @classmethod
    def one(
        cls, file: str | Path, key: str, problem: str, expected: str = "", line: int | None = None
    ) -> InputFaults:
        """Build the error of a single fault."""
        return cls([Fault(str(file), line, key, problem, expected)])


class PluginError(RigbenchError):
    """A plug-in failed; ``summary`` says how, in one line, ``trace`` is its own traceback as text."""

    def __init__(self, name: str, summary: str, trace: str) -> None:
        self.name, self.summary, self.trace = name, summary, trace
        super().__init__(name, summary, trace)


class LawError(PluginError):
    """A law raised; ``summary`` is the last line of ``trace``."""

    def __str__(self) -> str:
        return f"law '{self.name}' raised {self.summary}\n{self.trace}"


class SceneError(PluginError):
    """A scene raised while it built, or did what a scene must not; then ``trace`` is empty."""

    def __str__(self) -> str:
        return f"scene '{self.name}': {self.summary}\n{self.trace}".rstrip()


@dataclass(frozen=True)
class BrokenRule:
    """A rule for laws that one of them breaks: its name, what was found, what is expected, what to do."""

    rule: str
    found: str
    expected: str
    remedy: str

    def __str__(self) -> str:
        return f"{self.rule}: {self.found}\n    expected: {self.expected}\n    to do: {self.remedy}"


class RulesBroken(RigbenchError, AssertionError):
    """A law breaks rules; ``broken`` holds every one. Test runners take it for a failed assertion."""

    def __init__(self, law: str, broken: Iterable[BrokenRule]) -> None:
        self.law, self.broken = law, tuple(broken)
        super().__init__(law, self.broken)

    def __str__(self) -> str:
        rules = "".join(f"\n  {rule}" for rule in self.broken)
        return f"law {self.law} breaks {counted(len(self.broken), 'rule')}:{rules}"


class EngineError(RigbenchError):
    """The physics engine refused; ``doing`` says what was asked of it, ``said`` what it answered."""

    def __init__(self, doing: str, said: str) -> None:
        self.doing, self.said = doing, said
        super().__init__(doing, said)

    def __str__(self) -> str:
        return f"the physics engine failed while {self.doing}: {self.said}"


class Stopped(RigbenchError):
    """A campaign stopped before its end, and ``why``; what is done is stored.

    ``planned`` has the runs that its studies have asked for so far, of which those in ``unfinished`` will
    ask for more.
    """

    exit_code = 3

    def __init__(
        self, done: int, planned: int, resume: str, why: str = "as asked", unfinished: tuple[str, ...] = ()
    ) -> None:
        self.done, self.planned, self.resume, self.why = done, planned, resume, why
        self.unfinished = unfinished
        super().__init__(done, planned, resume, why, unfinished)

    def __str__(self) -> str:
        left = f" ({listed(self.unfinished)} not finished)" if self.unfinished else ""
        return (
            f"stopped {self.why}, with {self.done} of {self.planned} runs stored{left}; "
            f"nothing is lost: '{self.resume}' goes on from here"
        )


class ClusterLost(RigbenchError):
    """The cluster at ``address`` can do no more runs, and ``why``; what came back is stored."""

    exit_code = 3

    def __init__(self, address: str, why: str) -> None:
        self.address, self.why = address, why
        super().__init__(address, why)

    def __str__(self) -> str:
        return f"the cluster at {self.address} can do no more: {self.why}"


class StoreError(RigbenchError):
    """The store can't be read or written; ``problem`` says why and what to do."""

    exit_code = 5

    def __init__(self, path: str, problem: str) -> None:
        self.path, self.problem = path, problem
        super().__init__(path, problem)

    def __str__(self) -> str:
        return f"{self.path}: {self.problem}"


class StoreBusy(StoreError):
    """Another process is writing to the store."""


class StoreForeign(StoreError):
    """The store belongs to another experiment, or the file is no store."""
