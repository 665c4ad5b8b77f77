"""Pydantic's errors in our words: one problem a place, also where a union has many branches."""

from __future__ import annotations

import re
import types
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Annotated, Any, NamedTuple, Union, get_args, get_origin

from pydantic import BaseModel, ValidationError

from rigbench.errors import nearest
from rigbench.yamlfile.document import KeyPath, at, has

__all__ = ["Problem", "branches", "not_a", "problems_of", "shown"]


class Problem(NamedTuple):
    """What is wrong at ``path`` of the validated data, in words.

    ``missing``: there is nothing at ``path``; ``own``: a model's own validator says it.
    """

    path: KeyPath
    problem: str
    expected: str = ""
    near: str | None = None
    missing: bool = False
    own: bool = False


def problems_of(model: type[BaseModel], data: Any, error: ValidationError) -> list[Problem]:
    """Return what a validation of ``data`` found, in words."""
    details = [_detail(data, entry) for entry in error.errors(include_url=False)]
    details = [detail for detail in details if not _miscounted(data, detail)]
    return list(dict.fromkeys(_words(model, data, details, 0)))


def _miscounted(data: Any, detail: _Detail) -> bool:
    """Tell whether a list is called too short only because pydantic leaves out its faulty items."""
    return detail.type == "too_short" and len(at(data, detail.path)) >= detail.context["min_length"]


def not_a(kind: str, value: Any) -> tuple[str, str]:
    """Say that a value is of another kind: the problem and what is expected."""
    return f"{shown(value)} is not {kind}", kind


def shown(value: Any) -> str:
    """Print a value for a sentence."""
    if isinstance(value, str):
        return f"'{value}'" if len(value) <= 60 else f"'{value[:57]}...'"
    if isinstance(value, dict | list):
        return "a mapping" if isinstance(value, dict) else "a list"
    if value is None:
        return "an empty value"
    return str(value).lower() if isinstance(value, bool) else repr(value)


# Where ------------------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class _Detail:
    """One of pydantic's errors; ``branches`` are the indices in ``loc`` that name a union's branch."""

    loc: tuple[str | int, ...]
    type: str
    said: str
    context: Mapping[str, Any]
    given: Any
    path: KeyPath
    branches: tuple[int, ...]

    def is_at(self, index: int) -> bool:
        """Tell whether the error is about the value itself whose branch stands at ``loc[index]``."""
        return len(self.path) == index - self.branches.index(index)


def _detail(data: Any, entry: Any) -> _Detail:
    loc: tuple[str | int, ...] = entry["loc"]
    path: list[str | int] = []
    branches: list[int] = []
    here = data
    for index, step in enumerate(loc):
        if has(here, step):
            here = here[step]
            path.append(step)
        elif entry["type"] == "missing" and index == len(loc) - 1:
            path.append(step)
        elif step != "[key]":
            branches.append(index)
    context = entry.get("ctx", {})
    return _Detail(loc, entry["type"], entry["msg"], context, entry["input"], tuple(path), tuple(branches))


def _words(model: type[BaseModel], data: Any, details: Iterable[_Detail], level: int) -> Iterator[Problem]:
    """Say each error below ``level`` unions, and for each union on that level what is wrong with it."""
    unions: dict[tuple[str | int, ...], list[_Detail]] = {}
    for detail in details:
        if len(detail.branches) > level:
            unions.setdefault(detail.loc[: detail.branches[level]], []).append(detail)
        else:
            yield _problem(model, data, detail)
    for prefix, members in unions.items():
        branches: dict[str | int, list[_Detail]] = {}
        for member in members:
            branches.setdefault(member.loc[len(prefix)], []).append(member)
        yield from _of_union(model, data, list(branches.values()), level)


def _of_union(
    model: type[BaseModel], data: Any, branches: list[list[_Detail]], level: int
) -> Iterator[Problem]:
    """Report the branch that the user most likely meant; or, if none fits at all, what all want."""
    index = branches[0][0].branches[level]
    meant = [
        branch for branch in branches if not any(d.type in _OTHER_KIND and d.is_at(index) for d in branch)
    ]
    if meant:
        yield from _words(model, data, _nearest_branch(meant, index), level + 1)
        return
    parts = [_problem(model, data, detail) for branch in branches for detail in branch]
    expected = " or ".join(dict.fromkeys(part.expected for part in parts))
    near = next((part.near for part in parts if part.near), None)
    yield Problem(parts[0].path, f"{shown(branches[0][0].given)} is not {expected}", expected, near)


def _nearest_branch(branches: list[list[_Detail]], index: int) -> list[_Detail]:
    """Return the branch with the fewest keys that it doesn't know, then that it lacks, then errors."""
    depth = index - branches[0][0].branches.index(index) + 1

    def distance(branch: list[_Detail]) -> tuple[int, int, int]:
        top = [detail.type for detail in branch if len(detail.path) == depth]
        return top.count("extra_forbidden"), top.count("missing"), len(branch)

    return min(branches, key=distance)


# What -------------------------------------------------------------------------------------------

_KINDS: Mapping[str, str] = {
    "float_type": "a number",
    "int_type": "a whole number",
    "int_from_float": "a whole number",
    "bool_type": "true or false",
    "string_type": "text",
    "list_type": "a list",
    "tuple_type": "a list",
    "set_type": "a list",
    "frozen_set_type": "a list",
    "dict_type": "a mapping of keys",
    "mapping_type": "a mapping of keys",
    "model_type": "a mapping of keys",
    "model_attributes_type": "a mapping of keys",
    "dataclass_type": "a mapping of keys",
    "none_required": "nothing",
    "finite_number": "a finite number",
}

_OTHER_KIND = {*_KINDS, "literal_error"} - {"finite_number", "int_from_float"}
"""Errors that say of a union's value that this branch can't be meant."""

_BOUNDS: Mapping[str, tuple[str, str]] = {
    "greater_than": ("gt", "above"),
    "greater_than_equal": ("ge", "at least"),
    "less_than": ("lt", "below"),
    "less_than_equal": ("le", "at most"),
    "multiple_of": ("multiple_of", "a multiple of"),
}


def _number(value: float) -> str:
    """Print a bound: a whole number with all its digits."""
    return f"{int(value)}" if value == int(value) else f"{value:g}"


def _problem(model: type[BaseModel], data: Any, detail: _Detail) -> Problem:
    """Say one of pydantic's errors in our words."""
    kind, path = detail.type, detail.path
    if kind in _KINDS:
        return Problem(path, *not_a(_KINDS[kind], detail.given))
    if kind in _BOUNDS:
        name, words = _BOUNDS[kind]
        return Problem(
            path, f"{shown(detail.given)} is out of range", f"{words} {_number(detail.context[name])}"
        )
    if kind in ("too_short", "too_long") or (kind == "missing" and isinstance(path[-1], int)):
        return _size(model, data, detail)
    return _SAID.get(kind, _own)(model, detail)


def _missing(_: type[BaseModel], detail: _Detail) -> Problem:
    return Problem(detail.path, "missing", missing=True)


def _unknown(model: type[BaseModel], detail: _Detail) -> Problem:
    """Say that a key is unknown, and which one was perhaps meant."""
    models = [kind for kind in _types_at(model, detail.loc[:-1]) if _is_model(kind)]
    valid = [info.alias or name for kind in models for name, info in kind.model_fields.items()]
    near = nearest(str(detail.path[-1]), valid)
    expected = "" if near or not valid else "one of " + ", ".join(valid)
    return Problem(detail.path, "unknown key", expected, near)


def _choice(_: type[BaseModel], detail: _Detail) -> Problem:
    choices = str(detail.context.get("expected", detail.context.get("expected_tags", "")))
    near = nearest(str(detail.given), re.findall("'([^']*)'", choices)) if detail.given else None
    return Problem(detail.path, f"{shown(detail.given)} is not a valid choice", choices, near)


def _own(_: type[BaseModel], detail: _Detail) -> Problem:
    """Say what a model's own validator says."""
    said = str(detail.context["error"]) if detail.type == "value_error" else detail.said
    expected, near = str(detail.context.get("expected", "")), detail.context.get("near")
    return Problem(detail.path, said, expected, near, own=True)


_SAID: Mapping[str, Callable[[type[BaseModel], _Detail], Problem]] = {
    "missing": _missing,
    "extra_forbidden": _unknown,
    "literal_error": _choice,
    "enum": _choice,
    "union_tag_invalid": _choice,
}


def _size(model: type[BaseModel], data: Any, detail: _Detail) -> Problem:
    """Say that a list or mapping has too few or too many entries."""
    missing = detail.type == "missing"
    path = detail.path[:-1] if missing else detail.path
    loc = detail.loc[:-1] if missing else detail.loc
    given = f"{_entries(len(at(data, path)))} given"
    for kind in _types_at(model, loc):
        items = get_args(kind)
        if get_origin(kind) is tuple and Ellipsis not in items:
            return Problem(path, given, f"{len(items)}")
    length = _only_length(model, loc)
    if length is not None:
        return Problem(path, given, f"a list of {length} numbers")
    least = detail.type == "too_short"
    bound = detail.context["min_length" if least else "max_length"]
    return Problem(path, given, f"at {'least' if least else 'most'} {bound}")


def _entries(count: int) -> str:
    return "1 entry" if count == 1 else f"{count or 'no'} entries"


def _only_length(model: type[BaseModel], loc: Sequence[str | int]) -> int | None:
    """Return how many numbers the list of numbers at ``loc`` has; None if it may have more or fewer."""
    for kind in _types_at(model, loc[:-1]):
        info = kind.model_fields.get(loc[-1]) if _is_model(kind) else None
        if info is None or not any(float in _inside(branch, 0) for branch in branches(info.annotation)):
            continue
        notes = [*info.metadata, *_annotations(info.annotation)]
        least = {note.min_length for note in notes if getattr(note, "min_length", None) is not None}
        most = {note.max_length for note in notes if getattr(note, "max_length", None) is not None}
        return least.pop() if least == most and len(least) == 1 else None
    return None


def _annotations(kind: Any) -> Iterator[Any]:
    """Yield what annotates the branches of a union."""
    for branch in get_args(kind) if get_origin(kind) in (Union, types.UnionType) else (kind,):
        for note in get_args(branch)[1:] if get_origin(branch) is Annotated else ():
            yield from getattr(note, "metadata", (note,))


# Types ------------------------------------------------------------------------------------------


def _types_at(model: type[BaseModel], loc: Sequence[str | int]) -> list[Any]:
    """Return the types that the model allows at one of pydantic's locations."""
    here: list[Any] = [model]
    for step in loc:
        named = [kind for kind in here if getattr(kind, "__name__", None) == step and _is_model(kind)]
        here = named or [inner for kind in here for inner in _inside(kind, step)] or here
    return here


def _is_model(kind: Any) -> bool:
    return isinstance(kind, type) and issubclass(kind, BaseModel)


def _inside(kind: Any, step: str | int) -> Iterator[Any]:
    """Yield the types that a value may have at ``step`` of a value of type ``kind``."""
    if _is_model(kind):
        for name, info in kind.model_fields.items():
            if step in (name, info.alias):
                yield from branches(info.annotation)
        return
    arguments = [argument for argument in get_args(kind) if argument is not Ellipsis]
    if get_origin(kind) is tuple and isinstance(step, int) and step < len(arguments):
        yield from branches(arguments[step])
    elif arguments:
        yield from branches(arguments[-1])


def branches(kind: Any) -> Iterator[Any]:
    """Yield the branches of a union, without annotations."""
    if get_origin(kind) is Annotated:
        yield from branches(get_args(kind)[0])
    elif get_origin(kind) in (Union, types.UnionType):
        for branch in get_args(kind):
            yield from branches(branch)
    else:
        yield kind
