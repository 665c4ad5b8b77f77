"""``rigbench trace``, as a user meets it: a stored run again, though its files are gone."""

from __future__ import annotations

import csv
import io
import json
import shutil
import sqlite3
import subprocess
import sys
from array import array
from itertools import chain
from pathlib import Path

import numpy as np
import pytest
from typer.testing import CliRunner, Result

from rigbench.cli import app

ARMS = Path(__file__).resolve().parents[1] / "robots_demo"

TRIAL = """\
rigbench: 1
title: A trial
arm: planar2/arm.yaml
model: believed/arm.yaml
rates: {control_hz: 500, physics_hz: 500}
motions:
  swing: {via_deg: [[0, 0], [20, -15]], leg_s: 0.3, rest_s: 0.1}
  planned: {file: planned.csv}
laws:
  joint pd: {law: independent-joint, natural_hz: 3}
  mine: {law: "mine.py:Mine"}
  bad: {law: "mine.py:Bad"}
mismatch: {link_mass_percent: 10}
conditions: {together: [1], cases: {loaded: {payload_kg: 0.4}}}
draws: 2
tolerance: {tool_peak_mm: 15}
"""

LAWS = """\
from rigbench.laws import Law


class Mine(Law):
    def start(self, setup):
        print("hello from a law")

    def torque(self, t, q, v, ref, held):
        return 60 * (ref.q - q) - 6 * v


class Bad(Law):
    def start(self, setup):
        pass

    def torque(self, t, q, v, ref, held):
        return no_such_name
"""

PLANNED = "t_s,shoulder,elbow\n0,0,0\n0.2,4,-3\n0.4,9,-9\n"


@pytest.fixture(scope="module")
def filled(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The store of a campaign done in a worker process; everything that it was made of is gone."""
    folder = tmp_path_factory.mktemp("trial")
    for name in ("planar2", "believed"):
        shutil.copytree(ARMS / "planar2", folder / name)
    for name, text in (("trial.yaml", TRIAL), ("mine.py", LAWS), ("planned.csv", PLANNED)):
        (folder / name).write_text(text, encoding="utf-8")
    command = [
        sys.executable,
        "-m",
        "rigbench",
        "run",
        "trial.yaml",
        "--jobs",
        "1",
        "--store",
        "kept/trial.sqlite",
    ]
    done = subprocess.run(command, cwd=folder, capture_output=True, text=True, timeout=120, check=False)
    assert done.returncode == 0, done.stderr
    store = folder / "kept" / "trial.sqlite"
    shutil.move(store, folder.parent / "trial.sqlite")
    shutil.rmtree(folder)
    return folder.parent / "trial.sqlite"


@pytest.fixture
def store(tmp_path: Path, filled: Path, monkeypatch: pytest.MonkeyPatch) -> str:
    monkeypatch.chdir(tmp_path)
    shutil.copy(filled, tmp_path / "trial.sqlite")
    return "trial.sqlite"


def call(*arguments: str) -> Result:
    return CliRunner().invoke(app, list(arguments))


def rows(store: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(call("export", store).stdout)))


def test_every_run_of_the_store_is_replayed_bit_for_bit(store: str) -> None:
    """From the store alone: both motions, a model of its own, a user's law, draws and a case."""
    every = {(row["law"], row["motion"], row["condition"]): row for row in rows(store)}
    assert len(every) == 18
    for row in every.values():
        result = call("trace", store, row["key"][:10], "--json", "-o", "out/it")
        if row["law"] == "bad":
            assert result.exit_code == 2
            continue
        document = json.loads(result.stdout)
        assert document["identical"] is True, document["differences"]
        assert (document["run"]["law"], document["run"]["motion"]) == (row["law"], row["motion"])
        assert document["scores"]["tool_peak_mm"]["stored"] == float(row["tool_peak_mm"])
        assert document["scores"]["tool_peak_mm"]["replayed"] == float(row["tool_peak_mm"])


def test_the_worst_run_in_words_and_files(store: str) -> None:
    """It is the one that export shows; data, picture and animation are beside the store."""
    result = call("trace", store, "--worst", "mine", "all at 1", "--animate", "it.gif")
    assert result.exit_code == 0, result.stderr
    found = [row for row in rows(store) if (row["law"], row["condition"]) == ("mine", "all at 1")]
    worst = max(found, key=lambda row: float(row["tool_peak_mm"]))
    lines = result.stdout.splitlines()
    assert (
        lines[0]
        == f"'mine' on '{worst['motion']}' under 'all at 1', draw {worst['draw']}; run {worst['key']}"
    )
    assert lines[2] == "replayed bit for bit: outcome and scores are the stored ones"
    base = f"trial-trace-{worst['key'][:8]}"
    assert lines[3:] == [f"data: {base}.npz", f"picture: {base}.png", "animation: it.gif"]
    assert "hello from a law" in result.stderr
    assert "not a safety case" in result.stderr
    with np.load(f"{base}.npz") as data:
        distance = np.linalg.norm(data["tool_m"] - data["tool_ref_m"], axis=1)
    assert 1e3 * distance.max() == pytest.approx(float(worst["tool_peak_mm"]), rel=1e-12)
    assert Path(f"{base}.png").read_bytes().startswith(b"\x89PNG")
    assert Path("it.gif").read_bytes().startswith(b"GIF89a")
    swing = call("trace", store, "--worst", "mine", "nominal", "--motion", "planned", "--json")
    assert json.loads(swing.stdout)["run"]["motion"] == "planned"


def test_a_run_that_differs_says_by_how_much_and_why(store: str) -> None:
    """In words and as JSON, with exit code 0: it is an answer."""
    row = rows(store)[0]
    with sqlite3.connect(store) as connection:
        names, scores = connection.execute(
            "SELECT names, scores FROM runs JOIN keys USING (id) JOIN layouts ON layouts.id = layout WHERE key = ?",
            (row["key"],),
        ).fetchone()
        values = array("d", scores)
        for name, value in (("tool_peak_mm", 1.0), ("overshoot_mm", float("inf"))):
            values[list(chain(*json.loads(names))).index(name)] = value
        connection.execute(
            "UPDATE runs SET scores = ? WHERE id = (SELECT id FROM keys WHERE key = ?)",
            (values.tobytes(), row["key"]),
        )
        connection.execute("UPDATE hosts SET cpu = 'an abacus'")
    connection.close()
    said = call("trace", store, row["key"]).stdout
    assert "NOT the stored run:" in said
    off = float(row["tool_peak_mm"]) - 1.0
    assert f"tool_peak_mm: stored 1.0, replayed {row['tool_peak_mm']} (off by {off:.2g})" in said
    assert "why: it was done on another type of CPU (an abacus" in said
    document = json.loads(call("trace", store, row["key"], "--json").stdout)
    assert document["identical"] is False
    assert {one["name"] for one in document["differences"]} == {"tool_peak_mm", "overshoot_mm"}
    assert document["scores"]["overshoot_mm"]["stored"] is None
    assert "abacus" in document["reasons"][0]


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ((), "neither RUN nor --worst is given"),
        (("ab", "--worst", "mine", "nominal"), "both RUN and --worst are given"),
        (("ab", "--motion", "swing"), "narrows --worst"),
        (("xyz",), "no hexadecimal number"),
        (("--worst", "mine", "nomnal"), "did you mean 'nominal'?"),
        (("--worst", "mine"), "--worst"),
        (("--worst", "bad", "nominal"), "return no_such_name"),
        (("--worst", "mine", "nominal", "--animate", "a.mp4"), "a .gif file"),
        (("--worst", "mine", "nominal", "--animate", "trial.sqlite"), "a .gif file"),
    ],
)
def test_what_is_at_fault_is_said(store: str, arguments: tuple[str, ...], words: str) -> None:
    """Exit code 2, nothing on stdout, no traceback of ours, no file."""
    before = sorted(Path().iterdir())
    result = call("trace", store, *arguments)
    assert result.exit_code == 2
    assert words in result.stderr
    assert "rigbench/" not in result.stderr.replace("/tmp/", "")
    assert result.stdout == ""
    assert sorted(Path().iterdir()) == before


def test_the_store_is_never_written_over(store: str) -> None:
    """A store that has the data file's name: refused, left as it was."""
    shutil.move(store, "trial.npz")
    before = Path("trial.npz").read_bytes()
    result = call("trace", "trial.npz", "--worst", "mine", "nominal", "-o", "trial")
    assert result.exit_code == 2
    assert "is the store itself" in result.stderr
    assert Path("trial.npz").read_bytes() == before


def test_a_name_with_a_suffix_names_all_files(store: str) -> None:
    """-o x.png and -o x mean the same; another point in the name stays."""
    for given in ("out/a.png", "out/a.npz", "out/b.1"):
        assert call("trace", store, "--worst", "mine", "nominal", "-o", given).exit_code == 0
    assert sorted(path.name for path in Path("out").iterdir()) == ["a.npz", "a.png", "b.1.npz", "b.1.png"]


def test_a_law_that_came_to_nothing_shows_its_stored_traceback(store: str) -> None:
    """As JSON too: one fault."""
    key = next(row["key"] for row in rows(store) if row["law"] == "bad")
    (fault,) = json.loads(call("trace", store, key, "--json").stdout)["faults"]
    assert "nothing to replay" in fault["problem"]
    assert "return no_such_name" in fault["problem"]


def test_help_has_an_example() -> None:
    """As every command's."""
    assert "Example: rigbench trace" in " ".join(call("trace", "--help").stdout.split())
