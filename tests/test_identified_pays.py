"""What an identified model is worth, by the experiments that come with rigbench."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from typer.testing import CliRunner

from rigbench.arm.files import load_arm
from rigbench.cli import app
from rigbench.experiment import load_experiment
from rigbench.identify.covariance_file import read_knowledge
from rigbench.rig import simulate
from rigbench.scores.of_run import score_run

ROOT = Path(__file__).resolve().parents[1]
SHIPPED = ROOT / "robots_demo" / "tray6" / "practise-tray6-identified"


@pytest.fixture(scope="module")
def practised(tmp_path_factory):
    """What `rigbench identify experiments/practise-tray6.yaml --json` prints."""
    folder = tmp_path_factory.mktemp("practised")
    file = str(ROOT / "experiments" / "practise-tray6.yaml")
    result = CliRunner().invoke(app, ["identify", file, "-o", str(folder), "--json"])
    assert result.exit_code == 0, result.stderr
    return json.loads(result.stdout)


def test_one_command_shows_what_it_buys(practised):
    """tray6, each link and drive of the hidden machine 10 % off the CAD: a fifth of the tool error, or less."""
    (one,) = practised["tool_peak"]
    assert one["declared_mm"] > 5 * one["identified_mm"]


def test_the_shipped_arm_is_what_the_command_finds(practised):
    """Sums of the shipped arm as those found here, to 6 of the deviations that both have.

    The same recording on the same type of CPU gives the same numbers; elsewhere the search may end on another
    motion, from which two estimates differ by their noise: by more than 6 deviations in one sum of 52 hardly ever.
    """
    here = json.loads(Path(practised["files"]["covariance"]).read_text("utf-8"))
    shipped = json.loads(Path(f"{SHIPPED}-covariance.json").read_text("utf-8"))
    assert [one["name"] for one in here["base"]] == [one["name"] for one in shipped["base"]]
    for one, other in zip(here["base"], shipped["base"], strict=True):
        assert abs(one["value"] - other["value"]) < 6 * np.hypot(one["deviation"], other["deviation"])
        assert 0.3 < one["deviation"] / other["deviation"] < 3
    assert read_knowledge(f"{SHIPPED}-covariance.json", load_arm(f"{SHIPPED}.yaml"))[1]


def test_machines_that_the_identification_leaves_are_tracked_by_its_model():
    """cad-or-identified.yaml, computed torque at level 1, 3 draws: 5 times less tool error than with the CAD's."""
    plan = load_experiment(ROOT / "experiments" / "cad-or-identified.yaml").plan()
    errors: dict[str, list[float]] = {}
    for entry in plan.entries:
        if (entry.law, entry.condition) == ("computed torque", "all at 1") and (entry.draw or 0) < 3:
            scores = score_run(simulate(entry.run), entry.run.motion, entry.run.settle_band_mm)
            errors.setdefault(entry.sheet, []).append(scores["tool_peak_mm"])
    cad, identified = (
        np.array(errors[name])
        for name in ("model ../robots_demo/tray6/arm.yaml", f"model {SHIPPED.name}.yaml")
    )
    assert len(cad) == len(identified) == 3
    assert (cad > 5 * identified).all()
