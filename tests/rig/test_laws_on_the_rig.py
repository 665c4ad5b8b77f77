"""What the rig makes of laws as users write them: rates, faults, and no harm to others."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.errors import EngineError, LawError
from rigbench.laws.options import options_model
from rigbench.laws.registry import LawChoice, choose, load_file_law, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run, simulate

ROOT = Path(__file__).resolve().parents[2]
ARM = ArmFiles.read(ROOT / "robots_demo" / "planar2" / "arm.yaml")

HEAD = "import numpy as np\nfrom rigbench.laws import Law, option\n"
BODY = """
class Mine(Law):
    model_hz: float | None = option(None)

    def start(self, setup):
        self.n, self.kp, self.calls = setup.n, 100.0, 0
{start}

    def model_term(self, t, q, v, ref):
        self.calls += 1
        return np.array([float(self.calls)])

    def torque(self, t, q, v, ref, held):
{torque}
        return self.kp * (ref.q - q) - 10.0 * v
"""


def run_with(law: LawChoice) -> Run:
    motion = ViaMotion(points=((0.0, 0.0), (0.4, -0.2)), leg_s=0.3, rest_s=0.1)
    return Run(ARM, law, motion, Rates(1000, 1000), (0.0, 0.0), 0.5)


def of_file(folder: Path, start: str = "", torque: str = "", head: str = "", **options) -> Run:
    path = folder / "mine.py"
    indented = ["\n".join(" " * 8 + line for line in text.splitlines()) for text in (start, torque)]
    path.write_text(HEAD + head + BODY.format(start=indented[0], torque=indented[1]))
    cls, files = load_file_law(path, "Mine")
    return run_with(choose(f"{path}:Mine", options_model(cls)(**options), files))


def built_in() -> Run:
    return run_with(choose("computed-torque", options_model(registered().laws["computed-torque"].cls)()))


def test_model_term_of_a_plain_law_runs_at_its_rate(tmp_path):
    """At 100 Hz beside 1 kHz, ``held`` changes every tenth tick: 41 calls in 401 ticks."""
    check = "assert held[0] == int(round(t * 1000)) // 10 + 1, (t, held)"
    assert simulate(of_file(tmp_path, torque=check, model_hz=100)).outcome == "finished"
    with pytest.raises(LawError, match="AssertionError"):
        simulate(of_file(tmp_path, torque=check, model_hz=200))


@pytest.mark.parametrize(
    ("start", "torque", "words"),
    [
        ("setup.torque_limit *= 0.5", "", "read-only"),
        ("setup.model.arm.parameters[0, 0] = 9.0", "", "read-only"),
        ("", "return np.zeros(self.n + 1)", "shape"),
        ("", "return np.full(self.n, np.nan)", "not a number"),
        ("", "return (self.kp + 1j) * (ref.q - q)", "complex"),
        ("", "return None", "expected real numbers"),
        ("", "raise ValueError('of mine')", "of mine"),
        ("nonsense()", "", "nonsense"),
    ],
)
def test_a_faulty_law_is_its_own_trouble_alone(tmp_path, start, torque, words):
    """What a law gets wrong is a LawError, and the next law's run has the same bits as before."""
    before = simulate(built_in())
    with pytest.raises(LawError, match=words):
        simulate(of_file(tmp_path, start, torque))
    np.testing.assert_array_equal(simulate(built_in()).q, before.q)


def test_a_law_that_changes_its_inputs_changes_nothing_else(tmp_path):
    """q, v and the reference are copies: writing into them leaves the machine and the log alone."""
    spoiled = simulate(
        of_file(tmp_path, torque="q0, v0 = q.copy(), v.copy()\nref.q[:] += 0.0\nq[:] = 9.0\nq, v = q0, v0")
    )
    (tmp_path / "again").mkdir()
    clean = simulate(of_file(tmp_path / "again"))
    np.testing.assert_array_equal(spoiled.q, clean.q)


def test_a_law_that_disconnects_the_engine_costs_its_own_run_alone(tmp_path):
    """The next run connects anew, and gives the same bits."""
    before = simulate(built_in())
    start = "import pybullet\nfor client in range(8):\n    try:\n        pybullet.disconnect(client)\n    except pybullet.error:\n        pass"
    with pytest.raises(EngineError):
        simulate(of_file(tmp_path, start))
    np.testing.assert_array_equal(simulate(built_in()).q, before.q)


def test_helpers_may_be_imported_late_from_any_folder(tmp_path, monkeypatch):
    """An import inside a method finds the file's neighbour, wherever the command is started."""
    (tmp_path / "helper.py").write_text("GAIN = 100.0\n")
    run = of_file(tmp_path, start="import helper\nself.kp = helper.GAIN")
    monkeypatch.chdir(tmp_path.parent)
    (tmp_path / "helper.py").unlink()
    assert simulate(run).outcome == "finished"


def test_a_file_law_with_cached_kernels_runs_from_any_folder(tmp_path, monkeypatch):
    """numba's on-disk cache finds the law's source where the rig keeps it."""
    head = "import numba\n\n\n@numba.njit(cache=True)\ndef gain(x):\n    return x * 50.0\n\n"
    run = of_file(tmp_path, start="self.kp = gain(2.0)", head=head)
    monkeypatch.chdir(tmp_path.parent)
    (tmp_path / "mine.py").unlink()
    assert simulate(run).outcome == "finished"
