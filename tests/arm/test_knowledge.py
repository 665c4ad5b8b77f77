"""What an identification left unknown, as machines that are drawn from it."""

from __future__ import annotations

import os
import pickle
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy import stats

from rigbench.arm.files import ArmFiles
from rigbench.arm.knowledge import FARTHEST, Knowledge, deviations, known_arm
from rigbench.arm.mismatch import Mismatch, draw_values, plant
from rigbench.arm.physical import possible
from rigbench.arm.vector import vector_of, with_vector
from rigbench.campaign.kept import Keeper, restored
from rigbench.identify.base import base_of
from rigbench.identify.regressor import Terms
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig.run import Rates, Run

ROBOTS = Path(__file__).resolve().parents[2] / "robots_demo"
PLANAR2 = ArmFiles.read(ROBOTS / "planar2" / "arm.yaml")
RUBBING = PLANAR2.with_drives(
    [("all", "viscous", 0.4), ("all", "coulomb", 0.7), ("all", "rotor_inertia", 0.05)]
)
GRAVITY = (0.0, 0.0, -9.81)
TERMS = Terms()


def knowledge_of(files: ArmFiles, share: float, correlation: float = 0.3) -> Knowledge:
    """Sums known to a share of what they are made of, each correlated with every other."""
    arm = files.arm()
    base = base_of(arm, GRAVITY, TERMS)
    deviation = share * (np.abs(base.combination) @ np.abs(vector_of(arm, TERMS.names)))
    unit = correlation + (1 - correlation) * np.eye(base.count)
    return Knowledge(
        terms=TERMS.names,
        names=tuple(base.labels[k] for k in base.kept),
        combination=tuple(map(tuple, base.combination.tolist())),
        covariance=tuple(map(tuple, (unit * np.outer(deviation, deviation)).tolist())),
        scales=tuple(np.maximum(vector_of(arm, TERMS.names)[10 * arm.n :], 1e-9).tolist()),
    )


def sums_of(knowledge: Knowledge, arm) -> np.ndarray:
    return np.array(knowledge.combination) @ vector_of(arm, knowledge.terms)


def test_a_vector_and_back():
    """An arm from its own vector is the arm, breakaway too; a changed one has the changes and no other."""
    arm = RUBBING.with_drives([("all", "static", 1.4), ("all", "stribeck_speed", 0.1)]).arm()
    vector = vector_of(arm, TERMS.names)
    same = with_vector(arm, vector, TERMS.names)
    assert np.array_equal(same.parameters, arm.parameters)
    for name, value in vars(arm.drives).items():
        assert np.allclose(getattr(same.drives, name), value, rtol=1e-15, atol=0), name
    vector[-2:] *= 3.0  # Coulomb friction of both joints
    rubs = with_vector(arm, vector, TERMS.names)
    assert np.allclose(rubs.drives.coulomb, 3 * arm.drives.coulomb)
    assert np.allclose(rubs.drives.static, 3 * arm.drives.static)
    assert np.array_equal(rubs.drives.viscous, arm.drives.viscous)


def test_deviations_are_those_of_a_normal_cut_off_at_four():
    """scipy's own truncated normal distribution gives the same quantiles."""
    u = np.linspace(-1, 1, 41)
    assert np.allclose(deviations(u), stats.truncnorm(-FARTHEST, FARTHEST).ppf((u + 1) / 2), atol=1e-9)
    assert deviations(np.array([0.0]))[0] == 0.0


@pytest.mark.parametrize(("files", "count"), [(PLANAR2, 30), (RUBBING, 120)], ids=["links", "drives too"])
def test_draws_have_the_covariance(files, count):
    """Machines of sums known to 1 %: Mahalanobis distances are chi-squared, means within four of their errors.

    Both hold for the true covariance alone: distances sum to b a machine within 4 standard deviations.
    """
    arm, knowledge = files.arm(), knowledge_of(files, 0.01)
    if files is PLANAR2:  # its drives have nothing that could be unknown, so their sums never move
        covariance = np.array(knowledge.covariance)
        assert covariance.diagonal().min() == 0
    mismatch = Mismatch(identification=knowledge)
    machines = [plant(arm, mismatch, 1.0, ("identification",), 3, draw) for draw in range(count)]
    assert all(possible(machine.parameters) for machine in machines)
    covariance = np.array(knowledge.covariance)
    moving = covariance.diagonal() > 0
    off = np.array([sums_of(knowledge, machine) - sums_of(knowledge, arm) for machine in machines])
    assert np.abs(off[:, ~moving]).max(initial=0) < 1e-5
    off, covariance = off[:, moving], covariance[np.ix_(moving, moving)]
    b = len(covariance)
    distances = np.einsum("ia,ab,ib->i", off, np.linalg.inv(covariance), off)
    assert abs(distances.sum() - count * b) < 4 * np.sqrt(2 * b * count)
    assert (np.abs(off.mean(axis=0)) < 4 * np.sqrt(covariance.diagonal() / count)).all()


def test_level_scales_the_departure():
    """Half the level, half the departure of the sums, where it is small."""
    arm, knowledge = RUBBING.arm(), knowledge_of(RUBBING, 0.002)
    mismatch = Mismatch(identification=knowledge)
    off = [
        sums_of(knowledge, plant(arm, mismatch, level, ("identification",), 3, 5)) - sums_of(knowledge, arm)
        for level in (0.5, 1.0)
    ]
    assert np.allclose(2 * off[0], off[1], rtol=0.02, atol=1e-6 * np.abs(off[1]).max())


@pytest.mark.parametrize("share", [0.1, 1.0, 30.0])
def test_what_is_hardly_known_still_can_exist(share):
    """Sums drawn far beyond what any body has: each machine can exist, no friction or rotor below 0."""
    arm = RUBBING.arm()
    mismatch = Mismatch(identification=knowledge_of(RUBBING, share))
    for draw in range(20):
        machine = plant(arm, mismatch, 1.0, ("identification",), 1, draw)
        assert possible(machine.parameters)
        for name in ("viscous", "coulomb", "static", "rotor_inertia"):
            assert (getattr(machine.drives, name) >= 0).all()


def test_other_sources_come_on_top():
    """A link's mass scales what the identification left, and nothing else changes with it."""
    arm = RUBBING.arm()
    mismatch = Mismatch(identification=knowledge_of(RUBBING, 0.05), link_mass_percent=50)
    alone = plant(arm, mismatch, 1.0, ("identification",), 1, 2)
    both = plant(arm, mismatch, 1.0, ("identification", "link_mass_percent"), 1, 2)
    factor = both.parameters[:, :1] / alone.parameters[:, :1]
    assert np.abs(np.log(factor)).max() > 0.01
    assert np.allclose(both.parameters, factor * alone.parameters, rtol=1e-12)
    assert np.array_equal(both.drives.viscous, alone.drives.viscous)


def test_directions_take_the_place_of_a_draw():
    """u of each sum, stated: 0 is the arm, the same u as a draw's is that draw's machine."""
    arm = RUBBING.arm()
    mismatch = Mismatch(identification=knowledge_of(RUBBING, 0.05))
    u = draw_values(arm, mismatch, ("identification",), 1, 2)
    assert set(u) == {f"identification.{name}" for name in mismatch.identification.names}
    stated = plant(arm, mismatch, 1.0, ("identification",), 9, None, directions=u)
    assert np.array_equal(stated.parameters, plant(arm, mismatch, 1.0, ("identification",), 1, 2).parameters)
    still = plant(arm, mismatch, 1.0, ("identification",), 9, None, directions=dict.fromkeys(u, 0.0))
    assert np.allclose(still.parameters, arm.parameters, rtol=1e-9, atol=1e-12)


def run_of(mismatch: Mismatch) -> Run:
    law = choose("computed-torque", options_model(registered().laws["computed-torque"].cls)())
    motion = ViaMotion(((0.0, 0.0), (0.5, 0.5)), leg_s=0.5, rest_s=0.1)
    sources = mismatch.sources
    return Run(RUBBING, law, motion, Rates(), (0.0, 0.0), 0.5, 1, None, mismatch, 1.0, sources, 0)


def test_a_run_knows_it_by_its_numbers():
    """Another covariance is another key; the same one read twice is the same; kept and pickled it is itself."""
    run, same, other = (
        run_of(Mismatch(identification=knowledge_of(RUBBING, share))) for share in (0.1, 0.1, 0.2)
    )
    assert run.key() == same.key() != other.key()
    assert pickle.loads(pickle.dumps(run)) == run
    keeper = Keeper()
    back = restored(keeper.texts[keeper.keep(run)], keeper.texts.__getitem__, 0).run
    assert back.key() == run.key()
    assert back.mismatch == run.mismatch
    assert run.key() == replace(run, mismatch=replace(run.mismatch, viscous_percent=30)).key()  # not active


def test_a_digest_is_worked_out_once():
    """A campaign has thousands of keys with it: the second is the first one's; equality goes by numbers."""
    known, same = knowledge_of(RUBBING, 0.1), knowledge_of(RUBBING, 0.1)
    assert known.digest is known.digest
    assert known == same
    assert known.digest == same.digest


BITS = """
import sys; sys.path.insert(0, {folder!r})
import hashlib, test_knowledge as t
files = t.ArmFiles.read(t.ROBOTS / "tray6" / "arm.yaml")
mismatch = t.Mismatch(identification=t.knowledge_of(files, 0.03))
machines = [t.plant(files.arm(), mismatch, 2.0, ("identification",), 1, draw) for draw in range(4)]
print(hashlib.blake2b(b"".join(m.parameters.tobytes() for m in machines)).hexdigest())
"""


def test_the_same_bits_with_any_number_of_threads():
    """Workers give linear algebra one thread, a replay has all: the machine must be the same."""
    script = BITS.format(folder=str(Path(__file__).parent))
    found = set()
    for threads in ("1", "4"):
        told = {f"{library}_NUM_THREADS": threads for library in ("OMP", "OPENBLAS", "MKL")}
        done = subprocess.run(
            [sys.executable, "-c", script],
            env=os.environ | told,
            capture_output=True,
            timeout=120,
            check=True,
        )
        found.add(done.stdout)
    assert len(found) == 1


def test_machines_are_shared_between_laws():
    """The same draw twice is one object: the search is done once for all laws and motions."""
    arm, knowledge = RUBBING.arm(), knowledge_of(RUBBING, 0.05)
    shift = np.linspace(-1, 1, len(knowledge.names))
    assert known_arm(arm, knowledge, shift) is known_arm(arm, knowledge, shift.copy())
