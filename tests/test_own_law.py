"""The way to a law of one's own, as README and DEVELOPERS show it: from an empty file to a package."""

from __future__ import annotations

import csv
import importlib.util
import io
import os
import re
import shlex
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from rigbench.testing import check_law

ROOT = Path(__file__).resolve().parents[1]
EXAMPLE = ROOT / "tests" / "plugin_example"
BLOCK = re.compile(r"^```(\w+)\n(.*?)^```$", re.MULTILINE | re.DOTALL)

EXPERIMENT = """
rigbench: 1
arm: {root}/robots_demo/planar2/arm.yaml
rates: {{control_hz: 500, physics_hz: 500}}
motions:
  swing: {{via_deg: [[0, 0], [20, -15]], leg_s: 0.3, rest_s: 0.1}}
laws:
  steady: {{law: steady-gravity, natural_hz: 4, model_hz: 100}}
  computed torque: {{law: computed-torque}}
mismatch: {{link_mass_percent: 10}}
conditions: {{together: [1]}}
draws: 2
tolerance: {{tool_peak_mm: 15}}
"""


class Shell:
    """Gives commands as a user would, in a folder, with packages of its own that it can install without a network."""

    def __init__(self, folder: Path) -> None:
        self.folder, self.packages = folder, folder / "packages"

    def __call__(self, command: str) -> str:
        """Do a command; return what it printed to stdout."""
        program, *arguments = shlex.split(command)
        if program == "pip":
            offline = [
                "--no-index",
                "--no-deps",
                "--no-build-isolation",
                "--quiet",
                "--target",
                str(self.packages),
            ]
            arguments += [*offline, "--disable-pip-version-check"]
        line = (
            [program, *arguments]
            if program in ("mv", "mkdir")
            else [sys.executable, "-m", program, *arguments]
        )
        done = subprocess.run(
            line, cwd=self.folder, env=os.environ | {"PYTHONPATH": str(self.packages), "COLUMNS": "100"}, capture_output=True,
            text=True, timeout=180, check=False,
        )  # fmt: skip
        assert done.returncode == 0, f"{command}\n{done.stdout}{done.stderr}"
        return done.stdout


def section(document: str, head: str) -> list[tuple[str, str]]:
    """Languages and texts of the blocks beneath a heading."""
    text = (ROOT / document).read_text("utf-8").split(f"\n{head}\n")[1]
    return BLOCK.findall(re.split(r"^#{2,3} ", text, maxsplit=1, flags=re.MULTILINE)[0])


def test_the_readmes_way_to_a_law(tmp_path):
    """Each file and each command of README's section, in its order, leads where the README says it does.

    The rows printed for the matrix are the README's, verdicts and medians; pip alone is kept from the network.
    """
    (tmp_path / "robots_demo").symlink_to(ROOT / "robots_demo")
    shell, printed, said = Shell(tmp_path), {}, ""
    for language, text in section("README.md", "### Your own law"):
        named = re.match(r"# (\S+)\n", text)
        if language == "console":
            for command in text.splitlines():
                printed[command] = shell(command)
        elif language == "text":
            said = text
        elif named:
            path = tmp_path / named[1]
            path.parent.mkdir(exist_ok=True)
            path.write_text(text, encoding="utf-8")
    assert "plan: 1 sheet x 3 laws" in printed["rigbench check my-law.yaml"]
    matrix = printed["rigbench run my-law.yaml"]
    rows = [line.rstrip() for line in said.splitlines() if line.strip()]
    assert len(rows) == 7
    for row in rows:
        assert row in [line.rstrip() for line in matrix.splitlines()]
    assert "1 passed" in printed["pytest test_my_law.py"]
    assert printed["rigbench laws spring"].startswith("spring  (my-law 0.1.0)\n\ntau = J (a_ref")


@pytest.fixture(scope="module")
def installed(tmp_path_factory):
    """A shell in which the example of a package of laws is installed."""
    folder = tmp_path_factory.mktemp("installed")
    shutil.copytree(EXAMPLE, folder / "bakery-laws")
    shell = Shell(folder)
    shell("pip install ./bakery-laws")
    return shell


def test_the_example_package_is_listed(installed):
    """Its law is listed beside the built-in ones, and described, with the package's name and version."""
    listed = installed("rigbench laws")
    assert re.search(r"^steady-gravity +tau = J \(w\^2", listed, re.MULTILINE)
    assert listed.count("(bakery-laws 0.3.1)") == 1
    assert listed.count("(rigbench ") >= 4
    sheet = installed("rigbench laws steady-gravity")
    assert "natural_hz: number [Hz], above 0, default 6.0" in sheet


def test_the_example_package_passes_its_own_tests(installed):
    """Its test is one call of check_law."""
    assert "1 passed" in installed("pytest bakery-laws/tests -p no:cacheprovider")


def test_the_example_package_runs_in_a_campaign(installed):
    """In workers, beside a built-in law; name and version of the package stand with each run of its law alone."""
    (installed.folder / "job.yaml").write_text(EXPERIMENT.format(root=ROOT), encoding="utf-8")
    matrix = installed("rigbench run job.yaml --jobs 1")
    assert re.search(r"^steady +\S", matrix, re.MULTILINE)
    rows = list(csv.DictReader(io.StringIO(installed("rigbench export results/job.sqlite"))))
    assert {(row["law"], row["version.bakery-laws"]) for row in rows} == {
        ("steady", "0.3.1"),
        ("computed torque", ""),
    }
    assert {row["outcome"] for row in rows} == {"finished"}


def test_the_law_that_the_developers_read_is_the_example():
    """DEVELOPERS prints the example's file, word for word, and it keeps all rules."""
    path = EXAMPLE / "bakery_laws" / "steady_gravity.py"
    blocks = [text for language, text in section("DEVELOPERS.md", "## Add a law") if language == "python"]
    assert blocks == [path.read_text("utf-8")]
    spec = importlib.util.spec_from_file_location("steady_gravity", path)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    assert check_law(module.SteadyGravity).notes == ()
