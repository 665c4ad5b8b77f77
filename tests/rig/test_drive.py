"""The drive: friction at rest and sliding, gears, limits, and what the engine makes of it."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from rigbench.arm import dynamics
from rigbench.laws.law import TAU
from rigbench.rig.drive import step_drive
from rigbench.rig.rows import (
    DELAYED,
    ENERGY,
    ERROR,
    LAGGED,
    LIMITED,
    MOTOR,
    Q_ENGINE,
    TORQUE_PEAK,
    V_ENGINE,
    V_NEXT,
    V_TRUE,
    machine_array,
)
from rigbench.rig.sensing import OK, read_state

GRAVITY = (0.0, 0.0, -9.81)


def one_step(arm, torque, v=None, dt=1e-3, gravity=(0.0, 0.0, 0.0), q=None):
    """Acceleration that the drive foresees for one step, without the engine."""
    io = np.zeros((DELAYED, arm.n))
    io[V_TRUE] = 0.0 if v is None else v
    io[Q_ENGINE] = 0.0 if q is None else q
    io[TAU] = torque
    assert step_drive(arm.chain(gravity), machine_array(arm, dt), io)
    return (io[V_NEXT] - io[V_TRUE]) / dt, io


def test_gear_of_fifty_divides_inertia_variation_by_2500_and_disturbance_by_50(one_joint):
    """At the motor, link inertia counts as I / G^2 and a link-side torque as tau / G, exactly.

    Common practice. The motor's effective inertia is its torque over its own acceleration.
    """

    def felt(gear, inertia):
        arm = one_joint(inertia=inertia, mass=1e-9, cog=0.0, gear_ratio=gear, rotor_inertia=3e-5)
        motor_torque = 0.01
        a, _ = one_step(arm, gear * motor_torque)
        return motor_torque / (gear * a[0])

    def variation(gear):
        return felt(gear, 0.5) - felt(gear, 0.1)

    assert variation(1.0) / variation(50.0) == pytest.approx(2500, rel=1e-9)

    def holding(gear):
        """Motor torque that keeps a horizontal bar from accelerating."""
        arm = one_joint(gear_ratio=gear)
        torque = dynamics.gravity_torque(arm.chain(GRAVITY), np.array([np.pi / 2]))
        a, _ = one_step(arm, torque, gravity=GRAVITY, q=[np.pi / 2])
        assert abs(a[0]) < 1e-12
        return torque[0] / gear

    assert holding(1.0) / holding(50.0) == pytest.approx(50, rel=1e-12)
    assert holding(1.0) == pytest.approx(2.0 * 9.81 * 0.25, rel=1e-12)


def test_below_breakaway_nothing_moves(bench, one_joint):
    """A joint under torque ripple of up to 98 % of its friction stays where it is for ten seconds."""
    arm = one_joint(coulomb=5.0, gear_ratio=100.0, rotor_inertia=2e-5)
    rig = bench(arm, [0.0])
    for k in range(10_000):
        q, _ = rig.step(0.98 * 5.0 * np.sin(0.05 * k))
    assert abs(q[0]) < 1e-12


def test_coupled_chain_holds_against_gravity(bench, published_two_link):
    """Two joints whose friction exceeds gravity hold an outstretched pose for 10 s, though it couples them."""
    arm = published_two_link(coulomb=[14.0, 1.0], rotor_inertia=1e-4, gear_ratio=50.0)
    rig = bench(arm, [1.2, 0.3])
    for _ in range(10_000):
        q, _ = rig.step([0.0, 0.0])
    np.testing.assert_allclose(q, [1.2, 0.3], atol=1e-9)


def test_sliding_joint_stops_when_it_should_and_stays(bench, one_joint):
    """Coulomb friction alone stops a joint after J v0 / Fc seconds and J v0^2 / 2 Fc radians."""
    arm = one_joint(mass=1e-6, cog=0.0, inertia=0.2, coulomb=0.5, rotor_inertia=3e-5, gear_ratio=100.0)
    inertia, v0 = 0.2 + 100.0**2 * 3e-5, 1.0
    rig = bench(arm, [0.0], [v0], gravity=(0.0, 0.0, 0.0))
    path = np.array([np.concatenate(rig.step(0.0)) for _ in range(1500)])
    stop = inertia * v0 / 0.5
    moving = np.flatnonzero(np.abs(path[:, 1]) > 1e-9)[-1]
    assert (moving + 1) * 1e-3 == pytest.approx(stop, abs=2e-3)
    assert path[-1, 0] == pytest.approx(inertia * v0**2 / (2 * 0.5), abs=v0 * 1e-3)
    assert np.ptp(path[moving + 2 :, 0]) < 1e-9


def test_stribeck_breakaway_is_higher_than_sliding(bench, one_joint):
    """Between Coulomb and static torque a joint at rest stays and a moving one speeds up."""
    arm = one_joint(mass=1e-6, cog=0.0, inertia=0.2, coulomb=1.0, static=1.5, stribeck_speed=0.05)
    still = bench(arm, [0.0], gravity=(0.0, 0.0, 0.0))
    for _ in range(500):
        q, _ = still.step(1.4)
    assert abs(q[0]) < 1e-12
    moving = bench(arm, [0.0], [0.2], gravity=(0.0, 0.0, 0.0))
    for _ in range(500):
        _, v = moving.step(1.4)
    assert v[0] == pytest.approx(0.2 + 0.5 * 0.4 / 0.2, rel=0.02)


def test_friction_never_adds_energy(bench, published_two_link):
    """Energy of a free arm, rotors included, never rises where friction acts.

    Up to the integrator's own oscillation within a step, which the same swing without friction shows:
    over two seconds that one stays within 0.2 % of the energy exchanged.
    """

    def energies(**friction):
        arm = published_two_link(rotor_inertia=1e-4, gear_ratio=30.0, **friction)
        rig = bench(arm, [2.0, -1.0])
        m1, m2 = arm.parameters[:, 0]
        found = []
        for _ in range(2000):
            q, v = rig.step([0.0, 0.0])
            mass = dynamics.mass_matrix(rig.chain, q) + np.diag(arm.drives.reflected)
            lift = -m1 * 0.0983 * np.cos(q[0]) - m2 * (0.26 * np.cos(q[0]) + 0.0229 * np.cos(q[0] + q[1]))
            found.append((0.5 * v @ mass @ v, 9.81 * lift))
        return np.array(found)

    free, braked = energies(), energies(coulomb=[0.8, 0.1], viscous=[0.3, 0.02])
    assert np.ptp(free.sum(1)) < 2e-3 * np.ptp(free[:, 0])
    assert np.max(np.diff(braked.sum(1))) < 2 * np.max(np.abs(np.diff(free.sum(1))))
    assert braked[-1].sum() < braked[0].sum() - 1.0


def swing(bench, arm, dt, seconds=1.0):
    rig = bench(arm, [2.0, -1.0], dt=dt)
    for _ in range(round(seconds / dt)):
        q, v = rig.step([0.0, 0.0])
    assert rig.io[ERROR, 0] < 1e-9
    return np.concatenate([q, v])


def test_second_order_in_time(bench, published_two_link):
    """A free swing with rotors and viscous friction converges to the ODE's solution with the square
    of the step: halving it divides the error by 4 (scipy's DOP853 at 1e-12 is the reference)."""
    arm = published_two_link(rotor_inertia=1e-4, gear_ratio=30.0, viscous=[0.2, 0.02])
    chain, rotor, viscous = arm.chain(GRAVITY), np.diag(arm.drives.reflected), arm.drives.viscous

    def rate(_, x):
        q, v = x[:2].copy(), x[2:].copy()
        torque = -viscous * v - dynamics.bias_torque(chain, q, v)
        return np.concatenate([v, np.linalg.solve(dynamics.mass_matrix(chain, q) + rotor, torque)])

    exact = solve_ivp(rate, (0, 1), [2.0, -1.0, 0, 0], method="DOP853", rtol=1e-12, atol=1e-12).y[:, -1]
    errors = [np.abs(swing(bench, arm, dt) - exact).max() for dt in (2e-3, 1e-3, 5e-4)]
    assert errors[0] / errors[1] == pytest.approx(4, rel=0.25)
    assert errors[1] / errors[2] == pytest.approx(4, rel=0.25)
    assert errors[1] < 1e-4


def test_torque_limit_acts_and_is_told(one_joint):
    """A command beyond the limit is cut to it, on both sides, and marked."""
    arm = one_joint(torque_limit=3.0)
    for wanted, given, cut in ((5.0, 3.0, 1.0), (-5.0, -3.0, 1.0), (2.0, 2.0, 0.0)):
        _, io = one_step(arm, wanted)
        assert (io[MOTOR, 0], io[LIMITED, 0]) == (given, cut)


@pytest.mark.parametrize("limit", [4.0, np.inf])
def test_speed_limit_stops_driving_but_not_braking(bench, one_joint, limit):
    """Constant torque brings a free joint to its speed limit and no further; braking stays whole."""
    arm = one_joint(mass=1e-6, cog=0.0, inertia=0.02, speed_limit=2.0, torque_limit=limit)
    rig = bench(arm, [0.0], gravity=(0.0, 0.0, 0.0))
    for _ in range(400):
        _, v = rig.step(1.0)
    assert 1.96 <= v[0] <= 2.0 + 1e-9
    assert rig.io[LIMITED, 0] == 1.0
    _, v_braked = rig.step(-1.0)
    assert (v_braked[0] - v[0]) / 1e-3 == pytest.approx(-1.0 / 0.02, rel=1e-3)


def test_torque_lag_is_first_order(one_joint):
    """A run starts with the loop settled on its first command; a step then goes 1 - exp(-t/lag) of its way.

    Each physics step acts with the mean over the step: from t to t + dt that is
    1 - (exp(-t/lag) - exp(-(t + dt)/lag)) lag/dt.
    """
    arm, dt, lag = one_joint(torque_lag=5e-3), 1e-3, 5e-3
    io, machine = np.zeros((DELAYED, 1)), machine_array(arm, dt)
    io[TAU] = 2.0
    step_drive(arm.chain(GRAVITY), machine, io)
    assert io[MOTOR, 0] == 2.0
    io[TAU] = 3.0
    for k in range(5):
        step_drive(arm.chain(GRAVITY), machine, io)
        left = (np.exp(-k * dt / lag) - np.exp(-(k + 1) * dt / lag)) * lag / dt
        assert io[MOTOR, 0] == pytest.approx(3.0 - left, rel=1e-12)
    assert io[LAGGED, 0] == pytest.approx(3.0 - np.exp(-1), rel=1e-12)


def test_a_torque_that_is_no_number_is_refused(one_joint):
    """NaN from a law changes nothing and is told."""
    arm, io = one_joint(), np.zeros((DELAYED, 1))
    io[TAU] = np.nan
    assert not step_drive(arm.chain(GRAVITY), machine_array(arm, 1e-3), io)


def test_reading_tells_hit_stops_and_runaways(one_joint):
    """Beyond a joint limit, beyond ten times the speed limit, and not finite each has its status."""
    from dataclasses import replace

    arm = replace(one_joint(speed_limit=1.0), lower=np.array([-1.0]), upper=np.array([1.0]))
    machine, io = machine_array(arm, 1e-3), np.zeros((DELAYED, 1))
    assert read_state(machine, io) == OK
    found = []
    for q, v in ((1.1, 0.0), (0.0, 11.0), (np.nan, 0.0)):
        io[Q_ENGINE], io[V_ENGINE] = q, v
        found.append(read_state(machine, io))
    assert len({OK, *found}) == 4


def test_a_fast_joint_is_not_clamped(bench, one_joint):
    """The engine's own limit of 100 rad/s on joint speed is lifted: a free joint keeps 150 rad/s."""
    rig = bench(one_joint(mass=1e-9, cog=0.0, inertia=0.2), [0.0], [150.0], gravity=(0.0, 0.0, 0.0))
    for _ in range(10):
        _, v = rig.step([0.0])
    assert v[0] == pytest.approx(150.0, rel=1e-12)


def test_the_residual_sees_another_machine_in_the_engine(bench, one_joint):
    """A drive that foresees with 1 % more mass than the engine has is caught within a few steps."""
    rig = bench(one_joint(), [1.0])
    rig.chain = one_joint(mass=2.02).chain(GRAVITY)
    for _ in range(5):
        rig.step([0.0])
    assert rig.io[ERROR, 0] > 1e-6


def test_the_speed_limit_holds_behind_a_lag(bench, one_joint):
    """Limits act on the torque that leaves the current loop, so a lag can't push past the speed limit."""
    arm = one_joint(mass=1e-6, cog=0.0, inertia=0.02, speed_limit=2.0, torque_limit=4.0, torque_lag=0.02)
    rig = bench(arm, [0.0], gravity=(0.0, 0.0, 0.0))
    fastest = max(rig.step(3.0)[1][0] for _ in range(400))
    assert fastest <= 2.0 + 1e-3 * 3.0 / 0.02  # no more than one step's gain beyond


def test_motor_energy_and_peak_are_taken_at_every_step(bench, one_joint):
    """Constant torque on a free joint: the work is the kinetic energy gained; braking adds none."""
    rig = bench(one_joint(mass=1e-9, cog=0.0, inertia=0.2), [0.0], gravity=(0.0, 0.0, 0.0))
    for torque in [1.5] * 100 + [-2.0] * 50:
        _, v = rig.step(torque)
    gained = 0.5 * 0.2 * (1.5 / 0.2 * 0.1) ** 2
    assert v[0] > 0
    assert rig.io[ENERGY, 0] == pytest.approx(gained, rel=1e-9)
    assert rig.io[TORQUE_PEAK, 0] == 2.0
