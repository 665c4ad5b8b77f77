"""What was found in the sheets of a sweep, told once and where the user can change it."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, replace

from rigbench.errors import Fault
from rigbench.experiment.sheet import Checked
from rigbench.experiment.vary import Axis, Sweep
from rigbench.yamlfile import Document, key_text

__all__ = ["Skipped", "faults_across", "notes_across", "skipped_of"]

MOST_NAMED = 3
"""So many sheets are named; of the others the number is given."""


@dataclass(frozen=True)
class Skipped:
    """A combination that can't be: a row in a sheet, or with '' for ``law`` the whole sheet.

    ``fault`` says why, where the user can change it.
    """

    sheet: str
    law: str
    fault: Fault

    @property
    def reason(self) -> str:
        """Why it can't be, in words."""
        return f"{self.fault.problem} ({self.fault.expected})"


def skipped_of(checked: Iterable[Checked]) -> list[Skipped]:
    """Return every combination that can't be; of the laws of a sheet that can't be nothing is said."""
    found = []
    for each in checked:
        whole = [clash for clash in each.findings.clashes if clash.law is None]
        for clash in whole or each.findings.clashes:
            fault = each.combination.at_home(clash.fault)
            found.append(Skipped(each.combination.name, clash.law or "", fault))
    return found


def faults_across(document: Document, sweep: Sweep, checked: Sequence[Checked]) -> list[Fault]:
    """Return the faults of all sheets, each once.

    What some sheets have and others don't is told at the value of ``vary`` that makes the difference, if
    there is one. A reference beyond a speed limit is at fault where that is so in every sheet; values that
    can't be combined are at fault where that leaves nothing of a law, or no sheet at all.
    """
    where: dict[Fault, list[Checked]] = {}
    for each in checked:
        for fault in dict.fromkeys(map(each.combination.at_home, each.findings.faults)):
            where.setdefault(fault, []).append(each)
    found: list[Fault] = []
    for fault, sheets in where.items():
        makes = _that_makes(sweep, checked, sheets)
        if len(sheets) == len(checked) or fault.file != document.file or fault.key.startswith("vary."):
            found.append(fault)
        elif makes is None:
            names = [each.combination.name for each in sheets]
            found.append(replace(fault, problem=f"{fault.problem} ({_in_sheets(names)})"))
        else:
            axis, values = makes
            problem = f"{fault.key}: {fault.problem}" if fault.key else fault.problem
            found += [document.fault(axis.place(k), problem, fault.expected, fault.near) for k in values]
    found += _passed_everywhere(document, checked)
    found += _impossible_everywhere(checked)
    return _without_indices(document, sweep, list(dict.fromkeys(found)))


def _that_makes(
    sweep: Sweep, checked: Sequence[Checked], sheets: Sequence[Checked]
) -> tuple[Axis, list[int]] | None:
    """Return the axis, and its values, that these sheets have and no others; None if there is none."""
    for number, axis in enumerate(sweep.sheets):
        having = {each.combination.chosen[number] for each in sheets}
        others = {each.combination.chosen[number] for each in checked if each not in sheets}
        if others and not having & others:
            return axis, sorted(having)
    return None


def _where(sweep: Sweep, checked: Sequence[Checked], sheets: Sequence[Checked]) -> str:
    """Say which sheets: '' for all, 'with gear_ratio 200' or "in sheets 'a', 'b' and 5 more"."""
    if len(sheets) == len(checked):
        return ""
    makes = _that_makes(sweep, checked, sheets)
    if makes is None:
        return _in_sheets([each.combination.name for each in sheets])
    axis, values = makes
    return f"with {' or '.join(axis.named(k) for k in values)}"


def _in_sheets(names: Sequence[str]) -> str:
    shown = ", ".join(f"'{name}'" for name in names[:MOST_NAMED])
    more = f" and {len(names) - MOST_NAMED} more" if len(names) > MOST_NAMED else ""
    return f"in sheet{'' if len(names) == 1 else 's'} {shown}{more}"


def _about(document: Document, passing: Fault) -> str:
    """Return what a passing of a speed limit is about: a motion, or a motion's own file."""
    return passing.key if passing.file == document.file else passing.file


def _possible(checked: Iterable[Checked]) -> list[Checked]:
    """Return the sheets that can be."""
    return [each for each in checked if all(clash.law is not None for clash in each.findings.clashes)]


def _passed_everywhere(document: Document, checked: Sequence[Checked]) -> list[Fault]:
    """Return the passings of motions that pass a speed limit in every sheet, as the first one has them."""
    sheets = _possible(checked)
    each_has = [{_about(document, passing) for passing in each.findings.passings} for each in sheets]
    everywhere = set.intersection(*each_has) if each_has else set()
    return [
        passing
        for each in sheets[:1]
        for passing in each.findings.passings
        if _about(document, passing) in everywhere
    ]


def _impossible_everywhere(checked: Sequence[Checked]) -> list[Fault]:
    """Return the clashes of rates that leave no sheet, or else those that leave nothing of a law."""
    sheets = _possible(checked)
    if not sheets:
        return [skipped.fault for skipped in skipped_of(checked)]
    found = []
    rows = list(sheets[0].keys.laws or {}) if sheets[0].keys is not None else []
    law_of = {row: sheets[0].combination.variants.get(row, row) for row in rows}
    clashing = [{clash.law for clash in each.findings.clashes} for each in sheets]
    for law in dict.fromkeys(law_of.values()):
        own = {row for row in rows if law_of[row] == law}
        if all(own <= these for these in clashing):
            found += [skipped.fault for skipped in skipped_of(sheets) if skipped.law in own]
    return found


def _without_indices(document: Document, sweep: Sweep, faults: list[Fault]) -> list[Fault]:
    """Tell what is wrong alike at every value of an axis once, at the axis."""
    for axis in (*sweep.sheets, *sweep.variants):
        starts = [key_text(axis.place(index)) for index in range(len(axis.values))]
        alike: dict[Fault, list[Fault]] = {}
        for fault in faults:
            start = next(
                (s for s in starts if fault.key == s or fault.key.startswith((f"{s}.", f"{s}["))), None
            )
            if start is not None and fault.file == document.file:
                whole = key_text(("vary", *axis.path)) + fault.key[len(start) :]
                line = document.line(("vary", *axis.path))
                alike.setdefault(replace(fault, key=whole, line=line), []).append(fault)
        for whole_fault, own in alike.items():
            if len(own) == len(starts) > 1:
                faults = [
                    whole_fault if fault == own[0] else fault for fault in faults if fault not in own[1:]
                ]
    return faults


def notes_across(document: Document, sweep: Sweep, checked: Sequence[Checked]) -> list[Fault]:
    """Return the notes of all sheets, each once, with the sheets it is about unless these are all.

    Among them: combinations that can't be, and where the reference is beyond a speed limit in some.
    """
    sheets = _possible(checked)
    where: dict[Fault, list[Checked]] = {}
    for each in sheets:
        for note in dict.fromkeys(map(each.combination.at_home, each.findings.notes)):
            where.setdefault(note, []).append(each)
    found = []
    for note, own in where.items():
        which = _where(sweep, sheets, own)
        found.append(replace(note, problem=f"{note.problem} ({which})") if which else note)
    return [*found, *_skipped_notes(sweep, checked), *_passing_notes(document, sweep, sheets)]


def _skipped_notes(sweep: Sweep, checked: Sequence[Checked]) -> Iterator[Fault]:
    """Yield a note for each row, and reason, that is not possible in some sheets, and each such sheet."""
    where: dict[tuple[str, str, Fault], list[Checked]] = {}
    for each in checked:
        for skipped in skipped_of([each]):
            where.setdefault((skipped.law, skipped.reason, skipped.fault), []).append(each)
    for (law, reason, fault), sheets in where.items():
        what = [f"'{law}'" if law else "", _where(sweep, checked, sheets)]
        problem = f"skipped {' '.join(filter(None, what))}: {reason}"
        yield replace(fault, problem=problem, expected="", near=None)


def _passing_notes(document: Document, sweep: Sweep, sheets: Sequence[Checked]) -> Iterator[Fault]:
    """Yield a note for each motion that passes speed limits in some sheets: there the arm can't follow."""
    where: dict[str, list[Checked]] = {}
    first: dict[str, Fault] = {}
    for each in sheets:
        for passing in each.findings.passings:
            about = _about(document, passing)
            first.setdefault(about, each.combination.at_home(passing))
            if each not in where.setdefault(about, []):
                where[about].append(each)
    for about, passing in first.items():
        problem = f"the arm can't follow it {_where(sweep, sheets, where[about])}: {passing.problem}"
        yield replace(passing, problem=problem, expected="")
