"""Checks as JUnit XML, which CI systems read: a test suite with a test case for each check.

There is no standard of the form; these elements and attributes are those that its readers agree on
(testsuites, testsuite, testcase, failure, skipped; from memory).
"""

from __future__ import annotations

import datetime
from collections.abc import Sequence
from io import BytesIO
from pathlib import Path
from xml.etree import ElementTree

from rigbench.report.gate_words import check_words
from rigbench.report.output_file import write_whole
from rigbench.report.wrapping import clean
from rigbench.scores.gating import BASELINE, Check
from rigbench.scores.results import Results

__all__ = ["junit_xml", "write_junit"]


def write_junit(path: Path, checks: Sequence[Check], results: Results, when: datetime.datetime) -> None:
    """Write the checks to a file, whole or not at all; StoreError if the disk refuses."""
    text = junit_xml(checks, results, when)
    write_whole(path, lambda stream: stream.write(text))


def junit_xml(checks: Sequence[Check], results: Results, when: datetime.datetime) -> bytes:
    """Return the checks as one XML document in UTF-8.

    Signs that XML can't carry become blanks. Times are 0: the checks measure none.
    """
    counts = {
        "tests": str(len(checks)),
        "failures": str(sum(check.state == "failed" for check in checks)),
        "errors": "0",
        "skipped": str(sum(check.state == "skipped" for check in checks)),
        "time": "0",
    }
    root = ElementTree.Element("testsuites", {"name": "rigbench gate", **counts})
    stamp = when.replace(microsecond=0, tzinfo=None).isoformat()
    named = {"name": clean(results.title) or "rigbench", "timestamp": stamp}
    suite = ElementTree.SubElement(root, "testsuite", named | counts)
    for check in checks:
        _case(suite, check, results)
    stream = BytesIO()
    ElementTree.indent(root)
    ElementTree.ElementTree(root).write(stream, "utf-8", xml_declaration=True)
    return stream.getvalue() + b"\n"


def _case(suite: ElementTree.Element, check: Check, results: Results) -> None:
    sheet, law, condition = (clean(name) for name in check.key)
    asked = "no worse than the baseline" if check.of == BASELINE else "keeps the tolerance"
    name = f"{condition}{f', {sheet}' if sheet else ''}: {asked}"
    case = ElementTree.SubElement(suite, "testcase", {"classname": law, "name": name, "time": "0"})
    said = clean(check_words(check, results))
    if check.state == "failed":
        failure = ElementTree.SubElement(case, "failure", {"message": said, "type": check.why})
        failure.text = said
    elif check.state == "skipped":
        ElementTree.SubElement(case, "skipped", {"message": said})
