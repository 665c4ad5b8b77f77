"""The commands as calls: for notebooks and scripts, on a real small campaign."""

from __future__ import annotations

import ast
import re
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

import rigbench
from rigbench.errors import InputFaults, Stopped

ROOT = Path(__file__).resolve().parents[1]

EXPERIMENT = """\
rigbench: 1
arm: {arm}
rates: {{control_hz: 500, physics_hz: 1000}}
motions:
  lift: {{via_deg: [[0, 0], [20, -10]], leg_s: 0.4, rest_s: 0.1}}
laws:
  pd: {{law: independent-joint, natural_hz: 5}}
  computed torque: {{law: computed-torque, natural_hz: 5}}
mismatch: {{link_mass_percent: 20}}
conditions: {{together: [1]}}
draws: 4
tolerance: {{tool_peak_mm: 20}}
"""


@pytest.fixture(scope="module")
def campaign(tmp_path_factory):
    """An experiment, its store, and the results of the run that filled it."""
    folder = tmp_path_factory.mktemp("calls")
    file = folder / "small.yaml"
    file.write_text(EXPERIMENT.format(arm=ROOT / "robots_demo/planar2/arm.yaml"))
    experiment = rigbench.load_experiment(file)
    store = folder / "small.sqlite"
    return experiment, store, rigbench.run(experiment, store, jobs=0)


def test_run_does_what_is_missing_and_returns_the_results(campaign):
    """Ten runs; a second call finds them stored; what it returns is what the store holds."""
    experiment, store, results = campaign
    assert (results.planned, results.done) == (10, 10)
    seen = []
    assert rigbench.run(experiment, store, jobs=0, on_progress=seen.append) == results
    assert len(seen) == 1
    with rigbench.open_store(store) as opened:
        assert opened.results() == results


def test_time_that_is_up_is_raised(campaign, tmp_path):
    """No run is begun after no time at all, and Stopped says how to go on."""
    experiment, _, _ = campaign
    with pytest.raises(Stopped, match="0 of 10 runs"):
        rigbench.run(experiment, tmp_path / "none.sqlite", jobs=0, seconds=0.0)


def test_cells_are_columns(campaign):
    """One row a cell, with the numbers of the matrix; as arrays and as a DataFrame."""
    _, store, results = campaign
    with rigbench.open_store(store) as opened:
        cells, frame = opened.cells(), opened.cells_frame()
    assert list(frame.columns) == list(cells)
    assert cells["law"].tolist() == [cell.law for cell in results.cells]
    assert cells["draws"].tolist() == [cell.draws for cell in results.cells]
    shares = [np.nan if cell.pass_share is None else cell.pass_share for cell in results.cells]
    np.testing.assert_array_equal(cells["pass_share"], shares)
    medians = [cell.measures["tool_peak_mm"].median for cell in results.cells]
    np.testing.assert_array_equal(frame["tool_peak_mm.median"], medians)


def test_pictures_pages_gates_and_traces(campaign, tmp_path):
    """Each call does what its command does."""
    _, store, results = campaign
    rigbench.draw_matrix(results, tmp_path / "m.png", show="p95")
    assert (tmp_path / "m.png").read_bytes().startswith(b"\x89PNG")
    rigbench.write_report(store, tmp_path / "r.html", traces=0)
    assert "computed torque" in (tmp_path / "r.html").read_text()
    for show in ("curves", "median"):
        rigbench.draw_matrix(results, tmp_path / f"{show}.png", show=show, score="joint_rms_deg")
    rigbench.draw_matrix(results, tmp_path / "against.svg", against=results)
    assert (tmp_path / "against.svg").read_text().startswith("<?xml")
    with pytest.raises(InputFaults, match="no score 'tool_peek_mm'"):
        rigbench.draw_matrix(results, tmp_path / "none.png", score="tool_peek_mm")
    level = rigbench.gate(store, ["pd"], level=1, baseline=store, allow_open=True)
    assert [check.of for check in level] == ["tolerance", "baseline"]
    assert {check.cell.condition for check in level} == {"all at 1"}
    with pytest.raises(InputFaults, match="nothing was run at 3"):
        rigbench.gate(store, ["pd"], level=3)
    checks = rigbench.gate(store, ["computed torque", "pd"], condition="nominal")
    assert [check.cell.law for check in checks] == ["computed torque", "pd"]
    assert checks[0].state == "passed"
    with rigbench.open_store(store) as opened:
        key = opened.runs("key")["key"][0]
    replayed = rigbench.trace(store, key[:12])
    assert replayed.identical
    assert len(replayed.log.t) == 251


def test_gears_and_audit_take_an_arm_file():
    """As their commands do; an unknown joint is a fault."""
    arm = ROOT / "robots_demo/planar2/arm.yaml"
    found = rigbench.gears(arm, ["elbow"], ratios=(1.0, 10.0))
    assert [joint.joint for joint in found.joints] == ["elbow"]
    with pytest.raises(InputFaults, match="no joint 'knee'"):
        rigbench.gears(arm, ["knee"])


def test_what_was_not_asked_is_said(campaign):
    """A study that the experiment doesn't have, and names that aren't there, are faults with their address."""
    _, store, _ = campaign
    for study, call in (
        ("needs", rigbench.needs),
        ("worst_case", rigbench.worst_case),
        ("tune", rigbench.gains),
    ):
        with pytest.raises(InputFaults, match=f"'{study}:' in the experiment file"):
            call(store)
    with pytest.raises(InputFaults, match="no law 'pid'"):
        rigbench.gate(store, ["pid"], condition="nominal")
    with pytest.raises(InputFaults, match="no condition 'all at 7'"):
        rigbench.gate(store, ["pd"], condition="all at 7")


def test_wishes_that_can_not_be_had_come_all_at_once(campaign, tmp_path):
    """As the command tells them, before anything is run; a matrix of what is not there is none."""
    experiment, _, results = campaign
    with pytest.raises(InputFaults) as caught:
        rigbench.run(experiment, tmp_path / "none.sqlite", jobs=-1, draws=5, limit_s=0, again=["pdd"])
    assert [(fault.key, fault.near) for fault in caught.value.faults] == [
        ("again", "pd"),
        ("draws", None),
        ("jobs", None),
        ("limit_s", None),
    ]
    with pytest.raises(InputFaults, match="limit_s: is kept by worker processes"):
        rigbench.run(experiment, tmp_path / "none.sqlite", jobs=0, limit_s=60)
    assert not list(tmp_path.iterdir())
    for wrong in ({"show": "meen"}, {"show": "p95", "score": "tool_peek_mm"}):
        with pytest.raises(InputFaults, match="did you mean"):
            rigbench.draw_matrix(results, tmp_path / "m.png", **wrong)


def test_the_readmes_calls_run_as_they_stand(tmp_path, monkeypatch):
    """In a folder with the demo's experiments."""
    text = (ROOT / "README.md").read_text("utf-8")
    (code,) = re.findall(r"```python\n(import rigbench\n\nexperiment = .*?)```", text, re.DOTALL)
    (tmp_path / "experiments").symlink_to(ROOT / "experiments")
    (tmp_path / "robots_demo").symlink_to(ROOT / "robots_demo")
    monkeypatch.chdir(tmp_path)
    found = {}
    exec(code, found)
    assert {cell.draws for cell in found["results"].cells} == {1, 2}
    assert {check.cell.law for check in found["checks"]} == {"computed torque"}
    assert (tmp_path / "two-links.html").exists()


def test_the_package_shows_what_it_has():
    """Each public name can be imported, there are few, and nothing heavy comes with the package itself."""
    code = "import sys, rigbench; print(any(m in sys.modules for m in ('numpy', 'rigbench.campaign')))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "False"
    assert all(hasattr(rigbench, name) and name in dir(rigbench) for name in rigbench.__all__)
    assert len(rigbench.__all__) < 15
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        _ = rigbench.nothing
    stub = ast.parse((Path(rigbench.__file__).parent / "__init__.pyi").read_text("utf-8"))
    names = {alias.asname for node in stub.body if isinstance(node, ast.ImportFrom) for alias in node.names}
    assert names | {"__version__"} == set(rigbench.__all__)
    assert ast.literal_eval(stub.body[-1].value) == rigbench.__all__
