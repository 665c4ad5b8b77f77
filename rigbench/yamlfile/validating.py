"""Validating a document against a model: what is right, and everything that is wrong."""

from __future__ import annotations

import json
from typing import Any, TypeVar

from pydantic import BaseModel, ConfigDict, ValidationError

from rigbench.errors import Fault
from rigbench.yamlfile.document import Document, KeyPath, at
from rigbench.yamlfile.wording import Problem, not_a, problems_of

__all__ = ["Declared", "partial", "validate"]

M = TypeVar("M", bound=BaseModel)


class Declared(BaseModel):
    """Base of everything that a user declares: unknown keys, infinities and not-a-numbers are faults.

    A validator may raise ValueError with a whole sentence, or PydanticCustomError whose context holds
    ``expected`` and ``near``: they become the fault's.
    """

    model_config = ConfigDict(extra="forbid", strict=True, allow_inf_nan=False, frozen=True)


class _Given:
    """Stands for 'what the document holds at that path'."""


_GIVEN = _Given()


def validate(
    document: Document, model: type[M], path: KeyPath = (), data: Any = _GIVEN
) -> tuple[M | None, list[Fault]]:
    """Check ``data`` (default: what stands at ``path``) against a model derived from Declared.

    Returns the model and no faults, or None and every fault, in the order of their lines. Scalars
    are strict: a text or a bool is never a number; a whole number may stand for a number. A list
    becomes whatever sequence the model names.
    """
    parsed, problems = _check(model, at(document.data, path) if isinstance(data, _Given) else data)
    return parsed, _faults(document, path, problems)


def partial(
    document: Document, model: type[M], path: KeyPath = (), data: Any = _GIVEN
) -> tuple[M | None, list[Fault]]:
    """Check as :func:`validate`, but leave out what is faulty and return the rest of the model.

    So cross-checks can run on what parsed. A fault inside a list takes the whole list with it, and a
    mapping that thereby lacks a required key goes as a whole; None where nothing is left.
    """
    rest = at(document.data, path) if isinstance(data, _Given) else data
    parsed, problems = _check(model, rest)
    found = list(problems)
    rest = json.loads(json.dumps(rest))  # a copy to prune, free of parts shared by aliases
    while problems:
        for problem in problems:
            where = _to_prune(rest, problem)
            if where == ():
                return None, _faults(document, path, found)
            del at(rest, where[:-1])[where[-1]]
        parsed, problems = _check(model, rest)
        # pruning itself makes keys missing; only what a model's own validator says now is news
        found += [problem for problem in problems if problem.own and problem not in found]
    return parsed, _faults(document, path, found)


def _to_prune(data: Any, problem: Problem) -> KeyPath:
    """Return the innermost mapping key that still exists around a problem; () if there is none."""
    path = problem.path[:-1] if problem.missing else problem.path
    for length in range(len(path), 0, -1):
        around = at(data, path[: length - 1])
        if isinstance(around, dict) and path[length - 1] in around:
            return path[:length]
    return ()


def _check(model: type[M], data: Any) -> tuple[M | None, list[Problem]]:
    """Run pydantic; by way of JSON, because its strict mode then takes lists for tuples and sets."""
    if not isinstance(data, dict):
        return None, [Problem((), *not_a("a mapping of keys", data))]
    try:
        return model.model_validate_json(json.dumps(data), strict=True), []
    except ValidationError as error:
        return None, problems_of(model, data, error)


def _faults(document: Document, path: KeyPath, problems: list[Problem]) -> list[Fault]:
    faults = [document.fault((*path, *p.path), p.problem, p.expected, p.near) for p in problems]
    return sorted(faults, key=lambda fault: fault.line or 0)
