"""The form of a law: what a class must define, checked when it is registered, not when it is first called."""

from __future__ import annotations

import inspect
from collections.abc import Iterator

from rigbench.laws.law import Law
from rigbench.laws.options import option_fields, options_model

__all__ = ["check_class", "notes_on"]

NEEDED = ("start", "torque")
METHODS = (*NEEDED, "model_term", "compiled")
TAKEN = ("law",)
"""Names that an option can't have: an experiment names the law itself by this key."""

POSITIONAL = (inspect.Parameter.POSITIONAL_ONLY, inspect.Parameter.POSITIONAL_OR_KEYWORD)


def check_class(cls: object) -> type[Law]:
    """Return ``cls`` if it is a complete law; TypeError says, all at once, what is not as it must be.

    It derives from Law; ``start(setup)`` and ``torque(t, q, v, ref, held)`` are defined; these and
    ``model_term(t, q, v, ref)`` and ``compiled()`` take what Law's own take, under those names, with or
    without an underscore before a name that is not used; its options can be read.
    """
    if not (inspect.isclass(cls) and issubclass(cls, Law)):
        raise TypeError(f"{cls!r} is not a subclass of rigbench.laws.Law")
    problems = [*_methods(cls), *_options(cls)]
    if problems:
        raise TypeError("; ".join(problems))
    return cls


def notes_on(cls: type[Law]) -> tuple[str, ...]:
    """Return what a law lacks that it can do without."""
    if not (cls.__doc__ or "").strip():
        return (f"{cls.__name__} has no docstring, so its equation, symbols and units can't be shown",)
    return ()


def _methods(cls: type[Law]) -> Iterator[str]:
    for name in METHODS:
        given, own = getattr(cls, name), getattr(Law, name)
        if given is own:
            if name in NEEDED:
                yield f"{cls.__name__} does not define '{name}'"
            continue
        wanted = _words(own)
        if not callable(given):
            yield f"{cls.__name__}.{name} is {given!r}; expected a method ({wanted})"
        elif not _is_taken(given, own):
            yield f"{cls.__name__}.{name} takes ({_words(given)}); expected ({wanted})"


def _is_taken(given: object, own: object) -> bool:
    """Whether a method takes what Law's own takes, by the same names."""
    theirs, ours = (list(inspect.signature(f).parameters.values()) for f in (given, own))  # type: ignore[arg-type]
    names = [parameter.name.removeprefix("_") for parameter in theirs[1:]]
    simple = all(parameter.kind in POSITIONAL for parameter in theirs)
    return bool(theirs) and simple and names == [parameter.name for parameter in ours[1:]]


def _words(method: object) -> str:
    return ", ".join(str(p).split(":")[0] for p in inspect.signature(method).parameters.values())  # type: ignore[arg-type]


def _options(cls: type[Law]) -> Iterator[str]:
    for field in option_fields(cls):
        if field.name in TAKEN:
            yield f"{cls.__name__} has an option '{field.name}', the key by which an experiment names the law"
    try:
        options_model(cls)  # type: ignore[arg-type]  # mypy takes the instances' __hash__ for the class's
    except Exception as problem:  # an annotation can be anything; what it is told in words
        yield f"{cls.__name__}: its options can't be read: {problem}"
