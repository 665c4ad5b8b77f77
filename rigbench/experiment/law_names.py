"""Laws that a key of the experiment names: rows of the matrix, or a law that stands for all its variants."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from rigbench.errors import nearest
from rigbench.experiment.findings import Findings
from rigbench.yamlfile import KeyPath

__all__ = ["check_law_names", "is_named"]

Named = str | list[str] | None
"""One name, several, or None for every law."""


def check_law_names(
    path: KeyPath, given: Named, rows: Sequence[str], variants: Mapping[str, str], findings: Findings
) -> None:
    """Add a fault for each name, at ``path``, that no row has and no law of which a row is a variant."""
    names = tuple(dict.fromkeys([*variants.values(), *rows]))
    for number, law in enumerate(_listed(given)):
        if names and law not in names and findings.clean("laws"):
            near = nearest(law, names)
            expected = "" if near else f"one of {', '.join(names)}"
            place = (*path, number) if isinstance(given, list) else path
            findings.fault(place, f"there is no law '{law}'", expected, near)


def is_named(given: Named, row: str, variants: Mapping[str, str]) -> bool:
    """Tell whether a row is among those named, itself or by the law of which it is a variant."""
    return given is None or row in _listed(given) or variants.get(row) in _listed(given)


def _listed(given: Named) -> Sequence[str]:
    return (given,) if isinstance(given, str) else given or ()
