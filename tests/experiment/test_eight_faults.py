"""Eight faults in one file are told in one go, each where it stands and with the nearest valid name."""

from __future__ import annotations

import json
import re
import subprocess
import sys
from pathlib import Path

BAD = """\
rigbench: 1
titel: Eight faults
arm: arm.yaml
rates: {control_hz: -1000}
motions:
  swing: {via_deg: [[0, 0], [30, 40, 50], [0, 0]], leg_s: 0.4}
  slow: {via_deg: [[0, 0], [30, 40]], leg_s: slow}
laws:
  joint pd: {law: independant-joint, natural_hz: 5}
  computed torque: {law: computed-torque, natual_hz: 5}
mismatch: {coulom_percent: 20}
draws: 0
"""

EXPECTED = {
    (2, "titel", "title"): "a misspelt key",
    (4, "rates.control_hz", None): "a negative rate",
    (6, "motions.swing.via_deg[1]", None): "a list of the wrong length",
    (7, "motions.slow.leg_s", None): "a text for a number",
    (9, "laws.joint pd.law", "independent-joint"): "a misspelt law",
    (10, "laws.computed torque.natual_hz", "natural_hz"): "a misspelt option",
    (11, "mismatch.coulom_percent", "coulomb_percent"): "a misspelt source",
    (12, "draws", None): "zero draws",
}


def check(folder: Path, *options: str) -> subprocess.CompletedProcess[str]:
    (folder / "bad.yaml").write_text(BAD, encoding="utf-8")
    command = [sys.executable, "-m", "rigbench", "check", "bad.yaml", *options]
    return subprocess.run(command, cwd=folder, capture_output=True, text=True, timeout=120, check=False)


def test_all_eight_are_printed_at_once(folder: Path) -> None:
    """Each of the eight has a line 'file:line: key: ...' with the nearest name where one exists; exit code 2."""
    done = check(folder)
    assert done.returncode == 2
    assert done.stdout == ""
    assert "Traceback" not in done.stderr
    found = set()
    for line in done.stderr.splitlines():
        place = re.match(r"bad\.yaml:(\d+): (.+?): ", line)
        if place:
            near = re.search(r"did you mean '(.*)'\?", line)
            found.add((int(place[1]), place[2], near and near[1]))
    assert found == set(EXPECTED)


def test_json_holds_the_same_eight(folder: Path) -> None:
    """--json prints one document with the same faults."""
    done = check(folder, "--json")
    assert done.returncode == 2
    found = {(fault["line"], fault["key"], fault["near"]) for fault in json.loads(done.stdout)["faults"]}
    assert found == set(EXPECTED)
