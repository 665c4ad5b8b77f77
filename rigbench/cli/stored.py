"""``rigbench status`` and ``export``: what is in a store."""

from __future__ import annotations

import io
import tempfile
from collections.abc import Callable, Iterable, Iterator
from pathlib import Path
from typing import BinaryIO, TextIO, TypeVar

from rigbench.campaign.export import check_parquet, export_columns, export_csv, export_parquet
from rigbench.campaign.reading import Reader
from rigbench.campaign.store import Store
from rigbench.campaign.work import Host
from rigbench.cli.gains import gains_notes
from rigbench.cli.output import paragraph, print_json, put, say, show, width
from rigbench.errors import InputFaults, listed
from rigbench.report import cautions
from rigbench.report.output_file import write_whole
from rigbench.scores.results import Results

__all__ = [
    "CAUTION",
    "check_output",
    "export_runs",
    "picture_path",
    "print_status",
    "status_text",
    "store_notes",
]

CAUTION = f"{cautions.CAUTION.removesuffix('.')}; see the cautions in the README."

T = TypeVar("T")

PART = 65536
"""Characters of a table that are printed at once."""


def picture_path(store: Path, of: str = "matrix") -> Path:
    """Return where a picture of a store goes: <name>-matrix.png beside it."""
    return store.with_name(f"{store.stem}-{of}.png")


def print_status(path: str, as_json: bool) -> None:
    """Print the matrix of what is stored."""
    from rigbench.report.json_form import results_json

    with Store.open_for_reading(path) as store:
        results = store.results(brief=not as_json)
        notes = [*store_notes(store), *_notes(store.hosts().values())]
    if as_json:
        print_json(results_json(results, path) | {"notes": notes})
        return
    show(status_text(results, notes))
    say(CAUTION)


def store_notes(store: Reader) -> Iterator[str]:
    """Say beneath a matrix which gains were found, and which studies are not finished."""
    yield from gains_notes(store)
    if unfinished := store.unfinished():
        yield f"Not finished: {listed(unfinished)}."


def status_text(results: Results, notes: Iterable[str] = ()) -> str:
    """Return the matrix, the advice and the notes, as wide as the terminal."""
    from rigbench.report.text import matrix_text

    return "\n\n".join([matrix_text(results, width()), paragraph(results.advice), *map(paragraph, notes)])


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


def export_runs(path: str, output: str | None, studies: bool, as_json: bool) -> None:
    """Write the stored runs to a file, whole or not at all, or as CSV to standard output.

    What the columns mean is written beside a file. For standard output the table is made in a temporary file
    first, so that a slow reader doesn't keep the store open.
    """
    if output is None:
        with tempfile.TemporaryFile("w+", encoding="utf-8", newline="") as table:
            with Store.open_for_reading(path) as store:
                export_csv(store, table, studies)
            table.seek(0)
            for part in iter(lambda: table.read(PART), ""):
                put(part)
        say(CAUTION)
        return
    ending = Path(output).suffix.lower()
    if ending not in (".csv", ".parquet"):
        raise InputFaults.one(output, "-o", f"'{ending}' is no ending of a table", ".csv or .parquet")
    columns = Path(output).with_name(f"{Path(output).stem}-columns.csv")
    for file in (Path(output), columns):
        check_output(file, path)
    write = _parquet if ending == ".parquet" else _csv
    if write is _parquet:
        check_parquet(output)
    with Store.open_for_reading(path) as store:
        rows = _written(Path(output), lambda stream: write(store, stream, studies))
        _written(columns, lambda stream: _as_text(stream, lambda text: export_columns(store, text, studies)))
    if as_json:
        print_json({"store": path, "file": output, "columns": str(columns), "rows": rows})
    else:
        show(f"{rows} runs written to {output}, what its columns mean to {columns}")
    say(CAUTION)


def _written(path: Path, write: Callable[[BinaryIO], T]) -> T:
    """Write a file whole or not at all, and return what ``write`` does."""
    returned: list[T] = []
    write_whole(path, lambda stream: returned.append(write(stream)))
    return returned[0]


def _csv(store: Reader, stream: BinaryIO, studies: bool) -> int:
    return _as_text(stream, lambda text: export_csv(store, text, studies))


def _parquet(store: Reader, stream: BinaryIO, studies: bool) -> int:
    return export_parquet(store, stream, studies)


def _as_text(stream: BinaryIO, write: Callable[[TextIO], T]) -> T:
    text = io.TextIOWrapper(stream, encoding="utf-8", newline="")
    try:
        return write(text)
    finally:
        text.detach()


def check_output(output: Path, store: str) -> None:
    """Raise InputFaults for an output that is the store itself."""
    if output.resolve() == Path(store).resolve():
        raise InputFaults.one(output, "-o", "is the store itself", "another file")
