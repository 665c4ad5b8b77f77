"""Real runs of planar2: gains found before the matrix, worst machines after it, and what is told of them."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas
import pytest
import yaml
from typer.testing import Result

import rigbench
from rigbench.campaign.executor import InProcess
from rigbench.campaign.plan import Entry
from rigbench.campaign.store import Store
from rigbench.campaign.work import do
from rigbench.experiment import load_experiment
from rigbench.scores.row import Row

Call = Callable[..., Result]
STORE = "results/trial.sqlite"

TUNE = """\
tune: {runs: 32, score: tool_rms_mm, most: {torque_peak_percent: 60, chatter: 0.02}}
"""
WORST = """\
worst_case: {law: computed torque, levels: [0.5, 2], runs: 90}
"""
NEEDS = """\
required_share: 0.5
needs: {law: computed torque, runs: 130, level: 2}
"""


@pytest.fixture
def tuned(trial: Path, trial_text: str, run_here: Call) -> Result:
    """The trial with a search for gains, done."""
    trial.write_text(trial_text + TUNE)
    return run_here("trial.yaml")


@pytest.fixture
def worst(trial: Path, trial_text: str, run_here: Call) -> Result:
    """The trial with a tight tolerance and a search for worst cases, done."""
    trial.write_text(trial_text.replace("tool_peak_mm: 15", "tool_peak_mm: 3") + WORST)
    return run_here("trial.yaml")


def test_tuned_gains_do_at_least_as_well_as_the_declared(tuned: Result, trial_text: str, call: Call) -> None:
    """On the nominal machine, within the limits stated, and the YAML that is printed has them."""
    assert tuned.exit_code == 0, tuned.output
    document = json.loads(call("gains", STORE, "--json").stdout)
    assert document["finished"]
    assert [law["law"] for law in document["laws"]] == ["joint pd", "computed torque"]
    printed = call("gains", STORE)
    assert printed.exit_code == 0
    laws = yaml.safe_load(printed.stdout)["laws"]
    declared, found = Path("declared.yaml"), Path("found.yaml")
    declared.write_text(trial_text)
    found.write_text(yaml.safe_dump(yaml.safe_load(trial_text) | {"laws": laws}, sort_keys=False))
    before, after = (nominal_rows(path) for path in (declared, found))
    for law in document["laws"]:
        name = law["law"]
        assert law["within_limits"]
        assert law["runs"] <= 32
        assert laws[name] | law["gains"] == laws[name]
        assert after[name].scores["tool_rms_mm"] == law["score"]
        assert before[name].scores["tool_rms_mm"] == law["declared"]["score"]
        assert law["score"] <= law["declared"]["score"]
        assert after[name].scores["torque_peak_percent"] <= 60
        assert after[name].scores["chatter"] <= 0.02
    assert any(law["score"] < 0.5 * law["declared"]["score"] for law in document["laws"])


def nominal_rows(file: Path) -> dict[str, Row]:
    """Do the nominal run of each law here."""
    entries = [entry for entry in load_experiment(file).plan().entries if entry.condition == "nominal"]
    return {entry.law: row_of(entry) for entry in entries}


def row_of(entry: Entry) -> Row:
    (outcome,) = InProcess(do).run_all([entry])
    place = entry.sheet, entry.law, entry.motion, entry.condition, entry.level, entry.draw
    return Row(*place, outcome.outcome, outcome.scores)


def test_the_matrix_has_the_gains_that_were_found(tuned: Result, call: Call, run_here: Call) -> None:
    """They are told beneath it, its runs have them, and the next campaign finds them without a run."""
    assert "Gains found by tune on the nominal machine: joint pd natural_hz" in " ".join(tuned.stdout.split())
    gains = {law["law"]: law["gains"] for law in json.loads(call("gains", STORE, "--json").stdout)["laws"]}
    with Store.open_for_reading(STORE) as store:
        records = list(store.records())
        held = {record.key: store.kept(record.key).run for record in records}
        assert len(records) == 8
        for record in records:
            options = dict(held[record.key].law.options)
            assert {name: options[name] for name in ("natural_hz", "damping")} == gains[record.row.law]
    with Store.open_for_reading(STORE) as store:
        before = store.outcomes()
    again = run_here("trial.yaml")
    assert again.exit_code == 0
    assert "gains first" not in again.stderr
    assert "all 8 runs are stored" in again.stderr
    with Store.open_for_reading(STORE) as store:
        assert store.outcomes() == before
    status = call("status", STORE)
    assert "Gains found by tune" in status.stdout


def test_check_tells_what_tuning_takes(tuned: Result, trial: Path, trial_text: str, call: Call) -> None:
    """Its budget, whether it is done, and how many of the runs with the gains found are stored."""
    said = call("check", "trial.yaml").stdout
    assert (
        "tune: at most 64 runs, 32 for each law in each sheet, before those of the plan; done, with " in said
    )
    assert "stored: 8 of them" in said
    trial.write_text(trial_text + TUNE.replace("32", "40") + WORST)
    said = call("check", "trial.yaml").stdout
    assert "tune: at most 80 runs, 40 for each law in each sheet, before those of the plan; " in said
    assert "worst_case: at most 90 runs more, after those of the plan" in said
    assert "in all: at most 178 runs" in said
    document = json.loads(call("check", "trial.yaml", "--json").stdout)
    tune, worst_case = document["studies"]
    assert (tune["name"], tune["before_the_plan"], tune["most_runs"], tune["done"]) == (
        "tune",
        True,
        80,
        False,
    )
    assert 0 < tune["stored"] <= 64  # its beginning is that of the smaller search
    assert (worst_case["stored"], worst_case["done"]) == (0, False)
    assert 0 < tune["seconds"] < worst_case["seconds"] < document["estimate"]["seconds"]


@pytest.mark.parametrize("more", [WORST, TUNE, "find_level: {most: 2}\n", NEEDS])
def test_check_says_how_large_the_store_with_studies_will_be(
    trial: Path, trial_text: str, call: Call, run_here: Call, more: str
) -> None:
    """At most, and once all is done within a fifth of what it is: then a study has taken what it has taken."""
    trial.write_text(trial_text.replace("draws: 3", "draws: 40") + more)
    plan = load_experiment("trial.yaml").plan()
    (asked,) = filter(None, (plan.first, *plan.studies))
    assert sum(number for number, _ in asked.examples()) == asked.most_runs
    before = json.loads(call("check", "trial.yaml", "--json").stdout)
    assert run_here("trial.yaml").exit_code == 0
    size = Path(STORE).stat().st_size
    after = json.loads(call("check", "trial.yaml", "--json").stdout)
    [study] = after["studies"]
    assert study["done"]
    assert 0 < study["stored"] <= study["most_runs"]
    assert after["estimate"]["seconds"] == 0
    assert after["estimate"]["store_bytes"] == pytest.approx(size, rel=0.2)
    assert before["estimate"]["store_bytes"] > 0.8 * size


@pytest.mark.parametrize(("more", "name"), [(WORST, "worst_case"), (TUNE, "tune"), (NEEDS, "needs")])
def test_the_runs_of_studies_are_exported_beside_the_matrix(
    trial: Path, trial_text: str, call: Call, run_here: Call, more: str, name: str
) -> None:
    """Every one, as it is stored, with the u that its own machine has; the matrix's rows stay as they are."""
    trial.write_text(trial_text + more)
    assert run_here("trial.yaml").exit_code == 0
    for options in (
        ["-o", "plain.parquet"],
        ["-o", "all.parquet", "--studies"],
        ["-o", "all.csv", "--studies"],
    ):
        assert call("export", STORE, *options).exit_code == 0
    plain, whole = (pandas.read_parquet(f"{file}.parquet") for file in ("plain", "all"))
    assert whole.columns[0] == "study"
    assert "study" not in plain
    for names in (pandas.read_csv("all-columns.csv").name, pandas.read_csv("all.csv").columns):
        assert list(names) == list(whole)
    pandas.testing.assert_frame_equal(whole[whole.study == ""][list(plain)], plain)
    own = whole[whole.study == name]
    assert len(own) == len(whole) - len(plain)
    with Store.open_for_reading(STORE) as store:
        study = store.study(name)
        assert study is not None
        runs = {record.key: store.kept(record.key).run for record in study.records}
    assert list(own.key) == [record.key for record in study.records]
    parameters = [column for column in whole if column.startswith("draw.")]
    for (_, row), record in zip(own.iterrows(), study.records, strict=True):
        assert (row.law, row.condition, row.level) == (record.row.law, record.row.condition, record.row.level)
        assert row.tool_peak_mm == record.row.scores["tool_peak_mm"]
        drawn = {
            column.removeprefix("draw."): row[column] for column in parameters if not np.isnan(row[column])
        }
        assert drawn == runs[record.key].factors()
    with rigbench.open_store(STORE) as opened:
        columns = opened.runs("study", "key", studies=True)
        assert list(columns["key"]) == list(whole.key)
        assert list(columns["study"]) == list(whole.study)
        assert set(opened.runs("key")["key"]) == set(plain.key)
        assert [column.name for column in opened.columns(studies=True)] == list(whole)
        assert list(opened.frame("study", studies=True).study) == list(whole.study)


def test_gains_outside_the_limits_are_not_taken(
    trial: Path, trial_text: str, run_here: Call, call: Call
) -> None:
    """Where nothing keeps them, the declared gains stay, and that is said."""
    trial.write_text(trial_text + TUNE.replace("torque_peak_percent: 60", "torque_peak_percent: 0.1"))
    said = run_here("trial.yaml")
    assert said.exit_code == 0
    words = " ".join(said.stdout.split())
    assert (
        "Tune found no gains within its limits for 'joint pd', 'computed torque': the declared ones stay."
        in words
    )
    assert "Gains found" not in words
    printed = call("gains", STORE).stdout
    assert printed.count("none found within the limits") == 2
    assert yaml.safe_load(printed)["laws"]["joint pd"] == {"law": "independent-joint", "natural_hz": 3}


def test_the_worst_machine_found_is_worse_than_ten_times_as_many_draws(worst: Result, call: Call) -> None:
    """At level 2 the search's 39 machines hold a worse one than 390 random ones; its numbers are its run's."""
    assert worst.exit_code == 0, worst.output
    document = json.loads(call("worst", STORE, "--json").stdout)
    assert document["finished"]
    (law,) = document["laws"]
    levels = {one["level"]: one for one in law["levels"]}
    at_two = levels[2.0]
    assert at_two["runs"] <= 39
    entry = next(
        entry
        for entry in load_experiment("trial.yaml").plan().entries
        if entry.law == "computed torque" and entry.condition == "all at 1"
    )
    names = list(entry.run.factors())
    assert at_two["value"] > max(drawn_peaks(entry, names, 390))
    with Store.open_for_reading(STORE) as store:
        record = store.record(at_two["run"])
        assert record is not None
        assert record.row.scores["tool_peak_mm"] == at_two["value"]
        assert at_two["value"] == pytest.approx(3.0 * at_two["share_of_limit"])
    smallest = law["smallest_level_found_to_miss"]
    assert levels[smallest]["misses"]
    assert not any(one["misses"] for level, one in levels.items() if level < smallest)
    told = {parameter["name"]: parameter["u"] for parameter in law["direction"]["parameters"]}
    assert set(told) == set(names)


def drawn_peaks(entry: Entry, names: list[str], draws: int, level: float = 2.0) -> list[float]:
    """The main scores of random machines at a level."""
    u = np.random.default_rng(5).uniform(-1, 1, (draws, len(names)))
    peaks = []
    for point in u.tolist():
        directions = tuple(zip(names, point, strict=True))
        run = replace(entry.run, level=level, draw=None, directions=directions)
        peaks.append(row_of(replace(entry, run=run)).scores["tool_peak_mm"])
    return peaks


@pytest.mark.evidence
@pytest.mark.parametrize("law", ["computed torque", "joint pd"])
def test_a_search_of_fourteen_parameters_beats_ten_times_as_many_draws(
    trial: Path, run_here: Call, call: Call, law: str
) -> None:
    """Of the two-link demo at level 1: 94 machines searched against 940 drawn."""
    file = Path(__file__).resolve().parents[2] / "experiments" / "two-links.yaml"
    data = yaml.safe_load(file.read_text())
    data |= {"arm": str(file.parent / data["arm"]), "draws": 1, "conditions": {"together": [1]}}
    data |= {"laws": {law: data["laws"][law]}, "worst_case": {"levels": [1], "runs": 100}}
    trial.write_text(yaml.safe_dump(data, sort_keys=False))
    assert run_here("trial.yaml").exit_code == 0
    levels = json.loads(call("worst", STORE, "--json").stdout)["laws"][0]["levels"]
    (found,) = [one for one in levels if one["searched"]]
    entry = next(one for one in load_experiment(trial).plan().entries if one.condition == "all at 1")
    assert found["runs"] <= 94
    worst_drawn = max(drawn_peaks(entry, list(entry.run.factors()), 940, 1.0))
    print(f"{law}: searched {found['value']:.4g} mm, drawn {worst_drawn:.4g} mm")
    assert found["value"] > worst_drawn


def test_worst_cases_are_told_drawn_and_replayed(worst: Result, call: Call) -> None:
    """Honest words, a picture, and a command that replays the run bit for bit."""
    told = call("worst", STORE, "-o", "worst.svg")
    assert told.exit_code == 0, told.output
    assert "found to miss: tool peak" in told.stdout
    assert "smallest level found to miss" in told.stdout
    assert "there may still be one" in told.stdout
    assert "picture: worst.svg" in told.stderr
    assert Path("worst.svg").read_text().startswith("<?xml")
    replay = next(line for line in told.stdout.splitlines() if "replay: rigbench " in line)
    again = call(*replay.split("rigbench ")[1].split(), "--json")
    assert again.exit_code == 0
    assert json.loads(again.stdout)["identical"]


@pytest.mark.parametrize(("command", "key"), [("worst", "worst_case"), ("gains", "tune")])
def test_a_store_without_the_search_says_what_to_do(
    trial: Path, run_here: Call, call: Call, command: str, key: str
) -> None:
    """An input fault with the key to declare."""
    run_here("trial.yaml", "--draws", "1")
    said = call(command, STORE)
    assert said.exit_code == 2
    assert f"'{key}: {{}}' in the experiment file" in said.stderr


def test_a_search_that_waits_for_the_matrix_says_so(
    trial: Path, trial_text: str, run_here: Call, call: Call
) -> None:
    """With the first draws alone nothing is searched yet; gains are found all the same."""
    trial.write_text(trial_text + WORST + TUNE)
    assert run_here("trial.yaml", "--draws", "1").exit_code == 0
    said = call("worst", STORE)
    assert said.exit_code == 2
    assert "has not begun" in said.stderr
    assert json.loads(call("gains", STORE, "--json").stdout)["finished"]
