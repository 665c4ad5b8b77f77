"""``rigbench status``, ``matrix`` and ``export``: what is in a store."""

from __future__ import annotations

import contextlib
import datetime
import shutil
import tempfile
from collections.abc import Iterable, Iterator
from pathlib import Path
from typing import IO

from rigbench.campaign.export import export_csv
from rigbench.campaign.store import Store
from rigbench.campaign.work import Host
from rigbench.cli.output import paragraph, print_json, put, say, show, width
from rigbench.errors import InputFaults, StoreError

__all__ = ["CAUTION", "draw_matrix", "export_runs", "picture_path", "print_status"]

CAUTION = "Simulation is evidence for a choice, not a safety case; see the cautions in the README."

PART = 65536
"""Characters of a table that are printed at once."""


def picture_path(store: Path) -> Path:
    """Return where the picture of a store goes: <name>-matrix.png beside it."""
    return store.with_name(f"{store.stem}-matrix.png")


def print_status(path: str, as_json: bool) -> None:
    """Print the matrix of what is stored."""
    from rigbench.report.json_form import results_json
    from rigbench.report.text import matrix_text

    with Store.open_for_reading(path) as store:
        results, notes = store.results(), list(_notes(store.hosts()))
    if as_json:
        print_json(results_json(results, path) | {"notes": notes})
        return
    show(matrix_text(results, width()))
    show(f"\n{paragraph(results.advice)}")
    for note in notes:
        show(f"\n{paragraph(note)}")
    say(CAUTION)


def _notes(hosts: Iterable[Host]) -> Iterator[str]:
    """Say in one sentence what differs between the hosts of the stored runs: the last digits may, too."""
    met: dict[str, dict[str, None]] = {}
    for host in hosts:
        met.setdefault("types of CPU", {})[host.cpu] = None
        for package, version in host.versions:
            met.setdefault(f"versions of {package}", {})[version] = None
    differ = [f"{what} ({', '.join(found)})" for what, found in met.items() if len(found) > 1]
    if differ:
        said = " and ".join(differ)
        yield f"Note: the stored runs were done with different {said}, so last digits may differ."


def draw_matrix(path: str, output: str | None, as_json: bool) -> None:
    """Draw the matrix of what is stored."""
    from rigbench.report.matrix import matrix_picture

    picture = picture_path(Path(path)) if output is None else Path(output)
    _check_output(picture, path)
    with Store.open_for_reading(path) as store:
        results = store.results()
    matrix_picture(results, picture, datetime.date.today())
    if as_json:
        print_json({"store": path, "picture": str(picture)})
    else:
        show(str(picture))


def export_runs(path: str, output: str | None, as_json: bool) -> None:
    """Write the stored runs to a file, whole or not at all, or to standard output.

    The table is made in a temporary file first, so that a slow reader doesn't keep the store open.
    """
    if output is not None:
        _check_output(Path(output), path)
    with tempfile.TemporaryFile("w+", encoding="utf-8", newline="") as table:
        with Store.open_for_reading(path) as store:
            rows = export_csv(store, table)
        table.seek(0)
        if output is None:
            for part in iter(lambda: table.read(PART), ""):
                put(part)
        else:
            _write(table, Path(output))
    if as_json:
        print_json({"store": path, "file": output, "rows": rows})
    elif output is not None:
        show(f"{rows} runs written to {output}")
    say(CAUTION)


def _write(table: IO[str], output: Path) -> None:
    part = output.with_name(f"{output.name}.part")
    try:
        output.parent.mkdir(parents=True, exist_ok=True)
        with part.open("w", encoding="utf-8", newline="") as stream:
            shutil.copyfileobj(table, stream)
        part.replace(output)
    except OSError as error:
        with contextlib.suppress(OSError):
            part.unlink(missing_ok=True)
        raise StoreError(str(output), f"can't be written: {error.strerror}") from error


def _check_output(output: Path, store: str) -> None:
    if output.resolve() == Path(store).resolve():
        raise InputFaults.one(output, "-o", "is the store itself", "another file")
