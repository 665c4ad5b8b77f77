"""The page as a file: what is in it, that nothing users named is markup, and that it needs nothing else."""

from __future__ import annotations

import base64
import datetime
import hashlib
import json
import math
import re
from collections.abc import Callable
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import pytest

from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.reading import Reader
from rigbench.campaign.store import Store
from rigbench.campaign.studies.tune import gains_found
from rigbench.campaign.studies.worst_case import worst_found
from rigbench.campaign.work import Outcome
from rigbench.errors import StoreError
from rigbench.report.cautions import BEFORE_A_REAL_ARM, CAUTION, NOT_MODELLED
from rigbench.report.json_form import results_json
from rigbench.report.needs_words import share_words
from rigbench.report.page.data import embedded
from rigbench.report.page.needs import FoundNeeds
from rigbench.report.page.page import gathered, page_html
from rigbench.report.words import signed
from rigbench.scores.needs import Alone, LawNeeds, SourceNeed
from rigbench.scores.needs_design import Group, NeedsDesign, Subject
from rigbench.scores.own_limits import FoundLevel
from rigbench.scores.results import Tolerance, Tolerated

ROOT = Path(__file__).resolve().parents[3]
EVIL = (
    "<script>alert(1)</script>",
    "</script><img src=x onerror=alert(1)>",
    "\"'&<b onclick=alert(1)>",
    "{{ 7*7 }}{% raise %}",
)
MB = 1e6


class Reading(HTMLParser):
    """Tags with their attributes, and the text of each script apart from that of the page."""

    def __init__(self, path: Path) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.text, self.scripts, self.inside = "", [], ""
        self.feed(path.read_text("utf-8"))

    def handle_starttag(self, tag: str, attributes: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attributes)))
        self.inside = tag
        if tag == "script":
            self.scripts.append("")

    def handle_data(self, data: str) -> None:
        if self.inside == "script":
            self.scripts[-1] += data
        elif self.inside != "style":
            self.text += data

    def handle_endtag(self, tag: str) -> None:
        self.inside = ""

    @property
    def said(self) -> str:
        return " ".join(self.text.split())

    @property
    def data(self) -> Any:
        return json.loads(self.scripts[0])

    def ids(self) -> set[str]:
        return {attributes["id"] or "" for _, attributes in self.tags if "id" in attributes}


def test_nothing_that_users_name_is_markup(
    make_store: Callable[..., Path], make_page: Callable[[Path], Path]
) -> None:
    """Names of laws, sheets and motions, title, YAML, reasons and tracebacks: text in the page and its data."""

    def ends(entry: Entry) -> str:
        return "law-error" if entry.law == EVIL[0] and entry.draw == 1 else "finished"

    store = make_store(
        EVIL,
        3,
        4,
        sheets=(EVIL[2], "two"),
        motions=(EVIL[3],),
        title=EVIL[1],
        text=EVIL[1] + "\n",
        ends=ends,
        rounds=1,
    )
    page = Reading(make_page(store))
    assert len(page.scripts) == 2
    assert {"pairs", "worst", "gains"} <= page.ids()
    assert not [
        tag for tag, _ in page.tags if tag in {"img", "b", "iframe", "object", "embed", "link", "base"}
    ]
    assert not [name for _, attributes in page.tags for name in attributes if name.startswith("on")]
    for name in EVIL[:3]:
        assert name in page.text
    assert "49" not in page.text.split("Experiment")[0]
    cells = page.data["cells"]
    assert {cell["law"] for cell in cells} == set(EVIL)
    troubles = [trouble for cell in cells for trouble in cell["troubles"]]
    assert len(troubles) == 4
    assert {(one["reason"], page.data["tracebacks"][one["traceback"]]) for one in troubles} == {
        ("the tray <b>fell</b>", "Traceback: <script>alert(3)</script>"),
    }


def test_data_can_not_end_its_element() -> None:
    """Whatever is embedded has no < > & of its own, and reads back as it was; nothing infinite gets in."""
    document = {"</script>": ["<!--", "&lt;", "\u2028", "é"]}
    text = embedded(document)
    assert not set(text) & set("<>&\u2028")
    assert json.loads(text) == document
    with pytest.raises(ValueError, match="JSON"):
        embedded({"value": float("inf")})


def test_the_page_asks_for_nothing(
    make_store: Callable[..., Path], make_page: Callable[[Path], Path]
) -> None:
    """No address but that of SVG's names; a policy that lets this script alone run, by its digest."""
    path = make_page(make_store())
    page, text = Reading(path), path.read_text("utf-8")
    assert set(re.findall(r"https?://[^\s\"']+", text)) == {"http://www.w3.org/2000/svg"}
    assert "url(" not in text
    assert "@import" not in text
    assert not [attributes for _, attributes in page.tags if "src" in attributes]
    policy = next(a["content"] or "" for tag, a in page.tags if tag == "meta" and "http-equiv" in a)
    digest = base64.b64encode(hashlib.sha256(page.scripts[1].encode()).digest()).decode()
    assert policy.startswith("default-src 'none';")
    assert f"script-src 'sha256-{digest}';" in policy


def test_figures_are_those_of_status_json(
    make_store: Callable[..., Path], make_page: Callable[[Path], Path]
) -> None:
    """Verdicts, counts, medians and tolerated levels are what the commands that the page names print."""
    store = make_store(3, 5, 80)
    page = Reading(make_page(store))
    with Reader.open_for_reading(store) as reader:
        results = reader.results()
    printed = results_json(results, str(store))
    for shown, cell in zip(page.data["cells"], printed["cells"], strict=True):
        assert (shown["law"], shown["condition"]) == (cell["law"], cell["condition"])
        assert shown["verdict"] == cell["verdict"]
        spread = next(one for one in shown["spreads"] if one["title"] == "tool peak")
        assert spread["median"][0] == pytest.approx(cell["tool_peak_mm"]["median"], rel=1e-5)
        assert spread["limit"] == 1.0
        if not shown["exact"]:
            kept = round(cell["pass_share"] * cell["draws"])
            assert shown["said"][0].startswith(f"{kept} of 80 draws keep the tolerance")
            counts, below = spread["bins"]["counts"], spread["bins"]["below"]
            assert sum(counts[:below]) == kept  # settling times are far below their limit
    assert results.advice.split("; ")[0].rstrip(".") in page.said
    for command in ("status", "status trays.sqlite --json", "matrix", "export"):
        assert f"rigbench {command}" in page.said
    assert (
        f"rigbench trace trays.sqlite {page.data['cells'][0]['runs'][0]['key'][:12]}"
        == (page.data["cells"][0]["runs"][0]["command"])
    )


def test_what_stands_behind_the_figures_is_told(
    make_store: Callable[..., Path], make_page: Callable[[Path], Path]
) -> None:
    """The experiment's text, seed, CPU, versions, date, and the cautions: those of the README."""
    page = Reading(make_page(make_store(text="# how\nrigbench: 1\n")))
    assert "# how\nrigbench: 1\n" in page.text
    for word in ("Seed of the draws3", "a type of CPU", "numpy 2.4.6", "2026-05-04", "0 of the"):
        assert word in page.said
    readme = " ".join((ROOT / "README.md").read_text("utf-8").split())
    for caution in (CAUTION, BEFORE_A_REAL_ARM, NOT_MODELLED):
        assert caution in page.said
        assert caution.removeprefix("Simulation is ").rstrip(".") in readme


def test_sections_appear_when_there_is_something_in_them(
    make_store: Callable[..., Path], make_page: Callable[[Path], Path]
) -> None:
    """Curves need a level, the break-even table a crossing; decision, matrix, experiment are always there."""
    always = {"decision", "matrix", "experiment", "cautions"}
    plain = Reading(make_page(make_store(2, 1, 1, name="plain.sqlite")))
    assert always <= plain.ids()
    assert not {"curves", "break-even", "worst", "gains"} & plain.ids()
    assert "pairs" not in Reading(make_page(make_store(1, 3, 4, name="alone.sqlite"))).ids()
    crossing = make_store(4, 4, 12, name="crossing.sqlite")
    with Reader.open_for_reading(crossing) as reader:
        found = reader.results().break_even
    assert found, "the invented scores no longer cross"
    page = Reading(make_page(crossing))
    assert {"curves", "break-even"} <= page.ids()
    assert f"{len(found)} pair" in page.said


def test_what_must_be_known_is_told_where_it_was_asked(
    make_store: Callable[..., Path], tmp_path: Path
) -> None:
    """A row for each source, what to identify first standing first, in the words of `rigbench needs`."""
    group = Group(
        "viscous", "viscous_percent", "", ("v",), {"grows": "factor", "unit": "%", "values": {"all": 30.0}}
    )
    rest = replace(group, name="coulomb", source="coulomb_percent")
    found = FoundLevel(Tolerated(1.1, 0.8, 1.25), 73, 60, 0)
    alone, free = (
        Alone(found, 0, True),
        Alone(replace(found, tolerated=Tolerated(None, 5.0, math.inf)), 0, True),
    )
    sources = (
        SourceNeed(group, (0.8, 0.7, 0.9), (0.9, 0.8, 1.0), alone),
        SourceNeed(rest, (0.0, 0.0, 0.05), (0.01, 0.0, 0.03), free),
    )
    law = LawNeeds("", "<law>", sources, alone, 64, 64, 0, 0, 0, "score")
    design = NeedsDesign(
        "tool_peak_mm", 1.0, 64, 73, 0.95, (Subject("", "<law>", ("load tray",), (group, rest)),)
    )
    with Reader.open_for_reading(make_store(1, 2, 2)) as store:
        findings = gathered(store, "trays.sqlite", datetime.date(2026, 5, 4), 0)
    (tmp_path / "none.html").write_text(page_html(findings), encoding="utf-8")
    (tmp_path / "needs.html").write_text(
        page_html(replace(findings, needs=FoundNeeds((law,), design))), encoding="utf-8"
    )
    assert "needs" not in Reading(tmp_path / "none.html").ids()
    page = Reading(tmp_path / "needs.html")
    assert "needs" in page.ids()
    assert "rigbench needs trays.sqlite" in page.said
    rows = page.said.split("Shown to keep up to")[1]
    assert rows.index("viscous") < rows.index("coulomb")
    assert share_words((0.9, 0.8, 1.0)) in rows
    assert "Identify first" in page.said
    assert "<law>" in page.said


def section(page: Reading, title: str, following: str) -> str:
    """The words of a section; its title stands in the navigation first."""
    return page.said.split(title, 2)[2].split(following, 1)[0]


def test_worst_machines_are_those_of_the_study(
    make_store: Callable[..., Path], make_page: Callable[[Path], Path]
) -> None:
    """A row a level and law with the share of the limit; the smallest level that misses; the replay of a run.

    The invented peaks of law 1 are half of law 0's, but for 0.1 mm.
    """
    store = make_store(2, 3, 4, rounds=40)
    page = Reading(make_page(store))
    words = section(page, "Worst machines found", "Gains found")
    with Reader.open_for_reading(store) as reader:
        study = reader.study("worst_case")
        assert study is not None
        found = worst_found(study, Tolerance({"tool_peak_mm": 1.0}))
    assert {one.law for one in found} == {"law 0", "law 1"}
    for one in found:
        assert one.used is not None
        assert one.record is not None
        if one.searched:
            assert f"{100 * one.used.share:.3g} % of its limit, in 'load tray'" in words
            assert f"{one.runs} runs" in words
    for law in ("law 0", "law 1"):
        missing = [one for one in found if one.law == law and one.misses]
        assert (
            f"Smallest level found to miss: {missing[0].level:.3g} (run {missing[0].record.key[:12]})"
            in words
        )
        searched = next(one for one in missing if one.searched)
        assert f"Replayed by rigbench trace trays.sqlite {searched.record.key[:12]}" in words
    assert words.count("link mass, upper") == 2
    assert "there may still be one" in words
    assert "the worst case" not in words
    assert "Printed by rigbench worst trays.sqlite" in words


def test_gains_are_those_of_the_study(
    make_store: Callable[..., Path], make_page: Callable[[Path], Path]
) -> None:
    """Found ones with their score beside the declared; where none keeps the limits, that and no score."""
    store = make_store(2, 3, 4, rounds=40)
    words = section(Reading(make_page(store)), "Gains found", "Experiment")
    with Reader.open_for_reading(store) as reader:
        study = reader.study("tune")
        assert study is not None
        found, none = gains_found(study)
    assert (found.within, none.within) == (True, False)
    assert f"law 0damping {found.gains['damping']:g}tool RMS {found.score:.3g} mmdamping 1" in words
    assert "law 1none within the limits: the declared stay\u2013damping 1" in words
    assert "least tool RMS on the nominal machine; chatter at most 0.5" in words
    assert "The runs of the matrix have the gains found" in words
    assert "Printed by rigbench gains trays.sqlite" in words


def test_a_search_that_is_not_finished_is_said_to_be_so(
    make_store: Callable[..., Path], make_page: Callable[[Path], Path]
) -> None:
    """With the command that goes on with it; and nothing is claimed of the matrix's gains."""
    for rounds, times in ((1, 2), (40, 0)):
        page = Reading(make_page(make_store(2, 3, 4, rounds=rounds, name=f"{rounds}.sqlite")))
        assert page.said.count("not finished") == times
        assert page.said.count("rigbench run trays.yaml goes on with it") == times
        assert ("have the gains found" in page.said) is (times == 0)


def test_a_search_that_cannot_be_told_here_says_why(
    make_store: Callable[..., Path], make_page: Callable[[Path], Path], monkeypatch: pytest.MonkeyPatch
) -> None:
    """A run that this rigbench does not know how to restore leaves the rest of the page as it is."""

    def unknown(store: Reader, key: str) -> None:
        raise StoreError("trays.sqlite", "run can't be replayed: unknown")

    store = make_store(2, 3, 4, rounds=40)
    monkeypatch.setattr(Reader, "kept", unknown)
    page = Reading(make_page(store))
    assert "It can't be told here: trays.sqlite: run can't be replayed: unknown" in page.said
    assert {"matrix", "worst", "gains"} <= page.ids()


@pytest.mark.parametrize("sheets", [("",), ("one", "two")])
def test_laws_are_compared_draw_by_draw(
    make_store: Callable[..., Path], make_page: Callable[[Path], Path], sheets: tuple[str, ...]
) -> None:
    """Against the first law of the matrix, as many ties as the comparisons have, and the command for it."""
    store = make_store(3, 5, 12, sheets=sheets)
    page = Reading(make_page(store))
    with Reader.open_for_reading(store) as reader:
        results = reader.results()
    words = section(page, "Law against law", "Experiment")
    first = words.split("Draw by draw against '")[1].split("'")[0]
    own = [one for one in results.comparisons if first in one.laws]
    assert len(own) == 2 * 5 * len(sheets)
    ties = sum(one.difference.tie for one in own)
    assert 0 < ties < len(own)
    assert len(re.findall(r"\btie\b", words)) == ties + len(sheets)  # each reading says what a tie is
    for one in own:
        sign = 1 if one.laws[1] == first else -1
        assert signed(sign * one.difference.value) in words
    command = "matrix trays.sqlite --text" if sheets == ("",) else "status trays.sqlite --json"
    assert f"Printed by rigbench {command}" in words


def test_all_of_a_page_is_of_one_moment(
    make_store: Callable[..., Path], make_plan: Callable[..., Plan], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Runs that a campaign stores while the page is made are in all of it or in none."""
    path = make_store(1, 2, 6, done=0.5)
    plan = make_plan(["law 0"], 2, 6)
    with Store.open_for_writing(path, plan) as writer, Reader.open_for_reading(path) as store:
        results = store.results
        missing = writer.missing(plan)
        assert missing

        def then_more(*given: Any, **more: Any) -> Any:
            found = results(*given, **more)
            writer.add([Outcome(entry.key, "finished", scores={"tool_peak_mm": 9.0}) for entry in missing])
            return found

        monkeypatch.setattr(store, "results", then_more)
        findings = gathered(store, "trays.sqlite", datetime.date(2026, 5, 4), 0)
        assert store.counts().done == findings.results.done + len(missing)
    for cell, shown in zip(findings.results.cells, findings.details, strict=True):
        for spread in shown["spreads"]:
            assert sum(spread["bins"]["counts"]) == cell.draws


def test_the_same_findings_give_the_same_bytes(
    make_store: Callable[..., Path], make_page: Callable[..., Path], run_store: Path
) -> None:
    """Replays included; nothing is left beside the page."""
    one = make_page(run_store, 4).read_bytes()
    assert make_page(run_store, 4).read_bytes() == one
    assert not list(run_store.parent.glob("*.part"))
    assert b"4 of the" in one


@pytest.mark.parametrize("draws", [2, pytest.param(128, marks=pytest.mark.evidence)])
def test_twenty_laws_by_twenty_conditions_stay_under_5_mb(
    make_store: Callable[..., Path], make_page: Callable[..., Path], draws: int
) -> None:
    """With the trace of every named run the page still loads at once."""
    path = make_page(make_store(20, 20, draws), None if draws == 2 else 10_000)
    page = Reading(path)
    traced = [run for cell in page.data["cells"] for run in cell["runs"] if run["trace"]]
    points = sum(len(run["trace"]["error_mm"]) for run in traced)
    rest = 2 * 400 - len(traced)
    assert path.stat().st_size + rest * 7 * points / len(traced) < 5 * MB
    assert len(page.data["cells"]) == 400
