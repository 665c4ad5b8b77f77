"""``rigbench matrix``: what a store shows, as a picture or as text."""

from __future__ import annotations

import datetime
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from rigbench.campaign.reading import Reader
from rigbench.campaign.store import Store
from rigbench.cli.naming import conditions_of, name_fault
from rigbench.cli.output import paragraph, print_json, show, width
from rigbench.cli.stored import check_output, picture_path
from rigbench.errors import Fault, InputFaults
from rigbench.report.view import SHARE, SHOWS, View, check_score
from rigbench.scores.changes import Changes, changes_since
from rigbench.scores.columns import telling_column
from rigbench.scores.results import CellKey, Results

__all__ = ["Wanted", "changes_against", "draw_matrix"]


@dataclass(frozen=True)
class Wanted:
    """What is to be seen of a store: the options of the command."""

    show: str = SHARE
    score: str | None = None
    against: str | None = None
    curves: bool = False
    limits: bool = False
    drivers: str | None = None
    condition: str | None = None
    sheet: str | None = None
    text: bool = False
    output: str | None = None
    accuracy: str | None = None

    @property
    def law(self) -> str | None:
        """The law that is looked at by itself."""
        return self.drivers if self.accuracy is None else self.accuracy

    @property
    def view(self) -> View:
        """Which number the cells show."""
        return View(self.show, self.score or "")

    @property
    def draws(self) -> bool:
        """Whether a picture is drawn."""
        return not self.text and self.accuracy is None

    @property
    def also(self) -> tuple[str, ...]:
        """The scores that are read besides the main one and those with a limit."""
        return () if self.score is None else (self.score,)

    @property
    def kind(self) -> str:
        """What the picture is of, as its file's name says."""
        if self.drivers is not None:
            return "drivers"
        if self.curves or self.limits:
            return "curves" if self.curves else "limits"
        if self.against is not None:
            return "changes"
        return "matrix" if self.show == SHARE else self.show


def draw_matrix(path: str, wanted: Wanted, as_json: bool) -> None:
    """Draw or print what is wanted of a store."""
    faults = list(_faults(path, wanted, as_json))
    if faults:
        raise InputFaults(faults)
    picture = None
    if wanted.draws:
        picture = picture_path(Path(path), wanted.kind) if wanted.output is None else Path(wanted.output)
        check_output(picture, path)
    with Store.open_for_reading(path) as store, store.one_moment():
        results = store.results(brief=True, also=wanted.also)
        if wanted.score is not None:
            check_score(path, wanted.score, store.scores(), results)
        if wanted.accuracy is not None:
            _accuracy(path, store, results, wanted, as_json)
            return
        if wanted.drivers is not None:
            _drivers(path, store, results, wanted, picture, as_json)
            return
    document: dict[str, Any] = {"store": path}
    changes = None
    if wanted.against is not None:
        changes = changes_against(path, wanted.against, results, wanted.score, "--against")
    if wanted.limits:
        _draw_limits(path, results, picture)
    elif wanted.curves:
        _draw_curves(results, picture, wanted)
    else:
        document |= _draw(results, changes, picture, wanted, as_json)
    _tell(document, picture, as_json)


def _faults(path: str, wanted: Wanted, as_json: bool) -> Iterator[Fault]:
    """Yield what of the options can't go together."""
    yield from name_fault(path, "--show", "view of the matrix", wanted.show, SHOWS)
    ways = {
        "--against": wanted.against is not None,
        "--curves": wanted.curves,
        "--limits": wanted.limits,
    }
    ways |= {"--drivers": wanted.drivers is not None, "--accuracy": wanted.accuracy is not None}
    given = [option for option, is_given in ways.items() if is_given]
    if len(given) > 1:
        yield Fault(path, None, " ".join(given), "are views of their own", "one of them")
    if wanted.law is None:
        for option, value in (("--condition", wanted.condition), ("--sheet", wanted.sheet)):
            if value is not None:
                problem = "narrows --drivers and --accuracy, of which none is given"
                yield Fault(path, None, option, problem, "--drivers LAW")
    elif wanted.show != SHARE:
        yield Fault(path, None, "--show", "says nothing about a law by itself", "--drivers LAW alone")
    if wanted.accuracy is not None and (wanted.output is not None or wanted.score is not None):
        yield Fault(path, None, "--accuracy", "prints a table, of no score", "--accuracy LAW alone")
    if wanted.text and wanted.output is not None:
        yield Fault(path, None, "--text", "prints and -o writes a picture", "one of them")
    for option, given_too in (("--curves", wanted.curves), ("--limits", wanted.limits)):
        if wanted.text and given_too:
            yield Fault(path, None, "--text", f"has no form for {option}", "-o FILE")
    if wanted.limits and (wanted.show != SHARE or wanted.score is not None):
        yield Fault(path, None, "--limits", "is of the tolerance as a whole", "no --show, no --score")
    if as_json and wanted.text and wanted.against is None and wanted.law is None:
        yield Fault(
            path, None, "--text --json", "are two forms of the same", "'rigbench status STORE --json'"
        )


def changes_against(path: str, other: str, results: Results, score: str | None, option: str) -> Changes:
    """Return what changed since another store of the same experiment; InputFaults if it is of another one."""
    also = () if score is None else (score,)
    with Store.open_for_reading(path) as store, Store.open_for_reading(other) as old:
        mine, theirs = store.owner, old.owner
        if mine is not None and theirs is not None and not mine.is_same(theirs):
            raise InputFaults.one(other, option, f"belongs to {theirs}", f"a store of {mine}")
        before = old.results(brief=True, also=also)
        if score is not None:
            check_score(other, score, old.scores(), before)
    return changes_since(before, results, score)


def _draw(
    results: Results, changes: Changes | None, picture: Path | None, wanted: Wanted, as_json: bool
) -> dict[str, Any]:
    """Draw or print the matrix, and return what the document says about changes."""
    from rigbench.report.changes_words import changes_json, changes_words
    from rigbench.report.text import matrix_text

    other = Path(wanted.against or "").name
    if picture is None and not as_json:
        advice = changes_words(changes, other) if changes else results.advice
        text = matrix_text(results, width(), wanted.view, changes, more=True)
        show(f"{text}\n\n{paragraph(advice)}")
    elif picture is not None:
        from rigbench.report.matrix import matrix_picture

        matrix_picture(results, picture, datetime.date.today(), wanted.view, changes, other)
        if changes is not None and not as_json:
            show(changes_words(changes, other))
    return {} if changes is None else {"against": wanted.against, "changes": changes_json(changes)}


def _draw_curves(results: Results, picture: Path | None, wanted: Wanted) -> None:
    from rigbench.report.level_curves import level_curves_picture

    if picture is not None:
        level_curves_picture(results, picture, datetime.date.today(), wanted.view)


def _draw_limits(path: str, results: Results, picture: Path | None) -> None:
    from rigbench.report.limits import limits_picture

    if results.level_search is None:
        expected = "find_level in the experiment file, and 'rigbench run' to its end"
        raise InputFaults.one(path, "--limits", "no search for the draws' own limits is stored", expected)
    if picture is not None:
        limits_picture(results, picture, datetime.date.today())


def _drivers(
    path: str, store: Reader, results: Results, wanted: Wanted, picture: Path | None, as_json: bool
) -> None:
    """Draw and print the strip of draws of a law under a condition."""
    from rigbench.report.driver_data import driver_strip
    from rigbench.report.driver_picture import driver_picture
    from rigbench.report.driver_text import driver_json, driver_text

    key = _cell_of(path, results, wanted)
    strip = driver_strip(store, results, key, wanted.view.score_of(results))
    if picture is not None:
        driver_picture(results, strip, picture, datetime.date.today())
    if not as_json:
        show(driver_text(strip, width()))
    _tell({"store": path, "drivers": driver_json(strip)}, picture, as_json)


def _accuracy(path: str, store: Reader, results: Results, wanted: Wanted, as_json: bool) -> None:
    """Print accuracy and repeatability of a law under a condition that has noise alone."""
    from rigbench.campaign.accuracy import accuracies, is_one_machine
    from rigbench.report.accuracy_text import accuracy_json, accuracy_text

    nominal = next((column.name for column in results.columns if column.ladder and not column.level), None)
    condition = nominal if wanted.condition is None else wanted.condition
    key = _cell_of(path, results, replace(wanted, condition=condition))
    if not is_one_machine(store, key):
        problem = f"the draws under '{key[2]}' are different machines, and ISO 9283 is about runs of one"
        raise InputFaults.one(path, "--condition", problem, "nominal, or a case, of an experiment with noise")
    found = accuracies(store, key)
    if not as_json:
        show(accuracy_text(key, found, width()))
    _tell({"store": path, "accuracy": accuracy_json(key, found)}, None, as_json)


def _cell_of(path: str, results: Results, wanted: Wanted) -> CellKey:
    """Return the cell of the law that is looked at: by default all sources together, nearest to level 1."""
    law, option = wanted.law or "", "--drivers" if wanted.accuracy is None else "--accuracy"
    faults = list(name_fault(path, option, "law", law, results.laws))
    if wanted.sheet is not None:
        faults += name_fault(path, "--sheet", "sheet", wanted.sheet, results.sheets)
    columns = [column for column in conditions_of(results, law) if column.random]
    if wanted.condition is not None:
        names = [column.name for column in results.columns]
        faults += name_fault(path, "--condition", "condition", wanted.condition, names)
    if faults:
        raise InputFaults(faults)
    column = telling_column(columns)
    if column is None:
        raise InputFaults.one(path, option, f"nothing is random in any run of '{law}'", "a law with draws")
    condition = wanted.condition or column.name
    if condition not in [column.name for column in columns]:
        expected = f"one of {', '.join(repr(column.name) for column in columns)}"
        if wanted.accuracy is not None:
            expected = (
                "an experiment with noise, jitter or dropped ticks, which make runs of one machine differ"
            )
        raise InputFaults.one(path, "--condition", f"nothing is random under '{condition}'", expected)
    possible = [
        cell.sheet
        for cell in results.cells
        if (cell.law, cell.condition) == (law, condition) and cell.planned
    ]
    sheet = possible[0] if wanted.sheet is None else wanted.sheet
    if sheet not in possible:
        raise InputFaults.one(path, "--sheet", f"'{law}' is not possible in '{sheet}'", f"one of {possible}")
    return sheet, law, condition


def _tell(document: dict[str, Any], picture: Path | None, as_json: bool) -> None:
    from rigbench.report.json_form import plain_values

    if as_json:
        print_json(plain_values(document | {"picture": None if picture is None else str(picture)}))
    elif picture is not None:
        show(str(picture))
