"""Plans of stand-in runs, and a store of real ones."""

from __future__ import annotations

import importlib
import os
import shutil
import tempfile
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch, Payload
from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.plan import Entry, Plan, fair_order
from rigbench.campaign.store import Store
from rigbench.laws.options import options_model
from rigbench.laws.registry import LawChoice, choose, load_file_law, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run
from rigbench.scores.results import Column, Tolerance

ARMS = Path(__file__).resolve().parents[2] / "robots_demo"

MY_LAW = """\
import numpy as np
from rigbench.laws import Law, option
from gains_of_mine import FACTOR


class Mine(Law):
    stop_s: float = option(9.0)

    def start(self, setup):
        self.limit = setup.torque_limit

    def torque(self, t, q, v, ref, held):
        if t >= self.stop_s:
            raise ValueError("enough")
        return FACTOR * (ref.q - q) - 5.0 * v


class Push(Mine):
    def torque(self, t, q, v, ref, held):
        return self.limit
"""

MY_SCENE = """\
def table(client, body, arm):
    pass
"""

SHORT = Plan("Short", "planar2", "", "short.yaml", ("",), (), ("short",), (), 2, None, (), "")


@pytest.fixture
def doing(monkeypatch: pytest.MonkeyPatch) -> ModuleType:
    """The module doing.py, under a name that worker processes can import too: they inherit sys.path."""
    monkeypatch.syspath_prepend(Path(__file__).parent)
    return importlib.import_module("doing")


@pytest.fixture
def surroundings() -> Iterator[dict[str, str]]:
    """The environment of a program that will be killed: what it can't tidy up goes with this fixture."""
    with tempfile.TemporaryDirectory(prefix="t") as folder:  # short: it takes a socket, whose path is limited
        yield os.environ | {"TMPDIR": folder}


@pytest.fixture
def make_entries(doing: ModuleType) -> Callable[..., list[Entry]]:
    """Build one entry a name, each of which does the act given for it."""

    def build(**acts: Any) -> list[Entry]:
        return [
            Entry("", "pd", "lift", "nominal", 0.0, None, doing.FakeRun(name, **({"act": act} | more)))
            for name, (act, more) in acts.items()
        ]

    return build


@pytest.fixture
def make_plan(doing: ModuleType) -> Callable[..., Plan]:
    """Build a plan of two laws under three conditions: nominal, one source alone, and both together."""

    def build(draws: int = 3, title: str = "Trays", seconds: float = 0.0, **given: Any) -> Plan:
        conditions = [
            ("nominal", 0.0, None, ()),
            *(("coulomb_percent alone", 1.0, d, ("coulomb_percent",)) for d in range(draws)),
            *(("all at 1", 1.0, d, ("coulomb_percent", "viscous_percent")) for d in range(draws)),
        ]
        entries = [
            Entry(
                "", law, "lift", condition, level, draw,
                doing.FakeRun(f"{law} {condition} {draw}", seconds=seconds, draw=draw, sources=sources),
            )
            for law in ("pd", "feedforward")
            for condition, level, draw, sources in conditions
        ]  # fmt: skip
        values: dict[str, Any] = {
            "title": title,
            "arm": "two link",
            "experiment_text": "rigbench: 1\n",
            "experiment_path": "trays.yaml",
            "sheets": ("",),
            "laws": ("pd", "feedforward"),
            "motions": ("lift",),
            "columns": (
                Column("nominal", None, False, True),
                Column("coulomb_percent alone", 1.0, True, False),
                Column("all at 1", 1.0, True, True),
            ),
            "draws": draws,
            "tolerance": Tolerance({"tool_peak_mm": 3.0, "settle_ms": 250.0}, 0.9),
            "entries": fair_order(entries),
            "resume": "rigbench run trays.yaml",
        }
        return Plan(**(values | given))

    return build


def _registered_law(name: str, **options: Any) -> LawChoice:
    return choose(name, options_model(registered().laws[name].cls)(**options))


def _my_law(folder: Path, name: str = "Mine", **options: Any) -> LawChoice:
    cls, files = load_file_law(folder / "mine.py", name)
    return choose(f"mine.py:{name}", options_model(cls)(**options), files)


def _run_of(folder: Path, law: LawChoice, **given: Any) -> Run:
    """Planar2 from the copy in ``folder``, a short motion at a low rate."""
    values: dict[str, Any] = {
        "arm": ArmFiles.read(folder / "planar2" / "arm.yaml"),
        "law": law,
        "motion": ViaMotion(((0.0, 0.0), (0.3, -0.2)), leg_s=0.7, rest_s=0.3),
        "rates": Rates(500.0, 1000.0),
        "gain_pose": (0.0, 0.0),
        "settle_band_mm": 0.5,
        "seed": 3,
        "mismatch": Mismatch(link_mass_percent=20.0, payload=Payload(0.5, 0.0, 1.0, 10.0)),
    }
    return Run(**(values | given))


def _drawn(run: Run, draw: int | None) -> Run:
    return run if draw is None else replace(run, level=1.0, sources=run.mismatch.sources, draw=draw)


def _files_in(where: Path) -> Path:
    """The demo arms, a law and a scene of the user's, in a folder of their own."""
    shutil.copytree(ARMS, where)
    (where / "mine.py").write_text(MY_LAW)
    (where / "bakery.py").write_text(MY_SCENE)
    (where / "gains_of_mine.py").write_text("FACTOR = 150.0\n")
    return where


@pytest.fixture
def registered_law() -> Callable[..., LawChoice]:
    """Choose a registered law, with options."""
    return _registered_law


@pytest.fixture
def my_law() -> Callable[..., LawChoice]:
    """Choose a law of the user's in a folder, with options."""
    return _my_law


@pytest.fixture
def run_of() -> Callable[..., Run]:
    """Build a run of an arm in a folder, with a law."""
    return _run_of


@pytest.fixture
def drawn() -> Callable[[Run, int | None], Run]:
    """Make a run one of a draw at full spread."""
    return _drawn


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """The demo arms, a law and a scene of the user's, for the test to alter."""
    return _files_in(tmp_path / "files")


@pytest.fixture(scope="session")
def filled(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A store of six laws, nominal and two draws, all done; the files are removed after that."""
    where = tmp_path_factory.mktemp("filled")
    folder = _files_in(where / "files")
    laws = {
        "pd": _registered_law("independent-joint", kp=(80.0, 30.0), kd=(9.0, 2.0)),
        "computed": _registered_law("computed-torque", natural_hz=3.0),
        "mine": _my_law(folder),
        "push": _my_law(folder, "Push"),
        "fragile": _my_law(folder, stop_s=0.1),
        "wild": _my_law(folder, "Push"),
    }
    wild = ArmFiles.read(folder / "planar2" / "arm.yaml").with_drives([("all", "torque_limit", 1e9)])
    entries = [
        Entry("", law, "short", "nominal" if draw is None else "all at 1", float(draw is not None), draw, run)
        for law, choice in laws.items()
        for draw in (None, 0, 1)
        for run in [_drawn(_run_of(folder, choice, **({"arm": wild} if law == "wild" else {})), draw)]
    ]
    plan = Plan(
        "Short", "planar2", "", "short.yaml", ("",), tuple(laws), ("short",),
        (Column("nominal", 0.0, False, True), Column("all at 1", 1.0, True, True)),
        2, Tolerance({"tool_peak_mm": 50.0}), tuple(entries), "rigbench run short.yaml",
    )  # fmt: skip
    with Store.open_for_writing(where / "short.sqlite", plan) as opened:
        run_campaign(plan, opened, jobs=0)
    shutil.rmtree(folder)
    return where / "short.sqlite"


@pytest.fixture
def store(tmp_path: Path, filled: Path) -> Iterator[Store]:
    """A copy of that store, for the test to alter."""
    shutil.copy(filled, tmp_path / "short.sqlite")
    with Store.open_for_writing(tmp_path / "short.sqlite", SHORT) as opened:
        yield opened
