"""A run as JSON texts that a store keeps, and back: the same value to the last bit.

A plan's runs share their large parts (arm, law, motion ...), so each part has a text of its own, and the
text of a run names its parts by their digests. The number of the draw is left out: the runs of all draws of
a condition have one text. Nothing in a text is code, so a store from elsewhere may be read safely.
"""

from __future__ import annotations

import dataclasses
import hashlib
import json
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rigbench.rig.run import Run  # not at run time: it brings the engine and the compiler

__all__ = ["Keeper", "Kept", "NotKept", "restored"]

NO_DRAW = "draw"
"""The field of a run that is not in its text, and the input that is not among its marks."""


class NotKept(ValueError):
    """A text from which no run can be made here; the reason in words."""


@dataclass(frozen=True)
class Kept:
    """A run as it was planned, and ``marks``: a digest of each of its inputs as they were then."""

    run: Run
    marks: Mapping[str, str]

    def changed(self) -> tuple[str, ...]:
        """Return the names of the inputs that have another meaning here and now: 'law', 'numerics' ..."""
        now = _marks(self.run.inputs())
        return tuple(name for name in {**self.marks, **now} if self.marks.get(name) != now.get(name))


class Keeper:
    """Turns the runs of one plan into texts; ``texts`` holds them by digest.

    A part that several runs share is looked at once. It is known by its identity, so the plan must be
    alive as long as its keeper.
    """

    def __init__(self) -> None:
        self.texts: dict[str, str] = {}
        self._parts: dict[int, str] = {}
        self._runs: dict[tuple[int, ...], str] = {}

    def keep(self, run: Run) -> str:
        """Keep the text of a run and of its parts, and return its digest."""
        values = {
            field.name: getattr(run, field.name) for field in dataclasses.fields(run) if field.name != NO_DRAW
        }
        known = tuple(map(id, values.values()))
        if known not in self._runs:
            fields = {name: self._part(value) for name, value in values.items()}
            self._runs[known] = self._add({"fields": fields, "marks": _marks(run.inputs())})
        return self._runs[known]

    def _part(self, value: Any) -> Any:
        if not dataclasses.is_dataclass(value):
            return _encoded(value)
        if id(value) not in self._parts:
            self._parts[id(value)] = self._add(_encoded(value))
        return {"part": self._parts[id(value)]}

    def _add(self, encoded: Any) -> str:
        text = json.dumps(encoded, separators=(",", ":"))
        digest = _digest(text)
        self.texts[digest] = text
        return digest


def restored(text: str, text_of: Callable[[str], str], draw: int | None) -> Kept:
    """Return the run of a text, in its draw number ``draw``; ``text_of`` finds the text of a part's digest.

    NotKept if the run holds what can't be kept, or what this version of rigbench doesn't know.
    """
    from rigbench.rig.run import Run

    found = json.loads(text)
    values = {
        name: _decoded(json.loads(text_of(value["part"])) if _tagged(value, "part") else value)
        for name, value in found["fields"].items()
    }
    return Kept(_made(Run, values | {NO_DRAW: draw}), found["marks"])


def _digest(text: str) -> str:
    return hashlib.blake2b(text.encode("utf-8", "surrogatepass"), digest_size=16).hexdigest()


def _marks(inputs: Mapping[str, Any]) -> dict[str, str]:
    return {
        name: _digest(json.dumps(value, sort_keys=True))[:16]
        for name, value in inputs.items()
        if name != NO_DRAW
    }


def _encoded(value: Any) -> Any:  # noqa: PLR0911 - one return a type
    """Return a value in JSON's types: a tuple as a list, all else that JSON lacks as {tag: content}."""
    if value is None or isinstance(value, bool | int | float | str):
        return value
    if isinstance(value, tuple):
        return [_encoded(item) for item in value]
    if isinstance(value, bytes):
        return {"bytes": value.hex()}
    if isinstance(value, list):
        return {"list": [_encoded(item) for item in value]}
    if isinstance(value, dict):
        return {"dict": [[_encoded(key), _encoded(item)] for key, item in value.items()]}
    if dataclasses.is_dataclass(value):
        fields = {field.name: _encoded(getattr(value, field.name)) for field in dataclasses.fields(value)}
        return {"is": type(value).__name__, "fields": fields}
    return {"lost": type(value).__name__}  # a campaign must not fail because of what a replay may want


def _decoded(value: Any) -> Any:
    if isinstance(value, list):
        return tuple(_decoded(item) for item in value)
    if not isinstance(value, dict):
        return value
    if "list" in value:
        return [_decoded(item) for item in value["list"]]
    if "dict" in value:
        return {_decoded(key): _decoded(item) for key, item in value["dict"]}
    if "bytes" in value:
        return bytes.fromhex(value["bytes"])
    if "lost" in value:
        raise NotKept(f"it holds a value of type {value['lost']}, which can't be kept")
    name = value["is"]
    if name not in _types():
        raise NotKept(f"it holds a {name}, which this version of rigbench doesn't know")
    return _made(_types()[name], {key: _decoded(item) for key, item in value["fields"].items()})


def _tagged(value: Any, tag: str) -> bool:
    return isinstance(value, dict) and tag in value


def _made(cls: type[Any], fields: Mapping[str, Any]) -> Any:
    """Make an object; fields that it did not have when it was kept get their default."""
    try:
        return cls(**fields)
    except (TypeError, ValueError) as problem:
        raise NotKept(f"this version of rigbench makes no {cls.__name__} of it ({problem})") from None


@cache
def _types() -> Mapping[str, type[Any]]:
    """The classes whose values a run may hold, by name."""
    from rigbench.arm.files import ArmFiles
    from rigbench.arm.mismatch import Case, Knowledge, Mismatch, Payload, Spread
    from rigbench.laws.registry import LawChoice
    from rigbench.motion.chained import ChainMotion
    from rigbench.motion.curve import Circle, Line
    from rigbench.motion.follow import Task
    from rigbench.motion.path import PathMotion
    from rigbench.motion.reach import Reach
    from rigbench.motion.table import TableMotion
    from rigbench.motion.via import ViaMotion
    from rigbench.rig.run import Rates
    from rigbench.rig.sampled import Sensing, Timing
    from rigbench.rig.scene import SceneChoice

    machine = ArmFiles, Case, Knowledge, Mismatch, Payload, Spread, LawChoice, Rates, SceneChoice, Sensing
    motions = ChainMotion, Circle, Line, PathMotion, Reach, TableMotion, Task, ViaMotion
    return {cls.__name__: cls for cls in (*machine, Timing, *motions)}
