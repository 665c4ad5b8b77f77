"""The export, and the store as Python sees it: tables that read back as exactly what is stored."""

from __future__ import annotations

import csv
import io
import math
import re
import sys
from collections.abc import Callable
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np
import pandas
import pyarrow.parquet
import pytest

import rigbench
from rigbench.arm.mismatch import uniform
from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.columns import NUMBER, WHOLE
from rigbench.campaign.executor import InProcess
from rigbench.campaign.export import check_parquet, export_columns, export_csv, export_parquet
from rigbench.campaign.plan import Plan
from rigbench.campaign.store import Store
from rigbench.campaign.work import Host, Outcome
from rigbench.errors import InputFaults, StoreError
from rigbench.scores.names import SCORES

VALUES = [0.1 + 0.2, math.inf, 1 / 3, 5e-324, 1e22, 2.5]


@pytest.fixture
def plan(make_plan: Callable[..., Plan]) -> Plan:
    return make_plan(draws=1)


HOST = Host("a CPU, slow", (("python", "3.11"), ("numpy", "2.3")))


@pytest.fixture
def stored(tmp_path: Path, doing: ModuleType, plan: Plan) -> Path:
    """A store of six runs: five with scores, one that diverged with a reason that needs quoting."""
    values = {entry.key: value for entry, value in zip(plan.entries, VALUES, strict=True)}

    def work(run: object) -> Outcome:
        key = run.key()  # type: ignore[attr-defined]
        if key == plan.entries[-1].key:
            return Outcome(key, "diverged", 'at 0.3 s, "j1"\nran away', residual=3e-8, wall_s=0.25, host=HOST)
        scores = {
            "settle_ms": values[key],
            "joint_peak_deg.j1": 0.5,
            "joint_peak_deg": 0.5,
            "tool_peak_mm": 1.0,
        }
        of_host = {"host_scores": {"law_us": 2.0}, "wall_s": 0.5, "host": HOST}
        return Outcome(key, "finished", scores=scores, residual=1e-9, **of_host)

    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        run_campaign(plan, store, executor=InProcess(work))
    return tmp_path / "s.sqlite"


@pytest.fixture
def text(stored: Path) -> str:
    """The export of that store as CSV."""
    stream = io.StringIO()
    with Store.open_for_reading(stored) as store:
        assert export_csv(store, stream) == 6
    return stream.getvalue()


@pytest.fixture
def parquet(stored: Path) -> pyarrow.Table:
    """The export of that store as Parquet, read by the library's own reader."""
    stream = io.BytesIO()
    with Store.open_for_reading(stored) as store:
        assert export_parquet(store, stream) == 6
    stream.seek(0)
    return pyarrow.parquet.read_table(stream)


@pytest.fixture
def empty(tmp_path: Path, plan: Plan) -> Path:
    """A store whose plan is recorded, but of which no run is done."""
    with Store.open_for_writing(tmp_path / "empty.sqlite", plan) as store:
        store.record_plan(plan)
    return tmp_path / "empty.sqlite"


# --- as CSV


def test_numbers_read_back_exactly(text: str, plan: Plan) -> None:
    """To the bit by the standard library, and by pandas as it rounds; in plan order, infinite is inf."""
    rows = list(csv.DictReader(io.StringIO(text)))
    assert [row["key"] for row in rows] == [entry.key for entry in plan.entries]
    assert [float(row["settle_ms"]) for row in rows[:5]] == VALUES[:5]
    frame = pandas.read_csv(io.StringIO(text))
    assert frame["settle_ms"].tolist()[:5] == pytest.approx(VALUES[:5], rel=1e-14)
    assert frame["outcome"].tolist() == ["finished"] * 5 + ["diverged"]


def test_what_there_is_not_is_empty(text: str) -> None:
    """A run that did not finish has no scores, one without randomness no draw; a reason may hold anything."""
    rows = list(csv.DictReader(io.StringIO(text)))
    assert rows[-1]["reason"] == 'at 0.3 s, "j1"\nran away'
    assert rows[-1]["settle_ms"] == rows[-1]["law_us"] == ""
    assert rows[-1]["residual_rad_s"] == "3e-08"
    assert rows[0]["draw"] == ""
    assert rows[0]["level"] == "0.0"
    assert rows[2]["draw"] == "0"


def test_the_values_of_a_draw_stand_where_they_acted(text: str) -> None:
    """Under one source alone its own parameters have a value, with all together each; nominal has none."""
    filled = {
        row["condition"]: {name for name, value in row.items() if name.startswith("draw.") and value}
        for row in csv.DictReader(io.StringIO(text))
    }
    coulomb = {"draw.coulomb_percent.j1", "draw.coulomb_percent.j2"}
    assert filled["nominal"] == set()
    assert filled["coulomb_percent alone"] == coulomb
    assert filled["all at 1"] == coulomb | {"draw.viscous_percent.j1", "draw.viscous_percent.j2"}
    row = list(csv.DictReader(io.StringIO(text)))[2]
    assert float(row["draw.coulomb_percent.j1"]) == uniform(7, "coulomb_percent.j1", 0)


def test_the_columns_stand_in_order(text: str) -> None:
    """Names first, then scores as they are listed everywhere, a score before its joints, the host last."""
    header = text.splitlines()[0].split(",")
    assert header[:9] == ["sheet", "law", "motion", "condition", "level", "draw", "outcome", "reason", "key"]
    scores = header[9 : header.index("residual_rad_s")]
    assert set(scores) == {"settle_ms", "joint_peak_deg", "joint_peak_deg.j1", "tool_peak_mm", "law_us"}
    places = [list(SCORES).index(name.split(".")[0]) for name in scores]
    assert places == sorted(places)
    assert scores.index("joint_peak_deg.j1") == scores.index("joint_peak_deg") + 1
    assert header[-4:] == ["wall_s", "cpu", "version.python", "version.numpy"]


def test_the_host_of_each_run_is_told(text: str) -> None:
    """Type of CPU, and the version of each package."""
    for row in csv.DictReader(io.StringIO(text)):
        assert (row["cpu"], row["version.python"], row["version.numpy"]) == ("a CPU, slow", "3.11", "2.3")


def test_every_column_has_its_unit_and_its_meaning(stored: Path, text: str) -> None:
    """The list of columns is that of the table, and a unit that a name carries is the one it says."""
    stream = io.StringIO()
    with Store.open_for_reading(stored) as store:
        export_columns(store, stream)
    columns = {row["name"]: row for row in csv.DictReader(io.StringIO(stream.getvalue()))}
    assert list(columns) == text.splitlines()[0].split(",")
    assert all(row["meaning"] for row in columns.values())
    units = {
        "settle_ms": "ms",
        "joint_peak_deg.j1": "deg",
        "tool_peak_mm": "mm",
        "law_us": "us",
        "wall_s": "s",
    }
    assert {name: columns[name]["unit"] for name in units} == units
    assert columns["residual_rad_s"]["unit"] == "rad/s"
    assert "joint j1" in columns["joint_peak_deg.j1"]["meaning"]


def test_what_the_writing_of_a_table_raises_is_not_blamed_on_the_store(stored: Path) -> None:
    """A disk that is full where the table goes is an OSError of that file, not an error of the store."""

    class Full(io.StringIO):
        def write(self, text: str) -> int:
            raise OSError(28, "No space left on device")

    class FullOfBytes(io.BytesIO):
        def write(self, data: object) -> int:
            raise OSError(28, "No space left on device")

    with Store.open_for_reading(stored) as store:
        with pytest.raises(OSError, match="No space left"):
            export_csv(store, Full())
        with pytest.raises(OSError, match="No space left"):
            export_parquet(store, FullOfBytes())
        assert store.counts().done == 6


# --- as Parquet


def test_parquet_holds_what_csv_does(text: str, parquet: pyarrow.Table) -> None:
    """The same columns and rows, bit for bit: what is empty is null, infinite is infinite."""
    rows = list(csv.DictReader(io.StringIO(text)))
    assert parquet.column_names == list(rows[0])
    for row, other in zip(rows, parquet.to_pylist(), strict=True):
        for name, value in other.items():
            if isinstance(value, str):
                assert value == row[name]
            else:
                assert value == (None if row[name] == "" else float(row[name]))
    assert parquet.column("settle_ms").to_pylist()[1] == math.inf


def test_parquet_has_types_units_and_meanings(stored: Path, parquet: pyarrow.Table) -> None:
    """Each field has the type of its column's kind, and the metadata that the list of columns has."""
    types = {NUMBER: pyarrow.float64(), WHOLE: pyarrow.int64()}
    with rigbench.open_store(stored) as opened:
        columns = opened.columns()
    for field, column in zip(parquet.schema, columns, strict=True):
        assert field.type == types.get(column.kind, pyarrow.string())
        assert field.metadata == {b"unit": column.unit.encode(), b"meaning": column.meaning.encode()}


def test_no_more_rows_than_a_group_are_in_memory(
    stored: Path, parquet: pyarrow.Table, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Groups of four rows: six rows are written as two groups, and the table is the same."""
    monkeypatch.setattr("rigbench.campaign.export.GROUP", 4)
    stream = io.BytesIO()
    with Store.open_for_reading(stored) as store:
        export_parquet(store, stream)
    file = pyarrow.parquet.ParquetFile(stream)
    assert [file.metadata.row_group(i).num_rows for i in range(file.num_row_groups)] == [4, 2]
    assert file.read().equals(parquet)


def test_without_the_library_there_is_one_plain_fault(monkeypatch: pytest.MonkeyPatch) -> None:
    """It names the file and the extra to install; with the library there is none."""
    check_parquet("runs.parquet")
    monkeypatch.setitem(sys.modules, "pyarrow.parquet", None)
    with pytest.raises(InputFaults, match=r"runs\.parquet: -o: .*pyarrow.*'rigbench\[parquet\]'") as caught:
        check_parquet("runs.parquet")
    assert caught.value.exit_code == 2


# --- from Python


def test_columns_in_python_are_those_of_the_table(stored: Path, text: str) -> None:
    """All of them, in order, with the same numbers: NaN for what is empty, -1 for no draw."""
    rows = list(csv.DictReader(io.StringIO(text)))
    with rigbench.open_store(stored) as opened:
        runs = opened.runs()
        kinds = {column.name: column.kind for column in opened.columns()}
    assert list(runs) == list(kinds) == list(rows[0])
    for name, values in runs.items():
        cells = [row[name] for row in rows]
        if kinds[name] == NUMBER:
            expected = [float(cell) if cell else math.nan for cell in cells]
            assert np.array_equal(values, expected, equal_nan=True)
        elif kinds[name] == WHOLE:
            assert values.tolist() == [int(cell) if cell else -1 for cell in cells]
        else:
            assert values.tolist() == cells


def test_some_columns_alone(stored: Path) -> None:
    """In the order asked for, each once; names that are no column's are faults, all at once, with the nearest."""
    with rigbench.open_store(stored) as opened:
        runs = opened.runs("settle_ms", "law", "settle_ms")
        assert list(runs) == ["settle_ms", "law"]
        assert np.array_equal(runs["settle_ms"], opened.runs()["settle_ms"], equal_nan=True)
        with pytest.raises(InputFaults) as caught:
            opened.runs("settle_m", "law", "nothing alike")
    assert [(fault.near, "column" in fault.problem) for fault in caught.value.faults] == [
        ("settle_ms", True),
        (None, True),
    ]


def test_a_frame_is_what_pandas_reads_from_the_csv(stored: Path, text: str) -> None:
    """Numbers to pandas' rounding; the draw is a whole number, missing where nothing is random."""
    with rigbench.open_store(stored) as opened:
        frame = opened.frame()
    read = pandas.read_csv(io.StringIO(text), keep_default_na=False, na_values={name: [""] for name in frame})
    assert list(frame) == list(read)
    assert frame["draw"].isna().tolist() == read["draw"].isna().tolist()
    assert frame["draw"].dropna().tolist() == read["draw"].dropna().tolist()
    for name in frame.select_dtypes(float):
        assert frame[name].tolist() == pytest.approx(read[name].tolist(), rel=1e-14, nan_ok=True)


def test_a_frame_needs_pandas(stored: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where it is not installed, one fault says so; the columns are there all the same."""
    monkeypatch.setitem(sys.modules, "pandas", None)
    with rigbench.open_store(stored) as opened:
        with pytest.raises(InputFaults, match="pandas, which is not installed"):
            opened.frame()
        assert len(opened.runs("law")["law"]) == 6


def test_results_in_python_are_the_stores_own(stored: Path) -> None:
    """The cells are those of the matrix, with every score."""
    with rigbench.open_store(stored) as opened, Store.open_for_reading(stored) as store:
        results = opened.results()
        assert results == store.results()
    assert results.cell("", "pd", "nominal").measures["tool_peak_mm"].median == 1.0


def test_the_readmes_example_works(stored: Path) -> None:
    """It runs as it stands there, on a store and names of this test's."""
    text = (Path(__file__).resolve().parents[2] / "README.md").read_text("utf-8")
    (code,) = re.findall(r"```python\n(import rigbench\n\nwith rigbench\.open_store.*?)```", text, re.DOTALL)
    code = code.replace("results/first-look.sqlite", str(stored)).replace("computed torque", "pd")
    found: dict[str, Any] = {}
    exec(code, found)
    assert list(found["peaks"]) == ["law", "condition", "tool_peak_mm"]
    assert (found["cell"].law, found["cell"].condition, found["cell"].draws) == ("pd", "all at 1", 1)


def test_a_store_of_which_nothing_is_done_is_an_empty_table(empty: Path) -> None:
    """Columns without a row, in each form; no score is known yet."""
    csv_text, parquet = io.StringIO(), io.BytesIO()
    with Store.open_for_reading(empty) as store:
        assert export_csv(store, csv_text) == export_parquet(store, parquet) == 0
    with rigbench.open_store(empty) as opened:
        runs, frame = opened.runs(), opened.frame()
        assert opened.results().done == 0
    names = csv_text.getvalue().strip().split(",")
    assert names == list(runs) == list(frame) == pyarrow.parquet.read_table(parquet).column_names
    assert {len(values) for values in runs.values()} == {0}
    assert (runs["level"].dtype, runs["draw"].dtype) == (np.float64, np.int64)


def test_there_must_be_a_store(tmp_path: Path) -> None:
    """As for the commands: a StoreError, and nothing is made."""
    with pytest.raises(StoreError, match="no such store"):
        rigbench.open_store(tmp_path / "none.sqlite")
    assert list(tmp_path.iterdir()) == []
