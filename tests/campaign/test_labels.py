"""What a store says of its campaign survives the writing."""

from __future__ import annotations

import json
from collections.abc import Callable

from rigbench.campaign.labels import Labels
from rigbench.campaign.plan import Plan
from rigbench.scores.results import Tolerance

PlanMaker = Callable[..., Plan]


def test_labels_come_back_as_they_were(make_plan: PlanMaker) -> None:
    """Limits of single motions and combinations that can't be included."""
    plan = make_plan(
        sheets=("gear_ratio 50", "gear_ratio 100"),
        tolerance=Tolerance({"tool_peak_mm": 3.0}, 0.9, {"lift": {"settle_ms": 250.0}}),
        absent=(("gear_ratio 50", "pd", "nominal"),),
    )
    labels = Labels.of(plan)
    assert Labels.from_json(labels.to_json()) == labels
    assert labels.tolerance is not None
    assert labels.tolerance.limits_for("lift") == {"tool_peak_mm": 3.0, "settle_ms": 250.0}


def test_labels_of_an_earlier_version(make_plan: PlanMaker) -> None:
    """A store that says nothing of these has none of them."""
    found = json.loads(Labels.of(make_plan()).to_json())
    del found["absent"], found["model"], found["tolerance"]["motions"]
    labels = Labels.from_json(json.dumps(found))
    assert labels == Labels.of(make_plan())
