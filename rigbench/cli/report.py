"""``rigbench report``: the page of a campaign."""

from __future__ import annotations

import datetime
from pathlib import Path

from rigbench.campaign.store import Store
from rigbench.cli.output import print_json, say, show
from rigbench.cli.stored import CAUTION, check_output
from rigbench.errors import InputFaults, counted

__all__ = ["ENDINGS", "write_report"]

ENDINGS = (".html", ".htm")


def write_report(path: str, output: str | None, traces: int | None, as_json: bool) -> None:
    """Write the page of what is stored; at most ``traces`` runs are replayed for it (None: 20 s of them)."""
    page = Path(path).with_name(f"{Path(path).stem}-report.html") if output is None else Path(output)
    check_output(page, path)
    if page.suffix.lower() not in ENDINGS:
        raise InputFaults.one(page, "-o", f"'{page.suffix}' is no ending of a page", " or ".join(ENDINGS))
    with Store.open_for_reading(path) as store:
        from rigbench.report.page.page import gathered, write_page

        findings = gathered(store, path, datetime.date.today(), traces, _tell)
    write_page(findings, page)
    if as_json:
        replays = {"named": findings.named, "replayed": findings.replayed}
        print_json({"store": path, "page": str(page), "runs": replays})
    else:
        show(str(page))
    say(CAUTION)


def _tell(replays: int, named: int) -> None:
    if replays:
        say(f"replaying {replays} of the {counted(named, 'run')} that the page names")
