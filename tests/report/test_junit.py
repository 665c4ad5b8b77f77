"""What a gate says: in sentences, and as XML that CI systems read."""

from __future__ import annotations

import datetime
from collections.abc import Callable
from dataclasses import replace
from xml.etree import ElementTree

import pytest

from rigbench.report.gate_words import check_json, check_words
from rigbench.report.json_form import plain_values
from rigbench.report.junit import junit_xml
from rigbench.scores.changes import KINDS, CellChange
from rigbench.scores.comparison import Comparison
from rigbench.scores.gating import BASELINE, TOLERANCE, Check
from rigbench.scores.results import Results

WHEN = datetime.datetime(2026, 12, 1, 7, 30, 0, 5)


def checks_of(results: Results) -> list[Check]:
    """One check of every kind there is, all of the last cell."""
    cell = results.cells[-1]
    gap = Comparison(0.25, 0.2, 0.31, 128, False)
    checks = [Check(TOLERANCE, cell, "passed", "keeps"), Check(TOLERANCE, cell, "failed", "misses")]
    checks += [
        Check(TOLERANCE, cell, "failed", "open"),
        Check(TOLERANCE, replace(cell, draws=0), "failed", "no result"),
    ]
    checks += [
        Check(TOLERANCE, cell, "skipped", "not possible"),
        Check(TOLERANCE, cell, "skipped", "no tolerance"),
    ]
    for kind in KINDS:
        before = None if kind == "new" else replace(cell, pass_share=1.0, passed=128)
        state = {"worse": "failed", "better": "passed", "unchanged": "passed"}.get(kind, "skipped")
        checks.append(Check(BASELINE, cell, state, kind, CellChange(kind, before, cell, gap)))
    return checks


def test_every_check_is_one_sentence(make_results: Callable[..., Results]) -> None:
    """It names law and condition, and gives the numbers; no two sorts of check read alike."""
    results = make_results(2, 4)
    cell = results.cells[-1]
    said = [check_words(check, results) for check in checks_of(results)]
    assert len(set(said)) == len(said)
    for sentence in said:
        assert sentence.startswith(f"'{cell.law}' under '{cell.condition}'")
        assert sentence.endswith(".")
        assert "\n" not in sentence
    assert f"{cell.passed} of 128 draws keep it (" in said[1]
    assert "95 % must" in said[1]
    worse = said[6 + KINDS.index("worse")]
    assert "got worse than the baseline" in worse
    assert "100 % did, tool peak by +0.25 mm (+0.20 to +0.31)" in worse


def test_an_exact_run_speaks_of_no_draws(make_results: Callable[..., Results]) -> None:
    """Nominal is one run, which keeps or doesn't."""
    results = make_results(1, 1)
    check = Check(TOLERANCE, results.cells[0], "passed", "keeps")
    assert check_words(check, results).endswith("keeps the tolerance: its one exact run does.")


def test_the_document_is_what_its_readers_expect(make_results: Callable[..., Results]) -> None:
    """Counts agree with the cases, each of which is passed, failed or skipped, with its sentence."""
    results = make_results(2, 4)
    checks = checks_of(results)
    root = ElementTree.fromstring(junit_xml(checks, results, WHEN))
    assert root.tag == "testsuites"
    (suite,) = root
    assert (suite.tag, suite.get("name"), suite.get("timestamp")) == (
        "testsuite",
        results.title,
        "2026-12-01T07:30:00",
    )
    cases = list(suite)
    assert {case.tag for case in cases} == {"testcase"}
    for element in (root, suite):
        assert int(element.get("tests", "")) == len(cases) == len(checks)
        assert int(element.get("failures", "")) == len(suite.findall("testcase/failure")) == 4
        assert int(element.get("skipped", "")) == len(suite.findall("testcase/skipped")) == 5
        assert element.get("errors") == "0"
    for case, check in zip(cases, checks, strict=True):
        assert (case.get("classname"), case.get("time")) == (check.cell.law, "0")
        inner = {"passed": [], "failed": ["failure"], "skipped": ["skipped"]}[check.state]
        assert [child.tag for child in case] == inner
        for child in case:
            assert child.get("message") == check_words(check, results)


@pytest.mark.parametrize("name", ["a < b & \"c\" > 'd'", "\x1b[31m\x00\ud800", "計算 🙂", "]]>"])
def test_any_name_makes_sound_xml(make_results: Callable[..., Results], name: str) -> None:
    """Marks are escaped, and signs that XML can't carry become blanks."""
    results = make_results([name, "b"], 2, title=name)
    checks = [Check(TOLERANCE, results.cells[1], "failed", "misses")]
    (suite,) = ElementTree.fromstring(junit_xml(checks, results, WHEN))
    classname = suite[0].get("classname") or ""
    assert classname == name if name.isprintable() else "[31m" in classname


def test_checks_are_strict_json(make_results: Callable[..., Results]) -> None:
    """Every key, and the sentence too."""
    results = make_results(2, 4)
    for check in checks_of(results):
        document = plain_values(check_json(check, results))
        assert document["said"] == check_words(check, results)
        assert (document["of"], document["state"]) == (check.of, check.state)
