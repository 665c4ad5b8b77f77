"""The combinations of a sweep: for each sheet the experiment file as it would read without ``vary``."""

from __future__ import annotations

import copy
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import product

from rigbench.errors import Fault
from rigbench.experiment.vary import Axis, Sweep
from rigbench.yamlfile import Document, KeyPath, key_text

__all__ = ["Combination", "combinations"]


@dataclass(frozen=True)
class Combination:
    """One sheet: its name ('' where nothing but laws is swept) and the file with the values put in.

    ``chosen`` is the number of the value of each of the sweep's sheet axes. ``variants`` maps the name of
    each variant of a law to the law's own. ``homes`` maps keys of the file with the values put in to
    where these stand in the user's file.
    """

    name: str
    chosen: tuple[int, ...]
    document: Document
    variants: Mapping[str, str]
    homes: Mapping[str, str]

    def at_home(self, fault: Fault) -> Fault:
        """Return a fault of the file with the values put in under its key in the user's file."""
        if fault.file != self.document.file:
            return fault
        for key in sorted(self.homes, key=len, reverse=True):
            if fault.key == key or fault.key.startswith((f"{key}.", f"{key}[")):
                return replace(fault, key=self.homes[key] + fault.key[len(key) :])
        return fault


def combinations(document: Document, sweep: Sweep) -> tuple[list[Combination], list[Fault]]:
    """Return every sheet of the sweep, the last axis changing first, and the faults of names that collide."""
    rows, faults = _rows(document, sweep)
    lines = _below(document, ("vary",))
    made = []
    for chosen in product(*(range(len(axis.values)) for axis in sweep.sheets)):
        patch = _Patch(document, lines)
        for axis, index in zip(sweep.sheets, chosen, strict=True):
            patch.put(axis.path, axis, index)
        patch.put_variants(rows)
        name = ", ".join(axis.named(index) for axis, index in zip(sweep.sheets, chosen, strict=True))
        variants = {row.name: row.law for row in rows if row.picks}
        made.append(Combination(name, chosen, patch.document(), variants, patch.homes))
    return made, faults


@dataclass(frozen=True)
class _Row:
    """A row of the matrix: a law as it stands, or a variant of it with the values picked."""

    name: str
    law: str
    picks: tuple[tuple[Axis, int], ...] = ()


def _rows(document: Document, sweep: Sweep) -> tuple[list[_Row], list[Fault]]:
    """Return the rows in the order of the laws, and a fault for each name that is taken."""
    laws = document.data.get("laws")
    rows: list[_Row] = []
    faults = []
    for law in laws if isinstance(laws, dict) else ():
        axes = sweep.of_law(law)
        for chosen in product(*(range(len(axis.values)) for axis in axes)):
            picks = tuple(zip(axes, chosen, strict=True))
            options = ", ".join(axis.named(index) for axis, index in picks)
            name = f"{law} ({options})" if picks else law
            if any(row.name == name for row in rows) or (picks and name in laws):
                problem = f"makes a second row called '{name}'"
                faults.append(document.fault(("vary", "laws", law), problem, "names that differ"))
            else:
                rows.append(_Row(name, law, picks))
    return rows, faults


def _below(document: Document, path: KeyPath) -> dict[KeyPath, int]:
    """Return the lines of all that stands at ``path`` or below it."""
    return {place: line for place, line in document.lines.items() if place[: len(path)] == path}


class _Patch:
    """A copy of the file in the making, without ``vary``."""

    def __init__(self, document: Document, of_vary: Mapping[KeyPath, int]) -> None:
        self.file = document.file
        self.data = {key: copy.deepcopy(value) for key, value in document.data.items() if key != "vary"}
        self.lines = dict(document.lines)
        self.of_vary = of_vary
        self.homes: dict[str, str] = {}

    def document(self) -> Document:
        return Document(self.file, self.data, self.lines)

    def put(self, path: KeyPath, axis: Axis, index: int) -> None:
        """Put a value of an axis at ``path``, which is the axis's own or that in a variant of its law."""
        here = self.data
        for key in path[:-1]:
            here = here.setdefault(key, {})
        here[path[-1]] = copy.deepcopy(axis.values[index])
        home = axis.place(index)
        self._move(self.of_vary, home, path)
        self.homes[key_text(path)] = key_text(home)
        for length in range(1, len(path)):  # a key that is in the file by way of vary alone
            if path[:length] not in self.lines:
                self.lines[path[:length]] = self.of_vary[("vary", *path[:length])]
                self.homes[key_text(path[:length])] = key_text(("vary", *path[:length]))

    def put_variants(self, rows: Sequence[_Row]) -> None:
        """Put the variants of laws in place of these laws."""
        laws = self.data.get("laws")
        if not any(row.picks for row in rows) or not isinstance(laws, dict):
            return
        self.data["laws"] = {row.name: copy.deepcopy(laws[row.law]) for row in rows}
        for row in rows:
            if not row.picks:
                continue
            own: KeyPath = ("laws", row.name)
            self._move(_only(self.lines, ("laws", row.law)), ("laws", row.law), own)
            self.homes[key_text(own)] = key_text(("laws", row.law))
            for axis, index in row.picks:
                self.put((*own, *axis.path[2:]), axis, index)

    def _move(self, lines: Mapping[KeyPath, int], start: KeyPath, to: KeyPath) -> None:
        """Give what stands at ``to`` the lines that it has at ``start``."""
        for place, line in _only(lines, start).items():
            self.lines[(*to, *place[len(start) :])] = line


def _only(lines: Mapping[KeyPath, int], start: KeyPath) -> dict[KeyPath, int]:
    return {place: line for place, line in lines.items() if place[: len(start)] == start}
