"""A law's options as a pydantic model, made from its typed fields."""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence
from functools import cache
from typing import Annotated, Any, Literal, get_args, get_origin, get_type_hints

import pydantic
from pydantic import BaseModel, ConfigDict, Field

from rigbench.laws.law import Law

__all__ = ["OptionAbout", "describe_options", "option_fields", "options_model", "per_joint_options"]


@dataclasses.dataclass(frozen=True)
class OptionAbout:
    """What ``rigbench laws NAME`` shows of one option."""

    name: str
    type: str
    default: Any
    unit: str
    doc: str
    choices: tuple[str, ...]
    above: float | None
    at_least: float | None
    per_joint: bool


def option_fields(cls: type[Law]) -> tuple[dataclasses.Field[Any], ...]:
    """Return the law's options in the order of their declaration."""
    return tuple(field for field in dataclasses.fields(cls) if field.init)


def per_joint_options(cls: type[Law]) -> tuple[str, ...]:
    """Return the names of the options whose lists need one entry for each joint."""
    return tuple(field.name for field in option_fields(cls) if field.metadata.get("per_joint"))


@cache
def options_model(cls: type[Law]) -> type[BaseModel]:
    """Return a pydantic model of the law's options: unknown names refused, numbers strict and finite.

    Raises TypeError with the option's name where a type annotation can't be read.
    """
    hints = get_type_hints(cls)
    fields: dict[str, Any] = {}
    for field in option_fields(cls):
        default = ... if field.default is dataclasses.MISSING else field.default
        if field.default_factory is not dataclasses.MISSING:
            default = field.default_factory()
        fields[field.name] = (_annotation(hints[field.name], field), default)
    validators: dict[str, Any] = {"_conflict": pydantic.model_validator(mode="after")(_conflict_check(cls))}
    return pydantic.create_model(
        f"{cls.__name__}Options",
        __config__=ConfigDict(extra="forbid", allow_inf_nan=False, frozen=True),
        __validators__=validators,
        **fields,
    )


def _conflict_check(cls: type[Law]) -> Any:
    def check(self: BaseModel) -> BaseModel:
        given = frozenset(name for name in self.model_fields_set if getattr(self, name) is not None)
        try:
            problem = cls.conflict(given)
        except Exception as raised:  # a law's own code: whatever it raises is told as its verdict
            problem = f"{cls.__name__}.conflict raised {type(raised).__name__}: {raised}"
        if problem is not None:
            raise ValueError(problem)
        return self

    return check


def _annotation(hint: Any, field: dataclasses.Field[Any]) -> Any:
    about = field.metadata
    described = Field(description=about.get("doc") or None)
    if about.get("choices"):
        return Annotated[Literal[tuple(about["choices"])], described]
    bounds = {"gt": about.get("above"), "ge": about.get("at_least")}
    return Annotated[_bounded(hint, {k: v for k, v in bounds.items() if v is not None}), described]


def _bounded(hint: Any, bounds: dict[str, Any]) -> Any:
    """Put the bounds on every number inside ``hint``, make scalars strict, and read lists as tuples."""
    if hint in (int, float):
        return Annotated[hint, Field(strict=True, **bounds)]
    if hint in (str, bool):
        return Annotated[hint, Field(strict=True)]
    origin, arguments = get_origin(hint), get_args(hint)
    if origin in (tuple, list, Sequence):
        item: Any = _bounded(arguments[0], bounds)
        return tuple[item, ...]
    if arguments and type(None) in arguments:
        inner = [argument for argument in arguments if argument is not type(None)]
        if len(inner) == 1:
            return _bounded(inner[0], bounds) | None
    return hint


def describe_options(cls: type[Law]) -> tuple[OptionAbout, ...]:
    """Return what there is to say of each option, in the order of declaration."""
    hints = get_type_hints(cls)
    found = []
    for field in option_fields(cls):
        default = None if field.default is dataclasses.MISSING else field.default
        if field.default_factory is not dataclasses.MISSING:
            default = field.default_factory()
        about = field.metadata
        found.append(
            OptionAbout(
                field.name,
                _type_words(hints[field.name], bool(about.get("choices"))),
                default,
                about.get("unit", ""),
                about.get("doc", ""),
                tuple(about.get("choices", ())),
                about.get("above"),
                about.get("at_least"),
                bool(about.get("per_joint")),
            )
        )
    return tuple(found)


def _type_words(hint: Any, choice: bool) -> str:
    if choice:
        return "choice"
    simple = {float: "number", int: "whole number", str: "text", bool: "true or false"}
    if hint in simple:
        return simple[hint]
    arguments = [argument for argument in get_args(hint) if argument not in (type(None), Ellipsis)]
    if get_origin(hint) in (tuple, list, Sequence):
        return "list of numbers" if arguments and arguments[0] in (float, int) else "list"
    return _type_words(arguments[0], False) if len(arguments) == 1 else str(hint)
