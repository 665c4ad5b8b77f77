"""The questions that engineers ask, each in a few lines of YAML and nothing else, at small size."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from typer.testing import CliRunner

from rigbench.arm.dynamics import mass_matrix
from rigbench.arm.files import load_arm
from rigbench.arm.mismatch import plant
from rigbench.cli import app
from rigbench.experiment import load_experiment

ROOT = Path(__file__).resolve().parents[2]

HEAD = f"""\
rigbench: 1
title: A question
arm: {ROOT}/robots_demo/tray6/arm.yaml
seed: 4
rates: {{control_hz: 500, physics_hz: 500}}
motions:
  load tray: {{via_deg: [[0, -60, 90, 0, 60, 0], [20, -50, 80, 0, 58, 0]], leg_s: 0.5, rest_s: 0.1}}
laws:
  pd + gravity: {{law: gravity-compensated, natural_hz: 5}}
  feedforward:  {{law: torque-feedforward, natural_hz: 5}}
draws: 2
tolerance: {{tool_peak_mm: 3.0}}
"""

Ask = Callable[..., dict[str, Any]]


@pytest.fixture
def ask(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Ask:
    """Run an experiment as a user would; return the JSON that it prints."""

    def build(text: str) -> dict[str, Any]:
        monkeypatch.chdir(tmp_path)
        Path("question.yaml").write_text(text, encoding="utf-8")
        result = CliRunner().invoke(app, ["run", "question.yaml", "--jobs", "0", "--json"])
        assert result.exit_code == 0, result.stderr
        document: dict[str, Any] = json.loads(result.stdout)
        assert document["runs"]["done"] == document["runs"]["planned"] > 0
        assert Path("results/question-matrix.png").stat().st_size > 0
        return document

    return build


def cell(document: dict[str, Any], law: str, condition: str, sheet: str = "") -> dict[str, Any]:
    (found,) = [
        c for c in document["cells"] if (c["sheet"], c["law"], c["condition"]) == (sheet, law, condition)
    ]
    return dict(found)


def peak(document: dict[str, Any], law: str, condition: str, sheet: str = "") -> float:
    return float(cell(document, law, condition, sheet)["tool_peak_mm"]["median"])


# My arm, with the gripper locked -----------------------------------------------------------------

LINK = '<inertial><origin xyz="0.2 0 0"/><mass value="3"/><inertia ixx="0.01" iyy="0.05" izz="0.05" ixy="0" ixz="0" iyz="0"/></inertial>'
FINGER = '<inertial><mass value="0.4"/><inertia ixx="0.001" iyy="0.001" izz="0.001" ixy="0" ixz="0" iyz="0"/></inertial>'
GRIPPER = f"""
<robot name="gripper arm">
  <link name="base"/><link name="l1">{LINK}</link><link name="l2">{LINK}</link><link name="palm"/>
  <link name="finger_a">{FINGER}</link><link name="finger_b">{FINGER}</link>
  <joint name="j1" type="revolute"><parent link="base"/><child link="l1"/><axis xyz="0 -1 0"/><limit lower="-2" upper="2" effort="150" velocity="4"/></joint>
  <joint name="j2" type="revolute"><parent link="l1"/><child link="l2"/><origin xyz="0.4 0 0"/><axis xyz="0 -1 0"/><limit lower="-1" upper="2.5" effort="60" velocity="4"/></joint>
  <joint name="end" type="fixed"><parent link="l2"/><child link="palm"/><origin xyz="0.3 0 0"/></joint>
  <joint name="slide_a" type="prismatic"><parent link="palm"/><child link="finger_a"/><axis xyz="0 1 0"/><limit lower="0" upper="0.04" effort="20" velocity="1"/></joint>
  <joint name="slide_b" type="prismatic"><parent link="palm"/><child link="finger_b"/><axis xyz="0 -1 0"/><limit lower="0" upper="0.04" effort="20" velocity="1"/></joint>
</robot>
"""
GRIPPER_ARM = """
urdf: gripper.urdf
tool: palm
lock: {slide_a: 0.02, slide_b: 0.02}
drives:
  j1: {gear_ratio: 50, rotor_inertia: 1.0e-4, viscous: 2.0, coulomb: 3.0}
  j2: {gear_ratio: 50, rotor_inertia: 5.0e-5, viscous: 1.0, coulomb: 1.5}
"""


def test_my_arm_with_its_gripper_locked(ask: Ask, tmp_path: Path) -> None:
    """`lock` freezes the fingers where they are; their mass rides on the last link, and the arm runs."""
    (tmp_path / "gripper.urdf").write_text(GRIPPER, encoding="utf-8")
    (tmp_path / "mine.yaml").write_text(GRIPPER_ARM, encoding="utf-8")
    text = HEAD.replace(f"{ROOT}/robots_demo/tray6/arm.yaml", "mine.yaml")
    text = text.replace("[[0, -60, 90, 0, 60, 0], [20, -50, 80, 0, 58, 0]]", "[[0, 0], [20, 30]]")
    document = ask(text)
    arm = load_arm(tmp_path / "mine.yaml")
    assert arm.joints == ("j1", "j2")
    assert arm.parameters[-1][0] == pytest.approx(3.0 + 2 * 0.4, rel=1e-12)
    assert peak(document, "feedforward", "nominal") < peak(document, "pd + gravity", "nominal")


# Trays of 0, 1, 2, 3 kg against one belief --------------------------------------------------------

TRAYS = """mismatch: {payload: {believed_kg: 1, least_kg: 0, most_kg: 3}}
conditions:
  cases:
    no tray: {payload_kg: 0}
    one kilo: {payload_kg: 1}
    two kilos: {payload_kg: 2}
    three kilos: {payload_kg: 3}
"""


def test_trays_against_one_belief(ask: Ask) -> None:
    """A column a tray, each one exact run; the believed one is the nominal machine, and the error grows away from it."""
    document = ask(HEAD + TRAYS)
    found = {
        name: peak(document, "feedforward", name)
        for name in ("nominal", "no tray", "one kilo", "two kilos", "three kilos")
    }
    assert found["one kilo"] == found["nominal"]
    assert found["one kilo"] < found["no tray"]
    assert found["one kilo"] < found["two kilos"] < found["three kilos"]
    assert {cell(document, "feedforward", name)["draws"] for name in found} == {1}


# A cold morning ----------------------------------------------------------------------------------

COLD = """mismatch: {viscous_percent: 10}
conditions:
  cases:
    cold morning: {viscous_percent: +60, coulomb_percent: +40}
    cold and uncertain: {viscous_percent: +60, coulomb_percent: +40, level: 1}
"""


def test_a_cold_morning(ask: Ask) -> None:
    """Stiff grease spoils the model's friction: exact on its own, many machines on top of a level."""
    document = ask(HEAD + COLD)
    assert peak(document, "feedforward", "cold morning") > 3 * peak(document, "feedforward", "nominal")
    assert cell(document, "feedforward", "cold morning")["draws"] == 1
    assert cell(document, "feedforward", "cold and uncertain")["draws"] == 2
    spread = cell(document, "feedforward", "cold and uncertain")["tool_peak_mm"]
    assert spread["median_low"] < peak(document, "feedforward", "cold morning") * 1.2


# Wrist links known worse than the rest -----------------------------------------------------------

WRIST = """mismatch:
  link_mass_percent: {all: 5, wrist: 25, gripper: 25}
  link_cog_mm: {all: 2, wrist: 10}
conditions: {each_alone: 1, together: [1]}
"""


def test_wrist_links_known_worse_than_the_rest(ask: Ask, tmp_path: Path) -> None:
    """The wrist's mass wanders up to 25 %, that of the others 5 %."""
    document = ask(HEAD + WRIST)
    assert {c["condition"] for c in document["cells"]} == {"nominal", "link mass", "link cog", "all at 1"}
    run = load_experiment(tmp_path / "question.yaml").sheets[0].first
    arm = run.arm.arm()
    worst = np.zeros(arm.n)
    for draw in range(300):
        drawn = plant(arm, run.mismatch, 1.0, ("link_mass_percent",), run.seed, draw)
        worst = np.maximum(worst, np.abs(np.log(drawn.parameters[:, 0] / arm.parameters[:, 0])))
    bound = np.log([1.25 if link in ("wrist", "gripper") else 1.05 for link in arm.links])
    assert (worst <= bound * (1 + 1e-9)).all()
    assert (worst > 0.9 * bound).all()


# Gear ratio against control rate against model rate ----------------------------------------------

SWEEP = """mismatch: {link_mass_percent: 10}
conditions: {together: [1]}
vary:
  laws: {feedforward: {model_hz: [50, 500]}}
  rates: {control_hz: [250, 500]}
  drives: {all: {gear_ratio: [60, 120]}}
"""


def test_gear_ratio_against_control_rate_against_model_rate(ask: Ask) -> None:
    """Model rates are rows, the rest sheets; what can't be is planned nowhere, and named; slower models track worse."""
    document = ask(HEAD + SWEEP)
    sheets = [f"control_hz {hz}, gear_ratio {ratio}" for hz in (250, 500) for ratio in (60, 120)]
    rows = ["pd + gravity", "feedforward (model_hz 50)", "feedforward (model_hz 500)"]
    assert list(dict.fromkeys(c["sheet"] for c in document["cells"])) == sheets
    assert list(dict.fromkeys(c["law"] for c in document["cells"])) == rows
    for sheet in sheets:
        possible = "500," in sheet
        draws = cell(document, "feedforward (model_hz 500)", "all at 1", sheet)["draws"]
        assert draws == (2 if possible else 0)
        if possible:
            slow, fast = (peak(document, row, "nominal", sheet) for row in rows[1:])
            assert slow > 2 * fast
    assert document["runs"]["planned"] == (4 * 3 - 2) * (1 + 2)
    checked = CliRunner().invoke(app, ["check", "question.yaml"])
    assert "(4 sheets x 3 laws - 2 that can't be) x 1 motion" in checked.stdout
    assert "= 30 runs" in checked.stdout
    assert (
        "skipped 'feedforward (model_hz 500)' with control_hz 250: 500 is above control_hz" in checked.stderr
    )
    listed = json.loads(CliRunner().invoke(app, ["check", "question.yaml", "--json"]).stdout)
    assert listed["sheets"] == sheets
    assert [(s["sheet"], s["law"]) for s in listed["skipped"]] == [
        (sheet, "feedforward (model_hz 500)") for sheet in sheets[:2]
    ]


# A tray that must not tilt -----------------------------------------------------------------------

TILT = """mismatch: {coulomb_percent: 30}
conditions: {together: [1]}
"""


def test_a_tray_that_must_not_tilt(ask: Ask) -> None:
    """The angle of the tool has a limit of its own, in one motion tighter than in the other, beside that of its path."""
    rim = "  rim: {circle: {centre_m: [0.45, 0, 0.4], radius_m: 0.05, normal: [0, 0, 1], turn_s: 1.0}, tolerance: {tool_angle_peak_deg: 0.05, path_peak_mm: 1}}\nlaws:"
    text = HEAD.replace("laws:", rim).replace("{tool_peak_mm: 3.0}", "{tool_angle_peak_deg: 2}")
    document = ask(text + TILT)
    worst = cell(document, "pd + gravity", "nominal")
    tilts = {name: found["tool_angle_peak_deg"]["median"] for name, found in worst["motions"].items()}
    assert tilts["rim"] > 0.05
    assert max(tilts.values()) < 2
    assert worst["verdict"] == "misses"
    assert (worst["motions"]["load tray"]["passed"], worst["motions"]["rim"]["passed"]) == (1, 0)
    assert cell(document, "feedforward", "nominal")["verdict"] == "keeps"


# What a gear ratio costs -------------------------------------------------------------------------

GEARS = """conditions: {}
vary: {drives: {all: {gear_ratio: [60, 120, 240]}}}
"""


def test_a_gear_sweep_carries_its_own_price(ask: Ask, tmp_path: Path) -> None:
    """More ratio: less of the links' inertia and of the load reaches the motor, until it is too slow to follow."""
    text = HEAD.replace("leg_s: 0.5", "leg_s: 0.35")
    document = ask(text + GEARS)
    sheets = ["gear_ratio 60", "gear_ratio 120", "gear_ratio 240"]
    pd = [peak(document, "pd + gravity", "nominal", sheet) for sheet in sheets]
    assert pd[1] < pd[0]
    assert pd[2] > pd[1]
    modelled = [peak(document, "feedforward", "nominal", sheet) for sheet in sheets]
    assert modelled[1] <= modelled[0]
    assert modelled[2] > 10 * modelled[1]
    saturated = [cell(document, "feedforward", "nominal", s)["saturated_percent"]["median"] for s in sheets]
    assert saturated[0] == saturated[1] == 0 < saturated[2]
    variation = []
    for sheet in load_experiment(tmp_path / "question.yaml").sheets:
        arm = sheet.first.arm.arm()
        chain = arm.chain(np.zeros(3))
        poses = sheet.motions["load tray"].reference(np.linspace(0, 0.35, 20))[0]
        inertia = np.array([np.diag(mass_matrix(chain, q)) for q in poses]) + arm.drives.reflected
        variation.append((np.ptp(inertia, axis=0) / inertia.mean(axis=0)).max())
    assert variation[0] > variation[1] > variation[2]
    checked = CliRunner().invoke(app, ["check", "question.yaml"])
    assert "the arm can't follow it with gear_ratio 240: joint" in checked.stderr
    assert "costs nothing" not in checked.stderr


def test_without_limits_of_the_motor_the_ratio_is_said_to_cost_nothing(ask: Ask, tmp_path: Path) -> None:
    """The same sweep on an arm whose motors have no limits: check warns, joint by joint."""
    source = ROOT / "robots_demo" / "tray6"
    (tmp_path / "tray6.urdf").write_text((source / "tray6.urdf").read_text("utf-8"), encoding="utf-8")
    lines = (source / "arm.yaml").read_text("utf-8").splitlines(keepends=True)
    free = "".join(line for line in lines if not line.strip().startswith(("motor_torque", "motor_speed")))
    (tmp_path / "free.yaml").write_text(free, encoding="utf-8")
    ask(HEAD.replace(f"{ROOT}/robots_demo/tray6/arm.yaml", "free.yaml") + GEARS)
    checked = CliRunner().invoke(app, ["check", "question.yaml"])
    assert checked.exit_code == 0
    assert "vary.drives.all.gear_ratio: costs nothing at j1, j2, j3, j4, j5, j6" in checked.stderr
