"""The key ``scene``: what else is in the world, from the YAML to the rows."""

from __future__ import annotations

from pathlib import Path

import pytest

from rigbench.errors import InputFaults
from rigbench.experiment import load_experiment
from rigbench.rig import simulate

ROOT = Path(__file__).resolve().parents[2]

TEXT = f"""
rigbench: 1
arm: {ROOT}/robots_demo/tray6/arm.yaml
rates: {{control_hz: 500, physics_hz: 1000}}
motions: {{stay: {{via_deg: [[0, -60, 90, 0, 60, 0], [5, -60, 90, 0, 60, 0]], leg_s: 0.2, rest_s: 0.1}}}}
laws: {{pd: {{law: gravity-compensated}}}}
"""


def write(folder, scene):
    path = folder / "job.yaml"
    path.write_text(TEXT + (f"scene: {scene}\n" if scene else ""))
    return path


def test_the_demo_scene_acts(tmp_path):
    """With the table and the tray contacts are on, another key stands for the run, and the tray's weight
    is felt: the tool ends farther off than without it."""
    runs = []
    for scene in (None, f"{ROOT}/robots_demo/tray6/scene.py:table_and_tray"):
        (entry,) = load_experiment(write(tmp_path, scene)).plan().entries
        runs.append((entry.run, simulate(entry.run)))
    (alone, free), (run, log) = runs
    assert (free.contacts, log.contacts) == (False, True)
    assert alone.key() != run.key()
    assert log.outcome == "finished"
    assert abs(log.q[-1] - log.q_ref[-1]).max() > abs(free.q[-1] - free.q_ref[-1]).max()


@pytest.mark.parametrize(
    ("scene", "words"),
    [
        ("nothing-registered", "not a registered scene"),
        ("scene.py", "does not name a function"),
        ("gone.py:build", "can't be read"),
        ("scene.py:other", "did you mean 'another'"),
        ("scene.py:narrow", "expected (client, body, arm)"),
        ("raises.py:build", "ZeroDivisionError"),
    ],
)
def test_faults_have_the_address_of_the_key(tmp_path, scene, words):
    """Each is told at the line of ``scene``."""
    (tmp_path / "scene.py").write_text("def another(client, body, arm): pass\ndef narrow(client): pass\n")
    (tmp_path / "raises.py").write_text("1 / 0\n")
    with pytest.raises(InputFaults) as caught:
        load_experiment(write(tmp_path, scene))
    assert "job.yaml:7: scene: " in str(caught.value)
    assert words in str(caught.value)
