"""Laws of the user's that go wrong, laws and schemas that are listed, and the demo."""

from __future__ import annotations

import json
import shutil
import time
from collections.abc import Callable
from importlib import import_module
from pathlib import Path

import pytest
from typer.testing import Result

from rigbench.experiment import load_experiment
from rigbench.experiment.identification import load_identification

ROOT = Path(__file__).resolve().parents[2]

BAD_LAW = """\
from rigbench.laws import Law


class Bad(Law):
    def start(self, setup):
        pass

    def torque(self, t, q, v, ref, held):
        return no_such_name
"""


def test_a_law_that_hangs_does_not_hang_check(
    call: Callable[..., Result], trial_text: str, trial: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Its run is given up after a limit of time, and noted at its line."""
    from rigbench.cli import estimate

    monkeypatch.setattr(estimate, "LIMIT_S", 2.0)
    Path("bad.py").write_text(BAD_LAW.replace("return no_such_name", "while True: pass"), encoding="utf-8")
    text = trial_text.replace(
        "computed torque: {law: computed-torque, natural_hz: 3}", "stuck: {law: 'bad.py:Bad'}"
    )
    trial.write_text(text, encoding="utf-8")
    begin = time.monotonic()
    checked = call("check", "trial.yaml")
    assert time.monotonic() - begin < 60  # the workers have to start first
    assert checked.exit_code == 0
    assert (
        "trial.yaml:9: laws.stuck: does not finish motion swing even in nominal (timed-out)" in checked.stderr
    )
    assert "can't be told" in checked.stdout


def test_a_law_that_raises_shows_its_own_traceback(
    call: Callable[..., Result], run_here: Callable[..., Result], trial_text: str, trial: Path
) -> None:
    """check refuses it (2) at the law's line; run stores the other law's runs and shows the traceback once."""
    Path("bad.py").write_text(BAD_LAW, encoding="utf-8")
    text = trial_text.replace(
        "computed torque: {law: computed-torque, natural_hz: 3}", "mine: {law: 'bad.py:Bad'}"
    )
    trial.write_text(text, encoding="utf-8")
    checked = call("check", "trial.yaml")
    assert checked.exit_code == 2
    assert "trial.yaml:9: laws.mine: raised NameError" in checked.stderr
    assert "return no_such_name" in checked.stderr
    ran = run_here("trial.yaml", "--json")
    assert ran.exit_code == 0
    assert json.loads(ran.stdout)["runs"] == {"planned": 8, "done": 4, "failed": 4}
    assert ran.stderr.count("return no_such_name") == 1
    assert "4 runs of 'mine' came to nothing (law-error)" in ran.stderr
    anew = "mine: 4 runs ended with its error: 'rigbench run trial.yaml --again mine' does them anew"
    assert anew in ran.stderr
    again = run_here("trial.yaml")
    assert "all 8 runs are stored" in again.stderr
    assert anew in again.stderr


def test_a_law_can_be_run_anew(run_here: Callable[..., Result], trial: Path) -> None:
    """Its runs alone, with the same result; a name that isn't there is a fault with the nearest one."""
    first = run_here("trial.yaml")
    again = run_here("trial.yaml", "--again", "joint pd")
    assert again.exit_code == 0
    assert "4 of 8 runs to do" in again.stderr
    assert again.stdout == first.stdout
    both = run_here("trial.yaml", "--again", "joint pd", "--again", "computed torque")
    assert "8 of 8 runs to do" in both.stderr
    wrong = run_here("trial.yaml", "--again", "joint-pd", "--again", "computed torque")
    assert wrong.exit_code == 2
    assert "trial.yaml: --again: there is no law 'joint-pd'" in wrong.stderr
    assert "(did you mean 'joint pd'?)" in wrong.stderr


def test_a_law_that_does_not_finish_is_noted(
    call: Callable[..., Result], trial_text: str, trial: Path
) -> None:
    """A law that pushes the arm onto a joint's limit: check says so and then gives no time."""
    Path("bad.py").write_text(BAD_LAW.replace("no_such_name", "0 * q + [90, 30]"), encoding="utf-8")
    text = trial_text.replace(
        "computed torque: {law: computed-torque, natural_hz: 3}", "push: {law: 'bad.py:Bad'}"
    )
    trial.write_text(text.replace("leg_s: 0.3", "leg_s: 3"), encoding="utf-8")
    checked = call("check", "trial.yaml")
    assert checked.exit_code == 0
    noted = "note: trial.yaml:9: laws.push: does not finish motion swing even in nominal (hit-stop)"
    assert noted in checked.stderr
    assert "note: trial.yaml:9: laws.push.law: Bad has no docstring" in checked.stderr
    assert "can't be told" in checked.stdout


def test_laws_lists_every_registered_law(call: Callable[..., Result]) -> None:
    """One line a law with its package; with a name its equation and its options with unit and default."""
    listed = call("laws")
    assert listed.exit_code == 0
    names = [line.split()[0] for line in listed.stdout.splitlines()]
    assert {"independent-joint", "gravity-compensated", "torque-feedforward", "computed-torque"} <= set(names)
    sheet = call("laws", "computed-torque").stdout
    assert "tau = (M(q) + Jr)" in sheet
    assert "natural_hz: number [Hz], above 0, default 5.0" in sheet
    assert "friction: none, viscous, full, default full" in sheet
    document = json.loads(call("laws", "--json").stdout)
    assert [law["name"] for law in document["laws"]] == names
    assert document["broken"] == []


def test_a_law_without_a_docstring_is_listed_with_a_note(
    call: Callable[..., Result], monkeypatch: pytest.MonkeyPatch
) -> None:
    """It is listed and described; that it has no words of its own is said beside the result."""
    from rigbench.laws import Law, option
    from rigbench.laws.form import notes_on
    from rigbench.laws.registry import Registered, Registry

    class Bare(Law):
        gain: float = option(1.0, "N m/rad", "of every joint", at_least=0.5)

    bare = Registered("bare", Bare, "some-package", "2.1", notes_on(Bare))
    monkeypatch.setattr(
        import_module("rigbench.cli.laws"), "registered", lambda: Registry({"bare": bare}, ())
    )
    listed = call("laws")
    assert listed.stdout == "bare    (some-package 2.1)\n"
    assert "note: bare (some-package): Bare has no docstring" in listed.stderr
    named = call("laws", "bare")
    assert "gain: number [N m/rad], at least 0.5, default 1.0" in named.stdout
    assert "note: Bare has no docstring" in named.stderr
    (law,) = json.loads(call("laws", "--json").stdout)["laws"]
    assert (law["version"], law["doc"], len(law["notes"])) == ("2.1", "", 1)


def test_schema_prints_what_an_editor_reads(call: Callable[..., Result]) -> None:
    """The experiment file's schema, or the arm file's; anything else is a fault with the nearest name."""
    experiment = json.loads(call("schema").stdout)
    assert experiment == json.loads(call("schema", "experiment").stdout)
    assert {"vary", "laws", "tolerance"} <= set(experiment["properties"])
    assert "gear_ratio" in call("schema", "arm").stdout
    wrong = call("schema", "rm")
    assert wrong.exit_code == 2
    assert "did you mean 'arm'?" in wrong.stderr


def test_the_demo_can_be_copied_and_run(
    call: Callable[..., Result], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Arms and experiments in a new folder, no pictures; what it says to do next works there."""
    monkeypatch.chdir(tmp_path)
    copied = call("demo", "my demo")
    assert copied.exit_code == 0
    files = {path.relative_to("my demo").as_posix() for path in Path("my demo").rglob("*") if path.is_file()}
    assert {
        "experiments/first-look.yaml",
        "robots_demo/tray6/arm.yaml",
        "robots_demo/tray6/tray6.urdf",
    } <= files
    assert not any(file.endswith(".png") for file in files)
    assert "cd 'my demo'\n  rigbench check experiments/first-look.yaml" in copied.stdout
    listed = json.loads(call("demo", "other", "--json").stdout)
    assert set(listed["files"]) == files
    monkeypatch.chdir(tmp_path / "my demo")
    assert call("check", "experiments/first-look.yaml").exit_code == 0


def test_the_copied_demo_is_whole(
    call: Callable[..., Result], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Each copied file finds all files that it names among the copies; copied here, there is no folder to go to."""
    monkeypatch.chdir(tmp_path)
    copied = call("demo", ".")
    assert "experiments copied here. Try them:\n  rigbench check" in copied.stdout
    for path in sorted(Path("experiments").glob("*.yaml")):
        (load_identification if path.stem.startswith("practise") else load_experiment)(path)


def test_the_demo_overwrites_nothing(
    call: Callable[..., Result], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Every file in the way is named, and nothing is copied; a file in place of the folder is in the way too."""
    monkeypatch.chdir(tmp_path)
    mine = Path("here/robots_demo/tray6/arm.yaml")
    mine.parent.mkdir(parents=True)
    mine.write_text("mine", encoding="utf-8")
    refused = call("demo", "here", "--json")
    assert refused.exit_code == 2
    (fault,) = json.loads(refused.stdout)["faults"]
    assert (fault["file"], fault["problem"]) == (str(mine), "exists already")
    assert mine.read_text("utf-8") == "mine"
    assert [path.name for path in Path("here").rglob("*.yaml")] == ["arm.yaml"]
    Path("file").write_text("", encoding="utf-8")
    assert call("demo", "file").exit_code == 2


def test_a_demo_that_can_not_be_written(
    call: Callable[..., Result], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The disk's refusal is exit code 5, said plainly."""
    monkeypatch.chdir(tmp_path)

    def refuse(*_: object) -> None:
        raise OSError(28, "No space left on device", "there/arm.yaml")

    monkeypatch.setattr(shutil, "copyfile", refuse)
    refused = call("demo", "there")
    assert refused.exit_code == 5
    assert "there/arm.yaml: can't be written: No space left on device" in refused.stderr


def test_broken_plugins_are_listed_as_such(
    call: Callable[..., Result], monkeypatch: pytest.MonkeyPatch
) -> None:
    """A law that can't be loaded is named with its reason and stops no other."""
    laws = import_module("rigbench.cli.laws")
    from rigbench.laws.registry import Registry, registered

    registry = Registry(registered().laws, (("wobbly", "ImportError: no module named 'wobble'"),))
    monkeypatch.setattr(laws, "registered", lambda: registry)
    assert "wobbly is registered but can't be used: ImportError" in call("laws").stderr
    named = call("laws", "wobbly")
    assert named.exit_code == 2
    assert "no module named 'wobble'" in named.stderr
    assert json.loads(call("laws", "--json").stdout)["broken"][0]["name"] == "wobbly"
