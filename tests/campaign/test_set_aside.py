"""A store that is set aside: whole, under a name that was free, and nothing else is touched."""

from __future__ import annotations

from collections.abc import Callable
from datetime import date
from pathlib import Path
from types import ModuleType

import pytest

from rigbench.campaign import connection
from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.executor import InProcess
from rigbench.campaign.plan import Plan
from rigbench.campaign.store import Store
from rigbench.errors import StoreBusy, StoreError

PlanMaker = Callable[..., Plan]


def fill(path: Path, plan: Plan, doing: ModuleType) -> None:
    with Store.open_for_writing(path, plan) as store:
        run_campaign(plan, store, executor=InProcess(doing.work))


def test_every_time_under_a_name_of_its_own(tmp_path: Path, doing: ModuleType, make_plan: PlanMaker) -> None:
    """Thrice on one day: three files with all their rows, and the lock is free again."""
    plan, path = make_plan(), tmp_path / "s.sqlite"
    kept = []
    for _ in range(3):
        fill(path, plan, doing)
        with Store.open_for_writing(path, plan) as store:
            assert store.held() == 14
            kept.append(store.set_aside())
        assert not path.exists()
    day = date.today().isoformat()
    assert {file.name.replace(day, "DAY") for file in kept} == {
        "s-DAY.sqlite",
        "s-DAY-2.sqlite",
        "s-DAY-3.sqlite",
    }
    assert sorted(tmp_path.iterdir()) == sorted(kept)
    for file in kept:
        with Store.open_for_reading(file) as reader:
            assert len(reader.rows()) == 14


def test_not_while_somebody_reads(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker, monkeypatch: pytest.MonkeyPatch
) -> None:
    """What is in the log of a store that is being read would stay behind: it is refused, and all is there."""
    monkeypatch.setattr(connection, "PATIENCE_S", 0.1)
    plan, path = make_plan(), tmp_path / "s.sqlite"
    fill(path, plan, doing)
    with Store.open_for_writing(path, plan) as store, Store.open_for_reading(path) as reader:
        with reader.one_moment():
            assert len(reader.rows()) == 14
            with pytest.raises(StoreError, match="held by another program"):
                store.set_aside()
        with pytest.raises(StoreError, match="held by another program"):  # open, though it reads nothing now
            store.set_aside()
        assert len(store.rows()) == 14
    with Store.open_for_reading(path) as reader:
        assert len(reader.rows()) == 14
    assert [file.name for file in tmp_path.iterdir()] == ["s.sqlite"]


def test_not_while_another_writes(tmp_path: Path, doing: ModuleType, make_plan: PlanMaker) -> None:
    """A second writer can't even open it, so it can't set it aside."""
    plan, path = make_plan(), tmp_path / "s.sqlite"
    with Store.open_for_writing(path, plan), pytest.raises(StoreBusy, match="is writing to it"):
        Store.open_for_writing(path, plan)
