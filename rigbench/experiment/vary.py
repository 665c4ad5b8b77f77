"""The sweep: what ``vary`` declares, as axes with values to try.

``vary`` mirrors the experiment file; wherever it has a list, that is an axis: the values to try at that
key of the file.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import prod
from typing import Any

from rigbench.yamlfile import KeyPath

__all__ = ["Axis", "Sweep", "value_text"]

LONGEST = 32
"""Characters of a value in a name; of longer ones the number stands there, of paths the file's name."""


@dataclass(frozen=True)
class Axis:
    """Values to try at ``path`` of the experiment file; ``label`` is how names call it."""

    path: KeyPath
    values: tuple[Any, ...]
    label: str

    @property
    def law(self) -> str | None:
        """The law of which it makes variants; None if it makes sheets."""
        return str(self.path[1]) if self.path[0] == "laws" else None

    def place(self, index: int) -> KeyPath:
        """Return where value number ``index`` stands in the file."""
        return ("vary", *self.path, index)

    def named(self, index: int) -> str:
        """Return a value with the axis's label, as names show it: 'control_hz 500'."""
        text = value_text(self.values[index])
        if len(text) > LONGEST:
            files = [value_text(value).rpartition("/")[2] for value in self.values]
            tells = isinstance(self.values[index], str) and files.count(files[index]) == 1
            text = files[index] if tells and len(files[index]) <= LONGEST else f"no. {index + 1}"
        return f"{self.label} {text}"


@dataclass(frozen=True)
class Sweep:
    """All axes of a file: those that make sheets, and by law those that make its variants."""

    sheets: tuple[Axis, ...] = ()
    variants: tuple[Axis, ...] = ()

    def of_law(self, law: str) -> tuple[Axis, ...]:
        """Return the axes that make variants of a law."""
        return tuple(axis for axis in self.variants if axis.law == law)

    @property
    def sizes(self) -> tuple[int, int]:
        """Return how many sheets it makes, and how many variants of laws in each."""
        laws = {axis.law: 1 for axis in self.variants}
        for axis in self.variants:
            laws[axis.law] *= len(axis.values)
        return prod(len(axis.values) for axis in self.sheets), sum(laws.values())

    def beginning(self) -> Sweep:
        """Return the sweep with the first value of each axis alone."""
        sheets, variants = (
            tuple(replace(axis, values=axis.values[:1]) for axis in axes)
            for axes in (self.sheets, self.variants)
        )
        return Sweep(sheets, variants)


def value_text(value: Any) -> str:
    """Print a value as YAML would have it on one line: 500, 0.5, true, null, held, [0, 0, -9.81], {a: 1}."""
    if value is None:
        return "null"
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, float):
        return repr(value).removesuffix(".0")
    if isinstance(value, list):
        return f"[{', '.join(map(value_text, value))}]"
    if isinstance(value, dict):
        return f"{{{', '.join(f'{key}: {value_text(item)}' for key, item in value.items())}}}"
    return " ".join(str(value).split()) or "''"
