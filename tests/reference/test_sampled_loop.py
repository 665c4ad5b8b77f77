"""The rig against what it approximates: tight ODE solutions, events found exactly, energy that must last."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pinocchio
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from rigbench.arm.arm import Arm, Drives
from rigbench.arm.dynamics import bias_torque, mass_matrix
from rigbench.arm.files import ArmFiles, load_arm
from rigbench.campaign.audit.bench import energies, watch
from rigbench.experiment import load_experiment
from rigbench.laws.law import TAU, Reference, Setup
from rigbench.laws.model import Model
from rigbench.laws.registry import LawChoice
from rigbench.motion.via import ViaMotion
from rigbench.rig import RESIDUAL_LIMIT, Rates, Run, simulate
from rigbench.rig.drive import step_drive
from rigbench.rig.engine import Engine
from rigbench.rig.rows import DELAYED, MOTOR, Q_ENGINE, V_NEXT, V_TRUE, machine_array
from rigbench.scores.of_run import score_run

ROOT = Path(__file__).resolve().parents[2]
TRAY6 = ROOT / "robots_demo" / "tray6" / "arm.yaml"
GRAVITY = (0.0, 0.0, -9.81)
POSES = np.deg2rad([[0, -60, 90, 0, 60, 0], [70, -20, 60, 0, 50, 0]])
MOTION = ViaMotion(tuple(map(tuple, POSES.tolist())), leg_s=1.0, rest_s=0.3)
LAWS = ("computed-torque", "independent-joint")


@pytest.fixture(scope="module")
def engine():
    made = Engine()
    yield made
    made.close()


@dataclass(frozen=True)
class WithoutDryFriction(ArmFiles):
    """tray6 as declared, but for its Coulomb friction; viscous friction and rotors stay."""

    def arm(self) -> Arm:
        arm = ArmFiles.arm(self)
        return arm.replaced(drives=replace(arm.drives, coulomb=np.zeros(arm.n), static=np.zeros(arm.n)))


def tray6_files():
    files = ArmFiles.read(TRAY6)
    return WithoutDryFriction(files.path, files.text, files.urdf_path, files.urdf_text)


def run_of(law, control_hz, physics_hz):
    return Run(
        tray6_files(), LawChoice(law), MOTION, Rates(control_hz, physics_hz), tuple(POSES[0].tolist()), 0.5
    )


def exact(law, control_hz):
    """Positions and velocities at the ticks: the law at each tick, its torque held, DOP853 at 1e-11."""
    arm, n = tray6_files().arm(), 6
    chain, rotor, viscous = arm.chain(GRAVITY), np.diag(arm.drives.reflected), arm.drives.viscous
    made, model = LawChoice(law).make(), Model(arm, GRAVITY)
    made.start(
        Setup(arm.joints, model, control_hz, POSES[0], arm.drives.torque_limit, arm.drives.speed_limit)
    )
    t = np.arange(round(MOTION.duration_s * control_hz) + 1) / control_hz
    wanted = MOTION.reference(t)
    found = np.zeros((len(t), 2 * n))
    found[0, :n] = POSES[0]
    for k in range(len(t) - 1):
        q, v = found[k, :n].copy(), found[k, n:].copy()
        reference = Reference(*(part[k] for part in wanted))
        held = made.torque(t[k], q, v, reference, made.model_term(t[k], q, v, reference))

        def rate(_, x, held=held):
            q, v = x[:n], x[n:]
            torque = held - viscous * v - bias_torque(chain, q, v)
            return np.concatenate([v, np.linalg.solve(mass_matrix(chain, q) + rotor, torque)])

        period = 1 / control_hz
        solved = solve_ivp(rate, (0, period), found[k], "DOP853", rtol=1e-11, atol=1e-13, first_step=period)
        found[k + 1] = solved.y[:, -1]
    return found[:, :n], found[:, n:]


@pytest.mark.parametrize("law", LAWS)
def test_a_run_at_1_khz_is_the_sampled_loop(engine, law):
    """tray6 at 1 kHz: within 1e-5 rad of the exact sampled loop, each joint and tool score within 0.1 %,
    or 0.001 mm or 1e-4 deg where that is more; the error falls with the square of the step."""
    q, v = exact(law, 1000)
    errors = []
    for physics_hz in (1000, 2000, 4000):
        log = simulate(run_of(law, 1000, physics_hz), engine)
        assert not log.limited.any()
        errors.append(np.abs(log.q - q).max())
        if physics_hz == 1000:
            scores = score_run(log, MOTION, 0.5)
            for name, value in score_run(replace(log, q=q, v=v), MOTION, 0.5).items():
                if name.startswith(("joint_", "tool_", "path_", "overshoot_")):
                    least = 1e-3 if "_mm" in name else 1e-4
                    assert abs(scores[name] - value) <= max(1e-3 * abs(value), least), name
    assert errors[0] < 1e-5
    assert errors[0] / errors[1] == pytest.approx(4, rel=0.1)
    assert errors[1] / errors[2] == pytest.approx(4, rel=0.1)


def energy(model, arm, path):
    """Links' energy by pinocchio, from the arm's own URDF, and the rotors' 1/2 Jr v^2; kinetic, whole."""
    data = model.createData()
    found = []
    for q, v in zip(path.q, path.v, strict=True):
        kinetic = pinocchio.computeKineticEnergy(model, data, q, v) + 0.5 * arm.drives.reflected @ v**2
        found.append((kinetic, kinetic + pinocchio.computePotentialEnergy(model, data, q)))
    return np.array(found).T


@pytest.mark.parametrize(
    "start", [(0, -60, 90, 0, 60, 0), (70, -20, 60, 0, 50, 0), (10, 30, -40, 50, 60, 20)]
)
def test_energy_of_a_free_swing(engine, start):
    """Two seconds of free swing from rest, rotors included: energy drifts by at most 1e-4 of its kinetic
    peak at 2 kHz, and four times less at each halving of the step."""
    arm = load_arm(TRAY6)
    free = dict.fromkeys(("coulomb", "static", "viscous"), np.zeros(arm.n))
    arm = arm.replaced(drives=replace(arm.drives, **free, speed_limit=np.full(arm.n, np.inf)))
    model = pinocchio.buildModelFromUrdf(str(TRAY6.with_name("tray6.urdf")))
    drifts = []
    for hz in (1000, 2000, 4000):
        path = watch(engine, arm, (np.deg2rad(start), np.zeros(6)), np.zeros(6), hz, 2.0, GRAVITY)
        kinetic, whole = energy(model, arm, path)
        drifts.append(np.abs(whole - whole[0]).max() / kinetic.max())
    assert drifts[1] <= 1e-4
    assert drifts[0] / drifts[1] == pytest.approx(4, rel=0.1)
    assert drifts[1] / drifts[2] == pytest.approx(4, rel=0.1)


class HeavierEngine(Engine):
    """An engine whose last link is heavier than the drive believes, by a thousandth."""

    def load(self, arm, *others):
        parameters = arm.parameters.copy()
        parameters[-1] *= 1.001
        super().load(arm.replaced(parameters=parameters), *others)


def test_a_wrong_mass_in_the_engine_alone_is_caught(engine):
    """One link a thousandth too heavy in the engine, and the residual of the run marks it."""
    wrong = HeavierEngine()
    try:
        assert simulate(run_of("computed-torque", 500, 1000), wrong).residual > 10 * RESIDUAL_LIMIT
    finally:
        wrong.close()
    assert simulate(run_of("computed-torque", 500, 1000), engine).residual < 1e-9


EXPERIMENTS = sorted((ROOT / "experiments").glob("[!p]*.yaml"))  # those named practise- are no experiments


def worst_residual(engine, entries):
    found = {
        (e.sheet, e.law, e.motion, e.condition, e.draw): simulate(e.run, engine).residual for e in entries
    }
    return max(found.items(), key=lambda item: item[1])


@pytest.mark.parametrize("path", EXPERIMENTS, ids=lambda path: path.stem)
def test_engine_and_drive_agree_on_demo_runs(engine, path):
    """Below 1e-9 rad/s on every shipped experiment: six runs, spread over all that it declares."""
    entries = load_experiment(path).plan().entries
    key, residual = worst_residual(
        engine, [entries[k] for k in np.linspace(0, len(entries) - 1, 6).astype(int)]
    )
    assert residual < 1e-9, key


@pytest.mark.evidence
@pytest.mark.parametrize("path", EXPERIMENTS, ids=lambda path: path.stem)
def test_engine_and_drive_agree_on_every_condition(engine, path):
    """The same for all exact runs and those of the first three draws."""
    entries = load_experiment(path).plan().entries
    key, residual = worst_residual(engine, [entry for entry in entries if (entry.run.draw or 0) < 3])
    print(path.stem, residual)
    assert residual < 1e-9, key


class SlidingArm:
    """Joints with Coulomb and viscous friction and no motor torque: slide, stop, stay, by exact events.

    The modes are -1, 0, 1 by joint. A sliding joint stops where its speed crosses 0; a standing one is a
    constraint, and is checked to need no more than its friction.
    """

    def __init__(self, arm):
        self.chain, self.drives, self.n = arm.chain(GRAVITY), arm.drives, arm.n
        self.rotor = np.diag(arm.drives.reflected)

    def rate(self, x, modes):
        q, v = x[: self.n], x[self.n :]
        moving = modes != 0
        torque = -bias_torque(self.chain, q, v) - self.drives.viscous * v - self.drives.coulomb * modes
        mass = mass_matrix(self.chain, q) + self.rotor
        a = np.zeros(self.n)
        a[moving] = np.linalg.solve(mass[np.ix_(moving, moving)], torque[moving])
        needed = torque - mass @ a
        assert np.all(np.abs(needed[~moving]) < self.drives.coulomb[~moving]), "a standing joint breaks away"
        return np.concatenate([v, a])

    def crossing(self, joint, modes):
        """The event of a sliding joint's stop."""

        def speed(_, x):
            return x[self.n + joint]

        speed.terminal, speed.direction = True, -modes[joint]
        return speed

    def to_rest(self, q, v):
        """Return when each joint came to rest, and where the arm then stands."""
        x, t, modes, stops = np.concatenate([q, v]), 0.0, np.sign(v), np.zeros(self.n)
        while modes.any():
            events = [self.crossing(joint, modes) for joint in np.flatnonzero(modes)]
            solved = solve_ivp(
                lambda _, x, modes=modes: self.rate(x, modes), (t, t + 10), x, "DOP853", events=events,
                rtol=1e-11, atol=1e-13,
            )  # fmt: skip
            assert solved.status == 1
            t, x = solved.t[-1], solved.y[:, -1]
            joint = np.flatnonzero(modes)[[len(found) > 0 for found in solved.t_events].index(True)]
            modes, stops[joint], x[self.n + joint] = modes.copy(), t, 0.0
            modes[joint] = 0
        return stops, x[: self.n]


@pytest.mark.parametrize("speed", [(2.0, -1.5), (1.0, 2.5), (-1.5, -1.0)])
def test_two_links_slide_to_a_stop_as_events_say(engine, published_two_link, speed):
    """Two coupled links under gravity, with Coulomb and viscous friction: each joint stops within 1 % of
    the time, and after 0.1 % of the way, that an event-detecting scipy solution gives. At 1 kHz, where a
    stop falls on a tick: so slides last 0.1 s and more."""
    arm = published_two_link(
        coulomb=[12.0, 1.0], viscous=[0.5, 0.05], rotor_inertia=[4e-4, 1e-4], gear_ratio=80.0
    )
    q, v = np.array([0.4, 0.3]), np.array(speed)
    stops, rest = SlidingArm(arm).to_rest(q, v)
    assert stops.min() > 0.1
    path = watch(engine, arm, (q, v), np.zeros(2), 1000.0, stops.max() + 0.5, GRAVITY)
    met = np.array([path.t[np.flatnonzero(np.abs(path.v[:, i]) > 1e-9)[-1] + 1] for i in range(2)])
    np.testing.assert_allclose(met, stops, rtol=1e-2)
    np.testing.assert_allclose(path.q[-1] - q, rest - q, rtol=1e-3)


def random_arm(rng, n):
    """A chain of n random bodies on revolute joints about random axes, with random drives."""
    parameters = []
    for _ in range(n):
        mass, cog, root = rng.uniform(0.1, 5), rng.normal(size=3) * 0.1, rng.normal(size=(3, 3)) * 0.1
        sigma = mass * (root @ root.T + 1e-4 * np.eye(3) + np.outer(cog, cog))
        about = np.trace(sigma) * np.eye(3) - sigma
        parameters.append([mass, *(mass * cog), *about[(0, 0, 1, 0, 1, 2), (0, 1, 1, 2, 2, 2)]])
    axes, coulomb = rng.normal(size=(n, 3)), rng.uniform(0, 5, n) * (rng.random(n) > 0.2)
    drives = replace(
        Drives.ideal(n), coulomb=coulomb, static=coulomb * rng.uniform(1, 2, n),
        stribeck_speed=rng.uniform(0.01, 0.5, n), viscous=rng.uniform(0, 5, n), gear_ratio=np.full(n, 100.0),
        rotor_inertia=rng.uniform(0, 3e-5, n), gear_loss=rng.uniform(0, 0.3, n),
    )  # fmt: skip
    free = np.full(n, np.inf)
    return Arm(
        name="random", joints=tuple("abcdefg"[:n]), links=tuple("abcdefg"[:n]), kinds=np.zeros(n),
        rotation=np.tile(np.eye(3), (n, 1, 1)), position=rng.normal(size=(n, 3)) * 0.3,
        axis=axes / np.linalg.norm(axes, axis=1)[:, None], parameters=np.array(parameters),
        tool_rotation=np.eye(3), tool_position=np.zeros(3), lower=-free, upper=free, drives=drives,
    )  # fmt: skip


@settings(max_examples=300, deadline=None)
@given(seed=st.integers(0, 2**32), n=st.integers(1, 5))
def test_friction_takes_energy_in_every_step(seed, n):
    """Whatever the arm, its drives, its state and the torque, in one step of the drive and joint by joint:

    dry friction's work on the way that the engine goes, -f v+ dt, is never positive; nor is viscous
    friction's at the mean speed, by which the energy of a step counts; nor is that of both, in either
    measure, while a joint goes on or sets out. (In a step that stops a joint or turns it round, friction
    is that of the step's end from its start on: at the mean speed its work may reach F |v| dt.)
    """
    rng = np.random.default_rng(seed)
    arm, dt = random_arm(rng, n), 1e-3
    chain, drives, io = arm.chain(GRAVITY), arm.drives, np.zeros((DELAYED, n))
    io[Q_ENGINE], io[V_TRUE] = rng.uniform(-3, 3, n), rng.normal(size=n) * rng.choice([0.0, 1e-3, 1.0])
    io[TAU] = rng.normal(size=n) * rng.choice([0.0, 5.0, 50.0])
    assert step_drive(chain, machine_array(arm, dt), io)
    v, v_next = io[V_TRUE], io[V_NEXT]
    a = (v_next - v) / dt
    # with the acceleration of the step before at 0, the momentum balance takes h at the step's start
    inertia = (mass_matrix(chain, io[Q_ENGINE]) + np.diag(drives.reflected)) @ a
    friction = io[MOTOR] - bias_torque(chain, io[Q_ENGINE], v) - inertia
    viscous = drives.viscous * (v + v_next) / 2
    dry = friction - viscous
    rounding = (
        1e-9 * (np.abs(inertia).max() + np.abs(io[MOTOR]).max() + 10.0) * (np.abs(v) + np.abs(v_next) + 1e-9)
    )
    assert np.all(dry * v_next >= -rounding)
    assert np.all(viscous * (v + v_next) >= 0)
    kept = (v == 0) | (v * v_next > 0)
    assert np.all((friction * v_next)[kept] >= -rounding[kept])
    assert np.all((friction * (v + v_next))[kept] >= -rounding[kept])


@settings(max_examples=20, deadline=None)
@given(seed=st.integers(0, 2**32))
def test_energy_without_motors_rises_no_more_than_without_friction(engine, seed):
    """tray6 let go in a random state, its friction scaled at random to as little as a thousandth: over
    half a second at 1 kHz its energy never rises, from one moment to a later one, by more than the free
    swing from the same state drifts."""
    rng = np.random.default_rng(seed)
    arm = load_arm(TRAY6)
    start = np.deg2rad(rng.uniform(-60, 60, 6)), rng.normal(size=6)
    scale = 10 ** rng.uniform(-3, 1, 6)

    def let_go(scale):
        """The energy's largest rise, and its largest departure from the start."""
        friction = {name: getattr(arm.drives, name) * scale for name in ("coulomb", "static", "viscous")}
        drives = replace(arm.drives, **friction, speed_limit=np.full(6, np.inf))
        path = watch(engine, arm.replaced(drives=drives), start, np.zeros(6), 1000.0, 0.5, GRAVITY)
        _, whole = energies(arm, GRAVITY, path)
        return np.max(whole - np.minimum.accumulate(whole)), np.abs(whole - whole[0]).max()

    assert let_go(scale)[0] <= let_go(0.0)[1]
