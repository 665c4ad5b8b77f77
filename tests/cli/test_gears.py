"""``rigbench gears``: results, pictures, and what it refuses."""

from __future__ import annotations

import json
import re
from collections.abc import Callable
from pathlib import Path

import pytest
from typer.testing import Result

PLANAR = str(Path(__file__).resolve().parents[2] / "robots_demo" / "planar2" / "arm.yaml")


def test_a_table_and_a_picture(
    call: Callable[..., Result], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The joint that is named alone, ratios in rising order and each once; the notes go to stderr."""
    monkeypatch.setenv("COLUMNS", "100")
    picture = tmp_path / "made" / "gears.svg"
    done = call(
        "gears", PLANAR, "--ratios", "10, 0.5,10,1", "--joint", "elbow", "--leg", "1", "-o", str(picture)
    )
    assert done.exit_code == 0, done.stderr
    assert "elbow (declared ratio 1): links of 0.11 kg m^2 about it, no rotor inertia" in done.stdout
    assert "shoulder" not in done.stdout
    assert "one quintic leg of 1 s" in done.stdout
    rows = [line.split()[0] for line in done.stdout.splitlines() if line.startswith("   ") and "mm" in line]
    assert rows == ["0.5", "1", "10"]
    assert "note: no limit on the motor's side is declared for elbow" in done.stderr
    assert f"picture: {picture}" in done.stderr
    assert picture.read_text("utf-8").startswith("<?xml")


def test_the_readmes_table_is_what_is_printed(
    call: Callable[..., Result], monkeypatch: pytest.MonkeyPatch
) -> None:
    """The command that the README gives prints the lines that the README shows, one after the other."""
    root = Path(__file__).resolve().parents[2]
    readme = (root / "README.md").read_text("utf-8")
    shown = re.search(
        r"^rigbench (gears .*) -o gears.png\n```\n\n```text\n(.*?)^```$", readme, re.MULTILINE | re.DOTALL
    )
    assert shown is not None
    monkeypatch.setenv("COLUMNS", "100")
    monkeypatch.chdir(root)
    assert shown[2] in call(*shown[1].split()).stdout


def test_json_is_one_document(call: Callable[..., Result]) -> None:
    """Every joint of the arm, in its order, with the notes."""
    done = call("gears", PLANAR, "--ratios", "1,100", "--leg", "0.5", "--json")
    document = json.loads(done.stdout)
    assert [joint["joint"] for joint in document["joints"]] == ["shoulder", "elbow"]
    assert document["ratios"] == [1.0, 100.0]
    assert len(document["notes"]) == 2
    assert document["picture"] is None


def test_nonsense_is_told_all_at_once(call: Callable[..., Result]) -> None:
    """Ratios, joints and the leg's time that can't be, each with what is expected; exit code 2, nothing run."""
    wrong = call(
        "gears",
        PLANAR,
        "--ratios",
        "1,x,0,-2,1e9,,nan,inf",
        "--joint",
        "elbw",
        "--joint",
        "wrist",
        "--leg",
        "0",
    )
    assert wrong.exit_code == 2
    for given in ("x", "0", "-2", "1e9", "", "nan", "inf"):
        assert f"--ratios: '{given}' is no gear ratio; expected a number from 0.001 to 1e+06" in wrong.stderr
    assert "--joint: the arm has no joint 'elbw' (did you mean 'elbow'?)" in wrong.stderr
    assert "--joint: the arm has no joint 'wrist'; expected one of shoulder, elbow" in wrong.stderr
    assert "--leg: 0 s; expected 0.01 to 60 s" in wrong.stderr
    assert "10 faults" in wrong.stderr
    many = call("gears", PLANAR, "--ratios", ",".join(map(str, range(1, 43))), "--json")
    assert many.exit_code == 2
    assert json.loads(many.stdout)["faults"][0]["expected"] == "at most 40"


def test_wrong_files_are_told(call: Callable[..., Result], tmp_path: Path) -> None:
    """An arm that isn't there, and a picture of no known format, before anything is run."""
    assert call("gears", str(tmp_path / "gone.yaml")).exit_code == 2
    wrong = call("gears", PLANAR, "-o", "gears.gif")
    assert wrong.exit_code == 2
    assert "gears.gif: -o: '.gif' is no format of a picture" in wrong.stderr
