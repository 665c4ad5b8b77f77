"""The picture of an identification: a page whatever the arm, the same bytes each time, and its faults."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.errors import InputFaults, StoreError
from rigbench.identify.base import base_of
from rigbench.identify.consistent import consistent
from rigbench.identify.estimate import estimate
from rigbench.identify.filtering import Rows
from rigbench.identify.procedure import Identification, Settings
from rigbench.identify.regressor import Terms, parameter_values, regressor
from rigbench.report.identify_picture import identify_figure, identify_picture

GRAVITY = (0.0, 0.0, -9.81)
FILES = ArmFiles.read(Path(__file__).resolve().parents[2] / "robots_demo" / "planar2" / "arm.yaml")


@pytest.fixture(scope="module")
def done() -> Identification:
    """planar2, identified from random states with some noise; in one of them a joint stands."""
    arm, terms, rng = FILES.arm(), Terms(False, False, False), np.random.default_rng(0)
    base = base_of(arm, GRAVITY, terms)
    y = regressor(arm, GRAVITY, *rng.normal(size=(3, 60, 2)), terms)
    torque = y @ parameter_values(arm, terms) + 0.1 * rng.normal(size=(60, 2))
    usable = np.ones((60, 2), bool)
    usable[7, 0] = False
    rows = Rows(y[:, :, base.kept], torque, usable, "a $name_ with & signs.csv")
    found = estimate(base, [rows])
    return Identification(FILES, Settings(terms), found, consistent(arm, terms, found), rows, False, arm)


def test_every_joint_and_every_parameter_is_drawn(done: Identification) -> None:
    """Torque and residual of each joint, and one mark with error bars for each base parameter."""
    axes = identify_figure(done).axes
    assert [each.get_ylabel() for each in axes[:3]] == ["shoulder [N m]", "residual", "elbow [N m]"]
    assert len(axes) == 5
    assert [tick.get_text() for tick in axes[-1].get_xticklabels()] == [
        name.split(" ")[0] for name in done.found.base.names
    ]
    measured = axes[0].get_lines()[0].get_ydata()
    assert np.isnan(measured[7])  # what was not used is a hole
    assert np.isfinite(np.delete(measured, 7)).all()


def test_the_same_identification_gives_the_same_bytes(tmp_path: Path, done: Identification) -> None:
    """In each format, into folders that are made."""
    for suffix in ("png", "svg", "pdf"):
        for name in ("one", "two"):
            identify_picture(done, tmp_path / name / f"a.{suffix}")
        one, two = (tmp_path / name / f"a.{suffix}" for name in ("one", "two"))
        assert one.read_bytes() == two.read_bytes()


def test_what_cannot_be_drawn_or_written(tmp_path: Path, done: Identification) -> None:
    """Another suffix is the input's fault, a file in place of a folder the disk's."""
    with pytest.raises(InputFaults, match="no format of a picture"):
        identify_picture(done, tmp_path / "a.bmp")
    (tmp_path / "file").write_text("")
    with pytest.raises(StoreError, match="can't be written"):
        identify_picture(done, tmp_path / "file" / "a.png")
