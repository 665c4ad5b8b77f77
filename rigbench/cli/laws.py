"""``rigbench laws``: what is registered, and the data sheet of a law."""

from __future__ import annotations

import inspect
from dataclasses import asdict
from typing import Any

from rigbench.cli.output import print_json, say, show
from rigbench.errors import Fault, InputFaults, nearest
from rigbench.laws.options import OptionAbout, describe_options
from rigbench.laws.registry import Registered, Registry, registered

__all__ = ["print_laws"]


def print_laws(name: str | None, as_json: bool) -> None:
    """Print the list of laws, or one law's data sheet."""
    registry = registered()
    if name is not None:
        law = _named(name, registry)
        if as_json:
            print_json(_described(law))
        else:
            show(_sheet(law))
            for noted in law.notes:
                say(f"note: {noted}")
        return
    if as_json:
        broken = [{"name": name, "reason": reason} for name, reason in registry.broken]
        print_json({"laws": [_described(law) for law in registry.laws.values()], "broken": broken})
        return
    widest = max(map(len, registry.laws), default=0)
    for law in registry.laws.values():
        first = _doc(law).partition("\n")[0]
        show(f"{law.name:<{widest}}  {first}  ({law.package} {law.version})")
        for noted in law.notes:
            say(f"note: {law.name} ({law.package}): {noted}")
    for broken_name, reason in registry.broken:
        say(f"{broken_name} is registered but can't be used: {reason}")


def _named(name: str, registry: Registry) -> Registered:
    if name in registry.laws:
        return registry.laws[name]
    broken = dict(registry.broken)
    if name in broken:
        problem = f"'{name}' is registered but can't be used: {broken[name]}"
        raise InputFaults([Fault("rigbench laws", None, "", problem)])
    near = nearest(name, registry.laws)
    expected = "" if near else "one of " + ", ".join(registry.laws)
    raise InputFaults([Fault("rigbench laws", None, "", f"'{name}' is not a registered law", expected, near)])


def _doc(law: Registered) -> str:
    return inspect.cleandoc(law.cls.__doc__ or "")


def _described(law: Registered) -> dict[str, Any]:
    options = [asdict(about) for about in describe_options(law.cls)]
    return {
        "name": law.name,
        "package": law.package,
        "version": law.version,
        "doc": _doc(law),
        "options": options,
        "notes": list(law.notes),
    }


def _sheet(law: Registered) -> str:
    parts = [f"{law.name}  ({law.package} {law.version})", "", _doc(law), "", "Options:"]
    options = describe_options(law.cls)
    if not options:
        parts.append("  none")
    for about in options:
        parts += _option(about)
    return "\n".join(parts)


def _option(about: OptionAbout) -> list[str]:
    kind = ", ".join(about.choices) if about.choices else about.type
    unit = f" [{about.unit}]" if about.unit else ""
    bounds = [
        words
        for words in (
            about.above is not None and f"above {about.above:g}",
            about.at_least is not None and f"at least {about.at_least:g}",
            about.per_joint and "one for each joint",
        )
        if words
    ]
    default = "none" if about.default is None else str(about.default)
    return [
        f"  {', '.join([f'{about.name}: {kind}{unit}', *bounds])}, default {default}",
        f"      {about.doc}",
    ]
