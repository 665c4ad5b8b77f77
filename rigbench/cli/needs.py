"""``rigbench needs``: which parameters must be known, and how well."""

from __future__ import annotations

import datetime
from pathlib import Path

from rigbench.campaign.store import Store
from rigbench.campaign.studied import asked_study
from rigbench.cli.output import print_json, say, show, width
from rigbench.cli.stored import CAUTION, check_output
from rigbench.errors import Fault, InputFaults, nearest
from rigbench.scores.results import Tolerance

__all__ = ["tell_needs"]


def tell_needs(path: str, law: str | None, output: str | None, as_json: bool) -> None:
    """Print what the study shows, of one law or all; draw it where an ``output`` is named."""
    if output is not None:
        check_output(Path(output), path)
    with Store.open_for_reading(path) as store, store.one_moment():
        studied, labels = asked_study(store, "needs", " {law: LAW}"), store.labels
    from rigbench.report.needs_json import needs_json
    from rigbench.report.needs_text import needs_text
    from rigbench.scores.needs import needs_of
    from rigbench.scores.needs_design import NeedsDesign

    design = NeedsDesign.of(studied.declared)
    laws = list(dict.fromkeys(subject.law for subject in design.subjects))
    if law is not None and law not in laws:
        near = nearest(law, laws)
        expected = "" if near else f"one of {', '.join(laws)}"
        raise InputFaults([Fault(path, None, "--law", f"the study asked nothing of '{law}'", expected, near)])
    tolerance = labels.tolerance or Tolerance({}, design.required_share)
    rows = [record.row for record in studied.records]
    found = [needs for needs in needs_of(design, rows, tolerance) if law in (None, needs.law)]
    if output is not None:
        from rigbench.report.needs_picture import needs_picture

        needs_picture(found, design, labels.title, Path(output), datetime.date.today())
    if as_json:
        most = design.share_runs + design.most_search_runs
        runs = {"stored": len(rows), "most": most}
        about = {"store": path, "picture": output, "finished": studied.finished, "runs": runs}
        print_json(about | needs_json(found, design))
    else:
        show(needs_text(found, design, width()))
    if not studied.finished:
        say(f"the study is not finished: '{labels.resume}' goes on with it")
    if output is not None and not as_json:
        say(f"picture: {output}")
    say(CAUTION)
