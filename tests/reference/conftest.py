"""The two-link arm and reference of Kelly, Santibanez, Loria 2005, ch. 5, as files (numbers as quoted elsewhere)."""

from __future__ import annotations

import numpy as np
import pytest

SCALES = {"nominal": 1.0, "heavy": 1.2, "light": 0.7}
"""By what all masses and inertias are multiplied."""

URDF = """<robot name="two links">
<link name="stand"/>
<joint name="shoulder" type="continuous"><parent link="stand"/><child link="upper"/><axis xyz="0 -1 0"/></joint>
<link name="upper"><inertial><origin xyz="0 0 -0.0983"/><mass value="{m1}"/>
 <inertia ixx="{i1}" ixy="0" ixz="0" iyy="{i1}" iyz="0" izz="{z1}"/></inertial></link>
<joint name="elbow" type="continuous"><parent link="upper"/><child link="lower"/><origin xyz="0 0 -0.26"/>
 <axis xyz="0 -1 0"/></joint>
<link name="lower"><inertial><origin xyz="0 0 -0.0229"/><mass value="{m2}"/>
 <inertia ixx="{i2}" ixy="0" ixz="0" iyy="{i2}" iyz="0" izz="{z2}"/></inertial></link>
<joint name="end" type="fixed"><parent link="lower"/><child link="tip"/><origin xyz="0 0 -0.26"/></joint>
<link name="tip"/>
</robot>
"""


def _write_arms(folder):
    for name, scale in SCALES.items():
        values = {"m1": 6.5225, "m2": 2.0458, "i1": 0.1213, "i2": 0.0116, "z1": 0.01, "z2": 0.001}
        (folder / f"{name}.urdf").write_text(URDF.format(**{k: v * scale for k, v in values.items()}))
        text = f"urdf: {name}.urdf\ntool: tip\ndrives: {{shoulder: {{}}, elbow: {{}}}}\n"
        (folder / f"{name}.yaml").write_text(text)


def _write_reference(folder):
    t = np.arange(0, 10.0005, 0.001)
    rise = 1 - np.exp(-2 * t**3)
    q1 = np.pi / 4 * rise + np.pi / 9 * rise * np.sin(4 * t)
    q2 = np.pi / 3 * rise + np.pi / 6 * rise * np.sin(3 * t)
    rows = [
        f"{a:.3f},{float(b)!r},{float(c)!r}"
        for a, b, c in zip(t, np.rad2deg(q1), np.rad2deg(q2), strict=True)
    ]
    (folder / "reference.csv").write_text("\n".join(["t_s,shoulder,elbow", *rows]) + "\n")


@pytest.fixture(scope="session")
def two_link_files():
    """Write nominal.yaml, heavy.yaml, light.yaml (arms) and reference.csv into a folder."""

    def write(folder):
        _write_arms(folder)
        _write_reference(folder)

    return write
