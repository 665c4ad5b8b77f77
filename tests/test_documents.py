"""The documents tell the truth about themselves: commands, files, and the picture of the words."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest
import yaml

ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text("utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text("utf-8")


def blocks(text: str, language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```$", text, re.MULTILINE | re.DOTALL)


def test_ci_runs_the_readmes_own_commands():
    """The README's two shell lines stand in .ci/run word for word."""
    script = (ROOT / ".ci" / "run").read_text("utf-8")
    first, second = (block.strip() for block in blocks(README, "sh"))
    assert first in script
    assert second in script


def test_no_placeholder_is_left():
    """What the README shows was printed, not promised."""
    assert "@@" not in README + DEVELOPERS
    assert re.search(r"keeps|misses", blocks(README, "text")[0])


def test_every_command_has_its_line_and_every_line_its_command():
    """The README's table of commands is the list that --help prints."""
    listed = set(re.findall(r"^\| `rigbench (\w+)", README, re.MULTILINE))
    done = subprocess.run(
        [sys.executable, "-m", "rigbench", "--help"], capture_output=True, text=True, check=True
    )
    commands = done.stdout.split("Commands:")[1].split("Exit codes")[0]
    assert listed == set(re.findall(r"^  (\w+) ", commands, re.MULTILINE))


def test_every_experiment_is_listed():
    """Each file of experiments/ stands in the README's table, and no other."""
    listed = set(re.findall(r"^\| `experiments/([\w-]+\.yaml)`", README, re.MULTILINE))
    assert listed == {path.name for path in (ROOT / "experiments").glob("*.yaml")}


@pytest.mark.parametrize("document", ["README.md", "DEVELOPERS.md"])
def test_linked_files_exist(document):
    """Relative links and paths of the repository lead somewhere."""
    text = (ROOT / document).read_text("utf-8")
    links = re.findall(r"\]\(([^)#:]+)\)", text)
    paths = re.findall(r"`((?:rigbench|experiments|robots_demo|tests)/[\w./-]+)`", text)
    for path in links + paths:
        assert (ROOT / path).exists(), path


def test_yaml_of_the_readme_parses():
    """Every YAML block is YAML."""
    for block in blocks(README, "yaml"):
        assert isinstance(yaml.safe_load(block), dict)
