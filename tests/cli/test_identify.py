"""`rigbench identify`: practice on a hidden machine, recordings, and what is said of bad ones."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from typer.testing import Result

from rigbench.arm.files import ArmFiles, load_arm
from rigbench.arm.mismatch import Mismatch
from rigbench.identify.excitation import Search
from rigbench.identify.fourier import FourierMotion
from rigbench.identify.procedure import Settings, Simulated, record
from rigbench.identify.recording_file import write_recording
from rigbench.identify.regressor import Terms

ARM = Path(__file__).resolve().parents[2] / "robots_demo" / "planar2" / "arm.yaml"
PRACTISE = f"""\
rigbench: 1
arm: {ARM}
terms: []
simulate:
  mismatch: {{link_mass_percent: 20}}
  seed: 4
  noise_deg: 0.001
  torque_noise_nm: 0.1
excitation: {{rounds: 10, periods: 3}}
"""
MOTION = FourierMotion((0.2, -0.3), ((0.9, -0.45), (-0.7, 0.35)), ((0.4, -0.1), (0.8, -0.2)), 4.0, 3)
OTHER = FourierMotion((0.0, 0.4), ((0.6, -0.3), (0.9, -0.45)), ((0.8, -0.2), (-0.8, 0.2)), 3.0, 3)


@pytest.fixture
def logs(tmp_path) -> Path:
    """A folder with two recordings of planar2 under noise of 0.1 N m, and a file that names them."""
    files, settings = ArmFiles.read(ARM), Settings(Terms(False, False, False))
    hidden = Simulated(Mismatch(), (), seed=2, torque_noise_nm=0.1)
    for draw, (name, motion) in enumerate((("a.csv", MOTION), ("b.csv", OTHER))):
        recording, _ = record(files, settings, hidden, motion, name, draw)
        write_recording(tmp_path / name, files.arm(), recording)
    text = f"rigbench: 1\narm: {ARM}\nterms: []\nrecordings: [a.csv]\ncheck: b.csv\n"
    (tmp_path / "logs.yaml").write_text(text)
    return tmp_path


def test_practice_finds_the_hidden_machine(call: Callable[..., Result], tmp_path: Path) -> None:
    """The arm written predicts torques of another motion to the noise, ten times better than the declared one."""
    (tmp_path / "practise.yaml").write_text(PRACTISE)
    result = call("identify", str(tmp_path / "practise.yaml"), "-o", str(tmp_path / "out"), "--json")
    assert result.exit_code == 0, result.stderr
    done = json.loads(result.stdout)
    assert done["checked"] is True
    for joint, before in done["torque_error_nm"]["declared"].items():
        assert 10 * done["torque_error_nm"]["identified"][joint] < before
    assert all(Path(file).stat().st_size > 100 for file in done["files"].values())
    identified = load_arm(done["files"]["arm"])
    assert identified.joints == load_arm(ARM).joints
    assert not np.allclose(identified.parameters, load_arm(ARM).parameters, rtol=0.01)
    assert "condition number" in result.stderr


def test_ctrl_c_ends_the_search_cleanly(
    call: Callable[..., Result], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Progress until then, exit code 3, no traceback, nothing written."""
    cost, asked = Search.cost, 0

    def counted(*given: Any) -> float:
        nonlocal asked
        asked += 1
        if asked > 700:  # of a search in 18 dimensions, some 19 for each step
            raise KeyboardInterrupt
        return cost(*given)

    monkeypatch.setattr(Search, "cost", counted)
    (tmp_path / "practise.yaml").write_text(PRACTISE.replace("rounds: 10", "rounds: 1000"))
    result = call("identify", str(tmp_path / "practise.yaml"), "-o", str(tmp_path / "out"))
    assert result.exit_code == 3
    assert "excitation: 10 of at most 1000 rounds" in result.stderr
    assert result.stderr.endswith("stopped\n")
    assert "Traceback" not in result.stderr
    assert not (tmp_path / "out").exists()


def test_recordings_are_taken_and_the_report_names_all(call: Callable[..., Result], logs: Path) -> None:
    """Each joint and each base parameter has its line; without a hidden machine there is no true column."""
    result = call("identify", str(logs / "logs.yaml"), "-o", str(logs / "out"))
    assert result.exit_code == 0, result.stderr
    for said in ("shoulder", "elbow", "mcx.upper + 0.5 m.fore", "Iyy.fore", "not fitted", "b.csv"):
        assert said in result.stdout
    assert "true" not in result.stdout
    assert (logs / "out" / "logs-identified.png").exists()


FAULTS = {
    "neither": ("recordings: [a.csv]\ncheck: b.csv\n", "", "needs recordings or simulate"),
    "both": ("check: b.csv\n", "simulate: {}\n", "needs recordings or simulate"),
    "unknown key": ("check:", "chek:", "did you mean 'check'"),
    "no such recording": ("a.csv", "none.csv", "none.csv: the recording does not exist"),
    "no such arm": ("arm.yaml", "leg.yaml", "leg.yaml"),
    "no such term": ("terms: []", "terms: [backlash]", "terms"),
    "excitation without a machine": ("check: b.csv", "excitation: {}", "has no effect beside recordings"),
}


@pytest.mark.parametrize("fault", FAULTS)
def test_faults_of_the_file(call: Callable[..., Result], logs: Path, fault: str) -> None:
    """Each is told with the file's name, and ends with exit code 2."""
    old, new, said = FAULTS[fault]
    path = logs / "logs.yaml"
    assert old in path.read_text()
    path.write_text(path.read_text().replace(old, new))
    result = call("identify", str(path), "-o", str(logs / "out"))
    assert result.exit_code == 2
    assert said in result.stderr
    assert "Traceback" not in result.stderr


def test_a_bad_recording_is_named_with_line_and_column(call: Callable[..., Result], logs: Path) -> None:
    """A hole of 500 rows in one recording and a column in rad in the other, both at once."""
    lines = (logs / "a.csv").read_text().splitlines()
    (logs / "a.csv").write_text("\n".join(lines[:2000] + lines[2500:]))
    rows = np.loadtxt(logs / "b.csv", delimiter=",", skiprows=1)
    rows[:, 1] /= 57.29578
    head = (logs / "b.csv").read_text().splitlines()[0]
    np.savetxt(logs / "b.csv", rows, delimiter=",", header=head, comments="")
    result = call("identify", str(logs / "logs.yaml"), "-o", str(logs / "out"), "--json")
    assert result.exit_code == 2
    faults = json.loads(result.stdout)["faults"]
    assert [(Path(fault["file"]).name, fault["line"], fault["key"]) for fault in faults] == [
        ("a.csv", 2001, "t_s"),
        ("b.csv", 1, "q_deg.shoulder"),
    ]
    assert "a gap of 0.501 s" in faults[0]["problem"]
    assert "57.3 times too small" in faults[1]["problem"]


def test_a_folder_that_cannot_be_is_the_disks_fault(call: Callable[..., Result], logs: Path) -> None:
    """-o names a file: exit code 5."""
    result = call("identify", str(logs / "logs.yaml"), "-o", str(logs / "a.csv"))
    assert result.exit_code == 5
    assert "can't be written" in result.stderr


def test_the_schema_of_the_file(call: Callable[..., Result]) -> None:
    """`rigbench schema identify` names every key with its unit or default."""
    schema = json.loads(call("schema", "identify").stdout)
    assert {"arm", "recordings", "simulate", "excitation", "terms", "corner_hz"} <= set(schema["properties"])
    assert all("description" in part for name, part in schema["properties"].items())
