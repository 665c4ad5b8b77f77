"""Stores with invented outcomes of real runs, one that was really run, and a browser to look at their pages."""

from __future__ import annotations

import datetime
import shutil
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch
from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.plan import Entry, Plan, fair_order
from rigbench.campaign.reading import Reader
from rigbench.campaign.store import Store
from rigbench.campaign.studies import tune, worst_case
from rigbench.campaign.study import Study
from rigbench.campaign.work import Host, Outcome
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.via import ViaMotion
from rigbench.report.page.page import gathered, write_page
from rigbench.rig import Rates, Run
from rigbench.scores.names import SCORES
from rigbench.scores.results import Column, Tolerance

ARM = Path(__file__).resolve().parents[3] / "robots_demo" / "planar2" / "arm.yaml"
LEVELS = (0.25, 0.5, 1, 1.5, 2, 3)
DATE = datetime.date(2026, 5, 4)
BROWSERS = ("chromium", "chromium-browser", "google-chrome")
HOST = Host("a type of CPU", (("python", "3.11.7"), ("numpy", "2.4.6")))


def columns_of(count: int) -> list[Column]:
    nominal = Column("nominal", 0.0, random=False, ladder=True)
    together = [Column(f"all at {level:g}", level, random=True, ladder=True) for level in LEVELS]
    alone = [Column(f"source number {k} alone", 1.0, random=True, ladder=False) for k in range(count)]
    return [nominal, *together, *alone][:count]


def plan_of(
    laws: Sequence[str],
    columns: int = 4,
    draws: int = 8,
    *,
    sheets: Sequence[str] = ("",),
    motions: Sequence[str] = ("load tray",),
    tolerance: bool = True,
    title: str = "Trays",
    text: str = "rigbench: 1\ntitle: Trays\n",
) -> Plan:
    """A plan of real runs of a two-link arm, each with another gain, motion or draw than the others."""
    arm, heads = ArmFiles.read(ARM), columns_of(columns)
    mismatch = Mismatch(link_mass_percent=20.0, coulomb_percent=10.0, viscous_percent=10.0)
    options = options_model(registered().laws["computed-torque"].cls)
    entries = []
    for s, sheet in enumerate(sheets):
        for i, law in enumerate(laws):
            choice = choose("computed-torque", options(natural_hz=3.0 + 0.1 * i + 5 * s))
            for j, column in enumerate(heads):
                for m, motion in enumerate(motions):
                    reach = ViaMotion(((0.0, 0.0), (0.3 + 0.01 * j, 0.1 * m - 0.2)), leg_s=0.4, rest_s=0.2)
                    run = Run(
                        arm, choice, reach, Rates(500.0, 500.0), (0.0, 0.0), 0.5, seed=3, mismatch=mismatch
                    )
                    for draw in range(draws) if column.random else (None,):
                        own = (
                            run
                            if draw is None
                            else replace(run, level=column.level, sources=mismatch.sources, draw=draw)
                        )
                        entries.append(Entry(sheet, law, motion, column.name, column.level, draw, own))
    limits = Tolerance({"tool_peak_mm": 1.0, "settle_ms": 250.0}, 0.95) if tolerance else None
    return Plan(
        title, "planar2", text, "trays.yaml", tuple(sheets), tuple(laws), tuple(motions), tuple(heads), draws,
        limits, fair_order(entries), "rigbench run trays.yaml",
    )  # fmt: skip


def outcome_of(entry: Entry, law: int, rng: np.random.Generator, end: str) -> Outcome:
    """An invented outcome: errors grow with law and level; ``end`` 'finished' or what came instead."""
    error = 0.3 * (1 + (entry.level or 0.0)) * (1 + 0.3 * law) * float(rng.lognormal(0.0, 0.4))
    scores = {
        name: error * (1 + k) if name != "settle_ms" else 90.0 * error
        for k, (name, info) in enumerate(SCORES.items())
        if not info.host
    }
    if end == "finished":
        return Outcome(entry.key, end, scores=scores, residual=0.0, wall_s=0.25, host=HOST)
    reason = "the tray <b>fell</b>"
    trace = "Traceback: <script>alert(3)</script>" if end == "law-error" else ""
    return Outcome(entry.key, end, reason=reason, trace=trace, wall_s=0.25, host=HOST)


def searches_of(plan: Plan) -> tuple[Study, Study]:
    """A search for gains and one for worst cases, of all laws and sheets of a plan."""
    runs: dict[tuple[str, str], dict[str, Run]] = {}
    for entry in plan.entries:
        if entry.condition == "nominal":
            runs.setdefault((entry.sheet, entry.law), {})[entry.motion] = entry.run
    gains = (tune.Gain("damping", 0.5, 2.0),)
    best = [tune.Subject(*of, own, (1.0,), {"law": "computed-torque"}) for of, own in runs.items()]
    worst = []
    for of, own in runs.items():
        acting = {name: replace(run, sources=run.mismatch.sources) for name, run in own.items()}
        names = tuple(replace(next(iter(acting.values())), level=1.0, draw=0).factors())
        worst.append(worst_case.Subject(*of, acting, names))
    aim = tune.Aim("tool_rms_mm", {"chatter": 0.5})
    limits = plan.tolerance or Tolerance({})
    motions = len(plan.motions)
    return (
        tune.Tune(tuple(best), gains, aim, tune.least_runs(aim, motions), 3),
        worst_case.WorstCase(tuple(worst), (0.5, 2.0), worst_case.least_runs(2, motions), limits, 3),
    )


def searched_outcome(entry: Entry, law: int) -> Outcome:
    """The better the nearer the damping is to 0.7, and worse the further a machine departs; law 1 chatters at all gains."""
    damping = dict(entry.run.law.options)["damping"]
    off = abs(sum(u / (k + 1) for k, (_, u) in enumerate(entry.run.directions or ())))
    scores = {"tool_rms_mm": 0.5 + abs(damping - 0.7), "chatter": float(law == 1)}
    scores["tool_peak_mm"] = 0.1 + (entry.level or 0.0) * off / (1 + law)
    return Outcome(entry.key, "finished", scores=scores, residual=0.0, wall_s=0.01, host=HOST)


def search(store: Store, plan: Plan, rounds: int) -> None:
    """Go on with both searches for so many rounds; they are recorded as a campaign does it."""
    for study in searches_of(plan):
        for _ in range(rounds):
            asked = [entry for batch in study.rounds(store.row_of) for entry in batch]
            todo = {entry.key: entry for entry in asked if store.row_of(entry) is None}
            store.record_study(study, asked, finished=not todo)
            store.add([searched_outcome(entry, plan.laws.index(entry.law)) for entry in todo.values()], [])


def build(
    path: Path, laws: int | Sequence[str] = 3, columns: int = 4, draws: int = 8, *,
    done: float = 1.0, ends: Callable[[Entry], str] = lambda entry: "finished", rounds: int = 0, **given: Any,
) -> Path:  # fmt: skip
    """Fill a store with invented outcomes of a share ``done`` of the planned runs, then ``rounds`` of searches."""
    names = [f"law {k}" for k in range(laws)] if isinstance(laws, int) else list(laws)
    plan, rng = plan_of(names, columns, draws, **given), np.random.default_rng(1)
    outcomes = [
        outcome_of(entry, names.index(entry.law), rng, ends(entry))
        for entry in plan.entries
        if rng.random() < done
    ]
    values = [(3, draw, {"coulomb_percent.j1": 0.5}) for draw in range(draws)]
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        store.add(outcomes, values)
        search(store, plan, rounds)
    return path


@pytest.fixture
def make_plan() -> Callable[..., Plan]:
    """Build the plan that a store of these names has."""
    return plan_of


@pytest.fixture
def make_store(tmp_path: Path) -> Callable[..., Path]:
    """Fill a store with invented outcomes."""

    def make(*given: Any, name: str = "trays.sqlite", **more: Any) -> Path:
        return build(tmp_path / name, *given, **more)

    return make


@pytest.fixture(scope="session")
def run_store(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A store whose 2 x (1 + 5 + 5) runs were really done."""
    plan = plan_of(["soft", "stiff"], columns=3, draws=5)
    path = tmp_path_factory.mktemp("run") / "run.sqlite"
    with Store.open_for_writing(path, plan) as store:
        run_campaign(plan, store, jobs=0)
    return path


def page_of(store: Path, traces: int | None = 0) -> Path:
    page = store.with_suffix(".html")
    with Reader.open_for_reading(store) as reader:
        write_page(gathered(reader, store.name, DATE, traces), page)
    return page


@pytest.fixture
def make_page() -> Callable[..., Path]:
    """Write the page of a store beside it; no run is replayed unless asked for."""
    return page_of


@dataclass
class Seen:
    """A page in a browser, and what it did: words on the console, errors, and what it asked for."""

    page: Any
    said: list[str] = field(default_factory=list)
    requests: list[str] = field(default_factory=list)


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    """A real browser without a window; tests that need it are skipped where there is none.

    It ends with the module, since its driver keeps an event loop in this thread that others might mind.
    """
    sync_api = pytest.importorskip("playwright.sync_api")
    found = next(filter(None, map(shutil.which, BROWSERS)), None)
    if found is None:
        pytest.skip(f"no browser: none of {', '.join(BROWSERS)} is on the PATH")
    with sync_api.sync_playwright() as driver:
        started = driver.chromium.launch(
            executable_path=found, args=["--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage"]
        )
        yield started
        started.close()


@pytest.fixture
def opened(browser: Any) -> Iterator[Callable[..., Seen]]:
    """Open a file in the browser, in a context of its own; nothing waits longer than 20 s."""
    contexts = []

    def open_page(path: Path, width: int = 1280, height: int = 900, scheme: str = "light") -> Seen:
        context = browser.new_context(
            viewport={"width": width, "height": height}, color_scheme=scheme, reduced_motion="reduce"
        )
        contexts.append(context)
        context.set_default_timeout(20_000)
        seen = Seen(context.new_page())
        seen.page.on("console", lambda message: seen.said.append(message.text))
        seen.page.on("pageerror", lambda error: seen.said.append(str(error)))
        seen.page.on("dialog", lambda dialog: (seen.said.append(dialog.message), dialog.dismiss()))
        seen.page.on("request", lambda request: seen.requests.append(request.url))
        seen.page.goto(path.as_uri())
        return seen

    yield open_page
    for context in contexts:
        context.close()
