"""A folder with an arm of two revolute joints and one of a revolute and a prismatic joint, and experiments on them."""

from __future__ import annotations

import copy
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
import yaml

from rigbench.errors import Fault, InputFaults
from rigbench.experiment import Experiment, load_experiment

LINK = '<inertial><origin xyz="0.2 0 0"/><mass value="3"/><inertia ixx="0.01" iyy="0.05" izz="0.05" ixy="0" ixz="0" iyz="0"/></inertial>'

URDF = """
<robot name="two">
  <link name="base"/>
  <link name="l1">{link}</link>
  <link name="l2">{link}</link>
  <link name="tip"/>
  <joint name="j1" type="revolute">
    <parent link="base"/><child link="l1"/><axis xyz="0 -1 0"/>
    <limit lower="-2" upper="2" effort="150" velocity="4"/>
  </joint>
  <joint name="j2" type="{kind}">
    <parent link="l1"/><child link="l2"/><origin xyz="0.4 0 0"/><axis xyz="0 -1 0"/>
    <limit lower="-0.5" upper="2.5" effort="60" velocity="4"/>
  </joint>
  <joint name="end" type="fixed"><parent link="l2"/><child link="tip"/><origin xyz="0.3 0 0"/></joint>
</robot>
"""

ARM = """
urdf: {urdf}
tool: tip
drives:
  j1: {{gear_ratio: 50, rotor_inertia: 1.0e-4, viscous: 2.0, coulomb: 3.0}}
  j2: {{gear_ratio: 50, rotor_inertia: 5.0e-5, viscous: 1.0, coulomb: 1.5}}
"""

EXPERIMENT: dict[str, Any] = {
    "rigbench": 1,
    "arm": "arm.yaml",
    "motions": {"swing": {"via_deg": [[0, 0], [30, 40], [0, 0]], "leg_s": 0.4, "rest_s": 0.1}},
    "laws": {
        "joint pd": {"law": "independent-joint", "natural_hz": 5},
        "computed torque": {"law": "computed-torque", "natural_hz": 5},
    },
    "mismatch": {"link_mass_percent": 10, "coulomb_percent": 20},
    "conditions": {"each_alone": 1, "together": [0.5, 1]},
    "draws": 100,
    "tolerance": {"tool_peak_mm": 3, "settle_ms": 150},
}

MINE = '''
from rigbench.laws import Law, option


class Mine(Law):
    """tau = k (q_ref - q)."""

    k: float = option(100.0, "N m/rad", "stiffness", above=0)
    bounds: tuple[float, ...] | None = option(None, "N m", "bounds", per_joint=True)
    model_hz: float | None = option(500.0, "Hz", "rate", above=0)

    def start(self, setup):
        pass

    def torque(self, t, q, v, ref, held):
        return self.k * (ref.q - q)
'''


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """The folder: arm.yaml (two revolute joints), lift.yaml (j2 prismatic), mine.py (a law)."""
    for name, kind in (("arm", "revolute"), ("lift", "prismatic")):
        (tmp_path / f"{name}.urdf").write_text(URDF.format(link=LINK, kind=kind), encoding="utf-8")
        (tmp_path / f"{name}.yaml").write_text(ARM.format(urdf=f"{name}.urdf"), encoding="utf-8")
    (tmp_path / "mine.py").write_text(MINE, encoding="utf-8")
    return tmp_path


@pytest.fixture
def write(folder: Path) -> Callable[..., Path]:
    """Write an experiment with some keys changed, or left out where None is given; return its path."""

    def build(name: str = "trial.yaml", **changes: Any) -> Path:
        data = copy.deepcopy(EXPERIMENT) | copy.deepcopy(changes)
        data = {key: value for key, value in data.items() if value is not None}
        path = folder / name
        path.write_text(yaml.safe_dump(data, sort_keys=False), encoding="utf-8")
        return path

    return build


@pytest.fixture
def load(write: Callable[..., Path]) -> Callable[..., Experiment]:
    """Load an experiment with some keys changed."""

    def build(**changes: Any) -> Experiment:
        return load_experiment(write(**changes))

    return build


@pytest.fixture
def faults(load: Callable[..., Experiment]) -> Callable[..., list[Fault]]:
    """Return the faults of an experiment with some keys changed."""

    def build(**changes: Any) -> list[Fault]:
        with pytest.raises(InputFaults) as caught:
            load(**changes)
        return list(caught.value.faults)

    return build
