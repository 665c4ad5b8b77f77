"""Speed, as ratios to the bare engine loop in the same process. Skipped unless asked for:

    pytest tests/bench --benchmark-only

Times mean nothing across machines; the ratio of a law's run to the bare loop (read, set torques, step:
no law, no drive) does. Each round takes every case in turn. Of each case the least CPU time counts:
whatever else the machine does only adds to it.
"""

from __future__ import annotations

import time
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, load_file_law, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run, simulate, warm_up
from rigbench.rig.simulate import worker_engine
from rigbench.scores.of_run import score_run

ROOT = Path(__file__).resolve().parents[2]
ROUNDS = 15
SECONDS = 2.6  # of the motion below

PLAIN = '''
from rigbench.laws import Law


class Plain(Law):
    """Proportional-derivative control with gravity compensation, in plain Python and numpy."""

    def start(self, setup):
        self.model = setup.model
        self.kp = 1000.0 * setup.model.mass_matrix(setup.gain_pose).diagonal()
        self.kd = 60.0 * setup.model.mass_matrix(setup.gain_pose).diagonal()

    def torque(self, t, q, v, ref, held):
        return self.kp * (ref.q - q) + self.kd * (ref.v - v) + self.model.gravity_torque(q)
'''


@pytest.fixture(scope="module")
def run_of():
    warm_up()
    files = ArmFiles.read(ROOT / "robots_demo/tray6/arm.yaml")
    poses = ([0, -60, 90, 0, 60, 0], [70, -20, 60, 0, 50, 0], [0, -60, 90, 0, 60, 0])
    motion = ViaMotion(points=tuple(tuple(np.deg2rad(p)) for p in poses), leg_s=1.0, rest_s=0.3)

    def build(choice):
        return Run(files, choice, motion, Rates(1000, 1000), motion.points[0], 0.5)

    return build


def bare_loop(run):
    """The floor: the same plant and number of steps, with nothing between reading and setting."""
    engine, arm = worker_engine(), run.arm.arm()
    engine.load(arm, np.array(run.gain_pose), np.zeros(arm.n), run.gravity, 1e-3)
    torque = [0.0] * arm.n
    for _ in range(round(run.motion.duration_s * 1000) + 1):
        engine.read()
        engine.apply(torque)
        engine.step()


def set_up(run):
    """A run's set-up alone: load the plant."""
    arm = run.arm.arm()
    worker_engine().load(arm, np.array(run.gain_pose), np.zeros(arm.n), run.gravity, 1e-3)


def cases(run_of, folder):
    """Return {name: function of no arguments}, the bare loop first."""
    any_run = run_of(choose("independent-joint", options_model(registered().laws["independent-joint"].cls)()))
    found = {"bare engine loop": lambda: bare_loop(any_run), "set-up": lambda: set_up(any_run)}
    for name, entry in registered().laws.items():
        run = run_of(choose(name, options_model(entry.cls)()))
        found[name] = lambda run=run: simulate(run)
    (folder / "plain.py").write_text(PLAIN)
    cls, files = load_file_law(folder / "plain.py", "Plain")
    plain = run_of(choose("plain.py:Plain", options_model(cls)(), files))
    found["a law in plain numpy"] = lambda: simulate(plain)
    log = simulate(any_run)
    found["scoring"] = lambda: score_run(log, any_run.motion, 0.5)
    return found


def test_ratios_to_the_bare_loop(run_of, tmp_path, benchmark):
    """Print each case's time as a ratio to the bare engine loop, set-up on both sides, and on neither."""
    todo = cases(run_of, tmp_path)
    times = {name: [] for name in todo}

    def one_round():
        for name, function in todo.items():
            before = time.process_time()
            function()
            times[name].append(time.process_time() - before)

    one_round()
    for taken in times.values():
        taken.clear()
    benchmark.pedantic(one_round, rounds=ROUNDS)
    least = {name: min(taken) for name, taken in times.items()}
    floor, set_up = least["bare engine loop"], least["set-up"]
    print("\nas ratios to the bare loop:  whole run  without set-up")
    for name, taken in least.items():
        print(f"{name:26} {taken / floor:11.3f} {(taken - set_up) / (floor - set_up):15.3f}")
    ticks = set_up / (floor - set_up) * (round(SECONDS * 1000) + 1)
    print(f"set-up is {ticks:.0f} ticks of the bare loop")
    assert len(times["scoring"]) == ROUNDS
