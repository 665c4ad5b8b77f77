"""Reading ``vary``: beside the schema of the file that it mirrors."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from typing import Any, get_args, get_origin

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from rigbench.errors import Fault, nearest
from rigbench.experiment.schema import ExperimentKeys
from rigbench.experiment.vary import Axis, Sweep, value_text
from rigbench.yamlfile import Document, KeyPath, branches, key_text

__all__ = ["FIXED", "read_sweep"]

MOST_SHEETS = 500
"""Sheets that a sweep may have: more can't be read by anyone."""

MOST_ROWS = 5000
"""Variants of laws that a sweep may have, over all its sheets."""

FIXED = tuple(
    (key,)
    for key in (
        "rigbench", "title", "seed", "conditions", "draws", "vary", "tolerance", "required_share", "needs",
        "stop_early", "find_level", "worst_case", "tune",
    )
)  # fmt: skip
"""Keys that all sheets share, or they could not be shown side by side."""

NAMED = (("laws",), ("motions",))
"""Sections whose keys are names of the user's own."""

A_LIST = "a list of values to try"


def read_sweep(document: Document) -> tuple[Sweep, list[Fault]]:
    """Return the axes that the file declares and what is wrong with them; faulty ones are left out."""
    declared = document.data.get("vary")
    if not isinstance(declared, dict):
        return Sweep(), []  # nothing is swept, or the schema says what is wrong
    reader = _Reader(document)
    reader.walk(declared, (), [ExperimentKeys])
    axes = _labelled(reader.axes)
    sweep = Sweep(
        tuple(axis for axis in axes if axis.law is None), tuple(axis for axis in axes if axis.law is not None)
    )
    sheets, variants = sweep.sizes
    if sheets > MOST_SHEETS or sheets * variants > MOST_ROWS:
        made = "makes 1 sheet" if sheets == 1 else f"makes {sheets} sheets"
        made += f" with {variants} variants of laws" if variants else ""
        expected = f"at most {MOST_SHEETS} sheets, and {MOST_ROWS} variants in all"
        reader.faults.append(document.fault(("vary",), made, expected))
        sweep = sweep.beginning()  # enough to find what else is wrong
    return sweep, reader.faults


def _labelled(axes: Sequence[Axis]) -> list[Axis]:
    """Call axes that share their label with another one of the same rows or sheets by their whole path."""
    found = []
    for axis in axes:
        alike = [other for other in axes if (other.law, other.label) == (axis.law, axis.label)]
        whole = ".".join(map(str, axis.path[2:] if axis.law else axis.path))
        found.append(axis if len(alike) == 1 else replace(axis, label=whole))
    return found


class _Reader:
    """Walks through ``vary`` beside the schema that it mirrors."""

    def __init__(self, document: Document) -> None:
        self.document = document
        self.axes: list[Axis] = []
        self.faults: list[Fault] = []

    def _fault(self, path: KeyPath, problem: str, expected: str = "", near: str | None = None) -> None:
        self.faults.append(self.document.fault(("vary", *path), problem, expected, near))

    def walk(self, node: Any, path: KeyPath, kinds: Sequence[Any]) -> None:
        """Take in what stands at ``path``, where the file may have a value of one of ``kinds``."""
        has_keys = any(_is_model(kind) or get_origin(kind) is dict for kind in kinds)
        if isinstance(node, list) and not _needs_keys(path):
            self._take(node, path)
        elif not isinstance(node, dict):
            what = f"{value_text(node)} is not" if not isinstance(node, list) else "a list is not"
            self._fault(path, f"{what} a mapping" if _needs_keys(path) else f"{what} a list", _wanted(path))
        elif not has_keys or not node:
            self._fault(path, "a mapping is not a list" if node else "no entries given", _wanted(path))
        else:
            for key, inside in node.items():
                if self._may_vary((*path, key), kinds):
                    self.walk(inside, (*path, key), [inner for kind in kinds for inner in _inside(kind, key)])

    def _may_vary(self, path: KeyPath, kinds: Sequence[Any]) -> bool:
        """Tell whether the file may have the last key of ``path`` and it may be varied; a fault if not."""
        name = str(path[-1])
        if path in FIXED or (path[0] == "motions" and path[2:] == ("tolerance",)):
            free = ", ".join(key for key in ExperimentKeys.model_fields if (key,) not in FIXED)
            self._fault(path, "can't be varied: all sheets share it", f"one of {free}")
            return False
        valid = self._valid(path[:-1], kinds)
        if valid is None or name in valid:
            return True
        near = nearest(name, valid)
        what = "unknown key" if path[:-1] not in NAMED else f"none of the {path[0]} is called '{name}'"
        self._fault(path, what, "" if near or not valid else f"one of {', '.join(valid)}", near)
        return False

    def _valid(self, path: KeyPath, kinds: Sequence[Any]) -> list[str] | None:
        """Return the keys that the file may have at ``path``; None if that is judged elsewhere."""
        if path in NAMED:
            named = self.document.data.get(path[0])
            return list(named) if isinstance(named, dict) else None
        models = [kind for kind in kinds if _is_model(kind)]
        if not models or any(model.model_config.get("extra") == "allow" for model in models):
            return None
        return [name for model in models for name in _fields(model)]

    def _take(self, values: list[Any], path: KeyPath) -> None:
        """Make an axis of a list of values."""
        texts = [value_text(value) for value in values]
        twice = [i for i, text in enumerate(texts) if text in texts[:i]]
        if not values:
            self._fault(path, "an empty list", A_LIST)
        for i in twice:
            self._fault((*path, i), f"{texts[i]} a second time", "each value once")
        above = self._no_mapping(path)
        if above:
            problem = f"the file has no mapping at {key_text(above)} that holds it"
            self._fault(path, problem, f"values for {above[-1]} itself, or a mapping in the file")
        if values and not twice and not above:
            self.axes.append(Axis(path, tuple(values), _label(path)))

    def _no_mapping(self, path: KeyPath) -> KeyPath:
        """Return the part of ``path`` at which the file has something else than a mapping; () if none."""
        here = self.document.data
        for length, key in enumerate(path[:-1], 1):
            if key not in here:
                return ()
            here = here[key]
            if not isinstance(here, dict):
                return path[:length]
        return ()


def _needs_keys(path: KeyPath) -> bool:
    """Tell whether ``vary`` has to name what it varies at ``path``: a law or motion, and options of a law."""
    return not path or path in NAMED or (path[0] == "laws" and len(path) == 2)


def _wanted(path: KeyPath) -> str:
    return "a mapping of keys, down to lists of values" if _needs_keys(path) else A_LIST


def _label(path: KeyPath) -> str:
    """Return the last key; with the one above it where it is a name of a link or joint, or stands for all."""
    by_name = path[0] == "mismatch" and len(path) == 3 and path[1] != "payload"
    return ".".join(map(str, path[-2:] if by_name else path[-1:]))


def _inside(kind: Any, key: str) -> Iterator[Any]:
    """Yield the types that a value of type ``kind`` may have at ``key``."""
    if _is_model(kind):
        if key in (fields := _fields(kind)):
            yield from branches(fields[key].annotation)
        else:
            yield Any
    elif get_origin(kind) is dict:
        yield from branches(get_args(kind)[1])


def _fields(model: type[BaseModel]) -> dict[str, FieldInfo]:
    """Return what a model declares, by the keys of the file."""
    return {info.alias or name: info for name, info in model.model_fields.items()}


def _is_model(kind: Any) -> bool:
    return isinstance(kind, type) and issubclass(kind, BaseModel)
