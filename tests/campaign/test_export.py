"""The export: a table that any program reads back as exactly what is stored."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Callable
from pathlib import Path
from types import ModuleType

import pandas
import pytest

from rigbench.arm.mismatch import uniform
from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.executor import InProcess
from rigbench.campaign.export import export_csv
from rigbench.campaign.plan import Plan
from rigbench.campaign.store import Store
from rigbench.campaign.work import Outcome
from rigbench.scores.names import SCORES

VALUES = [0.1 + 0.2, math.inf, 1 / 3, 5e-324, 1e22, 2.5]


@pytest.fixture
def plan(make_plan: Callable[..., Plan]) -> Plan:
    return make_plan(draws=1)


@pytest.fixture
def text(tmp_path: Path, doing: ModuleType, plan: Plan) -> str:
    """The export of six runs: five with scores, one that diverged with a reason that needs quoting."""
    values = {entry.key: value for entry, value in zip(plan.entries, VALUES, strict=True)}

    def work(run: object) -> Outcome:
        key = run.key()  # type: ignore[attr-defined]
        if key == plan.entries[-1].key:
            return Outcome(key, "diverged", 'at 0.3 s, "j1"\nran away', residual=3e-8, wall_s=0.25)
        scores = {
            "settle_ms": values[key],
            "joint_peak_deg.j1": 0.5,
            "joint_peak_deg": 0.5,
            "tool_peak_mm": 1.0,
        }
        return Outcome(key, "finished", scores=scores, host_scores={"law_us": 2.0}, residual=1e-9, wall_s=0.5)

    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        run_campaign(plan, store, executor=InProcess(work))
        stream = io.StringIO()
        assert export_csv(store, stream) == 6
    return stream.getvalue()


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
    """Names first, then scores as they are listed everywhere, a score before its joints, the host's time last."""
    header = text.splitlines()[0].split(",")
    assert header[:9] == ["sheet", "law", "motion", "condition", "level", "draw", "outcome", "reason", "key"]
    scores = header[9 : header.index("residual_rad_s")]
    assert set(scores) == {"settle_ms", "joint_peak_deg", "joint_peak_deg.j1", "tool_peak_mm", "law_us"}
    places = [list(SCORES).index(name.split(".")[0]) for name in scores]
    assert places == sorted(places)
    assert scores.index("joint_peak_deg.j1") == scores.index("joint_peak_deg") + 1
    assert header[-1] == "wall_s"
