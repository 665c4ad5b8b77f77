"""Needs: what its runs are, and that what comes of them is what a known function has, without an engine."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from math import inf, prod
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

from rigbench.arm.draws import draw_values
from rigbench.arm.mismatch import Mismatch
from rigbench.campaign.plan import Entry
from rigbench.campaign.studies.needs import NeedsStudy
from rigbench.scores.limit_search import LADDER, search_draws
from rigbench.scores.needs import LawNeeds, needs_of
from rigbench.scores.needs_design import Group, NeedsDesign, Subject
from rigbench.scores.results import Tolerance
from rigbench.scores.row import Row

ARM = SimpleNamespace(joints=("j1", "j2"), links=("upper", "lower"))
MISMATCH = Mismatch(coulomb_percent=30.0, viscous_percent=20.0, delay_ms=1.0)

WEIGHTS = {
    "coulomb_percent.j1": 0.0, "coulomb_percent.j2": 1.0, "viscous_percent.j1": 4.5,
    "viscous_percent.j2": 9.0, "delay_ms": 99.0,
}  # fmt: skip
"""The constants a of the g-function (Saltelli, Sobol' 1995): the smaller, the more the parameter matters."""

SLOPES = {"coulomb_percent": 2.0, "viscous_percent": 0.6, "delay_ms": 0.01}
"""Peak error at level 1 for each unit of a source's largest u [mm]."""

GROUPS = tuple(
    Group(name, source, "", parameters, {"grows": "factor", "unit": "%", "values": {"all": 30.0}})
    for name, source, parameters in (
        ("coulomb", "coulomb_percent", ("coulomb_percent.j1", "coulomb_percent.j2")),
        ("viscous", "viscous_percent", ("viscous_percent.j1", "viscous_percent.j2")),
        ("delay", "delay_ms", ("delay_ms",)),
    )
)
TOLERANCE = Tolerance({"tool_peak_mm": 1.0}, 0.95)


@dataclass(frozen=True)
class StubRun:
    """What the study knows of a run."""

    level: float = 0.0
    sources: tuple[str, ...] = ()
    draw: int | None = None
    directions: tuple[tuple[str, float], ...] | None = None
    seed: int = 5
    mismatch: Mismatch = MISMATCH

    @property
    def arm(self) -> Any:
        return SimpleNamespace(arm=lambda: ARM)

    def factors(self) -> Mapping[str, float]:
        drawn = draw_values(ARM, self.mismatch, self.sources, self.seed, self.draw or 0)
        return drawn if self.directions is None else dict(self.directions)

    def key(self) -> str:
        acts = self.level, sorted(self.factors().items())
        return hashlib.blake2b(repr(acts).encode(), digest_size=20).hexdigest()


def g_function(u: Mapping[str, float]) -> float:
    """Product of (abs(4 x - 2) + a) / (1 + a), x = (1 + u) / 2."""
    return prod((abs(2 * u[name]) + WEIGHTS[name]) / (1 + WEIGHTS[name]) for name in u)


def closed_form() -> dict[str, tuple[float, float]]:
    """First-order and total index of each group: V = prod(1 + V_i) - 1, V_i = 1 / (3 (1 + a_i)^2), and likewise by group."""
    own = {g.name: prod(1 + 1 / (3 * (1 + WEIGHTS[p]) ** 2) for p in g.parameters) for g in GROUPS}
    whole = prod(own.values())
    return {
        name: ((part - 1) / (whole - 1), (part - 1) * whole / part / (whole - 1))
        for name, part in own.items()
    }


def scored(entry: Entry) -> Row:
    """The row of an entry: the g-function as tool_rms_mm, and a peak that grows with the level."""
    u = entry.run.factors()
    peak = max(entry.run.level * SLOPES[name.split(".")[0]] * abs(value) for name, value in u.items())
    scores = {"tool_rms_mm": g_function(u), "tool_peak_mm": peak}
    place = entry.sheet, entry.law, entry.motion, entry.condition, entry.level, entry.draw
    return Row(*place, "finished", scores)


def make_study(
    points: int, motions: Sequence[str] = ("swing",), groups: tuple[Group, ...] = GROUPS, level: float = 1.0
) -> NeedsStudy:
    subject = Subject("", "law", tuple(motions), groups)
    design = NeedsDesign("tool_rms_mm", level, points, search_draws(0.95), 0.95, (subject,))
    return NeedsStudy(design, {("", "law", motion): StubRun() for motion in motions}, TOLERANCE, 5)


def done(study: NeedsStudy, score: Callable[[Entry], Row] = scored) -> list[Row]:
    """All rows of the study, round by round as a campaign does it."""
    rows: dict[tuple[str, str, float | None, int | None], Row] = {}

    def known(entry: Entry) -> Row | None:
        return rows.get((entry.motion, entry.condition, entry.level, entry.draw))

    for _ in range(100):
        last = study.rounds(known)[-1]
        todo = [entry for entry in last if known(entry) is None]
        if not todo:
            return list(rows.values())
        for entry in todo:
            rows[entry.motion, entry.condition, entry.level, entry.draw] = score(entry)
    raise AssertionError("it does not end")


def analysed(study: NeedsStudy, rows: Sequence[Row]) -> LawNeeds:
    """What they show, by the design as a store would give it back."""
    [needs] = needs_of(NeedsDesign.of(study.declared()), rows, TOLERANCE)
    return needs


def test_shares_and_levels_of_a_known_function() -> None:
    """Shares: the g-function's within their intervals (closed form, Saltelli, Sobol' 1995); tolerated levels: where
    max(abs(u)) of m uniform numbers times slope and level is 1 at the required quantile, slope L 0.95^(1/m) = 1."""
    study = make_study(512)
    needs = analysed(study, done(study))
    assert needs.finished
    assert (needs.points, needs.dropped, needs.missing, needs.scale) == (512, 0, 0, "score")
    assert [need.group.name for need in needs.sources] == ["coulomb", "viscous", "delay"]
    for need in needs.sources:
        for found, true in zip((need.first, need.total), closed_form()[need.group.name], strict=True):
            assert found[1] <= true <= found[2]
            assert found[2] - found[1] < 0.25
        slope, m = SLOPES[need.group.source], len(need.group.parameters)
        true = 1 / (slope * 0.95 ** (1 / m))
        tolerated = need.alone.found.tolerated
        assert tolerated.low <= true <= tolerated.high
        assert (tolerated.low, tolerated.high) != (0.0, inf)
    assert needs.sources[-1].alone.found.tolerated.low == LADDER[-1]
    assert needs.together.found.tolerated == needs.sources[0].alone.found.tolerated  # which decides


def test_levels_are_multiples_of_the_declared_spread() -> None:
    """Asked around another level, the searches find the same tolerated levels, from a fifth to five times it."""
    study = make_study(16, level=2.0)
    rows = done(study)
    levels = {row.level for row in rows if not row.condition.startswith("shares")}
    assert levels <= {2.0 * rung for rung in LADDER}
    assert {row.level for row in rows if row.condition.startswith("shares")} == {2.0}
    for need in analysed(study, rows).sources:
        slope, m = SLOPES[need.group.source], len(need.group.parameters)
        tolerated = need.alone.found.tolerated
        assert tolerated.low <= 1 / (slope * 0.95 ** (1 / m)) <= tolerated.high


def test_the_price_is_bounded() -> None:
    """It asks for no more than it says, in two motions as well."""
    for motions in (("swing",), ("swing", "lift")):
        study = make_study(16, motions)
        rows = done(study)
        assert len(rows) <= study.most_runs
        assert sum(row.condition.startswith("shares") for row in rows) == study.design.share_runs


def test_machines_are_those_of_the_draws_or_of_the_design() -> None:
    """Alone: the experiment's own draws; shares: every parameter in a direction, one group swapped."""
    study = make_study(16)
    runs: dict[str, list[Entry]] = {}

    def score(entry: Entry) -> Row:
        runs.setdefault(entry.condition, []).append(entry)
        return scored(entry)

    done(study, score)
    for entry in runs["coulomb alone"]:
        assert entry.run == StubRun(entry.level or 0.0, ("coulomb_percent",), entry.draw)
    a, b, mixed = (runs[name] for name in ("shares a", "shares b", "shares a, viscous from b"))
    for one, other, both in zip(a, b, mixed, strict=True):
        u, v, w = (entry.run.factors() for entry in (one, other, both))
        assert set(u) == set(WEIGHTS)
        assert all(w[name] == (v if name.startswith("viscous") else u)[name] for name in WEIGHTS)
    assert {entry.run.level for entry in a} == {1.0}


def test_a_part_alone_leaves_the_others_as_the_model_has_them() -> None:
    """Its own u is that of the draw, its source's other parameters are at 0; what is in no group is at 0 throughout."""
    group = Group("coulomb of j2", "coulomb_percent", "j2", ("coulomb_percent.j2",), GROUPS[0].spread)
    study = make_study(16, groups=(group,))
    seen = 0

    def score(entry: Entry) -> Row:
        nonlocal seen
        u = entry.run.factors()
        if entry.condition == "coulomb of j2 alone":
            drawn = draw_values(ARM, MISMATCH, ("coulomb_percent",), 5, entry.draw or 0)
            assert u == {"coulomb_percent.j1": 0.0, "coulomb_percent.j2": drawn["coulomb_percent.j2"]}
            seen += 1
        elif entry.condition.startswith("shares"):
            assert u["coulomb_percent.j1"] == 0.0
        row = scored(entry)
        return replace(row, scores=row.scores | {"tool_rms_mm": u["coulomb_percent.j2"]})

    needs = analysed(study, done(study, score))
    assert seen
    assert needs.sources[0].total[1] <= 1.0 <= needs.sources[0].total[2]


def test_the_worst_motion_counts_and_all_must_keep() -> None:
    """A motion that has not the score says nothing of it; one that misses makes the draw miss."""

    def score(entry: Entry) -> Row:
        row = scored(entry)
        if entry.motion == "lift":
            return replace(row, scores={"tool_peak_mm": 2 * row.scores["tool_peak_mm"]})
        return row

    one, two = make_study(64), make_study(64, ("swing", "lift"))
    alone, both = analysed(one, done(one)), analysed(two, done(two, score))
    for single, double in zip(alone.sources, both.sources, strict=True):
        assert single.total == double.total
    first = next(row for row in done(two, score) if (row.motion, row.condition) == ("lift", "shares a"))
    lacking = analysed(two, [row for row in done(two, score) if row != first])
    assert (lacking.points, lacking.missing) == (63, 1)  # of a row that lacks a motion nothing is known
    lower = [needs.sources[0].alone.found.tolerated.high for needs in (both, alone)]
    assert lower[0] == pytest.approx(lower[1] / 2, rel=0.05)  # the ladder's steps are rounded


def test_a_host_s_trouble_is_dropped_and_counted() -> None:
    """With its row of the design, or its draw of the search; of too few draws nothing is shown to keep."""

    def score(entry: Entry) -> Row:
        row = scored(entry)
        troubled = {"shares b": 3, "delay alone": 7}.get(entry.condition) == entry.draw
        return replace(row, outcome="crashed", scores={}) if troubled else row

    study = make_study(64)
    needs = analysed(study, done(study, score))
    assert (needs.points, needs.dropped, needs.unfinished, needs.missing) == (63, 1, 0, 0)
    delay = next(need for need in needs.sources if need.group.name == "delay")
    assert (delay.alone.dropped, delay.alone.found.draws) == (1, 72)
    assert delay.alone.found.tolerated.low == 0.0
    assert needs.finished


def test_a_run_that_did_not_finish_is_worst() -> None:
    """The shares are then of the rank, and such a draw misses."""

    def score(entry: Entry) -> Row:
        row = scored(entry)
        u = entry.run.factors()
        return replace(row, outcome="diverged", scores={}) if u.get("delay_ms", 0) > 0.5 else row

    study = make_study(64)
    needs = analysed(study, done(study, score))
    assert needs.scale == "rank"
    assert needs.unfinished > 0
    assert np.isfinite([need.total for need in needs.sources]).all()
    delay = next(need for need in needs.sources if need.group.name == "delay")
    assert delay.alone.found.tolerated.high == LADDER[0]


def test_what_is_stored_so_far_claims_no_more_than_it_shows() -> None:
    """Without runs nothing has a value; half of them say how many are missing, and that the searches go on."""
    study = make_study(64)
    nothing = analysed(study, [])
    assert not nothing.finished
    assert nothing.missing == study.design.share_runs
    assert all(np.isnan(need.total[0]) for need in nothing.sources)
    assert nothing.together.found.tolerated.low == 0.0
    assert nothing.together.found.tolerated.high == inf
    rows = done(study)
    half = analysed(study, rows[: study.design.share_runs // 2])
    assert half.missing == study.design.share_runs - study.design.share_runs // 2
    assert 0 < half.points < 64
    most = analysed(study, rows[:-1])
    assert not most.finished
    assert most.missing == 0


def test_equal_shares_are_ordered_by_what_is_tolerated() -> None:
    """Shares equal in whole percent: the source that tolerates less alone comes first."""

    def score(entry: Entry) -> Row:
        row = scored(entry)
        return replace(row, scores=row.scores | {"tool_rms_mm": 1.0})

    study = make_study(64, groups=GROUPS[::-1])
    needs = analysed(study, done(study, score))
    assert all(np.isnan(need.total[0]) for need in needs.sources)
    assert [need.group.name for need in needs.sources] == ["coulomb", "viscous", "delay"]
