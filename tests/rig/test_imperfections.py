"""What a drive and its sensors do beside the ideal: LuGre, elasticity, the torque path, sensing, timing."""

from __future__ import annotations

import numpy as np
import pytest

from rigbench.laws.law import TAU
from rigbench.rig.drive import step_drive
from rigbench.rig.rows import (
    A_LAST,
    BRISTLE,
    DELAYED,
    ERROR,
    LIMITED,
    MOTOR,
    Q_ROTOR,
    Q_TRUE,
    V_TRUE,
    delay_rows,
    machine_array,
)
from rigbench.rig.sampled import Sensing, Timing, noise_of, ticks_of

WEIGHTLESS = (0.0, 0.0, 0.0)


def light(one_joint, **drives):
    """A joint of 0.2 kg m^2 without weight."""
    return one_joint(mass=1e-9, cog=0.0, inertia=0.2, **drives)


def given(arm, commands, dt=1e-3, **timing):
    """Motor torque of each step for a list of commands, on a joint that is held still."""
    io = np.zeros((DELAYED + delay_rows(timing.get("delay", 0.0) / dt), arm.n))
    machine, chain, found = machine_array(arm, dt, **timing), arm.chain(WEIGHTLESS), []
    for command in commands:
        io[TAU] = command
        assert step_drive(chain, machine, io)
        found.append(io[MOTOR, 0])
    return np.array(found)


@pytest.mark.parametrize(
    ("speed", "force"), [(1e-4, 1.495065), (1e-3, 1.184340), (2e-3, 1.009958), (0.1, 1.04)]
)
def test_lugre_in_steady_motion(bench, one_joint, speed, force):
    """At constant speed LuGre's torque is Stribeck's curve: g(v) sign v + sigma2 v.

    Simulation set of Canudas de Wit, Olsson, Astrom, Lischinsky 1995 (from memory): sigma0 = 1e5,
    sigma1 = sqrt(1e5), sigma2 = 0.4, Fc = 1, Fs = 1.5, vs = 0.001; the steady values were derived apart
    from this project. So heavy a joint keeps its speed; its deceleration tells the friction.
    """
    lugre = {"bristle_stiffness": 1e5, "bristle_damping": np.sqrt(1e5), "viscous": 0.4}
    arm = one_joint(mass=1e-9, cog=0.0, inertia=1e8, **lugre, coulomb=1.0, static=1.5, stribeck_speed=0.001)
    rig = bench(arm, [0.0], [speed], gravity=WEIGHTLESS)
    for _ in range(2000):
        rig.step(0.0)
    assert -1e8 * rig.io[A_LAST, 0] == pytest.approx(force, rel=1e-3)


def test_lugre_bends_before_breakaway(bench, one_joint):
    """Below breakaway the bristles carry the torque: z = tau/sigma0, and the joint stands.

    It has moved farther than that, by at least (Fc/sigma0) ln(1/(1 - tau/Fc)): bristles relax on the way.
    """
    arm = light(one_joint, bristle_stiffness=2e4, bristle_damping=100.0, coulomb=1.0)
    rig = bench(arm, [0.0], gravity=WEIGHTLESS)
    path = [rig.step(0.5)[0][0] for _ in range(4000)]
    assert rig.io[BRISTLE, 0] == pytest.approx(0.5 / 2e4, rel=1e-6)
    assert np.ptp(path[-500:]) < 1e-12
    assert np.log(2) / 2e4 <= path[-1] < 1.3 * np.log(2) / 2e4


def test_stribeck_curve_in_steady_motion(bench, one_joint):
    """Without bristles the same curve holds exactly: the torque for constant speed is Fc + (Fs - Fc)/e
    + B v at v = vs (Armstrong-Helouvry, Dupont, Canudas de Wit 1994)."""
    arm = light(one_joint, coulomb=1.0, static=1.5, stribeck_speed=0.05, viscous=0.4)
    expected = 1.0 + 0.5 * np.exp(-1) + 0.4 * 0.05
    rig = bench(arm, [0.0], [0.05], gravity=WEIGHTLESS)
    _, (v,) = rig.step(expected)
    assert v == pytest.approx(0.05, rel=1e-9)


@pytest.mark.parametrize("stiffness", [2e3, 1e5])
def test_elastic_joint_has_the_resonance_of_two_inertias(bench, one_joint, stiffness):
    """A rotor and a link on a spring swing against each other at sqrt(K (1/Jr + 1/J)).

    The implicit step lowers it as cos of the sampling does: tan(w' dt/2) = w dt/2. Stable at 1e5 N m/rad
    with 1 ms as well, where an explicit spring is not; the frequency is then compared at a step of a
    quarter.
    """
    arm = light(one_joint, stiffness=stiffness, rotor_inertia=5e-5, gear_ratio=60.0)
    rotor, link = 5e-5 * 3600, 0.2
    dt = 1e-3 if stiffness < 1e4 else 2.5e-4
    rig = bench(arm, [0.0], [0.5], dt=dt, gravity=WEIGHTLESS)
    rig.io[Q_ROTOR] -= 0.01  # wound up, and moving as a whole
    twist = []
    for _ in range(round(1.0 / dt)):
        rig.step(0.0)
        twist.append(rig.io[Q_ROTOR, 0] - rig.io[Q_TRUE, 0] - dt / 2 * rig.io[V_TRUE, 0])
    crossings = np.flatnonzero(np.diff(np.sign(twist)) > 0)
    x = np.array([i + twist[i] / (twist[i] - twist[i + 1]) for i in crossings]) * dt
    found = 2 * np.pi * (len(x) - 1) / (x[-1] - x[0])
    w = np.sqrt(stiffness * (1 / rotor + 1 / link))
    assert found == pytest.approx(w, rel=0.01)
    assert max(np.abs(twist[-50:])) < 1.02 * max(np.abs(twist[:50]))
    # the whole keeps its momentum
    momentum = rotor * rig.io[Q_ROTOR + 1, 0] + link * rig.io[V_TRUE, 0]
    assert momentum == pytest.approx((rotor + link) * 0.5, rel=1e-9)
    assert rig.io[ERROR, 0] < 1e-9


def test_stiff_spring_is_stable_at_a_millisecond(bench, one_joint):
    """1e5 N m/rad at 1 ms on light inertias does not grow."""
    arm = light(one_joint, stiffness=1e5, rotor_inertia=1e-5, gear_ratio=50.0)
    rig = bench(arm, [0.0], gravity=WEIGHTLESS)
    rig.io[Q_ROTOR] += 1e-3
    for _ in range(5000):
        rig.step(0.0)
    assert abs(rig.io[Q_ROTOR, 0] - rig.io[Q_TRUE, 0]) < 2e-3


def test_elastic_joint_sags_by_torque_over_stiffness(bench, one_joint):
    """Held by its rotor's friction, a loaded joint stands at rest with the spring wound by g/K."""
    arm = one_joint(stiffness=5e3, rotor_inertia=5e-5, gear_ratio=60.0, coulomb=20.0)
    rig = bench(arm, [np.pi / 2])
    for _ in range(2000):
        (q,), _ = rig.step(0.0)
    assert q == pytest.approx(np.pi / 2, abs=1e-9)
    wound = rig.io[Q_ROTOR, 0] - q
    assert wound == pytest.approx(2.0 * 9.81 * 0.25 / 5e3, rel=1e-6)
    q_sensed, _ = rig.sensed()
    assert q_sensed[0] == pytest.approx(np.pi / 2 + wound, abs=1e-9)


def test_gear_loss_takes_its_share_both_ways(bench, one_joint):
    """With 10 % loss a joint that lifts gets 90 % of the motor's torque; one that is driven backwards is
    braked by 10 % of what passes."""
    arm = light(one_joint, gear_loss=0.1)
    for v0, torque in ((0.5, 2.0), (-0.5, 2.0)):
        rig = bench(arm, [0.0], [v0], gravity=WEIGHTLESS)
        _, (v,) = rig.step(torque)
        expected = (torque - np.sign(v0) * 0.1 * torque) / 0.2
        assert (v - v0) / 1e-3 == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize("delay", [1e-3, 2.5e-3, 4e-4])
def test_delay_moves_the_impulse_by_exactly_its_time(one_joint, delay):
    """The mean time of a pulse's impulse shifts by the delay, in whole and in part steps."""
    commands = np.zeros(30)
    commands[8] = 1.0
    torque = given(light(one_joint), commands, delay=delay)
    assert torque.sum() == pytest.approx(1.0, rel=1e-12)
    assert torque @ np.arange(30) * 1e-3 == pytest.approx(8e-3 + delay, rel=1e-12)


def test_delay_starts_from_the_first_command(one_joint):
    """Before the first command the drive held the same: no drop of torque at the start."""
    np.testing.assert_array_equal(
        given(light(one_joint), [3.0, 3.0, 5.0, 5.0], delay=1e-3), [3.0, 3.0, 3.0, 5.0]
    )


def test_torque_constant_bias_rounding_and_ripple(one_joint):
    """Each does what its name says to a command of 1.26 N m."""
    assert given(light(one_joint, torque_gain=1.1), [1.26])[0] == pytest.approx(1.386)
    assert given(light(one_joint, torque_bias=0.2), [1.26])[0] == pytest.approx(1.46)
    assert given(light(one_joint, torque_step=0.5), [1.26])[0] == pytest.approx(1.5)
    arm = light(one_joint, ripple=0.3, ripple_periods=6.0, gear_ratio=10.0)
    io, machine = np.zeros((DELAYED, 1)), machine_array(arm, 1e-3)
    io[Q_TRUE], io[TAU] = 0.01, 1.26
    step_drive(arm.chain(WEIGHTLESS), machine, io)
    assert io[MOTOR, 0] == pytest.approx(1.26 + 0.3 * np.sin(6 * 10 * 0.01))


def test_torque_speed_line_limits_driving_alone(one_joint):
    """Half way to no-load speed half the stall torque is left to drive with, and all to brake with."""
    arm = light(one_joint, stall_torque=8.0, no_load_speed=4.0, torque_limit=10.0)
    for asked, left in ((9.0, 4.0), (-9.0, -9.0)):
        io, machine = np.zeros((DELAYED, 1)), machine_array(arm, 1e-3)
        io[V_TRUE], io[TAU] = 2.0, asked
        step_drive(arm.chain(WEIGHTLESS), machine, io)
        assert io[MOTOR, 0] == pytest.approx(left)
        assert io[LIMITED, 0] == float(asked != left)


def stable(bench, arm, kp, kd, samples_of_delay, dt=1e-3):
    """Whether a sampled PD loop on a joint brings a small offset down rather than up."""
    rig = bench(arm, [1e-3], gravity=WEIGHTLESS, dt=dt, delay=samples_of_delay * dt)
    early = late = 0.0
    for k in range(1500):
        q, v = rig.sensed()
        rig.step(-kp * q - kd * v)
        size = abs(rig.io[Q_TRUE, 0]) + dt * abs(rig.io[V_TRUE, 0])
        early, late = (max(early, size), late) if k < 750 else (early, max(late, size))
        if size > 10.0:
            return False
    return late < early


@pytest.mark.parametrize("delay", [0, 1])
def test_stability_limits_of_sampled_pd(bench, one_joint, delay):
    """The rig finds the limits of a sampled PD loop on an inertia J within 2 %.

    Zero-order hold with period T, derived apart from this project: without delay stable iff Kd T/J < 2
    and Kp T < 2 Kd; with one sample of delay, a = Kp T^2/J, b = Kd T/J: iff b - 1.5 a > (b - a/2)^2 and
    b > a/2.
    """
    arm, inertia, dt = light(one_joint), 0.2, 1e-3
    kp = 0.02 * inertia / dt**2

    def inside(b):
        a = kp * dt**2 / inertia
        return b < 2 and 2 * b > a if delay == 0 else b - 1.5 * a > (b - a / 2) ** 2 and b > a / 2

    grid = np.linspace(0.0, 2.5, 250_001)
    limits = grid[np.flatnonzero(np.diff([inside(b) for b in grid]))]
    assert len(limits) == 2
    for limit, better in zip(limits, (1.02, 0.98), strict=True):
        for factor in (better, 2 - better):
            b = limit * factor
            assert stable(bench, arm, kp, b * inertia / dt, delay) == (factor == better), (limit, factor)


def test_encoder_counts_offset_and_side(bench, one_joint):
    """Sensed positions are whole counts of position plus offset; velocity is their filtered difference."""
    arm = light(one_joint, encoder_step=1e-3, encoder_offset=0.0104)
    rig = bench(arm, [0.0], [0.8], gravity=WEIGHTLESS, velocity_corner_hz=50.0)
    seen = []
    for _ in range(400):
        seen.append([*rig.sensed(), *rig.step(0.0)])
    q, v, true_q, _ = np.array(seen)[:, :, 0].T
    np.testing.assert_allclose(q / 1e-3, np.round(q / 1e-3), atol=1e-6)
    assert np.abs(q[1:] - true_q[:-1] - 0.0104).max() <= 0.5e-3 + 1e-12
    assert v[200:].mean() == pytest.approx(0.8, rel=1e-3)
    assert v[0] == 0.0


def test_noise_has_its_size_and_its_own_stream(one_joint):
    """White noise has the declared deviation, is the same for the same draw and another for the next."""
    arm = one_joint()
    a = noise_of(Sensing(noise_deg=0.02), 20_000, arm, seed=1, draw=3)
    assert np.std(a) == pytest.approx(np.deg2rad(0.02), rel=0.02)
    assert abs(np.corrcoef(a[1:, 0], a[:-1, 0])[0, 1]) < 0.03
    np.testing.assert_array_equal(a[:100], noise_of(Sensing(noise_deg=0.02), 100, arm, seed=1, draw=3))
    assert not np.array_equal(a, noise_of(Sensing(noise_deg=0.02), 20_000, arm, seed=1, draw=4))
    np.testing.assert_array_equal(noise_of(Sensing(), 10, arm, 1, 0), np.zeros((10, 1)))


def test_counts_and_noise_bring_the_velocity_filter(one_joint):
    """Exact sensing gives exact velocities; counts or noise bring a filter of 100 Hz unless declared."""
    assert Sensing().corner_hz(one_joint()) is None
    assert Sensing().corner_hz(one_joint(encoder_step=1e-4)) == 100.0
    assert Sensing(noise_deg=0.1).corner_hz(one_joint()) == 100.0
    assert Sensing(noise_deg=0.1, velocity_corner_hz=30.0).corner_hz(one_joint()) == 30.0


def test_jitter_and_dropped_ticks(one_joint):
    """Ticks come late by whole steps up to the share declared, and the declared share is dropped."""
    assert ticks_of(Timing(), 5, 4, 1, 0) == [0] * 5
    calls = np.array(ticks_of(Timing(jitter_percent=50, dropped_percent=10), 20_000, 8, 1, 0))
    first = {ticks_of(Timing(jitter_percent=100, dropped_percent=90), 5, 8, 1, k)[0] for k in range(50)}
    assert first == {0}, "a run starts with a command"
    assert np.mean(calls == -1) == pytest.approx(0.10, abs=0.01)
    late = calls[calls >= 0]
    assert set(late) == {0, 1, 2, 3, 4}
    assert ticks_of(Timing(jitter_percent=50), 50, 8, 1, 0) != ticks_of(
        Timing(jitter_percent=50), 50, 8, 1, 1
    )
