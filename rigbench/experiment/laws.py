"""The laws of an experiment: names looked up, options checked, files of the user's own loaded."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from rigbench.errors import InputFaults, LawError, nearest
from rigbench.experiment.findings import Findings, entries
from rigbench.experiment.schema import LawKeys
from rigbench.laws.form import notes_on
from rigbench.laws.law import Law
from rigbench.laws.options import options_model, per_joint_options
from rigbench.laws.registry import LawChoice, choose, load_file_law, registered
from rigbench.yamlfile import validate

__all__ = ["is_whole", "law_choices"]

Files = tuple[tuple[str, str], ...]


def law_choices(
    laws: Mapping[str, LawKeys], findings: Findings, folder: Path, n: int | None, control_hz: float | None
) -> dict[str, LawChoice]:
    """Return the laws that are in order, by the user's names; what is not goes to ``findings``.

    ``n`` is the arm's number of joints and ``control_hz`` the rate of the law; None where either is
    at fault itself, and what depends on it is then left unchecked.
    """
    choices = {}
    for name, keys in laws.items():
        found = _find(name, keys.law, findings, folder)
        if found is None:
            continue
        cls, files = found
        for noted in notes_on(cls):
            findings.note(("laws", name, "law"), noted)
        given = dict(keys.model_extra or {})
        model = options_model(cls)  # type: ignore[arg-type]  # mypy takes the instances' __hash__ for the class's
        options, faults = validate(findings.document, model, ("laws", name), given)
        findings.take(faults)
        if n is not None:
            _check_lengths(name, cls, given, n, findings)
        if control_hz is not None:
            _check_model_rate(
                name, given.get("model_hz", getattr(cls, "model_hz", None)), control_hz, findings
            )
        if options is not None and findings.clean("laws", name):
            choices[name] = choose(keys.law, options, files)
    return choices


def _find(name: str, plugin: str, findings: Findings, folder: Path) -> tuple[type[Law], Files] | None:
    """Return the class that ``plugin`` names, and the files it came from if it is not a registered one."""
    path = ("laws", name, "law")
    if ".py" in plugin:
        return _load(name, plugin, findings, folder)
    registry = registered()
    entry = registry.laws.get(plugin)
    if entry is not None:
        return entry.cls, ()
    broken = dict(registry.broken)
    if plugin in broken:
        findings.fault(path, f"'{plugin}' is registered but can't be used: {broken[plugin]}")
        return None
    near = nearest(plugin, registry.laws)
    expected = "" if near else f"one of {', '.join(registry.laws)}, or FILE.py:CLASS"
    findings.fault(path, f"'{plugin}' is not a registered law", expected, near)
    return None


def _load(name: str, plugin: str, findings: Findings, folder: Path) -> tuple[type[Law], Files] | None:
    """Import a law from the user's own file; its faults and its traceback are told at the law's key."""
    path = ("laws", name, "law")
    file, colon, class_name = plugin.rpartition(":")
    if not (colon and file.endswith(".py") and class_name.isidentifier()):
        findings.fault(path, f"'{plugin}' does not name a class in a file", "FILE.py:CLASS")
        return None
    try:
        return load_file_law(folder / file, class_name)
    except LawError as error:
        findings.fault(path, f"'{plugin}' raised {error.summary}\n{error.trace.rstrip()}")
    except InputFaults as error:
        for fault in error.faults:
            findings.fault(path, f"'{plugin}': {fault.problem}", fault.expected, fault.near)
    return None


def _check_lengths(name: str, cls: type[Law], given: Mapping[str, Any], n: int, findings: Findings) -> None:
    for option in per_joint_options(cls):
        value = given.get(option)
        if isinstance(value, list) and len(value) != n:
            findings.fault(("laws", name, option), entries(len(value)), f"{n}, one a joint")


def _check_model_rate(name: str, model_hz: Any, control_hz: float, findings: Findings) -> None:
    """The held model term is renewed at a control tick, every so many of them."""
    if isinstance(model_hz, bool) or not isinstance(model_hz, int | float) or not model_hz > 0:
        return
    path = ("laws", name, "model_hz")
    if model_hz > control_hz:
        findings.clash(path, f"{model_hz:g} is above control_hz", f"at most {control_hz:g}", name)
    elif not is_whole(control_hz / model_hz):
        problem = f"{model_hz:g} does not go into control_hz a whole number of times"
        findings.clash(path, problem, f"{control_hz:g} divided by a whole number", name)


def is_whole(ratio: float) -> bool:
    """Tell whether a ratio of two rates is a whole number, to rounding."""
    return round(ratio) >= 1 and abs(ratio - round(ratio)) <= 1e-9 * ratio
