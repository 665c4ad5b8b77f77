"""Every fault of an arm's two files, with its text and line; and no damage that gives anything else."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigbench.arm.files import ArmFiles, load_arm
from rigbench.errors import InputFaults
from rigbench.yamlfile import load

GANTRY = Path(__file__).parent / "gantry"
ARM, URDF = (GANTRY / "arm.yaml").read_text(), (GANTRY / "a.urdf").read_text()
FAULTS: dict[str, Any] = load("faults.yaml", (GANTRY / "faults.yaml").read_text()).data


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A current folder with both files, so that messages name them as short as a user would."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "arm.yaml").write_text(ARM)
    (tmp_path / "a.urdf").write_text(URDF)
    return tmp_path


@pytest.mark.parametrize("name", FAULTS)
def test_faults_say_what_where_and_what_was_expected(here: Path, name: str) -> None:
    """Each slip gives exactly its own faults, in file order; the catalogue is gantry/faults.yaml."""
    case = FAULTS[name]
    path = here / case["file"]
    text = path.read_text()
    for edit in case.get("edits", []):
        assert text.count(edit["out"]) == 1
        text = text.replace(edit["out"], edit["in"])
    path.write_text(case.get("whole", text))
    with pytest.raises(InputFaults) as caught:
        load_arm("arm.yaml")
    assert [str(fault) for fault in caught.value.faults] == case["faults"]


def test_what_a_fault_suggests_works(here: Path) -> None:
    """The drives and the lock line that faults print are taken as they stand."""
    (here / "arm.yaml").write_text("urdf: a.urdf\ntool: tip\n")
    for _ in range(2):
        with pytest.raises(InputFaults) as caught:
            load_arm("arm.yaml")
        expected = caught.value.faults[0].expected
        advice = expected.split("'")[1] if "lock" in expected else expected.split(":\n", 1)[1]
        with (here / "arm.yaml").open("a") as file:
            file.write(advice + "\n")
    assert load_arm("arm.yaml").joints == ("swing", "lift", "tilt", "wrist")


def test_faults_of_both_files_come_at_once(here: Path) -> None:
    """A fault in the URDF doesn't hide those of the arm file, nor the other way round."""
    (here / "arm.yaml").write_text(ARM.replace("gear_ratio: 100", "gear_ratio: -1"))
    (here / "a.urdf").write_text(URDF.replace('value="3"', 'value="three"'))
    with pytest.raises(InputFaults) as caught:
        load_arm("arm.yaml")
    assert [fault.file for fault in caught.value.faults] == ["arm.yaml", "a.urdf"]


def test_missing_files(here: Path) -> None:
    """A file that isn't there is a fault with its name, not an exception of the system."""
    for name, said in (
        ("none.yaml", "does not exist"),
        (".", "is a folder"),
        ("arm.yaml/x", "does not exist"),
    ):
        with pytest.raises(InputFaults, match=said):
            ArmFiles.read(name)
    Path("latin.yaml").write_bytes(b"urdf: a.urdf\ntool: \xe9\n")
    with pytest.raises(InputFaults, match=r"latin\.yaml:2: the arm file is not UTF-8 text"):
        ArmFiles.read(Path("latin.yaml"))


def test_urdf_is_named_as_the_user_named_the_arm_file(here: Path) -> None:
    """The URDF stands beside the arm file, and messages name it from where the user is."""
    Path("robots").mkdir()
    Path("robots/arm.yaml").write_text(ARM)
    Path("robots/a.urdf").write_text("<robot>")
    with pytest.raises(InputFaults, match=r"^robots/a\.urdf:1: not valid XML"):
        load_arm("robots/arm.yaml")


PIECES = [
    "",
    "0",
    "-",
    "1e9",
    "1e-9",
    "<",
    ">",
    '"',
    "/>",
    ": ",
    "{",
    "}",
    "\n",
    "&a",
    "*a",
    "\x00",
    "\ud800",
]


@settings(max_examples=150, deadline=None)
@given(st.data())
def test_damaged_files_give_faults_and_nothing_else(data: st.DataObject) -> None:
    """Whatever is cut out of or put into the two files, the reader ends in an arm or in faults."""
    texts = [ARM, URDF]
    for _ in range(data.draw(st.integers(1, 3))):
        which = data.draw(st.integers(0, 1))
        text = texts[which]
        start = data.draw(st.integers(0, len(text)))
        end = min(len(text), start + data.draw(st.integers(0, 12)))
        piece = data.draw(st.sampled_from(PIECES) | st.text(max_size=3))
        texts[which] = text[:start] + piece + text[end:]
    files = ArmFiles("arm.yaml", texts[0], "a.urdf", texts[1])
    faults: tuple[object, ...] = ()
    try:
        arm = files.arm()
    except InputFaults as error:
        faults = error.faults
    assert faults or np.isfinite(arm.parameters).all()
