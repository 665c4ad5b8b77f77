"""`rigbench identify`: practice on a hidden machine, recordings, and what is said of bad ones."""

from __future__ import annotations

import json
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from typer.testing import Result

from rigbench.arm.files import ArmFiles, load_arm
from rigbench.arm.mismatch import Case, Mismatch
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


@pytest.fixture(scope="module")
def recorded(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with recordings of planar2 under noise of 0.1 N m: two alone, one with 2.3 kg at the tool."""
    folder = tmp_path_factory.mktemp("recorded")
    files, settings = ArmFiles.read(ARM), Settings(Terms(False, False, False))
    load = Case(payload_kg=2.3, payload_cog_mm=(10, 0, 40))
    hidden = Simulated(Mismatch(), (), seed=2, torque_noise_nm=0.1, loaded=load)
    for draw, (name, motion) in enumerate((("a.csv", MOTION), ("b.csv", OTHER), ("full.csv", MOTION))):
        recording, _ = record(files, settings, hidden, motion, name, draw, loaded=name == "full.csv")
        write_recording(folder / name, files.arm(), recording)
    return folder


@pytest.fixture
def logs(recorded: Path, tmp_path: Path) -> Path:
    """A folder with two recordings, and a file that names them."""
    for name in ("a.csv", "b.csv"):
        shutil.copy(recorded / name, tmp_path)
    text = f"rigbench: 1\narm: {ARM}\nterms: []\nrecordings: [a.csv]\ncheck: b.csv\n"
    (tmp_path / "logs.yaml").write_text(text)
    return tmp_path


@pytest.fixture
def loaded_logs(recorded: Path, logs: Path) -> Path:
    """The same with the recording of a load."""
    shutil.copy(recorded / "full.csv", logs)
    with (logs / "logs.yaml").open("a") as stream:
        stream.write("loaded: [full.csv]\n")
    return logs


def test_practice_finds_the_hidden_machine(call: Callable[..., Result], tmp_path: Path) -> None:
    """The arm written predicts torques of another motion to the noise, ten times better than the declared one."""
    (tmp_path / "practise.yaml").write_text(PRACTISE)
    result = call("identify", str(tmp_path / "practise.yaml"), "-o", str(tmp_path / "out"), "--json")
    assert result.exit_code == 0, result.stderr
    done = json.loads(result.stdout)
    assert done["checked"] is True
    assert (done["worse_at"], done["unexplained_at"]) == ([], [])
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


def test_practice_with_a_load(call: Callable[..., Result], tmp_path: Path) -> None:
    """The load's true mass and place are in their intervals, the sums are there, and both arms read back."""
    loaded = "  loaded: {payload_kg: 1.2, payload_cog_mm: [10, 0, 40]}\nexcitation:"
    (tmp_path / "practise.yaml").write_text(PRACTISE.replace("excitation:", loaded))
    result = call("identify", str(tmp_path / "practise.yaml"), "-o", str(tmp_path / "out"), "--json")
    assert result.exit_code == 0, result.stderr
    done = json.loads(result.stdout)
    terms = {term["name"]: term for term in done["load"]["terms"]}
    for name, true in (("mass", 1.2), ("cog x", 10.0), ("cog z", 40.0)):
        assert terms[name]["true"] == pytest.approx(true, abs=1e-9)
        assert terms[name]["low"] <= true <= terms[name]["high"]
    assert terms["cog y"]["value"] is None
    assert [row["name"] for row in done["load"]["base"]] == ["m.load", "mcx.load", "mcz.load", "Iyy.load"]
    assert Path(done["files"]["loaded arm"]).name == "practise-loaded.yaml"
    alone, full = (load_arm(done["files"][name]) for name in ("arm", "loaded arm"))
    assert np.allclose(full.parameters[0], alone.parameters[0], rtol=1e-12)
    added = full.parameters[1, 0] - alone.parameters[1, 0]
    assert added == pytest.approx(terms["mass"]["identified"], rel=1e-9)


def test_recordings_with_a_load(call: Callable[..., Result], loaded_logs: Path) -> None:
    """The report has a section on the load, with what this arm can't tell, and without a true column."""
    result = call("identify", str(loaded_logs / "logs.yaml"), "-o", str(loaded_logs / "out"))
    assert result.exit_code == 0, result.stderr
    for said in (
        "6 parameters and 4 of a load",
        "mass [kg]",
        "cog x [mm], from the tool point",
        "Torques of this arm don't tell cog y, Ixx, Ixy, Ixz, Iyz, Izz",
        "Iyy.load",
    ):
        assert said in result.stdout
    assert "true" not in result.stdout
    assert "loaded arm: " in result.stderr
    mass = next(line.split() for line in result.stdout.splitlines() if "mass [kg]" in line)
    assert float(mass[1]) <= 2.3 <= float(mass[2])
    assert (loaded_logs / "out" / "logs-loaded.urdf").exists()


LOADED_FAULTS = {
    "no arm alone": ("recordings: [a.csv]\ncheck: b.csv\n", "", "loaded: tells nothing without motions of the arm"),
    "beside simulate": ("recordings: [a.csv]\ncheck: b.csv\n", "simulate: {}\n", "simulate.loaded: {payload_kg"),
    "the same recording": ("loaded: [full.csv]", "loaded: [a.csv]", "loaded[0]: 'a.csv' is among recordings already"),
    "no such recording": ("loaded: [full.csv]", "loaded: [none.csv]", "none.csv: the recording does not exist"),
    "none": ("loaded: [full.csv]", "loaded: []", "loaded"),
    "the wrong way round": ("recordings: [a.csv]\ncheck: b.csv\nloaded: [full.csv]", "recordings: [full.csv]\nloaded: [a.csv]", "a.csv: the mass of the load comes out as -"),
    "no mass": ("recordings: [a.csv]\ncheck: b.csv\nloaded: [full.csv]", "simulate: {loaded: {}}", "simulate.loaded.payload_kg"),
    "a mass below none": ("recordings: [a.csv]\ncheck: b.csv\nloaded: [full.csv]", "simulate: {loaded: {payload_kg: -1}}", "simulate.loaded.payload_kg"),
    "two payloads": ("recordings: [a.csv]\ncheck: b.csv\nloaded: [full.csv]", "simulate: {mismatch: {payload: {believed_kg: 1, least_kg: 0, most_kg: 2}}, loaded: {payload_kg: 1}}", "carries the mismatch's payload already"),
}  # fmt: skip


def check_fault(call: Callable[..., Result], folder: Path, old: str, new: str, said: str) -> None:
    """With ``new`` in place of ``old`` in the folder's logs.yaml there is a fault that says so, and exit code 2."""
    path = folder / "logs.yaml"
    assert old in path.read_text()
    path.write_text(path.read_text().replace(old, new))
    result = call("identify", str(path), "-o", str(folder / "out"))
    assert result.exit_code == 2
    assert said in result.stderr
    assert "Traceback" not in result.stderr


@pytest.mark.parametrize("fault", LOADED_FAULTS)
def test_faults_about_loads(call: Callable[..., Result], loaded_logs: Path, fault: str) -> None:
    """Each is told with its place, and ends with exit code 2."""
    check_fault(call, loaded_logs, *LOADED_FAULTS[fault])


FAULTS = {
    "neither": ("recordings: [a.csv]\ncheck: b.csv\n", "", "needs recordings or simulate"),
    "both": ("check: b.csv\n", "simulate: {}\n", "logs.yaml:5: simulate: has no effect beside recordings"),
    "checked by itself": (
        "check: b.csv",
        "check: ./a.csv",
        "logs.yaml:5: check: './a.csv' is among recordings already",
    ),
    "counted twice": (
        "[a.csv]",
        "[a.csv, b.csv, a.csv]",
        "logs.yaml:4: recordings[2]: 'a.csv' is among recordings already",
    ),
    "unknown key": ("check:", "chek:", "did you mean 'check'"),
    "no such recording": ("a.csv", "none.csv", "none.csv: the recording does not exist"),
    "no such arm": ("arm.yaml", "leg.yaml", "leg.yaml"),
    "no such term": ("terms: []", "terms: [backlash]", "terms"),
    "excitation without a machine": ("check: b.csv", "excitation: {}", "has no effect beside recordings"),
}


@pytest.mark.parametrize("fault", FAULTS)
def test_faults_of_the_file(call: Callable[..., Result], logs: Path, fault: str) -> None:
    """Each is told with the file's name, and ends with exit code 2."""
    check_fault(call, logs, *FAULTS[fault])


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


def test_an_identification_can_be_checked_before_it_is_done(call: Callable[..., Result], logs: Path) -> None:
    """`check` reads and judges recordings, or says what practice takes, and searches nothing; faults are told as ever."""
    told = call("check", str(logs / "logs.yaml"))
    assert told.exit_code == 0, told.stderr
    assert "logs.yaml: in order" in told.stdout
    assert "recordings: " in told.stdout
    assert "a.csv, 12001 rows in 12 s" in told.stdout
    (logs / "practise.yaml").write_text(TRACKED)
    document = json.loads(call("check", str(logs / "practise.yaml"), "--json").stdout)
    assert (document["practice"], document["recordings"], document["motions"]) == (True, [], ["reach"])
    said = call("check", str(logs / "practise.yaml")).stdout
    assert "excitation: 5 harmonics, 3 times 4 s, from at most 10 rounds of search" in said
    (logs / "a.csv").write_text("t_s,q_deg.shoulder\n")
    assert call("check", str(logs / "logs.yaml")).exit_code == 2


def test_files_of_another_kind_are_told_as_such(call: Callable[..., Result], logs: Path) -> None:
    """One fault that says what the file is and which command takes it; empty files too."""
    experiments = ARM.parents[2] / "experiments"
    for command, file, said in (
        ("identify", experiments / "first-look.yaml", "declares an experiment; expected an identification"),
        ("run", logs / "logs.yaml", "declares an identification; expected an experiment"),
        ("run", ARM, "declares an arm; expected an experiment (for this one see `rigbench audit`)"),
        ("identify", ARM, "declares an arm; expected an identification"),
    ):
        result = call(command, str(file))
        assert result.exit_code == 2
        assert said in result.stderr
        assert len(result.stderr.strip().splitlines()) == 1
    for text in ("[simulate, laws]\n", "- simulate: 1\n", "5\n"):
        (logs / "odd.yaml").write_text(text)
        for command in ("identify", "check"):
            result = call(command, str(logs / "odd.yaml"))
            assert (result.exit_code, "is not a mapping" in result.stderr) == (2, True), (text, command)


def test_the_schema_of_the_file(call: Callable[..., Result]) -> None:
    """`rigbench schema identify` names every key with its unit or default."""
    schema = json.loads(call("schema", "identify").stdout)
    assert {"arm", "recordings", "loaded", "simulate", "excitation", "terms", "corner_hz"} <= set(
        schema["properties"]
    )
    assert all("description" in part for name, part in schema["properties"].items())


TRACKED = PRACTISE + "motions: {reach: {via_deg: [[0, 0], [40, -50]], leg_s: 0.8}}\n"


def test_practice_tells_what_the_model_is_worth(call: Callable[..., Result], tmp_path: Path) -> None:
    """The identified model's tool error lies near that of the machine itself, the declared one's far from it."""
    (tmp_path / "practise.yaml").write_text(TRACKED)
    result = call("identify", str(tmp_path / "practise.yaml"), "-o", str(tmp_path / "out"), "--json")
    assert result.exit_code == 0, result.stderr
    (reach,) = json.loads(result.stdout)["tool_peak"]
    assert reach["motion"] == "reach"
    assert reach["declared_mm"] > 5 * reach["identified_mm"]
    assert reach["identified_mm"] < 2 * reach["exact_mm"]
    told = call("identify", str(tmp_path / "practise.yaml"), "-o", str(tmp_path / "out")).stdout
    assert f"{reach['declared_mm']:.3g}" in next(
        line for line in told.splitlines() if line.endswith("  reach")
    )


def test_motions_that_can_not_be_tracked(call: Callable[..., Result], tmp_path: Path, logs: Path) -> None:
    """Without a hidden machine, with a tolerance, out of reach, with a payload that the model has in it already."""
    file = tmp_path / "practise.yaml"
    motions = "motions: {reach: {via_deg: [[0, 0], [40, -50]], leg_s: 0.8}}\n"
    payload = "{link_mass_percent: 20, payload: {believed_kg: 1, least_kg: 1, most_kg: 2}}"
    for text, said in (
        ((logs / "logs.yaml").read_text() + motions, "motions: have no effect beside recordings"),
        (TRACKED.replace("leg_s: 0.8", "leg_s: 0.8, tolerance: {tool_peak_mm: 1}"), "is not judged"),
        (TRACKED.replace("40, -50", "40, 900"), "motions.reach"),
        (TRACKED.replace("{link_mass_percent: 20}", payload), "would carry it twice"),
    ):
        file.write_text(text.replace("a.csv", str(logs / "a.csv")).replace("b.csv", str(logs / "b.csv")))
        result = call("identify", str(file), "-o", str(tmp_path / "out"))
        assert result.exit_code == 2
        assert said in result.stderr
